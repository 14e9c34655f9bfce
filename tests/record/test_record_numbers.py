"""Printed numbers: digits, units, words for what is no number."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from calcbook.calcfile.calculation import Report
from calcbook.faults import Place
from calcbook.formulas import parse_number
from calcbook.library import vocabulary
from calcbook.record.numbers import (
    apart,
    asked_text,
    celsius,
    fixed,
    in_report_unit,
    percent,
    share_text,
    unit_text,
    value_text,
)
from calcbook.record.sections.circuit import bar
from calcbook.record.sections.validity import residual

OVERALL = vocabulary()["overall coefficient"]


def report(units: str, **quantities: str) -> Report:
    return Report(
        "outside", Place("test"), units, {name.replace("_", " "): unit for name, unit in quantities.items()}
    )


def test_digits_follow_the_vocabulary() -> None:
    assert value_text(1125.26362, OVERALL) == "1125.3"
    assert value_text(math.nan, OVERALL) == "not used"
    assert value_text(np.asarray(True), None) == "yes"
    assert value_text(0.0, vocabulary()["fluid heated"]) == "no"


def test_conclusions_carry_three_digits_and_the_unit_of_the_report() -> None:
    assert in_report_unit(1125.26, OVERALL, report("SI"), 3) == "1130 W/(m²·K)"
    # 1 Btu/(h ft² °F) is 5.678263 W/(m² K), NIST Special Publication 811, appendix B.
    assert in_report_unit(1125.26, OVERALL, report("US customary"), 3) == "198 Btu/(h·ft²·°F) (1130 W/(m²·K))"
    assert in_report_unit(1125.26, OVERALL, report("SI", overall_coefficient="kW/(m^2 K)"), 3) == (
        "1.13 kW/(m²·K) (1130 W/(m²·K))"
    )


def test_a_figure_beside_its_limit_shows_which_is_larger() -> None:
    assert apart(599.97, 600.0, "W/(m^2 K)", False, 3) == ("599.97", "600")
    assert apart(600.0, 600.0, "W/(m^2 K)", False, 3) == ("600", "600")
    assert apart(333.15, 333.1501, "degC", True, 4) == ("60.0000", "60.0001")


@given(st.floats(1.0, 1e6), st.floats(1.0, 1e6))
def test_the_printed_pair_orders_like_the_figures(value: float, limit: float) -> None:
    first, second = (parse_number(text) for text in apart(value, limit, "W/(m^2 K)", False, 3))
    assert (first > second) == (value > limit) and (first < second) == (value < limit)


def test_places_are_rounded_half_to_even() -> None:
    assert [fixed(value, 1) for value in (0.25, 0.35, -0.25, -0.04)] == ["0.2", "0.4", "−0.2", "0.0"]
    assert celsius(347.15) == "74.00"
    assert percent(0.10592) == "10.6 %"
    assert celsius(math.nan) == "not known"


def test_a_share_of_samples_shows_whether_it_reaches_what_is_asked_for() -> None:
    assert share_text(0.8597, 0.95) == "85.97 %"
    assert share_text(0.94996, 0.95) == "94.996 %"
    assert share_text(0.950004, 0.95) == "95.0004 %"
    assert share_text(0.95, 0.95) == "95.00 %"
    # One of a million is neither none nor all.
    assert share_text(0.999999) == "99.9999 %"
    assert share_text(0.000001) == "0.0001 %"
    assert [asked_text(asked) for asked in (0.95, 0.9995, 0.125)] == ["95 %", "99.95 %", "12.5 %"]


def test_units_are_printed_after_the_si_brochure() -> None:
    assert unit_text("W/(m^2 K)") == "W/(m²·K)"
    assert unit_text("1") == "1"


@pytest.mark.parametrize(("share", "marks"), [(0.0, 0), (0.012, 0), (0.013, 1), (0.5, 20), (1.0, 40)])
def test_a_share_is_drawn_in_steps_of_two_and_a_half_per_cent(share: float, marks: int) -> None:
    assert bar(share) == "=" * marks


def test_a_share_that_is_no_part_of_a_whole_is_said_in_words() -> None:
    assert bar(-0.1) == "negative"
    assert bar(29.2) == "more than the whole"


def test_residuals_are_bounds() -> None:
    assert residual(0.0) == "below 1e−12"
    assert residual(3e-9) == "below 1e−8"
    assert residual(0.25) == "0.25"
