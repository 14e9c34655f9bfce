"""A tree to numbers: compiled once, then numpy functions on arrays of samples.

Every operation works element by element, and arrays are contiguous float64, so that a sample gives the
same bits alone as among others. Where samples choose different branches, each branch sees only its own.
"""

from __future__ import annotations

import operator
from collections import Counter
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calcbook.formulas.derivatives import partial
from calcbook.formulas.functions import implementation
from calcbook.formulas.nodes import (
    CONSTANTS,
    Binary,
    Call,
    Column,
    Compare,
    Conditional,
    Logic,
    Negate,
    Node,
    Not,
    Number,
    Relation,
    Symbol,
    is_truth,
    tree_of,
    walk,
)


class _Frame:
    """The values of one set of samples, and the repeated parts already worked out for them."""

    __slots__ = ("shared", "values")

    def __init__(self, values: dict[str, Any]):
        self.values = values
        self.shared: dict[int, Any] = {}


_Step = Callable[[_Frame], Any]
_Row = Callable[[_Frame], list[Any]]

# On arrays these are numpy's functions; on single figures (``numpy.float64``) they round alike and take a tenth.
_OPERATIONS: dict[str, Callable[..., Any]] = {
    "+": operator.add,
    "-": operator.sub,
    "*": operator.mul,
    "/": operator.truediv,
    "<": operator.lt,
    "<=": operator.le,
    ">": operator.gt,
    ">=": operator.ge,
    "==": operator.eq,
    "!=": operator.ne,
}


def evaluate(relation: Relation | Node, values: Mapping[str, Any]) -> NDArray[Any]:
    """The value of a relation for SI values by symbol name.

    Values are numbers, flags or arrays that broadcast together; ``table.name`` used by ``mean`` is an object
    with ``value(T)``, ``mean(T_1, T_2)`` and ``slope(T)`` on arrays. The result is float64, or bool for a
    condition; what has no value is NaN or infinite, without a warning. Raises KeyError for a missing symbol.
    """
    with np.errstate(all="ignore"):
        return evaluate_quietly(relation, values)


def evaluate_quietly(
    relation: Relation | Node, values: Mapping[str, Any], names: Mapping[str, str] | None = None
) -> NDArray[Any]:
    """``evaluate`` for a caller that has silenced numpy's warnings for many relations at once.

    ``names`` gives the key under which the value of a symbol stands; without it that is the symbol.
    """
    tree = tree_of(relation)
    step, symbols, kind, may_borrow = tree.memory.get(_prepared) or _prepared(tree)
    if names is None:
        frame = _Frame({name: _array(values[name]) for name in symbols})
    else:
        frame = _Frame({name: _array(values[names[name]]) for name in symbols})
    result = step(frame)
    array: NDArray[Any] = np.asarray(result, dtype=kind)
    return _own(array, frame) if may_borrow else array


def evaluate_with_slopes(
    relation: Relation | Node, wanted: tuple[str, ...], values: Mapping[str, Any], names: Mapping[str, str]
) -> tuple[NDArray[Any], list[NDArray[Any]]]:
    """The value of a relation and its partial derivatives by the ``wanted`` symbols, worked out together.

    To the bits of ``evaluate_quietly`` of each; what they have in common is worked out once, and each branch of
    a condition once for the samples that choose it. Arguments as there.
    """
    tree = tree_of(relation)
    key = (evaluate_with_slopes, wanted)
    row: _Row | None = tree.memory.get(key)
    if row is None:
        nodes = (tree, *(partial(tree, symbol) for symbol in wanted))
        row = tree.memory[key] = _compile_row(nodes, _repeated(nodes))
    frame = _Frame({name: _array(values[names[name]]) for name in tree.symbols})
    value, *slopes = [_own(np.asarray(result, dtype=np.float64), frame) for result in row(frame)]
    return value, slopes


def _own(array: NDArray[Any], frame: _Frame) -> NDArray[Any]:
    """A result that is not a value or a constant as it was handed in: such a one is copied."""
    if not array.flags.writeable:
        return array.copy()
    for value in frame.values.values():
        if array is value:
            return array.copy()
    return array


def _prepared(tree: Node) -> tuple[_Step, tuple[str, ...], type, bool]:
    """What an evaluation needs of a tree: its step, its symbols, its kind, and whether the result may be a
    value or a constant as it was handed in, which is then copied."""
    may_borrow = not (tree.symbols and isinstance(tree, Binary | Negate | Compare))
    prepared = (_compiled(tree), tree.symbols, bool if is_truth(tree) else np.float64, may_borrow)
    tree.memory[_prepared] = prepared
    return prepared


_FLOATS = np.dtype(np.float64)


def _array(value: Any) -> Any:
    """A value as contiguous floats (strided memory may take another inner loop), a single one as a figure; a
    table column as it is."""
    if type(value) is np.ndarray and value.dtype is _FLOATS:
        if value.ndim == 0:
            return value[()]
        if value.flags.c_contiguous:
            return value
    if isinstance(value, float):
        return np.float64(value)
    if hasattr(value, "mean") and hasattr(value, "slope"):
        return value
    array = np.asarray(value, dtype=np.float64)
    if array.ndim == 0:
        return array[()]
    return array if array.flags.c_contiguous else array.copy(order="C")


def _compiled(tree: Node) -> _Step:
    step = tree.memory.get(_compiled)
    if step is None:
        step = tree.memory[_compiled] = _compile(tree, _repeated((tree,)))
    return step


def _repeated(trees: tuple[Node, ...]) -> dict[Node, int]:
    """The parts that occur more than once in some trees, numbered."""
    counts = Counter(
        node for tree in trees for node in walk(tree) if isinstance(node, Binary | Call | Conditional)
    )
    often: list[Node] = [node for node, count in counts.items() if count > 1]
    return {node: slot for slot, node in enumerate(often)}


def _compile(node: Node, repeated: dict[Node, int]) -> _Step:
    """The step of a node; parts that occur more than once (as in derivatives) are worked out once."""
    if not node.symbols and not is_truth(node) and not isinstance(node, Number | Symbol):
        return _constant_step(_compile_parts(node, {}))
    step = _compile_parts(node, repeated)
    slot = repeated.get(node)
    if slot is None:
        return step

    def shared(frame: _Frame) -> Any:
        found = frame.shared.get(slot)
        if found is None:
            found = frame.shared[slot] = step(frame)
        return found

    return shared


def _constant_step(step: _Step) -> _Step:
    with np.errstate(all="ignore"):
        constant = np.float64(step(_Frame({})))
    return lambda frame: constant


def _compile_parts(node: Node, repeated: dict[Node, int]) -> _Step:
    match node:
        case Number(value=value):
            return _fixed(value)
        case Symbol(name=name) if name in CONSTANTS:
            return _fixed(CONSTANTS[name])
        case Symbol(name=name):
            return lambda frame: frame.values[name]
        case Column():
            key = node.key
            return lambda frame: frame.values[key]
        case Negate(x=x):
            inner = _compile(x, repeated)
            return lambda frame: np.negative(inner(frame))
        case Binary(op="**", a=a, b=b):
            return _power_step(a, b, repeated)
        case Binary(op=op, a=a, b=b):
            return _pair_step(_OPERATIONS[op], _compile(a, repeated), _compile(b, repeated))
        case Call(name=name, args=args):
            return _call_step(implementation(name), [_compile(part, repeated) for part in args])
        case Conditional(condition=condition, yes=yes, no=no):
            return _conditional_step(condition, yes, no, repeated)
    return _compile_truth(node, repeated)


def _compile_truth(node: Node, repeated: dict[Node, int]) -> _Step:
    """The step of a condition; a flag is true where it is not zero."""
    match node:
        case Compare(first=first, rest=rest):
            return _compare_step(_compile(first, repeated), [(op, _compile(b, repeated)) for op, b in rest])
        case Logic(op=op, parts=parts):
            return _logic_step(op, parts, repeated)
        case Not(x=x):
            inner = _compile_truth(x, repeated)
            return lambda frame: np.logical_not(inner(frame))
        case Conditional() | Symbol() | Column():
            value = _compile(node, repeated)
            return lambda frame: np.not_equal(value(frame), 0.0)
    raise TypeError(f"{type(node).__name__} is no condition")


def _fixed(value: float) -> _Step:
    constant = np.float64(value)
    return lambda frame: constant


def _pair_step(operation: Callable[..., Any], first: _Step, second: _Step) -> _Step:
    return lambda frame: operation(first(frame), second(frame))


def _call_step(function: Callable[..., Any], args: list[_Step]) -> _Step:
    if len(args) == 1:
        (only,) = args
        return lambda frame: function(only(frame))
    return lambda frame: function(*(part(frame) for part in args))


def _power_step(base: Node, exponent: Node, repeated: dict[Node, int]) -> _Step:
    """``numpy.power`` takes short cuts (square, root, reciprocal) for an exponent that is one number.

    A constant exponent is one number for every count of samples, so its short cut is always the same. Any
    other exponent is laid out sample by sample, alone as among others, so that none is ever taken.
    """
    first, second = _compile(base, repeated), _compile(exponent, repeated)
    if not exponent.symbols:
        return _pair_step(np.power, first, second)

    def general(frame: _Frame) -> Any:
        a, b = np.broadcast_arrays(first(frame), second(frame))
        flat = np.power(np.ascontiguousarray(a).reshape(-1), np.ascontiguousarray(b).reshape(-1))
        return flat.reshape(a.shape)

    return general


def _compare_step(first: _Step, rest: list[tuple[str, _Step]]) -> _Step:
    pairs = [(_OPERATIONS[op], step) for op, step in rest]

    def compare(frame: _Frame) -> Any:
        left = first(frame)
        result: Any = None
        for operation, step in pairs:
            right = step(frame)
            holds = operation(left, right)
            result = holds if result is None else np.logical_and(result, holds)
            left = right
        return result

    return compare


def _logic_step(op: str, parts: tuple[Node, ...], repeated: dict[Node, int]) -> _Step:
    first = _compile_truth(parts[0], repeated)
    later = [_Branch((part,), _side_by_side([_compile_truth(part, repeated)])) for part in parts[1:]]
    settled_by = op == "or"
    settled = _Branch((), lambda frame: [np.bool_(settled_by)])

    def logic(frame: _Frame) -> Any:
        result: Any = np.asarray(first(frame))
        for branch in later:
            (result,) = _merge(frame, np.not_equal(result, settled_by), branch, settled, bool)
        return result

    return logic


def _conditional_step(condition: Node, yes: Node, no: Node, repeated: dict[Node, int]) -> _Step:
    test = _compile_truth(condition, repeated)
    is_true = is_truth(yes) or is_truth(no)
    compile_part = _compile_truth if is_true else _compile
    if_true, if_false = (
        _Branch((part,), _side_by_side([compile_part(part, repeated)])) for part in (yes, no)
    )
    kind = bool if is_true else float

    def choose(frame: _Frame) -> Any:
        return _merge(frame, np.asarray(test(frame)), if_true, if_false, kind)[0]

    return choose


def _compile_row(nodes: tuple[Node, ...], repeated: dict[Node, int]) -> _Row:
    """Several nodes in one go; where the first is a choice, the others are parted with it."""
    first = nodes[0]
    if not isinstance(first, Conditional):
        return _side_by_side([_compile(node, repeated) for node in nodes])
    parted = [
        (node.yes, node.no)
        if isinstance(node, Conditional) and node.condition == first.condition
        else (node, node)
        for node in nodes
    ]
    test = _compile_truth(first.condition, repeated)
    yes, no = (_Branch(side, _compile_row(side, repeated)) for side in zip(*parted, strict=True))
    return lambda frame: _merge(frame, np.asarray(test(frame)), yes, no, float)


def _side_by_side(steps: list[_Step]) -> _Row:
    return lambda frame: [step(frame) for step in steps]


class _Branch:
    """One side of a choice: a row of figures, and the symbols that they take."""

    __slots__ = ("row", "symbols")

    def __init__(self, nodes: tuple[Node, ...], row: _Row):
        self.symbols = tuple(dict.fromkeys(name for node in nodes for name in node.symbols))
        self.row = row


def _merge(frame: _Frame, chosen: NDArray[Any], yes: _Branch, no: _Branch, kind: type) -> list[Any]:
    """Each branch for the samples that choose it; ``chosen`` says which take ``yes``."""
    if chosen.ndim == 0:
        return (yes if chosen else no).row(frame)
    some = chosen.any()
    if not some or chosen.all():
        # All take one branch: nothing is taken apart, and what it shares with others is not worked out again.
        return [_laid_out(figure, chosen.shape, kind) for figure in (yes if some else no).row(frame)]
    shape = np.broadcast_shapes(
        chosen.shape,
        *(
            np.shape(frame.values[name])
            for branch in (yes, no)
            for name in branch.symbols
            if isinstance(frame.values[name], np.ndarray)
        ),
    )
    chosen = np.broadcast_to(chosen, shape)
    results: list[NDArray[Any]] = []
    for branch, mask in ((yes, chosen), (no, ~chosen)):
        part = _Frame({name: _samples(frame.values[name], mask) for name in branch.symbols})
        found = branch.row(part)
        results = results or [np.empty(shape, dtype=kind) for _ in found]
        for result, figures in zip(results, found, strict=True):
            result[mask] = figures
    return results


def _laid_out(figure: Any, shape: tuple[int, ...], kind: type) -> Any:
    """A figure for every sample of a choice."""
    if figure.shape == shape:
        return figure
    return np.array(np.broadcast_to(figure, np.broadcast_shapes(figure.shape, shape)), dtype=kind)


def _samples(value: Any, mask: NDArray[Any]) -> Any:
    """The values of the chosen samples; one number for all of them stays one number."""
    if not isinstance(value, np.ndarray) or value.ndim == 0:
        return value
    return np.broadcast_to(value, mask.shape)[mask]
