"""Petroleum liquids: a fluid whose density, heat capacity and conductivity are the relations of cards.

The cards take the relative density and the temperature; what they print is what is computed. Viscosity is
the engineer's, by ASTM D341 through two points.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from calcbook import properties
from calcbook.calcfile.calculation import FluidText
from calcbook.chain.scope import Scope
from calcbook.chain.types import ChainCheck, StreamState
from calcbook.library import Library, Program
from calcbook.library.programs import need_value
from calcbook.properties import Fluid, ViscosityLaw

Array = np.ndarray

# The card behind each property.
CARDS = {
    "density": "petroleum-density-d1250",
    "heat capacity": "petroleum-heat-capacity-cragoe-1929",
    "conductivity": "petroleum-conductivity-cragoe-1929",
}
# The word of the density card for each product of the file; the first where none is stated.
PRODUCTS = {
    "crude oil": "crude",
    "gasoline": "gasoline",
    "kerosene": "kerosene",
    "fuel oil": "fuel",
    "lubricating oil": "lubricating",
}
# K. The cards' own limits are checks at the bulk; beyond this span, from waxy solids to cracking, there are
# no values at all (common practice).
SPAN = (233.15, 673.15)


@dataclass(frozen=True)
class CardColumn:
    """A property by the relations of a card, against temperature; the other needs are fixed."""

    program: Program
    fixed: Mapping[str, Array]

    def value(self, at: Array) -> Array:
        return self._run(at)[0]

    def slope(self, at: Array) -> Array:
        return self._run(at)[1]

    def _run(self, at: Array) -> tuple[Array, Array]:
        """The result and its derivative, step by step from the relations' own trees."""
        values: dict[str, Array] = {name: np.asarray(value) for name, value in self.program.constants.items()}
        values |= {**self.fixed, "T": at}
        slopes = {"T": np.ones_like(at)}
        for step in self.program.steps:
            arguments = {symbol: values[bound] for symbol, bound in step.inputs.items()}
            value = step.operation.value(arguments)
            moving = [symbol for symbol, bound in step.inputs.items() if bound in slopes]
            partial = step.operation.slopes(arguments, value, moving)
            values[step.name] = value
            if moving:
                slopes[step.name] = sum(
                    (partial[symbol] * slopes[step.inputs[symbol]] for symbol in moving), np.zeros_like(at)
                )
        return values[self.program.result], slopes[self.program.result]


def petroleum(library: Library, text: FluidText, law: ViscosityLaw | None) -> Callable[[float | None], Fluid]:
    """What makes the fluid of a relative density."""
    programs = {name: library.program(card) for name, card in CARDS.items()}
    word = PRODUCTS[text.product or next(iter(PRODUCTS))]
    provider = "; ".join(f"{name} by {card}" for name, card in CARDS.items())
    if law is not None:
        provider += "; viscosity by ASTM D341 from two points in the calculation file, times the density"

    def make(relative_density: float | None) -> Fluid:
        columns = {}
        for name, program in programs.items():
            fixed = {"d": np.asarray(relative_density, dtype=float)}
            fixed |= {need.name: need_value(need.need, word) for need in program.needs if need.need.one_of}
            columns[name] = CardColumn(program, fixed)
        return properties.related(columns, SPAN, law=law, name=text.name, provider=provider)

    return make


def lay_out_cards(scope: Scope, library: Library, streams: Mapping[str, StreamState]) -> list[ChainCheck]:
    """The cards of petroleum streams in the calculation: their digest, and their limits at the bulk."""
    checks = []
    for state in streams.values():
        if state.fluid.text.kind != "petroleum":
            continue
        owner = f"stream {state.name}"
        if not state.fluid.text.product:
            scope.assume(
                f"{owner}/product",
                f"{state.name} expands like {next(iter(PRODUCTS))}.",
                "no product is stated with its relative density",
                owner,
            )
        for card in (library.method(name) for name in CARDS.values()):
            scope.cards[f"method {card.id}"] = card.digest_text
            names = {"d": state.fraction, "T": state.temperature}
            for symbol, (value, _, dim) in card.constants.items():
                names[symbol] = scope.constant(f"{owner}/{card.id}/{symbol}", np.asarray(value), dim)
            checks += [
                ChainCheck(
                    f"{owner} / {card.id} / {limit.id}",
                    owner,
                    card.id,
                    limit,
                    {symbol: names[symbol] for symbol in limit.that.symbols},
                )
                for limit in card.limits
            ]
    return checks
