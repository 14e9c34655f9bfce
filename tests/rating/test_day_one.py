"""Day one: what the clean unit, as it runs and turned down, leaves of limits and bands, and what it does not ask again."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from iapws import IAPWS95, IAPWS97
from rated_units import COOLER, EVAPORATOR, HEATER, solved

from calcbook.chain.outcome import CheckResult
from calcbook.chain.rating_outcome import DayOne
from calcbook.library.plausibility import bands

BOILS = "water film / wall phase / boils"


def day_of(folder: Path, text: str) -> DayOne:
    rating = solved(folder, text).rating
    assert rating is not None and isinstance(rating.answered[""], DayOne)
    return rating.answered[""]


def left(day: DayOne, condition: str) -> dict[str, CheckResult]:
    """What a state of day one leaves, by id."""
    return {check.id: check for check in day.checks if check.condition == condition}


@pytest.mark.parametrize(
    ("boiling", "places"),
    [
        # Both ends and the mean; steam keeps its temperature, so the wall is hottest at the outlet of the water.
        (87.4, {"", " at the hot inlet"}),
        (95.0, {" at the hot inlet"}),
        (120.0, set()),
    ],
)
def test_water_that_boils_at_the_clean_wall_is_told_at_the_mean_and_at_each_end(
    tmp_path: Path, boiling: float, places: set[str]
) -> None:
    # iapws, an implementation of IAPWS-IF97: the pressure at which water boils at that temperature
    pressure = IAPWS97(T=boiling + 273.15, x=0.0).P
    day = day_of(tmp_path, HEATER.replace("value: 5 bara", f"value: {pressure!r} MPa"))
    cold = day.clean.sides["cold"]
    assert cold.outlet < 87.3 + 273.15 and 87.5 + 273.15 < cold.surface < 90.0 + 273.15
    found = {name: check for name, check in left(day, "clean").items() if name.startswith(BOILS)}
    assert set(found) == {BOILS + place for place in places}
    assert {check.state for check in found.values()} <= {"outside"}


def test_a_flow_that_is_turned_down_far_is_held_against_the_band_of_its_speed(tmp_path: Path) -> None:
    """By hand: m/(rho·N·pi/4·d_i^2), the density by iapws at the mean of the ends: 1e-3 is between the two equations."""
    text = COOLER.replace("duty:\n", "duty:\n  throttled: hot\n")
    text = text.replace("L:      {value: 4.88 m", "L: {value: 16 m").replace("value: 62,", "value: 160,")
    day = day_of(tmp_path, text)
    assert day.turned_down is not None
    hot = day.turned_down.sides["hot"]
    density = IAPWS97(T=(78.0 + 273.15 + hot.outlet) / 2.0, P=0.4).rho
    speed = hot.mass_flow / (density * 160.0 * math.pi / 4.0 * 0.01575**2)
    assert hot.speed == pytest.approx(speed, rel=1e-3)
    name = "tube-side film / band / velocity of a liquid in tubes"
    assert speed < bands()["velocity of a liquid in tubes"].low
    assert left(day, "turned down")[name].value == hot.speed
    assert name not in left(day, "clean")


def test_the_range_of_a_wall_holds_on_day_one_too(tmp_path: Path) -> None:
    """The card of this aluminium ends at 273 K; the wall of the clean cooler lies above 50 °C."""
    text = COOLER.replace("stainless-316-kaschnitz-2017", "aluminium-1100-crc")
    day = day_of(tmp_path, text)
    assert {name.partition(" / ")[0] for name in left(day, "clean")} == {"tube wall"}


def test_a_flow_that_is_turned_down_out_of_the_range_of_its_method_is_told(tmp_path: Path) -> None:
    """By hand: Re = 4·m/(N·pi·d_i·mu), the viscosity by iapws at the mean of the ends. Gnielinski's begins at 2300."""
    text = COOLER.replace("duty:\n", "duty:\n  throttled: hot\n").replace("value: 62,", "value: 400,")
    text = text.replace("L:      {value: 4.88 m", "L: {value: 16 m").replace(
        "situation: inside-tube,", "situation: inside-tube, method: gnielinski-1976,"
    )
    day = day_of(tmp_path, text)
    assert day.turned_down is not None
    reynolds = []
    for state in (day.clean, day.turned_down):
        hot = state.sides["hot"]
        viscosity = IAPWS97(T=(78.0 + 273.15 + hot.outlet) / 2.0, P=0.4).mu
        reynolds.append(4.0 * hot.mass_flow / (400.0 * math.pi * 0.01575 * viscosity))
    assert reynolds[0] > 2300.0 > reynolds[1]
    name = "tube-side film / gnielinski-1976 / turbulent"
    assert left(day, "turned down")[name].state == "outside"
    assert left(day, "turned down")[name].value == pytest.approx(reynolds[1], rel=1e-3)
    assert name not in left(day, "clean")


def test_the_passes_of_the_geometry_are_not_told_again(tmp_path: Path) -> None:
    """They are a caution of the calculation, and the clean unit has the same ones."""
    text = COOLER.replace("parallel: N}", "tubes: N, passes: {value: 2, source: s}}")
    answer = solved(tmp_path, text)
    passes = "duty / arrangement / tube passes"
    assert "outside" in {check.state for check in answer.base.checks if check.id == passes}
    assert answer.rating is not None and isinstance(answer.rating.answered[""], DayOne)
    assert passes not in {check.id for check in answer.rating.answered[""].checks}


def test_a_caution_of_the_duty_is_told_of_each_state(tmp_path: Path) -> None:
    """19.4 m^2 are stated for a geometry of 62·pi·0.01905·4.88 = 18.107 m^2: 7 % apart."""
    text = COOLER.replace("duty:\n", "duty:\n  installed area: {value: 19.4 m^2, source: s}\n")
    day = day_of(tmp_path, text)
    for condition in ("clean", "with the allowances"):
        found = left(day, condition)["duty / area / closely stated"]
        assert (found.level, found.state) == ("caution", "outside")


def test_only_a_side_that_keeps_its_temperature_has_a_pressure_to_be_throttled(tmp_path: Path) -> None:
    heater, cooler = (day_of(tmp_path, text).clean.sides for text in (HEATER, COOLER))
    assert heater["hot"].pressure == 2.6e5
    assert all(math.isnan(side.pressure) for side in (heater["cold"], cooler["hot"], cooler["cold"]))


def test_day_one_takes_the_means_of_its_own_ends(tmp_path: Path) -> None:
    """74 degC is the mean of the stated ends of the hot stream: day one leaves it for that of the ends it finds."""
    flow = "    flow: m_hot\n"
    apart = COOLER.replace(flow, f"{flow}    temperature: {{value: 74 degC, source: s}}\n")
    assert apart != COOLER
    by_ends, stated = (day_of(tmp_path, text) for text in (COOLER, apart))
    assert by_ends.clean.sides["hot"].outlet < 66.0 + 273.15
    for one, other in zip((by_ends.clean, by_ends.service), (stated.clean, stated.service), strict=True):
        assert other.heat == pytest.approx(one.heat, rel=1e-12)
        assert other.overall == pytest.approx(one.overall, rel=1e-12)


def test_outlets_are_found_where_a_change_of_regime_feeds_itself(tmp_path: Path) -> None:
    """Hotter water is thinner, goes over to turbulent flow and grows hotter still: the outlets have an answer all the
    same, in which heat balance and rate equation agree (by hand, with the printed U, outlets and flow)."""
    text = HEATER.replace("passes: {value: 2", "passes: {value: 1").replace("2.44 m", "5 m")
    day = day_of(
        tmp_path, text.replace("9.5 kg/s", "8.5 kg/s").replace("tubes: {value: 116", "tubes: {value: 400")
    )
    area = math.pi * 0.01905 * 5.0 * 400
    for state in (day.service, day.clean):
        steam, outlet, inlet = state.sides["hot"].outlet, state.sides["cold"].outlet, 291.15
        mean = (outlet - inlet) / math.log((steam - inlet) / (steam - outlet))
        assert state.heat == pytest.approx(state.overall * area * mean, rel=1e-9)
        water = IAPWS95(T=(inlet + outlet) / 2.0, P=0.5)
        assert state.heat == pytest.approx(8.5 * 1e3 * water.cp * (outlet - inlet), rel=1e-6)


@pytest.mark.parametrize("text", [HEATER, EVAPORATOR])
def test_a_specified_fouling_stays_what_it_is_in_the_states_of_day_one(tmp_path: Path, text: str) -> None:
    """As with the same resistance stated in m² K/W, in every case; the specified one is found anew in each."""
    case = "cases:\n  less steam:\n    p_st: {value: 2 bara, source: sheet}\n"
    specified = (
        text.replace("resistance: R_f, on: inside", "on: inside")
        .replace("  R_f:  {value: 0.00018 m^2 K/W, is: allowance,       source: sheet}\n", "")
        .replace("report:", "fouling specified as: {cleanliness: 85 %, split: {deposit: 100 %}}\nreport:")
    )
    answer = solved(tmp_path, specified + case)
    assert answer.rating is not None and set(answer.rating.days) == {"", "less steam"}
    resistances = []
    for number, name in enumerate(answer.rating.days):
        assert name not in answer.rating.unanswered
        resistance = answer.cases[number].results["R deposit service"].value
        resistances.append(resistance)
        on_the_bore = resistance * 15.75 / 19.05
        alone = solved(tmp_path, text.replace("0.00018 m^2 K/W", f"{on_the_bore!r} m^2 K/W") + case)
        assert alone.rating is not None
        found, stated = answer.rating.answered[name], alone.rating.answered[name]
        for one, other in ((found.service, stated.service), (found.clean, stated.clean)):
            assert one.heat == pytest.approx(other.heat, rel=1e-9)
            assert one.overall == pytest.approx(other.overall, rel=1e-9)
        assert found.moved == pytest.approx(stated.moved, rel=1e-9)
    assert resistances[0] != pytest.approx(resistances[1], rel=1e-4)


def test_a_case_that_restates_the_limit_of_a_criterion_is_told_apart(tmp_path: Path) -> None:
    """The clean unit does the same in both cases; what is asked of its surface is not the same."""
    text = (
        HEATER.replace("  R_f:  {", "  T_max: {value: 80 degC, is: limit of scale, source: sheet}\n  R_f:  {")
        + "acceptance:\n  - {that: T inside surface clean <= T_max, source: sheet}\n"
        + "cases:\n  softened:\n    T_max: {value: 130 degC, source: sheet}\n"
        + "  dirty:\n    R_f: {value: 0.0003 m^2 K/W, source: sheet}\n"
    )
    rating = solved(tmp_path, text).rating
    assert rating is not None and set(rating.told) == {"", "softened"}
    met = {case: {item.met for item in day.criteria} for case, day in rating.told.items()}
    assert met["softened"] == {True} and False in met[""]
