"""One record as the engineer runs it: whole processes, the first run and a repeat, beside a bare import.

Run with `python tests/benchmarks/one_record.py [file]`. The first run starts with an empty cache folder.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent.parent / "chain"))

from small_calculations import COOLER, HEAD

REPEATS = 5


def seconds(command: list[str], environment: dict[str, str]) -> float:
    """Wall time of a whole process; raises when it fails."""
    start = time.perf_counter()
    done = subprocess.run(command, env=environment, capture_output=True, text=True)
    if done.returncode != 0:
        raise SystemExit(f"{' '.join(command)} ended with {done.returncode}:\n{done.stdout}{done.stderr}")
    return time.perf_counter() - start


def main() -> None:
    with tempfile.TemporaryDirectory() as folder:
        path = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(folder) / "cooler.yaml"
        if len(sys.argv) == 1:
            path.write_text(HEAD + COOLER, encoding="utf-8")
        environment = {**os.environ, "CALCBOOK_CACHE": str(Path(folder) / "cache")}
        run = [sys.executable, "-m", "calcbook", "run", str(path), "--output", str(Path(folder) / "output")]
        bare = [sys.executable, "-c", "import CoolProp.CoolProp"]
        seconds(bare, environment)  # files of the package into memory
        first = seconds(run, environment)
        repeats = [seconds(run, environment) for _ in range(REPEATS)]
        imports = [seconds(bare, environment) for _ in range(REPEATS)]
        empty = [seconds([sys.executable, "-c", "pass"], environment) for _ in range(REPEATS)]
    print(f"first run {first:.2f} s, repeat {statistics.median(repeats):.2f} s (median of {REPEATS})")
    print(
        f"import of the property backend alone {statistics.median(imports):.2f} s,"
        f" empty process {statistics.median(empty):.2f} s"
    )


if __name__ == "__main__":
    main()
