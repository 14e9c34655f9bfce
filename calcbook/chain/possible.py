"""Figures of a solved chain that their quantity cannot have: a flow area below zero, a share above one.

What a file states is refused as it is read; what follows from it is looked at here, so that no number rests on it.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from calcbook.chain.solve import Solution
from calcbook.chain.types import Chain, ChainStep, Group, Layer

Array = np.ndarray
# Rounding of a figure by itself, and of a difference that is nothing.
ROUNDING, NOTHING = 1e-9, 1e-15
# A branch and the number of the candidate that takes a step.
Use = tuple[str, int]


def impossible_steps(chain: Chain, solution: Solution) -> Iterator[tuple[ChainStep, Array]]:
    """The steps, in order, that have a value which their quantity cannot have, and the samples in which they do.

    A step of a method counts in the samples that use it; a figure without a value is told elsewhere.
    """
    for step, uses in _bounded(chain):
        value = solution.values.get(step.id)
        if value is None or step.kind is None:
            continue
        figures = np.asarray(value, dtype=float)
        wrong = np.isfinite(figures) & ~_allowed(step, figures)
        if wrong.any() and uses:
            wrong = wrong & np.logical_or.reduce([_is_used(use, solution) for use in uses])
        if wrong.any():
            yield step, wrong


def _allowed(step: ChainStep, figures: Array) -> Array:
    kind = step.kind
    assert kind is not None, "only steps of a known quantity are looked at"
    found = kind.allowed(figures)
    if np.all(found):
        return np.asarray(found)
    rounded = kind.allowed(figures * (1.0 + ROUNDING)) | kind.allowed(figures * (1.0 - ROUNDING))
    return np.asarray(found | rounded | ((np.abs(figures) < NOTHING) & (kind.sign != "positive")))


def _is_used(use: Use, solution: Solution) -> Array:
    branch, number = use
    return np.asarray(solution.chosen[branch] == number if branch in solution.chosen else True)


def _bounded(chain: Chain) -> tuple[tuple[ChainStep, tuple[Use, ...]], ...]:
    """The steps whose quantity has a sign or a bound, each with the candidates that take it (none: always)."""
    known = chain.memory.get(impossible_steps)
    if known is None:
        # Rows of the circuit refer one side's heat to the other's difference and may have any sign.
        always = [*chain.steps]
        always += [step for element in chain.elements if isinstance(element, Layer) for step in element.steps]
        found: dict[str, tuple[ChainStep, tuple[Use, ...]]] = {step.id: (step, ()) for step in always}
        for element in chain.elements:
            for branch in element.branches if isinstance(element, Group) else ():
                for number, candidate in enumerate(branch.candidates):
                    for step in candidate.steps:
                        one, uses = found.get(step.id, (step, None))
                        if uses != ():
                            found[step.id] = (one, (*(uses or ()), (branch.name, number)))
        known = tuple(pair for pair in found.values() if _has_bound(pair[0]))
        chain.memory[impossible_steps] = known
    return known


def _has_bound(step: ChainStep) -> bool:
    kind = step.kind
    return kind is not None and bool(kind.sign != "any" or kind.least or kind.most or kind.scale == "point")
