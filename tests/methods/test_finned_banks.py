"""Banks of finned tubes held against ht 1.2.0, an independent open library, over a grid inside their ranges.

The library gives the coefficient with the fin efficiency in it, on the bare surface: with fins that conduct
without bound their efficiency is one, and divided by the surface ratio it is the coefficient of the fins.
Card and library are one closed form each; 1e-9 leaves room for the efficiency that the library then finds.
"""

from __future__ import annotations

import itertools
import math

import ht
import pytest

from calcbook.library import evaluate_method, load_method

CONDUCTIVITY = 1e30
GRID = [
    {
        "Re": speed,
        "Pr": prandtl,
        "d_o": root,
        "S_T": pitch * (root + 2 * height),
        "S_L": pitch * (root + 2 * height) * math.sqrt(0.75),
        "N_r": rows,
        "L_f": height,
        "t_f": 0.0005,
        "p_f": distance,
        "arrangement": "staggered",
    }
    for speed, prandtl, root, height, pitch, rows, distance in itertools.product(
        (2500.0, 6000.0),
        (0.7, 0.72),
        (0.019, 0.0254),
        (0.009, 0.0159),
        (1.05, 1.3),
        (1, 3, 4, 8),
        (0.0024, 0.004),
    )
]


def reference(law, point, **more) -> float:
    """The Nusselt number of the library at the figures of a card."""
    root, height, thickness, distance = (point[name] for name in ("d_o", "L_f", "t_f", "p_f"))
    tip = root + 2 * height
    blocked = root + 2 * height * thickness / distance
    diagonal = math.hypot(point["S_L"], point["S_T"] / 2)
    free = min(point["S_T"] - blocked, 2 * (diagonal - blocked))
    showing = math.pi * root * (1 - thickness / distance)
    fins = (math.pi / 2 * (tip**2 - root**2) + math.pi * tip * thickness) / distance
    ratio = (showing + fins) / (math.pi * root)
    viscosity, conductivity = 2e-5, 0.027
    found = law(
        m=point["Re"] * viscosity / root * point["S_T"],
        A=showing + fins,
        A_min=free,
        A_increase=ratio,
        A_fin=fins,
        A_tube_showing=showing,
        tube_diameter=root,
        fin_diameter=tip,
        fin_thickness=thickness,
        bare_length=distance - thickness,
        rho=1.1,
        Cp=point["Pr"] * conductivity / viscosity,
        mu=viscosity,
        k=conductivity,
        k_fin=CONDUCTIVITY,
        **more,
    )
    return found / ratio * root / conductivity


def bank(point) -> dict[str, float]:
    return {"tube_rows": point["N_r"], "pitch_normal": point["S_T"], "pitch_parallel": point["S_L"]}


@pytest.mark.parametrize("point", GRID)
def test_finned_banks_against_an_independent_library(point):
    laws = ht.air_cooler
    assert evaluate_method(load_method("briggs-young-1963"), point)["Nu"] == pytest.approx(
        reference(laws.h_Briggs_Young, point), rel=1e-9
    )
    assert evaluate_method(load_method("ganguli-1985"), point)["Nu"] == pytest.approx(
        reference(laws.h_Ganguli_VDI, point, **bank(point)), rel=1e-9
    )
    at_wall = point | {"Pr_s": 0.71}
    assert evaluate_method(load_method("esdu-86022"), at_wall)["Nu"] == pytest.approx(
        reference(laws.h_ESDU_high_fin, point, Pr_wall=0.71, **bank(point)), rel=1e-9
    )
