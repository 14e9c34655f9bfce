"""What a record says beside a verdict: how sure it is, what a proposal rests on, what a figure leaves out."""

from __future__ import annotations

import re
from functools import cache
from pathlib import Path

import pytest

from calcbook.interface import record_text, solve_file

CALCS = Path(__file__).resolve().parents[2] / "calcs"


@cache
def lines(name: str) -> tuple[str, ...]:
    return tuple(record_text(solve_file(CALCS / f"{name}.yaml")).splitlines())


def line_with(name: str, start: str) -> str:
    return next(line for line in lines(name) if line.startswith(start))


def test_a_criterion_of_samples_says_with_which_probability_it_holds() -> None:
    sampled = next(line for line in lines("hc-985") if line.startswith("Probability that it holds"))
    probability = sampled.rpartition(": ")[2].rstrip(".")
    assert f"criterion met at the stated values; holds with {probability} |" in line_with(
        "hc-985", "| criterion 1"
    )


def test_a_criterion_inside_its_uncertainty_is_no_plain_verdict() -> None:
    answer = solve_file(CALCS / "wc-105.yaml")
    budget = next(one for one in answer.uncertainty.budgets if one.result == "area_margin")
    first = answer.base.criteria[0]
    assert first.met and abs(first.margin) < budget.expanded
    assert "the limit lies within the expanded uncertainty" in line_with("wc-105", "| criterion 1")
    assert line_with("wc-105", "| criterion 2").split(" | ")[-2] == "criterion met"


def test_a_proposal_says_what_it_does_not_hold() -> None:
    found = [
        line for line in lines("wc-111") if line.startswith(("Caution: the offsets", "- The proposal stands"))
    ]
    assert len(found) == 2
    assert "Beyond the rows it is the model alone." in found[1]


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("wc-105", "thickness and roughness of a deposit are not counted"),
        ("hr-821", "the deposit narrows the flow, its roughness is not counted"),
    ],
)
def test_a_pressure_drop_in_service_says_what_of_the_deposit_it_holds(name: str, words: str) -> None:
    rows = [line for line in lines(name) if line.startswith("| Pressure drop of ") and "in service" in line]
    assert rows and all(words in row for row in rows)


def test_only_a_surface_that_stands_in_the_open_can_burn() -> None:
    """A bank in a duct, tubes in a boiling pool and a wall under its jacket are surfaces that nobody touches, hot as
    they are; a bare tube in the air of a fan is one."""
    for name in ("ha-992", "kr-801", "jv-971"):
        assert not any("burn hazard" in line for line in lines(name))
    burning = [line for line in lines("ac-501") if "burn hazard" in line]
    assert len(burning) == 2 and "86.76 °C" in burning[0]


def test_a_deposit_is_told_of_the_side_it_stands_on() -> None:
    """The nitrogen of AC-501 has no deposit; the dust on its other side does not change what its pressure drop holds."""
    row = next(line for line in lines("ac-501") if line.startswith("| Pressure drop of nitrogen, in service"))
    assert "deposit" not in row


def test_a_criterion_on_a_clean_surface_is_judged_on_day_one_too() -> None:
    """Against the surface by hand: T_co + U_clean·(T_hi − T_co)/h_o, with U at the means and the coefficient of the
    shell side at its flow, (m/m_ref)^0.6. U at the hot end is some 1 % above that at the means: 0.3 K here."""
    day = solve_file(CALCS / "wc-105.yaml", for_record=False).rating.day_one
    clean, turned_down = (item for item in day.criteria if item.id == "criterion 2")
    for item, state in ((clean, day.clean), (turned_down, day.turned_down)):
        coefficient = 5200.0 * (state.sides["cold"].mass_flow / 20.6) ** 0.6
        outlet = state.sides["cold"].outlet
        by_hand = outlet + state.overall * (79.2 + 273.15 - outlet) / coefficient
        assert item.value == pytest.approx(by_hand, abs=0.3)
    assert clean.met and not turned_down.met
    assert any(
        line.startswith("- criterion 2 is not met on day one, turned down") for line in lines("wc-105")
    )


def test_what_its_own_tolerance_can_flip_stands_first() -> None:
    flips = solve_file(CALCS / "wc-105.yaml").flips.of_kind("criterion")
    reached = [flip.is_within_tolerance for flip in flips]
    assert reached == sorted(reached, reverse=True) and reached[0]


def test_only_what_the_methods_in_use_take_is_assumed() -> None:
    """WC-105 flows turbulent: the profile and the boundary of the laminar and the transition law are not its own. The
    oil of OC-201 is laminar and takes a developed profile."""
    turbulent = [line for line in lines("wc-105") if line.startswith("| tube-side film/")]
    assert turbulent and not any("/profile |" in line or "/boundary |" in line for line in turbulent)
    assert any(line.startswith("| oil film/profile |") for line in lines("oc-201"))


def test_a_margin_below_zero_is_taken_from_the_stacked_ones() -> None:
    """The stacked margins of WC-105 less what is below zero are the installed area over the clean one, less one."""
    line = next(line for line in lines("wc-105") if line.startswith("Stacked margins:"))
    together, less = (float(word[:-2]) for word in re.findall(r"[0-9.]+ %", line))
    solved = solve_file(CALCS / "wc-105.yaml", for_record=False)
    installed, clean = (solved.base.results[f"area_{name}"].value for name in ("installed", "clean"))
    assert together - less == pytest.approx(
        100.0 * (installed / clean - 1.0), abs=0.11
    )  # two roundings to 0.1 %
