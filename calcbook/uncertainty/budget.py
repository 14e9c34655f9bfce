"""First-order propagation (JCGM 100:2008, 5.1.2 and 5.2.2) for any model: slopes in, budget out.

u_c² = Σ (c_i·u_i)² + 2·Σ_{i<j} c_i·c_j·u_i·u_j·r_ij. Nothing here knows a chain: figures come by id with
their standard uncertainty, slopes come from whoever can differentiate the model.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from statistics import NormalDist
from typing import Protocol

import numpy as np

Array = np.ndarray
Correlations = Mapping[frozenset[str], float]
Model = Callable[[Mapping[str, Array]], Mapping[str, Array]]
# Contributions below this part of the largest are the rounding of sums that cancel.
NOISE = 1e-12
# Between slopes at the value and over one standard uncertainty to either side (method notes, G1).
NONLINEAR_ABOVE = 0.05


class Figure(Protocol):
    """What the propagation needs of an uncertain figure."""

    @property
    def id(self) -> str: ...

    @property
    def value(self) -> float: ...

    @property
    def standard(self) -> float: ...

    @property
    def degrees(self) -> float: ...


@dataclass(frozen=True, slots=True)
class Line:
    """One figure in one budget; ``share`` is NaN where correlated figures cannot be told apart."""

    id: str
    slope: float
    contribution: float
    share: float


@dataclass(frozen=True, slots=True)
class FirstOrder:
    """A combined standard uncertainty, its lines, and the effective degrees of freedom behind it."""

    lines: tuple[Line, ...]
    standard: float
    degrees: float


def first_order(
    figures: Sequence[Figure], slopes: Mapping[str, float], correlations: Correlations | None = None
) -> FirstOrder:
    """Combine standard uncertainties by slopes; a figure that adds nothing has no line."""
    moved = {figure.id: slopes.get(figure.id, 0.0) * figure.standard for figure in figures}
    least = NOISE * max((abs(part) for part in moved.values()), default=0.0)
    acting = [figure for figure in figures if moved[figure.id] != 0.0 and not abs(moved[figure.id]) < least]
    parts = [moved[figure.id] for figure in acting]
    matrix = correlation_matrix([figure.id for figure in acting], correlations or {})
    variance = float(np.asarray(parts) @ matrix @ np.asarray(parts)) if parts else 0.0
    shared = (matrix != np.eye(len(acting))).any(axis=1)
    lines = tuple(
        Line(
            figure.id,
            slopes[figure.id],
            part,
            math.nan if joint or variance <= 0.0 else part**2 / variance,
        )
        for figure, part, joint in zip(acting, parts, shared, strict=True)
    )
    standard = math.sqrt(max(variance, 0.0))
    degrees = math.inf if shared.any() else effective_degrees(acting, parts, standard)
    return FirstOrder(lines, standard, degrees)


def effective_degrees(figures: Sequence[Figure], parts: Sequence[float], standard: float) -> float:
    """Welch and Satterthwaite (JCGM 100:2008, G.4.1); infinite where no degrees of freedom are stated."""
    below = sum(
        part**4 / figure.degrees
        for figure, part in zip(figures, parts, strict=True)
        if math.isfinite(figure.degrees)
    )
    return standard**4 / below if below else math.inf


def coverage_factor(coverage: float, degrees: float) -> float:
    """The factor k of an interval: normal, or of the t law at the degrees of freedom cut to a whole number."""
    upper = 0.5 * (1.0 + coverage)
    if math.isinf(degrees):
        return NormalDist().inv_cdf(upper)
    from scipy.special import stdtrit

    return float(stdtrit(max(math.floor(degrees), 1), upper))


def correlation_matrix(ids: Sequence[str], correlations: Correlations) -> Array:
    """The matrix of coefficients for figures in this order."""
    matrix = np.eye(len(ids))
    for row, first in enumerate(ids):
        for column, second in enumerate(ids):
            if row != column:
                matrix[row, column] = correlations.get(frozenset((first, second)), 0.0)
    return matrix


def wide_slopes(model: Model, figures: Sequence[Figure]) -> dict[str, dict[str, float]]:
    """Slopes over one standard uncertainty to either side, the form that JCGM 100:2008, 5.1.3 note 2 allows.

    The model is asked once, for two samples of each figure. Result: by name of the model's outputs, then by
    figure; NaN where the model has no value.
    """
    count = len(figures)
    inputs = {}
    for place, figure in enumerate(figures):
        samples = np.full(2 * count, figure.value)
        samples[place] += figure.standard
        samples[count + place] -= figure.standard
        inputs[figure.id] = samples
    return {
        name: {
            figure.id: float((values[place] - values[count + place]) / (2.0 * figure.standard))
            for place, figure in enumerate(figures)
            if figure.standard > 0.0
        }
        for name, values in model(inputs).items()
    }


def is_nonlinear(standard: float, wide: float) -> bool:
    """Whether the slope changes so much within one standard uncertainty that first order may mislead."""
    return math.isnan(wide) or abs(wide - standard) > NONLINEAR_ABOVE * max(standard, wide)
