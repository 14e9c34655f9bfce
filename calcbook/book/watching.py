"""Watch calculations: calculate each anew as soon as a file that it rests on changes.

What a calculation rests on is taken generously, as a record made once too often costs nothing: its own file
and sign-offs, the settings and cards of its book, the table files it names, and, where it takes a given from
another calculation, every calculation file beside it and the issued copies of the book. Files are looked at
by their size and time of change, again and again. A file is read at once, and what comes of it counts only if
nothing has changed meanwhile: one that was caught half written is read again.
"""

from __future__ import annotations

import re
import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from calcbook.book.beside import Beside
from calcbook.book.finding import BESIDE, Found, find_calculations
from calcbook.book.marks import HouseCards, Marks, marks_of
from calcbook.book.running import Outcome, solved_texts, written
from calcbook.calcfile import BOOK_FILE
from calcbook.faults import Collector, Faults
from calcbook.interface import HOUSE_CARDS
from calcbook.links import ISSUED

# Between two looks, in seconds: a look at a hundred files takes less than a millisecond.
PERIOD, PERIOD_PER_FILE = 0.006, 0.0001
# A file caught half written has faults that are none: they are told when it has stood still for so long.
SETTLED = 0.01
FILE_NAMED = re.compile(r"\bfile *: *[\"']?([^\n\"',{}\[\]]+)")
LINKED = re.compile(r"\bfrom *:")

Tell = Callable[[Outcome], None]


@dataclass
class _Watched:
    """One calculation under watch, and the marks of all it rests on as they were before it was read."""

    found: Found
    marks: Marks = field(default_factory=dict)
    number: str = ""
    # Whether the last answer was dropped, as its files had changed meanwhile; and whether another has its number.
    dropped: bool = False
    lacks_number: bool = False


class Watch:
    """Calculations kept current. ``tell`` is called with every outcome, ``tell_fault`` where no file can be
    found or a book's settings cannot be read."""

    def __init__(
        self, paths: Sequence[Path], output: Path | None, tell: Tell, tell_fault: Callable[[Faults], None]
    ):
        self.paths = paths
        self.output = output
        self.tell = tell
        self.tell_fault = tell_fault
        self.watched: dict[Path, _Watched] = {}
        self.listed: Marks = {}
        self.fault = ""
        self.cards = HouseCards()
        self.beside = Beside()

    def run(self) -> None:
        """Calculate everything once, then look for changes until interrupted (``KeyboardInterrupt``)."""
        while True:
            self.look()
            files = sum(len(item.marks) for item in self.watched.values())
            time.sleep(PERIOD + PERIOD_PER_FILE * files)

    def look(self) -> None:
        """Look once; calculate what changed since the last look."""
        self._find()
        for item in list(self.watched.values()):
            if item.marks and item.marks == marks_of(item.marks):
                continue
            before = item.marks
            item.marks = marks_of(_rests_on(item))
            if item.marks != before:
                self._calculate(item)

    def _find(self) -> None:
        """The calculation files, found again where a folder or a book's settings changed."""
        places = set(self.paths)
        places |= {(path if path.is_dir() else path.parent) / BOOK_FILE for path in self.paths}
        listed = marks_of(places)
        if listed == self.listed:
            return
        self.listed = listed
        try:
            files = self._found_files()
        except Faults as faults:
            if str(faults) != self.fault:
                self.tell_fault(faults)
            self.fault = str(faults)
            return
        self.fault = ""
        known = {found.path: found for found in files}
        for path in [path for path in self.watched if path not in known]:
            del self.watched[path]
            self._number_is_free()
        for path, found in known.items():
            self.watched.setdefault(path, _Watched(found)).found = found

    def _found_files(self) -> tuple[Found, ...]:
        """The calculation files. A fault counts when it is still there a little later: some editors save by deleting."""
        try:
            return self._listed_files()
        except Faults:
            time.sleep(SETTLED)
            return self._listed_files()

    def _listed_files(self) -> tuple[Found, ...]:
        collector = Collector()
        files = find_calculations(self.paths, self.output, collector)
        collector.stop_if_any()
        return files

    def _number_is_free(self) -> None:
        """Have calculations that lacked their number calculated again."""
        for item in self.watched.values():
            if item.lacks_number:
                item.marks = {}

    def _calculate(self, item: _Watched) -> None:
        """Calculate and tell, unless what was read changes meanwhile: the next look finds that it has."""
        self.cards.forget_changed(item.found.path.parent / HOUSE_CARDS)
        made = solved_texts(item.found, self.beside.begin(item.found, item.marks))
        if isinstance(made, Outcome):
            time.sleep(SETTLED)
        has_changed = item.marks != marks_of(item.marks)
        # Where saves come faster than answers every second one is taken: the next look makes it good.
        if has_changed and (isinstance(made, Outcome) or not item.dropped):
            item.dropped = True
            return
        item.dropped = False
        if isinstance(made, Outcome):
            self.tell(made)
            return
        taken = {
            other.number.casefold(): other.found.name
            for other in self.watched.values()
            if other is not item and other.number
        }
        outcome = written(made, taken)
        before, item.number = item.number, outcome.number
        item.lacks_number = made.outcome.number.casefold() in taken
        if before != item.number:
            # The folder of its issued copies is known by its number alone.
            item.marks |= marks_of([item.found.output / item.number / ISSUED])
        self.tell(outcome)
        if before and before != item.number:
            self._number_is_free()


def _rests_on(item: _Watched) -> Iterator[Path]:
    """The files and folders whose change may change a record."""
    found, path, folder = item.found, item.found.path, item.found.path.parent
    yield path
    yield path.with_name(f"{path.stem}.signoffs.yaml")
    yield folder / BOOK_FILE
    yield folder / HOUSE_CARDS
    yield from _files(folder / HOUSE_CARDS, "*.yaml")
    if item.number:
        yield found.output / item.number / ISSUED
    try:
        text = path.read_text(encoding="utf-8", errors="replace")
    except OSError:
        return
    for name in FILE_NAMED.findall(text):
        yield folder / name.strip()
    if LINKED.search(text):
        yield folder
        yield from (other for other in _files(folder, "*.yaml") if not other.name.endswith(BESIDE[1:]))
        yield from _files(folder, "*.csv")
        yield from sorted(found.output.glob(f"*/{ISSUED}"))


def _files(folder: Path, pattern: str) -> list[Path]:
    return sorted(folder.glob(pattern))
