"""One state of the clean unit: its figures, and what of limits, bands and criteria it leaves."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from calcbook.chain.analysis import clean_surface_criteria
from calcbook.chain.checks import evaluate_check
from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.duty import FLOW_NEEDED, PASSES
from calcbook.chain.duty import OWNER as DUTY
from calcbook.chain.ends import end_checks, end_states
from calcbook.chain.findings import wall_checks
from calcbook.chain.outcome import CheckResult, CriterionResult
from calcbook.chain.plausible import band_checks
from calcbook.chain.rating_outcome import SideState, UnitState
from calcbook.chain.solve import Solution, chosen
from calcbook.chain.types import CLEAN, Branch, Chain, Group, Layer, StreamState

Array = np.ndarray


class Judged(NamedTuple):
    """What a state of the clean unit leaves, and the criteria on its temperatures."""

    checks: tuple[CheckResult, ...] = ()
    criteria: tuple[CriterionResult, ...] = ()


NOTHING = Judged()
MARGIN = f"{DUTY} / area / margin"


def unit_state(chain: Chain, solution: Solution) -> UnitState:
    """The figures of the unit at a solution of one sample."""
    assert chain.calculation.duty is not None
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
            solution.number(branch_coefficient(group, branch.name)),
            math.nan if side.has_ends else pressure_of(stream, solution),
            math.nan if side.has_ends else solution.number(_flow_needed(chain, name)),
        )
    return UnitState(solution.number(heat), solution.number(chain.results["U"]), sides)


def _flow_needed(chain: Chain, side: str) -> str:
    """The id of the flow of a saturated stream that the heat needs."""
    return chain.results.get(FLOW_NEEDED) or chain.results[f"{FLOW_NEEDED} {side}"]


def pressure_of(stream: StreamState, solution: Solution) -> float:
    """The pressure of a stream that changes phase, by its temperature where none is stated; NaN where it is not known."""
    if stream.pressure:
        return solution.number(stream.pressure)
    fluid, temperature = stream.fluid.state(None, None, stream.phase), solution.number(stream.temperature)
    return (
        float(fluid.saturation_pressure(temperature, outside="nan"))
        if fluid.has_vapour_pressure
        else math.nan
    )


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


def judged(chain: Chain, inputs: Mapping[str, Array], solution: Solution, state: str) -> Judged:
    """Phases at the wall, at the means and at both ends, what the duty itself limits, and figures outside their
    bands, of the clean unit; and the criteria on its temperatures."""
    states = end_states(chain, inputs, {CLEAN: solution})
    phases = [*wall_checks(chain, "", solution), *end_checks(states, "")]
    found = [check for check in phases if check.state != "within"]
    found += [check for check in _ranges(chain, solution) if check.state in ("outside", "not evaluable")]
    found += limits_of_duty(chain, solution)
    found += band_checks(chain, "", solution)
    return Judged(
        tuple(check._replace(condition=state) for check in found),
        clean_surface_criteria(chain, solution, states, state),
    )


def limits_of_duty(chain: Chain, solution: Solution) -> list[CheckResult]:
    """What the duty itself limits and does not hold: the ends, the heat that a saturated stream has."""
    found = [
        evaluate_check(check, solution, "", chain.dimensions)
        for check in chain.checks
        if check.owner == DUTY and check.limit.level in ("range", "caution") and not check.id.endswith(PASSES)
    ]
    return [check for check in found if check.state != "within"]
