"""The uncertainty of a solved calculation: budgets where tolerances are stated, samples where the file asks."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from calcbook.calcfile.calculation import Criterion
from calcbook.calcfile.uncertainty import USUAL_COVERAGE, UncertaintyText
from calcbook.chain.along import OF_PARTS
from calcbook.chain.analysis import DUTY_LOST, is_found_later, keeps_what_is_found_later
from calcbook.chain.completing import completed
from calcbook.chain.criteria import criterion_margin, is_met
from calcbook.chain.ends import EndState, closed_ends, end_slopes, end_states
from calcbook.chain.factors import with_factors
from calcbook.chain.measured import PLAIN, Measured, measured
from calcbook.chain.outcome import CaseOutcome, CriterionResult, Result, Solved
from calcbook.chain.sensitivity import derivatives
from calcbook.chain.types import SERVICE, Chain, Layer, OpenItem
from calcbook.chain.uncertainty_outcome import (
    Budget,
    BudgetRow,
    CaseChance,
    Chance,
    CorrelationRow,
    LeftOut,
    OutsideRow,
    SampledResult,
    Sampling,
    Spread,
    Uncertainty,
)
from calcbook.faults import Collector, nearest_names, shown
from calcbook.rating.at_samples import finds_duty_lost
from calcbook.rating.duty_lost import carried_until
from calcbook.uncertainty.budget import (
    Correlations,
    correlation_matrix,
    coverage_factor,
    first_order,
    is_nonlinear,
    wide_slopes,
)
from calcbook.uncertainty.figures import Uncertain, method_figures, stated_figures
from calcbook.uncertainty.samples import OUTSIDE_ANY, ChainModel, Statement, mark_of
from calcbook.uncertainty.sampling import GENERATOR, Drawn, Interval, Propagated, is_possible, propagate

Array = np.ndarray
# What a budget is made of where the file names no result, as far as the calculation has it.
USUAL_RESULTS = ("U_service", "U_clean", "area_service", "area_margin")
MARGIN = "area_margin"
# Samples of a result that nothing uncertain moves differ by so much of it.
ROUNDING = 1e-12
POSITIVE_MARGIN = "area_margin > 0"


def with_uncertainty(solved: Solved, collector: Collector) -> Solved:
    """The solved calculation with the uncertainty of its results, in the base case or the one that is asked for.

    A budget needs a tolerance, or `uncertainty:` in the file; samples are drawn where the file has that.
    Codes: tolerance-beyond-value, result-unknown, result-not-propagated, correlation-without-tolerance,
    correlation-impossible.
    """
    asked = solved.chain.calculation.uncertainty
    name = asked.case if asked is not None else ""
    case = next(one for one in solved.cases if one.name == name)
    figures = stated_figures(solved.chain, collector, name)
    if not figures and asked is None:
        return solved
    chain = with_factors(solved.chain)
    factors, left_out = method_figures(chain, case.solutions)
    results = _results(case, chain, asked, collector)
    correlations = _correlations(asked, figures, collector)
    if collector or not results:
        return solved
    elsewhere, chances, without = _elsewhere(solved, case, chain, correlations)
    found = _Assessment(case, chain, (*figures, *factors), left_out, results, correlations, asked)
    return replace(
        solved,
        uncertainty=found.uncertainty()._replace(elsewhere=elsewhere, chances=chances, without=without),
    )


def judged_by_probability(solved: Solved, collector: Collector) -> Solved:
    """A solved calculation whose criteria with a probability are judged by the samples of their case; where a case has
    none, an open item says why.

    Code: result-not-propagated, for a criterion that the samples cannot show.
    """
    acceptance = solved.chain.calculation.acceptance
    found = solved.uncertainty
    if found is None or found.sampling is None or all(math.isnan(item.probability) for item in acceptance):
        return solved
    reasons = dict(found.without)
    cases = []
    for case in solved.cases:
        criteria, items = [], []
        for row in case.criteria:
            asked = solved.chain.calculation.criterion(row.id)
            if not math.isnan(asked.probability):
                row = row._replace(required=asked.probability)
                known = found.chance(case.name, row.id)
                if known is not None or case.name == found.case:
                    row = _by_chance(row, asked, known.chance if known is not None else None, collector)
                else:
                    items.append(_not_judged(row, reasons.get(case.name, "")))
            criteria.append(row)
        cases.append(replace(case, criteria=tuple(criteria), open_items=(*case.open_items, *items)))
    return replace(solved, cases=tuple(cases))


def _by_chance(
    row: CriterionResult, asked: Criterion, chance: Chance | None, collector: Collector
) -> CriterionResult:
    if chance is None:
        collector.add(
            "result-not-propagated",
            asked.place,
            f"the samples cannot show how often `{shown(asked.result)}` meets its limit",
            found=shown(asked.text),
            expected="a criterion without a probability, or on a result that can be sampled",
        )
        return row
    reached = chance.probability
    return row._replace(met=reached >= row.required, reached=reached, stated_met=row.met)


def _not_judged(row: CriterionResult, reason: str) -> OpenItem:
    why = f": {reason}" if reason else ""
    text = f"{row.id}, {row.that}, asks for a probability that is not worked out in case {row.case or 'base'}{why}."
    return OpenItem(f"{row.id}/probability in {row.case or 'base'}", "check", text)


def _elsewhere(
    solved: Solved, assessed: CaseOutcome, chain: Chain, correlations: Correlations
) -> tuple[tuple[Spread, ...], tuple[CaseChance, ...], tuple[tuple[str, str], ...]]:
    """What the criteria judge in the cases that are not the assessed one, how often those hold that ask for a
    probability, and the cases without any of it, with the reason."""
    asked = chain.calculation.uncertainty
    found: list[Spread] = []
    chances: list[CaseChance] = []
    without = []
    for case in (case for case in solved.cases if case is not assessed):
        named = dict.fromkeys(chain.calculation.criterion(row.id).result for row in case.criteria)
        parts = (measured(chain, name) for name in named if name in case.results)
        results = tuple(one for one in parts if one is not None)
        if not results:
            continue
        beyond = Collector()
        figures = stated_figures(chain, beyond, case.name)
        if beyond:
            # A tolerance stated for the base case may be too wide for a figure that this case restates.
            first = next(iter(beyond))
            without.append((case.name, f"{first.message} ({first.found})"))
            continue
        factors, left_out = method_figures(chain, case.solutions)
        one = _Assessment(case, chain, (*figures, *factors), left_out, results, correlations, asked)
        budgets = one.budgets(is_wide=False)
        found += one.spreads(budgets)
        unsure = [
            f"criterion {number}"
            for number, item in enumerate(chain.calculation.acceptance, 1)
            if not math.isnan(item.probability)
        ]
        if unsure and asked is not None:
            chances += one.chances(budgets, unsure)
    return tuple(found), tuple(chances), tuple(without)


def _results(
    case: CaseOutcome, chain: Chain, asked: UncertaintyText | None, collector: Collector
) -> tuple[Measured, ...]:
    """The results to be assessed, by the steps that give them."""
    known = case.results
    found: dict[str, Measured] = {}
    for item in asked.results if asked is not None else ():
        one = measured(chain, item.name)
        if item.name not in known:
            collector.add(
                "result-unknown",
                item.place,
                f"there is no result `{shown(item.name)}`",
                found=shown(item.name),
                expected=", ".join(known),
                nearest=nearest_names(item.name, known),
            )
        elif one is None:
            collector.add(
                "result-not-propagated",
                item.place,
                f"the uncertainty of `{shown(item.name)}` is not worked out",
                found=shown(item.name),
                expected=", ".join(name for name in known if measured(chain, name) is not None),
            )
        else:
            found[item.name] = one
    if asked is not None and asked.results:
        return tuple(found.values())
    named = [criterion.result for criterion in chain.calculation.acceptance]
    fouled = any(isinstance(element, Layer) and element.kind == "fouling" for element in chain.elements)
    usual = [name for name in USUAL_RESULTS if fouled or name != "U_clean"]
    for name in (*usual, *named):
        one = measured(chain, name) if name in known else None
        # One figure under two names (U on bare tubes is U on the outside) has one budget.
        same = next((other for other in found.values() if one is not None and one.parts == other.parts), None)
        if same is not None and name != same.name:
            found[same.name] = replace(same, also=tuple(dict.fromkeys((*same.also, name))))
        elif one is not None:
            found[name] = one
    return tuple(found.values())


def _correlations(
    asked: UncertaintyText | None, figures: Sequence[Uncertain], collector: Collector
) -> dict[frozenset[str], float]:
    """The stated coefficients by pairs of ids; faults where one has nothing to stand on."""
    known = {figure.line.symbol for figure in figures}
    stated = asked.correlations if asked is not None else ()
    found: dict[frozenset[str], float] = {}
    for one in stated:
        for symbol in (one.first, one.second):
            if symbol not in known:
                collector.add(
                    "correlation-without-tolerance",
                    one.place,
                    f"`{symbol}` has no tolerance that could go together with another",
                    found=symbol,
                    expected="a tolerance on both givens",
                )
        found[frozenset((f"given/{one.first}", f"given/{one.second}"))] = one.coefficient
    named = {symbol for one in stated for symbol in (one.first, one.second)}
    if named and named <= known and not is_possible(correlation_matrix([one.id for one in figures], found)):
        collector.add(
            "correlation-impossible",
            stated[0].place,
            "these correlations cannot all hold together",
            found="a matrix of coefficients that is not positive semidefinite",
            expected="coefficients that agree with each other",
        )
    return found


class _Assessment:
    def __init__(
        self,
        case: CaseOutcome,
        chain: Chain,
        figures: tuple[Uncertain, ...],
        left_out: tuple[LeftOut, ...],
        results: tuple[Measured, ...],
        correlations: Correlations,
        asked: UncertaintyText | None,
    ):
        self.case, self.chain, self.figures, self.left_out = case, chain, figures, left_out
        self.results, self.correlations, self.asked = results, correlations, asked
        self.inputs = chain.case_inputs(case.name)
        self.coverage = asked.coverage if asked is not None else USUAL_COVERAGE

    def uncertainty(self) -> Uncertainty:
        budgets = self.budgets()
        stated = self.asked.correlations if self.asked is not None else ()
        return Uncertainty(
            self.case.name,
            self.coverage,
            budgets,
            self.left_out,
            tuple(CorrelationRow(one.first, one.second, one.coefficient, one.source) for one in stated),
            self._exact_allowances(),
            self._sampling(budgets) if self.asked is not None else None,
        )

    def _named(self, name: str) -> Result:
        return self.case.results[name]

    def _exact_allowances(self) -> tuple[str, ...]:
        """Fouling terms that rest on no figure with a tolerance: an allowance gets none by itself."""
        known = {figure.id for figure in self.figures}
        steps = {step.id: step for step in self.chain.steps}

        def rests_on(name: str) -> set[str]:
            step = steps.get(name)
            return {name} if step is None else set().union(*map(rests_on, step.inputs.values()))

        return tuple(
            element.name
            for element in self.chain.elements
            if isinstance(element, Layer)
            and element.kind == "fouling"
            and not rests_on(element.resistance) & known
        )

    # -- first order --------------------------------------------------------------------------------

    def spreads(self, budgets: tuple[Budget, ...]) -> list[Spread]:
        """The expanded uncertainties of budgets alone."""
        missing = tuple(dict.fromkeys(item.term for item in self.left_out))
        return [
            Spread(self.case.name, one.result, one.kind, one.value, one.standard, one.expanded, missing)
            for one in budgets
        ]

    def budgets(self, is_wide: bool = True) -> tuple[Budget, ...]:
        """A budget of each result; ``is_wide`` for the slopes over a standard uncertainty beside the others."""
        model = ChainModel(self.chain, self.inputs, self.case.solutions, self.results)
        steps = {
            state: tuple(
                dict.fromkeys(
                    step for one in self.results for there, step in one.parts.values() if there == state
                )
            )
            for state in model.states
        }
        solutions = self.case.solutions
        ends = self._ends(model)
        slopes = {
            state: end_slopes(self.chain, self.inputs, solutions, ends[state], wanted)
            if state in ends
            else derivatives(self.chain, self.inputs, state, wanted, solutions[state])
            for state, wanted in steps.items()
        }
        values = {
            state: (ends[state].solution if state in ends else solutions[state]).values for state in steps
        }
        wide = wide_slopes(model.outputs, self.figures) if self.figures and is_wide else {}
        return tuple(
            self._budget(one, one.slopes(values, slopes), wide.get(one.name, {})) for one in self.results
        )

    def _ends(self, model: ChainModel) -> dict[str, EndState]:
        """The ends of the unit that a model looks at, by condition and place."""
        if not model.looks_at_ends:
            return {}
        of_model = {condition: self.case.solutions[condition] for condition in model.conditions}
        found = closed_ends(end_states(self.chain, completed(self.chain, self.inputs), of_model))
        return {f"{one.solution.condition} {one.place}": one for one in found}

    def _budget(self, one: Measured, slopes: dict[str, float], wide: dict[str, float]) -> Budget:
        found = first_order(self.figures, slopes, self.correlations)
        by_id = {figure.id: figure.line for figure in self.figures}
        factor = coverage_factor(self.coverage, found.degrees)
        over_widths = first_order(self.figures, wide, self.correlations).standard if wide else 0.0
        result = self._named(one.name)
        return Budget(
            one.name,
            result.title,
            result.kind,
            result.value,
            tuple(
                BudgetRow(by_id[line.id], line.slope, line.contribution, line.share) for line in found.lines
            ),
            found.standard,
            factor,
            factor * found.standard,
            found.degrees,
            over_widths,
            is_nonlinear(found.standard, over_widths),
            one.also,
        )

    # -- samples ------------------------------------------------------------------------------------

    def _sampling(self, budgets: tuple[Budget, ...]) -> Sampling | None:
        assert self.asked is not None
        statements, texts, not_sampled = self._statements()
        model = ChainModel(
            self.chain, self.inputs, self.case.solutions, self.results, statements, limits=True
        )
        drawn = [Drawn(figure.id, figure.distribution) for figure in self.figures]
        if not drawn:
            return None
        found = propagate(model, drawn, self.coverage, self.asked.digits, self.correlations)
        return Sampling(
            found.trials,
            found.blocks,
            found.block_size,
            found.is_capped,
            found.is_answered,
            tuple(
                _compared(budget, interval)
                for budget in budgets
                if (interval := found.intervals.get(budget.result)) and _is_moved(interval)
            ),
            tuple(_chance(name, said, found) for name, said in texts.items()),
            not_sampled,
            found.trials - found.answered,
            self._outside(model, found),
            found.marks.get(OUTSIDE_ANY, 0),
            GENERATOR,
        )

    def chances(self, budgets: tuple[Budget, ...], wanted: Sequence[str]) -> list[CaseChance]:
        """How often some criteria hold over the samples, which are held against the budgets of their results."""
        sampling = self._sampling(budgets)
        if sampling is None:
            return []
        return [
            CaseChance(self.case.name, chance, sampling.trials)
            for chance in sampling.chances
            if chance.id in wanted
        ]

    def _statements(self) -> tuple[list[Statement], dict[str, tuple[str, bool, float]], tuple[str, ...]]:
        """What is counted over the samples: every criterion that they can show, and a margin above zero.

        With it the text, the verdict at the stated values and the share that is asked for, by id, and the criteria
        that they cannot show.
        """
        statements: list[Statement] = []
        texts: dict[str, tuple[str, bool, float]] = {}
        not_sampled = []
        for number, item in enumerate(self.chain.calculation.acceptance, 1):
            if not is_found_later(item.result):
                continue
            later = self._of_parts(f"criterion {number}", item) or self._of_time(f"criterion {number}", item)
            if later is None:
                not_sampled.append(item.text)
                continue
            statements.append(later)
            now = self._found_later(item, later.limit)
            texts[later.id] = (
                item.text,
                bool(is_met(item, criterion_margin(item, now, later.limit))),
                item.probability,
            )
        for row in self.case.criteria:
            item = self.chain.calculation.criterion(row.id)
            result = measured(self.chain, item.result)
            if result is None:
                not_sampled.append(row.that)
                continue
            statements.append(
                Statement(row.id, result, item.operator, row.limit, self._limit_step(item.limit.symbol))
            )
            texts[row.id] = (row.that, row.met, item.probability)
        margin = measured(self.chain, MARGIN) if MARGIN in self.case.results else None
        said = any(one.result.name == MARGIN and one.limit == 0.0 for one in statements)
        if margin is not None and not said:
            statements.append(Statement(POSITIVE_MARGIN, margin, ">", 0.0))
            texts[POSITIVE_MARGIN] = (POSITIVE_MARGIN, self._named(MARGIN).value > 0.0, math.nan)
        return statements, texts, tuple(not_sampled)

    def _of_parts(self, name: str, item: Criterion) -> Statement | None:
        """A criterion over the area summed over parts, which samples show in the case that has it; None for another."""
        if item.result not in OF_PARTS or item.result not in self.case.results:
            return None
        return self._statement(name, item, item.result)

    def _of_time(self, name: str, item: Criterion) -> Statement | None:
        """A criterion over the time until the duty is lost, in a case that has that of the base case; None for another."""
        has_time = finds_duty_lost(self.chain) and keeps_what_is_found_later(self.chain, self.case.name)
        return (
            self._statement(name, item, f"{name}/{DUTY_LOST}")
            if item.result == DUTY_LOST and has_time
            else None
        )

    def _statement(self, name: str, item: Criterion, figure: str) -> Statement:
        """The statement of a criterion over a ``figure`` that stands beside those of the chain in service."""
        step = self._limit_step(item.limit.symbol)
        if step:
            limit = self.case.solutions[SERVICE].number(step)
        else:
            assert item.limit.quantity is not None, "a limit is a symbol or a quantity"
            limit = item.limit.quantity.value
        return Statement(
            name, Measured(item.result, PLAIN, {"y": (SERVICE, figure)}), item.operator, limit, step
        )

    def _found_later(self, item: Criterion, limit: float) -> float:
        """The value at the stated figures of what is found later; of a time whether it lies beyond the limit."""
        if item.result != DUTY_LOST:
            return self._named(item.result).value
        inputs = self.chain.case_inputs(self.case.name)
        return float(carried_until(self.chain, inputs, np.array([limit]))[0])

    def _limit_step(self, symbol: str) -> str:
        if not symbol:
            return ""
        return f"given/{symbol}" if symbol in self.chain.calculation.givens else f"derived/{symbol}"

    def _outside(self, model: ChainModel, found: Propagated) -> tuple[OutsideRow, ...]:
        """The limits that samples leave, each with its state at the stated values."""
        states = {(check.id, check.condition): check.state for check in self.case.checks}
        rows: dict[tuple[str, int, str], OutsideRow] = {}
        for name, one in {mark_of(one): one for one in model.limits}.items():
            count = found.marks.get(name, 0)
            if not count:
                continue
            nominal = states.get((one.id, one.condition), one.not_listed)
            key = (one.id, count, nominal)
            # What has nothing to do with deposits is left by the same samples in both conditions: one row.
            where = f"{rows[key].condition} and {one.condition}" if key in rows else one.condition
            rows[key] = OutsideRow(one.id, where, one.level, count, nominal)
        return tuple(rows.values())


def _is_moved(found: Interval) -> bool:
    """Whether samples of a result differ by more than the rounding of its circuit."""
    return found.standard > ROUNDING * abs(found.mean)


def _compared(budget: Budget, found: Interval) -> SampledResult:
    """The samples beside the budget: validated where both ends agree within the tolerance (JCGM 101, 8.1)."""
    low = abs(budget.value - budget.expanded - found.low)
    high = abs(budget.value + budget.expanded - found.high)
    return SampledResult(
        budget.result,
        budget.title,
        budget.kind,
        found.mean,
        found.standard,
        found.low,
        found.high,
        found.spread,
        found.tolerance,
        found.aim,
        low,
        high,
        max(low, high) <= found.tolerance,
    )


def _chance(name: str, said: tuple[str, bool, float], found: Propagated) -> Chance:
    """How often a statement holds over all samples: of one without an answer nothing can be said to hold."""
    share = found.marks[name] / found.trials
    deviation = math.sqrt(share * (1.0 - share) / found.trials)
    unanswered = 1.0 - found.answered / found.trials
    text, nominal, required = said
    return Chance(name, text, nominal, share, deviation, unanswered, required)
