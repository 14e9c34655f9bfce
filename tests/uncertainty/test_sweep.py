"""Sweeps: closed forms of a plane wall, samples without an answer, and what the record shows of them."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import product
from pathlib import Path

import pytest
from small_flips import solved_of

from calcbook.chain.outcome import Solved
from calcbook.chain.sweep_outcome import Sweep
from calcbook.record import digest_of, record_text, results_data, software_of

WALL = """
    givens:
      h_1:  {value: 2000 W/(m^2 K), is: inner coefficient, source: test}
      h_2:  {value: 500 W/(m^2 K), is: outer coefficient, source: test}
      R_f:  {value: 0.0002 m^2 K/W, is: allowance, source: test}
    geometry: {shape: plane, area: {value: 3 m^2, source: test}}
    resistances:
      - {name: inner film, kind: film, coefficient: h_1, on: inside}
      - {name: deposit, kind: fouling, resistance: R_f, on: inside}
      - {name: wall, kind: wall, thickness: {value: 2 mm, source: test}, conductivity: {value: 16 W/(m K), source: test}}
      - {name: outer film, kind: film, coefficient: h_2, on: outside}
    report: {U on: outside}
    acceptance:
      - {that: U_service >= 350 W/(m^2 K), source: test}
"""
ONE = "    sweep: {R_f: {from: 0 m^2 K/W, to: 0.0006 m^2 K/W, steps: 13}}\n"
TWO = """
    sweep:
      R_f: {from: 0 m^2 K/W, to: 0.0006 m^2 K/W, steps: 4}
      h_2: {from: 400 W/(m^2 K), to: 600 W/(m^2 K), steps: 3}
      of: [U_service, cleanliness]
"""
# Water at 4 bar from 20 to 160 degC: above 143.6 degC (IAPWS-IF97 saturation at 4 bar) a stated liquid is vapour.
HOT = """
    givens:
      T_w: {value: 60 degC, is: water temperature, source: test}
      T_o: {value: 15 degC, is: outer temperature, source: test}
      m_w: {value: 6 kg/s, is: water flow, source: test}
      h_o: {value: 3000 W/(m^2 K), is: outer coefficient, source: test}
    streams:
      water: {fluid: water, temperature: T_w, pressure: {value: 4 bara, source: test}, flow: m_w, phase: liquid}
    geometry:
      shape: tube
      inside diameter: {value: 16 mm, source: test}
      outside diameter: {value: 20 mm, source: test}
      length: {value: 3 m, source: test}
      parallel: {value: 40, source: test}
    resistances:
      - {name: tube film, kind: film, stream: water, situation: inside-tube, method: dittus-boelter-mcadams}
      - {name: tube wall, kind: wall, conductivity: {value: 16 W/(m K), source: test}}
      - {name: outer film, kind: film, coefficient: h_o, on: outside, temperature: T_o}
    report: {U on: outside}
"""


def sweep_in(solved: Solved) -> Sweep:
    assert solved.sweep is not None
    return solved.sweep


def section(text: str) -> str:
    """The part of the record about the sweep."""
    return text.partition("### Sweep over")[2].partition("\n### ")[0]


def test_every_sample_is_the_closed_form(tmp_path: Path) -> None:
    found = sweep_in(solved_of(tmp_path, WALL + ONE))
    (axis,) = found.axes
    assert axis.figures == pytest.approx([0.00005 * place for place in range(13)], rel=1e-12)
    assert [result.name for result in found.results] == ["U_service", "U_clean"]
    service, clean = found.results
    for allowance, value in zip(axis.figures, service.values, strict=True):
        assert value == pytest.approx(1.0 / (5e-4 + allowance + 1.25e-4 + 2e-3), rel=1e-13)
    assert clean.values == pytest.approx([1.0 / 2.625e-3] * 13, rel=1e-13)
    assert service.limits == (("criterion 1", 350.0),)


def test_what_is_counted_is_swept_by_whole_numbers(tmp_path: Path) -> None:
    text = HOT.replace("parallel: {value: 40, source: test}", "parallel: N").replace(
        "    givens:\n", "    givens:\n      N: {value: 40, is: tubes, source: test}\n"
    )
    found = sweep_in(solved_of(tmp_path, text + "    sweep: {N: {from: 1, to: 12, steps: 8}}\n"))
    assert found.axes[0].figures == (1.0, 3.0, 4.0, 6.0, 7.0, 9.0, 10.0, 12.0)


def test_of_two_givens_the_second_runs_fastest(tmp_path: Path) -> None:
    found = sweep_in(solved_of(tmp_path, WALL + TWO))
    service, cleanliness = found.results
    grid = list(product(found.axes[0].figures, found.axes[1].figures))
    assert found.samples == len(grid) == 12
    for (allowance, outer), overall, ratio in zip(grid, service.values, cleanliness.values, strict=True):
        clean = 5e-4 + 1.25e-4 + 1.0 / outer
        assert overall == pytest.approx(1.0 / (clean + allowance), rel=1e-13)
        assert ratio == pytest.approx(clean / (clean + allowance), rel=1e-13)


def test_a_sample_without_an_answer_says_why(tmp_path: Path) -> None:
    found = sweep_in(solved_of(tmp_path, HOT + "    sweep: {T_w: {from: 20 degC, to: 160 degC, steps: 8}}\n"))
    assert found.missing[:7] == ("",) * 7
    assert found.missing[7] == "water: liquid is vapour"
    assert math.isnan(found.results[0].values[7]) and math.isfinite(found.results[0].values[6])


def test_what_is_measured_is_swept_between_whole_numbers_too(tmp_path: Path) -> None:
    """In SI both ends are whole: 400 and 401 W/(m² K)."""
    sweep = "    sweep: {h_2: {from: 400 W/(m^2 K), to: 401 W/(m^2 K), steps: 3}}\n"
    found = sweep_in(solved_of(tmp_path, WALL + sweep))
    assert found.axes[0].figures == (400.0, 400.5, 401.0)


def test_a_limit_that_is_a_given_is_no_line_beside_the_samples(tmp_path: Path) -> None:
    """A sample may move it: only limits written as figures are drawn."""
    body = WALL.replace("U_service >= 350 W/(m^2 K)", "U_service >= U_min").replace(
        "    geometry:", "      U_min: {value: 350 W/(m^2 K), is: least U, source: test}\n    geometry:"
    )
    assert sweep_in(solved_of(tmp_path, body + ONE)).results[0].limits == ()


def test_a_sample_outside_a_range_is_named_and_counted(tmp_path: Path) -> None:
    solved = solved_of(tmp_path, HOT + "    sweep: {m_w: {from: 0.5 kg/s, to: 6.5 kg/s, steps: 4}}\n")
    found = sweep_in(solved)
    turbulent = "tube film / dittus-boelter-mcadams / turbulent, service"
    reynolds = [4.0 * flow / 40.0 / (math.pi * 0.016 * 4.66e-4) for flow in found.axes[0].figures]
    # Viscosity of water at 60 degC: 4.66e-4 Pa s (IAPWS 2008, table of the release).
    assert [turbulent in names for names in found.outside] == [value < 1e4 for value in reynolds]
    count = sum(bool(names) for names in found.outside)
    assert 0 < count < 4
    assert f"{count} sample{'s lie' if count > 1 else ' lies'} outside a range limit" in record_text(solved)


def test_the_record_shows_table_and_plot(tmp_path: Path) -> None:
    text = section(record_text(solved_of(tmp_path, WALL + ONE)))
    lines = text.split("\n")
    rows = [line for line in lines if line.startswith("| ")]
    assert len(rows) == 1 + 13
    plot = text.partition("```\n")[2].partition("```")[0].rstrip("\n").split("\n")
    assert plot[0].startswith("U_service: 310.08 to 380.95 W/(m²·K) from left to right; : criterion 1 at 350")
    drawn = [line.partition("|")[2] for line in plot[2:]]
    assert len(drawn) == 13 and all(line.count("o") == 1 for line in drawn)
    # U falls with the allowance: each mark stands left of the one before, from the right end to the left.
    places = [line.index("o") for line in drawn]
    assert places[0] == 60 and places[-1] == 0 and places == sorted(places, reverse=True)
    assert "U_clean is the same in every sample" in text


def test_the_record_of_two_givens_has_a_grid_for_each_result(tmp_path: Path) -> None:
    text = section(record_text(solved_of(tmp_path, WALL + TWO)))
    assert "| R_f, m²·K/W; across h_2, W/(m²·K) | 400 | 500 | 600 |" in text
    assert text.count("h_2, W/(m²·K): a 400, b 500, c 600") == 2


def test_the_results_file_holds_the_sweep(tmp_path: Path) -> None:
    solved = solved_of(tmp_path, WALL + TWO)
    digest = digest_of(solved)
    data = results_data(solved, digest, software_of(digest))["sweep"]
    assert isinstance(data, dict)
    assert [given["symbol"] for given in data["givens"]] == ["R_f", "h_2"]
    assert len(data["results"]["U_service"]["values"]) == 12
    without = results_data(replace(solved, sweep=None), digest, software_of(digest))
    assert without["sweep"] is None


def test_a_sweep_changes_no_other_figure(tmp_path: Path) -> None:
    plain, swept = solved_of(tmp_path, WALL), solved_of(tmp_path, WALL + ONE)
    assert plain.sweep is None and "Sweep over" not in record_text(plain)
    assert digest_of(plain).results == digest_of(swept).results
    assert digest_of(plain).meaning != digest_of(swept).meaning


def test_surfaces_at_the_ends_and_largest_allowances_are_swept(tmp_path: Path) -> None:
    from test_flips import COOLER

    names = ("largest_allowance deposit", "T outside surface service at the hot inlet")
    asked = f"    sweep: {{h_c: {{from: 3000 W/(m^2 K), to: 5000 W/(m^2 K), steps: 3}}, of: [{', '.join(names)}]}}\n"
    solved = solved_of(tmp_path, COOLER + asked)
    sweep = sweep_in(solved)
    for row, coefficient in enumerate((3000, 4000, 5000)):
        other = solved_of(tmp_path, COOLER.replace("h_c: {value: 4000", f"h_c: {{value: {coefficient}"))
        for name, result in zip(names, sweep.results, strict=True):
            # The same circuits, closed from other starts: they agree to the rounding of a temperature.
            assert result.name == name
            assert result.values[row] == pytest.approx(other.base.results[name].value, rel=1e-11)


# What the inspection found, less what the plant standard allows for the other side.
LESS = WALL.replace(
    "R_f:  {value: 0.0002 m^2 K/W, is: allowance, source: test}",
    "R_a:  {value: 0.0003 m^2 K/W, is: both deposits, source: test}\n"
    "      R_b:  {value: 0.0001 m^2 K/W, is: deposit of the other side, source: test}",
).replace("    geometry:", "    derived: {R_f: {is: deposit, relation: R_a - R_b}}\n    geometry:")


def test_a_derived_figure_that_cannot_be_has_no_answer_in_a_sweep(tmp_path: Path) -> None:
    body = LESS + "    sweep: {R_b: {from: 0 m^2 K/W, to: 0.0006 m^2 K/W, steps: 7}, of: [U_service]}\n"
    (result,) = solved_of(tmp_path, body).sweep.results
    clean = 1.0 / 2000.0 + 0.002 / 16.0 + 1.0 / 500.0
    expected = [1.0 / (clean + 0.0003 - 0.0001 * step) for step in range(4)]
    assert list(result.values[:4]) == pytest.approx(expected)
    assert all(math.isnan(value) for value in result.values[4:])


def test_a_factor_of_a_flow_that_is_not_there_has_no_answer_in_a_sweep(tmp_path: Path) -> None:
    body = WALL.replace(
        "coefficient: h_2, on: outside}", "coefficient: h_2, on: outside, scales with: (m/m_ref)**0.6}"
    ).replace(
        "    geometry:",
        "      m: {value: 2 kg/s, is: flow, source: test}\n"
        "      m_ref: {value: 2 kg/s, is: flow of the stated coefficient, source: test}\n    geometry:",
    )
    sweep = solved_of(tmp_path, body + "    sweep: {m_ref: {from: 0 kg/s, to: 2 kg/s, steps: 3}}\n").sweep
    assert [bool(reason) for reason in sweep.missing] == [True, False, False]
    assert sweep.missing[0] == "the factor that outer film scales with cannot be"
