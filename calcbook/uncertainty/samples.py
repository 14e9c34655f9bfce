"""A chain as a model for samples: arrays of uncertain figures in, results and what is to be counted out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from calcbook.chain.about_state import about_state
from calcbook.chain.completing import completed
from calcbook.chain.solve import Solution, closed
from calcbook.chain.types import Branch, Chain, ChainCheck, Layer
from calcbook.formulas import evaluate
from calcbook.properties import FluidAtPressure
from calcbook.uncertainty.figures import has_floor
from calcbook.uncertainty.measured import Measured
from calcbook.uncertainty.sampling import Sampled

Array = np.ndarray
COMPARISONS = {">=": np.greater_equal, "<=": np.less_equal, ">": np.greater, "<": np.less}
OUTSIDE_ANY = "outside a limit"


@dataclass(frozen=True, slots=True)
class Statement:
    """A comparison of a result with a limit: a figure, or a step or given by id."""

    id: str
    result: Measured
    operator: str
    limit: float
    limit_step: str = ""

    def holds(self, solved: Mapping[str, Mapping[str, Array]]) -> Array:
        """Whether it holds, sample by sample."""
        condition = next(iter(self.result.parts.values()))[0]
        limit = solved[condition][self.limit_step] if self.limit_step else self.limit
        return np.asarray(COMPARISONS[self.operator](self.result.value(solved), limit))


@dataclass(frozen=True, slots=True)
class Watched:
    """A limit to be watched in one condition, for the samples whose film uses the method that has it."""

    check: ChainCheck
    condition: str
    branch: str = ""
    candidate: int = 0

    @property
    def id(self) -> str:
        return f"{self.condition}: {self.check.id}"

    @property
    def needs(self) -> set[str]:
        """The ids of the steps that it is evaluated from."""
        bound = set(self.check.inputs.values())
        return bound.union(*(one.inputs.values() for one in self.check.counts_when))

    def outside(self, solution: Solution, size: int) -> Array:
        """The samples that leave the limit; a figure without a value leaves it."""
        values = solution.values
        mask = np.ones(size, dtype=bool)
        if self.branch and self.branch in solution.chosen:
            mask = np.broadcast_to(solution.chosen[self.branch] == self.candidate, (size,)).copy()
        if not mask.any() or not self.needs <= values.keys():
            return np.zeros(size, dtype=bool)
        for one in self.check.counts_when:
            mask &= evaluate(one.relation, {symbol: values[bound] for symbol, bound in one.inputs.items()})
        held = evaluate(
            self.check.limit.that, {symbol: values[bound] for symbol, bound in self.check.inputs.items()}
        )
        return mask & ~np.broadcast_to(held, (size,))


def watched(chain: Chain, condition: str) -> list[Watched]:
    """The range and stop limits of everything that the circuit closes on, whichever method a sample uses."""
    found = [Watched(check, condition) for check in chain.checks]
    for element in chain.elements:
        if isinstance(element, Layer):
            found += [Watched(check, condition) for check in element.checks]
            for way in element.gap.ways if element.gap is not None else ():
                found += _of_branch(way, condition)
            continue
        for branch in element.branches:
            found += _of_branch(branch, condition)
    return [one for one in found if one.check.limit.level in ("range", "stop") and _is_known(chain, one)]


def _of_branch(branch: Branch, condition: str) -> list[Watched]:
    several = len(branch.candidates) > 1
    return [
        Watched(check, condition, branch.name if several else "", number)
        for number, candidate in enumerate(branch.candidates)
        for check in candidate.checks
    ]


def _is_known(chain: Chain, one: Watched) -> bool:
    """Whether the figures of a limit are stated at all: one that is not is an open item already."""
    constants = (chain.constants.get(name) for name in one.needs)
    return not any(isinstance(value, float) and np.isnan(value) for value in constants)


@dataclass(frozen=True, slots=True)
class Phase:
    """The saturation temperature that the bulk of a stream must not pass, and the side it stands on."""

    temperature: str
    pressure: str
    line: FluidAtPressure
    is_liquid: bool

    def holds(self, values: Mapping[str, Array]) -> Array:
        """The samples whose stream has the phase that it has at the stated figures."""
        boiling = self.line.boiling_temperature(values[self.pressure], outside="nan")
        temperature = values[self.temperature]
        passed = temperature >= boiling if self.is_liquid else temperature <= boiling
        return np.asarray(~passed)


def phases(chain: Chain, solution: Solution) -> tuple[Phase, ...]:
    """The phases to be kept: of streams with a pressure and a vapour pressure, off their saturation line."""
    found = []
    for state in chain.streams.values():
        if not state.pressure or state.saturation or state.fluid.text.kind != "name":
            continue
        here = state.fluid.state(solution.number(state.pressure), None, state.phase)
        if here.saturation_temperature() is None:
            continue
        is_liquid = (state.phase or here.phase_at(solution.number(state.temperature))) == "liquid"
        line = state.fluid.state(None, None, "liquid" if is_liquid else "gas")
        found.append(Phase(state.temperature, state.pressure, line, is_liquid))
    return tuple(found)


class ChainModel:
    """One chain as a model: solves the conditions that its results need, a batch at a time."""

    def __init__(
        self,
        chain: Chain,
        inputs: Mapping[str, Array],
        base: Mapping[str, Solution],
        results: Sequence[Measured],
        statements: Sequence[Statement] = (),
        limits: bool = False,
    ):
        """``inputs`` are the stated figures, ``base`` their solutions by condition."""
        first = next(iter(base.values()))
        self.chain = about_state(chain, first.values)
        self.phases = phases(chain, first)
        self.inputs = inputs
        self.results = tuple(results)
        self.statements = tuple(statements)
        wanted = (*results, *(statement.result for statement in statements))
        self.conditions = tuple(
            dict.fromkeys(condition for one in wanted for condition, _ in one.parts.values())
        )
        self.limits = tuple(
            one for condition in self.conditions for one in (watched(chain, condition) if limits else ())
        )
        self.keep = {
            *(step for one in wanted for _, step in one.parts.values()),
            *(statement.limit_step for statement in statements if statement.limit_step),
            *(name for one in self.limits for name in one.needs),
            *(name for one in self.phases for name in (one.temperature, one.pressure)),
        }

    def outputs(self, drawn: Mapping[str, Array]) -> dict[str, Array]:
        """The results alone, NaN where a sample has no answer."""
        return dict(self(drawn).outputs)

    def __call__(self, drawn: Mapping[str, Array]) -> Sampled:
        size = len(next(iter(drawn.values())))
        possible = np.ones(size, dtype=bool)
        inputs = dict(self.inputs)
        for name, values in drawn.items():
            item = self.chain.inputs[name]
            if has_floor(item.kind):
                possible &= values > 0.0
            inputs[name] = values
        if not possible.all():
            # What cannot be is not solved: the stated figures stand in its place, and it gets no answer.
            inputs = {
                name: np.where(possible, value, self.inputs[name]) if name in drawn else value
                for name, value in inputs.items()
            }
        whole = completed(self.chain, inputs)
        solutions = {
            condition: closed(self.chain, whole, condition, keep=self.keep) for condition in self.conditions
        }
        for solution in solutions.values():
            possible &= solution.converged
            for phase in self.phases:
                possible &= phase.holds(solution.values)
        return self._sampled(solutions, possible, size)

    def _sampled(self, solutions: Mapping[str, Solution], possible: Array, size: int) -> Sampled:
        marks: dict[str, Array] = {}
        any_outside = np.zeros(size, dtype=bool)
        for one in self.limits:
            outside = one.outside(solutions[one.condition], size)
            if one.check.limit.level == "stop":
                possible = possible & ~outside
            else:
                any_outside |= outside
            marks[one.id] = marks[one.id] | outside if one.id in marks else outside
        values = {condition: solution.values for condition, solution in solutions.items()}
        outputs = {
            one.name: np.where(possible, np.broadcast_to(one.value(values), (size,)), np.nan)
            for one in self.results
        }
        for statement in self.statements:
            marks[statement.id] = np.broadcast_to(statement.holds(values), (size,))
        if self.limits:
            marks[OUTSIDE_ANY] = any_outside
        return Sampled(outputs, marks)
