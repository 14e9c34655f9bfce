"""Chebyshev series of one variable over one interval: fit, value, derivative.

Values are found by Clenshaw's recurrence with elementwise sums and products only, so the bits of a
sample do not depend on the other samples of the array. Source: C. W. Clenshaw, A note on the summation
of Chebyshev series, Mathematical Tables and Other Aids to Computation 9 (1955) 118-120.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

NODES = 28


def nodes(low: float, high: float) -> Array:
    """The ``NODES`` Chebyshev points (of the first kind) of an interval; none lies on its ends."""
    angles = (np.arange(NODES) + 0.5) * (np.pi / NODES)
    return 0.5 * (low + high) + 0.5 * (high - low) * np.cos(angles)


def test_points(low: float, high: float) -> Array:
    """Both ends and every second point midway between nodes: where a fit is compared with its source."""
    angles = np.arange(2, NODES, 2) * (np.pi / NODES)
    inner = 0.5 * (low + high) + 0.5 * (high - low) * np.cos(angles)
    return np.concatenate(([low], inner, [high]))


def fit(values: Array) -> list[float]:
    """Coefficients c_0 ... of the series through ``values`` at ``nodes``; c_0 enters whole, not halved."""
    angles = (np.arange(NODES) + 0.5) * (np.pi / NODES)
    orders = np.arange(NODES)[:, np.newaxis]
    coefficients = (np.cos(orders * angles) * values).sum(axis=1) * (2.0 / NODES)
    coefficients[0] *= 0.5
    return [float(coefficient) for coefficient in coefficients]


def shortened(coefficients: list[float], neglected: float) -> list[float]:
    """The series without its last terms, as far as they come to ``neglected`` at most; never without its first."""
    left_out, count = 0.0, len(coefficients)
    while count > 1 and left_out + abs(coefficients[count - 1]) <= neglected:
        count -= 1
        left_out += abs(coefficients[count])
    return coefficients[:count]


def evaluate(coefficients: Sequence[float], low: float, high: float, at: Array) -> Array:
    """The sum of the series at ``at`` (any shape).

    One sample goes the same way in plain floats, which is ten times faster: sums and products are rounded
    alike in both.
    """
    if at.size == 1:
        return np.full(at.shape, _evaluate_one(coefficients, low, high, at.item()))
    x = (at - 0.5 * (low + high)) / (0.5 * (high - low))
    double = x + x
    later, last, free = np.zeros_like(x), np.zeros_like(x), np.empty_like(x)
    for coefficient in reversed(coefficients[1:]):
        # double*later - last + coefficient, in memory that is there already
        np.multiply(double, later, out=free)
        np.subtract(free, last, out=free)
        np.add(free, coefficient, out=free)
        later, last, free = free, later, last
    return x * later - last + coefficients[0]


def evaluate_rows(coefficients: Array, middle: Array, half: Array, at: Array) -> Array:
    """The sums of several series at the same points (1-d), a row each, to the same bits as one by one.

    ``coefficients`` have a series in each column (terms, series, 1), or one of its own for every point (terms,
    series, points); a shorter one ends in zeros. ``middle`` and ``half`` are the middle and half the width of each
    interval, (series, 1) or (series, points), or (1, 1) of the one that all share.
    """
    x = (at - middle) / half
    double = x + x
    rows = (coefficients.shape[1], at.size)
    later, last, free = np.zeros(rows), np.zeros(rows), np.empty(rows)
    for coefficient in coefficients[:0:-1]:
        np.multiply(double, later, out=free)
        np.subtract(free, last, out=free)
        np.add(free, coefficient, out=free)
        later, last, free = free, later, last
    return x * later - last + coefficients[0]


def _evaluate_one(coefficients: Sequence[float], low: float, high: float, at: float) -> float:
    x = (at - 0.5 * (low + high)) / (0.5 * (high - low))
    double = x + x
    later = last = 0.0
    for coefficient in reversed(coefficients[1:]):
        later, last = double * later - last + coefficient, later
    return x * later - last + coefficients[0]


def derivative(coefficients: Sequence[float], low: float, high: float) -> list[float]:
    """Coefficients of the derivative with respect to the variable of the interval (not the reduced one)."""
    count = len(coefficients)
    sloped = [0.0] * (count + 1)
    for order in range(count - 1, 0, -1):
        sloped[order - 1] = sloped[order + 1] + 2.0 * order * coefficients[order]
    sloped[0] *= 0.5
    scale = 2.0 / (high - low)
    return [scale * coefficient for coefficient in sloped[: max(count - 1, 1)]]
