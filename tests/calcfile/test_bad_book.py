"""Bad book files: the settings of a book are told by the same rules as a calculation file."""

from __future__ import annotations

from pathlib import Path

import pytest

from calcbook.calcfile import read_settings
from calcbook.faults import Faults


@pytest.fixture
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """An empty folder that paths in messages are relative to."""
    monkeypatch.chdir(tmp_path)
    return tmp_path


def printed(text: str) -> str:
    Path("book.yaml").write_text(text, encoding="utf-8")
    with pytest.raises(Faults) as caught:
        read_settings(Path("."))
    return str(caught.value)


def test_all_faults_of_a_book_are_told_at_once(folder: Path) -> None:
    assert folder.is_dir()
    assert printed(
        "book: Larkmoor Works\n"
        "site presure: {value: 101.3 kPa, source: LM-SD-01}\n"
        "units: metric\n"
        "limits:\n"
        "  surface temperature: {value: 60 C, source: site rule 9}\n"
    ) == (
        "book.yaml:2:1: key-unknown: the book file has no key `site presure`\n"
        "     2 | site presure: {value: 101.3 kPa, source: LM-SD-01}\n"
        "       | ^^^^^^^^^^^^\n"
        "    expected: book, site pressure, units, output, revisions, roles, people, limits, open items\n"
        "    nearest: site pressure\n"
        "book.yaml:3:8: choice-unknown: `units` cannot be `metric`\n"
        "     3 | units: metric\n"
        "       |        ^^^^^^\n"
        "    expected: SI | US customary\n"
        "book.yaml:5:35: unit-coulomb: C is the coulomb; a degree Celsius is written degC\n"
        "     5 |   surface temperature: {value: 60 C, source: site rule 9}\n"
        "       |                                   ^\n"
        "    expected: a temperature unit: degC, degF, K or degR\n"
        "    nearest: 60 degC\n"
    ).rstrip("\n")


@pytest.mark.parametrize("text", ["- a\n", "12\n"])
def test_a_book_that_is_no_mapping(folder: Path, text: str) -> None:
    assert folder.is_dir()
    assert printed(text).startswith("book.yaml:1:1: mapping-expected: the book file must be a mapping\n")


def test_without_a_book_the_defaults_hold(folder: Path) -> None:
    settings = read_settings(folder)
    assert (settings.revisions, settings.open_items) == ("letters", "refuse final issue")


@pytest.mark.parametrize(
    ("line", "expected"),
    [
        ("site pressure: {value: 1.013 barg, source: LM-SD-01}", "an absolute pressure from 40 to 115 kPa"),
        ("site pressure: {value: 101.3 MPa, source: LM-SD-01}", "an absolute pressure from 40 to 115 kPa"),
        ("site pressure: {value: 20 degC, source: LM-SD-01}", "an absolute pressure from 40 to 115 kPa"),
        ("limits: {excess surface: {value: 40, source: rule 9}}", "a share from 0 to 200 %"),
        ("limits: {surface temperature: {value: 60 K, source: rule 9}}", "a temperature from 20 to 200 degC"),
    ],
)
def test_a_setting_that_no_book_has_is_refused(folder: Path, line: str, expected: str) -> None:
    text = printed(f"book: Works\n{line}\n")
    assert folder.is_dir()
    assert text.startswith("book.yaml:2:") and "number-out-of-proportion" in text
    assert text.endswith(f"expected: {expected}")
