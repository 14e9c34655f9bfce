"""What a survey leaves: its part of the record and of the results file, the digest, and a link to its allowance."""

from __future__ import annotations

import json
import math
import re
from pathlib import Path

import numpy as np
import pytest
from history import DAY, Truth, cells, drawn, history
from survey_calculations import COOLER, SURVEY, solved_survey

from calcbook.faults import Faults
from calcbook.interface import read, record_text, solve, solve_file
from calcbook.quantities import read_any
from calcbook.record import digest_of
from calcbook.record.results import results_data
from calcbook.record.software import software_of
from calcbook.survey import fitting
from calcbook.survey.resistance import resistances

TRUTH = Truth(errors=drawn(3))
TAKING = COOLER.replace("number: T-105", "number: T-106").replace(
    "  R_fo:   {value: 0.00035 m^2 K/W, is: allowance so far, source: test}\n",
    "  R_fo: {from: {calculation: T-105, result: allowance_proposed}, is: allowance of the survey}\n",
)


@pytest.fixture(scope="module")
def rows() -> list[list[str]]:
    return cells(history(TRUTH, 3))


def section(text: str) -> str:
    found = re.search(r"^### Survey of plant data\n(.*?)^## ", text, re.MULTILINE | re.DOTALL)
    assert found is not None
    return found.group(1)


def test_the_record_has_the_survey_among_its_cases(tmp_path: Path, rows: list[list[str]]) -> None:
    solved = solved_survey(tmp_path, rows)
    outcome = solved.survey
    assert outcome is not None
    text = record_text(solved)
    part = section(text)
    assert text.index("## 12. Cases") < text.index("### Survey of plant data") < text.index("## 13.")
    assert (
        f"{outcome.rows} rows = {sum(rule.count for rule in outcome.rules)} rejected + {outcome.kept} kept"
        in part
    )
    for rule in outcome.rules:
        assert f"| {rule.id} |" in part
    for name in ("allowance_proposed", "allowance_fitted", "allowance_lower", "allowance_upper"):
        assert f"| {name} |" in part
    plot = part.split("```")[1].strip("\n").split("\n")
    assert len(plot) == 17
    assert max(len(line) for line in plot) <= 8 + 72
    # Both cleanings stand under the plot, and the fit in every column that has rows.
    assert plot[15].count("|") == 2
    assert sum(line.count("*") + line.count("-") for line in plot[:15]) >= 72


def test_the_results_file_has_counts_bounds_and_the_named_results(
    tmp_path: Path, rows: list[list[str]]
) -> None:
    solved = solved_survey(tmp_path, rows)
    digest = digest_of(solved)
    data = json.loads(json.dumps(results_data(solved, digest, software_of(digest)), allow_nan=False))
    survey = data["survey"]
    assert survey["rows"] == len(rows)
    assert survey["rows"] == survey["kept"] + sum(rule["count"] for rule in survey["rules"])
    figures = {one["id"]: one for one in survey["figures"]}
    assert figures["fitted tau"]["lower"] < figures["fitted tau"]["value"] < figures["fitted tau"]["upper"]
    assert data["results"]["allowance_fitted"]["value"] == figures["allowance_fitted"]["value"]
    assert data["results"]["allowance_proposed"]["unit"] == "m^2 K/W"


def test_the_digest_binds_the_columns_that_are_used(tmp_path: Path, rows: list[list[str]]) -> None:
    before = digest_of(solved_survey(tmp_path, rows))
    again = digest_of(solved_survey(tmp_path, [[f" {cell} " for cell in row] for row in rows]))
    assert again == before
    changed = [list(row) for row in rows]
    changed[200][1] = f"{float(changed[200][1]) + 0.01:.2f}"
    after = digest_of(solved_survey(tmp_path, changed))
    assert after.meaning != before.meaning
    assert after.cards == before.cards


def test_the_digest_binds_the_cards_of_the_survey(tmp_path: Path, rows: list[list[str]]) -> None:
    solved = solved_survey(tmp_path, rows)
    assert {"method kern-seaton-1959", "method fouling-from-plant-data"} <= set(solved.cards)
    assert "kern-seaton-1959 / 1" in record_text(solved)


def test_two_runs_give_the_same_record(tmp_path: Path, rows: list[list[str]]) -> None:
    assert record_text(solved_survey(tmp_path, rows)) == record_text(solved_survey(tmp_path, rows))


def test_another_calculation_takes_the_proposed_allowance(tmp_path: Path, rows: list[list[str]]) -> None:
    proposed = solved_survey(tmp_path, rows).base.results["allowance_proposed"].value
    (tmp_path / "taking.yaml").write_text(TAKING, encoding="utf-8")
    taken = solve_file(tmp_path / "taking.yaml")
    given = taken.chain.calculation.givens["R_fo"]
    assert read_any(given.value.text).value == pytest.approx(proposed, rel=1e-9)
    assert [item.kind for item in taken.open_items] == ["link"]


GROWING = TAKING.replace(
    "  R_fo: {from: {calculation: T-105, result: allowance_proposed}, is: allowance of the survey}\n",
    "  R_fo: {from: {calculation: T-105, result: fitted R_inf}, is: final resistance of the survey}\n"
    "  tau: {from: {calculation: T-105, result: fitted tau}, is: its time constant}\n"
    "  R_fi: {value: 0.0001 m^2 K/W, is: tube-side allowance, source: test}\n",
).replace(
    "  - {name: deposit, kind: fouling, resistance: R_fo, on: outside}\n",
    "  - name: deposit\n    kind: fouling\n    on: outside\n"
    "    growth: {model: kern-seaton-1959, R_inf: R_fo, tau: tau, after: {value: 9 months, source: test}}\n",
)


def test_what_is_of_all_deposits_stands_for_all(tmp_path: Path, rows: list[list[str]]) -> None:
    """1/U − 1/U_c holds every deposit of both sides (definition): beside another it would count twice, and it is
    on the surface of its own U."""
    solved_survey(tmp_path, rows)
    path = tmp_path / "fed.yaml"
    path.write_text(GROWING, encoding="utf-8")
    assert not [item for item in solve_file(path).open_items if item.kind == "link" and "deposit/" in item.id]
    film = "  - {name: tube wall"
    inside = "  - {name: tube deposit, kind: fouling, resistance: R_fi, on: inside}\n"
    path.write_text(GROWING.replace(film, inside + film), encoding="utf-8")
    items = {item.id: item.text for item in solve_file(path).open_items}
    assert "stands beside tube deposit here" in items["deposit/all deposits"]
    path.write_text(
        GROWING.replace(film, inside.replace("R_fi", "{value: 0 m^2 K/W, source: test}") + film),
        encoding="utf-8",
    )
    assert "deposit/all deposits" not in {item.id for item in solve_file(path).open_items}
    derived = "derived:\n  R_part: {relation: R_fo, is: the same under another name}\nstreams:"
    through = GROWING.replace("streams:", derived, 1).replace("R_inf: R_fo", "R_inf: R_part")
    path.write_text(through.replace(film, inside + film), encoding="utf-8")
    assert "deposit/all deposits" in {item.id for item in solve_file(path).open_items}
    path.write_text(GROWING.replace("on: outside\n    growth", "on: inside\n    growth"), encoding="utf-8")
    items = {item.id: item.text for item in solve_file(path).open_items}
    assert "counts on the surface outside there, and acts on inside" in items["deposit/linked surface"]


def test_the_worked_row_is_that_of_a_plain_calculation_with_its_readings(
    tmp_path: Path, rows: list[list[str]]
) -> None:
    """U clean of the same file with the readings as givens, and the definitions of R_f, closure and LMTD by hand."""
    outcome = solved_survey(tmp_path, rows).survey
    assert outcome is not None
    row = outcome.worked
    cooler = COOLER
    for reading in row.readings:
        cooler = re.sub(
            rf"(  {reading.symbol}: +\{{value: )[^,]*,", rf"\g<1>{reading.cell} {reading.unit},", cooler
        )
    alone = tmp_path / "alone.yaml"
    alone.write_text(cooler, encoding="utf-8")
    results = solve_file(alone).base.results
    chain = {one.symbol: one.value for one in row.chain}
    assert chain["U_c"] == pytest.approx(results["U_clean"].value, rel=1e-12)
    assert chain["LMTD"] == pytest.approx(results["LMTD"].value, rel=1e-12)
    steps = {one.symbol: one.value for one in row.steps}
    hot = chain["Q_hot"] * (1.0 - 0.01)
    assert steps["closure"] == pytest.approx(2 * (hot - chain["Q_c"]) / (hot + chain["Q_c"]), rel=1e-10)
    heat = 0.5 * (hot + chain["Q_c"])
    by_hand = chain["A"] * chain["F"] * chain["LMTD"] / heat - 1.0 / chain["U_c"]
    assert steps["R_f"] == pytest.approx(by_hand, rel=1e-12)
    text = section(record_text(solve_file(tmp_path / "trial.yaml")))
    assert f"row {row.number} of {row.time}" in text


def test_a_proposal_beyond_the_rows_is_a_caution(tmp_path: Path, rows: list[list[str]]) -> None:
    within = solved_survey(tmp_path, rows)
    # The longest time since a cleaning is 205 days: 9 months are within 1.5 of it, 11 months are not.
    beyond = solved_survey(tmp_path, rows, SURVEY.replace("after: 9 months", "after: 11 months"))
    states = [
        next(check for check in one.base.checks if check.id == "survey / extrapolation")
        for one in (within, beyond)
    ]
    assert [(check.level, check.state) for check in states] == [("caution", "within"), ("caution", "outside")]
    assert beyond.open_items == ()


def test_a_proposal_at_or_below_the_middle_is_a_caution(tmp_path: Path, rows: list[list[str]]) -> None:
    """Half of what a fit leaves open lies above its median (definition)."""
    words = "as likely as not the deposit is larger"
    assert words not in record_text(solved_survey(tmp_path, rows))
    assert words in record_text(
        solved_survey(tmp_path, rows, SURVEY.replace("percentile: 90 %", "percentile: 50 %"))
    )


def test_a_survey_without_sources_has_open_items(tmp_path: Path, rows: list[list[str]]) -> None:
    bare = SURVEY.replace(", source: test}", "}").replace("  source: test\n", "")
    items = {item.id for item in solved_survey(tmp_path, rows, bare).open_items}
    assert {
        "survey/file/source",
        "survey/rules/source",
        "survey/zero/source",
        "survey/propose/source",
        "survey/heat loss/source",
        "survey/column TI-1111/source",
        "survey/cleaning 2025-02-03 06:00/source",
    } <= items


def test_a_deposit_that_shrinks_is_an_open_item(tmp_path: Path) -> None:
    truth = Truth(model="linear", rate=-2e-12, errors={"loss": 0.01})
    solved = solved_survey(
        tmp_path, cells(history(truth, 3)), SURVEY.replace("kern-seaton-1959", "fouling-linear")
    )
    assert "survey / fouling-linear / growth" in {item.id for item in solved.open_items}


def test_rows_that_do_not_bend_are_an_open_item_of_the_asymptotic_model(tmp_path: Path) -> None:
    truth = Truth(model="linear", rate=3e-4 / (600 * 86400.0), errors={"loss": 0.01})
    solved = solved_survey(tmp_path, cells(history(truth, 5)))
    assert "survey/fit" in {item.id for item in solved.open_items}


def test_the_other_growth_models_come_back_through_the_whole_chain(tmp_path: Path) -> None:
    for card, truth, figures in (
        ("fouling-linear", Truth(model="linear", errors={"loss": 0.01}), ("rate",)),
        ("fouling-falling-rate", Truth(model="falling rate", errors={"loss": 0.01}), ("a", "b")),
    ):
        outcome = solved_survey(
            tmp_path, cells(history(truth, 1, noise=0.0)), SURVEY.replace("kern-seaton-1959", card)
        ).survey
        assert outcome is not None
        for symbol in figures:
            name = "r" if symbol == "rate" else symbol
            # As for the asymptotic model: the wall of the fouled unit; b takes it three times over.
            rel = 0.02 if symbol == "b" else 0.006
            assert outcome.figure(f"fitted {name}").value == pytest.approx(getattr(truth, symbol), rel=rel)


def test_a_parameter_that_the_card_takes_by_itself_is_told_and_determines_nothing(tmp_path: Path) -> None:
    truth = Truth(model="linear", errors={"loss": 0.01})
    solved = solved_survey(
        tmp_path, cells(history(truth, 1)), SURVEY.replace("kern-seaton-1959", "fouling-linear")
    )
    assert solved.survey is not None
    held = solved.survey.figure("fitted R_0")
    assert held.value == 0.0
    assert held.held == "not fitted: the value that the card takes where none is stated"
    assert "fitted R_0" not in solved.base.results
    assert not [item for item in solved.open_items if item.id.startswith("survey/fit")]


@pytest.mark.parametrize(("kept", "enough"), [(8, True), (7, False)])
def test_a_fit_wants_five_rows_beside_its_parameters_and_zeros(
    tmp_path: Path, kept: int, enough: bool
) -> None:
    """A straight line and two cleanings: one rate and two zeros, so that eight rows are the fewest."""
    truth = Truth(model="linear", errors={"loss": 0.01})
    rows = cells(history(truth, 1, rows=401, noise=0.0))
    chosen = [rows[place] for place in (0, 50, 100, 150, 205, 250, 300, 350)[:kept]]
    survey = SURVEY.replace("kern-seaton-1959", "fouling-linear")
    if enough:
        found = solved_survey(tmp_path, chosen, survey).survey
        assert found is not None and found.fitted == kept
        return
    with pytest.raises(Faults) as caught:
        solved_survey(tmp_path, chosen, survey)
    (fault,) = caught.value.faults
    assert fault.code == "survey-rows-missing"
    assert fault.message.startswith("7 of 7 rows are left") and fault.found == "lost none"


def test_rows_without_a_zero_are_counted_where_too_few_are_left(
    tmp_path: Path, rows: list[list[str]]
) -> None:
    survey = SURVEY.replace("2025-02-03 06:00", "2015-02-03").replace("2025-08-27 06:00", "2015-03-03")
    with pytest.raises(Faults) as caught:
        solved_survey(tmp_path, rows, survey)
    (fault,) = caught.value.faults
    assert "400 before the first cleaning or without rows to anchor zero on" in fault.found


BARE = re.sub(r", tolerance: [^}]*\}", "}", COOLER).replace(
    "situation: inside-tube, method: gnielinski-1976",
    "coefficient: {value: 7000 W/(m^2 K), source: test}, on: inside",
)


def test_rows_are_anchored_and_held_against_twice_their_uncertainty(tmp_path: Path) -> None:
    """Without tolerances a row is unsure by the deviation of rows about the fit alone: by hand from its resistances."""
    survey = re.sub(r", drift per year: [^,]*", "", SURVEY).replace(", tolerance: 0.5 %", "")
    shown = history(Truth(model="linear", errors={"loss": 0.01}), 1)
    solved = solved_survey(tmp_path, cells(shown), survey.replace("kern-seaton-1959", "fouling-linear"), BARE)
    outcome = solved.survey
    assert outcome is not None and not outcome.parts and outcome.fitted == 400
    given = cells(shown)
    columns = {
        "T_hi": [float(row[1]) + 273.15 for row in given],
        "T_ho": [float(row[2]) + 273.15 for row in given],
        "T_ci": [(float(row[3]) + 459.67) / 1.8 for row in given],
        "T_co": [(float(row[4]) + 459.67) / 1.8 for row in given],
        "m_hot": [float(row[5]) for row in given],
        "m_cold": [float(row[6]) / 3.6 for row in given],
    }
    arrays = {name: np.array(figures) for name, figures in columns.items()}
    found = resistances(solved.chain, arrays, 0.01).resistance
    # 400 rows in 400 days: the minute of each stamp.
    times = np.round(shown["t"] / 60.0) * 60.0
    rate = outcome.figure("fitted r").value
    anchored = np.zeros(400)
    for number, start in enumerate((0.0, 205.0 * DAY)):
        end = 205.0 * DAY if number == 0 else np.inf
        own = (times >= start) & (times < end)
        zero = own & (times - start <= 10.0 * DAY)
        offset = float(np.mean(found[zero] - rate * (times[zero] - start)))
        assert outcome.cycles[number].offset == pytest.approx(offset, rel=1e-9)
        alike = (1.0 + outcome.correlation) / (1.0 - outcome.correlation)
        scatter = outcome.deviation * math.sqrt(alike / np.count_nonzero(zero))
        assert outcome.cycles[number].scatter == pytest.approx(scatter, rel=1e-12)
        anchored[own] = found[own] - offset
    assert outcome.negative == np.count_nonzero(anchored < 0.0) > 0
    assert outcome.not_resolved == np.count_nonzero(anchored < 2.0 * outcome.deviation) > outcome.negative


def test_the_rows_beyond_a_limit_of_the_resistance_are_counted(tmp_path: Path) -> None:
    """Without noise the balance closes; 6 % more hot flow in one row opens it by about 2·0.06/2.06 = 5.8 %: beyond the
    caution of 5 %, within the range of 10 %."""
    rows = cells(history(Truth(errors={"loss": 0.01}), 1, noise=0.0))
    rows[100][5] = f"{1.06 * float(rows[100][5]):.3f}"
    solved = solved_survey(tmp_path, rows)
    checks = {
        check.id.rpartition(" / ")[2]: check for check in solved.base.checks if "plant-data" in check.id
    }
    found = {name: (check.state, check.value) for name, check in checks.items()}
    assert found == {
        "heat flow": ("within", 0.0),
        "mean temperature difference": ("within", 0.0),
        "heat balance": ("within", 0.0),
        "good heat balance": ("outside", 1 / 400),
        "correction factor": ("within", 0.0),
    }
    assert checks["good heat balance"].figure == "1 of 400 rows outside"


def test_the_plot_has_the_means_of_its_columns(tmp_path: Path, rows: list[list[str]]) -> None:
    """72 columns of 400 days are 133 1/3 h each; the fit in the second is the mean of its curve at the rows there."""
    outcome = solved_survey(tmp_path, rows).survey
    assert outcome is not None and outcome.fitted == 400
    first, second = outcome.plot[:2]
    assert (first.begins, second.begins) == ("2025-02-03 06:00", "2025-02-08 19:20")
    width = 400 * DAY / 72
    times = np.round(np.linspace(0.0, 400 * DAY, 400) / 60.0) * 60.0
    inside = times[(times >= width) & (times < 2 * width)]
    final, tau = (outcome.figure(f"fitted {name}").value for name in ("R_inf", "tau"))
    assert second.fitted == pytest.approx(np.mean(final * (1.0 - np.exp(-inside / tau))), rel=1e-9)
    assert [number for number, one in enumerate(outcome.plot) if one.cleaned] == [0, int(205 * DAY / width)]


def test_a_calculation_without_a_survey_has_none(tmp_path: Path) -> None:
    path = tmp_path / "trial.yaml"
    path.write_text(COOLER, encoding="utf-8")
    solved = solve(read(path))
    assert solved.survey is None
    assert "Survey of plant data" not in record_text(solved)


def test_a_fit_that_did_not_come_to_rest_is_an_open_item(
    tmp_path: Path, rows: list[list[str]], monkeypatch: pytest.MonkeyPatch
) -> None:
    name = "survey/fit at rest"
    assert name not in {item.id for item in solved_survey(tmp_path, rows, SURVEY).open_items}
    monkeypatch.setattr(fitting, "PASSES", 1)
    monkeypatch.setattr(fitting, "START_PASSES", 1)
    assert name in {item.id for item in solved_survey(tmp_path, rows, SURVEY).open_items}
