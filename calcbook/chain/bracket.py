"""What Newton's method leaves open, bracketed: in Q, with which the summed drop rises, and drop by drop.

A law that jumps at a joint can have no root there: then the side with the lower coefficient is held, both
coefficients are kept, and the caller raises an open item. All samples are bracketed together.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np

from calcbook.chain.closing import newton, temperature_range
from calcbook.chain.types import Branch, Group

if TYPE_CHECKING:
    from calcbook.chain.solve import Engine

Array = np.ndarray
Excess = Callable[[Array], Array]
PASSES = 120
EXPANSIONS = 60
# A bracket is closed when its ends differ by rounding.
WIDTH = 4e-16
# How well a law must be met, relative; and how far beside a joint its two sides are taken.
LAW_TOLERANCE = 1e-10
JOINT_SHIFT = 1e-9
JOINT_GAP = 1e-7


def bracket(engine: Engine, samples: Array) -> Array:
    """Close some samples; writes flow and drops; returns which have an answer."""
    settled = np.zeros(len(samples), dtype=bool)
    waiting = np.flatnonzero(_have_values(engine, samples))
    for _ in range(1 + len(engine.moving)):
        if not len(waiting):
            break
        settled[waiting] = _found(engine, samples[waiting])
        waiting = waiting[~settled[waiting]]
        if not len(waiting) or not _hold_lower_sides(engine, samples[waiting]):
            break
    return settled


def _have_values(engine: Engine, samples: Array) -> Array:
    """Which samples have a value of every law near no drop: without one there is nothing to seek."""
    lowest, highest = temperature_range(engine, samples)
    drops = np.tile(
        np.copysign(1e-6 * (highest - lowest), engine.difference[samples]), (len(engine.moving), 1)
    )
    known = np.isfinite(engine.difference[samples] + engine.still[samples])
    for number in range(len(drops)):
        carried, _, _ = engine.carried(number, drops, np.copysign(1.0, drops[number]), samples)
        known &= ~np.isnan(carried)
    return known


def _found(engine: Engine, samples: Array) -> Array:
    """Bracket, then polish: what Newton's method makes worse stays as it was bracketed."""
    flow = _flow(engine, samples)
    drops = _drops(engine, samples, flow)
    settled = newton(engine, samples, flow, drops)
    engine.flow[samples[~settled]] = flow[~settled]
    engine.drops[:, samples[~settled]] = drops[:, ~settled]
    return settled | _meets_laws(engine, samples)


def _meets_laws(engine: Engine, samples: Array) -> Array:
    flow, drops = engine.flow[samples], np.take(engine.drops, samples, axis=1)
    met = np.isfinite(flow)
    tolerance = LAW_TOLERANCE + 4.0 * engine.resolution(drops, samples)
    for number in range(len(drops)):
        carried, _, _ = engine.carried(number, drops, flow, samples)
        met &= np.abs(carried - flow) <= tolerance * np.abs(flow)
    summed = drops.sum(axis=0) + flow * engine.still[samples] - engine.difference[samples]
    return met & (np.abs(summed) <= LAW_TOLERANCE * np.abs(drops).max(axis=0))


# --- the heat flow ----------------------------------------------------------------------------------


def _flow(engine: Engine, samples: Array) -> Array:
    """The heat flow at which the drops add up to the whole difference."""
    difference, still = engine.difference[samples], engine.still[samples]

    def excess(flow: Array) -> Array:
        return _drops(engine, samples, flow).sum(axis=0) + flow * still - difference

    low, high = _flow_bounds(engine, samples, excess)
    return _root(excess, low, high)


def excess_at(engine: Engine, flow: Array) -> Array:
    """For a heat flow of every sample, the summed drops that carry it less the whole difference."""
    return _drops(engine, engine.everything, flow).sum(axis=0) + flow * engine.still - engine.difference


def _flow_bounds(engine: Engine, samples: Array, excess: Excess) -> tuple[Array, Array]:
    """Two heat flows with the answer between them."""
    difference = engine.difference[samples]
    reach = np.maximum(np.abs(difference), 1e-3)
    up = (difference > 0.0) | engine.foreign
    down = (difference < 0.0) | engine.foreign
    low, high = np.where(down, -reach, 0.0), np.where(up, reach, 0.0)
    for _ in range(EXPANSIONS):
        short_above, short_below = up & (excess(high) < 0.0), down & (excess(low) > 0.0)
        if not (short_above | short_below).any():
            break
        high, low = np.where(short_above, 4.0 * high, high), np.where(short_below, 4.0 * low, low)
    return low, high


# --- the drops at a heat flow -----------------------------------------------------------------------


def _drops(engine: Engine, samples: Array, flow: Array) -> Array:
    """The drop of every moving element when it carries a heat flow; at most the whole range of temperatures.

    Where a law has no value (a fluid beyond its data), the root is taken to lie nearer to no drop; at no
    drop itself nothing is carried, whatever the coefficient.
    """
    lowest, highest = temperature_range(engine, samples)
    span = highest - lowest
    drops = np.zeros((len(engine.moving), len(samples)))
    up, down = (flow > 0.0) | engine.foreign, (flow < 0.0) | engine.foreign
    for number in range(len(drops)):
        trial = drops.copy()

        def excess(drop: Array, number: int = number, trial: Array = trial) -> Array:
            trial[number] = drop
            carried, _, _ = engine.carried(number, trial, flow, samples)
            beyond = np.where(drop == 0.0, -flow, np.copysign(np.inf, drop))
            return np.where(np.isnan(carried), beyond, carried - flow)

        drops[number] = _root(excess, np.where(down, -span, 0.0), np.where(up, span, 0.0))
    return drops


def _root(excess: Excess, low: Array, high: Array) -> Array:
    """Where a rising function passes zero between two bounds, or the bound at which it comes nearest.

    Interpolation kept inside the bracket, and a halving whenever two passes did not halve it.
    """
    at_low, at_high = excess(low), excess(high)
    # A law without a slope at no drop (0 carried at 0) still has its root above it.
    below, above = at_low >= 0.0, at_high <= 0.0
    for number in range(PASSES):
        open_places = (np.abs(high - low) > WIDTH * np.maximum(np.abs(low), np.abs(high))) & ~below & ~above
        if not open_places.any():
            break
        middle = 0.5 * (low + high)
        if number % 3 != 2:
            line = low - at_low * (high - low) / (at_high - at_low)
            edge = 1e-3 * (high - low) if number % 3 == 0 else WIDTH * (high - low)
            line = np.clip(line, low + edge, high - edge)
            middle = np.where(np.isfinite(line), line, middle)
        value = excess(middle)
        rises = value > 0.0
        high, at_high = (
            np.where(rises & open_places, middle, high),
            np.where(rises & open_places, value, at_high),
        )
        low, at_low = (
            np.where(~rises & open_places, middle, low),
            np.where(~rises & open_places, value, at_low),
        )
    nearest = np.where(np.abs(at_low) <= np.abs(at_high), low, high)
    return np.where(below, low, np.where(above, high, nearest))


# --- a law without a root ---------------------------------------------------------------------------


def _hold_lower_sides(engine: Engine, samples: Array) -> bool:
    """Hold films that jump at the bracketed drop on their lower side; False when none does."""
    held = False
    flow, drops = engine.flow[samples], np.take(engine.drops, samples, axis=1)
    for number, element in enumerate(engine.moving):
        if not isinstance(element, Group):
            continue
        for branch in element.branches:
            held |= _hold(engine, element, branch, samples, drops[number], flow)
    return held


def _hold(engine: Engine, group: Group, branch: Branch, samples: Array, drop: Array, flow: Array) -> bool:
    sign = -1.0 if group.side == "inside" else 1.0
    bulk = engine.full(group.bulk)[samples]
    flux = np.abs(flow) / engine.areas[group.name][samples]
    sides = []
    for shift in (-JOINT_SHIFT, JOINT_SHIFT):
        surface = bulk + sign * drop * (1.0 + shift)
        coefficient, _ = engine.film(group, branch, samples, surface, flux, False)
        choice = engine.choice(group, branch, samples, {group.surface_temperature: surface, group.flux: flux})
        sides.append((coefficient, choice))
    (before, choice_before), (after, choice_after) = sides
    jumps = np.abs(after - before) > JOINT_GAP * np.abs(before)
    if not jumps.any():
        return False
    first_is_lower = before <= after
    lower, upper = np.where(first_is_lower, before, after), np.where(first_is_lower, after, before)
    choice = np.where(first_is_lower, choice_before, choice_after)
    low, high = engine.jump_sides.setdefault(
        branch.name, (np.full(engine.size, np.nan), np.full(engine.size, np.nan))
    )
    low[samples[jumps]], high[samples[jumps]] = lower[jumps], upper[jumps]
    by_choice = jumps & (choice_before != choice_after)
    chosen = engine.held_choice.setdefault(branch.name, np.full(engine.size, -1))
    chosen[samples[by_choice]] = choice[by_choice]
    value = engine.held_value.setdefault(branch.name, np.full(engine.size, np.nan))
    within = jumps & ~by_choice
    value[samples[within]] = lower[within]
    return True
