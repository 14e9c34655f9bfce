"""One record as the engineer runs it: whole processes, as ratios to bare processes of the property backend.

Run with `python tests/benchmarks/one_record.py [file]`. Two ratios, each from processes run in turn, the shortest of
several, in wall time and in processor time (on a machine that others use, the latter is the steadier):

- a repeat `run` to a bare import of the backend: the kept answers make it unnecessary (aim 0.35);
- the first `run`, with an empty cache folder, to a plain script that imports the backend and makes the very
  calls that the first run made, recorded from it, and nothing else (aim 1.3).

Compiled modules are kept, as an installed program keeps them, whatever PYTHONDONTWRITEBYTECODE says.
"""

from __future__ import annotations

import json
import os
import resource
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "chain"))

from small_calculations import COOLER, HEAD

ROOT = Path(__file__).resolve().parents[2]
REPEATS = 7
BARE = "import CoolProp.CoolProp"
PLAIN = """
import json, sys
from CoolProp.CoolProp import AbstractState
states = {}
for fluid, name, arguments in json.load(open(sys.argv[1])):
    if tuple(fluid) not in states:
        states[tuple(fluid)] = AbstractState(*fluid)
    try:
        getattr(states[tuple(fluid)], name)(*arguments)
    except ValueError:
        pass
"""


class Recorder:
    """Stands before a state of the backend and keeps every call made of it."""

    def __init__(self, fluid: tuple[str, str], state: object, calls: list[object]):
        self.fluid, self.state, self.calls = fluid, state, calls

    def __getattr__(self, name: str):  # type: ignore[no-untyped-def]
        method = getattr(self.state, name)

        def call(*arguments):  # type: ignore[no-untyped-def]
            self.calls.append([self.fluid, name, arguments])
            return method(*arguments)

        return call


def record_calls(path: Path, to: Path) -> None:
    """Solve a file with an empty cache, in this process, and write down every call of the backend."""
    from calcbook.interface import solve_file
    from calcbook.properties import backend

    calls: list[object] = []
    state_of = backend.state_of
    backend.state_of = lambda code: Recorder((code.backend, code.name), state_of(code), calls)
    solve_file(path)
    to.write_text(json.dumps(calls), encoding="utf-8")


def seconds(command: list[str], environment: dict[str, str]) -> tuple[float, float]:
    """Wall time and processor time of a whole process; raises when it fails."""
    start, used = time.perf_counter(), processor()
    done = subprocess.run(command, env=environment, capture_output=True, text=True)
    if done.returncode != 0:
        raise SystemExit(f"{' '.join(command)} ended with {done.returncode}:\n{done.stdout}{done.stderr}")
    return time.perf_counter() - start, processor() - used


def processor() -> float:
    """Processor time of all processes that this one started and that have ended."""
    usage = resource.getrusage(resource.RUSAGE_CHILDREN)
    return usage.ru_utime + usage.ru_stime


def measure(path: Path, folder: Path) -> None:
    """Run every kind of process in turn and print the shortest of each, and the ratios."""
    python = sys.executable
    cache, calls, kept = folder / "cache", folder / "calls.json", {**os.environ}
    kept.pop("PYTHONDONTWRITEBYTECODE", None)
    kept |= {
        "PYTHONPATH": str(ROOT),
        "PYTHONPYCACHEPREFIX": str(folder / "compiled"),
        "CALCBOOK_CACHE": str(cache),
    }
    run = [python, "-m", "calcbook", "run", str(path), "--output", str(folder / "output")]
    seconds([python, str(Path(__file__)), "--record", str(path), str(calls)], kept)
    shutil.rmtree(cache)
    kinds = {
        "first run": run,
        "repeat run": run,
        "bare import": [python, "-c", BARE],
        "plain script": [python, "-c", PLAIN, str(calls)],
        "empty process": [python, "-c", "pass"],
    }
    for command in kinds.values():
        seconds(command, kept)  # files into memory, modules compiled
    taken: dict[str, list[tuple[float, float]]] = {kind: [] for kind in kinds}
    for _ in range(REPEATS):
        shutil.rmtree(cache)
        for kind, command in kinds.items():
            taken[kind].append(seconds(command, kept))
    count = len(json.loads(calls.read_text(encoding="utf-8")))
    for place, clock in enumerate(("wall", "processor")):
        best = {kind: min(times[place] for times in found) for kind, found in taken.items()}
        print(f"{clock}: " + ", ".join(f"{kind} {time:.2f} s" for kind, time in best.items()))
        print(
            f"  repeat run / bare import {best['repeat run'] / best['bare import']:.2f} (aim 0.35), first run /"
            f" plain script of the same {count} calls {best['first run'] / best['plain script']:.2f} (aim 1.3)"
        )


def main() -> None:
    if sys.argv[1:2] == ["--record"]:
        record_calls(Path(sys.argv[2]), Path(sys.argv[3]))
        return
    with tempfile.TemporaryDirectory() as folder:
        path = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(folder) / "cooler.yaml"
        if len(sys.argv) == 1:
            path.write_text(HEAD + COOLER, encoding="utf-8")
        measure(path.resolve(), Path(folder))


if __name__ == "__main__":
    main()
