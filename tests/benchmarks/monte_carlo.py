"""A million samples of the cooler's uncertainty beside the same sampling written out in numpy by hand.

Run with `python tests/benchmarks/monte_carlo.py`. Both sides draw flow, film, both temperatures and the
factor of the method, close the wall temperatures to rounding in every sample with the same curves, and end
with mean, standard uncertainty and a 95 % interval of U in service. The engine draws by the rules of JCGM 101
(a stream per figure and block, inverse laws) and counts the samples that leave a limit. Prints seconds of the
processor, the ratio engine / by hand, how far the intervals lie apart, and the memory at its highest.
"""

from __future__ import annotations

import resource
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent / "chain"))

from million_samples import FACTOR, ByHand
from small_calculations import COOLER, chain_of

from calcbook.chain.factors import with_factors
from calcbook.chain.measured import Measured, measured
from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import Chain
from calcbook.faults import Collector
from calcbook.uncertainty.figures import method_figures, stated_figures
from calcbook.uncertainty.samples import ChainModel
from calcbook.uncertainty.sampling import MOST_TRIALS, Drawn, propagate

Result = TypeVar("Result")
REPEATS = 3
TOLERANCES = {"m_hot": "2 %", "T_hot": "0.5 K", "T_cold": "0.5 K", "h_o": "20 %"}


def body() -> str:
    """The cooler with tolerances."""
    lines = []
    for line in COOLER.splitlines():
        symbol = line.strip().partition(":")[0]
        if symbol in TOLERANCES and "value:" in line:
            line = line.replace("source: test", f"source: test, tolerance: {TOLERANCES[symbol]}")
        lines.append(line)
    return "\n".join(lines) + "\n"


def seconds(work: Callable[[], Result]) -> tuple[Result, float]:
    """The result of some work and the processor time it took, which other programs disturb least."""
    start = time.process_time()
    result = work()
    return result, time.process_time() - start


def cooler() -> tuple[Chain, dict[str, Solution], list[Drawn], Measured]:
    """The chain with factors, its solution in service, what is drawn, and U in service."""
    with tempfile.TemporaryDirectory() as folder:
        chain = with_factors(chain_of(Path(folder), body()))
    solutions = {"service": solve(chain, chain.case_inputs(""), "service")}
    factors = [one for one in method_figures(chain, solutions)[0] if one.id == FACTOR]
    drawn = [Drawn(one.id, one.distribution) for one in (*stated_figures(chain, Collector()), *factors)]
    overall = measured(chain, "U_service")
    assert overall is not None
    return chain, solutions, drawn, overall


def by_hand(base: dict[str, np.ndarray], count: int) -> tuple[float, float, float, float]:
    """Draws, U and its interval over all samples at once, as one would write it in an afternoon."""
    draw = np.random.default_rng(20261201)
    x = dict(base)
    for name, tolerance in TOLERANCES.items():
        value = base[f"given/{name}"]
        width = 0.5 if "K" in tolerance else float(tolerance.removesuffix(" %")) / 100.0 * value
        x[f"given/{name}"] = draw.uniform(value - width, value + width, count)
    x[FACTOR] = draw.normal(1.0, 0.20 / 1.6449, count)
    overall = ByHand(float(base["given/p_hot"])).overall(x)
    low, high = np.quantile(overall, [0.025, 0.975])
    return float(overall.mean()), float(overall.std(ddof=1)), float(low), float(high)


def main() -> None:
    chain, solutions, drawn, overall = cooler()
    base = chain.case_inputs("")
    for title, limits in (("", False), (", limits watched", True)):
        model = ChainModel(chain, base, solutions, [overall], limits=limits)
        # Two digits are more than a million samples give: the sampling goes on to the most trials.
        engine_times, hand_times = [], []
        for _ in range(REPEATS):
            hand, hand_time = seconds(lambda: by_hand(base, MOST_TRIALS))
            found, engine_time = seconds(lambda model=model: propagate(model, drawn, 0.95, 2))
            engine_times.append(engine_time)
            hand_times.append(hand_time)
        y = found.intervals["U_service"]
        print(
            f"{found.trials} samples in {found.blocks} blocks{title}: engine {min(engine_times):.2f} s, by hand"
            f" {min(hand_times):.2f} s (least of {REPEATS}), ratio {min(engine_times) / min(hand_times):.2f};"
            f" answered {found.answered}"
        )
        print(
            f"  mean {y.mean:.2f} and {hand[0]:.2f}, standard uncertainty {y.standard:.3f} and {hand[1]:.3f},"
            f" interval {y.low:.2f} to {y.high:.2f} and {hand[2]:.2f} to {hand[3]:.2f} W/(m² K)"
        )
    print(f"highest memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MiB")


if __name__ == "__main__":
    main()
