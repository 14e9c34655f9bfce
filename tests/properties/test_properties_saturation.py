"""The saturation line: temperature of a pressure, latent heat, surface tension, and the fixed figures."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import iapws
import numpy as np
import pytest

from calcbook.properties import PropertyFault, clear_memory, constant, pure

PRESSURES = np.geomspace(2e3, 2.1e7, 41)


def line(name: str = "water"):
    return pure(name).at(None, "liquid")


def test_the_saturation_temperature_of_the_industrial_formulation() -> None:
    """IAPWS R7-97(2012), Table 36. The backend is IAPWS-95, whose line agrees within 2e-5 in T."""
    pressures = np.array([0.1e6, 1e6, 10e6])
    expected = np.array([372.755919, 453.035632, 584.149488])
    assert line().boiling_temperature(pressures) == pytest.approx(expected, rel=2e-5)


def test_the_saturation_temperature_is_the_inverse_of_the_vapour_pressure() -> None:
    """Eight passes of Newton's method end at rounding: a few units of the last place in ln p."""
    for name in ("water", "ammonia", "n-pentane", "R134a", "nitrogen"):
        fluid = line(name)
        critical = fluid.critical_pressure()
        assert critical is not None
        pressures = np.geomspace(0.01, 0.95, 31) * critical
        back = fluid.saturation_pressure(fluid.boiling_temperature(pressures))
        assert np.max(np.abs(back / pressures - 1.0)) < 1e-13


def test_the_saturation_temperature_agrees_with_the_one_of_a_stated_pressure() -> None:
    """The curve holds the backend to 1e-11 in p, a tenth of that in T."""
    for pressure in (2e4, 101_325.0, 5e6):
        asked = pure("water").at(pressure, "gas").saturation_temperature()
        assert float(line().boiling_temperature(pressure)) == pytest.approx(asked, rel=1e-11)


def test_latent_heat_against_another_library() -> None:
    """iapws, IAPWS-95: the same equation of state coded apart; its saturation iterates to about 1e-6."""
    for temperature in (280.0, 330.0, 373.15, 450.0, 550.0):
        liquid, vapour = (iapws.IAPWS95(T=temperature, x=quality) for quality in (0, 1))
        expected = (vapour.h - liquid.h) * 1e3
        assert float(line().value("latent heat", temperature)) == pytest.approx(expected, rel=1e-6)


def test_surface_tension_of_the_release() -> None:
    """IAPWS R1-76(2014): sigma = 235.8e-3 tau^1.256 (1 - 0.625 tau), tau = 1 - T/647.096.

    The backend has the fit of Mulero et al. (2012), within 0.7 % of the release.
    """
    temperatures = np.array([280.0, 373.15, 500.0, 620.0])
    tau = 1.0 - temperatures / 647.096
    expected = 0.2358 * tau**1.256 * (1.0 - 0.625 * tau)
    assert line().value("surface tension", temperatures) == pytest.approx(expected, rel=7e-3)


def test_slopes_follow_the_values() -> None:
    """Central differences over 1e-4 K: their own error is about 1e-7."""
    temperatures = np.linspace(300.0, 600.0, 13)
    for name in ("latent heat", "surface tension", "saturation pressure"):
        step = 1e-4
        difference = (line().value(name, temperatures + step) - line().value(name, temperatures - step)) / (
            2 * step
        )
        assert line().slope(name, temperatures) == pytest.approx(difference, rel=1e-6)


def test_a_pressure_alone_and_among_others_gives_the_same_bits() -> None:
    together = line().boiling_temperature(PRESSURES)
    alone = np.array([float(line().boiling_temperature(pressure)) for pressure in PRESSURES.tolist()])
    assert np.array_equal(together, alone)


def test_fixed_figures() -> None:
    """IAPWS R2-83: 22.064 MPa; molar mass of water of IAPWS-95: 18.015268 g/mol."""
    assert line().critical_pressure() == pytest.approx(22.064e6, rel=1e-9)
    assert line().molar_mass() == pytest.approx(18.015268e-3, rel=1e-9)


def test_beyond_the_line_there_is_no_value() -> None:
    pressures = np.array([100.0, 1e5, 3e7])
    found = line().boiling_temperature(pressures, outside="nan")
    assert np.isnan(found).tolist() == [True, False, True]
    with pytest.raises(PropertyFault, match="no saturation temperature"):
        line().boiling_temperature(pressures)


def test_a_stated_fluid_has_no_saturation_line() -> None:
    state = constant({"density": 900.0, "viscosity": 1e-3}, name="oil").at(None, "liquid")
    assert state.critical_pressure() is None and state.molar_mass() is None
    with pytest.raises(PropertyFault, match="vapour pressure"):
        state.boiling_temperature(1e5)
    with pytest.raises(PropertyFault, match="no property is called"):
        state.value("latent heat", 300.0)


ASK = """
import sys
import numpy as np
from calcbook.properties import pure
line = pure("n-pentane").at(None, "liquid")
temperature = line.boiling_temperature(np.array([2e5, 3e5]))
found = [temperature, line.value("latent heat", temperature), line.value("surface tension", temperature),
         line.slope("saturation pressure", temperature), [line.critical_pressure(), line.molar_mass()]]
print([float(item).hex() for row in found for item in row], "CoolProp" in sys.modules)
"""


def test_a_warm_run_gives_the_same_bits_without_the_backend(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("CALCBOOK_CACHE", str(tmp_path))
    clear_memory()
    cold, warm = (
        subprocess.run([sys.executable, "-c", ASK], capture_output=True, text=True, check=True).stdout
        for _ in range(2)
    )
    assert cold.endswith("True\n") and warm.endswith("False\n")
    assert cold.removesuffix("True\n") == warm.removesuffix("False\n")
