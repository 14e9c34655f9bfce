"""Other methods in place of a film's own: the circuit closed once more with each of them, in service."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import (
    SERVICE,
    Branch,
    Candidate,
    Chain,
    Group,
    following_elements,
    follows_temperature,
)


def alternatives(
    chain: Chain,
    branch: Branch,
    others: Sequence[Candidate],
    inputs: Mapping[str, np.ndarray],
    own: Solution,
) -> list[Solution]:
    """The solution of a case with each candidate in place of a film's own; ``own`` is that with its own.

    ``inputs`` are those of the case, as the file states them.

    Those that follow the temperature of the surface are closed together, a sample each, so that all they
    share is evaluated once. A sample's answer does not depend on its neighbours.
    """
    follow = [needs_temperatures(chain, branch, other) for other in others]
    together = [other for other, follows in zip(others, follow, strict=True) if follows]
    solved = iter(_together(chain, branch, together, inputs, own)) if together else iter(())
    return [
        next(solved) if follows else solve(chain, inputs, SERVICE, {branch.name: other})
        for other, follows in zip(others, follow, strict=True)
    ]


def needs_temperatures(chain: Chain, branch: Branch, candidate: Candidate) -> bool:
    """Whether a candidate put in place of a film's own follows the temperature of the surface."""
    return follows_temperature(_group_of(chain, branch), {branch.name: candidate})


def _group_of(chain: Chain, branch: Branch) -> Group:
    return next(group for group in (chain.inner, chain.outer) if branch in group.branches)


def _together(
    chain: Chain,
    branch: Branch,
    others: Sequence[Candidate],
    inputs: Mapping[str, np.ndarray],
    own: Solution,
) -> list[Solution]:
    """One call for all: a film whose candidates are the others, each chosen for a sample of its own.

    Where the case closed with as many moving elements, the circuits are begun from there.
    """
    group = _group_of(chain, branch)
    film = replace(branch, candidates=tuple(others), choice=())
    changed = replace(group, branches=tuple(film if one is branch else one for one in group.branches))
    elements = tuple(changed if element is group else element for element in chain.elements)
    first = next(iter(inputs))
    inputs = {**inputs, first: np.full(len(others), float(inputs[first]))}
    changed_chain = replace(chain, elements=elements)
    is_near = following_elements(changed_chain) == following_elements(chain)
    solution = solve(
        changed_chain,
        inputs,
        SERVICE,
        choices={branch.name: np.arange(len(others))},
        start=own.unknowns_for(len(others)) if is_near else None,
    )
    return [solution.sample(number) for number in range(len(others))]
