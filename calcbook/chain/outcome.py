"""What a solved calculation holds, case by case: figures, checks, criteria, open items. Frozen, nothing computes."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import NamedTuple

from calcbook.chain.flips_outcome import Flips
from calcbook.chain.growth_outcome import OverTime
from calcbook.chain.rating_outcome import Rating
from calcbook.chain.solve import Solution
from calcbook.chain.survey_outcome import SurveyOutcome
from calcbook.chain.sweep_outcome import Sweep
from calcbook.chain.types import Chain, ChainStep, Input, OpenItem, RunnerAssumption
from calcbook.chain.uncertainty_outcome import Uncertainty
from calcbook.quantities import QuantityKind


class CheckResult(NamedTuple):
    """One limit evaluated in one condition of one case.

    ``state``: within, outside, accepted, not evaluable, or not counting (the part it limits does not
    matter here). ``figure`` and ``limit`` are printed texts; ``value`` is the checked figure in SI. ``side`` says
    where a figure outside is: below or above its limit, or nothing where that has no meaning.
    """

    id: str
    owner: str
    card: str
    condition: str
    case: str
    that: str
    figure: str
    limit: str
    value: float
    unit: str
    level: str
    state: str
    because: str
    source: str
    standing: str
    side: str = ""
    accepted: str = ""


class CriterionResult(NamedTuple):
    """An acceptance criterion: met or not met, with its margin (value less limit, in the direction that is good).

    ``words`` stand in place of a value that is not there and yet settles the criterion; value and margin are NaN then.
    ``required`` is the probability that is asked for and ``reached`` the share of the samples in which it holds, NaN
    where none is asked for; ``met`` is decided by them then, and ``stated_met`` by the stated values.
    """

    id: str
    case: str
    that: str
    value: float
    limit: float
    margin: float
    met: bool
    kind: QuantityKind
    source: str
    words: str = ""
    required: float = math.nan
    reached: float = math.nan
    stated_met: bool | None = None

    @property
    def is_met_as_stated(self) -> bool:
        """Whether the stated values meet it."""
        return self.met if self.stated_met is None else self.stated_met


class Result(NamedTuple):
    """A named result; ``condition`` is clean, service or empty."""

    name: str
    value: float
    kind: QuantityKind
    title: str


class TermRow(NamedTuple):
    """One term in one condition: resistances on its own and on the basis area, share, temperatures on both sides.

    Temperatures and ``flow_share`` are NaN where they are not known. ``methods`` names the method of each film.
    """

    name: str
    kind: str
    surface: str
    own_resistance: float
    resistance: float
    share: float
    coefficient: float
    inner_temperature: float
    outer_temperature: float
    methods: str
    branches: tuple[BranchRow, ...] = ()


class BranchRow(NamedTuple):
    """One of several ways for heat side by side: its coefficient, its temperature, its heat flow in W."""

    name: str
    kind: str
    coefficient: float
    reference_temperature: float
    heat_flow: float


class StepRow(NamedTuple):
    """One row of the chain: the step with its values clean and service (NaN where a condition has none)."""

    step: ChainStep
    clean: float | bool
    service: float | bool


class TermChain(NamedTuple):
    """The rows of one term, with what was decided for it."""

    name: str
    title: str
    rows: tuple[StepRow, ...]
    notes: tuple[str, ...]


class PropertyRow(NamedTuple):
    """Properties of a stream at one place: values by property name (NaN where not used)."""

    stream: str
    place: str
    condition: str
    temperature: float
    pressure: float
    phase: str
    values: Mapping[str, float]
    provider: str


class CrossRow(NamedTuple):
    """Another method of the situation on the same film: what it gives, or why it was left out.

    ``turned`` are the ids of the case's criteria that have another verdict with it, ``cautions`` what it is cautioned
    for here. ``overall_clean`` is known where a criterion takes a result of the clean unit.
    """

    term: str
    method: str
    title: str
    family: str
    same_family: bool
    coefficient: float
    overall: float
    difference: float
    left_out: str = ""
    turned: tuple[str, ...] = ()
    cautions: tuple[str, ...] = ()
    overall_clean: float = math.nan


class ClosureRow(NamedTuple):
    """One way to state the balance, with its relative residual."""

    what: str
    condition: str
    value: float
    against: float
    residual: float
    unit: str


class SensitivityRow(NamedTuple):
    """What one per cent of a given (one kelvin of a temperature) moves U in service by, W/(m² K)."""

    input: Input
    step: str
    change: float
    relative: float


@dataclass(frozen=True)
class CaseOutcome:
    """Everything about one case; the empty name is the base case."""

    name: str
    inputs: Mapping[str, float]
    solutions: Mapping[str, Solution]
    results: Mapping[str, Result]
    terms: Mapping[str, tuple[TermRow, ...]]
    chains: tuple[TermChain, ...]
    circuit: tuple[StepRow, ...]
    properties: tuple[PropertyRow, ...]
    checks: tuple[CheckResult, ...]
    criteria: tuple[CriterionResult, ...]
    assumptions: tuple[RunnerAssumption, ...]
    open_items: tuple[OpenItem, ...]
    closure: tuple[ClosureRow, ...]
    controlling: str
    controlling_share: float


@dataclass(frozen=True)
class Solved:
    """A solved calculation: the base case first, then the named cases.

    ``cross`` holds the cross-check of the base case and, where another case governs, of that one, by their names.
    """

    chain: Chain
    cases: tuple[CaseOutcome, ...]
    cross: Mapping[str, tuple[CrossRow, ...]]
    sensitivity: tuple[SensitivityRow, ...]
    cards: Mapping[str, str]
    governing: Mapping[str, str]
    rating: Rating | None = None
    uncertainty: Uncertainty | None = None
    over_time: OverTime | None = None
    survey: SurveyOutcome | None = None
    sweep: Sweep | None = None
    flips: Flips | None = None

    @property
    def base(self) -> CaseOutcome:
        return self.cases[0]

    def with_base(self, base: CaseOutcome) -> Solved:
        """The calculation with another base case, its named cases as they are."""
        return replace(self, cases=(base, *self.cases[1:]))

    @property
    def open_items(self) -> tuple[OpenItem, ...]:
        """Open items of every case, each id once."""
        found: dict[str, OpenItem] = {}
        for case in self.cases:
            for item in case.open_items:
                found.setdefault(item.id, item)
        return tuple(found.values())
