"""A tree to the trade's signs (``ρ·v·d/μ``), and to the same line with values put in.

Brackets stand where the tree would be another without them, and nowhere else.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from decimal import Decimal
from functools import partial
from typing import Any

import numpy as np

from calcbook.formulas.evaluation import evaluate
from calcbook.formulas.figures import MINUS, number_text, parse_number, possible_units, printed_decimal
from calcbook.formulas.names import written_name
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

FEWEST_DIGITS = 5
MOST_DIGITS = 17

# How strongly a written part holds together, weakest first.
_CHOICE, _OR, _AND, _NOT, _COMPARISON, _SUM, _PRODUCT, _SIGNED, _POWER, _ATOM = range(10)
_STRENGTH = {"+": _SUM, "-": _SUM, "*": _PRODUCT, "/": _PRODUCT, "**": _POWER}
_SIGNS = {"+": " + ", "-": f" {MINUS} ", "*": "·", "/": "/", "**": "^"}
_COMPARISON_SIGNS = {"<": "<", "<=": "≤", ">": ">", ">=": "≥", "==": "=", "!=": "≠"}

_Written = tuple[str, int]
_Leaf = Callable[[Node], _Written]


def write(relation: Relation | Node, names: Mapping[str, str] | None = None) -> str:
    """The right-hand side in the trade's signs; ``names`` replaces the written form of a symbol.

    ``parse_written`` reads the line back to the same tree.
    """
    tree, given = tree_of(relation), names or {}
    key = (write, *given.items())
    kept: str | None = tree.memory.get(key)
    if kept is not None:
        return kept

    def leaf(node: Node) -> _Written:
        if isinstance(node, Number):
            return _number_leaf(node.text.replace("-", MINUS))
        if isinstance(node, Column):
            return given.get(node.key, node.key), _ATOM
        name = _symbol_name(node)
        return given.get(name, written_name(name)), _ATOM

    return tree.memory.setdefault(key, _written(tree, leaf)[0])


def write_with_values(relation: Relation | Node, values: Mapping[str, Any], result: str | None) -> str:
    """The right-hand side with the values of its symbols, as few digits as re-evaluate to ``result``.

    ``values`` are SI numbers or flags (and, for ``mean``, the table columns); of a conditional, the branch
    taken is written. All operands gain digits together, from 5 on, until the line gives the printed
    ``result`` within half a unit of its last digit; a condition, until it is as true as with the exact
    values. Raises ValueError when ``result`` does not follow from ``values``.
    """
    tree = _taken(tree_of(relation), values)
    exact = {name: _plain_value(values[name]) for name in tree.symbols}
    fits = _fit(tree, exact, result)
    for digits in range(FEWEST_DIGITS, MOST_DIGITS + 1):
        texts = {name: _operand_text(name, value, digits) for name, value in exact.items()}
        if fits({name: _read_back(value, texts[name]) for name, value in exact.items()}):
            return _written(tree, partial(_value_leaf, texts))[0]
    raise ValueError(f"{write(tree)} does not give {result} with the values it is printed with")


def _written(node: Node, leaf: _Leaf) -> _Written:
    """The text of a node and how strongly it holds together."""

    def part(inner: Node, weakest: int) -> str:
        text, strength = _written(inner, leaf)
        return text if strength >= weakest else f"({text})"

    match node:
        case Number() | Symbol() | Column():
            return leaf(node)
        case Negate(x=x):
            return MINUS + part(x, _POWER), _SIGNED
        case Binary(op="**", a=a, b=b):
            return f"{part(a, _ATOM)}^{part(b, _SIGNED)}", _POWER
        case Binary(op=op, a=a, b=b):
            strength = _STRENGTH[op]
            left, right = part(a, strength), part(b, strength + 1)
            if right.startswith(MINUS):
                right = f"({right})"
            return left + _SIGNS[op] + right, strength
        case Compare(first=first, rest=rest):
            others = "".join(f" {_COMPARISON_SIGNS[op]} {part(b, _SUM)}" for op, b in rest)
            return part(first, _SUM) + others, _COMPARISON
        case Logic(op=op, parts=parts):
            strength = _OR if op == "or" else _AND
            return f" {op} ".join(part(inner, strength + 1) for inner in parts), strength
        case Not(x=x):
            return f"not {part(x, _NOT)}", _NOT
        case Conditional(condition=condition, yes=yes, no=no):
            return f"{part(yes, _OR)} if {part(condition, _OR)}, else {part(no, _CHOICE)}", _CHOICE
        case Call(name=name, args=args):
            return f"{name}({', '.join(part(inner, _CHOICE) for inner in args)})", _ATOM
    raise TypeError(f"{type(node).__name__} cannot be written")


def _symbol_name(node: Node) -> str:
    if not isinstance(node, Symbol):
        raise TypeError(f"{type(node).__name__} cannot be written")
    return node.name


def _number_leaf(text: str) -> _Written:
    """A negative number, or one with an exponent, needs a bracket as the base of a power."""
    negative_or_exponent = text.startswith(MINUS) or "e" in text.lower()
    return text, _SIGNED if negative_or_exponent else _ATOM


def _value_leaf(texts: Mapping[str, str], node: Node) -> _Written:
    if isinstance(node, Number):
        return _number_leaf(node.text.replace("-", MINUS))
    if isinstance(node, Column):
        return _number_or_word(texts[node.key])
    name = _symbol_name(node)
    if name == "pi":
        return written_name(name), _ATOM
    return _number_or_word(number_text(CONSTANTS[name], MOST_DIGITS) if name in CONSTANTS else texts[name])


def _number_or_word(text: str) -> _Written:
    return _number_leaf(text) if text.lstrip(MINUS)[0].isdigit() else (text, _ATOM)


def _plain_value(value: Any) -> Any:
    """A float, a bool, or the object of a table column."""
    if isinstance(value, float):
        return float(value)
    if hasattr(value, "mean") and hasattr(value, "slope"):
        return value
    single = np.asarray(value)
    return bool(single) if single.dtype == bool else float(single)


def _operand_text(name: str, value: Any, digits: int) -> str:
    """A number, the word for a flag, or the name of a table column that is used as a whole."""
    if isinstance(value, bool):
        return "yes" if value else "no"
    return number_text(value, digits) if isinstance(value, float) else name


def _read_back(value: Any, text: str) -> Any:
    return parse_number(text) if isinstance(value, float) else value


def _taken(tree: Node, values: Mapping[str, Any]) -> Node:
    """The tree with each conditional replaced by the branch that these values take; kept for each choice."""
    if not _has_conditional(tree):
        return tree
    choices: list[bool] = []
    taken = _replaced(tree, values, choices)
    return tree.memory.setdefault((_taken, tuple(choices)), taken)


def _has_conditional(tree: Node) -> bool:
    found: bool | None = tree.memory.get(_has_conditional)
    if found is None:
        found = tree.memory[_has_conditional] = any(isinstance(node, Conditional) for node in walk(tree))
    return found


def _replaced(node: Node, values: Mapping[str, Any], choices: list[bool]) -> Node:
    def inner(part: Node) -> Node:
        return _replaced(part, values, choices)

    match node:
        case Conditional(condition=condition, yes=yes, no=no):
            choices.append(bool(evaluate(condition, values)))
            return inner(yes if choices[-1] else no)
        case Negate(x=x):
            return Negate(inner(x))
        case Not(x=x):
            return Not(inner(x))
        case Binary(op=op, a=a, b=b):
            return Binary(op, inner(a), inner(b))
        case Compare(first=first, rest=rest):
            return Compare(inner(first), tuple((op, inner(b)) for op, b in rest))
        case Logic(op=op, parts=parts):
            return Logic(op, tuple(map(inner, parts)))
        case Call(name=name, args=args):
            return Call(name, tuple(map(inner, args)))
    return node


def _fit(tree: Node, exact: Mapping[str, Any], result: str | None) -> Callable[[Mapping[str, Any]], bool]:
    """Whether rounded operands still give what the exact ones give, as far as it is printed."""
    if is_truth(tree):
        verdict = bool(evaluate(tree, exact))
        return lambda rounded: bool(evaluate(tree, rounded)) == verdict
    if result is None:
        return lambda rounded: True
    printed = printed_decimal(result)
    value = evaluate(tree, exact)
    units = [unit for unit in possible_units(result) if _within(value, printed, unit)]
    return lambda rounded: bool(units) and _within(evaluate(tree, rounded), printed, units[0])


def _within(value: Any, printed: Decimal, unit: Decimal) -> bool:
    number = float(value)
    return bool(np.isfinite(number)) and abs(Decimal(repr(number)) - printed) * 2 <= unit
