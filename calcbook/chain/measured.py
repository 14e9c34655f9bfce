"""Named results as quantities of a chain: which steps, in which condition, joined by which relation."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from calcbook.chain.duty import duty_step
from calcbook.chain.ends import PLACES, has_ends
from calcbook.chain.figures import BY_SIZE
from calcbook.chain.latent import PHASE_CHANGE
from calcbook.chain.types import CONDITIONS, SERVICE, Chain
from calcbook.formulas import Relation, evaluate, parse_expression, partial

Array = np.ndarray
Step = tuple[str, str]
"""A condition, at one end of the unit with the place behind it, and the id of a step there."""

JOINED = {"cleanliness": "U_service/U_clean", "excess_surface": "U_clean/U_service - 1"}
PLAIN, SIZE = parse_expression("y"), parse_expression("abs(y)")


@dataclass(frozen=True, slots=True)
class Measured:
    """A result as a relation over steps of the chain; ``parts`` binds its symbols, ``also`` are its other names."""

    name: str
    relation: Relation
    parts: Mapping[str, Step]
    also: tuple[str, ...] = ()

    def value(self, solved: Mapping[str, Mapping[str, Array]]) -> Array:
        """The result from the steps of every condition, on arrays."""
        return evaluate(self.relation, self._arguments(solved))

    def slopes(
        self,
        solved: Mapping[str, Mapping[str, Array]],
        derivatives: Mapping[str, Mapping[str, Mapping[str, Array]]],
    ) -> dict[str, float]:
        """Slopes of the result in every input, from those of the steps by condition; for a single record."""
        arguments = self._arguments(solved)
        total: dict[str, float] = {}
        for symbol, (condition, step) in self.parts.items():
            outer = float(np.asarray(evaluate(partial(self.relation, symbol), arguments)).ravel()[0])
            for name, slope in derivatives[condition].get(step, {}).items():
                total[name] = total.get(name, 0.0) + outer * float(np.asarray(slope).ravel()[0])
        return total

    def _arguments(self, solved: Mapping[str, Mapping[str, Array]]) -> dict[str, Array]:
        return {symbol: solved[condition][step] for symbol, (condition, step) in self.parts.items()}


def measured(chain: Chain, name: str) -> Measured | None:
    """A named result as steps of the chain; None for one that no step of the circuit gives."""
    if name in JOINED:
        parts = {f"U_{condition}": (condition, chain.results["U"]) for condition in CONDITIONS}
        return Measured(name, parse_expression(JOINED[name]), parts)
    step = _step(chain, name)
    relation = SIZE if name.startswith(BY_SIZE) else PLAIN
    return Measured(name, relation, {"y": step}) if step is not None else None


def _step(chain: Chain, name: str) -> Step | None:
    of_duty = duty_step(chain, name)
    if of_duty is not None:
        return of_duty
    for place in PLACES if has_ends(chain) else ():
        there = _surface(chain, name.removesuffix(f" {place}")) if name.endswith(f" {place}") else None
        if there is not None:
            return f"{there[0]} {place}", there[1]
    for condition in CONDITIONS:
        for key, step in chain.results.items():
            if name in _names(key, condition):
                return condition, step
    return _of_stream(chain, name)


def _names(key: str, condition: str) -> tuple[str, ...]:
    """The names of a result of the circuit in a condition, by its key there."""
    if key in ("U", "UA"):
        return (f"{key}_{condition}",)
    if key in ("heat flux", "heat flow"):
        return (f"{key.replace(' ', '_')}_{condition}",)
    if key.startswith("U on "):
        return (f"U_{condition}{key[1:]}",)
    if key.startswith(("h ", "R ", "dT ", f"{PHASE_CHANGE} ")) and key != "R total":
        return (f"{key} {condition}",)
    return ()


def _surface(chain: Chain, name: str) -> Step | None:
    for condition in CONDITIONS if chain.has_temperatures else ():
        for side, group in (("inside", chain.inner), ("outside", chain.outer)):
            if name == f"T {side} surface {condition}":
                return condition, group.surface_temperature
    return None


def condition_of(state: str) -> str:
    """The condition of a part of a result, wherever in the unit it stands."""
    return state.partition(" ")[0]


def _of_stream(chain: Chain, name: str) -> Step | None:
    """Temperatures of the wetted surfaces, and speed and Reynolds number of a stream in service."""
    surface = _surface(chain, name)
    if surface is not None:
        return surface
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            state = chain.streams.get(branch.stream)
            if state is None:
                continue
            steps = {step.id for candidate in branch.candidates for step in candidate.steps}
            steps |= {step.id for step in (*chain.steps, *branch.choice_steps)}
            if name == f"speed {branch.stream}":
                own = state.flow if state.flow_kind == "speed" else f"{branch.name}/speed"
                return (SERVICE, own) if own in steps or own in chain.inputs else None
            if name == f"Re {branch.stream}" and f"{branch.name}/Re" in steps:
                return SERVICE, f"{branch.name}/Re"
    return None
