"""What each input moves the results by: derivatives of the closed solution, from the relations' own trees.

The closed state satisfies r(x, g) = 0 with x the heat flow and the drops, g the inputs. Then
dx/dg = −(∂r/∂x)⁻¹ ∂r/∂g, and a result moves by its own slope in g plus its slope in x times dx/dg.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.solve import _Engine, _solved
from calcbook.chain.types import Chain, Group, Layer
from calcbook.library.operations import run

Array = np.ndarray


def derivatives(chain: Chain, inputs: Mapping[str, Array], condition: str, wanted: tuple[str, ...]
                ) -> dict[str, dict[str, Array]]:
    """Slopes of results (ids of steps) with respect to every input, SI units, on arrays.

    A result that does not depend on an input has no entry for it.
    """
    return _Sensitivity(chain, inputs, condition).slopes_of(wanted)


class _Sensitivity:
    def __init__(self, chain: Chain, inputs: Mapping[str, Array], condition: str):
        self.chain = chain
        self.engine = _Engine(chain, inputs, condition, {})
        self.engine.solve()
        self.inputs = tuple(inputs)

    def slopes_of(self, wanted: tuple[str, ...]) -> dict[str, dict[str, Array]]:
        engine = self.engine
        # A second engine walks the same way with every input as a seed, at the state already found.
        traced = _Engine(self.chain, {name: engine.values[name] for name in self.inputs}, engine.condition, {})
        for name in self.inputs:
            traced.slopes[name] = {f"input {name}": np.ones(())}
        run(self.chain.steps, traced.values, traced.slopes)
        if engine.condition == "clean":
            for element in self.chain.elements:
                if isinstance(element, Layer) and element.kind == "fouling":
                    traced.values[element.resistance] = np.asarray(0.0)
                    traced.slopes.pop(element.resistance, None)
        if not self.chain.has_temperatures:
            self._films(traced)
            run(self.chain.circuit, traced.values, traced.slopes)
            return self._collected(traced, wanted, {})
        unknown_slopes = self._closing(traced)
        run(self.chain.circuit, traced.values, traced.slopes)
        return self._collected(traced, wanted, unknown_slopes)

    def _films(self, traced: _Engine) -> None:
        everything = np.arange(traced.size)
        for group in (self.chain.inner, self.chain.outer):
            for branch in group.branches:
                self._trace_film(traced, group, branch, everything)

    def _trace_film(self, traced: _Engine, group: Group, branch, samples: Array) -> None:  # type: ignore[no-untyped-def]
        choice = int(np.asarray(self.engine.chosen.get(branch.name, np.zeros(1))).ravel()[0])
        candidate = branch.candidates[choice]
        for step in (*branch.choice_steps, *candidate.steps):
            if step.id not in traced.slopes:
                run([step], traced.values, traced.slopes)
        held = branch_coefficient(group, branch.name)
        traced.values[held] = traced.values[candidate.coefficient]
        if candidate.coefficient in traced.slopes:
            traced.slopes[held] = traced.slopes[candidate.coefficient]

    def _closing(self, traced: _Engine) -> dict[str, dict[str, Array]]:
        """Derivatives of Q and of every element's drop with respect to the inputs."""
        names = ["Q", *(f"drop {index}" for index in range(len(self.chain.elements)))]
        residuals = self._residuals(traced)
        size = len(names)
        matrix = np.zeros((1, size, size))
        seeds = [f"input {name}" for name in self.inputs]
        right = np.zeros((size, len(seeds)))
        for row, slopes in enumerate(residuals):
            for column, name in enumerate(names):
                matrix[0, row, column] = float(np.asarray(slopes.get(name, 0.0)).ravel()[0])
            for column, seed in enumerate(seeds):
                right[row, column] = -float(np.asarray(slopes.get(seed, 0.0)).ravel()[0])
        result: dict[str, dict[str, Array]] = {name: {} for name in names}
        for column, seed in enumerate(seeds):
            if not right[:, column].any():
                continue
            moved = _solved(matrix, right[None, :, column])[0]
            for row, name in enumerate(names):
                result[name][seed] = np.asarray(moved[row])
        return result

    def _residuals(self, traced: _Engine) -> list[dict[str, Array]]:
        """Slopes of the closing equation and of every element's law, in drops, Q and inputs."""
        total: dict[str, Array] = {}
        laws = []
        temperature = dict(traced.slopes.get(self.chain.inner.bulk, {}))
        for index, element in enumerate(self.chain.elements):
            seed = f"drop {index}"
            total[seed] = np.ones(())
            laws.append(self._law(traced, element, index, temperature))
            temperature = _added(temperature, {seed: np.asarray(-1.0)})
        for bulk, sign in ((self.chain.inner.bulk, -1.0), (self.chain.outer.bulk, 1.0)):
            total = _added(total, {seed: sign * slope for seed, slope in traced.slopes.get(bulk, {}).items()})
        return [total, *laws]

    def _law(self, traced: _Engine, element, index: int, before: dict[str, Array]) -> dict[str, Array]:  # type: ignore[no-untyped-def]
        """Slopes of (drop / resistance − Q), or of the group's heat flow − Q."""
        if isinstance(element, Group):
            return self._group_law(traced, element, index)
        seed = f"drop {index}"
        if isinstance(element, Layer) and element.first_temperature:
            values = traced.values
            values[element.first_temperature] = self.engine.values[element.first_temperature]
            values[element.second_temperature] = self.engine.values[element.second_temperature]
            traced.slopes[element.first_temperature] = before
            traced.slopes[element.second_temperature] = _added(before, {seed: np.asarray(-1.0)})
            run(element.steps, values, traced.slopes)
        area = self.chain.surfaces[element.surface].area
        resistance = traced.values[element.resistance] / traced.values[area]
        flow = self._flow
        slopes = {seed: np.ones(()), "Q": -resistance}
        for name, slope in traced.slopes.get(element.resistance, {}).items():
            slopes = _added(slopes, {name: -flow * slope / traced.values[area]})
        for name, slope in traced.slopes.get(area, {}).items():
            slopes = _added(slopes, {name: flow * resistance * slope / traced.values[area]})
        return slopes

    @property
    def _flow(self) -> Array:
        return np.asarray(self.engine.values["solution/Q"])

    def _group_law(self, traced: _Engine, group: Group, index: int) -> dict[str, Array]:
        seed = f"drop {index}"
        outward = -1.0 if group.side == "inside" else 1.0
        values, slopes = traced.values, traced.slopes
        values[group.surface_temperature] = self.engine.values[group.surface_temperature]
        values[group.flux] = self.engine.values[group.flux]
        slopes[group.surface_temperature] = _added(slopes.get(group.bulk, {}), {seed: np.asarray(outward)})
        area = self.chain.surfaces[group.surface].area
        flow = self._flow
        sign = np.sign(flow)
        slopes[group.flux] = _added({"Q": sign / values[area]},
                                    {name: -np.abs(flow) * slope / values[area] ** 2
                                     for name, slope in slopes.get(area, {}).items()})
        law: dict[str, Array] = {"Q": np.asarray(-1.0)}
        for branch in group.branches:
            self._trace_film(traced, group, branch, np.arange(traced.size))
            held = branch_coefficient(group, branch.name)
            coefficient = values[held]
            # Heat flows from the fluid to the surface inside, from the surface to the fluid outside.
            driving = outward * (values[group.surface_temperature] - values[branch.reference])
            by_drop = _added({name: outward * slope for name, slope in slopes[group.surface_temperature].items()},
                             {name: -outward * slope for name, slope in slopes.get(branch.reference, {}).items()})
            law = _added(law, {name: coefficient * values[area] * slope for name, slope in by_drop.items()})
            law = _added(law, {name: slope * values[area] * driving for name, slope in slopes.get(held, {}).items()})
            law = _added(law, {name: coefficient * slope * driving for name, slope in slopes.get(area, {}).items()})
        return law

    def _collected(self, traced: _Engine, wanted: tuple[str, ...], unknown: dict[str, dict[str, Array]]
                   ) -> dict[str, dict[str, Array]]:
        """Total derivatives of the wanted steps: direct, and through Q and the drops."""
        result: dict[str, dict[str, Array]] = {}
        for name in wanted:
            total: dict[str, Array] = {}
            for seed, slope in traced.slopes.get(name, {}).items():
                if seed in unknown:
                    total = _added(total, {other: slope * moved for other, moved in unknown[seed].items()})
                else:
                    total = _added(total, {seed: slope})
            result[name] = {seed.removeprefix("input "): slope for seed, slope in total.items()}
        return result


def _added(first: Mapping[str, Array], second: Mapping[str, Array]) -> dict[str, Array]:
    total = dict(first)
    for name, slope in second.items():
        total[name] = total[name] + slope if name in total else slope
    return total
