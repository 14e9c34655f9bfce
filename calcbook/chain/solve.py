"""The engine: the circuit closed on arrays of samples, each sample to its own answer.

Films and walls are functions of the surface temperatures and of the heat flux, made from the relations
of the cards. ``closing`` finds the heat flow and the temperature drops at which all of them agree; what it
leaves open is bracketed. A sample's answer does not depend on its neighbours, and many samples are solved
in pieces of fixed size, so that the memory for work on the way stays small.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.joined import joined
from calcbook.chain.types import (
    CLEAN,
    SERVICE,
    SERVICE_FLAG,
    Branch,
    Candidate,
    Chain,
    ChainStep,
    Group,
    Layer,
    following_elements,
)
from calcbook.formulas import evaluate
from calcbook.library.operations import Slopes, Together, run

Array = np.ndarray
# Samples solved together: arrays of this size stay in the processor's cache.
PIECE = 16384
# A law that is met less well than this at the end has no answer there.
RESIDUAL_TOLERANCE = 1e-10
# Four roundings of a temperature, relative: so well is a surface temperature known.
RESOLUTION = 1e-15
ONE = np.ones(())
# Among what is to be kept of a solution: its unknowns.
UNKNOWNS = "solution/unknowns"


@dataclass
class Solution:
    """The figures of one condition: every step by id, which method each film used, and what did not close.

    ``values`` hold arrays of the samples' shape (0-d for a record, and for what does not vary). ``chosen`` is
    the candidate of each branch per sample. ``converged`` is False for a sample without an answer. ``jumps``
    marks, per film, the samples whose law has no root at a joint; ``jump_sides`` holds both coefficients.
    ``unknowns`` are what the circuit was closed with, a row each of one row of samples: the heat flow, then the
    drop of every element that moves (NaN without an answer); from there a like circuit closes in fewer passes.
    """

    condition: str
    values: dict[str, Array]
    chosen: dict[str, Array]
    converged: Array
    jumps: dict[str, Array] = field(default_factory=dict)
    jump_sides: dict[str, tuple[Array, Array]] = field(default_factory=dict)
    unknowns: Array | None = None

    def figure(self, name: str) -> Array:
        """One figure at every sample; 0-d where it does not vary."""
        return np.asarray(self.values[name], dtype=float)

    def row(self, name: str) -> Array:
        """One figure of every sample of one row, also where it does not vary."""
        return np.broadcast_to(self.figure(name).ravel(), (self.converged.size,))

    def number(self, name: str) -> float:
        """One figure of a single record."""
        return float(np.asarray(self.values[name]).ravel()[0])

    def part(self, samples: slice) -> Solution:
        """Some samples of a solution of one row."""
        part = self._taken(lambda row: row[samples])
        part.unknowns = None if self.unknowns is None else self.unknowns[:, samples]
        return part

    def sample(self, number: int) -> Solution:
        """One sample as the solution of a single record."""
        sample = self._taken(lambda row: np.asarray(row[number]))
        sample.unknowns = None if self.unknowns is None else self.unknowns[:, number : number + 1]
        return sample

    def unknowns_for(self, count: int) -> Array | None:
        """The unknowns of a single record, as so many like circuits begin from them."""
        return None if self.unknowns is None else np.broadcast_to(self.unknowns, (len(self.unknowns), count))

    def _taken(self, take: Callable[[Array], Array]) -> Solution:
        """The figures that are left of every row of samples; what does not vary stays as it is."""

        def own(value: Array) -> Array:
            # Tables of cards stand among the values and are no samples.
            return take(value) if isinstance(value, np.ndarray) and value.ndim else value

        return Solution(
            self.condition,
            {name: own(value) for name, value in self.values.items()},
            {name: own(choice) for name, choice in self.chosen.items()},
            own(self.converged),
            {name: own(mask) for name, mask in self.jumps.items()},
            {name: (own(low), own(high)) for name, (low, high) in self.jump_sides.items()},
        )


def chosen(branch: Branch, solution: Solution) -> Candidate:
    """The candidate that a film used in a single record."""
    place = solution.chosen.get(branch.name)
    return branch.candidates[int(np.asarray(place).ravel()[0]) if place is not None else 0]


def solve(
    chain: Chain,
    inputs: Mapping[str, Array],
    condition: str,
    forced: Mapping[str, Candidate] | None = None,
    keep: Collection[str] | None = None,
    thorough: bool = True,
    choices: Mapping[str, Array] | None = None,
    start: Array | None = None,
) -> Solution:
    """Solve a chain for one condition on SI arrays of its inputs (by id, broadcast together).

    ``forced`` puts a candidate in place of a film's own choice, for the cross-check. ``keep`` names the
    steps whose values are wanted; without it all are kept, which for many samples takes much memory. Figures
    that the file leaves open are found first, unless they stand in ``inputs``. A search over many samples is not
    ``thorough``: it gives up a sample after a few passes of Newton's method and brackets none, which takes thousands.
    ``choices`` gives the number of a film's candidate for every sample, in place of its own choice. ``start`` are the
    ``unknowns`` to begin from, NaN for a sample without any; the answers differ from others by rounding alone.
    """
    if chain.open_figures:
        from calcbook.chain.completing import completed

        inputs = completed(chain, inputs, forced, choices, thorough)
    return closed(chain, inputs, condition, forced, keep, thorough, choices, start)


def closed(
    chain: Chain,
    inputs: Mapping[str, Array],
    condition: str,
    forced: Mapping[str, Candidate] | None = None,
    keep: Collection[str] | None = None,
    thorough: bool = True,
    choices: Mapping[str, Array] | None = None,
    start: Array | None = None,
) -> Solution:
    """As ``solve``, for inputs that leave nothing open."""
    shape = np.broadcast_shapes(*(np.shape(value) for value in inputs.values()))
    size = int(np.prod(shape, dtype=int))
    if size == 0:
        raise ValueError("there are no samples to solve")
    flat = {name: _flat(value, shape) for name, value in inputs.items()}
    pieces = _Joined(condition, shape, size)
    with np.errstate(all="ignore"):
        for first in range(0, size, PIECE):
            piece = slice(first, min(first + PIECE, size))
            part = {name: value[piece] if value.ndim else value for name, value in flat.items()}
            engine = Engine(chain, part, condition, forced or {}, 1 if shape == () else piece.stop - first)
            engine.choices.update({name: choice[piece] for name, choice in (choices or {}).items()})
            engine.solve(thorough, None if start is None else start[:, piece])
            pieces.take(engine, piece, keep)
    return pieces.solution()


def solve_both(
    chain: Chain, inputs: Mapping[str, Array], thorough: bool = True, start: Array | None = None
) -> Solution:
    """Solve samples in one row (inputs by id, or one figure for all) clean and in service, in one call.

    The first half of the solution (and of ``start``) is clean, the second in service: ``conditions_of`` parts them.
    """
    size = max(np.size(value) for value in inputs.values())
    doubled = {
        name: np.concatenate([value, value]) if np.ndim(value) else value for name, value in inputs.items()
    }
    doubled[SERVICE_FLAG] = np.repeat([0.0, 1.0], size)
    return solve(chain, doubled, SERVICE, thorough=thorough, start=start)


def conditions_of(both: Solution) -> dict[str, Solution]:
    """The solutions clean and in service, from one of both."""
    halves = halves_of(both.converged.size // 2)
    return {condition: replace(both.part(half), condition=condition) for condition, half in halves.items()}


def halves_of(size: int) -> dict[str, slice]:
    """Where the samples of each condition stand in a solution of both, ``size`` of each."""
    return {CLEAN: slice(0, size), SERVICE: slice(size, 2 * size)}


def _flat(value: Array, shape: tuple[int, ...]) -> Array:
    """An input as one row of samples; what is one number for all stays one number."""
    array = np.asarray(value, dtype=float)
    return array if array.ndim == 0 else np.ascontiguousarray(np.broadcast_to(array, shape)).ravel()


@dataclass
class _Joined:
    """The pieces of a solution put together in the samples' shape."""

    condition: str
    shape: tuple[int, ...]
    size: int
    values: dict[str, Array] = field(default_factory=dict)
    chosen: dict[str, Array] = field(default_factory=dict)
    marks: dict[str, Array] = field(default_factory=dict)
    jumps: dict[str, Array] = field(default_factory=dict)
    lower: dict[str, Array] = field(default_factory=dict)
    upper: dict[str, Array] = field(default_factory=dict)
    unknowns: dict[str, Array] = field(default_factory=dict)

    def take(self, engine: Engine, piece: slice, keep: Collection[str] | None) -> None:
        wanted = (
            engine.values
            if keep is None
            else {name: engine.values[name] for name in keep if name in engine.values}
        )
        for name, value in wanted.items():
            if isinstance(value, np.ndarray) and value.ndim:
                self._put(self.values, name, value, piece, np.nan)
            else:
                self.values[name] = value
        for name, value in engine.chosen.items():
            self._put(self.chosen, name, value, piece, 0)
        self._put(self.marks, "converged", engine.converged, piece, False)
        for name, (low, high) in engine.jump_sides.items():
            self._put(self.lower, name, low, piece, np.nan)
            self._put(self.upper, name, high, piece, np.nan)
            self._put(self.jumps, name, np.isfinite(low), piece, False)
        if keep is None or UNKNOWNS in keep:
            for number, row in enumerate(engine.unknowns()):
                self._put(self.unknowns, f"{number}", row, piece, np.nan)

    def _put(self, place: dict[str, Array], name: str, value: Array, piece: slice, absent: float) -> None:
        if name not in place:
            if len(value) == self.size:
                place[name] = value
                return
            place[name] = np.full(self.size, False if value.dtype == bool else absent, dtype=value.dtype)
        place[name][piece] = value

    def solution(self) -> Solution:
        sides = {
            name: (self._shaped(self.lower[name]), self._shaped(self.upper[name])) for name in self.lower
        }
        return Solution(
            self.condition,
            {name: self._shaped(value) for name, value in self.values.items()},
            {name: self._shaped(value) for name, value in self.chosen.items()},
            self._shaped(self.marks["converged"]),
            {name: self._shaped(value) for name, value in self.jumps.items()},
            sides,
            np.stack(list(self.unknowns.values())) if self.unknowns else None,
        )

    def _shaped(self, value: Array) -> Array:
        return value.reshape(self.shape) if isinstance(value, np.ndarray) and value.ndim else value


@dataclass(frozen=True)
class _Plan:
    """What is evaluated anew whenever the temperatures of an element move.

    ``wanted`` is the id of the result, ``steps`` lead to it from what moves (``following`` as they are best run),
    and ``outside`` are the ids that they take from what stays.
    """

    wanted: str
    steps: tuple[ChainStep, ...]
    following: tuple[ChainStep | Together, ...]
    outside: tuple[str, ...]


@dataclass(frozen=True)
class _Parted:
    """Ways to a film coefficient that act side by side: the steps that all take, then those of each alone."""

    common: tuple[ChainStep | Together, ...]
    rests: tuple[tuple[ChainStep | Together, ...], ...]
    own: tuple[tuple[ChainStep, ...], ...]

    @classmethod
    def of(cls, ways: Sequence[tuple[ChainStep, ...]]) -> _Parted:
        """Ways parted; a step of one id is the same in all of them."""
        ids = frozenset.intersection(*(frozenset(step.id for step in way) for way in ways))
        own = tuple(tuple(step for step in way if step.id not in ids) for way in ways)
        common = joined([step for step in ways[0] if step.id in ids])
        return cls(common, tuple(joined(rest) for rest in own), own)


class _Order:
    """Steps parted by what moves: those that stay ``still``, and those that are ``following``.

    ``follows`` are the ids of what moves and of the latter; ``together`` are they as they are best run.
    """

    def __init__(self, steps: tuple[ChainStep, ...], moving: tuple[str, ...]):
        # Kept as well, so that no other steps can stand where they stood.
        self.steps = steps
        follows, still, following = set(moving), [], []
        for step in steps:
            if follows.isdisjoint(step.inputs.values()):
                still.append(step)
            else:
                follows.add(step.id)
                following.append(step)
        self.follows = frozenset(follows)
        self.still, self.following = tuple(still), tuple(following)
        self.together = joined(following)
        self.plans: dict[str, _Plan] = {}

    def plan(self, wanted: str) -> _Plan:
        """The steps that lead to one figure."""
        plan = self.plans.get(wanted)
        if plan is None:
            needed = {wanted}
            for step in reversed(self.steps):
                if step.id in needed:
                    needed.update(step.inputs.values())
            steps = tuple(step for step in self.following if step.id in needed)
            outside = {bound for step in steps for bound in step.inputs.values()} - self.follows
            plan = self.plans[wanted] = _Plan(wanted, steps, joined(steps), tuple(sorted(outside)))
        return plan


class Engine:
    """One piece of samples on its way to the solution."""

    def __init__(
        self,
        chain: Chain,
        inputs: Mapping[str, Array],
        condition: str,
        forced: Mapping[str, Candidate],
        size: int,
    ):
        self.chain = chain
        self.forced = forced
        self.condition = condition
        self.size = size
        self.single = all(value.ndim == 0 for value in inputs.values())
        self.everything = np.arange(size)
        self.values: dict[str, Array] = dict(chain.constants)  # type: ignore[arg-type]
        self.values[SERVICE_FLAG] = np.asarray(float(condition != CLEAN))
        self.values.update(inputs)
        # Fins follow the coefficient of their film: outside they are closed after it and stand before it.
        follows = set(following_elements(chain, forced))
        moving = [
            element
            for element in chain.elements
            if element.name in follows or (isinstance(element, Layer) and element.film in follows)
        ]
        self.moving = sorted(moving, key=lambda element: _is_outer_fins(chain, element))
        # The number of a moving element; elements themselves are compared by all they hold, which takes long.
        self.numbers = {element.name: number for number, element in enumerate(self.moving)}
        self.foreign = any(
            isinstance(element, Group)
            and any(branch.reference != element.bulk for branch in element.branches)
            for element in chain.elements
        )
        self.plans: dict[str, _Plan] = {}
        self.choices: dict[str, Array] = {}
        self.areas: dict[str, Array] = {}
        self.chosen: dict[str, Array] = {}
        self.converged = np.ones(size, dtype=bool)
        self.held_choice: dict[str, Array] = {}
        self.held_value: dict[str, Array] = {}
        self.jump_sides: dict[str, tuple[Array, Array]] = {}

    # -- the whole way ------------------------------------------------------------------------------

    def solve(self, thorough: bool = True, start: Array | None = None) -> None:
        """Close the circuit and evaluate every step at the answer, into ``values``."""
        run(self.chain.steps, self.values)
        self._clean_deposits()
        self.areas = {
            element.name: self.full(self.chain.surfaces[element.surface].area)
            for element in self.chain.elements
        }
        if self.chain.has_temperatures:
            from calcbook.chain.closing import FEW_PASSES, MAXIMUM_PASSES, close

            self._fix()
            close(self, MAXIMUM_PASSES if thorough else FEW_PASSES, start)
        self.finish()
        if self.chain.has_temperatures:
            self._bracket_what_is_open(thorough)
        run(self.chain.circuit, self.values)

    def _bracket_what_is_open(self, thorough: bool) -> None:
        met = self._residual() <= RESIDUAL_TOLERANCE + 4.0 * self.resolution(self.drops, self.everything)
        open_samples = np.flatnonzero(~(self.converged & met))
        if not len(open_samples):
            return
        self.converged[open_samples] = False
        if not self.moving or not thorough:
            return
        from calcbook.chain.bracket import bracket

        self.converged[open_samples] = bracket(self, open_samples)
        self.finish()

    def unknowns(self) -> list[Array]:
        """Heat flow and drops of every sample, NaN where it is open; none where no temperatures are known."""
        if not self.chain.has_temperatures:
            return []
        return [np.where(self.converged, row, np.nan) for row in (self.flow, *self.drops)]

    def full(self, name: str) -> Array:
        """A figure for every sample."""
        return _spread(np.asarray(self.values[name], dtype=float), (self.size,))

    def at(self, name: str, samples: Array) -> Array:
        """A figure for some samples; what does not vary stays one number."""
        value = self.values[name]
        if not isinstance(value, np.ndarray) or value.ndim == 0 or len(samples) == self.size:
            return value
        return value[samples]

    def part(self, value: Array, samples: Array) -> Array:
        """Some samples of a row of all samples."""
        return value if len(samples) == self.size else value[samples]

    def _clean_deposits(self) -> None:
        in_service = self.values[SERVICE_FLAG]
        if in_service.ndim == 0 and in_service:
            return
        for element in self.chain.elements:
            if isinstance(element, Layer) and element.kind == "fouling":
                dirty = self.values[element.resistance] if in_service.ndim else 0.0
                self.values[element.resistance] = np.where(in_service, dirty, 0.0)

    def _fix(self) -> None:
        """Resistance in K/W of every element that does not follow its temperatures, and their sum."""
        self.fixed: dict[str, Array] = {}
        self.still = np.zeros(self.size)
        for element in self.chain.elements:
            if element.name in self.numbers:
                continue
            if isinstance(element, Layer):
                if element.film:
                    self._run_still_fins(element)
                resistance = self.full(element.resistance) / self.areas[element.name]
            else:
                total = np.zeros(self.size)
                for branch in element.branches:
                    total = total + self.film(element, branch, self.everything, None, None, False)[0]
                resistance = 1.0 / (total * self.areas[element.name])
            self.fixed[element.name] = resistance
            self.still = self.still + resistance
        self.difference = self.full(self.chain.inner.bulk) - self.full(self.chain.outer.bulk)
        self.flow = np.zeros(self.size)
        self.drops = np.zeros((len(self.moving), self.size))

    def _finned_group(self, fins: Layer) -> Group:
        """The group whose film has these fins."""
        return self.chain.inner if fins.film == self.chain.inner.name else self.chain.outer

    def _run_still_fins(self, fins: Layer) -> None:
        """Evaluate fins whose film and conductivity do not follow temperatures."""
        group = self._finned_group(fins)
        branch = group.branches[0]
        coefficient, _ = self.film(group, branch, self.everything, None, None, False)
        self.values[branch_coefficient(group, branch.name)] = self._as_input(coefficient)
        run(fins.steps, self.values)

    def resolution(self, drops: Array, samples: Array) -> Array:
        """How well the drops of films follow from temperatures, relative to the smallest of them."""
        if self.foreign:
            return np.zeros(len(samples))
        smallest = np.full(len(samples), np.inf)
        for element in self.moving:
            if isinstance(element, Group):
                smallest = np.minimum(smallest, np.abs(drops[self.numbers[element.name]]))
        return RESOLUTION * self.full(self.chain.inner.bulk)[samples] / smallest

    # -- plans --------------------------------------------------------------------------------------

    def _plan(self, wanted: str, steps: tuple[ChainStep, ...], moving: tuple[str, ...]) -> _Plan:
        """What leads from what moves to ``wanted``; the steps that stay are evaluated now."""
        plan = self.plans.get(wanted)
        if plan is None:
            order = self._stay(steps, moving)
            plan = self.plans[wanted] = order.plan(wanted)
        return plan

    def _stay(self, steps: tuple[ChainStep, ...], moving: tuple[str, ...]) -> _Order:
        """Evaluate the steps that do not follow what moves; returns which do."""
        order = self._order(steps, moving)
        waiting = [step for step in order.still if step.id not in self.values]
        if waiting:
            run(joined(waiting), self.values)
        return order

    def _order(self, steps: tuple[ChainStep, ...], moving: tuple[str, ...]) -> _Order:
        """Which steps follow what moves; the same in every solution of a chain."""
        key = (id(steps), moving)
        order: _Order | None = self.chain.memory.get(key)
        if order is None:
            order = self.chain.memory[key] = _Order(steps, moving)
        return order

    def _evaluated(
        self, plan: _Plan, samples: Array, given: Mapping[str, Array], wants_slopes: bool
    ) -> tuple[Array, dict[str, Array]]:
        """The wanted figure of a plan on some samples, and its slopes in what is given."""
        count = (len(samples),)
        if not plan.following:
            return _spread(np.asarray(self.at(plan.wanted, samples), dtype=float), count), {}
        values = {name: self.at(name, samples) for name in plan.outside}
        values.update(given)
        if len(samples) == 1:
            # A single figure goes another way through the relations, in which it takes less time.
            values = {name: _figure(value) for name, value in values.items()}
        slopes: Slopes | None = {name: {name: ONE} for name in given} if wants_slopes else None
        run(plan.following, values, slopes)
        carried = slopes.get(plan.wanted, {}) if slopes is not None else {}
        return (
            _spread(values[plan.wanted], count),
            {name: _spread(slope, count) for name, slope in carried.items()},
        )

    # -- one film -----------------------------------------------------------------------------------

    def film(
        self,
        group: Group,
        branch: Branch,
        samples: Array,
        surface: Array | None,
        flux: Array | None,
        wants_slopes: bool,
    ) -> tuple[Array, dict[str, Array]]:
        """Film coefficient of a branch on some samples, with its slopes in surface temperature and flux.

        ``surface`` and ``flux`` are None where no temperatures are known.
        """
        given = _given(group, surface, flux)
        choice = self.choice(group, branch, samples, given)
        methods = numbers_in(choice)
        if len(methods) == 1:
            plan = self._plan_of(group, branch, methods[0])
            coefficient, slopes = self._evaluated(plan, samples, given, wants_slopes)
        else:
            plans = [self._plan_of(group, branch, method) for method in methods]
            masks = [choice == method for method in methods]
            coefficient, slopes = self._side_by_side(plans, masks, samples, given, wants_slopes)
        held = self.held_value.get(branch.name)
        if held is None:
            return coefficient, slopes
        is_held = np.isfinite(held[samples])
        slopes = {name: np.where(is_held, 0.0, slope) for name, slope in slopes.items()}
        return np.where(is_held, held[samples], coefficient), slopes

    def _plan_of(self, group: Group, branch: Branch, method: int) -> _Plan:
        candidate = self.forced.get(branch.name) or branch.candidates[method]
        return self._plan(candidate.coefficient, candidate.steps, _moving(group))

    def _side_by_side(
        self,
        plans: list[_Plan],
        masks: list[Array],
        samples: Array,
        given: Mapping[str, Array],
        wants_slopes: bool,
    ) -> tuple[Array, dict[str, Array]]:
        """As ``_evaluated``, each plan for the samples of its mask; what they have in common for all at once."""
        parted = self._parted([plan.steps for plan in plans])
        values = {name: self.at(name, samples) for plan in plans for name in plan.outside or (plan.wanted,)}
        values.update(given)
        slopes: Slopes | None = {name: {name: ONE} for name in given} if wants_slopes else None
        run(parted.common, values, slopes)
        result = np.full(len(samples), np.nan)
        found: dict[str, Array] = {}
        for plan, mask, rest in zip(plans, masks, parted.rests, strict=True):
            part = {name: _chosen(value, mask) for name, value in values.items()}
            carried: Slopes | None = None
            if slopes is not None:
                carried = {
                    name: {seed: _chosen(slope, mask) for seed, slope in row.items()}
                    for name, row in slopes.items()
                }
            run(rest, part, carried)
            result[mask] = part[plan.wanted]
            for name, slope in (carried or {}).get(plan.wanted, {}).items():
                found.setdefault(name, np.zeros(len(samples)))[mask] = slope
        return result, found

    def _parted(self, ways: list[tuple[ChainStep, ...]]) -> _Parted:
        """What ways have in common; the same in every solution of a chain."""
        # Plans and orders keep the ways, so that no others can stand where they stood.
        key = ("parted", *map(id, ways))
        parted: _Parted | None = self.chain.memory.get(key)
        if parted is None:
            parted = self.chain.memory[key] = _Parted.of(ways)
        return parted

    def choice(self, group: Group, branch: Branch, samples: Array, given: Mapping[str, Array]) -> Array:
        """The number of the candidate that acts, for each of some samples."""
        if branch.name in self.choices:
            choice = self.choices[branch.name][samples]
        elif branch.name in self.forced or not branch.choice:
            return np.zeros(len(samples), dtype=int)
        else:
            choice = self._choose(group, branch, samples, given)
        held = self.held_choice.get(branch.name)
        return choice if held is None else np.where(held[samples] >= 0, held[samples], choice)

    def _choose(self, group: Group, branch: Branch, samples: Array, given: Mapping[str, Array]) -> Array:
        order = self._stay(branch.choice_steps, _moving(group))
        inputs = {bound for row in branch.choice for bound in row.inputs.values()}
        if not inputs & order.follows:
            self.choices[branch.name] = self._rows(branch, self.values, self.size)
            return self.choices[branch.name][samples]
        outside = {bound for step in order.following for bound in step.inputs.values()} | inputs
        values = {name: self.at(name, samples) for name in outside if name not in order.follows}
        values.update(given)
        run(order.together, values)
        return self._rows(branch, values, len(samples))

    def _rows(self, branch: Branch, values: Mapping[str, Array], count: int) -> Array:
        """The first row of a choice table that holds, for each sample."""
        choice = np.full(count, len(branch.candidates) - 1)
        undecided = np.ones(count, dtype=bool)
        for row in branch.choice:
            holds = np.ones(count, dtype=bool)
            if row.relation is not None:
                arguments = {symbol: values[bound] for symbol, bound in row.inputs.items()}
                holds = np.broadcast_to(evaluate(row.relation, arguments), (count,)).astype(bool)
            choice[undecided & holds] = row.candidate
            undecided &= ~holds
        return choice

    # -- what the moving elements carry -------------------------------------------------------------

    def carried(
        self, number: int, drops: Array, flow: Array, samples: Array, wants_slopes: bool = False
    ) -> tuple[Array, dict[int, Array], Array]:
        """Heat flow of one moving element at its drop; slopes by drops (by number) and by the heat flow."""
        element = self.moving[number]
        area = self.part(self.areas[element.name], samples)
        if isinstance(element, Group):
            return self._carried_by_films(element, number, drops, flow, samples, area, wants_slopes)
        if element.film:
            return self._carried_by_fins(element, number, drops, flow, samples, area, wants_slopes)
        return self._carried_by_wall(element, number, drops, flow, samples, area, wants_slopes)

    def _carried_by_films(
        self,
        group: Group,
        number: int,
        drops: Array,
        flow: Array,
        samples: Array,
        area: Array,
        wants_slopes: bool,
    ) -> tuple[Array, dict[int, Array], Array]:
        sign = outward(group)
        drop = drops[number]
        bulk = self.at(group.bulk, samples)
        total, by_drop, by_flow = np.zeros(len(samples)), np.zeros(len(samples)), np.zeros(len(samples))
        for branch in group.branches:
            coefficient, slopes = self.film(
                group, branch, samples, bulk + sign * drop, np.abs(flow) / area, wants_slopes
            )
            driving = (
                drop
                if branch.reference == group.bulk
                else drop + sign * (bulk - self.at(branch.reference, samples))
            )
            total = total + coefficient * area * driving
            if wants_slopes:
                by_drop = by_drop + coefficient * area
                if group.surface_temperature in slopes:
                    by_drop = by_drop + slopes[group.surface_temperature] * (sign * area * driving)
                if group.flux in slopes:
                    by_flow = by_flow + slopes[group.flux] * np.sign(flow) * driving
        return total, {number: by_drop}, by_flow

    def _carried_by_wall(
        self,
        wall: Layer,
        number: int,
        drops: Array,
        flow: Array,
        samples: Array,
        area: Array,
        wants_slopes: bool,
    ) -> tuple[Array, dict[int, Array], Array]:
        first, before, resistance_before = self._before(wall, drops, flow, samples)
        plan = self._plan(wall.resistance, wall.steps, (wall.first_temperature, wall.second_temperature))
        given = {wall.first_temperature: first, wall.second_temperature: first - drops[number]}
        resistance, slopes = self._evaluated(plan, samples, given, wants_slopes)
        total = drops[number] * area / resistance
        if not wants_slopes:
            return total, {}, total
        zero = np.zeros(len(samples))
        by_second = -total / resistance * slopes.get(wall.second_temperature, zero)
        by_level = by_second - total / resistance * slopes.get(wall.first_temperature, zero)
        by_drop = {earlier: -by_level for earlier in before}
        by_drop[number] = area / resistance - by_second
        return total, by_drop, -by_level * resistance_before

    def _carried_by_fins(
        self,
        fins: Layer,
        number: int,
        drops: Array,
        flow: Array,
        samples: Array,
        area: Array,
        wants_slopes: bool,
    ) -> tuple[Array, dict[int, Array], Array]:
        group = self._finned_group(fins)
        branch, held = group.branches[0], branch_coefficient(group, group.branches[0].name)
        sign, film = outward(group), self.numbers.get(group.name)
        surface = flux = None
        if film is not None:
            surface, flux = self.at(group.bulk, samples) + sign * drops[film], np.abs(flow) / area
        coefficient, film_slopes = self.film(group, branch, samples, surface, flux, wants_slopes)
        first, before, resistance_before = self._before(fins, drops, flow, samples)
        given = {held: coefficient}
        if fins.first_temperature:
            given |= {fins.first_temperature: first, fins.second_temperature: first - drops[number]}
        plan = self._plan(fins.resistance, fins.steps, tuple(given))
        resistance, slopes = self._evaluated(plan, samples, given, wants_slopes)
        total = drops[number] * area / resistance
        if not wants_slopes:
            return total, {}, total
        zero = np.zeros(len(samples))
        by_coefficient = -total / resistance * slopes.get(held, zero)
        by_second = -total / resistance * slopes.get(fins.second_temperature, zero)
        by_level = by_second - total / resistance * slopes.get(fins.first_temperature, zero)
        by_drop = {earlier: -by_level for earlier in before}
        by_drop[number] = area / resistance - by_second
        by_flow = -by_level * resistance_before
        if film is not None:
            by_surface = film_slopes.get(group.surface_temperature, zero)
            by_drop[film] = by_drop.get(film, zero) + by_coefficient * by_surface * sign
            by_flow = by_flow + by_coefficient * film_slopes.get(group.flux, zero) * np.sign(flow) / area
        return total, by_drop, by_flow

    def _before(
        self, wall: Layer, drops: Array, flow: Array, samples: Array
    ) -> tuple[Array, list[int], Array]:
        """Temperature on the inner side of a wall: the inner bulk less every drop before it.

        Also the numbers of the moving elements before it, and the resistance of the others.
        """
        temperature = _spread(
            np.asarray(self.at(self.chain.inner.bulk, samples), dtype=float), (len(samples),)
        )
        numbers: list[int] = []
        resistance = np.zeros(len(samples))
        for element in self.chain.elements:
            if element.name == wall.name:
                break
            if element.name in self.numbers:
                numbers.append(self.numbers[element.name])
                temperature = temperature - drops[numbers[-1]]
            else:
                resistance = resistance + self.part(self.fixed[element.name], samples)
        return temperature - flow * resistance, numbers, resistance

    # -- finishing ----------------------------------------------------------------------------------

    def finish(self) -> None:
        """Evaluate everything at the answer, so that every step stands in the values."""
        if self.chain.has_temperatures:
            self.values["solution/Q"] = self._as_input(self.flow)
        for group in (self.chain.inner, self.chain.outer):
            if self.chain.has_temperatures:
                drop = self._drop(group)
                self.values[group.surface_temperature] = self._as_input(
                    self.full(group.bulk) + outward(group) * drop
                )
                self.values[group.flux] = self._as_input(np.abs(self.flow) / self.areas[group.name])
            for branch in group.branches:
                self._finish_film(group, branch)
        for element in self.chain.elements:
            if not isinstance(element, Layer):
                continue
            if element.first_temperature:
                first, _, _ = self._before(element, self.drops, self.flow, self.everything)
                self.values[element.first_temperature] = self._as_input(first)
                self.values[element.second_temperature] = self._as_input(first - self._drop(element))
            if element.first_temperature or element.film:
                run(element.steps, self.values)
            for way in element.gap.ways if element.gap is not None else ():
                if way.choice:
                    self.chosen[way.name] = self._rows(way, self.values, self.size)

    def _drop(self, element: Group | Layer) -> Array:
        if element.name in self.numbers:
            return self.drops[self.numbers[element.name]]
        return self.flow * self.fixed[element.name]

    def _finish_film(self, group: Group, branch: Branch) -> None:
        self._run_following(branch.choice_steps, group)
        given = {name: self.values[name] for name in _moving(group) if name in self.values}
        choice = self.choice(group, branch, self.everything, given)
        if branch.name not in self.forced:
            self.chosen[branch.name] = choice
        if (choice == choice[0]).all():
            candidate = self.forced.get(branch.name) or branch.candidates[int(choice[0])]
            self._run_following(candidate.steps, group)
            coefficient = self.values[candidate.coefficient]
        else:
            coefficient = self._finish_side_by_side(group, branch, choice)
        held = self.held_value.get(branch.name)
        if held is not None:
            coefficient = self._as_input(np.where(np.isfinite(held), held, coefficient))
        self.values[branch_coefficient(group, branch.name)] = coefficient

    def _run_following(self, steps: tuple[ChainStep, ...], group: Group) -> None:
        run(self._stay(steps, _moving(group)).together, self.values)

    def _finish_side_by_side(self, group: Group, branch: Branch, choice: Array) -> Array:
        """Evaluate every method for the samples that chose it; its own figures are NaN for the others."""
        coefficient = np.full(self.size, np.nan)
        shared = {step.id for step in branch.choice_steps}
        gathered: dict[str, Array] = {}
        methods = numbers_in(choice)
        candidates = [branch.candidates[method] for method in methods]
        orders = [self._stay(candidate.steps, _moving(group)) for candidate in candidates]
        parted = self._parted([order.following for order in orders])
        run(parted.common, self.values)
        for method, candidate, rest, own in zip(methods, candidates, parted.rests, parted.own, strict=True):
            samples = np.flatnonzero(choice == method)
            names = {bound for step in own for bound in step.inputs.values()} | {candidate.coefficient}
            part = {name: self.at(name, samples) for name in names if name in self.values}
            run(rest, part)
            coefficient[samples] = part[candidate.coefficient]
            for step in own:
                if step.id in shared:
                    continue
                value = np.asarray(part[step.id])
                if step.id not in gathered:
                    gathered[step.id] = np.full(self.size, False if value.dtype == bool else np.nan)
                gathered[step.id][samples] = value
        self.values.update(gathered)
        return coefficient

    def _residual(self) -> Array:
        """Largest relative residual of the laws and of the summed drops, from the finished figures."""
        worst = np.zeros(self.size)
        summed, whole = self.flow * self.still - self.difference, np.abs(self.flow * self.still)
        for element in self.moving:
            drop = self._drop(element)
            summed, whole = summed + drop, whole + np.abs(drop)
            flow, weight = self._finished_flow(element, drop)
            worst = np.maximum(worst, _relative(flow - self.flow, np.maximum(weight, np.abs(self.flow))))
        worst = np.maximum(worst, _relative(summed, whole))
        return np.where(np.isfinite(worst) & np.isfinite(self.flow), worst, np.inf)

    def _finished_flow(self, element: Group | Layer, drop: Array) -> tuple[Array, Array]:
        """Heat flow of a moving element from its finished figures, and its branches' flows without sign."""
        area = self.areas[element.name]
        if isinstance(element, Layer):
            flow = drop * area / self.full(element.resistance)
            return flow, np.abs(flow)
        total, weight = np.zeros(self.size), np.zeros(self.size)
        surface, sign = self.full(element.surface_temperature), outward(element)
        for branch in element.branches:
            driving = (
                drop if branch.reference == element.bulk else sign * (surface - self.full(branch.reference))
            )
            flow = self.full(branch_coefficient(element, branch.name)) * area * driving
            total, weight = total + flow, weight + np.abs(flow)
        return total, weight

    def _as_input(self, value: Array) -> Array:
        """A figure of the solution as steps take it: 0-d for a single record."""
        return value.reshape(()) if self.single else value


def numbers_in(choice: Array) -> list[int]:
    """The different numbers of a row of choices, in order."""
    return np.flatnonzero(np.bincount(choice.ravel())).tolist()


def outward(group: Group) -> float:
    """The sign with which the surface temperature follows a drop: inside it falls, outside it rises."""
    return -1.0 if group.side == "inside" else 1.0


def _is_outer_fins(chain: Chain, element: Group | Layer) -> bool:
    return isinstance(element, Layer) and element.film == chain.outer.name


def _moving(group: Group) -> tuple[str, str]:
    return (group.surface_temperature, group.flux)


def _given(group: Group, surface: Array | None, flux: Array | None) -> dict[str, Array]:
    if surface is None or flux is None:
        return {}
    return {group.surface_temperature: surface, group.flux: flux}


def _spread(value: Array, shape: tuple[int, ...]) -> Array:
    """A figure for every sample; one that is laid out for them already is itself."""
    if value.shape == shape:
        return value
    return value.reshape(shape) if shape == (1,) else np.broadcast_to(value, shape)


def _chosen(value: Any, mask: Array) -> Any:
    """The samples of a mask; what does not vary stays one figure."""
    return value[mask] if isinstance(value, np.ndarray) and value.ndim else value


def _figure(value: Any) -> Any:
    """A row of one sample as a figure without a row."""
    return value.reshape(()) if isinstance(value, np.ndarray) else value


def _relative(residual: Array, scale: Array) -> Array:
    return np.where(residual == 0.0, 0.0, np.abs(residual) / scale)
