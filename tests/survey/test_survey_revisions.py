"""A survey over its revisions: what the comparison tells, what an issued copy freezes."""

from __future__ import annotations

import datetime
from pathlib import Path

import pytest
from history import Truth, cells, drawn, history
from survey_calculations import COOLER, SURVEY, write_history

from calcbook.interface import solve_file
from calcbook.record import digest_of
from calcbook.revisions.attribution import attribute
from calcbook.revisions.changes import changes_between
from calcbook.revisions.issuing import check_seal, issue
from calcbook.revisions.sides import load_side
from calcbook.revisions.signing import open_work

ROWS = cells(history(Truth(errors=drawn(3)), 3, rows=120))
BOOK = """\
book: Larkmoor Works (invented)
output: ../output
revisions: letters
roles: [checked]
people: {kl: {name: K. L.}, mr: {name: M. R.}}
"""
REVISIONS = "revisions:\n  - {revision: A, date: 2026-04-14, reason: First issue}\n"


def book_of(folder: Path, rows: list[list[str]], survey: str = SURVEY) -> Path:
    folder.mkdir(parents=True)
    (folder / "book.yaml").write_text(BOOK, encoding="utf-8")
    write_history(folder, rows)
    path = folder / "trial.yaml"
    path.write_text(COOLER + REVISIONS + survey, encoding="utf-8")
    return path


@pytest.mark.parametrize("what", ["a limit", "a cell"])
def test_a_changed_survey_is_one_change_that_moves_no_u(tmp_path: Path, what: str) -> None:
    rows, survey = [list(row) for row in ROWS], SURVEY
    if what == "a limit":
        survey = SURVEY.replace("closure: 8 %", "closure: 7 %")
    else:
        rows[60][1] = f"{float(rows[60][1]) + 0.01:.2f}"
    book_of(tmp_path / "old", ROWS)
    book_of(tmp_path / "new", rows, survey)
    old, new = (load_side(f"{name}/trial.yaml", tmp_path, tmp_path / "output") for name in ("old", "new"))
    changes = changes_between(old, new)
    assert [(change.id, change.moves) for change in changes] == [("survey", False)]
    wanted = ("closure: 8 %", "closure: 7 %") if what == "a limit" else ("TI-1111", "TI-1111")
    assert wanted[0] in changes[0].was and wanted[1] in changes[0].now
    # The effects are worked out although the history cannot be read where they are.
    assert attribute(old, new, changes, ("U_service",))


def test_an_issued_copy_holds_the_history_and_solves_by_itself(tmp_path: Path) -> None:
    path = book_of(tmp_path / "calcs", ROWS)
    made = issue(
        open_work(path, path.name, tmp_path / "output"), datetime.date(2026, 4, 20), preliminary=True
    )
    assert (made.folder / "history.csv").read_bytes() == (path.parent / "history.csv").read_bytes()
    (path.parent / "history.csv").unlink()
    again = digest_of(solve_file(made.folder / "calculation.yaml"))
    assert {"meaning": again.meaning, "cards": again.cards, "results": again.results} == made.digest
    assert check_seal(made.folder) == ()
    (made.folder / "history.csv").write_text("altered\n", encoding="utf-8")
    assert [finding.file for finding in check_seal(made.folder)] == ["history.csv"]
