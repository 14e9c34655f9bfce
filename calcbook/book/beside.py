"""A second process beside ``watch``: it searches the distances to flip while the first makes the rest of a record.

The search takes half of a record's time and needs only the analysis of the file, so the second process reads the
file by itself. Its answer counts if it read what the first one read: the marks of all files stood still. Where there
is none that counts (a fault, a process that ended, a search still under way) the first searches, to the same bytes.
"""

from __future__ import annotations

import gc
import multiprocessing
from multiprocessing.connection import Connection
from multiprocessing.process import BaseProcess

from calcbook.book.finding import Found
from calcbook.book.marks import HouseCards, Marks, marks_of
from calcbook.book.pool import deaf_to_interrupts
from calcbook.chain.flips_outcome import Flips
from calcbook.chain.outcome import Solved
from calcbook.interface import HOUSE_CARDS, Search, search_file
from calcbook.uncertainty.flips import distances_to_flip


class Beside:
    """The second process. It is started with the first file, whose search shows it the way: cards, properties."""

    def __init__(self) -> None:
        self._process: BaseProcess | None = None
        self._line: Connection | None = None
        self._is_searching = False

    def begin(self, found: Found, marks: Marks) -> Search:
        """Hand over a file with the marks of all that it rests on; what gives its distances to flip."""
        if self._process is None:
            self._start()
            self._hand_over(found, marks)
            return distances_to_flip
        if not self._is_free():
            return distances_to_flip
        self._hand_over(found, marks)
        return self._answer

    def _start(self) -> None:
        spawned = multiprocessing.get_context("spawn")
        self._line, other = spawned.Pipe()
        self._process = spawned.Process(target=_serve, args=(other, gc.get_threshold()), daemon=True)
        with deaf_to_interrupts():
            self._process.start()
        other.close()

    def _hand_over(self, found: Found, marks: Marks) -> None:
        assert self._line is not None
        try:
            self._line.send((found, marks))
            self._is_searching = True
        except OSError:
            self._lose()

    def _is_free(self) -> bool:
        """Whether the last search has ended; an answer that nobody has waited for is put aside."""
        assert self._line is not None
        if self._is_searching and self._line.poll():
            self._received()
        return not self._is_searching and self._process is not None

    def _answer(self, solved: Solved) -> Flips:
        return self._received() or distances_to_flip(solved)

    def _received(self) -> Flips | None:
        """What the second process sends next; None for no answer, or where it has ended."""
        if self._line is None:
            return None
        try:
            answer: Flips | None = self._line.recv()
        except (EOFError, OSError):
            self._lose()
            return None
        self._is_searching = False
        return answer

    def _lose(self) -> None:
        """Take the process as ended; the next file starts another."""
        self._process = self._line = None
        self._is_searching = False


def _serve(line: Connection, threshold: tuple[int, int, int]) -> None:
    """Search what is handed over until the first process ends. Circles of objects are looked for as seldom as there."""
    gc.set_threshold(*threshold)
    cards = HouseCards()
    while True:
        try:
            found, marks = line.recv()
        except EOFError:
            return
        line.send(_searched(found, marks, cards))


def _searched(found: Found, marks: Marks, cards: HouseCards) -> Flips | None:
    """The distances to flip of a file; None where it has a fault, which the first process tells, or has changed."""
    cards.forget_changed(found.path.parent / HOUSE_CARDS)
    try:
        flips = search_file(found.path, found.name)
    except Exception:
        return None
    return flips if marks_of(marks) == marks else None
