"""The interface of every fluid: a fluid, and a fluid at a pressure and in a phase."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from calcbook.properties.backend import PROPERTIES
from calcbook.properties.curves import Asked, SeriesRows
from calcbook.properties.faults import PropertyFault
from calcbook.properties.findings import Finding
from calcbook.properties.series import Array

Phase = Literal["liquid", "gas"]
Outside = Literal["fault", "nan"]


def read_phase(phase: str | None) -> Phase | None:
    """The phase meant by a word: liquid, gas, or vapour (the same as gas here)."""
    if phase is None:
        return None
    if phase == "liquid":
        return "liquid"
    if phase in ("gas", "vapour"):
        return "gas"
    raise PropertyFault("phase-unknown", f"no phase is called {phase!r}", "liquid, gas or vapour")


class Fluid(ABC):
    """A fluid by name, without a state. ``name`` and ``provider`` are text for the record."""

    name: str
    provider: str

    @abstractmethod
    def _at(self, pressure: float | None, phase: Phase | None) -> FluidAtPressure: ...

    def at(self, pressure: float | None, phase: str | None = None) -> FluidAtPressure:
        """The fluid at an absolute pressure (Pa).

        Without a pressure a fluid of two phases is saturated: liquid, or vapour where the phase is gas.
        ``phase`` (liquid, gas, vapour) is what the engineer states; without it the phase is found for
        each temperature by itself.
        """
        if pressure is None:
            return self._at(None, read_phase(phase))
        if not (math.isfinite(pressure) and pressure > 0.0):
            raise PropertyFault(
                "pressure-not-positive",
                f"{self.name} at an absolute pressure of {pressure:.6g} Pa",
                "an absolute pressure above zero",
            )
        return self._at(float(pressure), read_phase(phase))


class FluidAtPressure(ABC):
    """Properties of a fluid along the temperatures of one pressure; SI arrays of any shape in and out."""

    fluid: Fluid
    pressure: float | None
    phase: Phase | None
    has_vapour_pressure: bool = False
    properties: tuple[str, ...] = PROPERTIES

    def value(self, property_name: str, temperature: ArrayLike, *, outside: Outside = "fault") -> Array:
        """A property (one of ``properties``) at temperatures in K.

        The bits of a sample do not depend on the other samples. A temperature at which there is no value
        is a ``PropertyFault``, or NaN for that sample where ``outside`` is "nan".
        """
        return self._answer(property_name, temperature, outside, sloped=False)

    def slope(self, property_name: str, temperature: ArrayLike, *, outside: Outside = "fault") -> Array:
        """d(property)/dT at this pressure; along the saturation line where no pressure is given."""
        return self._answer(property_name, temperature, outside, sloped=True)

    def rows(self, asked: tuple[Asked, ...], temperature: ArrayLike) -> Array:
        """Properties and slopes at the same temperatures, NaN where there is none: a row for each of ``asked``.

        The bits are those of ``value`` and ``slope`` one by one; together they take less time.
        """
        for name, _ in asked:
            _known(name, self.properties)
        temperatures = _floats(temperature)
        return self._flat_rows(asked, temperatures.ravel()).reshape(len(asked), *temperatures.shape)

    def _flat_rows(self, asked: tuple[Asked, ...], temperatures: Array) -> Array:
        return np.stack([self._flat(name, temperatures, sloped) for name, sloped in asked])

    def series_rows(self, asked: tuple[Asked, ...], least: float, most: float) -> SeriesRows | None:
        """The series that answer a stretch of temperatures; None where it is not answered by one of each."""
        return None

    def values_at(
        self, property_name: str, temperature: ArrayLike, pressure: ArrayLike, *, outside: Outside = "fault"
    ) -> Array:
        """A property where every sample has its own pressure; the arrays are broadcast together."""
        temperatures, _ = np.broadcast_arrays(_floats(temperature), _floats(pressure))
        return self.value(property_name, temperatures, outside=outside)

    def pressure_slope(
        self, property_name: str, temperature: ArrayLike, *, outside: Outside = "fault"
    ) -> Array:
        """d(property)/dp in SI per Pa at constant temperature; zero where the pressure is not used."""
        _known(property_name)
        return np.zeros_like(_floats(temperature))

    def saturation_temperature(self) -> float | None:
        """Boiling temperature at this pressure in K (of a gas: dew temperature); None where there is none."""
        return None

    def saturation_pressure(self, temperature: ArrayLike, *, outside: Outside = "fault") -> Array:
        """Vapour pressure of the liquid in Pa; a ``PropertyFault`` where the fluid has none."""
        raise PropertyFault("no-vapour-pressure", f"{self.fluid.name} has no vapour pressure here")

    def boiling_temperature(self, pressure: ArrayLike, *, outside: Outside = "fault") -> Array:
        """Saturation temperature in K at pressures in Pa; a ``PropertyFault`` where the fluid has none."""
        raise PropertyFault("no-vapour-pressure", f"{self.fluid.name} has no vapour pressure here")

    def critical_pressure(self) -> float | None:
        """Critical pressure in Pa, None where the fluid has no vapour side."""
        return None

    def molar_mass(self) -> float | None:
        """Molar mass in kg/mol, None where it is not known."""
        return None

    def freezing_temperature(self) -> float | None:
        """Temperature in K below which the liquid freezes, None where it is not known."""
        return None

    @abstractmethod
    def limits(self) -> tuple[float, float]:
        """Lowest and highest temperature in K at which there are values."""

    def phase_at(self, temperature: float) -> str:
        """liquid, gas, two-phase or supercritical."""
        return self.phase or "liquid"

    @abstractmethod
    def check_state(self, temperature: float, stated_phase: str | None = None) -> tuple[Finding, ...]:
        """What speaks against using the fluid at this temperature in the stated phase."""

    @abstractmethod
    def _flat(self, property_name: str, temperatures: Array, sloped: bool) -> Array:
        """Values or slopes at 1-d temperatures; NaN where there is none."""

    @abstractmethod
    def _explain(self, property_name: str, temperature: float) -> PropertyFault:
        """Why there is no value at a temperature."""

    def _answer(self, name: str, temperature: ArrayLike, outside: Outside, sloped: bool) -> Array:
        _known(name, self.properties)
        temperatures = _floats(temperature)
        result = self._flat(name, temperatures.ravel(), sloped)
        return self._delivered(name, temperatures, result, outside)

    def _delivered(self, name: str, temperatures: Array, result: Array, outside: Outside) -> Array:
        if outside == "fault":
            missing = np.isnan(result) & ~np.isnan(temperatures.ravel())
            if missing.any():
                raise self._explain(name, float(temperatures.ravel()[int(np.argmax(missing))]))
        return result.reshape(temperatures.shape)


def _known(name: str, properties: tuple[str, ...] = PROPERTIES) -> None:
    if name not in properties:
        raise PropertyFault("property-unknown", f"no property is called {name!r}", ", ".join(properties))


def _floats(values: ArrayLike) -> Array:
    return np.asarray(values, dtype=np.float64)
