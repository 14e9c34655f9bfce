"""The named functions of a relation: how many arguments each takes, and how it is computed.

``INTERNAL`` ones appear in derivative trees only; a typed relation cannot name them.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np

# name: (fewest arguments, most arguments)
TYPED: dict[str, tuple[int, int]] = {
    **dict.fromkeys(
        (
            *("sqrt", "exp", "expm1", "ln", "log10", "log1p", "abs", "sin", "cos", "tan"),
            *("asin", "acos", "atan", "sinh", "cosh", "tanh", "i0e", "i1e", "k0e", "k1e"),
        ),
        (1, 1),
    ),
    "min": (2, 50),
    "max": (2, 50),
    "gamma_p": (2, 2),
    "mean": (3, 3),
}
INTERNAL: dict[str, tuple[int, int]] = {
    "sign": (1, 1),
    "i2e": (1, 1),
    "gamma_p_density": (2, 2),
    "mean_slope": (4, 4),
}
# First argument is a table column with its own methods, not an array of numbers.
TAKES_COLUMN = ("mean", "mean_slope")

_NUMPY_NAMES = {"ln": "log", "asin": "arcsin", "acos": "arccos", "atan": "arctan"}
_SCIPY_NAMES = {"i0e": "i0e", "i1e": "i1e", "k0e": "k0e", "k1e": "k1e", "gamma_p": "gammainc"}

# Below this share of the temperature, the difference quotient of a mean loses more digits than half the
# slope is wrong by (tables are piecewise linear: within one piece half the slope is exact).
_SAME_TEMPERATURE = 1e-5


def implementation(name: str) -> Callable[..., Any]:
    """The array function behind ``name``; elementwise, so a sample never depends on its neighbours."""
    if name in _SCIPY_NAMES:
        from scipy import special

        return getattr(special, _SCIPY_NAMES[name])
    special_cases: dict[str, Callable[..., Any]] = {
        "min": _smallest,
        "max": _largest,
        "i2e": _bessel_i2e,
        "gamma_p_density": _gamma_p_density,
        "mean": _mean,
        "mean_slope": _mean_slope,
    }
    if name in special_cases:
        return special_cases[name]
    return getattr(np, _NUMPY_NAMES.get(name, name))


def _smallest(*values: Any) -> Any:
    result = values[0]
    for value in values[1:]:
        result = np.minimum(result, value)
    return result


def _largest(*values: Any) -> Any:
    result = values[0]
    for value in values[1:]:
        result = np.maximum(result, value)
    return result


def _bessel_i2e(x: Any) -> Any:
    from scipy import special

    return special.ive(2, x)


def _gamma_p_density(a: Any, x: Any) -> Any:
    """The derivative of gamma_p(a, x) by x: x**(a-1) exp(-x) / Gamma(a)."""
    from scipy import special

    return np.exp(special.xlogy(a - 1.0, x) - x - special.gammaln(a))


def _mean(column: Any, first: Any, second: Any) -> Any:
    return column.mean(first, second)


def _mean_slope(column: Any, first: Any, second: Any, mean: Any) -> Any:
    """The derivative of the mean of a column between two temperatures by the first of them."""
    difference = second - first
    close = np.abs(difference) <= _SAME_TEMPERATURE * np.maximum(np.abs(first), np.abs(second))
    apart = np.where(close, 1.0, difference)
    quotient = (mean - column.value(first)) / apart
    return np.where(close, column.slope(0.5 * (first + second)) / 2.0, quotient)
