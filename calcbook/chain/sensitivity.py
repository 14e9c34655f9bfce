"""What each input moves the results by: derivatives of the closed solution, from the relations' own trees.

The closed state satisfies r(x, g) = 0 with x the heat flow and the drops, g the inputs. Then
dx/dg = −(∂r/∂x)⁻¹ ∂r/∂g, and a result moves by its own slope in g plus its slope in x times dx/dg.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.completing import completed
from calcbook.chain.solve import Solution, closed, outward
from calcbook.chain.types import CLEAN, SERVICE_FLAG, Branch, Chain, Group, Layer
from calcbook.library.operations import Slopes, run

Array = np.ndarray
ONE = np.ones(())
INPUT, UNKNOWN = "input ", "unknown "
Line = dict[str, Array]


def derivatives(
    chain: Chain,
    inputs: Mapping[str, Array],
    condition: str,
    wanted: tuple[str, ...],
    solution: Solution | None = None,
) -> dict[str, dict[str, Array]]:
    """Slopes of results (ids of steps) with respect to every input, SI units, in the samples' shape.

    A result that does not depend on an input has no entry for it. ``solution`` is that of the same inputs
    and condition, where it is there already.
    """
    if chain.open_figures:
        return _through_open_figures(chain, inputs, condition, wanted, solution)
    return _direct(chain, inputs, condition, wanted, solution or closed(chain, inputs, condition))


def _through_open_figures(
    chain: Chain,
    inputs: Mapping[str, Array],
    condition: str,
    wanted: tuple[str, ...],
    solution: Solution | None,
) -> dict[str, dict[str, Array]]:
    """Slopes where figures are left open: those at fixed figures, and those by way of each open figure.

    An open figure x agrees with the step X(x, g) that gives it, so dx/dg = (1 − ∂X/∂x)⁻¹ ∂X/∂g.
    """
    whole = completed(chain, inputs)
    figures = [item.id for item in chain.open_figures]
    partial: dict[str, dict[str, Array]] = {}
    for own in dict.fromkeys(item.condition for item in chain.open_figures):
        found = tuple(item.found for item in chain.open_figures if item.condition == own)
        partial |= _direct(chain, whole, own, found, closed(chain, whole, own))
    direct = _direct(chain, whole, condition, wanted, solution or closed(chain, whole, condition))
    shape = np.broadcast_shapes(*(np.shape(value) for value in whole.values()))
    lines = [partial[item.found] for item in chain.open_figures]
    names = [name for name in inputs if any(name in line for line in lines)]
    size = int(np.prod(shape, dtype=int))
    matrix = np.zeros((size, len(figures), len(figures)))
    right = np.zeros((size, len(figures), max(len(names), 1)))
    for row, line in enumerate(lines):
        for column, name in enumerate(figures):
            matrix[:, row, column] = (row == column) - np.ravel(line.get(name, np.zeros(shape)))
        for column, name in enumerate(names):
            right[:, row, column] = np.ravel(line.get(name, np.zeros(shape)))
    moved = _solved(matrix, right)
    total: dict[str, dict[str, Array]] = {}
    for name, slopes in direct.items():
        total[name] = {key: slope for key, slope in slopes.items() if key not in figures}
        for row, figure in enumerate(figures):
            if figure not in slopes:
                continue
            for column, key in enumerate(names):
                part = slopes[figure] * moved[:, row, column].reshape(shape)
                total[name][key] = total[name].get(key, np.zeros(shape)) + part
    return total


def _direct(
    chain: Chain,
    inputs: Mapping[str, Array],
    condition: str,
    wanted: tuple[str, ...],
    solution: Solution,
) -> dict[str, dict[str, Array]]:
    """Slopes with respect to every one of the inputs, none of which is left open."""
    shape = solution.converged.shape
    result: dict[str, dict[str, Array]] = {name: {} for name in wanted}
    with np.errstate(all="ignore"):
        for samples in _alike(solution):
            traced = _Trace(chain, inputs, condition, solution, samples).slopes_of(wanted)
            for name, slopes in traced.items():
                for key, slope in slopes.items():
                    whole = result[name].setdefault(key, np.zeros(shape))
                    whole.reshape(-1)[samples] = slope
    return result


def _alike(solution: Solution) -> list[Array]:
    """The samples in groups that use the same methods and hold the same films at a joint."""
    size = solution.converged.size
    rows = [choice.ravel() for choice in solution.chosen.values()]
    rows += [mask.ravel().astype(int) for mask in solution.jumps.values()]
    if not rows or size == 1:
        return [np.arange(size)]
    _, group = np.unique(np.stack(rows), axis=1, return_inverse=True)
    return [np.flatnonzero(group.ravel() == number) for number in range(int(group.max()) + 1)]


class _Trace:
    """Every step once more at the solution, with every input and every unknown as a seed."""

    def __init__(
        self, chain: Chain, inputs: Mapping[str, Array], condition: str, solution: Solution, samples: Array
    ):
        self.chain = chain
        self.samples = samples
        self.solution = solution
        self.condition = condition
        self.shape = solution.converged.shape
        self.values: dict[str, Array] = dict(chain.constants)  # type: ignore[arg-type]
        self.values[SERVICE_FLAG] = np.asarray(float(condition != CLEAN))
        self.slopes: Slopes = {}
        self.names = tuple(inputs)
        for name, value in inputs.items():
            self.values[name] = self._part(np.asarray(value, dtype=float))
            self.slopes[name] = {INPUT + name: ONE}

    def _part(self, value: Array) -> Array:
        if value.ndim == 0:
            return value
        return np.ascontiguousarray(np.broadcast_to(value, self.shape)).reshape(-1)[self.samples]

    def _solved(self, name: str) -> Array:
        return self._part(np.asarray(self.solution.values[name]))

    def slopes_of(self, wanted: tuple[str, ...]) -> dict[str, Line]:
        """Total slopes of the wanted steps by input id."""
        run(self.chain.steps, self.values, self.slopes)
        if self.condition == CLEAN:
            for element in self.chain.elements:
                if isinstance(element, Layer) and element.kind == "fouling":
                    self.values[element.resistance] = np.asarray(0.0)
                    self.slopes.pop(element.resistance, None)
        moved: dict[str, Line] = {}
        if self.chain.has_temperatures:
            moved = self._moved(self._laws())
        else:
            for group in (self.chain.inner, self.chain.outer):
                for branch in group.branches:
                    self._film(group, branch)
            for element in self.chain.elements:
                if isinstance(element, Layer) and element.film:
                    run(element.steps, self.values, self.slopes)
        run(self.chain.circuit, self.values, self.slopes)
        return {name: self._total(name, moved) for name in wanted}

    def _total(self, name: str, moved: Mapping[str, Line]) -> Line:
        total: Line = {}
        for seed, slope in self.slopes.get(name, {}).items():
            total = _added(total, moved[seed], slope) if seed in moved else _added(total, {seed: slope})
        return {
            seed.removeprefix(INPUT): np.broadcast_to(slope, self.samples.shape)
            for seed, slope in total.items()
        }

    # -- the laws -----------------------------------------------------------------------------------

    def _laws(self) -> list[Line]:
        """Slopes of the summed drops, then of every element's heat flow less Q, in unknowns and inputs."""
        total: Line = {}
        laws = []
        fins: list[tuple[Layer, str, Line]] = []
        temperature = dict(self.slopes.get(self.chain.inner.bulk, {}))
        for number, element in enumerate(self.chain.elements):
            seed = f"{UNKNOWN}{number + 1}"
            total[seed] = ONE
            if isinstance(element, Group):
                laws.append(self._group(element, seed))
            elif element.film:
                # Fins take the coefficient of their film, which may come after them.
                fins.append((element, seed, temperature))
            else:
                laws.append(self._layer(element, seed, temperature))
            temperature = _added(temperature, {seed: -ONE})
        laws += [self._layer(*one) for one in fins]
        total = _added(total, self.slopes.get(self.chain.inner.bulk, {}), -ONE)
        return [_added(total, self.slopes.get(self.chain.outer.bulk, {})), *laws]

    def _layer(self, layer: Layer, seed: str, before: Line) -> Line:
        """Slopes of drop - Q*R/A."""
        if layer.first_temperature:
            for name, line in (
                (layer.first_temperature, before),
                (layer.second_temperature, _added(before, {seed: -ONE})),
            ):
                self.values[name] = self._solved(name)
                self.slopes[name] = line
        if layer.first_temperature or layer.film:
            run(layer.steps, self.values, self.slopes)
        flow, area = self._solved("solution/Q"), self.chain.surfaces[layer.surface].area
        resistance = self.values[layer.resistance] / self.values[area]
        law = {seed: ONE, f"{UNKNOWN}0": -resistance}
        law = _added(law, self.slopes.get(layer.resistance, {}), -flow / self.values[area])
        return _added(law, self.slopes.get(area, {}), flow * resistance / self.values[area])

    def _group(self, group: Group, seed: str) -> Line:
        """Slopes of the heat flow through the branches less Q."""
        sign = outward(group)
        values, slopes = self.values, self.slopes
        area = self.chain.surfaces[group.surface].area
        flow = self._solved("solution/Q")
        values[group.surface_temperature] = self._solved(group.surface_temperature)
        values[group.flux] = self._solved(group.flux)
        slopes[group.surface_temperature] = _added(slopes.get(group.bulk, {}), {seed: np.asarray(sign)})
        slopes[group.flux] = _added(
            {f"{UNKNOWN}0": np.sign(flow) / values[area]},
            slopes.get(area, {}),
            -np.abs(flow) / values[area] ** 2,
        )
        law: Line = {f"{UNKNOWN}0": -ONE}
        for branch in group.branches:
            self._film(group, branch)
            held = branch_coefficient(group, branch.name)
            driving = sign * (values[group.surface_temperature] - values[branch.reference])
            law = _added(law, slopes[group.surface_temperature], sign * values[held] * values[area])
            law = _added(law, slopes.get(branch.reference, {}), -sign * values[held] * values[area])
            law = _added(law, slopes.get(held, {}), values[area] * driving)
            law = _added(law, slopes.get(area, {}), values[held] * driving)
        return law

    def _film(self, group: Group, branch: Branch) -> None:
        choice = self.solution.chosen.get(branch.name)
        candidate = branch.candidates[int(choice.reshape(-1)[self.samples[0]]) if choice is not None else 0]
        waiting = [step for step in candidate.steps if step.id not in self.values]
        run(waiting, self.values, self.slopes)
        held = branch_coefficient(group, branch.name)
        # The solution's own figure: a film held at a joint has one that its law does not give, and no slope.
        self.values[held] = self._solved(held)
        law = self.values[candidate.coefficient]
        if candidate.coefficient in self.slopes and bool(
            np.all(np.abs(self.values[held] - law) <= 1e-9 * np.abs(law))
        ):
            self.slopes[held] = self.slopes[candidate.coefficient]

    # -- the unknowns -------------------------------------------------------------------------------

    def _moved(self, laws: list[Line]) -> dict[str, Line]:
        """Slopes of Q and of every drop with respect to the inputs, sample by sample."""
        names = [f"{UNKNOWN}{number}" for number in range(len(laws))]
        seeds = [INPUT + name for name in self.names if any(INPUT + name in law for law in laws)]
        count = len(self.samples)
        matrix = np.zeros((count, len(names), len(names)))
        right = np.zeros((count, len(names), max(len(seeds), 1)))
        for row, law in enumerate(laws):
            for column, name in enumerate(names):
                matrix[:, row, column] = law.get(name, 0.0)
            for column, seed in enumerate(seeds):
                right[:, row, column] = -np.asarray(law.get(seed, 0.0))
        moved = _solved(matrix, right)
        return {
            name: {seed: moved[:, row, column] for column, seed in enumerate(seeds)}
            for row, name in enumerate(names)
        }


def _solved(matrix: Array, right: Array) -> Array:
    """Solutions of many small systems; NaN where a matrix is singular or not known."""
    result = np.full(right.shape, np.nan)
    whole = np.isfinite(matrix).all(axis=(1, 2))
    for place in np.flatnonzero(whole):
        try:
            result[place] = np.linalg.solve(matrix[place], right[place])
        except np.linalg.LinAlgError:
            continue
    return result


def _added(first: Mapping[str, Array], second: Mapping[str, Array], factor: Array = ONE) -> Line:
    """The sum of two linear forms, the second one times a factor."""
    total = dict(first)
    for name, slope in second.items():
        part = factor * slope
        total[name] = total[name] + part if name in total else part
    return total
