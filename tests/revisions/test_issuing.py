"""Issue: what may be issued, what is frozen, and that one altered character of it is found."""

from __future__ import annotations

import hashlib
import json
import shutil
from collections.abc import Callable
from pathlib import Path

import pytest
from signed_book import BOOK, CALCULATION, change, day, make_book, sign_all, sign_prepared, work_of

from calcbook.faults import Faults
from calcbook.interface import solve_file
from calcbook.record import digest_of
from calcbook.revisions.issuing import check_seal, issue
from calcbook.revisions.lifecycle import lifecycle_of
from calcbook.revisions.revising import revise
from calcbook.revisions.sides import load_issued, load_side, side_of
from calcbook.revisions.signing import sign
from calcbook.revisions.signoffs import signoffs_path
from calcbook.seals import Issued, check_seals, issued_copies, read_seal, revision_order, seal_text


@pytest.fixture(scope="module")
def issued(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The folder of an issued copy; tests that alter it make a copy."""
    path = make_book(tmp_path_factory.mktemp("issued"))
    sign_all(path)
    return issue(work_of(path), day("2026-09-05")).folder


@pytest.fixture
def copy(issued: Path, tmp_path: Path) -> Path:
    return Path(shutil.copytree(issued, tmp_path / "A"))


def codes(call: Callable[[], object]) -> list[str]:
    with pytest.raises(Faults) as caught:
        call()
    return [fault.code for fault in caught.value.faults]


def issue_next(path: Path, revised: str, signed: str, on: str) -> Issued:
    """The next revision begun, its reason written, prepared and issued as preliminary."""
    revise(path, path.name, work_of(path).output, day(revised))
    change(path, "reason: to be written", "reason: Allowance raised")
    sign_prepared(path, signed)
    return issue(work_of(path), day(on), preliminary=True)


# --- what may be issued -----------------------------------------------------------------------------


def test_a_final_issue_needs_every_sign_off(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    assert codes(lambda: issue(work_of(path), day("2026-09-05"))) == ["issue-sign-off"] * 3
    sign_prepared(path)
    assert codes(lambda: issue(work_of(path), day("2026-09-05"))) == ["issue-sign-off"] * 2
    assert not (tmp_path / "output" / "WC-101" / "issued").exists()


def test_a_void_sign_off_is_told_with_what_changed(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    change(path, "0.00018 m^2 K/W", "0.00019 m^2 K/W")
    with pytest.raises(Faults) as caught:
        issue(work_of(path), day("2026-09-05"))
    assert [fault.code for fault in caught.value.faults] == ["issue-sign-off"] * 3
    assert "meaning changed: givens / R_fo" in caught.value.faults[0].message


def test_an_open_item_blocks_final_issue_and_lets_a_preliminary_one_pass(tmp_path: Path) -> None:
    path = make_book(tmp_path, CALCULATION.replace("source: vendor data sheet p. 3", "source: tbd"))
    sign_all(path)
    assert codes(lambda: issue(work_of(path), day("2026-09-05"))) == ["issue-open-item"]
    made = issue(work_of(path), day("2026-09-05"), preliminary=True)
    assert (made.kind, check_seal(made.folder)) == ("preliminary", ())
    record = (made.folder / "record.md").read_text(encoding="utf-8")
    assert record.split("\n")[2] == (
        "> Preliminary issue with 1 open item: not for purchase, fabrication or decisions on safety."
    )


def test_a_book_can_refuse_any_issue_with_open_items(tmp_path: Path) -> None:
    path = make_book(
        tmp_path,
        CALCULATION.replace("source: vendor data sheet p. 3", "source: tbd"),
        BOOK.replace("refuse final issue", "refuse any issue"),
    )
    sign_all(path)
    assert codes(lambda: issue(work_of(path), day("2026-09-05"), preliminary=True)) == ["issue-open-item"]


def test_a_preliminary_issue_needs_its_preparer_and_a_written_reason(tmp_path: Path) -> None:
    path = make_book(tmp_path, CALCULATION.replace("reason: First issue", "reason: to be written"))
    assert codes(lambda: issue(work_of(path), day("2026-09-05"), preliminary=True)) == [
        "issue-open-item",
        "issue-sign-off",
    ]


@pytest.mark.parametrize("preliminary", [False, True])
def test_an_issue_is_not_older_than_its_sign_offs(tmp_path: Path, preliminary: bool) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    refused = codes(lambda: issue(work_of(path), day("2026-09-01"), preliminary=preliminary))
    assert set(refused) == {"date-order"}


def test_a_revision_stands_in_the_revision_history(tmp_path: Path) -> None:
    path = make_book(tmp_path, CALCULATION.replace("{revision: A, date", "{revision: Z, date"))
    sign_all(path)
    refused = codes(lambda: issue(work_of(path), day("2026-09-05")))
    assert set(refused) == {"issue-open-item", "revision-not-listed"}
    assert codes(lambda: issue(work_of(path), day("2026-09-05"), preliminary=True)) == ["revision-not-listed"]


def test_a_title_block_that_differs_from_its_history_is_an_open_item(tmp_path: Path) -> None:
    """The record would be called confirmed with a date of its own otherwise."""
    other = CALCULATION.replace("{revision: A, date: 2026-09-02", "{revision: A, date: 2026-09-01")
    assert other != CALCULATION
    for text, words in (
        (other, "dates revision A 2026-09-02, the revision history 2026-09-01."),
        (
            CALCULATION.replace("{revision: A, date", "{revision: Z, date"),
            "does not stand in the revision history.",
        ),
    ):
        items = {
            item.id: item.text for item in work_of(make_book(tmp_path / words[:4], text)).solved.open_items
        }
        assert items["revision A / history"].endswith(words)


def test_a_revision_is_never_issued_twice(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    made = issue(work_of(path), day("2026-09-05"))
    before = (made.folder / "seal.json").read_bytes()
    assert codes(lambda: issue(work_of(path), day("2026-09-05"))) == ["revision-issued"]
    assert codes(lambda: sign(work_of(path), "approved", "ta", day("2026-09-05"))) == ["revision-issued"]
    change(path, "revision: A\n", "revision: a\n")
    assert codes(lambda: issue(work_of(path), day("2026-09-05"), preliminary=True)) == ["revision-issued"]
    change(path, "revision: a\n", "revision: A\n")
    change(path, "0.00018 m^2 K/W", "0.00019 m^2 K/W")
    assert codes(lambda: issue(work_of(path), day("2026-09-05"), preliminary=True)) == ["revision-issued"]
    assert (made.folder / "seal.json").read_bytes() == before


def test_a_revision_before_the_issued_one_is_refused(tmp_path: Path) -> None:
    path = make_book(tmp_path, CALCULATION.replace("revision: A", "revision: C"))
    sign_all(path)
    issue(work_of(path), day("2026-09-05"))
    path.write_text(CALCULATION.replace("revision: A", "revision: B"), encoding="utf-8")
    sign_prepared(path)
    assert codes(lambda: issue(work_of(path), day("2026-09-05"), preliminary=True)) == ["revision-not-later"]


def test_a_number_that_leads_elsewhere_issues_nothing(tmp_path: Path) -> None:
    path = make_book(tmp_path / "inside", CALCULATION.replace("number: WC-101", "number: ../../x"))
    assert codes(lambda: issue(work_of(path), day("2026-09-05"), preliminary=True)) == ["number-not-allowed"]
    assert {item.name for item in tmp_path.iterdir()} == {"inside"}
    assert {item.name for item in (tmp_path / "inside").iterdir()} == {"calcs"}


def test_two_files_of_one_number_share_their_issued_revisions(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    issue(work_of(path), day("2026-09-05"))
    other = path.with_name("other.yaml")
    other.write_text(CALCULATION.replace("purpose: >", "purpose: >\n  Another."), encoding="utf-8")
    assert codes(lambda: issue(work_of(other), day("2026-09-05"), preliminary=True)) == ["revision-issued"]


# --- what is frozen ---------------------------------------------------------------------------------


def test_the_copy_holds_the_files_byte_for_byte_and_its_digests(issued: Path) -> None:
    calcs = issued.parents[3] / "calcs"
    output = issued.parents[1]
    assert {file.name for file in issued.iterdir()} == {
        "calculation.yaml",
        "book.yaml",
        "record.md",
        "results.json",
        "signoffs.yaml",
        "seal.json",
    }
    for name, original in (
        ("calculation.yaml", calcs / "wc-101.yaml"),
        ("book.yaml", calcs / "book.yaml"),
        ("signoffs.yaml", signoffs_path(calcs / "wc-101.yaml")),
        ("record.md", output / "record.md"),
        ("results.json", output / "results.json"),
    ):
        assert (issued / name).read_bytes() == original.read_bytes()
    seal = json.loads((issued / "seal.json").read_text(encoding="utf-8"))
    assert (
        seal["seal"],
        seal["number"],
        seal["revision"],
        seal["kind"],
        seal["date"],
        seal["supersedes"],
    ) == ("calcbook-seal-1", "WC-101", "A", "final", "2026-09-05", "")
    for name, digest in seal["files"].items():
        assert hashlib.sha256((issued / name).read_bytes()).hexdigest() == digest
    digest = digest_of(work_of(calcs / "wc-101.yaml").solved)
    assert seal["digest"] == {"meaning": digest.meaning, "cards": digest.cards, "results": digest.results}
    assert seal["software"]["calcbook"] and seal["software"]["CoolProp"]
    assert "| State | issued |" in (issued / "record.md").read_text(encoding="utf-8")
    assert "| Issue | final issue of revision A on 2026-09-05 |" in (issued / "record.md").read_text(
        encoding="utf-8"
    )


def test_house_cards_and_table_files_go_into_the_copy_which_solves_by_itself(tmp_path: Path) -> None:
    from calcbook.library import ROOT

    card = (ROOT / "materials" / "stainless-316-kaschnitz-2017.yaml").read_text(encoding="utf-8")
    calculation = CALCULATION.replace("stainless-316-kaschnitz-2017", "house-steel").replace(
        "fluid: water, ", "fluid: {table file: oil.csv, source: supplier's sheet}, "
    )
    path = make_book(tmp_path, calculation)
    (path.parent / "cards").mkdir()
    (path.parent / "cards" / "house-steel.yaml").write_text(
        card.replace("material: stainless-316-kaschnitz-2017", "material: house-steel"), encoding="utf-8"
    )
    (path.parent / "cards" / "not-used.yaml").write_text(
        card.replace("material: stainless-316-kaschnitz-2017", "material: not-used"), encoding="utf-8"
    )
    (path.parent / "oil.csv").write_text(
        "T,density,viscosity,conductivity,heat capacity\ndegC,kg/m^3,mPa s,W/(m K),kJ/(kg K)\n"
        "20,1000,1.0,0.60,4.18\n50,990,0.55,0.64,4.18\n100,960,0.28,0.68,4.2\n",
        encoding="utf-8",
    )
    sign_prepared(path)
    made = issue(work_of(path), day("2026-09-05"), preliminary=True)
    names = {file.relative_to(made.folder).as_posix() for file in made.folder.rglob("*") if file.is_file()}
    assert {"cards/house-steel.yaml", "oil.csv"} <= names
    assert "cards/not-used.yaml" not in names
    again = digest_of(solve_file(made.folder / "calculation.yaml"))
    assert {"meaning": again.meaning, "cards": again.cards, "results": again.results} == made.digest
    assert check_seal(made.folder) == ()
    (made.folder / "cards" / "house-steel.yaml").write_text("altered\n", encoding="utf-8")
    assert [finding.file for finding in check_seal(made.folder)] == ["cards/house-steel.yaml"]


def test_a_preliminary_issue_without_a_file_of_sign_offs_holds_an_empty_one(tmp_path: Path) -> None:
    path = make_book(tmp_path, book=BOOK.replace("[prepared, checked, approved]", "[checked]"))
    made = issue(work_of(path), day("2026-09-05"), preliminary=True)
    assert (made.folder / "signoffs.yaml").read_text(encoding="utf-8").endswith("sign-offs: []\n")


def test_the_second_copy_names_the_first_and_its_seal(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    first = issue(work_of(path), day("2026-09-05"))
    second = issue_next(path, "2026-11-20", "2026-11-21", "2026-11-22")
    assert (second.supersedes, second.supersedes_seal) == ("A", read_seal(first.folder).whole)
    output = path.parent.parent / "output"
    assert [item.revision for item in issued_copies(output, "WC-101")] == ["A", "B"]
    assert check_seals(output, "WC-101") == ()


def test_revisions_stand_in_order() -> None:
    revisions = ["A", "B", "Z", "AA", "0", "2", "10", "P01"]
    assert sorted(reversed(revisions), key=revision_order) == revisions


# --- what is found ----------------------------------------------------------------------------------


def test_a_copy_that_was_solved_is_remembered_by_its_seal_and_looked_at_each_time(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    folder = issue(work_of(path), day("2026-09-05")).folder
    output = folder.parents[2]
    number = folder.parents[1].name
    first = load_issued(number, "A", output)
    assert load_issued(number, "A", output) is first
    record = folder / "record.md"
    text = record.read_bytes()
    record.write_bytes(text + b"\n")
    assert codes(lambda: load_issued(number, "A", output)) == ["issued-altered"]
    record.write_bytes(text)
    assert load_issued(number, "A", output) is first


def test_a_file_that_is_solved_already_is_the_side_that_it_is_when_read(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    work = work_of(path)
    found, read = side_of(work.solved, path, work.output), load_side(path.name, path.parent, work.output)
    assert (found.label, found.digest, found.tree) == (read.label, read.digest, read.tree)
    # Who asks for the side of a solved file knows its lifecycle.
    assert (found.state, read.state) == ("not known here", "in preparation")
    assert found.file_name == read.file_name
    assert found.results == read.results


def test_a_copy_as_it_was_issued_has_no_finding(copy: Path) -> None:
    assert check_seal(copy) == ()


@pytest.mark.parametrize(
    "name", ["calculation.yaml", "book.yaml", "record.md", "results.json", "signoffs.yaml"]
)
def test_one_altered_character_is_found_anywhere_in_a_file(copy: Path, name: str) -> None:
    data = (copy / name).read_bytes()
    for place in [*range(0, len(data), 997), len(data) - 1]:
        altered = data[:place] + bytes([data[place] ^ 1]) + data[place + 1 :]
        (copy / name).write_bytes(altered)
        assert [(finding.file, finding.text) for finding in check_seal(copy)] == [
            (name, "the file was altered after the issue")
        ]
    (copy / name).write_bytes(data)
    assert check_seal(copy) == ()


def test_one_altered_character_of_the_seal_is_found_wherever_it_stands(copy: Path) -> None:
    data = (copy / "seal.json").read_bytes()
    for place in range(len(data)):
        (copy / "seal.json").write_bytes(data[:place] + bytes([data[place] ^ 1]) + data[place + 1 :])
        assert check_seal(copy), f"byte {place} of the seal"


def test_files_that_are_missing_added_or_moved_are_found(copy: Path) -> None:
    (copy / "note.txt").write_text("a note", encoding="utf-8")
    (copy / "record.md").unlink()
    assert {(finding.file, finding.text) for finding in check_seal(copy)} == {
        ("note.txt", "the file was added after the issue"),
        ("record.md", "the file is missing"),
    }
    moved = copy.rename(copy.with_name("B"))
    assert any("the folder of B" in finding.text for finding in check_seal(moved))
    (moved / "seal.json").unlink()
    assert [finding.file for finding in check_seal(moved)] == ["seal.json"]


def test_a_copy_that_was_sealed_anew_shows_against_its_successor(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    first = issue(work_of(path), day("2026-09-05"))
    issue_next(path, "2026-11-20", "2026-11-21", "2026-11-22")
    record = first.folder / "record.md"
    record.write_text(record.read_text(encoding="utf-8") + "More.\n", encoding="utf-8")
    seal = read_seal(first.folder)
    files = {**seal.files, "record.md": hashlib.sha256(record.read_bytes()).hexdigest()}
    forged = Issued(
        seal.folder,
        seal.number,
        seal.revision,
        seal.kind,
        seal.date,
        "",
        "",
        seal.digest,
        seal.software,
        files,
    )
    (first.folder / "seal.json").write_text(seal_text(forged), encoding="utf-8", newline="\n")
    assert check_seal(first.folder) == ()
    (finding,) = check_seals(path.parent.parent / "output", "WC-101")
    assert finding[0] == "A"
    assert "sealed anew" in finding[1].text


def test_a_seal_that_is_none_is_a_fault_of_whoever_needs_it(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_all(path)
    made = issue(work_of(path), day("2026-09-05"))
    (made.folder / "seal.json").write_text("{}", encoding="utf-8")
    work = work_of(path)
    assert codes(lambda: lifecycle_of(path, work.solved, work.output)) == ["seal-unreadable"]
