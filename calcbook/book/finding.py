"""Which files are calculations of a run, and where their records go."""

from __future__ import annotations

import os
from collections.abc import Iterable
from pathlib import Path
from typing import NamedTuple

from calcbook.calcfile import BOOK_FILE, read_settings
from calcbook.faults import Collector, Place

OUTPUT = "output"
BESIDE = (".signoffs.yaml", ".form.yaml")


class Found(NamedTuple):
    """One calculation file: its path, the name it is called by, and the folder for its book's records."""

    path: Path
    name: str
    output: Path


def find_calculations(paths: Iterable[Path], output: Path | None, collector: Collector) -> tuple[Found, ...]:
    """The calculation files behind files and folders, in the order given, each once.

    A folder gives its ``*.yaml``, not those of its folders, except book.yaml and what stands beside a
    calculation. Records go to ``output`` if given, else to the book's own, else to ``output`` in the
    working folder. Faults: file-not-found.
    """
    found: dict[Path, Found] = {}
    for path in paths:
        files = sorted(_of_folder(path)) if path.is_dir() else [path]
        if path.is_dir() and not files:
            collector.add(
                "file-not-found",
                Place(path.as_posix()),
                "the folder holds no calculation file",
                expected="*.yaml files",
            )
        for file in files:
            try:
                key = file.resolve()
            except (OSError, RuntimeError):
                collector.add(
                    "file-not-found",
                    Place(file.as_posix()),
                    "the file is a link that leads nowhere",
                    expected="a calculation file",
                )
                continue
            found.setdefault(key, Found(file, file.as_posix(), _output(file, output)))
    return tuple(found.values())


def _of_folder(folder: Path) -> list[Path]:
    return [
        path
        for path in folder.glob("*.yaml")
        if path.name != BOOK_FILE and not path.name.endswith(BESIDE) and not path.is_dir()
    ]


def _output(file: Path, output: Path | None) -> Path:
    if output is not None:
        return output
    settings = read_settings(file.parent)
    return Path(os.path.normpath(file.parent / settings.output)) if settings.output else Path(OUTPUT)
