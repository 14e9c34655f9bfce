"""The margin ledger, case by case."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from rated_units import HEATER, solved

from calcbook.interface import record_text

PLUGGED = HEATER.replace(
    "tubes: {value: 116, source: s}", "tubes: {value: 116, source: s}, plugged: {count: n_p, source: s}"
).replace("givens:\n", "givens:\n  n_p: {value: 0, is: plugged tubes, source: s}\n")
CASES = """\
cases:
  ten plugged: {n_p: {value: 10, source: s}}
  winter: {T_ci: {value: 6 degC, source: s}}
"""


def test_every_case_has_its_ledger_and_each_adds_up_to_all_tubes(tmp_path: Path) -> None:
    answer = solved(tmp_path, PLUGGED + CASES)
    assert answer.rating is not None
    ledgers = answer.rating.ledgers
    assert list(ledgers) == ["", "ten plugged", "winter"]
    # By hand: pi d_o L N, whatever is plugged.
    every = math.pi * 0.01905 * 2.44 * 116
    assert [ledger.sum for ledger in ledgers.values()] == pytest.approx([every] * 3, rel=1e-12)
    assert ledgers["ten plugged"].area("plugged tubes") == pytest.approx(every * 10 / 116, rel=1e-12)
    assert "plugged tubes" not in {row.name for row in ledgers[""].rows}
    # A case has the ledger of a file in which its figures are those of the base case.
    alone = solved(tmp_path, PLUGGED.replace("T_ci: {value: 18 degC", "T_ci: {value: 6 degC")).rating
    assert alone is not None and len(alone.ledgers) == 1
    for row in alone.ledger.rows:
        assert ledgers["winter"].area(row.name) == pytest.approx(row.area, rel=1e-8)
    page = record_text(answer)
    assert "| Largest in case ten plugged, m²·K/W | Largest in case winter, m²·K/W |" in page
    assert "| Part of the area | base | ten plugged | winter |" in page
    (line,) = (line for line in page.splitlines() if line.startswith("| plugged tubes |"))
    assert line == f"| plugged tubes | 0 | {every * 10 / 116:.4f} | 0 |"


def test_a_calculation_without_cases_has_one_table(tmp_path: Path) -> None:
    assert "The same in every case" not in record_text(solved(tmp_path, HEATER))
