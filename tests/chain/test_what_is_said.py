"""What a record says of its own limits: where nothing is checked, what is kept, what a figure does not hold for.

The example book stands for the cases; what is expected is common practice unless a source is named.
"""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest
from iapws import IAPWS97

from calcbook.chain.outcome import Solved
from calcbook.interface import record_text, solve_file

CALCS = Path(__file__).resolve().parents[2] / "calcs"


def example(name: str) -> Solved:
    return solve_file(CALCS / f"{name}.yaml")


def changed(folder: Path, name: str, *changes: tuple[str, str]) -> Solved:
    """An example with some of its text replaced, beside the settings of the book."""
    text = (CALCS / f"{name}.yaml").read_text(encoding="utf-8")
    for old, new in changes:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    shutil.copy(CALCS / "book.yaml", folder)
    (folder / f"{name}.yaml").write_text(text, encoding="utf-8")
    return solve_file(folder / f"{name}.yaml")


def said(solved: Solved) -> dict[str, str]:
    return {item.id: item.text for case in solved.cases for item in case.assumptions}


def test_freezing_at_the_wall_is_said_to_be_unchecked_for_a_liquid_without_a_freezing_point() -> None:
    crude = example("co-993")
    assert "stream crude/freezing point" in said(crude)
    # Cooling water freezes at 0 °C, and both its walls are checked.
    assert "stream water/freezing point" not in said(crude)
    assert "Freezing is not checked for crude, nor pour point" in record_text(crude)
    # Nitrogen at 7 bar is a gas, whose melting point is known.
    assert not any(name.endswith("/freezing point") for name in said(example("ac-501")))


def test_a_stated_coefficient_that_a_case_leaves_as_it_is_is_said(tmp_path: Path) -> None:
    kept = said(example("wc-101"))["shell-side film/kept in winter"]
    assert "though T_cold is another there" in kept
    winter = "T_cold: {value: 12 degC,"
    restated = (winter, f"h_o: {{value: 4540 W/(m^2 K), source: vendor}}\n    {winter}")
    assert "shell-side film/kept in winter" not in said(changed(tmp_path, "wc-101", restated))
    scaled = ("temperature: T_cold}", "temperature: T_cold, scales with: T_cold/T_cold}")
    assert "shell-side film/kept in winter" not in said(changed(tmp_path, "wc-101", scaled))


def test_a_conductivity_that_is_known_at_one_temperature_is_said() -> None:
    assert "20.000 °C alone" in said(example("sc-701"))["tube wall/one temperature"]
    assert "tube wall/one temperature" not in said(example("wc-101"))


def test_a_place_has_no_local_coefficient_of_a_method_that_follows_the_length() -> None:
    text = said(example("oc-201"))["oil film/mean over the length"]
    assert "gnielinski-laminar-t" in text and "at oil outlet" in text
    assert "tube-side film/mean over the length" not in said(example("wc-101"))
    assert "gives tube-side film its mean over the whole length, in every part of the unit too" in said(
        example("wc-105")
    ).get("tube-side film/mean over the length", "")


@pytest.mark.parametrize(("bore", "state"), [("10.2 mm", "within"), ("5 mm", "outside")])
def test_a_gas_that_loses_a_tenth_of_its_pressure_is_a_caution(tmp_path: Path, bore: str, state: str) -> None:
    """Crane Technical Paper 410 (from memory): up to 10 % of the inlet pressure one density is good enough."""
    solved = changed(tmp_path, "ac-501", ("d_i:   {value: 10.2 mm", f"d_i:   {{value: {bore}"))
    (check,) = [
        one
        for one in solved.base.checks
        if one.id == "nitrogen film / pressure drop / share of the pressure" and one.condition == "service"
    ]
    pressure = solved.base.solutions["service"].number(solved.chain.streams["nitrogen"].pressure)
    assert (check.state, check.level) == (state, "caution")
    assert (check.value > 0.1 * pressure) is (state == "outside")


def test_a_liquid_has_no_limit_of_gases_on_its_pressure_drop() -> None:
    assert not [one for one in example("wc-101").base.checks if one.id.endswith("share of the pressure")]


def test_a_vapour_under_vacuum_that_is_taken_as_pure_is_a_caution(tmp_path: Path) -> None:
    """0.12 bara stands below the air outside; with the gas stated that limit stands in its place."""
    name = "condensate film / vapour / no vacuum"
    found = {one.state for one in example("sc-701").base.checks if one.id == name}
    assert found == {"outside"}
    above = changed(tmp_path, "sc-701", ("{value: 0.12 bara,", "{value: 1.2 bara,"))
    assert {one.state for one in above.base.checks if one.id == name} == {"within"}
    assert not [one for one in example("kr-801").base.checks if one.id.endswith("/ no vacuum")]


def test_an_acceptance_after_the_date_of_the_calculation_is_an_open_item(tmp_path: Path) -> None:
    assert not example("kr-801").open_items
    later = changed(tmp_path, "kr-801", ("    date: 2026-11-26", "    date: 2026-12-01"))
    (item,) = later.open_items
    assert item.id == "acceptance of steam film / chato-1962 / vapour Reynolds number / date"


def test_an_accuracy_outside_the_range_of_its_card_says_so(tmp_path: Path) -> None:
    def rule(solved: Solved) -> str:
        assert solved.uncertainty is not None
        budget = next(one for one in solved.uncertainty.budgets if one.result == "U_service")
        return next(row.input.rule for row in budget.rows if "chato-1962" in row.input.title)

    assert "used outside it here" in rule(example("kr-801"))
    fewer = changed(tmp_path, "kr-801", ("{value: 1.03 kg/s,", "{value: 0.4 kg/s,"))
    assert "used outside it here" not in rule(fewer)


def test_the_title_block_tells_criteria_that_are_not_met() -> None:
    assert "| Criteria | criterion 1 not met, case warm running |" in record_text(example("oc-201"))
    assert "| Criteria | every criterion met in every case |" in record_text(example("kr-801"))


def test_a_saturation_temperature_is_told_with_its_place() -> None:
    """Of the stated pressure, and of what is left of it at the outlet: by IAPWS-IF97, within its 0.01 K of the other
    formulation at these pressures."""
    solved = example("kr-801")
    rows = [line.split(" | ") for line in record_text(solved).splitlines() if line.startswith("| steam | ")]
    found = {row[1]: float(row[3]) for row in rows if row[2] == "saturation temperature"}
    left = solved.base.solutions["service"].number("steam film/pressure left")
    assert found["saturation"] == pytest.approx(IAPWS97(P=0.102, x=0).T, abs=0.015)
    assert found["outlet"] == pytest.approx(IAPWS97(P=left / 1e6, x=0).T, abs=0.015)
