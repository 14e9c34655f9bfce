"""The written line, the line with values, and the way back."""

from decimal import Decimal

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from relation_trees import NAMES, trees

from calcbook.formulas import (
    CONSTANTS,
    Conditional,
    evaluate,
    number_text,
    parse_expression,
    parse_number,
    parse_relation,
    parse_written,
    write,
    write_with_values,
)

THIN = "\u2009"


@given(trees)
def test_written_line_reads_back_to_the_same_tree(tree):
    assert parse_written(write(tree)) == tree


@pytest.mark.parametrize(
    ("typed", "written"),
    [
        ("rho*v*d/mu", "ρ·v·d/μ"),
        ("0.023*Re**0.8*Pr**n", "0.023·Re^0.8·Pr^n"),
        ("m_hot/(rho*N*pi/4*d_i**2)", "m_hot/(ρ·N·π/4·d_i^2)"),
        ("(1.82*log10(Re) - 1.64)**-2", "(1.82·log10(Re) − 1.64)^−2"),
        ("a/(b*c)", "a/(b·c)"),
        ("(a/b)*c", "a/b·c"),
        ("a*(b/c)", "a·(b/c)"),
        ("a - (b - c)", "a − (b − c)"),
        ("(a - b) - c", "a − b − c"),
        ("(-a)**2", "(−a)^2"),
        ("-a**2", "−a^2"),
        ("a**b**c", "a^b^c"),
        ("(a**b)**c", "(a^b)^c"),
        ("a*(-b)", "a·(−b)"),
        ("a + -b*c", "a + (−b·c)"),
        ("a**(1/3)", "a^(1/3)"),
        ("2*1e-4", "2·1e−4"),
        ("(1e-4)**2", "(1e−4)^2"),
        ("mu_s/mu", "μ_s/μ"),
        ("g_n*beta*dT_max*lam", "g·β·ΔT_max·λ"),
        ("sqrt(ln(x))", "sqrt(ln(x))"),
        ("0.4 if heated else 0.3", "0.4 if heated, else 0.3"),
        ("(1 if a else 2)*3", "(1 if a, else 2)·3"),
        ("1 if a else 2 if b else 3", "1 if a, else 2 if b, else 3"),
        ("0 < x <= 3 and not (a or y != 2)", "0 < x ≤ 3 and not (a or y ≠ 2)"),
        ("min(a, b) == c", "min(a, b) = c"),
        ("mean(wall.k, T_1, T_2)", "mean(wall.k, T_1, T_2)"),
    ],
)
def test_fewest_brackets(typed, written):
    assert write(parse_expression(typed)) == written
    assert parse_written(written) == parse_expression(typed).tree


def test_other_names_for_symbols():
    relation = parse_relation("q = h*x")
    names = {"x": "temperature_difference"}
    assert write(relation, names) == "h·temperature_difference"
    assert parse_written(write(relation, names), names) == relation.tree


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        (2.675, 3, "2.68"),
        (2.665, 3, "2.66"),
        (-2.675, 3, "−2.68"),
        (0.00018, 5, "1.8e−4"),
        (62.0, 5, "62"),
        (0.023, 5, "0.023"),
        (62043.4, 5, f"62{THIN}043"),
        (1234567.0, 7, f"1{THIN}234{THIN}567"),
        (5235.0, 3, "5240"),
        (975.5701, 6, "975.570"),
        (0.000382487, 5, "3.8249e−4"),
        (0.00099999999, 5, "0.0010000"),
        (9999999.9, 5, "1.0000e7"),
        (12345678.0, 5, "1.2346e7"),
        (1e22, 5, "1e22"),
        (0.0, 5, "0"),
        (-0.0, 5, "0"),
        (62043.25, 7, f"62{THIN}043.25"),
    ],
)
def test_number_text(value, digits, text):
    assert number_text(value, digits) == text


@given(st.floats(-1e307, 1e307), st.integers(1, 17))
def test_printed_number_reads_back_within_half_a_unit(value, digits):
    read = parse_number(number_text(value, digits))
    exact = Decimal(repr(value))
    unit = Decimal(1).scaleb(exact.adjusted() - digits + 1) if exact else Decimal(0)
    # The text is within half a unit; reading it to binary moves it by less than 1e-15 of itself.
    assert abs(Decimal(repr(read)) - exact) <= unit / 2 + abs(exact) * Decimal("1e-15")
    assert parse_number(number_text(value, 17)) == value


@pytest.mark.parametrize("text", ["", "1,5", "nan", "yes", "1e9999", "٣", "--2"])
def test_a_text_that_is_no_number_is_refused(text):
    with pytest.raises(ValueError):
        parse_number(text)


def test_operands_gain_digits_together_until_the_line_gives_the_result():
    relation = parse_expression("T_1 - T_2")
    assert (
        write_with_values(relation, {"T_1": 341.27148, "T_2": 341.24958}, "0.0219") == "341.2715 − 341.2496"
    )
    reynolds = parse_relation("Re = rho*v*d_i/mu")
    values = {"rho": 975.5703, "v": 1.544437, "d_i": 0.01575, "mu": 3.824871e-4}
    line = write_with_values(reynolds, values, f"62{THIN}043")
    assert line == "975.570·1.54444·0.01575/3.82487e−4"


def test_values_put_in():
    friction = parse_relation("f = (1.82*log10(Re) - 1.64)**-2")
    line = write_with_values(friction, {"Re": 62043.12}, "0.019934")
    assert line == f"(1.82·log10(62{THIN}043) − 1.64)^−2"
    exponent = parse_relation("n = 0.4*x if heated else 0.3*x**2")
    assert write_with_values(exponent, {"heated": np.bool_(True), "x": 2.0}, "0.8") == "0.4·2"
    assert write_with_values(exponent, {"heated": False, "x": -2.0}, "1.2") == "0.3·(−2)^2"
    assert (
        write_with_values(parse_expression("heated and x > 2"), {"heated": True, "x": 3.0}, None)
        == "yes and 3 > 2"
    )
    assert write_with_values(parse_expression("pi*g_n*x"), {"x": np.array(1.5)}, "46.213") == "π·9.80665·1.5"
    assert write_with_values(parse_expression("x**2"), {"x": 1.8e-4}, None) == "(1.8e−4)^2"


def test_a_limit_is_written_with_digits_that_show_its_verdict():
    assert write_with_values(parse_expression("h >= 600"), {"h": 599.999}, None) == "599.999 ≥ 600"


def test_zeros_that_end_a_whole_number_may_hold_the_place():
    relation = parse_expression("h*x")
    assert write_with_values(relation, {"h": 5235.4, "x": 1.0}, "5240") == "5235.4·1"
    assert write_with_values(relation, {"h": 62000.4, "x": 1.0}, f"62{THIN}000") == f"62{THIN}000·1"


def test_a_result_that_does_not_follow_is_refused():
    with pytest.raises(ValueError, match="does not give"):
        write_with_values(parse_expression("x*y"), {"x": 2.0, "y": 3.0}, "7")


class _Column:
    def value(self, temperature):
        return 10 + 0.02 * temperature

    def mean(self, first, second):
        return 10 + 0.01 * (first + second)

    def slope(self, temperature):
        return 0.02 + 0 * temperature


def test_a_column_used_as_a_whole_keeps_its_name():
    relation = parse_expression("mean(wall.k, T_1, T_2)/t")
    values = {"wall.k": _Column(), "T_1": 350.0, "T_2": 330.0, "t": 0.002}
    assert write_with_values(relation, values, "8400") == "mean(wall.k, 350, 330)/0.002"


# A symbol as exponent and the same number typed as exponent may differ by an ulp in numpy's power.
ROUNDING_ROOM = Decimal("1.000001")


def shown_decimal(printed):
    return Decimal(printed.replace(THIN, "").replace("\u2212", "-"))


def last_digit_unit(printed, exact):
    """What the last printed digit counts; zeros that end a whole number count where the value needs them."""
    shown = shown_decimal(printed)
    unit = Decimal(1).scaleb(shown.as_tuple().exponent)
    while abs(Decimal(repr(exact)) - shown) * 2 > unit:
        unit *= 10
    assert abs(shown) >= unit or shown == 0
    return unit


_magnitudes = st.floats(1e-6, 1e8) | st.floats(-1e3, -1e-3) | st.integers(1, 50).map(float)


@given(
    trees, st.lists(_magnitudes, min_size=len(NAMES), max_size=len(NAMES)), st.booleans(), st.integers(3, 6)
)
def test_line_with_values_evaluates_to_the_printed_result(tree, drawn, heated, digits):
    values = dict(zip(NAMES, drawn, strict=True)) | {"ideal.a_1": drawn[0], "heated": heated, "liquid": True}
    exact = float(evaluate(tree, values))
    assume(np.isfinite(exact) and (exact == 0 or 1e-280 < abs(exact) < 1e280))
    printed = number_text(exact, digits)
    line = write_with_values(tree, values, printed)
    read = parse_written(line)
    again = Decimal(repr(float(evaluate(read, {"yes": True, "no": False}))))
    assert set(read.symbols) <= {"yes", "no"} and not isinstance(read, Conditional)
    assert abs(again - shown_decimal(printed)) <= last_digit_unit(printed, exact) / 2 * ROUNDING_ROOM


def test_constants_are_written_as_their_values():
    for name, value in CONSTANTS.items():
        line = write_with_values(parse_expression(f"2*{name}"), {}, None)
        assert float(evaluate(parse_written(line), {})) == 2 * value
