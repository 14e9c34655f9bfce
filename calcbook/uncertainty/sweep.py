"""Sweeps: one or two givens of the base case over a range, every sample in one call of the engine."""

from __future__ import annotations

import numpy as np

from calcbook.calcfile.calculation import Swept
from calcbook.chain.analysis import OF_DUTY_LOST, is_found_later
from calcbook.chain.figures import ResultFigures
from calcbook.chain.flips_outcome import LIMIT
from calcbook.chain.outcome import Result, Solved
from calcbook.chain.rating_outcome import OF_DAY_ONE
from calcbook.chain.samples import BROKEN, OPEN, Samples, evaluate_samples, phases_of
from calcbook.chain.sweep_outcome import Axis, Sweep, SweptResult
from calcbook.chain.types import Chain, Input
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.library import vocabulary
from calcbook.quantities import Quantity, QuantityFault, as_kind, in_unit
from calcbook.rating.at_samples import AtSamples, names_at_samples

Array = np.ndarray
ALWAYS = ("U_service", "U_clean")


def axes_of(chain: Chain, collector: Collector) -> tuple[Axis, ...]:
    """The givens of the file's sweep with their figures; what a given cannot be is a fault at its place."""
    text = chain.calculation.sweep
    axes = [_axis(chain, swept, collector) for swept in text.swept] if text is not None else []
    return tuple(axis for axis in axes if axis is not None)


def _axis(chain: Chain, swept: Swept, collector: Collector) -> Axis | None:
    item = chain.inputs[f"given/{swept.symbol}"]
    first = _figure(item, swept.first, swept.first_place, collector)
    last = _figure(item, swept.last, swept.last_place, collector)
    if first is None or last is None:
        return None
    figures = np.linspace(first, last, swept.steps).tolist()
    if item.kind.counts and float(first).is_integer() and float(last).is_integer():
        figures = list(dict.fromkeys(float(round(figure)) for figure in figures))
    unit = swept.first.unit_text
    point = item.kind.scale == "point"
    return Axis(item, tuple(figures), tuple(in_unit(figure, unit or "1", point) for figure in figures), unit)


def _figure(item: Input, quantity: Quantity, place: Place, collector: Collector) -> float | None:
    try:
        return as_kind(quantity, item.kind).value
    except QuantityFault as error:
        collector.take([error.within(place, f"sweep of {item.symbol}")])
        return None


def sweep_of(solved: Solved, axes: tuple[Axis, ...], collector: Collector) -> Sweep | None:
    """The sweep over the axes, None without any. A result that does not exist is a fault, result-unknown."""
    if not axes:
        return None
    names = swept_names(solved, collector)
    inputs = dict(solved.chain.case_inputs(""))
    grids = np.meshgrid(*(np.array(axis.figures) for axis in axes), indexing="ij")
    for axis, grid in zip(axes, grids, strict=True):
        inputs[axis.input.id] = np.ascontiguousarray(grid.ravel())
    samples = evaluate_samples(
        solved.chain,
        inputs,
        phases=phases_of(solved.chain, (solved.base,)),
        later=AtSamples(solved, names),
    )
    return Sweep(
        axes,
        tuple(_result(solved, _named(solved, name), samples) for name in names),
        tuple(samples.reasons[place] for place in samples.missing.tolist()),
        _outside(samples),
    )


def swept_names(solved: Solved, collector: Collector) -> list[str]:
    """The results asked for, else U and those that the acceptance names. Code: result-unknown."""
    text = solved.chain.calculation.sweep
    also = names_at_samples(solved)
    known = [name for name in solved.base.results if not is_found_later(name) or name in also]
    known += sorted(also - set(known))
    if text is None or not text.of:
        named = [criterion.result for criterion in solved.chain.calculation.acceptance]
        return [name for name in dict.fromkeys((*ALWAYS, *named)) if name in known]
    for name, place in text.of:
        if name not in known:
            collector.add(
                "result-unknown",
                place,
                f"`{shown(name)}` is found once for the calculation and cannot be swept"
                if is_found_later(name)
                else f"there is no result `{shown(name)}`",
                found=shown(name),
                expected=", ".join(known),
                nearest=nearest_names(name, known),
            )
    return [name for name, _ in text.of if name in known]


def _named(solved: Solved, name: str) -> Result:
    """A result of the base case; a state of day one that it does not have may be there at other samples."""
    known = solved.base.results.get(name)
    if known is not None:
        return known
    kind, title = OF_DAY_ONE.get(name, OF_DUTY_LOST)
    return Result(name, np.nan, vocabulary()[kind], title)


def _result(solved: Solved, result: Result, samples: Samples) -> SweptResult:
    """A result at every sample, with the criteria on it whose limit no sample moves."""
    figures = samples.results.get(result.name) or ResultFigures(np.empty(0), result.kind, "")
    values = (
        samples.whole(figures.values, np.nan)
        if len(samples.solved)
        else np.full(samples.missing.shape, np.nan)
    )
    values = np.where((samples.missing == 0) & np.isfinite(values), values, np.nan)
    stated = [(item, solved.chain.calculation.criterion(item.id)) for item in solved.base.criteria]
    limits = tuple(
        (item.id, item.limit)
        for item, criterion in stated
        if criterion.result == result.name and not criterion.limit.symbol
    )
    return SweptResult(result.name, result.title, result.kind, tuple(values.tolist()), limits)


def _outside(samples: Samples) -> tuple[tuple[str, ...], ...]:
    """The range limits that each sample does not hold, accepted ones left out."""
    found: list[list[str]] = [[] for _ in samples.missing]
    for verdict in samples.verdicts.values():
        if verdict.kind == LIMIT and verdict.level == "range":
            left = np.isin(samples.codes(verdict.key), (BROKEN, OPEN))
            for place in np.flatnonzero(left & (samples.missing == 0)):
                found[place].append(f"{verdict.id}, {verdict.condition}")
    return tuple(tuple(names) for names in found)
