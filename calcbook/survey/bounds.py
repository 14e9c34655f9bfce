"""What the stated tolerances move: standard uncertainties of everything that is wrong in all rows alike.

A tolerance of a given that a column measures is the bias of its sensor, the same in every row; a drift grows
from nothing at the first row. The accuracy of a method is a factor on its film coefficients. A heat loss has
its own. Each is carried to the resistance of every row by the slopes of the chain, and from there to the
parameters by the equations of the fit itself.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from statistics import NormalDist

import numpy as np

from calcbook.calcfile.survey import Survey
from calcbook.chain.factors import FACTOR
from calcbook.chain.types import Chain
from calcbook.faults import Collector
from calcbook.quantities import Tolerance, read_tolerance
from calcbook.survey.resistance import LOSS
from calcbook.uncertainty.accuracy import factor_of_card
from calcbook.uncertainty.distributions import Rectangular
from calcbook.uncertainty.figures import stated_figures

Array = np.ndarray
YEAR = 365.25 * 86400.0
# 95 % of a normal distribution lie within so many standard uncertainties.
NORMAL_95 = NormalDist().inv_cdf(0.975)


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
    """Every part that a tolerance is stated for, and the methods for which no accuracy is, with the reason.

    ``slopes``, ``columns`` and ``since_first`` (s since the first row) belong to the same rows.
    """
    methods, without = _methods(chain, slopes)
    parts = [
        *_givens(chain, slopes, columns),
        *_drifts(chain, survey, slopes, columns, since_first),
        *_heat_loss(survey, slopes),
        *methods,
    ]
    return parts, without


def _heat_loss(survey: Survey, slopes: Mapping[str, Array]) -> list[Part]:
    loss = survey.heat_loss
    if loss is None or loss.tolerance is None or loss.tolerance.value == 0.0:
        return []
    law = Rectangular(loss.value.value, loss.tolerance.value)
    title, tolerance = "heat loss of the hot stream", f"{loss.value.text}, {loss.tolerance.text} either way"
    return [Part(LOSS, title, tolerance, law.standard, False, "", law.words, slopes[LOSS] * law.standard)]


def _methods(chain: Chain, slopes: Mapping[str, Array]) -> tuple[list[Part], list[str]]:
    parts, without = [], []
    for name in (name for name in slopes if name.startswith(FACTOR)):
        card = chain.library.method(name.removeprefix(FACTOR))
        factor = factor_of_card(card, chain.library)
        if isinstance(factor, str):
            without.append(f"{card.id} ({factor})")
            continue
        law = factor.distribution
        title = f"factor on the film coefficient of {card.id}"
        errors = slopes[name] * law.standard
        parts.append(Part(name, title, factor.rule, law.standard, True, "", law.words, errors))
    return parts, without


def _givens(chain: Chain, slopes: Mapping[str, Array], columns: Mapping[str, Array]) -> list[Part]:
    """The givens with a tolerance; their faults are told where the budget is made."""
    parts = []
    for one in stated_figures(chain, Collector()):
        symbol, item = one.line.symbol, chain.inputs[one.id]
        given = chain.calculation.givens[symbol]
        if given.tolerance is None or one.id not in slopes:
            continue
        width = read_tolerance(given.tolerance.text, item.kind)
        standard = one.standard / abs(item.value) if width.relative else one.standard
        sensor = ", bias of its sensor" if symbol in columns else ""
        parts.append(
            Part(
                one.id,
                f"{given.meaning or symbol}{sensor}",
                given.tolerance.text,
                standard,
                width.relative,
                symbol,
                one.distribution.words,
                slopes[one.id] * standard * _scale(width, columns.get(symbol, np.asarray(item.value))),
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
        standard = Rectangular(0.0, column.drift.half_width).standard
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


def normal_quantile(probability: float) -> float:
    """The quantile of the standard normal distribution."""
    return NormalDist().inv_cdf(probability)
