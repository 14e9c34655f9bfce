"""Properties for samples whose pressure or mixture fraction varies: linear in both about the stated state.

A fluid at a pressure is a set of curves along temperature: samples that each have their own pressure would
ask for as many sets. Within a tolerance properties are straight in pressure and fraction (a gas's density is,
and a liquid hardly moves), so the curves of the stated state and their slopes answer for all samples.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

import numpy as np

from calcbook.chain.fluids import LiquidOperation, PropertyOperation
from calcbook.chain.types import Branch, Candidate, Chain, ChainStep, Element, Group

Array = np.ndarray


@dataclass(frozen=True)
class AboutState:
    """A property of a fluid, or its being a liquid, about the stated pressure and fraction."""

    operation: PropertyOperation | LiquidOperation
    stated: Mapping[str, float]

    @property
    def symbols(self) -> tuple[str, ...]:
        return self.operation.symbols

    def value(self, arguments: Mapping[str, Array]) -> Array:
        there = self._there(arguments)
        value = self.operation.value(there)
        if isinstance(self.operation, LiquidOperation):
            return value
        for symbol, stated in self.stated.items():
            moved = arguments[symbol] - stated
            if np.any(moved):
                value = value + self.operation.slopes(there, value, (symbol,))[symbol] * moved
        return value

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        return self.operation.slopes(self._there(arguments), value, wanted)

    def _there(self, arguments: Mapping[str, Array]) -> dict[str, Array]:
        return {**arguments, **{symbol: np.asarray(value) for symbol, value in self.stated.items()}}


def about_state(chain: Chain, values: Mapping[str, Array]) -> Chain:
    """The chain with properties about the state of a record, whose figures by id are ``values``."""

    def of(step: ChainStep) -> ChainStep:
        if not isinstance(step.operation, PropertyOperation | LiquidOperation):
            return step
        stated: dict[str, float] = {
            symbol: float(np.asarray(values[step.inputs[symbol]]).ravel()[0])
            for symbol in ("p", "w")
            if symbol in step.operation.symbols and step.inputs[symbol] in values
        }
        return replace(step, operation=AboutState(step.operation, stated)) if stated else step

    def all_of(steps: tuple[ChainStep, ...]) -> tuple[ChainStep, ...]:
        return tuple(of(step) for step in steps)

    def candidate(one: Candidate) -> Candidate:
        return replace(one, steps=all_of(one.steps))

    def branch(one: Branch) -> Branch:
        return replace(
            one,
            candidates=tuple(map(candidate, one.candidates)),
            choice_steps=all_of(one.choice_steps),
        )

    def element(one: Element) -> Element:
        if isinstance(one, Group):
            return replace(one, branches=tuple(map(branch, one.branches)))
        return replace(one, steps=all_of(one.steps))

    return replace(
        chain,
        steps=all_of(chain.steps),
        circuit=all_of(chain.circuit),
        elements=tuple(map(element, chain.elements)),
    )
