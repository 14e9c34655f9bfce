"""A book of copies of one calculation with varied givens: time per calculation, beside its bare property calls.

Run with `python tests/benchmarks/book_of_copies.py [copies]`. Each copy is read, built, solved in both
conditions with its cross-check and sensitivity, and its record and results are written, in one process. Beside it
stand the bare calls of the property backend for the states of one calculation (bulk, and surface clean and in
service), with the backend loaded. All in processor time.

A record also says at which change of each given a verdict flips, for which the same circuit is closed at many more
states: what bare calls for the answers of all of those would take is printed beside it.
"""

from __future__ import annotations

import sys
import tempfile
import time
from pathlib import Path
from typing import Any

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent / "chain"))

from small_calculations import COOLER_GIVENS, COOLER_REST, HEAD, givens

from calcbook.book import Found, run_all
from calcbook.chain.samples import Samples, evaluate_samples
from calcbook.interface import solve_file
from calcbook.uncertainty import flips

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


def temperatures(solved) -> list[float]:  # type: ignore[no-untyped-def]
    """The states of one calculation, all at its pressure: bulk, and surface clean and in service."""
    base = solved.base
    surfaces = [solution.number("tube film/T_s") for solution in base.solutions.values()]
    return [float(base.inputs["given/T_hot"]), *surfaces]


def calls_of_a_state(solved) -> float:  # type: ignore[no-untyped-def]
    """Seconds for the states of one calculation on one state object that is there already."""
    from CoolProp.CoolProp import PT_INPUTS, AbstractState

    pressure = float(solved.base.inputs["given/p_hot"])
    state = AbstractState("HEOS", "Water")
    start = time.process_time()
    for temperature in temperatures(solved):
        state.update(PT_INPUTS, pressure, temperature)
        for name in PROPERTIES:
            getattr(state, name)()
    return time.process_time() - start


def calls_by_name(solved) -> float:  # type: ignore[no-untyped-def]
    """Seconds for the same figures, each asked for by name, as a plain script does."""
    from CoolProp.CoolProp import PropsSI

    pressure = float(solved.base.inputs["given/p_hot"])
    start = time.process_time()
    for temperature in temperatures(solved):
        for key in ("D", "V", "L", "C"):
            PropsSI(key, "T", temperature, "P", pressure, "Water")
    return time.process_time() - start


def searched_samples(path: Path) -> int:
    """How many samples the search for distances to flip solves in one calculation."""
    found: list[int] = []

    def counted(*arguments: Any) -> Samples:
        samples = evaluate_samples(*arguments)
        found.append(len(samples.solved))
        return samples

    flips.evaluate_samples = counted
    try:
        solve_file(path)
    finally:
        flips.evaluate_samples = evaluate_samples
    return sum(found)


def main() -> None:
    copies = int(sys.argv[1]) if len(sys.argv) > 1 else 200
    with tempfile.TemporaryDirectory() as folder:
        files = [Found(path, path.name, Path(folder) / "output") for path in written(Path(folder), copies)]
        run_all(files[:3], 1, lambda outcome: None)
        start = time.process_time()
        run_all(files, 1, lambda outcome: None)
        whole = (time.process_time() - start) / copies
        sample = [solve_file(file.path) for file in files[:20]]
        searched = searched_samples(files[0].path)
    for ask in (calls_of_a_state, calls_by_name):
        ask(sample[0])
    state, named = (
        min(sum(map(ask, sample)) for _ in range(5)) / len(sample)
        for ask in (calls_of_a_state, calls_by_name)
    )
    print(
        f"{copies} calculations in one process: {1e3 * whole:.1f} ms of processor time each, records written"
    )
    print(
        f"bare backend calls of its three states: {1e3 * state:.2f} ms on one state object (ratio {whole / state:.0f}),"
        f" {1e3 * named:.2f} ms asked by name (ratio {whole / named:.0f}); aim 3"
    )
    print(
        f"for the {searched} samples of its search, as many times three states: {1e3 * searched * state:.0f} ms on one"
        f" state object (ratio {whole / (searched * state):.2f}), {1e3 * searched * named:.0f} ms asked by name (ratio"
        f" {whole / (searched * named):.2f})"
    )


if __name__ == "__main__":
    main()
