"""Fouling that grows in service as a term: the resistance at a time, its deposit, clean against service."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from small_calculations import chain_of, givens

from calcbook.chain.sensitivity import derivatives
from calcbook.chain.solve import solve
from calcbook.chain.types import CLEAN, SERVICE
from calcbook.interface import record_text, solve_file

DAY = 86400.0
PIPE = {
    "d_i": "14.8 mm",
    "d_o": "19.05 mm",
    "L": "4.88 m",
    "N": "62",
    "m": "18 kg/s",
    "T": "74 degC",
    "R_end": "0.0004 m^2 K/W",
    "t_after": "6 months",
}
GROWTH = "growth: {model: kern-seaton-1959, R_inf: R_end, tau: {value: 60 day, source: test}, after: t_after}"


def tube(fouling: str, more: str = "", **figures: str) -> str:
    """Water in tubes with a deposit, and a stated film outside."""
    return (
        givens(**{**PIPE, **figures})
        + f"""\
streams:
  hot: {{fluid: water, temperature: T, pressure: {{value: 4 bara, source: test}}, flow: m}}
geometry: {{shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}}
resistances:
  - {{name: tube film, kind: film, stream: hot, situation: inside-tube}}
  - {{name: scale, kind: fouling, {fouling}}}
  - {{name: wall, kind: wall, conductivity: {{value: 16 W/(m K), source: test}}}}
  - name: shell film
    kind: film
    coefficient: {{value: 5000 W/(m^2 K), source: test}}
    temperature: {{value: 31 degC, source: test}}
report: {{U on: outside}}
{more}"""
    )


def overall(chain, condition: str, **inputs: object) -> np.ndarray:  # type: ignore[no-untyped-def]
    changed = {f"given/{name}": np.asarray(value) for name, value in inputs.items()}
    return solve(chain, chain.case_inputs("") | changed, condition).values[chain.results["U"]]


def test_the_resistance_is_that_of_the_card_at_the_time(tmp_path: Path) -> None:
    """R_inf·(1 − exp(−t/tau)) at half of 365.25 days, by hand."""
    chain = chain_of(tmp_path, tube(GROWTH))
    expected = 0.0004 * -math.expm1(-365.25 / 2 / 60)
    solution = solve(chain, chain.case_inputs(""), SERVICE)
    assert solution.number("scale/R") == pytest.approx(expected, rel=1e-14)
    stated = chain_of(
        tmp_path, tube(f"resistance: {{value: {expected!r} m^2 K/W, source: test}}", R_end="1 m^2 K/W")
    )
    assert overall(chain, SERVICE) == pytest.approx(overall(stated, SERVICE), rel=1e-14)
    assert overall(chain, CLEAN) == pytest.approx(overall(stated, CLEAN), rel=1e-14)


def test_a_growing_deposit_narrows_as_a_stated_one_of_its_thickness(tmp_path: Path) -> None:
    """The thickness whose cylindrical layer has the resistance: the stated deposit finds the resistance again."""
    deposit = "deposit: {conductivity: {value: 1.2 W/(m K), source: test}, narrows: yes}"
    chain = chain_of(tmp_path, tube(f"{GROWTH}, {deposit}"))
    resistance = solve(chain, chain.case_inputs(""), SERVICE).number("scale/R")
    thickness = 0.0148 / 2 * -math.expm1(-2 * 1.2 * resistance / 0.0148)
    stated = chain_of(
        tmp_path,
        tube(
            f"deposit: {{thickness: {{value: {thickness!r} m, source: test}},"
            " conductivity: {value: 1.2 W/(m K), source: test}, narrows: yes}"
        ),
    )
    assert overall(chain, SERVICE) == pytest.approx(overall(stated, SERVICE), rel=1e-12)
    assert overall(chain, CLEAN) == pytest.approx(overall(stated, CLEAN), rel=1e-12)
    assert overall(chain, SERVICE) > overall(chain_of(tmp_path, tube(GROWTH)), SERVICE)


def test_times_are_solved_together_and_the_clean_unit_knows_no_time(tmp_path: Path) -> None:
    deposit = "deposit: {conductivity: {value: 1.2 W/(m K), source: test}, narrows: yes}"
    chain = chain_of(tmp_path, tube(f"{GROWTH}, {deposit}"))
    times = np.array([0.0, 10 * DAY, 60 * DAY, 400 * DAY])
    together = overall(chain, SERVICE, t_after=times)
    assert np.array_equal(together, [overall(chain, SERVICE, t_after=time) for time in times])
    assert (np.diff(together) < 0).all()
    assert together[0] == pytest.approx(overall(chain, CLEAN), rel=1e-14)
    assert (overall(chain, CLEAN, t_after=times) == overall(chain, CLEAN)).all()


def test_the_slope_by_the_time_is_that_of_the_difference(tmp_path: Path) -> None:
    """Central differences a thousandth of the time apart: 1e-5 is their second order."""
    deposit = "deposit: {conductivity: {value: 1.2 W/(m K), source: test}, narrows: yes}"
    chain = chain_of(tmp_path, tube(f"{GROWTH}, {deposit}", t_after="40 day"))
    name, time = chain.results["U"], 40 * DAY
    slope = derivatives(chain, chain.case_inputs(""), SERVICE, (name,))[name]["given/t_after"]
    near = overall(chain, SERVICE, t_after=np.array([0.999, 1.001]) * time)
    assert float(slope) == pytest.approx((near[1] - near[0]) / (0.002 * time), rel=1e-5)
    clean = derivatives(chain, chain.case_inputs(""), CLEAN, (name,))[name]
    assert float(np.asarray(clean.get("given/t_after", 0.0))) == 0.0


def test_a_case_restates_the_time_and_the_record_says_what_a_month_is(tmp_path: Path) -> None:
    path = tmp_path / "gr-1.yaml"
    chain_of(tmp_path, tube(GROWTH))  # a fault in the body would be told here
    head = (
        "calculation: {number: GR-1, title: t, plant: p, revision: A, prepared by: K. L., date: 2026-11-20}\n"
    )
    more = "cases:\n  early: {t_after: {value: 10 day, source: test}}\n"
    path.write_text(head + "purpose: test\n" + tube(GROWTH, more), encoding="utf-8")
    solved = solve_file(path)
    early = next(case for case in solved.cases if case.name == "early")
    assert early.solutions[SERVICE].number("scale/R") == pytest.approx(
        0.0004 * -math.expm1(-10 / 60), rel=1e-14
    )
    ids = {item.id for item in solved.base.assumptions}
    assert {"scale/calendar", "scale/t_ind"} <= ids
    text = record_text(solved)
    assert "kern-seaton-1959" in text and "30.4375 days" in text


def test_days_need_no_calendar(tmp_path: Path) -> None:
    chain = chain_of(tmp_path, tube(GROWTH, t_after="183 days"))
    assert "scale/calendar" not in {item.id for item in chain.assumptions}


def test_a_deposit_on_a_flat_wall_and_outside_a_tube(tmp_path: Path) -> None:
    """k·R_f on a plane; d_o/2·(exp(2·k·R_f/d_o) − 1) outside a tube."""
    growth = "growth: {model: fouling-linear, r: {value: 1e-11 m^2 K/J, source: test}, after: t_after}"
    deposit = "deposit: {conductivity: {value: 1.5 W/(m K), source: test}}"
    plane = (
        givens(t_after="200 days", h="900 W/(m^2 K)")
        + f"""\
geometry: {{shape: plane, area: {{value: 2 m^2, source: test}}}}
resistances:
  - {{name: inner film, kind: film, coefficient: h}}
  - {{name: scale, kind: fouling, {growth}, {deposit}}}
  - {{name: wall, kind: wall, thickness: {{value: 2 mm, source: test}}, conductivity: {{value: 15 W/(m K), source: test}}}}
  - {{name: outer film, kind: film, coefficient: h}}
report: {{U on: outside}}
"""
    )
    resistance = 1e-11 * 200 * DAY
    chain = chain_of(tmp_path, plane)
    solution = solve(chain, chain.case_inputs(""), SERVICE)
    assert solution.number("scale/R") == pytest.approx(resistance, rel=1e-14)
    assert solution.number("scale/deposit-thickness-flat/t") == pytest.approx(1.5 * resistance, rel=1e-14)
    outside = tube("resistance: {value: 0.0001 m^2 K/W, source: test}", t_after="200 days").replace(
        "  - name: shell film",
        f"  - {{name: mud, kind: fouling, {growth}, {deposit}}}\n  - name: shell film",
    )
    chain = chain_of(tmp_path, outside)
    thickness = solve(chain, chain.case_inputs(""), SERVICE).number("mud/deposit-thickness-outside/t")
    assert thickness == pytest.approx(0.01905 / 2 * math.expm1(2 * 1.5 * resistance / 0.01905), rel=1e-13)
