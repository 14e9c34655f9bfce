"""Rows: every row of a spoiled history is kept or rejected by a named rule, whatever a plant does to it."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from history import DAY, Truth, cells, drawn, history, spoiled
from survey_calculations import COOLER, SURVEY, solved_survey, surveyed_alone, write_history

from calcbook.chain.outcome import Solved
from calcbook.chain.survey_outcome import SurveyOutcome
from calcbook.faults import Faults
from calcbook.interface import read, record_text
from calcbook.survey.rows import moment_text, read_moments, read_numbers, read_rows
from calcbook.survey.rules import Ends, sift

TRUTH = Truth(errors=drawn(7))
SPOILED_SURVEY = SURVEY.replace("steady state: 8 K", "steady state: 4.5 K")


Outcomes = Callable[..., SurveyOutcome]


@pytest.fixture
def outcome_of(tmp_path: Path, solved: Solved) -> Outcomes:
    """The survey of some rows: the unit is solved once for all tests."""

    def outcome(rows: list[list[str]], survey: str = SPOILED_SURVEY) -> SurveyOutcome:
        found = surveyed_alone(tmp_path, solved, rows, survey).survey
        assert found is not None
        return found

    return outcome


def counts(outcome: SurveyOutcome) -> dict[str, int]:
    return {rule.id: rule.count for rule in outcome.rules if rule.count}


def adds_up(outcome: SurveyOutcome) -> bool:
    rejected = sum(rule.count for rule in outcome.rules)
    kept = outcome.fitted + outcome.before_cleaning + outcome.not_anchored
    return outcome.rows == rejected + outcome.kept and outcome.kept == kept


@pytest.fixture(scope="module")
def whole() -> list[list[str]]:
    return cells(history(TRUTH, 7, rows=412, days=411.0))


def test_every_spoiled_row_is_rejected_by_its_rule(outcome_of: Outcomes, whole: list[list[str]]) -> None:
    outcome = outcome_of(spoiled([list(row) for row in whole]))
    found = counts(outcome)
    # As `spoiled` spoils them: four words and an empty cell, two stamps, two swapped pairs, two dead sensors.
    assert found["unreadable"] == 5
    assert found["duplicate time stamp"] == 2
    assert found["temperature cross"] == 2
    assert found["sensor range / T_ci"] == 1
    assert found["sensor range / m_cold"] == 1
    assert found["heat balance closure"] == 2
    # A stamp that is written twice is no step back.
    assert outcome.out_of_order == 0
    # The two jumps of 6 K and the rows after them; the last jump is one of load, as the inlet wanders.
    assert found["steady state"] >= 4
    assert adds_up(outcome)
    assert [(gap.begins, round(gap.length / DAY)) for gap in outcome.gaps] == [("2025-06-11 06:00", 15)]


def test_a_figure_that_its_quantity_cannot_have_is_rejected(
    outcome_of: Outcomes, whole: list[list[str]]
) -> None:
    """A sensor that counts backwards, and one below absolute zero, where no range is stated."""
    rows = [list(row) for row in whole]
    rows[30][5], rows[50][1] = "-14.2", "-300"
    without = SPOILED_SURVEY.replace(" range: 2 kg/s .. 30 kg/s,", "").replace(
        " range: 40 degC .. 110 degC,", ""
    )
    outcome = outcome_of(rows, without)
    assert counts(outcome)["what it can be"] == 2
    assert adds_up(outcome)
    (rule,) = [rule for rule in outcome.rules if rule.id == "what it can be"]
    assert rule.first == "row 31, FI-1111" and "m_hot zero or above" in rule.limit


def test_a_column_of_temperatures_wants_a_given_that_is_one(tmp_path: Path, whole: list[list[str]]) -> None:
    """A figure in K does not say whether it is a temperature or a difference; degC would add 273.15 K to one."""
    old = "T_hi:   {value: 80 degC"
    assert COOLER.count(old) == 1
    with pytest.raises(Faults) as caught:
        solved_survey(tmp_path, whole, cooler=COOLER.replace(old, "T_hi:   {value: 353.15 K"))
    (fault,) = caught.value.faults
    assert (fault.code, fault.expected) == ("unit-dimension", "a unit like that of 353.15 K")


def test_the_rule_names_the_first_row_it_rejects(outcome_of: Outcomes, whole: list[list[str]]) -> None:
    rows = [list(row) for row in whole]
    rows[40][3] = "n/a"
    rows[20][3] = ""
    outcome = outcome_of(rows)
    assert next(rule.first for rule in outcome.rules if rule.id == "unreadable") == "row 21, TI-1113: empty"


def test_the_first_row_of_a_rule_is_that_of_the_file_and_not_of_the_time(
    outcome_of: Outcomes, whole: list[list[str]]
) -> None:
    """The later of two dead sensors stands higher in a file that runs backwards: row 412 - 300 of 412."""
    rows = [list(row) for row in whole]
    rows[100][3] = rows[300][3] = "-40.00"
    outcome = outcome_of(rows[::-1])
    (rule,) = [rule for rule in outcome.rules if rule.id == "sensor range / T_ci"]
    assert (rule.count, rule.first) == (2, "row 112")


@pytest.mark.parametrize(
    ("cells_of_row", "first"),
    [
        # Hot inlet, hot outlet in degC, cold inlet, cold outlet in degF: each breaks one order alone.
        (("66.00", "66.00", "71.60", "93.20"), "T_hi not above T_ho"),
        (("80.00", "66.00", "71.60", "71.60"), "T_co not above T_ci"),
        (("60.00", "50.00", "71.60", "149.00"), "T_hi not above T_co"),
        (("80.00", "20.50", "86.00", "93.20"), "T_ho not above T_ci"),
    ],
)
def test_temperatures_that_no_counterflow_can_have_are_crossed(
    outcome_of: Outcomes, whole: list[list[str]], cells_of_row: tuple[str, ...], first: str
) -> None:
    """Second law: heat goes from hot to cold, in each stream and at both terminals of the unit."""
    rows = [list(row) for row in whole]
    rows[200][1:5] = cells_of_row
    (rule,) = [rule for rule in outcome_of(rows).rules if rule.id == "temperature cross"]
    assert (rule.count, rule.first) == (1, f"row 201, {first}")


def test_a_figure_at_the_limit_of_a_rule_is_kept(outcome_of: Outcomes, whole: list[list[str]]) -> None:
    """`2 kg/s .. 30 kg/s` holds both ends; 0.5 and 1.5 of 18 kg/s are 9 and 27 kg/s."""
    rows = [list(row) for row in whole]
    for place, cell in enumerate(("2", "30", "1.999", "30.001", "9", "27", "8.999", "27.001", "9.9")):
        rows[100 + place][5] = cell
    survey = SPOILED_SURVEY.replace("flow ratio: 0.6 .. 1.4", "flow ratio: 0.5 .. 1.5")
    found = {rule.id: (rule.count, rule.first) for rule in outcome_of(rows, survey).rules}
    assert found["sensor range / m_hot"] == (2, "row 103")
    assert found["flow ratio / m_hot"] == (4, "row 101")


@pytest.mark.parametrize("part", [1.2, 0.8])
def test_a_heat_balance_may_be_open_on_neither_side(
    outcome_of: Outcomes, whole: list[list[str]], part: float
) -> None:
    """A fifth more or less of the hot flow is about 2·0.2/2.2 = 18 % more heat or 22 % less than the cold one takes."""
    rows = [list(row) for row in whole]
    rows[100][5] = f"{part * float(rows[100][5]):.3f}"
    outcome = outcome_of(rows, SURVEY)
    (rule,) = [rule for rule in outcome.rules if rule.id == "heat balance closure"]
    assert (rule.count, rule.first, rule.limit) == (1, "row 101", "at most 8 % either way")


@pytest.mark.parametrize(("missing", "is_gap"), [(4, False), (5, True)])
def test_rows_are_compared_up_to_the_gap_that_is_stated(
    outcome_of: Outcomes, whole: list[list[str]], missing: int, is_gap: bool
) -> None:
    """One row a day and `gap: 5 days`: without four of them the next lies five days on, which is no gap yet.

    The inlet 9 K down after it is more than 8 K then, and not compared after six days; nor is the first row.
    """
    survey = SURVEY.replace("closure: 8 %, ", "")
    rows = [list(row) for row in whole[:196] + whole[196 + missing :]]
    level = outcome_of(rows, survey)
    assert counts(level) == {} and len(level.gaps) == is_gap
    for row in rows[196:]:
        row[1] = f"{float(rows[195][1]) - 9.0:.2f}"
    lower = outcome_of(rows, survey)
    assert counts(lower) == ({} if is_gap else {"steady state": 1})
    assert lower.not_compared == 1 + is_gap


def test_a_row_at_the_time_of_a_cleaning_is_of_the_cleaned_unit(
    outcome_of: Outcomes, whole: list[list[str]]
) -> None:
    """Both cleanings are at a row; with it, ten days have eleven rows, and 205 days end a row before the next."""
    outcome = outcome_of(whole, SURVEY)
    assert counts(outcome) == {} and outcome.before_cleaning == 0
    first, second = outcome.cycles
    assert (first.rows, second.rows) == (205, 412 - 205)
    assert (first.zero_rows, first.zero_until) == (11, 10 * DAY) == (second.zero_rows, second.zero_until)
    assert (first.last, second.last) == (204 * DAY, 206 * DAY)
    assert outcome.period == 206 * DAY


def test_a_history_that_mostly_cannot_be_read_is_an_open_item(
    tmp_path: Path, solved: Solved, whole: list[list[str]]
) -> None:
    for spoilt, told in ((0.5, False), (0.51, True)):
        rows = [list(row) for row in whole]
        count = round(spoilt * len(rows))
        # Every second row first, so that each cleaning keeps rows enough for its zero.
        order = [*range(1, len(rows), 2), *range(0, len(rows), 2)]
        for place in order[:count]:
            rows[place][3] = rows[place][3].replace(".", ",")
        items = surveyed_alone(tmp_path, solved, rows, SPOILED_SURVEY).open_items
        texts = [item.text for item in items if item.id == "survey/unreadable rows"]
        assert bool(texts) == told
        assert not texts or texts[0].startswith(f"{count} of {len(rows)} rows of the history cannot be read")


def test_a_history_most_of_whose_rows_are_rejected_is_an_open_item(
    tmp_path: Path, solved: Solved, whole: list[list[str]]
) -> None:
    """Both temperatures of the hot stream swapped: a heat balance that does not close, row by row."""
    for swapped, told in ((0.4, False), (0.6, True)):
        rows = [list(row) for row in whole]
        order = [*range(1, len(rows), 2), *range(0, len(rows), 2)]
        for place in order[: round(swapped * len(rows))]:
            rows[place][1], rows[place][2] = rows[place][2], rows[place][1]
        answer = surveyed_alone(tmp_path, solved, rows, SPOILED_SURVEY)
        texts = [item.text for item in answer.open_items if item.id == "survey/rejected rows"]
        assert bool(texts) == told
        assert not texts or "rows of the history are rejected" in texts[0]


@pytest.mark.parametrize("seed", range(6))
def test_no_row_is_dropped_in_silence(outcome_of: Outcomes, whole: list[list[str]], seed: int) -> None:
    draw = np.random.default_rng(seed)
    rows = [list(row) for row in whole]
    words = ["", "Bad", "NaN", "inf", "1e999", "12,5", "-273.5", "1_000", "0", "--", "74 degC", "٣٤"]
    for _ in range(60):
        rows[draw.integers(len(rows))][draw.integers(7)] = words[draw.integers(len(words))]
    for _ in range(10):
        rows[draw.integers(len(rows))].append("one cell more")
    draw.shuffle(rows)
    outcome = outcome_of(rows)
    assert outcome.rows == len(rows)
    assert adds_up(outcome)


def test_the_order_of_the_rows_moves_nothing(outcome_of: Outcomes, whole: list[list[str]]) -> None:
    straight = outcome_of(whole)
    turned = outcome_of(whole[::-1])
    assert turned.out_of_order == len(whole) - 1
    assert [one.value for one in turned.figures] == [one.value for one in straight.figures]


def test_negative_resistances_are_kept_and_counted(solved: Solved) -> None:
    outcome = solved.survey
    assert outcome is not None
    # The rows that anchor zero lie about it: some of them below.
    assert 0 < outcome.negative < outcome.not_resolved < outcome.fitted


def test_rows_before_the_first_cleaning_are_kept_and_not_fitted(
    outcome_of: Outcomes, whole: list[list[str]]
) -> None:
    later = SPOILED_SURVEY.replace("    - {at: 2025-02-03 06:00, source: test}\n", "")
    outcome = outcome_of(whole, later)
    assert outcome.before_cleaning == outcome.kept - outcome.fitted > 100
    assert adds_up(outcome)


def test_a_cleaning_without_rows_for_its_zero_is_told(outcome_of: Outcomes, whole: list[list[str]]) -> None:
    more = SPOILED_SURVEY.replace("  zero:", "    - {at: 2026-01-10, source: test}\n  zero:")
    stamps = ("2026-01-1", "2026-01-2")
    outcome = outcome_of([row for row in whole if not row[0].startswith(stamps)], more)
    assert outcome.cycles[2].zero_rows == 0
    assert outcome.not_anchored == outcome.cycles[2].rows > 0
    assert adds_up(outcome)


def test_zero_on_so_many_rows_is_zero_on_these_rows(outcome_of: Outcomes, whole: list[list[str]]) -> None:
    by_rows = outcome_of(whole, SPOILED_SURVEY.replace("over: 10 days", "rows: 6"))
    assert [one.zero_rows for one in by_rows.cycles] == [6, 6]


def test_a_rule_without_a_limit_says_that_it_is_not_applied(
    outcome_of: Outcomes, whole: list[list[str]]
) -> None:
    bare = "".join(line + "\n" for line in SPOILED_SURVEY.splitlines() if not line.startswith("  rules:"))
    outcome = outcome_of(whole, bare)
    limits = {rule.id: rule.limit for rule in outcome.rules}
    assert limits["steady state"] == limits["heat balance closure"] == "not applied: no limit is stated"


def test_a_row_at_which_a_method_leaves_its_range_is_rejected(
    outcome_of: Outcomes, whole: list[list[str]]
) -> None:
    rows = [list(row) for row in whole]
    # Re is about 58 000 at 18 kg/s, and must be 2300 for the film's method.
    rows[200][5] = "0.6"
    survey = SPOILED_SURVEY.replace("closure: 8 %, ", "").replace("flow ratio: 0.6 .. 1.4, ", "")
    outcome = outcome_of(rows, survey.replace("range: 2 kg/s .. 30 kg/s, ", ""))
    found = next(rule for rule in outcome.rules if rule.id == "method range")
    assert (found.count, found.first) == (1, "row 201")
    assert "gnielinski-1976" in found.limit
    assert adds_up(outcome)


def test_rows_that_never_change_determine_nothing_and_say_so(
    tmp_path: Path, solved: Solved, whole: list[list[str]]
) -> None:
    rows = [[row[0], *whole[0][1:]] for row in whole]
    found = surveyed_alone(tmp_path, solved, rows)
    assert "survey/fit" in {item.id for item in found.open_items}
    assert np.isnan(found.base.results["allowance_upper"].value)
    assert "not known" in record_text(found)


def test_a_time_in_hours_gives_what_dates_give(outcome_of: Outcomes, whole: list[list[str]]) -> None:
    by_date = outcome_of(whole)
    hours = [[f"{24 * number}", *row[1:]] for number, row in enumerate(whole)]
    survey = SPOILED_SURVEY.replace("{column: time}", "{column: time, unit: h}")
    survey = survey.replace("at: 2025-02-03 06:00", "at: 0 h").replace("at: 2025-08-27 06:00", "at: 205 days")
    by_hour = outcome_of(hours, survey)
    assert [one.value for one in by_hour.figures] == pytest.approx(
        [one.value for one in by_date.figures], rel=1e-9
    )
    assert (by_hour.first, by_hour.last) == ("0 h", f"{411 * 24} h")


def test_a_moment_has_its_time_of_day_unless_it_is_midnight(solved: Solved) -> None:
    survey = solved.chain.calculation.survey
    assert survey is not None
    told = [moment_text(seconds, survey) for seconds in (0.0, 1800.0, 86400.0, 90000.0)]
    assert told == ["1970-01-01", "1970-01-01 00:30", "1970-01-02", "1970-01-02 01:00"]


def test_units_of_a_column_change_its_text_and_nothing_else(
    outcome_of: Outcomes, whole: list[list[str]]
) -> None:
    mixed = outcome_of(whole)
    shown = history(TRUTH, 7, rows=412, days=411.0)
    rows = [list(row) for row in whole]
    for number, row in enumerate(rows):
        row[3], row[4] = (f"{shown[name][number] + 273.15:.12f}" for name in ("T_ci", "T_co"))
        row[6] = f"{shown['m_cold'][number] * 3600:.9f}"
    survey = SPOILED_SURVEY.replace("TI-1113, unit: degF, range: 32 degF .. 122 degF", "TI-1113, unit: K")
    survey = survey.replace("TI-1114, unit: degF, range: 32 degF .. 176 degF", "TI-1114, unit: K")
    survey = survey.replace("unit: t/h, range: 7 t/h .. 110 t/h", "unit: kg/h")
    plain = outcome_of(rows, survey)
    # The mixed texts have two decimals in degF and t/h: 0.003 K and 0.01 % in a row, less in the fit.
    assert [one.value for one in plain.figures] == pytest.approx(
        [one.value for one in mixed.figures], rel=2e-3
    )


@pytest.mark.parametrize(
    ("cell", "figure"),
    [
        ("74.5", 74.5),
        ("-1.5e2", -150.0),
        (".5", 0.5),
        ("+3", 3.0),
        ("1_0", None),
        ("12,5", None),
        ("nan", None),
        # Beyond what a number of the machine holds.
        ("1e999", None),
    ],
)
def test_a_cell_is_a_plain_number_or_nothing(cell: str, figure: float | None) -> None:
    for text in (cell, f"{cell}\nBad"):
        found = read_numbers(text)[0]
        assert np.isnan(found) if figure is None else found == figure


@pytest.mark.parametrize(
    ("cell", "seconds"),
    [
        ("1970-01-02", 86400.0),
        ("1970-01-01 00:01", 60.0),
        ("1970-01-01T00:00:01", 1.0),
        ("1970-01-01T00:00Z", None),
        ("1970-01-01 00:00+01:00", None),
        ("1970-02-30", None),
        # Plants have logged in the years from 1900 to 2199; 25 567 days lie between 1900 and 1970, 84 006 to 2200.
        ("1899-12-31 23:59", None),
        ("1900-01-01", -25567 * 86400.0),
        ("2199-12-31", 84005 * 86400.0),
        ("2200-01-01", None),
        ("01/02/1970", None),
    ],
)
def test_a_stamp_is_a_date_without_a_zone_or_nothing(cell: str, seconds: float | None) -> None:
    for text in (cell, f"{cell}\nBad"):
        found = read_moments(text)[0]
        assert np.isnan(found) if seconds is None else found == seconds


def test_an_unreadable_history_names_its_first_cell(tmp_path: Path, whole: list[list[str]]) -> None:
    """A zone behind every time: nothing is left, and the fault says of which cell."""
    rows = [[f"{row[0]}Z", *row[1:]] for row in whole]
    with pytest.raises(Faults) as caught:
        solved_survey(tmp_path, rows)
    (fault,) = caught.value.faults
    assert fault.code == "survey-rows-missing"
    assert "unreadable (first: row 1, time: 2025-02-03 06:00Z)" in fault.found


def test_cleanings_that_are_not_those_of_the_data_are_a_caution(
    tmp_path: Path, whole: list[list[str]]
) -> None:
    """The first cleaning typed ten years too early: its rows have nothing to anchor zero on."""
    solved = solved_survey(tmp_path, whole, SURVEY.replace("at: 2025-02-03", "at: 2015-02-03"))
    assert "of the kept rows are not fitted" in record_text(solved).partition("## 14.")[2]


def test_a_reading_at_a_limit_by_its_text_does_not_break_it(tmp_path: Path, solved: Solved) -> None:
    """Readings of a tenth of a kelvin that move by 0.3 K exactly, by 0.4 K where so marked; 122 and 32 degF at the ends
    of their range; 43.2 t/h, six tenths of 20 kg/s. Decimals in kelvin are off by roundings (0.30000000000001)."""
    rows, now, direction, farther = [], 420, 1, 0
    for number in range(600):
        step = 4 if number % 50 == 49 else 3
        farther += step == 4
        direction = 1 if now < 420 else -1 if now > 950 else direction
        now += direction * step
        flow = "43.2" if number % 2 else "100.8"
        cold = "122" if number % 3 else "32"
        stamp = str(np.datetime64("2025-02-03") + np.timedelta64(number, "h")).replace("T", " ")
        rows.append([f"{stamp}:00", f"{now / 10:.1f}", "40.0", cold, cold, "18", flow])
    survey = SURVEY.replace(
        "steady state: 8 K, flow ratio: 0.6 .. 1.4", "steady state: 0.3 K, flow ratio: 0.6 .. 1.4"
    )
    survey = survey.replace("32 degF .. 176 degF", "32 degF .. 122 degF").replace(
        "range: 7 t/h", "range: 43.2 t/h"
    )
    write_history(tmp_path, rows)
    path = tmp_path / "trial.yaml"
    path.write_text(COOLER + survey, encoding="utf-8")
    text = read(path).survey
    givens = {symbol: solved.chain.inputs[f"given/{symbol}"] for symbol in solved.chain.calculation.givens}
    ends = Ends("T_hi", "T_ho", "", "", False)
    sieve = sift(read_rows(text), text, ends, givens)
    found = {rule.id: rule.count for rule in sieve.rules if rule.count}
    assert found == {"steady state": farther}
