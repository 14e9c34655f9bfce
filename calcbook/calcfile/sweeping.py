"""`sweep:` of a calculation file: which givens are varied, from where to where, in how many steps."""

from __future__ import annotations

import re
from collections.abc import Callable, Collection, Mapping

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import Given, SweepText, Swept
from calcbook.documents import Fields, Node, Scalar, Sequence, read_mapping
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.quantities import Quantity, si_unit, unit_display

FEWEST, MOST = 2, 200
# The second given runs across the page.
MOST_ACROSS = 20
MOST_GIVENS = 2
Read = Callable[[Scalar], Quantity | None]


def read_sweep(
    node: Node | None,
    givens: Mapping[str, Given],
    broken: Collection[str],
    quantity: Read,
    collector: Collector,
) -> SweepText | None:
    """The sweep of a file; None where none is written, or nothing of it can be used.

    ``quantity`` reads a figure and tells its faults; ``broken`` are symbols that have a fault already. Codes:
    sweep-givens, sweep-steps, sweep-still, symbol-unknown, unit-dimension, and those of a quantity.
    """
    if node is None:
        return None
    fields = read_mapping(node, described.SWEEP, collector, node.place)
    symbols = [name for name in fields if name != "of"]
    if not 1 <= len(symbols) <= MOST_GIVENS:
        collector.add(
            "sweep-givens",
            node.place,
            "a sweep varies one or two givens",
            found=", ".join(shown(symbol) for symbol in symbols) or "none",
            expected="one or two symbols of the givens, each with from, to and steps",
        )
    swept = [
        found
        for number, symbol in enumerate(symbols)
        if (found := _swept(symbol, number, fields, givens, broken, quantity, collector)) is not None
    ]
    of = fields.node("of")
    wanted = [item for item in of.items if isinstance(item, Scalar)] if isinstance(of, Sequence) else []
    names = tuple((" ".join(item.text.split()), item.place) for item in wanted)
    return SweepText(tuple(swept), names, node.place) if swept else None


def _swept(
    symbol: str,
    number: int,
    fields: Fields,
    givens: Mapping[str, Given],
    broken: Collection[str],
    quantity: Read,
    collector: Collector,
) -> Swept | None:
    place = fields.key_places.get(symbol, fields.place_of(symbol))
    given = givens.get(symbol)
    if given is None and symbol not in broken:
        collector.add(
            "symbol-unknown",
            place,
            f"a sweep varies givens; `{shown(symbol)}` is none",
            found=shown(symbol),
            expected=", ".join(givens),
            nearest=nearest_names(symbol, givens),
        )
    inner = read_mapping(fields.node(symbol), described.SWEPT, collector, place)
    steps = _steps(inner, number, collector)
    ends = [_end(inner.scalar(key), given, quantity, collector) for key in ("from", "to")]
    first, last = ends
    if given is None or steps is None or first is None or last is None:
        return None
    if first[0].value == last[0].value:
        collector.add(
            "sweep-still",
            last[1],
            f"the sweep of `{symbol}` ends where it begins",
            found=f"{shown(first[0].text)} to {shown(last[0].text)}",
            expected="two figures that differ",
        )
        return None
    return Swept(symbol, first[0], last[0], steps, first[1], last[1], place)


def _steps(fields: Fields, number: int, collector: Collector) -> int | None:
    node = fields.scalar("steps")
    if node is None:
        return None
    most = MOST_ACROSS if number else MOST
    text = node.text.strip()
    count = int(text) if re.fullmatch(r"[0-9]{1,6}", text) else 0
    if FEWEST <= count <= most:
        return count
    collector.add(
        "sweep-steps",
        node.place,
        "the figures of the second given stand side by side" if number else "a sweep is a table with a plot",
        found=shown(node.text),
        expected=f"a whole number from {FEWEST} to {most}",
    )
    return None


def _end(
    node: Scalar | None, given: Given | None, quantity: Read, collector: Collector
) -> tuple[Quantity, Place] | None:
    """One end of a sweep, of the same dimension as its given."""
    found = quantity(node) if node is not None else None
    if node is None or found is None:
        return None
    place = node.part(1, len(node.text) + 1)
    base = given.value.quantity if given is not None else None
    if given is None or base is None:
        return found, place
    is_one = found.dimension == base.dimension
    if is_one and found.on_base_of(base):
        return found, place
    unit = unit_display(si_unit(base.dimension)) or "1"
    collector.add(
        "unit-dimension",
        place,
        f"`{given.symbol}` is {'swept on another pressure base' if is_one else 'another quantity'}",
        found=shown(node.text),
        expected=f"gauge or absolute as in {given.value.text}" if is_one else f"a figure in {unit}",
    )
    return None
