"""Monte Carlo propagation (JCGM 101:2008) for any model: arrays in, arrays out, blocks until it is steady.

Every figure has its own stream of random numbers, made from its id, and every block its own key, so that
what a block draws depends on nothing but its number: not on how many blocks are solved together, not on
the other figures. Sums are taken in the order of the blocks.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from calcbook.uncertainty.budget import Correlations, correlation_matrix
from calcbook.uncertainty.distributions import Distribution

Array = np.ndarray
SEED = 20_261_201
GENERATOR = f"Philox, key = {SEED} + number of the block"
SMALLEST_BLOCK = 10_000
MOST_TRIALS = 1_000_000
# The clause asks for two blocks; two may agree by chance, and the spread of five is known well enough.
FEWEST_BLOCKS = 5
# Blocks solved together: the first few decide most cases, later ones come in larger parts.
MOST_TOGETHER = 8
# The samples are to be five times steadier than what they are held against (JCGM 101:2008, 8.2).
STEADIER = 5.0
LEAST_ANSWERED = 0.5


@dataclass(frozen=True, slots=True)
class Drawn:
    """A figure to be drawn: its id and its law."""

    id: str
    distribution: Distribution


@dataclass(frozen=True, slots=True)
class Sampled:
    """What a model gives for some samples: outputs (NaN where there is no answer), and marks to be counted."""

    outputs: Mapping[str, Array]
    marks: Mapping[str, Array] = field(default_factory=dict)


SampleModel = Callable[[Mapping[str, Array]], Sampled]


@dataclass(frozen=True, slots=True)
class Interval:
    """One output over the samples; ``spread`` belongs to mean, standard uncertainty, low and high."""

    mean: float
    standard: float
    low: float
    high: float
    spread: tuple[float, float, float, float]
    tolerance: float
    aim: float


@dataclass(frozen=True, slots=True)
class Propagated:
    """All outputs with the counts of marks. ``answered`` samples have a value of every output; marks count in no others.

    ``is_answered`` is False where fewer than half of the samples of a block have one: no figure is made from the rest.
    """

    intervals: Mapping[str, Interval]
    marks: Mapping[str, int]
    trials: int
    answered: int
    blocks: int
    block_size: int
    is_capped: bool
    is_answered: bool


def block_size(coverage: float) -> int:
    """Trials of a block (JCGM 101:2008, 7.9.4 b): at least 100 beyond the interval, at least 10 000."""
    return max(SMALLEST_BLOCK, math.ceil(100.0 / (1.0 - coverage)))


def tolerance_of(standard: float, digits: int) -> float:
    """Half of the last digit of a standard uncertainty with this many significant digits (JCGM 101, 7.9.2)."""
    if not standard > 0.0 or not math.isfinite(standard):
        return 0.0
    exponent = int(f"{standard:.{digits - 1}e}".partition("e")[2]) - (digits - 1)
    return 0.5 * 10.0**exponent


def draw(figures: Sequence[Drawn], correlations: Correlations, number: int, size: int) -> dict[str, Array]:
    """The values of every figure in one block.

    Figures that are correlated keep the law that each has alone; their normal scores are drawn from the joint normal
    law with the stated coefficients, which for normal figures is that of JCGM 101:2008, 6.4.8 (for others the guide
    has no law that a coefficient alone would give).
    """
    joint = {name for pair, r in correlations.items() if r != 0.0 for name in pair}
    values = {
        figure.id: figure.distribution.at(shares(figure.id, number, size))
        for figure in figures
        if figure.id not in joint
    }
    together = [figure for figure in figures if figure.id in joint]
    if together:
        from scipy.special import ndtr, ndtri

        root = square_root(correlation_matrix([figure.id for figure in together], correlations))
        alone = np.stack([ndtri(shares(figure.id, number, size)) for figure in together])
        for row, figure in enumerate(together):
            mixed = np.zeros(size)
            for column in range(len(together)):
                mixed = mixed + root[row, column] * alone[column]
            values[figure.id] = figure.distribution.at(ndtr(mixed))
    return values


def shares(name: str, number: int, size: int) -> Array:
    """Uniform numbers between 0 and 1, both excluded, of one figure in one block."""
    stream = int.from_bytes(hashlib.sha256(name.encode("utf-8")).digest()[:8], "little")
    generator = np.random.Philox(key=SEED + number, counter=[0, 0, 0, stream])
    return ((generator.random_raw(size) >> np.uint64(11)).astype(float) + 0.5) * 2.0**-53


def square_root(matrix: Array) -> Array:
    """The symmetric root of a correlation matrix; eigenvalues of rounding below zero count as zero."""
    values, vectors = np.linalg.eigh(matrix)
    return np.asarray((vectors * np.sqrt(np.maximum(values, 0.0))) @ vectors.T)


def is_possible(matrix: Array) -> bool:
    """Whether coefficients can hold together: no eigenvalue below zero by more than rounding."""
    return bool(np.linalg.eigvalsh(matrix).min() >= -1e-12 * len(matrix))


def propagate(
    model: SampleModel,
    figures: Sequence[Drawn],
    coverage: float,
    digits: int,
    correlations: Correlations | None = None,
    most_trials: int = MOST_TRIALS,
    together: int = MOST_TOGETHER,
) -> Propagated:
    """Draw blocks until every output is steady (JCGM 101:2008, 7.9), until the most trials are drawn, or until fewer
    than half of the samples of a block have an answer."""
    return _Propagation(model, figures, coverage, digits, correlations or {}, most_trials, together).run()


class _Propagation:
    def __init__(
        self,
        model: SampleModel,
        figures: Sequence[Drawn],
        coverage: float,
        digits: int,
        correlations: Correlations,
        most_trials: int,
        together: int,
    ):
        self.model, self.figures, self.coverage, self.digits = model, figures, coverage, digits
        self.correlations = correlations
        self.size = block_size(coverage)
        self.most_blocks = max(most_trials // self.size, FEWEST_BLOCKS)
        self.together = together
        self.kept: dict[str, list[Array]] = {}
        self.of_blocks: dict[str, list[tuple[float, float, float, float]]] = {}
        self.marks: dict[str, int] = {}
        self.blocks = self.answered = 0

    def run(self) -> Propagated:
        is_steady, is_answered, start, count = False, True, 0, min(FEWEST_BLOCKS, self.together)
        while is_answered and not is_steady and start < self.most_blocks:
            count = min(count, self.most_blocks - start)
            sampled = self._solved(start, count)
            for place in range(count):
                part = slice(place * self.size, (place + 1) * self.size)
                is_answered = self._take(sampled, part)
                is_steady = is_answered and self.blocks >= FEWEST_BLOCKS and self._is_steady()
                if is_steady or not is_answered:
                    break
            start, count = start + count, min(2 * count, self.together)
        return Propagated(
            {name: self._interval(name) for name in self.kept} if is_answered else {},
            dict(self.marks),
            self.blocks * self.size,
            self.answered,
            self.blocks,
            self.size,
            not is_steady,
            is_answered,
        )

    def _solved(self, start: int, count: int) -> Sampled:
        """Some blocks in one call of the model."""
        drawn = [draw(self.figures, self.correlations, start + place, self.size) for place in range(count)]
        return self.model(
            {figure.id: np.concatenate([one[figure.id] for one in drawn]) for figure in self.figures}
        )

    def _take(self, sampled: Sampled, part: slice) -> bool:
        """Add one block; whether enough of its samples have an answer."""
        answered = np.ones(self.size, dtype=bool)
        for values in sampled.outputs.values():
            answered &= np.isfinite(values[part])
        for name, mark in sampled.marks.items():
            self.marks[name] = self.marks.get(name, 0) + int((mark[part] & answered).sum())
        self.blocks += 1
        self.answered += int(answered.sum())
        if answered.sum() < LEAST_ANSWERED * self.size:
            return False
        for name, values in sampled.outputs.items():
            block = values[part][answered]
            self.kept.setdefault(name, []).append(block)
            self.of_blocks.setdefault(name, []).append(_summary(block, self.coverage))
        return True

    def _is_steady(self) -> bool:
        """Whether twice the spread of every block figure is below the aim, for every output."""
        for name in self.kept:
            aim = tolerance_of(self._standard(name), self.digits) / STEADIER
            if max(self._spread(name)) > aim:
                return False
        return True

    def _standard(self, name: str) -> float:
        """The standard uncertainty over all blocks, from their means and deviations alone."""
        counts = np.array([len(block) for block in self.kept[name]], dtype=float)
        means, deviations = (np.array(self.of_blocks[name])[:, column] for column in (0, 1))
        mean = np.sum(counts * means) / np.sum(counts)
        squares = np.sum((counts - 1.0) * deviations**2 + counts * (means - mean) ** 2)
        return float(np.sqrt(squares / (np.sum(counts) - 1.0)))

    def _spread(self, name: str) -> tuple[float, float, float, float]:
        """Twice the standard deviation of the average over the blocks of each figure."""
        table = np.array(self.of_blocks[name])
        found = 2.0 * table.std(axis=0, ddof=1) / math.sqrt(len(table))
        return float(found[0]), float(found[1]), float(found[2]), float(found[3])

    def _interval(self, name: str) -> Interval:
        mean, standard, low, high = _summary(np.concatenate(self.kept[name]), self.coverage)
        tolerance = tolerance_of(standard, self.digits)
        return Interval(mean, standard, low, high, self._spread(name), tolerance, tolerance / STEADIER)


def _summary(values: Array, coverage: float) -> tuple[float, float, float, float]:
    """Mean, standard deviation and the ends of the interval of equal tails (JCGM 101:2008, 7.7)."""
    count = len(values)
    inside = int(coverage * count + 0.5)
    below = (count - inside) // 2 if (count - inside) % 2 == 0 else (count - inside + 1) // 2
    ordered = np.sort(values)
    return (
        float(values.mean()),
        float(values.std(ddof=1)),
        float(ordered[max(below, 1) - 1]),
        float(ordered[min(max(below, 1) + inside, count) - 1]),
    )
