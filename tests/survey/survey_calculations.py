"""The cooler of `history` as a calculation file, with a survey of a history made up for a test."""

from __future__ import annotations

import csv
from dataclasses import replace
from pathlib import Path

import numpy as np
from history import DAY, HEADS, SHELL_FILM, STATED, WALL, Truth, cells

from calcbook.calcfile import Calculation
from calcbook.chain.outcome import Solved
from calcbook.faults import Collector
from calcbook.interface import read, solve
from calcbook.survey.surveying import surveyed

COOLER = f"""\
calculation: {{number: T-105, title: Trial, plant: Works, revision: A, prepared by: K. L., date: 2026-04-14}}
purpose: Trial of a survey.
givens:
  d_i:    {{value: 15.75 mm, is: tube bore, source: test}}
  d_o:    {{value: 19.05 mm, is: tube outside diameter, source: test}}
  L:      {{value: 4.88 m, is: tube length, source: test}}
  N:      {{value: 62, is: tubes in parallel, source: test}}
  k_w:    {{value: {WALL} W/(m K), is: tube conductivity, source: test, tolerance: {100 * STATED["wall"]:g} %}}
  m_hot:  {{value: 18 kg/s, is: process water flow, source: test, tolerance: {100 * STATED["m"]:g} %}}
  m_cold: {{value: 20 kg/s, is: cooling water flow, source: test, tolerance: {100 * STATED["m"]:g} %}}
  m_ref:  {{value: 20 kg/s, is: flow of the stated film, source: test}}
  T_hi:   {{value: 80 degC, is: process water inlet, source: test, tolerance: {STATED["T"]} K}}
  T_ho:   {{value: 66.6 degC, is: process water outlet, source: test, tolerance: {STATED["T"]} K}}
  T_ci:   {{value: 22 degC, is: cooling water inlet, source: test, tolerance: {STATED["T"]} K}}
  T_co:   {{value: 34.1 degC, is: cooling water outlet, source: test, tolerance: {STATED["T"]} K}}
  h_o:    {{value: {SHELL_FILM} W/(m^2 K), is: shell film, source: test, tolerance: {100 * STATED["shell film"]:g} %}}
  R_fo:   {{value: 0.00035 m^2 K/W, is: allowance so far, source: test}}
streams:
  process water: {{fluid: water, pressure: {{value: 4 bara, source: test}}, flow: m_hot}}
  cooling water: {{fluid: water, pressure: {{value: 4 bara, source: test}}, flow: m_cold}}
geometry: {{shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}}
resistances:
  - {{name: tube film, kind: film, stream: process water, situation: inside-tube, method: gnielinski-1976}}
  - {{name: tube wall, kind: wall, conductivity: k_w}}
  - {{name: deposit, kind: fouling, resistance: R_fo, on: outside}}
  - {{name: shell film, kind: film, stream: cooling water, coefficient: h_o, on: outside, scales with: (m_cold/m_ref)**0.6}}
duty:
  arrangement: counterflow
  hot:  {{stream: process water, inlet: T_hi, outlet: T_ho}}
  cold: {{stream: cooling water, inlet: T_ci, outlet: T_co}}
report: {{U on: outside}}
"""
DRIFT = f"drift per year: {STATED['T drift']} K"
FLOW_DRIFT = f"drift per year: {100 * STATED['m drift']:g} %"
SURVEY = f"""\
survey:
  file: history.csv
  source: test
  time: {{column: time}}
  columns:
    T_hi:   {{column: TI-1111, unit: degC, range: 40 degC .. 110 degC, {DRIFT}, source: test}}
    T_ho:   {{column: TI-1112, unit: degC, range: 20 degC .. 110 degC, {DRIFT}, source: test}}
    T_ci:   {{column: TI-1113, unit: degF, range: 32 degF .. 122 degF, {DRIFT}, source: test}}
    T_co:   {{column: TI-1114, unit: degF, range: 32 degF .. 176 degF, {DRIFT}, source: test}}
    m_hot:  {{column: FI-1111, unit: kg/s, range: 2 kg/s .. 30 kg/s, {FLOW_DRIFT}, source: test}}
    m_cold: {{column: FI-1112, unit: t/h, range: 7 t/h .. 110 t/h, {FLOW_DRIFT}, source: test}}
  heat loss: {{value: {100 * STATED["loss"]:g} %, tolerance: {100 * STATED["loss tolerance"]:g} %, source: test}}
  rules: {{closure: 8 %, steady state: 8 K, flow ratio: 0.6 .. 1.4, gap: 5 days, source: test}}
  cleanings:
    - {{at: 2025-02-03 06:00, source: test}}
    - {{at: 2025-08-27 06:00, source: test}}
  zero: {{over: 10 days, source: test}}
  model: kern-seaton-1959
  propose: {{after: 9 months, percentile: 90 %, source: test}}
"""
ROW_OF_HEADS = [HEADS[name] for name in ("t", "T_hi", "T_ho", "T_ci", "T_co", "m_hot", "m_cold")]
AFTER = 9 / 12 * 365.25 * DAY


def write_history(folder: Path, rows: list[list[str]], heads: list[str] | None = None) -> None:
    """The history beside the calculation file."""
    with (folder / "history.csv").open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow(heads or ROW_OF_HEADS)
        writer.writerows(rows)


def solved_survey(folder: Path, rows: list[list[str]], survey: str = SURVEY, cooler: str = COOLER) -> Solved:
    """The calculation solved with the survey of these rows."""
    write_history(folder, rows)
    path = folder / "trial.yaml"
    path.write_text(cooler + survey, encoding="utf-8")
    return solve(read(path))


def surveyed_alone(folder: Path, solved: Solved, rows: list[list[str]], survey: str = SURVEY) -> Solved:
    """The survey of these rows on a unit that is solved already, without what a calculation is solved for besides."""
    write_history(folder, rows)
    path = folder / "trial.yaml"
    path.write_text(COOLER + survey, encoding="utf-8")
    return _surveyed(solved, read(path))


def with_rows(solved: Solved, shown: dict) -> Solved:
    """A solved calculation with the survey of another history in place of its own."""
    columns = zip(*cells(shown), strict=True)
    texts = {head: "\n".join(column) for head, column in zip(ROW_OF_HEADS, columns, strict=True)}
    return with_history(solved, len(shown["t"]), texts)


def with_history(solved: Solved, count: int, columns: dict[str, str]) -> Solved:
    """The same, from the texts of the columns."""
    calculation = solved.chain.calculation
    assert calculation.survey is not None
    history = replace(calculation.survey.history, rows=count, columns=columns)
    survey = replace(calculation.survey, history=history)
    return _surveyed(solved, replace(calculation, survey=survey))


def _surveyed(solved: Solved, calculation: Calculation) -> Solved:
    collector = Collector()
    found = surveyed(replace(solved, chain=replace(solved.chain, calculation=calculation)), collector)
    collector.stop_if_any()
    assert found is not None
    return found


def true_figures(truth: Truth) -> dict[str, float]:
    """What the fitted figures of a history should be."""
    return {
        "fitted R_inf": truth.R_inf,
        "fitted tau": truth.tau,
        "allowance_fitted": float(truth.deposit(np.array(AFTER))),
    }


def columns_of(shown: dict) -> dict[str, np.ndarray]:
    """What the sensors of a history show, in SI, by symbol of the given."""
    return {
        name: figures + 273.15 if name[0] == "T" else figures
        for name, figures in shown.items()
        if name != "t"
    }
