"""Acceptance criteria as rows of a table."""

from __future__ import annotations

from calcbook.chain.outcome import CriterionResult
from calcbook.record.numbers import (
    CONCLUSION_DIGITS,
    PLAIN_DIGITS,
    apart,
    in_report_unit,
    number,
    percent,
    report_unit,
    unit_text,
    with_unit,
)
from calcbook.record.page import Page, case_name
from calcbook.record.sections.uncertainty import certainty_words

CRITERION_COLUMNS = ("Criterion", "Case", "Stated", "Value", "Limit", "Margin", "Verdict", "Source")


def criterion_row(item: CriterionResult, page: Page) -> tuple[str, ...]:
    """A criterion with the figures that show its verdict."""
    unit = report_unit(item.kind, page.calculation.report)
    point = item.kind.scale == "point"
    shown = unit_text(unit)
    value, limit = apart(item.limit if item.words else item.value, item.limit, unit, point, PLAIN_DIGITS)
    verdict = "criterion met" if item.met else "criterion not met"
    if not item.case:
        verdict += certainty_words(page.solved.uncertainty, item)
    return (
        item.id,
        case_name(item.case),
        item.that,
        item.words or with_unit(value, shown),
        with_unit(limit, shown),
        "not known" if item.words else _margin(item, page),
        verdict,
        item.source or "no source",
    )


def _margin(item: CriterionResult, page: Page) -> str:
    """The margin in the unit of the report; that of a temperature is a difference."""
    if item.kind.scale == "point":
        return with_unit(number(item.margin, CONCLUSION_DIGITS), unit_text(item.kind.unit))
    margin = in_report_unit(item.margin, item.kind, page.calculation.report, CONCLUSION_DIGITS)
    relative = ""
    if item.limit and item.kind.unit != "1":
        relative = f"; {percent(item.margin / abs(item.limit))} of the limit"
    return margin + relative
