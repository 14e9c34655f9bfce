"""Distance to flip: by how much each given may change before a verdict is another one."""

from __future__ import annotations

import math

from calcbook.chain.flips_outcome import CONTROLLING, CRITERION, LIMIT, METHOD, Flip, Flips, Searched
from calcbook.formulas.names import written_name
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table
from calcbook.record.numbers import CONCLUSION_DIGITS, MOST_DIGITS, PLAIN_DIGITS, number, unit_text, with_unit
from calcbook.record.page import Page, case_name
from calcbook.record.sections.uncertainty import AT_STATED

COLUMNS = ("Given", "Case", "Now", "Flips at", "Change", "In tolerances", "What flips")
TITLES = {
    CRITERION: ("Acceptance verdicts", "No acceptance verdict flips"),
    LIMIT: ("Limits", "No limit flips"),
    METHOD: ("Methods", "No method is replaced by another"),
    CONTROLLING: ("Controlling term", "The controlling term stays"),
}
DIFFERENCES = {"degC": "K", "degF": "degR"}


def flips(page: Page) -> list[Block]:
    """The smallest changes that flip a verdict, by kind of verdict, nearest first."""
    found = page.solved.flips
    if found is None:
        return []
    named = page.has_cases and page.calculation.acceptance
    cases = "the base case or of a named case" if named else "the base case"
    words = (
        f"The smallest change of one given, the other figures as they stand, with which a verdict of {cases}"
        " is another one; the circuit was solved at every figure named here. At the figure under “Flips at”"
        " the verdict has flipped; with its last digit one nearer to the present figure it has not. What its"
        " own tolerance can flip stands first, then the nearest, by the change in per cent of the figure; 1 K of a"
        " temperature counts as 1 %. A tolerance is counted as the file states it. Whole numbers step by one."
        " Plausible bands are not searched, and a verdict that flips and flips back between two figures of the"
        " search is not seen."
    )
    blocks: list[Block] = [Heading(3, "Distance to flip"), Paragraph(words), *_alone(page, found)]
    for kind in TITLES:
        blocks += _kind(page, found, kind)
    if found.unsettled:
        words = (
            "A verdict is another one somewhere in the range searched, but no figure could be settled, for: "
        )
        blocks.append(Paragraph(words + "; ".join(found.unsettled) + "."))
    return [*blocks, Heading(4, "Range searched"), _searched(found)]


def _alone(page: Page, found: Flips) -> list[Block]:
    """What moves with a figure that is changed alone, where an engineer would not expect it, and what is left out."""
    notes = []
    if page.result("closure") is not None:
        notes.append(
            "A flow or an end of the duty changed alone opens the heat balance: the duty is the mean of both streams,"
            " and the limits of its closure stand among the limits below."
        )
    if any(not math.isnan(item.probability) for item in page.calculation.acceptance):
        notes.append(
            "A criterion that asks for a probability is searched by its verdict at the stated values."
        )
    if found.left_out:
        left = "; ".join(found.left_out)
        notes.append(f"What is found once from the solved calculation is not searched: {left}.")
    geometry = page.calculation.geometry
    if geometry is not None and {"inside diameter", "outside diameter"} <= set(geometry.dimensions):
        notes.append("A diameter changed alone changes the thickness of the wall with it.")
    return [Bullets(tuple(notes))] if notes else []


def _kind(page: Page, found: Flips, kind: str) -> list[Block]:
    title, none = TITLES[kind]
    rows = tuple(_row(flip, page) for flip in found.of_kind(kind))
    blocks: list[Block] = [Heading(4, title)]
    if kind == CRITERION and not page.calculation.acceptance:
        return [*blocks, Paragraph("No acceptance criterion is stated.")]
    if kind in (LIMIT, METHOD, CONTROLLING) and page.has_cases and page.calculation.acceptance:
        blocks.append(Paragraph("For each given the smallest change of all cases."))
    if not rows:
        return [*blocks, Paragraph(f"{none} within the range searched, whichever given changes.")]
    blocks.append(Table(COLUMNS, rows))
    without = _without(found, kind)
    if without:
        blocks.append(Paragraph(f"{none} within the range searched when one of these changes: {without}."))
    return blocks


def _without(found: Flips, kind: str) -> str:
    """The givens that flip nothing of a kind; a criterion is asked in each case."""
    flipped = {(flip.input.id, flip.case) for flip in found.of_kind(kind)}
    anywhere = {name for name, _ in flipped}
    names: dict[str, None] = {}
    for item in found.searched:
        symbol = written_name(item.input.symbol)
        if item.input.id not in anywhere:
            names.setdefault(symbol)
        elif kind == CRITERION and (item.input.id, item.case) not in flipped:
            names.setdefault(f"{symbol} in case {case_name(item.case)}")
    return ", ".join(names)


def _row(flip: Flip, page: Page) -> tuple[str, ...]:
    unit = unit_text(flip.unit) if flip.unit else ""
    step = unit_text(DIFFERENCES.get(flip.unit, flip.unit)) if flip.unit else ""
    change = with_unit(number(flip.change, MOST_DIGITS), step)
    if math.isfinite(flip.steps) and flip.input.kind.scale != "point":
        change += f"; {number(math.copysign(flip.steps, flip.change), CONCLUSION_DIGITS)} %"
    tolerances = "no tolerance"
    if math.isfinite(flip.tolerances):
        tolerances = f"{number(flip.tolerances, CONCLUSION_DIGITS)} times {flip.tolerance}"
    return (
        written_name(flip.input.symbol),
        case_name(flip.case),
        flip.now_text,
        with_unit(number(flip.printed, MOST_DIGITS), unit),
        change,
        tolerances,
        _what(flip, page),
    )


def _what(flip: Flip, page: Page) -> str:
    if flip.kind == CONTROLLING:
        return f"{flip.was} to {flip.becomes}"
    where = ", ".join(word for word in (flip.id, flip.condition, flip.level) if word)
    is_stated = flip.kind == CRITERION and not math.isnan(page.calculation.criterion(flip.id).probability)
    return f"{where}{AT_STATED if is_stated else ''}: {flip.was} to {flip.becomes}"


def _searched(found: Flips) -> Table:
    return Table(
        ("Given", "Case", "From", "Ended below by", "To", "Ended above by"),
        tuple(_searched_row(item) for item in found.searched),
    )


def _searched_row(item: Searched) -> tuple[str, ...]:
    unit = unit_text(item.unit) if item.unit else ""
    return (
        written_name(item.input.symbol),
        case_name(item.case),
        with_unit(number(item.low, PLAIN_DIGITS), unit),
        item.low_end,
        with_unit(number(item.high, PLAIN_DIGITS), unit),
        item.high_end,
    )
