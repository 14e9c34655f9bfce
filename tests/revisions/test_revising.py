"""The next revision: its name by the book's scheme, and the smallest edit of the file."""

from __future__ import annotations

import difflib
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from signed_book import BOOK, CALCULATION, change, day, make_book, sign_all, sign_prepared, work_of

from calcbook.faults import Faults
from calcbook.revisions.issuing import issue
from calcbook.revisions.lifecycle import lifecycle_of
from calcbook.revisions.revising import next_revision, revise
from calcbook.revisions.signing import declare_void
from calcbook.seals import revision_order

LINE = "  - {revision: B, date: 2026-11-20, reason: to be written}"


def codes(call: Callable[[], object]) -> list[str]:
    with pytest.raises(Faults) as caught:
        call()
    return [fault.code for fault in caught.value.faults]


def revised(path: Path, numbers: bool = False) -> tuple[str, str]:
    found = revise(path, path.name, path.parent.parent / "output", day("2026-11-20"), numbers)
    return found.was, found.now


def edits(before: str, after: str) -> list[str]:
    """The lines that an edit took away and put in."""
    lines = difflib.ndiff(before.split("\n"), after.split("\n"))
    return [line for line in lines if line[:2] in ("- ", "+ ")]


@pytest.mark.parametrize(
    ("revision", "scheme", "numbers", "following"),
    [
        ("A", "letters", False, "B"),
        ("Z", "letters", False, "AA"),
        ("AZ", "letters", False, "BA"),
        ("b", "letters", False, "c"),
        ("A", "letters", True, "B"),
        ("0", "numbers", False, "1"),
        ("9", "numbers", False, "10"),
        ("09", "numbers", False, "10"),
        ("A", "letters then numbers", False, "B"),
        ("C", "letters then numbers", True, "0"),
        ("0", "letters then numbers", False, "1"),
        ("1", "letters then numbers", True, "2"),
    ],
)
def test_the_next_revision_by_the_scheme(revision: str, scheme: str, numbers: bool, following: str) -> None:
    assert next_revision(revision, scheme, numbers) == following


@pytest.mark.parametrize(
    ("revision", "scheme"), [("1", "letters"), ("A", "numbers"), ("P01", "letters then numbers")]
)
def test_a_revision_outside_the_scheme_is_refused(revision: str, scheme: str) -> None:
    assert codes(lambda: next_revision(revision, scheme)) == ["revision-scheme"]


@given(st.text("ABCXYZ", min_size=1, max_size=2) | st.integers(0, 9999).map(str))
def test_the_next_revision_comes_right_after(revision: str) -> None:
    following = next_revision(revision, "letters then numbers")
    assert revision_order(revision) < revision_order(following)


def test_three_lines_change_and_every_comment_stays(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    assert revised(path) == ("A", "B")
    assert edits(CALCULATION, path.read_text(encoding="utf-8")) == [
        "-   revision: A",
        "+   revision: B",
        "-   date: 2026-09-02",
        "+   date: 2026-11-20",
        f"+ {LINE}",
    ]


LAYOUTS = {
    "quotes": ("revision: A\n  prepared", 'revision: "A"   # quoted\n  prepared'),
    "block lines": (
        "  - {revision: A, date: 2026-09-02, reason: First issue}   # the first\n",
        "  # the history\n  - revision: A\n    date: 2026-09-02\n    reason: First issue   # the first\n\n"
        "# --- what follows ---\n",
    ),
    "no indent": (
        "  - {revision: A, date: 2026-09-02, reason: First issue}   # the first\n",
        "- {revision: A, date: 2026-09-02, reason: First issue}\n",
    ),
    "brackets": (
        "revisions:\n  - {revision: A, date: 2026-09-02, reason: First issue}   # the first\n",
        "revisions: [{revision: A, date: 2026-09-02, reason: First issue}]  # [all]\n",
    ),
    "brackets over lines": (
        "revisions:\n  - {revision: A, date: 2026-09-02, reason: First issue}   # the first\n",
        "revisions: [\n  {revision: A, date: 2026-09-02, reason: First issue},\n  ]\n",
    ),
    "no history": (
        "revisions:\n  - {revision: A, date: 2026-09-02, reason: First issue}   # the first\n\n",
        "",
    ),
    "head in braces": (
        CALCULATION[CALCULATION.index("calculation:") : CALCULATION.index("purpose:")],
        "calculation: {number: WC-101, title: Cooler, plant: Larkmoor Works, revision: A,\n"
        "  prepared by: K. L., date: '2026-09-02'}\n\n",
    ),
    "history last": (
        CALCULATION[CALCULATION.index("revisions:") :],
        CALCULATION[CALCULATION.index("givens:") :]
        + "revisions:\n  - {revision: A, date: 2026-09-02, reason: First issue}",
    ),
}


@pytest.mark.parametrize("layout", LAYOUTS)
@pytest.mark.parametrize("end", ["\n", "\r\n"])
@pytest.mark.parametrize("mark", ["", "\ufeff"])
def test_any_layout_is_edited_or_left_alone(tmp_path: Path, layout: str, end: str, mark: str) -> None:
    old, new = LAYOUTS[layout]
    assert CALCULATION.count(old) == 1
    before = mark + CALCULATION.replace(old, new)
    path = make_book(tmp_path)
    path.write_bytes(before.replace("\n", end).encode("utf-8"))
    revised(path)
    after = path.read_bytes().decode("utf-8")
    assert after.count(end) == after.count("\n")
    assert after.startswith(mark)
    calculation = work_of(path).solved.chain.calculation
    assert (calculation.revision, calculation.date) == ("B", "2026-11-20")
    assert [(item.revision, item.reason) for item in calculation.revisions][-1] == ("B", "to be written")
    kept = [line for line in edits(before.replace("\n", end), after) if line.startswith("- ")]
    assert len(kept) <= 3
    for comment in (
        "# A cooler of the closed water loop.",
        "# quoted",
        "# the first",
        "# the history",
        "# [all]",
    ):
        assert (comment in before) == (comment in after)


def test_a_layout_that_cannot_be_edited_safely_is_left_as_it_is(tmp_path: Path) -> None:
    path = make_book(tmp_path, CALCULATION.replace("  revision: A\n", "  revision: >\n    A\n"))
    before = path.read_bytes()
    assert codes(lambda: revised(path)) == ["revise-by-hand"]
    assert path.read_bytes() == before


def test_the_reason_must_be_written_before_the_next_begins_and_before_an_issue(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    revised(path)
    assert codes(lambda: revised(path)) == ["revision-begun"]
    work = work_of(path)
    assert [item.text for item in lifecycle_of(path, work.solved, work.output).open_items] == [
        "The reason of revision B is to be written."
    ]


def test_a_book_with_letters_then_numbers_goes_over_after_a_final_issue(tmp_path: Path) -> None:
    path = make_book(tmp_path, book=BOOK.replace("revisions: letters", "revisions: letters then numbers"))
    sign_prepared(path)
    issue(work_of(path), day("2026-09-05"), preliminary=True)
    assert revised(path) == ("A", "B")
    change(path, "reason: to be written", "reason: Checked")
    path.write_text(path.read_text(encoding="utf-8").replace("2026-11-20", "2026-09-06"), encoding="utf-8")
    change_dates_and_sign(path)
    issue(work_of(path), day("2026-09-10"))
    assert revised(path) == ("B", "0")


def change_dates_and_sign(path: Path) -> None:
    from signed_book import fill

    from calcbook.revisions.signing import sign

    sign_prepared(path, "2026-09-06")
    form = sign(work_of(path), "checked", "mr", day("2026-09-07")).path
    fill(form)
    sign(work_of(path), "checked", "mr", day("2026-09-07"))
    sign(work_of(path), "approved", "ta", day("2026-09-08"))


def test_numbers_can_be_begun_by_hand(tmp_path: Path) -> None:
    path = make_book(tmp_path, book=BOOK.replace("revisions: letters", "revisions: letters then numbers"))
    assert revised(path, numbers=True) == ("A", "0")


def test_an_older_file_does_not_take_an_issued_revision_again(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    issue(work_of(path), day("2026-09-05"))
    revised(path)
    change(path, "reason: to be written", "reason: Allowance raised")
    sign_prepared(path, "2026-11-20")
    issue(work_of(path), day("2026-11-21"), preliminary=True)
    path.write_text(CALCULATION, encoding="utf-8")
    assert revised(path) == ("A", "C")


def test_a_revision_is_not_older_than_the_file(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    assert codes(lambda: revise(path, path.name, tmp_path, day("2026-09-01"))) == ["date-order"]


def test_a_void_calculation_has_no_next_revision(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    declare_void(work_of(path), "ta", day("2026-09-06"), "The cooler is replaced, see WC-201.")
    assert codes(lambda: revised(path)) == ["calculation-void"]


def test_a_missing_file_is_a_fault(tmp_path: Path) -> None:
    path = make_book(tmp_path).with_name("wc-102.yaml")
    assert codes(lambda: revised(path)) == ["file-not-found"]
