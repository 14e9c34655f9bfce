"""The clean unit throttled by its control until it gives the duty, and no more.

The control takes the flow of one stream, or the saturation of one that changes phase; the other stream keeps what the
duty states of it, so that the duty follows from it alone.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from calcbook.calcfile.calculation import Duty, DutySide
from calcbook.chain.completing import completed
from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.plausible import throttled_steam
from calcbook.chain.rating_outcome import FLOW, PRESSURE, TEMPERATURE, TURNED_DOWN, Throttle, UnitState
from calcbook.chain.solve import solve
from calcbook.chain.types import CLEAN, SERVICE, Chain, StreamState
from calcbook.chain.variants import with_figures
from calcbook.properties import PropertyFault
from calcbook.rating.opened import open_chain
from calcbook.rating.unit_states import NOTHING, Judged, judged, unit_state

Array = np.ndarray
# A flow is looked for down to this part of the stated one.
SMALLEST_PART = 0.02
POINTS, ROUNDS = 41, 6
# A saturation temperature is looked for up to this part of its way to the other stream, where the need for area has no
# end, and is known this well, in K.
LARGEST_PART, KNOWN = 0.999, 1e-9


class TurnedDown(NamedTuple):
    """The unit under its control, what that leaves and what it moved; or why there is no such state."""

    state: UnitState | None
    reason: str
    left: Judged
    throttle: Throttle


class _None(Exception):
    """Why there is no turned-down state, in words."""


class _Open(Exception):
    """The circuit does not close at a figure of the search."""


def turned_down(chain: Chain, case: CaseOutcome) -> TurnedDown:
    """The clean unit with its control throttled until it gives the duty; or why there is none."""
    duty = chain.calculation.duty
    assert duty is not None
    side = throttled_side(duty)
    throttle = Throttle(side, _moved(chain, duty.sides[side]), bool(duty.throttled))
    try:
        opened, figures = (_flow if throttle.what == FLOW else _saturation)(chain, case, duty, throttle)
    except _None as reason:
        return TurnedDown(None, str(reason), NOTHING, throttle)
    one, given = with_figures(opened, opened.case_inputs(case.name), figures)
    given = completed(one, given)
    solution = solve(one, given, CLEAN)
    state = f"{TURNED_DOWN}, case {case.name}" if case.name else TURNED_DOWN
    left = judged(one, given, solution, state)
    if throttle.what != FLOW:
        stream = one.streams[duty.sides[side].stream]
        checks = throttled_steam(stream, case.solutions[SERVICE], solution)
        left = left._replace(checks=left.checks + tuple(check._replace(condition=state) for check in checks))
    return TurnedDown(unit_state(one, solution), "", left, throttle)


def throttled_side(duty: Duty) -> str:
    """The side that the control acts on: the one that the file names, else one that changes phase, else the cold one."""
    changing = [name for name, side in duty.sides.items() if not side.has_ends]
    return duty.throttled or (changing[0] if changing else "cold")


def _moved(chain: Chain, side: DutySide) -> str:
    """What the control moves on a side."""
    if side.has_ends:
        return FLOW
    return PRESSURE if chain.streams[side.stream].pressure else TEMPERATURE


def _other(side: str) -> str:
    return "cold" if side == "hot" else "hot"


# --- a flow -------------------------------------------------------------------------------------------


def _flow(before: Chain, case: CaseOutcome, duty: Duty, throttle: Throttle) -> tuple[Chain, dict[str, Array]]:
    """The flow of a side at which the margin of area is nothing, its outlet open.

    It is found by cutting ever smaller pieces of a range, all points of a round in one call.
    """
    side, other = throttle.side, _other(throttle.side)
    flow = before.streams[duty.sides[side].stream].mass_flow
    if f"C {side}" not in before.results or not flow:
        raise _None(f"the {side} stream has no mass flow that could be turned down")
    if duty.sides[other].open_end == "outlet":
        raise _None(f"the outlet of the {other} stream is not stated")
    chain = open_chain(before, case, side)
    if chain is None or "duty" not in chain.results:
        raise _None(f"the duty does not follow from the {other} stream alone")
    fixed = _stated_without_scale(before, duty.sides[side].stream)
    if fixed:
        raise _None(f"the coefficient of {fixed} is stated, and nothing says how it follows the flow")
    inputs = chain.case_inputs(case.name)
    stated = case.solutions[SERVICE].number(flow)
    low, high = SMALLEST_PART * stated, stated
    _must_spare(_margins(chain, inputs, {flow: np.array([high])})[0], f"the stated {side} flow", "flow")
    for _ in range(ROUNDS):
        points = np.linspace(low, high, POINTS)
        margins = _margins(chain, inputs, {flow: points})
        below = np.flatnonzero(~(margins > 0.0))
        if not len(below):
            raise _None(f"the clean unit carries the duty at {SMALLEST_PART:.0%} of the {side} flow still")
        low, high = points[below[-1]], points[below[-1] + 1]
    if math.isnan(margins[below[-1]]):
        raise _None(
            f"the clean unit carries the duty down to a {side} flow at which its circuit does not close"
        )
    return chain, {flow: np.asarray(high)}


def _must_spare(margin: float, where: str, what: str) -> None:
    """Refuse to look for a state where the clean unit has nothing to spare as it stands."""
    if math.isnan(margin):
        raise _None(f"the circuit of the clean unit does not close at the duty and {where}")
    if margin <= 0.0:
        raise _None(f"the clean unit does not carry the duty with any {what} to spare")


def _stated_without_scale(chain: Chain, stream: str) -> str:
    """The film of a stream whose stated coefficient stays as it is at another flow; empty where there is none."""
    for term in chain.calculation.resistances:
        if term.texts.get("stream") == stream and "coefficient" in term.values and term.scales_with is None:
            return term.name
    return ""


def _margins(chain: Chain, inputs: Mapping[str, Array], figures: Mapping[str, Array]) -> Array:
    """Margin of area of the clean unit over the duty at several figures; NaN where the duty cannot be had."""
    one, given = with_figures(chain, inputs, figures)
    solution = solve(one, given, CLEAN, keep=(one.results["area margin"],))
    (shape,) = {np.shape(figure) for figure in figures.values()}
    return np.broadcast_to(np.asarray(solution.values[one.results["area margin"]], dtype=float), shape)


# --- a saturation -------------------------------------------------------------------------------------


def _saturation(
    before: Chain, case: CaseOutcome, duty: Duty, throttle: Throttle
) -> tuple[Chain, dict[str, Array]]:
    """The saturation temperature of a side, or the pressure that it follows from, at which the margin of area is
    nothing: between the stated one and the outlet of the other stream."""
    from scipy.optimize import brentq

    side, other = throttle.side, _other(throttle.side)
    if duty.sides[other].open_end == "outlet":
        raise _None(f"the outlet of the {other} stream is not stated")
    chain = open_chain(before, case)
    if chain is None or "duty" not in chain.results:
        raise _None(f"the duty does not follow from the {other} stream alone")
    stream, inputs = chain.streams[duty.sides[side].stream], chain.case_inputs(case.name)
    nominal = case.solutions[SERVICE]
    stated = nominal.number(stream.temperature)
    end = nominal.number(chain.results[f"T {other} outlet"])

    def margin(part: float) -> float:
        figures = _at_saturation(stream, stated + part * (end - stated))
        return float(_margins(chain, inputs, figures))

    def closed_margin(part: float) -> float:
        found = margin(part)
        if math.isnan(found):
            raise _Open
        return found

    _must_spare(margin(0.0), f"the stated {throttle.what}", "temperature difference")
    try:
        part = brentq(closed_margin, 0.0, LARGEST_PART, xtol=KNOWN / abs(end - stated))
    except (_Open, PropertyFault):
        way = "down" if side == "hot" else "up"
        raise _None(
            f"the clean unit carries the duty {way} to a {throttle.what} at which its circuit does not close"
        ) from None
    return chain, _at_saturation(stream, stated + part * (end - stated))


def _at_saturation(stream: StreamState, temperature: float) -> dict[str, Array]:
    """The figure from which a saturated stream has a temperature. Raises ``PropertyFault`` where it has none."""
    if not stream.pressure:
        return {stream.temperature: np.asarray(temperature)}
    fluid = stream.fluid.state(None, None, stream.phase)
    return {stream.pressure: np.asarray(fluid.saturation_pressure(temperature))}
