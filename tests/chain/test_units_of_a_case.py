"""One case typed in SI and in US customary units gives the same figures."""

from __future__ import annotations

import tempfile
from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_calculations import COOLER_REST, chain_of, givens

from calcbook.chain.solve import solve

# Exact: 1 in 25.4 mm, 1 lb 0.45359237 kg, 1 Btu (International Table) 1055.05585262 J, g_n 9.80665 m/s^2.
INCH, FOOT, POUND, BTU = (
    Fraction("0.0254"),
    Fraction("0.3048"),
    Fraction("0.45359237"),
    Fraction("1055.05585262"),
)
PSI = POUND * Fraction("9.80665") / INCH**2
COEFFICIENT = BTU / 3600 / FOOT**2 / Fraction(5, 9)


def text(value: Fraction, unit: str) -> str:
    """A figure with 20 digits, so that only the reading rounds it."""
    digits = f"{value.numerator * 10**24 // value.denominator:025d}"
    return f"{digits[:-24]}.{digits[-24:]} {unit}"


hundredths = st.integers(0, 100).map(lambda part: Fraction(part, 100))


@settings(max_examples=25, deadline=None)
@given(parts=st.tuples(*[hundredths] * 8))
def test_customary_and_si(parts):
    """1e-12: figures are rounded once on reading in either system, and U weighs each at most by one."""
    bore, flow, warm, cold, inner, outer, film, pressure = parts
    d_i, d_o = Fraction(10) + 10 * bore, Fraction(24)  # mm
    stated = {
        "d_i": (d_i / 1000, "m", INCH, "in"),
        "d_o": (d_o / 1000, "m", INCH, "in"),
        "L": (Fraction("4.88"), "m", FOOT, "ft"),
        "m_hot": (4 + 20 * flow, "kg/s", POUND / 3600, "lb/h"),
        "p_hot": (400_000 + 100_000 * pressure, "Pa", PSI, "psia"),
        "R_fi": (inner * Fraction("4e-4"), "m^2 K/W", 1 / COEFFICIENT, "h ft^2 degF/Btu"),
        "R_fo": (outer * Fraction("4e-4"), "m^2 K/W", 1 / COEFFICIENT, "h ft^2 degF/Btu"),
        "h_o": (1000 + 5000 * film, "W/(m^2 K)", COEFFICIENT, "Btu/(h ft^2 degF)"),
    }
    temperatures = {"T_hot": Fraction(65) + 20 * warm, "T_cold": Fraction(10) + 30 * cold}
    si = {symbol: text(value, unit) for symbol, (value, unit, _, _) in stated.items()}
    si |= {symbol: text(value, "degC") for symbol, value in temperatures.items()}
    us = {symbol: text(value / factor, unit) for symbol, (value, _, factor, unit) in stated.items()}
    us |= {symbol: text(value * Fraction(9, 5) + 32, "degF") for symbol, value in temperatures.items()}
    results = []
    for figures in (si, us):
        with tempfile.TemporaryDirectory() as folder:
            chain = chain_of(Path(folder), givens(**figures, N="62") + COOLER_REST)
            solution = solve(chain, chain.case_inputs(""), "service")
            names = ("U", "UA", "heat flux", "heat flow", "R total")
            results.append([solution.number(chain.results[name]) for name in names])
    assert results[0] == pytest.approx(results[1], rel=1e-12)
