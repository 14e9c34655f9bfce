"""The overview of the library: whole, the same twice, and bars that say what the limits say."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import pytest
from click.testing import CliRunner
from markdown_it import MarkdownIt

from calcbook.commands.library import command
from calcbook.formulas import parse_expression
from calcbook.library import Library
from calcbook.record.library_overview import (
    AXES,
    COLUMNS_OF_BAR,
    INSIDE,
    Range,
    bar,
    families,
    family_page,
    library_overview,
    range_of,
    scale,
)
from calcbook.record.library_pages import overview
from calcbook.record.markdown import markdown

LIBRARY = Library()


@pytest.fixture(scope="module")
def text() -> str:
    return markdown(library_overview(LIBRARY))


def test_every_situation_and_every_method_stands_in_it(text: str) -> None:
    for name in LIBRARY.names("situations"):
        assert f"## {name}: {LIBRARY.situation(name).title}" in text
    for name in LIBRARY.names("methods"):
        assert f"| {name} | " in text
    for name in families(LIBRARY):
        assert f"- {name}: " in text


def test_methods_of_the_pressure_drop_stand_at_their_situation(text: str) -> None:
    part = text.partition("## inside-tube: ")[2].partition("\n## ")[0]
    assert "Pressure drop beside the film:" in part
    for name in ("friction-laminar", "churchill-1977", "colebrook-1939", "filonenko-1954", "dp-tube-side"):
        assert f"| {name} | " in part


def test_accuracy_state_and_source_stand_beside_a_method(text: str) -> None:
    row = next(line for line in text.splitlines() if line.startswith("| dittus-boelter-mcadams |"))
    card = LIBRARY.method("dittus-boelter-mcadams")
    assert card.accuracy is not None
    assert f"within {card.accuracy.within} ({card.accuracy.standing})" in row
    assert f"| {card.state.status} |" in row and card.sources[0].standing in row


def test_it_is_the_same_twice_and_no_html(text: str) -> None:
    assert markdown(library_overview(Library())) == text
    tokens = MarkdownIt("commonmark").enable("table").parse(text)
    assert not any(token.type.startswith("html") for token in tokens)


@pytest.mark.parametrize("method", LIBRARY.names("methods"))
def test_a_bar_shows_what_the_limits_bound(method: str) -> None:
    """Middle of each column against the range, and the range against the limits themselves."""
    card = LIBRARY.method(method)
    found = range_of(card, LIBRARY)
    if found is None:
        return
    drawn = bar(found)
    assert len(drawn) == COLUMNS_OF_BAR + 2
    first, last = AXES[found.axis]
    step = (last - first) / COLUMNS_OF_BAR
    marks = drawn[1:-1]
    middles = [10 ** (first + step * (place + 0.5)) for place in range(COLUMNS_OF_BAR)]
    inside = [found.low <= middle <= found.high for middle in middles]
    assert any(mark == INSIDE for mark in marks)
    if any(inside):
        assert [mark == INSIDE for mark in marks] == inside
    assert found.low < found.high


@pytest.mark.parametrize(
    ("method", "symbol", "low", "high"),
    [
        ("dittus-boelter-mcadams", "Re", 10_000.0, math.inf),
        ("gnielinski-transition-2013", "Re", 2300.0, 4000.0),
        ("friction-laminar", "Re", 0.0, 2300.0),
        ("kern-1950", "Re_s", 2000.0, 1e6),
        ("martin-1996", "Re", 200.0, math.inf),
        ("blasius-1913", "Re", 4000.0, 1e5),
    ],
)
def test_ranges_of_known_cards(method: str, symbol: str, low: float, high: float) -> None:
    assert range_of(LIBRARY.method(method), LIBRARY) == Range(symbol, low, high)


def test_a_bar_by_hand() -> None:
    """Four columns a decade: 10^4 to 10^6 are eight columns after sixteen."""
    assert bar(Range("Re", 1e4, 1e6)) == " " + "." * 16 + "=" * 8 + "." * 8 + " "
    assert bar(Range("Re", 0.0, 1e2)) == "<" + "=" * 8 + "." * 24 + " "
    assert bar(Range("Ra", 1e6, math.inf)) == " " + "." * 16 + "=" * 16 + ">"
    assert bar(Range("Re", 3000.0, 3001.0)).count(INSIDE) == 1


def test_a_scale_stands_over_its_columns() -> None:
    line = scale("Re")
    assert [line.index(f"1e{decade}") for decade in (0, 2, 4, 6, 8)] == [1, 9, 17, 25, 33]


def test_a_bound_that_hangs_on_other_figures_is_not_guessed() -> None:
    card = LIBRARY.method("dittus-boelter-mcadams")
    limit = replace(card.limits[0], that=parse_expression("Re >= 100*Pr"))
    assert range_of(replace(card, limits=(limit,)), LIBRARY) is None
    caution = replace(card.limits[0], level="caution")
    assert range_of(replace(card, limits=(caution,)), LIBRARY) is None
    turned = replace(card.limits[0], that=parse_expression("7000 <= Re"))
    assert range_of(replace(card, limits=(turned,)), LIBRARY) == Range("Re", 7000.0, math.inf)


@pytest.mark.parametrize("family", families(LIBRARY))
def test_a_family_has_a_page(family: str) -> None:
    blocks = family_page(family, LIBRARY)
    assert blocks is not None
    page = markdown(blocks)
    assert page.startswith(f"# Family {family}\n")
    members = [name for name in LIBRARY.names("methods") if LIBRARY.method(name).family == family]
    assert members and all(f"| {name} | " in page for name in members)


def test_a_family_page_says_where_a_method_acts() -> None:
    blocks = family_page("poiseuille", LIBRARY)
    assert blocks is not None
    assert "| friction-laminar | inside-tube |" in markdown(blocks)


def test_the_commands(tmp_path: Path) -> None:
    runner = CliRunner()
    written = runner.invoke(command, ["overview", "--output", str(tmp_path)])
    assert written.exit_code == 0
    assert (tmp_path / "library.md").read_text(encoding="utf-8") == markdown(library_overview(LIBRARY))
    assert f"methods {len(LIBRARY.names('methods'))}" in written.output
    shown = runner.invoke(command, ["family", "petukhov"])
    assert shown.exit_code == 0 and shown.output.startswith("# Family petukhov\n")
    missing = runner.invoke(command, ["family", "petukov"])
    assert missing.exit_code == 2 and "nearest: petukhov" in missing.output


def test_the_list_names_every_method_in_a_situation_or_apart() -> None:
    listed = markdown(overview(LIBRARY))
    for name in LIBRARY.names("methods"):
        assert f"| {name} | " in listed
    apart = listed.partition("## Methods of no situation")[2].partition("\n## ")[0]
    assert "| kern-seaton-1959 | " in apart and "| gnielinski-1976 | " not in apart
