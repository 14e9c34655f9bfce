"""The one error family: what an engineer did that cannot be taken as it stands.

A fault carries facts as fields (code, place, what was found, what was expected, the nearest right
thing); its printed form is made here and nowhere else. Faults are collected per stage, sorted by
place and raised together as ``Faults``. Our own mistakes are ordinary exceptions, never faults.

May import: the standard library only. Must never: read a file, know a unit, know YAML.
"""

from __future__ import annotations

import difflib
import unicodedata
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple

from calcbook.fault_codes import CODES

LONGEST_NAME = 4096
EXCERPT_WIDTH = 110
# A text that YAML takes for something else: other faults at the same place only follow from it.
TRAPS = frozenset(
    (
        "colon-in-text",
        "comma-starts-key",
        "comment-cuts-text",
        "key-twice",
        "number-decimal-comma",
        "yaml-alias",
        "yaml-too-deep",
    )
)


class Place(NamedTuple):
    """A stretch of one line of a text: 1-based line and column; ``excerpt`` is the whole line."""

    file: str
    line: int = 1
    column: int = 1
    end_column: int = 0
    excerpt: str = ""

    def part(self, offset: int, length: int) -> Place:
        """The place of ``length`` characters that start ``offset`` characters after this place."""
        start = self.column + offset
        return Place(self.file, self.line, start, start + max(length, 1), self.excerpt)


@dataclass(frozen=True, slots=True)
class Fault:
    """One mistake: a documented code, its place, and the facts that mend it."""

    code: str
    place: Place
    message: str
    found: str = ""
    expected: str = ""
    nearest: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        if self.code not in CODES:
            raise ValueError(f"fault code {self.code!r} is not documented in fault_codes.py")

    @property
    def sort_key(self) -> tuple[str, int, int, str, str]:
        return (self.place.file, self.place.line, self.place.column, self.code, self.message)

    def __str__(self) -> str:
        # Names of files and what is like them come from elsewhere, too.
        file = shown(self.place.file, LONGEST_NAME)
        lines = [f"{file}:{self.place.line}:{self.place.column}: {self.code}: {self.message}"]
        lines += _excerpt_lines(self.place)
        if self.found and self.found not in self.message and self.found not in self.place.excerpt:
            lines.append(f"    found: {self.found}")
        if self.expected:
            lines.append(f"    expected: {self.expected}")
        if self.nearest:
            lines.append(f"    nearest: {', '.join(shown(name, LONGEST_NAME) for name in self.nearest)}")
        return "\n".join(lines)


class Faults(Exception):
    """Every fault of one stage, sorted by place, none twice."""

    def __init__(self, faults: Iterable[Fault]):
        self.faults: tuple[Fault, ...] = _without_echoes(
            sorted(dict.fromkeys(faults), key=lambda fault: fault.sort_key)
        )
        super().__init__(f"{len(self.faults)} fault(s)")

    def __str__(self) -> str:
        return "\n".join(str(fault) for fault in self.faults)


def _without_echoes(faults: list[Fault]) -> tuple[Fault, ...]:
    """Without what only follows from a text that YAML read differently than it was meant."""
    traps = [fault for fault in faults if fault.code in TRAPS]
    return tuple(
        fault
        for fault in faults
        if fault.code in TRAPS or not any(_overlap(fault.place, trap.place) for trap in traps)
    )


def _overlap(one: Place, other: Place) -> bool:
    return (
        (one.file, one.line) == (other.file, other.line)
        and one.column < max(other.end_column, other.column + 1)
        and other.column < max(one.end_column, one.column + 1)
    )


class Collector:
    """Gathers the faults of a stage, so that the engineer sees all of them at once."""

    def __init__(self) -> None:
        self._faults: list[Fault] = []

    def add(
        self,
        code: str,
        place: Place,
        message: str,
        *,
        found: str = "",
        expected: str = "",
        nearest: Sequence[str] = (),
    ) -> None:
        """Take one fault into the collection."""
        self._faults.append(Fault(code, place, message, found, expected, tuple(nearest)))

    def take(self, faults: Iterable[Fault]) -> None:
        """Take faults that another stage raised."""
        self._faults.extend(faults)

    def __iter__(self) -> Iterator[Fault]:
        return iter(self._faults)

    def __bool__(self) -> bool:
        return bool(self._faults)

    def stop_if_any(self) -> None:
        """Raise ``Faults`` when anything was collected."""
        if self._faults:
            raise Faults(self._faults)


def nearest_names(name: str, choices: Iterable[str], count: int = 3) -> tuple[str, ...]:
    """The choices that a mistyped name was probably meant to be, best first, in a stable order."""
    by_folded: dict[str, str] = {}
    for choice in choices:
        by_folded.setdefault(_folded(choice), choice)
    close = difflib.get_close_matches(_folded(name), list(by_folded), n=count, cutoff=0.6)
    return tuple(by_folded[match] for match in close)


def _folded(name: str) -> str:
    return " ".join(name.casefold().replace("_", " ").replace("-", " ").split())


def shown(text: str, limit: int = 60) -> str:
    """Text from a file made safe for one line of a message: no control characters, bounded length."""
    clean = "".join(
        character if unicodedata.category(character)[0] != "C" else f"\\u{ord(character):04x}"
        for character in text
    )
    return clean if len(clean) <= limit else clean[: limit - 1] + "…"


def _excerpt_lines(place: Place) -> list[str]:
    """The source line with a caret line under the place; long lines are cut around the place."""
    if not place.excerpt.strip():
        return []
    text = "".join(
        " " if unicodedata.category(character)[0] == "C" else character for character in place.excerpt
    ).rstrip()
    first = min(place.column - 1, len(text))
    start = max(0, first - EXCERPT_WIDTH // 2) if len(text) > EXCERPT_WIDTH else 0
    cut = text[start : start + EXCERPT_WIDTH]
    before, under = cut[: first - start], cut[first - start : place.end_column - 1 - start]
    gutter = f"{place.line:>6} | "
    carets = "^" * max(1, _width(under))
    return [gutter + cut, " " * (len(gutter) - 2) + "| " + " " * _width(before) + carets]


def _width(text: str) -> int:
    """How many columns a text takes on paper and screen."""
    wide = sum(unicodedata.east_asian_width(character) in "WF" for character in text)
    return len(text) + wide - sum(unicodedata.combining(character) > 0 for character in text)
