"""The small public interface, and what the commands themselves use: read, solve, record."""

from __future__ import annotations

from pathlib import Path

from calcbook.calcfile import Calculation, read_calculation, read_settings
from calcbook.chain.analysis import NotConverged, analyse
from calcbook.chain.build import build
from calcbook.chain.outcome import Solved
from calcbook.faults import Collector
from calcbook.library import Library

HOUSE_CARDS = "cards"

__all__ = ["NotConverged", "read", "record", "solve", "solve_file"]


def read(path: str | Path) -> Calculation:
    """Read a calculation file with the settings of the book in its folder.

    Raises ``calcbook.faults.Faults`` with every fault that the text alone shows.
    """
    path = Path(path)
    collector = Collector()
    calculation = read_calculation(path, read_settings(path.parent), collector)
    collector.stop_if_any()
    return calculation


def solve(calculation: Calculation, library: Library | None = None) -> Solved:
    """Solve every case of a calculation, clean and in service.

    Raises ``Faults`` with every fault of meaning, ``NotConverged`` for a case without a solution.
    """
    collector = Collector()
    solved = _solved(calculation, library or Library(), collector)
    collector.stop_if_any()
    assert solved is not None
    return solved


def solve_file(path: Path, name: str | None = None) -> Solved:
    """Read and solve a file, with the faults of both stages told at once.

    Raises ``Faults`` and ``NotConverged``.
    """
    collector = Collector()
    calculation = read_calculation(path, read_settings(path.parent), collector, name)
    solved = _solved(calculation, Library(path.parent / HOUSE_CARDS), collector)
    collector.stop_if_any()
    assert solved is not None
    return solved


def _solved(calculation: Calculation, library: Library, collector: Collector) -> Solved | None:
    chain = build(calculation, library, collector)
    return analyse(chain, collector) if chain is not None else None


def record(solved: Solved) -> str:
    """The Markdown text of a solved calculation's record."""
    from calcbook.record import record_text

    return record_text(solved)
