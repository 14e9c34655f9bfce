"""Samples without an answer beside a probability that is asked for: they count against it."""

from __future__ import annotations

from pathlib import Path
from statistics import NormalDist

import pytest

from calcbook.chain.outcome import Solved
from calcbook.faults import Faults
from calcbook.interface import record_text, solve_file
from calcbook.uncertainty.assessing import _compared
from calcbook.uncertainty.sampling import Interval

FILE = """
calculation:
  {{number: PF-1, title: Parallel flow, plant: Larkmoor Works, revision: A, prepared by: K. L., date: 2026-11-20}}
purpose: Rate a unit whose temperatures nearly cross.
givens:
  d_i: {{value: 15.75 mm, is: bore, source: s}}
  d_o: {{value: 19.05 mm, is: outside diameter, source: s}}
  L: {{value: 4.88 m, is: length, source: s}}
  m_h: {{value: 18 kg/s, is: hot flow, source: s}}
  m_c: {{value: 20 kg/s, is: cold flow, source: s}}
  T_hi: {{value: 80 degC, is: hot inlet, source: s}}
  T_ho: {{value: "{outlet}", is: hot outlet, source: s{tolerance}}}
  T_ci: {{value: 22 degC, is: cold inlet, source: s}}
  h: {{value: 5200 W/(m^2 K), is: both films, source: s}}
fluids:
  warm:
    constants: {{density: 1000 kg/m^3, viscosity: 0.0005 Pa s, conductivity: 0.6 W/(m K), heat capacity: 4200 J/(kg K)}}
    source: s
  cool:
    constants: {{density: 1000 kg/m^3, viscosity: 0.0008 Pa s, conductivity: 0.6 W/(m K), heat capacity: 4180 J/(kg K)}}
    source: s
streams:
  hot: {{fluid: warm, flow: m_h, phase: liquid}}
  cold: {{fluid: cool, flow: m_c, phase: liquid}}
geometry: {{shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: {{value: 2000, source: s}}}}
resistances:
  - {{name: inner film, kind: film, coefficient: h, on: inside, stream: hot, scales with: m_h/m_h}}
  - {{name: wall, kind: wall, conductivity: {{value: 15 W/(m K), source: s}}}}
  - {{name: outer film, kind: film, coefficient: h, on: outside, stream: cold, scales with: m_c/m_c}}
duty:
  arrangement: parallel flow
  hot: {{stream: hot, inlet: T_hi, outlet: T_ho}}
  cold: {{stream: cold, inlet: T_ci}}
uncertainty:
  of: [U_service, area_margin]{correlation}
acceptance:
  - {{that: area_margin >= 0, source: s, probability: 90 %}}
report: {{U on: outside}}
"""
# Parallel flow cannot cool the hot stream below the cold outlet: T_ho = T_ci + C_h/C_c·(T_hi − T_ho) is the lowest.
RATIO = 18.0 * 4200.0 / (20.0 * 4180.0)
LOWEST = (22.0 + RATIO * 80.0) / (1.0 + RATIO)


def solved(
    folder: Path, outlet: float, tolerance: str = ", tolerance: {standard: 1 K}", correlation: str = ""
) -> Solved:
    path = folder / "pf-1.yaml"
    text = FILE.format(outlet=f"{outlet} degC", tolerance=tolerance, correlation=correlation)
    path.write_text(text, encoding="utf-8")
    return solve_file(path)


@pytest.mark.parametrize(("outlet", "is_met"), [(51.0, True), (50.5, False)])
def test_a_sample_in_which_no_area_does_counts_against_the_criterion(
    tmp_path: Path, outlet: float, is_met: bool
) -> None:
    """The area is far more than any sample needs that has one: the criterion fails where temperatures cross, alone."""
    answer = solved(tmp_path, outlet)
    holds = NormalDist().cdf(outlet - LOWEST)
    (item,) = answer.base.criteria
    (chance,) = (one for one in answer.uncertainty.sampling.chances if one.id == item.id)
    # Three standard deviations of the share; near the crossing itself the area needed has no bound.
    assert chance.probability == pytest.approx(holds, abs=3.0 * chance.deviation + 1e-3)
    # Nearly all that do not hold have no answer, and what has none does not hold.
    assert 0.9 * (1.0 - holds) < chance.unanswered <= 1.0 - chance.probability + 1e-12
    assert item.met is is_met and item.reached == chance.probability and item.is_met_as_stated
    assert "of the samples have no answer and count against it" in record_text(answer)


def test_a_limit_that_is_uncertain_itself_is_drawn_with_the_rest(tmp_path: Path) -> None:
    """U follows from stated films and a wall: it is at least a normal limit as often as that lies below it, Phi(0.5)."""
    whole = solved(tmp_path, 55.0).base.results["U_service"].value
    text = FILE.format(outlet="55 degC", tolerance=", tolerance: {standard: 1 K}", correlation="")
    spread = "tolerance: {standard: 40 W/(m^2 K)}"
    limit = f"  U_l: {{value: {whole - 20.0!r} W/(m^2 K), is: least, source: s, {spread}}}\n"
    text = text.replace("fluids:\n", f"{limit}fluids:\n", 1).replace("area_margin >= 0,", "U_service >= U_l,")
    path = tmp_path / "pf-1.yaml"
    path.write_text(text, encoding="utf-8")
    (item,) = solve_file(path).base.criteria
    # Tables of the normal distribution: 0.6915; three standard deviations of 50 000 samples are 0.0062.
    assert item.reached == pytest.approx(0.6915, abs=0.0062)


def test_a_result_that_nothing_uncertain_moves_has_no_samples(tmp_path: Path) -> None:
    """U follows from stated films and a wall, whichever temperature is drawn: its samples differ by rounding."""
    answer = solved(tmp_path, 55.0)
    assert [one.result for one in answer.uncertainty.sampling.results] == ["area_margin"]
    assert "Nothing that is drawn moves U_service." in record_text(answer)


def test_a_margin_above_another_limit_is_held_against_zero_too(tmp_path: Path) -> None:
    path = tmp_path / "pf-1.yaml"
    text = FILE.format(outlet="55 degC", tolerance=", tolerance: {standard: 1 K}", correlation="")
    for limit, ids in (("0", ["criterion 1"]), ("0.1", ["criterion 1", "area_margin > 0"])):
        path.write_text(text.replace("area_margin >= 0,", f"area_margin >= {limit},"), encoding="utf-8")
        answer = solve_file(path)
        assert [one.id for one in answer.uncertainty.sampling.chances] == ids


@pytest.mark.parametrize(
    ("low", "high", "is_validated"), [(0.4, 0.4, True), (0.6, 0.4, False), (0.4, 0.6, False)]
)
def test_both_ends_of_an_interval_are_held_against_the_budget(
    tmp_path: Path, low: float, high: float, is_validated: bool
) -> None:
    """JCGM 101:2008, 8.1: both differences are not larger than the tolerance; here 0.5."""
    budget = solved(tmp_path, 55.0).uncertainty.budgets[0]
    ends = budget.value - budget.expanded - low, budget.value + budget.expanded + high
    found = _compared(budget, Interval(budget.value, budget.standard, *ends, (0.0,) * 4, 0.5, 0.1))
    assert found.is_validated is is_validated


def test_samples_that_stopped_before_they_were_steady_validate_nothing(tmp_path: Path) -> None:
    """JCGM 101:2008, clause 8, compares first order with a propagation that has settled."""
    one = solved(tmp_path, 51.0).uncertainty.sampling.results[0]
    settled, unsettled = (0.5 * one.aim,) * 4, (0.5 * one.aim,) * 3 + (1.5 * one.aim,)
    assert one._replace(is_validated=True, spread=settled).verdict == "validated"
    assert one._replace(is_validated=True, spread=unsettled).verdict == "not settled"
    assert one._replace(is_validated=False, spread=unsettled).verdict == "not validated"


def test_a_correlation_without_any_tolerance_is_a_fault_of_both_givens(tmp_path: Path) -> None:
    correlation = "\n  correlation:\n    - {between: [T_hi, T_ho], r: 0.9, source: s}"
    with pytest.raises(Faults) as error:
        solved(tmp_path, 55.0, "", correlation)
    told = [(fault.code, fault.found) for fault in error.value.faults]
    assert told == [("correlation-without-tolerance", "T_hi"), ("correlation-without-tolerance", "T_ho")]
