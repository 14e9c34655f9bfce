"""Friction and the laws of flow inside tubes and annuli, held against outside references.

The reference is fluids 1.3.1 or ht 1.2.0, independent open libraries, wherever they have the law; else an
exact solution of laminar flow worked out here. Unless a reason is given beside a case, card and reference
are one closed form and only rounding remains, for which 1e-12 leaves thousands of roundings.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from functools import cache
from typing import Any

import fluids
import ht
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.polynomial import legendre
from scipy.linalg import eigh

from calcbook.formulas import evaluate
from calcbook.library import Library, bind_given, evaluate_method, load_method, load_situation
from calcbook.library.checking import check_method, check_situation, method_points, uncovered_constants
from calcbook.library.programs import evaluate_program

ROUNDING = 1e-12
LIBRARY = Library()

FRICTION = (
    "friction-laminar",
    "blasius-1913",
    "filonenko-1954",
    "konakov-1946",
    "colebrook-1939",
    "haaland-1983",
    "churchill-1977",
)
TUBE = load_situation("inside-tube").methods
ANNULUS = load_situation("annulus").methods
CARDS = sorted({*FRICTION, *TUBE, *ANNULUS})

# Figures that no outside value is sharp enough to miss when they move by one per cent, and why.
NOT_COVERED = {
    # The exponent of Pr in the second constant: moved by one per cent it changes Nu by less than 0.03 %.
    "petukhov-kirillov-1970": {("relation of K_2", "3")},
    # The share of the heated wall is from memory; the only outside value is another law, 6 to 8 % higher.
    "gnielinski-annulus-2009": {
        ("relation of F", "0.75"),
        ("relation of F", "0.17"),
        ("relation of F", "0.9"),
        ("relation of F", "0.6"),
        ("relation of Nu", "1"),
        ("relation of Nu", "3"),
    },
}

# A surface at the temperature-dependent properties of the bulk: every wall factor of a liquid is 1.
NEUTRAL = {
    "T_b": 300.0,
    "T_s": 302.0,
    "heated": True,
    "liquid": True,
    "mu": 1e-3,
    "mu_s": 1e-3,
    "d": 0.02,
    "L": 2.0,
    "a": 0.5,
}


def figures(name: str, **special: Any) -> dict[str, Any]:
    """Figures for the needs of a card: those given, else neutral ones; at the wall Pr is that of the bulk."""
    known = {**NEUTRAL, "Pr_s": special.get("Pr", 1.0), **special}
    return {need.symbol: known[need.symbol] for need in load_method(name).needs if need.symbol in known}


def assigned(name: str, **special: Any) -> dict[str, float]:
    """Every symbol that a card assigns for these figures."""
    return evaluate_method(load_method(name), figures(name, **special))


def result(name: str, **special: Any) -> float:
    """What a card gives for these figures."""
    return assigned(name, **special)[load_method(name).gives]


def holds(name: str, limit: str, **special: Any) -> bool:
    """Whether a limit of the card itself holds for these figures."""
    program = LIBRARY.program(name)
    values = evaluate_program(program, bind_given(program, figures(name, **special)))
    item = next(item for item in program.limits if item.card == name and item.limit.id == limit)
    return bool(evaluate(item.limit.that, {symbol: values[at] for symbol, at in item.inputs.items()}))


def chosen(situation: str, **special: Any) -> str:
    """The method that the choice table of a situation takes."""
    for row in load_situation(situation).choose:
        if row.when is None or evaluate(row.when, {"Re": np.asarray(special["Re"])}):
            return row.use
    raise AssertionError("the last row of a choice table has no condition")


def automatic(situation: str, **special: Any) -> float:
    """The Nusselt number by the method that the situation chooses."""
    return result(chosen(situation, **special), **special)


# --- the cards themselves -------------------------------------------------------------------------------


@pytest.mark.parametrize("name", CARDS)
def test_card_is_sound_and_its_check_points_hold(name: str) -> None:
    check_method(load_method(name), LIBRARY)
    deviations = [point.deviation / point.within for point in method_points(load_method(name), LIBRARY)]
    assert max(deviations) <= 1.0


@pytest.mark.parametrize("name", CARDS)
def test_outside_check_points_miss_no_moved_figure_but_the_known_ones(name: str) -> None:
    found = {(item.where, item.figure) for item in uncovered_constants(load_method(name), LIBRARY)}
    assert found == NOT_COVERED.get(name, set())


@pytest.mark.parametrize("name", ["inside-tube", "annulus"])
def test_situation_names_only_methods_that_exist(name: str) -> None:
    check_situation(name, LIBRARY)
    situation = load_situation(name)
    assert {row.use for row in situation.choose} <= set(situation.methods)


# --- friction against fluids 1.3.1 ----------------------------------------------------------------------


def library_colebrook(Re: float, eD: float) -> float:
    return fluids.friction.Colebrook(Re, eD)


@pytest.mark.parametrize(
    ("name", "reference", "low", "high", "roughnesses", "within"),
    [
        (
            "friction-laminar",
            lambda Re, eD: fluids.friction.friction_laminar(Re),
            1.0,
            2300.0,
            [0.0],
            ROUNDING,
        ),
        ("blasius-1913", lambda Re, eD: fluids.friction.Blasius(Re), 4e3, 1e5, [0.0], ROUNDING),
        # Both solve one equation; the root is found to 4e-16 of x and the logarithm magnifies that a little.
        ("colebrook-1939", library_colebrook, 4e3, 1e8, [0.0, 1e-5, 1e-3, 0.05], ROUNDING),
        ("haaland-1983", fluids.friction.Haaland, 4e3, 1e8, [1e-6, 1e-4, 0.05], ROUNDING),
        ("churchill-1977", fluids.friction.Churchill_1977, 10.0, 1e8, [0.0, 1e-4, 0.05], ROUNDING),
        # Other laws of the same smooth tube: 2 % is commonly quoted for both (from memory), measured 1.8 %
        # and 1.2 % over this range.
        ("filonenko-1954", library_colebrook, 1e4, 5e6, [0.0], 0.02),
        ("konakov-1946", library_colebrook, 1e4, 1e6, [0.0], 0.02),
    ],
)
def test_friction_factor_agrees_with_library(
    name: str,
    reference: Callable[..., float],
    low: float,
    high: float,
    roughnesses: list[float],
    within: float,
) -> None:
    for Re in np.geomspace(low, high, 12):
        for eD in roughnesses:
            assert result(name, Re=float(Re), eD=eD) == pytest.approx(reference(float(Re), eD), rel=within)


@pytest.mark.parametrize("name", ["colebrook-1939", "haaland-1983", "churchill-1977"])
def test_a_tube_is_smooth_when_no_roughness_is_given(name: str) -> None:
    assert result(name, Re=1e5) == result(name, Re=1e5, eD=0.0)
    assert result(name, Re=1e5) < result(name, Re=1e5, eD=1e-3)


# --- heat transfer against ht 1.2.0 ---------------------------------------------------------------------


def filonenko(Re: float) -> float:
    """Friction factor as Petukhov (1970) and Gnielinski (1976) print it."""
    return (1.82 * math.log10(Re) - 1.64) ** -2


def konakov(Re: float) -> float:
    """Friction factor as the VDI Heat Atlas, chapter G1, prints it."""
    return (1.8 * math.log10(Re) - 1.5) ** -2


def entry_factor(ratio: float) -> float:
    """Influence of the thermal entry on the mean, as Gnielinski (1976) prints it."""
    return 1.0 + ratio ** (2.0 / 3.0)


def tube_gnielinski(Re: float, Pr: float) -> float:
    return ht.conv_internal.turbulent_Gnielinski(Re, Pr, filonenko(Re)) * entry_factor(0.01)


def long_tube_gnielinski(Re: float, Pr: float) -> float:
    return ht.conv_internal.turbulent_Gnielinski(Re, Pr, filonenko(Re))


def tube_heat_atlas(Re: float, Pr: float) -> float:
    """The kernel without the term -1000 of 1976, with Konakov's friction factor."""
    kernel = ht.conv_internal.turbulent_Gnielinski(Re, Pr, konakov(Re)) * Re / (Re - 1000.0)
    return kernel * entry_factor(0.01)


def tube_petukhov_popov(Re: float, Pr: float) -> float:
    return ht.conv_internal.turbulent_Petukhov_Kirillov_Popov(Re, Pr, filonenko(Re))


def tube_hausen(Re: float, Pr: float) -> float:
    return ht.conv_internal.laminar_entry_thermal_Hausen(Re, Pr, 2.0, 0.02)


def tube_sieder_tate(Re: float, Pr: float) -> float:
    return ht.conv_internal.laminar_entry_Seider_Tate(Re, Pr, 2.0, 0.02)


LAMINAR = (100.0, 2300.0)
TURBULENT = (1e4, 1e6)


@pytest.mark.parametrize(
    ("name", "reference", "Re_range", "Pr_range", "within"),
    [
        (
            "laminar-developed-t",
            lambda Re, Pr: ht.conv_internal.laminar_T_const(),
            LAMINAR,
            (0.7, 1.0),
            ROUNDING,
        ),
        (
            "laminar-developed-h",
            lambda Re, Pr: ht.conv_internal.laminar_Q_const(),
            LAMINAR,
            (0.7, 1.0),
            ROUNDING,
        ),
        ("hausen-1943", tube_hausen, LAMINAR, (0.7, 1e3), ROUNDING),
        ("sieder-tate-laminar-1936", tube_sieder_tate, LAMINAR, (0.7, 1e4), ROUNDING),
        ("colburn-1933", ht.conv_internal.turbulent_Colburn, TURBULENT, (0.7, 160.0), ROUNDING),
        (
            "sieder-tate-turbulent-1936",
            ht.conv_internal.turbulent_Sieder_Tate,
            TURBULENT,
            (0.7, 1.6e4),
            ROUNDING,
        ),
        (
            "dittus-boelter-mcadams",
            ht.conv_internal.turbulent_Dittus_Boelter,
            TURBULENT,
            (0.6, 160.0),
            ROUNDING,
        ),
        ("petukhov-kirillov-popov", tube_petukhov_popov, (4e3, 5e6), (0.5, 1e4), ROUNDING),
        ("gnielinski-1976", tube_gnielinski, (2300.0, 5e6), (0.5, 2e3), ROUNDING),
        ("vdi-g1-turbulent", tube_heat_atlas, TURBULENT, (0.6, 1e3), ROUNDING),
        # Other published constants for the same tube; measured 8.0 % and 7.2 %, claimed accuracy 10 %.
        ("petukhov-1970", tube_petukhov_popov, (1e4, 5e6), (0.7, 2e3), 0.085),
        ("petukhov-kirillov-1970", tube_petukhov_popov, (1e4, 5e6), (0.7, 2e3), 0.085),
        # Another law for the same tube: the authors claim 10 % (abstract of 1975); measured 7.4 %.
        ("sleicher-rouse-1975", long_tube_gnielinski, (2e4, 1e6), (0.7, 75.0), 0.10),
    ],
)
def test_nusselt_number_agrees_with_library(
    name: str,
    reference: Callable[..., float],
    Re_range: tuple[float, float],
    Pr_range: tuple[float, float],
    within: float,
) -> None:
    for Re in np.geomspace(*Re_range, 8):
        for Pr in np.geomspace(*Pr_range, 6):
            got = result(name, Re=float(Re), Re_f=float(Re), Pr=float(Pr))
            assert got == pytest.approx(reference(float(Re), float(Pr)), rel=within)


def test_petukhov_is_the_later_form_where_their_first_constants_meet() -> None:
    for Re in (1e4, 5e4, 1e5, 1e6):
        Pr = (0.63 * Re / 900.0 - 1.0) / 10.0  # there 900/Re - 0.63/(1 + 10 Pr) is zero
        assert result("petukhov-1970", Re=Re, Pr=Pr) == pytest.approx(
            tube_petukhov_popov(Re, Pr), rel=ROUNDING
        )


def test_liquid_metal_laws_stand_in_the_published_relation_to_each_other() -> None:
    """Lyon and Seban-Shimazaki differ by 2; Notter-Sleicher lies 22 to 30 % below both at Pe 1000 to 2500."""
    for Re, Pr in ((1e5, 0.01), (5e5, 0.005)):
        lyon, seban = result("lyon-1951", Re=Re, Pr=Pr), result("seban-shimazaki-1951", Re=Re, Pr=Pr)
        assert lyon - seban == pytest.approx(2.0, rel=ROUNDING)
        for old, new in ((lyon, "notter-sleicher-1972-h"), (seban, "notter-sleicher-1972-t")):
            assert 0.20 <= 1.0 - result(new, Re=Re, Pr=Pr) / old <= 0.30


# --- exact laminar flow ---------------------------------------------------------------------------------


@cache
def modes(inner: float, wall: str) -> tuple[np.ndarray, np.ndarray]:
    """Decay rates and weights of the developed laminar flow between two radii, outer radius 1.

    Galerkin solution with 60 Legendre functions; ``inner`` 0 is a tube. The bulk temperature over the
    wall's is the sum of weight*exp(-rate*X), X = diffusivity*length/(mean speed*radius**2).
    """
    points, weights = legendre.leggauss(300)
    radius = inner + (1.0 - inner) * (points + 1.0) / 2.0
    weights = weights * (1.0 - inner) / 2.0
    shape = 1.0 - radius**2
    if inner:
        shape = shape + (1.0 - inner**2) / math.log(1.0 / inner) * np.log(radius)
    speed = shape * (1.0 - inner**2) / 2.0 / (shape * radius * weights).sum()
    at_wall, slope = {
        "inner": (radius - inner, np.ones_like(radius)),
        "outer": (1.0 - radius, -np.ones_like(radius)),
        "both": ((radius - inner) * (1.0 - radius), 1.0 + inner - 2.0 * radius),
    }[wall]
    units = np.eye(60)
    plain = np.array([legendre.legval(points, row) for row in units])
    steep = np.array([legendre.legval(points, legendre.legder(row)) for row in units]) * 2.0 / (1.0 - inner)
    functions, slopes = at_wall * plain, at_wall * steep + slope * plain
    rates, vectors = eigh(
        (radius * weights * slopes) @ slopes.T, (radius * speed * weights * functions) @ functions.T
    )
    start = vectors.T @ (functions @ (radius * speed * weights))
    return rates, start**2 * 2.0 / (1.0 - inner**2)


def exact_nusselt(Gz: float, inner: float = 0.0, wall: str = "outer") -> float:
    """Mean Nusselt number on the hydraulic diameter, wall of constant temperature, velocity developed."""
    rates, weights = modes(inner, wall)
    diameter = 2.0 * (1.0 - inner)
    along = diameter**2 / Gz
    heated = {"inner": inner, "outer": 1.0, "both": 1.0 + inner}[wall]
    bulk = (weights * np.exp(-rates * along)).sum()
    return -math.log(bulk) / along * (1.0 - inner**2) / 2.0 / heated * diameter


def at_graetz(Gz: float) -> dict[str, float]:
    return {"Re": 1000.0, "Pr": 5.0, "d": 0.02, "L": 100.0 / Gz}


def test_exact_solution_has_the_published_first_eigenvalue() -> None:
    # 3.6568 for the tube: Shah and London (1978); printed there to five figures.
    assert modes(0.0, "outer")[0][0] == pytest.approx(3.6568, abs=5e-5)


@pytest.mark.parametrize(
    ("name", "low", "high", "span"),
    [
        # Deviations of the fits from theory, measured: -0.9 to 1.0 %, 0.2 to 1.6 %, 1.3 to 12.3 %,
        # 19.7 to 21.7 %.
        ("gnielinski-laminar-t", -0.01, 0.01, (1.0, 3000.0)),
        ("hausen-1943", 0.0, 0.017, (1.0, 100.0)),
        ("hausen-1943", 0.012, 0.13, (100.0, 3000.0)),
        ("sieder-tate-laminar-1936", 0.19, 0.22, (100.0, 3000.0)),
    ],
)
def test_laminar_law_against_exact_entry_problem(
    name: str, low: float, high: float, span: tuple[float, float]
) -> None:
    for Gz in np.geomspace(*span, 9):
        deviation = result(name, **at_graetz(float(Gz))) / exact_nusselt(float(Gz)) - 1.0
        assert low <= deviation <= high


@pytest.mark.parametrize(
    ("wall", "low", "high"),
    [
        # Deviations of the fit from theory, measured: the boundary layer of a thin inner tube is curved,
        # which the fit leaves out (a = 0.2).
        ("inner", -0.14, 0.035),
        ("outer", 0.0, 0.09),
        ("both", -0.01, 0.04),
    ],
)
def test_annulus_laminar_against_exact_entry_problem(wall: str, low: float, high: float) -> None:
    for inner in (0.2, 0.5, 0.8):
        for Gz in np.geomspace(1.0, 1000.0, 7):
            got = result("gnielinski-annulus-laminar", **at_graetz(float(Gz)), a=inner, heated_wall=wall)
            assert low <= got / exact_nusselt(float(Gz), inner, wall) - 1.0 <= high


def test_annulus_reynolds_number_is_that_of_exact_laminar_friction() -> None:
    """Re_s/Re equals 64/(f Re) of exact laminar flow between concentric tubes."""
    for inner in (0.05, 0.2, 0.5, 0.9):
        points, weights = legendre.leggauss(200)
        radius = inner + (1.0 - inner) * (points + 1.0) / 2.0
        speed = 1.0 - radius**2 + (1.0 - inner**2) / math.log(1.0 / inner) * np.log(radius)
        mean = (speed * radius * weights).sum() * (1.0 - inner) / (1.0 - inner**2) / 4.0
        friction = 2.0 * (2.0 * (1.0 - inner)) ** 2 / mean
        ratio = assigned("gnielinski-annulus-2009", Re=2e4, Pr=7.0, a=inner)["Re_s"] / 2e4
        # near a = 0.9 the closed form loses four digits by cancellation
        assert ratio == pytest.approx(64.0 / friction, rel=1e-10)


def test_annulus_turbulent_lies_below_the_plain_tube() -> None:
    """Process practice: 10 to 20 % below a tube law at the hydraulic diameter (common practice)."""
    for wall in ("inner", "outer", "both"):
        annulus = result("gnielinski-annulus-2009", Re=2e4, Pr=7.0, a=0.5, heated_wall=wall)
        assert 0.10 <= 1.0 - annulus / tube_heat_atlas(2e4, 7.0) <= 0.20


def test_simultaneous_development_raises_laminar_heat_transfer() -> None:
    for name in ("gnielinski-laminar-t", "gnielinski-laminar-h", "gnielinski-annulus-laminar"):
        developed = result(name, **at_graetz(100.0), profile="developed")
        assert result(name, **at_graetz(100.0)) == developed
        assert result(name, **at_graetz(100.0), profile="developing") > developed


def test_simultaneous_development_against_library() -> None:
    # ht has the fit of Baehr and Stephan for this case; measured deviations -3.9, -0.9 and +1.0 %.
    for Pr in (1.0, 5.0, 50.0):
        reference = ht.conv_internal.laminar_entry_Baehr_Stephan(1500.0, Pr, 2.0, 0.02)
        got = result("gnielinski-laminar-t", Re=1500.0, Pr=Pr, profile="developing")
        assert got == pytest.approx(reference, rel=0.04)


# --- wall factors ---------------------------------------------------------------------------------------

BY_PRANDTL = ("gnielinski-1976", "vdi-g1-turbulent", "gnielinski-annulus-2009")


@pytest.mark.parametrize(
    "name", [*BY_PRANDTL, "gnielinski-laminar-t", "gnielinski-laminar-h", "gnielinski-annulus-laminar"]
)
def test_liquid_wall_factor_has_the_library_exponent(name: str) -> None:
    reference = ht.core.wall_factor(Pr=7.0, Pr_wall=4.0, property_option="Prandtl")
    assert assigned(name, Re=2e4, Pr=7.0, Pr_s=4.0)["K"] == pytest.approx(reference, rel=ROUNDING)


@pytest.mark.parametrize("name", BY_PRANDTL)
def test_gas_is_corrected_when_heated_and_not_when_cooled(name: str) -> None:
    gas = {"Re": 2e4, "Pr": 0.7, "Pr_s": 0.69, "liquid": False}
    heated = assigned(name, **gas, heated=True, T_b=300.0, T_s=500.0)["K"]
    assert heated == pytest.approx(0.6**0.45, rel=ROUNDING)
    # exponent of carbon dioxide in the VDI Heat Atlas (from memory)
    dioxide = assigned(name, **gas, heated=True, T_b=300.0, T_s=500.0, n_gas=0.12)["K"]
    assert dioxide == pytest.approx(0.6**0.12, rel=ROUNDING)
    assert assigned(name, **gas, heated=False, T_b=500.0, T_s=300.0)["K"] == 1.0


@pytest.mark.parametrize("name", ["petukhov-1970", "petukhov-kirillov-1970", "petukhov-kirillov-popov"])
def test_viscosity_factor_of_petukhov_has_the_library_exponents(name: str) -> None:
    for mu_s, heated in ((6e-4, True), (1.7e-3, False)):
        reference = ht.core.wall_factor_Nu(1e-3, mu_s, turbulent=True, liquid=True)
        got = assigned(name, Re=2e4, Pr=7.0, mu=1e-3, mu_s=mu_s, heated=heated)["K"]
        assert got == pytest.approx(reference, rel=ROUNDING)
    assert assigned(name, Re=2e4, Pr=0.7, mu=2e-5, mu_s=1.5e-5, heated=False, liquid=False)["K"] == 1.0


@pytest.mark.parametrize(("heated", "T_s"), [(True, 304.0), (False, 296.0)])
def test_dittus_boelter_takes_its_exponent_from_the_direction_of_heat(heated: bool, T_s: float) -> None:
    reference = ht.conv_internal.turbulent_Dittus_Boelter(2e4, 7.0, heating=heated)
    got = result("dittus-boelter-mcadams", Re=2e4, Pr=7.0, heated=heated, T_s=T_s)
    assert got == pytest.approx(reference, rel=ROUNDING)


# --- transition and the joints of the choice tables -----------------------------------------------------


def test_transition_of_1995_reproduces_the_published_form() -> None:
    """Ends: laminar at 2300 with simultaneous development, and the Heat Atlas equation at 10000."""
    lower = result("gnielinski-laminar-t", Re=2300.0, Pr=7.0, profile="developing")
    upper = tube_heat_atlas(1e4, 7.0)
    share = (5000.0 - 2300.0) / 7700.0
    got = result("gnielinski-transition-1995", Re=5000.0, Pr=7.0, profile="developing")
    assert got == pytest.approx((1.0 - share) * lower + share * upper, rel=ROUNDING)


def test_transition_of_2013_reproduces_the_published_form() -> None:
    """Ends: laminar at 2300, uniform flux, simultaneous development; at 4000 with Konakov's friction."""
    lower = result("gnielinski-laminar-h", Re=2300.0, Pr=7.0, profile="developing")
    upper = ht.conv_internal.turbulent_Gnielinski(4000.0, 7.0, konakov(4000.0)) * entry_factor(0.01)
    share = 700.0 / 1700.0
    got = result("gnielinski-transition-2013", Re=3000.0, Pr=7.0, profile="developing", boundary="flux")
    assert got == pytest.approx((1.0 - share) * lower + share * upper, rel=ROUNDING)


LIQUID = {"Pr": 7.0, "Pr_s": 4.0}
COLD_GAS = {"Pr": 0.7, "Pr_s": 0.69, "liquid": False, "T_b": 300.0, "T_s": 400.0}


@pytest.mark.parametrize("fluid", [LIQUID, COLD_GAS])
@pytest.mark.parametrize("profile", ["developed", "developing"])
@pytest.mark.parametrize(
    ("lower", "upper", "Re"),
    [
        ("gnielinski-laminar-t", "gnielinski-transition-2013", 2300.0),
        ("gnielinski-laminar-t", "gnielinski-transition-1995", 2300.0),
        ("gnielinski-transition-1995", "vdi-g1-turbulent", 10000.0),
        ("gnielinski-annulus-laminar", "gnielinski-annulus-transition", 2300.0),
        ("gnielinski-annulus-transition", "gnielinski-annulus-2009", 10000.0),
    ],
)
def test_adjoining_laws_meet(
    lower: str, upper: str, Re: float, profile: str, fluid: Mapping[str, Any]
) -> None:
    below, above = (result(name, Re=Re, profile=profile, **fluid) for name in (lower, upper))
    assert below == pytest.approx(above, rel=ROUNDING)


@pytest.mark.parametrize(("Pr", "step"), [(0.7, 0.031), (7.0, 0.018), (100.0, 0.015)])
def test_step_at_4000_is_the_one_that_the_cards_state(Pr: float, step: float) -> None:
    """Filonenko's friction factor against Konakov's; the cards print the step in tenths of a per cent."""
    below, above = (
        result(name, Re=4000.0, Pr=Pr) for name in ("gnielinski-transition-2013", "gnielinski-1976")
    )
    assert above / below - 1.0 == pytest.approx(step, abs=0.0005)
    stated = f"{100.0 * step:.1f} % at Pr = {Pr:g}"
    for name in ("gnielinski-transition-2013", "gnielinski-1976"):
        assert any(stated in note for note in load_method(name).notes)


@pytest.mark.parametrize(
    ("situation", "Re", "method"),
    [
        ("inside-tube", 2299.0, "gnielinski-laminar-t"),
        ("inside-tube", 2300.0, "gnielinski-transition-2013"),
        ("inside-tube", 3999.0, "gnielinski-transition-2013"),
        ("inside-tube", 4000.0, "gnielinski-1976"),
        ("annulus", 2299.0, "gnielinski-annulus-laminar"),
        ("annulus", 2300.0, "gnielinski-annulus-transition"),
        ("annulus", 10000.0, "gnielinski-annulus-2009"),
    ],
)
def test_choice_table(situation: str, Re: float, method: str) -> None:
    assert chosen(situation, Re=Re) == method


@given(
    Re=st.floats(min_value=10.0, max_value=9e5),
    Pr=st.floats(min_value=0.7, max_value=900.0),
    situation=st.sampled_from(["inside-tube", "annulus"]),
)
def test_more_flow_never_lowers_the_chosen_nusselt_number(Re: float, Pr: float, situation: str) -> None:
    # The slack is for rounding where developed laminar flow makes Nu all but constant.
    assert automatic(situation, Re=1.05 * Re, Pr=Pr) >= automatic(situation, Re=Re, Pr=Pr) * (1.0 - ROUNDING)


# --- limits ---------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "limit", "inside", "outside"),
    [
        ("friction-laminar", "laminar", {"Re": 2300.0}, {"Re": 2301.0}),
        ("blasius-1913", "turbulent smooth", {"Re": 1e5}, {"Re": 1.01e5}),
        ("churchill-1977", "outside transition", {"Re": 2100.0}, {"Re": 3000.0}),
        ("haaland-1983", "roughness", {"Re": 1e5, "eD": 0.05}, {"Re": 1e5, "eD": 0.051}),
        (
            "laminar-developed-t",
            "developed",
            {"Re": 1000.0, "Pr": 2.0, "L": 2.0},
            {"Re": 1000.0, "Pr": 2.1, "L": 2.0},
        ),
        ("sieder-tate-laminar-1936", "short tube", {"Re": 1000.0, "Pr": 1.0}, {"Re": 700.0, "Pr": 1.0}),
        ("dittus-boelter-mcadams", "turbulent", {"Re": 1e4, "Pr": 5.0}, {"Re": 9999.0, "Pr": 5.0}),
        (
            "dittus-boelter-mcadams",
            "moderate difference",
            {"Re": 2e4, "Pr": 5.0, "T_s": 306.0},
            {"Re": 2e4, "Pr": 5.0, "T_s": 306.1},
        ),
        (
            "dittus-boelter-mcadams",
            "moderate difference",
            {"Re": 2e4, "Pr": 0.7, "T_s": 360.0, "liquid": False},
            {"Re": 2e4, "Pr": 0.7, "T_s": 360.1, "liquid": False},
        ),
        (
            "gnielinski-1976",
            "Prandtl ratio",
            {"Re": 2e4, "Pr": 20.0, "Pr_s": 1.0},
            {"Re": 2e4, "Pr": 21.0, "Pr_s": 1.0},
        ),
        (
            "gnielinski-1976",
            "temperature ratio",
            {"Re": 2e4, "Pr": 0.7, "T_s": 600.0, "liquid": False},
            {"Re": 2e4, "Pr": 0.7, "T_s": 601.0, "liquid": False},
        ),
        ("gnielinski-1976", "above transition", {"Re": 4000.0, "Pr": 1.0}, {"Re": 3999.0, "Pr": 1.0}),
        ("notter-sleicher-1972-t", "Prandtl number", {"Re": 1e5, "Pr": 0.1}, {"Re": 1e5, "Pr": 0.11}),
        ("notter-sleicher-1972-h", "narrow Prandtl number", {"Re": 1e5, "Pr": 0.01}, {"Re": 1e5, "Pr": 0.02}),
        ("lyon-1951", "Peclet number", {"Re": 1e4, "Pr": 0.01}, {"Re": 1e4, "Pr": 0.0099}),
        ("lyon-1951", "Prandtl number", {"Re": 1e5, "Pr": 0.004}, {"Re": 1e5, "Pr": 0.7}),
        ("seban-shimazaki-1951", "Prandtl number", {"Re": 1e5, "Pr": 0.004}, {"Re": 1e5, "Pr": 0.7}),
        (
            "gnielinski-laminar-t",
            "Prandtl number",
            {"Re": 1e3, "Pr": 0.01},
            {"Re": 1e3, "Pr": 0.01, "profile": "developing"},
        ),
        (
            "gnielinski-annulus-2009",
            "diameter ratio",
            {"Re": 2e4, "Pr": 5.0, "a": 0.99},
            {"Re": 2e4, "Pr": 5.0, "a": 1.01},
        ),
    ],
)
def test_limit_parts_inside_from_outside(
    name: str, limit: str, inside: Mapping[str, Any], outside: Mapping[str, Any]
) -> None:
    assert holds(name, limit, **inside)
    assert not holds(name, limit, **outside)
