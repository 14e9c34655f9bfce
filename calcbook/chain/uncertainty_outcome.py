"""What is known of the uncertainty of results: budgets, samples, chances. Frozen, nothing computes."""

from __future__ import annotations

import math
from typing import NamedTuple

from calcbook.quantities import QuantityKind


class BudgetInput(NamedTuple):
    """A figure that is not known exactly: a given with its tolerance, or the factor of a method.

    ``rule`` says how the standard uncertainty follows from what is stated, in words.
    """

    id: str
    symbol: str
    title: str
    kind: QuantityKind
    value: float
    standard: float
    distribution: str
    rule: str
    degrees: float
    is_method: bool


class BudgetRow(NamedTuple):
    """One line of a budget: the slope of the result in a figure, and what its uncertainty moves the result by.

    ``share`` of the variance is NaN where correlated figures cannot be told apart.
    """

    input: BudgetInput
    slope: float
    contribution: float
    share: float


class Budget(NamedTuple):
    """The first-order uncertainty of one result.

    ``degrees`` are the effective degrees of freedom (infinite where none are stated); ``wide_standard`` is the
    standard uncertainty from finite differences of one standard uncertainty to either side, NaN where the
    chain has no value there. ``also`` are other names of the result.
    """

    result: str
    title: str
    kind: QuantityKind
    value: float
    rows: tuple[BudgetRow, ...]
    standard: float
    factor: float
    expanded: float
    degrees: float
    wide_standard: float
    is_nonlinear: bool
    also: tuple[str, ...] = ()

    @property
    def relative(self) -> float:
        """The expanded uncertainty over the value."""
        return self.expanded / abs(self.value) if self.value else math.nan


class LeftOut(NamedTuple):
    """A method whose accuracy gives no figure to propagate: the term, the card, and why."""

    term: str
    card: str
    reason: str


class CorrelationRow(NamedTuple):
    """A stated correlation of two givens."""

    first: str
    second: str
    coefficient: float
    source: str


class SampledResult(NamedTuple):
    """One result over the samples: mean, standard uncertainty, and the coverage interval of equal tails.

    ``spread`` are twice the standard deviations of mean, standard uncertainty and both ends between the
    blocks' averages; the sampling stops when all are below ``aim``. ``tolerance`` is half of the last digit
    that is made sure of; the budget is validated where its interval differs by less at both ends.
    """

    result: str
    title: str
    kind: QuantityKind
    mean: float
    standard: float
    low: float
    high: float
    spread: tuple[float, float, float, float]
    tolerance: float
    aim: float
    low_difference: float
    high_difference: float
    is_validated: bool

    @property
    def verdict(self) -> str:
        """What the samples say of the budget: little, where they stopped before the result was steady."""
        if not self.is_validated:
            return "not validated"
        return "validated" if max(self.spread) <= self.aim else "not settled"


class Chance(NamedTuple):
    """How often a statement holds, as a share of all samples, with the standard deviation of that share.

    A sample without an answer is one in which it does not hold; ``unanswered`` is the share of those. ``required`` is
    the share that is asked for, NaN where none is.
    """

    id: str
    text: str
    nominal: bool
    probability: float
    deviation: float
    unanswered: float
    required: float


class CaseChance(NamedTuple):
    """How often a criterion that asks for a probability holds in a case other than the assessed one."""

    case: str
    chance: Chance
    trials: int


class OutsideRow(NamedTuple):
    """A limit that samples leave: how many of them, and its state at the stated values."""

    check: str
    condition: str
    level: str
    samples: int
    nominal: str


class Sampling(NamedTuple):
    """A Monte Carlo propagation.

    ``unanswered`` samples have no result (no solution, a figure that cannot be, or outside a limit that
    stops); ``outside`` counts the limits that the others leave; ``outside_any`` the samples that leave one.
    Where not ``is_answered``, fewer than half of the samples of a block have one: no result has figures then.
    """

    trials: int
    blocks: int
    block_size: int
    is_capped: bool
    is_answered: bool
    results: tuple[SampledResult, ...]
    chances: tuple[Chance, ...]
    not_sampled: tuple[str, ...]
    unanswered: int
    outside: tuple[OutsideRow, ...]
    outside_any: int
    generator: str


class Spread(NamedTuple):
    """First order alone: a result that a criterion judges in a case other than the assessed one.

    ``missing`` are the terms whose method has no part in it.
    """

    case: str
    result: str
    kind: QuantityKind
    value: float
    standard: float
    expanded: float
    missing: tuple[str, ...]


class Uncertainty(NamedTuple):
    """The uncertainty of a calculation's results in one case; the empty name is the base case.

    ``elsewhere`` holds what the criteria judge in the other cases, ``chances`` how often those hold there that ask for
    a probability; ``without`` are the cases that have none of it, each with the reason.
    """

    case: str
    coverage: float
    budgets: tuple[Budget, ...]
    left_out: tuple[LeftOut, ...]
    correlations: tuple[CorrelationRow, ...]
    exact_allowances: tuple[str, ...]
    sampling: Sampling | None = None
    elsewhere: tuple[Spread, ...] = ()
    chances: tuple[CaseChance, ...] = ()
    without: tuple[tuple[str, str], ...] = ()

    def spread(self, case: str, result: str) -> Spread | None:
        """First order of a result in a case that is not the assessed one; None where none is worked out."""
        return next((one for one in self.elsewhere if (one.case, one.result) == (case, result)), None)

    def chance(self, case: str, criterion: str) -> CaseChance | None:
        """How often a criterion holds over the samples of a case; None where it is not sampled."""
        if case == self.case and self.sampling is not None:
            known = [CaseChance(case, chance, self.sampling.trials) for chance in self.sampling.chances]
        else:
            known = [one for one in self.chances if one.case == case]
        return next((one for one in known if one.chance.id == criterion), None)
