"""Samples in which the circuit does not close at an end of the unit: water that freezes at its wall there."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from calcbook.chain.ends import OPEN_END
from calcbook.chain.flips_outcome import LIMIT
from calcbook.chain.measured import measured
from calcbook.chain.outcome import Solved
from calcbook.chain.samples import evaluate_samples
from calcbook.interface import record_text, solve_file
from calcbook.uncertainty.samples import OUTSIDE_ANY, ChainModel

FILE = """
calculation: {{number: CW-1, title: Cooler, plant: Larkmoor Works, revision: A, prepared by: K. L., date: 2026-11-26}}
purpose: Cool water with glycol that is colder than ice.
givens:
  T_hi: {{value: 14 degC, is: water inlet, source: s}}
  T_ho: {{value: 9 degC, is: water outlet, source: s}}
  T_ci: {{value: "{cold}", is: glycol inlet, source: s}}
  m_hot: {{value: 18.2 kg/s, is: water flow, source: s}}
  m_cold: {{value: 20.6 kg/s, is: glycol flow, source: s}}
  h_o: {{value: 5200 W/(m^2 K), is: shell-side coefficient, source: s}}
streams:
  hot: {{fluid: water, pressure: {{value: 4 bara, source: s}}, flow: m_hot}}
  cold:
    fluid: {{mixture: ethylene glycol + water, mass fraction: {{value: 45 %, source: s}}}}
    pressure: {{value: 3 bara, source: s}}
    flow: m_cold
geometry:
  shape: tube
  inside diameter: {{value: 15.75 mm, source: s}}
  outside diameter: {{value: 19.05 mm, source: s}}
  length: {{value: 4.88 m, source: s}}
  parallel: {{value: 62, source: s}}
resistances:
  - {{name: tube-side film, kind: film, stream: hot, situation: inside-tube}}
  - {{name: tube-side deposit, kind: fouling, resistance: {{value: 0.00009 m^2 K/W, source: s}}, on: inside}}
  - {{name: tube wall, kind: wall, conductivity: {{value: 14 W/(m K), source: s}}}}
  - {{name: shell-side deposit, kind: fouling, resistance: {{value: 0.00035 m^2 K/W, source: s}}, on: outside}}
  - {{name: shell-side film, kind: film, coefficient: h_o, on: outside, stream: cold}}
duty:
  arrangement: counterflow
  hot: {{stream: hot, inlet: T_hi, outlet: T_ho}}
  cold: {{stream: cold, inlet: T_ci}}
{more}report: {{U on: outside}}
"""
CIRCUIT = f"{OPEN_END} at the hot outlet"
# Clean, the glycol at −10 °C leaves the water's wall at the hot outlet above freezing and that at −17 °C does not: by
# hand 9 °C − (9 °C − T_ci)·U·(d_o/d_i)/h, with the clean coefficients of the record (test below).
WARM, ICY = -10.0, -17.0


def solved(folder: Path, cold: float, more: str = "", for_record: bool = False) -> Solved:
    path = folder / "cw-1.yaml"
    path.write_text(FILE.format(cold=f"{cold} degC", more=more), encoding="utf-8")
    return solve_file(path, for_record=for_record)


def wall_by_hand(answer: Solved, cold: float) -> float:
    """The clean surface of the water at the hot outlet in °C, with the coefficients at the means."""
    overall, film = (answer.base.results[name].value for name in ("U_clean", "h tube-side film clean"))
    return 9.0 - (9.0 - cold) * (overall / film) * (19.05 / 15.75)


def test_drawn_samples_count_an_end_that_does_not_close(tmp_path: Path) -> None:
    answer = solved(tmp_path, WARM)
    assert wall_by_hand(answer, WARM) > 0.5 and wall_by_hand(solved(tmp_path, ICY), ICY) < -0.5
    inputs = answer.chain.case_inputs("")
    results = [measured(answer.chain, "U_clean")]
    model = ChainModel(answer.chain, inputs, answer.base.solutions, results, limits=True)
    sampled = model({"given/T_ci": np.array([WARM, ICY]) + 273.15})
    assert sampled.marks[f"clean: {CIRCUIT}"].tolist() == [False, True]
    assert sampled.marks[OUTSIDE_ANY].tolist() == [False, True]
    # U stands at the means, where both close.
    assert np.isfinite(sampled.outputs["U_clean"]).all()


def test_a_sweep_names_an_end_that_does_not_close(tmp_path: Path) -> None:
    swept = f"sweep:\n  of: [U_clean]\n  T_ci: {{from: {WARM} degC, to: {ICY} degC, steps: 2}}\n"
    answer = solved(tmp_path, WARM, swept, for_record=True)
    assert answer.sweep.missing == ("", "")
    assert [f"{CIRCUIT}, clean" in outside for outside in answer.sweep.outside] == [False, True]


def test_an_end_that_is_open_as_it_stands_hides_no_flip(tmp_path: Path) -> None:
    """The clean circuit would close again in glycol of −13 °C, which is nearer than where the margin is lost."""
    answer = solved(tmp_path, ICY, for_record=True)
    limits = answer.flips.of_kind(LIMIT)
    assert not any(flip.was == "not evaluable" for flip in limits)
    warmer = next(flip for flip in limits if flip.input.symbol == "T_ci")
    assert (warmer.id, warmer.becomes) == ("duty / area / margin", "outside")


def test_verdicts_of_samples_at_an_open_end_are_those_of_the_record(tmp_path: Path) -> None:
    chain = solved(tmp_path, WARM).chain
    inputs = {name: np.asarray(value) for name, value in chain.case_inputs("").items()}
    samples = evaluate_samples(chain, {**inputs, "given/T_ci": np.array([WARM, ICY]) + 273.15})
    verdict = samples.verdicts[LIMIT, CIRCUIT, "clean"]
    assert [verdict.words[code] for code in samples.codes(verdict.key)] == ["within", "not evaluable"]
    (check,) = (one for one in solved(tmp_path, ICY).base.checks if one.id == CIRCUIT)
    assert (check.condition, check.state) == ("clean", "not evaluable")


def test_a_criterion_on_a_surface_that_is_not_known_is_not_met(tmp_path: Path) -> None:
    asked = "acceptance:\n  - {that: 'T inside surface clean at the hot outlet >= 1 degC', source: s}\n"
    warm, icy = (solved(tmp_path, cold, asked) for cold in (WARM, ICY))
    assert [one.base.criteria[0].met for one in (warm, icy)] == [True, False]
    words = "not known: the circuit does not close there"
    day = icy.rating.answered[""]
    assert day is not None
    (clean,) = day.criteria
    assert icy.base.criteria[0].words == clean.words == words and not clean.met
    assert f"| criterion 1 | clean | {clean.that} | {words} |" in record_text(icy)
