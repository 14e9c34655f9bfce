"""The rules that reject rows: each has an id, its limit and its count, and takes what the rules before it left.

A row is rejected by the first rule that it breaks, so that the counts and the kept rows add up to the rows
of the file. A negative fouling resistance breaks no rule.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from calcbook.calcfile.survey import Survey
from calcbook.chain.survey_outcome import RuleCount
from calcbook.chain.types import Input
from calcbook.faults import shown
from calcbook.quantities import unit_factor
from calcbook.survey.rows import Rows

Array = np.ndarray
UNREADABLE = "unreadable"
SIGN_WORDS = {"positive": "above zero", "not negative": "zero or above", "any": "any number"}
NOT_APPLIED = "not applied: no limit is stated"
# A figure read from decimals is off by a half rounding each for its text, its factor and its offset: two such figures,
# or one and a limit, by three roundings of the larger one. What stands at a limit by its text does not break it.
ROUNDINGS = 3.0 * float(np.finfo(float).eps)
FLOWS = frozenset(unit_factor(unit)[1] for unit in ("kg/s", "m^3/s", "m/s"))


@dataclass(frozen=True, slots=True)
class Ends:
    """The givens that are the temperatures at the ends of the unit; empty where a stream has none."""

    hot_inlet: str
    hot_outlet: str
    cold_inlet: str
    cold_outlet: str
    parallel: bool

    @property
    def symbols(self) -> tuple[str, ...]:
        named = (self.hot_inlet, self.hot_outlet, self.cold_inlet, self.cold_outlet)
        return tuple(symbol for symbol in named if symbol)

    @property
    def hotter(self) -> tuple[tuple[str, str], ...]:
        """Pairs of which the first must be hotter: each stream's ends, and the terminals of the unit."""
        pairs = [
            (self.hot_inlet, self.hot_outlet),
            (self.cold_outlet, self.cold_inlet),
            (self.hot_inlet, self.cold_inlet),
        ]
        pairs += (
            [(self.hot_outlet, self.cold_outlet)]
            if self.parallel
            else [(self.hot_inlet, self.cold_outlet), (self.hot_outlet, self.cold_inlet)]
        )
        return tuple((one, other) for one, other in pairs if one and other)


@dataclass
class Sieve:
    """Rows on their way through the rules: ``left`` marks those that no rule has rejected yet."""

    rows: Rows
    left: Array
    rules: list[RuleCount] = field(default_factory=list)
    not_compared: int = 0

    def reject(self, name: str, rejects: str, limit: str, broken: Array | Mapping[str, Array] | None) -> None:
        """Apply a rule: the rows left that ``broken`` marks, in all or by what breaks it. None: it is not applied,
        ``limit`` may say why."""
        if broken is None:
            self.rules.append(RuleCount(name, rejects, limit or NOT_APPLIED, 0, ""))
            return
        parts = broken if isinstance(broken, Mapping) else {"": broken}
        found = self.left & np.any(list(parts.values()), axis=0) if parts else np.zeros_like(self.left)
        self.left = self.left & ~found
        count = int(np.count_nonzero(found))
        first = ""
        if count:
            place = min(np.flatnonzero(found), key=lambda row: int(self.rows.numbers[row]))
            what = next(part for part, marks in parts.items() if marks[place])
            first = f"row {int(self.rows.numbers[place])}" + (f", {what}" if what else "")
        self.rules.append(RuleCount(name, rejects, limit, count, first))


def sift(rows: Rows, survey: Survey, ends: Ends, givens: Mapping[str, Input]) -> Sieve:
    """The rows after every rule that the measured figures alone decide.

    ``givens`` are those of the base case by symbol: what each can be, and what flows are held to.
    """
    reference = {symbol: item.value for symbol, item in givens.items()}
    sieve = Sieve(rows, np.ones(len(rows), dtype=bool))
    readable = np.isfinite(rows.times)
    for figures in rows.columns.values():
        readable &= np.isfinite(figures)
    sieve.reject(UNREADABLE, "a cell that is empty, no number or no time", "every cell a number", ~readable)
    if sieve.rules[-1].first:
        sieve.rules[-1] = replace(sieve.rules[-1], first=_first_unreadable(rows, survey))
    sieve.reject(
        "duplicate time stamp",
        "a time that a row above has",
        "the first row of a time stays",
        _repeated(sieve),
    )
    sieve.reject(
        "what it can be",
        "a figure that the quantity of its given cannot have",
        "; ".join(_can_be(givens[symbol]) for symbol in survey.columns),
        _impossible(rows, survey, givens),
    )
    for symbol, column in survey.columns.items():
        figures = rows.columns[symbol]
        if column.low is None or column.high is None:
            sieve.reject(f"sensor range / {symbol}", f"{column.head} beyond its range", "", None)
            continue
        outside = _outside(figures, column.low.value, column.high.value)
        sieve.reject(
            f"sensor range / {symbol}",
            f"{column.head} beyond its range",
            f"{column.low.text} to {column.high.text}",
            outside,
        )
    sieve.reject(
        "temperature cross",
        "temperatures that no unit can have, such as swapped columns",
        "; ".join(f"{one} > {other}" for one, other in ends.hotter),
        _crossed(rows, ends, reference),
    )
    _reject_unsteady(sieve, survey, ends)
    _reject_flows(sieve, survey, reference)
    return sieve


def _outside(figures: Array, low: float, high: float) -> Array:
    """Which figures lie outside two limits; NaN does."""
    size = ROUNDINGS * np.maximum(np.abs(figures), max(abs(low), abs(high)))
    return ~((figures >= low - size) & (figures <= high + size))


def _can_be(item: Input) -> str:
    """What a measured given can be, in words: its sign, and what it cannot pass by its definition."""
    kind = item.kind
    words = "above absolute zero" if kind.scale == "point" else SIGN_WORDS[kind.sign]
    if kind.reading == "gauge":
        words = SIGN_WORDS["any"]
    if kind.least or kind.most:
        words = f"{kind.least or 'any'} to {kind.most or 'any'}"
    return f"{item.symbol} {'a whole number, ' if kind.whole else ''}{words}"


def _impossible(rows: Rows, survey: Survey, givens: Mapping[str, Input]) -> dict[str, Array]:
    return {
        survey.columns[symbol].head: ~np.asarray(givens[symbol].kind.allowed(figures))
        for symbol, figures in rows.columns.items()
    }


def _first_unreadable(rows: Rows, survey: Survey) -> str:
    """The first cell of the file that is no number or no time, as it stands there."""
    heads = {
        survey.time_head: rows.times,
        **{survey.columns[name].head: row for name, row in rows.columns.items()},
    }
    wrong = {head: rows.numbers[~np.isfinite(figures)] for head, figures in heads.items()}
    row, head = min((int(numbers.min()), head) for head, numbers in wrong.items() if len(numbers))
    cell = cell_of(survey, head, row)
    return f"row {row}, {head}: {shown(cell) if cell else 'empty'}"


def cell_of(survey: Survey, head: str, row: int) -> str:
    """A cell of the history as it stands there."""
    return survey.history.columns[head].split("\n")[row - 1]


def _repeated(sieve: Sieve) -> Array:
    """Rows whose time a row left above them has already."""
    broken = np.zeros(len(sieve.rows), dtype=bool)
    places = np.flatnonzero(sieve.left)
    broken[places[1:]] = np.diff(sieve.rows.times[places]) == 0.0
    return broken


def _crossed(rows: Rows, ends: Ends, reference: Mapping[str, float]) -> dict[str, Array]:
    found = {}
    for one, other in ends.hotter:
        hot, cold = (rows.columns.get(symbol, reference[symbol]) for symbol in (one, other))
        found[f"{one} not above {other}"] = np.broadcast_to(~np.asarray(hot > cold), len(rows))
    return found


def _reject_unsteady(sieve: Sieve, survey: Survey, ends: Ends) -> None:
    """Rows whose temperatures moved since the row before; rows across a gap are not compared, and counted."""
    name, rejects = "steady state", "a temperature that moved since the row before"
    limit, gap = survey.rules.steady, survey.rules.gap
    if limit is None:
        sieve.reject(name, rejects, "", None)
        return
    places = np.flatnonzero(sieve.left)
    times = sieve.rows.times[places]
    near = np.diff(times) <= (gap.value if gap is not None else np.inf)
    broken = {}
    for symbol in ends.symbols:
        if symbol in sieve.rows.columns:
            marks = broken[survey.columns[symbol].head] = np.zeros(len(sieve.rows), dtype=bool)
            figures = sieve.rows.columns[symbol][places]
            size = ROUNDINGS * np.maximum(np.abs(figures[1:]), np.abs(figures[:-1]))
            marks[places[1:]] = near & (np.abs(np.diff(figures)) > limit.value + size)
    sieve.not_compared = len(places) - int(np.count_nonzero(near)) if len(places) else 0
    sieve.reject(name, rejects, f"at most {limit.text}", broken)


def _reject_flows(sieve: Sieve, survey: Survey, reference: Mapping[str, float]) -> None:
    limit = survey.rules.flow_ratio
    for symbol, figures in sieve.rows.columns.items():
        column = survey.columns[symbol]
        if unit_factor(column.unit)[1] not in FLOWS:
            continue
        name, rejects = f"flow ratio / {symbol}", f"{column.head} to {symbol} of the base case out of range"
        if limit is None:
            sieve.reject(name, rejects, "", None)
            continue
        ratio = figures / reference[symbol]
        broken = _outside(ratio, limit[0].value, limit[1].value)
        sieve.reject(name, rejects, f"{limit[0].text} to {limit[1].text}", broken)
