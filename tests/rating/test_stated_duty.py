"""A duty that the file states: between two streams that keep their temperatures, and beside heat balances."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from CoolProp.CoolProp import PropsSI
from iapws import IAPWS97
from rated_units import BY_TEMPERATURE, COOLER, EVAPORATOR, HEATER, solved

from calcbook.chain.outcome import CheckResult, Solved
from calcbook.chain.rating_outcome import DayOne
from calcbook.faults import Faults
from calcbook.interface import NotConverged, record_text, solve_file

DUTY = 1500e3
NO_DUTY = EVAPORATOR.replace("\n  heat flow: Q_ev", "").replace(
    "  Q_ev: {value: 1500 kW,  is: heat of the evaporator,             source: sheet}\n", ""
)


def figures(answer: Solved) -> dict[str, float]:
    return {name: result.value for name, result in answer.base.results.items()}


def checks_of(answer: Solved, name: str) -> list[CheckResult]:
    return [check for check in answer.base.checks if check.id == name]


def day_of(answer: Solved) -> DayOne:
    assert answer.rating is not None
    return answer.rating.answered[""]


def test_a_stated_duty_between_two_streams_that_keep_their_temperatures(tmp_path: Path) -> None:
    found = figures(solved(tmp_path, EVAPORATOR))
    # Saturation of steam by iapws (IAPWS-IF97), of pentane by the backend itself; their latent heats beside them.
    vapour, condensate = IAPWS97(P=0.26, x=1.0), IAPWS97(P=0.26, x=0.0)
    boiling = PropsSI("T", "P", 3e5, "Q", 0, "n-Pentane")
    latent = PropsSI("H", "P", 3e5, "Q", 1, "n-Pentane") - PropsSI("H", "P", 3e5, "Q", 0, "n-Pentane")
    difference = vapour.T - boiling
    # The industrial formulation lies 2 mK beside IAPWS-95 there.
    assert found["LMTD"] == pytest.approx(difference, abs=0.004)
    area = math.pi * 0.01905 * 2.44 * 116
    assert found["area_installed"] == pytest.approx(area, rel=1e-12)
    assert found["area_service"] == pytest.approx(DUTY / (found["U_service"] * difference), rel=1e-4)
    assert found["area_margin"] == pytest.approx(area / found["area_service"] - 1.0, rel=1e-12)
    assert found["heat_reached_service"] == pytest.approx(found["U_service"] * area * difference, rel=1e-4)
    assert found["U_required"] == pytest.approx(DUTY / (area * difference), rel=1e-4)
    assert found["flow_needed_hot"] == pytest.approx(DUTY / (1e3 * (vapour.h - condensate.h)), rel=1e-4)
    assert found["flow_needed_cold"] == pytest.approx(DUTY / latent, rel=1e-9)
    assert not {"flow_needed", "NTU_service", "effectiveness_service", "F"} & set(found)
    assert not any("at the hot inlet" in name for name in found)


def test_between_two_such_streams_the_control_turns_down_the_steam_until_the_unit_gives_the_duty(
    tmp_path: Path,
) -> None:
    day = day_of(solved(tmp_path, EVAPORATOR))
    assert day.turned_down is not None and day.throttle == ("hot", "pressure", False)
    assert day.turned_down.heat == pytest.approx(DUTY, rel=1e-12)
    hot = day.turned_down.sides["hot"]
    alone = EVAPORATOR.replace("0.00018 m^2 K/W", "0 m^2 K/W")
    margins = [
        figures(solved(tmp_path, alone.replace("2.6 bara", f"{part * hot.pressure!r} Pa")))["area_margin"]
        for part in (1.0, 0.999)
    ]
    assert margins[0] == pytest.approx(0.0, abs=1e-8) and margins[1] < 0.0
    # Uncontrolled it takes what U, area and both saturations give; by hand with its own U.
    area, boiling = math.pi * 0.01905 * 2.44 * 116, PropsSI("T", "P", 3e5, "Q", 0, "n-Pentane")
    clean = day.clean
    assert clean.heat == pytest.approx(clean.overall * area * (IAPWS97(P=0.26, x=1.0).T - boiling), rel=1e-4)


def test_the_resistances_of_day_one_follow_from_its_film_coefficients(tmp_path: Path) -> None:
    """1/U = 1/h_o + r_o ln(r_o/r_i)/k + (r_o/r_i)/h_i, plane figures of a clean tube: by hand."""
    day = day_of(solved(tmp_path, EVAPORATOR))
    inner, outer = 0.5 * 0.01575, 0.5 * 0.01905
    assert day.turned_down is not None
    for state in (day.clean, day.turned_down):
        by_hand = (
            1.0 / state.sides["hot"].coefficient
            + outer * math.log(outer / inner) / 15.0
            + outer / inner / state.sides["cold"].coefficient
        )
        assert state.sides["cold"].coefficient == pytest.approx(6000.0, rel=1e-12)
        assert 1.0 / state.overall == pytest.approx(by_hand, rel=1e-9)


def test_without_a_stated_duty_it_is_what_the_unit_reaches(tmp_path: Path) -> None:
    answer = solved(tmp_path, NO_DUTY)
    found = figures(answer)
    area = found["area_installed"]
    difference = IAPWS97(P=0.26, x=1.0).T - PropsSI("T", "P", 3e5, "Q", 0, "n-Pentane")
    assert found["heat_reached_service"] == pytest.approx(found["U_service"] * area * difference, rel=1e-4)
    assert found["heat_reached_service"] == pytest.approx(abs(found["heat_flow_service"]), rel=1e-12)
    assert "area_margin" not in found and "duty" not in found
    day = day_of(answer)
    assert day.turned_down is None and "none is stated" in day.no_turn_down
    assert day.clean.heat > day.service.heat == pytest.approx(found["heat_reached_service"], rel=1e-12)


def test_heat_balances_stand_beside_a_stated_duty(tmp_path: Path) -> None:
    """Kern's rule of a rating: the heat of either stream is the duty; closure errors by hand, |Q − Q_d|/Q_d."""
    before = figures(solved(tmp_path, COOLER))
    stated = 1.02 * before["duty"]
    answer = solved(tmp_path, with_heat(COOLER, stated))
    found = figures(answer)
    assert found["duty"] == stated
    both = before["closure"]  # the hot stream carries more
    assert found["closure_hot"] == pytest.approx(1.0 - (1.0 + both / 2.0) / 1.02, rel=1e-9)
    assert found["closure_cold"] == pytest.approx(1.0 - (1.0 - both / 2.0) / 1.02, rel=1e-9)
    assert found["area_service"] == pytest.approx(1.02 * before["area_service"], rel=1e-12)
    assert "closure" not in found
    assert "off it by heat balance: of the hot stream 1.79 %, of the cold stream 2.13 %" in record_text(
        answer
    )


@pytest.mark.parametrize(
    ("part", "caution", "range_"),
    [(1.02, "within", "within"), (1.08, "outside", "within"), (1.2, "outside", "outside")],
)
def test_a_stated_duty_that_no_heat_balance_gives_is_told(
    tmp_path: Path, part: float, caution: str, range_: str
) -> None:
    heat = figures(solved(tmp_path, COOLER))["duty"]
    answer = solved(tmp_path, with_heat(COOLER, part * heat))
    for level, state in (("caution", caution), ("range", range_)):
        states = {check.state for check in checks_of(answer, f"duty / heat balance / hot closure {level}")}
        assert states == {state}


def test_an_outlet_is_found_from_the_stated_duty(tmp_path: Path) -> None:
    text = HEATER.replace(", outlet: T_co", "").replace(
        "  T_co: {value: 66 degC,   is: water outlet,          source: sheet}\n", ""
    )
    found = figures(solved(tmp_path, with_heat(text, 1.2e6)))
    # By hand, with the heat capacity of water between its ends (within 0.5 %).
    assert found["T_cold_outlet"] == pytest.approx(291.15 + 1.2e6 / (9.5 * 4183.0), rel=5e-4)
    assert found["duty"] == 1.2e6 and math.isfinite(found["area_margin"])


@pytest.mark.parametrize(
    ("limit", "met"), [("heat_flux_clean <= 50 kW/m^2", False), ("heat_flux_clean >= 50 kW/m^2", True)]
)
def test_a_heat_flux_from_outside_to_inside_is_judged_by_its_size(
    tmp_path: Path, limit: str, met: bool
) -> None:
    """Steam is outside: heat flows inwards. By hand q = U ΔT; 0.5 kW/m² would be no evaporator."""
    text = EVAPORATOR.replace("1500 kW, ", "1500 kW, tolerance: 5 %,").replace(
        "2.6 bara, ", "2.6 bara, tolerance: 2 %,"
    )
    criterion = f"acceptance:\n  - {{that: {limit}, source: sheet, probability: 90 %}}\n"
    answer = solved(tmp_path, text + criterion + "uncertainty: {of: [heat_flux_clean]}\n")
    found = figures(answer)
    by_hand = found["U_clean"] * (IAPWS97(P=0.26, x=1.0).T - PropsSI("T", "P", 3e5, "Q", 0, "n-Pentane"))
    assert found["heat_flux_clean"] == pytest.approx(by_hand, rel=1e-4) and by_hand > 50e3
    (row,) = answer.base.criteria
    assert row.met is met and row.stated_met is met
    assert row.reached == (1.0 if met else 0.0)
    assert answer.uncertainty is not None
    (budget,) = [one for one in answer.uncertainty.budgets if one.result == "heat_flux_clean"]
    assert budget.value == found["heat_flux_clean"]
    # More steam pressure, more heat: the slope has the sign of the size.
    assert next(one.slope for one in budget.rows if one.input.symbol == "p_st") > 0.0


def test_a_heat_flux_has_no_limit_below_zero(tmp_path: Path) -> None:
    criterion = "acceptance:\n  - {that: heat_flux_clean >= -50 kW/m^2, source: sheet}\n"
    with pytest.raises(Faults) as told:
        solved(tmp_path, EVAPORATOR + criterion)
    (fault,) = told.value.faults
    assert fault.code == "quantity-negative" and "by its size" in fault.message


def with_heat(text: str, heat: float) -> str:
    return text.replace("duty:\n", f"duty:\n  heat flow: {{value: {heat!r} W, source: data sheet}}\n")


def test_a_duty_below_zero_is_no_number(tmp_path: Path) -> None:
    with pytest.raises((Faults, NotConverged)) as told:
        solved(tmp_path, EVAPORATOR.replace("1500 kW", "-1500 kW"))
    assert "heat" in str(told.value)


def test_a_temperature_cross_between_two_such_streams_is_no_number(tmp_path: Path) -> None:
    with pytest.raises((Faults, NotConverged)):
        solved(tmp_path, EVAPORATOR.replace("2.6 bara", "0.2 bara"))


def test_parts_of_a_unit_along_which_nothing_changes_are_a_fault(tmp_path: Path) -> None:
    with pytest.raises(Faults) as told:
        solved(tmp_path, EVAPORATOR.replace("heat flow: Q_ev", "heat flow: Q_ev\n  parts: 4"))
    (fault,) = told.value.faults
    assert fault.code == "duty-unreadable" and "every part is like the whole" in fault.message


def test_the_distance_to_flip_of_a_stated_duty_is_what_the_unit_reaches(tmp_path: Path) -> None:
    path = tmp_path / "td-1.yaml"
    path.write_text(
        EVAPORATOR + "acceptance:\n  - {that: area_margin >= 0, source: sheet}\n", encoding="utf-8"
    )
    answer = solve_file(path)
    assert answer.flips is not None
    flip = next(one for one in answer.flips.of_kind("criterion") if one.input.symbol == "Q_ev")
    assert flip.at == pytest.approx(figures(answer)["heat_reached_service"], rel=1e-8)


def test_a_record_says_what_the_heat_rests_on(tmp_path: Path) -> None:
    text = record_text(solved(tmp_path, EVAPORATOR))
    assert "| Duty | 1 500 000 W | as stated |" in text.replace("\u2009", " ")
    assert "U_service·A_installed·ΔT between both saturation temperatures" in text
    assert "The unit at the saturation temperatures of both streams" in text


# --- day one of a stated duty ---------------------------------------------------------------------------


def test_the_control_holds_the_outlet_that_is_stated_beside_another_heat_flow(tmp_path: Path) -> None:
    """Water from 18 to 66 °C takes what it takes: the clean heater at that outlet is the one without a stated duty."""
    plain = day_of(solved(tmp_path, HEATER)).turned_down
    stated = 1.08 * figures(solved(tmp_path, HEATER))["duty"]
    answer = solved(tmp_path, with_heat(HEATER, stated))
    beside = day_of(answer).turned_down
    assert plain is not None and beside is not None
    assert beside.heat == pytest.approx(plain.heat, rel=1e-12) and beside.heat < stated / 1.07
    assert beside.sides["hot"].pressure == pytest.approx(plain.sides["hot"].pressure, rel=1e-9)
    # By hand: m·cp·ΔT of water (4183 J/(kg K) within 0.2 %).
    assert beside.heat == pytest.approx(9.5 * 4183.0 * 48.0, rel=2e-3)
    # Without a stated outlet the stated duty is what it gives, with the outlet that follows.
    given = "  T_co: {value: 66 degC,   is: water outlet,          source: sheet}\n"
    opened = with_heat(HEATER.replace(", outlet: T_co", "").replace(given, ""), stated)
    alone = day_of(solved(tmp_path, opened)).turned_down
    assert alone is not None and alone.heat == pytest.approx(stated, rel=1e-9)
    assert alone.sides["cold"].outlet > 66.0 + 273.15


GROWING = EVAPORATOR.replace(
    "resistance: R_f, on: inside",
    "growth: {model: fouling-linear, r: {value: 1e-11 m^2 K/J, source: s}, after: {value: 90 days, source: s}}, on: inside",
)
IN_SERVICE = (
    "time in service: {until: {value: 400 days, source: s}, steps: 5}\n"
    "cleaning:\n  duration: {value: 3 days, source: s}\n"
)
ASKED = "acceptance:\n  - {that: pressure_turned_down >= 1.1 bara, source: sheet}\n"


def test_where_nothing_fouls_the_control_acts_all_the_same(tmp_path: Path) -> None:
    clean = EVAPORATOR.replace(
        "  - {name: deposit, kind: fouling, resistance: R_f, on: inside}\n", ""
    ).replace("  R_f:  {value: 0.00018 m^2 K/W, is: allowance,       source: sheet}\n", "")
    unasked = solved(tmp_path, clean)
    assert unasked.rating is not None and not unasked.rating.days
    answer = solved(tmp_path, clean + ASKED)
    (row,) = answer.base.criteria
    beside = figures(solved(tmp_path, EVAPORATOR))["pressure_turned_down"]
    assert row.value == pytest.approx(beside, rel=1e-9) and row.met


def test_a_state_that_a_criterion_asks_for_and_no_flow_gives_is_an_open_item(tmp_path: Path) -> None:
    text = (
        BY_TEMPERATURE.replace(
            "situation: inside-tube", "coefficient: {value: 5000 W/(m^2 K), source: s}, on: inside"
        )
        .replace(", flow: m_w", "")
        .replace("  m_w:  {value: 9.5 kg/s,  is: water flow,            source: sheet}\n", "")
    )
    text = with_heat(text, 1.9e6)
    assert not solved(tmp_path, text).base.open_items
    answer = solved(tmp_path, text + "acceptance:\n  - {that: T_turned_down >= 100 degC, source: sheet}\n")
    (item,) = answer.base.open_items
    assert "a flow is not stated from which an outlet would follow" in item.text
    assert [row.met for row in answer.base.criteria] == [False]


def test_what_the_control_moves_names_its_stream_and_which_way(tmp_path: Path) -> None:
    titles = {
        way: solved(tmp_path, EVAPORATOR.replace("duty:\n", f"duty:\n  throttled: {side}\n"))
        .base.results["pressure_turned_down"]
        .title
        for side, way in (("hot", "steam, turned down"), ("cold", "pentane, raised"))
    }
    assert all(title.endswith(f": {way}") for way, title in titles.items())


def test_a_flow_is_asked_for_where_the_control_moves_a_pressure(tmp_path: Path) -> None:
    text = EVAPORATOR + "acceptance:\n  - {that: flow_turned_down >= 1 kg/s, source: sheet}\n"
    (row,) = solved(tmp_path, text).base.criteria
    assert not row.met and row.words == "the control moves pressure_turned_down and T_turned_down"


def test_a_cold_stream_is_raised_no_further_than_its_critical_point(tmp_path: Path) -> None:
    """Propane boils up to 369.9 K and 4.25 MPa (its critical point); steam of 2.6 bar stands above."""
    text = (
        EVAPORATOR.replace("duty:\n", "duty:\n  throttled: cold\n")
        .replace("n-pentane", "propane")
        .replace("value: 3 bara", "value: 30 bara")
        .replace("1500 kW", "100 kW")
    )
    day = day_of(solved(tmp_path, text))
    assert day.turned_down is None
    assert day.no_turn_down.endswith("up to a pressure beyond which the stream has no saturation")


def test_a_stated_flow_of_the_throttled_stream_is_said_to_be_kept(tmp_path: Path) -> None:
    text = EVAPORATOR.replace("pressure: p_st}", "pressure: p_st, flow: {value: 0.9 kg/s, source: s}}")
    answer = solved(tmp_path, text)
    state = day_of(answer).turned_down
    assert state is not None and state.sides["hot"].changing < 0.9
    assert "The flow of steam is kept as stated, 0.9 kg/s" in record_text(answer)
    assert "The flow of steam is kept" not in record_text(solved(tmp_path, EVAPORATOR))


def test_the_duty_has_one_symbol_whatever_its_given_is_called(tmp_path: Path) -> None:
    """A given Q_h beside the heat Q_h of the hot stream: a row with both could not be redone."""
    text = with_heat(COOLER, 1.0).replace("{value: 1.0 W, source: data sheet}", "Q_h")
    text = text.replace("givens:\n", "givens:\n  Q_h: {value: 1350 kW, is: duty, source: data sheet}\n")
    rows = [line for line in record_text(solved(tmp_path, text)).splitlines() if line.startswith("| closure")]
    assert "(Q_h − Q_d)/Q_d" in rows[0] and "(Q_c − Q_d)/Q_d" in rows[1]


@pytest.mark.parametrize(("against", "word"), [("", "duty"), ("  loss against: cleaned unit\n", "")])
def test_a_stated_duty_is_what_fouling_takes_from(tmp_path: Path, against: str, word: str) -> None:
    """A kettle under its control loses nothing before the duty: counted from the clean unit it would at once."""
    text = GROWING.replace("report:", IN_SERVICE + against + "report:").replace(
        "  R_f:  {value: 0.00018 m^2 K/W, is: allowance,       source: sheet}\n", ""
    )
    answer = solved(tmp_path, text)
    said = [item.text for item in answer.chain.assumptions if item.id == "cleaning/loss against"]
    assert said == ([f"The heat that fouling loses is counted from the {word}."] if word else [])
    assert answer.over_time is not None and answer.over_time.interval is not None
    assert answer.rating is not None and not answer.rating.unanswered
    assert "the heat is what U and area give between both saturation temperatures" in record_text(answer)


def test_a_saturated_stream_has_no_temperature_at_its_end(tmp_path: Path) -> None:
    text = HEATER.replace("hot: {stream: steam}", "hot: {stream: steam, inlet: T_co, outlet: T_ci}")
    assert text != HEATER
    with pytest.raises(Faults) as told:
        solved(tmp_path, text)
    (fault,) = told.value.faults
    assert fault.code == "duty-incomplete"
    assert fault.message == "the hot stream `steam` is saturated and has a temperature at its end"


@pytest.mark.parametrize("text", [HEATER, EVAPORATOR])
def test_passes_are_not_asked_of_where_a_stream_keeps_its_temperature(tmp_path: Path, text: str) -> None:
    """Against one temperature the mean difference is that of any arrangement (common practice)."""
    single = text.replace("passes: {value: 2,", "passes: {value: 1,")
    assert single != text
    assert checks_of(solved(tmp_path, single), "duty / arrangement / tube passes") == []


# --- what a criterion on a unit judges -------------------------------------------------------------------


def test_a_closure_is_judged_by_its_size(tmp_path: Path) -> None:
    """The cold stream carries 4 % more than the hot one: (Q_h − Q_c) over their mean is −4 % (by hand)."""
    stated = figures(solved(tmp_path, COOLER))["closure"]
    answer = solved(tmp_path, COOLER.replace("value: 20.5 kg/s", "value: 21.4 kg/s"))
    assert answer.base.solutions["service"].number(answer.chain.results["closure"]) < 0.0
    ratio = 21.4 / 20.5 * (1.0 - stated / 2.0) / (1.0 + stated / 2.0)
    assert figures(answer)["closure"] == pytest.approx(2.0 * (ratio - 1.0) / (ratio + 1.0), rel=1e-9)
    text = COOLER.replace("value: 20.5 kg/s", "value: 21.4 kg/s")
    judged = solved(tmp_path, text + "acceptance:\n  - {that: closure <= 2 %, source: s}\n")
    assert [row.met for row in judged.base.criteria] == [False]


def test_a_criterion_on_the_heat_of_the_mean_temperatures_is_an_open_item(tmp_path: Path) -> None:
    """U·A times the difference of the means is more than the heat of the unit; saturated on both sides it is that."""
    criterion = "acceptance:\n  - {that: heat_flow_service >= 100 kW, source: s}\n"
    answer = solved(tmp_path, HEATER + criterion)
    assert figures(answer)["heat_flow_service"] > 1.02 * figures(answer)["heat_reached_service"]
    (item,) = [one for one in answer.base.open_items if one.id == "criterion 1 / mean temperatures"]
    assert "judges U times the difference of the mean temperatures" in item.text
    both = solved(tmp_path, EVAPORATOR + criterion)
    assert not [one for one in both.base.open_items if one.id.endswith("mean temperatures")]


@pytest.mark.parametrize("text", [EVAPORATOR, NO_DUTY])
def test_conditions_are_compared_at_temperatures_that_nothing_moves(tmp_path: Path, text: str) -> None:
    """Such a unit has no outlets that could be stated or reached."""
    page = record_text(solved(tmp_path, text))
    assert "Clean and service are compared at the same saturation temperatures." in page
