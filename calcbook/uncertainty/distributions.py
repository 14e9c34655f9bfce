"""Distributions of figures that are not known exactly (JCGM 101:2008, 6.4), by the inverse of their law.

``at`` takes shares between 0 and 1 and gives the values below which these shares lie, so that one uniform
number makes one value, whatever the distribution.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Protocol

import numpy as np

Array = np.ndarray
# Above this relative standard uncertainty a normal law has a tail below zero that matters.
LARGEST_NORMAL = 0.3


class Distribution(Protocol):
    """A law with its best estimate and its standard uncertainty."""

    @property
    def mean(self) -> float: ...

    @property
    def standard(self) -> float: ...

    @property
    def words(self) -> str: ...

    def at(self, share: Array) -> Array: ...


@dataclass(frozen=True, slots=True)
class Normal:
    """The normal law."""

    mean: float
    standard: float
    words: str = "normal"

    def at(self, share: Array) -> Array:
        from scipy.special import ndtri

        return self.mean + self.standard * ndtri(share)


@dataclass(frozen=True, slots=True)
class PositiveNormal:
    """The normal law cut off at zero, for what is above zero; its standard uncertainty is far below the mean."""

    mean: float
    standard: float
    words: str = "normal, above zero"

    def at(self, share: Array) -> Array:
        from scipy.special import ndtr, ndtri

        lost = ndtr(-self.mean / self.standard) if self.standard else 0.0
        return self.mean + self.standard * ndtri(lost + share * (1.0 - lost))


@dataclass(frozen=True, slots=True)
class LogNormal:
    """The law whose logarithm is normal, with this mean and standard uncertainty of the figure itself."""

    mean: float
    standard: float
    words: str = "lognormal"

    def at(self, share: Array) -> Array:
        from scipy.special import ndtri

        variance = math.log1p((self.standard / self.mean) ** 2)
        return self.mean * np.exp(math.sqrt(variance) * ndtri(share) - 0.5 * variance)


@dataclass(frozen=True, slots=True)
class Student:
    """The scaled and shifted t law of a mean of few readings (JCGM 101:2008, 6.4.9).

    ``standard`` is the standard uncertainty that a budget takes; the law itself is wider.
    """

    mean: float
    standard: float
    degrees: float

    @property
    def words(self) -> str:
        return f"t, {self.degrees:.0f} degrees of freedom"

    def at(self, share: Array) -> Array:
        from scipy.special import stdtrit

        return self.mean + self.standard * stdtrit(self.degrees, share)


@dataclass(frozen=True, slots=True)
class Rectangular:
    """Every value within the half-width is as likely."""

    mean: float
    half_width: float
    words: str = "rectangular"

    @property
    def standard(self) -> float:
        return self.half_width / math.sqrt(3.0)

    def at(self, share: Array) -> Array:
        return self.mean + self.half_width * (2.0 * share - 1.0)


@dataclass(frozen=True, slots=True)
class Triangular:
    """The density falls evenly from the mean to nothing at the half-width."""

    mean: float
    half_width: float
    words: str = "triangular"

    @property
    def standard(self) -> float:
        return self.half_width / math.sqrt(6.0)

    def at(self, share: Array) -> Array:
        lower = np.sqrt(2.0 * np.minimum(share, 0.5)) - 1.0
        upper = 1.0 - np.sqrt(2.0 * np.minimum(1.0 - share, 0.5))
        return self.mean + self.half_width * np.where(share < 0.5, lower, upper)


def positive(mean: float, standard: float) -> Distribution:
    """The law of a figure that is above zero: normal, or lognormal where that would reach below zero."""
    if standard > LARGEST_NORMAL * mean:
        return LogNormal(mean, standard)
    return PositiveNormal(mean, standard)
