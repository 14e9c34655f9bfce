"""Small calculation files for the tests of sweeps and distances to flip."""

from __future__ import annotations

from pathlib import Path
from textwrap import dedent

from calcbook.chain.flips_outcome import Flips
from calcbook.chain.outcome import Solved
from calcbook.interface import solve_file

HEAD = """\
calculation: {number: T-1, title: Trial, plant: Works, revision: A, prepared by: K. L., date: 2026-11-20}
purpose: Trial of the search.
"""


def solved_of(folder: Path, body: str) -> Solved:
    """A calculation file written into a folder and solved."""
    path = folder / "trial.yaml"
    path.write_text(HEAD + dedent(body), encoding="utf-8")
    return solve_file(path, path.name)


def flips_of(folder: Path, body: str) -> Flips:
    """The distances to flip of a calculation file."""
    found = solved_of(folder, body).flips
    assert found is not None
    return found
