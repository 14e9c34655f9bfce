"""Distance to flip: the smallest change of each given with which a verdict is another one.

One call of the engine lays every given of every case out over its search, all else as it stands. Where a
verdict changes between neighbouring figures, the next calls divide that interval: near the place where the
figure that decides (result less criterion, both sides of a limit, share less one half) passes zero, which
neighbouring figures tell by interpolation, and evenly where nothing continuous decides. What is reported is
what was evaluated, never what was interpolated. A verdict that flips and flips back between two neighbouring
figures of the search is not seen.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from decimal import ROUND_CEILING, ROUND_FLOOR, Context, Decimal

import numpy as np

from calcbook.calcfile.calculation import Given
from calcbook.chain.analysis import is_found_later
from calcbook.chain.ends import OPEN_END
from calcbook.chain.flips_outcome import CONTROLLING, CRITERION, LIMIT, METHOD, Flip, Flips, Searched
from calcbook.chain.outcome import CaseOutcome, Solved
from calcbook.chain.samples import (
    BROKEN,
    IDLE,
    NO_VERDICT,
    OPEN,
    Samples,
    Verdicts,
    evaluate_samples,
    phases_of,
    results_asked,
)
from calcbook.chain.types import SERVICE, Chain, Input
from calcbook.quantities import in_unit, read_tolerance, si_value
from calcbook.rating.at_samples import AtSamples
from calcbook.uncertainty.lines import Reach, changes_fluid_state, reach

Array = np.ndarray
Key = tuple[str, str, str]
Group = tuple[str, ...]
# A figure at which a verdict flips is known this well, relative to itself, and to the change that leads to it.
KNOWN, KNOWN_OF_CHANGE = 1e-9, 1e-4
# Where a figure stands at a limit already, next to no change flips it.
BEST_KNOWN = 1e-12
# What flips at zero itself does so at no figure above it: so near, relative to the present figure, is near enough.
KNOWN_AT_ZERO = 1e-6
# Printed figures have so many digits, and more where the change would have fewer than this many.
PRINTED_DIGITS, CHANGE_DIGITS, MOST_DIGITS = 6, 4, 10
TYPED_DIGITS = 12
# A printed figure that does not hold is tried with one digit more, so many times.
MOST_TRIES = 5
MOST_ROUNDS = 16
# How far beside an interpolated place an interval is divided, in parts of the interval: at first, then again.
FIRST_PARTS = (1e-4, 3e-3, 0.06)
NEXT_PARTS = (2e-3,)
STATE_PARTS = (1e-3, 0.03)
# The place itself is enclosed by this part of how well it must be known.
CLOSE = 0.3
# Samples on either side of an interval that tell where a margin passes zero in it.
AROUND = 3
EVENLY_WITHOUT, EVENLY_AT_END, EVENLY_FOR_STATES = 15, 4, 3
# Places of an interval that differ by less than this part of it are divided as one.
ALIKE = 0.03
LARGEST_LOGARITHM = 100.0
INTERPOLATED_ROUNDS, END_ROUNDS = 2, 2


def distances_to_flip(solved: Solved) -> Flips:
    """The distances to flip of the base case, and of every named case where acceptance is stated."""
    named = solved.cases[1:] if solved.chain.calculation.acceptance else ()
    return _Search(solved, (solved.base, *named)).flips()


@dataclass(eq=False)
class _Line:
    """One given of one case on one side: its samples so far, nearest first, by their places in the whole."""

    case: int
    item: Input
    direction: int
    whole: bool
    changes_state: bool
    reach: Reach
    now: float
    figures: Array
    places: Array
    brackets: tuple[_Bracket, ...] | None = None

    @property
    def id(self) -> str:
        return self.item.id

    def takes(self, figures: Iterable[float], first_place: int) -> None:
        """Samples that were evaluated, put among the others."""
        added = np.fromiter(figures, dtype=float)
        self.figures = np.concatenate([self.figures, added])
        self.places = np.concatenate([self.places, np.arange(first_place, first_place + len(added))])
        order = np.argsort(np.abs(self.figures - self.now), kind="stable")
        self.figures, self.places = self.figures[order], self.places[order]
        self.brackets = None


@dataclass(frozen=True, slots=True)
class _Bracket:
    """A verdict (a row of the table) that changes between two neighbouring figures of a line.

    ``before`` is the number of the nearer sample on the line as it was, ``becomes`` the code of the farther one.
    """

    line: _Line
    row: int
    before: int
    inside: float
    outside: float
    becomes: int

    @property
    def least(self) -> float:
        return abs(self.inside - self.line.now)

    @property
    def most(self) -> float:
        return abs(self.outside - self.line.now)

    @property
    def is_known(self) -> bool:
        width = abs(self.outside - self.inside)
        if self.line.whole:
            return width <= 1.0
        return width <= _resolution(self.outside, self.line.now)


@dataclass(eq=False)
class _Table:
    """Every sample that was evaluated: the codes of every verdict, what has no answer, margins when asked for."""

    batches: list[Samples] = field(default_factory=list)
    keys: list[Key] = field(default_factory=list)
    codes: Array = field(default_factory=lambda: np.empty((0, 0), dtype=np.int16))
    missing: Array = field(default_factory=lambda: np.empty(0, dtype=int))
    reasons: list[str] = field(default_factory=lambda: [""])
    margins: dict[int, Array] = field(default_factory=dict)
    unknowns: Array | None = None
    limit_rows: Array = field(default_factory=lambda: np.empty(0, dtype=bool))
    stop_rows: Array = field(default_factory=lambda: np.empty(0, dtype=bool))

    def takes(self, samples: Samples) -> int:
        """Add a batch; the place of its first sample."""
        start, size = len(self.missing), len(samples.missing)
        fresh = [key for key in samples.verdicts if key not in self.keys]
        if fresh:
            self.keys += fresh
            self.limit_rows = np.array([key[0] == LIMIT for key in self.keys])
            self.stop_rows = np.array(
                [self.verdict(row, samples).level == "stop" for row in range(len(self.keys))]
            )
        codes = np.full((len(self.keys), start + size), NO_VERDICT, dtype=np.int16)
        codes[: len(self.codes), :start] = self.codes
        for row, key in enumerate(self.keys):
            if key in samples.verdicts:
                codes[row, start:] = samples.codes(key)
        self.codes = codes
        names = {reason: self._reason(reason) for reason in samples.reasons}
        renamed = np.array([names[reason] for reason in samples.reasons])
        self.missing = np.concatenate([self.missing, renamed[samples.missing]])
        self.unknowns = self._more_unknowns(samples, start)
        self.batches.append(samples)
        self.margins.clear()
        return start

    def _more_unknowns(self, samples: Samples, start: int) -> Array | None:
        """What the circuits were closed with, by condition, of every sample; NaN where they were not."""
        added, known = samples.unknowns, self.unknowns
        if known is None and added is not None:
            known = np.full((*added.shape[:2], start), np.nan)
        if known is None:
            return None
        if added is None:
            added = np.full((*known.shape[:2], len(samples.missing)), np.nan)
        return np.concatenate([known, added], axis=2)

    def _reason(self, reason: str) -> int:
        if reason not in self.reasons:
            self.reasons.append(reason)
        return self.reasons.index(reason)

    def margin(self, row: int) -> Array:
        """The margins of one verdict at every sample, a row each; NaN where a batch has none."""
        found = self.margins.get(row)
        if found is None:
            parts = [batch.margins(self.keys[row]) for batch in self.batches]
            count = max(len(part) for part in parts)
            padded = [
                np.vstack([part, np.full((count - len(part), part.shape[1]), np.nan)]) for part in parts
            ]
            found = self.margins[row] = np.hstack(padded)
        return found

    def verdict(self, row: int, *more: Samples) -> Verdicts:
        """A verdict with its words, from the first batch that has it."""
        key = self.keys[row]
        return next(batch.verdicts[key] for batch in (*self.batches, *more) if key in batch.verdicts)


class _Search:
    def __init__(self, solved: Solved, cases: tuple[CaseOutcome, ...]):
        self.chain: Chain = solved.chain
        self.cases = cases
        self.names = tuple(case.name for case in cases)
        self.base = {name: np.array([case.inputs[name] for case in cases]) for name in self.chain.inputs}
        self.phases = phases_of(self.chain, cases)
        self.directions = [
            float(np.sign(case.solutions[SERVICE].number(self.chain.results["heat flow"])))
            for case in cases
            if "heat flow" in self.chain.results
        ]
        self.ends_close = not any(check.id.startswith(OPEN_END) for case in cases for check in case.checks)
        self.later = AtSamples(solved, results_asked(solved.chain))
        self.table = _Table()
        self.lines: list[_Line] = []
        self.best: dict[Group, _Bracket] = {}

    def flips(self) -> Flips:
        """The whole search."""
        self._lay_out()
        for number in range(MOST_ROUNDS):
            wanted = self._wanted(number)
            if not wanted:
                break
            self._evaluate(wanted)
        found, unsettled = self._reported()
        order = {kind: place for place, kind in enumerate((CRITERION, LIMIT, METHOD, CONTROLLING))}
        # What its own tolerance can flip comes first: it may be so already.
        found.sort(
            key=lambda flip: (order[flip.kind], not flip.is_within_tolerance, float(f"{flip.steps:.6g}"))
        )
        left_out = tuple(
            criterion.text
            for criterion in self.chain.calculation.acceptance
            if is_found_later(criterion.result) and criterion.result not in self.later.names
        )
        return Flips(tuple(found), tuple(self._searched()), unsettled, left_out)

    # -- samples ------------------------------------------------------------------------------------

    def _lay_out(self) -> None:
        """The first samples: the cases themselves, and every given of each over its search."""
        states = changes_fluid_state(self.chain)
        inputs = {name: item for name, item in self.chain.inputs.items() if self._acts(item)}
        for case in range(len(self.cases)):
            for name, item in inputs.items():
                now = float(self.base[name][case])
                whole = bool(item.kind.counts) and now == int(now)
                for direction in (-1, 1):
                    far = reach(item, now, direction, name in states)
                    self.lines.append(
                        _Line(
                            case,
                            item,
                            direction,
                            whole,
                            name in states,
                            far,
                            now,
                            np.array([now]),
                            np.array([case]),
                        )
                    )
        self._evaluate([(line, line.reach.figures) for line in self.lines if line.reach.figures], first=True)

    def _acts(self, item: Input) -> bool:
        """Whether anything takes a given: a step, or a criterion as its limit."""
        limits = {criterion.limit.symbol for criterion in self.chain.calculation.acceptance}
        return item.is_given and bool(self.chain.used_in.get(item.symbol) or item.symbol in limits)

    def _evaluate(self, wanted: list[tuple[_Line, tuple[float, ...]]], first: bool = False) -> None:
        """Evaluate new figures of lines, in one call; the ``first`` call starts with the cases as they stand."""
        ahead = len(self.cases) if first else 0
        if not wanted and not ahead:
            return
        place = self._solve(wanted, ahead)
        for line, figures in wanted:
            line.takes(figures, place)
            place += len(figures)

    def _solve(self, part: list[tuple[_Line, tuple[float, ...]]], ahead: int) -> int:
        """Solve figures of lines after ``ahead`` cases as they stand; the place of the first figure."""
        case_of = np.concatenate(
            [np.arange(ahead), *(np.full(len(figures), line.case) for line, figures in part)]
        )
        inputs: dict[str, Array] = {}
        for name, base in self.base.items():
            varies = len(base) > 1 and bool((base != base[0]).any())
            inputs[name] = base[case_of] if varies else np.asarray(base[0])
        start = ahead
        for line, figures in part:
            value = inputs[line.id]
            if value.ndim == 0:
                value = inputs[line.id] = np.full(len(case_of), value)
            value[start : start + len(figures)] = figures
            start += len(figures)
        if all(value.ndim == 0 for value in inputs.values()):
            inputs = {name: np.full(len(case_of), value) for name, value in inputs.items()}
        near = self._near(part, ahead)
        samples = evaluate_samples(
            self.chain,
            inputs,
            self.names,
            case_of,
            self.phases,
            self.directions,
            near,
            self.ends_close,
            self.later,
        )
        return self.table.takes(samples) + ahead

    def _near(self, part: list[tuple[_Line, tuple[float, ...]]], ahead: int) -> Array | None:
        """Between the neighbours of every figure on its line: where its circuit is likely to close.

        NaN beyond the last sample with an answer, where its neighbour tells little.
        """
        unknowns = self.table.unknowns
        if unknowns is None:
            return None
        inside, outside, weights = [], [], []
        for line, figures in part:
            distances = np.abs(line.figures - line.now)
            wanted = np.abs(np.array(figures) - line.now)
            after = np.searchsorted(distances, wanted)
            near, far = np.maximum(after - 1, 0), np.minimum(after, len(distances) - 1)
            width = np.where(far > near, distances[far] - distances[near], np.nan)
            inside.append(line.places[near])
            outside.append(line.places[far])
            weights.append((wanted - distances[near]) / width)
        found = np.full((*unknowns.shape[:2], ahead), np.nan)
        share = np.concatenate(weights)
        first, second = unknowns[:, :, np.concatenate(inside)], unknowns[:, :, np.concatenate(outside)]
        return np.concatenate([found, first + share * (second - first)], axis=2)

    # -- brackets -----------------------------------------------------------------------------------

    def _wanted(self, number: int) -> list[tuple[_Line, tuple[float, ...]]]:
        """The figures to be evaluated next, by line; none when every distance is known."""
        figures: dict[int, set[float]] = {}
        for bracket in self._open_brackets():
            place = self.lines.index(bracket.line)
            figures.setdefault(place, set()).update(self._between(bracket, number))
        if number < END_ROUNDS:
            for place, line in enumerate(self.lines):
                figures.setdefault(place, set()).update(self._before_end(line))
        wanted = []
        for place, line in enumerate(self.lines):
            fresh = figures.get(place, set()) - set(line.figures.tolist())
            if fresh:
                wanted.append((line, tuple(sorted(fresh))))
        return wanted

    def _open_brackets(self) -> list[_Bracket]:
        """The intervals that may hold the nearest flip of their group and are not known well enough."""
        groups: dict[Group, list[_Bracket]] = {}
        for line in self.lines:
            if line.brackets is None:
                line.brackets = tuple(self._first_flips(line))
            for bracket in line.brackets:
                groups.setdefault(self._group(bracket), []).append(bracket)
        self.best = {}
        found = []
        for group, brackets in groups.items():
            nearest = _nearest(brackets)
            self.best[group] = nearest
            found += [
                bracket
                for bracket in brackets
                if (bracket is nearest or bracket.least < nearest.most) and not bracket.is_known
            ]
        return found

    def _group(self, bracket: _Bracket) -> Group:
        """Among what a flip must be the nearest: a criterion in its case, the other kinds in all cases."""
        kind, name, _ = self.table.keys[bracket.row]
        if kind == CRITERION:
            return kind, bracket.line.id, name, self.names[bracket.line.case]
        return kind, bracket.line.id

    def _end(self, line: _Line) -> int:
        """How many samples of a line, from the nearest, have an answer without a break."""
        missing = np.flatnonzero(self.table.missing[line.places])
        return int(missing[0]) if len(missing) else len(line.places)

    def _first_flips(self, line: _Line) -> Iterator[_Bracket]:
        """For every verdict the first sample with another one, as far as the samples have an answer."""
        end = self._end(line)
        if end == 0:
            return
        # A limit that stops leaves no answer: its own flip is the first sample without one.
        codes = self.table.codes[:, line.places[: end + 1]]
        rows = np.flatnonzero((codes != codes[:, :1]).any(axis=1))
        if not len(rows):
            return
        codes = codes[rows]
        base = codes[:, :1]
        other = (codes != base) & (codes >= 0) & (base >= 0)
        # What cannot be evaluated as it stands is an open item, and hides no other limit here.
        counts = (codes != IDLE) & ((base != IDLE) | (codes == BROKEN)) & (base != OPEN)
        other &= counts | ~self.table.limit_rows[rows, None]
        if codes.shape[1] > end:
            other[:, end] &= self.table.stop_rows[rows] & (codes[:, end] == BROKEN)
        for place, after in enumerate(other.argmax(axis=1).tolist()):
            if other[place, after]:
                inside, outside = line.figures[after - 1 : after + 1].tolist()
                yield _Bracket(line, int(rows[place]), after - 1, inside, outside, int(codes[place, after]))

    # -- new figures --------------------------------------------------------------------------------

    def _between(self, bracket: _Bracket, number: int) -> list[float]:
        """Figures that divide an interval, and those that would be printed of the flip in it."""
        line, low, high = bracket.line, bracket.inside, bracket.outside
        width = high - low
        places = self._crossings(bracket, ALIKE * abs(width) if number == 0 else 0.0)
        if line.whole:
            return _whole_between(low, high, places)
        figures: list[float] = []
        printed: list[float] = []
        if not places or number >= INTERPOLATED_ROUNDS:
            # Nothing continuous decides, or what decides jumps.
            count = EVENLY_FOR_STATES if line.changes_state else EVENLY_WITHOUT
            figures = [low + width * part / (count + 1) for part in range(1, count + 1)]
        parts = FIRST_PARTS if number == 0 else NEXT_PARTS
        for place in places:
            figures += [
                place + sign * part * width
                for part in (STATE_PARTS if line.changes_state else parts)
                for sign in (-1.0, 1.0)
            ]
            if number:
                close = CLOSE * _resolution(place, line.now)
                figures += [place - close, place + close]
                printed += _Printing(line, place + line.direction * close, self._given(line)).figures()
        return [figure for figure in figures if min(low, high) < figure < max(low, high)] + printed

    def _crossings(self, bracket: _Bracket, alike: float) -> list[float]:
        """Where the margins of a verdict pass zero within an interval, by what the samples around it tell.

        A margin is taken as a smooth curve of the figure, of its logarithm, and on the nearer side alone (it may
        have a kink where it passes zero); places that are ``alike`` count once.
        """
        line = bracket.line
        around = slice(max(bracket.before - AROUND, 0), bracket.before + 2 + AROUND)
        margins = self.table.margin(bracket.row)[:, line.places[around]]
        figures = line.figures[around].tolist()
        at = bracket.before - around.start
        low, high = sorted((bracket.inside, bracket.outside))
        least = max(alike, CLOSE * _resolution(bracket.outside, line.now))
        found: list[float] = []
        for margin in margins.tolist():
            first, second = margin[at], margin[at + 1]
            if (
                not (math.isfinite(first) and math.isfinite(second))
                or first * second > 0.0
                or first == second
            ):
                continue
            straight = bracket.inside - first * (bracket.outside - bracket.inside) / (second - first)
            guesses = [*_curved(margin, figures), *_curved(margin[: at + 1], figures[: at + 1])]
            for guess in [guess for guess in guesses if low < guess < high] or [straight]:
                if all(abs(guess - other) > least for other in found):
                    found.append(guess)
        return found

    def _before_end(self, line: _Line) -> list[float]:
        """Figures between the last sample with an answer and the first one without, if a flip may hide there."""
        end = self._end(line)
        if not 0 < end < len(line.places):
            return []
        last, first = float(line.figures[end - 1]), float(line.figures[end])
        if not self._may_hide(line, abs(last - line.now)):
            return []
        if line.whole:
            return _whole_between(last, first, [])
        count = EVENLY_FOR_STATES if line.changes_state else EVENLY_AT_END
        return [last + (first - last) * part / (count + 1) for part in range(1, count + 1)]

    def _may_hide(self, line: _Line, distance: float) -> bool:
        """Whether any verdict has no nearer flip than a distance on this given."""
        case = self.names[line.case]
        criteria = [key[1] for key in self.table.keys if key[0] == CRITERION]
        groups: list[Group] = [(CRITERION, line.id, name, case) for name in criteria]
        groups += [(kind, line.id) for kind in (LIMIT, METHOD, CONTROLLING)]
        return any(group not in self.best or self.best[group].most > distance for group in groups)

    # -- what is reported ---------------------------------------------------------------------------

    def _reported(self) -> tuple[list[Flip], tuple[str, ...]]:
        """The nearest flip of each group with its printed figure evaluated; and in words those without one.

        A verdict that is another one at a figure, but not at any printed figure beside it, has none.
        """
        self._open_brackets()
        waiting = {
            group: _Printing(bracket.line, bracket.outside, self._given(bracket.line))
            for group, bracket in self.best.items()
        }
        printed: dict[Group, _Printing] = {}
        for _ in range(MOST_TRIES):
            self._evaluate_printed(list(waiting.values()))
            for group, item in list(waiting.items()):
                if self._holds(self.best[group], item):
                    printed[group] = waiting.pop(group)
                else:
                    item.digits += 1
        flips = [self._flip(self.best[group], item) for group, item in printed.items()]
        return flips, tuple(self._words(self.best[group]) for group in waiting)

    def _words(self, bracket: _Bracket) -> str:
        _, name, condition = self.table.keys[bracket.row]
        case = self.names[bracket.line.case]
        return ", ".join(word for word in (bracket.line.item.symbol, case, name, condition) if word)

    def _evaluate_printed(self, items: list[_Printing]) -> None:
        wanted: dict[int, set[float]] = {}
        for item in items:
            wanted.setdefault(self.lines.index(item.line), set()).update(item.figures())
        fresh = [
            (self.lines[place], tuple(sorted(figures - set(self.lines[place].figures.tolist()))))
            for place, figures in wanted.items()
        ]
        self._evaluate([(line, figures) for line, figures in fresh if figures])

    def _holds(self, bracket: _Bracket, item: _Printing) -> bool:
        """Whether the printed figure flips and the one just inside it does not."""
        line = bracket.line
        base, outside, inside = (
            self.table.codes[bracket.row, line.places[int(np.flatnonzero(line.figures == figure)[0])]]
            for figure in (line.now, *item.figures())
        )
        return bool(outside == bracket.becomes and inside in (base, NO_VERDICT, IDLE))

    def _given(self, line: _Line) -> Given:
        symbol = line.item.symbol
        restated = self.chain.calculation.cases.get(self.names[line.case], {})
        return restated.get(symbol) or self.chain.calculation.givens[symbol]

    def _flip(self, bracket: _Bracket, item: _Printing) -> Flip:
        line = bracket.line
        verdict = self.table.verdict(bracket.row)
        base = int(self.table.codes[bracket.row, line.places[0]])
        printed, _ = item.figures()
        moved = abs(printed - line.now)
        temperature = line.item.kind.scale == "point" or line.item.kind.name == "temperature difference"
        steps = moved if temperature else (100.0 * moved / abs(line.now) if line.now else math.inf)
        tolerance = item.given.tolerance or self.chain.calculation.givens[line.item.symbol].tolerance
        multiples = math.nan
        if tolerance is not None:
            stated = read_tolerance(tolerance.text, line.item.kind)
            width = stated.half_width * (abs(line.now) if stated.relative else 1.0)
            multiples = moved / width if width else math.nan
        return Flip(
            kind=verdict.kind,
            id=verdict.id,
            condition=verdict.condition,
            case=self.names[line.case],
            level=verdict.level,
            was=verdict.words[base],
            becomes=verdict.words[bracket.becomes],
            input=line.item,
            now=line.now,
            at=bracket.outside,
            printed=float(item.decimals()[0]),
            printed_inside=float(item.decimals()[1]),
            unit=item.unit,
            now_text=item.given.value.text,
            change=float(item.decimals()[0] - item.now),
            tolerance=tolerance.text if tolerance is not None else "",
            tolerances=multiples,
            steps=steps,
        )

    def _searched(self) -> Iterator[Searched]:
        for below, above in zip(self.lines[::2], self.lines[1::2], strict=True):
            given = self._given(below)
            quantity = given.value.quantity
            assert quantity is not None
            unit = quantity.unit_text
            (low, low_end), (high, high_end) = (self._last(line, unit) for line in (below, above))
            yield Searched(below.item, self.names[below.case], unit, low, low_end, high, high_end)

    def _last(self, line: _Line, unit: str) -> tuple[float, str]:
        """The farthest figure of a line with an answer, in a unit, and what ends the search behind it."""
        end = self._end(line)
        figure = in_unit(float(line.figures[max(end - 1, 0)]), unit or "1", line.item.kind.scale == "point")
        if end == len(line.places):
            return figure, line.reach.end
        return figure, self.table.reasons[self.table.missing[line.places[end]]]


def _nearest(brackets: list[_Bracket]) -> _Bracket:
    """The nearest of some intervals; of those that are as near as can be told the first, the earlier case."""
    nearest = min(brackets, key=lambda bracket: bracket.most)
    if not nearest.is_known:
        return nearest
    alike = nearest.most + _resolution(nearest.outside, nearest.line.now)
    return next(bracket for bracket in brackets if bracket.most <= alike and bracket.is_known)


def _resolution(figure: float, now: float) -> float:
    """How well a figure at which a verdict flips is to be known."""
    if figure == 0.0:
        return KNOWN_AT_ZERO * abs(now)
    wanted = min(KNOWN * abs(figure), KNOWN_OF_CHANGE * abs(figure - now))
    return max(wanted, BEST_KNOWN * max(abs(figure), abs(now)))


def _curved(margins: list[float], figures: list[float]) -> list[float]:
    """Where a margin is zero, as a curve of the figure and of its logarithm."""
    known = [place for place, margin in enumerate(margins) if math.isfinite(margin)]
    margins, figures = [margins[place] for place in known], [figures[place] for place in known]
    if len(known) < 2:
        return []
    found = [_interpolated(margins, figures)]
    if min(figures) > 0.0:
        logarithm = _interpolated(margins, [math.log(figure) for figure in figures])
        found.append(math.exp(logarithm) if logarithm < LARGEST_LOGARITHM else math.nan)
    return found


def _interpolated(margins: list[float], figures: list[float]) -> float:
    """The figure at which a margin is zero: through all samples, taken as a curve of the margin; NaN without one."""
    steps = [second - first for first, second in itertools.pairwise(margins)]
    if not all(step > 0.0 for step in steps) and not all(step < 0.0 for step in steps):
        return math.nan
    total = 0.0
    for place, figure in enumerate(figures):
        weight = 1.0
        for other, margin in enumerate(margins):
            if other != place:
                weight *= margin / (margin - margins[place])
        total += weight * figure
    return total


def _whole_between(low: float, high: float, places: list[float]) -> list[float]:
    """Whole numbers that divide an interval: evenly, and next to where a margin passes zero."""
    lowest, highest = sorted((low, high))
    parts = range(1, EVENLY_AT_END + 1)
    figures = {float(round(lowest + (highest - lowest) * part / (EVENLY_AT_END + 1))) for part in parts}
    for place in places:
        figures |= {float(math.floor(place)), float(math.ceil(place))}
    return [figure for figure in figures if lowest < figure < highest]


@dataclass(eq=False)
class _Printing:
    """A figure beyond which a verdict flips, in the unit of the file, with as many digits as it takes."""

    line: _Line
    outside: float
    given: Given
    digits: int = 0
    worked_out: dict[int, tuple[tuple[Decimal, Decimal], tuple[float, float]]] = field(default_factory=dict)

    @property
    def unit(self) -> str:
        assert self.given.value.quantity is not None
        return self.given.value.quantity.unit_text

    @property
    def now(self) -> Decimal:
        """The present figure in its unit, without what the conversion to SI and back adds."""
        return Context(prec=TYPED_DIGITS).create_decimal(self._in_unit(self.line.now))

    def _in_unit(self, value: float) -> Decimal:
        return Decimal(repr(in_unit(value, self.unit or "1", self.line.item.kind.scale == "point")))

    def decimals(self) -> tuple[Decimal, Decimal]:
        """The printed figure, rounded away from the present one, and the one of its last digit before it."""
        return self._found()[0]

    def figures(self) -> tuple[float, float]:
        """The printed figure and the one just inside it in SI, as the file would be read."""
        return self._found()[1]

    def _found(self) -> tuple[tuple[Decimal, Decimal], tuple[float, float]]:
        if self.digits not in self.worked_out:
            outside, inside = self._decimals()
            figures = si_value(outside, self.unit), si_value(inside, self.unit)
            self.worked_out[self.digits] = (outside, inside), figures
        return self.worked_out[self.digits]

    def _decimals(self) -> tuple[Decimal, Decimal]:
        direction = self.line.direction
        if self.line.whole:
            outside = Decimal(int(self.outside))
            return outside, outside - direction
        exact = self._in_unit(self.outside)
        # 348.15 K is 75 °C, not the 74.99999999999997 °C of the subtraction, where both are one figure in SI.
        short = Context(prec=TYPED_DIGITS).create_decimal(exact)
        if si_value(short, self.unit) == self.outside:
            exact = short
        change = abs(exact - self.now)
        last = min(exact.adjusted() - PRINTED_DIGITS, change.adjusted() - CHANGE_DIGITS) + 1
        last = max(last, exact.adjusted() - MOST_DIGITS + 1)
        unit = Decimal(1).scaleb(last - self.digits)
        outside = exact.quantize(unit, rounding=ROUND_CEILING if direction > 0 else ROUND_FLOOR)
        return outside, outside - direction * unit
