"""Tube banks and the shell side, held against outside references.

The reference is ht 1.2.0, an independent open library, wherever it has the law. Unless a reason is given
beside a case, card and reference are one closed form and only rounding remains, for which 1e-11 leaves
thousands of roundings.
"""

from __future__ import annotations

import math
from functools import cache
from typing import Any

import ht
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import integrate

from calcbook.library import Library, bind_given, load_method
from calcbook.library.checking import check_method, check_situation, uncovered_constants
from calcbook.library.programs import evaluate_program

ROUNDING = 1e-11
LIBRARY = Library()
D = 0.025

CARDS = (
    "zukauskas-bank-1972",
    "zukauskas-bank-1987",
    "gnielinski-bank-1978",
    "kern-1950",
    "bell-ideal-bank",
    "bell-delaware",
)

# Figures that no outside value is sharp enough to miss when they move by one per cent, and why.
NOT_COVERED = {
    # Wall exponents are from memory; no open library carries them with these laws.
    "gnielinski-bank-1978": {("relation of K", "0.25"), ("relation of K", "0.11"), ("relation of K", "1")},
    # The worked example stands at one Prandtl number and 2 % off, with the wall factor left out.
    "kern-1950": {("relation of Nu_s", "3"), ("relation of Nu_s", "0.14")},
    # The bypass factor reaches 1 there with either branch.
    "bell-delaware": {("relation of J_b", "0.5")},
}
# The whole table of the ideal bank is from memory: other laws of the same bank check it within bands only.
FROM_MEMORY = {"bell-ideal-bank"}

NEUTRAL = {"mu": 1e-3, "mu_s": 1e-3, "T_b": 300.0, "T_s": 310.0, "liquid": True}
SHELL: dict[str, Any] = {
    **NEUTRAL,
    "D_shell": 0.6,
    "d_o": 0.019,
    "P_t": 0.0254,
    "layout": 30,
    "L_bc": 0.2,
    "L_bi": 0.24,
    "L_bo": 0.3,
    "B_c": 0.25,
    "N_b": 14,
    "D_otl": 0.585,
    "N_t": 374,
    "d_sb": 0.005,
    "d_tb": 0.0008,
    "N_ss": 2,
}


def figures(name: str, **known: Any) -> dict[str, Any]:
    """Figures for the needs of a card; at the wall Pr is that of the bulk unless it is given."""
    known = {"Pr_s": known.get("Pr", 1.0), **known}
    return {need.symbol: known[need.symbol] for need in load_method(name).needs if need.symbol in known}


def assigned(name: str, **known: Any) -> dict[str, float]:
    """Every symbol that a card assigns for these figures."""
    program = LIBRARY.program(name)
    values = evaluate_program(program, bind_given(program, figures(name, **known)))
    return {symbol: float(values[at]) for symbol, at in program.scope.items() if at in values}


def bank(name: str, re: Any, pr: Any, **known: Any) -> np.ndarray:
    """The Nusselt numbers of a bank law; ``re`` is formed with the speed in front of the bank."""
    known = {"d_o": D, "liquid": True, **known}
    program = LIBRARY.program(name)
    return evaluate_program(program, bind_given(program, figures(name, Re=re, Pr=pr, **known)))[
        program.result
    ]


@cache
def shell(name: str, re: float, pr: float = 5.0, **known: Any) -> dict[str, float]:
    """Every symbol of a shell-side law on the reference drawing."""
    return assigned(name, Re=re, Pr=pr, **{**SHELL, **known})


@pytest.mark.parametrize("name", CARDS)
def test_card_holds_its_check_points(name: str) -> None:
    check_method(load_method(name), LIBRARY)


@pytest.mark.parametrize("name", sorted(set(CARDS) - FROM_MEMORY))
def test_outside_check_points_cover_every_figure(name: str) -> None:
    found = {(item.where, item.figure) for item in uncovered_constants(load_method(name), LIBRARY)}
    assert found == NOT_COVERED.get(name, set())


def test_table_from_memory_is_on_trial() -> None:
    card = load_method("bell-ideal-bank")
    assert card.state.status == "trial"
    assert card.sources[0].standing == "from memory"


@pytest.mark.parametrize("name", ["tube-bank", "shell-side"])
def test_situation_is_whole(name: str) -> None:
    check_situation(name, LIBRARY)


# --- banks against the library -----------------------------------------------------------------------


@pytest.mark.parametrize(("arrangement", "ratio"), [("inline", 1.0), ("staggered", 0.8), ("staggered", 1.7)])
def test_zukauskas_1987_over_a_grid(arrangement: str, ratio: float) -> None:
    """20 rows: the row factors of the library were read from the graph, so only the full bank is compared.

    Left out: in line from 100 to 1000, where the library's code has the exponent 0.05, its text 0.5.
    Largest deviation found: 4.5e-16.
    """
    s_t = 0.055
    s_l = s_t / ratio
    for re_max in np.geomspace(1.1, 1.9e6, 60):
        if arrangement == "inline" and 100 <= re_max < 1000:
            continue
        re = re_max * (s_t - D) / s_t
        if arrangement == "staggered":
            re = re_max * min(s_t - D, 2 * (math.hypot(s_l, s_t / 2) - D)) / s_t
        for pr, pr_s in ((0.71, 0.7), (7.0, 4.0), (300.0, 400.0)):
            mine = bank(
                "zukauskas-bank-1987", re, pr, Pr_s=pr_s, S_T=s_t, S_L=s_l, N_r=20, arrangement=arrangement
            )
            expected = ht.Nu_Zukauskas_Bejan(re_max, pr, 20, s_l, s_t, pr_s)
            assert mine == pytest.approx(expected, rel=ROUNDING)


def test_row_factors_of_the_library_lie_close() -> None:
    """The library read its factors from the graph; those of the textbook differ by up to 1.2 %, and by 3.4 %
    for a single row in line."""
    for arrangement in ("inline", "staggered"):
        for rows in range(1, 20):
            mine = assigned(
                "zukauskas-bank-1987",
                Re=1e4,
                Pr=1.0,
                d_o=D,
                S_T=0.05,
                S_L=0.05,
                N_r=rows,
                arrangement=arrangement,
            )["C_N"]
            expected = ht.Zukauskas_tube_row_correction(rows, arrangement == "staggered", 1e4)
            assert mine == pytest.approx(expected, rel=0.035 if rows == 1 else 0.0125)


def test_single_cylinder_band_of_1972() -> None:
    for re_max in np.geomspace(100.5, 999.0, 12):
        for pr in (0.7, 9.9, 10.1, 80.0):
            mine = bank(
                "zukauskas-bank-1972",
                re_max / 2,
                pr,
                Pr_s=0.9 * pr,
                S_T=2 * D,
                S_L=2 * D,
                N_r=25,
                arrangement="inline",
            )
            assert mine == pytest.approx(ht.Nu_cylinder_Zukauskas(re_max, pr, 0.9 * pr), rel=ROUNDING)


@pytest.mark.parametrize(
    ("arrangement", "a", "b"),
    [
        ("inline", 1.5, 1.5),
        ("inline", 2.2, 2.2),
        ("staggered", 2.0, 1.5),
        ("staggered", 1.5, 0.9),
        ("staggered", 1.25, 1.083),
    ],
)
def test_gnielinski_bank_over_a_grid(arrangement: str, a: float, b: float) -> None:
    """The library is called with the Reynolds number of the streamed length. Largest deviation: 4.5e-16."""
    for re_l in np.geomspace(10.0, 1e6, 25):
        for pr in (0.6, 7.0, 900.0):
            for rows in (1, 4, 9, 10, 30):
                mine = bank(
                    "gnielinski-bank-1978",
                    re_l * 2 / math.pi,
                    pr,
                    S_T=a * D,
                    S_L=b * D,
                    N_r=rows,
                    arrangement=arrangement,
                )
                expected = ht.Nu_HEDH_tube_bank(re_l, pr, D, rows, b * D, a * D) * 2 / math.pi
                assert mine == pytest.approx(expected, rel=ROUNDING)


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [
        ("zukauskas-bank-1987", -0.15, 0.24),
        ("gnielinski-bank-1978", -0.19, 0.54),
    ],
)
def test_automatic_bank_lies_closer_to_a_third_law(name: str, low: float, high: float) -> None:
    """The bank of ESDU 73031 in ht 1.2.0, for gases and liquids: the reason of the automatic choice."""
    found = []
    for arrangement, a, b in (
        ("inline", 1.6, 1.6),
        ("inline", 2.0, 2.0),
        ("staggered", 1.6, 1.386),
        ("staggered", 2.0, 1.0),
        ("staggered", 1.25, 1.083),
    ):
        gap = a - 1 if arrangement == "inline" else min(a - 1, 2 * (math.hypot(b, a / 2) - 1))
        for pr in (0.71, 7.0, 100.0):
            for re_max in (50.0, 300.0, 2000.0, 1e4, 5e4, 1.5e5):
                mine = bank(name, re_max * gap / a, pr, S_T=a * D, S_L=b * D, N_r=20, arrangement=arrangement)
                found.append(float(mine / ht.Nu_ESDU_73031(re_max, pr, 20, b * D, a * D) - 1))
    assert low <= min(found) <= low + 0.02
    assert high - 0.02 <= max(found) <= high


def at_edge(name: str, re_max: float, arrangement: str, **known: Any) -> float:
    """Relative step of a bank law where the Reynolds number of the narrowest gap passes ``re_max``."""
    below, above = (
        bank(
            name,
            re_max / 2 * (1 + shift),
            5.0,
            S_T=2 * D,
            S_L=2.2 * D,
            N_r=25,
            arrangement=arrangement,
            **known,
        )
        for shift in (-1e-9, 1e-9)
    )
    return float(above / below - 1)


@pytest.mark.parametrize(
    ("name", "arrangement", "edge", "step", "known"),
    [
        ("zukauskas-bank-1987", "inline", 100, -0.084, {}),
        ("zukauskas-bank-1987", "inline", 1000, 0.275, {}),
        ("zukauskas-bank-1987", "inline", 2e5, -0.026, {}),
        ("zukauskas-bank-1987", "staggered", 500, 0.271, {}),
        ("zukauskas-bank-1987", "staggered", 40, -0.013, {"edge": "40"}),
        ("zukauskas-bank-1987", "staggered", 500, 0.0, {"edge": "40"}),
        ("zukauskas-bank-1987", "staggered", 2e5, 0.017, {}),
        ("zukauskas-bank-1972", "inline", 1000, 0.29, {}),
        ("zukauskas-bank-1972", "staggered", 1000, 0.33, {}),
        ("zukauskas-bank-1972", "staggered", 2e5, 0.20, {}),
        ("gnielinski-bank-1978", "inline", 1000, 0.0, {}),
        ("gnielinski-bank-1978", "staggered", 2e5, 0.0, {}),
    ],
)
def test_joints_of_the_printed_tables(
    name: str, arrangement: str, edge: float, step: float, known: dict[str, str]
) -> None:
    """The steps that the notes name; 0.02 covers their dependence on the Prandtl number and the pitches."""
    assert at_edge(name, edge, arrangement, **known) == pytest.approx(step, abs=0.02)


def test_automatic_choice_of_a_bank() -> None:
    rows = LIBRARY.situation("tube-bank").choose
    assert [row.use for row in rows] == ["zukauskas-bank-1987"]


pitches = st.floats(1.2, 3.0)


@settings(deadline=None)
@given(
    re=st.floats(20.0, 3e4),
    pr=st.floats(0.7, 400.0),
    a=pitches,
    b=pitches,
    rows=st.integers(1, 30),
    arrangement=st.sampled_from(["inline", "staggered"]),
    more=st.floats(1.01, 2.0),
)
def test_bank_rises_with_speed_and_prandtl_number(
    re: float, pr: float, a: float, b: float, rows: int, arrangement: str, more: float
) -> None:
    geometry = {"S_T": a * D, "S_L": b * D, "N_r": rows, "arrangement": arrangement}
    here = bank("gnielinski-bank-1978", re, pr, **geometry)
    assert bank("gnielinski-bank-1978", re * more, pr, **geometry) > here
    assert bank("gnielinski-bank-1978", re, pr * more, **geometry) > here


@settings(deadline=None)
@given(
    pr=st.floats(0.7, 400.0),
    ratio=st.floats(1.01, 4.0),
    re=st.floats(100.0, 1e4),
    name=st.sampled_from(["gnielinski-bank-1978", "zukauskas-bank-1987", "zukauskas-bank-1972"]),
)
def test_heated_liquid_has_the_larger_figure(pr: float, ratio: float, re: float, name: str) -> None:
    geometry = {"S_T": 2 * D, "S_L": 2 * D, "N_r": 12, "arrangement": "inline"}
    heated = bank(name, re, pr, Pr_s=pr / ratio, **geometry)
    cooled = bank(name, re, pr, Pr_s=pr * ratio, **geometry)
    assert heated > bank(name, re, pr, **geometry) > cooled


# --- shell side --------------------------------------------------------------------------------------


def test_kern_worked_example() -> None:
    """D.Q. Kern, Process Heat Transfer (1950), example 7.3: Re 25,300 and h/phi 169 Btu/(h ft2 degF).

    The book reads 93 from its chart where the equation gives 95.1, so 2.3 %.
    """
    d_o, p_t = 0.0254, 0.03175
    area = 0.53975 * (p_t - d_o) * 0.127 / p_t
    re = 5.518707168 / area * d_o / 0.40e-3
    found = assigned(
        "kern-1950", **NEUTRAL, Re=re, Pr=0.59 * 0.40 * 2.42 / 0.0765, d_o=d_o, P_t=p_t, layout=90
    )
    assert found["Re_s"] == pytest.approx(25300, rel=1e-3)
    conductivity = 0.0765 * 1.730735
    assert found["Nu"] * conductivity / d_o == pytest.approx(169 * 5.678263, rel=0.023)


def test_factors_of_bell_over_a_grid() -> None:
    """ht 1.2.0 in the closed forms of the handbook. Largest deviation found: 2.3e-16."""
    for cut in (0.16, 0.25, 0.35, 0.44):
        for layout in (30, 45, 90):
            for re in (8.0, 40.0, 90.0, 3000.0, 60000.0):
                found = shell("bell-delaware", re, B_c=cut, layout=layout, N_ss=1)
                assert found["J_c"] == pytest.approx(
                    ht.baffle_correction_Bell(found["F_c"], "HEDH"), rel=1e-9
                )
                assert found["J_l"] == pytest.approx(
                    ht.baffle_leakage_Bell(found["S_sb"], found["S_tb"], found["S_m"], "HEDH"), rel=1e-9
                )
                assert found["J_b"] == pytest.approx(
                    ht.bundle_bypassing_Bell(found["r_b"], 1, found["N_cc"], found["Re_m"] <= 100, "HEDH"),
                    rel=1e-9,
                )
                assert found["J_s"] == pytest.approx(
                    ht.unequal_baffle_spacing_Bell(14, 0.2, 0.24, 0.3, found["Re_m"] < 100), rel=1e-9
                )
                rows: Any = found["N_c"]  # the library asks for whole rows, its formula does not
                assert found["J_r"] == pytest.approx(
                    ht.laminar_correction_Bell(found["Re_m"], rows), rel=1e-9
                )


@pytest.mark.parametrize("cut", [0.16, 0.25, 0.4])
def test_window_share_by_quadrature(cut: float) -> None:
    radius, edge = (0.585 - 0.019) / 2, 0.3 * (1 - 2 * cut)
    beyond = integrate.quad(lambda y: 2 * math.sqrt(max(0.0, radius**2 - y * y)), edge, radius, epsabs=1e-14)[
        0
    ]
    assert shell("bell-delaware", 2e4, B_c=cut)["F_w"] == pytest.approx(
        beyond / (math.pi * radius**2), rel=1e-8
    )


def test_closed_forms_lie_near_the_digitised_charts() -> None:
    """The charts of the library, read from the curves: at most 2.8 % (J_c), 6.9 % (J_l), 0.5 % (J_b)."""
    for cut in (0.16, 0.25, 0.35, 0.44):
        for clearance in (0.002, 0.005, 0.008):
            found = shell("bell-delaware", 2e4, B_c=cut, d_sb=clearance)
            assert found["J_c"] == pytest.approx(ht.baffle_correction_Bell(found["F_c"]), rel=0.028)
            chart = ht.baffle_leakage_Bell(found["S_sb"], found["S_tb"], found["S_m"])
            assert found["J_l"] == pytest.approx(chart, rel=0.069)
            assert found["J_b"] == pytest.approx(
                ht.bundle_bypassing_Bell(found["r_b"], 2, found["N_cc"]), rel=0.005
            )


@pytest.mark.parametrize("layout", [30, 45, 90])
def test_ideal_bank_against_other_laws_of_the_bank(layout: int) -> None:
    """A band: the bank of ESDU 73031 in ht 1.2.0 is another law; largest differences: 15, 26, 16 %."""
    s_t, s_l = {30: (1.25, 1.25 * 3**0.5 / 2), 45: (1.25 * 2**0.5, 1.25 / 2**0.5), 90: (1.25, 1.25)}[layout]
    for re in np.geomspace(30.0, 8e4, 20):
        found = assigned("bell-ideal-bank", **NEUTRAL, Re=re, Pr=5.0, d_o=0.02, P_t=0.025, layout=layout)[
            "Nu"
        ]
        assert found == pytest.approx(
            ht.Nu_ESDU_73031(re, 5.0, 30, s_l * 0.02, s_t * 0.02), rel=0.26 if layout == 45 else 0.16
        )


@pytest.mark.parametrize(
    ("layout", "edge", "step"),
    [
        (30, 10, -0.006),
        (30, 100, -0.001),
        (30, 1000, 0.001),
        (30, 10000, 0.0),
        (45, 10, -0.009),
        (45, 100, 0.0),
        (45, 1000, 0.040),
        (45, 10000, 0.0),
        (90, 10, 0.008),
        (90, 100, -0.004),
        (90, 1000, 0.002),
        (90, 10000, 0.054),
    ],
)
def test_joints_of_the_ideal_bank(layout: int, edge: float, step: float) -> None:
    """Continuity is what supports a table from memory; the two larger steps are named in its notes."""
    below, above = (
        assigned(
            "bell-ideal-bank", **NEUTRAL, Re=edge * (1 + shift), Pr=5.0, d_o=0.02, P_t=0.025, layout=layout
        )["Nu"]
        for shift in (-1e-12, 1e-12)
    )
    assert above / below - 1 == pytest.approx(step, abs=1e-3)


def test_gas_factor_of_the_ideal_bank() -> None:
    base = {**NEUTRAL, "Re": 2e4, "Pr": 0.7, "d_o": 0.02, "P_t": 0.025, "layout": 30, "liquid": False}
    heated = assigned("bell-ideal-bank", **{**base, "T_b": 300.0, "T_s": 480.0})["K"]
    cooled = assigned("bell-ideal-bank", **{**base, "T_b": 480.0, "T_s": 300.0})["K"]
    # From memory: exponent 0.25 of a heated gas, none of a cooled one.
    assert heated == pytest.approx((300 / 480) ** 0.25, rel=ROUNDING)
    assert cooled == 1.0


@settings(deadline=None, max_examples=60)
@given(
    re=st.floats(200.0, 8e4),
    cut=st.floats(0.16, 0.44),
    clearance=st.floats(1e-3, 8e-3),
    hole=st.floats(2e-4, 1.2e-3),
    layout=st.sampled_from([30, 45, 90]),
    strips=st.integers(0, 4),
)
def test_shell_side_physics(
    re: float, cut: float, clearance: float, hole: float, layout: int, strips: int
) -> None:
    """Wider clearances lower the figure, sealing strips raise it, and no factor of loss passes 1."""
    known = {"B_c": cut, "d_sb": clearance, "d_tb": hole, "layout": layout, "N_ss": strips}
    here = shell("bell-delaware", re, **known)
    assert shell("bell-delaware", re, **{**known, "d_sb": clearance * 1.3})["Nu"] < here["Nu"]
    assert shell("bell-delaware", re, **{**known, "d_tb": hole * 1.3})["Nu"] < here["Nu"]
    assert shell("bell-delaware", re, **{**known, "N_ss": strips + 1})["Nu"] >= here["Nu"]
    for factor in ("J_l", "J_b", "J_s", "J_r"):
        assert 0 < here[factor] <= 1
    assert 0.55 <= here["J_c"] <= 1.27
    assert here["J_l"] < 1


@settings(deadline=None, max_examples=60)
@given(re=st.floats(2e3, 2e5), pr=st.floats(0.7, 500.0), pitch=st.floats(1.2, 1.5), more=st.floats(1.05, 2.0))
def test_kern_rises_with_flow_and_prandtl_number(re: float, pr: float, pitch: float, more: float) -> None:
    base = {**NEUTRAL, "d_o": 0.02, "P_t": 0.02 * pitch, "layout": 30}
    here = assigned("kern-1950", Re=re, Pr=pr, **base)["Nu"]
    assert assigned("kern-1950", Re=re * more, Pr=pr, **base)["Nu"] == pytest.approx(
        here * more**0.55, rel=ROUNDING
    )
    assert assigned("kern-1950", Re=re, Pr=pr * more, **base)["Nu"] > here


def test_kern_and_bell_agree_on_a_usual_drawing() -> None:
    """Another method on one drawing: 30 % is the accuracy that the texts give to the first."""
    for re in (3000.0, 2e4, 6e4):
        assert shell("kern-1950", re)["Nu"] == pytest.approx(shell("bell-delaware", re)["Nu"], rel=0.3)
