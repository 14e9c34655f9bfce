"""The clean unit throttled by its control until it gives the duty, and no more.

The control takes the flow of one stream, or the saturation of one that changes phase; the other stream keeps what is
stated of it.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping
from typing import NamedTuple

import numpy as np

from calcbook.calcfile.calculation import Duty, DutySide
from calcbook.chain.completing import completed
from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.plausible import throttled_vapour
from calcbook.chain.rating_outcome import (
    FLOW,
    PRESSURE,
    TEMPERATURE,
    TURNED_DOWN,
    Throttle,
    UnitState,
    other_side,
    state_in,
)
from calcbook.chain.solve import solve
from calcbook.chain.types import CLEAN, SERVICE, Chain
from calcbook.chain.variants import with_figures
from calcbook.rating.opened import open_chain
from calcbook.rating.saturation_way import Way, nothing_to_spare, percent, spare
from calcbook.rating.unit_states import MARGIN, NOTHING, Judged, judged, pressure_of, unit_state

Array = np.ndarray
# A flow is looked for down to this part of the stated one.
SMALLEST_PART = 0.02
POINTS, ROUNDS = 41, 6
# Common practice: what a control takes where the file does not say. The pressure of steam, and that of a refrigerant,
# which is called by its number (ISO 817) or is one of these; else the flow of the stream that serves the other.
USUALLY_THROTTLED = {"hot": re.compile("Water"), "cold": re.compile(r"RC?\d.*|Ammonia|CarbonDioxide")}


class TurnedDown(NamedTuple):
    """The unit under its control, what that leaves and what it moved; or why there is no such state."""

    state: UnitState | None
    reason: str
    left: Judged
    throttle: Throttle


class NoState(Exception):
    """Why there is no turned-down state, in words."""


def turned_down(chain: Chain, case: CaseOutcome) -> TurnedDown:
    """The clean unit with its control throttled until it gives the duty; or why there is none."""
    duty = chain.calculation.duty
    assert duty is not None
    throttle = throttle_of(chain)
    side = throttle.side
    if "duty" not in chain.results:
        return TurnedDown(None, "the duty is what the unit reaches, and none is stated", NOTHING, throttle)
    try:
        opened, figures = (_flow if throttle.what == FLOW else _saturation)(chain, case, duty, throttle)
    except NoState as reason:
        return TurnedDown(None, str(reason), NOTHING, throttle)
    one, given = with_figures(opened, opened.case_inputs(case.name), figures)
    given = completed(one, given)
    solution = solve(one, given, CLEAN)
    state = unit_state(one, solution)
    label = state_in(TURNED_DOWN, case.name)
    left = judged(one, given, solution, label)
    # The state is the one that leaves no margin.
    checks = [check for check in left.checks if check.id != MARGIN]
    if throttle.what != FLOW and side == "hot":
        stream = chain.streams[duty.hot.stream]
        stated = pressure_of(stream, case.solutions[SERVICE])
        checks += throttled_vapour(chain, stream, stated, state.sides[side].pressure, label)
    return TurnedDown(state, "", left._replace(checks=tuple(checks)), throttle)


def throttle_of(chain: Chain) -> Throttle:
    """What the control of a unit with a duty moves."""
    duty = chain.calculation.duty
    assert duty is not None
    side = _throttled_side(chain)
    return Throttle(side, _moved(chain, duty.sides[side]), bool(duty.throttled))


def _throttled_side(chain: Chain) -> str:
    """The side that the control acts on: the one that the file names, else by common practice."""
    duty = chain.calculation.duty
    assert duty is not None
    if duty.throttled:
        return duty.throttled
    for name, side in duty.sides.items():
        fluid = chain.streams[side.stream].fluid.fixed
        if not side.has_ends:
            is_usual = fluid is not None and USUALLY_THROTTLED[name].fullmatch(fluid.name)
            return name if is_usual else other_side(name)
    return "cold"


def _moved(chain: Chain, side: DutySide) -> str:
    """What the control moves on a side."""
    if side.has_ends:
        return FLOW
    return PRESSURE if chain.streams[side.stream].pressure else TEMPERATURE


def _spare(chain: Chain, before: Chain, case: CaseOutcome) -> Callable[[Mapping[str, Array]], Array]:
    """What the clean unit has to spare at several figures of a case."""
    stated = case.solutions[SERVICE].figure(before.results["duty"])
    inputs = chain.case_inputs(case.name)
    return lambda figures: spare(chain, inputs, figures, stated)


# --- a flow -------------------------------------------------------------------------------------------


def _flow(before: Chain, case: CaseOutcome, duty: Duty, throttle: Throttle) -> tuple[Chain, dict[str, Array]]:
    """The flow of a side at which the clean unit has nothing to spare, its outlet open.

    It is found by cutting ever smaller pieces of a range, all points of a round in one call.
    """
    side = throttle.side
    flow = before.streams[duty.sides[side].stream].mass_flow
    if f"C {side}" not in before.results or not flow:
        raise NoState(f"the {side} stream has no mass flow that could be turned down")
    fixed = _stated_without_scale(before, duty.sides[side].stream)
    if fixed:
        raise NoState(f"the coefficient of {fixed} is stated, and nothing says how it follows the flow")
    chain = open_chain(before, case, side, condition=CLEAN)
    if chain is None:
        raise NoState(f"the duty does not follow from the {throttle.other} stream alone")
    spare_at = _spare(chain, before, case)
    stated = case.solutions[SERVICE].number(flow)
    low, high = SMALLEST_PART * stated, stated
    short = nothing_to_spare(float(spare_at({flow: np.array([high])})[0]), f"the stated {side} flow")
    if short:
        raise NoState(short)
    for _ in range(ROUNDS):
        points = np.linspace(low, high, POINTS)
        found = spare_at({flow: points})
        if found[0] > 0.0 and not (found <= 0.0).any():
            raise NoState(
                f"the clean unit carries the duty at {percent(SMALLEST_PART)} of the {side} flow still"
            )
        last, first = _narrowed(found)
        low, high = points[last], points[first]
    if math.isnan(found[last]):
        raise NoState(
            f"the clean unit carries the duty down to a {side} flow at which its circuit does not close"
        )
    return chain, {flow: np.asarray(high)}


def _narrowed(found: Array) -> tuple[int, int]:
    """The last point at which nothing is to spare, and the next one at which something is.

    Where there is none of the former, the last one without an answer below all that spare something: near a change of
    regime a flow may have no settled outlet between others that have one.
    """
    last = np.flatnonzero(found <= 0.0)
    if not len(last):
        last = np.flatnonzero(np.isnan(found[: int(np.argmax(found > 0.0))]))
    sparing = np.flatnonzero(found > 0.0)
    return int(last[-1]), int(sparing[sparing > last[-1]][0])


def _stated_without_scale(chain: Chain, stream: str) -> str:
    """The film of a stream whose stated coefficient stays as it is at another flow; empty where there is none."""
    for term in chain.calculation.resistances:
        if term.texts.get("stream") == stream and "coefficient" in term.values and term.scales_with is None:
            return term.name
    return ""


# --- a saturation -------------------------------------------------------------------------------------


def _saturation(
    before: Chain, case: CaseOutcome, duty: Duty, throttle: Throttle
) -> tuple[Chain, dict[str, Array]]:
    """The figure that a side has its saturation temperature from, where the clean unit has nothing to spare."""
    chain = open_chain(before, case)
    if chain is None:
        raise NoState(f"the duty does not follow from the {throttle.other} stream alone")
    way = Way.of(chain, throttle, chain.case_inputs(case.name), case.solutions[SERVICE])
    found = way.found()
    place = float(found.places[0])
    if math.isnan(place):
        raise NoState(found.reason(0, throttle))
    return chain, {
        name: value.reshape(()) for name, value in way.at(np.array([place]), np.array([0])).items()
    }
