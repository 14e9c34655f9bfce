"""Other methods in place of a film's own: the circuit closed once more with each of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import NamedTuple

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


class Alternative(NamedTuple):
    """A candidate in place of a film's own: ``inputs`` of the case as the file states them, ``own`` its solution."""

    candidate: Candidate
    inputs: Mapping[str, np.ndarray]
    own: Solution


def alternatives(
    chain: Chain, branch: Branch, others: Sequence[Alternative], condition: str = SERVICE
) -> list[Solution]:
    """The solution of a case with each candidate in place of a film's own, in one condition.

    Those that follow the temperature of the surface are closed together, a sample each, so that all they
    share is evaluated once. A sample's answer does not depend on its neighbours.
    """
    follow = [needs_temperatures(chain, branch, other.candidate) for other in others]
    together = [other for other, follows in zip(others, follow, strict=True) if follows]
    solved = iter(_together(chain, branch, together, condition)) if together else iter(())
    return [
        next(solved) if follows else solve(chain, other.inputs, condition, {branch.name: other.candidate})
        for other, follows in zip(others, follow, strict=True)
    ]


def needs_temperatures(chain: Chain, branch: Branch, candidate: Candidate) -> bool:
    """Whether a candidate put in place of a film's own follows the temperature of the surface."""
    return follows_temperature(_group_of(chain, branch), {branch.name: candidate})


def _group_of(chain: Chain, branch: Branch) -> Group:
    return next(group for group in (chain.inner, chain.outer) if branch in group.branches)


def _together(chain: Chain, branch: Branch, others: Sequence[Alternative], condition: str) -> list[Solution]:
    """One call for all: a film whose candidates are the others, each chosen for a sample of its own.

    Where the cases closed with as many moving elements, the circuits are begun from there.
    """
    group = _group_of(chain, branch)
    candidates = {id(other.candidate): other.candidate for other in others}
    film = replace(branch, candidates=tuple(candidates.values()), choice=())
    changed = replace(group, branches=tuple(film if one is branch else one for one in group.branches))
    elements = tuple(changed if element is group else element for element in chain.elements)
    changed_chain = replace(chain, elements=elements)
    places = {key: place for place, key in enumerate(candidates)}
    is_near = following_elements(changed_chain) == following_elements(chain)
    starts = [other.own.unknowns for other in others if other.own.unknowns is not None]
    solution = solve(
        changed_chain,
        _rows([other.inputs for other in others]),
        condition,
        choices={branch.name: np.array([places[id(other.candidate)] for other in others])},
        start=np.column_stack(starts) if is_near else None,
    )
    return [solution.sample(number) for number in range(len(others))]


def _rows(inputs: Sequence[Mapping[str, np.ndarray]]) -> dict[str, np.ndarray]:
    """The inputs of several cases as one: a row of samples for what differs, and for the first figure in any case."""
    rows = {name: np.array([float(one[name]) for one in inputs]) for name in inputs[0]}
    first = next(iter(rows))
    return {name: row if name == first or (row != row[0]).any() else row[0] for name, row in rows.items()}
