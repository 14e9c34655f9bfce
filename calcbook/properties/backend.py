"""The one place that asks CoolProp; it is imported when a number is wanted that was not kept.

Only single-phase states and the two sides of saturation are ever asked: inside the two-phase region the
backend answers transport properties with numbers that mean nothing.
"""

from __future__ import annotations

import functools
import importlib.util
import math
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from calcbook.properties.curves import PRESSURE_SLOPE

PROPERTIES = ("density", "viscosity", "conductivity", "heat capacity", "expansion coefficient")
SATURATION_PRESSURE = "saturation pressure"
# Along the saturation line only; they vanish at the critical point.
SATURATION_PROPERTIES = ("latent heat", "surface tension")
# In K, for the expansion of humid air: its volume bends little, and the backend holds it to about 1e-11.
HUMID_EXPANSION_STEP = 0.5
DRY_SHARE = 1e-3  # relative humidity at which the backend is asked for saturation
PRESSURE_STEP = 1e-3  # relative, for slopes in pressure: rounding 1e-13/1e-3 of a liquid's small change


@functools.cache
def backend_version() -> str:
    """The version of CoolProp from package metadata; CoolProp itself is not imported.

    An installed package stands beside a folder named by its version; reading that folder the standard way takes as
    long as a tenth of a whole run.
    """
    package = importlib.util.find_spec("CoolProp")
    for place in (package.submodule_search_locations or ()) if package is not None else ():
        found = {
            folder.name.split("-")[1] for folder in Path(place).parent.glob("[Cc]ool[Pp]rop-*.dist-info")
        }
        if len(found) == 1:
            return found.pop().removesuffix(".dist")
    from importlib.metadata import version

    return version("CoolProp")


@dataclass(frozen=True)
class Code:
    """How the backend calls a fluid: ``HEOS`` and a name, or ``INCOMP``, a name, a basis and a fraction."""

    backend: str
    name: str
    basis: str = ""
    fraction: float = 0.0

    @property
    def text(self) -> str:
        solution = f" {self.basis} {self.fraction.hex()}" if self.basis else ""
        return f"{self.backend} {self.name}{solution} {backend_version()}"


@functools.cache
def state_of(code: Code) -> Any:
    """The backend's state object of a fluid."""
    import CoolProp.CoolProp as coolprop

    state = coolprop.AbstractState(code.backend, code.name)
    if code.basis == "mass fraction":
        state.set_mass_fractions([code.fraction])
    elif code.basis == "volume fraction":
        state.set_volu_fractions([code.fraction])
    return state


def facts(code: Code) -> dict[str, Any]:
    """What holds at every pressure: limits, critical and triple point, which models there are."""
    state = state_of(code)
    found: dict[str, Any] = {"T_min": state.Tmin(), "T_max": state.Tmax()}
    if code.backend == "INCOMP":
        import CoolProp.CoolProp as coolprop

        freezing = _finite(lambda: state.trivial_keyed_output(coolprop.iT_freeze)) if code.basis else None
        # the backend answers nearly absolute zero where it has no freezing curve
        found["T_freeze"] = freezing if freezing is not None and freezing > 1.0 else None
        middle = 0.5 * (max(found["T_min"], freezing or 0.0) + found["T_max"])
        row = _incompressible(state, middle)
    else:
        import CoolProp.CoolProp as coolprop

        found |= {
            "T_critical": state.T_critical(),
            "p_critical": state.p_critical(),
            "T_triple": state.Ttriple(),
            "p_triple": _finite(lambda: state.trivial_keyed_output(coolprop.iP_triple)),
            "p_max": state.pmax(),
            "molar_mass": state.molar_mass(),
        }
        row = _some_state(state, found["T_critical"], found["T_max"])
    for name in ("viscosity", "conductivity"):
        found[name] = math.isfinite(row[name])
    return found


def pressure_facts(code: Code, pressure: float) -> dict[str, Any]:
    """Bubble, dew and freezing temperature at a pressure (Pa), None where there is none."""
    import CoolProp.CoolProp as coolprop

    state = state_of(code)
    state.unspecify_phase()

    def saturated(quality: float) -> float:
        state.update(coolprop.PQ_INPUTS, pressure, quality)
        return float(state.T())

    # below its triple point the backend would carry the boiling curve on, where there is no liquid
    lowest = _finite(lambda: state.trivial_keyed_output(coolprop.iP_triple)) or 0.0
    inside = lowest <= pressure < state.p_critical()
    return {
        "T_bubble": _finite(lambda: saturated(0.0)) if inside else None,
        "T_dew": _finite(lambda: saturated(1.0)) if inside else None,
        "T_freeze": _melting(code, state, coolprop, pressure),
    }


def _melting(code: Code, state: Any, coolprop: Any, pressure: float) -> float | None:
    """Melting temperature at a pressure, None where the curve is not known.

    Ordinary ice melts below its triple point under pressure. Other melting curves that fall below it
    (hydrogen, at low pressure) are carried on beyond their range, and are stopped there.
    """
    if not state.has_melting_line():
        return None
    melting = _finite(lambda: state.melting_line(coolprop.iT, coolprop.iP, pressure))
    if melting is None or code.name == "Water":
        return melting
    return max(melting, float(state.Ttriple()))


def at_pressure(code: Code, pressure: float, phase: str, temperature: float) -> dict[str, float]:
    """The properties of one single-phase state; ``phase`` is liquid, gas or dense (found by the backend)."""
    import CoolProp.CoolProp as coolprop

    state = state_of(code)
    state.unspecify_phase()
    if phase == "liquid":
        state.specify_phase(coolprop.iphase_liquid)
    elif phase == "gas":
        state.specify_phase(coolprop.iphase_gas)
    try:
        state.update(coolprop.PT_INPUTS, pressure, temperature)
        _polish(state, coolprop, pressure, temperature)
    except ValueError:
        return dict.fromkeys(PROPERTIES, math.nan)
    row = _row(state)
    state.unspecify_phase()
    return row


def saturated(code: Code, quality: float, temperature: float) -> dict[str, float]:
    """The properties of saturated liquid (quality 0) or vapour (1), and the saturation pressure.

    The expansion coefficient of one side of saturation is that at constant pressure.
    """
    import CoolProp.CoolProp as coolprop

    state = state_of(code)
    state.unspecify_phase()
    try:
        state.update(coolprop.QT_INPUTS, quality, temperature)
    except ValueError:
        return dict.fromkeys((*PROPERTIES, SATURATION_PRESSURE), math.nan)
    return _row(state) | {SATURATION_PRESSURE: float(state.p())}


def between_phases(code: Code, temperature: float) -> dict[str, float]:
    """Latent heat (enthalpy of the vapour less that of the liquid, J/kg) and surface tension (N/m)."""
    import CoolProp.CoolProp as coolprop

    state = state_of(code)
    state.unspecify_phase()
    try:
        state.update(coolprop.QT_INPUTS, 0.0, temperature)
        liquid = float(state.hmass())
        tension = _answer(state.surface_tension)
        state.update(coolprop.QT_INPUTS, 1.0, temperature)
        return {"latent heat": float(state.hmass()) - liquid, "surface tension": tension}
    except ValueError:
        return dict.fromkeys(SATURATION_PROPERTIES, math.nan)


def incompressible(code: Code, temperature: float) -> dict[str, float]:
    """The properties of an incompressible liquid; its expansion coefficient follows from its density."""
    return _incompressible(state_of(code), temperature)


def pressure_slopes(code: Code, pressure: float, phase: str, temperature: float) -> dict[str, float]:
    """Differences of the properties in pressure (per Pa) at one temperature.

    Central; one-sided where one of the pressures has no such state, as at the melting curve.
    """
    step = PRESSURE_STEP * pressure
    below = at_pressure(code, pressure - step, phase, temperature)
    above = at_pressure(code, pressure + step, phase, temperature)
    width = 2.0 * step
    if math.isnan(below["density"]) or math.isnan(above["density"]):
        width = step
        here = at_pressure(code, pressure, phase, temperature)
        below, above = (here, above) if math.isnan(below["density"]) else (below, here)
    return {name + PRESSURE_SLOPE: (above[name] - below[name]) / width for name in PROPERTIES}


def _polish(state: Any, coolprop: Any, pressure: float, temperature: float) -> None:
    """Newton steps on density: the backend stops at 1e-8 in pressure, and its noise would spoil a series."""
    density = state.rhomolar()
    for _ in range(2):
        state.update(coolprop.DmolarT_INPUTS, density, temperature)
        steep = state.first_partial_deriv(coolprop.iP, coolprop.iDmolar, coolprop.iT)
        density -= (state.p() - pressure) / steep
    state.update(coolprop.DmolarT_INPUTS, density, temperature)


def _row(state: Any) -> dict[str, float]:
    return {
        "density": _answer(state.rhomass),
        "viscosity": _answer(state.viscosity),
        "conductivity": _answer(state.conductivity),
        "heat capacity": _answer(state.cpmass),
        "expansion coefficient": _answer(state.isobaric_expansion_coefficient),
    }


def _incompressible(state: Any, temperature: float) -> dict[str, float]:
    import CoolProp.CoolProp as coolprop

    try:
        state.update(coolprop.PT_INPUTS, 1e8, temperature)  # above every vapour pressure; not used otherwise
    except ValueError:
        return dict.fromkeys(PROPERTIES, math.nan)
    return {
        "density": _answer(state.rhomass),
        "viscosity": _answer(state.viscosity),
        "conductivity": _answer(state.conductivity),
        "heat capacity": _answer(state.cpmass),
        "expansion coefficient": _answer(
            lambda: -state.first_partial_deriv(coolprop.iDmass, coolprop.iT, coolprop.iP) / state.rhomass()
        ),
    }


def _some_state(state: Any, critical: float, highest: float) -> dict[str, float]:
    """A row where a model answers if there is one: some answer only on one side or when warm."""
    import CoolProp.CoolProp as coolprop

    found = dict.fromkeys(PROPERTIES, math.nan)
    sides = [(quality, part * critical) for part in (0.75, 0.9) for quality in (0.0, 1.0)]
    trials = [(coolprop.QT_INPUTS, quality, temperature) for quality, temperature in sides]
    trials.append((coolprop.PT_INPUTS, 1e5, min(1.2 * critical, highest)))
    for inputs, first, second in trials:
        try:
            state.update(inputs, first, second)
        except ValueError:
            continue
        found |= {name: value for name, value in _row(state).items() if math.isfinite(value)}
    return found


def _answer(ask: Any) -> float:
    try:
        return float(ask())
    except ValueError:
        return math.nan


def _finite(ask: Any) -> float | None:
    value = _answer(ask)
    return value if math.isfinite(value) else None


def humid_air(pressure: float, ratio: float, temperature: float) -> dict[str, float]:
    """The properties of humid air at a humidity ratio (kg of water per kg of dry air), per mass of humid air.

    The backend gives volume and heat capacity per kilogram of dry air. Below the dew point its equations
    are carried on as if the water stayed in the air.
    """
    volume = _humid("V", pressure, ratio, temperature)
    step = HUMID_EXPANSION_STEP
    below, above = (_humid("V", pressure, ratio, temperature + way) for way in (-step, step))
    return {
        "density": (1.0 + ratio) / volume,
        "viscosity": _humid("M", pressure, ratio, temperature),
        "conductivity": _humid("K", pressure, ratio, temperature),
        "heat capacity": _humid("C", pressure, ratio, temperature) / (1.0 + ratio),
        "expansion coefficient": (above - below) / (2.0 * step * volume),
    }


def saturated_air(pressure: float, temperature: float) -> float:
    """Mole fraction of water in saturated air, over ice below its triple point.

    It is above one where water boils: a relative humidity stands on the vapour pressure there too. The
    backend refuses such air, but the fraction is proportional to the relative humidity.
    """
    return _humid("psi_w", pressure, DRY_SHARE, temperature, "R") / DRY_SHARE


def dew_point(pressure: float, ratio: float) -> float | None:
    """Dew point (below the triple point of water: frost point) in K, None of dry air."""
    if ratio <= 0.0:
        return None
    found = _humid("D", pressure, ratio, 300.0)  # the dew point does not depend on the temperature
    return found if math.isfinite(found) else None


def _humid(key: str, pressure: float, humidity: float, temperature: float, by: str = "W") -> float:
    from CoolProp.HumidAirProp import HAPropsSI

    return _answer(lambda: HAPropsSI(key, "T", temperature, "P", pressure, by, humidity))
