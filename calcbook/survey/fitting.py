"""Least squares of a growth model on anchored rows, with the slopes of the card's own relations.

Zero is anchored on the rows soon after each cleaning: their mean is taken from every row of the cycle, and
the mean of the model at the same times is taken from the model. So a deposit that grows while zero is taken
biases nothing, and whatever is wrong in all rows of a cycle by the same amount drops out.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, replace

import numpy as np

from calcbook.quantities import unit_factor
from calcbook.survey.growth import RESISTANCE, TIME, GrowthModel

Array = np.ndarray
# Rows on which the best start is looked for, and passes that each start is given.
START_ROWS, START_PASSES = 1000, 12
PASSES = 200
# Relative change of every parameter at which the fit stands still; what rounding does to a sum of squares.
STILL, ROUNDING = 1e-11, 1e-12
FIRST_DAMPING, LEAST_DAMPING = 1e-3, 1e-12
# Beyond this the parameters cannot be told from each other by the data.
WORST_CONDITION = 1e8
# Neighbouring rows more alike than this say nothing about the scatter of their mean.
MOST_CORRELATION = 0.95
RATE = unit_factor("m^2 K/(W s)")[1]
PER_RESISTANCE = unit_factor("W/(m^2 K)")[1]


@dataclass(frozen=True)
class Data:
    """Rows to fit: time since cleaning (s), resistance as calculated (m² K/W), cycle, and which anchor zero."""

    times: Array
    values: Array
    cycles: Array
    zero: Array

    def __len__(self) -> int:
        return len(self.times)

    def part(self, places: Array) -> Data:
        """Some of the rows."""
        return Data(self.times[places], self.values[places], self.cycles[places], self.zero[places])

    def zero_means(self, figures: Array) -> Array:
        """Means of figures (n) over the rows that anchor zero, by cycle; NaN for a cycle without any."""
        count = int(self.cycles.max()) + 1 if len(self) else 0
        anchored = self.cycles[self.zero]
        with np.errstate(invalid="ignore", divide="ignore"):
            sums = np.bincount(anchored, weights=figures[self.zero], minlength=count)
            return sums / np.bincount(anchored, minlength=count)

    def anchored(self, figures: Array) -> Array:
        """Figures (n, or m by n) less their mean over the rows that anchor zero in their cycle."""
        if figures.ndim == 1:
            return figures - self.zero_means(figures)[self.cycles]
        return np.array([self.anchored(row) for row in figures]).reshape(figures.shape)


@dataclass(frozen=True)
class Fit:
    """Parameters with what they rest on.

    ``slopes`` are those of the anchored model in each parameter (parameters by n). ``deviation`` is the
    standard deviation of single rows, ``correlation`` that of neighbouring residuals, ``scatter`` the
    covariance of the parameters that follows from both. ``determined`` is False where the search did not
    come to rest, or the data do not tell the parameters apart.
    """

    model: GrowthModel
    data: Data
    parameters: Array
    residuals: Array
    slopes: Array
    deviation: float
    correlation: float
    scatter: Array
    determined: bool

    def moved_by(self, errors: Array, places: Array) -> Array:
        """What errors of the resistance at some rows (kinds by m) move each parameter by (parameters by kinds).

        The rows stand for all: they are spread over them and hold rows that anchor each cycle.
        """
        part = self.data.part(places)
        slopes = part.anchored(self.model.value_and_slopes(self.parameters, part.times)[1])
        scale = np.linalg.norm(slopes, axis=1)
        scale = np.where(scale > 0.0, scale, 1.0)
        return np.linalg.lstsq((slopes.T / scale), part.anchored(errors).T, rcond=None)[0] / scale[:, None]


def fit(model: GrowthModel, data: Data) -> Fit:
    """The parameters with the least sum of squared residuals; those that zero takes away are held at nothing."""
    part = data.part(np.unique(np.concatenate([spread(len(data), START_ROWS), _some_zero_rows(data)])))
    model = _without_lost(model, part)
    searched = [_search(model, part, start, START_PASSES) for start in _starts(model, part)]
    best = min(searched, key=lambda found: found.total)
    return _finished(model, data, _search(model, data, best.parameters, PASSES, best.damping))


def spread(count: int, most: int) -> Array:
    """Places spread evenly over so many, the first and last among them."""
    return np.unique(np.linspace(0, count - 1, min(count, most)).round().astype(int))


def _some_zero_rows(data: Data) -> Array:
    """Rows that anchor zero, some of every cycle."""
    found = []
    for cycle in np.unique(data.cycles):
        places = np.flatnonzero(data.zero & (data.cycles == cycle))
        found.append(places[spread(len(places), 50)] if len(places) else places)
    return np.concatenate(found)


def sample(data: Data, most: int) -> Array:
    """Places of rows that stand for all: spread evenly, with rows that anchor zero in every cycle."""
    return np.unique(np.concatenate([spread(len(data), most), _some_zero_rows(data)]))


def _without_lost(model: GrowthModel, data: Data) -> GrowthModel:
    """The model without parameters that only shift the zero, which the anchor takes away."""
    start = _starts(model, data)[0]
    whole = model.value_and_slopes(start, data.times)[1]
    slopes = data.anchored(whole)
    lost = [
        symbol
        for number, symbol in enumerate(model.symbols)
        if np.abs(slopes[number]).max() <= 1e-9 * np.abs(whole[number]).max()
    ]
    return model.holding(dict.fromkeys(lost, 0.0))


def _starts(model: GrowthModel, data: Data) -> list[Array]:
    """Starts over the sizes that each parameter can have, from the spread of the rows and the time they cover."""
    high, low = np.quantile(data.anchored(data.values), (0.95, 0.05))
    size, time = max(high - low, 1e-12), max(float(data.times.max()), 1.0)
    sizes = {
        RESISTANCE: [size * factor for factor in (1.0, 0.5, 2.0, 5.0)],
        TIME: [time * factor for factor in (0.5, 0.1, 0.2, 1.5)],
        RATE: [size / time * factor for factor in (1.0, 0.3, 3.0, 10.0)],
        PER_RESISTANCE: [factor / size for factor in (1.0, 0.1, 10.0)],
    }
    choices = [sizes.get(need.quantity.dimension, [1.0, 0.3, 3.0]) for need in model.parameters]
    return [np.array(start) for start in itertools.product(*choices)]


@dataclass(frozen=True)
class _Search:
    """Where a search came to: parameters, sum of squares, whether it rests, and what the next step needs."""

    parameters: Array
    total: float
    rests: bool
    residuals: Array
    slopes: Array
    damping: float = np.inf


def _search(
    model: GrowthModel, data: Data, start: Array, passes: int, damping: float = FIRST_DAMPING
) -> _Search:
    """Gauss and Newton's steps, damped after Levenberg where they do not lead down, until they stand still."""
    wanted = data.anchored(data.values)
    # A sum may rise by its own rounding.
    rounding = ROUNDING * ROUNDING * float(wanted @ wanted)
    scale = np.abs(start)
    with np.errstate(all="ignore"):
        here = _evaluated(model, data, wanted, start)
        for _ in range(passes if np.isfinite(here.total) else 0):
            normal = here.slopes @ here.slopes.T * np.outer(scale, scale)
            right = here.slopes @ here.residuals * scale
            diagonal = np.diag(np.maximum(np.diag(normal), 1e-12 * max(float(np.trace(normal)), 1e-300)))
            try:
                step = scale * np.linalg.solve(normal + damping * diagonal, right)
            except np.linalg.LinAlgError:
                return here
            tried = _evaluated(model, data, wanted, here.parameters + step)
            small = bool(np.all(np.abs(step) <= STILL * np.abs(tried.parameters)))
            if np.isfinite(tried.total) and tried.total <= here.total * (1.0 + ROUNDING) + rounding:
                here, damping = tried, max(damping * 0.2, LEAST_DAMPING)
            else:
                damping *= 5.0
            if small:
                return replace(here, rests=True, damping=damping)
    return replace(here, damping=damping)


def _evaluated(model: GrowthModel, data: Data, wanted: Array, parameters: Array) -> _Search:
    values, slopes = model.value_and_slopes(parameters, data.times)
    residuals = wanted - data.anchored(values)
    total = float(residuals @ residuals)
    return _Search(
        parameters, total if np.isfinite(total) else np.inf, False, residuals, data.anchored(slopes)
    )


def _finished(model: GrowthModel, data: Data, found: _Search) -> Fit:
    cycles = len(np.unique(data.cycles))
    freedom = len(data) - len(found.parameters) - cycles
    deviation = float(np.sqrt(found.total / freedom)) if freedom > 0 else np.nan
    correlation = _neighbours_alike(data, found.residuals)
    scatter, condition = _scatter(data, found.slopes, found.parameters)
    return Fit(
        model,
        data,
        found.parameters,
        found.residuals,
        found.slopes,
        deviation,
        correlation,
        scatter * deviation**2 * (1.0 + correlation) / (1.0 - correlation),
        found.rests and condition <= WORST_CONDITION,
    )


def _scatter(data: Data, slopes: Array, parameters: Array) -> tuple[Array, float]:
    """The covariance of the parameters for rows of unit variance, and the condition of the scaled equations.

    A row that anchors zero moves every row of its cycle as well.
    """
    scale = np.linalg.norm(slopes, axis=1)
    scale = np.where(scale > 0.0, scale, 1.0)
    normal = slopes @ slopes.T / np.outer(scale, scale)
    condition = float(np.linalg.cond(normal))
    try:
        gain = np.linalg.solve(normal * np.outer(scale, scale), slopes)
    except np.linalg.LinAlgError:
        return np.full((len(parameters), len(parameters)), np.nan), np.inf
    count = int(data.cycles.max()) + 1
    anchors = np.bincount(data.cycles[data.zero], minlength=count)
    shared = np.array([np.bincount(data.cycles, weights=row, minlength=count) for row in gain])
    gain[:, data.zero] -= (shared / np.maximum(anchors, 1))[:, data.cycles[data.zero]]
    return gain @ gain.T, condition


def _neighbours_alike(data: Data, residuals: Array) -> float:
    """Correlation of residuals of neighbouring rows of a cycle, from 0 to its upper bound."""
    together = data.cycles[1:] == data.cycles[:-1]
    total = float(residuals @ residuals)
    # Where the fit meets every row to rounding, the residuals are rounding and have no correlation to speak of.
    if total <= 1e-18 * float(np.sum(data.anchored(data.values) ** 2)):
        return 0.0
    alike = float(np.sum(residuals[1:][together] * residuals[:-1][together])) / total
    return min(max(alike, 0.0), MOST_CORRELATION)
