"""The engine: all drops of temperature solved together, on arrays, each sample to its own convergence.

Unknowns are the heat flow Q and one temperature drop per element whose resistance follows its own
temperatures. Where every branch refers to its own fluid, ln Q and ln |drop| are iterated: a power law is
then met in one pass. Residuals and their derivatives come from the relations' own trees. A sample is
frozen at its own convergence, so its answer does not depend on its neighbours. Stragglers are bracketed
in Q, where the summed drop rises with Q.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from calcbook.chain.build import follows_temperature
from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.types import CLEAN, Branch, Candidate, Chain, ChainStep, Element, Group, Layer
from calcbook.formulas import evaluate
from calcbook.library.operations import Slopes, carry, run

Array = np.ndarray
MAXIMUM_PASSES = 80
STEP_TOLERANCE = 1e-13
LARGEST_LOG_STEP = 2.0
RESIDUAL_TOLERANCE = 1e-9


@dataclass
class Solution:
    """The figures of one condition: every step by id, which method each film used, and what did not close.

    ``values`` hold arrays of the samples' shape (0-d for a record). ``chosen`` is the candidate of each
    branch per sample. ``converged`` is False for a sample without an answer; ``jump`` names, per group, the
    samples whose law has no root at a joint.
    """

    condition: str
    values: dict[str, Array]
    chosen: dict[str, Array]
    converged: Array
    jumps: dict[str, Array] = field(default_factory=dict)
    jump_sides: dict[str, tuple[Array, Array]] = field(default_factory=dict)

    def number(self, name: str) -> float:
        """One figure of a single record."""
        return float(np.asarray(self.values[name]).ravel()[0])


def solve(chain: Chain, inputs: Mapping[str, Array], condition: str,
          forced: Mapping[str, Candidate] | None = None) -> Solution:
    """Solve a chain for one condition on SI arrays of its inputs (by id, broadcast together).

    ``forced`` puts a candidate in place of a film's own choice, for the cross-check.
    """
    return _Engine(chain, inputs, condition, forced or {}).solve()


class _Engine:
    def __init__(self, chain: Chain, inputs: Mapping[str, Array], condition: str, forced: Mapping[str, Candidate]):
        self.chain = chain
        self.forced = forced
        self.condition = condition
        self.shape = np.broadcast_shapes(*(np.shape(value) for value in inputs.values()))
        self.size = int(np.prod(self.shape, dtype=int))
        self.values: dict[str, Array] = dict(chain.constants)  # type: ignore[arg-type]
        for name, value in inputs.items():
            array = np.asarray(value, dtype=float)
            self.values[name] = array if array.ndim == 0 else np.ascontiguousarray(
                np.broadcast_to(array, self.shape)).ravel()
        self.slopes: Slopes = {}
        self.splits: dict[tuple[str, int], tuple[tuple[ChainStep, ...], tuple[ChainStep, ...]]] = {}
        self.moving = [element for element in chain.elements if follows_temperature(element)]
        self.foreign = any(isinstance(element, Group) and any(branch.reference != element.bulk for branch in element.branches)
                           for element in chain.elements)
        self.chosen: dict[str, Array] = {}
        self.jumps: dict[str, Array] = {}
        self.jump_sides: dict[str, tuple[Array, Array]] = {}

    # -- the whole way ------------------------------------------------------------------------------

    def solve(self) -> Solution:
        run(self.chain.steps, self.values)
        self._fixed_resistances()
        converged = np.ones(self.size, dtype=bool)
        if self.chain.has_temperatures:
            converged = self._close()
        else:
            self._without_temperatures()
        self._finish()
        run(self.chain.circuit, self.values)
        values = {name: self._shaped(value) for name, value in self.values.items()}
        chosen = {name: self._shaped(value) for name, value in self.chosen.items()}
        return Solution(self.condition, values, chosen, self._shaped(converged), self.jumps, self.jump_sides)

    def _shaped(self, value: Array) -> Array:
        """An array in the samples' shape; what does not vary and what is no array stays as it is."""
        if not isinstance(value, np.ndarray) or value.ndim == 0:
            return value
        return value.reshape(self.shape)

    def _full(self, name: str) -> Array:
        return np.broadcast_to(np.asarray(self.values[name], dtype=float), (self.size,))

    # -- resistances that do not move ---------------------------------------------------------------

    def _fixed_resistances(self) -> None:
        """Resistance in K/W of every element that does not follow its temperatures."""
        self.fixed: dict[str, Array] = {}
        for element in self.chain.elements:
            area = self._full(self.chain.surfaces[element.surface].area)
            if isinstance(element, Layer):
                if element.kind == "fouling" and self.condition == CLEAN:
                    self.values[element.resistance] = np.asarray(0.0)
                if element not in self.moving:
                    self.fixed[element.name] = self._full(element.resistance) / area
            elif element not in self.moving:
                self.fixed[element.name] = 1.0 / (self._group_sum(element) * area)

    def _group_sum(self, group: Group) -> Array:
        total = np.zeros(self.size)
        for branch in group.branches:
            total = total + self._film(group, branch, np.arange(self.size), self.values, self.slopes)[0]
        return total

    def _without_temperatures(self) -> None:
        for group in (self.chain.inner, self.chain.outer):
            for branch in group.branches:
                self._film(group, branch, np.arange(self.size), self.values, self.slopes)

    # -- one film -----------------------------------------------------------------------------------

    def _film(self, group: Group, branch: Branch, samples: Array, values: dict[str, Array], slopes: Slopes
              ) -> tuple[Array, dict[str, Array]]:
        """Film coefficient of a branch on some samples, with its derivatives; marks the method chosen.

        ``values`` are those of the samples only; every step that is evaluated is written into them.
        """
        if branch.name in self.forced:
            return self._evaluated(group, self.forced[branch.name], samples, values, slopes)
        choice = self._choice(group, branch, samples, values, slopes)
        whole = self.chosen.setdefault(branch.name, np.zeros(self.size, dtype=int))
        whole[samples] = choice
        methods = np.unique(choice)
        if len(methods) == 1:
            return self._evaluated(group, branch.candidates[int(methods[0])], samples, values, slopes)
        result = np.full(len(samples), np.nan)
        gathered: dict[str, Array] = {}
        before = dict(values)
        for method in methods:
            mask = choice == method
            part_values, part_slopes = _taken(before, mask), _taken_slopes(slopes, mask)
            part, part_gathered = self._evaluated(group, branch.candidates[int(method)], samples[mask], part_values,
                                                  part_slopes)
            result[mask] = part
            for seed, slope in part_gathered.items():
                gathered.setdefault(seed, np.zeros(len(samples)))[mask] = slope
            _put_back(values, before, part_values, mask)
        return result, gathered

    def _choice(self, group: Group, branch: Branch, samples: Array, values: dict[str, Array], slopes: Slopes) -> Array:
        count = len(samples)
        if not branch.choice:
            return np.zeros(count, dtype=int)
        choice = np.full(count, len(branch.candidates) - 1)
        self._run(group, branch.choice_steps, samples, values, slopes)
        undecided = np.ones(count, dtype=bool)
        for row in branch.choice:
            holds = np.ones(count, dtype=bool)
            if row.relation is not None:
                arguments = {symbol: values[bound] for symbol, bound in row.inputs.items()}
                holds = np.broadcast_to(evaluate(row.relation, arguments), (count,)).astype(bool)
            choice[undecided & holds] = row.candidate
            undecided &= ~holds
        return choice

    def _evaluated(self, group: Group, candidate: Candidate, samples: Array, values: dict[str, Array], slopes: Slopes
                   ) -> tuple[Array, dict[str, Array]]:
        self._run(group, candidate.steps, samples, values, slopes)
        count = (len(samples),)
        coefficient = np.broadcast_to(np.asarray(values[candidate.coefficient], dtype=float), count)
        carried = slopes.get(candidate.coefficient, {})
        return coefficient, {seed: np.broadcast_to(slope, count) for seed, slope in carried.items()}

    def _run(self, group: Group, steps: tuple[ChainStep, ...], samples: Array, values: dict[str, Array], slopes: Slopes
             ) -> None:
        """Evaluate the steps that are not there yet; what does not follow the surface is kept for the next pass."""
        still, following = self._split(group, steps)
        for step in still:
            if step.id not in values:
                if step.id not in self.values:
                    run([step], self.values)
                whole = self.values[step.id]
                values[step.id] = whole if np.ndim(whole) == 0 or len(samples) == self.size else whole[samples]
        for step in following:
            if step.id in values:
                continue
            arguments = {local: values[bound] for local, bound in step.inputs.items()}
            value = step.operation.value(arguments)
            values[step.id] = value
            carried = carry(step, arguments, value, slopes)
            if carried:
                slopes[step.id] = carried

    def _split(self, group: Group, steps: tuple[ChainStep, ...]) -> tuple[tuple[ChainStep, ...], tuple[ChainStep, ...]]:
        """Steps that stay while the surface temperature is sought, and steps that follow it."""
        key = (group.name, id(steps))
        if key not in self.splits:
            moving = {group.surface_temperature, group.flux}
            for step in steps:
                if any(bound in moving for bound in step.inputs.values()):
                    moving.add(step.id)
            self.splits[key] = (tuple(step for step in steps if step.id not in moving),
                                tuple(step for step in steps if step.id in moving))
        return self.splits[key]

    # -- closing ------------------------------------------------------------------------------------

    def _close(self) -> Array:
        """Find Q and the drops; returns which samples converged."""
        inside, outside = self._full(self.chain.inner.bulk), self._full(self.chain.outer.bulk)
        self.difference = inside - outside
        self.still = np.zeros(self.size)
        for resistance in self.fixed.values():
            self.still = self.still + resistance
        count = len(self.moving)
        self.drops = np.zeros((count, self.size))
        self.flow = np.zeros(self.size)
        if not self.moving:
            self.flow = self.difference / self.still
            return np.isfinite(self.flow)
        self.sign = np.where(self.difference < 0.0, -1.0, 1.0)
        idle = (self.difference == 0.0) & (not self.foreign)
        samples = np.flatnonzero(~idle)
        converged = idle.copy()
        if len(samples):
            converged[samples] = self._newton(samples)
        stragglers = np.flatnonzero(~converged)
        if len(stragglers):
            from calcbook.chain.bracket import bracket

            converged[stragglers] = bracket(self, stragglers)
        return converged & np.isfinite(self.flow)

    def _start(self, samples: Array) -> Array:
        """First values: every moving element takes an equal share of the difference."""
        count = len(self.moving)
        share = np.abs(self.difference[samples]) / (count + 1)
        if self.foreign:
            share = np.maximum(share, 1.0)
        drops = np.tile(share, (count, 1))
        flow, _, _ = self._responses(drops * self.sign[samples], np.ones(len(samples)), samples)
        with np.errstate(all="ignore"):
            first = np.abs(flow[0])
        first = np.where(np.isfinite(first) & (first > 0.0), first, np.abs(self.difference[samples]) + 1.0)
        start = np.vstack([first, drops])
        return start * self.sign[samples] if self.foreign else np.log(start)

    def _newton(self, samples: Array) -> Array:
        """Joint Newton on the samples; writes flow and drops; returns which converged."""
        unknown = self._start(samples)
        active = np.arange(len(samples))
        done = np.zeros(len(samples), dtype=bool)
        for _ in range(MAXIMUM_PASSES):
            if not len(active):
                break
            step = self._newton_step(unknown[:, active], samples[active])
            good = np.isfinite(step).all(axis=0)
            step = np.where(good, step, 0.0)
            if not self.foreign:
                step = np.clip(step, -LARGEST_LOG_STEP, LARGEST_LOG_STEP)
            unknown[:, active] += step
            size = np.abs(step) if not self.foreign else np.abs(step) / np.maximum(np.abs(unknown[:, active]), 1e-30)
            settled = (size <= STEP_TOLERANCE).all(axis=0) & good
            done[active[settled]] = True
            active = active[~settled & good]
        flow, drops = self._actual(unknown, samples)
        self.flow[samples] = flow
        self.drops[:, samples] = drops
        # A step may stall at the last bits without reaching the tolerance: the residual then decides.
        residual = self._closing(flow, drops, samples)
        return done | (residual <= RESIDUAL_TOLERANCE * 1e-3)

    def _actual(self, unknown: Array, samples: Array) -> tuple[Array, Array]:
        if self.foreign:
            return unknown[0], unknown[1:]
        actual = np.exp(unknown) * self.sign[samples]
        return actual[0], actual[1:]

    def _closing(self, flow: Array, drops: Array, samples: Array) -> Array:
        """Largest relative residual of the laws and of the summed drops."""
        responses, _, _ = self._responses(drops, flow, samples)
        with np.errstate(all="ignore"):
            laws = np.abs(responses / flow - 1.0).max(axis=0)
            summed = np.abs(drops.sum(axis=0) + flow * self.still[samples] - self.difference[samples])
            scale = np.abs(drops).sum(axis=0) + np.abs(flow) * self.still[samples]
            worst = np.maximum(laws, summed / scale)
        return np.where(np.isfinite(worst), worst, np.inf)

    def _newton_step(self, unknown: Array, samples: Array) -> Array:
        flow, drops = self._actual(unknown, samples)
        responses, by_drop, by_flow = self._responses(drops, flow, samples)
        count = len(self.moving)
        jacobian = np.zeros((len(samples), count + 1, count + 1))
        residual = np.zeros((len(samples), count + 1))
        with np.errstate(all="ignore"):
            if self.foreign:
                residual[:, 0] = drops.sum(axis=0) + flow * self.still[samples] - self.difference[samples]
                jacobian[:, 0, 0] = self.still[samples]
                jacobian[:, 0, 1:] = 1.0
                residual[:, 1:] = (responses - flow).T
                jacobian[:, 1:, 0] = (by_flow - 1.0).T
                jacobian[:, 1:, 1:] = by_drop.transpose(2, 0, 1)
            else:
                scale = self.difference[samples]
                residual[:, 0] = (drops.sum(axis=0) + flow * self.still[samples]) / scale - 1.0
                jacobian[:, 0, 0] = flow * self.still[samples] / scale
                jacobian[:, 0, 1:] = (drops / scale).T
                residual[:, 1:] = np.log(responses / flow).T
                jacobian[:, 1:, 0] = (by_flow * flow / responses - 1.0).T
                jacobian[:, 1:, 1:] = (by_drop * drops[None, :, :] / responses[:, None, :]).transpose(2, 0, 1)
        return _solved(jacobian, -residual).T

    # -- responses ----------------------------------------------------------------------------------

    def _responses(self, drops: Array, flow: Array, samples: Array) -> tuple[Array, Array, Array]:
        """Heat flow that each moving element carries at its drop; derivatives by every drop and by Q."""
        count = len(self.moving)
        responses = np.zeros((count, len(samples)))
        by_drop = np.zeros((count, count, len(samples)))
        by_flow = np.zeros((count, len(samples)))
        values, slopes = self._local(samples)
        for index, element in enumerate(self.moving):
            response, gathered = self.response(element, index, drops, flow, samples, values, slopes)
            responses[index] = response
            for seed, slope in gathered.items():
                if seed == "Q":
                    by_flow[index] = slope
                elif seed.startswith("drop "):
                    by_drop[index, int(seed[5:])] = slope
        return responses, by_drop, by_flow

    def _local(self, samples: Array) -> tuple[dict[str, Array], Slopes]:
        """The figures of some samples; what does not vary is shared, not copied."""
        whole = len(samples) == self.size
        values = {
            name: value if not isinstance(value, np.ndarray) or value.ndim == 0 or whole else value[samples]
            for name, value in self.values.items()
        }
        return values, dict(self.slopes)

    def response(self, element: Element, index: int, drops: Array, flow: Array, samples: Array,
                 values: dict[str, Array], slopes: Slopes) -> tuple[Array, dict[str, Array]]:
        """Heat flow of one moving element and its derivatives by the seeds `drop <index>` and `Q`."""
        area = self._full(self.chain.surfaces[element.surface].area)[samples]
        if isinstance(element, Layer):
            return self._wall_response(element, index, drops, flow, samples, values, slopes, area)
        return self._group_response(element, index, drops, flow, samples, values, slopes, area)

    def _group_response(self, group: Group, index: int, drops: Array, flow: Array, samples: Array,
                        values: dict[str, Array], slopes: Slopes, area: Array) -> tuple[Array, dict[str, Array]]:
        seed = f"drop {index}"
        outward = -1.0 if group.side == "inside" else 1.0
        drop = drops[index]
        bulk = np.broadcast_to(np.asarray(values[group.bulk], dtype=float), (len(samples),))
        values[group.surface_temperature] = bulk + outward * drop
        values[group.flux] = np.abs(flow) / area
        slopes[group.surface_temperature] = {seed: np.full(len(samples), outward)}
        slopes[group.flux] = {"Q": np.sign(flow) / area}
        total = np.zeros(len(samples))
        gathered: dict[str, Array] = {}
        for branch in group.branches:
            coefficient, by_seed = self._film(group, branch, samples, values, slopes)
            values[branch_coefficient(group, branch.name)] = coefficient
            driving = drop
            if branch.reference != group.bulk:
                reference = np.asarray(values[branch.reference], dtype=float)
                driving = drop - outward * (reference - bulk)
            total = total + coefficient * area * driving
            for name, slope in by_seed.items():
                gathered[name] = gathered.get(name, 0.0) + slope * area * driving
            gathered[seed] = gathered.get(seed, 0.0) + coefficient * area
        return total, gathered

    def _wall_response(self, wall: Layer, index: int, drops: Array, flow: Array, samples: Array,
                       values: dict[str, Array], slopes: Slopes, area: Array) -> tuple[Array, dict[str, Array]]:
        first, by_seed = self._temperature_before(wall, drops, flow, samples, values)
        seed = f"drop {index}"
        values[wall.first_temperature] = first
        values[wall.second_temperature] = first - drops[index]
        slopes[wall.first_temperature] = by_seed
        after = dict(by_seed)
        after[seed] = after.get(seed, 0.0) - np.ones(len(samples))
        slopes[wall.second_temperature] = after
        self._run_wall(wall, values, slopes)
        resistance = np.asarray(values[wall.resistance], dtype=float) / area
        response = drops[index] / resistance
        gathered = {name: -response * slope / (resistance * area)
                    for name, slope in slopes.get(wall.resistance, {}).items()}
        gathered[seed] = gathered.get(seed, 0.0) + 1.0 / resistance
        return response, gathered

    def _run_wall(self, wall: Layer, values: dict[str, Array], slopes: Slopes) -> None:
        for step in wall.steps:
            arguments = {local: values[bound] for local, bound in step.inputs.items()}
            values[step.id] = step.operation.value(arguments)
            carried = carry(step, arguments, values[step.id], slopes)
            if carried:
                slopes[step.id] = carried

    def _temperature_before(self, wall: Layer, drops: Array, flow: Array, samples: Array, values: dict[str, Array]
                            ) -> tuple[Array, dict[str, Array]]:
        """Temperature on the inner side of an element: the inner bulk less every drop before it."""
        temperature = np.broadcast_to(np.asarray(values[self.chain.inner.bulk], dtype=float), (len(samples),)).copy()
        by_seed: dict[str, Array] = {}
        for element in self.chain.elements:
            if element is wall:
                break
            if element in self.moving:
                place = self.moving.index(element)
                temperature = temperature - drops[place]
                by_seed[f"drop {place}"] = -np.ones(len(samples))
            else:
                resistance = self.fixed[element.name][samples]
                temperature = temperature - flow * resistance
                by_seed["Q"] = by_seed.get("Q", 0.0) - resistance
        return temperature, by_seed

    # -- finishing ----------------------------------------------------------------------------------

    def _finish(self) -> None:
        """Evaluate everything once more at the answer, so that every step stands in the values."""
        everything = np.arange(self.size)
        for group in (self.chain.inner, self.chain.outer):
            if self.chain.has_temperatures:
                self._surface(group)
            for branch in group.branches:
                coefficient, _ = self._film(group, branch, everything, self.values, self.slopes)
                held = self.jump_sides.get(branch.name)
                if held is not None:
                    coefficient = np.where(self.jumps[branch.name], held[0], coefficient)
                self.values[branch_coefficient(group, branch.name)] = self._as_input(coefficient)
        if not self.chain.has_temperatures:
            return
        self.values["solution/Q"] = self._as_input(self.flow)
        for element in self.moving:
            if isinstance(element, Layer):
                first, _ = self._temperature_before(element, self.drops, self.flow, everything, self.values)
                self.values[element.first_temperature] = self._as_input(first)
                self.values[element.second_temperature] = self._as_input(first - self.drops[self.moving.index(element)])
                self._run_wall(element, self.values, self.slopes)

    def _surface(self, group: Group) -> None:
        outward = -1.0 if group.side == "inside" else 1.0
        if group in self.moving:
            drop = self.drops[self.moving.index(group)]
        else:
            drop = self.flow * self.fixed[group.name]
        area = self._full(self.chain.surfaces[group.surface].area)
        self.values[group.surface_temperature] = self._as_input(self._full(group.bulk) + outward * drop)
        self.values[group.flux] = self._as_input(np.abs(self.flow) / area)

    def _as_input(self, value: Array) -> Array:
        """A figure of the solution as steps take it: 0-d for a single record."""
        return value.reshape(()) if self.shape == () else value


def _taken(values: Mapping[str, Array], mask: Array) -> dict[str, Array]:
    return {name: value[mask] if isinstance(value, np.ndarray) and value.ndim else value for name, value in values.items()}


def _taken_slopes(slopes: Slopes, mask: Array) -> Slopes:
    return {name: {seed: slope[mask] if np.ndim(slope) else slope for seed, slope in by_seed.items()}
            for name, by_seed in slopes.items()}


def _put_back(values: dict[str, Array], before: Mapping[str, Array], part: Mapping[str, Array], mask: Array) -> None:
    """Write figures that only some samples have into arrays of all samples; the others hold NaN."""
    for name, value in part.items():
        if name in before:
            continue
        if name not in values:
            flag = np.asarray(value).dtype == bool
            values[name] = np.zeros(mask.shape, dtype=bool) if flag else np.full(mask.shape, np.nan)
        values[name][mask] = value


def _solved(matrix: Array, right: Array) -> Array:
    """Solutions of many small systems; NaN where a matrix is singular."""
    try:
        return np.linalg.solve(matrix, right[..., None])[..., 0]
    except np.linalg.LinAlgError:
        result = np.full(right.shape, np.nan)
        for index in range(len(matrix)):
            try:
                result[index] = np.linalg.solve(matrix[index], right[index])
            except np.linalg.LinAlgError:
                continue
        return result
