"""Gauge and absolute pressures in relations and ranges: what is typed in barg acts as p_g + p_site everywhere."""

from __future__ import annotations

from pathlib import Path

import pytest
from small_calculations import analysed, givens

STANDARD_ATMOSPHERE = 101_325.0  # Pa, by definition (10th CGPM, 1954, resolution 4)


def condensing(pressure: str, relation: str = "", holds_for: str = "", **more: str) -> str:
    """Steam condensing on a cold plate at a pressure p that is typed, or derived from one that is typed."""
    typed = {"p_x" if relation else "p": pressure, **more}
    derived = f"derived:\n  p: {{is: steam pressure, relation: '{relation}'}}\n" if relation else ""
    return (
        givens(H="2 m", W="1 m", t="1 mm", k_w="1e6 W/(m K)", T_c="80 degC", h="1e9 W/(m^2 K)", **typed)
        + derived
        + f"""\
streams:
  steam: {{fluid: water, phase: gas, temperature: saturation, pressure: p}}
geometry: {{shape: plane, height: H, width: W}}
resistances:
  - {{name: cold film, kind: film, coefficient: h, temperature: T_c{holds_for}}}
  - {{name: wall, kind: wall, conductivity: k_w, thickness: t}}
  - {{name: film, kind: film, stream: steam, situation: condensing-vertical-plate}}
report: {{U on: outside}}
"""
    )


def coefficient(folder: Path, body: str) -> float:
    return analysed(folder, body).base.results["U_service"].value


@pytest.mark.parametrize(
    ("typed", "relation", "absolute"),
    [
        ("2 barg", "1*p_x", 2e5 + STANDARD_ATMOSPHERE),
        ("2 barg", "1.05*p_x", 1.05 * (2e5 + STANDARD_ATMOSPHERE)),
        ("3 bara", "1.05*p_x", 3.15e5),
    ],
)
def test_what_is_derived_from_a_gauge_pressure_is_absolute(
    tmp_path: Path, typed: str, relation: str, absolute: float
) -> None:
    found = analysed(tmp_path, condensing(typed, relation))
    expected = coefficient(tmp_path, condensing(f"{absolute!r} Pa(a)"))
    assert found.base.results["U_service"].value == pytest.approx(expected, rel=1e-12)
    # Without the pressure of the site the coefficient would be another by far more than that.
    wrong = coefficient(tmp_path, condensing(f"{absolute - STANDARD_ATMOSPHERE!r} Pa(a)"))
    assert abs(wrong / expected - 1.0) > 0.01


def test_a_drop_is_taken_from_a_gauge_pressure(tmp_path: Path) -> None:
    found = analysed(tmp_path, condensing("2 barg", "p_x - p_y", p_y="0.1 bar"))
    expected = coefficient(tmp_path, condensing(f"{1.9e5 + STANDARD_ATMOSPHERE!r} Pa(a)"))
    assert found.base.results["U_service"].value == pytest.approx(expected, rel=1e-12)
    said = {item.id: item.text for item in found.base.assumptions}
    text = "The pressure p_y = 0.1 bar is taken as absolute, or as a difference of pressures."
    assert said["derived p/pressure p_y"] == text


@pytest.mark.parametrize(
    ("typed", "low", "high", "state"),
    [
        ("2.5 barg", "2 barg", "4 barg", "within"),
        # 1.5 barg are 2.513 bara: as plain numbers they would lie between 2 and 4.
        ("1.5 barg", "2 barg", "4 barg", "outside"),
        ("2.5 bara", "2 barg", "4 barg", "outside"),
        ("1.5 barg", "2 bara", "4 bara", "within"),
    ],
)
def test_a_range_of_pressures_is_held_on_one_base(
    tmp_path: Path, typed: str, low: str, high: str, state: str
) -> None:
    found = analysed(tmp_path, condensing(typed, holds_for=f", holds for: {{p: {low} .. {high}}}"))
    (check,) = [
        one for one in found.base.checks if one.id.endswith("holds for") and one.condition == "service"
    ]
    assert check.state == state
