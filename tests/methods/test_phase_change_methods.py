"""Laws of condensation and boiling, held against ht 1.2.0, published answers and a second arithmetic.

Where ht has the law, the grid lies inside the range of the law and both evaluate one closed form, so only
rounding remains: 1e-12 leaves a hundred roundings. Every other tolerance has its reason beside it. The
property sets are saturated water and R134a, rounded to six digits, as the published checks use them.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterable, Mapping
from typing import Any

import ht
import pytest
from ht import boiling_flow, boiling_nucleic, condensation
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.optimize import brentq

from calcbook.library import Library, evaluate_method, load_method
from calcbook.library.checking import check_method, check_situation, uncovered_constants
from calcbook.properties import pure

ROUNDING = 1e-12
GRAVITY = 9.80665

# rho_l, rho_g, mu_l, mu_g, lam_l, cp_l, h_fg, sig, p, p_c, molar mass in g/mol, T_sat
SETS: dict[str, dict[str, float]] = {
    "water 1 atm": dict(
        rho_l=958.349,
        rho_g=0.59817,
        mu_l=2.81582e-4,
        mu_g=1.22322e-5,
        lam_l=0.677211,
        cp_l=4215.67,
        h_fg=2.2564e6,
        sig=0.0589206,
        p=101418.0,
        p_c=22.064e6,
        M=18.0153,
        T_sat=373.15,
    ),
    "water 150 degC": dict(
        rho_l=917.008,
        rho_g=2.54808,
        mu_l=1.82611e-4,
        mu_g=1.39613e-5,
        lam_l=0.681016,
        cp_l=4307.08,
        h_fg=2.11375e6,
        sig=0.0486462,
        p=476165.0,
        p_c=22.064e6,
        M=18.0153,
        T_sat=423.15,
    ),
    "R134a 40 degC": dict(
        rho_l=1146.74,
        rho_g=50.085,
        mu_l=1.6145e-4,
        mu_g=1.23729e-5,
        lam_l=0.0747188,
        cp_l=1498.41,
        h_fg=163019.0,
        sig=0.00611493,
        p=1.01659e6,
        p_c=4.05928e6,
        M=102.032,
        T_sat=313.15,
    ),
    "R134a 5 degC": dict(
        rho_l=1278.07,
        rho_g=17.1309,
        mu_l=2.50111e-4,
        mu_g=1.0911e-5,
        lam_l=0.0898078,
        cp_l=1355.16,
        h_fg=194740.0,
        sig=0.0107301,
        p=349659.0,
        p_c=4.05928e6,
        M=102.032,
        T_sat=278.15,
    ),
}
FILM = {"rho": "rho_l", "mu": "mu_l", "lam": "lam_l", "cp": "cp_l"}


def values(name: str, figures: Mapping[str, Any]) -> dict[str, float]:
    """Everything a card assigns, from a property set and further figures; it is given what it asks for."""
    card = load_method(name)
    known = dict(figures)
    known |= {film: known[liquid] for film, liquid in FILM.items() if liquid in known and film not in known}
    if "p" in known:
        known["p_r"] = known["p"] / known["p_c"]
    if "M" in known:
        known["M"] = known["M"] / 1e3
    wanted = {need.symbol for need in card.needs}
    for use in card.uses:
        wanted |= {need.symbol for need in load_method(use.method).needs} | {use.symbol}
        wanted |= {
            need.symbol for inner in load_method(use.method).uses for need in load_method(inner.method).needs
        }
    return evaluate_method(card, {symbol: figure for symbol, figure in known.items() if symbol in wanted})


def result(name: str, **figures: Any) -> float:
    return values(name, figures)[load_method(name).gives]


def cases(sets: Iterable[str], **axes: Iterable[Any]) -> list[dict[str, Any]]:
    """Every combination of property sets and axes."""
    return [
        {**SETS[name], **dict(zip(axes, figures, strict=True))}
        for name in sets
        for figures in itertools.product(*axes.values())
    ]


def largest(name: str, points: Iterable[dict[str, Any]], reference) -> float:
    return max(abs(result(name, **point) / reference(point) - 1.0) for point in points)


def flow(point: Mapping[str, float]) -> float:
    return point["G"] * math.pi / 4.0 * point["d"] ** 2


# --- condensation outside ---------------------------------------------------------------------------


def nusselt(point: Mapping[str, float], length: float, subcooling: float) -> float:
    """The film group of ht with the constant taken out and the latent heat corrected by the caller."""
    drop = point["T_sat"] - point["T_s"]
    return condensation.Nusselt_laminar(
        Tsat=point["T_sat"],
        Tw=point["T_s"],
        rhog=point["rho_g"],
        rhol=point["rho_l"],
        kl=point["lam_l"],
        mul=point["mu_l"],
        Hvap=point["h_fg"] + subcooling * point["cp_l"] * drop,
        L=length,
    ) / (2.0 * math.sqrt(2.0) / 3.0)


def film_points() -> list[dict[str, Any]]:
    points = cases(SETS, drop=(0.5, 3.0, 12.0), size=(0.01, 0.05, 2.0))
    return [{**point, "T_s": point["T_sat"] - point["drop"]} for point in points]


@pytest.mark.parametrize(
    ("name", "symbol", "constant", "subcooling"),
    [
        ("nusselt-1916-vertical", "L", 0.943, 0.68),
        ("nusselt-1916-horizontal-tube", "d", 0.728, 0.68),
        ("chato-1962", "d", 0.555, 0.375),
    ],
)
def test_laminar_films_against_ht(name: str, symbol: str, constant: float, subcooling: float) -> None:
    """Measured: 4e-16 for each."""
    points = [
        {**point, symbol: point["size"], "x": 0.5, "G": 50.0, "position": "horizontal"}
        for point in film_points()
    ]
    assert largest(name, points, lambda p: constant * nusselt(p, p["size"], subcooling)) < ROUNDING


def test_the_constant_of_the_horizontal_tube_is_that_of_the_film_on_a_circle() -> None:
    """The film equation on a circle, solved and integrated: (2/3)^(1/4) (4/3 I)^(3/4)/pi with I the integral
    of sin^(1/3) over half the circle. It is 0.72802, and 0.728 its rounding.
    """
    integral, _ = quad(lambda angle: math.sin(angle) ** (1.0 / 3.0), 0.0, math.pi)
    constant = (2.0 / 3.0) ** 0.25 * (4.0 / 3.0 * integral) ** 0.75 / math.pi
    assert constant == pytest.approx(0.728, abs=5e-5)
    point = {**SETS["water 1 atm"], "T_s": 363.15, "d": 0.025}
    got = result("nusselt-1916-horizontal-tube", **point)
    assert got == pytest.approx(constant * nusselt(point, 0.025, 0.68), rel=1e-4)


def test_film_condensation_of_the_published_examples() -> None:
    """Cengel and Ghajar, examples 10-4 and 10-6, with their printed properties.

    10-4: plate of 2 m, 100 and 80 degC: Re = 1287 and h = 5850 W/(m2 K). The card closes on the heat flux:
    the law is met at h = 5850 within the four digits printed (the example neglects the vapour density).
    10-6: tube of 30 mm, 40 and 30 degC: h = 9295 with 0.729; 0.728 and g = 9.80665 are 0.16 % below.
    """
    latent = 2_257_000.0 + 0.68 * 4206.0 * 20.0
    reynolds = 4.0 * 5850.0 * 2.0 * 20.0 / (0.000315 * latent)
    wavy = result("kutateladze-1963-wavy", Re=reynolds, rho=965.3, rho_g=0.6, mu=0.000315, lam=0.675)
    assert reynolds == pytest.approx(1287.0, rel=3e-3)  # the example rounds its viscosity to 0.326e-6 m2/s
    assert wavy == pytest.approx(5850.0, rel=1e-3)
    tube = dict(rho=994.0, rho_g=0.05, mu=0.00072, lam=0.623, cp=4178.0, h_fg=2_407_000.0, d=0.03)
    assert result("nusselt-1916-horizontal-tube", **tube, T_sat=313.15, T_s=303.15) == pytest.approx(
        9295.0, rel=2e-3
    )


def test_the_joint_of_wavy_and_turbulent_film() -> None:
    """At Re = 1800 the published laws step up: by 3 % for water at 100 degC, by 6 % at Pr = 3.2."""
    steps = {}
    for name, properties in SETS.items():
        below, above = (
            result(law, **properties, Re=1800.0)
            for law in ("kutateladze-1963-wavy", "labuntsov-1957-turbulent")
        )
        steps[name] = above / below - 1.0
    assert 0.0 < steps["water 1 atm"] < 0.04
    assert 0.0 < steps["R134a 40 degC"] < 0.07


def test_the_smooth_and_the_wavy_film_join() -> None:
    """1.47 Re^(-1/3) (Cengel and Ghajar, 10-24) and the wavy law at Re = 30: 0.22 % apart."""
    for properties in SETS.values():
        group = (
            GRAVITY
            * properties["rho_l"]
            * (properties["rho_l"] - properties["rho_g"])
            / properties["mu_l"] ** 2
        )
        smooth = 1.47 * 30.0 ** (-1.0 / 3.0) * properties["lam_l"] * group ** (1.0 / 3.0)
        wavy = result("kutateladze-1963-wavy", **properties, Re=30.0)
        assert wavy == pytest.approx(smooth, rel=2.5e-3)


def test_bundles_are_one_tube_times_a_power_of_the_column() -> None:
    """n^(-1/4) and n^(-1/6): 0.562341 and 0.681292 for ten tubes, by hand."""
    point = {**SETS["water 1 atm"], "T_s": 365.15, "d": 0.0254}
    single = result("nusselt-1916-horizontal-tube", **point)
    for name, factor in (("nusselt-bundle", 0.562341), ("kern-1958-bundle", 0.681292)):
        assert result(name, **point, n_c=1.0) == pytest.approx(single, rel=ROUNDING)
        assert result(name, **point, n_c=10.0) / single == pytest.approx(factor, abs=5e-7)


# --- condensation inside ----------------------------------------------------------------------------


def tube_points(**axes: Iterable[Any]) -> list[dict[str, Any]]:
    every = dict(G=(60.0, 200.0, 600.0), x=(0.05, 0.5, 0.95), d=(0.008, 0.02)) | axes
    return cases(SETS, **every)


def test_condensation_in_tubes_against_ht() -> None:
    """Measured: 7e-16 at most. The Akers law has its joint inside the grid, on the same side in both."""
    points = tube_points()
    laws = {
        "shah-1979-condensation": lambda p: condensation.Shah(
            m=flow(p),
            x=p["x"],
            D=p["d"],
            rhol=p["rho_l"],
            mul=p["mu_l"],
            kl=p["lam_l"],
            Cpl=p["cp_l"],
            P=p["p"],
            Pc=p["p_c"],
        ),
        "akers-deans-crosser-1959": lambda p: condensation.Akers_Deans_Crosser(
            m=flow(p),
            rhog=p["rho_g"],
            rhol=p["rho_l"],
            kl=p["lam_l"],
            mul=p["mu_l"],
            Cpl=p["cp_l"],
            D=p["d"],
            x=p["x"],
        ),
        "boyko-kruzhilin-1967": lambda p: condensation.Boyko_Kruzhilin(
            m=flow(p),
            rhog=p["rho_g"],
            rhol=p["rho_l"],
            kl=p["lam_l"],
            mul=p["mu_l"],
            Cpl=p["cp_l"],
            D=p["d"],
            x=p["x"],
        ),
    }
    for name, reference in laws.items():
        assert largest(name, points, reference) < ROUNDING


def test_the_propane_example_of_the_engineering_data_book() -> None:
    """J.R. Thome, Engineering Data Book III, chapter 8: propane, 15 mm, 200 kg/(m2 s), x = 0.5.

    Printed: 4283 W/(m2 K) by Shah, 2516 by Akers. Its temperature was not read: at the one where
    Shah gives 4283 with the properties of the backend, Akers must give 2516 (0.2 %: two sets of properties).
    """
    liquid, vapour = (pure("propane").at(None, phase) for phase in ("liquid", "gas"))

    def coefficients(temperature: float) -> tuple[float, float]:
        figures = dict(
            G=200.0,
            x=0.5,
            d=0.015,
            T_sat=temperature,
            p=float(liquid.saturation_pressure(temperature)),
            p_c=liquid.critical_pressure(),
            rho_g=float(vapour.value("density", temperature)),
        )
        for symbol, name in (
            ("rho_l", "density"),
            ("mu_l", "viscosity"),
            ("lam_l", "conductivity"),
            ("cp_l", "heat capacity"),
        ):
            figures[symbol] = float(liquid.value(name, temperature))
        return (result("shah-1979-condensation", **figures), result("akers-deans-crosser-1959", **figures))

    there = brentq(lambda temperature: coefficients(temperature)[0] - 4283.0, 274.0, 300.0)
    assert coefficients(there)[1] == pytest.approx(2516.0, rel=2e-3)


def test_cavallini_with_the_parts_of_ht() -> None:
    """A second arithmetic of the published constants on the parts of ht; both branches are met."""
    points = [{**p, "T_s": p["T_sat"] - 5.0, "position": "horizontal"} for p in tube_points(d=(0.008,))]
    branches = set()

    def reference(p: Mapping[str, float]) -> float:
        prandtl = p["cp_l"] * p["mu_l"] / p["lam_l"]
        x, liquid = p["x"], hdb(p, 1.0)
        martinelli = boiling_flow.Lockhart_Martinelli_Xtt(
            x=x, rhol=p["rho_l"], rhog=p["rho_g"], mul=p["mu_l"], mug=p["mu_g"]
        )
        speed = x * p["G"] / math.sqrt(GRAVITY * p["d"] * p["rho_g"] * (p["rho_l"] - p["rho_g"]))
        bound = ((7.5 / (4.3 * martinelli**1.111 + 1)) ** -3 + 2.6**-3) ** (-1 / 3)
        sheared = liquid * (
            1
            + 1.128
            * x**0.817
            * (p["rho_l"] / p["rho_g"]) ** 0.3685
            * (p["mu_l"] / p["mu_g"]) ** 0.2363
            * (1 - p["mu_g"] / p["mu_l"]) ** 2.144
            * prandtl**-0.1
        )
        layered = (
            0.725 / (1 + 0.741 * ((1 - x) / x) ** 0.3321) * nusselt(p, p["d"], 0.0) + (1 - x**0.087) * liquid
        )
        branches.add(speed > bound)
        return (
            sheared
            if speed > bound
            else (sheared * (bound / speed) ** 0.8 - layered) * speed / bound + layered
        )

    assert largest("cavallini-2006", points, reference) < ROUNDING
    assert branches == {True, False}


# --- pool boiling -----------------------------------------------------------------------------------


def test_pool_boiling_against_ht() -> None:
    """Measured: 2e-15 at most."""
    points = cases(SETS, q=(2e3, 2e4, 2e5), R_p=(0.3e-6, 1e-6, 4e-6), d_o=(0.025,))
    laws = {
        "cooper-1984": lambda p: boiling_nucleic.Cooper(
            P=p["p"], Pc=p["p_c"], MW=p["M"], q=p["q"], Rp=p["R_p"]
        ),
        "mostinski-1963": lambda p: boiling_nucleic.Montinsky(P=p["p"], Pc=p["p_c"], q=p["q"]),
    }
    for name, reference in laws.items():
        assert largest(name, points, reference) < ROUNDING


def test_rohsenow_against_ht_and_the_published_examples() -> None:
    """ht: measured 3e-15.

    Cengel and Ghajar, example 10-1: 7.21e4 W/m2 and 5097 W on a pan of 0.3 m. Kreith, Manglik and Bohn,
    example 10.1: 28 674 W/m2 by its formula with C_sf = 0.0132 (a companion types 29 669, a slip of a digit).
    """
    points = [
        {**p, "T_s": p["T_sat"] + p["excess"], "surface": "water_polished_copper"}
        for p in cases(("water 1 atm", "water 150 degC"), excess=(2.0, 10.0, 25.0), q=(1e4,), d_o=(0.025,))
    ]
    reference = lambda p: boiling_nucleic.Rohsenow(  # noqa: E731
        rhol=p["rho_l"],
        rhog=p["rho_g"],
        mul=p["mu_l"],
        kl=p["lam_l"],
        Cpl=p["cp_l"],
        Hvap=p["h_fg"],
        sigma=p["sig"],
        Te=p["excess"],
        Csf=0.013,
        n=1.0,
    )
    assert largest("rohsenow-1952", points, reference) < ROUNDING
    pan = dict(
        rho_l=957.9,
        rho_g=0.6,
        mu_l=2.82e-4,
        lam_l=0.6795394285714286,
        cp_l=4217.0,
        h_fg=2.257e6,
        sig=0.0589,
        T_sat=373.15,
        T_s=381.15,
        q=1e4,
        d_o=0.025,
        p=101325.0,
        p_c=22.064e6,
        surface="water_polished_copper",
    )
    flux = values("rohsenow-1952", pan)["q_n"]
    assert flux == pytest.approx(7.21e4, abs=50.0)
    # 5097 W is 7.21e4 W/m2, rounded, times the area; the figures carry three digits
    assert flux * math.pi / 4.0 * 0.3**2 == pytest.approx(5097.0, rel=1e-3)
    kreith = pan | dict(
        rho_l=962.0,
        mu_l=2.77e-4,
        lam_l=0.6665411428571428,
        cp_l=4211.0,
        h_fg=2.25e6,
        sig=0.0588,
        T_s=379.15,
        surface="water_polished_stainless",
    )
    flux = values("rohsenow-1952", kreith)["q_n"]  # C_sf = 0.0130 in the table, 0.0132 in the example
    assert flux * (0.0130 / 0.0132) ** 3 == pytest.approx(28_674.0, rel=2e-4)  # g = 9.81


def stephan_abdelsalam(p: Mapping[str, Any]) -> float:
    """ht, with the group X_3 of water put right: ht documents cp*T_sat in it and codes the latent heat."""
    found = boiling_nucleic.Stephan_Abdelsalam(
        rhol=p["rho_l"],
        rhog=p["rho_g"],
        mul=p["mu_l"],
        kl=p["lam_l"],
        Cpl=p["cp_l"],
        Hvap=p["h_fg"],
        sigma=p["sig"],
        Tsat=p["T_sat"],
        q=p["q"],
        correlation=p["group"],
    )
    return found * (p["cp_l"] * p["T_sat"] / p["h_fg"]) ** 1.26 if p["group"] == "water" else found


GROUPS = ("general", "water", "hydrocarbon", "refrigerant")


@pytest.mark.parametrize("group", GROUPS)
def test_stephan_abdelsalam_against_ht(group: str) -> None:
    """Measured: 3e-15 at most."""
    points = cases(SETS, q=(2e3, 2e4, 2e5), group=(group,), d_o=(0.025,))
    assert largest("stephan-abdelsalam-1980", points, stephan_abdelsalam) < ROUNDING


def test_stephan_abdelsalam_with_its_own_group_stands_with_cooper() -> None:
    """Within the 30 % that textbooks state for Cooper; measured 16 % at most.

    Water at 1 atm with the group X_3 as ht codes it lies 46 % above: the band tells the two readings apart.
    """
    fluids = (("water 1 atm", "water"), ("water 150 degC", "water"), ("R134a 5 degC", "refrigerant"))
    for (fluid, group), flux in itertools.product(fluids, (2e4, 1e5)):
        point = SETS[fluid] | dict(q=flux, group=group, R_p=1e-6, d_o=0.025)
        cooper = result("cooper-1984", **point)
        assert result("stephan-abdelsalam-1980", **point) == pytest.approx(cooper, rel=0.3)
        if fluid == "water 1 atm":
            as_coded = (point["cp_l"] * point["T_sat"] / point["h_fg"]) ** -1.26
            assert as_coded * stephan_abdelsalam(point) > 1.4 * cooper


def test_critical_heat_flux_of_the_published_examples() -> None:
    """Cengel and Ghajar, example 10-2: 1.017 MW/m2. Kreith, example 10.1: 1.10709 MW/m2 with pi/24.

    Both take g = 9.81: 0.01 % above.
    """
    heater = dict(rho_l=957.9, rho_g=0.6, h_fg=2.257e6, sig=0.0589, d_o=0.01)
    assert result("lienhard-dhir-tube-chf", **heater) == pytest.approx(1.017e6, rel=1e-3)
    flat = result("zuber-1959-chf", rho_l=962.0, rho_g=0.6, h_fg=2.25e6, sig=0.0588)
    assert flat * (math.pi / 24.0) / 0.131 == pytest.approx(1.10709e6, rel=1.2e-4)


def test_the_gorenflo_pressure_function_is_one_at_a_tenth() -> None:
    """By construction of the method; its rounded constants leave 0.3 %."""
    for liquid, h_0 in (("water", 5600.0), ("r134a", 4200.0), ("propane", 4300.0)):
        got = evaluate_method(load_method("gorenflo-2010"), {"liquid": liquid, "p_r": 0.1, "q": 20e3})["h"]
        assert got == pytest.approx(h_0, rel=4e-3)


# The card that has a table, the card that takes a stated figure in its place, and the words of that table.
STATED = {
    "rohsenow-1952": ("rohsenow-1952-stated", "surface", {"pairs.C_sf": "C_sf", "pairs.n": "n"}),
    "gorenflo-2010": ("gorenflo-2010-stated", "liquid", {"fluids.h_0": "h_0"}),
    "kandlikar-1990": ("kandlikar-1990-stated", "pair", {"pairs.F_fl": "F_fl"}),
}


@pytest.mark.parametrize("name", STATED)
def test_a_stated_figure_stands_for_each_row_of_the_table(name: str) -> None:
    """The figure of every row, stated, gives the coefficient of that row to the last bit: one equation."""
    stated, word, figures = STATED[name]
    need = next(item for item in load_method(name).needs if item.symbol == word)
    assert len(need.one_of) >= 12
    for row, fluid in itertools.product(need.one_of, ("water 1 atm", "R134a 5 degC")):
        point = SETS[fluid] | dict(q=3e4, d_o=0.025, T_s=SETS[fluid]["T_sat"] + 8.0, R_a=6e-7, b_w=9e3)
        point |= dict(G=200.0, x=0.3, d=0.01, position="horizontal")
        by_table = values(name, point | {word: row})
        figure = {symbol: by_table[cell] for cell, symbol in figures.items()}
        kind = "water" if row == "water" else "other"
        assert values(stated, point | figure | {"kind": kind})["h"] == by_table["h"]


def test_a_stated_figure_has_the_limits_of_the_card_with_the_table() -> None:
    for name, (stated, _, _) in STATED.items():
        tabled, other = load_method(name), load_method(stated)
        ours, theirs = (
            [(item.id, item.that.text, item.level) for item in card.limits] for card in (tabled, other)
        )
        assert ours == theirs and tabled.family == other.family and tabled.accuracy == other.accuracy


# --- flow boiling -----------------------------------------------------------------------------------


def hdb(p: Mapping[str, float], part: float) -> float:
    """The liquid coefficient of ht for a part of the flow."""
    prandtl = p["cp_l"] * p["mu_l"] / p["lam_l"]
    return (
        ht.turbulent_Dittus_Boelter(p["G"] * part * p["d"] / p["mu_l"], prandtl, heating=True)
        * p["lam_l"]
        / p["d"]
    )


def pool(p: Mapping[str, float]) -> float:
    return boiling_nucleic.Cooper(P=p["p"], Pc=p["p_c"], MW=p["M"], q=p["q"], Rp=1e-6)


def boiling_points() -> list[dict[str, Any]]:
    return tube_points(x=(0.02, 0.3, 0.75), q=(2e3, 5e4, 4e5), position=("vertical", "horizontal"))


def slow(p: Mapping[str, Any]) -> bool:
    return p["position"] == "horizontal" and froude(p) < 0.05


def froude(p: Mapping[str, float]) -> float:
    return p["G"] ** 2 / (p["rho_l"] ** 2 * GRAVITY * p["d"])


def test_liu_winterton_against_ht() -> None:
    """ht takes the superheat of the pool part: it is called with that of this heat flux. Measured: 2e-14."""
    points = [p for p in boiling_points() if p["position"] == "vertical"]
    reference = lambda p: boiling_flow.Liu_Winterton(  # noqa: E731
        m=flow(p),
        x=p["x"],
        D=p["d"],
        rhol=p["rho_l"],
        rhog=p["rho_g"],
        mul=p["mu_l"],
        kl=p["lam_l"],
        Cpl=p["cp_l"],
        MW=p["M"],
        P=p["p"],
        Pc=p["p_c"],
        Te=p["q"] / pool(p),
    )
    assert (
        largest("liu-winterton-1991", points, reference) < 1e-11
    )  # the power 1/0.33 of the superheat back and forth


def shah_1982(p: Mapping[str, Any]) -> float:
    """In logarithms, from the constants of the ASHRAE table."""
    co = math.exp(0.8 * math.log((1 - p["x"]) / p["x"]) + 0.5 * math.log(p["rho_g"] / p["rho_l"]))
    bo, fr = p["q"] / (p["G"] * p["h_fg"]), froude(p)
    n = (
        co * math.exp(math.log(0.38) - 0.3 * math.log(fr))
        if p["position"] == "horizontal" and fr < 0.04
        else co
    )
    factor = 14.7 if bo >= 11e-4 else 15.43
    convective = math.exp(math.log(1.8) - 0.8 * math.log(n))
    if n > 1.0:
        nucleate = 230 * math.sqrt(bo) if bo > 0.3e-4 else 1 + 46 * math.sqrt(bo)
    elif n > 0.1:
        nucleate = math.exp(math.log(factor) + 0.5 * math.log(bo) + 2.74 * n**-0.1)
    else:
        nucleate = math.exp(math.log(factor) + 0.5 * math.log(bo) + 2.47 * n**-0.15)
    return max(nucleate, convective) * hdb(p, 1 - p["x"])


def gungor_winterton_1986(p: Mapping[str, Any]) -> float:
    martinelli = boiling_flow.Lockhart_Martinelli_Xtt(
        x=p["x"], rhol=p["rho_l"], rhog=p["rho_g"], mul=p["mu_l"], mug=p["mu_g"]
    )
    e = 1 + 24000 * (p["q"] / (p["G"] * p["h_fg"])) ** 1.16 + 1.37 * martinelli**-0.86
    s = 1 / (1 + 1.15e-6 * e * e * (p["G"] * (1 - p["x"]) * p["d"] / p["mu_l"]) ** 1.17)
    fr = froude(p)
    first, second = (fr ** (0.1 - 2 * fr), math.sqrt(fr)) if slow(p) else (1.0, 1.0)
    return first * e * hdb(p, 1 - p["x"]) + second * s * pool(p)


def gungor_winterton_1987(p: Mapping[str, Any]) -> float:
    fr = froude(p)
    bo = p["q"] / (p["G"] * p["h_fg"])
    total = 1 + 3000 * bo**0.86 + 1.12 * (p["x"] / (1 - p["x"])) ** 0.75 * (p["rho_l"] / p["rho_g"]) ** 0.41
    return total * hdb(p, 1 - p["x"]) * (fr ** (0.1 - 2 * fr) if slow(p) else 1.0)


def kandlikar(p: Mapping[str, Any]) -> float:
    co = ((1 - p["x"]) / p["x"]) ** 0.8 * (p["rho_g"] / p["rho_l"]) ** 0.5
    bo, fr = p["q"] / (p["G"] * p["h_fg"]), froude(p)
    factor = (25 * fr) ** 0.3 if p["position"] == "horizontal" and fr <= 0.04 else 1.0
    pair = 1.63 * bo**0.7
    return hdb(p, 1 - p["x"]) * max(
        1.136 * co**-0.9 * factor + 667.2 * pair, 0.6683 * co**-0.2 * factor + 1058 * pair
    )


@pytest.mark.parametrize(
    ("name", "reference"),
    [
        ("shah-1982-boiling", shah_1982),
        ("gungor-winterton-1986", gungor_winterton_1986),
        ("gungor-winterton-1987", gungor_winterton_1987),
        ("kandlikar-1990", kandlikar),
    ],
)
def test_flow_boiling_by_a_second_arithmetic(name: str, reference) -> None:
    """Shows the transcription on every branch, not the constants: the cards are on trial. Measured: 2e-15."""
    points = [{**p, "pair": "r134a"} for p in boiling_points()]
    assert any(slow(p) for p in points) and any(p["q"] / (p["G"] * p["h_fg"]) > 11e-4 for p in points)
    assert largest(name, points, reference) < ROUNDING
    assert load_method(name).state.status == "trial"


def test_liu_winterton_beside_the_two_laws_that_a_published_test_ranks_first() -> None:
    """What the situation says of its default: 27 % from the mean of both on average, 0.67 to 2.5 of it.

    The band is the measured one, rounded outwards; the pair itself lies within 43 % of its mean.
    """
    points = [
        p
        for p in tube_points(x=(0.05, 0.2, 0.4, 0.6, 0.75), q=(5e3, 2e4, 5e4, 1e5), position=("vertical",))
        if p["G"] * (1.0 - p["x"]) * p["d"] / p["mu_l"] >= 2000.0
        and 2.2e-5 <= p["q"] / (p["G"] * p["h_fg"]) <= 74e-4
    ]
    assert len(points) > 300
    ratios = [
        result("liu-winterton-1991", **p)
        / math.sqrt(result("shah-1982-boiling", **p) * result("gungor-winterton-1987", **p))
        for p in points
    ]
    assert min(ratios) > 0.66 and max(ratios) < 2.5
    assert sum(abs(ratio - 1.0) for ratio in ratios) / len(ratios) == pytest.approx(0.27, abs=0.01)


def test_chen_with_the_boiling_part_of_ht() -> None:
    """The Forster-Zuber part is ht's; F and S are the fits of general use, put on by hand."""
    for p in tube_points(x=(0.02, 0.3, 0.6)):
        excess, rise = 5.0, 0.15 * p["p"]
        point = {**p, "T_s": p["T_sat"] + excess, "p_s": p["p"] + rise, "q": 1e5, "position": "vertical"}
        got = values("chen-1966", point)
        part = boiling_nucleic.Forster_Zuber(
            rhol=p["rho_l"],
            rhog=p["rho_g"],
            mul=p["mu_l"],
            kl=p["lam_l"],
            Cpl=p["cp_l"],
            Hvap=p["h_fg"],
            sigma=p["sig"],
            dPsat=rise,
            Te=excess,
        )
        assert got["h_z"] == pytest.approx(part, rel=1e-11)
        martinelli = boiling_flow.Lockhart_Martinelli_Xtt(
            x=p["x"], rhol=p["rho_l"], rhog=p["rho_g"], mul=p["mu_l"], mug=p["mu_g"]
        )
        f = 1.0 if 1 / martinelli <= 0.1 else 2.35 * (1 / martinelli + 0.213) ** 0.736
        s = 1 / (1 + 2.53e-6 * (p["G"] * (1 - p["x"]) * p["d"] / p["mu_l"] * f**1.25) ** 1.17)
        assert got["h"] == pytest.approx(f * hdb(p, 1 - p["x"]) + s * part, rel=1e-11)


# --- what every law must do -------------------------------------------------------------------------

FLOW_BOILING = (
    "shah-1982-boiling",
    "gungor-winterton-1986",
    "gungor-winterton-1987",
    "liu-winterton-1991",
    "kandlikar-1990",
)


@given(
    fluid=st.sampled_from(sorted(SETS)),
    flux=st.floats(2e3, 3e5),
    mass=st.floats(60.0, 800.0),
    quality=st.floats(0.02, 0.78),
    name=st.sampled_from(FLOW_BOILING),
)
def test_flow_boiling_rises_with_heat_flux(
    fluid: str, flux: float, mass: float, quality: float, name: str
) -> None:
    """Positive and finite; a higher heat flux lowers the coefficient by the steps of the laws at most.

    Shah's factor falls from 15.43 to 14.7 at Bo = 11e-4, 4.7 %; in the suppression factor of 1986 a higher
    heat flux acts against boiling, by less than the gain of convection.
    """
    point = {**SETS[fluid], "G": mass, "x": quality, "d": 0.014, "position": "vertical", "pair": "water"}
    low, high = (result(name, **point, q=factor * flux) for factor in (1.0, 1.3))
    assert math.isfinite(low) and low > 0.0
    assert high >= 0.95 * low


@given(fluid=st.sampled_from(sorted(SETS)), drop=st.floats(0.5, 20.0), size=st.floats(0.008, 0.1))
def test_films_fall_with_the_drop_and_rise_with_conductivity(fluid: str, drop: float, size: float) -> None:
    for name, symbol in (("nusselt-1916-vertical", "L"), ("nusselt-1916-horizontal-tube", "d")):

        def at(change: float, factor: float, name: str = name, symbol: str = symbol) -> float:
            properties = SETS[fluid] | {"lam_l": factor * SETS[fluid]["lam_l"]}
            return result(name, **properties, T_s=properties["T_sat"] - change * drop, **{symbol: size})

        assert 0.0 < at(1.1, 1.0) < at(1.0, 1.0) < at(1.0, 1.1)


@given(fluid=st.sampled_from(sorted(SETS)), flux=st.floats(1e3, 1e6))
def test_pool_boiling_rises_with_heat_flux_by_less_than_its_first_power(fluid: str, flux: float) -> None:
    """So that flux over coefficient, the superheat, rises with the flux: the circuit has one answer."""
    laws = [
        ("cooper-1984", ""),
        ("mostinski-1963", ""),
        *(("stephan-abdelsalam-1980", one) for one in GROUPS),
    ]
    for name, group in laws:
        low, high = (
            result(name, **SETS[fluid], q=factor * flux, d_o=0.025, group=group) for factor in (1.0, 1.2)
        )
        assert low < high < 1.2 * low


# --- figures that no outside check point would miss -------------------------------------------------

LIBRARY = Library()
# Why each stays: the exponent of the 2010 form has no printed value away from 20 kW/m2; the printed mean lies
# 2 % from its integral; no reference has the factors of slow flow, or Chen's curves as fitted here.
UNCOVERED = {
    "gorenflo-2010": {("relation of n", "0.95"), ("relation of n", "0.3")},
    "gorenflo-2010-stated": {("relation of n", "0.95"), ("relation of n", "0.3")},
    "shah-1979-condensation-mean": {("relation of h", "0.55")},
    "liu-winterton-1991": {
        ("relation of Fr", "2"),
        ("relation of E_F", "0.05"),
        ("relation of E_F", "0.1"),
        ("relation of E_F", "2"),
        ("relation of S_F", "0.05"),
    },
    "chen-1966": {
        ("relation of F", "1"),
        ("relation of F", "0.1"),
        ("relation of S", "1"),
        ("relation of S", "2.53e-6"),
        ("relation of S", "1.25"),
        ("relation of S", "1.17"),
    },
}
SITUATIONS = (
    "condensing-vertical-plate",
    "condensing-vertical-tube",
    "condensing-horizontal-tube",
    "condensing-horizontal-bundle",
    "condensing-inside-tube",
    "pool-boiling-tube",
    "pool-boiling-bundle",
    "boiling-inside-tube",
)
METHODS = sorted({method for name in SITUATIONS for method in LIBRARY.situation(name).methods})
CHECKED = [name for name in METHODS if LIBRARY.method(name).state.status == "checked"]


@pytest.mark.parametrize("name", METHODS)
def test_a_card_meets_its_check_points(name: str) -> None:
    check_method(LIBRARY.method(name), LIBRARY)


@pytest.mark.parametrize("name", SITUATIONS)
def test_a_situation_names_methods_that_exist(name: str) -> None:
    check_situation(name, LIBRARY)


@pytest.mark.parametrize("name", CHECKED)
def test_a_checked_card_leaves_no_other_figure_uncovered(name: str) -> None:
    found = {(item.where, item.figure) for item in uncovered_constants(LIBRARY.method(name), LIBRARY)}
    assert found == UNCOVERED.get(name, set())
