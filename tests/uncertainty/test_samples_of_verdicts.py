"""Verdicts on arrays: the same as a record gives of each sample alone, and both conditions in one call."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from calcbook.chain.flips_outcome import CONTROLLING, CRITERION, LIMIT, METHOD
from calcbook.chain.outcome import CaseOutcome, Solved
from calcbook.chain.samples import NO_VERDICT, Samples, evaluate_samples
from calcbook.chain.solve import chosen, conditions_of, solve, solve_both
from calcbook.chain.types import CONDITIONS, SERVICE, Chain
from calcbook.interface import solve_file

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
