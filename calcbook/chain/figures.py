"""The named results of a chain at every sample of its solutions."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from calcbook.chain.allowance import LARGEST_ALLOWANCE, largest_allowances
from calcbook.chain.duty import duty_results
from calcbook.chain.ends import EndState, end_surfaces
from calcbook.chain.latent import PHASE_CHANGE
from calcbook.chain.pressure import drops
from calcbook.chain.solve import Solution
from calcbook.chain.term_rows import temperatures_between
from calcbook.chain.types import CONDITIONS, SERVICE, Chain, Group
from calcbook.library import vocabulary
from calcbook.quantities import QuantityKind

Array = np.ndarray
# What the heat flow does to a stream, by the first word of the result: its quantity and what it is.
IMPLIED = {
    "dT": ("temperature difference", "temperature change of {} that the heat flow implies"),
    PHASE_CHANGE: (
        "ratio",
        "part of the flow of {} that its heat balance changes from one phase to the other",
    ),
}


# Results that are told by their size, by how their names start: a limit on one must not be met because heat flows
# inwards, or because the other stream carries too little.
BY_SIZE = ("heat_flux", "heat_flow", "closure")


def by_size(name: str, figures: Array) -> Array:
    """The figures of a result as they are told by its name."""
    return np.abs(figures) if name.startswith(BY_SIZE) else figures


@dataclass(frozen=True, slots=True)
class ResultFigures:
    """A named result at every sample, in SI; NaN where there is none."""

    values: Array
    kind: QuantityKind
    title: str


def result_figures(chain: Chain, solutions: Mapping[str, Solution]) -> dict[str, ResultFigures]:
    """Every named result at every sample."""
    kinds = vocabulary()
    results: dict[str, ResultFigures] = {}

    def put(name: str, values: Array, kind: str, title: str) -> None:
        results[name] = ResultFigures(by_size(name, values), kinds[kind], title)

    table = chain.results
    at_mean = ", at the mean temperatures" if chain.calculation.duty is not None else ""
    for condition, solution in reversed(list(solutions.items())):
        put(
            f"U_{condition}",
            solution.figure(table["U"]),
            "overall coefficient",
            f"overall coefficient, {condition}",
        )
        for surface in chain.surfaces:
            put(
                f"U_{condition} on {surface.name}",
                solution.figure(table[f"U on {surface.name}"]),
                "overall coefficient",
                f"overall coefficient on {surface.name}, {condition}",
            )
        if "U on bare" in table:
            put(
                f"U_{condition} on bare",
                solution.figure(table["U on bare"]),
                "overall coefficient",
                f"overall coefficient on bare, {condition}",
            )
        put(f"UA_{condition}", solution.figure(table["UA"]), "conductance", f"conductance, {condition}")
        if "heat flux" in table:
            # Of a rated unit they are not its duty: the difference of the means is no mean difference of the ends.
            put(
                f"heat_flux_{condition}",
                solution.figure(table["heat flux"]),
                "heat flux",
                f"heat flux, {condition}{at_mean}",
            )
            put(
                f"heat_flow_{condition}",
                solution.figure(table["heat flow"]),
                "heat flow",
                f"heat flow, {condition}{at_mean}",
            )
    for name in table:
        kind, _, stream = name.partition(" ")
        if kind not in IMPLIED:
            continue
        quantity, title = IMPLIED[kind]
        for condition, solution in reversed(list(solutions.items())):
            figures = solution.figure(table[name])
            put(f"{name} {condition}", figures, quantity, f"{title.format(stream)}, {condition}")
    clean, service = (results[f"U_{condition}"].values for condition in CONDITIONS)
    put("cleanliness", service / clean, "ratio", "cleanliness, U_service/U_clean")
    put("excess_surface", clean / service - 1.0, "ratio", "excess surface, U_clean/U_service − 1")
    for condition, solution in reversed(list(solutions.items())):
        for name, value in interfaces(chain, solution):
            put(f"T {name} {condition}", value, "temperature", f"temperature {name}, {condition}{at_mean}")
        for element in chain.elements:
            if isinstance(element, Group):
                put(
                    f"h {element.name} {condition}",
                    solution.figure(table[f"h {element.name}"]),
                    "film coefficient",
                    f"film coefficient {element.name}, {condition}",
                )
            put(
                f"R {element.name} {condition}",
                solution.figure(table[f"R {element.name}"]),
                "area resistance",
                f"resistance of {element.name} on the basis area, {condition}",
            )
    duty_results(chain, solutions, put)
    _stream_results(chain, solutions[SERVICE], put)
    for _, branch, drop in drops(chain):
        for condition, solution in reversed(list(solutions.items())):
            put(
                f"dp {branch.stream}_{condition}",
                solution.figure(drop.total.coefficient),
                "pressure drop",
                f"pressure drop of {branch.stream}, {condition}",
            )
    return results


def _stream_results(chain: Chain, solution: Solution, put: Callable[[str, Array, str, str], None]) -> None:
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            state = chain.streams.get(branch.stream)
            if state is None:
                continue
            speed = state.flow if state.flow_kind == "speed" else f"{branch.name}/speed"
            for step, name, kind in (
                (speed, "speed", "speed"),
                (f"{branch.name}/Re", "Re", "Reynolds number"),
            ):
                if step in solution.values:
                    put(
                        f"{name} {branch.stream}",
                        solution.figure(step),
                        kind,
                        f"{kind} of {branch.stream}",
                    )


def interfaces(chain: Chain, solution: Solution) -> list[tuple[str, Array]]:
    """Temperatures between terms, from the inside to the outside, and of both wetted surfaces: of that of a film that
    includes other terms none is known."""
    if not chain.has_temperatures:
        return []
    temperatures = temperatures_between(chain, solution)
    known = chain.known_surfaces
    ends = {"inside": temperatures[1], "outside": temperatures[-2]}
    found = [(f"{side} surface", temperature) for side, temperature in ends.items() if side in known]
    for index, (before, after) in enumerate(zip(chain.elements, chain.elements[1:], strict=False), 1):
        found.append((f"{before.name} to {after.name}", temperatures[index]))
    return found


def surfaces_at_ends(states: tuple[EndState, ...]) -> dict[str, ResultFigures]:
    """The wetted surfaces at both ends of a unit as named results."""
    kind = vocabulary()["temperature"]
    return {name: ResultFigures(values, kind, title) for name, values, title in end_surfaces(states)}


def allowance_figures(
    chain: Chain, inputs: Mapping[str, Array], service: Solution, thorough: bool = True
) -> dict[str, ResultFigures]:
    """The largest allowance of every fouling term as named results, found with solutions of their own.

    That of the only term stands under the bare name too.
    """
    named = {
        f"{LARGEST_ALLOWANCE} {name}": ResultFigures(
            values,
            vocabulary()["area resistance"],
            f"largest resistance of {name} with which the installed area carries the duty; below zero the resistance that"
            " is too much without it",
        )
        for name, values in largest_allowances(chain, inputs, service, thorough).items()
    }
    if len(named) == 1:
        named[LARGEST_ALLOWANCE] = next(iter(named.values()))
    return named
