"""Criteria over what is found once from the solved calculation: the time until the duty is lost, intervals, allowances."""

from __future__ import annotations

import math
import re
from pathlib import Path

import pytest
from test_time_in_service import COOLER as WITH_TABLE
from test_time_in_service import TABLE, money, solved

from calcbook.chain.outcome import CriterionResult, Solved
from calcbook.faults import Faults
from calcbook.interface import record_text, solve_file
from calcbook.record import digest_of, results_data, software_of

CALCS = Path(__file__).resolve().parents[2] / "calcs"
LOST = "time_until_duty_lost"
COOLER = WITH_TABLE.partition("time in service:")[0]


def stated(*criteria: str) -> str:
    lines = "".join(f"  - {{that: {that}, source: test}}\n" for that in criteria)
    return f"acceptance:\n{lines}"


def judged(solution: Solved) -> list[CriterionResult]:
    return list(solution.base.criteria)


@pytest.fixture
def days(tmp_path: Path) -> float:
    """The time until the duty of the cooler is lost, in days."""
    return solved(tmp_path, COOLER + TABLE).base.results[LOST].value / 86400.0


def test_criteria_stand_in_the_order_of_the_file(tmp_path: Path, days: float) -> None:
    criteria = (
        f"{LOST} >= {days - 1:.3f} days",
        "U_service >= 1 W/(m^2 K)",
        f"{LOST} >= {days + 1:.3f} days",
    )
    result = solved(tmp_path, COOLER + TABLE + stated(*criteria))
    found = judged(result)
    assert [(item.id, item.that, item.met) for item in found] == [
        ("criterion 1", criteria[0], True),
        ("criterion 2", criteria[1], True),
        ("criterion 3", criteria[2], False),
    ]
    assert found[0].margin == pytest.approx(86400.0, rel=1e-3)
    text = record_text(result)
    assert f"criterion 3 is not met in case base: {criteria[2]}." in text
    assert "is not searched" not in text
    # The one given is the time since the last cleaning, which moves nothing that is found over time.
    assert result.flips is not None
    assert {flip.id for flip in result.flips.of_kind("criterion")} <= {"criterion 2"}
    length = "length: {value: 4.88 m, source: s}"
    given = "givens:\n  L: {value: 4.88 m, is: tube length, source: s}\n"
    text = (COOLER + TABLE + stated(*criteria)).replace(length, "length: L").replace("givens:\n", given)
    flips = solved(tmp_path, text).flips
    assert flips is not None
    by_length = [flip for flip in flips.of_kind("criterion") if flip.input.symbol == "L"]
    becomes = {flip.id: flip.becomes for flip in by_length}
    assert (becomes["criterion 1"], becomes["criterion 3"]) == ("not met", "met")


def test_a_criterion_that_asks_for_an_early_loss_is_said_not_to_be_searched(
    tmp_path: Path, days: float
) -> None:
    """Where the cleaned unit does not carry the duty, neither an early nor a late loss is met."""
    criterion = f"{LOST} <= {days + 1:.3f} days"
    result = solved(tmp_path, COOLER + TABLE + stated(criterion))
    assert result.flips is not None and result.flips.left_out == (criterion,)
    assert f"What is found once from the solved calculation is not searched: {criterion}." in record_text(
        result
    )


def test_an_interval_is_judged(tmp_path: Path) -> None:
    body = COOLER + money(9000, 28)
    interval = solved(tmp_path, body).base.results["cleaning_interval"].value / 86400.0
    result = solved(tmp_path, body + stated(f"cleaning_interval >= {interval + 1:.3f} days"))
    assert [item.met for item in judged(result)] == [False]


@pytest.mark.parametrize(("operator", "met"), [(">=", True), (">", True), ("<=", False)])
def test_a_duty_that_is_not_lost_within_the_time_settles_a_shorter_one(
    tmp_path: Path, days: float, operator: str, met: bool
) -> None:
    until = math.floor(0.5 * days)
    body = COOLER + f"time in service: {{until: {until} days, steps: 5}}\n"
    result = solved(tmp_path, body + stated(f"{LOST} {operator} {until - 3} days"))
    (item,) = judged(result)
    assert (item.met, item.words) == (met, f"the duty is not lost within {until} days")
    row = next(line for line in record_text(result).splitlines() if line.startswith("| criterion 1 |"))
    assert f"| the duty is not lost within {until} days |" in row and "| not known |" in row
    digest = digest_of(result)
    (data,) = results_data(result, digest, software_of(digest))["acceptance"]
    assert data["value"] is None and data["margin"] is None and data["words"] == item.words


def test_a_time_beyond_what_was_looked_at_is_a_fault(tmp_path: Path, days: float) -> None:
    until = math.floor(0.5 * days)
    body = COOLER + f"time in service: {{until: {until} days, steps: 5}}\n"
    with pytest.raises(Faults, match="later than the time looked at"):
        solved(tmp_path, body + stated(f"{LOST} >= {until + 3} days"))


def test_a_result_that_the_file_does_not_ask_for_says_by_which_key(tmp_path: Path) -> None:
    for name, limit, key in (
        (LOST, "3 days", "time in service"),
        ("allowance_proposed", "1 m^2 K/W", "survey"),
    ):
        with pytest.raises(Faults, match=f"only where the file has `{key}:`"):
            solved(tmp_path, COOLER + stated(f"{name} >= {limit}"))


def test_a_case_that_restates_the_time_alone_is_judged_by_what_is_found(tmp_path: Path, days: float) -> None:
    cases = "cases:\n"
    for name, time in (("sooner", math.floor(days) - 1), ("later", math.ceil(days) + 1)):
        cases += f"  {name}:\n    t_after: {{value: {time} days, source: test}}\n"
    result = solved(tmp_path, COOLER + TABLE + stated(f"{LOST} >= t_after") + cases)
    assert {case.name: case.criteria[0].met for case in result.cases} == {
        "": True,
        "sooner": True,
        "later": False,
    }


def test_a_case_that_restates_more_is_told_to_be_not_judged(tmp_path: Path) -> None:
    old = "outlet: {value: 68 degC, source: s}"
    assert COOLER.count(old) == 1
    body = COOLER.replace(old, "outlet: T_ho").replace(
        "givens:\n", "givens:\n  T_ho: {value: 68 degC, is: hot outlet, source: test}\n"
    )
    cases = "cases:\n  other:\n    T_ho: {value: 68.5 degC, source: test}\n"
    result = solved(tmp_path, body + TABLE + stated(f"{LOST} >= t_after") + cases)
    assert [len(case.criteria) for case in result.cases] == [1, 0]
    assert f"1 of 1 criterion met. Not judged in case other: {LOST}." in record_text(result)


def test_a_currency_of_one_letter_is_not_the_exponent_of_a_number(tmp_path: Path) -> None:
    body = COOLER + money(9000, 28)
    assert body.count("EUR") == 3
    other = body.replace("9000 EUR", "9E3 E").replace("EUR", "E")
    found = [solved(tmp_path, text).base.results["cleaning_interval"].value for text in (body, other)]
    assert found[0] == found[1]


@pytest.mark.parametrize("amount", ["9000 1/EUR", "9000 EUR/EUR", "9000", "EUR 9000"])
def test_an_amount_of_money_is_a_number_and_its_currency(tmp_path: Path, amount: str) -> None:
    with pytest.raises(Faults) as caught:
        solved(tmp_path, COOLER + money(9000, 28).replace("9000 EUR", amount))
    assert {fault.code for fault in caught.value.faults} <= {"unit-missing", "unit-unknown"}


@pytest.mark.parametrize("price", ["28 EUR / MWh", "28 EUR /MWh"])
def test_a_price_may_have_blanks_about_its_solidus(tmp_path: Path, price: str) -> None:
    body = COOLER + money(9000, 28)
    assert body.count("28 EUR/MWh") == 1
    found = [
        solved(tmp_path, text).base.results["cleaning_interval"].value
        for text in (body, body.replace("28 EUR/MWh", price))
    ]
    assert found[0] == found[1]


def test_a_case_that_restates_a_limit_alone_is_judged(tmp_path: Path, days: float) -> None:
    body = (COOLER + TABLE).replace(
        "givens:\n", "givens:\n  t_lim: {value: 1 days, is: limit, source: test}\n", 1
    )
    cases = f"cases:\n  stricter:\n    t_lim: {{value: {math.ceil(days) + 1} days, source: test}}\n"
    result = solved(tmp_path, body + stated(f"{LOST} >= t_lim") + cases)
    assert [case.criteria[0].met for case in result.cases] == [True, False]


def test_the_mean_of_places_along_the_unit_is_judged(tmp_path: Path) -> None:
    text = (Path(__file__).resolve().parents[2] / "calcs" / "oc-201.yaml").read_text(encoding="utf-8")
    assert text.count("that: U_service >= 60 ") == 1
    path = tmp_path / "oc-201.yaml"
    for limit, met in (("61", True), ("61.1", False)):
        path.write_text(
            text.replace("that: U_service >= 60 ", f"that: U_service mean of places >= {limit} "),
            encoding="utf-8",
        )
        solution = solve_file(path)
        places = [case for case in solution.cases if case.name in solution.chain.calculation.places]
        mean = sum(case.results["U_service"].value for case in places) / len(places)
        item = judged(solution)[0]
        assert item.value == mean and item.met is met
        # It is a result of the base case alone.
        assert [case.name for case in solution.cases if case.criteria] == [""]


def test_a_duty_that_the_cleaned_unit_does_not_carry_is_lost_at_once(tmp_path: Path) -> None:
    """A margin below zero clean: there is no time until it is lost, and that is no good news."""
    text = (CALCS / "hr-821.yaml").read_text(encoding="utf-8")
    short = text.replace("h_o:     {value: 4300 W", "h_o:     {value: 700 W")
    assert short != text
    (tmp_path / "hr-821.yaml").write_text(short, encoding="utf-8")
    answer = solve_file(tmp_path / "hr-821.yaml", for_record=False)
    assert answer.base.results["area_margin_clean"].value < 0.0
    (row,) = [item for item in answer.base.criteria if item.that.startswith("time_until_duty_lost")]
    assert not row.met and row.words == "the cleaned unit does not carry the duty"


def test_a_duty_that_is_not_stated_cannot_be_kept(tmp_path: Path) -> None:
    text = (CALCS / "hr-821.yaml").read_text(encoding="utf-8")
    lines = [line for line in text.splitlines() if not line.startswith("  T_ho:")]
    open_ended = re.sub(r", outlet: T_ho", "", "\n".join(lines)) + "\n"
    open_ended = re.sub(r"  - \{that: area_margin [^\n]*\n", "", open_ended)
    assert open_ended.count("T_ho") == 0
    (tmp_path / "hr-821.yaml").write_text(open_ended, encoding="utf-8")
    answer = solve_file(tmp_path / "hr-821.yaml", for_record=False)
    assert "area_margin" not in answer.base.results
    (row,) = [item for item in answer.base.criteria if item.that.startswith("time_until_duty_lost")]
    assert not row.met and row.words == "no duty is stated that could be lost"


def test_the_title_says_which_criterion_is_not_judged_in_a_case(tmp_path: Path) -> None:
    """The area of parts is that of the base case: with 50 tubes less the unit is short, and nobody has looked."""
    text = (CALCS / "wc-105.yaml").read_text(encoding="utf-8")
    start = text.index("acceptance:")
    end = text.index("\n\n", start)
    text = text[:start] + "acceptance:\n  - {that: area_margin of parts >= 0, source: s}" + text[end:]
    (tmp_path / "wc-105.yaml").write_text(
        text + "\ncases:\n  thin:\n    N: {value: 50, source: s}\n", encoding="utf-8"
    )
    answer = solve_file(tmp_path / "wc-105.yaml", for_record=False)
    assert answer.cases[1].results["area_margin"].value < 0.0
    title = next(line for line in record_text(answer).splitlines() if line.startswith("| Criteria |"))
    assert title == (
        "| Criteria | every criterion met where it is judged; not judged in case thin: area_margin of parts |"
    )
