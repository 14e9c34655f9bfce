"""A book of copies of one calculation with varied givens: time per calculation, step by step.

Run with `python tests/benchmarks/book_of_copies.py [copies]`. Each copy is read, built, solved in both
conditions and written as a record, in one process. Beside it stand the bare calls of the property backend
for the states of one calculation (bulk, and surface clean and in service), with the backend loaded.
"""

from __future__ import annotations

import sys
import tempfile
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent / "chain"))

from small_calculations import COOLER_GIVENS, COOLER_REST, HEAD, givens

from calcbook.interface import record_text, solve_file

PROPERTIES = ("rhomass", "viscosity", "conductivity", "cpmass")


def written(folder: Path, copies: int) -> list[Path]:
    """Files of the book; flow, temperatures and allowance differ from copy to copy."""
    draw = np.random.default_rng(7)
    paths = []
    for number in range(copies):
        figures = COOLER_GIVENS | {
            "m_hot": f"{draw.uniform(12, 20):.4f} kg/s",
            "T_hot": f"{draw.uniform(60, 85):.3f} degC",
            "T_cold": f"{draw.uniform(15, 35):.3f} degC",
            "R_fo": f"{draw.uniform(1e-4, 5e-4):.6f} m^2 K/W",
        }
        path = folder / f"copy-{number:03d}.yaml"
        path.write_text(
            HEAD.replace("T-1", f"T-{number}") + givens(**figures) + COOLER_REST, encoding="utf-8"
        )
        paths.append(path)
    return paths


def bare_calls(solved) -> float:  # type: ignore[no-untyped-def]
    """Seconds that the backend alone takes for the states of one calculation."""
    from CoolProp.CoolProp import PT_INPUTS, AbstractState

    base = solved.base
    pressure = base.inputs["given/p_hot"]
    temperatures = [
        base.inputs["given/T_hot"],
        *(solution.number("tube film/T_s") for solution in base.solutions.values()),
    ]
    state = AbstractState("HEOS", "Water")
    start = time.perf_counter()
    for temperature in temperatures:
        state.update(PT_INPUTS, pressure, temperature)
        for name in PROPERTIES:
            getattr(state, name)()
    return time.perf_counter() - start


def main() -> None:
    copies = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    with tempfile.TemporaryDirectory() as folder:
        paths = written(Path(folder), copies)
        record_text(solve_file(paths[0]))
        start = time.perf_counter()
        solved = [solve_file(path) for path in paths]
        solving = time.perf_counter() - start
        start = time.perf_counter()
        letters = sum(len(record_text(item)) for item in solved)
        writing = time.perf_counter() - start
        bare_calls(solved[0])
        bare = sum(bare_calls(item) for item in solved)
    print(
        f"{copies} copies, {letters / copies / 1024:.1f} KiB a record:"
        f" read, build and solve {1e3 * solving / copies:.1f} ms,"
        f" record {1e3 * writing / copies:.1f} ms a calculation"
    )
    print(
        f"bare property calls of its three states {1e3 * bare / copies:.2f} ms;"
        f" ratio of the whole {(solving + writing) / bare:.1f}"
    )


if __name__ == "__main__":
    main()
