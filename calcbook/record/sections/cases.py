"""Sensitivity of U, and the cases."""

from __future__ import annotations

from calcbook.chain.outcome import CaseOutcome, SensitivityRow
from calcbook.formulas.names import written_name
from calcbook.quantities import in_unit
from calcbook.record.blocks import Block, Heading, Paragraph, Table
from calcbook.record.numbers import (
    CONCLUSION_DIGITS,
    celsius,
    in_report_unit,
    number,
    percent,
    report_unit,
    unit_text,
)
from calcbook.record.page import Page, case_name, counted
from calcbook.record.sections.criteria import CRITERION_COLUMNS, criterion_row
from calcbook.record.sections.day_one import day_one_blocks
from calcbook.record.sections.growth import time_blocks
from calcbook.record.sections.uncertainty import uncertainty
from calcbook.record.sections.validity import verdict


def sensitivity(page: Page) -> list[Block]:
    """What one per cent of each figure moves U in service by, largest first."""
    blocks: list[Block] = [Heading(2, "11. Sensitivity")]
    if not page.solved.sensitivity:
        return [*blocks, Paragraph("U in service depends on no figure of the file.")]
    unit = report_unit(page.base.results["U_service"].kind, page.calculation.report)
    words = (
        "Change of U in service when one figure rises by 1 % (a temperature by 1 K) and the others stay;"
        " from the slope at the base case, largest first."
    )
    columns = ("Figure", "Meaning", "Step", f"Change of U, {unit_text(unit)}", "Relative")
    rows = tuple(_sensitivity_row(row, unit) for row in page.solved.sensitivity)
    return [*blocks, Paragraph(words), Table(columns, rows), *uncertainty(page)]


def _sensitivity_row(row: SensitivityRow, unit: str) -> tuple[str, ...]:
    symbol = written_name(row.input.symbol) if row.input.is_given else row.input.title
    meaning = row.input.title if row.input.is_given else "stated where it is used"
    return (
        symbol,
        meaning,
        row.step,
        number(in_unit(row.change, unit), CONCLUSION_DIGITS),
        percent(row.relative, 3),
    )


# --- cases ------------------------------------------------------------------------------------------


def cases(page: Page) -> list[Block]:
    """Each named case, then the clean unit on its first day, then the unit over its time in service."""
    return [*_named_cases(page), *day_one_blocks(page), *time_blocks(page)]


def _named_cases(page: Page) -> list[Block]:
    """Each named case with what it restates, its results, checks and open items."""
    blocks: list[Block] = [Heading(2, "12. Cases")]
    if not page.has_cases:
        return [*blocks, Paragraph("No cases are stated; the base case stands alone.")]
    columns = (
        "Case",
        "U in service",
        "U clean",
        "Cleanliness",
        "Excess surface",
        "Controlling term",
        "Open items",
    )
    blocks.append(Table(columns, tuple(_overview(case, page) for case in page.solved.cases)))
    for case in page.solved.cases[1:]:
        blocks += _case(case, page)
    return blocks


def _overview(case: CaseOutcome, page: Page) -> tuple[str, ...]:
    report = page.calculation.report
    overall = [
        in_report_unit(case.results[name].value, case.results[name].kind, report, CONCLUSION_DIGITS)
        for name in ("U_service", "U_clean")
    ]
    controlling = (
        f"{case.controlling}, {percent(case.controlling_share)}"
        if case.controlling
        else "no single controlling resistance"
    )
    return (
        case_name(case.name),
        *overall,
        number(case.results["cleanliness"].value, CONCLUSION_DIGITS),
        percent(case.results["excess_surface"].value),
        controlling,
        str(len(case.open_items)),
    )


def _case(case: CaseOutcome, page: Page) -> list[Block]:
    blocks: list[Block] = [Heading(3, f"Case {case.name}"), _restated(case, page), _terms(case, page)]
    if case.criteria:
        blocks.append(
            Table(
                CRITERION_COLUMNS,
                tuple(criterion_row(item, page) for item in case.criteria),
            )
        )
    return [*blocks, *_case_assumptions(case, page), *_case_checks(case, page), *_case_items(case)]


def _restated(case: CaseOutcome, page: Page) -> Table:
    rows = []
    for symbol, given in page.calculation.cases[case.name].items():
        item = page.chain.inputs[f"given/{symbol}"]
        value = number(case.inputs[item.id], 10)
        unit = unit_text(item.kind.unit)
        rows.append(
            (
                written_name(symbol),
                item.title,
                given.value.text,
                f"{value} {unit}",
                item.text,
                given.source or "no source",
            )
        )
    return Table(
        ("Restated", "Meaning", "Value in this case", "Value in SI", "Value in the base case", "Source"),
        tuple(rows),
    )


def _terms(case: CaseOutcome, page: Page) -> Table:
    columns = ("Term, service", f"R on {page.basis}, m²·K/W", "Share", "T inner side, °C", "T outer side, °C")
    return Table(
        columns,
        tuple(
            (
                row.name,
                number(row.resistance),
                percent(row.share),
                celsius(row.inner_temperature),
                celsius(row.outer_temperature),
            )
            for row in case.terms["service"]
        ),
    )


def _case_assumptions(case: CaseOutcome, page: Page) -> list[Block]:
    """What the runner decided otherwise than in the base case."""
    base = {item.id: (item.text, item.decided_by) for item in page.base.assumptions}
    rows = tuple(
        (item.id, item.text, item.decided_by)
        for item in case.assumptions
        if base.get(item.id) != (item.text, item.decided_by)
    )
    if not rows:
        return [Paragraph("The runner decides as in the base case.")]
    return [Table(("Decided in this case", "Assumption", "Decided by"), rows)]


def _case_checks(case: CaseOutcome, page: Page) -> list[Block]:
    """The checks that are not within, each; the others counted."""
    within = [check for check in case.checks if check.state in ("within", "not counting")]
    rows = tuple(
        (
            check.id,
            check.condition,
            check.figure,
            check.limit,
            verdict(check, page.is_house(check.card)),
            check.level,
            check.accepted,
        )
        for check in case.checks
        if check not in within
    )
    words = Paragraph(
        f"Of {counted(len(case.checks), 'limit', 'limits')} {len(within)} are within or do not count here."
    )
    if not rows:
        return [words]
    return [words, Table(("Check", "Condition", "Figure", "Limit", "State", "Level", "Acceptance"), rows)]


def _case_items(case: CaseOutcome) -> list[Block]:
    if not case.open_items:
        return [Paragraph("No open items in this case.")]
    return [
        Table(("Kind", "Open item of this case"), tuple((item.kind, item.text) for item in case.open_items))
    ]
