"""Time of a comparison with twelve changes, as a ratio to one evaluation of its calculation.

Twelve changes are 4096 subsets, in service only. Run it by hand: `python tests/benchmarks/comparison.py`. It
prints and asserts nothing about time: machines differ. Two evaluations stand beside it: the circuit closed once in
one condition, and the calculation evaluated as a record needs it (both conditions, every case, checks,
cross-check, sensitivity). Times are processor time, the shortest of several.
"""

from __future__ import annotations

import re
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

from calcbook.chain.analysis import analyse
from calcbook.chain.solve import solve
from calcbook.chain.types import SERVICE
from calcbook.faults import Collector
from calcbook.revisions.attribution import _every_subset, _Game, attribute
from calcbook.revisions.changes import changes_between
from calcbook.revisions.comparison import compare
from calcbook.revisions.mixtures import Mixer
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
    """The shortest of several runs, in seconds of processor time; the machine is shared."""
    times = []
    for _ in range(REPEATS):
        start = time.process_time()
        work()
        times.append(time.process_time() - start)
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
    record = best(lambda: analyse(chain, Collector()))
    game = _Game(Mixer(old, new, [change for change in changes if change.moves]), ("U_service",))
    game.played()
    subsets = _every_subset(len(game.blocks))
    values = best(lambda: game._values(subsets))
    parts = best(lambda: attribute(old, new, changes, ("U_service",)))
    whole = best(lambda: compare(old, new))
    (found,) = attribute(old, new, changes, ("U_service",))
    print(f"eleven figures and {words}: {found.evaluations} evaluations, {found.structures} structures")
    print(f"  closing the circuit once {1e3 * one:.2f} ms; evaluating the calculation {1e3 * record:.1f} ms")
    for name, time_taken in (("the subsets alone", values), ("the parts", parts), ("the whole", whole)):
        print(
            f"  {name} {1e3 * time_taken:.0f} ms: {time_taken / one:.1f} times closing the circuit,"
            f" {time_taken / record:.1f} times evaluating the calculation (aim 5)"
        )


def main() -> None:
    measure("another wall material", True)
    measure("another basis of U", False)


if __name__ == "__main__":
    main()
