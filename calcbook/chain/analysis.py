"""A chain to a solved calculation: every case and condition, with checks, criteria and open items."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from calcbook.calcfile.calculation import Criterion, unknown_symbol
from calcbook.chain.along import OF_PARTS, U_SPREAD, u_along
from calcbook.chain.checks import apply_acceptances, evaluate_check
from calcbook.chain.completing import completed
from calcbook.chain.criteria import criterion_margin, is_met
from calcbook.chain.cross_check import cross_check
from calcbook.chain.duty import OWNER as DUTY
from calcbook.chain.ends import OPEN_END, EndState, closed_ends, end_checks, end_states
from calcbook.chain.figures import (
    BY_SIZE,
    ResultFigures,
    allowance_figures,
    interfaces,
    result_figures,
    surfaces_at_ends,
)
from calcbook.chain.findings import (
    assumptions_of,
    celsius,
    ending_properties,
    freezing_of,
    jump_items,
    must_be,
    root_items,
    stream_findings,
    wall_checks,
)
from calcbook.chain.growth_outcome import CARRIED
from calcbook.chain.outcome import (
    CaseOutcome,
    CheckResult,
    CriterionResult,
    Result,
    SensitivityRow,
    Solved,
)
from calcbook.chain.plausible import band_checks
from calcbook.chain.possible import impossible_steps
from calcbook.chain.pressure import (
    evaluate_pressure_drops,
    pressure_drop_checks,
    pressure_items,
)
from calcbook.chain.rating_outcome import OF_DAY_ONE
from calcbook.chain.sensitivity import derivatives
from calcbook.chain.solve import Solution, chosen, closed, conditions_of, solve_both
from calcbook.chain.specified import OWNER as SPECIFIED
from calcbook.chain.term_rows import closure_rows, controlling_term, term_rows
from calcbook.chain.types import (
    CLEAN,
    CONDITIONS,
    SERVICE,
    Chain,
    ChainCheck,
    ChainStep,
    Layer,
    OpenItem,
    branches_of,
)
from calcbook.chain.working import Working
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.formulas import number_text
from calcbook.library import vocabulary
from calcbook.quantities import Quantity, QuantityFault, QuantityKind, as_kind, unit_display

Array = np.ndarray
DUTY_LOST = "time_until_duty_lost"
# The kind and the title of that result.
OF_DUTY_LOST = ("service time", "time in service until the duty is lost")
MEAN_OF_PLACES = " mean of places"
# Results that are made of the solved base case, by how they start, with the key that asks for them.
LATER = {
    DUTY_LOST: "time in service",
    "cleaning_interval": "cleaning",
    "allowance_": "survey",
    "fitted ": "survey",
    **{f"U_{condition}{MEAN_OF_PLACES}": "evaluate at" for condition in CONDITIONS},
    **dict.fromkeys(OF_PARTS, "parts"),
    **dict.fromkeys(OF_DAY_ONE, "duty"),
}
SIDES = ("inside", "outside")
# Those of them that names only start with.
STARTS = ("allowance_", "fitted ")
# What is said of a state of the unit turned down that day one does not have, or not by this name.
NO_STATE = "day one has no such state"
# What is said of a surface at an end at which the circuit does not close.
NOT_CLOSED = "not known: the circuit does not close there"
# Slopes below this part of U are the rounding of sums that cancel.
NOISE = 1e-13


class NotConverged(Exception):
    """A case that has no solution: no record is written for it."""

    def __init__(self, number: str, case: str, condition: str):
        self.number, self.case, self.condition = number, case, condition
        where = f"case {case}, " if case else ""
        super().__init__(f"{number}: {where}{condition} did not converge")


def is_found_later(name: str) -> bool:
    """Whether a result is found once from the solved base case, and not sample by sample."""
    return name.startswith(tuple(LATER))


def is_found_once(name: str) -> bool:
    """Whether a result is found once for the calculation, of its base case."""
    return is_found_later(name) and name not in OF_DAY_ONE


def judged_later(solved: Solved, collector: Collector) -> Solved:
    """A solved calculation with the criteria over what was found from it, each in its place among the others.

    What is found of the base case holds in a case too that restates nothing but times of growing terms; day one is
    that of each case.
    """
    if not any(is_found_later(item.result) for item in solved.chain.calculation.acceptance):
        return solved
    later = {name: result for name, result in solved.base.results.items() if is_found_once(name)}
    analysis = _Analysis(solved.chain, collector)
    never_lost = solved.over_time.duty_words if solved.over_time is not None else ""
    cases = []
    for case in solved.cases:
        keeps = keeps_what_is_found_later(solved.chain, case.name)
        results = {**case.results, **(later if keeps else {})}
        found = analysis.criteria_found_later(case.name, results, case.solutions, keeps, never_lost)
        criteria = sorted((*case.criteria, *found), key=lambda item: int(item.id.removeprefix("criterion ")))
        cases.append(replace(case, criteria=tuple(criteria)))
    collector.take(analysis.judging)
    return replace(solved, cases=tuple(cases))


def keeps_what_is_found_later(chain: Chain, case: str) -> bool:
    """Whether a case restates nothing that moves what is found of the base case over the time in service."""
    times = {growing.time for growing in chain.growing}
    # A figure that only a criterion takes moves nothing that is found.
    times |= {f"given/{symbol}" for symbol, places in chain.used_in.items() if not places}
    restated = {f"given/{symbol}" for symbol in chain.calculation.cases.get(case, {})}
    typed = {symbol for symbol, places in chain.used_in.items() if len(places) > 1}
    return restated <= times - {f"given/{symbol}" for symbol in typed}


def analyse(chain: Chain, collector: Collector, for_record: bool = True) -> Solved | None:
    """Solve every case in both conditions and evaluate everything the record holds.

    What only a record shows (other methods, what each figure moves U by) is worked out ``for_record`` alone.
    Faults go to the collector: None is returned with those of state (a liquid that is vapour, a wall turned inside
    out), and the figures with those of criteria and acceptances alone. Raises ``NotConverged``.
    """
    return _Analysis(chain, collector).solved(for_record)


class _Analysis:
    def __init__(self, chain: Chain, collector: Collector):
        self.chain = chain
        self.collector = collector
        # Faults of what is asked of the figures, which are there all the same.
        self.judging = Collector()
        self.dimensions = dict(chain.dimensions)
        self.used_cards: dict[str, str] = dict(chain.cards)
        self.inputs: dict[str, dict[str, np.ndarray]] = {}
        # The named results of the base case, which is solved first.
        self.results: dict[str, Result] = {}
        # Surfaces at ends of the case at hand at which the circuit does not close.
        self.open_surfaces: frozenset[str] = frozenset()

    def solved(self, for_record: bool) -> Solved | None:
        names = ("", *self.chain.calculation.cases)
        self.inputs = {name: completed(self.chain, self.chain.case_inputs(name)) for name in names}
        if not self._figures_are_found():
            return None
        findings = {
            name: stream_findings(self.chain, name, self.inputs[name], self.collector) for name in names
        }
        if self.collector:
            return None
        solutions = self._solutions()
        cases = []
        for name in names:
            case = self._case(name, findings[name], solutions[name])
            if case is None:
                return None
            cases.append(case)
        if self.collector:
            return None
        cases = self._with_acceptances(cases)
        self.collector.take(self.judging)
        if self.chain.calculation.places:
            cases[0] = _with_mean(cases, self.chain.calculation.places)
        governing = _governing(cases, self.chain.calculation.places)
        names_of = {name: case.name for name, case in governing.items()}
        solved = Solved(self.chain, tuple(cases), {}, (), self.used_cards, names_of)
        if not for_record:
            return solved
        # Other methods are held where the verdicts are decided, beside the base case.
        crossed = {case.name: case for case in (cases[0], *governing.values())}
        cross = cross_check(self.chain, list(crossed.values()), self.dimensions)
        return replace(solved, cross=cross, sensitivity=self._sensitivity(cases[0]))

    def _figures_are_found(self) -> bool:
        """Whether every open figure has a value; a stop limit that explains a missing one is a fault.

        Raises ``NotConverged`` where none does.
        """
        for name, inputs in self.inputs.items():
            if all(np.isfinite(inputs[item.id]).all() for item in self.chain.open_figures):
                continue
            self._stop_if_limit(name, closed(self.chain, inputs, SERVICE))
            if not self.collector:
                raise NotConverged(self.chain.calculation.number, name, SERVICE)
        return not self.collector

    def _solutions(self) -> dict[str, dict[str, Solution]]:
        """Every case clean and in service, solved together."""
        rows = {
            key: np.array([float(inputs[key]) for inputs in self.inputs.values()]) for key in self.inputs[""]
        }
        moving = {key for key, row in rows.items() if (row != row[0]).any()}
        both = solve_both(
            self.chain, {key: row if key in moving else row[:1].reshape(()) for key, row in rows.items()}
        )
        evaluate_pressure_drops(self.chain, both)
        solutions = conditions_of(both)
        return {
            # Cases that restate the figures of the base case are the one sample that it is.
            name: {
                condition: solution.sample(number if moving else 0)
                for condition, solution in solutions.items()
            }
            for number, name in enumerate(self.inputs)
        }

    # -- one case -----------------------------------------------------------------------------------

    def _case(
        self, name: str, state_items: tuple[OpenItem, ...], solutions: dict[str, Solution]
    ) -> CaseOutcome | None:
        inputs = self.inputs[name]
        for condition, solution in solutions.items():
            if not bool(np.all(solution.converged)) or not np.isfinite(
                solution.number(self.chain.results["U"])
            ):
                self._stop_if_limit(name, solution)
                self._explain(name, solution)
                if not self.collector:
                    self._stop_if_impossible(name, (solution,))
                if self.collector:
                    return None
                raise NotConverged(self.chain.calculation.number, name, condition)
        states = end_states(self.chain, inputs, solutions)
        ends = closed_ends(states)
        self.open_surfaces = frozenset(surfaces_at_ends(states)) - frozenset(surfaces_at_ends(ends))
        results = self._results(solutions, inputs, ends)
        self.results = self.results or results
        checks = (*self._checks(name, solutions), *end_checks(states, name), *self._along(ends, name))
        for check in checks:
            if check.level == "stop" and check.state == "outside":
                self._report_stop(check)
        if not self.collector:
            self._stop_if_impossible(name, solutions.values())
        # A number that a limit stops is not there to be judged.
        criteria = () if self.collector else self.criteria(name, results, solutions)
        terms = {condition: term_rows(self.chain, solution) for condition, solution in solutions.items()}
        controlling, share = controlling_term(terms[SERVICE])
        working = Working(self.chain, solutions)
        outcome = CaseOutcome(
            name=name,
            inputs={key: float(value) for key, value in inputs.items()},
            solutions=solutions,
            results=results,
            terms=terms,
            chains=working.chains(),
            circuit=working.circuit(),
            properties=working.properties(),
            checks=checks,
            criteria=criteria,
            assumptions=assumptions_of(self.chain, solutions),
            open_items=(
                *self.chain.open_items,
                *state_items,
                *jump_items(self.chain, name, solutions),
                *pressure_items(self.chain, name, solutions),
                *root_items(self.chain, name, inputs, solutions),
            ),
            closure=closure_rows(self.chain, solutions),
            controlling=controlling,
            controlling_share=share,
        )
        self.used_cards |= working.used_cards
        return outcome

    def _stop_if_limit(self, name: str, solution: Solution) -> None:
        """A stop limit that explains a missing number is a fault, not a failure to converge."""
        for check in self._circuit_limits(solution):
            result = evaluate_check(check, solution, name, self.dimensions)
            if result.level == "stop" and result.state == "outside":
                self._report_stop(result)

    def _explain(self, name: str, solution: Solution) -> None:
        """A property that ends before the other side's temperature is why a surface could not be found."""
        for branch, other, property_name, missing in ending_properties(self.chain, solution):
            if missing.any():
                where = f"case {name}: " if name else ""
                bulk = solution.number(other.bulk)
                state = self.chain.streams[branch.stream]
                freezing = freezing_of(state, solution)
                freezes = f": it freezes at {celsius(freezing)}" if bulk < freezing else ""
                self.collector.add(
                    "outside-fluid-range",
                    state.place,
                    f"{where}the surface of {branch.name} may come as near to the other side as {celsius(bulk)}, where"
                    f" {branch.stream} has no {property_name}{freezes}",
                    expected="a fluid or table that reaches the other side's temperature"
                    f"{', or another side that leaves the surface warmer' if freezes else ''}",
                )
                return

    def _stop_if_impossible(self, name: str, solutions: Iterable[Solution]) -> None:
        """The first step of each term whose value its quantity cannot have: what follows from it is no number."""
        first: dict[str, tuple[ChainStep, float]] = {}
        for solution in solutions:
            for step, _ in impossible_steps(self.chain, solution):
                first.setdefault(step.owner, (step, solution.number(step.id)))
        for step, value in first.values():
            kind = step.kind
            assert kind is not None, "a step without a quantity has no bound"
            relation = getattr(getattr(step.operation, "relation", None), "text", "")
            self.collector.add(
                "step-not-possible",
                self._place_of(step.owner),
                f"{f'case {name}: ' if name else ''}{step.title} of {step.owner} cannot be",
                found=f"{number_text(value, 4)} {unit_display(kind.unit)}".rstrip(),
                expected=f"{kind.name}{must_be(kind)}{f'; it is {step.symbol} = {relation}' if relation else ''}",
            )

    def _place_of(self, owner: str) -> Place:
        """Where the term, the stream or the part that a step or check belongs to stands in the file."""
        calculation = self.chain.calculation
        places = {name: stream.place for name, stream in self.chain.streams.items()}
        places |= {f"stream {name}": stream.place for name, stream in self.chain.streams.items()}
        places |= {term.name: term.place for term in calculation.every_term}
        for part_owner, part in ((DUTY, calculation.duty), (SPECIFIED, calculation.fouling_specified)):
            if part is not None:
                places[part_owner] = part.place
        return places.get(owner, calculation.place)

    def _report_stop(self, check: CheckResult) -> None:
        self.collector.add(
            "limit-stops",
            self._place_of(check.owner),
            f"{f'case {check.case}: ' if check.case else ''}{check.id}: no number is given outside this limit",
            found=f"{check.figure}{self._found_ends(check)}",
            expected=f"{check.limit} ({check.because})",
        )

    def _found_ends(self, check: CheckResult) -> str:
        """For a limit of the duty, the ends that it found for itself: no line of the file has them."""
        if check.owner != DUTY:
            return ""
        figures = {item.id: float(self.inputs[check.case][item.id]) for item in self.chain.open_figures}
        found = [
            f"{' '.join(name.split('/')[1:])} {celsius(value)}"
            for name, value in figures.items()
            if name.startswith(f"{DUTY}/") and math.isfinite(value)
        ]
        return f" ({', '.join(found)}, as found)" if found else ""

    # -- results ------------------------------------------------------------------------------------

    def _results(
        self,
        solutions: Mapping[str, Solution],
        inputs: Mapping[str, np.ndarray],
        ends: tuple[EndState, ...],
    ) -> dict[str, Result]:
        """The named results of a single record, with those that take solutions of their own."""
        allowances = allowance_figures(self.chain, inputs, solutions[SERVICE])
        return _single(result_figures(self.chain, solutions) | allowances | surfaces_at_ends(ends))

    # -- chain rows ---------------------------------------------------------------------------------

    # -- checks and criteria ------------------------------------------------------------------------

    def _limits(self, solution: Solution) -> list[ChainCheck]:
        return self._circuit_limits(solution) + pressure_drop_checks(self.chain, solution)

    def _circuit_limits(self, solution: Solution) -> list[ChainCheck]:
        """The limits of all that the circuit closes on: they can be seen without a finished solution."""
        limits = list(self.chain.checks)
        for element in self.chain.elements:
            if isinstance(element, Layer):
                limits += element.checks
            for branch in branches_of(element):
                limits += chosen(branch, solution).checks
        return limits

    def _checks(self, name: str, solutions: Mapping[str, Solution]) -> tuple[CheckResult, ...]:
        results = []
        for condition in reversed(CONDITIONS):
            solution = solutions[condition]
            results += [
                evaluate_check(check, solution, name, self.dimensions) for check in self._limits(solution)
            ]
            results += wall_checks(self.chain, name, solution)
            results += band_checks(self.chain, name, solution)
        return tuple(results)

    def criteria(
        self, case: str, results: Mapping[str, Result], solutions: Mapping[str, Solution]
    ) -> tuple[CriterionResult, ...]:
        """The criteria of a case in the order of the file, but for those over results that are found later."""
        wanted = {
            number: criterion for number, criterion in self._numbered() if not self._is_later(criterion)
        }
        return self._judged(wanted, case, results, solutions, self._without_value)

    def criteria_found_later(
        self,
        case: str,
        results: Mapping[str, Result],
        solutions: Mapping[str, Solution],
        keeps: bool,
        never_lost: str,
    ) -> tuple[CriterionResult, ...]:
        """The criteria of a case over results that are found later; where it does not keep what is found of the base
        case, those over its own. ``never_lost`` says why there is no time at which the duty is lost."""
        wanted = {
            number: criterion
            for number, criterion in self._numbered()
            if self._is_later(criterion) and (keeps or not is_found_once(criterion.result))
        }
        moved = " and ".join(name for name in OF_DAY_ONE if name in results)
        without = partial(self._not_there, f"the control moves {moved}" if moved else NO_STATE, never_lost)
        return self._judged(wanted, case, results, solutions, without)

    def _numbered(self) -> Iterator[tuple[int, Criterion]]:
        return enumerate(self.chain.calculation.acceptance, 1)

    def _is_later(self, criterion: Criterion) -> bool:
        return is_found_later(criterion.result) and self._is_asked(criterion.result)

    def _judged(
        self,
        wanted: Mapping[int, Criterion],
        case: str,
        results: Mapping[str, Result],
        solutions: Mapping[str, Solution],
        without: Callable[[int, Criterion, str, Mapping[str, Solution]], CriterionResult | None],
    ) -> tuple[CriterionResult, ...]:
        """Criteria by number, judged; ``without`` gives those whose result is not there."""
        found = []
        for number, criterion in wanted.items():
            result = results.get(criterion.result)
            if result is None:
                judged = without(number, criterion, case, solutions)
                if judged is not None:
                    found.append(judged)
                elif not case:
                    self._report_unknown(criterion, results)
                continue
            stated = self.limit_of(criterion, result.kind, solutions[SERVICE])
            if stated is None:
                continue
            found.append(_by_value(number, criterion, case, result.kind, result.value, float(stated)))
        return tuple(found)

    def _along(self, ends: tuple[EndState, ...], case: str) -> list[CheckResult]:
        """How much U differs along the unit, unless the file asks for parts, which tell it closer."""
        duty = self.chain.calculation.duty
        return u_along(ends, case) if duty is not None and duty.parts == 1 else []

    def _is_asked(self, name: str) -> bool:
        """Whether the file asks for a result that is found later."""
        calculation = self.chain.calculation
        key = next(key for start, key in LATER.items() if name.startswith(start))
        asked = {
            "time in service": calculation.time_in_service is not None,
            "cleaning": calculation.cleaning is not None,
            "survey": calculation.survey is not None,
            "evaluate at": bool(calculation.places),
            "parts": calculation.duty is not None and calculation.duty.parts > 1,
            "duty": calculation.duty is not None,
        }
        return asked[key]

    def _without_value(
        self, number: int, criterion: Criterion, case: str, solutions: Mapping[str, Solution]
    ) -> CriterionResult | None:
        """A criterion over a surface of an end that does not close, or over a result that the base case has and a named
        case has not: it is not met there."""
        if criterion.result in self.open_surfaces:
            kind, words = vocabulary()["temperature"], NOT_CLOSED
        elif criterion.result in self.results:
            kind, words = self.results[criterion.result].kind, "there is no value in this case"
        else:
            return None
        return self._not_met(number, criterion, case, solutions, kind, words)

    def _not_met(
        self,
        number: int,
        criterion: Criterion,
        case: str,
        solutions: Mapping[str, Solution],
        kind: QuantityKind,
        words: str,
    ) -> CriterionResult | None:
        """A criterion whose value is not there, in words; None after a fault of its limit."""
        limit = self.limit_of(criterion, kind, solutions[SERVICE])
        if limit is None:
            return None
        return _told_in_words(number, criterion, case, kind, float(limit), False, words)

    def _not_there(
        self,
        no_state: str,
        never_lost: str,
        number: int,
        criterion: Criterion,
        case: str,
        solutions: Mapping[str, Solution],
    ) -> CriterionResult | None:
        """A criterion over a state of day one that is not there, or over a duty that is not lost; in words why."""
        if is_found_once(criterion.result):
            return self._not_lost(never_lost, number, criterion, case, solutions)
        kind = vocabulary()[OF_DAY_ONE[criterion.result][0]]
        return self._not_met(number, criterion, case, solutions, kind, no_state)

    def _not_lost(
        self,
        never_lost: str,
        number: int,
        criterion: Criterion,
        case: str,
        solutions: Mapping[str, Solution],
    ) -> CriterionResult | None:
        """The criterion over a duty that is not lost, where the time that was looked at settles it; else None."""
        stated = self.chain.calculation.time_in_service
        if criterion.result != DUTY_LOST or stated is None:
            return None
        kind = vocabulary()["service time"]
        if never_lost != CARRIED:
            return self._not_met(number, criterion, case, solutions, kind, never_lost)
        limit = self.limit_of(criterion, kind, solutions[SERVICE])
        until = solutions[SERVICE].number(self.chain.in_service["until"])
        if limit is None or not until >= float(limit):
            return None
        met, words = criterion.direction > 0.0, f"the duty is not lost within {stated.until.text}"
        return _told_in_words(number, criterion, case, kind, float(limit), met, words)

    def _report_unknown(self, criterion: Criterion, results: Mapping[str, Result]) -> None:
        name = shown(criterion.result)
        start = next((start for start in LATER if criterion.result.startswith(start)), "")
        whole = [one for one in LATER if one not in STARTS and one not in results]
        known = (*results, *(one for one in whole if self._is_asked(one)))
        message = f"there is no result `{name}`"
        if start and self._is_asked(criterion.result):
            message = f"`{name}` was not found: it is later than the time looked at, or there is none"
        elif start:
            where = " in its `duty:`" if criterion.result in OF_PARTS else ""
            message = f"`{name}` is found only where the file has `{LATER[start]}:`{where}"
            duty = self.chain.calculation.duty
            if where and duty is not None and not duty.can_be_cut:
                message = f"`{name}` is not found: this unit cannot be cut into parts that follow each other"
        side = next((side for side in SIDES if criterion.result.startswith(f"T {side} surface ")), "")
        if side and self.chain.has_temperatures and side not in self.chain.known_surfaces:
            message = f"`{name}` is not known: the stated film there includes other terms"
        self.judging.add(
            "result-unknown",
            criterion.place,
            message,
            found=name,
            expected=", ".join(known),
            nearest=nearest_names(criterion.result, known),
        )

    def limit_of(self, criterion: Criterion, kind: QuantityKind, solution: Solution) -> Array | None:
        """The limit of a criterion at every sample; None after a fault."""
        value = criterion.limit
        if value.symbol:
            name = next(
                (
                    f"{origin}/{value.symbol}"
                    for origin in ("given", "derived")
                    if f"{origin}/{value.symbol}" in solution.values
                ),
                "",
            )
            if not name:
                known = self.chain.calculation.symbols
                self.judging.take([unknown_symbol(value.symbol, value.place, known)])
                return None
            if self.dimensions.get(name) != kind.dimension:
                self.judging.add(
                    "unit-dimension",
                    value.place,
                    f"`{value.symbol}` is no {kind.name}",
                    found=value.symbol,
                    expected=kind.unit,
                )
                return None
            given = self.chain.calculation.givens.get(value.symbol)
            if given is not None:
                if self._read_limit(given.value.quantity, kind, criterion) is None:
                    return None
                if kind.name == "ratio" and not given.value.is_share(criterion.result, self.judging):
                    return None
            return solution.figure(name)
        assert value.quantity is not None, "a limit is a symbol or a quantity"
        if kind.name == "ratio" and not value.is_share(criterion.result, self.judging):
            return None
        limit = self._read_limit(value.quantity, kind, criterion)
        return np.asarray(limit) if limit is not None else None

    def _read_limit(
        self, quantity: Quantity | None, kind: QuantityKind, criterion: Criterion
    ) -> float | None:
        """The SI value of a criterion's limit, read as the quantity that it limits; None after a fault."""
        assert quantity is not None, "a figure of the file has a value here"
        place = criterion.limit.place
        if kind.reading == "absolute" and quantity.reading == "gauge":
            self.judging.add(
                "unit-dimension",
                place,
                "the limit counts from the pressure of the site, and the result is absolute",
                found=shown(quantity.text),
                expected="an absolute pressure, such as 1.15 bara",
            )
            return None
        try:
            limit = as_kind(quantity, kind).value
        except QuantityFault as error:
            self.judging.take([error.at(place)])
            return None
        if criterion.result.startswith(BY_SIZE) and limit < 0.0:
            self.judging.add(
                "quantity-negative",
                place,
                f"`{shown(criterion.result)}` is a result by its size, whichever way it points",
                found=shown(quantity.text),
                expected="a limit that is not below zero",
            )
            return None
        return limit

    def _with_acceptances(self, cases: list[CaseOutcome]) -> list[CaseOutcome]:
        """Apply the file's acceptances over all cases at once, then add the open items that remain."""
        every = tuple(check for case in cases for check in case.checks)
        settled = apply_acceptances(self.chain, every, self.judging)
        result, start = [], 0
        for case in cases:
            checks = settled[start : start + len(case.checks)]
            start += len(case.checks)
            items = (*case.open_items, *_open_checks(checks))
            result.append(replace(case, checks=checks, open_items=items))
        return result

    # -- closure, sensitivity ------------------------------------------------------------------------

    def _sensitivity(self, base: CaseOutcome) -> tuple[SensitivityRow, ...]:
        """1 % of each figure (1 K of a temperature), ranked by what it moves U in service by."""
        name = self.chain.results["U"]
        inputs = self.chain.case_inputs("")
        slopes = derivatives(self.chain, inputs, SERVICE, (name,), base.solutions[SERVICE])[name]
        reference = base.results["U_service"].value
        rows = []
        for key, slope in slopes.items():
            item = self.chain.inputs[key]
            temperature = item.kind.scale == "point" or item.kind.name == "temperature difference"
            move = 1.0 if temperature else 0.01 * base.inputs[key]
            change = float(np.asarray(slope).ravel()[0]) * move
            if math.isfinite(change) and abs(change) > NOISE * abs(reference):
                rows.append(SensitivityRow(item, "1 K" if temperature else "1 %", change, change / reference))
        order = {key: place for place, key in enumerate(self.chain.inputs)}
        return tuple(sorted(rows, key=lambda row: (-float(f"{abs(row.change):.9g}"), order[row.input.id])))


# --- the same on many samples -----------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class CriterionFigures:
    """An acceptance criterion at every sample: its number from 1, and the margin (NaN where not known)."""

    number: int
    criterion: Criterion
    margin: Array

    @property
    def met(self) -> Array:
        return is_met(self.criterion, self.margin)


def criterion_figures(
    chain: Chain, solutions: Mapping[str, Solution], results: Mapping[str, ResultFigures]
) -> list[CriterionFigures]:
    """The acceptance criteria of a chain whose own record has shown no fault in them."""
    analysis = _Analysis(chain, Collector())
    found = []
    for number, criterion in enumerate(chain.calculation.acceptance, 1):
        result = results.get(criterion.result)
        limit = analysis.limit_of(criterion, result.kind, solutions[SERVICE]) if result is not None else None
        if result is not None and limit is not None:
            found.append(
                CriterionFigures(number, criterion, criterion_margin(criterion, result.values, limit))
            )
    return found


def limit_at(chain: Chain, criterion: Criterion, kind: QuantityKind, solution: Solution) -> Array:
    """The limit of a criterion whose own record has shown no fault in it, at every sample."""
    limit = _Analysis(chain, Collector()).limit_of(criterion, kind, solution)
    assert limit is not None, "its record was made"
    return limit


def clean_surface_criteria(
    chain: Chain, solution: Solution, ends: tuple[EndState, ...], state: str
) -> tuple[CriterionResult, ...]:
    """The acceptance criteria on temperatures of the clean unit in another state than the stated one.

    ``ends`` are both ends of that state, ``state`` its name, which stands in place of a case. One on a surface at an
    end at which the circuit does not close is not met.
    """
    analysis = _Analysis(chain, Collector())
    kind = vocabulary()["temperature"]
    results = {
        f"T {name} {CLEAN}": ResultFigures(value, kind, "") for name, value in interfaces(chain, solution)
    } | surfaces_at_ends(ends)
    found = []
    for number, criterion in enumerate(chain.calculation.acceptance, 1):
        item = results.get(criterion.result)
        stated = analysis.limit_of(criterion, kind, solution) if item is not None else None
        if item is None or stated is None:
            continue
        value, limit = float(np.ravel(item.values)[0]), float(stated)
        found.append(
            _by_value(number, criterion, state, kind, value, limit)
            if math.isfinite(value)
            else _told_in_words(number, criterion, state, kind, limit, False, NOT_CLOSED)
        )
    return tuple(found)


# --- small helpers ----------------------------------------------------------------------------------


def _by_value(
    number: int, criterion: Criterion, case: str, kind: QuantityKind, value: float, limit: float
) -> CriterionResult:
    """A criterion that the value of its result settles."""
    margin = float(criterion_margin(criterion, value, limit))
    met = bool(is_met(criterion, margin))
    return CriterionResult(
        f"criterion {number}", case, criterion.text, value, limit, margin, met, kind, criterion.source
    )


def _told_in_words(
    number: int, criterion: Criterion, case: str, kind: QuantityKind, limit: float, met: bool, words: str
) -> CriterionResult:
    """A criterion whose verdict rests on words in place of a value."""
    nan = math.nan
    return CriterionResult(
        f"criterion {number}", case, criterion.text, nan, limit, nan, met, kind, criterion.source, words
    )


def _least_margin(item: CriterionResult) -> float:
    """The margin by which cases are compared: one without a value is worse than any."""
    return -math.inf if math.isnan(item.margin) else item.margin


def _single(figures: Mapping[str, ResultFigures]) -> dict[str, Result]:
    """The named results of a single record; one without a value is left out."""
    return {
        name: Result(name, value, item.kind, item.title)
        for name, item in figures.items()
        if math.isfinite(value := float(item.values))
    }


def _open_checks(checks: tuple[CheckResult, ...]) -> list[OpenItem]:
    """Range limits that are outside or cannot be evaluated, and stop limits that cannot.

    Where the circuit does not close at an end, that is one item, with what cannot be evaluated there for it.
    """
    items: dict[str, OpenItem] = {}
    told: set[tuple[str, str]] = set()
    for check in checks:
        if (check.id, check.condition) in told:
            continue
        blocking = check.level == "range" and check.state in ("outside", "not evaluable")
        blocking |= check.level == "stop" and check.state == "not evaluable"
        if not blocking:
            continue
        where = f"case {check.case}, {check.condition}" if check.case else check.condition
        beyond = f"; {check.accepted}" if check.accepted else ""
        text = f"{check.id} ({where}): {check.figure}, limit {check.limit}: {check.state}{beyond}."
        if check.id.startswith(OPEN_END):
            others = _not_evaluable_with(check, checks)
            told |= {(name, check.condition) for name in others}
            text += f" Not evaluable with it: {', '.join(others)}." if others else ""
        items.setdefault(f"{check.id} / {where}", OpenItem(f"{check.id} / {where}", "check", text))
    return list(items.values())


def _not_evaluable_with(circuit: CheckResult, checks: tuple[CheckResult, ...]) -> list[str]:
    """The checks at the walls of an end that cannot be evaluated as its circuit does not close."""
    place = circuit.id.removeprefix(OPEN_END)
    return [
        check.id
        for check in checks
        if check.id.endswith(place)
        and check.id != circuit.id
        and (check.condition, check.state) == (circuit.condition, circuit.state)
    ]


def _with_mean(cases: list[CaseOutcome], places: tuple[str, ...]) -> CaseOutcome:
    """The base case with the mean of U over the places along the unit, and an open item where they differ much."""
    at = {case.name: case for case in cases if case.name in places}
    base = cases[0]
    results = dict(base.results)
    items = list(base.open_items)
    for condition in reversed(CONDITIONS):
        values = [case.results[f"U_{condition}"].value for case in at.values()]
        mean = sum(values) / len(values)
        name = f"U_{condition}{MEAN_OF_PLACES}"
        results[name] = Result(
            name,
            mean,
            base.results[f"U_{condition}"].kind,
            f"arithmetic mean of U {condition} over {', '.join(at)}",
        )
        spread = (max(values) - min(values)) / mean
        if spread > U_SPREAD:
            items.append(
                OpenItem(
                    f"places / {condition}",
                    "check",
                    f"U {condition} differs by {100.0 * spread:.0f} % over"
                    f" the places {', '.join(at)}, more than {100.0 * U_SPREAD:.0f} %: one U does not"
                    " stand for the whole unit.",
                )
            )
    return replace(base, results=results, open_items=tuple(items))


def _governing(cases: list[CaseOutcome], places: tuple[str, ...]) -> dict[str, CaseOutcome]:
    """By criterion the case with its smallest margin; without any, under an empty name, the one with the lowest U in
    service; nothing where one case stands alone.

    A place along the unit is no case of its own.
    """
    cases = [case for case in cases if case.name not in places]
    if len(cases) == 1:
        return {}
    margins: dict[str, list[tuple[float, CaseOutcome]]] = {}
    for case in cases:
        for item in case.criteria:
            margins.setdefault(item.id, []).append((_least_margin(item), case))
    if not margins:
        return {"": min(cases, key=lambda case: case.results["U_service"].value)}
    return {name: min(known, key=lambda pair: pair[0])[1] for name, known in margins.items()}
