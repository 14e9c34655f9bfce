"""What holds in every solution: U*A on every surface, the heat flow of every term, the summed drops."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from iapws import IAPWS97
from small_calculations import COOLER, OIL, SPHERE, STATED, bare_surface, chain_of, insulated_pipe

from calcbook.chain.solve import solve
from calcbook.chain.types import CONDITIONS, Group
from calcbook.interface import solve_file

EXAMPLES = Path(__file__).resolve().parents[2] / "calcs"
CALCULATIONS = {
    "cooler": COOLER,
    "oil": OIL,
    "insulated pipe": insulated_pipe(),
    "insulated pipe, cold sky": insulated_pipe(surroundings="-20 degC"),
    "plane wall": bare_surface(),
    "plane wall, hot surroundings": bare_surface(T_sur="80 degC"),
    "sphere": SPHERE,
}


@pytest.mark.parametrize("condition", CONDITIONS)
@pytest.mark.parametrize("name", [*CALCULATIONS, "stated"])
def test_conductance_is_the_same_on_every_surface(tmp_path, name, condition):
    chain = chain_of(tmp_path, CALCULATIONS.get(name, STATED))
    solution = solve(chain, chain.case_inputs(""), condition)
    conductance = solution.number(chain.results["UA"])
    for surface in chain.surfaces:
        there = solution.number(chain.results[f"U on {surface.name}"]) * solution.number(surface.area)
        assert there == pytest.approx(conductance, rel=1e-12)


@pytest.mark.parametrize("condition", CONDITIONS)
@pytest.mark.parametrize("name", CALCULATIONS)
def test_every_term_carries_the_heat_flow(tmp_path, name, condition):
    """1e-10: films and walls are met at least so well, whatever the temperatures."""
    chain = chain_of(tmp_path, CALCULATIONS[name])
    solution = solve(chain, chain.case_inputs(""), condition)
    flow = solution.number(chain.results["heat flow"])
    temperature = solution.number(chain.inner.bulk)
    for element in chain.elements:
        area = solution.number(chain.surfaces[element.surface].area)
        if isinstance(element, Group):
            conductance = solution.number(chain.results[f"h {element.name}"]) * area
            after = solution.number(element.surface_temperature if element.side == "inside" else element.bulk)
            before = temperature if element.side == "inside" else solution.number(element.surface_temperature)
            # A difference of temperatures near 300 K carries an error of 1e-13 K of its own.
            assert conductance * (before - after) == pytest.approx(flow, rel=1e-10, abs=1e-12 * conductance)
            temperature = after
        else:
            temperature -= flow * solution.number(element.resistance) / area
            if element.second_temperature:
                assert solution.number(element.second_temperature) == pytest.approx(temperature, abs=1e-9)
        if element is chain.elements[-2]:
            assert temperature == pytest.approx(solution.number(chain.outer.surface_temperature), abs=1e-9)


@pytest.mark.parametrize("name", CALCULATIONS)
def test_closure_of_the_record(tmp_path, name):
    chain_of(tmp_path, CALCULATIONS[name])
    solved = solve_file(tmp_path / "trial.yaml")
    assert len(solved.base.closure) > 4
    for row in solved.base.closure:
        assert row.residual <= 1e-10, row


def test_wall_conductivity_is_the_mean_over_its_own_temperatures(tmp_path):
    """Rock wool 50 degC 0.037, 100 degC 0.043, 300 degC 0.088 W/(m K), straight between.

    UK Fuel Efficiency Booklet 8 (ETSU), as the card gives it.
    """
    chain = chain_of(tmp_path, insulated_pipe())
    solution = solve(chain, chain.case_inputs(""), "service")
    first, second = solution.number("insulation/T_1"), solution.number("insulation/T_2")
    at = np.linspace(second, first, 200_001)
    # Outside the rows the nearest one is held, and an open item says so.
    held = np.interp(at, [323.15, 373.15, 573.15], [0.037, 0.043, 0.088])
    mean = np.trapezoid(held, at) / (first - second)
    # 1e-7: the trapezoid sum of this test near the two kinks.
    assert solution.number("insulation/mineral-wool-rock-100-etsu/k") == pytest.approx(mean, rel=1e-7)


def test_a_speed_makes_the_mass_flow_that_the_heat_balance_takes() -> None:
    """FW-601 states the speed of its sample, 0.44 m/s in a bore of 8 mm: its temperature change by hand, with density
    and heat capacity of IAPWS-IF97 at 68 degC and 8 bar (which holds the heat capacity of the liquid to 0.2 %)."""
    base = solve_file(EXAMPLES / "fw-601.yaml", for_record=False).base
    water = IAPWS97(T=341.15, P=0.8)
    flow = 0.44 * water.rho * np.pi / 4 * 0.008**2
    for condition in CONDITIONS:
        heat = abs(base.results[f"heat_flow_{condition}"].value)
        change = base.results[f"dT sample {condition}"].value
        assert change == pytest.approx(heat / (flow * 1e3 * water.cp), rel=2e-3)
    states = {
        check.state for check in base.checks if check.id == "sample / heat balance / temperature change"
    }
    assert states == {"outside"}
