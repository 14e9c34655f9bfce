"""Every figure over the time in service by a stable name, for the results file and the digest."""

from __future__ import annotations

from collections.abc import Iterator

from calcbook.chain.growth_outcome import Interval, OverTime, TimeRow
from calcbook.library import vocabulary
from calcbook.quantities import QuantityKind

Figures = Iterator[tuple[str, float, QuantityKind]]


def growth_figures(found: OverTime) -> Figures:
    """Name, value in SI and kind of every figure of the table and of the interval, in order.

    Money is a plain number in the currency of the calculation.
    """
    for place, row in enumerate(found.rows, 1):
        yield from _row(f"row {place}", row, found.interval)
    kinds = vocabulary()
    for number, turn in enumerate(found.turns, 1):
        yield f"turn {number} / {turn.id}", turn.time, kinds["service time"]
    yield "duty lost", found.duty_lost, kinds["service time"]
    if found.interval is not None:
        yield "cleaning interval", found.interval.interval, kinds["cleaning interval"]
        yield "least mean", found.interval.least, _rate(found.interval)
        for end, time in zip(("start", "end"), found.interval.flat, strict=True):
            yield f"flat range / {end}", time, kinds["cleaning interval"]
        form = found.interval.closed_form
        if form is not None:
            yield f"closed form / {form.card}", form.interval, kinds["cleaning interval"]


def _row(name: str, row: TimeRow, interval: Interval | None) -> Figures:
    kinds = vocabulary()
    yield f"{name} / time", row.time, kinds["service time"]
    for term, value in row.resistances.items():
        yield f"{name} / R_f of {term}", value, kinds["area resistance"]
    yield f"{name} / U", row.overall, kinds["overall coefficient"]
    yield f"{name} / margin of area", row.margin, kinds["ratio"]
    yield f"{name} / heat", row.heat, kinds["heat flow"]
    for side, value in row.outlets.items():
        yield f"{name} / outlet {side}", value, kinds["temperature"]
    for stream, value in row.pressure_drops.items():
        yield f"{name} / pressure drop of {stream}", value, kinds["pressure drop"]
    if interval is not None:
        yield f"{name} / loss", row.loss, _rate(interval)
        yield f"{name} / mean if cleaned then", row.mean, _rate(interval)


def _rate(interval: Interval) -> QuantityKind:
    return vocabulary()["final loss rate" if interval.counts_money else "heat flow"]
