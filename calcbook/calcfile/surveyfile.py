"""The history of a unit in a CSV file beside the calculation: a row of heads, then rows as the plant gave them."""

from __future__ import annotations

import csv
import hashlib
import itertools
import unicodedata
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

from calcbook.calcfile.sidefile import read_lines
from calcbook.faults import Collector, Place, nearest_names, shown

MEGABYTES = 300
# Rows taken apart together: a long history never stands in memory cell by cell.
PIECE = 20_000


@dataclass(frozen=True, slots=True)
class History:
    """The columns that a survey names, each as one text with a line for each row.

    ``rows`` is how many rows the file has. A row with more or fewer cells than there are heads has empty
    cells throughout: it cannot be read, and is counted as such.
    """

    rows: int
    columns: Mapping[str, str]

    def content(self) -> dict[str, list[str]]:
        """What the columns hold, for the digest: the number of rows, and SHA-256 of each column."""
        found = {"rows": [str(self.rows)]}
        for head, text in self.columns.items():
            found[f"column {head}"] = [hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()]
        return found


def read_history(
    path: Path, wanted: Mapping[str, Place], place: Place, collector: Collector
) -> History | None:
    """The columns named by ``wanted`` (head to the place that names it), or None after a fault.

    Codes: file-not-found, file-too-large, file-not-utf8, file-not-text, file-empty, column-unknown, key-twice.
    Cells are not judged here: a row that cannot be read is rejected by its rule, and counted.
    """
    lines = read_lines(path, "the history", MEGABYTES, place, collector)
    if lines is None:
        return None
    rows = (row for row in csv.reader(lines, strict=True) if any(cell.strip() for cell in row))
    try:
        heads = [_cell(head) for head in next(rows, [])]
        if not heads:
            collector.add(
                "file-empty", place, "the history holds nothing", expected="a row of heads, then rows"
            )
            return None
        if len(heads) == 1 and (";" in heads[0] or "\t" in heads[0]):
            collector.add(
                "file-not-text",
                place,
                "the cells of the history are not parted by commas",
                found=shown(heads[0]),
                expected="cells parted by commas, a decimal point in figures",
            )
            return None
        if not _heads_hold(heads, wanted, path.name, collector):
            return None
        return _taken(rows, heads, wanted)
    except csv.Error:
        collector.add(
            "file-not-text",
            place,
            "the history is no CSV text",
            expected="cells parted by commas, quotes closed",
        )
        return None


def _heads_hold(heads: list[str], wanted: Mapping[str, Place], name: str, collector: Collector) -> bool:
    """Whether every column that is wanted stands in the file, once."""
    holds = True
    for head, place in wanted.items():
        count = heads.count(head)
        if count == 1:
            continue
        holds = False
        if count:
            collector.add(
                "key-twice",
                place,
                f"the column `{shown(head)}` stands {count} times in {name}",
                expected="each head once",
            )
        else:
            collector.add(
                "column-unknown",
                place,
                f"{name} has no column `{shown(head)}`",
                found=shown(head),
                expected=shown(", ".join(heads), 200),
                nearest=nearest_names(head, heads),
            )
    return holds


def _taken(rows: Iterator[list[str]], heads: list[str], wanted: Mapping[str, Place]) -> History:
    places = {head: heads.index(head) for head in wanted}
    parts: dict[str, list[str]] = {head: [] for head in wanted}
    empty = [""] * len(heads)
    count = 0
    while piece := list(itertools.islice(rows, PIECE)):
        count += len(piece)
        whole = [row if len(row) == len(heads) else empty for row in piece]
        for head, position in places.items():
            parts[head].append("\n".join([_cell(row[position]) for row in whole]))
    return History(count, {head: "\n".join(texts) for head, texts in parts.items()})


def _cell(text: str) -> str:
    """A cell as typed, in Unicode form NFC, without blanks around it and on one line."""
    if text.isascii() and "\n" not in text:
        return text.strip()
    return " ".join(unicodedata.normalize("NFC", text).split())
