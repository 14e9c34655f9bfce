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
from calcbook.chain.types import CLEAN, SERVICE, Chain, StreamState
from calcbook.chain.variants import with_figures
from calcbook.formulas import number_text
from calcbook.properties import PropertyFault
from calcbook.rating.opened import open_chain
from calcbook.rating.unit_states import MARGIN, NOTHING, Judged, judged, pressure_of, unit_state

Array = np.ndarray
# A flow is looked for down to this part of the stated one.
SMALLEST_PART = 0.02
POINTS, ROUNDS = 41, 6
# A saturation temperature is looked for in so many steps up to this part of its way to the other stream, where the need
# for area has no end, and is known this well, in K. Where the circuit ends first, that place is halved so often.
STEPS, LARGEST_PART, KNOWN, HALVINGS = 12, 0.999, 1e-9, 20
# Common practice: what a control takes where the file does not say. The pressure of steam, and that of a refrigerant,
# which is called by its number (ISO 817) or is one of these; else the flow of the stream that serves the other.
USUALLY_THROTTLED = {"hot": re.compile("Water"), "cold": re.compile(r"RC?\d.*|Ammonia|CarbonDioxide")}


class TurnedDown(NamedTuple):
    """The unit under its control, what that leaves and what it moved; or why there is no such state."""

    state: UnitState | None
    reason: str
    left: Judged
    throttle: Throttle


class _NoState(Exception):
    """Why there is no turned-down state, in words."""


def turned_down(chain: Chain, case: CaseOutcome) -> TurnedDown:
    """The clean unit with its control throttled until it gives the duty; or why there is none."""
    duty = chain.calculation.duty
    assert duty is not None
    side = throttled_side(chain)
    throttle = Throttle(side, _moved(chain, duty.sides[side]), bool(duty.throttled))
    if "duty" not in chain.results:
        return TurnedDown(None, "the duty is what the unit reaches, and none is stated", NOTHING, throttle)
    try:
        opened, figures = (_flow if throttle.what == FLOW else _saturation)(chain, case, duty, throttle)
    except _NoState as reason:
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


def throttled_side(chain: Chain) -> str:
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
    """What the clean unit has to spare at several figures, NaN where it has no answer: the margin of area over a duty
    that follows from the ends, else what it reaches over the stated duty."""
    has_duty = "duty" in chain.results
    wanted = chain.results["area margin" if has_duty else "heat reached"]
    stated = case.solutions[SERVICE].number(before.results["duty"])
    inputs = chain.case_inputs(case.name)

    def spare(figures: Mapping[str, Array]) -> Array:
        one, given = with_figures(chain, inputs, figures)
        solution = solve(one, given, CLEAN, keep=(wanted,), thorough=False)
        (shape,) = {np.shape(figure) for figure in figures.values()}
        found = np.broadcast_to(np.asarray(solution.values[wanted], dtype=float), shape)
        return found if has_duty else found / stated - 1.0

    return spare


def _must_spare(spare: float, where: str) -> None:
    """Refuse to look for a state where the clean unit has nothing to spare as it stands."""
    if math.isnan(spare):
        raise _NoState(f"the circuit of the clean unit does not close at the duty and {where}")
    if spare <= 0.0:
        raise _NoState(f"the clean unit does not carry the duty: it is {_percent(-spare)} short")


def _percent(share: float) -> str:
    return f"{number_text(100.0 * share, 3)} %"


# --- a flow -------------------------------------------------------------------------------------------


def _flow(before: Chain, case: CaseOutcome, duty: Duty, throttle: Throttle) -> tuple[Chain, dict[str, Array]]:
    """The flow of a side at which the clean unit has nothing to spare, its outlet open.

    It is found by cutting ever smaller pieces of a range, all points of a round in one call.
    """
    side = throttle.side
    flow = before.streams[duty.sides[side].stream].mass_flow
    if f"C {side}" not in before.results or not flow:
        raise _NoState(f"the {side} stream has no mass flow that could be turned down")
    fixed = _stated_without_scale(before, duty.sides[side].stream)
    if fixed:
        raise _NoState(f"the coefficient of {fixed} is stated, and nothing says how it follows the flow")
    chain = open_chain(before, case, side, condition=CLEAN)
    if chain is None:
        raise _NoState(f"the duty does not follow from the {throttle.other} stream alone")
    spare = _spare(chain, before, case)
    stated = case.solutions[SERVICE].number(flow)
    low, high = SMALLEST_PART * stated, stated
    _must_spare(float(spare({flow: np.array([high])})[0]), f"the stated {side} flow")
    for _ in range(ROUNDS):
        points = np.linspace(low, high, POINTS)
        found = spare({flow: points})
        if found[0] > 0.0 and not (found <= 0.0).any():
            raise _NoState(
                f"the clean unit carries the duty at {_percent(SMALLEST_PART)} of the {side} flow still"
            )
        last, first = _narrowed(found)
        low, high = points[last], points[first]
    if math.isnan(found[last]):
        raise _NoState(
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
    """The saturation temperature of a side, or the pressure that it follows from, at which the clean unit has nothing
    to spare: between the stated one and the outlet of the other stream."""
    from scipy.optimize import brentq

    side = throttle.side
    chain = open_chain(before, case)
    if chain is None:
        raise _NoState(f"the duty does not follow from the {throttle.other} stream alone")
    stream, spare = chain.streams[duty.sides[side].stream], _spare(chain, before, case)
    nominal = case.solutions[SERVICE]
    stated = nominal.number(stream.temperature)
    way = nominal.number(chain.results[f"T {throttle.other} outlet"]) - stated

    def at(part: float) -> float:
        try:
            return float(spare(_at_saturation(stream, stated + part * way)))
        except PropertyFault:
            return math.nan

    _must_spare(at(0.0), f"the stated {throttle.what}")
    low, high = _bracket(at, "down" if side == "hot" else "up", throttle.what)
    part = brentq(at, low, high, xtol=KNOWN / abs(way))
    return chain, _at_saturation(stream, stated + part * way)


def _bracket(spare: Callable[[float], float], way: str, what: str) -> tuple[float, float]:
    """Two parts of the way between which the clean unit ceases to have something to spare."""
    low, high = 0.0, math.nan
    for part in np.linspace(0.0, LARGEST_PART, STEPS + 1)[1:].tolist():
        found = spare(part)
        if found > 0.0:
            low = part
            continue
        if found <= 0.0:
            return low, part
        high = part
        break
    if math.isnan(high):
        raise _NoState(
            f"the clean unit carries the duty with {_percent(1.0 - LARGEST_PART)} of the temperature difference still"
        )
    for _ in range(HALVINGS):
        part = 0.5 * (low + high)
        found = spare(part)
        if found <= 0.0:
            return low, part
        low, high = (part, high) if found > 0.0 else (low, part)
    raise _NoState(f"the clean unit carries the duty {way} to a {what} at which its circuit does not close")


def _at_saturation(stream: StreamState, temperature: float) -> dict[str, Array]:
    """The figure from which a saturated stream has a temperature. Raises ``PropertyFault`` where it has none."""
    if not stream.pressure:
        return {stream.temperature: np.asarray(temperature)}
    fluid = stream.fluid.state(None, None, stream.phase)
    return {stream.pressure: np.asarray(fluid.saturation_pressure(temperature))}
