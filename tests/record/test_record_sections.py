"""The record: its sections in order, every step and every open item, and words that do not claim too much."""

from __future__ import annotations

import importlib.util
import re
import sys
from dataclasses import replace
from pathlib import Path
from types import ModuleType

import pytest

from calcbook import interface
from calcbook.chain.outcome import Solved
from calcbook.formulas.names import written_name
from calcbook.record import digest_of, record_blocks, record_text
from calcbook.record.blocks import Heading, Table
from calcbook.record.steps import StepTexts

SECTIONS = (
    "1. Title block",
    "2. Result in brief",
    "3. Changes since the last issued revision",
    "4. Purpose",
    "5. Givens",
    "6. Assumptions and properties",
    "7. Circuit",
    "8. Calculation chain",
    "9. Validity",
    "10. Cross-check and closure",
    "11. Sensitivity",
    "12. Cases",
    "13. Review",
    "14. Cautions",
    "15. References",
    "16. Sign-off",
    "17. Revision history",
    "18. End",
)
STRANGER = Path(__file__).resolve().parent.parent / "test_stranger.py"


@pytest.fixture(scope="module")
def stranger() -> ModuleType:
    """The stranger's check, which imports nothing of the program."""
    specification = importlib.util.spec_from_file_location("stranger", STRANGER)
    assert specification is not None and specification.loader is not None
    module = importlib.util.module_from_spec(specification)
    sys.modules["stranger"] = module
    specification.loader.exec_module(module)
    return module


def section(text: str, number: int) -> str:
    """The text of a section of the record."""
    return re.split(r"^## ", text, flags=re.MULTILINE)[number]


# --- the whole --------------------------------------------------------------------------------------


def test_the_sections_stand_in_order(solved: Solved) -> None:
    blocks = record_blocks(solved, digest_of(solved))
    assert (
        tuple(block.text for block in blocks if isinstance(block, Heading) and block.level == 2) == SECTIONS
    )


def test_no_table_is_empty(solved: Solved) -> None:
    for block in record_blocks(solved, digest_of(solved)):
        if isinstance(block, Table):
            assert block.rows, block.columns


def test_a_record_is_the_same_twice(water_cooler: Solved) -> None:
    again = interface.solve(interface.read(Path(__file__).parent / "water_cooler.yaml"))
    assert record_text(again) == record_text(water_cooler)


def test_a_stranger_recomputes_every_record(text: str, stranger: ModuleType) -> None:
    counts = stranger.check_record(text)
    assert counts["relation"] >= 5


def test_table_rows_of_cards_are_recomputed_too(air_heater_text: str, stranger: ModuleType) -> None:
    assert stranger.check_record(air_heater_text)["table"] == 2


def test_roots_and_sums_of_cards_are_recomputed_too(rough_tube_text: str, stranger: ModuleType) -> None:
    counts = stranger.check_record(rough_tube_text)
    assert (counts["root"], counts["sum"]) == (1, 1)


def test_a_stranger_misses_a_figure_that_stands_nowhere(water_cooler_text: str, stranger: ModuleType) -> None:
    changed = water_cooler_text.replace("| 0.01905 m |", "| 0.02005 m |")
    with pytest.raises(AssertionError, match=r"0\.01905 stands nowhere else on the page"):
        stranger.check_record(changed)


def test_constants_of_cards_are_printed_and_named(rough_tube_text: str) -> None:
    chain = section(rough_tube_text, 8)
    assert "\nConstants of house-rough-tube: e = 0.001.\n" in chain
    assert "colebrook-1939; eD is e of house-rough-tube |" in chain


def test_a_card_on_trial_is_cautioned(rough_tube_text: str, water_cooler_text: str) -> None:
    assert "The card house-rough-tube is on trial" in section(rough_tube_text, 14)
    assert "on trial" not in section(water_cooler_text, 14)


def test_the_closing_line_names_number_and_revision(water_cooler_text: str) -> None:
    assert water_cooler_text.endswith("\nEnd of calculation TEST-1, revision B.\n")


def test_no_word_claims_approval(text: str) -> None:
    for word in (
        "safe",
        "verified by the program",
        "compliant",
        "approved by",
        "\u2713",
        "\u2714",
        "\u2192",
        "PASS",
        "FAIL",
    ):
        assert not re.search(rf"(?<!\w){re.escape(word)}(?!\w)", text), word
    assert not re.search(r"(?<!\\)<[a-zA-Z/!]", text), "raw HTML"


# --- the chain --------------------------------------------------------------------------------------


def test_every_step_is_printed_once(solved: Solved) -> None:
    blocks = record_blocks(solved, digest_of(solved))
    printed = [
        row
        for block in blocks
        if isinstance(block, Table) and block.columns[0] == "Quantity"
        for row in block.rows
    ]
    texts = StepTexts(solved.chain, solved.base, solved.cards)
    rows = [row for term in solved.base.chains for row in term.rows] + list(solved.base.circuit)
    wanted = [texts.line(row).cells for row in {row.step.id: row for row in rows}.values()]
    assert [row for row in printed if row in wanted] == wanted
    closing = [row for row in printed if row not in wanted]
    assert all(row[6].startswith("closed with the circuit") for row in closing)


def test_every_symbol_of_a_given_is_in_the_givens_table(solved: Solved) -> None:
    text = section(record_text(solved), 5)
    for symbol in solved.chain.calculation.givens:
        assert f"\n| {written_name(symbol)} " in text


def test_a_temperature_that_the_circuit_closes_is_printed(oven_wall_text: str) -> None:
    chain = section(oven_wall_text, 8)
    assert "| surface temperature T_s | T_out + q_i·R_5 |" in chain
    assert "| temperature at the inner side T_1 | T_in − q_i·(R_1 + R_2 + R_3) |" in chain


def test_clean_values_put_in_stand_beneath_the_table(water_cooler_text: str) -> None:
    chain = section(water_cooler_text, 8)
    assert "Clean, where it differs, with the clean values put in:" in chain
    assert re.search(r"^- K = \(2\.4184/2\.8858\)\^0\.11 = 0\.98075$", chain, re.MULTILINE)


def test_a_deposit_is_absent_when_clean(air_heater_text: str) -> None:
    assert "- area resistance of the deposit R_f = 0 m²·K/W: no deposit" in section(air_heater_text, 8)


def test_a_conditional_is_shown_whole_and_taken(water_cooler_text: str) -> None:
    chain = section(water_cooler_text, 8)
    assert (
        "| K | (Pr/Pr_s)^0.11 if liquid, else (T_b/T_s)^n_gas if heated, else 1 | (2.4184/2.6254)^0.11 |"
        in chain
    )


def test_a_method_keeps_its_symbols_and_says_what_stands_for_them(water_cooler_text: str) -> None:
    assert "gnielinski-1976; d is d_i |" in section(water_cooler_text, 8)


# --- the brief --------------------------------------------------------------------------------------


def test_u_is_concluded_with_three_digits(water_cooler_text: str) -> None:
    brief = section(water_cooler_text, 2)
    assert "| U in service | 1130 W/(m²·K) |" in brief and "| U clean | 2320 W/(m²·K) |" in brief


def test_us_units_come_first_where_the_report_asks_for_them(air_heater_text: str) -> None:
    assert re.search(
        r"\| U in service \| [\d.]+ Btu/\(h·ft²·°F\) \([\d.]+ W/\(m²·K\)\) \|", section(air_heater_text, 2)
    )


def test_every_open_item_is_printed_with_its_kind(solved: Solved) -> None:
    brief = section(record_text(solved), 2)
    for item in solved.open_items:
        assert f"| {item.kind} | {item.id} |" in brief
    assert ("No open items." in brief) == (not solved.open_items)


def test_preliminary_follows_from_open_items(solved: Solved) -> None:
    head = section(record_text(solved), 1)
    assert ("| Confirmation | preliminary:" in head) == bool(solved.open_items)
    assert ("| Confirmation | confirmed |" in head) == (not solved.open_items)


def test_verdicts_are_words_with_margins(water_cooler_text: str, round_vessel_text: str) -> None:
    assert "125 W/(m²·K); 12.5 % of the limit | criterion met |" in section(water_cooler_text, 2)
    assert "| criterion not met |" in section(round_vessel_text, 2)
    assert "criterion 1 is not met in case base" in section(round_vessel_text, 14)


def test_the_governing_case_is_named(water_cooler_text: str, oven_wall_text: str) -> None:
    assert "Governing case: winter (smallest margin of" in section(water_cooler_text, 2)
    assert "Governing case" not in oven_wall_text


# --- validity, review, cautions ---------------------------------------------------------------------


def test_a_limit_from_memory_is_never_called_published(solved: Solved) -> None:
    validity = section(record_text(solved), 9)
    for check in solved.base.checks:
        rows = [line for line in validity.split("\n") if line.startswith(f"| {check.id} |")]
        assert len(rows) == 1
        if check.standing != "published":
            assert "published range" not in rows[0]
        if check.standing == "from memory" and check.state == "within":
            assert "within (limit from memory)" in rows[0]


def test_questions_for_a_person_stay_open(text: str) -> None:
    review = section(text, 13)
    assert review.count("| for the checker: |") == 12


def test_the_fixed_cautions_stand_in_every_record(text: str) -> None:
    cautions = section(text, 14)
    assert cautions.count("\n> ") == 10


def test_a_hot_surface_is_told_where_the_site_has_a_limit_and_a_hand_can_reach_it(
    oven_wall: Solved, water_cooler: Solved
) -> None:
    for solved, symbol, words in (
        (oven_wall, "T_out", "service: the outside surface is at 27.11 °C, above the site limit of 20 degC"),
        # 40.31 degC, but in the water of a shell: its coefficient is larger than air can give.
        (water_cooler, "T_cold", ""),
    ):
        calculation = solved.chain.calculation
        settings = replace(calculation.settings, surface_temperature=calculation.givens[symbol].value)
        chain = replace(solved.chain, calculation=replace(calculation, settings=settings))
        cautions = section(record_text(replace(solved, chain=chain)), 14)
        assert words in cautions and ("above the site limit" in cautions) == bool(words)


def test_the_limit_of_excess_surface_is_the_books(water_cooler: Solved) -> None:
    assert "above 50.0 % (common practice)" in section(record_text(water_cooler), 14)


def test_cases_show_what_they_restate(water_cooler_text: str) -> None:
    cases = section(water_cooler_text, 12)
    assert (
        "| T_cold | mean cold temperature | 12 degC | 285.15 K | 31 degC | heat balance sheet 14 |" in cases
    )


def test_references_are_numbered_within_their_card(water_cooler_text: str) -> None:
    references = section(water_cooler_text, 15)
    assert "\n| gnielinski-1976 / 1 |" in references and "| published |" in references
    assert "\n| heat balance sheet 12 | T_hot; T_cold;" in references


def test_texts_of_the_file_cannot_break_the_page(oven_wall_text: str) -> None:
    assert r"| Title | Oven \| wall \<b> |" in oven_wall_text
    assert r"\<script>" in section(oven_wall_text, 4)


def _documents(text: str) -> dict[str, str]:
    table = text.partition("### Documents")[2].partition("\n## ")[0]
    rows = [line.strip("| ").split(" | ") for line in table.splitlines() if line.startswith("| ")]
    return {row[0]: row[1] for row in rows if len(row) == 2}


def _documents_of(name: str) -> dict[str, str]:
    root = Path(__file__).resolve().parents[2] / "calcs"
    return _documents(interface.record_text(interface.solve_file(root / name)))


def test_limits_of_the_book_and_evidence_are_among_the_documents() -> None:
    found = _documents_of("hr-821.yaml")
    assert found["plant standard LM-PS-07"] == "limit of the book, excess surface: 40 %"
    assert found["inspection report LM-IR-77"] == "evidence of assumption A1"


def test_only_a_surface_that_stands_free_is_held_against_the_limit_of_the_book(water_cooler: Solved) -> None:
    assert not any("limit of the book" in names for names in _documents(record_text(water_cooler)).values())
    pipe, bank = _documents_of("sl-301.yaml"), _documents_of("ha-992.yaml")
    assert "limit of the book, surface temperature: 60 degC" in pipe["site safety rule LM-HS-09"]
    # Air is led past the finned bank inside a duct.
    assert not any("surface temperature" in names for names in bank.values())
