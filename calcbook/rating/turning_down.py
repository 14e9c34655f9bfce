"""The clean unit turned down by its control until it gives the duty, and no more."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from calcbook.chain.completing import completed
from calcbook.chain.outcome import Solved
from calcbook.chain.rating_outcome import UnitState
from calcbook.chain.solve import solve
from calcbook.chain.types import CLEAN, SERVICE, Chain
from calcbook.chain.variants import with_figures
from calcbook.rating.opened import open_chain
from calcbook.rating.unit_states import NOTHING, Judged, judged, unit_state

Array = np.ndarray
# The flow is looked for down to this part of the stated one.
SMALLEST_PART = 0.02
POINTS = 41
ROUNDS = 6


def turned_down(solved: Solved) -> tuple[UnitState | None, str, Judged]:
    """The clean unit with its cold flow turned down until it gives the duty; or why there is none.

    The hot ends stay as stated and the cold outlet follows the flow; the flow is found where the margin of
    area is nothing, by cutting ever smaller pieces of a range, all points of a round in one call.
    """
    chain, table = solved.chain, solved.chain.results
    duty = chain.calculation.duty
    assert duty is not None
    flow = chain.streams[duty.cold.stream].mass_flow
    if "C cold" not in table or not flow:
        return None, "the cold stream has no mass flow that could be turned down", NOTHING
    if duty.hot.open_end == "outlet":
        return None, "the outlet of the hot stream is not stated", NOTHING
    opened = open_chain(solved, "cold")
    if opened is None or "duty" not in opened.results:
        return None, "the duty does not follow from the hot stream alone", NOTHING
    fixed = _stated_without_scale(solved, duty.cold.stream)
    if fixed:
        return (
            None,
            f"the coefficient of {fixed} is stated, and nothing says how it follows the flow",
            NOTHING,
        )
    stated = solved.base.solutions[SERVICE].number(flow)
    low, high = SMALLEST_PART * stated, stated
    inputs = opened.case_inputs("")
    (margin,) = _margins(opened, inputs, flow, np.array([high]))
    if math.isnan(margin):
        return (
            None,
            "the circuit of the clean unit does not close at the duty and the stated cold flow",
            NOTHING,
        )
    if margin <= 0.0:
        return None, "the clean unit does not carry the duty with any flow to spare", NOTHING
    for _ in range(ROUNDS):
        points = np.linspace(low, high, POINTS)
        margins = _margins(opened, inputs, flow, points)
        below = np.flatnonzero(~(margins > 0.0))
        if not len(below):
            return (
                None,
                f"the clean unit carries the duty at {SMALLEST_PART:.0%} of the cold flow still",
                NOTHING,
            )
        low, high = points[below[-1]], points[below[-1] + 1]
    if math.isnan(margins[below[-1]]):
        return (
            None,
            "the clean unit carries the duty down to a cold flow at which its circuit does not close",
            NOTHING,
        )
    one, given = with_figures(opened, inputs, {flow: np.asarray(high)})
    given = completed(one, given)
    solution = solve(one, given, CLEAN)
    return unit_state(one, solution), "", judged(one, given, solution, "turned down")


def _stated_without_scale(solved: Solved, stream: str) -> str:
    """The film of a stream whose stated coefficient stays as it is at another flow; empty where there is none."""
    for term in solved.chain.calculation.resistances:
        if term.texts.get("stream") == stream and "coefficient" in term.values and term.scales_with is None:
            return term.name
    return ""


def _margins(chain: Chain, inputs: Mapping[str, Array], flow: str, flows: Array) -> Array:
    """Margin of area of the clean unit over the duty at several cold flows; NaN where the duty cannot be had."""
    one, given = with_figures(chain, inputs, {flow: flows})
    solution = solve(one, given, CLEAN, keep=(one.results["area margin"],))
    return np.broadcast_to(np.asarray(solution.values[one.results["area margin"]], dtype=float), flows.shape)
