"""First-order propagation: published examples of JCGM 100:2008, closed forms, shares, coverage factors."""

from __future__ import annotations

import math

import numpy as np
import pytest
from plain_models import Plain, slopes_of

from calcbook.uncertainty.budget import coverage_factor, first_order, is_nonlinear, wide_slopes


def end_gauge() -> tuple[list[Plain], dict[str, float]]:
    """JCGM 100:2008, H.1: the lines of table H.1, lengths in nm; figures from memory."""
    figures = [
        Plain("l_S", 50_000_623.0, 25.0, 18),  # certificate: expanded 0.075 µm, k = 3
        Plain("d", 215.0, 9.7, 25.6),  # comparison of the two gauges
        Plain("delta alpha", 0.0, 0.58e-6, 50),  # difference of expansion, per °C
        Plain("delta theta", 0.0, 0.029, 2),  # difference of temperature, °C
    ]
    slopes = {"l_S": 1.0, "d": 1.0, "delta alpha": 50e6 * 0.1, "delta theta": 50e6 * 11.5e-6}
    return figures, slopes


def test_end_gauge_of_the_guide() -> None:
    found = first_order(*end_gauge())
    assert found.standard == pytest.approx(32.0, abs=0.5)  # H.1.4: u_c = 32 nm; from memory
    assert math.floor(found.degrees) == 16  # H.1.6: effective degrees of freedom 16; from memory
    factor = coverage_factor(0.99, found.degrees)
    assert factor == pytest.approx(2.92, abs=0.005)  # H.1.6 and table G.2: t_99(16) = 2.92; from memory
    assert factor * found.standard == pytest.approx(93.0, abs=1.0)  # H.1.6: 93 nm; from memory


def test_resistance_and_reactance_of_the_guide() -> None:
    """JCGM 100:2008, H.2: five simultaneous readings (table H.2, from memory), correlated means."""
    volt = np.array([5.007, 4.994, 5.005, 4.990, 4.999])
    milliampere = np.array([19.663, 19.639, 19.640, 19.685, 19.678])
    radian = np.array([1.0456, 1.0438, 1.0468, 1.0428, 1.0433])
    readings = {"V": volt, "I": 1e-3 * milliampere, "phi": radian}
    figures = [Plain(name, x.mean(), x.std(ddof=1) / math.sqrt(5)) for name, x in readings.items()]
    pairs = (("V", "I"), ("V", "phi"), ("I", "phi"))
    r = {frozenset(pair): np.corrcoef(readings[pair[0]], readings[pair[1]])[0, 1] for pair in pairs}
    assert [round(r[frozenset(pair)], 2) for pair in pairs] == [-0.36, 0.86, -0.65]  # table H.2

    def model(x):
        impedance = x["V"] / x["I"]
        return {"R": impedance * np.cos(x["phi"]), "X": impedance * np.sin(x["phi"]), "Z": impedance}

    inputs = {one.id: np.array([one.value]) for one in figures}
    # Table H.3: value and combined standard uncertainty in ohm; from memory. The document works from figures
    # rounded to two digits, which is worth 0.001 ohm of an uncertainty of 0.3 ohm.
    for name, value, standard in (("R", 127.732, 0.071), ("X", 219.847, 0.295), ("Z", 254.260, 0.236)):
        assert float(model(inputs)[name][0]) == pytest.approx(value, abs=0.0005)
        found = first_order(figures, slopes_of(model, figures, name), r)
        assert found.standard == pytest.approx(standard, abs=0.001)
        assert all(math.isnan(line.share) for line in found.lines)


def test_two_correlated_figures_in_closed_form() -> None:
    figures = [Plain("a", 3.0, 0.2), Plain("b", 5.0, 0.3)]
    slopes = {"a": 2.0, "b": -1.0}
    for r in (-1.0, -0.4, 0.0, 0.7, 1.0):
        found = first_order(figures, slopes, {frozenset("ab"): r})
        variance = 0.4**2 + 0.3**2 - 2.0 * 0.4 * 0.3 * r
        assert found.standard == pytest.approx(math.sqrt(variance), rel=1e-12)


def test_full_correlation_can_cancel() -> None:
    figures = [Plain("a", 3.0, 0.2), Plain("b", 5.0, 0.2)]
    found = first_order(figures, {"a": 1.0, "b": -1.0}, {frozenset("ab"): 1.0})
    assert found.standard == pytest.approx(0.0, abs=1e-12)


def test_shares_add_up_and_a_figure_without_slope_has_no_line() -> None:
    figures = [Plain(name, 1.0, 0.1 * place) for place, name in enumerate("abcdefg", 1)]
    slopes = {name: 0.3 * place for place, name in enumerate("abcd", 1)}
    found = first_order(figures, slopes | {"e": 0.0, "f": 1e-16})
    assert [line.id for line in found.lines] == list("abcd")
    assert sum(line.share for line in found.lines) == pytest.approx(1.0, rel=1e-12)


def test_overall_coefficient_of_the_method_notes() -> None:
    """Two films and two deposits with half-widths as standard uncertainties; method notes G1: 76.4707."""
    figures = [
        Plain("h_i", 4000.0, 400.0),
        Plain("h_o", 1500.0, 300.0),
        Plain("R_fi", 1.76e-4, 5e-5),
        Plain("R_fo", 1.76e-4, 5e-5),
    ]
    d_i, d_o, k = 0.0148, 0.01905, 45.0

    def model(x):
        inner = d_o / d_i * (1.0 / x["h_i"] + x["R_fi"])
        return {"y": 1.0 / (inner + d_o * np.log(d_o / d_i) / (2 * k) + x["R_fo"] + 1.0 / x["h_o"])}

    found = first_order(figures, slopes_of(model, figures))
    assert found.standard == pytest.approx(76.4707, abs=1e-3)
    wide = first_order(figures, wide_slopes(model, figures)["y"])
    assert wide.standard == pytest.approx(77.1508, abs=1e-3)  # the same with a step of one uncertainty
    assert not is_nonlinear(found.standard, wide.standard)


def test_a_curved_model_is_told() -> None:
    figures = [Plain("x", 1.0, 0.4)]
    model = lambda x: {"y": x["x"] ** 3}  # noqa: E731
    found = first_order(figures, slopes_of(model, figures))
    wide = first_order(figures, wide_slopes(model, figures)["y"])
    # (f(x+u) - f(x-u))/(2u) of a cube is 3x² + u²: 5.3 % above the slope.
    assert wide.standard / found.standard == pytest.approx(1.0 + 0.16 / 3.0, rel=1e-5)
    assert is_nonlinear(found.standard, wide.standard)
    assert is_nonlinear(found.standard, math.nan)


@pytest.mark.parametrize(("wide", "told"), [(1.052, False), (1.053, True), (0.951, False), (0.949, True)])
def test_a_change_is_held_against_the_larger_of_both_slopes(wide: float, told: bool) -> None:
    """5 % of the larger one: 1.0526 above 1, and 0.95 below it."""
    assert is_nonlinear(1.0, wide) is told and is_nonlinear(wide, 1.0) is told


def test_degrees_of_freedom_are_those_of_independent_figures_alone() -> None:
    """JCGM 100:2008, G.4.1: the formula of Welch and Satterthwaite asks for independent figures."""
    figures = [Plain("a", 3.0, 0.2, 5), Plain("b", 5.0, 0.3, 8)]
    slopes = {"a": 2.0, "b": -1.0}
    by_hand = (0.4**2 + 0.3**2) ** 2 / (0.4**4 / 5 + 0.3**4 / 8)
    assert first_order(figures, slopes).degrees == pytest.approx(by_hand, rel=1e-12)
    assert math.isinf(first_order(figures, slopes, {frozenset("ab"): 0.4}).degrees)


@pytest.mark.parametrize(
    ("degrees", "coverage", "factor"),
    [
        (math.inf, 0.95, 1.960),  # JCGM 100:2008, table G.1; from memory
        (math.inf, 0.99, 2.576),  # table G.1; from memory
        (10, 0.95, 2.23),  # table G.2; from memory
        (5, 0.95, 2.57),  # table G.2; from memory
        (16.7, 0.95, 2.12),  # G.4.1: cut to 16; table G.2, from memory
    ],
)
def test_coverage_factors_of_the_guide(degrees: float, coverage: float, factor: float) -> None:
    assert coverage_factor(coverage, degrees) == pytest.approx(factor, abs=0.005)
