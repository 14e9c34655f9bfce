"""Everything on arrays: a sample gives the same bits alone, among others, and whatever its neighbours do."""

from __future__ import annotations

import numpy as np
import pytest
from small_calculations import (
    COOLER,
    COOLER_GIVENS,
    COOLER_REST,
    OIL,
    SPHERE,
    STATED,
    bare_surface,
    chain_of,
    givens,
    insulated_pipe,
)

from calcbook.chain import closing
from calcbook.chain import solve as engine
from calcbook.chain.solve import solve
from calcbook.interface import solve_file

BODIES = {
    "cooler": COOLER,
    "oil": OIL,
    "insulated pipe": insulated_pipe(),
    "insulated pipe, cold sky": insulated_pipe("-20 degC"),
    "plane wall": bare_surface(T_sur="-10 degC"),
    "sphere": SPHERE,
    "stated": STATED,
}


def varied(chain, count: int, seed: int, spread: float = 0.03) -> dict:
    """Every given apart for every sample: temperatures by up to 3 K, all else by up to 3 %."""
    draw = np.random.default_rng(seed)
    inputs = chain.case_inputs("")
    result = {}
    for name, value in inputs.items():
        shift = draw.uniform(-1, 1, count)
        result[name] = value + 3 * shift if name.startswith("given/T_") else value * (1 + spread * shift)
        if "/p_" in name:  # one pressure: every other one makes property curves of its own
            result[name] = value
    return result


def same_bits(first: np.ndarray, second: np.ndarray) -> bool:
    return np.asarray(first, dtype=float).tobytes() == np.asarray(second, dtype=float).tobytes()


@pytest.mark.parametrize("condition", ["clean", "service"])
@pytest.mark.parametrize("name", BODIES)
def test_a_sample_alone_and_among_others(tmp_path, name, condition):
    chain = chain_of(tmp_path, BODIES[name])
    inputs = varied(chain, 12, 3)
    together = solve(chain, inputs, condition)
    assert together.converged.all()
    for index in range(12):
        alone = solve(
            chain,
            {key: np.asarray(value if value.ndim == 0 else value[index]) for key, value in inputs.items()},
            condition,
        )
        for step, value in alone.values.items():
            if isinstance(value, np.ndarray):
                there = np.broadcast_to(together.values[step], (12,))[index]
                assert same_bits(value, there), (step, float(value), float(there))


def test_samples_that_choose_different_methods(tmp_path):
    """Reynolds numbers from 800 to 62 000 pass both bounds of the choice table, 2300 and 4000."""
    chain = chain_of(tmp_path, COOLER)
    inputs = chain.case_inputs("")
    inputs["given/m_hot"] = np.geomspace(0.25, 18.2, 25)
    together = solve(chain, inputs, "service")
    assert together.converged.all()
    reynolds = together.values["tube film/Re"]
    expected = np.where(reynolds < 2300, 0, np.where(reynolds < 4000, 1, 2))
    np.testing.assert_array_equal(together.chosen["tube film"], expected)
    assert set(expected) == {0, 1, 2}
    for index in range(25):
        alone = solve(chain, inputs | {"given/m_hot": inputs["given/m_hot"][index]}, "service")
        assert int(alone.chosen["tube film"]) == expected[index]
        for step in alone.values:
            if isinstance(alone.values[step], np.ndarray) and not step.startswith("tube film/gnielinski"):
                assert same_bits(alone.values[step], np.broadcast_to(together.values[step], (25,))[index]), (
                    step
                )
    laminar = together.values["tube film/gnielinski-laminar-t/h"]
    assert np.isfinite(laminar[expected == 0]).all()


def test_cases_are_samples_like_others(tmp_path):
    body = (
        COOLER
        + """\
cases:
  winter:
    T_cold: {value: 12 degC, source: test}
    T_hot: {value: 66 degC, source: test}
  turndown:
    m_hot: {value: 1.1 kg/s, source: test}
"""
    )
    chain = chain_of(tmp_path, body)
    solved = solve_file(tmp_path / "trial.yaml")
    names = ["", "winter", "turndown"]
    stacked = {
        key: np.stack([chain.case_inputs(name)[key] for name in names]) for key in chain.case_inputs("")
    }
    together = solve(chain, stacked, "service")
    assert len(set(together.chosen["tube film"].tolist())) == 2
    for place, case in enumerate(solved.cases):
        assert case.name == names[place]
        assert case.results["U_service"].value == together.values[chain.results["U"]][place]


def test_shapes_that_broadcast(tmp_path):
    chain = chain_of(tmp_path, COOLER)
    inputs = chain.case_inputs("")
    flows, fouling = np.linspace(5, 20, 4), np.linspace(0, 6e-4, 3)
    grid = solve(chain, inputs | {"given/m_hot": flows[:, None], "given/R_fo": fouling[None, :]}, "service")
    name = chain.results["U"]
    assert grid.values[name].shape == grid.converged.shape == (4, 3)
    for row, flow in enumerate(flows):
        for column, allowance in enumerate(fouling):
            one = solve(chain, inputs | {"given/m_hot": flow, "given/R_fo": allowance}, "service")
            assert one.values[name].shape == ()
            assert same_bits(one.values[name], grid.values[name][row, column])
    row = solve(chain, inputs | {"given/m_hot": flows[:1]}, "service")
    assert row.values[name].shape == (1,)


def test_failed_samples_are_counted_and_disturb_nobody(tmp_path):
    """A flow that is no number and a stream far above the fluid's data fail; the others keep their bits."""
    chain = chain_of(tmp_path, COOLER)
    inputs = chain.case_inputs("")
    flows = np.linspace(4, 20, 9)
    good = solve(chain, inputs | {"given/m_hot": flows}, "service")
    spoiled = flows.copy()
    spoiled[3] = np.nan
    hot = np.full(9, float(inputs["given/T_hot"]))
    hot[6] = 3000.0
    mixed = solve(chain, inputs | {"given/m_hot": spoiled, "given/T_hot": hot}, "service")
    failed = np.isin(np.arange(9), [3, 6])
    np.testing.assert_array_equal(mixed.converged, ~failed)
    name = chain.results["U"]
    reference = solve(
        chain,
        inputs | {"given/m_hot": flows, "given/T_hot": np.full(9, float(inputs["given/T_hot"]))},
        "service",
    )
    assert same_bits(mixed.values[name][~failed], reference.values[name][~failed])
    assert same_bits(reference.values[name], good.values[name])


def test_pieces_join_without_a_seam(tmp_path, monkeypatch):
    """The size of the pieces that samples are solved in changes no bit, also where pieces choose apart."""
    chain = chain_of(tmp_path, COOLER)
    inputs = chain.case_inputs("") | {
        "given/m_hot": np.geomspace(0.25, 18.2, 37),
        "given/T_cold": np.linspace(280, 330, 37),
    }
    whole = solve(chain, inputs, "service")
    monkeypatch.setattr(engine, "PIECE", 5)
    pieces = solve(chain, inputs, "service")
    assert pieces.converged.all()
    for name, value in whole.values.items():
        if isinstance(value, np.ndarray):
            here, there = np.broadcast_to(value, (37,)), np.broadcast_to(pieces.values[name], (37,))
            known = np.isfinite(here.astype(float)) & np.isfinite(there.astype(float))
            assert same_bits(here[known], there[known]), name
    np.testing.assert_array_equal(whole.chosen["tube film"], pieces.chosen["tube film"])


def test_only_what_is_wanted_is_kept(tmp_path):
    chain = chain_of(tmp_path, COOLER)
    inputs = chain.case_inputs("") | {"given/m_hot": np.linspace(4, 20, 7)}
    name = chain.results["U"]
    kept = solve(chain, inputs, "service", keep=(name,))
    assert set(kept.values) == {name}
    assert same_bits(kept.values[name], solve(chain, inputs, "service").values[name])


def test_no_samples_are_refused(tmp_path):
    chain = chain_of(tmp_path, STATED)
    with pytest.raises(ValueError, match="no samples"):
        solve(chain, chain.case_inputs("") | {"given/h_i": np.empty(0)}, "service")


@pytest.mark.parametrize("flow", ["18.2 kg/s", "0.4 kg/s"])
def test_every_method_of_a_situation_closes_or_says_why(tmp_path, flow):
    """Also where the first guess leads below freezing; what gives no positive figure cannot close."""
    chain_of(tmp_path, givens(**(COOLER_GIVENS | {"m_hot": flow})) + COOLER_REST)
    solved = solve_file(tmp_path / "trial.yaml")
    assert len(solved.cross[""]) > 15
    for row in solved.cross[""]:
        assert "does not close" not in row.left_out or row.coefficient <= 0.0, row


@pytest.mark.parametrize("states", [1, 2, 7, 8, 9, 40])
def test_samples_of_few_and_of_many_pressures_are_those_asked_alone(states: int, tmp_path) -> None:
    chain = chain_of(tmp_path, COOLER)
    steps = chain.inner.branches[0].candidates[0].steps
    operation = next(
        step.operation for step in steps if getattr(step.operation, "property_name", "") == "density"
    )
    draw = np.random.default_rng(5)
    pressure = draw.permutation(np.resize(np.linspace(2e5, 6e5, states), 90))
    temperature = draw.uniform(290.0, 370.0, 90)
    found = operation.value({"T": temperature, "p": pressure})
    for place in (0, 1, 44, 89):
        alone = operation.value({"T": np.asarray(temperature[place]), "p": np.asarray(pressure[place])})
        assert found[place] == alone


@pytest.mark.parametrize("name", ["cooler", "oil", "insulated pipe, cold sky", "plane wall"])
def test_a_near_start_leads_to_the_same_answer_in_fewer_passes(tmp_path, name, monkeypatch):
    chain = chain_of(tmp_path, BODIES[name])
    inputs = varied(chain, 40, 5)
    usual = solve(chain, inputs, "service")
    others = solve(chain, varied(chain, 40, 6), "service").unknowns
    moved: list[int] = []
    move = closing._Passes._move

    def counted(self, places, fresh):
        moved.append(len(places))
        move(self, places, fresh)

    monkeypatch.setattr(closing._Passes, "_move", counted)
    again = solve(chain, inputs, "service", start=usual.unknowns)
    at_once, moved[:] = sum(moved), []
    near = solve(chain, inputs, "service", start=others)
    moved[:] = []
    solve(chain, inputs, "service")
    assert at_once < sum(moved) / 2
    for found in (again, near):
        np.testing.assert_array_equal(found.converged, usual.converged)
        # Each answer is known to some hundred roundings of the temperatures that its drops are taken from.
        np.testing.assert_allclose(
            found.figure(chain.results["U"]), usual.figure(chain.results["U"]), rtol=1e-11
        )


def test_a_start_that_cannot_be_one_is_not_taken(tmp_path):
    chain = chain_of(tmp_path, COOLER)
    inputs = varied(chain, 4, 7)
    usual = solve(chain, inputs, "service")
    start = np.array(usual.unknowns)
    start[:, 0] = np.nan
    start[:, 1] *= -1.0
    start[0, 2] = 0.0
    found = solve(chain, inputs, "service", start=start)
    assert found.converged.all()
    for row in (0, 1, 2):
        assert found.figure(chain.results["U"])[row] == usual.figure(chain.results["U"])[row]


def test_a_sample_without_an_answer_gives_no_start(tmp_path):
    chain = chain_of(tmp_path, COOLER)
    inputs = varied(chain, 3, 8)
    flow = next(name for name in inputs if name.endswith("m_hot"))
    inputs[flow] = np.array([inputs[flow][0], np.nan, inputs[flow][2]])
    unknowns = solve(chain, inputs, "service").unknowns
    assert np.isnan(unknowns[:, 1]).all()
    assert np.isfinite(unknowns[:, [0, 2]]).all()
