"""Figures that the file leaves open: found so that the step which gives them agrees with what was put in.

An outlet temperature that is not stated moves the properties, the films and so the heat that leads to it. Each
sample is repeated until what comes out is what went in, with the last two passes joined by a straight line;
it stops at its own answer, whatever its neighbours do.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from calcbook.chain.solve import UNKNOWNS, closed
from calcbook.chain.types import Candidate, Chain
from calcbook.library.operations import run

Array = np.ndarray
MAXIMUM_PASSES = 60
# What comes out and what went in, relative: some hundred roundings of a figure.
AGREEMENT = 1e-13
# Below this part of the first value a figure agrees by that part: its own size is rounding.
LEAST_PART = 0.1
# The first value lies that far from the near end to the far end.
FIRST_PART = 0.3


def completed(
    chain: Chain,
    inputs: Mapping[str, Array],
    forced: Mapping[str, Candidate] | None = None,
    choices: Mapping[str, Array] | None = None,
    thorough: bool = True,
) -> dict[str, Array]:
    """The inputs with every open figure, each in the condition that it belongs to; NaN where none agrees.

    ``forced``, ``choices`` and ``thorough`` are those of ``solve``.
    """
    missing = [item for item in chain.open_figures if item.id not in inputs]
    if not missing:
        return dict(inputs)
    shape = np.broadcast_shapes(*(np.shape(value) for value in inputs.values()))
    flat = {
        name: np.asarray(value, dtype=float)
        if np.ndim(value) == 0
        else np.broadcast_to(value, shape).reshape(-1)
        for name, value in inputs.items()
    }
    passes = _Passes(chain, flat, int(np.prod(shape, dtype=int)), forced or {}, choices or {}, thorough)
    found = passes.found()
    return {**inputs, **{name: value.reshape(shape) for name, value in found.items()}}


class _Passes:
    """The open figures of some samples on their way."""

    def __init__(
        self,
        chain: Chain,
        inputs: Mapping[str, Array],
        size: int,
        forced: Mapping[str, Candidate],
        choices: Mapping[str, Array],
        thorough: bool,
    ):
        self.chain = chain
        self.inputs = inputs
        self.size = size
        self.forced = forced
        self.choices = choices
        self.thorough = thorough
        self.open = tuple(item for item in chain.open_figures if item.id not in inputs)
        self.static = frozenset(step.id for step in chain.steps)
        # What the circuit closed with in the last pass, by condition, of the samples still on their way.
        self.unknowns: dict[str, Array | None] = {}

    def found(self) -> dict[str, Array]:
        """The figures by id, one row of samples each."""
        put_in = self._first()
        result = np.full_like(put_in, np.nan)
        before: tuple[Array, Array] | None = None
        active = np.arange(self.size)
        for _ in range(MAXIMUM_PASSES):
            came_out = self._came_out(put_in, active)
            gap = came_out - put_in
            agreed = (np.abs(gap) <= AGREEMENT * np.maximum(np.abs(came_out), self.least)).all(axis=0)
            result[:, active[agreed]] = came_out[:, agreed]
            known = np.isfinite(gap).all(axis=0)
            following = _joined(came_out, gap, before)
            back = np.zeros_like(known)
            if before is not None:
                # Where the straight line led to no value, the way goes on without it from what came out before.
                back = ~known & (put_in != before[0]).any(axis=0) & np.isfinite(before[0]).all(axis=0)
                following = np.where(back, before[0], following)
            open_still = ~agreed & (known | back)
            before = (came_out[:, open_still], gap[:, open_still])
            put_in, active = following[:, open_still], active[open_still]
            for condition, rows in self.unknowns.items():
                self.unknowns[condition] = None if rows is None else rows[:, open_still]
            if not len(active):
                break
        return {item.id: result[place] for place, item in enumerate(self.open)}

    def _first(self) -> Array:
        values: dict[str, Any] = {**self.chain.constants, **self.inputs}
        values |= {item.id: np.asarray(np.nan) for item in self.open}
        with np.errstate(all="ignore"):
            run(self.chain.steps, values)
        rows = []
        for item in self.open:
            near, far = (np.asarray(values[name], dtype=float) for name in (item.near, item.far))
            rows.append(np.broadcast_to(near + FIRST_PART * (far - near), (self.size,)))
        first = np.array(rows)
        # A figure that comes to rest at zero agrees by the size from where it was looked for.
        self.least = LEAST_PART * np.abs(first).max(axis=1, keepdims=True)
        return first

    def _came_out(self, put_in: Array, active: Array) -> Array:
        inputs = {name: value[active] if value.ndim else value for name, value in self.inputs.items()}
        inputs |= {item.id: put_in[place] for place, item in enumerate(self.open)}
        given: dict[str, Array] = {}
        for condition in dict.fromkeys(item.condition for item in self.open):
            wanted = tuple(item.found for item in self.open if item.condition == condition)
            if self.static.issuperset(wanted):
                values: dict[str, Any] = {**self.chain.constants, **inputs}
                with np.errstate(all="ignore"):
                    run(self.chain.steps, values)
            else:
                choices = {name: choice[active] for name, choice in self.choices.items()}
                solution = closed(
                    self.chain,
                    inputs,
                    condition,
                    self.forced,
                    (*wanted, UNKNOWNS),
                    self.thorough,
                    choices,
                    self.unknowns.get(condition),
                )
                values, self.unknowns[condition] = solution.values, solution.unknowns
            given |= {name: values[name] for name in wanted}
        count = (len(active),)
        return np.array(
            [np.broadcast_to(np.asarray(given[item.found], dtype=float), count) for item in self.open]
        )


def _joined(came_out: Array, gap: Array, before: tuple[Array, Array] | None) -> Array:
    """What to put in next: where the gap would close on the straight line through the last two passes."""
    if before is None:
        return came_out
    last, last_gap = before
    with np.errstate(all="ignore"):
        # Temperatures, coefficients and resistances weigh alike only by their own size.
        size = np.abs(came_out)
        change, off = (gap - last_gap) / size, gap / size
        square = (change * change).sum(axis=0)
        part = (change * off).sum(axis=0) / square
        return np.where(square > 0.0, came_out - part * (came_out - last), came_out)
