"""Every other method of a situation put in the place of the one that is used, and the circuit closed again."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from calcbook.chain.alternatives import alternatives, needs_temperatures
from calcbook.chain.checks import evaluate_check, state_of_check
from calcbook.chain.gaps import gaps, with_method
from calcbook.chain.measured import measured
from calcbook.chain.outcome import CaseOutcome, CrossRow
from calcbook.chain.solve import Solution, chosen, solve
from calcbook.chain.types import SERVICE, Branch, Candidate, Chain
from calcbook.formulas import Dimension
from calcbook.library.operations import run


def cross_check(chain: Chain, case: CaseOutcome, dimensions: Mapping[str, Dimension]) -> tuple[CrossRow, ...]:
    """A row for every other method of every film and gap in service: what it gives, or why it is left out.

    ``dimensions`` are those of every step of the chain, for the words of limits.
    """
    return _CrossCheck(chain, case, dimensions).rows()


@dataclass(frozen=True)
class _CrossCheck:
    chain: Chain
    case: CaseOutcome
    dimensions: Mapping[str, Dimension]

    @property
    def service(self) -> Solution:
        return self.case.solutions[SERVICE]

    @property
    def inputs(self) -> dict[str, np.ndarray]:
        return self.chain.case_inputs(self.case.name)

    def rows(self) -> tuple[CrossRow, ...]:
        rows = []
        for group in (self.chain.inner, self.chain.outer):
            for branch in group.branches:
                if branch.situation is None:
                    continue
                used = chosen(branch, self.service)
                others = [
                    candidate
                    for candidate in (*branch.candidates, *branch.alternatives)
                    if candidate is not used
                ]
                order = {method: place for place, method in enumerate(branch.situation.methods)}
                others.sort(key=lambda candidate: order.get(candidate.method.id, len(order)))
                rows += self._of_film(branch, used, others)
                rows += _unusable(branch)
        return (*rows, *self._of_gaps())

    def _of_gaps(self) -> list[CrossRow]:
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

    def _of_film(self, branch: Branch, used: Candidate, others: Sequence[Candidate]) -> list[CrossRow]:
        left_out = [self._left_out(branch, other) for other in others]
        tried = [other for other, reason in zip(others, left_out, strict=True) if not reason]
        solutions = iter(alternatives(self.chain, branch, tried, self.inputs, self.service))
        return [
            self._row(branch, used, other, reason, None if reason else next(solutions))
            for other, reason in zip(others, left_out, strict=True)
        ]

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
        stated = {criterion.text: criterion for criterion in self.chain.calculation.acceptance}
        found = []
        for item in self.case.criteria:
            criterion = stated[item.that]
            judged = measured(self.chain, criterion.result)
            if judged is None or {condition for condition, _ in judged.parts.values()} != {SERVICE}:
                continue
            margin = criterion.margin(float(judged.value({SERVICE: solution.values})), item.limit)
            if bool(criterion.is_met(margin)) != item.is_met_as_stated:
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
