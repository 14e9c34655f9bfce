"""A chain whose methods may err: each film coefficient times a factor of its card, 1 where nothing is drawn.

A chain without factors prints and computes as before; the one with them has the same values at factor 1,
and slopes and samples in what the methods may be wrong by. A card that acts in two terms has one factor.
"""

from __future__ import annotations

from dataclasses import replace

from calcbook.chain.types import Branch, Candidate, Chain, ChainStep, Element, Gap, Group, Input, Layer
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
    """The films and ways across gaps whose coefficient a card gives, from the inside to the outside."""
    return tuple(branch for branch in chain.branches if branch.situation is not None)


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
    if isinstance(element, Group):
        return replace(element, branches=tuple(map(_branch, element.branches)))
    return _gapped(element, element.gap) if element.gap is not None else element


def _branch(branch: Branch) -> Branch:
    if branch.situation is None:
        return branch
    return replace(branch, candidates=tuple(_factored(branch, one) for one in branch.candidates))


def _gapped(layer: Layer, gap: Gap) -> Layer:
    """A gap whose joining steps take the coefficients of its methods times their factors."""
    ways = tuple(map(_branch, gap.ways))
    added: dict[str, ChainStep] = {}
    own: set[str] = set()
    for before, after in zip(gap.ways, ways, strict=True):
        for one, factored in zip(before.candidates, after.candidates, strict=True):
            own |= {step.id for step in one.steps}
            if factored is not one:
                added[one.coefficient] = factored.steps[-1]

    def joined(step: ChainStep) -> ChainStep:
        inputs = {symbol: added[name].id if name in added else name for symbol, name in step.inputs.items()}
        return step if step.id in own else replace(step, inputs=inputs)

    steps: list[ChainStep] = []
    for step in layer.steps:
        steps.append(joined(step))
        if step.id in added:
            steps.append(added[step.id])
    coefficients = tuple(added[name].id if name in added else name for name in gap.coefficients)
    return replace(layer, steps=tuple(steps), gap=replace(gap, ways=ways, coefficients=coefficients))


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
