"""Slopes of the surfaces at both ends of a unit, beside those of the engine itself at nearby figures."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np
import pytest

from calcbook.chain.completing import completed
from calcbook.chain.ends import EndState, closed_ends, end_slopes, end_states
from calcbook.chain.solve import closed
from calcbook.chain.types import CONDITIONS, Chain
from calcbook.interface import solve_file

CALCULATIONS = Path(__file__).resolve().parents[2] / "calcs"
# Of the figure: the error of a central difference is about its square.
STEP = 1e-5


def ends_of_unit(chain: Chain, inputs: Mapping[str, np.ndarray]) -> tuple[EndState, ...]:
    whole = completed(chain, inputs)
    return end_states(chain, whole, {name: closed(chain, whole, name) for name in CONDITIONS})


def written(name: str, folder: Path, *changes: tuple[str, str]) -> Path:
    text = (CALCULATIONS / name).read_text(encoding="utf-8")
    for old, new in changes:
        assert text.count(old) == 1
        text = text.replace(old, new)
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


NO_MARGIN = (
    ("area_margin >= 5 %", "U_service >= 1 W/(m^2 K)"),
    ("of: [U_service, area_margin]", "of: [U_service]"),
)
OPEN_OUTLETS = (("inlet: T_hi, outlet: T_ho", "inlet: T_hi"), ("inlet: T_ci, outlet: T_co", "inlet: T_ci"))


@pytest.mark.parametrize(
    "changes",
    [
        (),
        # Outlets that the file leaves open move with every figure that moves U.
        (*NO_MARGIN, *OPEN_OUTLETS),
        (("arrangement: counterflow", "arrangement: parallel flow"),),
    ],
)
def test_slopes_at_the_ends_are_those_of_the_engine(
    tmp_path: Path, changes: tuple[tuple[str, str], ...]
) -> None:
    solved = solve_file(written("wc-105.yaml", tmp_path, *changes), for_record=False)
    chain, inputs = solved.chain, solved.chain.case_inputs("")
    whole = completed(chain, inputs)
    solutions = {name: closed(chain, whole, name) for name in CONDITIONS}
    typed = [item for item in inputs if item.startswith("given/") and float(inputs[item])]
    nearby = dict(inputs)
    for number, item in enumerate(typed):
        figures = np.full(2 * len(typed), float(inputs[item]))
        figures[2 * number : 2 * number + 2] *= (1.0 + STEP, 1.0 - STEP)
        nearby[item] = figures
    moved = {(one.solution.condition, one.place): one for one in ends_of_unit(chain, nearby)}
    states = closed_ends(ends_of_unit(chain, inputs))
    assert len(states) == 4
    for state in states:
        for group in (chain.inner, chain.outer):
            step = group.surface_temperature
            slopes = end_slopes(chain, inputs, solutions, state, (step,))[step]
            there = moved[state.solution.condition, state.place].solution.figure(step)
            for number, item in enumerate(typed):
                rise = (there[2 * number] - there[2 * number + 1]) / (2.0 * STEP)
                own = float(slopes.get(item, 0.0)) * float(inputs[item])
                # In K for a rise of the figure by itself: the engine closes to about 1e-10 K, divided by the step.
                assert own == pytest.approx(rise, rel=1e-5, abs=1e-4), (item, state.place, step)
