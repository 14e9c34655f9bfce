"""Compare two output folders: the one that was committed and the one that was made again.

    python tests/compare_output.py COMMITTED MADE_AGAIN

The two must hold the same files. In ``results.json`` every number must agree within 1e-9 relative (stored
values carry ten digits, and processors differ in the last place of a power) and every text exactly. In
Markdown every line must be the same but for the versions of software. Any other file must be the same
byte for byte. Prints each difference; ends with 1 when there is any, with 2 when a folder is not there or
holds no record. Standard library only.
"""

from __future__ import annotations

import difflib
import json
import re
import sys
from collections.abc import Iterator
from decimal import Decimal
from pathlib import Path
from typing import Any

TOLERANCE = Decimal("1e-9")
MOST_LINES_SHOWN = 40
# "calcbook 0.1.0", "CoolProp 8.0.0": a version after its name, wherever it stands in a line.
VERSION = re.compile(r"\b(calcbook|CoolProp|Python|NumPy|numpy|SciPy|scipy)([ :|]+)\d+(\.\d+)+\w*")
SOFTWARE = "software"


def without_versions(line: str) -> str:
    """The line with every version of software replaced by a fixed word."""
    return VERSION.sub(r"\1\2<version>", line)


def markdown_differences(was: str, now: str) -> Iterator[str]:
    """The lines that differ, was with ``-`` and now with ``+``."""
    before, after = ([without_versions(line) for line in text.split("\n")] for text in (was, now))
    lines = difflib.unified_diff(before, after, "committed", "made again", lineterm="", n=0)
    yield from (line for line in lines if not line.startswith(("---", "+++")))


def value_differences(was: Any, now: Any, where: str = "") -> Iterator[str]:
    """The places at which two trees of JSON values differ; versions below ``software`` may differ."""
    if isinstance(was, dict) and isinstance(now, dict):
        yield from _mapping_differences(was, now, where)
    elif isinstance(was, list) and isinstance(now, list):
        if len(was) != len(now):
            yield f"{where}: {len(was)} items, now {len(now)}"
        for index, (left, right) in enumerate(zip(was, now, strict=False)):
            yield from value_differences(left, right, f"{where}[{index}]")
    elif isinstance(was, Decimal) and isinstance(now, Decimal):
        if abs(was - now) > TOLERANCE * max(abs(was), abs(now)):
            yield f"{where}: {was}, now {now}"
    elif was != now or type(was) is not type(now):
        yield f"{where}: {was!r}, now {now!r}"


def _mapping_differences(was: dict[str, Any], now: dict[str, Any], where: str) -> Iterator[str]:
    if list(was) != list(now):
        yield f"{where}: keys {', '.join(was)}, now {', '.join(now)}"
    for key in was:
        if key in now and not (where == "" and key == SOFTWARE):
            yield from value_differences(was[key], now[key], f"{where}.{key}" if where else key)


def _values(path: Path) -> Any:
    return json.loads(path.read_text(encoding="utf-8"), parse_float=Decimal, parse_int=Decimal)


def file_differences(was: Path, now: Path) -> Iterator[str]:
    """How one file differs from its twin, by its kind."""
    if was.suffix == ".json":
        yield from value_differences(_values(was), _values(now))
    elif was.suffix == ".md":
        yield from markdown_differences(was.read_text(encoding="utf-8"), now.read_text(encoding="utf-8"))
    elif was.read_bytes() != now.read_bytes():
        yield "other bytes"


def _files(folder: Path) -> dict[str, Path]:
    return {path.relative_to(folder).as_posix(): path for path in sorted(folder.rglob("*")) if path.is_file()}


def folder_differences(was: Path, now: Path) -> Iterator[str]:
    """Every difference of two output folders, each with the file it stands in."""
    before, after = _files(was), _files(now)
    yield from (f"{name}: not made again" for name in before if name not in after)
    yield from (f"{name}: made, and not committed" for name in after if name not in before)
    for name in before:
        if name in after:
            yield from (f"{name}: {difference}" for difference in file_differences(before[name], after[name]))


def main(arguments: list[str]) -> int:
    """Compare two folders, print what differs, return the exit code."""
    if len(arguments) != 2:
        print("usage: python tests/compare_output.py COMMITTED MADE_AGAIN", file=sys.stderr)
        return 2
    was, now = (Path(argument) for argument in arguments)
    records = [name for name in _files(was) if name.endswith("/record.md")] if was.is_dir() else []
    if not records or not now.is_dir():
        print("nothing to compare: a folder is missing or holds no record", file=sys.stderr)
        return 2
    differences = list(folder_differences(was, now))
    for difference in differences[:MOST_LINES_SHOWN]:
        print(difference)
    if len(differences) > MOST_LINES_SHOWN:
        print(f"and {len(differences) - MOST_LINES_SHOWN} more")
    print(f"{len(records)} records compared, {len(differences)} differences")
    return 1 if differences else 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
