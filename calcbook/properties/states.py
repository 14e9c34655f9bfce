"""The checks of a state: pure judgement on numbers, one finding each."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from calcbook.properties.findings import Finding

TWO_PHASE_BAND = 1e-6  # relative in T: nearer than this the backend cannot tell the two phases apart
# Above this many critical temperatures a gas at supercritical pressure varies smoothly (common practice).
FAR_ABOVE_CRITICAL = 1.5


@dataclass(frozen=True)
class Known:
    """What is known of a backend fluid at a pressure (None: saturated)."""

    name: str
    pressure: float | None
    low: float
    high: float
    freezing: float | None
    bubble: float | None
    dew: float | None
    facts: dict[str, Any]  # of the fluid at every pressure

    @property
    def critical(self) -> tuple[float, float] | None:
        """Critical temperature and pressure, where the fluid has a vapour side."""
        return (self.facts["T_critical"], self.facts["p_critical"]) if "T_critical" in self.facts else None


def phase_at(known: Known, temperature: float) -> str:
    """liquid, gas, two-phase or supercritical, at a given pressure."""
    if known.critical is None or known.pressure is None:
        return "liquid"
    critical_temperature, critical_pressure = known.critical
    if known.pressure >= critical_pressure:
        return "supercritical" if temperature >= critical_temperature else "liquid"
    if known.bubble is None or known.dew is None:
        return "gas"
    if temperature < known.bubble * (1.0 - TWO_PHASE_BAND):
        return "liquid"
    return "gas" if temperature > known.dew * (1.0 + TWO_PHASE_BAND) else "two-phase"


def check(known: Known, temperature: float, stated: str | None) -> tuple[Finding, ...]:
    """The findings on one state, in a fixed order."""
    actual = phase_at(known, temperature)
    liquid = (stated or actual) != "gas" and actual != "supercritical"
    found = [*_range(known, temperature, liquid), *_phase(known, temperature, stated, actual)]
    found += [*_models(known)]
    return tuple(found)


def saturated(known: Known, temperature: float, vapour: bool, vapour_pressure: float | None) -> Finding:
    """The note that no pressure was given and saturation is assumed."""
    side = "vapour" if vapour else "liquid"
    figures = {"temperature": temperature}
    tail = ""
    if vapour_pressure is not None:
        figures["saturation pressure"] = vapour_pressure
        tail = f", at its vapour pressure of {vapour_pressure:.6g} Pa"
    message = f"no pressure is given for {known.name}: saturated {side} at {temperature:.6g} K{tail}"
    return Finding("saturated-liquid-assumed", "note", message, figures)


def _range(known: Known, temperature: float, liquid: bool) -> Iterator[Finding]:
    if liquid and known.freezing is not None and temperature < known.freezing:
        message = (
            f"{known.name} at {temperature:.8g} K is below its freezing temperature, {known.freezing:.8g} K"
        )
        figures = {"temperature": temperature, "freezing temperature": known.freezing}
        yield Finding("below-freezing", "fault", message, figures)
    elif not known.low <= temperature <= known.high:
        message = (
            f"{known.name} at {temperature:.8g} K is outside the range of its equations, "
            f"{known.low:.8g} K to {known.high:.8g} K"
        )
        figures = {"temperature": temperature, "lowest": known.low, "highest": known.high}
        yield Finding("outside-fluid-range", "fault", message, figures)
    highest = known.facts.get("p_max")
    if highest is not None and known.pressure is not None and known.pressure > highest:
        message = (
            f"{known.name} at {known.pressure:.6g} Pa is above the highest pressure of its equations, "
            f"{highest:.6g} Pa"
        )
        figures = {"pressure": known.pressure, "highest": highest}
        yield Finding("outside-fluid-range", "fault", message, figures)


def _phase(known: Known, temperature: float, stated: str | None, actual: str) -> Iterator[Finding]:
    if known.critical is None or known.pressure is None:
        return
    at = f"{known.name} at {temperature:.8g} K and {known.pressure:.6g} Pa"
    figures = {"temperature": temperature, "pressure": known.pressure}
    if actual == "supercritical":
        near = temperature < FAR_ABOVE_CRITICAL * known.critical[0]
        figures |= {"critical temperature": known.critical[0], "critical pressure": known.critical[1]}
        message = (
            f"{at} is supercritical (critical point {known.critical[0]:.6g} K, {known.critical[1]:.6g} Pa)"
        )
        yield Finding("supercritical", "open item" if near else "note", message, figures)
    if known.bubble is None or known.dew is None:
        if stated == "liquid" and actual == "gas":
            message = f"{at} is a vapour, not a liquid: there is no liquid at this pressure"
            yield Finding("liquid-is-vapour", "fault", message, figures)
        elif stated == "gas" and actual == "liquid":
            message = (
                f"{at} is a liquid, not a vapour: above its critical pressure and below its critical "
                f"temperature, {known.critical[0]:.6g} K"
            )
            yield Finding("vapour-is-liquid", "fault", message, figures)
        return
    figures |= {"bubble temperature": known.bubble, "dew temperature": known.dew}
    boiling = f"{known.bubble:.8g} K"
    if known.dew != known.bubble:
        boiling = f"{known.bubble:.8g} K (dew {known.dew:.8g} K)"
    # At its bubble point itself a stated liquid is saturated liquid, whatever the last bits say; so a vapour.
    between = known.bubble * (1.0 + TWO_PHASE_BAND) < temperature < known.dew * (1.0 - TWO_PHASE_BAND)
    if actual == "two-phase" and (stated is None or between):
        message = f"{at} is at its boiling temperature, {boiling}: two phases"
        yield Finding("two-phase-state", "fault", message, figures)
    elif stated == "liquid" and actual == "gas":
        message = f"{at} is a vapour, not a liquid: it boils at {boiling}"
        yield Finding("liquid-is-vapour", "fault", message, figures)
    elif stated == "gas" and actual == "liquid":
        message = f"{at} is a liquid, not a vapour: it boils at {boiling}"
        yield Finding("vapour-is-liquid", "fault", message, figures)


def _models(known: Known) -> Iterator[Finding]:
    for name in ("viscosity", "conductivity"):
        if not known.facts[name]:
            message = f"there is no {name} model for {known.name}: state its {name} with a source"
            yield Finding(f"no-{name}-model", "fault", message)
