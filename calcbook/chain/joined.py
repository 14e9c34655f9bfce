"""Properties of one fluid at one state, read together: the state is found once, their series are summed at once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from calcbook.chain.fluids import PropertyOperation, PropertyRows
from calcbook.chain.types import ChainStep
from calcbook.library.operations import Slopes, Together, chained, moving_symbols

Array = np.ndarray
TEMPERATURE = "T"


@dataclass(frozen=True, eq=False)
class PropertiesTogether(Together):
    """Steps that read properties of the same fluid with the same inputs; the bits are those of each alone."""

    steps: tuple[ChainStep, ...]
    operations: tuple[PropertyOperation, ...]

    def run(self, values: dict[str, Array], slopes: Slopes | None) -> None:
        """Put every property into ``values``, and its derivatives into ``slopes``."""
        inputs = self.steps[0].inputs
        arguments = {local: values[name] for local, name in inputs.items()}
        moving = moving_symbols(inputs, slopes)
        asked = [(operation.property_name, False) for operation in self.operations]
        if TEMPERATURE in moving:
            asked += [(operation.property_name, True) for operation in self.operations]
        found = self.operations[0].by_state(arguments, PropertyRows(tuple(asked)))
        for step, value in zip(self.steps, found, strict=False):
            values[step.id] = value
        if slopes is None or not moving:
            return
        for place, (step, operation) in enumerate(zip(self.steps, self.operations, strict=True)):
            others = [local for local in moving if local != TEMPERATURE]
            local_slopes = operation.slopes(arguments, found[place], others)
            if TEMPERATURE in moving:
                local_slopes[TEMPERATURE] = found[len(self.steps) + place]
            carried = chained(inputs, {local: local_slopes[local] for local in moving}, slopes)
            if carried:
                slopes[step.id] = carried


def joined(steps: Sequence[ChainStep]) -> tuple[ChainStep | Together, ...]:
    """Steps in order, with properties of one state put together where the first of them stands."""
    groups: dict[object, list[ChainStep]] = {}
    for step in steps:
        groups.setdefault(_state_of(step), []).append(step)
    found: list[ChainStep | Together] = []
    for step in steps:
        members = groups[_state_of(step)]
        if len(members) == 1:
            found.append(step)
        elif members[0] is step:
            operations = [item.operation for item in members if isinstance(item.operation, PropertyOperation)]
            found.append(PropertiesTogether(tuple(members), tuple(operations)))
    return tuple(found)


def _state_of(step: ChainStep) -> object:
    """What tells the state that a property is read at; of any other step itself."""
    operation = step.operation
    if not isinstance(operation, PropertyOperation):
        return step.id
    flags = (operation.has_pressure, operation.has_fraction, operation.keeps_phase)
    return (id(operation.source), operation.phase, flags, tuple(sorted(step.inputs.items())))
