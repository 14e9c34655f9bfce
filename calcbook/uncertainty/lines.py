"""Where a given is moved to: the figures on either side of its present one, within what it can physically be."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache

import numpy as np

from calcbook.chain.fluids import LiquidOperation, PropertyOperation
from calcbook.chain.types import Chain, ChainStep, Group, Input, Layer

# Without a flow there is no film: the search stays above zero.
FLOWS = frozenset(("mass flow", "volume flow", "speed"))
# Figures on one side of the present one, and how near and how far: a figure by its logarithm, a temperature in K.
POINTS = 22
NEAREST, FACTOR = 0.003, 100.0
NEAREST_KELVIN, FARTHEST_KELVIN = 0.1, 200.0
# A figure that is another state of a fluid costs its properties anew: fewer figures, less far.
STATE_POINTS, STATE_NEAREST, STATE_FACTOR = 7, 0.03, 10.0
# From zero no step is small or large: the decades in SI in which the quantities of this trade lie.
FROM_ZERO = (1e-8, 1e4)
WHOLE_NEAR = 8


@dataclass(frozen=True)
class Reach:
    """The figures of a search on one side, nearest first, and in words why it goes no farther."""

    figures: tuple[float, ...]
    end: str


def reach(item: Input, now: float, direction: int, changes_state: bool) -> Reach:
    """The figures (SI) that a given takes on one side: below (``direction`` -1) or above (+1) the present one."""
    if item.kind.scale == "point":
        offsets = _spread(NEAREST_KELVIN, FARTHEST_KELVIN, POINTS)
        figures = [now + direction * offset for offset in offsets]
        return Reach(tuple(figure for figure in figures if figure > 0.0), f"{FARTHEST_KELVIN:g} K away")
    if item.kind.counts and now == int(now):
        return _whole(item, now, direction)
    factor, count = (STATE_FACTOR, STATE_POINTS) if changes_state else (FACTOR, POINTS)
    if now == 0.0:
        if direction < 0 and item.kind.sign != "any":
            return Reach((), "zero")
        low, high = FROM_ZERO
        return Reach(
            tuple(direction * figure for figure in _spread(low, high, count)),
            "the end of the search",
        )
    near = STATE_NEAREST if changes_state else NEAREST
    if item.kind.sign == "any" or item.kind.reading == "gauge" or now < 0.0:
        return Reach(
            tuple(now + direction * abs(now) * part for part in _spread(near, factor, count)),
            f"{_words(factor)[1]} times its size away",
        )
    logarithms = _spread(near, math.log(factor), count)
    figures = [now * math.exp(direction * logarithm) for logarithm in logarithms]
    bound = item.kind.bounds[direction > 0]
    if math.isfinite(bound):
        inside = [figure for figure in (now, *figures) if direction * figure < direction * bound]
        words = item.kind.most if direction > 0 else item.kind.least
        return Reach((*inside[1:], bound) if inside else (), "one" if words == "1" else "its definition")
    if direction < 0:
        if item.kind.sign == "not negative" and item.kind.name not in FLOWS:
            return Reach((*figures, 0.0), "zero")
        return Reach(tuple(figures), f"{_words(factor)[0]} of it")
    return Reach(tuple(figures), f"{_words(factor)[1]} times it")


@cache
def _spread(low: float, high: float, count: int) -> tuple[float, ...]:
    """Figures from one to another, each as much larger than the one before it."""
    return tuple(np.geomspace(low, high, count).tolist())


def _words(factor: float) -> tuple[str, str]:
    return {10.0: ("a tenth", "ten"), 100.0: ("a hundredth", "a hundred")}[factor]


def _whole(item: Input, now: float, direction: int) -> Reach:
    """Whole numbers: each of the nearest, then in widening steps."""
    lowest = 0.0 if item.kind.sign == "not negative" else 1.0
    far = FACTOR * max(now, 1.0)
    wide = _spread(WHOLE_NEAR, far, POINTS - WHOLE_NEAR)
    offsets = [*range(1, WHOLE_NEAR), *(round(offset) for offset in wide)]
    figures = dict.fromkeys(now + direction * float(offset) for offset in offsets)
    if direction > 0:
        return Reach(tuple(figures), f"{_words(FACTOR)[1]} times it")
    kept = [figure for figure in figures if figure > lowest]
    return Reach((*kept, lowest) if now > lowest else (), "one" if lowest else "none")


def changes_fluid_state(chain: Chain) -> frozenset[str]:
    """Ids of the givens on which the pressure or composition of a fluid depends."""
    found = set()
    steps = list(_every_step(chain))
    for name, item in chain.inputs.items():
        follows = {name}
        for step in steps if item.is_given else ():
            if follows.isdisjoint(step.inputs.values()):
                continue
            follows.add(step.id)
            if isinstance(step.operation, PropertyOperation | LiquidOperation) and any(
                step.inputs.get(local) in follows for local in ("p", "w")
            ):
                found.add(name)
                break
    return frozenset(found)


def _every_step(chain: Chain) -> Iterator[ChainStep]:
    yield from chain.steps
    for element in chain.elements:
        if isinstance(element, Layer):
            yield from element.steps
        if isinstance(element, Group):
            for branch in element.branches:
                yield from branch.choice_steps
                for candidate in branch.candidates:
                    yield from candidate.steps
