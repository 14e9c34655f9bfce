"""Bad cards: each with the complete text that is printed for it.

A card ``tests/cases/bad_cards/<fault code>[-n].yaml`` stands beside ``<same>.expected``. To take over new
texts, run ``python tests/library/test_bad_cards.py`` and read the difference.
"""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from calcbook.faults import Faults
from calcbook.library import Library
from calcbook.library.checking import check_material, check_method, check_situation
from calcbook.library.reading import read_material, read_situation

FOLDER = Path(__file__).resolve().parents[1] / "cases" / "bad_cards"
CARDS = sorted(FOLDER.glob("*.yaml"))


def check(path: Path) -> None:
    """Read a card of any kind and check it fully."""
    library = Library(FOLDER)
    kind = path.read_text(encoding="utf-8").partition(":")[0]
    if kind == "method":
        check_method(library.method(path.stem), library)
    elif kind == "situation":
        read_situation(path)
        check_situation(path.stem, library)
    else:
        check_material(read_material(path, house=True))


def printed(path: Path) -> str:
    """The whole text that is printed for a bad card."""
    with pytest.raises(Faults) as caught:
        check(path)
    return f"{caught.value}\n"


@pytest.mark.parametrize("path", CARDS, ids=lambda path: path.stem)
def test_a_bad_card_is_answered_with_the_whole_expected_text(path: Path) -> None:
    assert printed(path) == path.with_suffix(".expected").read_text(encoding="utf-8")


@pytest.mark.parametrize("path", CARDS, ids=lambda path: path.stem)
def test_a_bad_card_is_named_after_the_code_it_shows(path: Path) -> None:
    text = path.with_suffix(".expected").read_text(encoding="utf-8")
    assert f": {re.sub(r'-[0-9]+$', '', path.stem)}: " in text


def test_every_expected_text_has_its_card() -> None:
    assert {path.stem for path in FOLDER.glob("*.expected")} == {path.stem for path in CARDS}


if __name__ == "__main__":
    for card in CARDS:
        card.with_suffix(".expected").write_text(printed(card), encoding="utf-8")
