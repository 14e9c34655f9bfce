"""State, confirmation and validity: derived from evidence; void as soon as what was signed has changed."""

from __future__ import annotations

import re
from dataclasses import replace
from pathlib import Path

import pytest
from markdown_it import MarkdownIt
from signed_book import (
    BOOK,
    CALCULATION,
    change,
    day,
    fill,
    make_book,
    sign_all,
    sign_checked,
    sign_prepared,
    work_of,
)

from calcbook.calcfile.meaning import meaning_of
from calcbook.chain.outcome import Solved
from calcbook.documents import read_text
from calcbook.faults import Faults
from calcbook.interface import library_of
from calcbook.record import digest_of, record_text
from calcbook.record.life import Life
from calcbook.revisions.issuing import issue
from calcbook.revisions.lifecycle import Judged, Lifecycle, life_of, lifecycle_of
from calcbook.revisions.revising import revise
from calcbook.revisions.signing import declare_void, sign
from calcbook.revisions.signoffs import changed_since, content_of, read_signoffs, signoffs_path, signoffs_text


@pytest.fixture(scope="module")
def signed(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A calculation with every sign-off; tests that change it make a copy."""
    path = make_book(tmp_path_factory.mktemp("signed"))
    sign_all(path)
    return path


@pytest.fixture
def path(signed: Path, tmp_path: Path) -> Path:
    """A copy of the signed calculation."""
    copy = make_book(tmp_path, signed.read_text(encoding="utf-8"))
    signoffs_path(copy).write_bytes(signoffs_path(signed).read_bytes())
    return copy


def life(path: Path) -> Lifecycle:
    work = work_of(path)
    return lifecycle_of(path, work.solved, work.output)


def judged(path: Path) -> list[Judged]:
    return list(life(path).signoffs)


# --- states -----------------------------------------------------------------------------------------


def test_the_states_follow_the_sign_offs(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    assert life(path).state == "in preparation"
    sign_prepared(path)
    assert life(path).state == "prepared"
    sign_checked(path)
    assert life(path).state == "checked"
    sign(work_of(path), "approved", "ta", day("2026-09-04"))
    assert life(path).state == "approved"
    issue(work_of(path), day("2026-09-05"))
    assert (life(path).state, life(path).is_current) == ("issued", True)


def test_an_issue_is_superseded_by_the_next_and_its_copy_stays_as_it_is(path: Path) -> None:
    first = issue(work_of(path), day("2026-09-05"))
    before = {file.name: file.read_bytes() for file in first.folder.iterdir()}
    work = work_of(path)
    revise(path, path.name, work.output, day("2026-11-20"))
    change(path, "reason: to be written", "reason: Shell-side allowance raised")
    change(path, "0.00018 m^2 K/W", "0.00035 m^2 K/W")
    assert life(path).state == "in preparation"
    sign_prepared(path, "2026-11-21")
    sign_checked(path, "2026-11-22")
    sign(work_of(path), "approved", "ta", day("2026-11-23"))
    second = issue(work_of(path), day("2026-11-24"))
    now = life(path)
    assert (now.state, second.supersedes) == ("issued", "A")
    assert [copy.revision for copy in now.issued] == ["A", "B"]
    assert {file.name: file.read_bytes() for file in first.folder.iterdir()} == before
    assert now.last_before is not None
    assert now.last_before.revision == "A"


def test_the_file_of_a_superseded_revision_is_superseded(path: Path) -> None:
    old = path.read_bytes()
    issue(work_of(path), day("2026-09-05"))
    revise(path, path.name, work_of(path).output, day("2026-11-20"))
    change(path, "reason: to be written", "reason: Shell-side allowance raised")
    sign_prepared(path, "2026-11-21")
    issue(work_of(path), day("2026-11-24"), preliminary=True)
    path.write_bytes(old)
    assert life(path).state == "superseded"


def test_an_issued_file_that_was_changed_is_no_longer_issued(path: Path) -> None:
    issue(work_of(path), day("2026-09-05"))
    change(path, "0.00018 m^2 K/W", "0.00020 m^2 K/W")
    now = life(path)
    assert (now.state, now.is_current) == ("in preparation", False)
    work = work_of(path)
    assert life_of(path, work.solved, work.output).issued == (
        "final issue of revision A on 2026-09-05; the file has changed since and needs its next revision"
    )


def test_a_calculation_that_is_declared_void_is_void_after_its_issue(path: Path) -> None:
    issue(work_of(path), day("2026-09-05"))
    declare_void(work_of(path), "ta", day("2026-09-06"), "The cooler is replaced, see WC-201.")
    assert life(path).state == "void"


@pytest.mark.parametrize("nothing", ["tbd", "T.B.D.", "not known yet", "see above", "later", "n/a"])
def test_confirmation_is_preliminary_while_anything_is_open(tmp_path: Path, nothing: str) -> None:
    path = make_book(tmp_path)
    assert life(path).confirmation == "confirmed"
    change(path, "source: vendor data sheet p. 3", f"source: {nothing}")
    assert life(path).confirmation == "preliminary"


@pytest.mark.parametrize("reason", ["to be written", "TODO", "tbd.", '"-"'])
def test_a_reason_to_be_written_is_an_open_item(tmp_path: Path, reason: str) -> None:
    path = make_book(tmp_path, CALCULATION.replace("reason: First issue", f"reason: {reason}"))
    now = life(path)
    assert "revision A / reason" in record_text(work_of(path).solved)
    assert now.confirmation == "preliminary"
    assert [item.id for item in now.open_items] == ["revision A / reason"]


def test_a_file_with_a_fault_keeps_its_issued_copies_and_judges_nothing(path: Path) -> None:
    issue(work_of(path), day("2026-09-05"))
    change(path, "value: 62,", "value: sixty,")
    now = lifecycle_of(path, None, path.parent.parent / "output")
    assert (now.number, now.revision, now.state, now.confirmation) == (
        "WC-101",
        "A",
        "not known",
        "not known",
    )
    assert [copy.revision for copy in now.issued] == ["A"]
    assert now.signoffs == ()


@pytest.mark.parametrize("number", ["../../x", "..", "a/b", "WC-101."])
def test_a_number_that_is_none_leads_to_no_folder(path: Path, number: str) -> None:
    outside = path.parent.parent.parent / "x" / "issued" / "A"
    outside.mkdir(parents=True, exist_ok=True)
    change(path, "number: WC-101", f"number: {number}")
    assert lifecycle_of(path, None, path.parent.parent / "output").issued == ()


def test_a_book_with_fewer_roles_asks_for_fewer(tmp_path: Path) -> None:
    path = make_book(tmp_path, book=BOOK.replace("[prepared, checked, approved]", "[prepared, checked]"))
    sign_prepared(path)
    sign_checked(path)
    assert life(path).state == "checked"
    assert issue(work_of(path), day("2026-09-05")).kind == "final"


# --- what voids, and what does not ------------------------------------------------------------------


def tokens(text: str) -> list[int]:
    """The places of every character that is neither blank nor part of a comment."""
    found = []
    start = 0
    for line in text.split("\n"):
        comment = re.search(r"(^|\s)#", line)
        end = comment.start() if comment else len(line)
        found += [start + place for place in range(end) if not line[place].isspace()]
        start += len(line) + 1
    return found


def edited(text: str, place: int) -> str:
    """One character replaced by another of its kind: the smallest edit that a hand can make."""
    character = text[place]
    other = "7" if character.isdigit() and character != "7" else "3" if character == "7" else "q"
    return text[:place] + ("w" if character == other else other) + text[place + 1 :]


def test_every_edit_of_one_character_changes_the_meaning_or_is_refused() -> None:
    """Every character of the file outside comments; what the sign-off is bound to cannot stay the same."""
    meaning = meaning_of(read_text(CALCULATION, "file").root)
    places = tokens(CALCULATION)
    assert len(places) > 1500
    refused = same = 0
    for place in places:
        try:
            changed = meaning_of(read_text(edited(CALCULATION, place), "file").root)
        except Faults:
            refused += 1
            continue
        same += changed == meaning
    assert same == 0
    assert refused < len(places) / 4  # the others are read, and their meaning differs


def test_a_meaning_that_differs_voids_every_sign_off(signed: Path) -> None:
    """The step from a meaning that differs to sign-offs that are void, at characters all over the file."""
    work = work_of(signed)
    text = signed.read_text(encoding="utf-8")
    kept = read_signoffs(signoffs_path(signed))
    for place in tokens(text)[::41]:
        try:
            root = read_text(edited(text, place), "file").root
        except Faults:
            continue
        calculation = replace(work.solved.chain.calculation, meaning=meaning_of(root))
        content = content_of(replace(work.solved, chain=replace(work.solved.chain, calculation=calculation)))
        for entry in kept.signoffs:
            assert changed_since(entry.content, content)[0].startswith("meaning changed: ")


@pytest.mark.parametrize(
    ("old", "new", "named"),
    [
        ("value: 0.00018 m^2 K/W", "value: 0.00019 m^2 K/W", "givens / R_fo"),
        ("title: Overall coefficient", "title: Overal coefficient", "calculation / title"),
        ("source: flow meter FT-101", "source: flow meter FT-102", "givens / m_hot"),
        ("U_service >= 1000", "U_service >= 1001", "acceptance / 1"),
        ("name: tube wall, ", "name: tube walls,", "resistances / tube wall removed"),
        ("for the summer duty", "for the winter duty", "purpose"),
        ("reason: First issue", "reason: First issues", "revisions / A"),
    ],
)
def test_an_edit_voids_every_sign_off_and_names_what_changed(
    path: Path, old: str, new: str, named: str
) -> None:
    change(path, old, new)
    found = judged(path)
    assert [item.validity for item in found] == ["void"] * 3
    for item in found:
        assert item.why[0].startswith("meaning changed: ")
        assert named in item.why[0]


def test_a_given_that_moves_a_result_names_the_result_with_both_figures(path: Path) -> None:
    change(path, "value: 0.00018 m^2 K/W", "value: 0.00019 m^2 K/W")
    why = judged(path)[0].why
    assert re.fullmatch(r"results changed: U_service \S+ W/\(m²·K\) then, \S+ W/\(m²·K\) now", why[1])


def test_a_setting_of_the_book_that_a_calculation_reads_voids(path: Path) -> None:
    change(path.parent / "book.yaml", "101.3 kPa", "100.3 kPa")
    found = judged(path)
    assert [item.validity for item in found] == ["void"] * 3
    assert "book / site pressure" in found[0].why[0]


def test_another_person_in_the_book_voids_nothing(path: Path) -> None:
    change(path.parent / "book.yaml", "  ta: {name: T. A.}", "  ta: {name: T. A.}\n  zz: {name: Z. Z.}")
    assert [item.validity for item in judged(path)] == ["valid"] * 3


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("# A cooler of the closed water loop.", "# Another comment altogether."),
        ("# A cooler of the closed water loop.\n", ""),
        ("resistances:\n", "resistances:    # in order, from the inside\n\n"),
        (
            "  title: Overall coefficient of the closed-loop water cooler\n  plant: Larkmoor Works\n",
            "  plant: Larkmoor Works\n  title: Overall coefficient of the closed-loop water cooler\n",
        ),
        (
            "{value: 15.75 mm,  is: tube bore,              source: drawing LM-WC-101-03 rev 2}",
            "{source: drawing LM-WC-101-03 rev 2, is: tube bore,value:  15.75 mm}",
        ),
        (
            "  Set the clean and service overall coefficient of cooler WC-101\n  for the summer duty.",
            "  Set the clean and service overall\n  coefficient   of cooler WC-101 for the summer duty.",
        ),
        (
            "title: Overall coefficient of the closed-loop water cooler",
            'title: "Overall coefficient of the closed-loop  water cooler"',
        ),
        ("report: {U on: outside, units: SI}", "report:\n  units: SI\n  U on: outside"),
    ],
)
def test_comments_key_order_and_white_space_void_nothing(path: Path, old: str, new: str) -> None:
    change(path, old, new)
    assert [item.validity for item in judged(path)] == ["valid"] * 3


def test_line_ends_of_another_machine_void_nothing(path: Path) -> None:
    path.write_bytes(path.read_bytes().replace(b"\n", b"\r\n"))
    assert [item.validity for item in judged(path)] == ["valid"] * 3


def house_card_from(builtin: str) -> str:
    """The text of a built-in material card under the name of a house card."""
    from calcbook.library import ROOT

    text = (ROOT / "materials" / f"{builtin}.yaml").read_text(encoding="utf-8")
    return text.replace(f"material: {builtin}", "material: house-steel")


def test_a_card_that_changes_voids_and_is_named(tmp_path: Path) -> None:
    path = make_book(tmp_path, CALCULATION.replace("stainless-316-kaschnitz-2017", "house-steel"))
    card = path.parent / "cards" / "house-steel.yaml"
    card.parent.mkdir()
    # The figure moves by a tenth below: check points so wide hold before and after, and the calculation is made.
    text = re.sub(r"within: [0-9.e-]+,", "within: 0.4,", house_card_from("stainless-316-kaschnitz-2017"))
    card.write_text(text, encoding="utf-8")
    sign_prepared(path)
    assert judged(path)[0].validity == "valid"
    figure = re.search(r"k: \[(\d+\.\d+)", text)
    assert figure is not None
    card.write_text(text.replace(figure[1], f"{float(figure[1]) * 1.1:.3f}", 1), encoding="utf-8")
    library_of.cache_clear()  # a book's cards are read once a process
    (prepared, *_) = judged(path)
    assert prepared.validity == "void"
    assert prepared.why[0] == "cards changed: material house-steel"
    assert prepared.why[1].startswith("results changed: ")


# --- software ---------------------------------------------------------------------------------------


def other_backend(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("calcbook.record.software.backend_version", lambda: "99.0")


def test_software_that_changes_no_displayed_digit_keeps_the_sign_offs_with_a_note(
    path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    other_backend(monkeypatch)
    found = judged(path)
    assert [item.validity for item in found] == ["valid"] * 3
    for item in found:
        assert re.fullmatch(r"CoolProp \S+ then, 99\.0 now: no displayed digit changed", item.notes[0])


def test_software_that_changes_a_digit_voids_and_is_named(
    path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from calcbook.record import digest as digest_room

    original = digest_room.displayed

    def moved(solved: Solved) -> dict[str, list[str]]:
        shown = original(solved)
        shown["result U_service"] = ["1390.2 W/(m²·K)", *shown["result U_service"][1:]]
        return shown

    other_backend(monkeypatch)
    monkeypatch.setattr("calcbook.record.digest.displayed", moved)
    monkeypatch.setattr("calcbook.revisions.signoffs.displayed", moved)
    for item in judged(path):
        assert item.validity == "void"
        assert re.fullmatch(
            r"results changed by the software \(CoolProp \S+ then, 99\.0 now\):"
            r" U_service \S+ W/\(m²·K\) then, 1390\.2 W/\(m²·K\) now",
            item.why[0],
        )


def test_a_digit_in_the_working_alone_names_the_term(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from calcbook.record import digest as digest_room

    original = digest_room.displayed

    def moved(solved: Solved) -> dict[str, list[str]]:
        shown = original(solved)
        name = next(
            name
            for name in shown
            if name.startswith("step tube-side film/") and name.endswith("Re / service")
        )
        shown[name] = ["1", *shown[name][1:]]
        return shown

    monkeypatch.setattr("calcbook.record.digest.displayed", moved)
    monkeypatch.setattr("calcbook.revisions.signoffs.displayed", moved)
    why = judged(path)[0].why[0]
    assert why.endswith(": step tube-side film")
    assert "the versions are the same" in why


# --- in the record ----------------------------------------------------------------------------------


def test_the_record_shows_valid_void_and_missing(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_prepared(path)
    sign_checked(path)
    change(path, "value: 0.00018 m^2 K/W", "value: 0.00019 m^2 K/W")
    sign_prepared(path)
    work = work_of(path)
    text = record_text(work.solved, life_of(path, work.solved, work.output))
    block = text[text.index("## 16. Sign-off") : text.index("## 17.")]
    assert "| prepared | valid | K. L. (kl) | 2026-09-02 |" in block
    assert (
        "| checked | void | M. R. (mr) | 2026-09-03 | review of every line | meaning changed: givens / R_fo;"
        in block
    )
    assert re.search(r"\| approved \| (missing|not signed) \|", block)
    assert "| State | prepared |" in text


def test_the_same_person_for_two_roles_is_said(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_prepared(path)
    sign_checked(path)
    sign(work_of(path), "approved", "mr", day("2026-09-04"))
    assert judged(path)[2].notes == ("the same person signed checked",)


def test_a_record_without_a_life_has_every_sign_off_missing(signed: Path) -> None:
    solved = work_of(signed).solved
    text = record_text(solved)
    assert text == record_text(solved, Life())
    assert (
        len(re.findall(r"^\| (prepared|checked|approved) \| (missing|not signed) \|", text, re.MULTILINE))
        == 3
    )
    assert "| State | in preparation |" in text


HOSTILE = "a | b `code` <b>bold</b> &amp; \u05d0\u05d1 \u200f\u200d [x](y) * _ ~ # \\n|---|\\n| new | row |"


def test_hostile_words_neither_break_the_tables_nor_the_digest(tmp_path: Path) -> None:
    calculation = CALCULATION.replace(
        "title: Overall coefficient of the closed-loop water cooler", f'title: "{HOSTILE}"'
    )
    book = BOOK.replace("mr: {name: M. R.}", f'mr: {{name: "{HOSTILE}"}}')
    path = make_book(tmp_path, calculation, book)
    sign_prepared(path)
    form = sign(work_of(path), "checked", "mr", day("2026-09-03")).path
    fill(form, answer=f"R_fo was compared with its table {HOSTILE}")
    sign(work_of(path), "checked", "mr", day("2026-09-03"))
    work = work_of(path)
    now = lifecycle_of(path, work.solved, work.output)
    assert [item.validity for item in now.signoffs] == ["valid", "valid", "missing"]
    signoffs = signoffs_path(path).read_text(encoding="utf-8")
    text = (work.output / "WC-101" / "record.md").read_text(encoding="utf-8")
    for whole in (signoffs, text):
        assert not re.search("[\x00-\x08\x0b-\x1f\x7f-\x9f\u202a-\u202e\u2066-\u2069]", whole)
    assert signoffs_text(read_signoffs(signoffs_path(path))) == signoffs
    assert digest_of(work.solved) == digest_of(work_of(path).solved)
    cells_of_tables(text)


def test_characters_that_cannot_be_seen_are_refused_in_a_form(tmp_path: Path) -> None:
    path = make_book(tmp_path)
    sign_prepared(path)
    form = sign(work_of(path), "checked", "mr", day("2026-09-03")).path
    fill(form, answer="R_fo was compared with its table \\u202eelbat")
    with pytest.raises(Faults) as caught:
        sign(work_of(path), "checked", "mr", day("2026-09-03"))
    assert {fault.code for fault in caught.value.faults} == {"file-not-text"}


def cells_of_tables(text: str) -> None:
    """Every row of every table, as a Markdown reader sees it, has as many cells as its head; no HTML."""
    width = cells = 0
    for token in MarkdownIt("commonmark").enable("table").parse(text):
        assert token.type not in ("html_block",)
        for child in token.children or ():
            assert child.type != "html_inline"
        if token.type == "tr_open":
            cells = 0
        elif token.type in ("th_open", "td_open"):
            cells += 1
        elif token.type == "tr_close":
            width = width or cells
            assert cells == width
        elif token.type == "table_close":
            width = 0
