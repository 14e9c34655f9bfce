"""Other methods closed together give, bit for bit, what each gives when it is closed alone."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from calcbook.chain.alternatives import alternatives, needs_temperatures
from calcbook.chain.solve import solve
from calcbook.chain.types import SERVICE, following_elements
from calcbook.interface import solve_file

CALCS = Path(__file__).resolve().parents[2] / "calcs"


# A film beside a stated one, two films, fins, boiling against a radiating surface: films that share little and much.
@pytest.mark.parametrize("name", ["wc-101", "ab-901", "ac-501", "kr-801"])
def test_together_and_alone_give_the_same_bits(name: str) -> None:
    solved = solve_file(CALCS / f"{name}.yaml")
    chain = solved.chain
    inputs = chain.case_inputs("")
    base = solved.base.solutions[SERVICE]
    compared = 0
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            others = branch.alternatives
            found = alternatives(chain, branch, others, inputs, base)
            assert len(found) == len(others)
            for other, together in zip(others, found, strict=True):
                forced = {branch.name: other}
                is_near = following_elements(chain, forced) == following_elements(chain)
                alone = solve(chain, inputs, SERVICE, forced, start=base.unknowns if is_near else None)
                assert bool(together.converged) == bool(alone.converged), other.method.id
                if not bool(alone.converged):
                    continue
                for key in (chain.results["U"], other.coefficient, *(step.id for step in other.steps)):
                    assert together.number(key) == alone.number(key) or (
                        np.isnan(together.number(key)) and np.isnan(alone.number(key))
                    ), (other.method.id, key)
                compared += needs_temperatures(chain, branch, other)
    assert compared > 1
