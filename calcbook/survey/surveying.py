"""A survey from its rows to its results: rules, resistance, zero, fit, bounds, and the allowance proposed."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from calcbook.calcfile.empty import is_empty
from calcbook.calcfile.survey import Survey
from calcbook.chain.checks import evaluate_check
from calcbook.chain.outcome import CheckResult, Result, Solved
from calcbook.chain.solve import Solution
from calcbook.chain.survey_outcome import (
    CycleRow,
    FittedFigure,
    Gap,
    PlotColumn,
    Reading,
    SurveyOutcome,
    SystematicPart,
    WorkedRow,
)
from calcbook.chain.types import CLEAN, Chain, ChainCheck, OpenItem
from calcbook.faults import Collector
from calcbook.formulas import parse_expression, write
from calcbook.library import vocabulary
from calcbook.library.cards import Limit
from calcbook.quantities import QuantityKind
from calcbook.survey.bounds import NORMAL_95, Part, normal_quantile, parts_of
from calcbook.survey.fitting import Data, Fit, fit, sample
from calcbook.survey.growth import GrowthModel, growth_model
from calcbook.survey.resistance import CARD, Found, relations_of, resistances, slopes, worked
from calcbook.survey.rows import Rows, moment_text, read_rows
from calcbook.survey.rules import UNREADABLE, Ends, Sieve, cell_of, sift

Array = np.ndarray
# Slopes are taken at so many rows, spread evenly over all: what is wrong in every row alike moves neighbours alike.
SLOPE_ROWS = 2000
PLOT_COLUMNS = 72
# Rows that a fit must have beyond its parameters and zeros.
FEWEST_FREE = 5
ALLOWANCE = "allowance_fitted"
ONE_SIDED = "not applied: only one stream shows its heat"
# Beyond this part of all rows it is not single cells that cannot be read.
MOST = 0.5
# How far beyond the longest time since a cleaning in the rows a model may be used without a caution.
REACH, PERIOD = "1.5", "t_data"


def surveyed(solved: Solved, collector: Collector) -> Solved | None:
    """A solved calculation with its survey, if its file has one: results, checks, open items and cards with it.

    Codes: survey-temperature-missing, survey-rows-missing, model-not-growth, method-unknown; None after one.
    """
    survey = solved.chain.calculation.survey
    if survey is None:
        return solved
    work = _Survey(solved.chain, survey, collector)
    outcome = work.outcome()
    if outcome is None:
        return None
    checks = work.checks(outcome)
    base = replace(
        solved.base,
        results={**solved.base.results, **work.results(outcome)},
        checks=(*solved.base.checks, *checks),
        open_items=(*solved.base.open_items, *work.open_items(outcome), *work.limit_items(checks)),
    )
    return replace(solved.with_base(base), cards={**solved.cards, **work.cards()}, survey=outcome)


@dataclass(frozen=True)
class _Kept:
    """The rows that no rule rejected, in the order of time: places among all rows, figures, and cycles.

    ``cycles`` counts cleanings from 0, -1 before the first; ``zero`` marks rows that anchor zero.
    """

    places: Array
    times: Array
    columns: Mapping[str, Array]
    found: Found
    cycles: Array
    zero: Array
    anchored: Array


class _Survey:
    def __init__(self, chain: Chain, survey: Survey, collector: Collector):
        self.chain = chain
        self.survey = survey
        self.collector = collector
        self.starts = np.array([one.at for one in survey.cleanings])
        self.loss = survey.heat_loss.value.value if survey.heat_loss is not None else 0.0
        self.model: GrowthModel | None = None
        self.kept: _Kept | None = None

    def outcome(self) -> SurveyOutcome | None:
        survey, chain = self.survey, self.chain
        ends = ends_of(chain, survey, self.collector)
        self.model = growth_model(chain.library, survey.model, survey.model_place, self.collector)
        if ends is None or self.model is None:
            return None
        rows = read_rows(survey)
        givens = {symbol: chain.inputs[f"given/{symbol}"] for symbol in chain.calculation.givens}
        sieve = sift(rows, survey, ends, givens)
        kept = self.kept = self.solved_rows(rows, sieve)
        fitted = np.flatnonzero(kept.anchored)
        if len(fitted) < len(self.model.parameters) + len(self.starts) + FEWEST_FREE:
            self.too_few(rows, kept, sieve, len(fitted))
            return None
        data = Data(
            kept.times[fitted] - self.starts[kept.cycles[fitted]],
            kept.found.resistance[fitted],
            kept.cycles[fitted],
            kept.zero[fitted],
        )
        found = fit(self.model, data)
        return self.told(rows, sieve, kept, fitted, found)

    def too_few(self, rows: Rows, kept: _Kept, sieve: Sieve, left: int) -> None:
        assert self.model is not None
        counts = [f"{rule.count} by {rule.id} (first: {rule.first})" for rule in sieve.rules if rule.count]
        if len(kept.times) > left:
            counts.append(
                f"{len(kept.times) - left} before the first cleaning or without rows to anchor zero on"
            )
        wanted = ", ".join(self.model.symbols)
        self.collector.add(
            "survey-rows-missing",
            self.survey.place,
            f"{left} of {len(rows)} rows are left, too few to fit {wanted} and the zero of each cleaning",
            found=f"lost {', '.join(counts) or 'none'}",
            expected="more rows after a cleaning that the rules leave, some of them in the time that anchors zero",
        )

    # -- rows ---------------------------------------------------------------------------------------

    def solved_rows(self, rows: Rows, sieve: Sieve) -> _Kept:
        """The resistance of the rows left, the two rules that need it, and what each row counts for."""
        places = np.flatnonzero(sieve.left)
        columns = {symbol: figures[places] for symbol, figures in rows.columns.items()}
        found = resistances(self.chain, columns, self.loss)
        self.reject(
            sieve,
            places,
            "no answer",
            "no coefficient from these figures",
            "",
            ~np.isfinite(found.resistance),
        )
        limits = f"range limits of {', '.join(found.methods)}" if found.methods else ""
        self.reject(
            sieve,
            places,
            "method range",
            "figures at which a film's method is outside its range",
            limits,
            found.beyond if found.methods else None,
        )
        self.reject(
            sieve,
            places,
            "heat balance closure",
            "what one stream gives and the other takes differ",
            *self.unbalanced(found),
        )
        stays = sieve.left[places]
        times = rows.times[places][stays]
        cycles = np.searchsorted(self.starts, times, side="right") - 1
        zero = self.zero_rows(times, cycles)
        has_zero = np.array(
            [bool(zero[cycles == number].any()) for number in range(len(self.starts))] + [False]
        )
        return _Kept(
            places[stays],
            times,
            {symbol: figures[stays] for symbol, figures in columns.items()},
            found.part(stays),
            cycles,
            zero,
            has_zero[cycles],
        )

    def unbalanced(self, found: Found) -> tuple[str, Array | None]:
        """The limit of the closure and the rows beyond it; the reason and None where it is not tested."""
        limit = self.survey.rules.closure
        if not np.isfinite(found.closure).any():
            return ONE_SIDED, None
        if limit is None:
            return "", None
        return f"at most {limit.text} either way", np.abs(found.closure) > limit.value

    def reject(
        self, sieve: Sieve, places: Array, name: str, rejects: str, limit: str, broken: Array | None
    ) -> None:
        whole = None
        if broken is not None:
            whole = np.zeros(len(sieve.rows), dtype=bool)
            whole[places] = broken
        sieve.reject(name, rejects, limit, whole)

    def zero_rows(self, times: Array, cycles: Array) -> Array:
        """The rows of each cycle that anchor zero."""
        zero = self.survey.zero
        marked = np.zeros(len(times), dtype=bool)
        for number, start in enumerate(self.starts):
            places = np.flatnonzero(cycles == number)
            if zero.over is not None:
                places = places[times[places] - start <= zero.over.value]
            marked[places[: zero.rows] if zero.over is None else places] = True
        return marked

    # -- what the record tells ----------------------------------------------------------------------

    def told(self, rows: Rows, sieve: Sieve, kept: _Kept, fitted: Array, found: Fit) -> SurveyOutcome:
        chosen = sample(found.data, SLOPE_ROWS)
        columns = {symbol: figures[fitted][chosen] for symbol, figures in kept.columns.items()}
        since_first = kept.times[fitted][chosen] - kept.times[0]
        parts, without = parts_of(
            self.chain, self.survey, slopes(self.chain, columns, self.loss), columns, since_first
        )
        figures, told_parts = self.figures(found, parts, chosen)
        # The fit takes the growth among the rows that anchor zero from them: a resistance has it back.
        curve = found.model.value(found.parameters, found.data.times)
        resistances = found.data.anchored(found.data.values) + found.data.zero_means(curve)[found.data.cycles]
        unsure = self.row_uncertainty(found, parts, chosen)
        model = found.model
        cycles = self.cycle_rows(kept, found, parts, chosen)
        return SurveyOutcome(
            file=self.survey.file,
            source=self.survey.source,
            rows=len(rows),
            kept=len(kept.times),
            fitted=len(fitted),
            before_cleaning=int(np.count_nonzero(kept.cycles < 0)),
            not_anchored=int(np.count_nonzero((kept.cycles >= 0) & ~kept.anchored)),
            negative=int(np.count_nonzero(resistances < 0.0)),
            not_resolved=int(np.count_nonzero(resistances < 2.0 * unsure)),
            out_of_order=rows.out_of_order,
            not_compared=sieve.not_compared,
            first=moment_text(float(kept.times[0]), self.survey),
            last=moment_text(float(kept.times[-1]), self.survey),
            rules=tuple(sieve.rules),
            cycles=cycles,
            gaps=self.gaps(kept),
            model=model.card.id,
            model_title=model.card.title,
            relation=model.relation,
            row_relations=relations_of(self.chain),
            worked=self.worked_row(rows, kept, int(fitted[-1]), cycles),
            figures=figures,
            parts=told_parts,
            without_accuracy=tuple(without),
            slope_rows=len(chosen),
            deviation=found.deviation,
            is_determined=found.determined,
            correlation=found.correlation,
            period=float(found.data.times.max()),
            after=self.survey.proposal.after.value,
            percentile=self.survey.proposal.percentile.value,
            plot=self.plot(kept, fitted, resistances, curve),
        )

    def worked_row(self, rows: Rows, kept: _Kept, place: int, cycles: tuple[CycleRow, ...]) -> WorkedRow:
        """One kept row, from its readings to its resistance."""
        columns = {symbol: figures[place : place + 1] for symbol, figures in kept.columns.items()}
        taken, steps = worked(self.chain, columns, self.loss)
        cycle = cycles[kept.cycles[place]]
        number = int(rows.numbers[kept.places[place]])
        return WorkedRow(
            number,
            moment_text(float(kept.times[place]), self.survey),
            tuple(
                Reading(symbol, column.head, cell_of(self.survey, column.head, number), column.unit)
                for symbol, column in self.survey.columns.items()
            ),
            taken,
            steps,
            cycle.cleaning,
            cycle.offset,
        )

    def gaps(self, kept: _Kept) -> tuple[Gap, ...]:
        """Times between kept rows that are longer than the rule tells."""
        limit = self.survey.rules.gap
        if limit is None:
            return ()
        lengths = np.diff(kept.times)
        places = np.flatnonzero(lengths > limit.value)
        return tuple(
            Gap(moment_text(float(kept.times[place]), self.survey), float(lengths[place])) for place in places
        )

    def figures(
        self, found: Fit, parts: list[Part], chosen: Array
    ) -> tuple[tuple[FittedFigure, ...], tuple[SystematicPart, ...]]:
        """The parameters and the resistance at the proposal's time, with what each part moves them by."""
        count = len(found.parameters)
        errors = np.array([part.errors for part in parts]).reshape(len(parts), len(chosen))
        moved = found.moved_by(errors, chosen)
        at = np.array([self.survey.proposal.after.value])
        value, gradient = found.model.value_and_slopes(found.parameters, at)
        rows = [(found.parameters[number], np.eye(count)[number]) for number in range(count)]
        rows.append((value[0], gradient[:, 0]))
        names = [f"fitted {symbol}" for symbol in found.model.symbols] + [ALLOWANCE]
        symbols = [*found.model.symbols, "R_f"]
        titles = [need.quantity.meaning for need in found.model.parameters]
        titles.append(f"fouling resistance {self.survey.proposal.after.text} after a cleaning")
        kinds = [need.quantity for need in found.model.parameters] + [vocabulary()["area resistance"]]
        figures = []
        for (best, weights), name, symbol, title, kind in zip(
            rows, names, symbols, titles, kinds, strict=True
        ):
            scatter = float(np.sqrt(weights @ found.scatter @ weights))
            systematic = float(np.linalg.norm(weights @ moved))
            best = float(best)
            width = NORMAL_95 * math.hypot(scatter, systematic)
            figures.append(
                FittedFigure(name, symbol, title, kind, best, scatter, systematic, best - width, best + width)
            )
        for symbol, held in found.model.held.items():
            figures.append(_held(found.model, symbol, held))
        told = tuple(
            self.part_row(
                part,
                tuple(
                    (name, float(row[1] @ moved[:, number])) for name, row in zip(names, rows, strict=True)
                ),
            )
            for number, part in enumerate(parts)
        )
        return tuple(figures), told

    def part_row(self, part: Part, moves: tuple[tuple[str, float], ...]) -> SystematicPart:
        kind = vocabulary()["ratio"]
        if part.symbol and not part.relative:
            kind = self.chain.inputs[f"given/{part.symbol}"].kind
            if kind.scale == "point":
                kind = vocabulary()["temperature difference"]
        return SystematicPart(
            part.id, part.title, part.tolerance, part.standard, kind, part.distribution, moves
        )

    def row_uncertainty(self, found: Fit, parts: list[Part], chosen: Array) -> Array:
        """Standard uncertainty of each anchored row; that of the row next to it where its own is not worked out."""
        data = found.data.part(chosen)
        variance = np.full(len(chosen), found.deviation**2)
        for part in parts:
            variance = variance + data.anchored(part.errors) ** 2
        after = np.clip(np.searchsorted(chosen, np.arange(len(found.data))), 0, len(chosen) - 1)
        return np.sqrt(variance)[after]

    def cycle_rows(self, kept: _Kept, found: Fit, parts: list[Part], chosen: Array) -> tuple[CycleRow, ...]:
        data = found.data.part(chosen)
        moves = (
            np.stack([data.zero_means(part.errors) for part in parts])
            if parts
            else np.zeros((0, len(self.starts)))
        )
        grown = found.data.zero_means(found.model.value(found.parameters, found.data.times))
        rows = []
        for number, cleaning in enumerate(self.survey.cleanings):
            own = kept.cycles == number
            zero = own & kept.zero
            anchors = int(np.count_nonzero(zero))
            since = kept.times[own] - cleaning.at
            known = anchors > 0
            rows.append(
                CycleRow(
                    cleaning.text,
                    cleaning.source,
                    int(np.count_nonzero(own)),
                    anchors,
                    float((kept.times[zero] - cleaning.at).max()) if known else math.nan,
                    float(since.max()) if len(since) else math.nan,
                    float(kept.found.resistance[zero].mean() - grown[number]) if known else math.nan,
                    found.deviation
                    * math.sqrt((1.0 + found.correlation) / (1.0 - found.correlation) / anchors)
                    if known
                    else math.nan,
                    float(np.linalg.norm(moves[:, number])) if known else math.nan,
                )
            )
        return tuple(rows)

    def plot(self, kept: _Kept, fitted: Array, resistances: Array, curve: Array) -> tuple[PlotColumn, ...]:
        """The fitted rows in columns of equal time: their mean, and the mean of the fit at the same rows."""
        times = kept.times[fitted]
        first, last = float(times[0]), float(times[-1])
        width = max(last - first, 1.0) / PLOT_COLUMNS
        column = np.minimum(((times - first) / width).astype(int), PLOT_COLUMNS - 1)
        counts = np.bincount(column, minlength=PLOT_COLUMNS)
        with np.errstate(invalid="ignore"):
            means = np.bincount(column, weights=resistances, minlength=PLOT_COLUMNS) / counts
            fits = np.bincount(column, weights=curve, minlength=PLOT_COLUMNS) / counts
        cleaned = ((self.starts - first) / width).astype(int)
        return tuple(
            PlotColumn(
                moment_text(first + number * width, self.survey),
                float(means[number]),
                float(fits[number]),
                bool(np.any(cleaned == number)),
            )
            for number in range(PLOT_COLUMNS)
        )

    # -- what follows -------------------------------------------------------------------------------

    def results(self, outcome: SurveyOutcome) -> dict[str, Result]:
        """The named results that acceptance of other calculations and their `from:` may take."""
        basis = self.chain.surfaces[self.chain.basis].name
        kind = vocabulary()["area resistance"]
        fitted = outcome.figure(ALLOWANCE)
        proposal = self.survey.proposal
        unsure = math.hypot(fitted.scatter, fitted.systematic)
        proposed = fitted.value + normal_quantile(outcome.percentile) * unsure
        on = f"on {basis}, {proposal.after.text} after a cleaning"
        rows = {
            "allowance_proposed": (
                proposed,
                kind,
                f"one-sided {proposal.percentile.text} limit of the fitted curve, above the zero after a cleaning, {on}",
            ),
            ALLOWANCE: (fitted.value, kind, f"fouling resistance of the fit {on}"),
            "allowance_lower": (fitted.lower, kind, f"lower 95 % bound of the fouling resistance {on}"),
            "allowance_upper": (fitted.upper, kind, f"upper 95 % bound of the fouling resistance {on}"),
        }
        for one in outcome.figures:
            if one.id != ALLOWANCE and not one.held:
                rows[one.id] = (one.value, one.kind, f"{one.title}, {outcome.model}, on {basis}")
        return {name: Result(name, *row) for name, row in rows.items()}

    def checks(self, outcome: SurveyOutcome) -> tuple[CheckResult, ...]:
        """Limits on what the survey may be used for: of the model at the fit, of the rows, of its reach."""
        return (*self.model_checks(outcome), *self.row_checks())

    def model_checks(self, outcome: SurveyOutcome) -> list[CheckResult]:
        """The card's own limits with the fitted parameters, and how far beyond the rows the proposal reaches."""
        assert self.model is not None
        model = self.model
        known = {one.symbol: one.value for one in outcome.figures if one.id != ALLOWANCE}
        values = {name: np.asarray(figure) for name, figure in {**known, model.time: outcome.after}.items()}
        dimensions = {item.name: item.need.quantity.dimension for item in model.program.needs}
        values[PERIOD], dimensions[PERIOD] = np.asarray(outcome.period), dimensions[model.time]
        reach = Limit(
            "extrapolation",
            parse_expression(f"{model.time} <= {REACH}*{PERIOD}"),
            "caution",
            "the model is fitted to the time since cleaning that the rows cover",
            "common practice",
            "common practice",
            self.survey.place,
        )
        limits = [
            ChainCheck(
                f"survey / {item.card} / {item.limit.id}", "survey", item.card, item.limit, item.inputs
            )
            for item in model.program.limits
        ]
        symbols = {symbol: symbol for symbol in (model.time, PERIOD)}
        limits.append(ChainCheck("survey / extrapolation", "survey", model.card.id, reach, symbols))
        solution = Solution(CLEAN, values, {}, np.ones((), dtype=bool))
        return [evaluate_check(check, solution, "", dimensions) for check in limits]

    def row_checks(self) -> list[CheckResult]:
        """The limits of the card of plant data: how many of the kept rows lie outside."""
        assert self.kept is not None
        found = []
        for limit, outside in self.kept.found.outside:
            count = int(np.count_nonzero(outside))
            found.append(
                CheckResult(
                    f"survey / {CARD} / {limit.id}",
                    "survey",
                    CARD,
                    CLEAN,
                    "",
                    write(limit.that),
                    f"{count} of {len(outside)} rows outside",
                    write(limit.that),
                    count / len(outside),
                    "1",
                    limit.level,
                    "outside" if count else "within",
                    limit.because,
                    limit.source,
                    limit.standing,
                )
            )
        return found

    def open_items(self, outcome: SurveyOutcome) -> tuple[OpenItem, ...]:
        """Figures without a source, rows that cannot be read, and a model that the data do not determine."""
        without_source = [
            OpenItem(f"survey/{name}/source", "source", f"What the survey states under {name} has no source.")
            for name, source in self.survey.sources.items()
            if is_empty(source)
        ]
        return (*without_source, *self.row_items(outcome), *self.fit_items(outcome))

    def row_items(self, outcome: SurveyOutcome) -> tuple[OpenItem, ...]:
        """A history most of whose rows cannot be read, or are rejected: its columns may not be what the mapping takes
        them for."""
        unreadable = next(rule.count for rule in outcome.rules if rule.id == UNREADABLE)
        rejected = sum(rule.count for rule in outcome.rules)
        for name, count, words in (
            ("unreadable", unreadable, "cannot be read: columns, decimal marks or times"),
            ("rejected", rejected, "are rejected: columns, units, flows or the rules themselves"),
        ):
            if count > MOST * outcome.rows:
                text = f"{count} of {outcome.rows} rows of the history {words} may be others than the survey states."
                return (OpenItem(f"survey/{name} rows", "check", text),)
        return ()

    def limit_items(self, checks: tuple[CheckResult, ...]) -> tuple[OpenItem, ...]:
        """Stop and range limits of the survey that do not hold; the rules and the model are the cure."""
        return tuple(
            OpenItem(check.id, "check", f"{check.id}: {check.figure}, limit {check.limit}: {check.state}.")
            for check in checks
            if check.level in ("stop", "range") and check.state == "outside"
        )

    def fit_items(self, outcome: SurveyOutcome) -> tuple[OpenItem, ...]:
        wide = [
            one.symbol
            for one in outcome.figures
            if not one.held and not abs(one.upper - one.value) <= abs(one.value)
        ]
        items = []
        if wide:
            text = (
                f"The rows do not determine {', '.join(wide)} of {outcome.model}: the 95 % bounds reach beyond zero or"
                " twice the figure."
            )
            items.append(OpenItem("survey/fit", "check", text))
        if not outcome.is_determined:
            text = (
                f"The fit of {outcome.model} did not come to rest, or the rows do not tell its parameters apart: its"
                " figures are those of the last step."
            )
            items.append(OpenItem("survey/fit at rest", "check", text))
        return tuple(items)

    def cards(self) -> dict[str, str]:
        """The cards that the survey used, with what the digest binds of them."""
        assert self.model is not None
        plant_data = self.chain.library.program(CARD).cards
        return {f"method {card.id}": card.digest_text for card in (*plant_data, *self.model.program.cards)}


def _held(model: GrowthModel, symbol: str, value: float) -> FittedFigure:
    need = next(item.need for item in model.program.needs if item.need.symbol == symbol)
    kind: QuantityKind = need.quantity
    why = "not fitted: the value that the card takes where none is stated"
    if need.absent is None:
        why = "not fitted: it shifts the zero, which is anchored on the data"
    nan = math.nan
    return FittedFigure(f"fitted {symbol}", symbol, kind.meaning, kind, value, nan, nan, nan, nan, why)


def ends_of(chain: Chain, survey: Survey, collector: Collector) -> Ends | None:
    """The givens at the ends of the unit. Every temperature of a stream of one phase must be a column."""
    duty = chain.calculation.duty
    if duty is None:
        collector.add(
            "survey-temperature-missing",
            survey.place,
            "a survey needs the duty of the unit",
            expected="duty: with the temperatures of both streams as givens, and the columns that measure them",
        )
        return None
    measured, missing = {}, False
    for name, side in duty.sides.items():
        if not side.has_ends:
            continue
        for end, value in side.ends:
            if value is not None and value.symbol in survey.columns:
                measured[f"{name} {end}"] = value.symbol
                continue
            missing = True
            collector.add(
                "survey-temperature-missing",
                survey.place,
                f"no column measures the {end} temperature of the {name} side",
                found=value.text if value is not None else "no temperature",
                expected=f"the {end} of the {name} side as a given in the duty, and a column for that given",
            )
    if missing:
        return None
    return Ends(
        measured.get("hot inlet", ""),
        measured.get("hot outlet", ""),
        measured.get("cold inlet", ""),
        measured.get("cold outlet", ""),
        duty.arrangement == "parallel flow",
    )
