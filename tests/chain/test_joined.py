"""Properties of one state that are read together: the figures and slopes of each step alone, to the bit."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from small_calculations import COOLER, HEAD

from calcbook.calcfile import Settings, read_calculation
from calcbook.chain.build import build
from calcbook.chain.fluids import PropertyOperation
from calcbook.chain.joined import PropertiesTogether, joined
from calcbook.chain.types import Chain
from calcbook.faults import Collector
from calcbook.library import Library
from calcbook.library.operations import run


@pytest.fixture
def cooler(tmp_path: Path) -> Chain:
    path = tmp_path / "trial.yaml"
    path.write_text(HEAD + COOLER, encoding="utf-8")
    collector = Collector()
    chain = build(read_calculation(path, Settings(), collector, None, None), Library(), collector)
    collector.stop_if_any()
    assert chain is not None
    return chain


def test_properties_together_have_the_bits_of_each_alone(cooler: Chain) -> None:
    branch = cooler.inner.branches[0]
    steps = tuple(
        step for step in branch.candidates[0].steps if isinstance(step.operation, PropertyOperation)
    )
    together = joined(steps)
    assert any(isinstance(step, PropertiesTogether) for step in together)
    needed = {name for step in steps for name in step.inputs.values()}
    for size in (1, 7):
        values = {name: np.full(size, 1.0) for name in needed}
        values |= {name: np.full(size, item.value) for name, item in cooler.inputs.items()}
        for name in needed - set(cooler.inputs):
            values[name] = np.linspace(300.0, 330.0, size)
        for pressures in (1.0, np.linspace(1.0, 1.3, size)):
            alone, both = dict(values), dict(values)
            alone["given/p_hot"] = both["given/p_hot"] = values["given/p_hot"] * pressures
            seeds = {name: {name: np.ones(())} for name in needed}
            slopes_alone = {name: dict(lines) for name, lines in seeds.items()}
            slopes_both = {name: dict(lines) for name, lines in seeds.items()}
            run(steps, alone, slopes_alone)
            run(together, both, slopes_both)
            assert set(slopes_alone) == set(slopes_both)
            for step in steps:
                np.testing.assert_array_equal(both[step.id], alone[step.id])
                for seed, slope in slopes_alone[step.id].items():
                    np.testing.assert_array_equal(slopes_both[step.id][seed], slope)


def test_other_steps_keep_their_order(cooler: Chain) -> None:
    steps = cooler.inner.branches[0].candidates[0].steps
    found: list[str] = []
    for step in joined(steps):
        found += [item.id for item in step.steps] if isinstance(step, PropertiesTogether) else [step.id]
    assert sorted(found) == sorted(step.id for step in steps)
    for step in steps:
        before = found[: found.index(step.id)]
        assert {name for name in step.inputs.values() if name in {item.id for item in steps}} <= set(before)
