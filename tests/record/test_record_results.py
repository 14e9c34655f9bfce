"""The results file and the digest."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator
from dataclasses import replace

import pytest

from calcbook.chain.outcome import Solved
from calcbook.record import digest_of, results_data, results_text, software_of
from calcbook.record.digest import displayed
from calcbook.record.results import rounded

KEYS = [
    *("calculation", "digest", "software", "results", "conditions", "steps", "checks", "acceptance"),
    *("assumptions", "open_items", "cases"),
]


def data_of(solved: Solved) -> dict[str, object]:
    digest = digest_of(solved)
    return results_data(solved, digest, software_of(digest))


def numbers_in(content: object) -> Iterator[float]:
    if isinstance(content, dict):
        for value in content.values():
            yield from numbers_in(value)
    elif isinstance(content, list):
        for value in content:
            yield from numbers_in(value)
    elif isinstance(content, float):
        yield content


# --- results ----------------------------------------------------------------------------------------


def test_the_results_file_has_its_parts_in_order(solved: Solved) -> None:
    budgets = ["uncertainty"] if solved.uncertainty is not None else []
    assert list(data_of(solved)) == [*KEYS, *budgets, "sweep", "flips"]


def test_budgets_stand_in_the_results_file(water_cooler: Solved) -> None:
    data = data_of(water_cooler)["uncertainty"]
    assert isinstance(data, dict) and water_cooler.uncertainty is not None
    for budget in water_cooler.uncertainty.budgets:
        stated = data["budgets"][budget.result]
        assert stated["expanded_uncertainty"] == rounded(budget.expanded)
        assert [line["id"] for line in stated["lines"]] == [row.input.id for row in budget.rows]


def test_the_results_file_is_json_without_nan(solved: Solved) -> None:
    digest = digest_of(solved)
    text = results_text(solved, digest, software_of(digest))
    assert json.loads(text) == data_of(solved)
    assert text.endswith("}\n") and "NaN" not in text and "\\u" not in text


def test_figures_carry_ten_digits(solved: Solved) -> None:
    for number in numbers_in(data_of(solved)):
        assert math.isfinite(number)
        assert number == float(f"{number:.10g}")


def test_what_is_not_known_is_null_and_flags_stay_flags() -> None:
    assert rounded(math.nan) is None and rounded(math.inf) is None
    assert rounded(True) is True
    assert rounded(1.23456789012345) == 1.23456789


def test_results_stand_with_their_units(water_cooler: Solved) -> None:
    results = data_of(water_cooler)["results"]
    assert isinstance(results, dict)
    assert results["U_service"] == {
        "value": rounded(water_cooler.base.results["U_service"].value),
        "unit": "W/(m^2 K)",
    }
    assert set(results) == {*water_cooler.base.results, "controlling"}


def test_shares_of_a_condition_add_up(solved: Solved) -> None:
    conditions = data_of(solved)["conditions"]
    assert isinstance(conditions, dict)
    for rows in conditions.values():
        # Ten digits of each share: their sum is off by a few in the tenth place at most.
        assert sum(row["share"] for row in rows) == pytest.approx(1.0, abs=1e-9)


def test_every_step_stands_in_both_conditions(solved: Solved) -> None:
    steps = data_of(solved)["steps"]
    assert isinstance(steps, list)
    ids = [(step["id"], step["condition"]) for step in steps]
    assert len(ids) == len(set(ids)) == 2 * len({name for name, _ in ids})


def test_cases_stand_by_name(water_cooler: Solved) -> None:
    cases = data_of(water_cooler)["cases"]
    assert isinstance(cases, dict) and list(cases) == ["winter"]


# --- digest -----------------------------------------------------------------------------------------


def test_the_digest_is_stable(water_cooler: Solved) -> None:
    assert digest_of(water_cooler) == digest_of(water_cooler)
    assert len(digest_of(water_cooler).whole) == 64


def test_the_digest_holds_no_floats(solved: Solved) -> None:
    for text, unit in displayed(solved).values():
        assert isinstance(text, str) and isinstance(unit, str)


def test_a_number_is_refused_by_the_digest(water_cooler: Solved) -> None:
    chain = water_cooler.chain
    changed = replace(chain, calculation=replace(chain.calculation, meaning={"value": 1.5}))
    with pytest.raises(TypeError, match="float has no place in a digest"):
        digest_of(replace(water_cooler, chain=changed))


def test_a_change_of_meaning_moves_that_part_only(water_cooler: Solved) -> None:
    chain = water_cooler.chain
    changed = replace(chain.calculation, meaning={"calculation": {"number": "TEST-1", "revision": "C"}})
    before, after = (
        digest_of(water_cooler),
        digest_of(replace(water_cooler, chain=replace(chain, calculation=changed))),
    )
    assert before.meaning != after.meaning and before.whole != after.whole
    assert (before.cards, before.results) == (after.cards, after.results)


def test_a_change_of_a_card_moves_that_part_only(water_cooler: Solved) -> None:
    cards = {**water_cooler.cards, "method gnielinski-1976": "another text"}
    before, after = digest_of(water_cooler), digest_of(replace(water_cooler, cards=cards))
    assert before.cards != after.cards and before.whole != after.whole
    assert (before.meaning, before.results) == (after.meaning, after.results)


def test_a_displayed_digit_moves_the_results_and_a_hidden_one_does_not(water_cooler: Solved) -> None:
    before = digest_of(water_cooler).results

    def with_overall(factor: float) -> str:
        base = water_cooler.base
        result = base.results["U_service"]
        results = {**base.results, "U_service": result._replace(value=result.value * factor)}
        return digest_of(
            replace(water_cooler, cases=(replace(base, results=results), *water_cooler.cases[1:]))
        ).results

    assert with_overall(1.0 + 1e-9) == before
    assert with_overall(1.001) != before
