"""Cards of exchanger rating and of fouling: each check point, and grids against independent references.

References: ht 1.2.0, an independent open library; the published forms in 50 decimal digits, written here; and
scipy's integration and search. Where a tolerance is ROUNDING both sides are one closed form each.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from decimal import Decimal, localcontext

import ht
import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp
from scipy.optimize import brentq

from calcbook.library import Library, evaluate_method, evaluate_program, load_method
from calcbook.library.checking import check_method, uncovered_constants
from calcbook.library.operations import run

LIBRARY = Library()
ROUNDING = 1e-12
DAY = 86400.0

F_CARDS = (
    "bowman-1940-f-factor",
    "crossflow-f-factor-both-unmixed",
    "crossflow-f-factor-one-mixed",
    "crossflow-f-factor-both-mixed",
)
EFFECTIVENESS_CARDS = (
    "effectiveness-counterflow",
    "effectiveness-parallel-flow",
    "effectiveness-isothermal",
    "effectiveness-shell-and-tube",
    "effectiveness-crossflow-both-unmixed",
    "effectiveness-crossflow-cmax-mixed",
    "effectiveness-crossflow-cmin-mixed",
    "effectiveness-crossflow-both-mixed",
)
CARDS = (
    "lmtd",
    *F_CARDS,
    *EFFECTIVENESS_CARDS,
    "fouling-linear",
    "fouling-falling-rate",
    "kern-seaton-1959",
    "ebert-panchal-1995",
    "polley-2002",
    "deposit-thickness-inside",
    "deposit-thickness-outside",
    "deposit-thickness-flat",
    "deposit-dp-ratio",
    "cleaning-interval-linear",
    "cleaning-interval-asymptotic",
    "cleaning-interval-heat-linear",
    "mccabe-robinson-1924",
    "fouling-from-plant-data",
)

# Exponents of the threshold models are remembered, and no outside figure tells them: both cards are on trial.
NOT_COVERED = {
    "ebert-panchal-1995": {("relation of formed", "0.88")},
    "polley-2002": {
        ("relation of formed", "0.8"),
        ("relation of formed", "0.33"),
        ("relation of removed", "0.8"),
    },
}


def values(name: str, **given: object) -> dict[str, float]:
    return evaluate_method(load_method(name), given)


def result(name: str, **given: object) -> float:
    return values(name, **given)[load_method(name).gives]


@pytest.mark.parametrize("name", CARDS)
def test_card_holds_its_check_points(name: str) -> None:
    check_method(load_method(name), LIBRARY)


@pytest.mark.parametrize("name", CARDS)
def test_outside_check_points_cover_every_figure(name: str) -> None:
    found = {(item.where, item.figure) for item in uncovered_constants(load_method(name), LIBRARY)}
    assert found == NOT_COVERED.get(name, set())


# --- mean temperature difference ----------------------------------------------------------------------


def test_mean_difference_over_a_grid_of_ends_that_come_together() -> None:
    """The published form in 50 digits, from ends far apart down to a part in 1e14; largest deviation 2e-16."""
    for gap in (*np.geomspace(1e-14, 50.0, 120), 0.0):
        first, second = 20.0 + gap, 20.0
        with localcontext() as context:
            context.prec = 50
            one, two = Decimal(first), Decimal(second)
            expected = float((one - two) / (one / two).ln()) if one != two else second
        for ends in ((first, second), (second, first)):
            assert result("lmtd", dT_1=ends[0], dT_2=ends[1]) == pytest.approx(expected, rel=1e-14)


def test_mean_difference_has_a_smooth_slope_through_equal_ends() -> None:
    """At equal ends the slope by either end is one half, and nearby it moves by a sixth of the gap over the mean:
    the series of the logarithmic mean, to the second order that the 1e-9 leaves out."""
    program = LIBRARY.program("lmtd")
    for gap in (-1e-3, -1e-6, 0.0, 1e-9, 1e-4):
        assigned = {**program.constants, "dT_1": np.array(20.0 + gap), "dT_2": np.array(20.0)}
        slopes = {"dT_1": {"dT_1": np.array(1.0)}}
        run(program.steps, assigned, slopes)
        mean = 20.0 + gap / 2
        assert slopes[program.result]["dT_1"] == pytest.approx(0.5 - gap / mean / 6, abs=1e-9)


# --- correction factor --------------------------------------------------------------------------------


def published_shells(P: float, R: float, shells: int) -> float | None:
    """Bowman's form of any number of shells, in 50 digits; None where the temperatures cross in a shell."""
    with localcontext() as context:
        context.prec = 50
        p, r, n = Decimal(P), Decimal(R), Decimal(shells)
        root = (1 + r * r).sqrt()
        if p >= 1 or p * r >= 1:
            return None
        if r == 1:
            w = (n - n * p) / (n - n * p + p)
            half = 1 / Decimal(2).sqrt()
            if w / (1 - w) <= half:
                return None
            return float(Decimal(2).sqrt() * (1 - w) / w / ((w / (1 - w) + half) / (w / (1 - w) - half)).ln())
        w = (((1 - p * r) / (1 - p)).ln() / n).exp()
        s = root / (r - 1)
        argument = (1 + w - s + s * w) / (1 + w + s - s * w)
        return float(s * w.ln() / argument.ln()) if argument > 0 else None


GRID_P = (0.02, 0.1, 0.25, 0.4, 0.5, 0.6, 0.75, 0.9)
GRID_R = (0.0, 0.05, 0.3, 0.7, 0.95, 0.9999, 1 - 1e-7, 1.0, 1 + 1e-9, 1.005, 1.3, 2.5, 8.0)


@pytest.mark.parametrize("shells", [1, 2, 3, 6])
def test_shells_against_the_published_form(shells: int) -> None:
    """Also where it has no value: there the card has none. Largest deviation 6e-15, next to a cross."""
    seen = crossed = 0
    for P, R in itertools.product(GRID_P, GRID_R):
        expected = published_shells(P, R, shells)
        found = values("bowman-1940-f-factor", P=P, R=R, N_s=shells)
        if expected is None:
            crossed += 1
            assert not found["F"] > 0 and not (P * R < 1 and found["K"] > found["s"])
        else:
            seen += 1
            assert found["F"] == pytest.approx(expected, rel=1e-13)
    assert seen > 40 and crossed > 5


def test_shells_against_an_independent_library() -> None:
    """F_LMTD_Fakheri of ht over terminal temperatures. Within a thousandth of equal capacity flows the library's
    own form loses digits as 1e-16/(R - 1)**2; the form in 50 digits above stands there."""
    seen = 0
    for hot_out, cold_out, shells in itertools.product(
        np.arange(60, 150, 7.0), np.arange(25, 120, 6.0), (1, 2, 4)
    ):
        hot_in, cold_in = 150.0, 20.0
        R = (hot_in - hot_out) / (cold_out - cold_in)
        P = (cold_out - cold_in) / (hot_in - cold_in)
        if published_shells(P, R, shells) is None or abs(R - 1) < 1e-3:
            continue
        expected = ht.F_LMTD_Fakheri(hot_in, hot_out, cold_in, cold_out, shells=shells)
        assert result("bowman-1940-f-factor", P=P, R=R, N_s=shells) == pytest.approx(expected, rel=1e-9)
        seen += 1
    assert seen > 200


def test_factor_is_that_of_both_streams() -> None:
    """Exchange of the streams: P·R for P, 1/R for R, and the other stream mixed."""
    for P, R in ((0.3, 1.7), (0.5, 0.8), (0.45, 1.0)):
        other = {"P": P * R, "R": 1 / R}
        for name in (
            "bowman-1940-f-factor",
            "crossflow-f-factor-both-unmixed",
            "crossflow-f-factor-both-mixed",
        ):
            assert result(name, **other) == pytest.approx(result(name, P=P, R=R), rel=1e-12)
        assert result("crossflow-f-factor-one-mixed", **other, mixed="this") == pytest.approx(
            result("crossflow-f-factor-one-mixed", P=P, R=R, mixed="other"), rel=1e-12
        )


def test_factor_comes_to_one_for_a_small_change_of_temperature() -> None:
    """F → 1 as P → 0: its first term is of the second order in P for shells, of the first for none."""
    for R in (0.2, 1.0, 3.0):
        assert result("bowman-1940-f-factor", P=1e-6, R=R) == pytest.approx(1.0, abs=1e-11)
        for name in ("crossflow-f-factor-both-unmixed", "crossflow-f-factor-both-mixed"):
            assert result(name, P=1e-4, R=R) == pytest.approx(1.0, abs=1e-7)
        assert result("crossflow-f-factor-one-mixed", P=1e-6, R=R, mixed="other") == pytest.approx(
            1.0, abs=1e-9
        )


def test_many_shells_come_to_counterflow() -> None:
    assert result("bowman-1940-f-factor", P=0.7, R=0.95, N_s=1000) == pytest.approx(1.0, abs=1e-5)


# --- effectiveness ------------------------------------------------------------------------------------

COUNTS = (0.05, 0.3, 0.8, 1.5, 2.5, 4.0, 7.0)
RATIOS = (0.05, 0.3, 0.6, 0.9, 0.99, 1.0)
LIBRARY_NAMES = {
    "effectiveness-counterflow": "counterflow",
    "effectiveness-parallel-flow": "parallel",
    "effectiveness-crossflow-both-unmixed": "crossflow",
    "effectiveness-crossflow-cmax-mixed": "crossflow, mixed Cmax",
    "effectiveness-crossflow-cmin-mixed": "crossflow, mixed Cmin",
}


@pytest.mark.parametrize(("card", "subtype"), LIBRARY_NAMES.items())
def test_effectiveness_against_an_independent_library(card: str, subtype: str) -> None:
    """The library integrates crossflow numerically and divides by 1 - C_r; 1e-9 leaves room for both."""
    for count, ratio in itertools.product(COUNTS, RATIOS):
        expected = ht.effectiveness_from_NTU(count, ratio, subtype=subtype)
        assert result(card, NTU=count, C_r=ratio) == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("shells", [1, 2, 5])
def test_effectiveness_of_shells_against_an_independent_library(shells: int) -> None:
    """For one and the same form at C_r = 1, where the library divides by zero, see the check points."""
    for count, ratio in itertools.product(COUNTS, (0.05, 0.3, 0.6, 0.9, 0.99)):
        expected = ht.effectiveness_from_NTU(count, ratio, subtype="S&T", n_shell_tube=shells)
        assert result("effectiveness-shell-and-tube", NTU=count, C_r=ratio, N_s=shells) == pytest.approx(
            expected, rel=1e-9
        )


def test_effectiveness_of_both_mixed_against_an_independent_library() -> None:
    for count, ratio in itertools.product(COUNTS, RATIOS):
        expected = ht.temperature_effectiveness_basic(R1=ratio, NTU1=count, subtype="crossflow, mixed 1&2")
        assert result("effectiveness-crossflow-both-mixed", NTU=count, C_r=ratio) == pytest.approx(
            expected, rel=1e-9
        )


@pytest.mark.parametrize("name", EFFECTIVENESS_CARDS)
def test_effectiveness_of_very_small_units_is_their_count(name: str) -> None:
    """ε → NTU as NTU → 0; the next term is at most NTU·(1 + C_r)/2 of it."""
    ratio = {} if name == "effectiveness-isothermal" else {"C_r": 0.6}
    assert result(name, NTU=1e-7, **ratio) == pytest.approx(1e-7, rel=1e-6)


def test_effectiveness_of_very_large_units() -> None:
    """The known ends: one in counterflow, 1/(1 + C_r) in parallel flow, and those of the shells and of crossflow."""
    ratio, s = 0.6, math.sqrt(1.36)
    ends = {
        "effectiveness-counterflow": 1.0,
        "effectiveness-parallel-flow": 1 / 1.6,
        "effectiveness-shell-and-tube": 2 / (1.6 + s),
        "effectiveness-crossflow-cmax-mixed": -math.expm1(-0.6) / 0.6,
        "effectiveness-crossflow-cmin-mixed": -math.expm1(-1 / 0.6),
    }
    for name, end in ends.items():
        assert result(name, NTU=200.0, C_r=ratio) == pytest.approx(end, rel=1e-12)
    assert result("effectiveness-crossflow-both-mixed", NTU=1e9, C_r=ratio) == pytest.approx(
        1 / 1.6, rel=1e-8
    )
    assert result("effectiveness-isothermal", NTU=200.0) == pytest.approx(1.0, rel=1e-12)
    # Unmixed crossflow comes to one slowly: at C_r·NTU = 24, the end of its terms, it is past 0.997.
    assert 0.997 < result("effectiveness-crossflow-both-unmixed", NTU=40.0, C_r=ratio) < 1.0


def test_a_small_capacity_ratio_comes_to_the_isothermal_stream() -> None:
    for name in EFFECTIVENESS_CARDS:
        if name != "effectiveness-isothermal":
            assert result(name, NTU=1.3, C_r=1e-9) == pytest.approx(
                result("effectiveness-isothermal", NTU=1.3), rel=1e-8
            )


def factor_of(card: str, effectiveness: float, ratio: float, **more: object) -> float:
    return result(card, P=effectiveness, R=ratio, **more)


PAIRS: dict[str, tuple[str, dict[str, object]]] = {
    "effectiveness-shell-and-tube": ("bowman-1940-f-factor", {}),
    "effectiveness-crossflow-both-unmixed": ("crossflow-f-factor-both-unmixed", {}),
    "effectiveness-crossflow-cmax-mixed": ("crossflow-f-factor-one-mixed", {"mixed": "other"}),
    "effectiveness-crossflow-cmin-mixed": ("crossflow-f-factor-one-mixed", {"mixed": "this"}),
    "effectiveness-crossflow-both-mixed": ("crossflow-f-factor-both-mixed", {}),
}


@pytest.mark.parametrize(("card", "pair"), PAIRS.items())
def test_factor_and_effectiveness_agree(card: str, pair: tuple[str, dict[str, object]]) -> None:
    """F is the transfer units of counterflow over those of the arrangement, at one and the same effectiveness.

    Beyond where the effectiveness hardly rises (a thousandth for a transfer unit) the inverse has no digits.
    """
    name, more = pair
    seen = 0
    for count, ratio in itertools.product((0.05, 0.3, 0.8, 1.5, 2.2), RATIOS):
        reached = result(card, NTU=count, C_r=ratio)
        rise = result(card, NTU=count * 1.001, C_r=ratio) - reached
        if rise / (0.001 * count) < 1e-3:
            continue
        factor = factor_of(name, reached, ratio, **more)
        counter = brentq(
            lambda n, ratio=ratio, reached=reached: (
                result("effectiveness-counterflow", NTU=n, C_r=ratio) - reached
            ),
            1e-6,
            50.0,
            xtol=1e-14,
        )
        assert factor == pytest.approx(counter / count, rel=1e-9)
        seen += 1
    assert seen >= 25


def test_shells_of_both_cards_agree() -> None:
    for shells, count, ratio in itertools.product((2, 4), (1.0, 2.5), (0.5, 1.0)):
        reached = result("effectiveness-shell-and-tube", NTU=count, C_r=ratio, N_s=shells)
        factor = result("bowman-1940-f-factor", P=reached, R=ratio, N_s=shells)
        counter = (
            reached / (1 - reached)
            if ratio == 1
            else math.log((1 - reached * ratio) / (1 - reached)) / (1 - ratio)
        )
        assert factor == pytest.approx(counter / count, rel=1e-12)


def test_temperatures_that_no_area_reaches_have_no_factor() -> None:
    for name, more in (
        ("crossflow-f-factor-both-mixed", {}),
        ("crossflow-f-factor-one-mixed", {"mixed": "other"}),
        ("bowman-1940-f-factor", {}),
    ):
        assert math.isnan(result(name, P=0.75, R=1.0, **more))


def test_a_row_of_units_is_solved_at_once() -> None:
    """Each sample of an array is what it is alone, also through the solved line with its sum."""
    program = LIBRARY.program("crossflow-f-factor-both-unmixed")
    P, R = np.array([0.2, 0.45, 0.6, 0.97]), np.array([0.4, 1.0, 0.9, 1.0])
    together = evaluate_program(program, {"P": P, "R": R})[program.result]
    alone = [
        float(evaluate_program(program, {"P": p, "R": r})[program.result]) for p, r in zip(P, R, strict=True)
    ]
    assert np.array_equal(together, alone, equal_nan=True)


def test_the_slope_of_a_solved_line_goes_through_its_sum() -> None:
    """Against central differences; 1e-6 is what they can show at a step of 1e-6."""
    program = LIBRARY.program("crossflow-f-factor-both-unmixed")
    assigned = {**program.constants, "P": np.array(0.5), "R": np.array(0.8)}
    slopes = {name: {name: np.array(1.0)} for name in ("P", "R")}
    run(program.steps, assigned, slopes)
    for name in ("P", "R"):
        near = [
            result(
                "crossflow-f-factor-both-unmixed", **{"P": 0.5, "R": 0.8, name: float(assigned[name]) + step}
            )
            for step in (-1e-6, 1e-6)
        ]
        assert slopes[program.result][name] == pytest.approx((near[1] - near[0]) / 2e-6, rel=1e-6)


# --- growth -------------------------------------------------------------------------------------------


def grown(rate: Callable[[float], float], seconds: float) -> float:
    """The resistance after a time from the clean surface, by integration to 1e-12."""
    path = solve_ivp(lambda _, R: [rate(R[0])], (0, seconds), [0.0], method="DOP853", rtol=1e-12, atol=1e-19)
    return float(path.y[0, -1])


@pytest.mark.parametrize("days", [1.0, 40.0, 300.0])
def test_growth_is_the_integral_of_its_rate(days: float) -> None:
    seconds = days * DAY
    for R_inf, tau in ((3e-4, 60 * DAY), (9e-4, 15 * DAY)):
        assert result("kern-seaton-1959", t_s=seconds, R_inf=R_inf, tau=tau) == pytest.approx(
            grown(lambda R, R_inf=R_inf, tau=tau: (R_inf - R) / tau, seconds), rel=1e-10
        )
    for a, b in ((6e-11, 4000.0), (2e-10, 200.0)):
        assert result("fouling-falling-rate", t_s=seconds, a=a, b=b) == pytest.approx(
            grown(lambda R, a=a, b=b: a / (1 + b * R), seconds), rel=1e-10
        )


def test_growth_starts_alike_and_waits_for_its_induction() -> None:
    """Early on a falling and a resting growth are linear at their first rate: the second order is t/tau/2."""
    rate, early = 5e-12, 60.0
    linear = result("fouling-linear", t_s=early, r=rate)
    assert result("kern-seaton-1959", t_s=early, R_inf=rate * 60 * DAY, tau=60 * DAY) == pytest.approx(
        linear, rel=1e-5
    )
    assert result("fouling-falling-rate", t_s=early, a=rate, b=1000.0) == pytest.approx(linear, rel=1e-5)
    for name, more in (
        ("fouling-linear", {"r": rate}),
        ("kern-seaton-1959", {"R_inf": 3e-4, "tau": 60 * DAY}),
        ("fouling-falling-rate", {"a": rate, "b": 1000.0}),
    ):
        late = result(name, t_s=50 * DAY, t_ind=20 * DAY, **more)
        assert late == pytest.approx(result(name, t_s=30 * DAY, **more), rel=ROUNDING)
        assert result(name, t_s=10 * DAY, t_ind=20 * DAY, **more) == 0.0


# --- cleaning -----------------------------------------------------------------------------------------


def rising(growth: float) -> Callable[[float], float]:
    return lambda seconds: growth * seconds


def resting(final: float, tau: float) -> Callable[[float], float]:
    return lambda seconds: -final * math.expm1(-seconds / tau)


def mean_cost(loss: Callable[[float], float], cost: float, cleaning: float, interval: float) -> float:
    return (cost + quad(loss, 0, interval, epsabs=0, epsrel=1e-12)[0]) / (interval + cleaning)


def test_no_other_interval_costs_less() -> None:
    """The mean cost rate a hundredth before and after the interval is higher; and it equals the loss rate there."""
    for cost, cleaning, growth in ((5000.0, 0.5 * DAY, 1e-9), (20000.0, 0.0, 7e-10)):
        best = result("cleaning-interval-linear", C_c=cost, a=growth, t_c=cleaning)
        loss = rising(growth)
        costs = [mean_cost(loss, cost, cleaning, best * part) for part in (0.99, 1.0, 1.01)]
        assert costs[1] < min(costs[0], costs[2])
        assert costs[1] == pytest.approx(loss(best), rel=1e-9)
    for cost, cleaning, final, tau in ((5000.0, DAY, 0.005, 60 * DAY), (100.0, 0.1 * DAY, 0.01, 30 * DAY)):
        best = result("cleaning-interval-asymptotic", C_c=cost, L_inf=final, tau=tau, t_c=cleaning)
        loss = resting(final, tau)
        costs = [mean_cost(loss, cost, cleaning, best * part) for part in (0.99, 1.0, 1.01)]
        assert costs[1] < min(costs[0], costs[2])
        assert costs[1] == pytest.approx(loss(best), rel=1e-9)


def test_a_cleaning_that_costs_more_than_fouling_loses_has_no_interval() -> None:
    assert math.isnan(result("cleaning-interval-asymptotic", C_c=30000.0, L_inf=0.005, tau=60 * DAY, t_c=DAY))


def test_plant_data_below_zero_are_kept() -> None:
    """1/U less 1/U_c by hand: 1/500 - 1/400 m^2 K/W."""
    found = values("fouling-from-plant-data", Q_h=1e6, Q_c=1e6, A=100.0, F=1.0, LMTD=20.0, U_c=400.0)
    assert found["R_f"] == pytest.approx(1 / 500 - 1 / 400, rel=1e-12)
    assert found["closure"] == 0.0
