"""Fins: areas, efficiency and the circuit against hand work, Bessel functions and an independent library."""

from __future__ import annotations

import math

import ht
import numpy as np
import pytest
from finned_calculations import ACROSS, BANK, FIGURES, finned_bore, finned_plane, finned_tube
from scipy.special import iv, kv
from small_calculations import chain_of, givens
from test_sensitivities import PRESSURE, difference

from calcbook.chain.sensitivity import derivatives
from calcbook.chain.solve import solve
from calcbook.chain.types import CLEAN, CONDITIONS, SERVICE, Group
from calcbook.faults import Faults
from calcbook.interface import solve_file

BODIES = {
    "stated film and conductivity": finned_tube(),
    "conductivity from a card": finned_tube(material="material: aluminium-1100-crc"),
    "film that follows its surface": finned_tube(ACROSS),
    "film and conductivity that follow": finned_tube(ACROSS, "material: aluminium-1100-crc"),
    "approximate efficiency": finned_tube(ACROSS, more=", method: fin-annular-schmidt"),
    "adiabatic tip": finned_tube(ACROSS, more=", tip: adiabatic"),
    "allowance on the bare surface": finned_tube(ACROSS, fouling="resistance: R_o, on: bare"),
    "cooled air": finned_tube(ACROSS, T_a="120 degC", T_w="40 degC"),
    "finned bank": finned_tube(BANK),
    "finned bore": finned_bore(),
    "finned bore, stated film": finned_bore("coefficient: h_w, temperature: T_w"),
    "finned plane": finned_plane(),
}


def solved(tmp_path, body, condition=SERVICE):
    chain = chain_of(tmp_path, body)
    return chain, solve(chain, chain.case_inputs(""), condition)


# --- the circuit ------------------------------------------------------------------------------------


@pytest.mark.parametrize("condition", CONDITIONS)
@pytest.mark.parametrize("name", BODIES)
def test_every_surface_and_term_agree(tmp_path, name, condition):
    """U*A on every surface to 1e-12; the heat flow of every term, from its temperatures, to 1e-10."""
    chain, solution = solved(tmp_path, BODIES[name], condition)
    assert bool(solution.converged)
    assert chain.surfaces[-1].name == "total finned"
    conductance, flow = solution.number(chain.results["UA"]), solution.number(chain.results["heat flow"])
    for surface in chain.surfaces:
        there = solution.number(chain.results[f"U on {surface.name}"]) * solution.number(surface.area)
        assert there == pytest.approx(conductance, rel=1e-12)
    temperature = solution.number(chain.inner.bulk)
    for element in chain.elements:
        area = solution.number(chain.surfaces[element.surface].area)
        if isinstance(element, Group):
            through = solution.number(chain.results[f"h {element.name}"]) * area
            resistance = 1.0 / through
        else:
            resistance = solution.number(element.resistance) / area
            if element.second_temperature:
                assert solution.number(element.first_temperature) == pytest.approx(temperature, abs=1e-9)
        if element is chain.outer:
            assert solution.number(element.surface_temperature) == pytest.approx(temperature, abs=1e-9)
        temperature -= flow * resistance
    assert temperature == pytest.approx(solution.number(chain.outer.bulk), abs=1e-9)


@pytest.mark.parametrize("name", BODIES)
def test_closure_of_the_record(tmp_path, name):
    chain_of(tmp_path, BODIES[name])
    outcome = solve_file(tmp_path / "trial.yaml")
    assert any("fins of" in row.what for row in outcome.base.closure)
    for row in outcome.base.closure:
        assert row.residual <= 1e-10, row


@pytest.mark.parametrize("condition", CONDITIONS)
@pytest.mark.parametrize("name", BODIES)
def test_slopes_against_differences(tmp_path, name, condition):
    """Every input against central differences of whole solutions, in the bands of plain films."""
    chain = chain_of(tmp_path, BODIES[name])
    inputs = chain.case_inputs("")
    wanted = (chain.results["U"], chain.results["heat flow"], chain.outer.surface_temperature)
    slopes = derivatives(chain, inputs, condition, wanted)
    for result in wanted:
        scale = max(abs(float(slopes[result].get(key, 0.0)) * float(inputs[key])) for key in inputs)
        for key in inputs:
            found = float(np.asarray(slopes[result].get(key, 0.0)))
            band = PRESSURE if "/p_" in key else 1e-6
            expected = difference(chain, inputs, condition, key, result)
            assert found == pytest.approx(expected, rel=band, abs=1e-9 * scale / abs(float(inputs[key]))), (
                result,
                key,
            )


def test_samples_do_not_depend_on_their_neighbours(tmp_path):
    """An array in one call gives each sample bit for bit as alone."""
    chain = chain_of(tmp_path, BODIES["film and conductivity that follow"])
    inputs = chain.case_inputs("") | {"given/v_a": np.linspace(1.0, 6.0, 7)}
    together = solve(chain, inputs, SERVICE).values[chain.results["U"]]
    for index, speed in enumerate(inputs["given/v_a"]):
        alone = solve(chain, inputs | {"given/v_a": np.array([speed])}, SERVICE).values[chain.results["U"]]
        assert together[index] == alone[0]


# --- hand work --------------------------------------------------------------------------------------


def test_a_finned_tube_by_hand(tmp_path):
    """Again from Bessel functions of scipy: areas, efficiency, (1/h + R_f)/(eta_o*A), U on each surface."""
    chain, solution = solved(tmp_path, finned_tube())
    d_i, d_o, length, tubes = 0.0212, 0.0254, 6.0, 120.0
    height, thickness, pitch, k = 0.0159, 0.0004, 0.00231, 205.0
    h, fouling = 45.0, 0.0003
    bare = math.pi * d_o * length * tubes
    count = length / pitch * tubes
    inner, outer = d_o / 2, d_o / 2 + height + thickness / 2
    fins = count * 2 * math.pi * (outer**2 - inner**2)
    total = fins + bare - count * math.pi * d_o * thickness
    combined = 1 / (1 / h + fouling)
    m = math.sqrt(2 * combined / (k * thickness))
    above = kv(1, m * inner) * iv(1, m * outer) - iv(1, m * inner) * kv(1, m * outer)
    below = kv(0, m * inner) * iv(1, m * outer) + iv(0, m * inner) * kv(1, m * outer)
    efficiency = 2 * inner / (m * (outer**2 - inner**2)) * above / below
    surface = 1 - fins / total * (1 - efficiency)
    air = (1 / h + fouling) / (surface * total)
    results = chain.results
    water = 1 / (solution.number(results["h water film"]) * math.pi * d_i * length * tubes)
    scale = 0.0001 / (math.pi * d_i * length * tubes)
    wall_k = solution.number("tube wall/carbon-steel-plain-incropera/k")
    wall = math.log(d_o / d_i) / (2 * math.pi * wall_k * length * tubes)
    conductance = 1 / (water + scale + wall + air)
    # 1e-12: rounding of the two ways of writing it.
    assert solution.number(results["UA"]) == pytest.approx(conductance, rel=1e-12)
    assert solution.number(results["U on bare"]) == pytest.approx(conductance / bare, rel=1e-12)
    assert solution.number(results["U on outside"]) == pytest.approx(conductance / bare, rel=1e-12)
    assert solution.number(results["U on total finned"]) == pytest.approx(conductance / total, rel=1e-12)
    assert total / bare == pytest.approx(
        solution.number("geometry/A_tf") / solution.number("circuit/A_o"), rel=1e-14
    )
    # Three terms together are the film, its fouling and the fins.
    series = sum(solution.number(results[f"R {name}"]) for name in ("air film", "dust", "fins of air film"))
    assert series / bare == pytest.approx(air, rel=1e-12)


def test_the_efficiency_against_an_independent_library(tmp_path):
    """ht 1.2.0 takes an adiabatic tip; 1e-9 covers its Bessel functions."""
    _, solution = solved(tmp_path, finned_tube(more=", tip: adiabatic"), CLEAN)
    expected = ht.air_cooler.fin_efficiency_Kern_Kraus(
        Do=0.0254, D_fin=0.0254 + 2 * 0.0159, t_fin=0.0004, k_fin=205.0, h=45.0
    )
    found = solution.number("fins of air film/fin-annular-bessel/eta")
    assert found == pytest.approx(expected, rel=1e-9)


def test_fouling_lies_inside_the_efficiency(tmp_path):
    """The efficiency in service is that of film and dust together, and so the higher one."""
    chain = chain_of(tmp_path, finned_tube(more=", tip: adiabatic", R_o="0.01 m^2 K/W"))
    clean, service = (solve(chain, chain.case_inputs(""), condition) for condition in CONDITIONS)
    step = "fins of air film/fin-annular-bessel/eta"
    expected = ht.air_cooler.fin_efficiency_Kern_Kraus(
        Do=0.0254, D_fin=0.0254 + 2 * 0.0159, t_fin=0.0004, k_fin=205.0, h=1 / (1 / 45.0 + 0.01)
    )
    assert service.number(step) == pytest.approx(expected, rel=1e-9)
    assert service.number(step) > clean.number(step)


def test_straight_fins_of_a_plane_by_hand(tmp_path):
    """tanh(mL)/(mL) with the length longer by half the thickness, one square metre of wall at a time."""
    chain, solution = solved(tmp_path, finned_plane())
    h, fouling, k, thickness, pitch = 60.0, 0.0005, 180.0, 0.002, 0.010
    length = 0.020 + thickness / 2
    combined = 1 / (1 / h + fouling)
    m = math.sqrt(2 * combined / (k * thickness))
    efficiency = math.tanh(m * length) / (m * length)
    fins = 2 * length / pitch
    total = fins + 1 - thickness / pitch
    surface = 1 - fins / total * (1 - efficiency)
    resistance = 1 / 800.0 + 0.005 / 180.0 + (1 / h + fouling) / (surface * total)
    assert solution.number(chain.results["U on outside"]) == pytest.approx(1 / resistance, rel=1e-12)


def test_fins_along_a_bore_by_hand(tmp_path):
    chain, solution = solved(tmp_path, finned_bore("coefficient: h_w, temperature: T_w"))
    k = solution.number("fins of water film/carbon-steel-plain-incropera/k")
    h, fouling, thickness, count = 900.0, 0.0001, 0.0006, 12
    length = 0.004 + thickness / 2
    m = math.sqrt(2 / (1 / h + fouling) / (k * thickness))
    efficiency = math.tanh(m * length) / (m * length)
    fins = count * 2 * length
    total = fins + math.pi * 0.0212 - count * thickness
    surface = 1 - fins / total * (1 - efficiency)
    names = ("water film", "scale", "fins of water film")
    found = sum(solution.number(chain.results[f"R {name}"]) for name in names) / (math.pi * 0.0254)
    assert found == pytest.approx((1 / h + fouling) / (surface * total), rel=1e-12)
    root = solution.number("fins of water film/T_2")
    assert root == pytest.approx(solution.number("tube wall/T_1"), abs=1e-10)


def test_conductivity_is_the_mean_between_root_and_surface(tmp_path):
    """Carbon steel, Incropera: 60.5 at 300 K, 56.7 at 400 K; straight between, the mean is in the middle."""
    _, solution = solved(tmp_path, finned_tube(ACROSS, "material: carbon-steel-plain-incropera"))
    first, second = solution.number("fins of air film/T_1"), solution.number("fins of air film/T_2")
    middle = np.interp(0.5 * (first + second), [300.0, 400.0], [60.5, 56.7])
    assert solution.number("fins of air film/carbon-steel-plain-incropera/k") == pytest.approx(
        middle, rel=1e-9
    )
    assert second < first


def test_the_surface_temperature_is_the_mean_one_and_the_root_is_checked(tmp_path):
    chain, solution = solved(tmp_path, finned_tube())
    bulk = solution.number(chain.outer.bulk)
    mean = solution.number(chain.outer.surface_temperature) - bulk
    total = solution.number("geometry/A_tf")
    assert 45.0 * total * mean == pytest.approx(solution.number(chain.results["heat flow"]), rel=1e-10)
    root = solution.number(chain.results["T root air film"]) - bulk
    assert mean / root == pytest.approx(
        solution.number("fins of air film/fin-overall-surface/eta"), rel=1e-10
    )


def test_an_allowance_on_the_bare_surface_is_referred(tmp_path):
    """The same allowance stated on the bare surface resists A_total/A_bare times as much."""
    _, on_total = solved(tmp_path, finned_tube())
    chain, on_bare = solved(tmp_path, finned_tube(fouling="resistance: R_o, on: bare"))
    ratio = on_bare.number("geometry/A_tf") / on_bare.number("circuit/A_o")
    assert on_bare.number("fins of air film/R_f") == pytest.approx(0.0003 * ratio, rel=1e-12)
    assert on_bare.number(chain.results["R dust"]) == pytest.approx(
        on_total.number(chain.results["R dust"]) * ratio, rel=1e-12
    )


def test_a_coefficient_stated_on_the_bare_surface_says_that_the_fins_still_act(tmp_path):
    """By the areas alone: h on the total surface is h·A_bare/A_total, and the fins have their resistance besides."""
    on_total = finned_tube()
    assert on_total.count("coefficient: h_a, ") == 1
    whole, total = solved(tmp_path, on_total)
    assert not [item for item in whole.assumptions if item.id == "air film/referred"]
    chain, bare = solved(tmp_path, on_total.replace("coefficient: h_a, ", "coefficient: h_a, on: bare, "))
    said = [item.text for item in chain.assumptions if item.id == "air film/referred"]
    assert said and "the efficiency of the fins acts on top of it" in said[0]
    ratio = bare.number("circuit/A_o") / bare.number("geometry/A_tf")
    stated = total.number(whole.results["h air film"])
    assert bare.number("air film/referred/h") == pytest.approx(stated * ratio, rel=1e-12)
    assert bare.number(chain.results["R fins of air film"]) > 0.0


def test_fins_without_height_are_no_fins(tmp_path):
    """As the height goes to nothing U goes to that of the bare tube: the rest is the free tip of each fin."""
    _, finned = solved(tmp_path, finned_tube(H="0.001 mm", t="0.0001 mm", more=", tip: adiabatic"))
    plain = finned_tube().split("  - {name: air film")[0] + (
        "  - {name: air film, kind: film, coefficient: h_a, temperature: T_a}\nreport: {U on: outside}\n"
    )
    chain, bare = solved(tmp_path, plain)
    # Fins of 1 micrometre on a pitch of 2.31 mm add 0.09 % of surface.
    assert finned.number("circuit/UA") == pytest.approx(bare.number(chain.results["UA"]), rel=1e-3)


def test_a_method_for_plain_tubes_is_an_open_item(tmp_path):
    chain_of(tmp_path, finned_tube(ACROSS))
    checks = {check.id: check for check in solve_file(tmp_path / "trial.yaml").base.checks}
    check = checks["fins of air film / fins / plain surface"]
    assert (check.level, check.state) == ("range", "outside")


def test_the_film_of_a_finned_bank_takes_its_figures_from_the_fins(tmp_path):
    """Ganguli, Tung, Taborek with five staggered rows, worked by hand on the drawing's figures."""
    chain, solution = solved(tmp_path, finned_tube(BANK))
    blocked = 0.0254 + 2 * 0.0159 * 0.0004 / 0.00231
    fastest = solution.number("air film/Re") * 0.0635 / (0.0635 - blocked)
    tip = 0.0254 + 2 * 0.0159
    ratio = (0.0254 * (0.00231 - 0.0004) + (tip**2 - 0.0254**2) / 2 + tip * 0.0004) / (0.0254 * 0.00231)
    number = 0.38 * fastest**0.6 * ratio**-0.15 * solution.number("air film/Pr") ** (1 / 3)
    assert solution.number("air film/ganguli-1985/Nu") == pytest.approx(number, rel=1e-12)
    assert not any(check.id.endswith("plain surface") for check in chain.elements[3].checks)


def test_the_cross_check_closes_methods_that_follow_the_surface(tmp_path):
    """ESDU 86022 takes the Prandtl number at the surface, the method used takes nothing of it."""
    chain_of(tmp_path, finned_tube(BANK))
    rows = {
        row.method: row for row in solve_file(tmp_path / "trial.yaml").cross[""] if row.term == "air film"
    }
    assert set(rows) == {"briggs-young-1963", "esdu-86022"}
    assert abs(rows["esdu-86022"].difference) < 0.15 and not rows["esdu-86022"].left_out


# --- what cannot stand ------------------------------------------------------------------------------


def codes(tmp_path, body) -> list[str]:
    with pytest.raises(Faults) as caught:
        chain_of(tmp_path, body)
        solve_file(tmp_path / "trial.yaml")
    return [fault.code for fault in caught.value.faults]


def test_faults_of_fins(tmp_path):
    bore = finned_bore()
    assert codes(
        tmp_path, bore.replace("shape: straight", "shape: annular").replace("count: n", "pitch: p")
    ) == ["fins-not-here"]
    assert codes(tmp_path, finned_tube().replace("pitch: p, ", "")) == ["need-missing"]
    assert codes(tmp_path, finned_tube().replace(", conductivity: k_f", "")) == ["need-missing"]
    assert codes(tmp_path, finned_tube(more=", method: fin-straight-rect")) == ["method-unknown"]
    assert codes(tmp_path, finned_tube(t="2.4 mm")) == ["limit-stops", "limit-stops"]
    assert codes(tmp_path, finned_tube(more=", material: aluminium-1100-crc")) == ["key-conflict"]
    bank = finned_tube(BANK)
    assert codes(tmp_path, bank.replace("A_face: A}", "A_face: A, p_f: p}")) == ["key-conflict"]
    no_fins = bank.split("     fins:")[0].rstrip().rstrip(",") + "}\nreport: {U on: outside}\n"
    assert codes(tmp_path, no_fins) == ["need-missing"]
    plain = finned_tube().split("     fins:")[0].rstrip().rstrip(",") + "}\nreport: {U on: bare}\n"
    assert codes(tmp_path, plain) == ["surface-unknown"]


def test_figures_of_the_tests_are_used():
    assert set(FIGURES) <= set(givens(**FIGURES).replace(":", " ").split())


def without_temperatures(material: str) -> str:
    body = finned_tube(material=material).replace("coefficient: h_a, temperature: T_a", "coefficient: h_a")
    water = "stream: water, situation: inside-tube"
    return body.replace(water, "coefficient: {value: 5000 W/(m^2 K), source: test}").replace(
        "material: carbon-steel-plain-incropera", "conductivity: {value: 50 W/(m K), source: test}"
    )


@pytest.mark.parametrize("condition", CONDITIONS)
def test_fins_without_temperatures(tmp_path, condition):
    """U stands without bulk temperatures; its slopes are those of differences."""
    chain, solution = solved(tmp_path, without_temperatures("conductivity: k_f"), condition)
    assert not chain.has_temperatures
    names = ("air film", "dust", "fins of air film")
    series = sum(solution.number(chain.results[f"R {name}"]) for name in names)
    fouling = 0.0003 if condition == SERVICE else 0.0
    surface = solution.number("fins of air film/fin-overall-surface/eta")
    ratio = solution.number("geometry/A_tf") / solution.number("circuit/A_o")
    assert series == pytest.approx((1 / 45.0 + fouling) / (surface * ratio), rel=1e-12)
    inputs, wanted = chain.case_inputs(""), chain.results["U"]
    slopes = derivatives(chain, inputs, condition, (wanted,))[wanted]
    for key in ("given/h_a", "given/k_f", "given/H", "given/p"):
        assert float(slopes[key]) == pytest.approx(
            difference(chain, inputs, condition, key, wanted), rel=1e-6
        )


def test_a_conductivity_from_a_card_needs_temperatures(tmp_path):
    assert "temperature-missing" in codes(tmp_path, without_temperatures("material: aluminium-1100-crc"))
