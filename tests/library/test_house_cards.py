"""A book's own cards: marked in the record, held to the rules of the library, faults with file and line."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner

from calcbook.chain.outcome import Solved
from calcbook.commands.library import command as library_command
from calcbook.commands.recall import command as recall_command
from calcbook.faults import Faults
from calcbook.interface import library_of, record_text, solve_file
from calcbook.library import Library
from calcbook.library.checking import check_method, method_points
from calcbook.library.reading import read_method
from calcbook.record import digest_of

CALCS = Path(__file__).resolve().parents[2] / "calcs"
CARD = "larkmoor-he-951-shell"


@pytest.fixture(scope="module")
def solved() -> Solved:
    return solve_file(CALCS / "he-951.yaml")


@pytest.fixture
def book(tmp_path: Path) -> Path:
    """A copy of the calculation and its card, to be changed."""
    library_of.cache_clear()  # a book's cards are read once a process
    (tmp_path / "cards").mkdir()
    shutil.copy(CALCS / "he-951.yaml", tmp_path)
    shutil.copy(CALCS / "cards" / f"{CARD}.yaml", tmp_path / "cards")
    return tmp_path


def change(book: Path, old: str, new: str) -> int:
    """Change a text of the card that stands there once; returns its line."""
    path = book / "cards" / f"{CARD}.yaml"
    text = path.read_text(encoding="utf-8")
    assert text.count(old) == 1, old
    path.write_text(text.replace(old, new), encoding="utf-8")
    return text[: text.index(old)].count("\n") + 1


def faults(book: Path) -> Faults:
    with pytest.raises(Faults) as caught:
        solve_file(book / "he-951.yaml")
    return caught.value


# --- the worked example -----------------------------------------------------------------------------


def test_the_card_meets_the_runs_of_its_plant() -> None:
    """Invented runs; their scatter of 7 % is the band that the card states."""
    library = Library(CALCS / "cards")
    card = library.method(CARD)
    assert card.house and card.serves == ("shell-side",)
    check_method(card, library)
    assert len(method_points(card, library)) == 3
    assert all(point.standing == "plant data" for point in card.check_points)
    assert all(
        "invented" in text for text in (card.sources[0].cite, *(point.source for point in card.check_points))
    )


def test_it_is_used_without_an_open_item(solved: Solved) -> None:
    assert solved.base.terms["service"][-1].methods == CARD
    assert not solved.open_items


def test_the_record_calls_it_a_house_method_everywhere(solved: Solved) -> None:
    text = record_text(solved)
    section = text.partition("## 9. Validity")[2].partition("## 10.")[0]
    validity = [line for line in section.splitlines() if f"/ {CARD} /" in line]
    assert len(validity) == 2
    for line in validity:
        assert "within (house method)" in line and "house method; " in line and "published" not in line
    cautions = text.partition("## 14. Cautions")[2].partition("## 15.")[0]
    assert f"The card {CARD} is a house method" in cautions
    references = text.partition("## 15. References")[2].partition("## 16.")[0]
    row = next(line for line in references.splitlines() if line.startswith(f"| {CARD} / 1 |"))
    assert "house method; plant data" in row
    chain = text.partition("## 8.")[2].partition("## 9.")[0]
    assert f"({CARD}, house method)" in chain
    assert f"of the house: {CARD}." in text


def test_cards_of_the_library_are_not_called_so(solved: Solved) -> None:
    text = record_text(solve_file(CALCS / "fw-601.yaml"))
    assert "house method" not in text


def test_general_methods_check_it(solved: Solved) -> None:
    rows = {row.method: row for row in solved.cross[""] if row.term == "condensate film"}
    assert not rows["kern-1950"].left_out and not rows["kern-1950"].same_family
    assert abs(rows["kern-1950"].difference) < 0.1
    assert CARD not in rows


# --- wrong house cards ------------------------------------------------------------------------------


def test_the_copy_holds(book: Path) -> None:
    assert solve_file(book / "he-951.yaml").base.results["U_service"].value > 900


def test_a_check_point_that_fails_is_a_fault_with_its_line(book: Path) -> None:
    line = change(book, "Nu: 116}", "Nu: 146}")
    found = faults(book)
    (fault,) = found.faults
    assert fault.code == "check-point-failed"
    # the check point begins on the line before its `gives`
    assert (fault.place.file, fault.place.line) == (f"{CARD}.yaml", line - 1)
    assert "expected: 146.0 within 0.07" in str(found)


def test_a_changed_figure_is_found_by_every_run(book: Path) -> None:
    change(book, "0.222*Re", "0.322*Re")
    assert [fault.code for fault in faults(book).faults] == ["check-point-failed"] * 3


@pytest.mark.parametrize(
    ("text", "code", "line"),
    [
        (b"a: [\n", "yaml-syntax", 1),
        (b"", "file-empty", 1),
        (b"# nothing yet\n", "file-empty", 1),
        (b"\x89PNG\r\n\x1a\n\x00", "file-not-utf8", 1),
        (b"notes: of the plant\n", "key-unknown", 1),
        (b"- method\n", "key-unknown", 1),
    ],
)
def test_a_file_that_is_no_card_is_told_where_the_card_is_missed(
    book: Path, text: bytes, code: str, line: int
) -> None:
    """The calculation that names it is told why it is not there; one that does not is not held up."""
    (book / "cards" / f"{CARD}.yaml").write_bytes(text)
    found = {fault.code: fault.place for fault in faults(book).faults}
    assert (found[code].file, found[code].line) == (f"{CARD}.yaml", line)
    assert any(code.endswith("-unknown") for code in found)
    shutil.copy(CALCS / "fw-601.yaml", book)
    shutil.copy(CALCS / "book.yaml", book)
    library_of.cache_clear()
    assert solve_file(book / "fw-601.yaml", for_record=False).base.results["U_service"].value > 0


@pytest.mark.parametrize(
    ("name", "text"),
    [(".#card.yaml", b"root@host"), ("._card.yaml", b"\x00\x05"), ("later.yaml", b"# nothing yet\n")],
)
def test_what_systems_keep_beside_cards_holds_nothing_up(book: Path, name: str, text: bytes) -> None:
    (book / "cards" / name).write_bytes(text)
    (book / "cards" / "folder.yaml").mkdir()
    assert solve_file(book / "he-951.yaml").base.results["U_service"].value > 900


@pytest.mark.parametrize("start", ["---\n", "\ufeff", "%YAML 1.1\n---\n"])
def test_a_card_may_begin_as_any_yaml_file(book: Path, start: str) -> None:
    path = book / "cards" / f"{CARD}.yaml"
    path.write_text(f"{start}{path.read_text(encoding='utf-8')}", encoding="utf-8")
    assert solve_file(book / "he-951.yaml").base.results["U_service"].value > 900


@pytest.mark.parametrize(
    ("old", "new", "code"),
    [
        ("0.222*Re**0.58", "0.222*Re)**0.58", "relation-syntax"),
        ("0.222*Re**0.58", "0.222*Rey**0.58", "symbol-unknown"),
        ("mu: viscosity at bulk", "mu: viscousity at bulk", "quantity-unknown"),
        ("(mu/mu_s)**0.14", "mu**0.14", "dimension-slip"),
        ("9000 <= Re <= 42000, level: range", "9000 <= Re <= 42000, level: rnage", "choice-unknown"),
        ("closes on: surface", "closes on: surfaces", "choice-unknown"),
    ],
)
def test_a_slip_in_the_card_points_at_file_and_line(book: Path, old: str, new: str, code: str) -> None:
    line = change(book, old, new)
    found = faults(book)
    assert code in [fault.code for fault in found.faults]
    fault = next(fault for fault in found.faults if fault.code == code)
    assert (fault.place.file, fault.place.line) == (f"{CARD}.yaml", line)
    assert str(found).startswith(f"{CARD}.yaml:{line}:")


def test_a_card_without_points_from_outside_cannot_be_called_checked(book: Path) -> None:
    path = book / "cards" / f"{CARD}.yaml"
    text = path.read_text(encoding="utf-8").replace("    standing: plant data", "    standing: from memory")
    path.write_text(text, encoding="utf-8")
    assert [fault.code for fault in faults(book).faults] == ["card-unchecked"]


def test_a_card_serves_situations_that_exist(book: Path) -> None:
    change(book, "serves: [shell-side]", "serves: [shell-side, shellside]")
    (fault,) = faults(book).faults
    assert (fault.code, fault.nearest[0]) == ("situation-unknown", "shell-side")


def test_a_card_that_serves_another_situation_is_an_open_item(book: Path) -> None:
    change(book, "serves: [shell-side]", "serves: [tube-bank]")
    items = solve_file(book / "he-951.yaml").open_items
    assert [item.id for item in items] == ["condensate film/method"]


def test_only_a_books_own_card_serves(tmp_path: Path) -> None:
    path = tmp_path / f"{CARD}.yaml"
    shutil.copy(CALCS / "cards" / f"{CARD}.yaml", path)
    with pytest.raises(Faults) as caught:
        read_method(path)
    assert [(fault.code, fault.found) for fault in caught.value.faults] == [("key-unknown", "serves")]
    assert read_method(path, house=True).serves == ("shell-side",)


def test_a_card_that_no_calculation_uses_does_not_stop_others(book: Path) -> None:
    (book / "cards" / "not-used.yaml").write_text("method: not-used\ntitle: broken\n", encoding="utf-8")
    assert not solve_file(book / "he-951.yaml").open_items


def test_the_page_of_a_house_card_says_so() -> None:
    shown = CliRunner().invoke(library_command, ["show", CARD, "--cards", str(CALCS / "cards")])
    assert shown.exit_code == 0 and "A book's own card: house method." in shown.output


def test_a_built_in_card_is_read_once_whatever_the_book_and_a_house_card_by_its_book(book: Path) -> None:
    one, other = Library(CALCS / "cards"), Library(book / "cards")
    assert one.method("gnielinski-1976") is other.method("gnielinski-1976")
    assert one.program("gnielinski-1976") is other.program("gnielinski-1976")
    assert one.method(CARD) is not other.method(CARD)
    assert one.names("methods") == other.names("methods")
    assert CARD in one.names("methods") and CARD not in Library().names("methods")


def test_a_card_with_the_name_of_one_of_the_library_is_a_fault(book: Path) -> None:
    """Neither is silently taken for the other: the record would not say which."""
    name = "stainless-316-kaschnitz-2017"
    text = (book / "he-951.yaml").read_text(encoding="utf-8")
    wall = next(line for line in text.splitlines() if "kind: wall" in line)
    material = wall.split("material: ")[1].split("}")[0].split(",")[0]
    (book / "he-951.yaml").write_text(
        text.replace(f"material: {material}", f"material: {name}"), encoding="utf-8"
    )
    assert solve_file(book / "he-951.yaml", for_record=False).base.results
    library_of.cache_clear()
    shutil.copy(Path(read_method.__code__.co_filename).parent / "materials" / f"{name}.yaml", book / "cards")
    (fault,) = [item for item in faults(book).faults if item.code == "card-twice"]
    assert (fault.place.file, fault.found) == (f"cards/{name}.yaml", name)


def test_a_corrected_card_of_the_book_is_recalled_as_a_run_with_it(book: Path) -> None:
    (book / "book.yaml").write_text("book: A test book\n", encoding="utf-8")
    was = solve_file(book / "he-951.yaml", for_record=False).base.results["U_service"].value
    page = CliRunner().invoke(
        recall_command, [str(book), "--card", CARD, "--value", "0.222=0.226"], catch_exceptions=False
    )
    assert page.exit_code == 0 and "key-unknown" not in page.output, page.output
    library_of.cache_clear()
    text = (book / "cards" / f"{CARD}.yaml").read_text(encoding="utf-8")
    (book / "cards" / f"{CARD}.yaml").write_text(text.replace("0.222*", "0.226*"), encoding="utf-8")
    now = solve_file(book / "he-951.yaml", for_record=False).base.results["U_service"].value
    assert now != was
    assert f"{now:.4g}"[:4] in page.output and f"{(now - was) / was:+.2%}".replace("%", " %") in page.output


def test_the_accuracy_of_a_card_of_the_book_is_part_of_what_is_signed(book: Path) -> None:
    """It is computed with: every budget and every probability hangs on it."""
    before = digest_of(solve_file(book / "he-951.yaml", for_record=False)).cards
    library_of.cache_clear()
    text = (book / "cards" / f"{CARD}.yaml").read_text(encoding="utf-8")
    accuracy = next(line for line in text.splitlines() if line.startswith("accuracy:"))
    assert "7 %" in accuracy
    change(book, accuracy, accuracy.replace("7 %", "17 %"))
    assert digest_of(solve_file(book / "he-951.yaml", for_record=False)).cards != before
