"""Series against the backend, slopes against differences, and bits that do not depend on company."""

import CoolProp.CoolProp as coolprop
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from calcbook.properties import PROPERTIES, PropertyFault, mixture, pure, rows_of_several, tabulated
from calcbook.properties import series as chebyshev

KEYS = {"density": "Dmass", "viscosity": "V", "conductivity": "L", "heat capacity": "Cpmass"}
KEYS["expansion coefficient"] = "isobaric_expansion_coefficient"

# fluid, Pa, phase, temperatures K
CURVES = [
    ("Water", 4e5, "liquid", (273.2, 416.0)),
    ("Water", 10e6, "liquid", (273.2, 584.0)),
    ("Water", 4e5, "gas", (417.0, 1500.0)),
    ("Water", 25e6, None, (280.0, 1200.0)),
    ("Air", 101325.0, "gas", (150.0, 1500.0)),
    ("R134a", 6e5, "liquid", (180.0, 294.0)),
    ("R134a", 6e5, "gas", (295.0, 450.0)),
    ("Ammonia", 1e6, "gas", (299.0, 700.0)),
    ("n-Propane", 2e6, "liquid", (120.0, 330.0)),
    ("Nitrogen", 4e6, None, (70.0, 1500.0)),
]


@pytest.mark.parametrize(("name", "pressure", "phase", "span"), CURVES)
def test_values_repeat_the_backend(name, pressure, phase, span):
    fluid = pure(name).at(pressure, phase)
    temperatures = np.random.default_rng(20).uniform(*span, 60)
    for quantity, key in KEYS.items():
        ours = fluid.value(quantity, temperatures)
        theirs = np.array([coolprop.PropsSI(key, "T", T, "P", pressure, name) for T in temperatures])
        # The backend meets its pressure to 1e-8 only, and near the pseudo-critical temperature a property
        # varies several times as fast as the pressure; answers polished in density follow below at 1e-10.
        assert np.max(np.abs(ours - theirs)) <= 1e-7 * np.max(np.abs(theirs))


@pytest.mark.parametrize(("name", "pressure", "phase", "span"), CURVES)
def test_series_are_within_1e_10_of_the_backend_at_that_pressure(name, pressure, phase, span):
    fluid = pure(name).at(pressure, phase)
    state = coolprop.AbstractState("HEOS", name)
    temperatures = np.random.default_rng(21).uniform(*span, 60)
    density = np.array([_density(state, pressure, T) for T in temperatures])
    assert fluid.value("density", temperatures) == pytest.approx(density, rel=1e-10)
    for quantity, ask in (
        ("viscosity", "viscosity"),
        ("conductivity", "conductivity"),
        ("heat capacity", "cpmass"),
        ("expansion coefficient", "isobaric_expansion_coefficient"),
    ):
        theirs = []
        for T in temperatures:
            _density(state, pressure, T)
            theirs.append(getattr(state, ask)())
        apart = np.abs(fluid.value(quantity, temperatures) - theirs)
        scale = np.max(np.abs(theirs)) if quantity == "expansion coefficient" else np.abs(theirs)
        assert np.max(apart / scale) <= 1e-10


def _density(state, pressure, temperature):
    """Leaves the state at the density whose pressure is right to rounding."""
    state.update(coolprop.PT_INPUTS, pressure, temperature)
    density = state.rhomolar()
    for _ in range(3):
        state.update(coolprop.DmolarT_INPUTS, density, temperature)
        steep = state.first_partial_deriv(coolprop.iP, coolprop.iDmolar, coolprop.iT)
        density += (pressure - state.p()) / steep
    state.update(coolprop.DmolarT_INPUTS, density, temperature)
    return state.rhomass()


@pytest.mark.parametrize("side", ["liquid", "vapour"])
def test_saturation_repeats_the_backend(side):
    quality = 1 if side == "vapour" else 0
    water = pure("water").at(None, side)
    temperatures = np.random.default_rng(22).uniform(274.0, 640.0, 60)
    for quantity, key in KEYS.items():
        theirs = np.array([coolprop.PropsSI(key, "T", T, "Q", quality, "Water") for T in temperatures])
        assert np.max(np.abs(water.value(quantity, temperatures) / theirs - 1.0)) <= 1e-10
    theirs = np.array([coolprop.PropsSI("P", "T", T, "Q", quality, "Water") for T in temperatures])
    assert water.saturation_pressure(temperatures) == pytest.approx(theirs, rel=1e-10)


def _fluids():
    yield pure("water").at(4e5, "liquid"), np.linspace(275.0, 410.0, 23)
    yield pure("water").at(4e5, "gas"), np.linspace(420.0, 900.0, 23)
    yield pure("air").at(1e5), np.linspace(200.0, 900.0, 23)
    yield pure("water").at(None), np.linspace(280.0, 600.0, 23)
    yield mixture("propylene glycol + water", "mass fraction", 0.4).at(None), np.linspace(260.0, 360.0, 23)


@pytest.mark.parametrize("number", range(5))
@pytest.mark.parametrize("quantity", PROPERTIES)
def test_slopes_are_central_differences(number, quantity):
    fluid, at = list(_fluids())[number]
    step = 0.01
    difference = (fluid.value(quantity, at + step) - fluid.value(quantity, at - step)) / (2.0 * step)
    # rounding: 1e-12 of the value over 0.02 K; curvature: below 1e-6 of the slope on these smooth curves
    allowed = 1e-9 * np.max(np.abs(fluid.value(quantity, at))) + 1e-5 * np.max(np.abs(difference))
    assert np.max(np.abs(fluid.slope(quantity, at) - difference)) <= allowed


def test_pressure_slopes():
    # of an ideal gas d(rho)/dp = rho/p; air at 1 bar and 300 K is within 0.1 % of ideal (common practice)
    air = pure("air").at(1e5)
    assert air.pressure_slope("density", 300.0) == pytest.approx(air.value("density", 300.0) / 1e5, rel=1e-3)
    # compressibility of water at 25 C, 4.5e-10 per Pa (common practice)
    water = pure("water").at(1e5, "liquid")
    relative = water.pressure_slope("density", 298.15) / water.value("density", 298.15)
    assert relative == pytest.approx(4.52e-10, rel=1e-2)
    for name in PROPERTIES:
        step = 1e3
        at = np.array([280.0, 320.0, 365.0])
        high, low = (pure("water").at(1e5 + sign * step, "liquid").value(name, at) for sign in (1, -1))
        difference = (high - low) / (2.0 * step)
        # the series carry 1e-12, over 2 % of the pressure
        noise = 4e-12 * np.max(np.abs(water.value(name, at))) / (2.0 * step)
        assert np.max(np.abs(water.pressure_slope(name, at) - difference)) <= noise + 1e-4 * np.max(
            np.abs(difference)
        )


def test_pressure_slope_is_zero_where_pressure_is_not_used():
    brine = mixture("sodium chloride + water", "mass fraction", 0.1).at(1e5)
    assert np.all(brine.pressure_slope("density", [280.0, 300.0]) == 0.0)
    assert pure("water").at(None).pressure_slope("viscosity", 300.0) == 0.0
    assert pure("water").at(1e5, "liquid").pressure_slope("viscosity", 380.0) == 0.0


@given(st.lists(st.floats(280.0, 900.0), min_size=1, max_size=40), st.sampled_from(PROPERTIES))
@settings(deadline=None, max_examples=60)
def test_bits_do_not_depend_on_company(temperatures, quantity):
    air = pure("air").at(2e5)
    together = air.value(quantity, temperatures)
    sloped = air.slope(quantity, temperatures)
    for index, temperature in enumerate(temperatures):
        assert air.value(quantity, temperature) == together[index]
        assert air.slope(quantity, [temperature])[0] == sloped[index]


def test_shapes_are_kept():
    water = pure("water").at(4e5, "liquid")
    for shape in ((), (1,), (0,), (2, 3), (2, 1, 2)):
        found = water.value("density", np.full(shape, 300.0))
        assert found.shape == shape
        assert found.dtype == np.float64
        assert isinstance(found, np.ndarray)


def test_a_stated_liquid_stays_a_liquid_past_its_boiling_temperature():
    water = pure("water").at(1e5, "liquid")
    boiling = water.saturation_temperature()
    around = water.value("viscosity", [boiling - 1e-6, boiling + 1e-6])
    # both sides of the joint within the slope of the viscosity, 1 %/K, over 2e-6 K
    assert around[1] == pytest.approx(around[0], rel=1e-7)
    assert water.value("density", 400.0) == pure("water").at(None).value("density", 400.0)


def test_a_stated_vapour_stays_a_vapour_below_its_dew_temperature():
    steam = pure("steam").at(1e5, "vapour")
    dew = steam.saturation_temperature()
    around = steam.value("density", [dew - 1e-6, dew + 1e-6])
    assert around[1] == pytest.approx(around[0], rel=1e-6)
    assert steam.value("density", 350.0) == pure("water").at(None, "vapour").value("density", 350.0)


def test_phase_is_found_for_each_temperature():
    water = pure("water").at(1e5)
    cold, hot = water.value("density", [300.0, 450.0])
    assert cold == pure("water").at(1e5, "liquid").value("density", 300.0)
    assert hot == pure("water").at(1e5, "gas").value("density", 450.0)


def test_a_pressure_for_each_sample():
    water = pure("water").at(1e5, "liquid")
    generator = np.random.default_rng(23)
    temperatures = generator.uniform(280.0, 360.0, 50)
    few = np.where(np.arange(50) % 2 == 0, 1e5, 3e5)
    found = water.values_at("viscosity", temperatures, few)
    assert np.array_equal(found[0::2], water.value("viscosity", temperatures[0::2]))
    assert np.array_equal(found[1::2], pure("water").at(3e5, "liquid").value("viscosity", temperatures[1::2]))
    many = generator.uniform(0.9e5, 1.1e5, 50)
    many[7] = 1e5
    found = water.values_at("viscosity", temperatures, many)
    assert found[7] == water.value("viscosity", temperatures[7])
    pairs = zip(temperatures, many, strict=True)
    single = [pure("water").at(p, "liquid").value("viscosity", T) for T, p in pairs]
    assert found == pytest.approx(np.array(single), rel=1e-10)


@pytest.mark.parametrize("phase", ["liquid", "gas", None])
def test_many_pressures_follow_the_rules_of_few(phase):
    generator = np.random.default_rng(24)
    temperatures = generator.uniform(330.0, 640.0, 60)
    pressures = 10.0 ** generator.uniform(4.0, 7.5, 60)
    pressures[0] = 25e6
    water = pure("water").at(1e5, phase)
    found = water.values_at("density", temperatures, pressures)
    pairs = zip(temperatures, pressures, strict=True)
    single = [pure("water").at(p, phase).value("density", T) for T, p in pairs]
    assert found == pytest.approx(np.array(single), rel=1e-9)  # the backend at p against its curve


def test_many_pressures_name_what_is_missing():
    water = pure("water").at(1e5, "liquid")
    pressures = np.linspace(1e5, 2e5, 40)
    with pytest.raises(PropertyFault) as caught:
        water.values_at("density", np.full(40, 250.0), pressures)
    assert caught.value.code == "below-freezing"
    assert np.all(np.isnan(water.values_at("density", np.full(40, 250.0), pressures, outside="nan")))


def test_outside_can_be_nan_for_a_solver():
    water = pure("water").at(1e5, "liquid")
    found = water.value("density", [250.0, 300.0, np.nan, 5000.0], outside="nan")
    assert np.isnan(found).tolist() == [True, False, True, True]
    with pytest.raises(PropertyFault):
        water.value("density", [250.0, 300.0])


@given(st.lists(st.floats(-1.0, 1.0), min_size=5, max_size=5), st.floats(1.0, 5.0), st.floats(0.0, 1.0))
@settings(deadline=None)
def test_a_polynomial_is_its_own_series(terms, width, part):
    low, high = 2.0, 2.0 + width
    polynomial = np.polynomial.Polynomial(terms)
    coefficients = chebyshev.fit(polynomial(chebyshev.nodes(low, high)))
    at = np.array([low + part * width])
    scale = np.max(np.abs(polynomial(np.linspace(low, high, 50)))) + 7.0**4
    # rounding of 28 terms at the size of the largest power
    assert abs(chebyshev.evaluate(coefficients, low, high, at) - polynomial(at))[0] <= 1e-13 * scale
    sloped = chebyshev.evaluate(chebyshev.derivative(coefficients, low, high), low, high, at)
    # deriving multiplies rounding by up to the square of the count of nodes
    assert abs(sloped - polynomial.deriv()(at))[0] <= 28**2 * 1e-13 * scale


@given(
    st.lists(st.floats(-1e3, 1e3), min_size=1, max_size=28),
    st.floats(250.0, 400.0),
    st.floats(1.0, 300.0),
    st.lists(st.floats(0.0, 1.0), min_size=2, max_size=9),
)
def test_one_sample_has_the_bits_it_has_among_others(coefficients, low, width, places):
    # One sample goes in plain floats, several in arrays: both round each sum and product alike.
    at = low + width * np.array(places)
    several = chebyshev.evaluate(coefficients, low, low + width, at)
    alone = [chebyshev.evaluate(coefficients, low, low + width, at[i : i + 1])[0] for i in range(at.size)]
    assert np.array_equal(several, np.array(alone), equal_nan=True)
    assert chebyshev.evaluate(coefficients, low, low + width, at[0].reshape(())).shape == ()


@pytest.mark.parametrize(("name", "pressure", "phase", "span"), CURVES)
def test_properties_read_together_have_the_bits_of_each_alone(name, pressure, phase, span):
    # Within one panel of every property, over several, and beyond the ends of the curve (NaN).
    fluid = pure(name).at(pressure, phase)
    low, high = span
    asked = tuple((quantity, sloped) for sloped in (True, False) for quantity in PROPERTIES)
    for temperatures in (
        np.linspace(low, low + 2.0, 9),
        np.linspace(low, high, 37),
        np.array([low, 1.0, high, np.nan, 5000.0]),
        np.full((2, 3), low + 1.0),
        np.asarray(high),
    ):
        together = fluid.rows(asked, temperatures)
        for row, (quantity, sloped) in zip(together, asked, strict=True):
            alone = (fluid.slope if sloped else fluid.value)(quantity, temperatures, outside="nan")
            np.testing.assert_array_equal(row, alone)


@pytest.mark.parametrize("size", [40, 3000])
def test_several_fluids_read_at_once_have_the_bits_of_each_alone(size):
    # A state within one panel, one beyond its curve's end, one cut by boiling, a saturated one, a liquid without
    # a vapour, and one that no series answers; one of them with a single sample.
    rows = [293.15, 333.15]
    table = {"density": (rows, [998.2, 983.2]), "viscosity": (rows, [1.002e-3, 0.466e-3])}
    fluids = [
        pure("water").at(4e5, "liquid"),
        pure("water").at(1.7e5, "liquid"),
        pure("water").at(1e3, "liquid"),
        pure("water").at(None, "liquid"),
        mixture("ethylene glycol + water", "mass fraction", 0.3).at(2e5, "liquid"),
        tabulated(table).at(2e5, "liquid"),
    ]
    asked = tuple((name, sloped) for name in ("viscosity", "density") for sloped in (False, True))
    draw = np.random.default_rng(3)
    place = draw.integers(0, len(fluids) - 1, size)
    place[:2] = len(fluids) - 1, 0
    temperatures = draw.uniform(280.0, 330.0, size)
    temperatures[place == 1] = draw.uniform(370.0, 410.0, int((place == 1).sum()))
    temperatures[5] = np.nan
    together = rows_of_several(fluids, place, asked, temperatures)
    for number, fluid in enumerate(fluids):
        own = place == number
        np.testing.assert_array_equal(together[:, own], fluid.rows(asked, temperatures[own]))


def test_a_slope_alone_brings_its_value_along_unseen():
    water = pure("water").at(4e5, "liquid")
    at = np.array([300.0, 310.0])
    found = water.rows((("viscosity", True),), at)
    assert found.shape == (1, 2)
    np.testing.assert_array_equal(found[0], water.slope("viscosity", at))


@given(st.lists(st.floats(-1.0, 1.0), min_size=1, max_size=28), st.floats(0.0, 2.0))
def test_a_shortened_series_differs_by_what_was_neglected(coefficients, neglected):
    short = chebyshev.shortened(coefficients, neglected)
    assert short == coefficients[: len(short)]
    assert short
    left_out = coefficients[len(short) :]
    assert sum(map(abs, left_out)) <= neglected + 1e-15 * len(left_out)  # rounding of the sum
    at = np.linspace(0.0, 1.0, 40)
    # Chebyshev polynomials lie between -1 and 1; Clenshaw's recurrence rounds each of 28 sums of at most 28
    apart = chebyshev.evaluate(short, 0.0, 1.0, at) - chebyshev.evaluate(coefficients, 0.0, 1.0, at)
    assert np.max(np.abs(apart)) <= neglected + 28 * 28 * 2e-16
    if len(short) > 1:
        assert sum(map(abs, coefficients[len(short) - 1 :])) > neglected
