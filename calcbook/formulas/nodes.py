"""The tree of one relation: frozen nodes that compare by structure, never by position.

A node also keeps, outside its fields, what other modules worked out from it (``memory``: the compiled
form, the derivatives), so that each is worked out once. Memory takes no part in equality or pickling.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field, fields
from functools import cached_property
from typing import Any

Span = tuple[int, int]

COMPARISONS = ("<", "<=", ">", ">=", "==", "!=")

# Standard gravity: exact, 3rd General Conference on Weights and Measures (1901).
# Stefan-Boltzmann constant: CODATA 2018, 5.670374419e-8 W/(m^2 K^4).
CONSTANTS: dict[str, float] = {"pi": 3.141592653589793, "g_n": 9.80665, "sigma": 5.670374419e-8}


class RelationFault(Exception):
    """A relation that cannot be taken as it stands; ``column`` and ``end_column`` are 1-based in its text."""

    def __init__(
        self,
        code: str,
        message: str,
        span: Span = (0, 0),
        expected: str = "",
        nearest: tuple[str, ...] = (),
    ):
        super().__init__(f"{code}: column {span[0]}: {message}")
        self.code = code
        self.message = message
        self.column, self.end_column = span
        self.expected = expected
        self.nearest = nearest


@dataclass(frozen=True)
class Node:
    """Base of all nodes; ``span`` is the first column and the column after the last one, 0 when made here."""

    @cached_property
    def memory(self) -> dict[Any, Any]:
        return {}

    @cached_property
    def symbols(self) -> tuple[str, ...]:
        """Free symbols in order of first appearance, dotted columns as ``table.name``, no constants."""
        found: dict[str, None] = {}
        for node in walk(self):
            if isinstance(node, Symbol) and node.name not in CONSTANTS:
                found.setdefault(node.name)
            elif isinstance(node, Column):
                found.setdefault(node.key)
        return tuple(found)

    def __getstate__(self) -> dict[str, Any]:
        return {part.name: self.__dict__[part.name] for part in fields(self)}

    def __setstate__(self, state: dict[str, Any]) -> None:
        self.__dict__.update(state)


@dataclass(frozen=True)
class Number(Node):
    """A literal, with the text it was typed as."""

    value: float
    text: str
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Symbol(Node):
    """A quantity, a flag, a word of a choice, or a constant (``pi``, ``g_n``, ``sigma``)."""

    name: str
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Column(Node):
    """One column of a table, ``ideal.a_1``."""

    table: str
    name: str
    span: Span = field(default=(0, 0), compare=False, repr=False)

    @property
    def key(self) -> str:
        return f"{self.table}.{self.name}"


@dataclass(frozen=True)
class Negate(Node):
    x: Node
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Binary(Node):
    """``op`` is one of ``+ - * / **``."""

    op: str
    a: Node
    b: Node
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Compare(Node):
    """A comparison or a chain of them, ``0 < x <= 10``; ``rest`` holds (op, node) pairs."""

    first: Node
    rest: tuple[tuple[str, Node], ...]
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Logic(Node):
    """``op`` is ``and`` or ``or``; two parts or more."""

    op: str
    parts: tuple[Node, ...]
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Not(Node):
    x: Node
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Conditional(Node):
    """``yes if condition else no``."""

    condition: Node
    yes: Node
    no: Node
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Call(Node):
    name: str
    args: tuple[Node, ...]
    span: Span = field(default=(0, 0), compare=False, repr=False)


@dataclass(frozen=True)
class Relation:
    """One relation: ``target`` is None for a bare right-hand side; ``symbols``: those of ``tree``."""

    text: str
    target: str | None
    tree: Node
    symbols: tuple[str, ...]


def children(node: Node) -> tuple[Node, ...]:
    """The direct parts of a node, in the order in which they stand in the text."""
    match node:
        case Negate(x=x) | Not(x=x):
            return (x,)
        case Binary(a=a, b=b):
            return (a, b)
        case Compare(first=first, rest=rest):
            return (first, *(part for _, part in rest))
        case Logic(parts=parts):
            return parts
        case Conditional(condition=condition, yes=yes, no=no):
            return (yes, condition, no)
        case Call(args=args):
            return args
    return ()


def walk(node: Node) -> Iterator[Node]:
    """The node and all its parts, in the order of the text."""
    waiting = [node]
    while waiting:
        current = waiting.pop()
        yield current
        waiting.extend(reversed(children(current)))


def depth(node: Node) -> int:
    """How many nodes lie inside one another, the node itself counted."""
    deepest = 0
    waiting = [(node, 1)]
    while waiting:
        current, level = waiting.pop()
        deepest = max(deepest, level)
        waiting.extend((part, level + 1) for part in children(current))
    return deepest


def tree_of(relation: Relation | Node) -> Node:
    """The tree of a relation; a node is its own tree."""
    return relation.tree if isinstance(relation, Relation) else relation


def span_of(node: Node) -> Span:
    """Where the node stands in its text; (0, 0) when it was never typed."""
    return getattr(node, "span", (0, 0))


def number(value: float) -> Node:
    """A literal made here: the shortest text that reads back to ``value``; negative ones are negated."""
    if value < 0:
        return Negate(number(-value))
    text = repr(abs(float(value)))
    return Number(abs(float(value)), text[:-2] if text.endswith(".0") else text)


def is_truth(node: Node) -> bool:
    """Whether the node is true or false by its form (a symbol may be either a number or a flag)."""
    if isinstance(node, Conditional):
        return is_truth(node.yes) or is_truth(node.no)
    return isinstance(node, Compare | Logic | Not)
