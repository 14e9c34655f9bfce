"""Blocks: what a document consists of, before anything is Markdown. All texts are plain text."""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple


@dataclass(frozen=True, slots=True)
class Heading:
    """A heading of level 1 to 6."""

    level: int
    text: str

    def __post_init__(self) -> None:
        if not 1 <= self.level <= 6:
            raise ValueError(f"a heading has a level from 1 to 6, not {self.level}")


class Paragraph(NamedTuple):
    """One paragraph."""

    text: str


@dataclass(frozen=True, slots=True)
class Table:
    """Rows under named columns; every row has as many cells as there are columns. ``notes`` follow."""

    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        if not self.columns:
            raise ValueError("a table has at least one column")
        for row in self.rows:
            if len(row) != len(self.columns):
                raise ValueError(f"a row of {len(row)} cells under {len(self.columns)} columns: {row}")


class Bullets(NamedTuple):
    """A list of sentences or facts, one a line."""

    items: tuple[str, ...]


class Code(NamedTuple):
    """Lines shown as they stand, in letters of one width."""

    text: str


class Quote(NamedTuple):
    """Sentences set apart from the text around them, one a paragraph."""

    lines: tuple[str, ...]


Block = Heading | Paragraph | Table | Bullets | Code | Quote
