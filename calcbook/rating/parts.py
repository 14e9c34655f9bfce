"""The unit in equal parts of the duty along its length: every part with its own properties, U and area."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace

import numpy as np

from calcbook.chain.along import OF_PARTS, U_SPREAD
from calcbook.chain.outcome import Result, Solved
from calcbook.chain.rating_outcome import PartRow, Parts
from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import CLEAN, CONDITIONS, SERVICE, Chain, OpenItem
from calcbook.chain.variants import with_figures
from calcbook.formulas import number_text
from calcbook.library import vocabulary
from calcbook.quantities import QuantityKind

Array = np.ndarray
PartResult = tuple[str, Array, QuantityKind, str]


def parts(solved: Solved) -> Parts | None:
    """The parts that the file asks for, all in one call; None where it asks for one.

    Every part carries the same heat, so that both streams change their temperature by equal steps.
    """
    duty = solved.chain.calculation.duty
    if duty is None or duty.parts == 1:
        return None
    inputs = {name: np.asarray(value) for name, value in solved.base.inputs.items()}
    chain, given, ends = _cut(solved.chain, inputs, solved.base.solutions[SERVICE])
    solutions = {condition: solve(chain, given, condition) for condition in CONDITIONS}
    return _laid_out(solved, solutions, ends, duty.parts)


def parts_at_samples(chain: Chain, inputs: Mapping[str, Array], service: Solution) -> Iterator[PartResult]:
    """The results of the areas summed over the parts at every sample of a solution in one row.

    ``inputs`` leave nothing open. Not a number where the circuit of a part does not close in a few passes.
    """
    duty, size = chain.calculation.duty, service.converged.size
    assert duty is not None
    cut, given, _ = _cut(chain, inputs, service)
    area = chain.results["area required"]
    found = {}
    for condition in CONDITIONS:
        solution = solve(cut, given, condition, keep=(area,), thorough=False)
        rows = np.where(solution.converged, solution.figure(area), np.nan)
        found[condition] = rows.reshape(duty.parts, size).sum(axis=0)
    return _results(found, service.row(chain.results["area installed"]))


def what_parts_take(chain: Chain) -> set[str]:
    """The ids of the figures of a solution in service that its parts and their results are made from."""
    ends = {f"T {name} {end}" for name in ("hot", "cold") for end in ("inlet", "outlet")}
    return {chain.results[name] for name in ("duty", "area installed", *ends)}


def _cut(
    whole: Chain, inputs: Mapping[str, Array], service: Solution
) -> tuple[Chain, dict[str, Array], dict[str, tuple[Array, Array]]]:
    """A chain and its inputs in which every sample stands once for each part; and inlets and outlets of both sides."""
    duty, size = whole.calculation.duty, service.converged.size
    assert duty is not None
    ends = {name: _ends(whole, service, name, duty.parts) for name in duty.sides}
    heat = whole.results["duty"]
    figures = {heat: np.tile(service.row(heat) / duty.parts, duty.parts)}
    for name, (inlets, outlets) in ends.items():
        figures |= _side(whole, name, inlets, outlets)
    given = {
        name: np.tile(value, duty.parts) if size > 1 and np.ndim(value) else value
        for name, value in inputs.items()
    }
    return *with_figures(whole, given, figures), ends


def with_parts(solved: Solved, along: Parts) -> Solved:
    """A solved calculation with the summed areas among its results, and an open item where one mean state misleads.

    It does where U differs much over the parts, or where the parts carry the duty and the mean state does not, or
    the other way round.
    """
    base = solved.base
    installed, single = base.results["area_installed"].value, base.results["area_margin"].value
    areas = {condition: np.asarray(area) for condition, area in along.area.items()}
    results = {
        name: Result(name, float(value), kind, title)
        for name, value, kind, title in _results(areas, np.asarray(installed))
    }
    margin = results[OF_PARTS[2]].value
    items = list(base.open_items)
    if along.spread > U_SPREAD or (margin < 0.0) != (single < 0.0):
        items.append(OpenItem("duty / parts", "check", _misled(along, margin, single)))
    return solved.with_base(replace(base, results={**base.results, **results}, open_items=tuple(items)))


def _results(areas: Mapping[str, Array], installed: Array) -> Iterator[PartResult]:
    """Name, values, kind and title of every result that the areas summed over the parts give."""
    area, ratio = vocabulary()["area"], vocabulary()["ratio"]
    summed = "summed over the parts of the duty"
    margin = installed / areas[SERVICE] - 1.0
    rows = (
        (areas[SERVICE], area, f"area that the duty needs in service, {summed}"),
        (areas[CLEAN], area, f"area that the duty needs clean, {summed}"),
        (margin, ratio, f"margin of area over the duty in service, its area {summed}"),
    )
    for name, row in zip(OF_PARTS, rows, strict=True):
        yield name, *row


def _misled(along: Parts, margin: float, single: float) -> str:
    return (
        f"U in service differs by {_percent(along.spread)} over the parts of the duty. The margin of area is"
        f" {_percent(margin)} with the area summed over them, and {_percent(single)} from one mean state,"
        f" which criteria, ledger and largest allowances take."
    )


def _percent(ratio: float) -> str:
    return f"{number_text(100.0 * ratio, 3)} %"


def _ends(whole: Chain, service: Solution, name: str, count: int) -> tuple[Array, Array]:
    """Inlet and outlet temperatures of a side in every part, numbered from the hot inlet; part after part, the samples
    of each in one row."""
    inlet, outlet = (service.row(whole.results[f"T {name} {end}"]) for end in ("inlet", "outlet"))
    borders = inlet + (outlet - inlet) * np.linspace(0.0, 1.0, count + 1)[:, np.newaxis]
    duty = whole.calculation.duty
    if name == "cold" and duty is not None and duty.arrangement == "counterflow":
        borders = borders[::-1]
        return borders[1:].ravel(), borders[:-1].ravel()
    return borders[:-1].ravel(), borders[1:].ravel()


def _side(whole: Chain, name: str, inlets: Array, outlets: Array) -> dict[str, Array]:
    """The figures of a side in the parts: its ends, and its bulk where the file states that apart."""
    table, duty = whole.results, whole.calculation.duty
    assert duty is not None
    if f"T {name} mean" not in table:
        return {}
    figures = {table[f"T {name} inlet"]: inlets, table[f"T {name} outlet"]: outlets}
    bulk = whole.streams[duty.sides[name].stream].temperature
    return figures if bulk == table[f"T {name} mean"] else {**figures, bulk: (inlets + outlets) / 2.0}


def _laid_out(
    solved: Solved, solutions: Mapping[str, Solution], ends: Mapping[str, tuple[Array, Array]], count: int
) -> Parts:
    table = solved.chain.results

    def every(condition: str, name: str) -> Array:
        return np.broadcast_to(np.asarray(solutions[condition].values[table[name]], dtype=float), (count,))

    def pair(name: str, place: int) -> tuple[float, float]:
        inlets, outlets = ends[name]
        return float(inlets[place]), float(outlets[place])

    overall = {condition: every(condition, "U") for condition in CONDITIONS}
    area = {condition: every(condition, "area required") for condition in CONDITIONS}
    rows = tuple(
        PartRow(
            place + 1,
            pair("hot", place),
            pair("cold", place),
            float(every(SERVICE, "LMTD")[place]),
            {condition: float(overall[condition][place]) for condition in CONDITIONS},
            {condition: float(area[condition][place]) for condition in CONDITIONS},
        )
        for place in range(count)
    )
    spread = float(overall[SERVICE].max() / overall[SERVICE].min() - 1.0)
    return Parts(rows, {condition: float(area[condition].sum()) for condition in CONDITIONS}, spread)
