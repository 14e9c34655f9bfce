"""Every check of a state, with the numbers that decide it; names and their faults."""

import CoolProp.CoolProp as coolprop
import pytest

from calcbook.properties import (
    PROPERTIES,
    PropertyFault,
    backend_version,
    fluid_names,
    mixture,
    mixture_names,
    names,
    pure,
)


def _codes(fluid, temperature, phase=None):
    return [(finding.code, finding.level) for finding in fluid.check_state(temperature, phase)]


def test_a_sound_state_has_no_findings():
    assert _codes(pure("water").at(4e5), 350.0, "liquid") == []
    assert _codes(pure("steam").at(4e5), 450.0, "vapour") == []
    assert _codes(pure("air").at(101325.0, "gas"), 300.0) == []


def test_a_liquid_that_is_vapour():
    water = pure("water").at(4e5, "liquid")
    (finding,) = water.check_state(450.0)
    assert (finding.code, finding.level) == ("liquid-is-vapour", "fault")
    # IAPWS R7-97 saturation temperature at 0.4 MPa: 416.76 K (143.6 C, common practice)
    assert finding.figures["bubble temperature"] == pytest.approx(416.76, abs=0.01)
    assert "416.758" in finding.message
    assert "450 K" in finding.message
    assert _codes(pure("R134a").at(101325.0), 300.0, "liquid") == [("liquid-is-vapour", "fault")]


def test_a_vapour_that_is_liquid():
    assert _codes(pure("steam").at(4e5, "vapour"), 400.0) == [("vapour-is-liquid", "fault")]
    # below the critical temperature at a pressure above the critical one
    assert ("vapour-is-liquid", "fault") in _codes(pure("water").at(25e6), 400.0, "gas")


def test_no_liquid_below_the_triple_pressure():
    assert _codes(pure("water").at(300.0), 280.0, "liquid") == [("liquid-is-vapour", "fault")]
    with pytest.raises(PropertyFault) as caught:
        pure("water").at(300.0, "liquid").value("density", 280.0)
    assert caught.value.code == "liquid-is-vapour"
    assert pure("water").at(300.0).saturation_temperature() is None


def test_two_phases():
    water = pure("water").at(4e5)
    boiling = water.saturation_temperature()
    assert _codes(water, boiling) == [("two-phase-state", "fault")]
    assert water.phase_at(boiling) == "two-phase"
    with pytest.raises(PropertyFault) as caught:
        water.value("density", boiling)
    assert caught.value.code == "two-phase-state"
    # stated as one side of saturation it is one
    assert _codes(water, boiling, "liquid") == []
    assert _codes(water, boiling, "gas") == []
    assert pure("water").at(4e5, "liquid").value("density", boiling) == pytest.approx(
        coolprop.PropsSI("Dmass", "P", 4e5, "Q", 0, "Water"), rel=1e-10
    )


def test_air_has_two_boiling_temperatures():
    air = pure("air").at(1e5)
    assert air.phase_at(80.0) == "two-phase"
    assert air.saturation_temperature() < 80.0 < pure("air").at(1e5, "gas").saturation_temperature()
    assert _codes(air, 80.0, "liquid") == [("two-phase-state", "fault")]


def test_a_blend_between_its_bubble_and_its_dew_point():
    """R407C at 9 bar boils from 15 to 21 degC (its glide is about 6 K, common practice)."""
    bubble, dew = (coolprop.PropsSI("T", "P", 9e5, "Q", quality, "R407C") for quality in (0, 1))
    liquid, gas = pure("R407C").at(9e5, "liquid"), pure("R407C").at(9e5, "gas")
    for temperature in (bubble + 0.01, 0.5 * (bubble + dew), dew - 0.01):
        for side, phase in ((liquid, "liquid"), (gas, "gas")):
            assert ("two-phase-state", "fault") in _codes(side, temperature, phase)
    # At either point itself the stated phase is a saturated one, whatever the last bits say.
    for part in (-1e-10, 0.0, 1e-10):
        assert _codes(liquid, bubble * (1.0 + part), "liquid") == []
        assert _codes(gas, dew * (1.0 + part), "gas") == []


def test_freezing():
    water = pure("water")
    assert _codes(water.at(4e5), 270.0, "liquid") == [("below-freezing", "fault")]
    # triple point of water 273.16 K; ice melts at 273.1525 K at 1 atm (common practice)
    assert water.at(None).freezing_temperature() == pytest.approx(273.16)
    assert water.at(101325.0).freezing_temperature() == pytest.approx(273.1525, abs=1e-3)
    assert ("below-freezing", "fault") in _codes(water.at(None), 273.15)
    assert _codes(water.at(4e5), 273.15, "liquid") == []
    with pytest.raises(PropertyFault) as caught:
        water.at(4e5, "liquid").value("viscosity", 265.0)
    assert caught.value.code == "below-freezing"
    # the melting curves of hydrogen run below its triple point, 13.957 K (common practice), at low pressure
    assert pure("hydrogen").at(1e5).freezing_temperature() == pytest.approx(13.957, abs=1e-3)
    glycol = mixture("ethylene glycol + water", "mass fraction", 0.5).at(None)
    # freezes at 237 K by the backend's curve; about -37 C in handbooks (from memory)
    assert glycol.freezing_temperature() == pytest.approx(236.5, abs=1.5)
    assert _codes(glycol, 230.0) == [("below-freezing", "fault")]


def test_range():
    water = pure("water")
    assert _codes(water.at(1e5), 2600.0, "gas") == [("outside-fluid-range", "fault")]
    assert _codes(water.at(2e9), 600.0)[0] == ("outside-fluid-range", "fault")
    with pytest.raises(PropertyFault) as caught:
        water.at(1e5, "gas").value("density", 2600.0)
    assert caught.value.code == "outside-fluid-range"
    glycol = mixture("ethylene glycol + water", "volume fraction", 0.3).at(None)
    assert _codes(glycol, 400.0) == [("outside-fluid-range", "fault")]
    assert glycol.limits()[1] == 373.15


def test_supercritical():
    # carbon dioxide 304.13 K and 7.377 MPa; nitrogen 126.2 K and 3.396 MPa (common practice)
    dioxide = pure("CO2").at(9e6)
    (finding,) = dioxide.check_state(320.0)
    assert (finding.code, finding.level) == ("supercritical", "open item")
    assert finding.figures["critical temperature"] == pytest.approx(304.13, abs=0.01)
    assert dioxide.phase_at(320.0) == "supercritical"
    assert dioxide.phase_at(290.0) == "liquid"
    assert _codes(pure("nitrogen").at(4e6), 300.0) == [("supercritical", "note")]


def test_models_that_are_missing():
    # 70 of the 136 fluids have no viscosity model and 73 no conductivity model (tested with version 8.0.0)
    ethylene = pure("ethylene").at(1e5)
    assert _codes(ethylene, 300.0) == [
        ("no-viscosity-model", "fault"),
        ("no-conductivity-model", "fault"),
    ]
    sulfide = pure("hydrogen sulfide").at(1e5)
    assert _codes(sulfide, 300.0) == [("no-conductivity-model", "fault")]
    assert sulfide.value("viscosity", 300.0) > 0.0
    with pytest.raises(PropertyFault) as caught:
        ethylene.value("viscosity", 300.0)
    assert caught.value.code == "no-viscosity-model"
    assert ethylene.value("density", 300.0) > 0.0


@pytest.mark.skipif(backend_version() != "8.0.0", reason="counts of version 8.0.0")
def test_how_many_models_are_missing():
    missing = {"viscosity": 0, "conductivity": 0}
    for name in fluid_names():
        facts = pure(name).at(1e5)._facts()
        for model in missing:
            missing[model] += not facts[model]
    assert missing == {"viscosity": 70, "conductivity": 73}


def test_saturated_liquid_is_said():
    (finding,) = pure("water").at(None).check_state(350.0)
    assert (finding.code, finding.level) == ("saturated-liquid-assumed", "note")
    # IAPWS R7-97: 41.68 kPa at 350 K
    assert finding.figures["saturation pressure"] == pytest.approx(41682.0, rel=1e-3)
    assert "saturated vapour" in pure("water").at(None, "vapour").check_state(350.0)[0].message


def test_vapour_pressure():
    assert pure("water").at(1e5).has_vapour_pressure
    glycol = mixture("ethylene glycol + water", "mass fraction", 0.5).at(1e5)
    assert not glycol.has_vapour_pressure
    assert glycol.saturation_temperature() is None
    with pytest.raises(PropertyFault) as caught:
        glycol.saturation_pressure(300.0)
    assert caught.value.code == "no-vapour-pressure"
    assert _codes(glycol, 300.0, "gas") == [("vapour-is-liquid", "fault")]


def test_names_are_found_in_any_case():
    assert pure("water").name == pure("WATER").name == pure("h2o").name == pure("steam").name == "Water"
    assert pure("r134a").name == pure("R-134a").name == "R134a"
    assert pure("methane").name == "Methane"
    assert pure("propane").name == "n-Propane"
    assert pure("dry air").name == "Air"
    assert pure("carbon dioxide").name == "CarbonDioxide"


def test_a_mistyped_name_is_answered_with_the_nearest():
    with pytest.raises(PropertyFault) as caught:
        pure("watr")
    assert (caught.value.code, caught.value.nearest) == ("fluid-unknown", ("Water",))
    with pytest.raises(PropertyFault) as caught:
        mixture("ethylen glycol + water", "mass fraction", 0.4)
    assert caught.value.nearest[0] == "ethylene glycol + water"


def test_a_wrong_basis_names_the_other():
    with pytest.raises(PropertyFault) as caught:
        mixture("methanol + water", "volume fraction", 0.2)
    assert (caught.value.code, caught.value.expected) == ("mixture-basis", "mass fraction")
    with pytest.raises(PropertyFault) as caught:
        mixture("ethylene glycol + water", "mole fraction", 0.2)
    assert caught.value.expected == "mass fraction or volume fraction"


@pytest.mark.parametrize("fraction", [-0.1, 0.75, float("nan")])
def test_a_fraction_outside_the_data(fraction):
    with pytest.raises(PropertyFault) as caught:
        mixture("ethylene glycol + water", "mass fraction", fraction)
    assert caught.value.code == "fraction-outside"
    assert "0.6" in caught.value.expected


def test_other_faults():
    with pytest.raises(PropertyFault) as caught:
        pure("water").at(0.0)
    assert caught.value.code == "pressure-not-positive"
    with pytest.raises(PropertyFault) as caught:
        pure("water").at(1e5, "plasma")
    assert caught.value.code == "phase-unknown"
    with pytest.raises(PropertyFault) as caught:
        pure("water").at(1e5).value("colour", 300.0)
    assert caught.value.code == "property-unknown"


@pytest.mark.parametrize("name", mixture_names())
def test_every_mixture_answers(name):
    basis = next(iter(names.MIXTURES[name]))
    solution = mixture(name, basis, 0.1).at(1e5)
    for quantity in PROPERTIES:
        if quantity != "expansion coefficient":
            assert solution.value(quantity, 290.0) > 0.0
    # water with one tenth dissolved keeps the size of its properties (common practice)
    assert solution.value("density", 290.0) == pytest.approx(1030.0, rel=0.1)
    assert solution.value("heat capacity", 290.0) == pytest.approx(3900.0, rel=0.15)
    assert solution.value("conductivity", 290.0) == pytest.approx(0.56, rel=0.15)
    assert solution.value("viscosity", 290.0) == pytest.approx(1.4e-3, rel=0.4)


def test_liquid_sodium():
    # at 600 K, 873 kg/m3 and 75 W/(m K) (from memory)
    sodium = pure("liquid sodium").at(None)
    assert sodium.value("density", 600.0) == pytest.approx(873.0, rel=0.01)
    assert sodium.value("conductivity", 600.0) == pytest.approx(75.0, rel=0.05)


@pytest.mark.skipif(backend_version() != "8.0.0", reason="the list of version 8.0.0")
def test_the_list_of_names_is_the_backends():
    assert names.NAMES_FILE.read_text(encoding="utf-8") == names.as_text(names.from_backend())
    assert len(names.from_backend()["fluids"]) == 136


def test_the_provider_names_backend_and_version():
    assert pure("water").provider == (
        f"CoolProp {backend_version()}, Helmholtz energy equation of state, Water"
    )
    assert backend_version() == coolprop.get_global_param_string("version")
