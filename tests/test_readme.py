"""The README is run: its commands, its example, its Python and its pages are what it says they are."""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path

import pytest

from calcbook import read, record_text, solve
from calcbook.commands import COMMANDS
from calcbook.faults import Faults
from calcbook.library import vocabulary
from calcbook.quantities import QuantityFault, read_quantity, read_tolerance

README = Path(__file__).resolve().parent.parent / "README.md"


@dataclass(frozen=True)
class Fence:
    """One fenced block: its language and its text."""

    language: str
    text: str


def _fences() -> list[Fence]:
    found = re.findall(r"^```(\w+)\n(.*?)^```$", README.read_text(encoding="utf-8"), re.MULTILINE | re.DOTALL)
    return [Fence(language, text) for language, text in found]


FENCES = _fences()


def _only(language: str) -> str:
    texts = [fence.text for fence in FENCES if fence.language == language]
    assert len(texts) == 1, f"{len(texts)} blocks of {language}"
    return texts[0]


@pytest.fixture
def example(tmp_path: Path) -> Path:
    """The README's calculation, where its Python block expects it."""
    path = tmp_path / "calcs" / "wc-7.yaml"
    path.parent.mkdir()
    path.write_text(_only("yaml"), encoding="utf-8")
    return path


def test_the_two_commands_come_first_and_alone() -> None:
    languages = [fence.language for fence in FENCES]
    assert languages[:2] == ["sh", "sh"]
    assert languages.count("sh") == 2
    book, tests = (fence.text for fence in FENCES[:2])
    assert book.count("\n") == tests.count("\n") == 1, "each is one line to paste"
    assert book.rstrip().endswith("calcbook run calcs")
    assert "pytest" in tests
    assert all("-m venv .venv &&" in command for command in (book, tests))


def test_the_commands_are_those_of_the_readme() -> None:
    rows = re.findall(r"^\| `calcbook (\w+)", README.read_text(encoding="utf-8"), re.MULTILINE)
    assert tuple(dict.fromkeys(rows)) == COMMANDS


def test_the_example_solves_without_open_items(example: Path) -> None:
    solved = solve(read(example))
    assert solved.open_items == ()
    # All five terms of the file are in the circuit, in their order.
    names = [row.name for row in solved.base.terms["service"]]
    assert names == re.findall(r"- \{name: ([^,]+),", _only("yaml"))


def test_every_line_of_the_excerpt_is_a_line_of_the_record(example: Path) -> None:
    lines = record_text(solve(read(example))).splitlines()
    excerpt = [line for line in _only("markdown").splitlines() if line.strip()]
    assert len(excerpt) > 5
    assert [line for line in excerpt if line not in lines] == []


def test_the_python_block_runs_as_it_stands(
    example: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.chdir(example.parent.parent)
    exec(compile(_only("python"), "README.md", "exec"), {})
    coefficient, rest = capsys.readouterr().out.split(" ", 1)
    assert rest == "W/(m² K) 0 open items\n"
    solved = solve(read(example))
    assert coefficient == f"{solved.base.results['U_service'].value:.1f}"


def test_the_printed_fault_is_the_one_that_the_mistake_gives(example: Path) -> None:
    right = re.search(r"^  T_hot:.*$", _only("yaml"), re.MULTILINE)
    wrong = re.search(r"\| (  T_hot:.*)$", _only("text"), re.MULTILINE)
    assert right and wrong
    text = _only("yaml").replace(right.group(), wrong.group(1))
    example.write_text(text, encoding="utf-8")
    with pytest.raises(Faults) as raised:
        solve(read(example))
    assert _only("text").removeprefix("wc-7.yaml").rstrip() in str(raised.value)


# Each text of the README's table of quantities with the quantity that it is read as.
READ = {
    "15.4 mm": ("length", 0.0154),
    "0.00018 m^2 K/W": ("area resistance", 0.00018),
    "1e-4 m²·K/W": ("area resistance", 1e-4),
    "78 degC": ("temperature", 351.15),
    "78 °C": ("temperature", 351.15),
    "172 degF": ("temperature", (172 + 459.67) / 1.8),
    "5 K": ("temperature difference", 5.0),
    # NIST SP 811: 1 Btu(IT) = 1055.05585262 J, 1 ft = 0.3048 m.
    "0.002 h ft^2 degF/Btu": ("area resistance", 0.002 * 3600 * 0.3048**2 / 1.8 / 1055.05585262),
    "60 Btu/(h ft degF)": ("wall conductivity", 60 * 1055.05585262 / 3600 / 0.3048 * 1.8),
    "2 barg": ("gauge pressure", 2e5),
    # NIST SP 811: 1 lbf = 0.45359237 kg x 9.80665 m/s2, 1 in = 0.0254 m.
    "30 psig": ("gauge pressure", 30 * 0.45359237 * 9.80665 / 0.0254**2),
    "4 bar": ("pressure", 4e5),
    "60 psi": ("pressure", 60 * 0.45359237 * 9.80665 / 0.0254**2),
    "2 %": ("ratio", 0.02),
}
REFUSED = {
    "5200 W/m^2 K": ("film coefficient", "unit-ambiguous"),
    "82 C": ("temperature", "unit-coulomb"),
    "1,5 mm": ("length", "number-decimal-comma"),
    "15.4": ("length", "unit-missing"),
    "nan": ("length", "number-not-finite"),
    "-3 mm": ("length", "quantity-negative"),
    "0 K": ("temperature", "temperature-not-absolute"),
    "2 m^9^9^9": ("length", "unit-too-complex"),
}


def _table_texts() -> tuple[set[str], set[str]]:
    """The texts of the README's table: those that are read, those that are refused."""
    rows = re.findall(r"^\| (`.*?) \| (.*) \|$", README.read_text(encoding="utf-8"), re.MULTILINE)
    rows = [(left, right) for left, right in rows if "calcbook" not in left]
    taken = {
        text
        for left, right in rows
        if not right.startswith("refused")
        for text in re.findall(r"`(.*?)`", left)
    }
    refused = {
        text for left, right in rows if right.startswith("refused") for text in re.findall(r"`(.*?)`", left)
    }
    return taken, refused


def test_the_table_of_quantities_is_tested_whole() -> None:
    taken, refused = _table_texts()
    assert taken == set(READ)
    assert refused == {*REFUSED, "tolerance: 1 degC", "2 %"}


@pytest.mark.parametrize("text", READ)
def test_a_quantity_is_read_as_the_readme_says(text: str) -> None:
    name, expected = READ[text]
    # A handful of roundings in the expected value; the reading itself is exact to one.
    assert read_quantity(text, vocabulary()[name]).value == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize("text", REFUSED)
def test_a_quantity_is_refused_as_the_readme_says(text: str) -> None:
    name, code = REFUSED[text]
    with pytest.raises(QuantityFault) as raised:
        read_quantity(text, vocabulary()[name])
    assert raised.value.code == code


@pytest.mark.parametrize("text", ["1 degC", "2 %"])
def test_a_tolerance_of_a_temperature_is_refused(text: str) -> None:
    with pytest.raises(QuantityFault):
        read_tolerance(text, vocabulary()["temperature"])
