"""Small calculation files with tolerances, solved with their uncertainty."""

from __future__ import annotations

import sys
from pathlib import Path

from calcbook.interface import solve_file

sys.path.insert(0, str(Path(__file__).parent.parent / "chain"))

from small_calculations import HEAD, STATED, house_method, house_situation, plane_between

__all__ = ["HEAD", "STATED", "house_method", "house_situation", "plane_between", "solved", "with_tolerance"]

# Stated coefficients and temperatures: the heat flow is exactly linear in the temperatures.
HEATED = (
    STATED.replace("on: inside}\n", "on: inside, temperature: T_i}\n", 1)
    .replace("coefficient: h_o, on: outside}", "coefficient: h_o, on: outside, temperature: T_o}")
    .replace(
        "geometry: {shape: tube,",
        "geometry: {shape: tube, length: L, parallel: N,",
    )
    .replace(
        "givens:\n",
        "givens:\n"
        "  T_i: {value: 80 degC, is: inside temperature, source: test}\n"
        "  T_o: {value: 30 degC, is: outside temperature, source: test}\n"
        "  L: {value: 4 m, is: length, source: test}\n"
        "  N: {value: 50, is: tubes, source: test}\n",
    )
)


def with_tolerance(body: str, **tolerances: str) -> str:
    """The body with tolerances on givens, as they stand in a file."""
    lines = []
    for line in body.splitlines():
        symbol = line.strip().partition(":")[0]
        if symbol in tolerances and "value:" in line:
            line = line.replace(", source: test}", f", source: test, tolerance: {tolerances[symbol]}}}")
        lines.append(line)
    return "\n".join(lines) + "\n"


def solved(folder: Path, body: str, more: str = "", cards: dict[str, str] | None = None):
    """A body solved with everything; ``more`` are further sections of the file."""
    path = folder / "trial.yaml"
    path.write_text(HEAD + body + more, encoding="utf-8")
    for name, text in (cards or {}).items():
        (folder / "cards").mkdir(exist_ok=True)
        (folder / "cards" / f"{name}.yaml").write_text(text, encoding="utf-8")
    return solve_file(path)
