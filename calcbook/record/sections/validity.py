"""Validity: every limit with its figure; then the cross-check by other methods, and closure."""

from __future__ import annotations

import math
from collections.abc import Sequence

from calcbook.chain.outcome import CheckResult, ClosureRow, CrossRow
from calcbook.chain.types import CONDITIONS
from calcbook.quantities import in_unit
from calcbook.record.blocks import Block, Heading, Paragraph, Table
from calcbook.record.numbers import (
    CONCLUSION_DIGITS,
    NOT_USED,
    apart,
    number,
    percent,
    report_unit,
    unit_text,
)
from calcbook.record.page import HOUSE_METHOD, Page, case_name, counted
from calcbook.record.sections.uncertainty import result_of

PUBLISHED = "published"
RESIDUAL_DIGITS = 2
# Residuals are told from one another down to this power of ten.
SMALLEST_EXPONENT = -12
SMALLEST_RESIDUAL = 10.0**SMALLEST_EXPONENT


def validity(page: Page) -> list[Block]:
    """Each limit of the base case in both conditions."""
    blocks: list[Block] = [Heading(2, "9. Validity")]
    if not page.base.checks:
        return [*blocks, Paragraph("No limit applies to this calculation.")]
    blocks.append(Paragraph(_counts(page)))
    blocks.append(
        Table(
            (
                "Check",
                "Limit",
                "Figure, service",
                "Service",
                "Figure, clean",
                "Clean",
                "Level",
                "Because",
                "Source",
            ),
            tuple(_rows(page)),
        )
    )
    accepted = tuple(
        (check.id, check.condition, check.accepted) for check in page.base.checks if check.accepted
    )
    if accepted:
        blocks += [
            Heading(3, "Accepted by the engineer"),
            Table(("Check", "Condition", "Acceptance"), accepted),
        ]
    return blocks


def _counts(page: Page) -> str:
    states = [check.state for check in page.base.checks]
    words = ", ".join(
        f"{states.count(state)} {state}"
        for state in dict.fromkeys(("within", "outside", "accepted", "not evaluable", "not counting"))
        if state in states
    )
    return (
        f"{counted(len(states), 'limit evaluated', 'limits evaluated')} in the base case, each condition by"
        f" itself: {words}. A range limit outside or not evaluable is an open item; a caution does not"
        " block."
    )


def _rows(page: Page) -> list[tuple[str, ...]]:
    """One row per check; both conditions stand in it."""
    by_id: dict[str, dict[str, CheckResult]] = {}
    for check in page.base.checks:
        by_id.setdefault(check.id, {})[check.condition] = check
    rows = []
    for name, found in by_id.items():
        one = next(iter(found.values()))
        cells = []
        for condition in reversed(CONDITIONS):
            there = found.get(condition)
            cells += (
                [there.figure, verdict(there, page.is_house(there.card))]
                if there is not None
                else [NOT_USED, NOT_USED]
            )
        limits = dict.fromkeys(check.limit for check in found.values())
        rows.append((name, "; ".join(limits), *cells, one.level, one.because, _source(one, page)))
    return rows


def verdict(check: CheckResult, house: bool = False) -> str:
    """The state of a check in words that do not say more than the standing of its limit."""
    if house and check.state in ("within", "outside"):
        return f"{check.state} ({HOUSE_METHOD})"
    if check.state == "within":
        return (
            "within published range"
            if check.standing == PUBLISHED
            else f"within ({_standing(check.standing)})"
        )
    if check.state == "outside":
        return (
            "outside published range"
            if check.standing == PUBLISHED
            else f"outside ({_standing(check.standing)})"
        )
    if check.state == "accepted":
        return "outside, accepted with a reason"
    return "does not count here" if check.state == "not counting" else check.state


def _standing(standing: str) -> str:
    return {
        "common practice": "common practice",
        "as stated": "range stated with the value",
        "from memory": "limit from memory",
        "independent library": "limit from an independent library",
        "independent numerics": "limit from independent numerics",
    }.get(standing, standing)


def _source(check: CheckResult, page: Page) -> str:
    """Where a limit comes from: a reference of section 15, or its standing alone."""
    house = f"{HOUSE_METHOD}; " if page.is_house(check.card) else ""
    if not check.source or check.source == check.standing:
        return house + check.standing
    return house + f"{page.reference(check.card, check.source)}; {check.standing}"


# --- cross-check ------------------------------------------------------------------------------------


def cross_check(page: Page) -> list[Block]:
    """Other methods of the same situations in service, and closure."""
    blocks: list[Block] = [
        Heading(2, "10. Cross-check and closure"),
        Heading(3, "Cross-check by other methods"),
    ]
    crossed = page.solved.cross
    if not any(crossed.values()):
        blocks.append(Paragraph("No film of this calculation has another method: no cross-check is made."))
    if any(not row.left_out for rows in crossed.values() for row in rows):
        blocks.append(
            Paragraph(
                "Each other method within its range here is put in the place of the one used and the"
                " circuit is closed again. Methods of one family share an ancestor and are not independent"
                " of each other."
            )
        )
    for case, rows in crossed.items():
        if len(crossed) > 1 and rows:
            governs = ", which governs" if case in page.solved.governing.values() else ""
            blocks.append(Heading(4, f"Case {case_name(case)}{governs}"))
        blocks += _crossed(case, rows, page)
    return [*blocks, *_closure(page)]


def _crossed(case: str, rows: Sequence[CrossRow], page: Page) -> list[Block]:
    """The other methods of one case: what those within range give, and why others are left out.

    What the base case leaves out too is counted and not listed again.
    """
    blocks: list[Block] = []
    used = tuple(row for row in rows if not row.left_out)
    listed = {(row.term, row.method) for row in page.solved.cross[""] if case and row.left_out}
    out = tuple(row for row in rows if row.left_out and (row.term, row.method) not in listed)
    again = sum(bool(row.left_out) for row in rows) - len(out)
    if used:
        has_clean = any(math.isfinite(row.overall_clean) for row in used)
        unit = unit_text(report_unit(page.base.results["U_service"].kind, page.calculation.report))
        blocks.append(
            Table(
                (
                    "Film",
                    "Method",
                    f"h in service, {unit}",
                    f"U in service, {unit}",
                    "Difference of U",
                    *([f"U clean, {unit}"] if has_clean else []),
                    "Family",
                    "Independent of the method used",
                    "Its cautions that are outside",
                ),
                tuple(_cross_row(row, case, has_clean, page) for row in used),
            )
        )
    elif rows:
        blocks.append(Paragraph("No other method is within its range here."))
    if out:
        blocks += [
            Paragraph("Left out:"),
            Table(
                ("Film", "Method", "Why it is left out"),
                tuple((row.term, row.method, row.left_out) for row in out),
            ),
        ]
    if again:
        blocks.append(Paragraph(f"Left out as in the base case: {counted(again, 'method', 'methods')}."))
    return blocks


def _cross_row(row: CrossRow, case: str, has_clean: bool, page: Page) -> tuple[str, ...]:
    unit = report_unit(page.base.results["U_service"].kind, page.calculation.report)
    return (
        row.term,
        f"{row.title} ({row.method})",
        number(in_unit(row.coefficient, unit), CONCLUSION_DIGITS),
        _beside_limits(row.overall, "U_service", case, page),
        percent(row.difference),
        *([_beside_limits(row.overall_clean, "U_clean", case, page)] if has_clean else []),
        row.family,
        "no, same family" if row.same_family else "yes, another family",
        "; ".join(row.cautions) or "none",
    )


def _beside_limits(value: float, name: str, case: str, page: Page) -> str:
    """A figure that criteria of its case may judge, with so many digits that their verdicts can be seen."""
    kind = page.base.results[name].kind
    unit = report_unit(kind, page.calculation.report)
    limits = [
        item.limit
        for one in page.solved.cases
        if one.name == case
        for item in one.criteria
        if result_of(item) == name
    ]
    texts = [apart(value, limit, unit, kind.scale == "point", CONCLUSION_DIGITS)[0] for limit in limits]
    return max(texts, key=len, default=number(in_unit(value, unit), CONCLUSION_DIGITS))


# --- closure ----------------------------------------------------------------------------------------


def _closure(page: Page) -> list[Block]:
    rows = page.base.closure
    blocks: list[Block] = [Heading(3, "Closure")]
    if not rows:
        return [*blocks, Paragraph("There is nothing to close.")]
    words = (
        "Closure shows that the circuit was solved, not that its figures are right. The residual is the"
        " difference divided by the figure it is held against."
    )
    return [
        *blocks,
        Paragraph(words),
        Table(("What", "Condition", "Value", "Against", "Unit", "Residual"), tuple(map(_closure_row, rows))),
    ]


def _closure_row(row: ClosureRow) -> tuple[str, ...]:
    return (
        row.what,
        row.condition,
        number(row.value, 7),
        number(row.against, 7),
        unit_text(row.unit),
        residual(row.residual),
    )


def residual(value: float) -> str:
    """A residual as a bound in powers of ten: its last bits differ between processors and say nothing."""
    for exponent in range(SMALLEST_EXPONENT, 0):
        if abs(value) <= 10.0**exponent:
            return f"below 1e\u2212{-exponent}"
    return number(value, RESIDUAL_DIGITS)
