"""What a survey of plant data found, for the record and for programs. Frozen, nothing computes."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import NamedTuple

from calcbook.formulas import Relation
from calcbook.quantities import QuantityKind


@dataclass(frozen=True, slots=True)
class RuleCount:
    """One rule: its id, what it rejects, its limit as text, and the rows it rejected.

    ``first`` says where the first of them stands. A rule without a limit is not applied, and rejects none.
    """

    id: str
    rejects: str
    limit: str
    count: int
    first: str


class CycleRow(NamedTuple):
    """The time from one cleaning to the next: its rows, and how far off zero they start, m² K/W.

    The offset is the mean resistance of the rows that anchor zero, less what the model has grown there.

    ``scatter`` and ``systematic`` are standard uncertainties of the offset; NaN without rows to anchor on.
    """

    cleaning: str
    source: str
    rows: int
    zero_rows: int
    zero_until: float
    last: float
    offset: float
    scatter: float
    systematic: float


class Gap(NamedTuple):
    """A time without rows: where it begins, and its length in s."""

    begins: str
    length: float


class FittedFigure(NamedTuple):
    """A figure from the fit: a parameter of the growth model, or the fouling resistance at a time.

    ``scatter`` and ``systematic`` are its standard uncertainties from the rows' scatter and from tolerances;
    ``lower`` and ``upper`` are its 95 % bounds from both. ``held`` says why a parameter was not fitted.
    """

    id: str
    symbol: str
    title: str
    kind: QuantityKind
    value: float
    scatter: float
    systematic: float
    lower: float
    upper: float
    held: str = ""


class SystematicPart(NamedTuple):
    """What is wrong in every row alike: its tolerance, standard uncertainty, and what that moves (SI).

    ``moves`` has the change of each fitted figure for one standard uncertainty, by the figure's id.
    """

    id: str
    title: str
    tolerance: str
    standard: float
    kind: QuantityKind
    distribution: str
    moves: tuple[tuple[str, float], ...]


class PlotColumn(NamedTuple):
    """One column of the plot over time: mean of the anchored rows in it and the fit there, NaN where none."""

    begins: str
    mean: float
    fitted: float
    cleaned: bool


class Reading(NamedTuple):
    """A cell of the history as it stands there, the given that it is a figure of, its column and unit."""

    symbol: str
    head: str
    cell: str
    unit: str


class RowFigure(NamedTuple):
    """A figure of one row, in SI with its unit. ``relation`` gives it from ``values`` by symbol; None for the chain's."""

    symbol: str
    title: str
    value: float
    unit: str
    relation: Relation | None = None
    values: Mapping[str, float] = {}


class WorkedRow(NamedTuple):
    """One row on its way: what was read, what the chain makes of it, the steps to its resistance.

    ``offset`` is that of its ``cleaning``, which is taken from the resistance before the fit, m² K/W.
    """

    number: int
    time: str
    readings: tuple[Reading, ...]
    chain: tuple[RowFigure, ...]
    steps: tuple[RowFigure, ...]
    cleaning: str
    offset: float


class SurveyOutcome(NamedTuple):
    """Everything a survey says.

    Rows: ``rows`` in the file = the rules' counts + ``kept``; ``kept`` = ``fitted`` + ``before_cleaning`` +
    ``not_anchored``. ``negative`` and ``not_resolved`` count among the fitted rows. ``period`` is the longest
    time since a cleaning that rows cover, in s. ``deviation`` is the standard deviation of the rows about
    the fit, ``correlation`` that of neighbouring residuals; ``is_determined`` is False where the search did not come to
    rest or the rows do not tell the parameters apart. ``row_relations`` make the resistance of a row; ``worked`` is one
    of those fitted.
    """

    file: str
    source: str
    rows: int
    kept: int
    fitted: int
    before_cleaning: int
    not_anchored: int
    negative: int
    not_resolved: int
    out_of_order: int
    not_compared: int
    first: str
    last: str
    rules: tuple[RuleCount, ...]
    cycles: tuple[CycleRow, ...]
    gaps: tuple[Gap, ...]
    model: str
    model_title: str
    relation: str
    row_relations: str
    worked: WorkedRow
    figures: tuple[FittedFigure, ...]
    parts: tuple[SystematicPart, ...]
    without_accuracy: tuple[str, ...]
    slope_rows: int
    deviation: float
    is_determined: bool
    correlation: float
    period: float
    after: float
    percentile: float
    plot: tuple[PlotColumn, ...]

    @property
    def offsets_differ_by(self) -> float:
        """How far the offsets of the cleanings lie apart, m² K/W; 0 where there are not two."""
        offsets = [cycle.offset for cycle in self.cycles if math.isfinite(cycle.offset)]
        return max(offsets) - min(offsets) if len(offsets) > 1 else 0.0

    @property
    def offsets_scatter(self) -> float:
        """Standard uncertainty of that difference from the scatter of the rows alone; the rest is common to all."""
        return math.hypot(*(cycle.scatter for cycle in self.cycles if math.isfinite(cycle.offset)))

    def figure(self, name: str) -> FittedFigure:
        """A fitted figure by id. Raises ``KeyError``."""
        for one in self.figures:
            if one.id == name:
                return one
        raise KeyError(name)
