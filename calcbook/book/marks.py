"""Marks of files: what tells one state of a file from another without reading it."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path

from calcbook.interface import forget_house_cards

# Time of change, size and place on the disk; None where there is no file.
Mark = tuple[int, int, int] | None
Marks = dict[Path, Mark]


def marks_of(paths: Iterable[Path]) -> Marks:
    """The marks of files and folders as they are now."""
    return {path: _mark(path) for path in paths}


def _mark(path: Path) -> Mark:
    try:
        state = os.stat(path)
    except OSError:
        return None
    return (state.st_mtime_ns, state.st_size, state.st_ino)


class HouseCards:
    """The books' own cards as this process knows them."""

    def __init__(self) -> None:
        self._known: dict[Path, Marks] = {}

    def forget_changed(self, house: Path) -> None:
        """Have the cards of a book read again where one changed since this was last asked."""
        marks = marks_of(sorted(house.glob("*.yaml")))
        if self._known.setdefault(house, marks) != marks:
            self._known[house] = marks
            forget_house_cards()
