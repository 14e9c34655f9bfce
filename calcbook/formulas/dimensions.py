"""A tree to its dimension: exponents of m, kg, s, K, mol as exact fractions, pushed through the tree."""

from __future__ import annotations

from collections.abc import Mapping
from decimal import Decimal
from fractions import Fraction

from calcbook.formulas.nodes import (
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
    RelationFault,
    Symbol,
    span_of,
    tree_of,
)

Dimension = tuple[Fraction, Fraction, Fraction, Fraction, Fraction]


def _dimension(*exponents: int) -> Dimension:
    m, kg, s, kelvin, mol = map(Fraction, exponents)
    return (m, kg, s, kelvin, mol)


DIMENSIONLESS = _dimension(0, 0, 0, 0, 0)
_CONSTANT_DIMENSIONS = {
    "pi": DIMENSIONLESS,
    "g_n": _dimension(1, 0, -2, 0, 0),
    "sigma": _dimension(0, 1, -3, -4, 0),
}
# Written in the customary order, the mass first.
_WRITTEN_ORDER = ((1, "kg"), (0, "m"), (2, "s"), (3, "K"), (4, "mol"))
_OPERATION_WORDS = {"+": "a sum joins", "-": "a difference joins"}
_SUPPORTED_EXPONENT = 1_000
_MOST_KEPT = 64  # answers remembered with one tree


def dimension(relation: Relation | Node, dimensions: Mapping[str, Dimension]) -> Dimension:
    """The dimension of a relation, from those of its symbols (``table.name`` for a column).

    Literals and ``pi`` are dimensionless; a bare 0 fits any dimension; a condition is dimensionless. Raises
    ``RelationFault`` ``dimension-slip`` where quantities that cannot be joined are joined, KeyError for a
    symbol without dimension.
    """
    tree = tree_of(relation)
    given = tuple(dimensions[name] for name in tree.symbols)
    kept = tree.memory.setdefault(dimension, {})
    # Known again by the objects, which are those of the vocabulary; they are kept, so no other can take their place.
    key = tuple(map(id, given))
    if key not in kept:
        if len(kept) >= _MOST_KEPT:
            kept.clear()
        kept[key] = (given, _found(tree, dimensions) or DIMENSIONLESS)
    found: Dimension = kept[key][1]
    return found


def dimension_text(value: Dimension) -> str:
    """A dimension in base units, ``kg·m^−1·s^−1``; 1 for none."""
    parts = [name + _exponent_text(value[place]) for place, name in _WRITTEN_ORDER if value[place] != 0]
    return "·".join(parts) or "1"


def _exponent_text(exponent: Fraction) -> str:
    if exponent == 1:
        return ""
    text = str(exponent).replace("-", "\u2212")
    return f"^({text})" if "/" in text else f"^{text}"


def _found(node: Node, dimensions: Mapping[str, Dimension]) -> Dimension | None:
    """The dimension of a node; None for a bare 0, which fits any."""
    match node:
        case Number(value=value):
            return None if value == 0.0 else DIMENSIONLESS
        case Symbol(name=name):
            return _CONSTANT_DIMENSIONS.get(name) or dimensions[name]
        case Column():
            return dimensions[node.key]
        case Negate(x=x):
            return _found(x, dimensions)
        case Binary(op="**"):
            return _power(node, dimensions)
        case Binary(op=op, a=a, b=b) if op in _OPERATION_WORDS:
            return _equal([a, b], dimensions, _OPERATION_WORDS[op])
        case Binary(op=op, a=a, b=b):
            factor = 1 if op == "*" else -1
            first, second = (_found(part, dimensions) or DIMENSIONLESS for part in (a, b))
            return _combined(first, second, Fraction(factor))
        case Compare(first=first_node, rest=rest):
            _equal([first_node, *(part for _, part in rest)], dimensions, "a comparison joins")
            return DIMENSIONLESS
        case Logic(parts=parts):
            for part in parts:
                _plain(part, dimensions, "a condition")
            return DIMENSIONLESS
        case Not(x=x):
            return _plain(x, dimensions, "a condition")
        case Conditional(condition=condition, yes=yes, no=no):
            _plain(condition, dimensions, "a condition")
            return _equal([yes, no], dimensions, "a choice joins")
        case Call():
            return _call(node, dimensions)
    raise TypeError(f"{type(node).__name__} has no dimension")


def _combined(first: Dimension, second: Dimension, factor: Fraction) -> Dimension:
    if second is DIMENSIONLESS:
        return first
    m, kg, s, kelvin, mol = (a + factor * b for a, b in zip(first, second, strict=True))
    return (m, kg, s, kelvin, mol)


def _raised(base: Dimension, exponent: Fraction) -> Dimension:
    return _combined(DIMENSIONLESS, base, exponent)


def _equal(parts: list[Node], dimensions: Mapping[str, Dimension], words: str) -> Dimension | None:
    """The one dimension of all parts; the first that differs is named."""
    common: Dimension | None = None
    for part in parts:
        found = _found(part, dimensions)
        if found is None or found == common:
            continue
        if common is not None:
            both = f"{dimension_text(common)} and {dimension_text(found)}"
            raise RelationFault("dimension-slip", f"{words} {both}", span_of(part), dimension_text(common))
        common = found
    return common


def _plain(node: Node, dimensions: Mapping[str, Dimension], words: str) -> Dimension:
    found = _found(node, dimensions) or DIMENSIONLESS
    if found != DIMENSIONLESS:
        raise RelationFault(
            "dimension-slip", f"{words} is {dimension_text(found)}, not 1", span_of(node), "a plain number"
        )
    return DIMENSIONLESS


def _power(node: Binary, dimensions: Mapping[str, Dimension]) -> Dimension:
    base = _found(node.a, dimensions) or DIMENSIONLESS
    _plain(node.b, dimensions, "an exponent")
    if base == DIMENSIONLESS:
        return DIMENSIONLESS
    exponent = _rational(node.b)
    if exponent is None:
        raise RelationFault(
            "dimension-slip",
            f"{dimension_text(base)} is raised to an exponent that is no fixed fraction",
            span_of(node.b),
            "a number, or a base that is 1",
        )
    return _raised(base, exponent)


def _rational(node: Node) -> Fraction | None:
    """The exact value of an exponent made of literals; None for any other or an unreasonable one."""
    match node:
        case Number(value=value, text=text):
            usable = value == 0.0 or 1 / _SUPPORTED_EXPONENT <= value <= _SUPPORTED_EXPONENT
            return Fraction(Decimal(text)) if usable else None
        case Negate(x=x):
            inner = _rational(x)
            return None if inner is None else -inner
        case Binary(op=op, a=a, b=b):
            first, second = _rational(a), _rational(b)
            return None if first is None or second is None else _computed(op, first, second)
    return None


def _computed(op: str, first: Fraction, second: Fraction) -> Fraction | None:
    if op == "+":
        return first + second
    if op == "-":
        return first - second
    if op == "*":
        return first * second
    return first / second if op == "/" and second != 0 else None


def _call(node: Call, dimensions: Mapping[str, Dimension]) -> Dimension | None:
    args = node.args
    if node.name in ("min", "max", "abs"):
        return _equal(list(args), dimensions, f"{node.name} joins")
    if node.name == "sqrt":
        return _raised(_found(args[0], dimensions) or DIMENSIONLESS, Fraction(1, 2))
    if node.name == "sign":
        _found(args[0], dimensions)
        return DIMENSIONLESS
    if node.name in ("mean", "mean_slope"):
        column = _found(args[0], dimensions) or DIMENSIONLESS
        between = _equal(list(args[1:3]), dimensions, "a mean joins") or DIMENSIONLESS
        return column if node.name == "mean" else _combined(column, between, Fraction(-1))
    for argument in args:
        _plain(argument, dimensions, f"the argument of {node.name}")
    return DIMENSIONLESS
