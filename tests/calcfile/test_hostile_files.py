"""Files that nobody meant: the answer is a solution, faults, or that nothing converged, and never another."""

from __future__ import annotations

import re
import tempfile
from pathlib import Path

from hypothesis import given, settings
from hypothesis import strategies as st

from calcbook.chain.analysis import NotConverged
from calcbook.faults import Faults
from calcbook.interface import solve_file

GOOD = Path(__file__).resolve().parents[1] / "cases" / "ok" / "cases-and-criteria.yaml"
LINES = GOOD.read_text(encoding="utf-8").splitlines()

# Texts that a value may be replaced by: wrong types, YAML's own words, hostile figures, other choices.
HOSTILE = (
    *(
        "",
        "~",
        "null",
        "yes",
        "[]",
        "{}",
        "[1, 2]",
        "{a: b}",
        "- a",
        "|",
        ">",
        "'",
        '"',
        "*a",
        "&a",
        "&a b",
        "!!int 3",
    ),
    *(
        "#",
        " #x",
        ": ",
        ", ",
        "{",
        "}",
        "[",
        "]",
        "%",
        "@",
        "`",
        "? x",
        "--- ",
        "\t",
        "é",
        "T_é",
        "../x",
        "a/b",
        "x" * 300,
    ),
    *(
        "0",
        "-1",
        "2",
        "1e999",
        "nan",
        "inf",
        "-inf",
        "1,5 mm",
        "1.5.2 mm",
        "0x1F m",
        "١٢ m",
        "1_0 m",
        "1e-300",
        "1e300",
    ),
    *(
        "0 m",
        "-1 m",
        "1e300 m",
        "1e-300 m",
        "0 K",
        "5 K",
        "-300 degC",
        "1e5 degC",
        "99.9743 degC",
        "31 degC",
        "2 %",
    ),
    *(
        "0 kg/s",
        "1e300 kg/s",
        "1e-300 kg/s",
        "3 m^3/h",
        "1e-9 m/s",
        "4 bara",
        "0 bara",
        "1e9 bara",
        "3 barg",
        "-3 barg",
    ),
    *(
        "1e300 W/(m^2 K)",
        "1e-300 W/(m^2 K)",
        "5200 W/m^2 K",
        "82 C",
        "m^9^9^9",
        "1 m^9^9^9",
        "1 " + "m" * 2000,
    ),
    *(
        "T_hot",
        "d_i",
        "x",
        "pi",
        "{value: 3 m, source: x}",
        "{value: T_hot, source: x}",
        "{value: , source: x}",
    ),
    *(
        "water",
        "steam",
        "Helium",
        "R134a",
        "Neon",
        "air",
        "{mixture: ethylene glycol + water, mass fraction: 40 %}",
    ),
    *(
        "{constants: {density: 1 kg/m^3}}",
        "{table: {T: [20 degC], density: [1 kg/m^3]}}",
        "{table file: x.csv}",
    ),
    *(
        "tube",
        "plane",
        "sphere",
        "film",
        "wall",
        "fouling",
        "contact",
        "radiation",
        "stated",
        "inside",
        "outside",
    ),
    *(
        "annulus",
        "across-tube",
        "free-horizontal-cylinder",
        "wall-plane",
        "filonenko-1954",
        "radiation-linear-small",
    ),
    *(
        "1/0",
        "(-1)**0.5",
        "exp(1000)",
        "gamma_p(L/d_i, 2)",
        "mean(table.k, T_hot, T_cold)",
        "L if L > d_i else d_i",
    ),
    *(
        "A_o",
        "A_o*A_o",
        "2*",
        "log(L)",
        "L; L",
        "lambda: 0",
        "__import__('os')",
        "U_service > 1",
        "> 1",
        "a > = 1",
    ),
)
NAMES = tuple(dict.fromkeys(re.findall(r"[A-Za-z_][A-Za-z_ ]*(?=:)", "\n".join(LINES))))

positions = st.integers(0, 10_000)


def _deleted(lines: list[str], at: int, _: str) -> list[str]:
    return lines[:at] + lines[at + 1 :]


def _repeated(lines: list[str], at: int, _: str) -> list[str]:
    return [*lines[: at + 1], lines[at], *lines[at + 1 :]]


def _cut(lines: list[str], at: int, _: str) -> list[str]:
    return [*lines[:at], lines[at][: len(lines[at]) // 2], *lines[at + 1 :]]


def _indented(lines: list[str], at: int, _: str) -> list[str]:
    return [*lines[:at], " " + lines[at], *lines[at + 1 :]]


def _inserted(lines: list[str], at: int, text: str) -> list[str]:
    middle = len(lines[at]) * 2 // 3
    return [*lines[:at], lines[at][:middle] + text + lines[at][middle:], *lines[at + 1 :]]


def _replaced(lines: list[str], at: int, text: str) -> list[str]:
    """A value of the line replaced; which one follows from the length of the text."""
    values = list(re.finditer(r"(?<=: )[^,{}\n]+", lines[at]))
    if not values:
        return lines
    value = values[len(text) % len(values)]
    return [*lines[:at], lines[at][: value.start()] + text + lines[at][value.end() :], *lines[at + 1 :]]


def _renamed(lines: list[str], at: int, text: str) -> list[str]:
    name = NAMES[len(text) % len(NAMES)]
    return [*lines[:at], re.sub(r"[A-Za-z_][A-Za-z_ ]*(?=:)", name, lines[at], count=1), *lines[at + 1 :]]


CHANGES = (_replaced, _replaced, _replaced, _deleted, _repeated, _cut, _indented, _inserted, _renamed)
changes = st.lists(
    st.tuples(st.sampled_from(CHANGES), positions, st.sampled_from(HOSTILE)), min_size=1, max_size=3
)


def answered(data: bytes) -> str:
    """What a file is answered with: "solved", "not converged", or the printed faults."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "wc.yaml"
        path.write_bytes(data)
        try:
            solve_file(path, name=path.name)
        except Faults as faults:
            assert faults.faults
            return str(faults)
        except NotConverged:
            return "not converged"
        return "solved"


# The same examples every time, so that a build does not fail by chance; more examples make a longer search.
@settings(max_examples=100, deadline=None, derandomize=True)
@given(changes)
def test_a_changed_file_is_answered(made: list[tuple[object, int, str]]) -> None:
    lines = list(LINES)
    for change, position, text in made:
        if lines:
            lines = change(lines, position % len(lines), text)  # type: ignore[operator]
    answer = answered("\n".join(lines).encode())
    assert answer in ("solved", "not converged") or answer.startswith("wc.yaml:")


@settings(max_examples=100, deadline=None, derandomize=True)
@given(
    st.one_of(
        st.binary(max_size=200), st.text(max_size=200).map(lambda text: text.encode("utf-8", "replace"))
    )
)
def test_any_bytes_are_answered(data: bytes) -> None:
    assert answered(data).startswith("wc.yaml:")


@settings(max_examples=150, deadline=None, derandomize=True)
@given(st.text(alphabet="ab:- \n{}[],#'\"&*!|>%@?\t", max_size=120))
def test_the_signs_of_yaml_in_any_order_are_answered(text: str) -> None:
    assert answered(text.encode()).startswith("wc.yaml:")


def test_the_file_that_is_changed_is_good() -> None:
    assert answered("\n".join(LINES).encode()) == "solved"
