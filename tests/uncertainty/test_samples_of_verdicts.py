"""Verdicts on arrays: the same as a record gives of each sample alone, and both conditions in one call."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from calcbook.chain.flips_outcome import CONTROLLING, CRITERION, LIMIT, METHOD
from calcbook.chain.measured import Measured
from calcbook.chain.outcome import CaseOutcome, Solved
from calcbook.chain.samples import NO_VERDICT, Samples, evaluate_samples
from calcbook.chain.solve import Solution, chosen, conditions_of, solve, solve_both
from calcbook.chain.types import CONDITIONS, SERVICE, Chain, ChainCheck
from calcbook.faults import Place
from calcbook.formulas import parse_expression
from calcbook.interface import solve_file
from calcbook.library.cards import practice_limit
from calcbook.properties import FluidAtPressure
from calcbook.uncertainty.samples import (
    OUTSIDE_ANY,
    ChainModel,
    Phase,
    Statement,
    WallPhase,
    Watched,
    watched,
)

CALCS = Path(__file__).resolve().parent.parent.parent / "calcs"
# Water in tubes with cases; boiling against condensing with an accepted limit; fins in air; radiation beside wind.
NAMES = ("wc-101", "kr-801", "ab-901", "sl-301")


@pytest.fixture(scope="module", params=NAMES)
def solved(request: pytest.FixtureRequest) -> Solved:
    return solve_file(CALCS / f"{request.param}.yaml", for_record=False)


def samples_of(chain: Chain, case: str) -> Samples:
    inputs = {name: np.full(3, float(value)) for name, value in chain.case_inputs(case).items()}
    return evaluate_samples(chain, inputs, (case,))


def word(samples: Samples, kind: str, name: str, condition: str) -> str:
    key = (kind, name, condition)
    codes = samples.codes(key)
    assert (codes == codes[0]).all()
    return "not evaluable" if codes[0] == NO_VERDICT else samples.verdicts[key].words[codes[0]]


def check_limits(samples: Samples, case: CaseOutcome) -> None:
    compared = 0
    for check in case.checks:
        if check.card != "band" and " / typical / " not in check.id:
            assert word(samples, LIMIT, check.id, check.condition) == check.state, check.id
            compared += 1
    assert compared > 5
    # A record leaves out a limit of gases where the stream is a liquid.
    limits = [key for key in samples.verdicts if key[0] == LIMIT and word(samples, *key) != "not counting"]
    assert {(name, condition) for _, name, condition in limits} <= {
        (check.id, check.condition) for check in case.checks
    }


def test_verdicts_of_samples_are_those_of_the_record(solved: Solved) -> None:
    for case in solved.cases:
        samples = samples_of(solved.chain, case.name)
        assert not samples.missing.any()
        check_limits(samples, case)
        for item in case.criteria:
            assert word(samples, CRITERION, item.id, "") == ("met" if item.met else "not met")
        assert word(samples, CONTROLLING, CONTROLLING, SERVICE) == (case.controlling or "no controlling term")
        for group in (solved.chain.inner, solved.chain.outer):
            for branch in group.branches:
                for condition in CONDITIONS:
                    if (METHOD, branch.name, condition) in samples.verdicts:
                        method = chosen(branch, case.solutions[condition]).method.id
                        assert word(samples, METHOD, branch.name, condition) == method
        for name, result in case.results.items():
            if name in samples.results:
                values = np.broadcast_to(samples.results[name].values, 3)
                assert values.tolist() == [result.value] * 3, name


def test_both_conditions_in_one_call_are_bit_for_bit_those_alone(solved: Solved) -> None:
    chain = solved.chain
    inputs = {name: np.asarray(value) for name, value in chain.case_inputs("").items()}
    moved = next(name for name, item in chain.inputs.items() if item.is_given and item.kind.unit == "m")
    inputs[moved] = float(inputs[moved]) * np.linspace(0.99, 1.01, 7)
    both = conditions_of(solve_both(chain, inputs))
    for condition in CONDITIONS:
        alone = solve(chain, inputs, condition)
        for name in (chain.results["U"], *(chain.results[f"R {element.name}"] for element in chain.elements)):
            together = np.broadcast_to(both[condition].figure(name), 7)
            assert together.tolist() == np.broadcast_to(alone.figure(name), 7).tolist(), name
        assert (both[condition].converged == alone.converged).all()


# --- what samples are counted by, sample by sample -------------------------------------------------------


def solution_of(values: dict[str, list[float]], closes: list[bool], method: list[int]) -> Solution:
    arrays = {name: np.array(figures) for name, figures in values.items()}
    return Solution(SERVICE, arrays, {"film": np.array(method)}, np.array(closes))


def test_a_wall_is_held_against_its_hottest_and_its_coldest_surface() -> None:
    """Water boils at the hotter of two surfaces and freezes at the colder one, at the limit itself already; where the
    circuit does not close there is no wall."""
    values = {"a": [350.0, 373.0, 350.0, 380.0], "b": [350.0, 350.0, 380.0, 380.0]}
    hot = solution_of(values, [True, True, True, False], [0] * 4)
    boils = WallPhase("film", "boils", SERVICE, ("a", "b"), 373.0)
    assert boils.outside(hot).tolist() == [False, True, True, False]
    values = {"a": [280.0, 273.0, 280.0, 270.0], "b": [280.0, 280.0, 270.0, 270.0]}
    cold = solution_of(values, [True, True, True, False], [0] * 4)
    freezes = WallPhase("film", "freezes", SERVICE, ("a", "b"), 273.0)
    assert freezes.outside(cold).tolist() == [False, True, True, False]


def line_of(solved: Solved) -> FluidAtPressure:
    """The saturation line of water, from the stream of a calculation."""
    state = next(one for one in solved.chain.streams.values() if one.fluid.fixed is not None and one.pressure)
    return state.fluid.state(None, None, "liquid")


@pytest.fixture(scope="module")
def cooler() -> Solved:
    return solve_file(CALCS / "wc-101.yaml", for_record=False)


def test_phases_are_held_at_the_pressure_of_each_sample(cooler: Solved) -> None:
    """Water boils at 372.76 K and 1 bar, at 393.36 K and 2 bar (IAPWS-IF97, steam tables: 99.61 and 120.21 degC)."""
    values = {"T": [372.6, 372.9, 393.2, 393.5], "p": [1e5, 1e5, 2e5, 2e5]}
    solution = solution_of(values, [True] * 4, [0] * 4)
    line = line_of(cooler)
    below = [True, False, True, False]
    assert Phase("T", "p", line, True).holds(solution.values).tolist() == below
    assert Phase("T", "p", line, False).holds(solution.values).tolist() == [not one for one in below]
    # The pressure of the stated figures would have 360 K for all of them.
    wall = WallPhase("film", "boils", SERVICE, ("T",), 360.0, line, "p")
    assert wall.outside(solution).tolist() == [not one for one in below]


def test_a_limit_counts_where_its_method_is_used_and_a_figure_without_a_value_leaves_it() -> None:
    limit = practice_limit("most", "x <= 1", "range", "", Place("trial.yaml"))
    check = ChainCheck("film / most", "film", "card", limit, {"x": "x"})
    solution = solution_of({"x": [0.5, 2.0, 2.0, np.nan]}, [True] * 4, [1, 1, 0, 1])
    assert Watched(check, SERVICE, "film", 1).outside(solution).tolist() == [False, True, False, True]
    assert Watched(check, SERVICE).outside(solution).tolist() == [False, True, True, True]


@pytest.mark.parametrize(
    ("operator", "holds"),
    [
        (">=", [False, True, True]),
        (">", [False, False, True]),
        ("<=", [True, True, False]),
        ("<", [True, False, False]),
    ],
)
def test_a_statement_holds_at_its_limit_as_its_sign_says(operator: str, holds: list[bool]) -> None:
    result = Measured("U", parse_expression("y"), {"y": (SERVICE, "U")})
    solved = {SERVICE: {"U": np.array([1.0, 2.0, 3.0]), "least": np.array([0.5, 3.5, 3.5])}}
    assert Statement("one", result, operator, 2.0).holds(solved).tolist() == holds
    # Against a step of its own in every sample.
    above = [True, False, False] if ">" in operator else [False, True, True]
    assert Statement("one", result, operator, 2.0, "least").holds(solved).tolist() == above


def test_samples_beyond_a_stop_have_no_answer_and_beyond_a_range_are_counted() -> None:
    """One sample holds both limits of x, one leaves its range, one its stop as well; another leaves the range of z."""

    def limited(name: str, that: str, level: str, symbol: str) -> Watched:
        limit = practice_limit(name, that, level, "", Place("trial.yaml"))
        return Watched(ChainCheck(f"film / {name}", "film", "card", limit, {symbol: symbol}), SERVICE)

    model = ChainModel.__new__(ChainModel)
    model.limits = (
        limited("range", "x <= 1", "range", "x"),
        limited("stop", "x <= 3", "stop", "x"),
        # The same limit of another method of that film: they are one row.
        limited("range", "z <= 1", "range", "z"),
        limited("other", "z <= 0", "range", "z"),
    )
    model.results = (Measured("y", parse_expression("y"), {"y": (SERVICE, "y")}),)
    model.statements = ()
    values = {"x": [0.5, 2.0, 4.0, 0.5], "z": [-1.0, -1.0, -1.0, 2.0], "y": [1.0, 2.0, 3.0, 4.0]}
    found = model._sampled({SERVICE: solution_of(values, [True] * 4, [0] * 4)}, {}, np.ones(4, dtype=bool), 4)
    assert np.array_equal(found.outputs["y"], [1.0, 2.0, np.nan, 4.0], equal_nan=True)
    marks = {name: mark.tolist() for name, mark in found.marks.items()}
    assert marks == {
        "service: film / range": [False, True, True, True],
        "service: film / stop": [False, False, True, False],
        "service: film / other": [False, False, False, True],
        OUTSIDE_ANY: [False, True, True, True],
    }


def test_stops_and_ranges_are_watched_and_cautions_are_not(cooler: Solved) -> None:
    known = next(iter(cooler.chain.inputs))
    checks = tuple(
        ChainCheck(
            level, "duty", "card", practice_limit(level, "x > 0", level, "", Place("t.yaml")), {"x": known}
        )
        for level in ("stop", "range", "caution")
    )
    chain = replace(cooler.chain, checks=checks)
    found = {one.id for one in watched(chain, SERVICE)}
    assert {"stop", "range", "caution"} & found == {"stop", "range"}
