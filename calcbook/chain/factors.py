"""A chain whose methods may err: each film coefficient times a factor of its card, 1 where nothing is drawn.

A chain without factors prints and computes as before; the one with them has the same values at factor 1,
and slopes and samples in what the methods may be wrong by. A card that acts in two terms has one factor.
"""

from __future__ import annotations

from dataclasses import replace

from calcbook.chain.types import Branch, Candidate, Chain, ChainStep, Element, Group, Input
from calcbook.formulas import parse_expression
from calcbook.library import vocabulary
from calcbook.library.cards import Method
from calcbook.library.operations import RelationOperation
from calcbook.quantities import DIMENSIONLESS

FACTOR = "factor/"
RELATION = "B*h_card"


def factor_of(method: Method) -> str:
    """The id of the input that stands for the accuracy of a card."""
    return FACTOR + method.id


def films_of(chain: Chain) -> tuple[Branch, ...]:
    """The films whose coefficient a card gives, from the inside to the outside."""
    return tuple(
        branch
        for group in (chain.inner, chain.outer)
        for branch in group.branches
        if branch.situation is not None
    )


def with_factors(chain: Chain) -> Chain:
    """The chain with the input ``factor/<card>`` in front of every film coefficient that a card gives."""
    inputs = dict(chain.inputs)
    for branch in films_of(chain):
        for candidate in branch.candidates:
            name = factor_of(candidate.method)
            inputs[name] = _input(name, candidate.method)
    names = {name: DIMENSIONLESS for name in inputs if name.startswith(FACTOR)}
    return replace(
        chain,
        inputs=inputs,
        elements=tuple(_element(element) for element in chain.elements),
        dimensions={**chain.dimensions, **names},
    )


def _input(name: str, method: Method) -> Input:
    kind = vocabulary()["ratio"]
    title = f"factor on the coefficient of {method.id}"
    return Input(name, "B", title, kind, 1.0, "1", "accuracy of the card", method.where, False)


def _element(element: Element) -> Element:
    if not isinstance(element, Group):
        return element
    branches = tuple(
        replace(branch, candidates=tuple(_factored(branch, one) for one in branch.candidates))
        if branch.situation is not None
        else branch
        for branch in element.branches
    )
    return replace(element, branches=branches)


def _factored(branch: Branch, candidate: Candidate) -> Candidate:
    """A candidate with one more step, its coefficient times the factor of its card."""
    method = candidate.method
    step = ChainStep(
        f"{branch.name}/{method.id}/B*h",
        "h",
        "film coefficient times the factor of its card",
        vocabulary()["film coefficient"],
        branch.name,
        RelationOperation(parse_expression(RELATION)),
        {"B": factor_of(method), "h_card": candidate.coefficient},
        method.id,
    )
    return replace(candidate, steps=(*candidate.steps, step), coefficient=step.id)
