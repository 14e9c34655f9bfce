"""The library at a glance: every situation with its methods, and their ranges drawn as bars of plain text.

A bar is read off a method's own limits: those that bound a Reynolds, Rayleigh or Graetz number by figures. A
bound that hangs on other figures (a layout, a critical number) cannot be drawn and is not guessed.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from itertools import pairwise

from calcbook.formulas import Compare, Node, Number, Symbol, number_text, write
from calcbook.formulas.names import written_name
from calcbook.library import Library
from calcbook.library.cards import Friction, Limit, Method, Situation
from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph, Table

COLUMNS_OF_BAR = 32
INSIDE, OUTSIDE = "=", "."
# The figures that bars are drawn over, with the decades at which their axis begins and ends.
AXES = {"Re": (0, 8), "Ra": (-2, 14), "Gz": (-1, 7)}
# The bounds that decide: beyond a range or a stop no number stands without an answer.
DECIDING = ("range", "stop")


@dataclass(frozen=True, slots=True)
class Range:
    """The range of a method over one figure; an end that no limit states is infinite or zero."""

    symbol: str
    low: float
    high: float

    @property
    def axis(self) -> str:
        """The kind of figure, which is that of its axis: Re for Re_s as well."""
        return axis_of(self.symbol)

    @property
    def words(self) -> str:
        """The range in figures."""
        name = written_name(self.symbol)
        if math.isinf(self.high):
            return f"{name} from {number_text(self.low, 4)}"
        high = number_text(self.high, 4)
        return f"{name} up to {high}" if self.low <= 0.0 else f"{name} {number_text(self.low, 4)} to {high}"


def axis_of(symbol: str) -> str:
    """The axis that a symbol belongs to, empty where it has none."""
    head = symbol.partition("_")[0]
    return head if head in AXES else ""


def range_of(method: Method, library: Library) -> Range | None:
    """The first of Re, Ra, Gz that the method's limits bound by numbers; a used card's where it has none."""
    for limits in (
        method.limits,
        tuple(
            item.limit
            for item in library.program(method.id).limits
            if item.path and not item.counts_when and _is_direct(item.inputs)
        ),
    ):
        found: dict[str, Range] = {}
        for limit in limits:
            for symbol, low, high in _bounds(limit):
                before = found.get(symbol, Range(symbol, 0.0, math.inf))
                found[symbol] = replace(before, low=max(low, before.low), high=min(high, before.high))
        for axis in AXES:
            for symbol, one in found.items():
                if axis_of(symbol) == axis:
                    return one
    return None


def _is_direct(inputs: object) -> bool:
    """Whether a used card's limit stands on the figures of the method itself, under the same symbols."""
    return isinstance(inputs, dict) and all(symbol == name for symbol, name in inputs.items())


def _bounds(limit: Limit) -> Iterable[tuple[str, float, float]]:
    """What a limit bounds: symbol, lowest and highest figure."""
    tree = limit.that.tree
    if limit.level not in DECIDING or not isinstance(tree, Compare):
        return
    operands = [tree.first, *(operand for _, operand in tree.rest)]
    operators = [operator for operator, _ in tree.rest]
    for place, (left, right) in enumerate(pairwise(operands)):
        operator = operators[place]
        if isinstance(right, Symbol) and isinstance(left, Number):
            left, right, operator = (
                right,
                left,
                {"<=": ">=", "<": ">", ">=": "<=", ">": "<"}.get(operator, operator),
            )
        if not (_is_drawn(left) and isinstance(right, Number)):
            continue
        assert isinstance(left, Symbol)
        if operator in ("<=", "<"):
            yield left.name, 0.0, right.value
        elif operator in (">=", ">"):
            yield left.name, right.value, math.inf


def _is_drawn(node: Node) -> bool:
    return isinstance(node, Symbol) and bool(axis_of(node.name))


def bar(one: Range) -> str:
    """A range as a bar on the logarithmic axis of its kind; an end beyond the axis, or open, has a sign."""
    first, last = AXES[one.axis]
    step = (last - first) / COLUMNS_OF_BAR
    # A column is inside when its middle is; a range narrower than a column still shows one.
    middles = [10.0 ** (first + step * (place + 0.5)) for place in range(COLUMNS_OF_BAR)]
    inside = [one.low <= middle <= one.high for middle in middles]
    if not any(inside):
        centre = math.log10(math.sqrt(max(one.low, 10.0**first) * min(one.high, 10.0**last)))
        inside[min(COLUMNS_OF_BAR - 1, max(0, int((centre - first) / step)))] = True
    before = "<" if one.low < 10.0**first else " "
    after = ">" if one.high > 10.0**last else " "
    return before + "".join(INSIDE if mark else OUTSIDE for mark in inside) + after


def scale(axis: str) -> str:
    """The marks above bars of an axis, a power of ten over the left edge of its column."""
    first, last = AXES[axis]
    every = 2 if last - first <= 8 else 4
    line = [" "] * (COLUMNS_OF_BAR + 8)
    for decade in range(first, last + 1, every):
        place = 1 + round((decade - first) * COLUMNS_OF_BAR / (last - first))
        for offset, letter in enumerate(f"1e{decade}"):
            line[place + offset] = letter
    return "".join(line).rstrip()


def bars(methods: Iterable[Method], library: Library) -> list[Block]:
    """The bars of methods, one block of lines for each axis; methods without one are named below."""
    rows = [(method.id, range_of(method, library)) for method in methods]
    width = max((len(name) for name, _ in rows), default=0)
    blocks: list[Block] = []
    for axis in AXES:
        lines = [
            f"{name:<{width}} {bar(one)}  {one.words}"
            for name, one in rows
            if one is not None and one.axis == axis
        ]
        if lines:
            blocks.append(Code("\n".join([f"{axis:<{width}} {scale(axis)}", *lines])))
    without = [name for name, one in rows if one is None]
    if without:
        blocks.append(Paragraph(f"No bound over Re, Ra or Gz in plain figures: {', '.join(without)}."))
    return blocks


# --- pages ------------------------------------------------------------------------------------------


READING = (
    "Each bar stands for the figures inside a method's range on a logarithmic axis. A sign < or > says that"
    " the range goes on beyond the axis or has no bound there. Bars follow from the limits of the cards"
    " (levels range and stop); the other limits of a method are on its own page."
)


def library_overview(library: Library) -> tuple[Block, ...]:
    """Every situation, its methods with ranges, accuracy, state and source, and the friction beside them."""
    situations = library.names("situations")
    methods = library.names("methods")
    families = sorted({library.method(name).family for name in methods})
    blocks: list[Block] = [
        Heading(1, "Overview of the library"),
        Paragraph(
            f"{len(situations)} situations, {len(methods)} methods of {len(families)} families,"
            f" {len(library.names('materials'))} materials."
        ),
        Paragraph(READING),
    ]
    for name in situations:
        blocks += _situation(library.situation(name), library)
    placed = {method for name in situations for method in _methods_of(library.situation(name))}
    others = tuple(library.method(name) for name in methods if name not in placed)
    if others:
        blocks += [
            Heading(2, "Methods outside the situations"),
            Paragraph("Walls, fins, radiation, and cards that stand inside others."),
            *_methods(others, library),
        ]
    return (
        *blocks,
        Heading(2, "Families"),
        Bullets(tuple(_family_line(family, library) for family in families)),
    )


def _family_line(family: str, library: Library) -> str:
    return f"{family}: {', '.join(method.id for method in family_methods(family, library))}"


def family_methods(family: str, library: Library) -> tuple[Method, ...]:
    """The methods of a family, by id."""
    return tuple(
        method for name in library.names("methods") if (method := library.method(name)).family == family
    )


def family_page(family: str, library: Library) -> tuple[Block, ...] | None:
    """The page of a family: its methods and where they act; None where no method belongs to it."""
    methods = family_methods(family, library)
    if not methods:
        return None
    places = []
    for method in methods:
        where = [
            name for name in library.names("situations") if method.id in _methods_of(library.situation(name))
        ]
        where += [
            f"inside {other}"
            for other in library.names("methods")
            if any(use.method == method.id for use in library.method(other).uses)
        ]
        places.append((method.id, ", ".join(where) or "no situation"))
    return (
        Heading(1, f"Family {family}"),
        Paragraph("Methods of a family share an ancestor: agreement between them bears out neither."),
        *_methods(methods, library),
        Heading(2, "Where they act"),
        Table(("Method", "Situations and other cards"), tuple(places)),
    )


def families(library: Library) -> tuple[str, ...]:
    """Every family, in alphabetical order."""
    return tuple(sorted({library.method(name).family for name in library.names("methods")}))


def _methods_of(situation: Situation) -> tuple[str, ...]:
    """The methods of a situation, then those of its pressure drop."""
    return (*situation.methods, *_friction_methods(situation.friction))


def _friction_methods(friction: Friction | None) -> tuple[str, ...]:
    if friction is None:
        return ()
    return tuple(dict.fromkeys((*(choice.use for choice in friction.choose), friction.dp)))


def _situation(situation: Situation, library: Library) -> list[Block]:
    chosen = "; ".join(
        f"{write(choice.when) if choice.when is not None else 'otherwise'}: {choice.use}"
        for choice in situation.choose
    )
    blocks: list[Block] = [
        Heading(2, f"{situation.id}: {situation.title}"),
        Paragraph(f"Automatic choice, groups at {situation.choose_at}: {chosen}."),
        *_methods(tuple(library.method(name) for name in situation.methods), library),
    ]
    friction = _friction_methods(situation.friction)
    if friction:
        blocks += [
            Paragraph("Pressure drop beside the film:"),
            *_methods(tuple(library.method(name) for name in friction), library),
        ]
    return blocks


def _methods(methods: tuple[Method, ...], library: Library) -> list[Block]:
    rows = tuple(
        (
            method.id,
            method.title,
            method.family,
            _accuracy(method),
            method.state.status,
            "; ".join(f"{source.cite} ({source.standing})" for source in method.sources[:1]),
        )
        for method in methods
    )
    return [
        *bars(methods, library),
        Table(("Method", "Title", "Family", "Accuracy", "State", "Source"), rows),
    ]


def _accuracy(method: Method) -> str:
    if method.accuracy is None:
        return "not stated"
    return f"within {method.accuracy.within} ({method.accuracy.standing})"
