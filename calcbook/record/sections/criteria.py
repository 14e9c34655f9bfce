"""Acceptance criteria as rows of a table."""

from __future__ import annotations

from calcbook.chain.analysis import is_found_once, keeps_what_is_found_later
from calcbook.chain.flips_outcome import CRITERION
from calcbook.chain.named_results import pressure_drop_of
from calcbook.chain.outcome import CriterionResult
from calcbook.chain.pressure import acting_methods, drops
from calcbook.formulas.names import written_name
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
from calcbook.record.sections.uncertainty import AT_STATED, certainty_words, result_of

CRITERION_COLUMNS = ("Criterion", "Case", "Stated", "Value", "Limit", "Margin", "Verdict", "Source")


def criterion_row(item: CriterionResult, page: Page) -> tuple[str, ...]:
    """A criterion with the figures that show its verdict."""
    unit = report_unit(item.kind, page.calculation.report)
    point = item.kind.scale == "point"
    shown = unit_text(unit)
    value, limit = apart(item.limit if item.words else item.value, item.limit, unit, point, PLAIN_DIGITS)
    verdict = "criterion met" if item.met else "criterion not met"
    verdict += _of_pressure_drop(item, page) or certainty_words(page.solved.uncertainty, item)
    verdict += _within_a_tolerance(item, page) + _on_day_one(item, page)
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


def _within_a_tolerance(item: CriterionResult, page: Page) -> str:
    """The given whose own tolerance reaches another verdict first, where no probability says as much."""
    found = page.solved.flips
    sampled = page.solved.uncertainty.sampling if page.solved.uncertainty is not None else None
    if found is None or sampled is not None:
        return ""
    flips = [
        flip
        for flip in found.of_kind(CRITERION)
        if (flip.id, flip.case) == (item.id, item.case) and flip.is_within_tolerance
    ]
    if not flips:
        return ""
    nearest = min(flips, key=lambda flip: abs(flip.tolerances))
    name = written_name(nearest.input.symbol)
    return f"; {name} alone turns it at {number(abs(nearest.tolerances), 2)} of its tolerance"


def _on_day_one(item: CriterionResult, page: Page) -> str:
    """The states of the clean unit at the same inlets in which a criterion that is met here is not."""
    failed = [one.case for one in page.missed_on_day_one(item.case) if one.id == item.id]
    return f"; not met on day one: {', '.join(failed)}" if failed and item.met else ""


def _of_pressure_drop(item: CriterionResult, page: Page) -> str:
    """What the cards of a pressure drop say of a verdict: whether their accuracy reaches to the limit."""
    named = pressure_drop_of(result_of(item))
    case = next((one for one in page.solved.cases if one.name == item.case), None)
    if named is None or case is None:
        return ""
    stream, condition = named
    stated = [
        (method.accuracy.band, method)
        for _, branch, drop in drops(page.chain)
        if branch.stream == stream
        for method in acting_methods(drop, case.solutions[condition])
        if method.accuracy is not None and method.accuracy.band is not None
    ]
    if not stated:
        return ""
    band, method = max(stated, key=lambda pair: pair[0])
    reaches = abs(item.margin) <= band * abs(item.value)
    return (
        f"{AT_STATED}; the limit lies within the accuracy of {method.id}, {percent(band)}" if reaches else ""
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


def not_judged(page: Page) -> str:
    """The criteria over what is found once for the calculation, and the cases that they say nothing of, in words."""
    later = [item.result for item in page.calculation.acceptance if is_found_once(item.result)]
    cases = [
        case_name(case.name)
        for case in page.solved.cases
        if not keeps_what_is_found_later(page.chain, case.name)
    ]
    return f"not judged in case {', '.join(cases)}: {', '.join(later)}" if later and cases else ""
