"""A CSV file beside the calculation file: its lines as text, or the faults that keep it from being read."""

from __future__ import annotations

import re
from pathlib import Path

from calcbook.faults import Collector, Place, nearest_names

MEGABYTE = 1_000_000
_CONTROL = re.compile("[\x00-\x08\x0b-\x0c\x0e-\x1f]")
_LINE_END = re.compile("\r\n|\r|\n")


def read_lines(path: Path, what: str, megabytes: int, place: Place, collector: Collector) -> list[str] | None:
    """The lines of a UTF-8 file of at most so many megabytes; ``what`` names it in faults. None after a fault.

    Codes: file-not-found, file-too-large, file-not-utf8, file-not-text.
    """
    largest = megabytes * MEGABYTE
    try:
        if path.exists() and not path.is_file():
            raise OSError("no regular file")
        with path.open("rb") as stream:
            data = stream.read(largest + 1)
    except OSError:
        beside = sorted(item.name for item in path.parent.glob("*.csv") if item.is_file())
        collector.add(
            "file-not-found",
            place,
            f"{what} cannot be read",
            found=path.name,
            expected="a CSV file beside the calculation file",
            nearest=nearest_names(path.name, beside),
        )
        return None
    if len(data) > largest:
        collector.add("file-too-large", place, f"{what} is too large", expected=f"at most {megabytes} MB")
        return None
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError:
        collector.add("file-not-utf8", place, f"{what} is not UTF-8 text", expected="UTF-8 text")
        return None
    if _CONTROL.search(text):
        collector.add("file-not-text", place, f"{what} holds control characters", expected="plain text")
        return None
    return _LINE_END.split(text)
