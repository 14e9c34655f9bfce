"""Both ends of a unit with a duty: its surfaces there, and what the fluid does at the wall."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from calcbook.chain.findings import wall_checks
from calcbook.chain.outcome import CheckResult
from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import Chain
from calcbook.chain.variants import with_figures

Array = np.ndarray
PLACES = ("at the hot inlet", "at the hot outlet")


@dataclass(frozen=True)
class EndState:
    """The circuit at one end of the unit in one condition: the chain with the ends put in, and its solution."""

    chain: Chain
    place: str
    solution: Solution


def end_states(
    chain: Chain, inputs: Mapping[str, Array], solutions: Mapping[str, Solution]
) -> tuple[EndState, ...]:
    """Both ends in every condition of a single record; empty without a duty or temperatures.

    The hot inlet meets the cold outlet, but in parallel flow the cold inlet. An end at which the circuit does
    not close is left out.
    """
    duty = chain.calculation.duty
    if duty is None or not chain.has_temperatures:
        return ()
    orders = {"hot": ("inlet", "outlet"), "cold": ("outlet", "inlet")}
    if duty.arrangement == "parallel flow":
        orders["cold"] = orders["hot"]
    any_solution = next(iter(solutions.values()))
    figures = {
        chain.streams[side.stream].temperature: np.array(
            [any_solution.number(chain.results[f"T {name} {end}"]) for end in orders[name]]
        )
        for name, side in duty.sides.items()
        if f"T {name} mean" in chain.results
    }
    one, given = with_figures(chain, inputs, figures)
    found = []
    for condition in solutions:
        both = solve(one, given, condition)
        for number, place in enumerate(PLACES):
            if both.converged.reshape(-1)[number]:
                found.append(EndState(one, place, both.sample(number)))
    return tuple(found)


def end_checks(states: tuple[EndState, ...], case: str) -> list[CheckResult]:
    """Against boiling, condensing and freezing at the wall at both ends."""
    return [
        replace(check, id=f"{check.id} {state.place}")
        for state in states
        for check in wall_checks(state.chain, case, state.solution)
    ]


def end_surfaces(states: tuple[EndState, ...]) -> Iterator[tuple[str, float, str]]:
    """Result name, temperature and title of both wetted surfaces at both ends."""
    for state in states:
        condition = state.solution.condition
        for group in (state.chain.inner, state.chain.outer):
            surface = f"{group.side} surface"
            yield (
                f"T {surface} {condition} {state.place}",
                state.solution.number(group.surface_temperature),
                f"temperature {surface}, {condition}, {state.place}",
            )
