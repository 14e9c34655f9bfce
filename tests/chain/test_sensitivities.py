"""Slopes of the closed solution against differences of whole solutions, for every input."""

from __future__ import annotations

import numpy as np
import pytest
from small_calculations import COOLER, OIL, SPHERE, STATED, bare_surface, chain_of, insulated_pipe

from calcbook.chain.sensitivity import derivatives
from calcbook.chain.solve import solve

# A deposit that narrows the bore in service and not clean.
NARROWED = COOLER.replace(
    "kind: fouling, resistance: R_fi, on: inside",
    "kind: fouling, on: inside, deposit: {thickness: t_d, conductivity: k_d, narrows: yes}",
).replace(
    "  R_fi: {value: 0.00009 m^2 K/W",
    "  k_d: {value: 1.2 W/(m K), is: of the deposit, source: test}\n  t_d: {value: 0.2 mm",
)
BODIES = {
    "cooler": COOLER,
    "narrowed bore": NARROWED,
    "oil": OIL,
    "insulated pipe": insulated_pipe(),
    "insulated pipe, cold sky": insulated_pipe("-20 degC"),
    "plane wall": bare_surface(T_sur="-10 degC"),
    "sphere": SPHERE,
    "stated": STATED,
}
# Slopes by pressure are differences of the backend and hold about 1e-5; all else comes from the trees.
PRESSURE = 1e-4


def difference(chain, inputs, condition: str, name: str, wanted: str) -> float:
    """A central difference of the fourth order through the whole solution."""
    step = 2e-3 * abs(float(inputs[name])) if "/T_" not in name else 0.1

    def at(factor: float) -> float:
        return solve(chain, inputs | {name: np.asarray(inputs[name] + factor * step)}, condition).number(
            wanted
        )

    return (8 * (at(1) - at(-1)) - (at(2) - at(-2))) / (12 * step)


@pytest.mark.parametrize("condition", ["clean", "service"])
@pytest.mark.parametrize("name", BODIES)
def test_slopes_against_differences(tmp_path, name, condition):
    chain = chain_of(tmp_path, BODIES[name])
    inputs = chain.case_inputs("")
    wanted = [chain.results["U"], chain.results["UA"]]
    if chain.has_temperatures:
        wanted += [
            chain.results["heat flow"],
            chain.inner.surface_temperature,
            chain.outer.surface_temperature,
        ]
    slopes = derivatives(chain, inputs, condition, tuple(wanted))
    for result in wanted:
        scale = max(abs(float(slopes[result].get(key, 0.0)) * float(inputs[key])) for key in inputs)
        for key in inputs:
            expected = difference(chain, inputs, condition, key, result)
            found = float(np.asarray(slopes[result].get(key, 0.0)))
            band = PRESSURE if "/p_" in key else 1e-6
            assert found == pytest.approx(expected, rel=band, abs=1e-9 * scale / abs(float(inputs[key]))), (
                result,
                key,
            )


def test_slopes_on_arrays_are_those_of_each_sample(tmp_path):
    """Samples on both sides of a choice of method, in one call."""
    chain = chain_of(tmp_path, COOLER)
    inputs = chain.case_inputs("") | {"given/m_hot": np.geomspace(0.25, 18.2, 9)}
    name = chain.results["U"]
    together = derivatives(chain, inputs, "service", (name,))[name]
    for index in range(9):
        alone = derivatives(
            chain, inputs | {"given/m_hot": inputs["given/m_hot"][index]}, "service", (name,)
        )[name]
        for key, slope in alone.items():
            assert together[key].shape == (9,)
            # 1e-12: the small systems are solved by elimination with another order of rounding.
            assert together[key][index] == pytest.approx(float(slope), rel=1e-12, abs=1e-300)


def test_what_does_not_enter_has_no_slope(tmp_path):
    chain = chain_of(tmp_path, COOLER)
    slopes = derivatives(chain, chain.case_inputs(""), "clean", (chain.results["U"],))[chain.results["U"]]
    assert float(np.asarray(slopes.get("given/R_fo", 0.0))) == 0.0
    assert float(np.asarray(slopes["given/h_o"])) > 0.0
