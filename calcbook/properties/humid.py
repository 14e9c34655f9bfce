"""Humid air at a humidity ratio: its properties per mass of humid air, from the backend's equations.

Source of the equations: S. Herrmann, H.-J. Kretzschmar, D.P. Gatley, Thermodynamic properties of real moist
air, dry air, steam, water, and ice (ASHRAE RP-1485), HVAC&R Research 15 (2009) 961-986.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from calcbook.properties import backend
from calcbook.properties.backend import PROPERTIES
from calcbook.properties.curves import Curve, Family
from calcbook.properties.faults import PropertyFault
from calcbook.properties.findings import Finding
from calcbook.properties.fluid import Fluid, FluidAtPressure, Outside, Phase, _known, read_phase
from calcbook.properties.series import Array
from calcbook.properties.store import store

SATURATION_FRACTION = "saturation mole fraction"
LOWEST, HIGHEST = 173.15, 623.15  # K; the equations hold to 350 °C, and air colder than -100 °C is not humid
ICE = 273.16  # K; saturation is over ice below it, with a kink there
WETTEST = 10.0  # kg of water per kg of dry air
# The backend iterates volumes to 1e-11 and takes heat capacities as differences, to 1e-10; expansion
# coefficients are differences of its volumes.
VALUES, DIFFERENCES = 1e-9, 1e-7
# Relative, for slopes in pressure from the curves of neighbouring pressures.
PRESSURE_STEP = 1e-3
# Relative in T: dew points are found by the backend to about 1e-8.
AT_SATURATION = 1e-6


@dataclass(frozen=True)
class HumidAir(Fluid):
    """Humid air of one humidity ratio, kg of water per kg of dry air; None: of any, for saturation alone."""

    name: str
    provider: str
    ratio: float | None

    def _at(self, pressure: float | None, phase: Phase | None) -> FluidAtPressure:
        if pressure is None:
            raise PropertyFault(
                "pressure-missing",
                f"{self.name} without a pressure",
                "the absolute pressure of the humid air",
            )
        return HumidAirAtPressure(self, pressure, phase)


def humid_air(ratio: float | None) -> Fluid:
    """Humid air by its humidity ratio (kg/kg of dry air, 0 to 10); None asks for saturation alone."""
    if ratio is not None and not 0.0 <= ratio <= WETTEST:
        raise PropertyFault(
            "fraction-outside",
            f"humid air with a humidity ratio of {ratio:.6g} kg/kg",
            f"a humidity ratio from 0 to {WETTEST:.6g} kg of water per kg of dry air",
        )
    name = "humid air" if ratio is None else f"humid air, humidity ratio {ratio:.6g}"
    return HumidAir(name, f"CoolProp {backend.backend_version()}, humid air (ASHRAE RP-1485)", ratio)


@dataclass(frozen=True)
class HumidAirAtPressure(FluidAtPressure):
    """Humid air at a pressure; a gas at every temperature.

    Colder than its dew point it is answered as if the water stayed in the air, so that a solution passing
    through has values; the saturation temperature is the dew point, and whoever checks a wall sees it.
    """

    fluid: HumidAir
    pressure: float
    phase: Phase | None
    has_vapour_pressure = True
    properties = (*PROPERTIES, SATURATION_FRACTION)

    def saturation_temperature(self) -> float | None:
        """Dew point in K, below 273.16 K the frost point; None of dry air."""
        kept = store(f"{self._key} facts")
        if "T_dew" not in kept.facts:
            kept.facts["T_dew"] = backend.dew_point(self.pressure, self.fluid.ratio or 0.0)
            kept.changed()
            kept.save()
        dew: float | None = kept.facts["T_dew"]
        return dew

    def limits(self) -> tuple[float, float]:
        """Range of temperature of the equations."""
        return LOWEST, HIGHEST

    def phase_at(self, temperature: float) -> str:
        """Always gas."""
        return "gas"

    def check_state(self, temperature: float, stated_phase: str | None = None) -> tuple[Finding, ...]:
        """Range, a stated liquid, and air that holds more water than it can."""
        return tuple(self._findings(float(temperature), read_phase(stated_phase) or self.phase))

    def _findings(self, temperature: float, stated: str | None) -> Iterator[Finding]:
        at = f"{self.fluid.name} at {temperature:.8g} K and {self.pressure:.6g} Pa"
        figures = {"temperature": temperature, "pressure": self.pressure}
        if not LOWEST <= temperature <= HIGHEST:
            message = f"{at} is outside the range of its equations, {LOWEST:.8g} K to {HIGHEST:.8g} K"
            yield Finding(
                "outside-fluid-range", "fault", message, figures | {"lowest": LOWEST, "highest": HIGHEST}
            )
        if stated == "liquid":
            yield Finding("liquid-is-vapour", "fault", f"{at} is a gas, not a liquid", figures)
        dew = self.saturation_temperature()
        if dew is not None and temperature < dew * (1.0 - AT_SATURATION):
            message = f"{at} holds more water than saturated air: its dew point is {dew:.8g} K"
            yield Finding("above-saturation", "fault", message, figures | {"dew point": dew})

    def pressure_slope(
        self, property_name: str, temperature: ArrayLike, *, outside: Outside = "fault"
    ) -> Array:
        """d(property)/dp at constant temperature, from the curves of 0.1 % lower and higher pressure."""
        _known(property_name, self.properties)
        step = PRESSURE_STEP * self.pressure
        low, high = (
            self.fluid.at(self.pressure + way, self.phase).value(property_name, temperature, outside=outside)
            for way in (-step, step)
        )
        return (high - low) / (2.0 * step)

    @property
    def _key(self) -> str:
        ratio = "saturated" if self.fluid.ratio is None else self.fluid.ratio.hex()
        return f"humid air {backend.backend_version()} {self.pressure.hex()} {ratio}"

    def _flat(self, property_name: str, temperatures: Array, sloped: bool) -> Array:
        result = np.full(temperatures.shape, np.nan)
        if (property_name == SATURATION_FRACTION) != (self.fluid.ratio is None):
            return result
        if self.fluid.ratio is None:
            # A calculation asks for one, and the curve has kinks at the triple and at the boiling point.
            inside = (temperatures >= LOWEST) & (temperatures <= HIGHEST)
            curve = Curve(LOWEST, HIGHEST, store(self._key), self._families())
            result[inside] = curve.direct(property_name, temperatures[inside], sloped)
            curve.store.save()
            return result
        for low, high in ((LOWEST, ICE), (ICE, HIGHEST)):
            inside = (temperatures >= low) & (temperatures <= high)
            if inside.any():
                curve = Curve(low, high, store(f"{self._key} from {low:.8g} K"), self._families())
                ask = curve.slope if sloped else curve.value
                result[inside] = ask(property_name, temperatures[inside])
        return result

    def _families(self) -> tuple[Family, ...]:
        pressure, ratio = self.pressure, self.fluid.ratio
        if ratio is None:
            return (
                Family(
                    (SATURATION_FRACTION,),
                    lambda at: {SATURATION_FRACTION: backend.saturated_air(pressure, at)},
                    VALUES,
                ),
            )
        names = tuple(name for name in PROPERTIES if name != "expansion coefficient")
        wet = ratio

        def sample(temperature: float) -> dict[str, float]:
            return backend.humid_air(pressure, wet, temperature)

        return Family(names, sample, VALUES), Family(("expansion coefficient",), sample, DIFFERENCES)

    def _explain(self, property_name: str, temperature: float) -> PropertyFault:
        for finding in self.check_state(temperature):
            return PropertyFault(finding.code, finding.message, "a state inside the range of humid air")
        return PropertyFault(
            "property-not-available",
            f"the backend gives no {property_name} of {self.fluid.name} at {temperature:.8g} K",
        )
