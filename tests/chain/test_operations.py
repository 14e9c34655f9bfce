"""Tables, roots and sums of cards on arrays: what each gives inside, at and beyond its ends."""

from __future__ import annotations

import numpy as np
import pytest

from calcbook.faults import Place
from calcbook.formulas import parse_expression
from calcbook.library.cards import Solve, Sum, Table
from calcbook.library.operations import LookupOperation, SolveOperation, SumOperation

WHERE = Place("trial")


def table(
    by: dict[str, str], columns: tuple[str, ...], rows: list[list[float]], outside: str = "stop"
) -> Table:
    return Table("trial", by, outside, columns, np.array(rows, dtype=float), (), WHERE)


LAYOUTS = [[30, 1, 1e3, 10], [30, 1e3, 1e5, 11], [45, 1, 1e2, 20], [45, 1e2, 1e6, 21]]


@pytest.mark.parametrize("outside", ["stop", "hold last", "open item"])
def test_step_rows_end_where_those_of_their_own_layout_end(outside):
    """Layout 30 ends at 1e5 and layout 45 at 1e6: each has its own first and last row."""
    find = LookupOperation(
        table({"layout": "exact", "Re": "step"}, ("layout", "from", "to", "a"), LAYOUTS, outside), "a"
    )
    reynolds = np.array([0.5, 1.0, 999.0, 1e3, 1e5, 2e5, 1e6, 2e6])
    beyond = np.nan if outside == "stop" else 11.0
    below = np.nan if outside == "stop" else 10.0
    np.testing.assert_array_equal(
        find.value({"layout": np.asarray(30.0), "Re": reynolds}),
        [below, 10, 10, 11, 11, beyond, beyond, beyond],
    )
    below, beyond = (np.nan, np.nan) if outside == "stop" else (20.0, 21.0)
    np.testing.assert_array_equal(
        find.value({"layout": np.asarray(45.0), "Re": reynolds}), [below, 20, 21, 21, 21, 21, 21, beyond]
    )


@pytest.mark.parametrize("outside", ["stop", "hold last", "open item"])
def test_what_is_no_number_finds_no_row(outside):
    steps = LookupOperation(
        table({"layout": "exact", "Re": "step"}, ("layout", "from", "to", "a"), LAYOUTS, outside), "a"
    )
    found = steps.value({"layout": np.asarray(30.0), "Re": np.array([np.nan, 10.0])})
    np.testing.assert_array_equal(found, [np.nan, 10.0])
    line = LookupOperation(table({"x": "linear"}, ("x", "a"), [[1, 10], [2, 20]], outside), "a")
    np.testing.assert_array_equal(line.value({"x": np.array([np.nan, 1.5])}), [np.nan, 15.0])
    assert np.isnan(steps.value({"layout": np.asarray(60.0), "Re": np.asarray(10.0)}))


@pytest.mark.parametrize(("way", "middle", "slope"), [("linear", 250.0, 300.0), ("log-log", 225.0, 300.0)])
def test_interpolation_and_its_slope(way, middle, slope):
    """Between 100 at 1 and 400 at 2: straight 100 + 300 (x - 1); in logarithms 100 x^2, with slope 200 x."""
    line = LookupOperation(table({"x": way}, ("x", "a"), [[1, 100], [2, 400]], "hold last"), "a")
    at = {"x": np.array([0.5, 1.5, 3.0])}
    value = line.value(at)
    np.testing.assert_allclose(value, [100, middle, 400], rtol=1e-14)
    np.testing.assert_allclose(line.slopes(at, value, ["x"])["x"], [0, slope, 0], rtol=1e-13)


def test_one_row_is_one_point():
    rows = [[30, 1, 100], [45, 1, 200], [45, 2, 400]]
    line = LookupOperation(
        table({"layout": "exact", "x": "linear"}, ("layout", "x", "a"), rows, "hold last"), "a"
    )
    layouts, at = np.array([30.0, 30.0, 45.0]), np.array([0.5, 7.0, 1.5])
    np.testing.assert_allclose(line.value({"layout": layouts, "x": at}), [100, 100, 300], rtol=1e-14)


def colebrook() -> SolveOperation:
    return SolveOperation(
        Solve("x", (1.0, 30.0), 7.0, parse_expression("x == -2*log10(e/3.7 + 2.51*x/Re)"), WHERE)
    )


def test_root_of_an_equation_on_arrays_and_alone():
    solve = colebrook()
    reynolds = np.geomspace(4e3, 1e8, 50)
    rough = np.asarray(1e-4)
    root = solve.value({"e": rough, "Re": reynolds})
    # 4e-15: two roundings of a figure near 10.
    np.testing.assert_allclose(root, -2 * np.log10(1e-4 / 3.7 + 2.51 * root / reynolds), rtol=4e-15)
    for index in (0, 17, 49):
        assert float(solve.value({"e": rough, "Re": reynolds[index]})) == root[index]
    moved = solve.value({"e": rough, "Re": reynolds * (1 + 1e-5)}) - solve.value(
        {"e": rough, "Re": reynolds * (1 - 1e-5)}
    )
    slope = solve.slopes({"e": rough, "Re": reynolds}, root, ["Re"])["Re"]
    np.testing.assert_allclose(slope, moved / (2e-5 * reynolds), rtol=1e-6)


def test_an_equation_without_a_root_between_its_bounds_has_no_value():
    solve = SolveOperation(Solve("x", (1.0, 3.0), 2.0, parse_expression("x**2 == y"), WHERE))
    found = solve.value({"y": np.array([4.0, 100.0, 9.0, np.nan])})
    # 1e-15: a root is settled to two roundings.
    np.testing.assert_allclose(found, [2.0, np.nan, 3.0, np.nan], rtol=1e-15)


def test_sum_and_its_slope():
    """The geometric series: 1 + x + ... + x^9 = (1 - x^10)/(1 - x)."""
    total = SumOperation(Sum("S", "k", 10, parse_expression("x**k"), WHERE))
    x = np.array([0.3, 0.9])
    value = total.value({"x": x})
    np.testing.assert_allclose(value, (1 - x**10) / (1 - x), rtol=1e-14)
    slope = (-10 * x**9 * (1 - x) + 1 - x**10) / (1 - x) ** 2
    np.testing.assert_allclose(total.slopes({"x": x}, value, ["x"])["x"], slope, rtol=1e-13)
