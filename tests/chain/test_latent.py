"""The heat of saturated streams: latent heat by the steam tables, the part of a flow, and the flow that a duty needs."""

from __future__ import annotations

from pathlib import Path

import pytest
from iapws import IAPWS97

from calcbook.chain.outcome import Solved
from calcbook.faults import Faults
from calcbook.interface import solve_file
from calcbook.record import record_text

HEAD = """\
calculation: {number: T-1, title: Trial, plant: Works, revision: A, prepared by: K. L., date: 2026-11-20}
purpose: Trial of a condenser.
givens:
  d_i:  {value: 20 mm, is: bore, source: test}
  d_o:  {value: 24 mm, is: outside diameter, source: test}
  L:    {value: 3 m, is: length, source: test}
  N:    {value: 60, is: tubes, source: test}
  p_s:  {value: 1.2 bara, is: steam pressure, source: test}
  m_s:  {value: FLOW kg/s, is: steam flow, source: test}
  m_w:  {value: 25 kg/s, is: water flow, source: test}
  T_1:  {value: 20 degC, is: water in, source: test}
  T_2:  {value: 30 degC, is: water out, source: test}
  n_c:  {value: 5, is: tubes in a column, source: test}
  h_w:  {value: 5000 W/(m^2 K), is: water coefficient, source: test}
streams:
  steam: {fluid: water, phase: gas, temperature: saturation, pressure: p_s, flow: m_s}
  water: {fluid: water, phase: liquid, pressure: {value: 4 bara, source: test}, flow: m_wTEMPERATURE}
geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}
resistances:
  - {name: water film, kind: film, stream: water, coefficient: h_w, on: inside}
  - {name: wall, kind: wall, conductivity: {value: 50 W/(m K), source: test}}
  - {name: steam film, kind: film, stream: steam, situation: condensing-horizontal-bundle, with: {n_c: n_c}}
report: {U on: outside}
"""
DUTY = """\
duty:
  arrangement: counterflow
  hot: {stream: steam}
  cold: {stream: water, inlet: T_1, outlet: T_2}
"""


def solved(folder: Path, flow: str, duty: bool) -> Solved:
    text = HEAD.replace("FLOW", flow)
    if not duty:
        text = "".join(line for line in text.splitlines(keepends=True) if "  T_2:" not in line)
    text = text.replace("TEMPERATURE", "" if duty else ", temperature: T_1") + (DUTY if duty else "")
    path = folder / "trial.yaml"
    path.write_text(text, encoding="utf-8")
    return solve_file(path, path.name)


def latent_heat() -> float:
    """Of water at 1.2 bar in J/kg, by IAPWS-IF97 of an independent library."""
    liquid, vapour = (IAPWS97(P=0.12, x=quality) for quality in (0, 1))
    return 1e3 * (vapour.h - liquid.h)


@pytest.mark.parametrize(("flow", "state"), [("1.5", "within"), ("0.5", "outside")])
def test_the_part_of_a_flow_that_condenses(tmp_path: Path, flow: str, state: str) -> None:
    result = solved(tmp_path, flow, duty=False)
    heat = abs(result.base.results["heat_flow_service"].value)
    # IF97 and the equation of the backend agree within their tolerance of 0.02 % in the latent heat here.
    expected = heat / (float(flow) * latent_heat())
    assert result.base.results["phase_change steam service"].value == pytest.approx(expected, rel=2e-4)
    checks = [check for check in result.base.checks if check.id == "steam / heat balance / phase change"]
    assert {(check.state, check.level) for check in checks} == {(state, "caution")}
    assert not any("phase change" in item.id for item in result.open_items)
    assert ("phase change" in record_text(result).partition("## 14.")[2]) == (state == "outside")


def test_the_flow_that_a_duty_needs(tmp_path: Path) -> None:
    result = solved(tmp_path, "0.6", duty=True)
    duty = result.base.results["duty"].value
    needed = result.base.results["flow_needed"].value
    assert needed == pytest.approx(duty / latent_heat(), rel=2e-4)
    assert result.base.results["phase_change steam service"].value == pytest.approx(needed / 0.6, rel=1e-12)
    assert not result.open_items


def test_a_flow_that_does_not_carry_the_duty_is_an_open_item(tmp_path: Path) -> None:
    result = solved(tmp_path, "0.3", duty=True)
    (item,) = {item.id.rpartition(" / ")[0] for item in result.open_items}
    assert item == "duty / heat balance / phase change"


@pytest.mark.parametrize("duty", [False, True])
def test_a_saturated_stream_without_flow_is_told_at_its_place(tmp_path: Path, duty: bool) -> None:
    with pytest.raises(Faults, match="limit-stops") as caught:
        solved(tmp_path, "0", duty)
    (fault,) = caught.value.faults
    assert "m = 0 kg/s" in fault.found
    assert fault.place.excerpt.strip().startswith("duty:" if duty else "steam: {fluid: water")


def test_a_stated_coefficient_does_not_hide_what_the_steam_carries(tmp_path: Path) -> None:
    path = tmp_path / "trial.yaml"
    solved(tmp_path, "0.2", duty=False)
    text = path.read_text(encoding="utf-8")
    path.write_text(
        text.replace(
            "situation: condensing-horizontal-bundle, with: {n_c: n_c}", "coefficient: h_w, on: outside"
        ).replace("  n_c:  {value: 5, is: tubes in a column, source: test}\n", ""),
        encoding="utf-8",
    )
    result = solve_file(path, path.name)
    assert result.base.results["phase_change steam service"].value > 1.0
    assert "steam / heat balance / phase change" in record_text(result).partition("## 14.")[2]


def test_day_one_says_when_the_clean_unit_wants_more_steam_than_there_is(tmp_path: Path) -> None:
    path = tmp_path / "trial.yaml"
    solved(tmp_path, "0.5", duty=True)
    text = path.read_text(encoding="utf-8").replace("N:    {value: 60", "N:    {value: 70")
    deposit = (
        "  - {name: deposit, kind: fouling, resistance: {value: 0.0003 m^2 K/W, source: test}, on: inside}\n"
    )
    text = text.replace("  - {name: wall,", deposit + "  - {name: wall,")
    path.write_text(text, encoding="utf-8")
    result = solve_file(path, path.name)
    assert result.rating is not None and "" in result.rating.answered
    # The duty takes 93 % of the steam; the clean unit would condense more than there is.
    assert not result.open_items
    found = {(check.id, check.condition): check.state for check in result.rating.answered[""].checks}
    assert found["duty / heat balance / phase change", "clean"] == "outside"


def test_what_the_installed_area_reaches_is_held_against_the_steam(tmp_path: Path) -> None:
    """The area reaches more than the duty: with a flow for the duty alone, the brief and day one say so."""
    solved(tmp_path, "0.5", duty=True)
    path = tmp_path / "trial.yaml"
    text = path.read_text(encoding="utf-8")
    deposit = (
        "  - {name: scale, kind: fouling, resistance: {value: 0.00005 m^2 K/W, source: test}, on: inside}\n"
    )
    path.write_text(text.replace("  - {name: wall,", deposit + "  - {name: wall,"), encoding="utf-8")
    result = solve_file(path, path.name)
    part = result.rating.answered[""].service.heat / (0.5 * latent_heat())
    assert part > 1.0 > result.base.results["phase_change steam service"].value
    found = [check for check in result.rating.answered[""].checks if check.condition == "with the allowances"]
    assert [check.id for check in found] == ["duty / heat balance / phase change"]
    # Figures of a check are printed with five digits.
    assert float(found[0].figure.split("=")[1]) == pytest.approx(part, rel=2e-4)
    record = record_text(result)
    row = next(
        line for line in record.splitlines() if line.startswith("| Heat that the installed area reaches")
    )
    assert "phase change" in row and "outside" in row
    assert "phase change, day one, with the allowances" in record.partition("## 14.")[2]
