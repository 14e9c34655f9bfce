"""Day one: the clean unit at the inlets of the duty, as it runs and turned down until it gives the duty.

The outlets are then open, so the calculation is built anew without them and without stated means.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from typing import NamedTuple

import numpy as np

from calcbook.calcfile.calculation import DutySide, Value
from calcbook.chain.analysis import clean_surface_criteria
from calcbook.chain.build import build
from calcbook.chain.checks import evaluate_check
from calcbook.chain.completing import completed
from calcbook.chain.duty import OWNER as DUTY
from calcbook.chain.duty import PASSES
from calcbook.chain.ends import end_checks, end_states
from calcbook.chain.findings import lacking_property, phases_not_checked, wall_checks
from calcbook.chain.outcome import CheckResult, CriterionResult, Solved
from calcbook.chain.plausible import band_checks
from calcbook.chain.rating_outcome import WITH_ALLOWANCES, DayOne, SideState, UnitState
from calcbook.chain.solve import Solution, chosen, solve
from calcbook.chain.types import CLEAN, SERVICE, Branch, Chain, Group, Layer
from calcbook.chain.variants import with_figures
from calcbook.faults import Collector
from calcbook.quantities import read_any

Array = np.ndarray
# The flow is looked for down to this part of the stated one.
SMALLEST_PART = 0.02
POINTS = 41
ROUNDS = 6


class _Judged(NamedTuple):
    """What a state of the clean unit leaves, and the criteria on its temperatures."""

    checks: tuple[CheckResult, ...] = ()
    criteria: tuple[CriterionResult, ...] = ()


NOTHING = _Judged()


def day_one(solved: Solved) -> DayOne | str | None:
    """The clean unit at the duty's inlets, or in words why it has no answer there.

    None where a flow is missing that it takes, or nothing fouls.
    """
    if not any(row.kind == "fouling" for row in solved.base.terms[SERVICE]):
        return None
    chain = open_chain(solved, "hot", "cold")
    if chain is None:
        return None
    inputs = chain.case_inputs("")
    clean_chain = replace(
        chain, open_figures=tuple(replace(item, condition=CLEAN) for item in chain.open_figures)
    )
    states = {SERVICE: (chain, SERVICE), CLEAN: (clean_chain, CLEAN)}
    solutions = {name: solve(one, inputs, condition) for name, (one, condition) in states.items()}
    for name, solution in solutions.items():
        if not bool(np.all(solution.converged)):
            which = "the clean unit" if name == CLEAN else "the unit with its allowances"
            why = lacking_property(states[name][0], solution)
            return f"the circuit of {which} does not close at the inlets of the duty" + (
                f": {why}" if why else ""
            )
    clean, in_service = solutions[CLEAN], solutions[SERVICE]
    turned_down, reason, judged = _turned_down(solved)
    with_allowances = tuple(
        check._replace(condition=WITH_ALLOWANCES) for check in _limits_of_duty(chain, in_service)
    )
    as_it_runs = _judged(clean_chain, completed(clean_chain, inputs), clean, "clean")
    service_state = _state(chain, in_service)
    clean_state = _state(clean_chain, clean)
    return DayOne(
        service_state,
        clean_state,
        turned_down,
        reason,
        with_allowances + as_it_runs.checks + judged.checks,
        as_it_runs.criteria + judged.criteria,
        phases_not_checked(clean_chain, clean),
    )


def open_chain(solved: Solved, *sides: str) -> Chain | None:
    """The calculation with the outlets of some sides open and the means of their ends; None where it has a fault.

    An inlet that the file leaves open stays where it was found.
    """
    before = solved.chain
    calculation, duty = before.calculation, before.calculation.duty
    assert duty is not None
    opened = {name: _with_inlet(solved, name, side) for name, side in duty.sides.items()}
    opened |= {name: replace(opened[name], outlet=None) for name in sides}
    open_streams = {opened[name].stream for name in sides if opened[name].has_ends}
    streams = {
        name: replace(stream, temperature=None) if name in open_streams else stream
        for name, stream in calculation.streams.items()
    }
    changed = replace(
        calculation,
        duty=replace(duty, hot=opened["hot"], cold=opened["cold"], parts=1),
        streams=streams,
    )
    collector = Collector()
    chain = build(changed, before.library, collector, cross_check=False)
    return chain if chain is not None and not collector and chain.open_figures else None


def _with_inlet(solved: Solved, name: str, side: DutySide) -> DutySide:
    """A side with the inlet that was found for it, where the file states none."""
    if side.open_end != "inlet":
        return side
    found = solved.base.solutions[SERVICE].number(solved.chain.results[f"T {name} inlet"])
    text = f"{found!r} K"
    return replace(
        side, inlet=Value(text, side.place, quantity=read_any(text), source="found", has_source=True)
    )


# --- turned down --------------------------------------------------------------------------------------


def _turned_down(solved: Solved) -> tuple[UnitState | None, str, _Judged]:
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
    return _state(one, solution), "", _judged(one, given, solution, "turned down")


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


# --- states ---------------------------------------------------------------------------------------------


def _state(chain: Chain, solution: Solution | None) -> UnitState:
    assert solution is not None and chain.calculation.duty is not None
    heat = chain.results.get("duty", chain.results.get("heat reached", ""))
    sides = {}
    for name, side in chain.calculation.duty.sides.items():
        group, branch = _film_of(chain, side.stream)
        stream = chain.streams[side.stream]
        speed = stream.flow if stream.flow_kind == "speed" else f"{branch.name}/speed"
        sides[name] = SideState(
            solution.number(stream.mass_flow) if stream.mass_flow else math.nan,
            solution.number(chain.results[f"T {name} outlet"]),
            solution.number(speed) if speed in solution.values else math.nan,
            solution.number(group.surface_temperature),
        )
    return UnitState(solution.number(heat), solution.number(chain.results["U"]), sides)


def _film_of(chain: Chain, stream: str) -> tuple[Group, Branch]:
    """The film that touches a stream of the duty; the layout saw to it that there is one."""
    return next(
        (group, branch)
        for group in (chain.inner, chain.outer)
        for branch in group.branches
        if branch.stream == stream
    )


def _ranges(chain: Chain, solution: Solution) -> list[CheckResult]:
    """The ranges that films, methods and stated ones, and the layers between them hold for."""
    films = [check for branch in chain.branches for check in chosen(branch, solution).checks]
    layers = [check for element in chain.elements if isinstance(element, Layer) for check in element.checks]
    return [
        evaluate_check(check, solution, "", chain.dimensions)
        for check in (*films, *layers)
        if check.limit.level == "range"
    ]


def _judged(chain: Chain, inputs: Mapping[str, Array], solution: Solution, state: str) -> _Judged:
    """Phases at the wall, at the means and at both ends, what the duty itself limits, and figures outside their
    bands, of the clean unit; and the criteria on its temperatures."""
    states = end_states(chain, inputs, {CLEAN: solution})
    phases = [*wall_checks(chain, "", solution), *end_checks(states, "")]
    found = [check for check in phases if check.state != "within"]
    found += [check for check in _ranges(chain, solution) if check.state in ("outside", "not evaluable")]
    found += _limits_of_duty(chain, solution)
    found += band_checks(chain, "", solution)
    return _Judged(
        tuple(check._replace(condition=state) for check in found),
        clean_surface_criteria(chain, solution, states, state),
    )


def _limits_of_duty(chain: Chain, solution: Solution) -> list[CheckResult]:
    """What the duty itself limits and does not hold: the ends, the heat that a saturated stream has."""
    found = [
        evaluate_check(check, solution, "", chain.dimensions)
        for check in chain.checks
        if check.owner == DUTY and check.limit.level in ("range", "caution") and not check.id.endswith(PASSES)
    ]
    return [check for check in found if check.state != "within"]
