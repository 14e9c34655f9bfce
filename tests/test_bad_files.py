"""Bad calculation files: each with the complete text that is printed for it, and no fault code without one.

A file ``tests/cases/bad/<fault code>[-n].yaml`` stands beside ``<same>.expected``. To take over new texts,
run ``python tests/test_bad_files.py`` and read the difference: a message must be enough to mend the file.
"""

from __future__ import annotations

import ast
import functools
import re
from pathlib import Path

import pytest

from calcbook.documents import MAXIMUM_BYTES
from calcbook.fault_codes import CODES
from calcbook.faults import Faults
from calcbook.interface import solve_file
from calcbook.library import Library

CASES = Path(__file__).resolve().parent / "cases"
PACKAGE = CASES.parent.parent / "calcbook"
BAD = sorted((CASES / "bad").rglob("*.yaml"))
BAD = [path for path in BAD if path.parent.name != "cards" and path.name != "book.yaml"]
GOOD = sorted((CASES / "ok").glob("*.yaml"))

# Codes of files that cannot be kept as files, each with its test below.
MADE_HERE = {
    "file-is-folder",
    "file-unreadable",
    "file-too-large",
    "file-not-utf8",
    "file-not-text",
    "file-empty",
    "link-too-deep",
    "issued-altered",
}
# Codes of faults in cards: tests/library/test_bad_cards.py.
CARDS = {
    "card-id-differs",
    "card-result-differs",
    "card-unchecked",
    "card-without-source",
    "card-without-successor",
    "check-point-failed",
    "check-point-loose",
    "check-point-unknown",
    "check-points-missing",
    "choice-without-end",
    "limit-source-unknown",
    "limit-twice",
    "limit-without-symbol",
    "method-not-friction",
    "place-unknown",
    "quantity-unknown",
    "solve-bounds",
    "sum-terms",
    "table-column-missing",
    "table-not-rising",
    "use-circular",
}
# What only a program can ask for: the description of the file refuses it before it gets there.
PROGRAMS = {
    "derivative-unknown",  # raised on a relation by itself; the chain differentiates by numbers then
    "no-vapour-pressure",  # asked for the boiling temperature of a table or of constants
    "pressure-missing",  # humid air without a pressure has the fault of the missing key
    "phase-unknown",  # `phase:` is a choice of two
    "property-not-available",  # the chain takes what the backend cannot give as not known
    "property-unknown",  # the columns of a fluid are keys of a described mapping
    "viscosity-law-unknown",  # `astm d341` is the one key
    "saturated-liquid-assumed",  # an open item of the record
    "supercritical",  # an open item of the record
}
# The rooms whose faults a single file can show.
ROOMS = (
    "documents.py",
    "quantities.py",
    "calcfile",
    "chain",
    "formulas",
    "properties",
    "library",
    "uncertainty",
    "survey",
)
MADE_OF_PARTS = {"no-viscosity-model", "no-conductivity-model"}  # a property's name stands within the code


# Lists that grow with the library stand in the expected texts by these words.
GROWING = {
    "<situations of the library>": ", ".join(Library().names("situations")),
    "<methods of inside-tube>": ", ".join(Library().situation("inside-tube").methods),
}


@functools.cache
def faults_of(path: Path) -> Faults:
    """The faults of a bad file called by its bare name."""
    with pytest.raises(Faults) as caught:
        solve_file(path, name=path.name)
    return caught.value


def printed(path: Path) -> str:
    """The whole text that is printed for a bad file."""
    text = f"{faults_of(path)}\n"
    for word, grown in GROWING.items():
        text = text.replace(grown, word)
    return text


@pytest.mark.parametrize("path", BAD, ids=lambda path: path.stem)
def test_a_bad_file_is_answered_with_the_whole_expected_text(path: Path) -> None:
    assert printed(path) == path.with_suffix(".expected").read_text(encoding="utf-8")


@pytest.mark.parametrize("path", BAD, ids=lambda path: path.stem)
def test_a_bad_file_is_named_after_a_code_it_shows(path: Path) -> None:
    code = re.sub(r"-\d+$", "", path.stem)
    text = path.with_suffix(".expected").read_text(encoding="utf-8")
    assert code == "several-faults" or f": {code}: " in text


def test_every_expected_text_has_its_file() -> None:
    expected = {path.with_suffix("") for path in (CASES / "bad").rglob("*.expected")}
    assert expected == {path.with_suffix("") for path in BAD}


def written_codes(*rooms: str) -> set[str]:
    """The codes that stand as texts in the source of rooms."""
    found: set[str] = set(MADE_OF_PARTS)
    for room in rooms:
        source = PACKAGE / room
        for path in sorted(source.rglob("*.py")) if source.is_dir() else [source]:
            nodes = ast.walk(ast.parse(path.read_text(encoding="utf-8")))
            found |= {node.value for node in nodes if isinstance(node, ast.Constant) and node.value in CODES}
    return found


def shown_codes() -> set[str]:
    """The codes in the expected texts of bad files."""
    texts = "".join(path.read_text(encoding="utf-8") for path in (CASES / "bad").rglob("*.expected"))
    return set(re.findall(r"^[^\n ]+:\d+:\d+: ([a-z0-9-]+): ", texts, re.MULTILINE))


def test_no_code_that_a_file_or_a_fluid_can_show_lacks_a_bad_file() -> None:
    assert written_codes(*ROOMS) - shown_codes() - MADE_HERE - CARDS - PROGRAMS == set()


def test_the_codes_set_apart_are_codes_and_are_needed() -> None:
    apart = MADE_HERE | CARDS | PROGRAMS
    assert apart <= set(CODES)
    assert apart & shown_codes() == set()


def test_every_code_of_cards_has_a_bad_card() -> None:
    names = {re.sub(r"-\d+$", "", path.stem) for path in (CASES / "bad_cards").glob("*.yaml")}
    assert names >= CARDS


def test_no_code_is_kept_that_nothing_raises() -> None:
    rooms = [path.name for path in sorted(PACKAGE.iterdir()) if path.suffix == ".py" or path.is_dir()]
    assert set(CODES) - written_codes(*(room for room in rooms if room != "fault_codes.py")) == set()


@pytest.mark.parametrize("path", BAD, ids=lambda path: path.stem)
def test_every_fault_points_into_its_file_and_says_what_is_right(path: Path) -> None:
    for fault in faults_of(path).faults:
        source = path.parent / fault.place.file
        lines = source.read_text(encoding="utf-8").split("\n")
        assert lines[fault.place.line - 1] == fault.place.excerpt
        assert 1 <= fault.place.column <= len(fault.place.excerpt) + 1


@pytest.mark.parametrize("path", GOOD, ids=lambda path: path.stem)
def test_a_good_file_is_silent(path: Path) -> None:
    solved = solve_file(path, name=path.name)
    assert solved.cases[0].results["U_service"].value > 0.0


# --- files that cannot be kept ----------------------------------------------------------------------


def test_a_file_that_is_not_there_names_its_neighbour(tmp_path: Path) -> None:
    (tmp_path / "wc-101.yaml").write_text("calculation:\n", encoding="utf-8")
    assert printed(tmp_path / "wc-102.yaml") == (
        "wc-102.yaml:1:1: file-not-found: there is no such file\n"
        "    expected: an existing YAML file\n"
        "    nearest: wc-101.yaml\n"
    )


def test_a_folder_is_no_file(tmp_path: Path) -> None:
    (tmp_path / "wc.yaml").mkdir()
    assert printed(tmp_path / "wc.yaml") == (
        "wc.yaml:1:1: file-is-folder: this is a folder, not a file\n    expected: a YAML file\n"
    )


def test_a_file_without_permission(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "wc.yaml"
    path.write_text("calculation:\n", encoding="utf-8")

    def refuse(*arguments: object, **keywords: object) -> None:
        raise PermissionError(13, "Permission denied")  # as root, the mode of a file refuses nothing

    monkeypatch.setattr(Path, "open", refuse)
    assert printed(path) == (
        "wc.yaml:1:1: file-unreadable: the file cannot be read\n"
        "    found: Permission denied\n"
        "    expected: a readable YAML file\n"
    )


def test_a_large_file_is_refused_without_being_read_whole(tmp_path: Path) -> None:
    path = tmp_path / "wc.yaml"
    with path.open("wb") as stream:
        stream.truncate(50_000_000)
    assert MAXIMUM_BYTES < 50_000_000
    assert printed(path) == (
        "wc.yaml:1:1: file-too-large: the file is too large for a calculation\n"
        "    found: more than 2 MB\n"
        "    expected: at most 2 MB\n"
    )


@pytest.mark.parametrize(
    ("data", "expected"),
    [
        (
            "title: Kühler\n".encode("latin-1"),
            "wc.yaml:1:9: file-not-utf8: the file is not UTF-8 text\n"
            "    found: byte 0xFC\n"
            "    expected: UTF-8 text; save the file with that encoding\n",
        ),
        (
            b"\x7fELF\x02\x00\x00\xff\xfe",
            "wc.yaml:1:8: file-not-utf8: the file is not UTF-8 text\n"
            "    found: binary data\n"
            "    expected: UTF-8 text; save the file with that encoding\n",
        ),
        (
            "title: Kühler".encode("utf-16"),
            "wc.yaml:1:1: file-not-utf8: the file is not UTF-8 text\n"
            "    found: binary data\n"
            "    expected: UTF-8 text; save the file with that encoding\n",
        ),
        (
            b"title: a\x00b\n",
            "wc.yaml:1:9: file-not-text: the character U+0000 cannot be seen and stands in no text\n"
            "     1 | title: a b\n"
            "       |         ^\n"
            "    expected: plain UTF-8 text; remove the character\n",
        ),
        (
            "calculation:\n  title: a\u202eb\n".encode(),
            "wc.yaml:2:11: file-not-text: the character U+202E cannot be seen and stands in no text\n"
            "     2 |   title: a b\n"
            "       |           ^\n"
            "    expected: plain UTF-8 text; remove the character\n",
        ),
        (b"", "wc.yaml:1:1: file-empty: the file is empty\n    expected: one YAML mapping\n"),
        (
            b"# only a comment\n",
            "wc.yaml:1:1: file-empty: the file holds only comments\n"
            "     1 | # only a comment\n"
            "       | ^\n"
            "    expected: one YAML mapping\n",
        ),
    ],
    ids=["latin-1", "binary", "utf-16", "null", "turned", "empty", "comment"],
)
def test_what_is_no_text(tmp_path: Path, data: bytes, expected: str) -> None:
    path = tmp_path / "wc.yaml"
    path.write_bytes(data)
    assert printed(path) == expected


@pytest.mark.parametrize("text", ["12\n", "- a\n- b\n", "just words\n", '"quoted"\n'])
def test_a_file_that_is_no_mapping(tmp_path: Path, text: str) -> None:
    path = tmp_path / "wc.yaml"
    path.write_text(text, encoding="utf-8")
    assert printed(path).startswith("wc.yaml:1:1: mapping-expected: the calculation file must be a mapping\n")


def test_a_hidden_escape_is_told(tmp_path: Path) -> None:
    good = GOOD[0].read_text(encoding="utf-8")
    path = tmp_path / "wc.yaml"
    path.write_text(re.sub(r"title: .*", r'title: "Cooler \\e[2J"', good), encoding="utf-8")
    assert "file-not-text: the text holds the character U+001B, which cannot be seen" in printed(path)


@pytest.mark.parametrize("opening", ["[", "{a: ", "- ", "? ", "(" * 5, '{"a": '])
def test_deep_nesting_ends_in_a_fault(tmp_path: Path, opening: str) -> None:
    path = tmp_path / "wc.yaml"
    path.write_text(opening * 50_000, encoding="utf-8")
    assert "wc.yaml:1:" in printed(path)


def test_repeated_aliases_are_not_written_out(tmp_path: Path) -> None:
    lines = ["a0: &a0 [x, x, x, x, x, x, x, x, x]"]
    lines += [f"a{n}: &a{n} [{', '.join([f'*a{n - 1}'] * 9)}]" for n in range(1, 20)]
    path = tmp_path / "wc.yaml"
    path.write_text("\n".join(lines), encoding="utf-8")
    assert "wc.yaml:2:10: yaml-alias: a YAML alias repeats an earlier part\n" in printed(path)


def test_line_ends_of_any_system_and_a_byte_order_mark_are_read_alike(tmp_path: Path) -> None:
    text = GOOD[0].read_text(encoding="utf-8")
    results = []
    for number, written in enumerate(
        (text, text.replace("\n", "\r\n"), text.replace("\n", "\r"), f"\ufeff{text}")
    ):
        path = tmp_path / f"wc{number}.yaml"
        path.write_bytes(written.encode())
        results.append(solve_file(path, name="wc.yaml").cases[0].results["U_service"].value)
    assert len(set(results)) == 1


if __name__ == "__main__":
    for bad in BAD:
        bad.with_suffix(".expected").write_text(printed(bad), encoding="utf-8")
