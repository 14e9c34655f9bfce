"""Units other than the counterflow cooler: a shell with two tube passes, and a stream that keeps its temperature."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from history import BORE, DAY, LENGTH, OUTSIDE, TUBES, WALL, Truth, cells, history, tube_film, water
from ht import F_LMTD_Fakheri
from survey_calculations import COOLER, SURVEY, columns_of, solved_survey, surveyed_alone, write_history

from calcbook.chain.outcome import Solved
from calcbook.interface import read, record_text, solve
from calcbook.survey.resistance import LOSS, relations_of, resistances, slopes, worked

AREA = np.pi * OUTSIDE * LENGTH * TUBES


def test_a_shell_of_two_passes_takes_its_f_row_by_row(tmp_path: Path, solved: Solved) -> None:
    columns = columns_of(history(Truth(), 4, rows=30, noise=0.0))
    # Hotter cold inlets keep the outlets from crossing far: F stays above 0.8.
    columns["T_ci"], columns["T_co"] = columns["T_ci"] + 12.0, columns["T_co"] + 4.0
    path = tmp_path / "trial.yaml"
    path.write_text(
        COOLER.replace("arrangement: counterflow", "arrangement: shell and tube"), encoding="utf-8"
    )
    shell = resistances(solve(read(path)).chain, columns, 0.0)
    counter = resistances(solved.chain, columns, 0.0)
    # ht 1.2.0, F after Fakheri for one shell.
    expected = np.array(
        [
            F_LMTD_Fakheri(
                columns["T_ci"][row], columns["T_co"][row], columns["T_hi"][row], columns["T_ho"][row]
            )
            for row in range(30)
        ]
    )
    assert shell.factor == pytest.approx(expected, rel=1e-9)
    # U = Q/(A F LMTD): the same heat through a smaller difference is a larger U.
    assert shell.coefficient * shell.factor == pytest.approx(counter.coefficient, rel=1e-12)
    assert (counter.factor == 1.0).all()


STEAM_FILM, STEAM_TEMPERATURE = 9000.0, 120.0
STEAM = f"""\
calculation: {{number: T-107, title: Trial, plant: Works, revision: A, prepared by: K. L., date: 2026-04-14}}
purpose: Trial of a survey with a stream that condenses.
givens:
  d_i:    {{value: 15.75 mm, is: tube bore, source: test}}
  d_o:    {{value: 19.05 mm, is: tube outside diameter, source: test}}
  L:      {{value: 4.88 m, is: tube length, source: test}}
  N:      {{value: 62, is: tubes in parallel, source: test}}
  k_w:    {{value: {WALL} W/(m K), is: tube conductivity, source: test}}
  p_s:    {{value: 198.67 kPa, is: steam pressure, source: test}}
  m_cold: {{value: 18 kg/s, is: water flow, source: test, tolerance: 1.5 %}}
  T_ci:   {{value: 30 degC, is: water inlet, source: test, tolerance: 0.25 K}}
  T_co:   {{value: 55 degC, is: water outlet, source: test, tolerance: 0.25 K}}
  h_o:    {{value: {STEAM_FILM} W/(m^2 K), is: steam film, source: test, tolerance: 15 %}}
streams:
  water: {{fluid: water, pressure: {{value: 4 bara, source: test}}, flow: m_cold}}
  steam: {{fluid: water, temperature: saturation, pressure: p_s, phase: gas}}
geometry: {{shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}}
resistances:
  - {{name: tube film, kind: film, stream: water, situation: inside-tube, method: gnielinski-1976}}
  - {{name: tube wall, kind: wall, conductivity: k_w}}
  - {{name: steam film, kind: film, stream: steam, coefficient: h_o, on: outside}}
duty:
  arrangement: counterflow
  hot:  {{stream: steam}}
  cold: {{stream: water, inlet: T_ci, outlet: T_co}}
report: {{U on: outside}}
survey:
  file: history.csv
  source: test
  time: {{column: day, unit: days}}
  columns:
    T_ci: TI-1 in degC
    T_co: TI-2 in degC
    m_cold: FI-1 in kg/s
  rules: {{closure: 8 %, steady state: 8 K, source: test}}
  cleanings: [{{at: 0 days, source: test}}]
  zero: {{over: 8 days, source: test}}
  model: fouling-linear
  propose: {{after: 150 days, percentile: 90 %, source: test}}
"""


def test_heat_that_only_one_stream_shows_is_taken_from_it(tmp_path: Path) -> None:
    """A heater whose steam keeps its temperature: the water's heat is the duty, and no closure is tested."""
    rate = 2e-4 / (150 * DAY)
    days = np.arange(150.0)
    flow = 18.0 * (1 + 0.08 * np.sin(days / 9.0))
    inlet = 30.0 + 4.0 * np.sin(days / 23.0)
    outlet, wall = inlet + 20.0, inlet + 50.0
    for _ in range(60):
        bulk = (inlet + outlet) / 2
        inner = OUTSIDE / BORE / tube_film(flow, bulk, wall)
        rest = OUTSIDE * np.log(OUTSIDE / BORE) / (2 * WALL) + 1 / STEAM_FILM
        overall = 1 / (inner + rest + rate * days * DAY)
        wall = bulk + (STEAM_TEMPERATURE - bulk) * inner / (inner + rest)
        units = overall * AREA / (flow * water(bulk)[1])
        outlet = STEAM_TEMPERATURE - (STEAM_TEMPERATURE - inlet) * np.exp(-units)
    rows = [
        [f"{day:g}", f"{one:.4f}", f"{other:.4f}", f"{mass:.5f}"]
        for day, one, other, mass in zip(days, inlet, outlet, flow, strict=True)
    ]
    write_history(tmp_path, rows, ["day", "TI-1", "TI-2", "FI-1"])
    path = tmp_path / "trial.yaml"
    path.write_text(STEAM, encoding="utf-8")
    solved = solve(read(path))
    outcome = solved.survey
    assert outcome is not None
    # Left: 0.07 % of the water's conductivity, and 198.67 kPa for 120.00 degC.
    assert outcome.figure("fitted r").value == pytest.approx(rate, rel=3e-3)
    assert sum(rule.count for rule in outcome.rules) == 0
    limits = {rule.id: rule.limit for rule in outcome.rules}
    assert limits["heat balance closure"] == "not applied: only one stream shows its heat"
    assert "not applied" in record_text(solved)


def test_a_loss_of_the_hot_stream_acts_in_full_where_it_alone_shows_its_heat(tmp_path: Path) -> None:
    """Q = Q_hot (1 - x) passes the wall, so U is by that part smaller, and dR_f/dx = 1/(U (1 - x)); by hand."""
    text = COOLER.replace(", flow: m_cold}", "}")
    text = text.replace(", scales with: (m_cold/m_ref)**0.6", "")
    path = tmp_path / "trial.yaml"
    path.write_text(text, encoding="utf-8")
    chain = solve(read(path)).chain
    columns = columns_of(history(Truth(), 4, rows=30, noise=0.0))
    del columns["m_cold"]
    without, with_loss = (resistances(chain, columns, loss) for loss in (0.0, 0.06))
    assert with_loss.coefficient == pytest.approx(0.94 * without.coefficient, rel=1e-13)
    assert np.isnan(with_loss.closure).all()
    # No limit of a balance that is not there.
    assert not {limit.id for limit, _ in with_loss.outside} & {"heat balance", "good heat balance"}
    moved = slopes(chain, columns, 0.06)[LOSS]
    assert moved == pytest.approx(1.0 / (with_loss.coefficient * 0.94), rel=1e-12)
    _, steps = worked(chain, {name: figures[:1] for name, figures in columns.items()}, 0.06)
    assert [step.symbol for step in steps] == ["Q_h", "Q_c", "Q", "U", "R_f"]
    assert relations_of(chain).startswith("Q_h = Q_hot·(1 − x); Q_c = Q_h; Q = ")


def test_a_loss_of_the_hot_stream_does_not_act_on_the_heat_of_the_cold_one(tmp_path: Path) -> None:
    """What the water takes up has passed the wall."""
    path = tmp_path / "trial.yaml"
    path.write_text(STEAM.split("survey:")[0], encoding="utf-8")
    chain = solve(read(path)).chain
    columns = {
        "T_ci": np.full(3, 303.15),
        "T_co": np.array([325.0, 327.0, 329.0]),
        "m_cold": np.full(3, 18.0),
    }
    without, with_loss = (resistances(chain, columns, loss) for loss in (0.0, 0.06))
    assert (with_loss.coefficient == without.coefficient).all()
    assert (slopes(chain, columns, 0.06)[LOSS] == 0.0).all()
    assert relations_of(chain).startswith("Q_h = Q_c; Q = ")


def test_parallel_flow_is_crossed_where_counterflow_is_not(tmp_path: Path, solved: Solved) -> None:
    rows = cells(history(Truth(errors={"loss": 0.01}), 2, rows=80))
    # In the last row the cold outlet is hotter than the hot one: counterflow can do that.
    rows[-1][4] = f"{1.8 * (float(rows[-1][2]) + 0.5) + 32.0:.2f}"
    open_rules = SURVEY.replace("closure: 8 %, steady state: 8 K, ", "")
    counter = surveyed_alone(tmp_path, solved, rows, open_rules).survey
    parallel = solved_survey(
        tmp_path, rows, open_rules, COOLER.replace("counterflow", "parallel flow")
    ).survey
    assert counter is not None and parallel is not None
    found = [
        next(rule.count for rule in outcome.rules if rule.id == "temperature cross")
        for outcome in (counter, parallel)
    ]
    assert found == [0, 1]
