"""Derivative trees against central differences."""

import numpy as np
import pytest

from calcbook.formulas import RelationFault, evaluate, parse_expression, parse_relation, partial, write


class QuadraticColumn:
    """A conductivity a + b T + c T^2 with its exact mean and slope."""

    a, b, c = 10.0, 0.02, 1e-5

    def value(self, t):
        return self.a + self.b * t + self.c * t * t

    def slope(self, t):
        return self.b + 2 * self.c * t

    def mean(self, s, t):
        return self.a + self.b * (s + t) / 2 + self.c * (s * s + s * t + t * t) / 3


TEXTS = [
    "x**3 - 2*x + 1/x",
    "x**y + y**x + x**x",
    "0.023*x**0.8*y**(1/3)/(1 + x*y)",
    "-x/(y - 3*x)",
    "sqrt(x) + exp(-x*y) + expm1(x)",
    "ln(x*y) + log10(x + y) + log1p(x)",
    "sin(x)*cos(y) + tan(x/3)",
    "asin(x/3) + acos(x/4) + atan(x*y)",
    "sinh(x) - cosh(x*y) + tanh(x - y)",
    "abs(x - 3) + abs(y*x)",
    "min(x, y, x*y) + max(2*x, y, 1)",
    "i0e(x) + i1e(x*y) + i0e(-x) + i1e(-x)",
    "k0e(x) + k1e(x*y)",
    "gamma_p(2.5, x*y) + gamma_p(1, x*x)",
    "x**2 if x > y else y*x",
    "(1.82*log10(x + 5) - 1.64)**-2",
    "mean(wall.k, 100*x, 60*y) + mean(wall.k, 300, 90*x)",
]


@pytest.mark.parametrize("text", TEXTS)
@pytest.mark.parametrize("symbol", ["x", "y"])
def test_against_central_differences(text, symbol):
    relation = parse_expression(text)
    random = np.random.default_rng(5)
    values = {
        "x": random.uniform(0.3, 2.5, 40),
        "y": random.uniform(0.3, 2.5, 40),
        "wall.k": QuadraticColumn(),
    }
    derivative = np.broadcast_to(evaluate(partial(relation, symbol), values), (40,))
    step = 1e-5
    ends = [evaluate(relation, {**values, symbol: values[symbol] + sign * step}) for sign in (1, -1)]
    difference = (ends[0] - ends[1]) / (2 * step)
    size = np.abs(ends[0]) + np.abs(difference) + 1.0
    # Central differences: step**2 times the third derivative (some 100 here), and rounding, eps/step = 2e-11.
    assert np.max(np.abs(np.broadcast_to(difference, (40,)) - derivative) / size) < 3e-8


def test_simplified():
    expected = {
        ("x", "x"): "1",
        ("y", "x"): "0",
        ("3*x + y", "x"): "3",
        ("x**2", "x"): "2·x",
        ("x**0.8", "x"): "0.8·x^−0.2",
        ("x/d", "x"): "1/d",
        ("a - x", "x"): "−1",
        ("Re > x", "x"): "0",
        ("1 if x > 2 else 1", "x"): "0",
        ("ln(x)", "x"): "1/x",
    }
    for (text, symbol), line in expected.items():
        assert write(partial(parse_expression(text), symbol)) == line


def test_powers_are_safe_at_zero():
    for text, slope in {"x**2": 0.0, "x**1": 1.0, "3*x**1.5": 0.0, "(x + 0*y)**3": 0.0}.items():
        assert evaluate(partial(parse_expression(text), "x"), {"x": 0.0, "y": 1.0}) == slope


def test_bessel_functions_are_smooth_at_zero():
    # I1(x) = x/2 + ..., so the scaled function starts with slope 1/2 (Abramowitz and Stegun 1964, 9.6.10).
    assert evaluate(partial(parse_expression("i1e(x)"), "x"), {"x": 0.0}) == 0.5


def test_mean_between_equal_temperatures_has_half_the_slope():
    column = QuadraticColumn()
    slope = partial(parse_expression("mean(wall.k, T, 350)"), "T")
    for temperature in (350.0, 350.0 + 1e-9, 350.001, 350.0035, 350.1):
        expected = column.b / 2 + column.c * (2 * temperature + 350.0) / 3
        # Half the slope at the middle is wrong by c*dT/6 (6e-9 here); the quotient loses eps*k/dT (1e-12).
        found = evaluate(slope, {"T": temperature, "wall.k": column})
        assert float(found) == pytest.approx(expected, abs=1e-8)


def test_derivatives_are_kept_with_the_tree():
    relation = parse_relation("Nu = 0.023*Re**0.8")
    assert partial(relation, "Re") is partial(relation, "Re")


@pytest.mark.parametrize(("text", "symbol"), [("gamma_p(x, 2)", "x"), ("mean(x.k, 1, 2)", "x.k")])
def test_what_has_no_derivative_is_refused(text, symbol):
    with pytest.raises(RelationFault) as caught:
        partial(parse_expression(text), symbol)
    assert caught.value.code == "derivative-unknown"
    assert caught.value.column == 1
