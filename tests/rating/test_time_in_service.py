"""The unit over its time in service: rows, the time at which the duty is lost, the cleaning interval.

References are closed forms of stated coefficients, scipy's quadrature and search, and the same chain asked for one
time alone.
"""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import brentq, minimize_scalar

from calcbook.chain.growth_outcome import OverTime
from calcbook.chain.outcome import Solved
from calcbook.chain.types import SERVICE
from calcbook.interface import record_text, solve_file
from calcbook.library import evaluate_method, load_method
from calcbook.rating.summing import Summed, crossing, root
from calcbook.record import digest_of
from calcbook.record.growth_figures import growth_figures

DAY = 86400.0
HEAD = """\
calculation: {number: GR-1, title: Trial, plant: Works, revision: A, prepared by: K. L., date: 2026-11-20}
purpose: Trial of the time in service.
"""
# Two stated films and a wall without resistance to speak of: every figure has a closed form.
H_I, H_O, RATE, AREA, DIFFERENCE = 2000.0, 3000.0, 2e-11, 5.0, 40.0
CLEAN_R = 1 / H_I + 1 / H_O + 0.001 / 400.0


def plane(growth: str, more: str) -> str:
    return f"""{HEAD}geometry: {{shape: plane, area: {{value: {AREA} m^2, source: s}}}}
resistances:
  - name: inner film
    kind: film
    coefficient: {{value: {H_I} W/(m^2 K), source: s}}
    temperature: {{value: 70 degC, source: s}}
  - {{name: scale, kind: fouling, growth: {growth}}}
  - {{name: wall, kind: wall, thickness: {{value: 1 mm, source: s}}, conductivity: {{value: 400 W/(m K), source: s}}}}
  - name: outer film
    kind: film
    coefficient: {{value: {H_O} W/(m^2 K), source: s}}
    temperature: {{value: 30 degC, source: s}}
report: {{U on: outside}}
{more}"""


LINEAR = f"{{model: fouling-linear, r: {{value: {RATE} m^2 K/J, source: s}}, after: {{value: 90 days, source: s}}}}"
ASYMPTOTIC = (
    "{model: kern-seaton-1959, R_inf: {value: 0.0004 m^2 K/W, source: s}, tau: {value: 60 days, source: s},"
    " after: {value: 90 days, source: s}}"
)
TABLE = "time in service: {until: 400 days, steps: 9}\n"


def money(cost: float, price: float, duration: str = "2 days", more: str = "") -> str:
    return TABLE + (
        f"cleaning: {{duration: {{value: {duration}, source: s}}, currency: EUR,"
        f" cost of one cleaning: {{value: {cost} EUR, source: s}},"
        f" price of heat: {{value: {price} EUR/MWh, source: s}}{more}}}\n"
    )


def solved(folder: Path, text: str) -> Solved:
    path = folder / "gr-1.yaml"
    path.write_text(text, encoding="utf-8")
    return solve_file(path)


def over(folder: Path, text: str) -> OverTime:
    found = solved(folder, text).over_time
    assert found is not None
    return found


def grown(model: str, seconds: float) -> float:
    """The resistance of the two growths above, by hand."""
    return RATE * seconds if model == "linear" else 0.0004 * -math.expm1(-seconds / (60 * DAY))


def heat(model: str) -> Callable[[float], float]:
    return lambda seconds: AREA * DIFFERENCE / (CLEAN_R + grown(model, seconds))


# --- sums and searches --------------------------------------------------------------------------------


def test_sums_of_smooth_and_bent_curves() -> None:
    """Against scipy's quad, told where the curve bends."""
    curves = {
        "smooth": (lambda x: np.exp(-x) * np.sin(5 * x), []),
        "bent": (lambda x: np.maximum(x - 0.7123, 0.0) ** 1.0, [0.7123]),
        "rising": (lambda x: -np.expm1(-x / 0.3), []),
    }
    for curve, bends in curves.values():
        summed = Summed(curve, np.array([0.0, *bends, 3.0]), 0.0)
        for place in (0.1, 0.5, 0.7123, 1.0, 2.9, 3.0):
            expected = quad(curve, 0.0, place, points=bends or None, epsabs=1e-14, epsrel=1e-13)[0]
            assert summed.sum(np.array([place]))[0] == pytest.approx(expected, rel=1e-9, abs=1e-11)
            assert summed.value(np.array([place]))[0] == pytest.approx(
                float(curve(np.array(place))), abs=1e-6
            )


def test_a_bend_that_nobody_told_of_is_found() -> None:
    """Cut by cut: forty halvings leave the place of the bend within 3e-12 of the range."""
    summed = Summed(lambda x: np.maximum(x - 0.7123, 0.0), np.array([0.0, 3.0]), 0.0)
    assert summed.sum(np.array([3.0]))[0] == pytest.approx((3.0 - 0.7123) ** 2 / 2, rel=1e-9)


def test_a_curve_without_values_has_no_sum() -> None:
    summed = Summed(lambda x: np.where(x < 1.0, 1.0, np.nan), np.array([0.0, 2.0]), 0.0)
    assert math.isnan(summed.sum(np.array([2.0]))[0])


def test_a_curve_that_is_rounding_is_not_cut_to_pieces() -> None:
    """A difference of two heats that hardly differ: what is left is their rounding, and no cutting smooths it."""
    whole = 2.466e6
    summed = Summed(lambda x: whole - (whole - 1e-9 * x), np.array([0.0, 1.0]), 1e-13 * whole)
    assert len(summed.low) <= 4
    assert summed.sum(np.array([1.0]))[0] == pytest.approx(0.0, abs=1e-9)


def test_crossings_and_roots() -> None:
    assert crossing(lambda x: np.cos(x), 0.0, 10.0) == pytest.approx(
        math.pi / 2, rel=1e-14
    )  # the first of three
    assert math.isnan(crossing(lambda x: 1.0 + x, 0.0, 10.0))
    assert math.isnan(crossing(lambda x: x - 1.0, 0.0, 10.0))
    # Beyond a stretch where the curve has no value nobody knows whether it came to zero there.
    assert math.isnan(crossing(lambda x: np.where((x > 1.0) & (x < 1.2), np.nan, 1.5 - x), 0.0, 3.0))
    for curve, expected in ((lambda x: x**3 - 2.0, 2 ** (1 / 3)), (lambda x: 1.0 - x / 7.0, 7.0)):
        assert root(curve, 0.1, 9.0) == pytest.approx(expected, rel=1e-13)


# --- the table ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(("model", "growth"), [("linear", LINEAR), ("asymptotic", ASYMPTOTIC)])
def test_rows_of_stated_coefficients(tmp_path: Path, model: str, growth: str) -> None:
    found = over(tmp_path, plane(growth, TABLE))
    assert [row.time for row in found.rows] == pytest.approx([50 * DAY * place for place in range(9)])
    for row in found.rows:
        assert row.resistances["scale"] == pytest.approx(grown(model, row.time), rel=1e-12)
        assert row.overall == pytest.approx(1 / (CLEAN_R + grown(model, row.time)), rel=1e-12)
        assert row.heat == pytest.approx(heat(model)(row.time), rel=1e-12)
        assert math.isnan(row.margin) and not row.outlets and math.isnan(row.loss)
    assert found.interval is None and math.isnan(found.duty_lost) and found.failed == 0
    assert found.duty_words == "no duty is stated that could be lost"


COOLER = f"""{HEAD}givens:
  t_after: {{value: 6 months, is: time since the last cleaning, source: s}}
streams:
  hot: {{fluid: water, pressure: {{value: 4 bara, source: s}}, flow: {{value: 18 kg/s, source: s}}}}
  cold: {{fluid: water, pressure: {{value: 4 bara, source: s}}, flow: {{value: 24 kg/s, source: s}}}}
geometry:
  shape: tube
  inside diameter: {{value: 14.8 mm, source: s}}
  outside diameter: {{value: 19.05 mm, source: s}}
  length: {{value: 4.88 m, source: s}}
  parallel: {{value: 62, source: s}}
duty:
  arrangement: counterflow
  hot: {{stream: hot, inlet: {{value: 80 degC, source: s}}, outlet: {{value: 68 degC, source: s}}}}
  cold: {{stream: cold, inlet: {{value: 24 degC, source: s}}}}
resistances:
  - {{name: tube film, kind: film, stream: cold, situation: inside-tube}}
  - name: scale
    kind: fouling
    growth:
      model: kern-seaton-1959
      R_inf: {{value: 0.0004 m^2 K/W, source: s}}
      tau: {{value: 120 days, source: s}}
      after: t_after
    deposit: {{conductivity: {{value: 1.2 W/(m K), source: s}}, narrows: yes}}
  - {{name: wall, kind: wall, conductivity: {{value: 16 W/(m K), source: s}}}}
  - name: shell film
    kind: film
    stream: hot
    coefficient: {{value: 5200 W/(m^2 K), source: s}}
    on: outside
report: {{U on: outside}}
time in service: {{until: 24 months, steps: 13}}
"""


@pytest.fixture(scope="module")
def cooler(tmp_path_factory: pytest.TempPathFactory) -> Solved:
    cleaning = money(9000, 28).removeprefix(TABLE)
    return solved(tmp_path_factory.mktemp("cooler"), COOLER + cleaning)


def test_a_row_is_the_calculation_at_its_time(cooler: Solved, tmp_path: Path) -> None:
    assert cooler.over_time is not None
    row = cooler.over_time.rows[2]
    alone = solved(tmp_path, COOLER.replace("value: 6 months", "value: 4 months")).base
    for name, value in (
        ("U_service", row.overall),
        ("area_margin", row.margin),
        ("dp cold_service", row.pressure_drops["cold"]),
    ):
        assert value == pytest.approx(alone.results[name].value, rel=1e-12)


def test_heat_and_outlets_balance(cooler: Solved) -> None:
    """m·cp·ΔT of both streams at the reached outlets: the means of the ends give cp within 1e-4 of the mean cp."""
    assert cooler.over_time is not None
    for row in cooler.over_time.rows:
        hot = 18 * 4190.0 * (353.15 - row.outlets["hot"])
        cold = 24 * 4180.0 * (row.outlets["cold"] - 297.15)
        assert hot == pytest.approx(row.heat, rel=2e-3) and cold == pytest.approx(row.heat, rel=2e-3)
    heats = [row.heat for row in cooler.over_time.rows]
    assert heats == sorted(heats, reverse=True)


def test_the_duty_is_lost_where_the_margin_is_nothing_and_the_heat_is_the_duty(
    cooler: Solved, tmp_path: Path
) -> None:
    """Two ways to one time: the area at the stated ends, and the heat reached at open outlets."""
    assert cooler.over_time is not None
    lost = cooler.over_time.duty_lost
    assert 8 * 365.25 / 12 * DAY < lost < 10 * 365.25 / 12 * DAY
    alone = solved(tmp_path, COOLER.replace("value: 6 months", f"value: {lost!r} s"))
    assert alone.base.results["area_margin"].value == pytest.approx(0.0, abs=1e-9)
    assert alone.rating is not None and "" in alone.rating.answered
    assert alone.rating.answered[""].service.heat == pytest.approx(alone.base.results["duty"].value, rel=1e-8)


def test_words_where_no_duty_is_lost(tmp_path: Path) -> None:
    short = solved(tmp_path, COOLER.replace("until: 24 months, steps: 13", "until: 3 months, steps: 2"))
    assert short.over_time is not None and "to the end of the table" in short.over_time.duty_words
    small = solved(tmp_path, COOLER.replace("value: 62", "value: 24"))
    assert small.over_time is not None and "does not carry" in small.over_time.duty_words


def test_verdicts_turn_when_a_calculation_at_that_time_turns(tmp_path: Path) -> None:
    """The margin of area turns when the duty is lost; the pressure drop is asked of the chain itself on both sides.

    Two months of a row in 20^5 parts are 1.6 s.
    """
    criteria = "acceptance:\n  - {that: area_margin >= 0, source: s}\n  - {that: dp cold_service <= 37 kPa, source: s}\n"
    found = over(tmp_path, COOLER + criteria)
    by_id = {turn.id: turn for turn in found.turns}
    assert list(by_id) == [turn.id for turn in sorted(found.turns, key=lambda turn: turn.time)]
    first = by_id["criterion 1"]
    assert (first.was, first.becomes) == ("met", "not met")
    assert 0.0 <= first.time - found.duty_lost <= 2.0
    second = by_id["criterion 2"].time
    for seconds, met in ((second, False), (second - 2.0, True)):
        at = solved(tmp_path, COOLER.replace("value: 6 months", f"value: {seconds!r} s") + criteria)
        assert at.base.criteria[1].met is met
    assert by_id["controlling term"].becomes == "scale"


def test_no_verdict_turns_where_nothing_is_asked(tmp_path: Path) -> None:
    found = over(tmp_path, plane(LINEAR.replace("2e-11", "2e-14"), TABLE))
    assert found.turns == ()


# --- the interval -------------------------------------------------------------------------------------


def least_cost(model: str, cost: float, price: float, cleaning: float) -> float:
    """The interval of least mean cost by quadrature and bracketing on the closed form of the heat."""
    p = price / 3.6e9
    clean = heat(model)(0.0)

    def loss(t: float) -> float:
        return p * (clean - heat(model)(t))

    def excess(t: float) -> float:
        return loss(t) * (t + cleaning) - cost - quad(loss, 0, t, epsrel=1e-10)[0]

    return float(brentq(excess, 1.0, 400 * DAY, xtol=1e-6, rtol=1e-14))


@pytest.mark.parametrize(("model", "growth"), [("linear", LINEAR), ("asymptotic", ASYMPTOTIC)])
def test_the_interval_of_least_cost(tmp_path: Path, model: str, growth: str) -> None:
    found = over(tmp_path, plane(growth, money(1500, 25))).interval
    assert found is not None
    expected = least_cost(model, 1500.0, 25.0, 2 * DAY)
    # 1e-8: the sums agree within 1e-12 and the polynomials of the pieces within 1e-9.
    assert found.interval == pytest.approx(expected, rel=1e-8)
    p = 25.0 / 3.6e9
    assert found.least == pytest.approx(p * (heat(model)(0.0) - heat(model)(expected)), rel=1e-8)
    for end in found.flat:
        lost = quad(lambda t: p * (heat(model)(0.0) - heat(model)(t)), 0, end, epsrel=1e-12)[0]
        assert (1500 + lost) / (end + 2 * DAY) == pytest.approx(1.05 * found.least, rel=1e-8)


def test_a_flat_range_that_goes_on_beyond_the_table_has_no_end_there(tmp_path: Path) -> None:
    """114 days cost least; the mean at 130 days, by quadrature, stands less than 5 % above it."""
    short = money(1500, 25).replace("until: 400 days", "until: 130 days")
    found = over(tmp_path, plane(LINEAR, short)).interval
    assert found is not None and found.interval == pytest.approx(
        least_cost("linear", 1500.0, 25.0, 2 * DAY), rel=1e-8
    )
    lost = quad(lambda t: 25 / 3.6e9 * (heat("linear")(0.0) - heat("linear")(t)), 0, 130 * DAY)[0]
    assert found.least < (1500 + lost) / (132 * DAY) < 1.05 * found.least
    start, end = found.flat
    assert 0.0 < start < found.interval and math.isnan(end)


def test_the_interval_of_least_cost_on_the_curve_of_a_whole_chain(cooler: Solved) -> None:
    """No other interval costs less: a straight search over the chain's own heat, by sums of many equal pieces."""
    assert cooler.over_time is not None and cooler.over_time.interval is not None
    found = cooler.over_time.interval
    from calcbook.rating.growth import _Course

    course = _Course(cooler)
    times = np.linspace(0.0, 1.2 * found.interval, 241)
    loss = 28 / 3.6e9 * (course.heat_at(np.zeros(1))[0] - course.heat_at(times))
    steps = np.diff(times)
    # Simpson's rule on pairs of equal pieces; 1e-7 is what it leaves here.
    pairs = steps[::2] / 3 * (loss[:-1:2] + 4 * loss[1::2] + loss[2::2])
    sums = np.concatenate([[0.0], np.cumsum(pairs)])
    even = times[::2]
    mean = (9000 + sums[1:]) / (even[1:] + 2 * DAY)
    place = int(np.argmin(mean))
    assert abs(even[1:][place] - found.interval) <= 2 * steps[0]
    assert found.least == pytest.approx(mean[place], rel=1e-4)
    assert found.least < mean[place] + 1e-7 * mean[place]


def test_the_interval_of_most_heat_is_the_closed_form(tmp_path: Path) -> None:
    """Without money, at one temperature difference and an even growth, the card of the library is exact."""
    cleaning = TABLE + "cleaning: {duration: {value: 3 days, source: s}}\n"
    found = over(tmp_path, plane(LINEAR, cleaning)).interval
    assert found is not None and not found.counts_money
    expected = evaluate_method(
        load_method("cleaning-interval-heat-linear"), {"U_c": 1 / CLEAN_R, "b": RATE, "t_c": 3 * DAY}
    )["t_opt"]
    assert found.interval == pytest.approx(expected, rel=1e-8)
    assert found.closed_form is not None and found.closed_form.interval == pytest.approx(expected, rel=1e-6)
    total = minimize_scalar(
        lambda t: -quad(heat("linear"), 0, t, epsrel=1e-12)[0] / (t + 3 * DAY),
        bounds=(DAY, 300 * DAY),
        method="bounded",
    )
    assert found.interval == pytest.approx(total.x, rel=1e-4)  # a maximum is flat: that is what a search sees


def test_the_closed_form_nears_the_chain_as_the_loss_nears_its_law(tmp_path: Path) -> None:
    """A small final resistance loses heat as it grows itself; the loss of the card is then that of the chain."""
    differences = []
    for resistance, price in ((4e-5, 250.0), (4e-6, 2500.0)):
        growth = ASYMPTOTIC.replace("0.0004", repr(resistance))
        found = over(tmp_path, plane(growth, money(3000, price))).interval
        assert found is not None and found.closed_form is not None
        assert found.closed_form.card == "cleaning-interval-asymptotic"
        differences.append(abs(found.closed_form.interval / found.interval - 1))
    assert differences[0] < 0.03 and differences[1] < differences[0] / 5


def test_the_closed_form_of_an_even_growth_takes_the_loss_of_the_chain(tmp_path: Path) -> None:
    """A loss a·t costs least at t² + 2·t·t_c = 2·C/a (Ma and Epstein's class of problem, worked out by hand), with a
    from the loss by the closed form of the heat at the interval."""
    found = over(tmp_path, plane(LINEAR, money(1500, 25))).interval
    assert found is not None and found.closed_form is not None
    assert found.closed_form.card == "cleaning-interval-linear"
    lost = 25.0 / 3.6e9 * (heat("linear")(0.0) - heat("linear")(found.interval))
    slope, pause = lost / found.interval, 2 * DAY
    by_hand = math.sqrt(pause**2 + 2 * 1500.0 / slope) - pause
    assert found.closed_form.interval == pytest.approx(by_hand, rel=1e-9)


def test_a_growth_that_waits_or_is_not_alone_has_an_interval_and_no_closed_form(tmp_path: Path) -> None:
    """The cards are of one growth from the cleaning on: quadrature of the heat where it waits for 40 days, and twice
    the rate where two terms grow alike."""
    waiting = LINEAR.replace("after:", "t_ind: {value: 40 days, source: s}, after:")
    found = over(tmp_path, plane(waiting, money(1500, 25))).interval
    assert found is not None and found.closed_form is None
    p, clean = 25.0 / 3.6e9, heat("linear")(0.0)

    def loss(t: float) -> float:
        return p * (clean - heat("linear")(max(t - 40 * DAY, 0.0)))

    def excess(t: float) -> float:
        return loss(t) * (t + 2 * DAY) - 1500.0 - quad(loss, 40 * DAY, t, epsrel=1e-10)[0]

    expected = brentq(excess, 41 * DAY, 400 * DAY, xtol=1e-6, rtol=1e-14)
    assert found.interval == pytest.approx(expected, rel=1e-8)  # as for one growth, above
    joined = f"{LINEAR}}}\n  - {{name: second scale, kind: fouling, growth: {LINEAR}"
    two = over(tmp_path, plane(joined, money(1500, 25))).interval
    one = over(tmp_path, plane(LINEAR.replace(repr(RATE), repr(2 * RATE)), money(1500, 25))).interval
    assert two is not None and one is not None
    assert two.interval == pytest.approx(one.interval, rel=1e-8)
    assert one.closed_form is not None and two.closed_form is None


@pytest.mark.parametrize(
    "cleaning",
    [
        money(500, 28, more=", loss against: duty").removeprefix(TABLE),
        "cleaning: {duration: {value: 2 days, source: s}, loss against: duty}\n",
    ],
    ids=["money", "heat"],
)
def test_loss_against_the_duty_begins_when_it_is_lost(tmp_path: Path, cleaning: str) -> None:
    text = COOLER.replace("until: 24 months", "until: 48 months")
    found = over(tmp_path, text + cleaning)
    assert found.interval is not None and found.interval.interval > found.duty_lost
    assert all(row.loss == 0.0 for row in found.rows if row.time < found.duty_lost)
    assert found.interval.closed_form is None


def test_no_interval_where_no_cleaning_pays(tmp_path: Path) -> None:
    found = over(tmp_path, plane(ASYMPTOTIC, money(3e6, 25))).interval
    assert found is not None and math.isnan(found.interval) and "no cleaning pays" in found.no_interval
    free = over(tmp_path, plane(LINEAR, TABLE + "cleaning: {duration: {value: 0 s, source: s}}\n")).interval
    assert free is not None and "at once" in free.no_interval


# --- the record ---------------------------------------------------------------------------------------


def test_the_record_holds_table_lost_duty_and_interval(cooler: Solved) -> None:
    text = record_text(cooler)
    part = text.split("### Time in service")[1].split("## 13.")[0]
    table = [line for line in part.splitlines() if line.startswith("| ")]
    assert table[0].startswith("| Time, months |") and "EUR/day" in table[0]
    assert "The duty is lost after 8.30 months" in part
    assert "cleaning-interval-asymptotic" in part and "9000 EUR" in text
    # The card of the closed form is among those that the record names, with what the digest takes of it.
    card = load_method("cleaning-interval-asymptotic")
    assert cooler.cards[f"method {card.id}"] == card.digest_text
    # The line with values gives the printed loss and mean.
    for line in (line for line in part.splitlines() if re.match(r"\| (loss|mean over)", line)):
        cells = [cell.strip() for cell in line.strip("|").split("|")]
        expression = cells[2].replace("·", "*").replace("−", "-").replace("\u2009", "")
        printed = float(cells[3].split(" ")[0])
        assert eval(expression) == pytest.approx(printed, rel=2e-5)


def test_another_calculation_takes_the_interval(cooler: Solved, tmp_path: Path) -> None:
    assert cooler.over_time is not None and cooler.over_time.interval is not None
    results = cooler.base.results
    assert results["cleaning_interval"].value == cooler.over_time.interval.interval
    assert results["time_until_duty_lost"].value == cooler.over_time.duty_lost
    cleaning = money(9000, 28).removeprefix(TABLE)
    (tmp_path / "gr-1.yaml").write_text(COOLER + cleaning, encoding="utf-8")
    taking = COOLER.replace("number: GR-1", "number: GR-2").replace(
        "{value: 6 months, is: time since the last cleaning, source: s}",
        "{from: {calculation: GR-1, result: cleaning_interval}, is: time since the last cleaning}",
    )
    (tmp_path / "gr-2.yaml").write_text(taking, encoding="utf-8")
    taken = solve_file(tmp_path / "gr-2.yaml").base.solutions[SERVICE].number("given/t_after")
    assert taken == pytest.approx(cooler.over_time.interval.interval, rel=1e-9)


def test_every_figure_stands_in_the_digest(cooler: Solved) -> None:
    assert cooler.over_time is not None
    names = [name for name, _, _ in growth_figures(cooler.over_time)]
    assert len(names) == len(set(names)) and "cleaning interval" in names
    moved = replace(cooler, over_time=cooler.over_time._replace(duty_lost=1.0))
    assert digest_of(moved).results != digest_of(cooler).results


def test_literals_of_the_cleaning_need_a_source_and_the_end_of_the_table_does_not(tmp_path: Path) -> None:
    found = solved(tmp_path, plane(LINEAR, money(3000, 25).replace("3000.0 EUR, source: s", "3000 EUR")))
    found = solved(
        tmp_path, plane(LINEAR, money(3000, 25).replace("{value: 3000 EUR, source: s}", "3000 EUR"))
    )
    assert [item.id for item in found.open_items] == ["cleaning/cost/source"]
    assert found.base.solutions[SERVICE].number("cleaning/cost") == 3000.0
