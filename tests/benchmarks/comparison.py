"""Time of a comparison with twelve changes, as a ratio to one evaluation of its calculation.

Twelve changes are 4096 subsets, in service only. Run it by hand: `python tests/benchmarks/comparison.py`. It
prints and asserts nothing about time: machines differ.
"""

from __future__ import annotations

import re
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

from calcbook.chain.solve import solve
from calcbook.chain.types import SERVICE
from calcbook.revisions.attribution import attribute
from calcbook.revisions.changes import changes_between
from calcbook.revisions.comparison import compare
from calcbook.revisions.sides import load_side

EXAMPLE = Path(__file__).resolve().parents[2] / "calcs" / "wc-101.yaml"
EDITS = {
    "d_i": "15.8 mm",
    "d_o": "19.1 mm",
    "L": "4.9 m",
    "N": "60",
    "m_hot": "18.5 kg/s",
    "T_hot": "73 degC",
    "T_cold": "30 degC",
    "R_fi": "0.0001 m^2 K/W",
    "R_fo": "0.0004 m^2 K/W",
    "h_o": "5000 W/(m^2 K)",
}
REPEATS = 7


def edited(text: str, with_material: bool) -> str:
    """Ten givens, the pressure and either the material of the wall or the basis of U: twelve changes."""
    for symbol, value in EDITS.items():
        text = re.sub(rf"(\n  {symbol}: *{{value: )[^,]+,", rf"\g<1>{value},", text, count=1)
    text = text.replace("4 bara", "5 bara")
    if with_material:
        return text.replace("stainless-316-kaschnitz-2017", "stainless-316-mills-2002")
    return text.replace("U on: outside ", "U on: inside ")


def best(work: Callable[[], object]) -> float:
    """The shortest of several runs, in seconds; the machine is shared."""
    times = []
    for _ in range(REPEATS):
        start = time.perf_counter()
        work()
        times.append(time.perf_counter() - start)
    return min(times)


def measure(words: str, with_material: bool) -> None:
    """Print the times of one evaluation, of the parts alone and of the whole comparison, and their ratios."""
    text = EXAMPLE.read_text(encoding="utf-8")
    with tempfile.TemporaryDirectory() as folder:
        files = {"old.yaml": text, "new.yaml": edited(text, with_material)}
        for name, content in files.items():
            (Path(folder) / name).write_text(content, encoding="utf-8")
        old, new = (load_side(name, Path(folder), Path(folder)) for name in files)
    changes = changes_between(old, new)
    chain = old.solved.chain
    one = best(lambda: solve(chain, chain.case_inputs(""), SERVICE))
    parts = best(lambda: attribute(old, new, changes, ("U_service",)))
    whole = best(lambda: compare(old, new))
    (found,) = attribute(old, new, changes, ("U_service",))
    print(f"eleven figures and {words}: {found.evaluations} evaluations, {found.structures} structures")
    print(f"  one evaluation {1e3 * one:.2f} ms")
    print(f"  the parts {1e3 * parts:.0f} ms, {parts / one:.0f} times one evaluation")
    print(f"  the whole comparison {1e3 * whole:.0f} ms, {whole / one:.0f} times one evaluation")


def main() -> None:
    measure("another wall material", True)
    measure("another basis of U", False)


if __name__ == "__main__":
    main()
