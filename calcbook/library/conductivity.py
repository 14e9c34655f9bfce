"""Conductivity of a solid from its card: piecewise linear, with the exact mean over an interval."""

from __future__ import annotations

import numpy as np

from calcbook.library.cards import Material

Array = np.ndarray


class ConductivityTable:
    """k(T) of one material card.

    Beyond the rows the value of the nearest row is held; the caller raises the check. ``mean`` is the
    integral of k between two temperatures divided by their difference, exact for straight pieces.
    """

    def __init__(self, card: Material):
        self.id = card.id
        self.temperatures = card.temperatures
        self.conductivities = card.conductivities
        pieces = 0.5 * (card.conductivities[1:] + card.conductivities[:-1]) * np.diff(card.temperatures)
        self._integral = np.concatenate([[0.0], np.cumsum(pieces)])

    @property
    def limits(self) -> tuple[float, float]:
        """Lowest and highest temperature of the table, K."""
        return float(self.temperatures[0]), float(self.temperatures[-1])

    def value(self, temperature: Array) -> Array:
        """Conductivity at a temperature, W/(m K)."""
        return np.interp(temperature, self.temperatures, self.conductivities)

    def slope(self, temperature: Array) -> Array:
        """dk/dT, W/(m K^2); zero beyond the rows, the right-hand slope on a row."""
        if len(self.temperatures) < 2:
            return np.zeros_like(np.asarray(temperature, dtype=float))
        gradients = np.diff(self.conductivities) / np.diff(self.temperatures)
        place = np.minimum(np.maximum(self._piece(temperature) - 1, 0), len(gradients) - 1)
        low, high = self.limits
        inside = (np.asarray(temperature) >= low) & (np.asarray(temperature) <= high)
        return np.where(inside, gradients[place], 0.0)

    def mean(self, first: Array, second: Array) -> Array:
        """Mean conductivity between two temperatures, W/(m K)."""
        first, second = np.asarray(first, dtype=float), np.asarray(second, dtype=float)
        apart = second - first
        # Within one straight piece the mean is the middle value; it also avoids a difference of near equals.
        same = self._piece(first) == self._piece(second)
        middle = self.value(0.5 * (first + second))
        if same.all():
            return middle
        with np.errstate(divide="ignore", invalid="ignore"):
            quotient = (self._integral_to(second) - self._integral_to(first)) / apart
        return np.where(same | (apart == 0.0), middle, quotient)

    def _piece(self, temperature: Array) -> Array:
        return np.searchsorted(self.temperatures, temperature, side="right")

    def _integral_to(self, temperature: Array) -> Array:
        low, high = self.limits
        held = np.minimum(np.maximum(temperature, low), high)
        place = self._piece(held) - 1
        place = np.minimum(np.maximum(place, 0), max(len(self.temperatures) - 2, 0))
        start, at_start = self.temperatures[place], self.conductivities[place]
        inside = self._integral[place] + 0.5 * (at_start + self.value(held)) * (held - start)
        below = (np.minimum(temperature, low) - low) * self.conductivities[0]
        above = (np.maximum(temperature, high) - high) * self.conductivities[-1]
        return inside + below + above
