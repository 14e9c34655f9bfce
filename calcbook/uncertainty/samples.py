"""A chain as a model for samples: arrays of uncertain figures in, results and what is to be counted out."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np

from calcbook.chain.about_state import about_state
from calcbook.chain.along import OF_PARTS
from calcbook.chain.analysis import DUTY_LOST
from calcbook.chain.checks import NOT_EVALUABLE, OUTSIDE, check_states
from calcbook.chain.completing import completed
from calcbook.chain.criteria import beyond
from calcbook.chain.ends import OPEN_END, PLACES, end_states, has_ends
from calcbook.chain.findings import ends_of, figures_to_hold, has_phase_to_keep
from calcbook.chain.measured import Measured, condition_of
from calcbook.chain.samples import Samples, mark_derived, mark_directions, mark_walls
from calcbook.chain.solve import UNKNOWNS, Solution, closed, conditions_of, solve_both
from calcbook.chain.types import CONDITIONS, SERVICE, Branch, Chain, ChainCheck, Group, Layer, StreamState
from calcbook.properties import FluidAtPressure
from calcbook.rating.duty_lost import carried_until
from calcbook.rating.parts import parts_at_samples, what_parts_take
from calcbook.uncertainty.figures import has_floor
from calcbook.uncertainty.sampling import Sampled

Array = np.ndarray
COMPARISONS = {">=": np.greater_equal, "<=": np.less_equal, ">": np.greater, "<": np.less}
OUTSIDE_ANY = "outside a limit"
# How a limit stands at the stated values that the record does not list.
NO_METHOD = "its method is not used"
# So few samples take longer to be told apart than to be solved: all their figures are kept.
FEW = 500


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
        return np.asarray(COMPARISONS[self.operator](beyond(self.result.value(solved), limit), 0.0))


@dataclass(frozen=True, slots=True)
class Watched:
    """A limit to be watched in one condition, for the samples whose film uses the method that has it."""

    place: ClassVar[str] = ""
    not_listed: ClassVar[str] = NO_METHOD

    check: ChainCheck
    condition: str
    branch: str = ""
    candidate: int = 0

    @property
    def id(self) -> str:
        return self.check.id

    @property
    def level(self) -> str:
        return self.check.limit.level

    @property
    def needs(self) -> set[str]:
        """The ids of the steps that it is evaluated from."""
        bound = set(self.check.inputs.values())
        return bound.union(*(one.inputs.values() for one in self.check.counts_when))

    def outside(self, solution: Solution) -> Array:
        """The samples that leave the limit; a figure without a value leaves it."""
        acts: Array = np.asarray(True)
        if self.branch and self.branch in solution.chosen:
            acts = solution.chosen[self.branch] == self.candidate
        if not acts.any() or not self.needs <= solution.values.keys():
            return np.asarray(False)
        return acts & np.isin(check_states(self.check, solution.values), (OUTSIDE, NOT_EVALUABLE))


@dataclass(frozen=True, slots=True)
class WallPhase:
    """A fluid that must not boil, condense or freeze at the surfaces it touches, in one condition.

    It does so at ``end``, or at the boiling temperature on ``line`` where the samples have their own pressure.
    ``place`` is the end of the unit, empty for the mean temperatures.
    """

    not_listed: ClassVar[str] = NO_METHOD

    owner: str
    name: str
    condition: str
    surfaces: tuple[str, ...]
    end: float
    line: FluidAtPressure | None = None
    pressure: str = ""
    level: str = "range"
    place: str = ""

    @property
    def id(self) -> str:
        return f"{self.owner} / wall phase / {self.name} {self.place}".rstrip()

    @property
    def needs(self) -> set[str]:
        """The ids of the figures that it is evaluated from."""
        return {*self.surfaces, self.pressure} - {""}

    def outside(self, solution: Solution) -> Array:
        """The samples in which the fluid changes its phase at the wall; where the circuit does not close none is known."""
        sides = [np.asarray(solution.values[name]) for name in self.surfaces]
        end: Array = np.asarray(self.end)
        if self.line is not None:
            end = self.line.boiling_temperature(solution.values[self.pressure], outside="nan")
        changes = np.maximum.reduce(sides) >= end if self.name == "boils" else np.minimum.reduce(sides) <= end
        return np.asarray(changes & solution.converged)


@dataclass(frozen=True, slots=True)
class EndCircuit:
    """That the circuit closes at an end of the unit in one condition."""

    level: ClassVar[str] = "range"
    not_listed: ClassVar[str] = "within"
    needs: ClassVar[frozenset[str]] = frozenset()

    condition: str
    place: str

    @property
    def id(self) -> str:
        return f"{OPEN_END} {self.place}"

    def outside(self, solution: Solution) -> Array:
        """The samples in which it does not close."""
        return ~solution.converged


Limited = Watched | WallPhase | EndCircuit


def wall_phases(chain: Chain, solution: Solution, condition: str) -> list[WallPhase]:
    """The phases at the walls of films and gaps whose fluid keeps its phase, as they stand at the stated figures."""
    if not chain.has_temperatures:
        return []
    found = []
    for element in chain.elements:
        if isinstance(element, Layer):
            if element.gap is not None:
                sides = (element.first_temperature, element.second_temperature)
                found += _phases_at(element.name, element.gap.fluid, sides, solution, condition)
            continue
        surface = chain.results.get(f"T root {element.name}", element.surface_temperature)
        for branch in element.branches:
            changes = branch.situation is not None and branch.situation.changes_phase
            if has_phase_to_keep(chain, branch) and not changes:
                here = _phases_at(branch.name, chain.streams[branch.stream], (surface,), solution, condition)
                # A stated coefficient of a gas may be that of its condensing.
                found += [one for one in here if branch.kind == "film" or one.name != "condenses"]
    return found


def _phases_at(
    owner: str, state: StreamState, surfaces: tuple[str, ...], solution: Solution, condition: str
) -> list[WallPhase]:
    pressure = solution.number(state.pressure) if state.pressure else None
    fraction = solution.number(state.fraction) if state.fraction else None
    fluid = state.fluid.state(pressure, fraction, state.phase)
    phase = state.phase or fluid.phase_at(solution.number(state.temperature))
    boiling, freezing = fluid.saturation_temperature(), fluid.freezing_temperature()
    found = []
    if fluid.has_vapour_pressure and boiling is not None and phase in ("liquid", "gas"):
        name = "boils" if phase == "liquid" else "condenses"
        pure = state.fluid.text.kind == "name"
        line = state.fluid.state(None, None, phase) if pure else None
        found.append(
            WallPhase(owner, name, condition, surfaces, boiling, line, state.pressure if pure else "")
        )
    if phase == "liquid" and freezing is not None:
        found.append(WallPhase(owner, "freezes", condition, surfaces, freezing))
    return found


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
    return [one for one in found if one.level in ("range", "stop") and _is_known(chain, one)]


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


def mark_of(one: Limited) -> str:
    """The name under which the samples that leave a limit are counted."""
    return f"{one.condition}: {one.id}"


def _bulks(group: Group) -> set[str]:
    return {group.bulk, *(branch.reference for branch in group.branches)}


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
        self.base = base
        self.results = tuple(results)
        self.statements = tuple(statements)
        wanted = (*results, *(statement.result for statement in statements))
        self.states = tuple(dict.fromkeys(state for one in wanted for state, _ in one.parts.values()))
        self.conditions = tuple(dict.fromkeys(condition_of(state) for state in self.states))
        self.limits: tuple[Limited, ...] = ()
        for condition in self.conditions if limits else ():
            walls = wall_phases(chain, base[condition], condition)
            places = PLACES if has_ends(chain) else ()
            at_ends: list[Limited] = [replace(wall, place=place) for wall in walls for place in places]
            at_ends += [EndCircuit(condition, place) for place in places]
            self.limits = (*self.limits, *watched(chain, condition), *walls, *at_ends)
        self.keep = {
            *(step for one in wanted for _, step in one.parts.values()),
            *(statement.limit_step for statement in statements if statement.limit_step),
            *(name for one in self.limits for name in one.needs),
            *(name for one in self.phases for name in (one.temperature, one.pressure)),
            *(surface.diameter for surface in chain.surfaces),
            *figures_to_hold(chain),
            *(name for group in (chain.inner, chain.outer) for name in _bulks(group)),
        }
        self.looks_at_ends = any(one.place for one in self.limits) or self.states != self.conditions
        self.sums_parts = any(statement.result.name in OF_PARTS for statement in statements)
        if self.sums_parts:
            self.keep |= what_parts_take(chain)
        self.of_time = tuple(one for one in statements if one.result.name == DUTY_LOST)
        if self.looks_at_ends:
            self.keep |= {UNKNOWNS, *(bound for name in chain.streams for _, bound in ends_of(chain, name))}

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
        solutions = self._closed(whole, size)
        for solution in solutions.values():
            possible &= solution.converged
            for phase in self.phases:
                possible &= phase.holds(solution.values)
        states = Samples(np.zeros(size, dtype=int))
        first = next(iter(solutions.values())).values
        mark_walls(self.chain, first, states)
        mark_derived(self.chain, first, states)
        for here, opposite in ((self.chain.inner, self.chain.outer), (self.chain.outer, self.chain.inner)):
            mark_directions(here, opposite, first, states)
        possible &= states.missing == 0
        ends = end_states(self.chain, whole, solutions, thorough=False) if self.looks_at_ends else ()
        places = {f"{state.solution.condition} {state.place}": state.solution for state in ends}
        for state in self.states:
            if state in places:
                possible &= places[state].converged
        if self.sums_parts:
            summed = parts_at_samples(self.chain, whole, solutions[SERVICE])
            solutions[SERVICE].values.update({name: values for name, values, _, _ in summed})
        for statement in self.of_time:
            # The verdict alone is wanted: whether the duty is carried at the time that is asked for.
            service = solutions[SERVICE]
            limit = service.values[statement.limit_step] if statement.limit_step else statement.limit
            times = np.array(np.broadcast_to(limit, (size,)), dtype=float)
            service.values[statement.result.parts["y"][1]] = carried_until(self.chain, inputs, times)
        return self._sampled(solutions, places, possible, size)

    def _closed(self, whole: Mapping[str, Array], size: int) -> dict[str, Solution]:
        """The solutions of the conditions that are wanted; few samples of both are closed in one call.

        Samples lie about the stated figures: their circuits are begun from where those closed.
        """
        starts = {condition: self.base[condition].unknowns_for(size) for condition in self.conditions}
        rows = [starts.get(condition) for condition in CONDITIONS]
        known = [row for row in rows if row is not None]
        if size <= FEW and len(known) == len(CONDITIONS):
            found = conditions_of(solve_both(self.chain, whole, start=np.concatenate(known, axis=1)))
            return {condition: found[condition] for condition in self.conditions}
        return {
            condition: closed(self.chain, whole, condition, keep=self.keep, start=starts[condition])
            for condition in self.conditions
        }

    def _sampled(
        self,
        solutions: Mapping[str, Solution],
        ends: Mapping[str, Solution],
        possible: Array,
        size: int,
    ) -> Sampled:
        marks: dict[str, Array] = {}
        any_outside = np.zeros(size, dtype=bool)
        for one in self.limits:
            solution = ends[f"{one.condition} {one.place}"] if one.place else solutions[one.condition]
            outside = np.broadcast_to(one.outside(solution), (size,))
            if one.level == "stop":
                possible = possible & ~outside
            else:
                any_outside |= outside
            name = mark_of(one)
            marks[name] = marks[name] | outside if name in marks else outside
        values = {state: solution.values for state, solution in (*solutions.items(), *ends.items())}
        outputs = {
            one.name: np.where(possible, np.broadcast_to(one.value(values), (size,)), np.nan)
            for one in self.results
        }
        for statement in self.statements:
            marks[statement.id] = np.broadcast_to(statement.holds(values), (size,))
        if self.limits:
            marks[OUTSIDE_ANY] = any_outside
        return Sampled(outputs, marks)
