"""Laws of flow past a single body, free convection, walls and radiation, held against references.

The reference is ht 1.2.0, an independent open library, wherever it has the law; else a numerical
integral or the solution of the balance that the law stands for. Each grid lies inside the range of the
law. The largest deviation that was measured stands beside each case; unless a reason is given, card and
reference are one closed form and only rounding remains, for which 1e-12 leaves a hundred roundings.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterable, Mapping
from typing import Any

import ht
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad

from calcbook.formulas import evaluate
from calcbook.library import Library, bind_given, build_program, evaluate_method, load_method, load_situation
from calcbook.library.operations import run
from calcbook.library.programs import evaluate_program

ROUNDING = 1e-12


def result(name: str, figures: Mapping[str, object]) -> float:
    """What a card gives for figures by its own symbols."""
    card = load_method(name)
    return evaluate_method(card, figures)[card.gives]


def largest_deviation(
    name: str, reference: Callable[..., float], points: Iterable[Mapping[str, Any]]
) -> float:
    """Largest relative deviation of a card from a reference that takes the same symbols."""
    return max(abs(result(name, point) / reference(**point) - 1.0) for point in points)


def grid(**axes: Iterable[object]) -> list[dict[str, Any]]:
    """Every combination of the figures of the axes."""
    return [dict(zip(axes, figures, strict=True)) for figures in itertools.product(*axes.values())]


def decades(low: float, high: float, count: int = 9) -> list[float]:
    """Figures from low to high, evenly spaced in the logarithm."""
    return [float(figure) for figure in np.geomspace(low, high, count)]


def vertical_plate(Ra: float, Pr: float) -> float:
    return ht.Nu_vertical_plate_Churchill(Pr, Ra / Pr)


def horizontal_cylinder(Ra: float, Pr: float) -> float:
    return ht.Nu_horizontal_cylinder_Churchill_Chu(Pr, Ra / Pr)


def plate_integral(Re: float, Pr: float, Re_c: float = 0.0) -> float:
    """Mean of the local laws 0.332 Re_x**0.5 and 0.0296 Re_x**0.8, in variables that make them smooth."""
    laminar = quad(lambda root: 2 * 0.332, 0.0, math.sqrt(Re_c))[0]
    turbulent = quad(lambda power: 0.0296 / 0.8, Re_c**0.8, Re**0.8)[0]
    return (laminar + turbulent) * Pr ** (1 / 3)


def combined_plate(Re: float, Pr: float) -> float:
    """Laminar and turbulent part from the library, added as squares."""
    laminar = ht.Nu_horizontal_plate_laminar_Baehr(Re, Pr)
    return math.hypot(laminar, ht.Nu_horizontal_plate_turbulent_Schlichting(Re, Pr))


def bernstein_factor(Re: float, Pr: float) -> float:
    """The library's general Churchill-Bernstein equation without 0.3 and without its factor for high Re."""
    general = ht.Nu_cylinder_Churchill_Bernstein(Re, Pr) - 0.3
    return general / (1 + (Re / 282000) ** 0.625) ** 0.8


# The library changes to 0.678 at Pr = 10, so the laminar grid ends there.
LAMINAR = grid(Re=decades(100, 5e5), Pr=decades(0.6, 9.9, 5))
ANY_PRANDTL = grid(Re=decades(1e4, 5e5), Pr=decades(0.01, 1000, 7))
CROSS = grid(Re=decades(40, 1e7, 13), Pr=decades(0.01, 1000, 7))
FREE = grid(Ra=decades(0.1, 1e12, 14), Pr=decades(0.01, 1000, 7))

AGAINST_LIBRARY: list[tuple[str, Callable[..., float], list[dict[str, Any]]]] = [
    # card, reference, points; largest deviation measured
    ("flat-plate-laminar", ht.Nu_horizontal_plate_laminar_Baehr, LAMINAR),  # 0
    ("churchill-ozoe-plate-1973", ht.Nu_horizontal_plate_laminar_Churchill_Ozoe, ANY_PRANDTL),  # 2.2e-16
    (
        "flat-plate-turbulent-petukhov",
        ht.Nu_horizontal_plate_turbulent_Schlichting,
        grid(Re=decades(5e5, 1e7), Pr=decades(0.6, 2000, 7)),
    ),  # 0
    ("flat-plate-combined", combined_plate, LAMINAR),  # 2.2e-16
    ("flat-plate-turbulent", plate_integral, grid(Re=decades(5e5, 1e8), Pr=decades(0.6, 60, 5))),  # 5.6e-16
    (
        "flat-plate-mixed",
        plate_integral,
        grid(Re=decades(1e6, 1e8), Pr=decades(0.6, 60, 5), Re_c=[1e5, 5e5, 9e5]),
    ),  # 4.4e-16
    ("churchill-bernstein-1977", ht.Nu_cylinder_Churchill_Bernstein, CROSS),  # 0
    (
        "churchill-bernstein-1977-mid",
        lambda Re, Pr: 0.3 + bernstein_factor(Re, Pr) * (1 + (Re / 282000) ** 0.5),
        grid(Re=decades(2e4, 4e5), Pr=decades(0.01, 1000, 7)),
    ),  # 2.2e-16
    (
        "churchill-bernstein-1977-low",
        lambda Re, Pr: 0.3 + bernstein_factor(Re, Pr),
        grid(Re=decades(20, 1e4), Pr=decades(0.01, 1000, 7)),
    ),  # 2.2e-16
    (
        "zukauskas-cylinder-1972",
        lambda Re, Pr, Pr_s: ht.Nu_cylinder_Zukauskas(Re, Pr, Pr_s),
        grid(Re=decades(1, 1e6, 25), Pr=[0.7, 2.0, 9.9, 10.0, 10.1, 100.0, 500.0], Pr_s=[0.7, 5.0, 300.0]),
    ),  # 4.4e-16
    ("churchill-chu-plate-1975", vertical_plate, FREE),  # 6.7e-16
    ("churchill-chu-cylinder-1975", horizontal_cylinder, FREE),  # 4.4e-16
    (
        "mcadams-lloyd-moran-plate",
        lambda Ra, heated, facing: ht.Nu_horizontal_plate_McAdams(1.0, Ra, True),
        grid(Ra=[*decades(1e4, 1e11, 15), 1.001e7], heated=[True], facing=["up"]),
    ),  # 0
    (
        "mcadams-plate-down",
        lambda Ra, heated, facing: ht.Nu_horizontal_plate_McAdams(1.0, Ra, False),
        grid(Ra=decades(1e5, 1e10, 11), heated=[True], facing=["down"]),
    ),  # 1.1e-16
    (
        "wall-plane",
        lambda t, k: ht.conduction.k_to_R(k, t),
        grid(t=decades(1e-4, 1), k=decades(0.02, 400)),
    ),  # 0
    (
        "wall-cylinder",
        lambda d_i, d_o, k: ht.conduction.R_cylinder(d_i, d_o, k, 1.0) * math.pi * d_o,
        grid(d_i=[0.01, 0.1], d_o=[0.12, 0.5, 3.0], k=decades(0.02, 400, 5)),
    ),  # 4.4e-16
]


@pytest.mark.parametrize(
    ("name", "reference", "points"), AGAINST_LIBRARY, ids=[case[0] for case in AGAINST_LIBRARY]
)
def test_law_equals_its_reference_inside_its_range(
    name: str, reference: Callable[..., float], points: list[dict[str, Any]]
) -> None:
    assert largest_deviation(name, reference, points) <= ROUNDING


def test_tripped_plate_stands_2_8_per_cent_above_the_library() -> None:
    # ht 1.2.0 rounds the constant to 0.036; the mean of the local law 0.0296 is 0.0296/0.8 = 0.037 (kept).
    points = grid(Re=decades(5e5, 1e8), Pr=[0.7, 6.0, 60.0])
    for point in points:
        ratio = result("flat-plate-turbulent", point) / ht.Nu_horizontal_plate_turbulent_Kreith(**point)
        assert ratio == pytest.approx(0.037 / 0.036, rel=ROUNDING)


def test_small_radiation_differs_from_the_library_by_its_older_constant() -> None:
    # ht 1.2.0 holds 5.670367e-8 W/(m2 K4) (CODATA 2014); the 2018 SI has 5.670374419e-8, 1.31e-6 more.
    for point in grid(eps=[0.1, 0.9], T_s=[250.0, 400.0, 900.0], T_sur=[260.0, 300.0]):
        flux = ht.q_rad(point["eps"], point["T_s"], point["T_sur"])
        ratio = result("radiation-linear-small", point) * (point["T_s"] - point["T_sur"]) / flux
        # 1e-10: the difference of fourth powers loses some digits
        assert ratio == pytest.approx(5.670374419 / 5.670367, rel=1e-10)


def test_spherical_wall_is_the_integral_through_it() -> None:
    # 1e-10 is the figure asked of the quadrature; the largest deviation measured is 2.2e-14.
    for point in grid(d_i=[0.1, 1.0], d_o=[1.01, 1.4, 5.0], k=[0.04, 16.0]):
        d_i, d_o, k = point["d_i"], point["d_o"], point["k"]
        drop = quad(lambda r: 1 / (4 * math.pi * k * r**2), d_i / 2, d_o / 2, epsrel=1e-12)[0]  # noqa: B023
        assert result("wall-sphere", point) == pytest.approx(drop * math.pi * d_o**2, rel=1e-10)


@pytest.mark.parametrize(("eps", "eps_sur"), [(0.8, 0.5), (0.05, 0.9), (1.0, 0.1)])
def test_concentric_radiation_is_the_balance_of_two_grey_surfaces(eps: float, eps_sur: float) -> None:
    # Two radiosities from the linear balance of a long annulus: view factors 1, d/D and 1 - d/D.
    sigma = 5.670374419e-8
    for d_o, d_sur, T_s, T_sur in [(0.1, 0.2, 400.0, 300.0), (0.05, 0.051, 310.0, 600.0)]:
        back = d_o / d_sur
        balance = np.array([[1.0, eps - 1.0], [(eps_sur - 1.0) * back, 1.0 + (eps_sur - 1.0) * (1.0 - back)]])
        emitted = np.array([eps * sigma * T_s**4, eps_sur * sigma * T_sur**4])
        leaving = np.linalg.solve(balance, emitted)
        point = {"eps": eps, "eps_sur": eps_sur, "d_o": d_o, "d_sur": d_sur, "T_s": T_s, "T_sur": T_sur}
        expected = (leaving[0] - leaving[1]) / (T_s - T_sur)
        # 1e-10: the difference of two radiosities of like size loses digits
        assert result("radiation-linear-concentric", point) == pytest.approx(expected, rel=1e-10)


def test_critical_radius_has_the_least_resistance() -> None:
    k, h = 0.05, 5.0
    # layer and film of a tube (per length) and of a sphere, the layer from an inner radius of 1 mm
    sums = {
        "tube": lambda r: math.log(r / 0.001) / (2 * math.pi * k) + 1 / (2 * math.pi * r * h),
        "sphere": lambda r: (1 / 0.001 - 1 / r) / (4 * math.pi * k) + 1 / (4 * math.pi * r**2 * h),
    }
    for shape, resistance in sums.items():
        radius = result("critical-radius", {"k": k, "h": h, "d_o": 0.1, "shape": shape})
        assert resistance(radius) < min(resistance(0.99 * radius), resistance(1.01 * radius))


def test_contact_is_the_reciprocal_of_its_coefficient() -> None:
    assert result("contact-resistance", {"h_c": 5000.0}) == ht.conduction.k_to_R(5000.0, 1.0)


# -- laws that the library does not have ------------------------------------------------------------------


def test_hilpert_follows_churchill_bernstein_within_the_scatter_of_the_data() -> None:
    # Another law. Hilpert's own +-25 %; the general Churchill-Bernstein equation is a lower bound that data
    # exceed most above 1e5, so the grid ends there. Largest deviation measured: 19 % at 1e5.
    points = grid(Re=decades(0.4, 1e5, 25), Pr=[0.7])
    assert largest_deviation("hilpert-1933", ht.Nu_cylinder_Churchill_Bernstein, points) <= 0.25


def test_hilpert_rows_meet_within_two_per_cent() -> None:
    for edge in (4.0, 40.0, 4e3, 4e4):
        below = result("hilpert-1933", {"Re": edge * (1 - 1e-9), "Pr": 0.7})
        above = result("hilpert-1933", {"Re": edge, "Pr": 0.7})
        # largest jump measured: 1.5 % at 4e4
        assert abs(above / below - 1) <= 0.016


def test_nakai_okazaki_meets_churchill_bernstein_at_a_peclet_number_of_0_2() -> None:
    # The two laws are used side by side there; gases are what the lower one was made for. Measured: 10.0 %.
    point = {"Re": 0.2 / 0.7, "Pr": 0.7}
    low, high = result("nakai-okazaki-1975", point), result("churchill-bernstein-1977", point)
    assert 0.0 <= low / high - 1 <= 0.11


@pytest.mark.parametrize(
    ("name", "reference", "low", "high"),
    # Same authors, same data, another law. Measured from Ra = 1e3 to 1e7: plate -9.0 % to +7.4 %, cylinder
    # -24.9 % to -1.6 %; above, the general equation goes over to turbulence and the two part.
    [
        ("churchill-chu-plate-1975-laminar", vertical_plate, -0.095, 0.08),
        ("churchill-chu-cylinder-1975-laminar", horizontal_cylinder, -0.25, 0.0),
    ],
)
def test_laminar_form_follows_the_general_one(
    name: str, reference: Callable[..., float], low: float, high: float
) -> None:
    for point in grid(Ra=decades(1e3, 1e7, 9), Pr=[0.7, 6.0, 100.0]):
        assert low <= result(name, point) / reference(**point) - 1 <= high


def test_laminar_plate_follows_the_exact_boundary_layer() -> None:
    # Slope of temperature at an isothermal vertical plate, similarity solution: S. Ostrach,
    # NACA TR 1111 (1953), four digits, from memory. The mean is 4/3 of the local figure (Gr/4)**0.25 * slope.
    for prandtl, slope in ((1.0, 0.5671), (10.0, 1.1694), (100.0, 2.191)):
        exact = 4 / 3 * slope / math.sqrt(2) / prandtl**0.25
        values = evaluate_method(load_method("churchill-chu-plate-1975-laminar"), {"Ra": 1e8, "Pr": prandtl})
        # the fit of the authors is within 1 % of the exact figure
        assert values["Nu_layer"] / 1e8**0.25 == pytest.approx(exact, rel=0.01)


# -- forced and free together ------------------------------------------------------------------------------

BLENDS: dict[str, tuple[str, dict[str, Any]]] = {
    "mixed-blend-cylinder": ("churchill-chu-cylinder-1975", {}),
    "mixed-blend-vertical-plate": ("churchill-chu-plate-1975", {"buoyancy": "assisting"}),
    "mixed-blend-horizontal-plate": (
        "mcadams-lloyd-moran-plate",
        {"heated": True, "facing": "up", "L": 2.0, "L_c": 0.3},
    ),
    "mixed-blend-horizontal-plate-stable": (
        "mcadams-plate-down",
        {"heated": True, "facing": "down", "L": 2.0, "L_c": 0.3},
    ),
}


def free_part(name: str, Ra: float) -> float:
    free, words = BLENDS[name]
    taken = {need.symbol for need in load_method(free).needs}
    figures = {"Ra": Ra, "Pr": 0.7, **words}
    return result(free, {symbol: figure for symbol, figure in figures.items() if symbol in taken})


@pytest.mark.parametrize("name", BLENDS)
def test_without_a_stream_the_free_part_is_left(name: str) -> None:
    blended = result(name, {"Re": 0.0, "Pr": 0.7, "Ra": 1e6, **BLENDS[name][1]})
    # 1e-6: on a cylinder the forced law keeps its 0.3 at rest, (0.3/14.5)**4/4 = 5e-8 of the sum
    assert blended == pytest.approx(free_part(name, 1e6), rel=1e-6)


@pytest.mark.parametrize("name", BLENDS)
def test_the_blend_has_no_step_at_rest(name: str) -> None:
    figures = {"Pr": 0.7, "Ra": 1e6, **BLENDS[name][1]}
    at_rest = result(name, {"Re": 0.0, **figures})
    creeping = [result(name, {"Re": speed, **figures}) for speed in (1e-9, 1e-6, 1e-3, 1e-2)]
    assert creeping == sorted(creeping)
    # a Reynolds number of 0.01 against 1e3 at which the parts are equal: no more than 1e-5
    assert creeping[-1] / at_rest - 1 <= 1e-5


@pytest.mark.parametrize("name", BLENDS)
def test_slopes_at_rest_are_finite(name: str) -> None:
    # Re**0.5 has no finite slope at zero; the relations keep away from it, whatever a solver seeds.
    program = build_program(load_method(name), load_method)
    figures = {"Re": 0.0, "Pr": 0.7, "Ra": 1e6, **BLENDS[name][1]}
    card = load_method(name)
    values = evaluate_program(program, bind_given(program, figures))
    slopes = {
        need.name: {need.name: np.asarray(1.0)}
        for need in program.needs
        if not need.need.one_of and not need.need.quantity.flag
    }
    run(program.steps, values, slopes)
    carried = slopes[program.scope[card.gives]]
    assert carried
    assert all(np.isfinite(slope) for slope in carried.values())


@given(st.floats(1.0, 1e6), st.floats(1e4, 1e9))
def test_an_assisting_stream_never_takes_away(Re: float, Ra: float) -> None:
    for name in ("mixed-blend-cylinder", "mixed-blend-vertical-plate"):
        values = evaluate_method(load_method(name), {"Re": Re, "Pr": 0.7, "Ra": Ra, **BLENDS[name][1]})
        larger = max(values["Nu_F"], values["Nu_N"])
        # between the larger part alone and two equal parts (2**(1/3) of it); 1e-12 for rounding
        assert larger * (1 - ROUNDING) <= values["Nu"] <= 2 ** (1 / 3) * larger * (1 + ROUNDING)


@given(st.floats(1.0, 1e6), st.floats(1e4, 1e9))
def test_an_opposing_stream_never_adds(Re: float, Ra: float) -> None:
    figures = {"Re": Re, "Pr": 0.7, "Ra": Ra, "buoyancy": "opposing"}
    values = evaluate_method(load_method("mixed-blend-vertical-plate"), figures)
    assert 0 <= values["Nu"] <= max(values["Nu_F"], values["Nu_N"]) * (1 + ROUNDING)


def holds(name: str, limit: str, figures: Mapping[str, object]) -> bool:
    """Whether a limit of a card holds for figures by its own symbols."""
    program = build_program(load_method(name), load_method)
    values = evaluate_program(program, bind_given(program, figures))
    checked = next(item for item in program.limits if item.limit.id == limit and item.card == name)
    inputs = {local: values[there] for local, there in checked.inputs.items()}
    return bool(evaluate(checked.limit.that, inputs))


@pytest.mark.parametrize(
    ("heated", "facing", "stirred"),
    [(True, "up", True), (True, "down", False), (False, "up", False), (False, "down", True)],
)
def test_a_plate_law_refuses_the_other_face(heated: bool, facing: str, stirred: bool) -> None:
    figures = {"Ra": 1e6, "heated": heated, "facing": facing}
    assert holds("mcadams-lloyd-moran-plate", "face", figures) is stirred
    assert holds("mcadams-plate-down", "face", figures) is not stirred


def test_a_thin_tube_is_no_plate() -> None:
    # 35/Gr**0.25 at Gr = 1e8 is 0.35: a tube of 0.1 m on 1 m is too thin, one of 0.4 m is not.
    figures = {"Ra": 0.7e8, "Pr": 0.7, "L_c": 1.0}
    assert not holds("churchill-chu-vertical-tube", "thin layer", {**figures, "d_o": 0.1})
    assert holds("churchill-chu-vertical-tube", "thin layer", {**figures, "d_o": 0.4})


def test_opposing_parts_of_like_size_are_told() -> None:
    forced = result("flat-plate-combined", {"Re": 1e4, "Pr": 0.7})
    # the Rayleigh number at which the free part alone is as large: the plate equation solved for it
    like = ((math.sqrt(forced) - 0.825) / 0.387) ** 6 * (1 + (0.492 / 0.7) ** (9 / 16)) ** (16 / 9)
    figures = {"Re": 1e4, "Pr": 0.7, "Ra": like, "buoyancy": "opposing"}
    assert result("churchill-chu-plate-1975", {"Ra": like, "Pr": 0.7}) == pytest.approx(forced, rel=1e-9)
    assert not holds("mixed-blend-vertical-plate", "parts do not cancel", figures)
    assert holds("mixed-blend-vertical-plate", "parts do not cancel", {**figures, "buoyancy": "assisting"})


# -- situations ---------------------------------------------------------------------------------------------

SITUATIONS = (
    "across-tube",
    "along-plate",
    "blended-horizontal-cylinder",
    "blended-horizontal-plate",
    "blended-vertical-plate",
    "free-horizontal-cylinder",
    "free-horizontal-plate",
    "free-vertical-plate",
    "free-vertical-tube",
)


def si_figures(situation: str) -> dict[str, np.ndarray]:
    """Air at 330 K beside a surface at 360 K, 2 m/s along 0.5 m, in SI units (rounded figures)."""
    air = {"rho": 1.02, "mu": 2.05e-5, "lam": 0.0291, "cp": 1008.0, "beta": 1 / 345}
    body = {"d_o": 0.1, "L": 0.5, "H": 0.5, "A": 0.25, "P": 2.0}
    figures = {**air, **body, "T_s": 360.0, "T_b": 330.0, "v": 2.0}
    arrays = {symbol: np.asarray(figure) for symbol, figure in figures.items()}
    length = load_situation(situation).characteristic_length
    arrays["L_c"] = evaluate(length, {symbol: arrays[symbol] for symbol in length.symbols})
    return arrays


@pytest.mark.parametrize("name", SITUATIONS)
def test_a_situation_forms_its_groups(name: str) -> None:
    figures = si_figures(name)
    length = float(figures["L_c"])
    # the definitions written out: Pr = mu cp/lam, Re = rho v L/mu, Ra = g beta dT L**3 rho**2 cp/(mu lam)
    along = 0.5 if name == "blended-horizontal-plate" else length
    by_hand = {
        "Pr": 2.05e-5 * 1008.0 / 0.0291,
        "Re": 1.02 * 2.0 * along / 2.05e-5,
        "Ra": 9.80665 / 345 * 30.0 * length**3 * 1.02**2 * 1008.0 / (2.05e-5 * 0.0291),
    }
    for group in load_situation(name).groups:
        inputs = {symbol: figures[symbol] for symbol in group.relation.symbols}
        assert float(evaluate(group.relation, inputs)) == pytest.approx(by_hand[group.symbol], rel=ROUNDING)


@pytest.mark.parametrize("name", SITUATIONS)
def test_the_choice_of_a_situation_is_among_its_methods(name: str) -> None:
    situation, library = load_situation(name), Library()
    assert {choice.use for choice in situation.choose} <= set(situation.methods)
    taken = {need.symbol for need in situation.needs} | {group.symbol for group in situation.groups}
    for method in situation.methods:
        for need in library.program(method).needs:
            asked = need.need
            from_film = asked.quantity.flag or asked.place == "surface" or asked.absent is not None
            assert from_film or asked.symbol in taken | {"L_c"}, (method, asked.symbol)
