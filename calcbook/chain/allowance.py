"""The largest resistance of each fouling term with which the installed area still carries the duty."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import SERVICE, Chain, Layer
from calcbook.chain.variants import with_figures

Array = np.ndarray
MAXIMUM_PASSES = 40
# The resistance that remains to be found, relative to that which the duty allows in all.
AGREEMENT = 1e-13


def fouling_figures(chain: Chain) -> dict[str, tuple[Layer, ...]]:
    """The fouling terms by the id of their resistance: terms that share a figure move together."""
    shared: dict[str, tuple[Layer, ...]] = {}
    for element in chain.elements:
        if isinstance(element, Layer) and element.kind == "fouling":
            shared[element.resistance] = (*shared.get(element.resistance, ()), element)
    return shared


def largest_allowances(chain: Chain, inputs: Mapping[str, Array], service: Solution) -> dict[str, float]:
    """Largest resistance on its own surface by term name, the others as stated, m² K/W.

    Terms that share a figure are joined by a comma. NaN where the duty is not carried even without the term.
    """
    if "U required" not in chain.results:
        return {}
    return {
        ", ".join(layer.name for layer in layers): _largest(chain, inputs, service, figure, layers)
        for figure, layers in fouling_figures(chain).items()
    }


def _largest(
    chain: Chain, inputs: Mapping[str, Array], service: Solution, figure: str, layers: tuple[Layer, ...]
) -> float:
    """The figure at which U in service is what the duty asks for.

    Each pass gives the resistance that is still missing to the term; the films move little, so the passes close
    fast.
    """
    needed = service.number(chain.results["U required"])
    basis = service.number(chain.surfaces[chain.basis].area)
    # A rise of the figure by 1 raises the resistance on the basis area by this much.
    weight = sum(basis / service.number(chain.surfaces[layer.surface].area) for layer in layers)
    resistance, there = service.number(figure), service.number(chain.results["U"])
    if not needed > 0.0 or not there > 0.0:
        return math.nan
    for _ in range(MAXIMUM_PASSES):
        missing = (1.0 / needed - 1.0 / there) / weight
        if abs(missing) * weight * needed <= AGREEMENT:
            return resistance
        resistance = max(resistance + missing, 0.0)
        one, given = with_figures(chain, inputs, {figure: np.asarray(resistance)})
        solution = solve(one, given, SERVICE, keep=(chain.results["U"],))
        there = solution.number(chain.results["U"])
        if not math.isfinite(there) or (resistance == 0.0 and there < needed):
            return math.nan
    return math.nan
