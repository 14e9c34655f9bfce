"""Humid air against published figures, the backend's own answers, and a repeat run without the backend."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from calcbook import properties
from calcbook.properties import PROPERTIES, SATURATION_FRACTION, PropertyFault, clear_memory, humid_air

ATMOSPHERE = 101325.0  # Pa
WATER_TO_AIR = 0.621945  # molar masses, ASHRAE Handbook Fundamentals 2017, chapter 1
FREEZING = 273.15


def ratio(relative_humidity: float, celsius: float, pressure: float = ATMOSPHERE) -> float:
    """The humidity ratio of a relative humidity, as the chain finds it."""
    fraction = float(humid_air(None).at(pressure).value(SATURATION_FRACTION, celsius + FREEZING))
    return WATER_TO_AIR * relative_humidity * fraction / (1.0 - relative_humidity * fraction)


@pytest.mark.parametrize(
    ("celsius", "expected"),
    # ASHRAE Handbook Fundamentals 2017, chapter 1, table 2, humidity ratio of saturated air at 101325 Pa
    [(-20.0, 0.0006373), (5.0, 0.005425), (25.0, 0.020173), (50.0, 0.086863), (85.0, 0.838105)],
)
def test_saturated_air_holds_the_water_of_the_published_table(celsius: float, expected: float) -> None:
    # the table is of an earlier formulation of the same work; it and the backend lie within 0.05 %
    assert ratio(1.0, celsius) == pytest.approx(expected, rel=5e-4)


@pytest.mark.parametrize(
    ("celsius", "expected"),
    # ASHRAE Handbook Fundamentals 2017, chapter 1, table 3, saturation pressure over ice or liquid, Pa
    [(-60.0, 1.08), (-20.0, 103.24), (-5.0, 401.74), (5.0, 872.6), (25.0, 3169.7), (50.0, 12351.3)],
)
def test_the_saturated_fraction_is_the_vapour_pressure_with_its_enhancement(
    celsius: float, expected: float
) -> None:
    fraction = float(humid_air(None).at(ATMOSPHERE).value(SATURATION_FRACTION, celsius + FREEZING))
    # air raises the vapour pressure by 0.3 to 0.6 % at one atmosphere and up to 1.3 times that when cold (the
    # enhancement factor, 1.0039 to 1.0055 in the same chapter); 1.08 Pa has three digits
    assert 1.002 < fraction * ATMOSPHERE / expected < 1.012


def test_the_worked_example_of_the_handbook_is_met() -> None:
    # ASHRAE Handbook Fundamentals 2017, chapter 1, example 1: 40 °C, wet bulb 20 °C, 101325 Pa. Read from the
    # chart: W 0.0065 ± 0.0001, dew point 7 ± 0.5 °C, relative humidity 14 ± 1 %, 0.896 m3/kg of dry air
    air = humid_air(0.0065).at(ATMOSPHERE)
    drier, wetter = (humid_air(wet).at(ATMOSPHERE).saturation_temperature() for wet in (0.0064, 0.0066))
    assert drier is not None and wetter is not None
    # the two readings are met together: dew points of that humidity ratio meet 6.5 to 7.5 °C
    assert drier - FREEZING < 7.5 and wetter - FREEZING > 6.5
    density = float(air.value("density", 40.0 + FREEZING))
    assert (1.0 + 0.0065) / density == pytest.approx(0.896, abs=0.0005)
    assert ratio(0.14, 40.0) == pytest.approx(0.0065, abs=0.0005)  # one per cent of humidity is 0.00046


@pytest.mark.parametrize("pressure", [50e3, ATMOSPHERE, 800e3])
@pytest.mark.parametrize("wet", [0.0, 0.004, 0.05])
def test_every_property_is_that_of_the_backend_per_mass_of_humid_air(pressure: float, wet: float) -> None:
    from CoolProp.HumidAirProp import HAPropsSI

    temperatures = np.array([291.7, 330.2, 415.9])
    air = humid_air(wet).at(pressure)
    # volume and heat capacity of the backend are per kilogram of dry air; the series holds to 1e-9
    for index, temperature in enumerate(temperatures.tolist()):
        asked = {
            key: HAPropsSI(key, "T", temperature, "P", pressure, "W", wet) for key in ("V", "C", "M", "K")
        }
        for name, expected in (
            ("density", (1.0 + wet) / asked["V"]),
            ("heat capacity", asked["C"] / (1.0 + wet)),
            ("viscosity", asked["M"]),
            ("conductivity", asked["K"]),
        ):
            assert air.value(name, temperatures)[index] == pytest.approx(expected, rel=2e-9)


def test_dry_humid_air_is_the_air_of_the_pure_fluid() -> None:
    dry, pure = humid_air(0.0).at(ATMOSPHERE), properties.pure("air").at(ATMOSPHERE, "gas")
    temperatures = np.array([280.0, 320.0, 400.0])
    # both stand on equations of state for dry air, fitted apart: 0.02 % in volume and heat capacity; the same
    # transport equations at a density that differs by as much
    for name in ("density", "heat capacity", "viscosity", "conductivity"):
        assert dry.value(name, temperatures) == pytest.approx(pure.value(name, temperatures), rel=1e-3)
    assert dry.saturation_temperature() is None


def test_water_makes_air_lighter_and_of_greater_heat_capacity() -> None:
    temperature = 333.15
    densities = [
        float(humid_air(wet).at(ATMOSPHERE).value("density", temperature)) for wet in (0.0, 0.02, 0.1)
    ]
    capacities = [
        float(humid_air(wet).at(ATMOSPHERE).value("heat capacity", temperature)) for wet in (0.0, 0.02, 0.1)
    ]
    assert densities == sorted(densities, reverse=True) and capacities == sorted(capacities)


@pytest.mark.parametrize("name", PROPERTIES)
def test_slopes_are_those_of_the_values(name: str) -> None:
    air = humid_air(0.015).at(ATMOSPHERE)
    temperatures, step = np.array([255.0, 300.0, 350.0]), 0.01
    difference = (air.value(name, temperatures + step) - air.value(name, temperatures - step)) / (2.0 * step)
    scale = np.abs(air.value(name, temperatures)) / temperatures
    # the step's rounding is 1e-12 of the value over 3e-5 of the temperature
    assert air.slope(name, temperatures) == pytest.approx(difference, abs=float(np.max(scale)) * 1e-6)
    low, high = (humid_air(0.015).at(ATMOSPHERE * (1.0 + way)).value(name, 300.0) for way in (-1e-3, 1e-3))
    assert air.pressure_slope(name, 300.0) == pytest.approx((high - low) / (2e-3 * ATMOSPHERE), rel=1e-9)


def test_an_ideal_gas_expands_with_its_temperature() -> None:
    # humid air at one atmosphere is nearly ideal: beta = 1/T within 1 %
    air = humid_air(0.01).at(ATMOSPHERE)
    temperatures = np.array([300.0, 350.0, 400.0])
    assert air.value("expansion coefficient", temperatures) == pytest.approx(1.0 / temperatures, rel=0.01)


def test_a_sample_has_the_same_bits_alone_and_among_others() -> None:
    air = humid_air(0.015).at(ATMOSPHERE)
    temperatures = np.linspace(240.0, 600.0, 37)
    for name in PROPERTIES:
        among = air.value(name, temperatures)
        alone = np.array([float(air.value(name, one)) for one in temperatures.tolist()])
        assert among.tobytes() == alone.tobytes()


def test_a_state_that_cannot_be_is_found_with_its_figures() -> None:
    air = humid_air(0.015).at(ATMOSPHERE)
    assert air.phase_at(300.0) == "gas" and air.check_state(300.0) == ()
    (wet,) = air.check_state(288.0)
    assert (wet.code, wet.level) == ("above-saturation", "fault")
    assert wet.figures["dew point"] == pytest.approx(293.404, abs=1e-3)  # the backend's own dew point
    assert [one.code for one in air.check_state(300.0, "liquid")] == ["liquid-is-vapour"]
    assert [one.code for one in air.check_state(700.0)] == ["outside-fluid-range"]
    # saturated air is not above saturation, by rounding
    saturated = ratio(1.0, 30.0)
    assert humid_air(saturated).at(ATMOSPHERE).check_state(30.0 + FREEZING) == ()


def test_below_its_dew_point_air_has_values_that_join_on() -> None:
    air = humid_air(0.015).at(ATMOSPHERE)
    dew = air.saturation_temperature()
    assert dew is not None
    around = dew + np.array([-1e-6, 1e-6])
    for name in PROPERTIES:
        below, above = air.value(name, around)
        assert below == pytest.approx(above, rel=1e-7)
    assert np.isfinite(air.value("density", 275.0))


def test_what_cannot_be_asked_is_a_fault() -> None:
    with pytest.raises(PropertyFault) as caught:
        humid_air(-0.01)
    assert caught.value.code == "fraction-outside"
    with pytest.raises(PropertyFault) as caught:
        humid_air(0.01).at(None)
    assert caught.value.code == "pressure-missing"
    with pytest.raises(PropertyFault) as caught:
        humid_air(0.01).at(ATMOSPHERE).value("density", 800.0)
    assert caught.value.code == "outside-fluid-range"
    # a fluid for saturation has no properties of its own, and humid air no saturation but its dew point
    assert np.isnan(humid_air(None).at(ATMOSPHERE).value("density", 300.0, outside="nan"))
    assert np.isnan(humid_air(0.01).at(ATMOSPHERE).value(SATURATION_FRACTION, 300.0, outside="nan"))


ASKS = """
import sys
from calcbook import properties
air = properties.humid_air(0.015).at(101325.0)
row = [float(air.value(name, 300.0)).hex() for name in properties.PROPERTIES]
row += [float(air.slope(name, 300.0)).hex() for name in properties.PROPERTIES]
fraction = properties.humid_air(None).at(101325.0)
row += [float(fraction.value(properties.SATURATION_FRACTION, 300.0)).hex()]
row += [float(fraction.slope(properties.SATURATION_FRACTION, 300.0)).hex()]
row += [air.saturation_temperature().hex()]
print(" ".join(row), "CoolProp" in sys.modules)
"""


def test_a_repeat_run_gives_the_same_bits_without_the_backend(empty_cache: Path) -> None:
    environment = os.environ | {"CALCBOOK_CACHE": str(empty_cache)}
    runs = [
        subprocess.run(
            [sys.executable, "-c", ASKS], env=environment, capture_output=True, text=True, check=True
        )
        for _ in range(2)
    ]
    cold, warm = (run.stdout.split() for run in runs)
    assert cold[:-1] == warm[:-1]
    assert (cold[-1], warm[-1]) == ("True", "False")


def test_a_damaged_cache_is_made_again(empty_cache: Path) -> None:
    first = float(humid_air(0.015).at(ATMOSPHERE).value("viscosity", 300.0))
    for path in (empty_cache / "properties").glob("humid*.json"):
        path.write_bytes(path.read_bytes()[:-20])
    clear_memory()
    assert float(humid_air(0.015).at(ATMOSPHERE).value("viscosity", 300.0)) == first
