"""Tolerances that reach what a figure cannot be: zero, or nothing of a temperature."""

from __future__ import annotations

from pathlib import Path

import pytest
from uncertain_calculations import HEATED, STATED, solved, with_tolerance

from calcbook.faults import Faults


def test_an_allowance_may_reach_zero_and_not_below(tmp_path: Path) -> None:
    """0.00018 ± 0.00018 m² K/W: a deposit may be missing; its budget line is the half-width over the root of three."""
    found = solved(tmp_path, with_tolerance(STATED, R_fo="0.00018 m^2 K/W")).uncertainty
    (row,) = {line.input.symbol: line.input.standard for line in found.budgets[0].rows}.items()
    assert row == ("R_fo", pytest.approx(0.00018 / 3**0.5, rel=1e-12))
    with pytest.raises(Faults, match="tolerance-beyond-value") as caught:
        solved(tmp_path, with_tolerance(STATED, R_fo="0.000181 m^2 K/W"))
    assert "is zero or above" in str(caught.value)


@pytest.mark.parametrize(
    ("symbol", "reaches", "stays"),
    [("h_o", "1500 W/(m^2 K)", "1499 W/(m^2 K)"), ("T_o", "303.15 K", "300 K")],
)
def test_what_is_above_zero_does_not_reach_it(tmp_path: Path, symbol: str, reaches: str, stays: str) -> None:
    """A coefficient of 1500 W/(m² K), and 30 °C in kelvin: neither can be nothing."""
    with pytest.raises(Faults, match="tolerance-beyond-value"):
        solved(tmp_path, with_tolerance(HEATED, **{symbol: reaches}))
    assert solved(tmp_path, with_tolerance(HEATED, **{symbol: stays})).uncertainty is not None
