"""Coils, ducts of other section and chevron plates, held against outside references.

The reference is ht 1.2.0 or fluids 1.3.1, independent open libraries, wherever they have the law; else a
solution of developed laminar flow worked out here. Unless a reason is given beside a case, card and
reference are one closed form and only rounding remains, for which 1e-11 leaves thousands of roundings.
"""

from __future__ import annotations

import math
from functools import cache
from typing import Any

import fluids
import ht
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import sparse
from scipy.sparse import linalg

from calcbook.formulas import evaluate
from calcbook.library import Library, bind_given, load_method, load_situation
from calcbook.library.checking import check_method, check_situation, uncovered_constants
from calcbook.library.programs import evaluate_program

ROUNDING = 1e-11
LIBRARY = Library()

CARDS = (
    "gnielinski-coil-1986",
    "schmidt-coil-1967",
    "duct-laminar-rectangle-t",
    "duct-laminar-rectangle-h",
    "duct-laminar-section-t",
    "duct-laminar-section-h",
    "duct-transition-rectangle",
    "duct-transition-section",
    "kumar-1984",
    "martin-1996",
    "muley-manglik-1999",
)
# Figures that no outside value is sharp enough to miss when they move by one per cent, and why.
LAMINAR_COIL = {"0.08", "1", "0.8", "0.9", "3", "0.5", "0.2903", "0.194"}
NOT_COVERED = {
    # No open library was found that computes laminar flow in a coil; the wall terms are from memory, and
    # inside the transition no second law is known.
    "gnielinski-coil-1986": {
        *(("relation of m_l", figure) for figure in ("0.5", "0.2903", "0.194")),
        *(("relation of Nu_l", figure) for figure in ("0.08", "1", "0.8", "0.9", "3")),
        ("relation of f", "0.27"),
        ("relation of gamma", "22000"),
        ("relation of Nu", "0.14"),
    },
    "schmidt-coil-1967": {("relation of Nu_l", figure) for figure in LAMINAR_COIL},
    # The fifth power: moved by one per cent it changes Nu by less than the fit of the polynomial.
    "duct-laminar-rectangle-t": {("relation of Nu", "5")},
    # The printed 2.47 is 1.0 % below the exact figure, so that 1 % more lies nearer to it.
    "duct-laminar-section-t": {("table ducts, row 1, Nu", "2.47")},
    # Wall terms are from memory.
    "martin-1996": {("relation of K", "1"), ("relation of K", "6")},
    "muley-manglik-1999": {("relation of Nu_e", "0.14")},
}

NEUTRAL = {
    "mu": 1e-3,
    "mu_s": 1e-3,
    "T_b": 300.0,
    "T_s": 305.0,
    "heated": True,
    "liquid": True,
    "d": 0.02,
    "L": 2.0,
}


def values(name: str, **known: Any) -> dict[str, Any]:
    """Every symbol that a card assigns for these figures; at the wall Pr is that of the bulk unless given."""
    card, program = load_method(name), LIBRARY.program(name)
    known = {**NEUTRAL, "Pr_s": known.get("Pr", 1.0), **known}
    wanted = {need.symbol: known[need.symbol] for need in card.needs if need.symbol in known}
    found = evaluate_program(program, bind_given(program, wanted))
    return {symbol: found[at] for symbol, at in program.scope.items() if at in found}


def result(name: str, **known: Any) -> Any:
    """What a card gives for these figures."""
    return values(name, **known)["Nu"]


def automatic(situation: str, re: float, **known: Any) -> float:
    """The Nusselt number by the method that the choice table of a situation takes."""
    for row in load_situation(situation).choose:
        if row.when is None or evaluate(row.when, {"Re": np.asarray(re)}):
            return float(result(row.use, Re=re, **known))
    raise AssertionError("the last row of a choice table has no condition")


@pytest.mark.parametrize("name", CARDS)
def test_card_holds_its_check_points(name: str) -> None:
    check_method(load_method(name), LIBRARY)


@pytest.mark.parametrize("name", CARDS)
def test_outside_check_points_cover_every_figure(name: str) -> None:
    found = {(item.where, item.figure) for item in uncovered_constants(load_method(name), LIBRARY)}
    assert found == NOT_COVERED.get(name, set())


@pytest.mark.parametrize("name", ["inside-coil", "inside-rectangular-duct", "inside-duct", "plate-channel"])
def test_situation_is_whole(name: str) -> None:
    check_situation(name, LIBRARY)


# --- coils -------------------------------------------------------------------------------------------


def test_schmidt_coil_over_a_grid() -> None:
    """Largest deviation found: 4.5e-16."""
    for ratio in (0.012, 0.03, 0.1, 0.2):
        critical = fluids.helical_transition_Re_Schmidt(ratio, 1.0)
        assert values("schmidt-coil-1967", Re=1e4, Pr=1.0, x_c=ratio)["Re_c"] == pytest.approx(
            critical, rel=ROUNDING
        )
        for re in np.geomspace(critical * 1.001, 1.5e5, 30):
            for pr in (0.7, 7.0, 100.0):
                found = result("schmidt-coil-1967", Re=re, Pr=pr, x_c=ratio)
                assert found == pytest.approx(
                    ht.helical_turbulent_Nu_Schmidt(re, pr, ratio, 1.0), rel=ROUNDING
                )


def test_kernel_of_the_gnielinski_coil() -> None:
    """The kernel of ht with Re in place of Re - 1000, at the friction factor of the card."""
    for ratio in (0.01, 0.05, 0.2):
        for re in np.geomspace(22001.0, 1.5e5, 10):
            for pr in (0.7, 7.0, 100.0):
                found = values("gnielinski-coil-1986", Re=re, Pr=pr, x_c=ratio)
                expected = ht.turbulent_Gnielinski(re, pr, float(found["f"])) * re / (re - 1000)
                assert found["Nu"] == pytest.approx(expected, rel=ROUNDING)


def test_friction_of_the_coil_beside_another_law() -> None:
    """fluids 1.3.1, turbulent friction in a coil by Schmidt: 2 to 6 % lower (a band; another author)."""
    for ratio in (0.02, 0.05, 0.1):
        for re in (3e4, 6e4, 1.2e5):
            mine = float(values("gnielinski-coil-1986", Re=re, Pr=1.0, x_c=ratio)["f"])
            assert 0.02 < mine / fluids.helical_turbulent_fd_Schmidt(re, ratio, 1.0) - 1 < 0.065


@pytest.mark.parametrize("ratio", [0.012, 0.05, 0.2])
def test_gnielinski_coil_is_continuous(ratio: float) -> None:
    critical = float(values("gnielinski-coil-1986", Re=1e4, Pr=7.0, x_c=ratio)["Re_c"])
    for edge in (critical, 22000.0):
        below, above = (
            result("gnielinski-coil-1986", Re=edge * (1 + shift), Pr=7.0, x_c=ratio)
            for shift in (-1e-9, 1e-9)
        )
        assert above / below - 1 == pytest.approx(0.0, abs=1e-7)


def test_steps_of_the_schmidt_coil() -> None:
    """The printed equations jump at the critical Reynolds number by 38 % at a ratio of 0.05."""
    critical = fluids.helical_transition_Re_Schmidt(0.05, 1.0)
    below, above = (
        result("schmidt-coil-1967", Re=critical * (1 + shift), Pr=7.0, x_c=0.05) for shift in (-1e-9, 1e-9)
    )
    assert above / below - 1 == pytest.approx(0.38, abs=0.01)


def test_coil_laws_beside_each_other() -> None:
    """Three other authors, from ht 1.2.0, lie 11 to 21 % lower in turbulent flow; laminar 7 % (a band)."""
    for re in (3e4, 6e4, 1e5):
        one = result("gnielinski-coil-1986", Re=re, Pr=5.0, x_c=0.05)
        for law in ("Schmidt", "Xin_Ebadian", "Mori_Nakayama"):
            assert 0.78 < getattr(ht, f"helical_turbulent_Nu_{law}")(re, 5.0, 0.05, 1.0) / one < 0.89
    for re in (200.0, 1000.0, 5000.0):
        one = result("gnielinski-coil-1986", Re=re, Pr=5.0, x_c=0.05)
        assert result("schmidt-coil-1967", Re=re, Pr=5.0, x_c=0.05) == pytest.approx(one, rel=0.07)


@settings(deadline=None)
@given(
    re=st.floats(100.0, 1.4e5),
    pr=st.floats(0.7, 300.0),
    ratio=st.floats(0.01, 0.19),
    more=st.floats(1.01, 1.5),
    wall=st.floats(1.05, 3.0),
)
def test_coil_physics(re: float, pr: float, ratio: float, more: float, wall: float) -> None:
    """More flow and more curvature raise the figure; so does a heated liquid."""
    here = result("gnielinski-coil-1986", Re=re, Pr=pr, x_c=ratio)
    assert result("gnielinski-coil-1986", Re=re * more, Pr=pr, x_c=ratio) > here > 3.66
    if re < 2300 or re > 22000:
        assert result("gnielinski-coil-1986", Re=re, Pr=pr, x_c=min(0.2, ratio * more)) > here
    assert result("gnielinski-coil-1986", Re=min(re, 2000.0), Pr=pr, Pr_s=pr / wall, x_c=ratio) > result(
        "gnielinski-coil-1986", Re=min(re, 2000.0), Pr=pr, x_c=ratio
    )


# --- ducts -------------------------------------------------------------------------------------------


@cache
def rectangle(ratio: float, cells: int = 120) -> tuple[float, float]:
    """Nu of developed laminar flow in a rectangle at constant temperature and at constant flux.

    Finite differences on two grids, extrapolated.
    """

    def on_grid(count: int) -> np.ndarray:
        across = max(8, round(count * ratio))

        def second(number: int, step: float) -> Any:
            main = np.full(number, 2.0)
            main[0] = main[-1] = 3.0
            side = np.full(number - 1, -1.0)
            return sparse.diags([side, main, side], [-1, 0, 1]) / step**2

        laplace = (
            sparse.kron(sparse.eye(across), second(count, 1 / count))
            + sparse.kron(second(across, ratio / across), sparse.eye(count))
        ).tocsc()
        solver = linalg.splu(laplace)
        speed = solver.solve(np.ones(count * across))
        speed /= speed.mean()
        d_h = 2 * ratio / (1 + ratio)
        slowest = linalg.eigsh(
            laplace, k=1, M=sparse.diags(speed, format="csc"), sigma=0.0, return_eigenvectors=False
        )[0]
        excess = solver.solve(speed)
        return np.array([slowest * d_h**2 / 4, d_h**2 / (4 * (excess * speed).mean())])

    coarse, fine = on_grid(cells), on_grid(2 * cells)
    both = fine + (fine - coarse) / 3
    return float(both[0]), float(both[1])


@pytest.mark.parametrize("ratio", [1.0, 0.8, 0.5, 1 / 3, 0.25, 0.125])
def test_rectangle_by_finite_differences(ratio: float) -> None:
    """The fit of the polynomials: 0.22 % at the tabulated ratios, 0.5 % from 0.75 to 0.95, 0.09 % at flux."""
    at_temperature, at_flux = rectangle(ratio)
    assert result("duct-laminar-rectangle-t", Re=500.0, Pr=1.0, r_s=ratio) == pytest.approx(
        at_temperature, rel=5e-3 if ratio == 0.8 else 2.3e-3
    )
    assert result("duct-laminar-rectangle-h", Re=500.0, Pr=1.0, r_s=ratio) == pytest.approx(at_flux, rel=1e-3)


def test_rectangle_at_constant_flux_over_a_grid() -> None:
    ratio = np.linspace(0.01, 1.0, 60)
    expected = [ht.Nu_laminar_rectangular_Shan_London(one) for one in ratio]
    assert result("duct-laminar-rectangle-h", Re=500.0, Pr=1.0, r_s=ratio) == pytest.approx(
        expected, rel=ROUNDING
    )


def test_parallel_plates_from_both_cards() -> None:
    """A rectangle of side ratio 0 is two plates; 140/17 and 70/13 are exact."""
    for end in ("t", "h"):
        flat = result(f"duct-laminar-rectangle-{end}", Re=500.0, Pr=1.0, r_s=0.0)
        assert result(f"duct-laminar-section-{end}", Re=500.0, Pr=1.0, section="plates") == pytest.approx(
            flat, rel=1e-12
        )
    assert result("duct-laminar-section-h", Re=500.0, Pr=1.0, section="plates") == pytest.approx(
        140 / 17, rel=1e-4
    )
    assert result("duct-laminar-section-h", Re=500.0, Pr=1.0, section="plates_one_side") == pytest.approx(
        70 / 13, rel=1e-4
    )
    assert result("duct-laminar-section-h", Re=500.0, Pr=1.0, section="triangle") == pytest.approx(
        28 / 9, rel=1e-4
    )


@pytest.mark.parametrize("situation", ["inside-rectangular-duct", "inside-duct"])
@pytest.mark.parametrize("pr", [0.7, 7.0, 100.0])
def test_automatic_choice_in_a_duct_has_no_step(situation: str, pr: float) -> None:
    """Without a wall factor the laws meet at 2300 and 4000."""
    known = {"Pr": pr, "r_s": 0.4, "section": "hexagon"}
    for edge in (2300.0, 4000.0):
        below, above = (automatic(situation, edge * (1 + shift), **known) for shift in (-1e-9, 1e-9))
        assert above / below - 1 == pytest.approx(0.0, abs=1e-6)


@settings(deadline=None)
@given(
    re=st.floats(2300.0, 9e5), pr=st.floats(0.7, 300.0), more=st.floats(1.01, 2.0), ratio=st.floats(0.05, 1.0)
)
def test_duct_rises_with_speed(re: float, pr: float, more: float, ratio: float) -> None:
    known = {"Pr": pr, "r_s": ratio}
    assert automatic("inside-rectangular-duct", re * more, **known) > automatic(
        "inside-rectangular-duct", re, **known
    )


@settings(deadline=None)
@given(ratio=st.floats(0.0, 0.85), more=st.floats(0.001, 0.01))
def test_flatter_rectangle_has_the_larger_figure(ratio: float, more: float) -> None:
    """Up to 0.85: nearer to the square the polynomial at constant temperature is flat within its fit."""
    for end in ("t", "h"):
        name = f"duct-laminar-rectangle-{end}"
        assert result(name, Re=500.0, Pr=1.0, r_s=ratio + more) < result(name, Re=500.0, Pr=1.0, r_s=ratio)
    assert result("duct-laminar-rectangle-t", Re=500.0, Pr=1.0, r_s=ratio) < result(
        "duct-laminar-rectangle-h", Re=500.0, Pr=1.0, r_s=ratio
    )


# --- plates ------------------------------------------------------------------------------------------


def test_martin_over_a_grid() -> None:
    """fluids and ht in the form of the VDI Heat Atlas. Largest deviation found: 2.3e-16."""
    for angle in (10, 30, 45, 60, 80):
        for re in (200.0, 1000.0, 1999.0, 2001.0, 1e4):
            for pr in (0.7, 5.0, 100.0):
                found = values("martin-1996", Re=re, Pr=pr, beta_c=math.radians(angle))
                assert found["f"] == pytest.approx(fluids.friction_plate_Martin_VDI(re, angle), rel=ROUNDING)
                assert found["Nu"] == pytest.approx(ht.Nu_plate_Martin(re, pr, angle, "VDI"), rel=ROUNDING)


def test_constants_of_martin_in_both_prints() -> None:
    """The constants of 1996 and 1999 differ by rounding: 0.04 % of the figure at most here."""
    for angle in (30, 45, 60):
        for re in (300.0, 1500.0, 5000.0):
            found = result("martin-1996", Re=re, Pr=5.0, beta_c=math.radians(angle))
            assert found == pytest.approx(ht.Nu_plate_Martin(re, 5.0, angle, "1999"), rel=4e-4)


def test_kumar_over_a_grid() -> None:
    """The column is 90 degrees less the angle to the flow. Largest deviation found: 2.3e-16."""
    for column in (30, 45, 50, 60, 65):
        for re in np.geomspace(0.1, 9999.0, 30):
            for pr in (0.7, 5.0, 100.0):
                found = result("kumar-1984", Re=re, Pr=pr, beta_c=math.radians(90 - column))
                assert found == pytest.approx(ht.Nu_plate_Kumar(re, pr, column), rel=ROUNDING)


def test_sense_of_the_angle_of_kumar() -> None:
    """Against martin-1996 at the same angle to the flow the complement is within 30 %, the plain not."""
    for angle in (30, 60):
        martin = result("martin-1996", Re=1000.0, Pr=5.0, beta_c=math.radians(angle))
        assert result("kumar-1984", Re=1000.0, Pr=5.0, beta_c=math.radians(angle)) == pytest.approx(
            martin, rel=0.3
        )
        assert ht.Nu_plate_Kumar(1000.0, 5.0, angle) != pytest.approx(martin, rel=0.3)


def test_muley_manglik_over_a_grid() -> None:
    """ht with its polynomial in the enlargement, in which two digits are swapped, replaced by the paper's."""
    for enlargement in (1.0, 1.1, 1.29, 1.5):
        swapped = 20.7803 - 50.9372 * enlargement + 41.1585 * enlargement**2 - 10.1507 * enlargement**3
        printed = 20.78 - 50.94 * enlargement + 41.16 * enlargement**2 - 10.51 * enlargement**3
        for angle in (30, 42, 60):
            for re in (1000.0, 3000.0, 1e4):
                found = result(
                    "muley-manglik-1999",
                    Re=re / enlargement,
                    Pr=5.0,
                    beta_c=math.radians(angle),
                    Phi=enlargement,
                )
                theirs = ht.Nu_plate_Muley_Manglik(re, 5.0, angle, enlargement)
                assert found * enlargement == pytest.approx(theirs / swapped * printed, rel=1e-9)


def test_plate_of_the_authors_needs_no_enlargement_factor() -> None:
    """At 1.29, the enlargement of the authors' plates (from memory), the polynomial is 1 within 0.01 %."""
    found = values("muley-manglik-1999", Re=2000.0, Pr=5.0, beta_c=math.radians(45), Phi=1.29)
    assert found["F_Phi"] == pytest.approx(1.0, abs=1e-4)


def test_plate_laws_beside_each_other() -> None:
    """One plate, 60 degrees, enlargement 1.29: within 15 % on one length, common practice to compare."""
    for re_e in (1500.0, 3000.0, 8000.0):
        known = {"Re": re_e / 1.29, "Pr": 5.0, "beta_c": math.radians(60), "Phi": 1.29}
        assert result("muley-manglik-1999", **known) == pytest.approx(
            result("martin-1996", **known), rel=0.15
        )


@pytest.mark.parametrize(("angle", "step"), [(15, 0.040), (30, 0.024), (45, 0.020), (60, 0.019), (75, 0.020)])
def test_joint_of_the_martin_regimes(angle: float, step: float) -> None:
    below, above = (
        result("martin-1996", Re=2000 * (1 + shift), Pr=5.0, beta_c=math.radians(angle))
        for shift in (-1e-9, 1e-9)
    )
    assert above / below - 1 == pytest.approx(step, abs=1e-3)


@settings(deadline=None)
@given(
    re=st.floats(200.0, 9000.0),
    pr=st.floats(0.7, 200.0),
    angle=st.floats(12.0, 60.0),
    more=st.floats(1.05, 1.5),
    wall=st.floats(1.05, 5.0),
)
def test_plate_physics(re: float, pr: float, angle: float, more: float, wall: float) -> None:
    """More flow, a steeper corrugation and a wall less viscous than the bulk of a liquid raise the figure."""
    here = result("martin-1996", Re=re, Pr=pr, beta_c=math.radians(angle))
    assert result("martin-1996", Re=re * more, Pr=pr, beta_c=math.radians(angle)) > here
    assert result("martin-1996", Re=re, Pr=pr, beta_c=math.radians(angle * more)) > here or angle * more > 70
    heated = result("martin-1996", Re=re, Pr=pr, beta_c=math.radians(angle), mu_s=1e-3 / wall)
    assert heated == pytest.approx(here * wall ** (1 / 6), rel=ROUNDING)
    gas = result("martin-1996", Re=re, Pr=pr, beta_c=math.radians(angle), mu_s=1e-3 / wall, liquid=False)
    assert gas == pytest.approx(here, rel=ROUNDING)
