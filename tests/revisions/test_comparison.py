"""The comparison beside its attribution: verdicts, effects along the chain, checks, open items, pages and
data."""

from __future__ import annotations

import json
import math
import re

import pytest
from markdown_it import MarkdownIt
from two_sides import STATED, example, example_side, side_of, with_value

from calcbook.faults import Faults
from calcbook.record import markdown
from calcbook.record.blocks import Table
from calcbook.revisions.comparison import (
    Comparison,
    compare,
    comparison_blocks,
    comparison_data,
    short_blocks,
)
from calcbook.revisions.comparison_page import relative_text

FOULED = with_value(STATED, "R_fi", "3.5e-4 m^2 K/W")


def page_of(comparison: Comparison) -> str:
    return markdown(comparison_blocks(comparison))


def test_a_flipped_verdict_stands_first_with_the_figures_that_show_it() -> None:
    comparison = compare(side_of(STATED), side_of(FOULED))
    (flip,) = comparison.verdicts
    assert (flip.was, flip.now) == ("criterion met", "criterion not met")
    assert (flip.figure_was, flip.figure_now) == (
        "673.91 against 600 W/(m²·K)",
        "587.46 against 600 W/(m²·K)",
    )
    page = page_of(comparison)
    headings = re.findall(r"^## (.*)$", page, re.MULTILINE)
    assert headings[:3] == ["Verdicts that flipped", "What moved U", "Changed inputs"]


def test_a_criterion_whose_limit_moved_is_the_same_criterion() -> None:
    comparison = compare(side_of(STATED), side_of(STATED.replace(">= 600 W", ">= 700 W")))
    (flip,) = comparison.verdicts
    assert (flip.was, flip.now) == ("criterion met", "criterion not met")
    (margin,) = comparison.margins
    assert margin.difference == pytest.approx(-100.0, rel=1e-12)
    assert comparison.attributions[0].parts == ()


def test_a_criterion_that_came_has_no_state_before() -> None:
    new = STATED.replace("report:", "  - {that: U_clean >= 900 W/(m^2 K), source: s}\nreport:")
    (flip,) = compare(side_of(STATED), side_of(new)).verdicts
    assert (flip.was, flip.now, flip.figure_was) == ("no criterion", "criterion met", "")


def test_effects_along_the_chain_add_up_to_the_difference_of_the_resistances() -> None:
    comparison = compare(side_of(STATED), side_of(FOULED))
    service = [effect for effect in comparison.terms if effect.condition == "service"]
    assert [effect.term for effect in service] == [
        "inside film",
        "inside deposit",
        "wall",
        "outside deposit",
        "outside film",
    ]
    # The referred increment of the check values, all of it in the one term that changed.
    assert [f"{effect.difference:.4e}" for effect in service if effect.difference] == ["2.1837e-04"]
    assert math.fsum(effect.share for effect in service) == pytest.approx(1.0, rel=1e-12)
    clean = [effect for effect in comparison.terms if effect.condition == "clean"]
    assert not any(effect.difference for effect in clean)
    assert all(math.isnan(effect.share) for effect in clean)


def test_interface_temperatures_and_cases_are_among_the_effects() -> None:
    text = example("wc-101")
    comparison = compare(example_side(text), example_side(with_value(text, "R_fo", "0.0005 m^2 K/W")))
    names = {effect.name for effect in comparison.results}
    assert {"U_clean", "U_service", "cleanliness", "excess_surface", "T inside surface service"} <= names
    assert "T tube wall to shell-side deposit clean" in names
    assert {(effect.case, effect.name) for effect in comparison.cases} == {
        ("winter", "U_service"),
        ("winter", "U_clean"),
    }
    assert {effect.case for effect in comparison.margins} == {"", "winter"}


def test_checks_that_changed_state_and_open_items() -> None:
    text = example("wc-101")
    new = with_value(text, "m_hot", "0.9 kg/s").replace(
        "verified: no", "verified: {by: M. R., date: 2026-11-01, evidence: x}"
    )
    new = new.replace("situation: inside-tube}", "situation: inside-tube, method: dittus-boelter-mcadams}")
    comparison = compare(example_side(text), example_side(new))
    assert "assumption A1" in {item.id for item in comparison.closed}
    flipped = {(item.what, item.was, item.now) for item in comparison.checks if not item.case}
    assert ("tube-side film / dittus-boelter-mcadams / turbulent", "not there", "outside") in flipped
    assert any(
        item.id.startswith("tube-side film / dittus-boelter-mcadams / turbulent")
        for item in comparison.opened
    )
    page = page_of(comparison)
    assert "| closed | assumption | assumption A1 | Assumption A1 is not verified. |" in page


def test_an_accepted_check_is_another_state() -> None:
    text = example("fw-601")
    without = text[: text.index("accept:\n")] + text[text.index("report:") :]
    comparison = compare(example_side(without), example_side(text))
    assert {(item.was, item.now) for item in comparison.checks} == {("outside", "accepted")}
    assert comparison.closed and not comparison.opened
    assert [change.kind for change in comparison.changes] == ["accept"]


def test_what_did_not_change_is_counted() -> None:
    comparison = compare(side_of(STATED), side_of(FOULED))
    counts = {item.what: (item.count, item.total) for item in comparison.unchanged}
    assert counts["givens"] == (6, 7) and counts["terms"] == (5, 5) and counts["criteria"] == (1, 1)


def test_a_difference_from_zero_is_absolute() -> None:
    zero = with_value(STATED, "R_fo", "0 m^2 K/W")
    page = page_of(compare(side_of(zero), side_of(STATED)))
    row = next(line for line in page.splitlines() if line.startswith("| givens/R_fo |"))
    assert "| from zero |" in row and "+1.8e−4 m²·K/W" in row


@pytest.mark.parametrize(
    ("was", "now", "text"),
    [
        (2.0, 3.0, "+50.00 %"),
        (2.0, 1.0, "−50.00 %"),
        (0.0, 0.0, "0.00 %"),
        (0.0, 1.0, "from zero"),
        (-2.0, -1.0, "+50.00 %"),
        (1.0, 1.0, "0.00 %"),
    ],
)
def test_relative_changes(was: float, now: float, text: str) -> None:
    assert relative_text(was, now) == text


def test_the_line_for_hand_checking_can_be_worked() -> None:
    page = page_of(compare(side_of(STATED), side_of(FOULED)))
    found = re.search(r"1/\(1/([0-9.]+) \+ \(([-−0-9.e]+)\)\) = ([0-9.]+) W", page)
    assert found is not None
    was, moved, now = (float(item.replace("−", "-")) for item in found.groups())
    # Half of the last printed digit of U now.
    assert 1.0 / (1.0 / was + moved) == pytest.approx(now, abs=0.0005)


def test_us_customary_reports_are_compared_in_their_units() -> None:
    text = example("gc-401")
    comparison = compare(
        example_side(text),
        example_side(with_value(text, "R_brine", "0.002 h ft^2 degF/Btu")),
        ("U_service", "T outside surface service"),
    )
    page = page_of(comparison)
    assert "Btu/(h·ft²·°F) U_service was" in page
    assert " °F             T outside surface service was" in page
    assert re.search(r"[+−][0-9.]+ °R ", page), "a difference of temperatures is no point of a scale"


def test_the_page_reads_the_same_in_a_markdown_reader() -> None:
    """Names and texts that would break a table or open a heading stay what they are."""
    nasty = "a | b ` c <b> # *d*"
    new = STATED.replace("is: inside allowance", f'is: "{nasty}"').replace(
        "name: wall,", 'name: "w|all `x`",'
    )
    new = with_value(new, "R_fi", "3.5e-4 m^2 K/W")
    comparison = compare(side_of(STATED), side_of(new))
    page = page_of(comparison)
    tokens = MarkdownIt("commonmark").enable("table").parse(page)
    tables = [block for block in comparison_blocks(comparison) if isinstance(block, Table)]
    assert sum(token.type == "table_open" for token in tokens) == len(tables)
    assert sum(token.type == "tr_open" for token in tokens) == sum(len(table.rows) + 1 for table in tables)
    assert not any(token.type in ("html_block", "html_inline") for token in tokens)
    assert sum(token.type == "fence" for token in tokens) == 1


def test_page_and_data_are_the_same_every_time_and_hold_the_same_figures() -> None:
    one, two = (compare(side_of(STATED), side_of(FOULED)) for _ in range(2))
    assert page_of(one) == page_of(two)
    text = json.dumps(comparison_data(one), allow_nan=False)
    assert text == json.dumps(comparison_data(two), allow_nan=False)
    data = json.loads(text)
    assert data["attributions"][0]["parts"][0]["changes"] == ["givens/R_fi"]
    assert data["attributions"][0]["difference"] == float(f"{one.attributions[0].difference:.10g}")
    assert data["changes"][0]["value_now"] == 3.5e-4
    assert data["old"]["digest"]["whole"] == one.old.digest.whole


def test_the_short_form_names_the_flip_the_parts_and_the_counts() -> None:
    text = markdown(short_blocks(compare(side_of(STATED), side_of(FOULED))))
    assert "criterion not met" in text and "−86.454" in text and "1 changed input" in text
    assert "open items: 0 opened, 0 closed" in text
    assert "# " not in text, "no heading: the record has its own"
    empty = markdown(short_blocks(compare(side_of(STATED), side_of(STATED))))
    assert empty.endswith("Nothing changed.\n")


def test_a_result_that_one_side_does_not_have_is_a_fault() -> None:
    with pytest.raises(Faults) as caught:
        compare(side_of(STATED), side_of(FOULED), ("U_servce", "heat_flux_service"))
    assert {fault.code for fault in caught.value.faults} == {"result-unknown"}
    assert any("U_service" in fault.nearest for fault in caught.value.faults)


def test_sentences_of_others_stand_at_the_end() -> None:
    comparison = compare(
        side_of(STATED),
        side_of(FOULED),
        signoffs=("checked by M. R.: void, R_fi changed",),
        feeds=("TK-2 takes U_service",),
    )
    page = page_of(comparison)
    assert page.endswith("## Calculations that this one feeds\n\n- TK-2 takes U_service\n")
    assert "- checked by M. R.: void, R_fi changed" in page


def test_two_calculations_of_other_numbers_can_be_compared() -> None:
    page = page_of(compare(side_of(STATED), side_of(FOULED.replace("CV-1", "CV-9"))))
    assert page.startswith("# Comparison of CV-1, revision A, with CV-9, revision A\n")


def test_a_verdict_that_a_probability_decides_shows_it() -> None:
    """HC-985 misses its 95 %; 15 % more length meets it, with a margin that was above zero before."""
    text = example("hc-985")
    comparison = compare(example_side(text), example_side(with_value(text, "L", "5.61 m")))
    (flip,) = comparison.verdicts
    assert (flip.was, flip.now) == ("criterion not met", "criterion met")
    assert re.search(r"0\.08\d+ against 0; holds with 8\d\.\d\d %, 95 % is asked for", flip.figure_was)
    assert "95 % is asked for" in flip.figure_now


def test_what_is_found_from_a_solved_calculation_has_no_parts_and_says_why() -> None:
    """The margin of a kettle falls with its duty alone: by hand (1 + M)·Q is what the unit reaches."""
    text = example("kr-801")
    sides = example_side(text), example_side(with_value(text, "Q_c5", "2150 kW"))
    margin, control = compare(*sides, ("area_margin", "pressure_turned_down")).attributions
    assert (1.0 + margin.was) * 2000.0 == pytest.approx((1.0 + margin.now) * 2150.0, rel=1e-12)
    assert [part.title.startswith("Q_c5") for part in margin.parts] == [True]
    assert control.now > control.was and not control.has_parts
    page = page_of(compare(*sides, ("pressure_turned_down",)))
    assert "is found from a solved calculation, and not in mixtures of the two revisions" in page


def test_no_difference_is_taken_between_a_gauge_and_an_absolute_pressure() -> None:
    """4 bar above the site is some 101 kPa more than 4 bar: the readings alone differ by nothing."""
    old = example("wc-101")
    assert "4 bara" in old
    page = page_of(compare(side_of(old), side_of(old.replace("4 bara", "4 barg", 1))))
    (row,) = [line for line in page.splitlines() if "4 barg" in line and line.startswith("| streams/")]
    assert "| none: one is a gauge pressure | none |" in row
