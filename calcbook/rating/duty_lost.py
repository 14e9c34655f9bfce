"""The time in service at which the duty is lost, at many samples of a calculation."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from calcbook.chain.solve import solve
from calcbook.chain.types import SERVICE, Chain
from calcbook.chain.variants import with_figures

Array = np.ndarray
# The margin is looked at after so many steps of the time, then between two of them. A time is known this well.
STEPS = 12
KNOWN = 1e-12


def times_until_lost(chain: Chain, inputs: Mapping[str, Array], until: Array) -> Array:
    """Where the margin of area over the duty first comes to nothing, s, at every sample.

    ``inputs`` leave open what the chain finds; ``until`` is a row of times to look up to. Infinite where the duty is
    carried as long as that, minus infinite where the cleaned unit does not carry it, NaN where a circuit on the way
    does not close.
    """
    everyone = np.arange(len(until))
    steps = np.linspace(0.0, 1.0, STEPS + 1)
    margins = _margins(chain, inputs, np.outer(until, steps).ravel(), np.repeat(everyone, len(steps)))
    table = margins.reshape(len(until), -1)
    found = np.where(table[:, 0] <= 0.0, -np.inf, np.inf)
    lost = ~(table > 0.0)
    first = lost.argmax(axis=1)
    found[lost.any(axis=1) & np.isnan(table[everyone, first])] = np.nan
    active = np.flatnonzero(np.isposinf(found) & lost.any(axis=1))
    if not len(active):
        return found
    from scipy.optimize import elementwise

    def margin(part: Array, *others: Array) -> Array:
        (numbers,) = others
        samples = numbers.astype(int)
        return _margins(chain, inputs, part * until[samples], samples)

    between = elementwise.find_root(
        margin,
        (steps[first[active] - 1], steps[first[active]]),
        args=(active.astype(float),),
        tolerances={"xatol": 0.0, "xrtol": KNOWN, "fatol": 0.0, "frtol": 0.0},
    )
    found[active] = np.where(between.success, between.x * until[active], np.nan)
    return found


def carried_until(chain: Chain, inputs: Mapping[str, Array], times: Array) -> Array:
    """Whether the duty is carried at a time of every sample, as what may be compared with it: infinite where it is, minus
    infinite where it is lost by then, NaN where the circuit does not close. Fouling only grows on the way there."""
    margins = _margins(chain, inputs, times, np.arange(len(times)))
    return np.where(np.isnan(margins), np.nan, np.where(margins > 0.0, np.inf, -np.inf))


def _margins(chain: Chain, inputs: Mapping[str, Array], times: Array, samples: Array) -> Array:
    """The margin of some samples at times since the cleaning of every growing term; NaN without an answer."""
    margin = chain.results["area margin"]
    chosen = {name: value[samples] if np.ndim(value) else value for name, value in inputs.items()}
    one, given = with_figures(chain, chosen, {item.time: times for item in chain.growing})
    solution = solve(one, given, SERVICE, keep=(margin,), thorough=False)
    return np.where(solution.converged, solution.row(margin), np.nan)
