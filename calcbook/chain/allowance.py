"""The largest resistance of each fouling term with which the installed area still carries the duty."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from calcbook.chain.solve import UNKNOWNS, Solution, solve
from calcbook.chain.types import SERVICE, Chain, Layer
from calcbook.chain.variants import with_figures

Array = np.ndarray
LARGEST_ALLOWANCE = "largest_allowance"
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


def largest_allowances(
    chain: Chain, inputs: Mapping[str, Array], service: Solution, thorough: bool = True
) -> dict[str, Array]:
    """Largest resistance on its own surface by term name, the others as stated, m² K/W, in the samples' shape.

    Terms that share a figure are joined by a comma. Where the duty is not carried even without the term, the figure is
    below zero: by so much the other resistances are too large.
    ``service`` is the solution of ``inputs``, which leave nothing open; ``thorough`` is that of ``solve``.
    """
    if "U required" not in chain.results:
        return {}
    return {
        ", ".join(layer.name for layer in layers): _largest(chain, inputs, service, figure, layers, thorough)
        for figure, layers in fouling_figures(chain).items()
    }


def _largest(
    chain: Chain,
    inputs: Mapping[str, Array],
    service: Solution,
    figure: str,
    layers: tuple[Layer, ...],
    thorough: bool,
) -> Array:
    """The figure at which U in service is what the duty asks for.

    Each pass gives the resistance that is still missing to the term; the films move little, so the passes close
    fast. A sample stops at its own answer.
    """
    shape = service.converged.shape
    size = service.converged.size

    def row(name: str) -> Array:
        return np.broadcast_to(service.figure(name).ravel(), (size,))

    needed, basis = row(chain.results["U required"]), row(chain.surfaces[chain.basis].area)
    # A rise of the figure by 1 raises the resistance on the basis area by this much.
    weight = sum((basis / row(chain.surfaces[layer.surface].area) for layer in layers), np.zeros(size))
    resistance, there = row(figure), row(chain.results["U"])
    result = np.full(size, np.nan)
    with np.errstate(all="ignore"):
        active = np.flatnonzero((needed > 0.0) & (there > 0.0))
    unknowns = None if service.unknowns is None else service.unknowns[:, active]
    resistance, there = resistance[active], there[active]
    for _ in range(MAXIMUM_PASSES):
        missing = (1.0 / needed[active] - 1.0 / there) / weight[active]
        agreed = np.abs(missing) * weight[active] * needed[active] <= AGREEMENT
        result[active[agreed]] = resistance[agreed]
        lacking = (resistance == 0.0) & (missing < 0.0)
        result[active[lacking]] = missing[lacking]
        going_on = np.isfinite(missing) & ~agreed & ~lacking
        active = active[going_on]
        if not len(active):
            break
        resistance = np.maximum(resistance + missing, 0.0)[going_on]
        part = {name: value[active] if np.ndim(value) else value for name, value in inputs.items()}
        one, given = with_figures(chain, part, {figure: resistance})
        solution = solve(
            one,
            given,
            SERVICE,
            keep=(chain.results["U"], UNKNOWNS),
            thorough=thorough,
            start=None if unknowns is None else unknowns[:, going_on],
        )
        there, unknowns = solution.figure(chain.results["U"]), solution.unknowns
    return result.reshape(shape)
