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
from calcbook.chain.types import SERVICE, Branch, Candidate, Chain
from calcbook.formulas import Dimension
from calcbook.library.operations import run


def cross_check(
    chain: Chain, cases: Sequence[CaseOutcome], dimensions: Mapping[str, Dimension]
) -> dict[str, tuple[CrossRow, ...]]:
    """By case a row for every other method of every film and gap in service: what it gives, or why it is left out.

    ``dimensions`` are those of every step of the chain, for the words of limits. The methods of a film are tried
    in all cases at once.
    """
    crossed = [_CrossedCase(chain, case, dimensions) for case in cases]
    rows: dict[str, list[CrossRow]] = {case.name: [] for case in cases}
    for branch in (*chain.inner.branches, *chain.outer.branches):
        if branch.situation is None:
            continue
        others = [cross.others(branch) for cross in crossed]
        tried = [
            Alternative(other, cross.inputs, cross.service)
            for cross, group in zip(crossed, others, strict=True)
            for other, reason in group
            if not reason
        ]
        solutions = iter(alternatives(chain, branch, tried))
        for cross, group in zip(crossed, others, strict=True):
            rows[cross.case.name] += cross.of_film(branch, group, solutions)
    return {cross.case.name: (*rows[cross.case.name], *cross.of_gaps()) for cross in crossed}


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
        self, branch: Branch, others: Sequence[tuple[Candidate, str]], solutions: Iterator[Solution]
    ) -> list[CrossRow]:
        """A row for each other method of a film; ``solutions`` yields that of each which nothing leaves out."""
        used = chosen(branch, self.service)
        rows = [
            self._row(branch, used, other, reason, None if reason else next(solutions))
            for other, reason in others
        ]
        return [*rows, *_unusable(branch)]

    def of_gaps(self) -> list[CrossRow]:
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
                    solution = None if reason else solve(changed, self.inputs, SERVICE)
                    rows.append(self._row(way, used, other, reason, solution))
                rows += _unusable(way)
        return rows

    def _row(
        self, branch: Branch, used: Candidate, other: Candidate, reason: str, solution: Solution | None
    ) -> CrossRow:
        """The row of one method: the solution with it in its place, or the reason why there is none."""
        coefficient = overall = difference = math.nan
        if solution is not None:
            closes = bool(np.all(solution.converged))
            reason = self._out_of_range(other, solution) if closes else "does not close here"
            overall = solution.number(self.chain.results["U"])
            difference = overall / self.case.results["U_service"].value - 1.0
            if other.coefficient in solution.values:
                coefficient = solution.number(other.coefficient)
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
            () if solution is None or reason else self._turned(solution),
        )

    def _turned(self, solution: Solution) -> tuple[str, ...]:
        """The ids of the criteria over results in service that have another verdict with a film's other method."""
        found = []
        for item in self.case.criteria:
            criterion = self.chain.calculation.criterion(item.id)
            judged = measured(self.chain, criterion.result)
            if judged is None or {condition for condition, _ in judged.parts.values()} != {SERVICE}:
                continue
            margin = criterion_margin(criterion, float(judged.value({SERVICE: solution.values})), item.limit)
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
                check = evaluate_check(limit, solution, "", self.dimensions)
                return f"outside its range: {check.figure}, limit {check.limit}"
        return ""


def _unusable(branch: Branch) -> list[CrossRow]:
    """A row for each method that lacks a figure."""
    return [
        CrossRow(branch.name, method, "", "", False, math.nan, math.nan, math.nan, reason)
        for method, reason in branch.unusable.items()
    ]
