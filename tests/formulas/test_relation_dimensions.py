"""Dimensions pushed through the tree."""

from fractions import Fraction

import pytest

from calcbook.formulas import (
    DIMENSIONLESS,
    RelationFault,
    dimension,
    dimension_text,
    parse_expression,
    partial,
)


def base(*exponents):
    return tuple(map(Fraction, exponents))


LENGTH, MASS, TIME, KELVIN = (base(*(int(i == k) for i in range(5))) for k in range(4))
DIMENSIONS = {
    "d": LENGTH,
    "L": LENGTH,
    "v": base(1, 0, -1, 0, 0),
    "rho": base(-3, 1, 0, 0, 0),
    "mu": base(-1, 1, -1, 0, 0),
    "T_1": KELVIN,
    "T_2": KELVIN,
    "h": base(0, 1, -3, -1, 0),
    "Re": DIMENSIONLESS,
    "n": DIMENSIONLESS,
    "heated": DIMENSIONLESS,
    "wall.k": base(1, 1, -3, -1, 0),
}


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("rho*v*d/mu", "1"),
        ("sqrt(d*L)", "m"),
        ("d**(1/3)", "m^(1/3)"),
        ("d**-(2/3)", "m^(−2/3)"),
        ("d**0.25*L**(1 - 0.25)", "m"),
        ("Re**n", "1"),
        ("h*(T_1 - T_2)", "kg·s^−3"),
        ("max(0, T_1 - T_2)", "K"),
        ("0 if heated else d", "m"),
        ("d if T_1 > T_2 and v > 0 else -L", "m"),
        ("d + 0", "m"),
        ("abs(mu)", "kg·m^−1·s^−1"),
        ("exp(-d/L) + ln(Re)", "1"),
        ("sigma*T_1**4/h", "K"),
        ("g_n*d", "m^2·s^−2"),
        ("pi*d**2/4", "m^2"),
        ("mean(wall.k, T_1, T_2)/d", "kg·s^−3·K^−1"),
        ("d >= L", "1"),
        ("0", "1"),
    ],
)
def test_dimension(text, expected):
    assert dimension_text(dimension(parse_expression(text), DIMENSIONS)) == expected


@pytest.mark.parametrize(
    ("text", "column", "words"),
    [
        ("d + v", 5, "a sum joins m and m·s^−1"),
        ("Re + d - L", 6, "a sum joins 1 and m"),
        ("1 + T_1", 5, "a sum joins 1 and K"),
        ("d > 3", 5, "a comparison joins m and 1"),
        ("max(d, T_1)", 8, "max joins m and K"),
        ("d if heated else v", 18, "a choice joins m and m·s^−1"),
        ("d if v else L", 6, "a condition is m·s^−1, not 1"),
        ("exp(d)", 5, "the argument of exp is m, not 1"),
        ("ln(Re*v)", 4, "the argument of ln is m·s^−1, not 1"),
        ("Re**d", 5, "an exponent is m, not 1"),
        ("d**n", 4, "m is raised to an exponent that is no fixed fraction"),
        ("d**(2**0.5)", 5, "m is raised to an exponent that is no fixed fraction"),
        ("d**1e300", 4, "m is raised to an exponent that is no fixed fraction"),
        ("mean(wall.k, T_1, d)", 19, "a mean joins K and m"),
    ],
)
def test_slip_is_named_with_its_column(text, column, words):
    with pytest.raises(RelationFault) as caught:
        dimension(parse_expression(text), DIMENSIONS)
    assert caught.value.code == "dimension-slip"
    assert (caught.value.column, caught.value.message) == (column, words)
    assert caught.value.expected


@pytest.mark.parametrize(
    "text", ["rho*v**2*d", "sqrt(d*L)", "max(0, d)*v", "d**1.5/L", "mean(wall.k, T_1, T_2)"]
)
def test_a_derivative_has_the_dimension_of_a_quotient(text):
    relation = parse_expression(text)
    for symbol in relation.symbols:
        if symbol != "wall.k":
            expected = tuple(
                a - b for a, b in zip(dimension(relation, DIMENSIONS), DIMENSIONS[symbol], strict=True)
            )
            assert dimension(partial(relation, symbol), DIMENSIONS) == expected


def test_a_symbol_without_dimension_is_a_missing_key():
    with pytest.raises(KeyError):
        dimension(parse_expression("x + 1"), {})


def test_what_is_remembered_of_a_tree_belongs_to_the_dimensions_it_was_asked_with():
    relation = parse_expression("x*y + z")
    area, volume = base(2, 0, 0, 0, 0), base(3, 0, 0, 0, 0)
    for _ in range(2):
        assert dimension(relation, {"x": LENGTH, "y": LENGTH, "z": area}) == area
        assert dimension(relation, {"x": LENGTH, "y": area, "z": volume}) == volume
        with pytest.raises(RelationFault):
            dimension(relation, {"x": LENGTH, "y": LENGTH, "z": LENGTH})
    # New objects for every question: the memory of a tree does not grow without end, and does not err.
    for power in range(1, 300):
        asked = {"x": base(power, 0, 0, 0, 0), "y": base(1, 0, 0, 0, 0), "z": base(power + 1, 0, 0, 0, 0)}
        assert dimension(relation, asked) == base(power + 1, 0, 0, 0, 0)
    assert len(relation.tree.memory[dimension]) <= 64
