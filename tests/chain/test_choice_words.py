"""A choice that a file states by a word reaches the row of the method that bears this word, whichever methods the
situation has: each lists its own words, in its own order."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from calcbook.chain.scope import Scope
from calcbook.interface import record_text, solve_file

EXAMPLE = Path(__file__).resolve().parents[2] / "calcs" / "jv-971.yaml"
STATED = "impeller: {value: pitched_turbine, source: drawing LM-JV-971-04}"

# W.R. Penney, V.A. Atiemo-Obeng, Handbook of Industrial Mixing (2004), chapter 14: C and m in C·Re^m where the
# stirred Reynolds number of the example, 3.3e5, lies; and the power of the liquid height.
HANDBOOK = {
    "disk_turbine": (0.74, -0.15),
    "flat_turbine": (0.66, -0.15),
    "pitched_turbine": (0.45, -0.15),
    "hydrofoil": (0.31, -0.15),
    "propeller": (0.50, -0.15),
    "anchor": (0.32, 0.0),
    "ribbon": (0.25, 0.0),
}
# V.W. Uhl, J.B. Gray, Mixing, vol. 1 (1966): constant and power of the viscosity ratio, by way of open libraries.
UHL = {
    "paddle": (0.36, 0.21),
    "turbine": (0.54, 0.14),
    "turbine_baffled": (0.74, 0.14),
    "pitched_turbine": (0.53, 0.24),
    "propeller": (0.54, 0.14),
    "anchor": (0.36, 0.18),
    "curve_glass": (0.33, 0.14),
    "curve_steel": (0.37, 0.14),
}


def written(folder: Path, impeller: str, method: str = "") -> Path:
    """The example with another impeller, and with a method that is named."""
    text = EXAMPLE.read_text(encoding="utf-8")
    assert STATED in text
    text = text.replace(STATED, f"impeller: {impeller}")
    if method:
        text = text.replace("situation: stirred-jacket", f"situation: stirred-jacket\n    method: {method}")
    path = folder / "jv.yaml"
    path.write_text(text, encoding="utf-8")
    return path


def numbers(path: Path) -> tuple[float, float, float, float, float]:
    """Nu, Re, Pr, viscosity ratio and liquid height over bore, in service."""
    values = solve_file(path, for_record=False).base.solutions["service"].values
    film = "mixture film"
    viscosity = [name for name in values if name.endswith("/viscosity")]
    bulk = next(name for name in viscosity if name.startswith("stream mixture"))
    surface = next(name for name in viscosity if f"{film}/surface" in name)
    found = [float(values[name]) for name in (f"{film}/Re", f"{film}/Pr", bulk, surface)]
    nusselt = next(float(value) for name, value in values.items() if name.endswith("/Nu") and film in name)
    return nusselt, found[0], found[1], found[2] / found[3], 1.55 / 1.6


@pytest.mark.parametrize("impeller", HANDBOOK)
def test_the_stated_impeller_is_the_one_that_is_calculated(tmp_path: Path, impeller: str) -> None:
    constant, height = HANDBOOK[impeller]
    nusselt, re, pr, ratio, level = numbers(written(tmp_path, impeller))
    # A propeller without a pitch is one of a pitch of its diameter: its factor is one.
    expected = constant * re ** (2 / 3) * pr ** (1 / 3) * ratio**0.14 * level**height
    assert nusselt == pytest.approx(expected, rel=1e-12)


@pytest.mark.parametrize("impeller", UHL)
def test_the_stated_impeller_is_that_of_the_older_method(tmp_path: Path, impeller: str) -> None:
    constant, power = UHL[impeller]
    nusselt, re, pr, ratio, _ = numbers(written(tmp_path, impeller, "stirred-jacket-uhl-1966"))
    expected = constant * re ** (2 / 3) * pr ** (1 / 3) * ratio**power
    assert nusselt == pytest.approx(expected, rel=1e-12)


def test_a_stated_choice_stands_among_the_givens_and_in_the_row_of_its_table() -> None:
    record = record_text(solve_file(EXAMPLE))
    assert (
        "| impeller stated for mixture film | pitched_turbine | a choice | drawing LM-JV-971-04 |" in record
    )
    assert "| drawing LM-JV-971-04 | D_i; impeller stated for mixture film |" in record
    assert "table wall: row for impeller = pitched_turbine, Re = " in record


def test_a_name_does_not_stand_for_two_figures() -> None:
    scope = Scope.__new__(Scope)
    scope.constants, scope.dimensions = {}, {}
    scope.constant("film/with layout", 45.0)
    scope.constant("film/with layout", 45.0)
    scope.constant("unread length", float("nan"))
    scope.constant("unread length", float("nan"))
    with pytest.raises(ValueError, match="film/with layout"):
        scope.constant("film/with layout", 30.0)
    assert np.isclose(scope.constants["film/with layout"], 45.0)
