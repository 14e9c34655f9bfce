"""Fluids of a calculation as operations of the chain: properties, phase, and their derivatives."""

from __future__ import annotations

import functools
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from calcbook import properties
from calcbook.calcfile.calculation import FluidText
from calcbook.properties import Asked, Fluid, FluidAtPressure, PropertyFault

Array = np.ndarray
FRACTION_STEP = 1e-4
# States that many samples have are found without sorting the samples, up to so many states.
FEW_STATES, MANY_SAMPLES = 8, 64


@dataclass(frozen=True)
class EachState:
    """A reading that takes the states one by one: one figure for every sample."""

    read: Callable[[FluidAtPressure, Array], Array]
    ahead: tuple[int, ...] = ()

    def one(self, state: FluidAtPressure, temperature: Array) -> Array:
        return self.read(state, temperature)

    def several(self, states: Sequence[FluidAtPressure], place: Array, temperature: Array) -> Array:
        result = np.empty(temperature.shape)
        for number, state in enumerate(states):
            chosen = place == number
            result[chosen] = self.read(state, temperature[chosen])
        return result


@dataclass(frozen=True)
class PropertyRows:
    """A reading of properties and slopes, a row for each that is ``asked``."""

    asked: tuple[Asked, ...]

    @property
    def ahead(self) -> tuple[int, ...]:
        return (len(self.asked),)

    def one(self, state: FluidAtPressure, temperature: Array) -> Array:
        return state.rows(self.asked, temperature)

    def several(self, states: Sequence[FluidAtPressure], place: Array, temperature: Array) -> Array:
        return properties.rows_of_several(states, place, self.asked, temperature)


Reading = EachState | PropertyRows


@dataclass(frozen=True)
class FluidSource:
    """A fluid that may depend on a figure of its own: gives the property fluid for it.

    The figure is a mixture fraction, the humidity ratio of humid air (None: saturation alone) or a relative
    density; ``make`` gives the fluid of one where it is no mixture.
    """

    text: FluidText
    fixed: Fluid | None = None
    make: Callable[[float | None], Fluid] | None = None
    _made: dict[float | None, Fluid] = field(default_factory=dict, compare=False, repr=False)
    _states: dict[tuple, FluidAtPressure] = field(default_factory=dict, compare=False, repr=False)

    def has(self, name: str) -> bool:
        """Whether the fluid can give a property: a table or constants give what they state.

        The expansion coefficient follows from a table's densities; where it cannot, only limits miss it.
        """
        if self.text.kind == "petroleum":
            return name != "viscosity" or bool(self.text.astm)
        if self.text.kind not in ("table", "constants") or name == "expansion coefficient":
            return True
        return name in self.text.columns or (name == "viscosity" and bool(self.text.astm))

    def at_fraction(self, fraction: float | None) -> Fluid:
        """The fluid itself, or the mixture of that fraction. Raises ``PropertyFault``."""
        if self.fixed is not None:
            return self.fixed
        if fraction not in self._made:
            if self.make is not None:
                self._made[fraction] = self.make(fraction)
            else:
                assert fraction is not None
                self._made[fraction] = properties.mixture(self.text.name, self.text.basis, fraction)
        return self._made[fraction]

    def state(self, pressure: float | None, fraction: float | None, phase: str) -> FluidAtPressure:
        """The fluid at a pressure (None: saturated), in a stated phase if there is one."""
        key = (pressure, fraction, phase)
        if key not in self._states:
            self._states[key] = self.at_fraction(fraction).at(pressure, phase or None)
        return self._states[key]


@dataclass(frozen=True)
class PropertyOperation:
    """One property of a fluid at a temperature, and at a pressure and fraction where the file gives them.

    Away from the bulk the fluid keeps its bulk phase (``keeps_phase``): a liquid that would boil at the
    surface answers as saturated liquid there, and the wall check says so.
    """

    source: FluidSource
    property_name: str
    phase: str
    has_pressure: bool
    has_fraction: bool
    keeps_phase: bool = False

    @functools.cached_property
    def symbols(self) -> tuple[str, ...]:
        flags = (("p", self.has_pressure), ("w", self.has_fraction), ("liquid", self.keeps_phase))
        return ("T", *(name for name, there in flags if there))

    def value(self, arguments: Mapping[str, Array]) -> Array:
        return self.by_state(arguments, PropertyRows(((self.property_name, False),)))[0]

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        return {symbol: self._slope(symbol, arguments) for symbol in wanted}

    def _slope(self, symbol: str, arguments: Mapping[str, Array]) -> Array:
        if symbol == "T":
            return self.by_state(arguments, PropertyRows(((self.property_name, True),)))[0]
        if symbol == "p":
            slope = EachState(lambda state, at: state.pressure_slope(self.property_name, at, outside="nan"))
            return self.by_state(arguments, slope)
        if symbol == "w":
            below = np.maximum(np.asarray(arguments["w"]) - FRACTION_STEP, 0.0)
            above = np.asarray(arguments["w"]) + FRACTION_STEP
            low, high = (self.value({**arguments, "w": part}) for part in (below, above))
            return (high - low) / (above - below)
        return np.zeros(np.shape(arguments["T"]))

    def by_state(self, arguments: Mapping[str, Array], reading: Reading) -> Array:
        """Read the samples group by group, each group at one pressure, fraction and phase."""
        temperature = np.asarray(arguments["T"], dtype=float)
        varying = [np.asarray(arguments[name], dtype=float) for name in self.symbols[1:]]
        if not any([item.ndim for item in varying]):
            return self._read([item.item() for item in varying], temperature, reading)
        state = [item.flat[0] for item in varying]
        if all([item.shape in ((), temperature.shape) for item in varying]) and all(
            [bool((item == first).all()) for item, first in zip(varying, state, strict=True)]
        ):
            return self._read([float(first) for first in state], temperature, reading)
        return self._by_states(temperature, varying, reading)

    def _by_states(self, temperature: Array, varying: list[Array], reading: Reading) -> Array:
        shape = np.broadcast_shapes(temperature.shape, *(item.shape for item in varying))
        flat = np.ascontiguousarray(np.broadcast_to(temperature, shape)).ravel()
        columns = np.stack([np.broadcast_to(item, shape).ravel() for item in varying])
        result = np.empty((*reading.ahead, flat.size))
        waiting = np.arange(flat.size)
        # Nearly always there are few states: they are found without sorting the samples.
        for _ in range(FEW_STATES):
            state = columns[:, waiting[0]]
            here = (columns[:, waiting] == state[:, None]).all(axis=0)
            chosen = waiting[here]
            result[..., chosen] = self._read(state.tolist(), flat[chosen], reading)
            waiting = waiting[~here]
            if not waiting.size:
                return result.reshape(*reading.ahead, *shape)
            if len(chosen) < MANY_SAMPLES:
                break
        states, group = np.unique(columns[:, waiting], axis=1, return_inverse=True)
        result[..., waiting] = self._read_several(states.T.tolist(), group.ravel(), flat[waiting], reading)
        return result.reshape(*reading.ahead, *shape)

    def _read_several(
        self, states: list[list[float]], place: Array, temperature: Array, reading: Reading
    ) -> Array:
        fluids: list[FluidAtPressure] = []
        numbers = np.full(len(states), -1)
        for number, figures in enumerate(states):
            state = self._state(figures)
            if state is not None:
                numbers[number] = len(fluids)
                fluids.append(state)
        number_of_fluid = numbers[place]
        known = np.flatnonzero(number_of_fluid >= 0)
        result = np.full((*reading.ahead, temperature.size), np.nan)
        if fluids:
            result[..., known] = reading.several(fluids, number_of_fluid[known], temperature[known])
        return result

    def _read(self, figures: list[float], temperature: Array, reading: Reading) -> Array:
        state = self._state(figures)
        if state is None:
            return np.full((*reading.ahead, *temperature.shape), np.nan)
        return reading.one(state, temperature)

    def _state(self, figures: list[float]) -> FluidAtPressure | None:
        """The fluid at the figures of one state; None where it cannot have that.

        Of a record's own state the fault is told before.
        """
        named = dict(zip(self.symbols[1:], figures, strict=True))
        phase = self.phase
        if self.keeps_phase and not phase:
            phase = "liquid" if named["liquid"] else "gas"
        try:
            return self.source.state(named.get("p"), named.get("w"), phase)
        except PropertyFault:
            return None


@dataclass(frozen=True)
class LiquidOperation:
    """Whether a stream is a liquid at its bulk state: stated by the engineer, or found by the fluid."""

    operation: PropertyOperation

    @property
    def symbols(self) -> tuple[str, ...]:
        return self.operation.symbols

    def value(self, arguments: Mapping[str, Array]) -> Array:
        if self.operation.phase:
            return np.asarray(self.operation.phase == "liquid")
        return self.operation.by_state(arguments, EachState(_is_liquid)).astype(bool)

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        return {symbol: np.zeros(np.shape(value)) for symbol in wanted}


@dataclass(frozen=True)
class BoilingOperation:
    """The saturation temperature of a pure fluid at a pressure, from its vapour-pressure curve."""

    source: FluidSource

    @property
    def symbols(self) -> tuple[str, ...]:
        return ("p",)

    def value(self, arguments: Mapping[str, Array]) -> Array:
        pressure = np.asarray(arguments["p"], dtype=float)
        return self.source.state(None, None, "liquid").boiling_temperature(pressure, outside="nan")

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        line = self.source.state(None, None, "liquid")
        return {symbol: 1.0 / line.slope("saturation pressure", value, outside="nan") for symbol in wanted}


@dataclass(frozen=True)
class FixedOperation:
    """A figure that a pure fluid has in every state: its critical pressure, its molar mass."""

    source: FluidSource
    name: str

    @property
    def symbols(self) -> tuple[str, ...]:
        return ()

    def value(self, arguments: Mapping[str, Array]) -> Array:
        line = self.source.state(None, None, "liquid")
        found = line.critical_pressure() if self.name == "critical pressure" else line.molar_mass()
        return np.asarray(np.nan if found is None else found)

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        return {}


def _is_liquid(state: FluidAtPressure, temperature: Array) -> Array:
    """Along one pressure a liquid lies below all else: the hottest that is one settles the others."""
    different = np.sort(temperature[~np.isnan(temperature)])
    low, high = 0, len(different)
    while low < high:
        middle = (low + high) // 2
        if state.phase_at(float(different[middle])) == "liquid":
            low = middle + 1
        else:
            high = middle
    if low == 0:
        return np.zeros(temperature.shape)
    return (temperature <= different[low - 1]).astype(float)
