"""The clean unit under its control: what is found is put into a file of its own, without deposits, and rated anew."""

from __future__ import annotations

from pathlib import Path

import pytest
from iapws import IAPWS97
from rated_units import BY_TEMPERATURE, CHILLER, COOLER, HEATER, solved

from calcbook.chain.outcome import Solved
from calcbook.chain.rating_outcome import DayOne
from calcbook.faults import Faults
from calcbook.interface import record_text


def day_of(answer: Solved) -> DayOne:
    assert answer.rating is not None and "" in answer.rating.answered
    return answer.rating.answered[""]


def without_deposits(text: str) -> str:
    for allowance in ("0.00018 m^2 K/W", "0.00009 m^2 K/W", "0.00012 m^2 K/W"):
        text = text.replace(allowance, "0 m^2 K/W")
    return text


def margin(folder: Path, text: str) -> float:
    return solved(folder, without_deposits(text)).base.results["area_margin"].value


def test_the_hot_flow_is_turned_down_where_the_file_says_so(tmp_path: Path) -> None:
    text = COOLER.replace("duty:\n", "duty:\n  throttled: hot\n").replace(
        "L:      {value: 4.88 m", "L: {value: 6 m"
    )
    day = day_of(solved(tmp_path, text))
    assert day.turned_down is not None and day.throttle == ("hot", "flow", True)
    flow = day.turned_down.sides["hot"].mass_flow
    assert flow == pytest.approx(day.flow_part * 18.2) and 0.0 < flow < 18.2
    # The cold stream carries its stated ends, the hot one leaves where its own flow takes it.
    assert day.turned_down.sides["cold"].outlet == pytest.approx(273.15 + 34.6, rel=1e-12)
    alone = text.replace("value: 18.2 kg/s", f"value: {flow!r} kg/s").replace(", outlet: T_ho", "")
    alone = "\n".join(line for line in alone.splitlines() if not line.startswith("  T_ho:")) + "\n"
    assert margin(tmp_path, alone) == pytest.approx(0.0, abs=1e-8)
    assert margin(tmp_path, alone.replace(repr(flow), repr(0.999 * flow))) < 0.0


def test_steam_is_throttled_to_the_pressure_at_which_the_clean_heater_gives_the_duty(tmp_path: Path) -> None:
    answer = solved(tmp_path, HEATER)
    day = day_of(answer)
    assert day.turned_down is not None and day.throttle == ("hot", "pressure", False)
    assert day.turned_down.heat == pytest.approx(answer.base.results["duty"].value, rel=1e-12)
    hot = day.turned_down.sides["hot"]
    # iapws, an implementation of IAPWS-IF97: saturation temperature of steam
    assert hot.outlet == pytest.approx(IAPWS97(P=hot.pressure / 1e6, x=1.0).T, abs=0.002)
    assert 66.0 + 273.15 < hot.outlet < day.clean.sides["hot"].outlet
    pressure = f"{hot.pressure!r} Pa"
    alone = HEATER.replace("2.6 bara", pressure)
    assert margin(tmp_path, alone) == pytest.approx(0.0, abs=1e-8)
    assert margin(tmp_path, HEATER.replace("2.6 bara", f"{0.999 * hot.pressure!r} Pa")) < 0.0


def test_a_heater_of_much_spare_area_is_throttled_until_the_steam_is_hardly_warmer(tmp_path: Path) -> None:
    """Clean it has about eight times the area of the duty: steam within a tenth of its way to the water's outlet."""
    text = HEATER.replace("2.44 m", "12 m")
    day = day_of(solved(tmp_path, text))
    assert day.turned_down is not None
    hot = day.turned_down.sides["hot"]
    steam = IAPWS97(P=0.26, x=1.0).T
    assert 66.0 + 273.15 < hot.outlet < 66.0 + 273.15 + 0.1 * (steam - 66.0 - 273.15)
    alone = solved(tmp_path, without_deposits(text.replace("2.6 bara", f"{hot.pressure!r} Pa"))).base.results
    assert alone["area_margin"].value == pytest.approx(0.0, abs=1e-8)
    # The unit under its control is the clean one.
    assert day.turned_down.overall == pytest.approx(alone["U_service"].value, rel=1e-9)


def test_condensate_that_cannot_leave_is_told_with_the_pressure(tmp_path: Path) -> None:
    """Common practice of steam heaters: below the atmosphere a trap does not pass the condensate."""
    name = "stream steam / band / pressure of a throttled vapour"
    answer = solved(tmp_path, HEATER)
    day = day_of(answer)
    assert day.turned_down is not None
    pressure = day.turned_down.sides["hot"].pressure
    found = [check for check in day.checks if check.id == name]
    assert [(check.condition, check.level, check.state) for check in found] == [
        ("turned down", "caution", "outside")
    ]
    assert found[0].value == pressure < 101_325.0
    page = record_text(answer)
    assert "the condensate does not leave by a trap" in page
    assert "clean with the pressure of steam turned down until the cold stream leaves" in page
    assert f"- {name}, day one, turned down" in page
    # With a smaller unit the steam stays above the atmosphere; and a condenser under vacuum has its pump.
    for change in (("tubes: {value: 116", "tubes: {value: 84"), ("2.6 bara", "0.9 bara")):
        day = day_of(solved(tmp_path, HEATER.replace(*change).replace("0.00018 m^2", "0.00004 m^2")))
        assert day.turned_down is not None and not [check for check in day.checks if check.id == name]


def test_a_stated_saturation_temperature_is_moved_itself(tmp_path: Path) -> None:
    day = day_of(solved(tmp_path, BY_TEMPERATURE))
    assert day.turned_down is not None and day.throttle == ("hot", "saturation temperature", False)
    hot = day.turned_down.sides["hot"].outlet
    alone = BY_TEMPERATURE.replace("128.7 degC", f"{hot!r} K")
    assert margin(tmp_path, alone) == pytest.approx(0.0, abs=1e-8)
    assert "turned down" in record_text(solved(tmp_path, BY_TEMPERATURE))


def test_a_boiling_stream_is_raised(tmp_path: Path) -> None:
    answer = solved(tmp_path, CHILLER)
    day = day_of(answer)
    assert day.turned_down is not None and day.throttle == ("cold", "saturation temperature", False)
    cold = day.turned_down.sides["cold"].outlet
    assert 273.15 - 4.0 < cold < 273.15 + 9.0
    assert margin(tmp_path, CHILLER.replace("-4 degC", f"{cold!r} K")) == pytest.approx(0.0, abs=1e-8)
    assert "saturation temperature of steam raised until the hot stream leaves" in record_text(answer)


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        (
            HEATER.replace(", outlet: T_co", "").replace(
                "  T_co: {value: 66 degC,   is: water outlet,          source: sheet}\n", ""
            ),
            "the duty is what the unit reaches, and none is stated",
        ),
        (
            HEATER.replace("tubes: {value: 116", "tubes: {value: 30"),
            "does not carry the duty: it is 40.2 % short",
        ),
        (COOLER.replace("duty:\n", "duty:\n  throttled: cold\n"), "shell-side film is stated"),
        (
            # Half a kelvin off water that comes 50 K hotter than the other: 1 % of its flow would do.
            COOLER.replace("duty:\n", "duty:\n  throttled: hot\n")
            .replace("value: 70 degC", "value: 77.5 degC")
            .replace("value: 34.6 degC", "value: 27.95 degC"),
            "the clean unit carries the duty at 2 % of the hot flow still",
        ),
    ],
)
def test_a_unit_that_cannot_be_turned_down_says_why(tmp_path: Path, text: str, reason: str) -> None:
    answer = solved(tmp_path, text)
    day = day_of(answer)
    assert day.turned_down is None and reason in day.no_turn_down
    page = record_text(answer)
    assert f"No turned-down state: {day.no_turn_down}." in page and "is one way of control" not in page
    # Without a stated duty there is no ledger.
    assert ("### Margin ledger" in page) is ("duty" in answer.base.results)


def test_the_key_takes_a_side(tmp_path: Path) -> None:
    with pytest.raises(Faults) as caught:
        solved(tmp_path, HEATER.replace("duty:\n", "duty:\n  throttled: hott\n"))
    (fault,) = caught.value.faults
    assert fault.nearest == ("hot",) and fault.place.line == HEATER.splitlines().index("duty:") + 2


CASES = """\
cases:
  winter: {T_ci: {value: 6 degC, source: s}}
  summer: {T_ci: {value: 24 degC, source: s}}
  heavy deposit: {R_f: {value: 0.0003 m^2 K/W, source: s}}
"""


def test_every_case_has_its_own_day_one(tmp_path: Path) -> None:
    """A case has the day one of a file in which its figures are those of the base case."""
    answer = solved(tmp_path, HEATER + CASES)
    assert answer.rating is not None and list(answer.rating.days) == ["", "winter", "summer", "heavy deposit"]
    base, winter, summer, heavy = answer.rating.answered.values()
    alone = day_of(solved(tmp_path, HEATER.replace("T_ci: {value: 18 degC", "T_ci: {value: 6 degC")))
    assert winter.turned_down is not None and alone.turned_down is not None
    for side in ("hot", "cold"):
        assert winter.clean.sides[side][1:] == pytest.approx(
            alone.clean.sides[side][1:], rel=1e-9, nan_ok=True
        )
        assert winter.turned_down.sides[side][1:] == pytest.approx(
            alone.turned_down.sides[side][1:], rel=1e-9, nan_ok=True
        )
    # The clean unit has no deposit: with a heavier one it does the same.
    assert heavy.is_like(base) and not winter.is_like(base)
    # The colder the water, the more heat and the hotter the steam.
    assert not winter.checks and {check.condition for check in summer.checks} == {"turned down, case summer"}
    page = record_text(answer)
    assert "#### Day one in case winter" in page
    assert "In case heavy deposit the clean unit does what it does in the base case." in page
    assert "day one, turned down, case summer: p = " in page


OPEN_INLET = COOLER.replace("duty:\n", "duty:\n  throttled: hot\n").replace("value: 4.88 m", "value: 6 m")


def test_an_open_inlet_stays_where_it_was_found_in_each_case(tmp_path: Path) -> None:
    """The inlet follows from the heat of the other stream; with what was found stated, a file of its own does the same."""
    case = "cases:\n  warmer: {T_co: {value: 36 degC, source: s}}\n"
    given = "  T_hi:  {value: 78 degC,   is: hot in,   source: s}\n"
    assert OPEN_INLET.count(given) == 1
    text = OPEN_INLET.replace("inlet: T_hi, outlet: T_ho", "outlet: T_ho").replace(given, "")
    answer = solved(tmp_path, text + case)
    assert answer.rating is not None and list(answer.rating.answered) == ["", "warmer"]
    heats = []
    for one, outlet in zip(answer.cases, ("34.6 degC", "36 degC"), strict=True):
        inlet = one.results["T_hot_inlet"].value
        stated = OPEN_INLET.replace("value: 78 degC", f"value: {inlet!r} K").replace("34.6 degC", outlet)
        alone, found = day_of(solved(tmp_path, stated)), answer.rating.answered[one.name]
        for here, there in ((found.service, alone.service), (found.clean, alone.clean)):
            assert here.heat == pytest.approx(there.heat, rel=1e-9)
        assert found.turned_down is not None and alone.turned_down is not None
        flows = [state.sides["hot"].mass_flow for state in (found.turned_down, alone.turned_down)]
        assert flows[0] == pytest.approx(flows[1], rel=1e-9)
        heats.append(found.clean.heat)
    assert heats[1] > 1.01 * heats[0]


# --- opposite a stream that changes phase ---------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "side", "flow", "outlet"),
    [
        (HEATER.replace("duty:\n", "duty:\n  throttled: cold\n"), "cold", "9.5 kg/s", ", outlet: T_co"),
        (
            CHILLER.replace("duty:\n", "duty:\n  throttled: hot\n").replace("-4 degC", "2 degC"),
            "hot",
            "9.5 kg/s",
            ", outlet: T_co",
        ),
    ],
)
def test_the_flow_beside_a_saturated_stream_is_turned_down_until_the_unit_gives_the_duty(
    tmp_path: Path, text: str, side: str, flow: str, outlet: str
) -> None:
    answer = solved(tmp_path, text)
    day = day_of(answer)
    duty = answer.base.results["duty"].value
    assert day.turned_down is not None and day.throttle == (side, "flow", True)
    assert day.turned_down.heat == pytest.approx(duty, rel=1e-8)
    found = day.turned_down.sides[side]
    # By hand: the outlet follows from the flow, with the heat capacity between its ends (water, within 1 %).
    before = day.service.sides[side]
    inlet = 291.15 if side == "cold" else 287.15
    assert abs(found.outlet - inlet) == pytest.approx(duty / (found.mass_flow * 4186.0), rel=0.01)
    assert found.mass_flow < before.mass_flow
    alone = without_deposits(text.replace(flow, f"{found.mass_flow!r} kg/s").replace(outlet, ""))
    alone = "\n".join(line for line in alone.splitlines() if not line.startswith("  T_co:")) + "\n"
    reached = solved(tmp_path, alone).base.results["heat_reached_clean"].value
    assert reached == pytest.approx(duty, rel=1e-8)
    assert f"clean with the {side} flow turned down until the unit gives the duty" in record_text(answer)


@pytest.mark.parametrize(
    ("text", "side", "what"),
    [
        (HEATER, "hot", "pressure"),
        (
            HEATER.replace("steam: {fluid: water", "steam: {fluid: n-hexane").replace("2.6 bara", "4 bara"),
            "cold",
            "flow",
        ),
        (CHILLER, "cold", "saturation temperature"),
        (CHILLER.replace("ammonia", "n-pentane"), "hot", "flow"),
        (CHILLER.replace("ammonia", "R134a"), "cold", "saturation temperature"),
        # Refrigerants R 744, and one whose number has a C for its ring (ISO 817); water is chilled by others.
        (CHILLER.replace("ammonia", "carbon dioxide"), "cold", "saturation temperature"),
        (CHILLER.replace("ammonia", "RC318"), "cold", "saturation temperature"),
        (CHILLER.replace("ammonia", "water").replace("-4 degC", "2 degC"), "hot", "flow"),
        (COOLER, "cold", "flow"),
    ],
)
def test_the_control_is_that_of_common_practice_where_the_file_names_none(
    tmp_path: Path, text: str, side: str, what: str
) -> None:
    assert day_of(solved(tmp_path, text)).throttle == (side, what, False)


# --- what the state says --------------------------------------------------------------------------------


def test_steam_of_a_stated_temperature_is_cautioned_by_its_pressure(tmp_path: Path) -> None:
    by_pressure = day_of(solved(tmp_path, HEATER))
    saturation = by_pressure.clean.sides["hot"].outlet
    text = HEATER.replace("  p_st: {value: 2.6 bara,", f"  T_st: {{value: {saturation!r} K,")
    text = text.replace("temperature: saturation, pressure: p_st", "temperature: T_st")
    day = day_of(solved(tmp_path, text))
    assert day.turned_down is not None and by_pressure.turned_down is not None
    assert day.turned_down.sides["hot"].pressure == pytest.approx(
        by_pressure.turned_down.sides["hot"].pressure, rel=1e-6
    )
    assert [check.id for check in day.checks] == ["stream steam / band / pressure of a throttled vapour"]


def test_the_state_without_a_margin_has_no_limit_of_margin(tmp_path: Path) -> None:
    """The search ends where nothing is left over: what is there by rounding, above or below, is no verdict."""
    for text in (HEATER, BY_TEMPERATURE, CHILLER):
        assert not [
            check for check in day_of(solved(tmp_path, text)).checks if check.id == "duty / area / margin"
        ]


def test_the_flow_that_changes_phase_is_told_in_every_state(tmp_path: Path) -> None:
    """iapws, an implementation of IAPWS-IF97: latent heat; the flow is the heat over it."""
    day = day_of(solved(tmp_path, HEATER))
    assert day.turned_down is not None
    for state in (day.service, day.clean, day.turned_down):
        steam = state.sides["hot"]
        latent = 1e3 * (IAPWS97(T=steam.outlet, x=1.0).h - IAPWS97(T=steam.outlet, x=0.0).h)
        assert steam.changing == pytest.approx(state.heat / latent, rel=1e-4)
    page = record_text(solved(tmp_path, HEATER))
    assert "| flow of the hot stream that condenses |" in page and "| flow of the hot stream |" not in page


def test_a_stated_coefficient_of_steam_is_no_film_of_a_gas(tmp_path: Path) -> None:
    checks = solved(tmp_path, BY_TEMPERATURE).base.checks
    assert not [check.id for check in checks if "of a gas" in check.id or "liquid to gas" in check.id]


@pytest.mark.parametrize(
    ("tubes", "length", "flow", "is_slow"),
    [
        ("116", "2.44 m", "9.5 kg/s", False),
        ("300", "6 m", "9.5 kg/s", True),
        ("300", "6 m", "4 kg/s", False),
    ],
)
def test_a_speed_that_was_low_before_is_not_bred_by_the_control(
    tmp_path: Path, tubes: str, length: str, flow: str, is_slow: bool
) -> None:
    """A liquid in tubes is slow below 0.1 m/s (common practice): at the stated flow already (300 tubes, by hand
    4/(991.6·300·π/4·0.01575²) = 0.07 m/s), by the control alone (the same at 9.5 kg/s), or never."""
    text = HEATER.replace("duty:\n", "duty:\n  throttled: cold\n").replace(
        "passes: {value: 2", "passes: {value: 1"
    )
    text = text.replace("2.44 m", length).replace("9.5 kg/s", flow)
    answer = solved(tmp_path, text.replace("tubes: {value: 116", f"tubes: {{value: {tubes}"))
    day = day_of(answer)
    assert day.turned_down is not None and day.is_slow is is_slow
    assert (day.turned_down.sides["cold"].speed < 0.1) is (tubes != "116")
    assert ("its speed lies below its usual window" in record_text(answer)) is is_slow


# --- criteria on it -------------------------------------------------------------------------------------


def test_a_criterion_on_the_throttled_pressure_is_judged_in_every_case(tmp_path: Path) -> None:
    text = HEATER + CASES.replace(
        "  heavy deposit", "  colder: {T_ci: {value: 1 degC, source: s}}\n  heavy deposit"
    )
    limit = "pressure_turned_down >= 1 bara"
    answer = solved(
        tmp_path,
        text + f"acceptance:\n  - {{that: {limit}, source: s}}\n  - {{that: area_margin >= 0, source: s}}\n",
    )
    assert answer.rating is not None
    for case in answer.cases:
        day = answer.rating.answered[case.name]
        assert day.turned_down is not None
        first, second = case.criteria
        assert (first.id, second.id) == ("criterion 1", "criterion 2")
        pressure = day.turned_down.sides["hot"].pressure
        assert first.value == pressure and first.met is (pressure >= 1e5)
        assert first.margin == pytest.approx(pressure - 1e5, abs=1e-6)
    assert {case.criteria[0].met for case in answer.cases} == {True, False}
    page = record_text(answer)
    assert "Not judged in case" not in page
    assert f"criterion 1 is not met in case base: {limit}." in page


@pytest.mark.parametrize(
    ("text", "result", "words"),
    [
        (
            HEATER.replace("tubes: {value: 116", "tubes: {value: 30"),
            "pressure_turned_down >= 1 bara",
            "day one has no such state",
        ),
        (
            HEATER,
            "flow_turned_down >= 1 kg/s",
            "the control moves pressure_turned_down and T_turned_down",
        ),
    ],
)
def test_a_criterion_on_a_state_that_is_not_there_is_not_met(
    tmp_path: Path, text: str, result: str, words: str
) -> None:
    answer = solved(tmp_path, text + f"acceptance:\n  - {{that: {result}, source: s}}\n")
    (criterion,) = answer.base.criteria
    assert not criterion.met and criterion.words == words
    # Markdown takes an underscore for a mark.
    assert words in record_text(answer).replace("\\_", "_")


def test_a_criterion_on_day_one_wants_a_duty(tmp_path: Path) -> None:
    start, end = HEATER.index("duty:"), HEATER.index("report:")
    text = HEATER[:start] + HEATER[end:] + "acceptance:\n  - {that: flow_turned_down >= 1 kg/s, source: s}\n"
    text = text.replace("flow: m_w}", "flow: m_w, temperature: {value: 42 degC, source: s}}")
    with pytest.raises(Faults) as caught:
        solved(tmp_path, text)
    (fault,) = caught.value.faults
    assert fault.message == "`flow_turned_down` is found only where the file has `duty:`"


@pytest.mark.parametrize("pressure", ["1.1 bara", "1.3 bara", "3 bara", "5 bara"])
def test_a_unit_that_gives_the_duty_does_not_lack_area_by_rounding(tmp_path: Path, pressure: str) -> None:
    """What is found carries the duty: a margin of nothing is on the side where nothing lacks."""
    day = day_of(solved(tmp_path, HEATER.replace("value: 5 bara", f"value: {pressure}")))
    assert day.turned_down is not None
    assert "duty / area / margin" not in {check.id for check in day.checks}


def test_a_heater_that_could_do_with_steam_as_cold_as_the_water_says_so(tmp_path: Path) -> None:
    """In 20 m the clean unit gives the duty even at 99.9 % of the way to the water's outlet, where the search ends."""
    day = day_of(solved(tmp_path, HEATER.replace("2.44 m", "20 m")))
    assert day.turned_down is None
    words = "the clean unit carries the duty with 0.100 % of the temperature difference still"
    assert day.no_turn_down == words


def test_a_gauge_limit_of_an_absolute_pressure_is_a_fault(tmp_path: Path) -> None:
    """0.15 barg is 1.16 bar absolute: read as 0.15 bar it would be met by steam that is below the atmosphere."""
    with pytest.raises(Faults) as caught:
        solved(tmp_path, HEATER + "acceptance:\n  - {that: pressure_turned_down >= 0.15 barg, source: s}\n")
    (fault,) = caught.value.faults
    assert fault.code == "unit-dimension" and fault.found == "0.15 barg"
