"""Every other method of a situation put in the place of the one that is used, and the circuit closed again."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from calcbook.chain.alternatives import Alternative, alternatives, needs_temperatures
from calcbook.chain.checks import evaluate_check, state_of_check
from calcbook.chain.criteria import criterion_margin, is_met
from calcbook.chain.gaps import gaps, with_method
from calcbook.chain.measured import measured
from calcbook.chain.outcome import CaseOutcome, CrossRow
from calcbook.chain.solve import Solution, chosen, solve
from calcbook.chain.types import CLEAN, SERVICE, Branch, Candidate, Chain, ChainCheck
from calcbook.formulas import Dimension
from calcbook.library.operations import run


def cross_check(
    chain: Chain, cases: Sequence[CaseOutcome], dimensions: Mapping[str, Dimension]
) -> dict[str, tuple[CrossRow, ...]]:
    """By case a row for every other method of every film and gap in service: what it gives, or why it is left out.

    ``dimensions`` are those of every step of the chain, for the words of limits. The methods of a film are tried
    in all cases at once, and on the clean unit too where a criterion takes a result of it.
    """
    conditions = _conditions(chain)
    crossed = [_CrossedCase(chain, case, dimensions) for case in cases]
    rows: dict[str, list[CrossRow]] = {case.name: [] for case in cases}
    for branch in (*chain.inner.branches, *chain.outer.branches):
        if branch.situation is None:
            continue
        others = [cross.others(branch) for cross in crossed]
        tried = [
            (cross, other)
            for cross, group in zip(crossed, others, strict=True)
            for other, reason in group
            if not reason
        ]
        solutions = iter(_in_each(chain, branch, tried, conditions))
        for cross, group in zip(crossed, others, strict=True):
            rows[cross.case.name] += cross.of_film(branch, group, solutions)
    return {cross.case.name: (*rows[cross.case.name], *cross.of_gaps(conditions)) for cross in crossed}


def _conditions(chain: Chain) -> tuple[str, ...]:
    """The conditions in which other methods are tried: service, and clean where a criterion asks for it."""
    asked = {
        condition
        for criterion in chain.calculation.acceptance
        if (judged := measured(chain, criterion.result)) is not None
        for condition, _ in judged.parts.values()
    }
    return (SERVICE, CLEAN) if CLEAN in asked else (SERVICE,)


def _in_each(
    chain: Chain,
    branch: Branch,
    tried: Sequence[tuple[_CrossedCase, Candidate]],
    conditions: tuple[str, ...],
) -> list[dict[str, Solution]]:
    """The solutions of cases with another method of a film in its place, by condition."""
    found: list[dict[str, Solution]] = [{} for _ in tried]
    for condition in conditions:
        others = [Alternative(other, cross.inputs, cross.case.solutions[condition]) for cross, other in tried]
        for solutions, solution in zip(found, alternatives(chain, branch, others, condition), strict=True):
            solutions[condition] = solution
    return found


@dataclass(frozen=True)
class _CrossedCase:
    """One case with other methods in its films and gaps."""

    chain: Chain
    case: CaseOutcome
    dimensions: Mapping[str, Dimension]

    @property
    def service(self) -> Solution:
        return self.case.solutions[SERVICE]

    @property
    def inputs(self) -> dict[str, np.ndarray]:
        return self.chain.case_inputs(self.case.name)

    def others(self, branch: Branch) -> list[tuple[Candidate, str]]:
        """The methods of a film but the one that is used, in the order of the situation; why each is left out, or ''."""
        assert branch.situation is not None, "a stated film has no methods"
        used = chosen(branch, self.service)
        order = {method: place for place, method in enumerate(branch.situation.methods)}
        others = [other for other in (*branch.candidates, *branch.alternatives) if other is not used]
        others.sort(key=lambda other: order.get(other.method.id, len(order)))
        return [(other, self._left_out(branch, other)) for other in others]

    def of_film(
        self,
        branch: Branch,
        others: Sequence[tuple[Candidate, str]],
        solutions: Iterator[dict[str, Solution]],
    ) -> list[CrossRow]:
        """A row for each other method of a film; ``solutions`` yields that of each which nothing leaves out."""
        used = chosen(branch, self.service)
        rows = [
            self._row(branch, used, other, reason, {} if reason else next(solutions))
            for other, reason in others
        ]
        return [*rows, *_unusable(branch)]

    def of_gaps(self, conditions: tuple[str, ...]) -> list[CrossRow]:
        """A row for each other way across each gap."""
        rows = []
        for layer, gap in gaps(self.chain):
            for way in gap.ways:
                used = chosen(way, self.service)
                others = {part.method.id: part for part in (*way.candidates, *way.alternatives)}
                others.pop(used.method.id, None)
                for other in others.values():
                    reason = self._out_of_range(other, self._at_solution(other))
                    changed = with_method(self.chain, layer, way, other)
                    tried = () if reason else conditions
                    solutions = {condition: solve(changed, self.inputs, condition) for condition in tried}
                    rows.append(self._row(way, used, other, reason, solutions))
                rows += _unusable(way)
        return rows

    def _row(
        self,
        branch: Branch,
        used: Candidate,
        other: Candidate,
        reason: str,
        solutions: Mapping[str, Solution],
    ) -> CrossRow:
        """The row of one method: the solutions with it in its place, or the reason why there are none."""
        coefficient = overall = difference = math.nan
        solution, clean = solutions.get(SERVICE), solutions.get(CLEAN)
        if solution is not None:
            reason = self._no_answer(other, solution)
            overall = solution.number(self.chain.results["U"])
            difference = overall / self.case.results["U_service"].value - 1.0
            if other.coefficient in solution.values:
                coefficient = solution.number(other.coefficient)
        if clean is not None and self._no_answer(other, clean):
            clean = None
        method = other.method
        return CrossRow(
            branch.name,
            method.id,
            method.title,
            method.family,
            method.family == used.method.family,
            coefficient,
            overall,
            difference,
            reason,
            () if solution is None or reason else self._turned(solution, clean),
            () if solution is None or reason else self._cautions(other, solution),
            math.nan if clean is None or reason else clean.number(self.chain.results["U"]),
        )

    def _no_answer(self, other: Candidate, solution: Solution) -> str:
        """Why the circuit closed with a method gives nothing to compare; empty where it does."""
        return (
            self._out_of_range(other, solution) if bool(np.all(solution.converged)) else "does not close here"
        )

    def _turned(self, service: Solution, clean: Solution | None) -> tuple[str, ...]:
        """The ids of the criteria that have another verdict with a film's other method."""
        solved = {SERVICE: service.values} | ({} if clean is None else {CLEAN: clean.values})
        found = []
        for item in self.case.criteria:
            criterion = self.chain.calculation.criterion(item.id)
            judged = measured(self.chain, criterion.result)
            if judged is None or not {condition for condition, _ in judged.parts.values()} <= set(solved):
                continue
            margin = criterion_margin(criterion, float(judged.value(solved)), item.limit)
            if bool(is_met(criterion, margin)) != item.is_met_as_stated:
                found.append(item.id)
        return tuple(found)

    def _left_out(self, branch: Branch, other: Candidate) -> str:
        """Why a method is not tried in place of a film's own; empty where it is."""
        if not self.chain.has_temperatures and needs_temperatures(self.chain, branch, other):
            return "it needs the temperature of the surface, and one bulk temperature is not stated"
        return self._out_of_range(other, self._at_solution(other))

    def _at_solution(self, other: Candidate) -> Solution:
        """A method's own figures at the surface that the used method gives: enough to see most ranges."""
        values = dict(self.service.values)
        run([step for step in other.steps if step.id not in values], values)
        return replace(self.service, values=values)

    def _out_of_range(self, other: Candidate, solution: Solution) -> str:
        """The first range or stop limit of a method that is not held, in words."""
        for limit in other.checks:
            if limit.limit.level not in ("stop", "range"):
                continue
            if state_of_check(limit, solution) in ("outside", "not evaluable"):
                return f"outside its range: {self._words(limit, solution)}"
        return ""

    def _cautions(self, other: Candidate, solution: Solution) -> tuple[str, ...]:
        """The cautions of a method that are outside, in words."""
        return tuple(
            self._words(limit, solution)
            for limit in other.checks
            if limit.limit.level == "caution" and state_of_check(limit, solution) == "outside"
        )

    def _words(self, limit: ChainCheck, solution: Solution) -> str:
        check = evaluate_check(limit, solution, "", self.dimensions)
        return f"{check.figure}, limit {check.limit}"


def _unusable(branch: Branch) -> list[CrossRow]:
    """A row for each method that lacks a figure."""
    return [
        CrossRow(branch.name, method, "", "", False, math.nan, math.nan, math.nan, reason)
        for method, reason in branch.unusable.items()
    ]
