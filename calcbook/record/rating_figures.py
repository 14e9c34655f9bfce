"""Every figure of the rating by a stable name, for the results file and the digest."""

from __future__ import annotations

import math
from collections.abc import Iterator

from calcbook.chain.rating_outcome import DayOne, Parts, Rating, UnitState, in_case
from calcbook.library import vocabulary
from calcbook.quantities import QuantityKind

Figures = Iterator[tuple[str, float, QuantityKind]]


def rating_figures(rating: Rating) -> Figures:
    """Name, value in SI and kind of every figure of the ledger, the parts and day one, in order."""
    kinds = vocabulary()
    for case, ledger in rating.ledgers.items():
        for row in ledger.rows:
            yield f"ledger{in_case(case)} / {row.name}", row.area, kinds["area"]
    if rating.parts is not None:
        yield from _parts(rating.parts)
    for case, day in rating.told.items():
        yield from _day_one(day, in_case(case))


def _parts(parts: Parts) -> Figures:
    kinds = vocabulary()
    for row in parts.rows:
        for condition in row.overall:
            yield f"part {row.number} / U {condition}", row.overall[condition], kinds["overall coefficient"]
            yield f"part {row.number} / area {condition}", row.area[condition], kinds["area"]
    for condition, area in parts.area.items():
        yield f"parts / area {condition}", area, kinds["area"]


def _day_one(day: DayOne, where: str) -> Figures:
    states = {"with the allowances": day.service, "clean": day.clean, "turned down": day.turned_down}
    for name, state in states.items():
        if state is not None:
            yield from _state(f"day one{where} / {name}", state)


def _state(name: str, state: UnitState) -> Figures:
    kinds = vocabulary()
    yield f"{name} / heat flow", state.heat, kinds["heat flow"]
    yield f"{name} / U", state.overall, kinds["overall coefficient"]
    for side, there in state.sides.items():
        yield f"{name} / outlet {side}", there.outlet, kinds["temperature"]
        yield f"{name} / surface {side}", there.surface, kinds["temperature"]
        yield f"{name} / flow {side}", there.mass_flow, kinds["mass flow"]
        yield f"{name} / speed {side}", there.speed, kinds["speed"]
        if math.isfinite(there.pressure):
            yield f"{name} / pressure {side}", there.pressure, kinds["pressure"]
            yield f"{name} / flow that changes phase {side}", there.changing, kinds["mass flow"]
