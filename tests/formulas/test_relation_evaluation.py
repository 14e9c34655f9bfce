"""Tree to numbers: values, lazy branches, and the same bits alone as among others."""

import math
import warnings

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from relation_trees import NAMES, trees

from calcbook.formulas import evaluate, evaluate_with_slopes, parse_expression, parse_relation, partial

# One relation per function and operation, with the interval its argument is drawn from.
BIT_RELATIONS = [
    *((f"{name}(x)", -20.0, 20.0) for name in ("exp", "expm1", "abs", "sin", "cos", "tan", "atan", "tanh")),
    *((f"{name}(x)", -20.0, 20.0) for name in ("sinh", "cosh", "i0e", "i1e")),
    *((f"{name}(x)", 1e-6, 1e6) for name in ("sqrt", "ln", "log10", "log1p", "k0e", "k1e")),
    *((f"{name}(x)", -1.0, 1.0) for name in ("asin", "acos")),
    *(
        (f"x**{power}", 1e-3, 1e5)
        for power in ("0.8", "2", "0.5", "-1", "(1/3)", "3", "-2", "0.25", "1", "0")
    ),
    *((text, 1e-3, 30.0) for text in ("x**n", "n**x", "x**(n + 1)", "2**x", "x**(n if x > y else 2)")),
    *((text, 1e-3, 30.0) for text in ("min(x, y, n)", "max(x, y)", "gamma_p(y, x)", "x*y/n - x + y")),
    *((text, 1e-3, 30.0) for text in ("ln(x)**n if x > 1 and y < 20 else exp(-x)", "x > y or x**n > 3")),
]


@pytest.mark.parametrize(("text", "low", "high"), BIT_RELATIONS)
def test_a_sample_alone_gives_the_bits_it_gives_among_others(text, low, high):
    relation = parse_expression(text)
    random = np.random.default_rng(11)
    exponents = np.array([0.5, 2.0, -1.0, 0.0, 1.0, 0.8, 3.0])
    for count in (*range(1, 71), 1000):
        x = random.uniform(low, high, count)
        y = random.uniform(0.1, 25.0, count)
        for n in (random.choice(exponents, count), float(random.choice(exponents))):
            among = evaluate(relation, {"x": x, "y": y, "n": n})
            spread = evaluate(
                relation, {"x": np.repeat(x, 2)[::2], "y": y, "n": np.broadcast_to(n, (count,))}
            )
            assert np.array_equal(among, spread, equal_nan=True)
            for index in range(0, count, 1 if count < 71 else 97):
                alone = {"x": x[index], "y": float(y[index]), "n": np.broadcast_to(n, (count,))[index]}
                assert np.array_equal(evaluate(relation, alone), among[index], equal_nan=True)


@given(trees, st.integers(0, 2**32 - 1))
def test_any_relation_gives_the_same_bits_alone(tree, seed):
    random = np.random.default_rng(seed)
    names = [*NAMES, "ideal.a_1"]
    values = {name: random.choice([0.0, 0.5, 2.0, -1.0, random.normal()], 5) for name in names}
    values |= {"heated": random.random(5) > 0.5, "liquid": True}
    among = np.broadcast_to(evaluate(tree, values), (5,))
    for index in range(5):
        alone = {name: np.broadcast_to(value, (5,))[index] for name, value in values.items()}
        assert np.array_equal(evaluate(tree, alone), among[index], equal_nan=True)


def test_values_against_the_standard_library():
    x, y = 0.37, 2.4
    expected = {
        "sqrt(x)": math.sqrt(x),
        "exp(x) + expm1(y)": math.exp(x) + math.expm1(y),
        "ln(x)*log10(y) - log1p(x)": math.log(x) * math.log10(y) - math.log1p(x),
        "sin(x) + cos(y)/tan(x)": math.sin(x) + math.cos(y) / math.tan(x),
        "asin(x) - acos(x) + atan(y)": math.asin(x) - math.acos(x) + math.atan(y),
        "sinh(x)*cosh(y) - tanh(x)": math.sinh(x) * math.cosh(y) - math.tanh(x),
        "-x**2 + min(x, y)*max(x, y, 3)": -(x**2) + x * 3,
        "abs(x - y)**-2": abs(x - y) ** -2,
        "pi*g_n*sigma": math.pi * 9.80665 * 5.670374419e-8,  # CODATA 2018
        "2**3**2": 512.0,
        "y if x > 1 else -y": -y,
    }
    for text, value in expected.items():
        # Two libraries of elementary functions differ by a few units in the last place.
        assert float(evaluate(parse_expression(text), {"x": x, "y": y})) == pytest.approx(value, rel=1e-14)


def test_special_functions_against_tables():
    # Abramowitz and Stegun, Handbook of Mathematical Functions (1964),
    # table 9.8, x = 1 (10 digits, from memory)
    for name, value in {
        "i0e": 0.4657596077,
        "i1e": 0.2079104154,
        "k0e": 1.1444630797,
        "k1e": 1.6361534863,
    }.items():
        assert float(evaluate(parse_expression(f"{name}(x)"), {"x": 1.0})) == pytest.approx(value, abs=1e-9)
    # P(1, x) = 1 - exp(-x), the same handbook, 6.5.1 with a = 1
    assert float(evaluate(parse_expression("gamma_p(1, x)"), {"x": 0.7})) == pytest.approx(
        -math.expm1(-0.7), rel=1e-14
    )


@given(trees, st.integers(0, 2**32 - 1), st.sampled_from(["mixed", "alike", "one"]))
def test_a_value_with_its_slopes_has_the_bits_of_each_alone(tree, seed, samples):
    # Samples that part at a condition, samples that all take one side of it, and a single one.
    random = np.random.default_rng(seed)
    names = [*NAMES, "ideal.a_1"]
    values = {name: random.choice([0.0, 0.5, 2.0, -1.0, random.normal()], 5) for name in names}
    values |= {"heated": random.random(5) > 0.5, "liquid": True}
    if samples != "mixed":
        shape = (5,) if samples == "alike" else ()
        values = {name: np.full(shape, np.broadcast_to(value, (5,))[0]) for name, value in values.items()}
    wanted = tuple(name for name in tree.symbols if name in ("x", "y", "Re"))
    with np.errstate(all="ignore"):
        value, slopes = evaluate_with_slopes(tree, wanted, values, {name: name for name in tree.symbols})
    assert np.array_equal(value, evaluate(tree, values), equal_nan=True)
    for symbol, slope in zip(wanted, slopes, strict=True):
        alone = evaluate(partial(tree, symbol), values)
        assert np.array_equal(*np.broadcast_arrays(slope, alone), equal_nan=True)


def test_what_value_and_slopes_have_in_common_is_worked_out_once():
    spy = _Spy()
    relation = parse_expression("mean(wall.k, x, y)/2 if x > 2 else x")
    names = {name: name for name in relation.symbols}
    at = {"x": np.array([1.0, 4.0, 6.0]), "y": np.array([2.0, 5.0, 9.0]), "wall.k": spy}
    value, (by_x, by_y) = evaluate_with_slopes(relation, ("x", "y"), at, names)
    assert spy.asked == [2]
    # The mean of this column is the middle of its ends, without a value of its own: (m - 0)/(x - y) and back.
    assert value.tolist() == [1.0, 2.25, 3.75]
    assert by_x == pytest.approx([1.0, 2.25, 1.25])
    assert by_y == pytest.approx([0.0, -2.25, -1.25])


@pytest.mark.parametrize("text", ["1/x if x > 0 else 0", "x > 0 and 1/x > 1", "not (x <= 0 or 1/x <= 1)"])
def test_a_branch_is_worked_out_only_for_the_samples_that_choose_it(text):
    relation = parse_expression(text)
    with np.errstate(all="raise"), warnings.catch_warnings():
        warnings.simplefilter("error")
        assert np.isfinite(evaluate(relation, {"x": np.array([0.0, 0.5, -1.0])})).all()
        assert np.isfinite(evaluate(relation, {"x": 0.0}))


class _Spy:
    """A column that remembers how many samples it was asked for."""

    def __init__(self):
        self.asked = []

    def value(self, temperature):
        return 0.0 * temperature

    def mean(self, first, second):
        self.asked.append(np.size(second))
        return 0.5 * (first + second)

    def slope(self, temperature):
        return 0.0 * temperature


def test_the_branch_not_chosen_sees_no_sample():
    spy = _Spy()
    relation = parse_expression("mean(wall.k, 0, x) if x > 2 else x")
    result = evaluate(relation, {"x": np.array([1.0, 4.0, 6.0]), "wall.k": spy})
    assert result.tolist() == [1.0, 2.0, 3.0]
    assert spy.asked == [2]
    evaluate(relation, {"x": 1.0, "wall.k": spy})
    assert spy.asked == [2]


def test_types_and_shapes():
    assert evaluate(parse_expression("x > 2"), {"x": [1, 3]}).dtype == bool
    assert evaluate(parse_expression("heated and x > 2"), {"x": 3.0, "heated": True}).dtype == bool
    assert evaluate(parse_expression("x + heated"), {"x": True, "heated": True}) == 2.0
    assert evaluate(parse_expression("x*y"), {"x": np.ones((3, 1)), "y": np.ones(4)}).shape == (3, 4)
    grid = evaluate(
        parse_expression("y if x > 0 else 2"), {"x": np.array([[1.0], [-1.0]]), "y": np.arange(3)}
    )
    assert grid.tolist() == [[0.0, 1.0, 2.0], [2.0, 2.0, 2.0]]
    for text in ("x", "3", "x if x > 2 else x"):
        result = evaluate(parse_expression(text), {"x": 3})
        assert isinstance(result, np.ndarray) and result.dtype == np.float64 and result == 3.0


def test_the_result_is_the_callers_own():
    x = np.array([1.0, 2.0])
    evaluate(parse_expression("x"), {"x": x})[0] = 9.0
    assert x[0] == 1.0
    constant = parse_expression("3")
    evaluate(constant, {})[...] = 9.0
    assert evaluate(constant, {}) == 3.0


def test_what_has_no_value_is_a_result_without_warning():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert np.isnan(evaluate(parse_expression("sqrt(x)"), {"x": -1.0}))
        assert np.isinf(evaluate(parse_expression("1/x"), {"x": 0.0}))
        assert np.isinf(evaluate(parse_expression("9**9**9**9"), {}))
        assert not evaluate(parse_expression("x > 0"), {"x": math.nan})


def test_a_missing_symbol_is_named():
    with pytest.raises(KeyError, match="Pr"):
        evaluate(parse_relation("Nu = Re*Pr"), {"Re": 1.0})
