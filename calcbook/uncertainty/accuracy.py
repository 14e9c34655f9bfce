"""The accuracy that a card states, as the distribution of a factor on its coefficient.

The rules are those of the method notes: a mean deviation, a share of the data within a band, most data within
a band, or a band alone, which is then taken as a bound. What says none of these gives no figure, and neither does
the deviation of a fit from calculated figures.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from statistics import NormalDist

from calcbook.library import Library
from calcbook.library.cards import FILM_RESULTS, Accuracy, Method
from calcbook.uncertainty.distributions import LARGEST_NORMAL, Distribution, LogNormal, Rectangular, positive

MEAN = re.compile(r"([0-9]+(?:\.[0-9]+)?) % mean")
SHARE = re.compile(r"([0-9]+(?:\.[0-9]+)?) % of ")
MOST = "most data"
MOST_SHARE = 0.95
# The standing of an accuracy that was found against calculated figures: an exact solution at constant properties, say.
OF_A_FIT = "independent numerics"


@dataclass(frozen=True, slots=True)
class Factor:
    """The distribution of a factor around 1, and the rule that made it, in words."""

    distribution: Distribution
    rule: str


def factor_of_card(method: Method, library: Library) -> Factor | str:
    """The factor of a card on its film coefficient: by its own accuracy, else by the widest of the cards it uses.

    What a card adds to the coefficients that it joins then has no part of its own.
    """
    own = factor_from(method.accuracy)
    if method.accuracy is not None:
        return own
    used = [library.method(use.method) for use in method.uses]
    joined = [(one, factor_from(one.accuracy)) for one in used if one.gives in FILM_RESULTS]
    found = [(card, factor) for card, factor in joined if isinstance(factor, Factor)]
    if not found:
        return own
    card, widest = max(found, key=lambda pair: pair[1].distribution.standard)
    return Factor(widest.distribution, f"as {card.id}, which it uses, {widest.rule}")


def factor_from(accuracy: Accuracy | None) -> Factor | str:
    """The factor that an accuracy stands for; the reason, in words, where it gives no figure."""
    if accuracy is None:
        return "its card states no accuracy"
    stated = f"within {accuracy.within}, {accuracy.coverage}"
    if accuracy.standing == OF_A_FIT:
        return f"its accuracy ({stated}) is that of its fit to calculated figures, not of a real flow"
    mean = MEAN.fullmatch(accuracy.within)
    if mean is not None:
        deviation = float(mean[1]) / 100.0
        return Factor(
            positive(1.0, deviation * math.sqrt(math.pi / 2.0)),
            f"{stated}: mean deviation × √(π/2)",
        )
    half_width = accuracy.band
    if half_width is None:
        return f"its accuracy ({stated}) is not one figure for the coefficient"
    share = SHARE.match(accuracy.coverage)
    if share is not None or accuracy.coverage == MOST:
        part = float(share[1]) / 100.0 if share is not None else MOST_SHARE
        if not 0.0 < part < 1.0:
            return f"its accuracy ({stated}) is not one figure for the coefficient"
        quantile = NormalDist().inv_cdf(0.5 * (1.0 + part))
        words = f"{100.0 * part:g} % of the data" if share is not None else "most data, taken as 95 %"
        return Factor(positive(1.0, half_width / quantile), f"{stated}: {words}, divided by {quantile:.3f}")
    bound = Rectangular(1.0, half_width)
    rule = f"{stated}: taken as a bound, divided by √3"
    # A bound that reaches to zero, or near it, is no rectangle of a factor that is above zero.
    wide = bound.standard > LARGEST_NORMAL
    return Factor(LogNormal(1.0, bound.standard) if wide else bound, rule)
