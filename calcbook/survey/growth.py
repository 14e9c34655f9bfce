"""A growth model as its card gives it: fouling resistance over time, with the slopes of the card's own relations."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from calcbook.faults import Collector, Faults, Place, shown
from calcbook.formulas import write
from calcbook.library import Library
from calcbook.library.cards import Assignment, Method, Need
from calcbook.library.operations import Slopes, run
from calcbook.library.programs import Program
from calcbook.quantities import unit_factor

Array = np.ndarray
ONE = np.ones(())
RESISTANCE = unit_factor("m^2 K/W")[1]
TIME = unit_factor("s")[1]
SERVICE_TIME = "service time"


@dataclass(frozen=True)
class GrowthModel:
    """A card that gives a fouling resistance over the service time; every other need is a parameter.

    ``time`` is the symbol of the service time; ``held`` are the parameters that are not fitted, with the value
    at which they stay.
    """

    program: Program
    time: str
    parameters: tuple[Need, ...]
    held: Mapping[str, float]

    @property
    def card(self) -> Method:
        return self.program.method

    @property
    def symbols(self) -> tuple[str, ...]:
        return tuple(need.symbol for need in self.parameters)

    @property
    def relation(self) -> str:
        """The relations of the card, as text."""
        lines = (line for line in self.card.lines if isinstance(line, Assignment))
        return "; ".join(f"{line.symbol} = {write(line.relation)}" for line in lines)

    def holding(self, held: Mapping[str, float]) -> GrowthModel:
        """The model with further parameters held."""
        rest = tuple(need for need in self.parameters if need.symbol not in held)
        return GrowthModel(self.program, self.time, rest, {**self.held, **held})

    def value(self, parameters: Array, times: Array) -> Array:
        """The fouling resistance at times since cleaning (s, any shape), m² K/W."""
        values = self._bound(parameters, times)
        run(self.program.steps, values)
        return np.broadcast_to(values[self.program.result], np.shape(times))

    def value_and_slopes(self, parameters: Array, times: Array) -> tuple[Array, Array]:
        """The resistance (n), and its slopes in each parameter (parameters by n)."""
        values = self._bound(parameters, times)
        slopes: Slopes = {need.symbol: {need.symbol: ONE} for need in self.parameters}
        run(self.program.steps, values, slopes)
        found = slopes.get(self.program.result, {})
        rows = [np.broadcast_to(found.get(symbol, np.zeros(())), times.shape) for symbol in self.symbols]
        return np.broadcast_to(values[self.program.result], times.shape), np.array(rows)

    def _bound(self, parameters: Array, times: Array) -> dict[str, Array]:
        values: dict[str, Array] = {
            name: np.asarray(figure) for name, figure in self.program.constants.items()
        }
        values.update({symbol: np.asarray(figure) for symbol, figure in self.held.items()})
        values.update(dict(zip(self.symbols, np.asarray(parameters, dtype=float), strict=True)))
        values[self.time] = np.asarray(times, dtype=float)
        return values


def growth_model(library: Library, name: str, place: Place, collector: Collector) -> GrowthModel | None:
    """The growth model of a card. Codes: method-unknown, and model-not-growth for a card of something else."""
    try:
        program = library.program(name)
    except Faults as faults:
        for fault in faults.faults:
            unknown = fault.code == "method-unknown"
            collector.take([replace(fault, place=place) if unknown else fault])
        return None
    needs = [item.need for item in program.needs]
    time = next((need for need in needs if need.quantity.name == SERVICE_TIME), None)
    parameters = tuple(need for need in needs if need is not time)
    if time is None or not parameters or program.method.gives != "R_f":
        collector.add(
            "model-not-growth",
            place,
            f"`{shown(name)}` is no model of fouling over time",
            found=shown(name),
            expected="fouling-linear, fouling-falling-rate, kern-seaton-1959, or a card of the book like them",
        )
        return None
    free = tuple(need for need in parameters if need.absent is None)
    held = {need.symbol: float(need.absent) for need in parameters if need.absent is not None}
    return GrowthModel(program, time.symbol, free, held)
