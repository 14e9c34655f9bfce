"""Bounds: they cover the truth of histories whose errors are drawn from what is stated, and not by being wide."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from history import STATED, YEAR, Truth, cells, drawn, history
from survey_calculations import SURVEY, columns_of, solved_survey, true_figures, with_rows

from calcbook.chain.outcome import Solved
from calcbook.chain.survey_outcome import SurveyOutcome
from calcbook.survey.bounds import parts_of
from calcbook.survey.resistance import resistances, slopes

SEEDS = 100


def surveyed(solved: Solved, truth: Truth, seed: int, noise: float = 1.0) -> SurveyOutcome:
    outcome = with_rows(solved, history(truth, seed, noise=noise)).survey
    assert outcome is not None
    return outcome


def test_the_parameters_of_a_history_without_errors_come_back(solved: Solved) -> None:
    truth = Truth(errors={"loss": STATED["loss"]})
    outcome = surveyed(solved, truth, 0, noise=0.0)
    for name, figure in true_figures(truth).items():
        # Left between the two programs: the clean coefficient takes the wall temperature of the clean unit, the
        # history that of the fouled one (0.3 % by the wall factor of the film); 0.07 % of the water's
        # conductivity; cells of two decimals (0.1 % of tau).
        assert outcome.figure(name).value == pytest.approx(figure, rel=6e-3)


def test_95_per_cent_bounds_cover_the_truth_in_at_least_90_of_100_histories(solved: Solved) -> None:
    covered: dict[str, int] = {}
    widths: dict[str, list[float]] = {}
    for seed in range(SEEDS):
        truth = Truth(errors=drawn(seed))
        outcome = surveyed(solved, truth, seed)
        for name, figure in true_figures(truth).items():
            one = outcome.figure(name)
            covered[name] = covered.get(name, 0) + (one.lower <= figure <= one.upper)
            widths.setdefault(name, []).append((one.upper - one.lower) / 2 / figure)
    assert min(covered.values()) >= 90, covered
    # Bounds that say something: within a tenth of the figure, and not all of them met by all.
    assert max(max(found) for found in widths.values()) < 0.1
    assert min(covered.values()) < SEEDS


def test_the_scatter_alone_would_not_cover(solved: Solved) -> None:
    """Most of the bounds is systematic here: a record with the scatter alone would promise too much."""
    inside = 0
    for seed in range(20):
        truth = Truth(errors=drawn(seed))
        one = surveyed(solved, truth, seed).figure("allowance_fitted")
        inside += abs(one.value - true_figures(truth)["allowance_fitted"]) <= 1.96 * one.scatter
    assert inside < 14


def test_the_proposal_is_the_percentile_of_the_fit(solved: Solved) -> None:
    results = solved.base.results
    fitted, upper = results["allowance_fitted"].value, results["allowance_upper"].value
    # Standard normal quantiles at 90 % and 97.5 %: 1.281552 and 1.959964 (any table of the distribution).
    part = (results["allowance_proposed"].value - fitted) / (upper - fitted)
    assert part == pytest.approx(1.281552 / 1.959964, rel=1e-6)


def test_the_standard_uncertainties_are_those_of_what_is_stated(solved: Solved) -> None:
    """JCGM 100:2008, 4.3.7: a half-width a is a/sqrt(3); 20 % that hold for 90 % of the data are 20 %/1.6449."""
    assert solved.survey is not None
    found = {part.id: part.standard for part in solved.survey.parts}
    expected = {"heat loss": 0.005 / math.sqrt(3.0), "factor/gnielinski-1976": 0.2 / 1.644854}
    for symbol in ("T_hi", "T_ho", "T_ci", "T_co"):
        expected |= {f"given/{symbol}": 0.25 / math.sqrt(3.0), f"given/{symbol}/drift": 0.1 / math.sqrt(3.0)}
    for symbol in ("m_hot", "m_cold"):
        expected |= {
            f"given/{symbol}": 0.015 / math.sqrt(3.0),
            f"given/{symbol}/drift": 0.005 / math.sqrt(3.0),
        }
    expected |= {"given/k_w": 0.05 / math.sqrt(3.0), "given/h_o": 0.15 / math.sqrt(3.0)}
    assert found == pytest.approx(expected, rel=1e-6)
    sensors = {part.id for part in solved.survey.parts if "bias of its sensor" in part.title}
    assert sensors == {f"given/{symbol}" for symbol in ("T_hi", "T_ho", "T_ci", "T_co", "m_hot", "m_cold")}


def test_a_method_is_wrong_in_every_row_by_its_standard_uncertainty(solved: Solved) -> None:
    chain, survey = solved.chain, solved.chain.calculation.survey
    assert survey is not None
    columns = columns_of(history(Truth(), 3, rows=40, noise=0.0))
    found = slopes(chain, columns, 0.01)
    parts, without = parts_of(chain, survey, found, columns, np.zeros(40))
    (part,) = [part for part in parts if part.id == "factor/gnielinski-1976"]
    assert part.errors == pytest.approx(found[part.id] * 0.2 / 1.644854, rel=1e-6)
    assert without == []


def test_what_cannot_be_wrong_is_no_part(tmp_path: Path) -> None:
    survey = SURVEY.replace("tolerance: 0.5 %", "tolerance: 0 %").replace("per year: 0.1 K", "per year: 0 K")
    outcome = solved_survey(tmp_path, cells(history(Truth(), 1)), survey).survey
    assert outcome is not None
    drifts = {part.id for part in outcome.parts if part.id.endswith("drift")}
    assert drifts == {"given/m_hot/drift", "given/m_cold/drift"}
    assert "heat loss" not in {part.id for part in outcome.parts}


@pytest.mark.parametrize(
    ("part", "symbol", "relative", "grows"),
    [
        ("given/T_hi", "T_hi", False, False),
        ("given/T_hi/drift", "T_hi", False, True),
        ("given/m_hot", "m_hot", True, False),
        ("given/m_cold/drift", "m_cold", True, True),
    ],
)
def test_each_part_moves_the_fit_as_rows_that_are_wrong_by_it(
    tmp_path: Path, part: str, symbol: str, relative: bool, grows: bool
) -> None:
    """The rows of a straight line with a thousandth of one standard uncertainty put in, fitted anew.

    A drift is nothing at the first row and whole after a year of 365.25 days.
    """
    survey = SURVEY.replace("kern-seaton-1959", "fouling-linear")
    shown = history(Truth(model="linear", errors={"loss": 0.01}), 1)

    def fitted(wrong: float) -> SurveyOutcome:
        rows = cells(shown)
        grown = shown["t"] / YEAR if grows else np.ones(len(rows))
        figures = {name: shown[name] for name in ("T_hi", "T_ho", "T_ci", "T_co", "m_hot", "m_cold")}
        figures[symbol] = (
            figures[symbol] * (1.0 + wrong * grown) if relative else figures[symbol] + wrong * grown
        )
        for number, row in enumerate(rows):
            one = {name: float(values[number]) for name, values in figures.items()}
            row[1:] = (
                *(f"{one[name]:.12f}" for name in ("T_hi", "T_ho")),
                *(f"{one[name] * 1.8 + 32.0:.12f}" for name in ("T_ci", "T_co")),
                f"{one['m_hot']:.12f}",
                f"{one['m_cold'] * 3.6:.12f}",
            )
        outcome = solved_survey(tmp_path, rows, survey).survey
        assert outcome is not None
        return outcome

    plain = fitted(0.0)
    (told,) = [one for one in plain.parts if one.id == part]
    moved = fitted(1e-3 * told.standard)
    for name, move in told.moves:
        change = (moved.figure(name).value - plain.figure(name).value) / 1e-3
        # The line is straight in its rate: what is left is the curvature of the rows over the small step.
        assert change == pytest.approx(move, rel=1e-3), name


def test_slopes_of_the_rows_are_those_of_small_steps(solved: Solved) -> None:
    chain = solved.chain
    columns = columns_of(history(Truth(), 3, rows=40, noise=0.0))
    found = slopes(chain, columns, 0.01)
    for symbol in columns:
        step = 1e-3 if symbol[0] == "T" else 1e-4
        up, down = (
            resistances(chain, {**columns, symbol: columns[symbol] + sign * step}, 0.01).resistance
            for sign in (1, -1)
        )
        # Central differences of a figure of 1e-4 known to about 1e-15: 1e-8 of the slope, and the curvature.
        assert found[f"given/{symbol}"] == pytest.approx((up - down) / (2 * step), rel=1e-5, abs=1e-12)
    up, down = (resistances(chain, columns, 0.01 + sign * 1e-5).resistance for sign in (1, -1))
    assert found["heat loss"] == pytest.approx((up - down) / 2e-5, rel=1e-6)


def test_a_film_that_is_better_than_its_method_looks_like_less_fouling(solved: Solved) -> None:
    plain = columns_of(history(Truth(), 3, rows=40, noise=0.0))
    better = columns_of(history(Truth(errors={"tube film": 0.01}), 3, rows=40, noise=0.0))
    seen = (
        resistances(solved.chain, better, 0.0).resistance - resistances(solved.chain, plain, 0.0).resistance
    )
    foretold = -0.01 * slopes(solved.chain, plain, 0.0)["factor/gnielinski-1976"]
    # One per cent is no small step (1 % of the effect), and the rows' temperatures move with the film.
    assert seen == pytest.approx(foretold, rel=0.05)
