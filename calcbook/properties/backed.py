"""Fluids whose properties come from the backend, by way of the kept curves."""

from __future__ import annotations

import functools
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from calcbook.properties import backend, states
from calcbook.properties.backend import PROPERTIES, SATURATION_PRESSURE, SATURATION_PROPERTIES, Code
from calcbook.properties.curves import (
    AGREEMENT,
    PRESSURE_SLOPE,
    SLOPE_AGREEMENT,
    Asked,
    Curve,
    Family,
    SeriesRows,
    ends_of,
)
from calcbook.properties.faults import PropertyFault
from calcbook.properties.findings import Finding
from calcbook.properties.fluid import Fluid, FluidAtPressure, Outside, Phase, _floats, _known, read_phase
from calcbook.properties.names import mixture_code, pure_code
from calcbook.properties.series import Array
from calcbook.properties.store import store

# Nearer to the critical temperature the two sides of saturation run together, and their slopes run away.
NEAREST_TO_CRITICAL = 0.9995
# Up to so many different pressures in one call each gets its own curves; more are asked one by one.
MOST_PRESSURES = 32
# Passes of Newton's method from a pressure to its saturation temperature: in ln p over 1/T the line is nearly
# straight, and the error is squared in each; five reach rounding for every fluid.
BOILING_PASSES = 8


@dataclass(frozen=True)
class BackedFluid(Fluid):
    """A pure fluid, a mixture or a single liquid of the backend."""

    name: str
    provider: str
    code: Code

    def _at(self, pressure: float | None, phase: Phase | None) -> FluidAtPressure:
        if self.code.backend == "INCOMP":
            return IncompressibleAtPressure(self, pressure, phase)
        if pressure is None:
            return Saturated(self, None, phase or "liquid")
        return PureAtPressure(self, pressure, phase)


def pure(name: str) -> Fluid:
    """A pure fluid (or a single liquid) by name or alias, in any case; unknown: ``PropertyFault``."""
    own, code = pure_code(name)
    return BackedFluid(own, _provider(code), code)


def mixture(name: str, basis: str, fraction: float) -> Fluid:
    """A mixture by name, the basis of its fraction ("mass fraction", "volume fraction") and the fraction.

    The fraction is of the first part named, 0 to 1. Raises ``PropertyFault`` for an unknown name, a basis
    that the mixture is not known by, or a fraction outside the data.
    """
    own, code = mixture_code(name, basis, fraction)
    return BackedFluid(f"{own}, {basis} {fraction:.6g}", _provider(code), code)


def _provider(code: Code) -> str:
    version = f"CoolProp {backend.backend_version()}"
    if code.backend == "HEOS":
        return f"{version}, Helmholtz energy equation of state, {code.name}"
    solution = f", {code.basis} {code.fraction:.6g}" if code.basis else ""
    return f"{version}, incompressible liquid {code.name}{solution}"


class _BackedAtPressure(FluidAtPressure):
    """What the backed fluids share: facts kept per fluid, explanations of missing values, checks."""

    fluid: BackedFluid
    pressure: float | None
    phase: Phase | None

    def _facts(self) -> dict[str, Any]:
        return self._known_facts

    @functools.cached_property
    def _known_facts(self) -> dict[str, Any]:
        return _kept_facts(self.fluid.code, "any pressure", lambda: backend.facts(self.fluid.code))

    def _state(self) -> states.Known:
        low, high = self.limits()
        return states.Known(
            self.fluid.name, self.pressure, low, high, self.freezing_temperature(), None, None, self._facts()
        )

    def check_state(self, temperature: float, stated_phase: str | None = None) -> tuple[Finding, ...]:
        """Findings on one temperature; see ``states.check``."""
        return states.check(self._state(), float(temperature), read_phase(stated_phase) or self.phase)

    def _explain(self, property_name: str, temperature: float) -> PropertyFault:
        facts = self._facts()
        if not facts.get(property_name, True):
            return PropertyFault(
                f"no-{property_name}-model",
                f"there is no {property_name} model for {self.fluid.name}",
                f"a stated {property_name} with its source",
            )
        weighed = [finding for finding in self.check_state(temperature) if finding.level == "fault"]
        for finding in weighed:
            if not finding.code.startswith("no-"):
                return PropertyFault(finding.code, finding.message, "a state inside the range of the fluid")
        return PropertyFault(
            "property-not-available",
            f"the backend gives no {property_name} of {self.fluid.name} at {temperature:.8g} K",
            f"a stated {property_name} with its source",
        )


@dataclass(frozen=True)
class IncompressibleAtPressure(_BackedAtPressure):
    """A liquid whose properties do not depend on pressure."""

    fluid: BackedFluid
    pressure: float | None
    phase: Phase | None

    def freezing_temperature(self) -> float | None:
        """Freezing temperature of the mixture."""
        freezing: float | None = self._facts()["T_freeze"]
        return freezing

    def limits(self) -> tuple[float, float]:
        """From the freezing temperature or the start of the data to the end of the data."""
        facts = self._facts()
        return max(facts["T_min"], facts["T_freeze"] or 0.0), facts["T_max"]

    def check_state(self, temperature: float, stated_phase: str | None = None) -> tuple[Finding, ...]:
        """Range and freezing; a stated gas is contradicted, since there is only a liquid."""
        found = super().check_state(temperature, "liquid")
        if (read_phase(stated_phase) or self.phase) == "gas":
            message = f"{self.fluid.name} is known as a liquid only, not as a vapour"
            found += (Finding("vapour-is-liquid", "fault", message, {"temperature": float(temperature)}),)
        return found

    @functools.cached_property
    def _line(self) -> Curve:
        code = self.fluid.code
        low, high = self.limits()
        family = Family(PROPERTIES, lambda temperature: backend.incompressible(code, temperature), AGREEMENT)
        return Curve(low, high, store(f"{code.text} incompressible"), (family,))

    def _flat(self, property_name: str, temperatures: Array, sloped: bool) -> Array:
        return self._line.rows(((property_name, sloped),), temperatures)[0]

    def _flat_rows(self, asked: tuple[Asked, ...], temperatures: Array) -> Array:
        return self._line.rows(asked, temperatures)

    def series_rows(self, asked: tuple[Asked, ...], least: float, most: float) -> SeriesRows | None:
        return self._line.series_rows(asked, least, most)


@dataclass(frozen=True)
class Saturated(_BackedAtPressure):
    """One side of saturation: the pressure follows from the temperature."""

    fluid: BackedFluid
    pressure: float | None
    phase: Phase | None
    has_vapour_pressure = True
    properties = (*PROPERTIES, *SATURATION_PROPERTIES, SATURATION_PRESSURE)

    def curve(self) -> Curve:
        """This side from the triple point to just below the critical point."""
        return self._side_curve

    @functools.cached_property
    def _side_curve(self) -> Curve:
        code, quality = self.fluid.code, 1.0 if self.phase == "gas" else 0.0
        low, high = self.limits()
        names = (*PROPERTIES, SATURATION_PRESSURE)
        side = Family(names, lambda temperature: backend.saturated(code, quality, temperature), AGREEMENT)
        both = Family(
            SATURATION_PROPERTIES, lambda temperature: backend.between_phases(code, temperature), AGREEMENT
        )
        return Curve(low, high, store(f"{code.text} saturated {self.phase}"), (side, both))

    def saturation_pressure(self, temperature: ArrayLike, *, outside: Outside = "fault") -> Array:
        """Vapour pressure in Pa."""
        temperatures = _floats(temperature)
        result = self.curve().rows(((SATURATION_PRESSURE, False),), temperatures.ravel())[0]
        return self._delivered(SATURATION_PRESSURE, temperatures, result, outside)

    def boiling_temperature(self, pressure: ArrayLike, *, outside: Outside = "fault") -> Array:
        """Saturation temperature of this side, from its own vapour-pressure curve."""
        pressures = _floats(pressure)
        flat = np.log(pressures.ravel())
        curve = self.curve()
        low, high = curve.low, curve.high
        ends = np.log(curve.value(SATURATION_PRESSURE, np.array([low, high])))
        known = (flat >= ends[0]) & (flat <= ends[1])
        steep = (ends[1] - ends[0]) / (1.0 / high - 1.0 / low)
        inverse = 1.0 / low + (flat[known] - ends[0]) / steep
        for _ in range(BOILING_PASSES):
            at = np.clip(1.0 / inverse, low, high)
            vapour = curve.value(SATURATION_PRESSURE, at)
            slope = -at * at * curve.slope(SATURATION_PRESSURE, at) / vapour
            inverse = 1.0 / at - (np.log(vapour) - flat[known]) / slope
        result = np.full(flat.shape, np.nan)
        result[known] = np.clip(1.0 / inverse, low, high)
        if outside == "fault" and not known.all():
            first = float(pressures.ravel()[int(np.argmin(known))])
            raise PropertyFault(
                "outside-fluid-range",
                f"{self.fluid.name} at {first:.6g} Pa has no saturation temperature",
                f"a pressure from {float(np.exp(ends[0])):.6g} Pa (triple point) to {float(np.exp(ends[1])):.6g} Pa"
                " (just below the critical point)",
            )
        return result.reshape(pressures.shape)

    def critical_pressure(self) -> float | None:
        """Critical pressure in Pa."""
        critical: float | None = self._facts().get("p_critical")
        return critical

    def molar_mass(self) -> float | None:
        """Molar mass in kg/mol."""
        mass: float | None = self._facts().get("molar_mass")
        return mass

    def freezing_temperature(self) -> float | None:
        """Triple point temperature."""
        return max(self._facts()["T_triple"], self._facts()["T_min"])

    def limits(self) -> tuple[float, float]:
        """From the triple point to just below the critical point."""
        facts = self._facts()
        return max(facts["T_triple"], facts["T_min"]), NEAREST_TO_CRITICAL * facts["T_critical"]

    def phase_at(self, temperature: float) -> str:
        """The side of saturation asked for."""
        return self.phase or "liquid"

    def check_state(self, temperature: float, stated_phase: str | None = None) -> tuple[Finding, ...]:
        """Range and freezing, and the note that saturation is assumed; the phase cannot be checked."""
        pressure = float(self.saturation_pressure(temperature, outside="nan"))
        vapour = (read_phase(stated_phase) or self.phase) == "gas"
        note = states.saturated(
            self._state(), float(temperature), vapour, None if np.isnan(pressure) else pressure
        )
        return (*super().check_state(temperature, stated_phase), note)

    def _flat(self, property_name: str, temperatures: Array, sloped: bool) -> Array:
        return self.curve().rows(((property_name, sloped),), temperatures)[0]

    def _flat_rows(self, asked: tuple[Asked, ...], temperatures: Array) -> Array:
        return self.curve().rows(asked, temperatures)

    def series_rows(self, asked: tuple[Asked, ...], least: float, most: float) -> SeriesRows | None:
        return self.curve().series_rows(asked, least, most)


@dataclass(frozen=True)
class PureAtPressure(_BackedAtPressure):
    """A pure fluid at a pressure.

    A stated liquid hotter than its boiling temperature is answered as saturated liquid of that
    temperature, a stated gas colder than its dew temperature as saturated vapour: both join the curve at
    the boiling temperature, so that a solution passing through has values; ``check_state`` says so.
    """

    fluid: BackedFluid
    pressure: float
    phase: Phase | None
    _cut: dict[str, Any] = field(init=False, repr=False, compare=False)
    has_vapour_pressure = True

    def __post_init__(self) -> None:
        code, pressure = self.fluid.code, self.pressure
        object.__setattr__(
            self,
            "_cut",
            _kept_facts(code, pressure.hex(), lambda: backend.pressure_facts(code, pressure)),
        )

    def saturation_temperature(self) -> float | None:
        """Boiling temperature; of a stated gas the dew temperature."""
        found: float | None = self._cut["T_dew" if self.phase == "gas" else "T_bubble"]
        return found

    def saturation_pressure(self, temperature: ArrayLike, *, outside: Outside = "fault") -> Array:
        """Vapour pressure of the stated (or liquid) side in Pa."""
        return self._side(self.phase or "liquid").saturation_pressure(temperature, outside=outside)

    def freezing_temperature(self) -> float | None:
        """Melting temperature at this pressure; the triple point where the melting curve is not known."""
        melting: float | None = self._cut["T_freeze"]
        return self._facts()["T_triple"] if melting is None else melting

    def limits(self) -> tuple[float, float]:
        """Range of the equations in temperature, of a liquid from its melting temperature on."""
        facts = self._facts()
        low = min(facts["T_min"], self._cut["T_freeze"] or facts["T_min"])
        return low, facts["T_max"]

    def phase_at(self, temperature: float) -> str:
        """liquid, gas, two-phase or supercritical."""
        return states.phase_at(self._state(), float(temperature))

    def values_at(
        self, property_name: str, temperature: ArrayLike, pressure: ArrayLike, *, outside: Outside = "fault"
    ) -> Array:
        """A property where every sample has its own pressure (Pa); the arrays are broadcast together.

        Up to ``MOST_PRESSURES`` different pressures are answered from their curves. With more, only the
        samples at this object's pressure are; the others are asked from the backend one by one and not
        kept, which agrees with the curves to 1e-10 and takes about 50 microseconds each.
        """
        _known(property_name)
        temperatures, pressures = np.broadcast_arrays(_floats(temperature), _floats(pressure))
        flat, each = temperatures.ravel(), pressures.ravel()
        different = np.unique(each)
        curved = different if different.size <= MOST_PRESSURES else np.array([self.pressure])
        result = np.empty_like(flat)
        for one in curved.tolist():
            chosen = each == one
            other = self if one == self.pressure else self.fluid.at(one, self.phase)
            result[chosen] = other.value(property_name, flat[chosen], outside=outside)
        chosen = ~np.isin(each, curved)
        if chosen.any():
            result[chosen] = self._asked(property_name, flat[chosen], each[chosen], outside)
        return result.reshape(temperatures.shape)

    def pressure_slope(
        self, property_name: str, temperature: ArrayLike, *, outside: Outside = "fault"
    ) -> Array:
        """d(property)/dp at constant temperature from central differences over 0.1 % of the pressure.

        Agrees with the differences to about 1e-5; zero where saturation stands in for the stated phase.
        """
        _known(property_name)
        temperatures = _floats(temperature)
        result = np.full(temperatures.size, np.nan)
        for chosen, curve, at_saturation in self._curves(temperatures.ravel()):
            part = temperatures.ravel()[chosen]
            name = property_name + PRESSURE_SLOPE
            result[chosen] = np.zeros_like(part) if at_saturation else curve.rows(((name, False),), part)[0]
        return self._delivered(property_name, temperatures, result, outside)

    def _flat(self, property_name: str, temperatures: Array, sloped: bool) -> Array:
        if temperatures.size == 1:
            return self._flat_one(property_name, temperatures, sloped)
        return self._flat_rows(((property_name, sloped),), temperatures)[0]

    def _flat_rows(self, asked: tuple[Asked, ...], temperatures: Array) -> Array:
        if temperatures.size == 1:
            return super()._flat_rows(asked, temperatures)
        if not temperatures.size:
            return np.empty((len(asked), 0))
        least, most = ends = ends_of(temperatures)
        curve = self._curve_at(least)
        if curve is not None and curve is self._curve_at(most) and least <= most:
            return curve.rows(asked, temperatures, ends)
        result = np.full((len(asked), temperatures.size), np.nan)
        for chosen, curve, _ in self._curves(temperatures):
            result[:, chosen] = curve.rows(asked, temperatures[chosen])
        return result

    def series_rows(self, asked: tuple[Asked, ...], least: float, most: float) -> SeriesRows | None:
        curve = self._curve_at(least)
        if curve is None or curve is not self._curve_at(most):
            return None
        return curve.series_rows(asked, least, most)

    def _flat_one(self, property_name: str, temperature: Array, sloped: bool) -> Array:
        at = temperature.item()
        curve = self._curve_at(at)
        if curve is None or not curve.low <= at <= curve.high:
            return np.full(temperature.shape, np.nan)
        return (curve.slope if sloped else curve.value)(property_name, temperature)

    def _asked(self, name: str, temperatures: Array, pressures: Array, outside: Outside) -> Array:
        """Values straight from the backend, by the same rules of phase as on the curves."""
        liquid, gas = self._side("liquid"), self._side("gas")
        bubble = liquid.saturation_pressure(temperatures, outside="nan")
        dew = gas.saturation_pressure(temperatures, outside="nan")
        dense = pressures >= self._facts()["p_critical"]
        boils = ~dense & np.isfinite(bubble) & np.isfinite(dew)
        if self.phase == "liquid":
            phases = np.where(boils & (pressures >= bubble), "liquid", "")
            swapped = boils & (pressures < bubble)
        elif self.phase == "gas":
            phases = np.where(~boils | (pressures <= dew), "gas", "")
            swapped = boils & (pressures > dew)
        else:
            phases = np.where(~boils | (pressures < dew), "gas", "")
            phases = np.where(boils & (pressures > bubble), "liquid", phases)
            swapped = np.zeros(temperatures.shape, dtype=bool)
        phases = np.where(dense, "dense", phases)
        result = np.full(temperatures.shape, np.nan)
        if swapped.any():
            result[swapped] = self._side(self.phase or "liquid").value(name, temperatures[swapped])
        for index in np.flatnonzero(phases != "").tolist():
            at = (float(pressures[index]), str(phases[index]), float(temperatures[index]))
            result[index] = backend.at_pressure(self.fluid.code, *at)[name]
        missing = np.flatnonzero(np.isnan(result) & ~np.isnan(temperatures))
        if outside == "fault" and missing.size:
            first = int(missing[0])
            other = self.fluid.at(float(pressures[first]), self.phase)
            other.value(name, temperatures[first : first + 1])
            raise PropertyFault(
                "property-not-available",
                f"the backend gives no {name} of {self.fluid.name} at {temperatures[first]:.8g} K and "
                f"{pressures[first]:.8g} Pa",
            )
        return result

    def _curves(self, temperatures: Array) -> list[tuple[NDArray[np.bool_], Curve, bool]]:
        """Which samples lie on which curve; the last entry says that the curve is one of saturation."""
        if self._only is not None:
            return [(np.ones(temperatures.shape, dtype=bool), self._only, False)]
        if not self._boils:
            return []
        bubble, dew = self._cut["T_bubble"], self._cut["T_dew"]
        if self.phase == "liquid":
            hot = temperatures > bubble
            return [(~hot, self._liquid, False), (hot, self._side("liquid").curve(), True)]
        if self.phase == "gas":
            cold = temperatures < dew
            return [(~cold, self._gas, False), (cold, self._side("gas").curve(), True)]
        below = temperatures < bubble * (1.0 - states.TWO_PHASE_BAND)
        above = temperatures > dew * (1.0 + states.TWO_PHASE_BAND)
        return [(below, self._liquid, False), (above, self._gas, False)]

    def _curve_at(self, temperature: float) -> Curve | None:
        """The curve that one sample lies on, as ``_curves`` has it; None between the phases."""
        if self._only is not None or not self._boils:
            return self._only
        bubble, dew = self._cut["T_bubble"], self._cut["T_dew"]
        if self.phase == "liquid":
            return self._side("liquid").curve() if temperature > bubble else self._liquid
        if self.phase == "gas":
            return self._side("gas").curve() if temperature < dew else self._gas
        if temperature < bubble * (1.0 - states.TWO_PHASE_BAND):
            return self._liquid
        return self._gas if temperature > dew * (1.0 + states.TWO_PHASE_BAND) else None

    @functools.cached_property
    def _boils(self) -> bool:
        """Whether there is a liquid and a vapour at this pressure."""
        return self._cut["T_bubble"] is not None and self._cut["T_dew"] is not None

    @functools.cached_property
    def _only(self) -> Curve | None:
        """The one curve of a pressure without boiling; None where there are two, or none in the stated phase."""
        low, high = self.limits()
        if self.pressure >= self._facts()["p_critical"]:
            return self._curve("dense", self._cut["T_freeze"] or low, high)
        return self._curve("gas", low, high) if not self._boils and self.phase != "liquid" else None

    @functools.cached_property
    def _liquid(self) -> Curve:
        return self._curve("liquid", self._cut["T_freeze"] or self.limits()[0], self._cut["T_bubble"])

    @functools.cached_property
    def _gas(self) -> Curve:
        return self._curve("gas", self._cut["T_dew"], self.limits()[1])

    def _curve(self, phase: str, low: float, high: float) -> Curve:
        code, pressure = self.fluid.code, self.pressure
        values = Family(PROPERTIES, lambda at: backend.at_pressure(code, pressure, phase, at), AGREEMENT)
        slopes = Family(
            tuple(name + PRESSURE_SLOPE for name in PROPERTIES),
            lambda at: backend.pressure_slopes(code, pressure, phase, at),
            SLOPE_AGREEMENT,
        )
        return Curve(low, high, store(f"{code.text} {pressure.hex()} {phase}"), (values, slopes))

    def _side(self, phase: Phase) -> Saturated:
        return self._liquid_side if phase == "liquid" else self._gas_side

    @functools.cached_property
    def _liquid_side(self) -> Saturated:
        return Saturated(self.fluid, None, "liquid")

    @functools.cached_property
    def _gas_side(self) -> Saturated:
        return Saturated(self.fluid, None, "gas")

    def _state(self) -> states.Known:
        low, high = self.limits()
        bubble, dew = self._cut["T_bubble"], self._cut["T_dew"]
        freezing = self.freezing_temperature()
        return states.Known(self.fluid.name, self.pressure, low, high, freezing, bubble, dew, self._facts())


def _kept_facts(code: Code, place: str, ask: Callable[[], dict[str, Any]]) -> dict[str, Any]:
    """Facts from the file of the fluid and place, asked once."""
    kept = store(f"{code.text} facts {place}")
    if not kept.facts:
        kept.facts = ask()
        kept.changed()
        kept.save()
    return kept.facts
