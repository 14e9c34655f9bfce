"""Closing the circuit: one heat flow and one drop per moving element, found together by Newton's method.

Each moving element gives one law (what it carries at its drop is the heat flow), and the drops with the
fixed resistances add up to the whole difference. A law takes the drops before it, its own and the heat
flow, so the equations are triangular and are solved by substitution, element by element on arrays.

Where every branch refers to its own fluid, all drops have one sign, and the equations are taken in
logarithms: a power law is then met in one pass. Slopes are taken again only while the steps are large.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from calcbook.chain.types import Group

if TYPE_CHECKING:
    from calcbook.chain.solve import Engine

Array = np.ndarray
MAXIMUM_PASSES = 60
# A search over many samples gives up after so many (most circuits close in four to seven), and sooner where a law
# has no value, or a worse one, so many times running.
FEW_PASSES = 8
FEW_HALVINGS = 2
# The step that remains, judged from the last two, relative to the unknowns.
STEP_TOLERANCE = 1e-15
# A step so small settles by itself: rounding in the laws hides smaller ones, and the more so the smaller a
# drop is beside the temperatures that it is taken from.
SMALLEST_STEP = 1e-13
LARGEST_LOG_STEP = 2.0
# So few samples are moved in one call, though some of them need no new slopes.
FEW_SAMPLES = 500
# Above this step (relative), and where a step is not this much smaller than the last, slopes are taken again.
FRESH_SLOPES_ABOVE = 0.02
SLOWEST_RATIO = 0.03
# A pass may raise the residual that much before its step is halved.
LARGEST_RISE = 2.0
ROUNDING = 1e-12


def close(engine: Engine, passes: int = MAXIMUM_PASSES, near: Array | None = None) -> None:
    """Find heat flow and drops of every sample; writes ``flow``, ``drops`` and ``converged``.

    ``near`` are unknowns to begin from, where they are known and of the right sign; what does not close from there
    is begun as usual.
    """
    if not engine.moving:
        engine.flow = engine.difference / engine.still
        engine.converged = np.isfinite(engine.flow)
        return
    # With equal temperatures and nothing else to radiate to, nothing flows.
    idle = (engine.difference == 0.0) & (not engine.foreign)
    samples = np.flatnonzero(~idle)
    engine.converged = idle.copy()
    if len(samples):
        if near is not None:
            engine.converged[samples] = newton(engine, samples, *started_near(engine, samples, near), passes)
            samples = samples[~engine.converged[samples] & np.isfinite(near[0, samples])]
        if len(samples):
            engine.converged[samples] = newton(engine, samples, *start(engine, samples), passes)


def start(engine: Engine, samples: Array) -> tuple[Array, Array]:
    """First values: equal drops, then the heat flow and the drops of the resistances found there."""
    count = len(engine.moving)
    difference, still = engine.part(engine.difference, samples), engine.part(engine.still, samples)
    if engine.foreign:
        low, high = temperature_range(engine, samples)
        drops = np.tile(
            np.sign(difference) * np.maximum(np.abs(difference) / (count + 1), 0.01 * (high - low)),
            (count, 1),
        )
        drops = np.where(drops == 0.0, 0.01 * (high - low), drops)
        flow, _, _ = engine.carried(0, drops, np.ones(len(samples)), samples)
        return flow, drops
    drops = np.tile(difference / (count + 1), (count, 1))
    flow = 0.5 * difference / np.where(still > 0.0, still, 1e-2)
    for _ in range(8):
        resistances = np.array(
            [drops[number] / engine.carried(number, drops, flow, samples)[0] for number in range(count)]
        )
        missing = ~np.isfinite(resistances).all(axis=0)
        if not missing.any():
            break
        drops = np.where(missing, 0.25 * drops, drops)
    better = difference / (still + resistances.sum(axis=0))
    good = np.isfinite(better) & (better != 0.0)
    return np.where(good, better, flow), np.where(good, better * resistances, drops)


def started_near(engine: Engine, samples: Array, near: Array) -> tuple[Array, Array]:
    """First values from unknowns of a like circuit, made to add up; the usual ones where there are none."""
    unknown = np.take(near, samples, axis=1)
    usable = np.isfinite(unknown).all(axis=0)
    if not engine.foreign:
        difference, still = engine.part(engine.difference, samples), engine.part(engine.still, samples)
        usable &= (np.sign(unknown) == np.sign(difference)).all(axis=0)
        unknown = unknown * (difference / (unknown[1:].sum(axis=0) + unknown[0] * still))
    others = np.flatnonzero(~usable)
    if len(others):
        flow, drops = start(engine, samples[others])
        unknown[0, others], unknown[1:, others] = flow, drops
    return unknown[0], unknown[1:]


def temperature_range(engine: Engine, samples: Array) -> tuple[Array, Array]:
    """Lowest and highest temperature that a sample's circuit touches: every surface lies between them."""
    names = {group.bulk for group in (engine.chain.inner, engine.chain.outer)}
    for element in engine.chain.elements:
        if isinstance(element, Group):
            names |= {branch.reference for branch in element.branches}
    every = np.stack([engine.full(name)[samples] for name in sorted(names)])
    return every.min(axis=0), every.max(axis=0)


@dataclass
class _Slopes:
    """The linear form of the laws: ``own[i][j]`` by drop j, ``flow[i]`` by the heat flow, negated."""

    own: Array
    flow: Array

    def part(self, places: Array) -> _Slopes:
        return _Slopes(np.take(self.own, places, axis=2), np.take(self.flow, places, axis=1))

    def put(self, places: Array, other: _Slopes) -> None:
        self.own[:, :, places] = other.own
        self.flow[:, places] = other.flow


def newton(engine: Engine, samples: Array, flow: Array, drops: Array, passes: int = MAXIMUM_PASSES) -> Array:
    """Passes from a start to the answer; writes flow and drops of the samples, returns which settled."""
    return _Passes(engine, samples, flow, drops).settled(passes)


class _Passes:
    """The unknowns of some samples (heat flow first, then the drops), on their way."""

    def __init__(self, engine: Engine, samples: Array, flow: Array, drops: Array):
        self.engine = engine
        self.samples = samples
        self.unknown = np.vstack([flow[None, :], drops])
        count, size = drops.shape
        self.slopes = _Slopes(np.zeros((count, count, size)), np.zeros((count, size)))
        self.before = self.unknown.copy()
        self.step = np.zeros_like(self.unknown)
        self.length = np.ones(size)
        self.merit = np.full(size, np.inf)
        self.fresh = np.ones(size, dtype=bool)
        self.done = np.zeros(size, dtype=bool)
        self.halvings = np.zeros(size, dtype=int)
        self.difference = engine.part(engine.difference, samples)
        self.still = engine.part(engine.still, samples)
        if engine.foreign:
            low, high = temperature_range(engine, samples)
            self.span = high - low

    def settled(self, passes: int) -> Array:
        active = np.arange(len(self.samples))
        for _ in range(passes):
            if not len(active):
                break
            self._pass(active)
            active = active[~self.done[active]]
            if passes == FEW_PASSES:
                active = active[self.halvings[active] <= FEW_HALVINGS]
        self.engine.flow[self.samples] = self.unknown[0]
        self.engine.drops[:, self.samples] = self.unknown[1:]
        return self.done

    def _pass(self, active: Array) -> None:
        fresh = self.fresh[active]
        if len(active) <= FEW_SAMPLES or fresh.all() or not fresh.any():
            self._move(active, fresh)
            return
        for places in (active[fresh], active[~fresh]):
            self._move(places, self.fresh[places])

    def _move(self, places: Array, fresh: Array) -> None:
        """One pass for some samples: their laws, then the next step, or half of the last one.

        Those that are ``fresh`` take new slopes, the others those that they have.
        """
        unknown = _taken(self.unknown, places)
        residual, slopes = self._laws(unknown, places, bool(fresh.any()))
        if slopes is not None and fresh.all():
            self.slopes.put(places, slopes)
        else:
            if slopes is not None:
                self.slopes.put(places[fresh], slopes.part(np.flatnonzero(fresh)))
            slopes = self.slopes.part(places)
        summed, weights, by_flow = self._sum(unknown, places)
        step = _substituted(slopes, residual, weights, by_flow, summed)
        merit = self._merit(residual, summed, places)
        good = np.isfinite(step).all(axis=0) & (
            merit <= np.maximum(LARGEST_RISE * self.merit[places], ROUNDING)
        )
        if not good.all():
            self._halve(places[~good])
            step, unknown, merit, places = (
                _taken(step, np.flatnonzero(good)),
                _taken(unknown, np.flatnonzero(good)),
                merit[good],
                places[good],
            )
        if len(places):
            self._advance(places, unknown, step, merit)

    def _merit(self, residual: Array, summed: Array, places: Array) -> Array:
        """The largest residual, relative."""
        if not self.engine.foreign:
            return np.maximum(np.abs(residual).max(axis=0), np.abs(summed))
        span = self.span[places]
        return np.maximum(
            np.abs(residual).max(axis=0) / (np.abs(self.slopes.own[0, 0, places]) * span),
            np.abs(summed) / span,
        )

    def _halve(self, places: Array) -> None:
        """Go back half of the last step: it led where a law has no value, or too far."""
        self.halvings[places] += 1
        step = 0.5 * _taken(self.step, places)
        self.step[:, places] = step
        self.unknown[:, places] = self._stepped(_taken(self.before, places), step, places)
        self.fresh[places] = True

    def _advance(self, places: Array, unknown: Array, step: Array, merit: Array) -> None:
        if not self.engine.foreign:
            step = np.clip(step, -LARGEST_LOG_STEP, LARGEST_LOG_STEP)
        self.halvings[places] = 0
        length = self._length(unknown, step, places)
        ratio = length / self.length[places]
        self.before[:, places] = unknown
        self.step[:, places] = step
        self.unknown[:, places] = self._stepped(unknown, step, places)
        self.merit[places] = merit
        self.length[places] = length
        self.fresh[places] = (length > FRESH_SLOPES_ABOVE) | (ratio > SLOWEST_RATIO)
        smallest = np.maximum(SMALLEST_STEP, self.engine.resolution(unknown[1:], self.samples[places]))
        self.done[places] = (length <= smallest) | (
            (length * ratio <= STEP_TOLERANCE) & (ratio <= SLOWEST_RATIO)
        )

    def _length(self, unknown: Array, step: Array, places: Array) -> Array:
        """The largest part of a step, relative to the unknowns."""
        if not self.engine.foreign:
            return np.abs(step).max(axis=0)
        # The heat flow may be nothing while parts of it are not: it is measured by what the drops carry.
        carried = np.abs(self.slopes.own[0, 0, places]) * self.span[places]
        parts = np.vstack(
            [
                (np.abs(step[0]) / (np.abs(unknown[0]) + carried))[None, :],
                np.abs(step[1:]) / (np.abs(unknown[1:]) + self.span[places]),
            ]
        )
        return parts.max(axis=0)

    def _stepped(self, unknown: Array, step: Array, places: Array) -> Array:
        """The unknowns after a step, kept where surfaces can be."""
        if self.engine.foreign:
            moved = unknown + step
            span = self.span[places]
            moved[1:] = np.clip(moved[1:], -span, span)
            return moved
        moved = unknown * np.exp(step)
        difference = np.abs(self.difference[places])
        total = np.abs(moved[1:]).sum(axis=0)
        moved[1:] = moved[1:] * np.where(total > difference, difference / total, 1.0)
        return moved

    def _laws(self, unknown: Array, places: Array, wants_slopes: bool) -> tuple[Array, _Slopes | None]:
        """Residual of every law, in logarithms or in W, and its slopes where they are wanted."""
        flow, drops = unknown[0], unknown[1:]
        count = len(drops)
        residual = np.empty_like(drops)
        slopes = _Slopes(np.zeros((count, count, len(flow))), np.zeros_like(drops)) if wants_slopes else None
        samples = self.samples[places]
        for number in range(count):
            carried, by_drop, by_flow = self.engine.carried(number, drops, flow, samples, wants_slopes)
            residual[number] = carried - flow if self.engine.foreign else np.log(carried / flow)
            if slopes is None:
                continue
            scale = np.ones(()) if self.engine.foreign else 1.0 / carried
            for other, slope in by_drop.items():
                slopes.own[number, other] = slope if self.engine.foreign else slope * drops[other] * scale
            slopes.flow[number] = 1.0 - (by_flow if self.engine.foreign else by_flow * flow * scale)
        return residual, slopes

    def _sum(self, unknown: Array, places: Array) -> tuple[Array, Array, Array]:
        """The summed drops less the whole difference, with its slopes by the drops and the flow."""
        flow, drops = unknown[0], unknown[1:]
        difference, still = self.difference[places], self.still[places]
        if self.engine.foreign:
            return drops.sum(axis=0) + flow * still - difference, np.ones_like(drops), still
        weights, by_flow = drops / difference, flow * still / difference
        return weights.sum(axis=0) + by_flow - 1.0, weights, by_flow


def _taken(rows: Array, places: Array) -> Array:
    """Some columns, laid out row by row (a strided row may be worked by another inner loop)."""
    return np.take(rows, places, axis=1)


def _substituted(slopes: _Slopes, residual: Array, weights: Array, by_flow: Array, summed: Array) -> Array:
    """The Newton step: each drop as constant + factor * step of the flow, the flow from the sum."""
    count = len(residual)
    constants, factors = np.empty_like(residual), np.empty_like(residual)
    for number in range(count):
        constant, factor = -residual[number], slopes.flow[number]
        for earlier in range(number):
            constant = constant - slopes.own[number, earlier] * constants[earlier]
            factor = factor - slopes.own[number, earlier] * factors[earlier]
        constants[number] = constant / slopes.own[number, number]
        factors[number] = factor / slopes.own[number, number]
    above, below = -summed, by_flow
    for number in range(count):
        above = above - weights[number] * constants[number]
        below = below + weights[number] * factors[number]
    flow = above / below
    return np.vstack([flow[None, :], constants + factors * flow])
