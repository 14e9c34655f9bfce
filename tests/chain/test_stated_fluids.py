"""Humid air and petroleum liquids as fluids of a calculation file, from the text to the record."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest
from small_calculations import analysed, chain_of, givens

from calcbook.chain.outcome import Solved
from calcbook.chain.petroleum import CARDS, petroleum
from calcbook.chain.sensitivity import derivatives
from calcbook.chain.solve import solve
from calcbook.chain.types import SERVICE
from calcbook.faults import Faults
from calcbook.library import Library
from calcbook.record import record_text

FREEZING = 273.15
CRAGOE = Path(__file__).with_name("cragoe_computed.csv")

TUBES = """\
geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}
resistances:
  - {name: tube film, kind: film, stream: own, situation: inside-tube}
  - {name: tube wall, kind: wall, conductivity: k_w}
  - {name: shell film, kind: film, coefficient: h_o, on: outside, temperature: T_c}
report: {U on: outside}
"""


def body(fluid: str, flow: str, pressure: str = "", **changes: str) -> str:
    stated = {
        "d_i": "15.75 mm",
        "d_o": "19.05 mm",
        "L": "2 m",
        "N": "62",
        "T_own": "60 degC",
        "T_c": "58 degC",
        "h_o": "3000 W/(m^2 K)",
        "k_w": "16 W/(m K)",
    } | changes
    at = f", pressure: {pressure}" if pressure else ""
    return (
        givens(**stated)
        + f"streams:\n  own: {{fluid: {fluid}, temperature: T_own, flow: {flow}{at}}}\n"
        + TUBES
    )


def humid(humidity: str = "{relative humidity: phi}", **changes: str) -> str:
    changes = {"phi": "60 %", "p": "1.2 bara", "v": "12 m/s"} | changes
    return body(f"{{humid air: {humidity}}}", "v", "p", **changes)


def oil(density: str = "sg", product: str = ", product: lubricating oil", **changes: str) -> str:
    changes = {"sg": "0.86", "V": "60 m^3/h"} | changes
    text = (
        f"{{petroleum: {{relative density: {density}{product}}}, source: test,"
        " viscosity: {astm d341: [[40 degC, 46 mm^2/s], [100 degC, 6.8 mm^2/s]]}}"
    )
    return body(text, "V", **changes)


def check_of(solved: Solved, name: str, condition: str = SERVICE):  # type: ignore[no-untyped-def]
    return next(check for check in solved.base.checks if check.id == name and check.condition == condition)


# --- humid air --------------------------------------------------------------------------------------


def test_the_relative_humidity_becomes_the_backends_humidity_ratio(tmp_path: Path) -> None:
    from CoolProp.HumidAirProp import HAPropsSI

    solution = analysed(tmp_path, humid()).base.solutions[SERVICE]
    asked = HAPropsSI("W", "T", 60.0 + FREEZING, "P", 1.2e5, "R", 0.6)
    # the same saturation and the same ratio of molar masses: rounding only
    assert solution.number("stream own/humidity ratio") == pytest.approx(asked, rel=1e-12)


def test_a_humidity_ratio_is_taken_as_it_stands_and_gives_the_same(tmp_path: Path) -> None:
    by_share = analysed(tmp_path, humid())
    wet = by_share.base.solutions[SERVICE].number("stream own/humidity ratio")
    by_ratio = analysed(tmp_path, humid(f"{{humidity ratio: {{value: {wet!r}, source: test}}}}"))
    assert by_ratio.base.results["U_service"].value == pytest.approx(
        by_share.base.results["U_service"].value, rel=1e-12
    )


@pytest.mark.parametrize(("cold", "state"), [("20 degC", "outside"), ("55 degC", "within")])
def test_a_wall_below_the_dew_point_is_told(tmp_path: Path, cold: str, state: str) -> None:
    # 60 °C and 60 % at 1.2 bar: the dew point is 49.4 °C
    check = check_of(analysed(tmp_path, humid(T_c=cold)), "tube film / wall phase / condenses")
    assert check.state == state and check.level == "range" and check.that == "T_s > T_dew"
    assert check.limit.startswith("> 49.3")


def test_what_was_decided_for_humid_air_is_said(tmp_path: Path) -> None:
    page = record_text(analysed(tmp_path, humid()))
    assert "those of a kilogram of humid air" in page
    assert "humidity ratio W | 0.621945·φ·x_ws/(1 − φ·x_ws)" in page
    assert "humid air (ASHRAE RP-1485)" in page
    assert "Boiling at the wall is not checked" not in page


@pytest.mark.parametrize(
    "text", [humid(), humid("{humidity ratio: W}", W="0.02"), oil()], ids=["share", "ratio", "oil"]
)
def test_derivatives_are_those_of_differences(tmp_path: Path, text: str) -> None:
    chain = chain_of(tmp_path, text)
    name = chain.results["U"]
    inputs = chain.case_inputs("")
    slopes = derivatives(chain, inputs, SERVICE, (name,))[name]
    for symbol in ("phi", "p", "W", "sg", "T_own"):
        key = f"given/{symbol}"
        if key not in inputs or key not in slopes:
            continue
        step = 1e-3 * float(inputs[key])
        low, high = (
            solve(chain, inputs | {key: np.asarray(float(inputs[key]) + way)}, SERVICE).number(name)
            for way in (-step, step)
        )
        # a difference over 0.1 % of the figure: its curvature, and that of the fraction's own step, is 1e-4
        assert float(slopes[key]) == pytest.approx((high - low) / (2.0 * step), rel=2e-3)


@pytest.mark.parametrize(
    ("text", "code"),
    [
        (humid("{relative humidity: phi, humidity ratio: phi}"), "key-conflict"),
        (humid("{humidity ratio: {value: 0.5, source: test}}"), "above-saturation"),
        (humid(phi="60"), "fraction-outside"),
        (humid().replace(", pressure: p}", "}"), "key-missing"),
        (oil(product=", product: olive oil"), "choice-unknown"),
        (oil().replace("[40 degC, 46 mm^2/s], ", ""), "astm-points"),
        (oil().replace("{relative density: sg", "{density: sg"), "key-unknown"),
    ],
)
def test_a_fluid_that_cannot_be_is_a_fault(tmp_path: Path, text: str, code: str) -> None:
    with pytest.raises(Faults) as caught:
        analysed(tmp_path, text)
    assert code in {fault.code for fault in caught.value.faults}


# --- petroleum liquids ------------------------------------------------------------------------------


def columns(relative_density: float, product: str = ""):  # type: ignore[no-untyped-def]
    from calcbook.calcfile.calculation import FluidText
    from calcbook.faults import Place

    text = FluidText("petroleum", "oil", Place("test"), product=product)
    return petroleum(Library(), text, None)(relative_density).at(None)


def test_heat_capacity_and_conductivity_are_those_of_the_computed_table() -> None:
    rows = list(csv.DictReader(CRAGOE.read_text(encoding="utf-8").splitlines()))
    assert len(rows) == 35
    for row in rows:
        fluid = columns(float(row["sg60_60"]))
        at = float(row["t_C"]) + FREEZING
        # the table is worked from the equations in US units, whose constants are rounded apart from the
        # metric ones: up to 2 parts in 10 000
        assert float(fluid.value("heat capacity", at)) == pytest.approx(
            float(row["c_kJ_kgK"]) * 1e3, rel=2e-4
        )
        assert float(fluid.value("conductivity", at)) == pytest.approx(float(row["k_W_mK"]), rel=1e-4)


def test_the_density_is_the_relative_density_at_60_degrees_fahrenheit() -> None:
    at = 288.705555555556
    for product in ("crude oil", "gasoline", "kerosene", "fuel oil", "lubricating oil"):
        assert float(columns(0.86, product).value("density", at)) == pytest.approx(0.86 * 999.016, rel=1e-12)
        # petroleum liquids expand by 0.0005 to 0.0013 1/K (common practice)
        assert 5e-4 < float(columns(0.86, product).value("expansion coefficient", at)) < 1.3e-3


@pytest.mark.parametrize("name", [*CARDS, "expansion coefficient"])
def test_slopes_of_the_cards_are_those_of_their_values(name: str) -> None:
    fluid = columns(0.88, "fuel oil")
    temperatures, step = np.array([280.0, 340.0, 450.0]), 1e-3
    difference = (fluid.value(name, temperatures + step) - fluid.value(name, temperatures - step)) / (
        2.0 * step
    )
    # rounding 1e-16 over 2e-3 K; the slope of the expansion coefficient is itself a difference over 0.1 K
    assert fluid.slope(name, temperatures) == pytest.approx(difference, rel=1e-5)


def test_the_record_shows_the_cards_their_relations_and_their_standing(tmp_path: Path) -> None:
    solved = analysed(tmp_path, oil())
    page = record_text(solved)
    for card in CARDS.values():
        assert f"method {card}" in solved.cards and card in page
    assert "cp = (c\\_0 + c\\_1·(T − T\\_0))/sqrt(d)" in page or "cp = (c_0 + c_1·(T − T_0))/sqrt(d)" in page
    assert "The card petroleum-density-d1250 is on trial" in page
    limit = check_of(solved, "stream own / petroleum-heat-capacity-cragoe-1929 / temperature")
    assert limit.state == "within" and limit.figure == "T = 333.15 K"


def test_a_product_that_is_not_stated_is_an_assumption_and_a_range_outside_an_open_item(
    tmp_path: Path,
) -> None:
    solved = analysed(tmp_path, oil(product=""))
    assert any(
        item.id == "stream own/product" and "crude oil" in item.text for item in solved.base.assumptions
    )
    # above 400 °F the cards are outside; below the span there is no value at all
    hot = analysed(tmp_path, oil(T_own="215 degC", T_c="210 degC"))
    assert any("petroleum-conductivity-cragoe-1929 / temperature" in item.id for item in hot.open_items)


def test_viscosity_is_d341_times_density(tmp_path: Path) -> None:
    solution = analysed(tmp_path, oil(T_own="40 degC", T_c="45 degC")).base.solutions[SERVICE]
    density, viscosity = (solution.number(f"stream own/{name}") for name in ("density", "viscosity"))
    # 46 mm2/s at 40 °C is one of the two points; the standard's inverse returns it to 1e-3
    assert viscosity / density == pytest.approx(46e-6, rel=1e-3)
