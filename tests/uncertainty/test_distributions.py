"""Laws of figures: mean and standard uncertainty by integration over the shares, and the rules for methods."""

from __future__ import annotations

import math

import numpy as np
import pytest

from calcbook.library import Library
from calcbook.library.cards import Accuracy
from calcbook.uncertainty.accuracy import factor_from
from calcbook.uncertainty.distributions import (
    LogNormal,
    Normal,
    PositiveNormal,
    Rectangular,
    Triangular,
    positive,
)

SHARES = (np.arange(2_000_000) + 0.5) / 2_000_000


@pytest.mark.parametrize(
    ("law", "standard"),
    [
        (Normal(5.0, 0.7), 0.7),
        (Rectangular(5.0, 0.6), 0.6 / math.sqrt(3.0)),  # JCGM 100:2008, 4.3.7
        (Triangular(5.0, 0.6), 0.6 / math.sqrt(6.0)),  # JCGM 100:2008, 4.3.9
        (LogNormal(1.0, 0.5), 0.5),
        (LogNormal(3.0, 2.9), 2.9),
        (PositiveNormal(1.0, 0.2), 0.2),
    ],
)
def test_moments(law, standard: float) -> None:
    values = law.at(SHARES)
    # The midpoint rule leaves out the tails beyond 1/4 000 000 of a lognormal law, 0.3 % of its deviation.
    assert values.mean() == pytest.approx(law.mean, rel=1e-4)
    assert values.std() == pytest.approx(standard, rel=1e-2 if isinstance(law, LogNormal) else 1e-4)
    assert law.standard == pytest.approx(standard, rel=1e-12)
    assert (np.diff(values) >= 0.0).all()


def test_what_is_above_zero_stays_above_zero() -> None:
    for standard in (0.1, 0.3, 0.31, 0.9, 2.0):
        assert positive(1.0, standard).at(SHARES).min() > 0.0
    assert isinstance(positive(1.0, 0.3), PositiveNormal)
    assert isinstance(positive(1.0, 0.31), LogNormal)


# Standard uncertainties worked out by hand from the rules of the method notes, section 0.
@pytest.mark.parametrize(
    ("within", "coverage", "standard", "word"),
    [
        ("25 %", "most data", 0.25 / 1.959964, "normal"),
        ("20 %", "90 % of about 800 measured points", 0.20 / 1.644854, "normal"),
        ("17 % mean", "30 fluids", 0.17 * 1.253314, "normal"),
        ("15 %", "commonly quoted", 0.15 / 1.732051, "rectangular"),
        ("40 %", "commonly quoted", 0.40 / 1.732051, "rectangular"),
        ("60 %", "commonly quoted", 0.60 / 1.732051, "lognormal"),
        ("100 %", "most data", 1.0 / 1.959964, "lognormal"),
    ],
)
def test_rules_for_methods(within: str, coverage: str, standard: float, word: str) -> None:
    found = factor_from(Accuracy(within, coverage, "somebody", "from memory"))
    assert not isinstance(found, str)
    assert found.distribution.mean == 1.0
    assert found.distribution.standard == pytest.approx(standard, rel=1e-6)
    assert found.distribution.words.startswith(word)
    assert within in found.rule and coverage in found.rule


@pytest.mark.parametrize(
    ("within", "coverage"),
    [
        ("0 to 100 % too high", "units with usual clearances"),
        ("15.9 % for water, 18.8 % for refrigerants", "mean"),
        ("100 % of the heat flux, 30 % of the superheat", "most data"),
        ("20 %", "100 % of the data"),
    ],
)
def test_no_figure_is_made_of_what_is_not_one(within: str, coverage: str) -> None:
    assert isinstance(factor_from(Accuracy(within, coverage, "somebody", "from memory")), str)
    assert isinstance(factor_from(None), str)


def test_every_card_gives_a_factor_or_a_reason() -> None:
    library = Library()
    reasons = []
    for name in library.names("methods"):
        found = factor_from(library.method(name).accuracy)
        if isinstance(found, str):
            reasons.append(name)
        else:
            assert 0.0 < found.distribution.standard < 1.0, name
    assert len(reasons) < len(library.names("methods")) / 2


def test_the_deviation_of_a_fit_is_no_accuracy_of_a_prediction() -> None:
    """A fit within 1 % of an exact solution says nothing of a flow whose properties vary."""
    fit = Accuracy("1 %", "exact solution", "somebody", "independent numerics")
    assert "of its fit to calculated figures" in str(factor_from(fit))
    assert isinstance(factor_from(Library().method("gnielinski-laminar-t").accuracy), str)
