"""Curves that are dear to evaluate: summed and searched with many points in one call, and few calls."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.polynomial import legendre

Array = np.ndarray
Curve = Callable[[Array], Array]
# Nodes of one piece: their sum is exact for polynomials up to degree 15, their polynomial is of degree 7.
NODES, WEIGHTS = legendre.leggauss(8)
# A piece is cut in two until its polynomial meets the curve at the nodes of both halves within this part of the
# largest value; the polynomials of the halves then miss by 2^-8 of it, as both are of degree 7.
AGREEMENT = 1e-8
MAXIMUM_CUTS = 40
# Points of one round of a search, and its rounds: 40^-6 of the range, then a straight line.
POINTS, ROUNDS = 41, 6
ROOT_PASSES = 100
ROOT_AGREEMENT = 1e-14


class Summed:
    """A curve in pieces of polynomials, with its integral from the first edge to any place.

    ``edges`` are its ends and the places where it bends, as far as they are known. All pieces that are still to be
    cut are evaluated in one call. What the curve does not know (NaN) is not known here either; ``rounding`` is the
    size of its own rounding, below which cutting finds nothing.
    """

    def __init__(self, curve: Curve, edges: Array, rounding: float):
        settled: list[tuple[Array, Array, Array]] = []
        lows, highs = np.asarray(edges[:-1], dtype=float), np.asarray(edges[1:], dtype=float)
        values = _values(curve, lows, highs)
        largest = float(np.finfo(float).tiny)
        for cut in range(MAXIMUM_CUTS):
            count, series = len(lows), _series(values)
            middle = 0.5 * (lows + highs)
            lows, highs = np.concatenate([lows, middle]), np.concatenate([middle, highs])
            values = _values(curve, lows, highs)
            largest = max(largest, float(np.abs(values).max(initial=0.0, where=np.isfinite(values))))
            # The nodes of both halves on the scale of the whole piece.
            left, right = (NODES - 1.0) / 2.0, (NODES + 1.0) / 2.0
            off = np.maximum(
                np.abs(legendre.legval(left, series) - values[:count]).max(axis=1),
                np.abs(legendre.legval(right, series) - values[count:]).max(axis=1),
            )
            # What is not known stays so however it is cut.
            agreed = ~(off > max(AGREEMENT * largest, rounding)) | (cut == MAXIMUM_CUTS - 1)
            done = np.concatenate([agreed, agreed])
            settled.append((lows[done], highs[done], values[done]))
            lows, highs, values = lows[~done], highs[~done], values[~done]
            if not len(lows):
                break
        low_ends, high_ends, found = (np.concatenate(parts) for parts in zip(*settled, strict=True))
        order = np.argsort(low_ends)
        self.low, self.high = low_ends[order], high_ends[order]
        self.series = _series(found[order])
        pieces = 0.5 * (self.high - self.low) * (found[order] @ WEIGHTS)
        self.before = np.concatenate([[0.0], np.cumsum(pieces)])[:-1]

    def value(self, places: Array) -> Array:
        """The curve itself at places."""
        piece, inside = self._find(places)
        return np.asarray(legendre.legval(inside, self.series[:, piece], tensor=False))

    def sum(self, places: Array) -> Array:
        """The integral from the first edge to places."""
        piece, inside = self._find(places)
        half = 0.5 * (self.high - self.low)[piece]
        part = legendre.legint(self.series, lbnd=-1)[:, piece]
        return np.asarray(self.before[piece] + half * legendre.legval(inside, part, tensor=False))

    def _find(self, places: Array) -> tuple[Array, Array]:
        piece = np.clip(np.searchsorted(self.low, places, side="right") - 1, 0, len(self.low) - 1)
        low, high = self.low[piece], self.high[piece]
        return piece, (2.0 * places - low - high) / (high - low)


def _values(curve: Curve, low: Array, high: Array) -> Array:
    """The curve at the nodes of pieces, one row a piece."""
    places = (0.5 * (low + high))[:, None] + (0.5 * (high - low))[:, None] * NODES[None, :]
    return curve(places.reshape(-1)).reshape(places.shape)


def _series(values: Array) -> Array:
    """The Legendre coefficients (rows) of the polynomial through the nodes of each piece (columns)."""
    orders = np.arange(len(NODES))
    at_nodes = legendre.legvander(NODES, len(NODES) - 1)
    return np.asarray((orders[:, None] + 0.5) * (at_nodes.T @ (values * WEIGHTS).T))


def crossing(curve: Curve, low: float, high: float) -> float:
    """The first place at which a curve that starts above zero comes to it; NaN where it does not."""
    for _ in range(ROUNDS):
        places = np.linspace(low, high, POINTS)
        values = curve(places)
        below = np.flatnonzero(~(values > 0.0))
        if not len(below) or below[0] == 0:
            return math.nan
        low, high = float(places[below[0] - 1]), float(places[below[0]])
    above, under = values[below[0] - 1], values[below[0]]
    if not math.isfinite(under):
        return math.nan
    return float(low + (high - low) * above / (above - under))


def root(curve: Curve, low: float, high: float) -> float:
    """A root of a curve that is cheap to evaluate, between two places at which its sign differs, by halving."""
    falls = bool(curve(np.array([low]))[0] > 0.0)
    for _ in range(ROOT_PASSES):
        middle = 0.5 * (low + high)
        if high - low <= ROOT_AGREEMENT * abs(middle):
            break
        if bool(curve(np.array([middle]))[0] > 0.0) == falls:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)
