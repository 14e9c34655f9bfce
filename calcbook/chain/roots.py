"""Whether a circuit with a film that changes phase closes at more than one heat flow.

The laws of such films step at the joints of their regimes. Where the coefficient steps up with the heat flux,
two heat flows can close one circuit. The figures of one record are laid out side by side at many heat flows
around the answer, and the excess of the summed drops over the whole difference is looked at: it rises through
zero once for each answer. Film boiling and transition boiling have no card: their answers are not among them.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from calcbook.chain.bracket import excess_at
from calcbook.chain.solve import Engine, Solution
from calcbook.chain.types import Chain, Group

Array = np.ndarray
# Half to twice the heat flow found, in steps of 0.5 %: the steps of published laws are 3 % and more.
REACH = 2.0
PLACES = 257
# Two answers nearer than one step of the scan are one.
SAME = 1.01


def changes_phase(chain: Chain) -> bool:
    """Whether any film of the chain condenses or boils by a method."""
    return any(
        branch.situation is not None and branch.situation.changes_phase
        for element in chain.elements
        if isinstance(element, Group)
        for branch in element.branches
    )


def other_heat_flows(
    chain: Chain, inputs: Mapping[str, Array], condition: str, solution: Solution
) -> tuple[float, ...]:
    """The heat flows other than the one found at which the circuit closes too, within half to twice of it."""
    if not chain.has_temperatures or not changes_phase(chain):
        return ()
    found = solution.number("solution/Q")
    flows = found * np.geomspace(1.0 / REACH, REACH, PLACES)
    laid_out = {name: np.full(PLACES, float(value)) for name, value in inputs.items()}
    with np.errstate(all="ignore"):
        engine = Engine(chain, laid_out, condition, {}, PLACES)
        engine.solve()
        excess = np.sign(found) * excess_at(engine, flows)
    rises = np.flatnonzero((excess[:-1] < 0.0) & (excess[1:] >= 0.0))
    parts = -excess[rises] / (excess[rises + 1] - excess[rises])
    roots = flows[rises] + parts * (flows[rises + 1] - flows[rises])
    return tuple(float(root) for root in roots if not 1.0 / SAME < root / found < SAME)
