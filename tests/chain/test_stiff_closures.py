"""Circuits that plain iteration does not close, and those that have no root or no direction."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq
from small_calculations import (
    COOLER_GIVENS,
    COOLER_REST,
    bare_surface,
    chain_of,
    givens,
    house_method,
    house_situation,
    insulated_pipe,
    plane_between,
)

from calcbook.chain import closing
from calcbook.chain.solve import solve
from calcbook.interface import solve_file
from calcbook.properties import pure

SIGMA = 5.670374419e-8  # W/(m^2 K^4), CODATA 2018
GRAVITY = 9.80665  # m/s^2, standard gravity (exact)


def churchill_chu_cylinder(surface: float, bulk: float, diameter: float) -> float:
    """Film coefficient of air at rest off a level cylinder, written out anew (Churchill and Chu 1975)."""
    film = 0.5 * (surface + bulk)
    air = pure("air").at(101325.0)
    rho, mu, lam, cp, beta = (
        float(air.value(name, film))
        for name in ("density", "viscosity", "conductivity", "heat capacity", "expansion coefficient")
    )
    prandtl = mu * cp / lam
    rayleigh = GRAVITY * beta * abs(surface - bulk) * diameter**3 * rho**2 * cp / (mu * lam)
    bracket = (1 + (0.559 / prandtl) ** (9 / 16)) ** (8 / 27)
    return (0.6 + 0.387 * rayleigh ** (1 / 6) / bracket) ** 2 * lam / diameter


def test_insulated_pipe_against_a_written_out_balance(tmp_path):
    """The surface temperature of free convection beside radiation follows from one scalar equation."""
    chain = chain_of(tmp_path, insulated_pipe())
    solution = solve(chain, chain.case_inputs(""), "service")
    assert bool(solution.converged)
    surface = solution.number("outer surface/T_s")
    outside = 0.1143 + 2 * 0.05
    air = 293.15

    def balance(trial: float) -> float:
        film = churchill_chu_cylinder(trial, air, outside)
        out = np.pi * outside * (film * (trial - air) + 0.3 * SIGMA * (trial**4 - air**4))
        inner = 453.15 - out / (8000 * np.pi * 0.1023)
        # Wall figures are those of the solution: the balance here is of the outer side.
        steel = solution.number("pipe/carbon-steel-plain-incropera/k")
        wool = solution.number("insulation/mineral-wool-rock-100-etsu/k")
        drop = out / (2 * np.pi) * (np.log(0.1143 / 0.1023) / steel + np.log(outside / 0.1143) / wool)
        return inner - drop - trial

    # 1e-9 K: the solver of this test stops at 1e-12 of the temperature.
    assert surface == pytest.approx(brentq(balance, 293.2, 453.0, xtol=1e-12, rtol=1e-14), abs=1e-9)


@pytest.mark.parametrize("steam", ["20.001 degC", "21 degC", "60 degC", "300 degC", "600 degC"])
def test_insulated_pipe_closes_from_a_thousandth_of_a_kelvin_to_red_heat(tmp_path, steam):
    chain = chain_of(tmp_path, insulated_pipe(steam=steam))
    solution = solve(chain, chain.case_inputs(""), "service")
    assert bool(solution.converged)
    assert 293.15 < solution.number("outer surface/T_s") < solution.number("given/T_steam")


# --- a flux law against a falling coefficient ---------------------------------------------------------

CUBIC = house_method("house-cubic", "h = C**(1/3)*q**(2/3)", {"C": "40 W/(m^2 K^3)"}, "q: heat flux", "flux")
FALLING = house_method(
    "house-falling", "h = h_1*(abs(T_s - T_b)/dT_1)**(-0.25)", {"h_1": "20000 W/(m^2 K)", "dT_1": "1 K"}
)
FLUX_CARDS = {
    "house-cubic": CUBIC,
    "house-falling": FALLING,
    "house-boiling": house_situation("house-boiling", "- {use: house-cubic, because: trial}", "house-cubic"),
    "house-condensing": house_situation(
        "house-condensing", "- {use: house-falling, because: trial}", "house-falling"
    ),
}


@pytest.mark.parametrize("difference", [0.01, 1.0, 20.0, 60.0])
def test_cubic_flux_law_against_a_falling_coefficient(tmp_path, difference):
    """q = 40 dT^3 on the cold side, q = 20000 dT^0.75 on the hot side, 2 mm of wall with 20 W/(m K)."""
    chain = chain_of(
        tmp_path,
        plane_between("house-condensing", "house-boiling", T_hot=f"{100 + difference} degC"),
        FLUX_CARDS,
    )
    solution = solve(chain, chain.case_inputs(""), "service")
    assert bool(solution.converged)

    def excess(log_flux: float) -> float:
        flux = np.exp(log_flux)
        return (flux / 20000) ** (1 / 0.75) + flux * 0.002 / 20 + (flux / 40) ** (1 / 3) - difference

    expected = np.exp(brentq(excess, np.log(1e-9), np.log(1e8), xtol=1e-13, rtol=1e-14))
    assert solution.number(chain.results["heat flux"]) == pytest.approx(expected, rel=1e-11)


def test_cubic_flux_law_on_many_samples(tmp_path):
    chain = chain_of(tmp_path, plane_between("house-condensing", "house-boiling"), FLUX_CARDS)
    inputs = chain.case_inputs("")
    inputs["given/T_hot"] = 373.15 + np.geomspace(0.05, 80, 5000)
    inputs["given/k_w"] = np.linspace(5, 400, 5000)
    solution = solve(chain, inputs, "service")
    assert solution.converged.all()
    flux = solution.values[chain.results["heat flux"]]
    summed = (flux / 20000) ** (1 / 0.75) + flux * 0.002 / inputs["given/k_w"] + (flux / 40) ** (1 / 3)
    np.testing.assert_allclose(summed, inputs["given/T_hot"] - inputs["given/T_cold"], rtol=1e-10)


# --- a law that jumps ---------------------------------------------------------------------------------

LOW = house_method("house-low", "h = h_1", {"h_1": "500 W/(m^2 K)"}, points=(("", 500), ("", 500)))
HIGH = house_method("house-high", "h = h_1", {"h_1": "2000 W/(m^2 K)"}, points=(("", 2000), ("", 2000)))
JUMP = house_method(
    "house-jump",
    "h = h_1 if abs(T_s - T_b) < dT_1 else h_2",
    {"h_1": "500 W/(m^2 K)", "h_2": "2000 W/(m^2 K)", "dT_1": "10 K"},
    points=(("T_s: 300, T_b: 295", 500), ("T_s: 320, T_b: 295", 2000)),
)
PLAIN = house_method("house-plain", "h = h_1", {"h_1": "1000 W/(m^2 K)"}, points=(("", 1000), ("", 1000)))
JUMP_CARDS = {
    "house-low": LOW,
    "house-high": HIGH,
    "house-jump": JUMP,
    "house-plain": PLAIN,
    "within-card": house_situation("within-card", "- {use: house-jump, because: trial}", "house-jump"),
    "between-cards": house_situation(
        "between-cards",
        "- {when: x < 1.0268, use: house-low, because: small difference}\n"
        "- {use: house-high, because: large difference}",
        "house-low, house-high",
    ),
    "smooth": house_situation("smooth", "- {use: house-plain, because: trial}", "house-plain"),
}


@pytest.mark.parametrize("situation", ["within-card", "between-cards"])
def test_jump_without_a_root_takes_the_lower_side_and_says_both(tmp_path, situation):
    """Hot side 1000, wall without much resistance, cold side 500 below 10 K and 2000 above: no root at 20 K.

    With the lower side the drop of the cold film is 2/3 of 20 K, above the joint; with the upper it is
    1/3 of 20 K, below it. Neither belongs to its own law.
    """
    chain = chain_of(tmp_path, plane_between("smooth", situation, k_w="20000 W/(m K)"), JUMP_CARDS)
    solution = solve(chain, chain.case_inputs(""), "service")
    assert bool(solution.converged)
    assert bool(solution.jumps["cold film"])
    lower, upper = solution.jump_sides["cold film"]
    assert (float(lower), float(upper)) == (500.0, 2000.0)
    # Lower side held: 1/U = 1/1000 + 0.002/20000 + 1/500.
    assert solution.number(chain.results["U"]) == pytest.approx(1 / (1e-3 + 1e-7 + 2e-3), rel=1e-12)
    solved = solve_file(tmp_path / "trial.yaml")
    texts = [item.text for item in solved.open_items if item.kind == "jump"]
    assert len(texts) == 2  # clean and service
    assert all("500" in text and "2000" in text for text in texts)


@pytest.mark.parametrize(("hot", "coefficient"), [("110 degC", 500.0), ("180 degC", 2000.0)])
def test_jump_with_a_root_on_one_side_raises_nothing(tmp_path, hot, coefficient):
    chain = chain_of(
        tmp_path, plane_between("smooth", "within-card", T_hot=hot, k_w="20000 W/(m K)"), JUMP_CARDS
    )
    solution = solve(chain, chain.case_inputs(""), "service")
    assert bool(solution.converged)
    assert not solution.jump_sides
    assert solution.number("cold film/h of cold film") == coefficient


def test_jump_in_some_samples_leaves_the_others_alone(tmp_path):
    chain = chain_of(tmp_path, plane_between("smooth", "within-card", k_w="20000 W/(m K)"), JUMP_CARDS)
    inputs = chain.case_inputs("")
    differences = np.array([5.0, 12.0, 16.0, 20.0, 28.0, 40.0, 80.0])
    inputs["given/T_hot"] = 373.15 + differences
    solution = solve(chain, inputs, "service")
    assert solution.converged.all()
    # No root where the drop of the lower side passes 10 K and that of the upper does not: 15 K to 30 K.
    np.testing.assert_array_equal(solution.jumps["cold film"], (differences > 15) & (differences < 30))
    lower, upper = 1 / (1e-3 + 1e-7 + 1 / 500), 1 / (1e-3 + 1e-7 + 1 / 2000)
    np.testing.assert_allclose(
        solution.values[chain.results["U"]], np.where(differences < 30, lower, upper), rtol=1e-12
    )


# --- no direction -------------------------------------------------------------------------------------


def test_equal_temperatures_are_undetermined_and_have_an_answer(tmp_path):
    chain = chain_of(tmp_path, plane_between("smooth", "smooth", T_hot="100 degC"), JUMP_CARDS)
    solution = solve(chain, chain.case_inputs(""), "service")
    assert bool(solution.converged)
    assert solution.number(chain.results["heat flow"]) == 0.0
    assert solution.number(chain.results["U"]) == pytest.approx(1 / (1e-3 + 1e-4 + 1e-3), rel=1e-12)


def test_equal_temperatures_raise_an_open_item_where_the_direction_matters(tmp_path):
    text = givens(**(COOLER_GIVENS | {"T_cold": "74 degC"})) + COOLER_REST.replace(
        "situation: inside-tube}", "situation: inside-tube, method: dittus-boelter-mcadams}"
    )
    chain_of(tmp_path, text)
    solved = solve_file(tmp_path / "trial.yaml")
    assert any("undetermined" in item.text for item in solved.open_items)


# --- radiation to surroundings of another temperature ---------------------------------------------------


def written_out_surface(inner: float, air: float, surroundings: float, emissivity: float, film) -> float:
    """Surface temperature of the plane wall from its balance, the film coefficient a function of T_s."""
    resistance = 1 / 30 + 0.006 / 45

    def balance(trial: float) -> float:
        return (
            (inner - trial) / resistance
            - film(trial) * (trial - air)
            - emissivity * SIGMA * (trial**4 - surroundings**4)
        )

    return brentq(
        balance, min(inner, air, surroundings) - 1, max(inner, air, surroundings) + 1, xtol=1e-12, rtol=1e-14
    )


@pytest.mark.parametrize(
    ("inner", "air", "surroundings", "film_is_negative"),
    [
        (15.0, 20.0, -40.0, True),  # a cold sky: air heats the surface, radiation cools it
        (60.0, 20.0, 5.0, False),  # surroundings colder than the air
        (60.0, 20.0, 90.0, False),  # surroundings hotter than the air
        (20.0, 20.0, 60.0, False),  # nothing but the surroundings drives the heat
        (-5.0, 20.0, 60.0, True),  # a cold wall between warm air and hot surroundings
    ],
)
def test_surroundings_of_another_temperature(tmp_path, inner, air, surroundings, film_is_negative):
    chain = chain_of(
        tmp_path, bare_surface(T_in=f"{inner} degC", T_air=f"{air} degC", T_sur=f"{surroundings} degC")
    )
    solution = solve(chain, chain.case_inputs(""), "service")
    assert bool(solution.converged)
    surface = solution.number("outer surface/T_s")
    coefficient = solution.number("outer surface/h of free convection")
    expected = written_out_surface(
        inner + 273.15, air + 273.15, surroundings + 273.15, 0.9, lambda _: coefficient
    )
    assert surface == pytest.approx(expected, abs=1e-9)
    assert (surface < air + 273.15) == film_is_negative
    low, high = sorted((inner, surroundings, air))[0], sorted((inner, surroundings, air))[2]
    assert low + 273.15 <= surface <= high + 273.15


def test_outer_group_turns_negative_when_radiation_outweighs_the_air(tmp_path):
    """The surface is colder than the air and still gives off heat: the coefficient to the air is negative."""
    chain = chain_of(tmp_path, bare_surface(T_in="15 degC", T_air="20 degC", T_sur="-60 degC"))
    solution = solve(chain, chain.case_inputs(""), "service")
    surface = solution.number("outer surface/T_s")
    assert surface < 288.15
    assert solution.number("solution/Q") > 0.0
    assert solution.number(chain.results["h outer surface"]) < 0.0


# --- the bracket on its own -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("body", "cards"),
    [
        (insulated_pipe(), {}),
        (bare_surface(T_sur="-40 degC", T_in="15 degC"), {}),
        (plane_between("house-condensing", "house-boiling"), FLUX_CARDS),
    ],
)
def test_bracket_finds_what_newton_finds(tmp_path, monkeypatch, body, cards):
    """With no passes allowed every sample is bracketed; 1e-9: laws count as met at 1e-10."""
    chain = chain_of(tmp_path, body, cards)
    by_newton = solve(chain, chain.case_inputs(""), "service")
    monkeypatch.setattr(closing, "MAXIMUM_PASSES", 0)
    bracketed = solve(chain, chain.case_inputs(""), "service")
    assert bool(bracketed.converged)
    for name in ("U", "heat flow"):
        assert bracketed.number(chain.results[name]) == pytest.approx(
            by_newton.number(chain.results[name]), rel=1e-9
        )
