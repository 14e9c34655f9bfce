"""The search in a second process: the same distances to flip, and the first process's own wherever it has none."""

from __future__ import annotations

import shutil
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from calcbook.book.beside import Beside
from calcbook.book.finding import Found
from calcbook.book.marks import marks_of
from calcbook.interface import search_file, solve_file
from calcbook.uncertainty.flips import distances_to_flip

CALCS = Path(__file__).resolve().parents[2] / "calcs"
LONGEST = 60.0


@pytest.mark.parametrize("name", ["wc-101", "kr-801", "hc-985", "wc-112", "oc-201", "hr-821"])
def test_a_search_alone_finds_what_a_record_shows(name: str) -> None:
    """With cases, a duty, a link, acceptances, a probability, parts: none of them changes what is found."""
    path = CALCS / f"{name}.yaml"
    alone = search_file(path, path.name)
    assert alone is not None and alone.flips
    assert repr(alone) == repr(solve_file(path, path.name).flips)


def test_a_file_with_a_fault_has_no_distances(tmp_path: Path) -> None:
    path = tmp_path / "wc-102.yaml"
    text = (CALCS / "wc-102.yaml").read_text(encoding="utf-8")
    path.write_text(text.replace("geometry:", "geometri:"), encoding="utf-8")
    assert search_file(path, path.name) is None


@pytest.fixture
def found(tmp_path: Path) -> Found:
    """One small calculation of a book of its own."""
    for name in ("book.yaml", "sl-301.yaml"):
        shutil.copy(CALCS / name, tmp_path)
    return Found(tmp_path / "sl-301.yaml", "sl-301.yaml", tmp_path / "output")


@pytest.fixture
def beside(found: Found) -> Iterator[Beside]:
    """A second process that has been shown the way."""
    second = Beside()
    assert second.begin(found, marks_of([found.path])) is distances_to_flip
    _wait_until_free(second)
    yield second
    assert second._process is not None
    second._process.kill()


def _wait_until_free(second: Beside) -> None:
    end = time.monotonic() + LONGEST
    while not second._is_free():
        assert time.monotonic() < end, "the second process has not answered"
        time.sleep(0.01)


def test_the_answer_is_that_of_the_second_process(found: Found, beside: Beside) -> None:
    search = beside.begin(found, marks_of([found.path]))
    # Only the second process can give it: of no calculation the first finds nothing.
    assert repr(search(None)) == repr(solve_file(found.path, found.name).flips)


def test_while_it_searches_the_first_process_searches_by_itself(found: Found, beside: Beside) -> None:
    beside.begin(found, marks_of([found.path]))
    assert beside.begin(found, marks_of([found.path])) is distances_to_flip
    _wait_until_free(beside)
    assert beside.begin(found, marks_of([found.path])) is not distances_to_flip


def test_an_answer_of_another_text_does_not_count(found: Found, beside: Beside) -> None:
    """What was handed over was saved again before it was read: its flips would be of another file."""
    before = marks_of([found.path])
    solved = solve_file(found.path, found.name)
    text = found.path.read_text(encoding="utf-8")
    found.path.write_text(text.replace("acceptance:\n", "acceptance:\n\n"), encoding="utf-8")
    search = beside.begin(found, before)
    assert repr(search(solved)) == repr(solved.flips)
    with pytest.raises(AttributeError):
        beside.begin(found, before)(None)


def test_a_process_that_ended_costs_no_record(found: Found, beside: Beside) -> None:
    solved = solve_file(found.path, found.name)
    search = beside.begin(found, marks_of([found.path]))
    beside._process.kill()
    beside._process.join()
    assert repr(search(solved)) == repr(solved.flips)
    assert beside.begin(found, marks_of([found.path])) is distances_to_flip
    _wait_until_free(beside)
    assert repr(beside.begin(found, marks_of([found.path]))(None)) == repr(solved.flips)


def test_a_card_of_the_book_is_read_again_there_too(tmp_path: Path) -> None:
    """A card that was spoiled, and mended: the second process keeps neither the old one nor its fault."""
    shutil.copytree(CALCS / "cards", tmp_path / "cards")
    (card,) = (tmp_path / "cards").glob("*.yaml")
    (source,) = (path for path in CALCS.glob("*.yaml") if card.stem in path.read_text(encoding="utf-8"))
    for name in ("book.yaml", source.name):
        shutil.copy(CALCS / name, tmp_path)
    found = Found(tmp_path / source.name, source.name, tmp_path / "output")
    marks = marks_of([found.path])
    second = Beside()
    second.begin(found, marks)
    _wait_until_free(second)
    text = card.read_text(encoding="utf-8")
    card.write_text(f"{text}\nno such key: 1\n", encoding="utf-8")
    with pytest.raises(AttributeError):
        second.begin(found, marks)(None)
    card.write_text(text, encoding="utf-8")
    assert repr(second.begin(found, marks)(None)) == repr(search_file(found.path, found.name))
    second._process.kill()
