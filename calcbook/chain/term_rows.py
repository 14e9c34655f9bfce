"""Rows of the terms of a solved case, the temperatures between them, and how well the circuit closes on them."""

from __future__ import annotations

import itertools
import math
from collections.abc import Mapping

import numpy as np

from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.outcome import BranchRow, ClosureRow, TermRow
from calcbook.chain.solve import Solution, chosen, outward
from calcbook.chain.types import CONDITIONS, Chain, Group, Layer

Array = np.ndarray
CONTROLLING_SHARE = 0.5


def temperatures_between(chain: Chain, solution: Solution) -> list[Array]:
    """Temperature before the first element, between elements, and after the last one."""
    if not chain.has_temperatures:
        return [np.asarray(math.nan)] * (len(chain.elements) + 1)
    flow = solution.figure("solution/Q")
    temperatures = [solution.figure(chain.inner.bulk)]
    for element in chain.elements[:-1]:
        if isinstance(element, Group):
            temperatures.append(solution.figure(element.surface_temperature))
        elif element.second_temperature:
            temperatures.append(solution.figure(element.second_temperature))
        else:
            area = solution.figure(chain.surfaces[element.surface].area)
            temperatures.append(temperatures[-1] - flow * solution.figure(element.resistance) / area)
    temperatures[-1] = solution.figure(chain.outer.surface_temperature)
    return [*temperatures, solution.figure(chain.outer.bulk)]


def term_rows(chain: Chain, solution: Solution) -> tuple[TermRow, ...]:
    """A row for every term of a single record, from the inside to the outside."""
    temperatures = [float(item) for item in temperatures_between(chain, solution)]
    total = solution.number(chain.results["R total"])
    rows = []
    for index, element in enumerate(chain.elements):
        resistance = solution.number(chain.results[f"R {element.name}"])
        coefficient, methods = math.nan, ""
        branches: tuple[BranchRow, ...] = ()
        if isinstance(element, Group):
            coefficient = solution.number(chain.results[f"h {element.name}"])
            own = 1.0 / coefficient
            methods = ", ".join(chosen(branch, solution).method.id for branch in element.branches)
            branches = _branch_rows(chain, element, solution) if len(element.branches) > 1 else ()
        else:
            own = solution.number(element.resistance)
            methods = element.material
            if element.gap is not None:
                coefficient = 1.0 / own
                methods = ", ".join(chosen(way, solution).method.id for way in element.gap.ways)
                branches = _way_rows(chain, element, solution) if len(element.gap.ways) > 1 else ()
        rows.append(
            TermRow(
                element.name,
                _kind(element),
                chain.surfaces[element.surface].name,
                own,
                resistance,
                resistance / total,
                coefficient,
                temperatures[index],
                temperatures[index + 1],
                methods,
                branches,
            )
        )
    return tuple(rows)


def _branch_rows(chain: Chain, group: Group, solution: Solution) -> tuple[BranchRow, ...]:
    area = solution.number(chain.surfaces[group.surface].area)
    surface = solution.number(group.surface_temperature) if chain.has_temperatures else math.nan
    rows = []
    for branch in group.branches:
        coefficient = solution.number(branch_coefficient(group, branch.name))
        reference = solution.number(branch.reference) if branch.reference else math.nan
        flow = coefficient * area * outward(group) * (surface - reference)
        rows.append(BranchRow(branch.name, branch.kind, coefficient, reference, flow))
    return tuple(rows)


def _way_rows(chain: Chain, layer: Layer, solution: Solution) -> tuple[BranchRow, ...]:
    """The ways for heat across a gap, each with its share of the heat flow."""
    assert layer.gap is not None
    area = solution.number(chain.surfaces[layer.surface].area)
    known = chain.has_temperatures
    first, second = (
        solution.number(name) if known else math.nan
        for name in (layer.first_temperature, layer.second_temperature)
    )
    rows = []
    for way, name in zip(layer.gap.ways, layer.gap.coefficients, strict=True):
        coefficient = solution.number(name)
        rows.append(BranchRow(way.name, way.kind, coefficient, second, coefficient * area * (first - second)))
    return tuple(rows)


def _kind(element: Group | Layer) -> str:
    if isinstance(element, Layer):
        return element.kind
    return "parallel" if len(element.branches) > 1 else element.branches[0].kind


def controlling_term(terms: tuple[TermRow, ...]) -> tuple[str, float]:
    """The term with at least half of the resistance, empty where there is none, and the largest share."""
    largest = max(terms, key=lambda term: term.share)
    return (largest.name, largest.share) if largest.share >= CONTROLLING_SHARE else ("", largest.share)


def closure_rows(chain: Chain, solutions: Mapping[str, Solution]) -> tuple[ClosureRow, ...]:
    """Heat flow through each element from its two temperatures, summed drops, U·A on each surface."""
    if not chain.has_temperatures:
        return _closure_of_areas(chain, solutions)
    rows = []
    for condition in reversed(CONDITIONS):
        solution = solutions[condition]
        flow = solution.number(chain.results["heat flow"])
        for term in term_rows(chain, solution):
            surface = next(surface for surface in chain.surfaces if surface.name == term.surface)
            if term.own_resistance == 0.0:
                continue
            through = (
                solution.number(surface.area)
                / term.own_resistance
                * (term.inner_temperature - term.outer_temperature)
            )
            rows.append(
                ClosureRow(
                    f"heat flow through {term.name}",
                    condition,
                    through,
                    flow,
                    _residual(through, flow),
                    "W",
                )
            )
        temperatures = [float(item) for item in temperatures_between(chain, solution)]
        summed = sum(before - after for before, after in itertools.pairwise(temperatures))
        whole = temperatures[0] - temperatures[-1]
        rows.append(
            ClosureRow("summed temperature drops", condition, summed, whole, _residual(summed, whole), "K")
        )
    return (*rows, *_closure_of_areas(chain, solutions))


def _closure_of_areas(chain: Chain, solutions: Mapping[str, Solution]) -> tuple[ClosureRow, ...]:
    rows = []
    for condition in reversed(CONDITIONS):
        solution = solutions[condition]
        conductance = solution.number(chain.results["UA"])
        for surface in chain.surfaces:
            value = solution.number(chain.results[f"U on {surface.name}"]) * solution.number(surface.area)
            rows.append(
                ClosureRow(
                    f"U·A on {surface.name}",
                    condition,
                    value,
                    conductance,
                    _residual(value, conductance),
                    "W/K",
                )
            )
    return tuple(rows)


def _residual(value: float, against: float) -> float:
    return abs(value - against) / abs(against) if against else abs(value)
