"""What the stated tolerances move: standard uncertainties of everything that is wrong in all rows alike.

A tolerance of a given that a column measures is the bias of its sensor, the same in every row; a drift grows
from nothing at the first row. The accuracy of a method is a factor on its film coefficients. A heat loss has
its own. Each is carried to the resistance of every row by the slopes of the chain, and from there to the
parameters by the equations of the fit itself.
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from statistics import NormalDist

import numpy as np

from calcbook.calcfile.calculation import Tolerance as GivenTolerance
from calcbook.calcfile.survey import Survey
from calcbook.chain.types import Chain
from calcbook.library.cards import Accuracy
from calcbook.quantities import Tolerance, read_tolerance
from calcbook.survey.resistance import LOSS, METHOD

Array = np.ndarray
YEAR = 365.25 * 86400.0
# 95 % of a normal distribution lie within so many standard uncertainties.
NORMAL_95 = NormalDist().inv_cdf(0.975)
RECTANGULAR = math.sqrt(3.0)
# Mean absolute deviation to standard deviation of a normal distribution.
OF_MEAN = math.sqrt(math.pi / 2.0)


@dataclass(frozen=True)
class Part:
    """Something wrong in all rows alike: its standard uncertainty and what one of it moves each row by.

    ``errors`` are changes of the resistance of the rows, m² K/W. ``standard`` is relative where ``relative``.
    """

    id: str
    title: str
    tolerance: str
    standard: float
    relative: bool
    symbol: str
    distribution: str
    errors: Array


def parts_of(
    chain: Chain,
    survey: Survey,
    slopes: Mapping[str, Array],
    columns: Mapping[str, Array],
    since_first: Array,
) -> tuple[list[Part], list[str]]:
    """Every part that a tolerance is stated for, and the methods for which no accuracy is.

    ``slopes``, ``columns`` and ``since_first`` (s since the first row) belong to the same rows.
    """
    parts = [*_givens(chain, slopes, columns), *_drifts(chain, survey, slopes, columns, since_first)]
    loss = survey.heat_loss
    if loss is not None and loss.tolerance is not None and loss.tolerance.value > 0.0:
        standard = loss.tolerance.value / RECTANGULAR
        parts.append(
            Part(
                LOSS,
                "heat loss of the hot stream",
                f"{loss.value.text}, {loss.tolerance.text} either way",
                standard,
                False,
                "",
                "rectangular",
                slopes[LOSS] * standard,
            )
        )
    without = []
    for name in (name for name in slopes if name.startswith(METHOD)):
        card = chain.library.method(name.removeprefix(METHOD))
        read = accuracy_standard(card.accuracy) if card.accuracy is not None else None
        if read is None:
            without.append(card.id)
            continue
        standard, words = read
        assert card.accuracy is not None
        parts.append(
            Part(
                name,
                f"factor on the film coefficient of {card.id}",
                f"{card.accuracy.within}, {card.accuracy.coverage}",
                standard,
                True,
                "",
                words,
                slopes[name] * standard,
            )
        )
    return parts, without


def _givens(chain: Chain, slopes: Mapping[str, Array], columns: Mapping[str, Array]) -> list[Part]:
    parts = []
    for symbol, given in chain.calculation.givens.items():
        item = chain.inputs[f"given/{symbol}"]
        if given.tolerance is None or item.id not in slopes:
            continue
        width = read_tolerance(given.tolerance.text, item.kind)
        standard = width.half_width / _divisor(given.tolerance)
        sensor = ", bias of its sensor" if symbol in columns else ""
        parts.append(
            Part(
                item.id,
                f"{given.meaning or symbol}{sensor}",
                given.tolerance.text,
                standard,
                width.relative,
                symbol,
                given.tolerance.kind,
                slopes[item.id] * standard * _scale(width, columns.get(symbol, np.asarray(item.value))),
            )
        )
    return parts


def _drifts(
    chain: Chain,
    survey: Survey,
    slopes: Mapping[str, Array],
    columns: Mapping[str, Array],
    since_first: Array,
) -> list[Part]:
    parts = []
    for symbol, column in survey.columns.items():
        name = f"given/{symbol}"
        if column.drift is None or column.drift.half_width == 0.0 or name not in slopes:
            continue
        standard = column.drift.half_width / RECTANGULAR
        grown = slopes[name] * standard * _scale(column.drift, columns[symbol]) * since_first / YEAR
        parts.append(
            Part(
                f"{name}/drift",
                f"{chain.calculation.givens[symbol].meaning or symbol}, drift of {column.head} in a year",
                column.drift.text,
                standard,
                column.drift.relative,
                symbol,
                "rectangular",
                grown,
            )
        )
    return parts


def _scale(width: Tolerance, figures: Array) -> Array:
    return np.abs(figures) if width.relative else np.ones(())


def _divisor(tolerance: GivenTolerance) -> float:
    """Half-width to standard uncertainty."""
    if tolerance.kind == "rectangular":
        return RECTANGULAR
    return tolerance.factor if tolerance.kind == "expanded" else 1.0


def accuracy_standard(accuracy: Accuracy) -> tuple[float, str] | None:
    """The standard uncertainty of a method's factor, and how it was read from what its card states.

    "17 % mean" is a mean absolute deviation of a normal distribution; "20 %" with "90 % of data" holds so
    many of them; a bare per cent is taken as 95 % of a normal distribution. None where no figure is stated.
    """
    stated = re.match(r"\s*([0-9]+(?:\.[0-9]+)?) %", accuracy.within)
    if stated is None:
        return None
    width = float(stated.group(1)) / 100.0
    if "mean" in accuracy.within:
        return width * OF_MEAN, "normal, from a mean absolute deviation"
    covered = re.search(r"([0-9]+(?:\.[0-9]+)?) % of", accuracy.coverage)
    if covered is not None and 0.0 < float(covered.group(1)) < 100.0:
        share = float(covered.group(1)) / 100.0
        return width / normal_quantile(0.5 + share / 2.0), f"normal, {covered.group(1)} % within"
    return width / NORMAL_95, "normal, taken as 95 % within"


def normal_quantile(probability: float) -> float:
    """The quantile of the standard normal distribution."""
    return NormalDist().inv_cdf(probability)
