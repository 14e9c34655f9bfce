"""The survey of plant data: rows by rule, cleanings, the fit with its bounds, the allowance it proposes."""

from __future__ import annotations

import math

from calcbook.chain.survey_outcome import FittedFigure, PlotColumn, SurveyOutcome, SystematicPart, WorkedRow
from calcbook.formulas import write, write_with_values
from calcbook.formulas.names import written_name
from calcbook.quantities import in_unit, unit_factor
from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph, Table
from calcbook.record.numbers import (
    CONCLUSION_DIGITS,
    NOT_KNOWN,
    in_report_unit,
    number,
    percent,
    unit_text,
)
from calcbook.record.page import Page, counted
from calcbook.record.survey import DIGITS

PLOT_LINES = 15
TIME = unit_factor("s")[1]
# Offsets this many times their scatter apart are told.
OFFSETS_APART = 3.0
# A share of rejected rows that is told apart.
MANY_REJECTED = 0.25
ALLOWANCES = ("allowance_proposed", "allowance_fitted", "allowance_lower", "allowance_upper")


def survey(page: Page) -> list[Block]:
    """What plant data say about the fouling of the unit; nothing where the file has no survey."""
    outcome = page.solved.survey
    if outcome is None:
        return []
    return [
        Heading(3, "Survey of plant data"),
        *_rows(outcome),
        *_cycles(outcome, page),
        *_plot(outcome, page),
        *_fit(outcome, page),
        *_systematic(outcome),
        *_proposal(outcome, page),
    ]


def _days(seconds: float) -> str:
    return f"{number(in_unit(seconds, 'days'), DIGITS)} days" if math.isfinite(seconds) else NOT_KNOWN


def survey_brief_rows(page: Page) -> list[tuple[str, str, str]]:
    """The allowance that the survey proposes, for the conclusion."""
    outcome, proposed = page.solved.survey, page.result("allowance_proposed")
    if outcome is None or proposed is None:
        return []
    basis = f"{proposed.title}; {outcome.model} on {counted(outcome.fitted, 'row', 'rows')} of plant data"
    if survey_cautions(outcome):
        basis += "; what limits it stands in section 14"
    return [
        (
            "Fouling allowance proposed",
            in_report_unit(proposed.value, proposed.kind, page.calculation.report, CONCLUSION_DIGITS),
            basis,
        )
    ]


# -- rows --------------------------------------------------------------------------------------------


def _rows(outcome: SurveyOutcome) -> list[Block]:
    rejected = sum(rule.count for rule in outcome.rules)
    words = (
        f"History {outcome.file}, {outcome.source or 'no source'}: {counted(outcome.rows, 'row', 'rows')} ="
        f" {rejected} rejected + {outcome.kept} kept. Of those kept, {outcome.fitted} are fitted,"
        f" {outcome.before_cleaning} lie before the first cleaning and {outcome.not_anchored} after a cleaning"
        f" without rows to anchor zero on. Rows kept from {outcome.first} to {outcome.last}."
    )
    more = (
        "A row is rejected by the first rule that it breaks, in the order of the table."
        f" Steady state was not tested for {counted(outcome.not_compared, 'row', 'rows')} without a row close"
        f" before. {counted(outcome.out_of_order, 'row stands', 'rows stand')} before the row above in time;"
        " rows are taken in the order of time."
    )
    table = Table(
        ("Rule", "Rejects", "Limit", "Rows rejected", "First"),
        tuple((rule.id, rule.rejects, rule.limit, str(rule.count), rule.first) for rule in outcome.rules),
    )
    relations = (
        "Each row kept goes through the chain above, clean, at its own flows and temperatures:"
        f" {outcome.row_relations}{_of_heat(outcome.row_relations)}. R_f is that of all"
        " deposits of both sides together; where another calculation takes it, it stands for all of them."
    )
    many = [Paragraph(f"Caution: {line}") for line in _many_rejected(outcome)]
    return [
        Paragraph(words),
        table,
        *many,
        Paragraph(more),
        *_gaps(outcome),
        Paragraph(relations),
        *_worked(outcome.worked),
    ]


def _of_heat(relations: str) -> str:
    """What the heat of a row is, after its relations."""
    if "Q_hot" in relations:
        return ", where Q_hot is what the hot stream gives and x the heat loss"
    return ": the heat that is known has passed the wall, so a heat loss of the hot stream does not act"


def _worked(row: WorkedRow) -> list[Block]:
    """One row from its readings to the resistance that is fitted."""
    words = (
        f"The last row that is fitted, worked through: row {row.number} of {row.time}. A case of this calculation with the"
        " readings as its givens gives the figures of the chain, clean."
    )
    lines = [(written_name(one.symbol), one.head, "", one.cell, unit_text(one.unit)) for one in row.readings]
    lines += [
        (written_name(one.symbol), f"{one.title}, of the chain", "", number(one.value), unit_text(one.unit))
        for one in row.chain
    ]
    for one in row.steps:
        assert one.relation is not None
        text = number(one.value)
        put_in = write_with_values(one.relation, one.values, text)
        lines.append((written_name(one.symbol), write(one.relation), put_in, text, unit_text(one.unit)))
    last = row.steps[-1].value
    offset = (
        f"Less the offset {number(row.offset)} m²·K/W of the cleaning of {row.cleaning}, it stands"
        f" {number(last - row.offset)} m²·K/W above zero."
    )
    return [
        Paragraph(words),
        Table(("Figure", "Meaning or relation", "Values put in", "Value", "Unit"), tuple(lines), (offset,)),
    ]


def survey_cautions(outcome: SurveyOutcome) -> list[str]:
    """What a reader of the proposal must not overlook."""
    beyond = [_reach(outcome)] if outcome.after > outcome.period else []
    below = (
        [
            f"The proposal is a limit of {percent(outcome.percentile, 0)}: as likely as not the deposit is larger."
        ]
        if outcome.percentile <= 0.5
        else []
    )
    return [*_many_rejected(outcome), *_many_not_fitted(outcome), *_offsets_apart(outcome), *beyond, *below]


def _many_not_fitted(outcome: SurveyOutcome) -> list[str]:
    lost = outcome.before_cleaning + outcome.not_anchored
    if not lost > MANY_REJECTED * outcome.kept:
        return []
    return [
        f"{percent(lost / outcome.kept)} of the kept rows are not fitted: they lie before the first cleaning, or after one"
        " without rows to anchor zero. The dates of the cleanings may not be those of the data."
    ]


def _many_rejected(outcome: SurveyOutcome) -> list[str]:
    rejected = outcome.rows - outcome.kept
    if not rejected > MANY_REJECTED * outcome.rows:
        return []
    return [
        f"{percent(rejected / outcome.rows)} of the rows are rejected; what is left may not stand for the unit."
    ]


def _gaps(outcome: SurveyOutcome) -> list[Block]:
    if not outcome.gaps:
        return []
    return [
        Bullets(tuple(f"No kept rows for {_days(gap.length)} from {gap.begins}." for gap in outcome.gaps))
    ]


def _cycles(outcome: SurveyOutcome, page: Page) -> list[Block]:
    words = (
        "Zero is anchored after each cleaning: the mean resistance of the rows named is taken from every row up to"
        " the next cleaning, and the fit takes the mean of the model at the same times from itself. The offset"
        f" on {page.basis} is that mean less what the model has grown there: what is wrong in all rows alike, and"
        " what the cleaning left behind. The fit does not contain it."
    )
    columns = (
        "Cleaning",
        "Source",
        "Rows",
        "Last row after",
        "Rows for zero",
        "Within",
        "Offset, m²·K/W",
        "Standard uncertainty, scatter",
        "Standard uncertainty, systematic",
    )
    rows = tuple(
        (
            one.cleaning,
            one.source or "no source",
            str(one.rows),
            _days(one.last),
            str(one.zero_rows),
            _days(one.zero_until),
            *(number(figure, DIGITS) for figure in (one.offset, one.scatter, one.systematic)),
        )
        for one in outcome.cycles
    )
    apart = [Paragraph(f"Caution: {line}") for line in _offsets_apart(outcome)]
    return [Paragraph(words), Table(columns, rows), *apart]


def _offsets_apart(outcome: SurveyOutcome) -> list[str]:
    """Where the cleanings do not start from one zero."""
    apart = outcome.offsets_differ_by
    if not apart > OFFSETS_APART * outcome.offsets_scatter:
        return []
    return [
        f"the offsets lie {number(apart, DIGITS)} m²·K/W apart, more than {OFFSETS_APART:g} times their scatter, and"
        " what is wrong in all rows alike cannot set them apart: a cleaning left a deposit behind, or a sensor"
        " stepped. The proposal counts from the zero of each run and does not contain it."
    ]


# -- plot --------------------------------------------------------------------------------------------


def _plot(outcome: SurveyOutcome, page: Page) -> list[Block]:
    words = (
        f"Fouling resistance on {page.basis} over time, in 1e−4 m²·K/W: o mean of the rows in a column,"
        " - fit there, * both, | cleaning."
    )
    return [Paragraph(words), Code("\n".join(_drawing(outcome.plot)))]


def _drawing(columns: tuple[PlotColumn, ...]) -> list[str]:
    figures = [1e4 * one for column in columns for one in (column.mean, column.fitted) if math.isfinite(one)]
    low, high = min(0.0, *figures), max(0.0, *figures)
    step = (high - low) / (PLOT_LINES - 1) or 1.0
    lines = [[" "] * len(columns) for _ in range(PLOT_LINES)]
    for place, column in enumerate(columns):
        for figure, mark in ((column.fitted, "-"), (column.mean, "o")):
            if math.isfinite(figure):
                line = lines[PLOT_LINES - 1 - round((1e4 * figure - low) / step)]
                line[place] = "*" if line[place] == "-" else mark
    drawn = []
    for place, line in enumerate(lines):
        label = f"{high - place * step:7.2f}".replace("-", "−") if place % 2 == 0 else " " * 7
        drawn.append(f"{label} {''.join(line)}".rstrip())
    drawn.append(" " * 8 + "".join("|" if column.cleaned else "." for column in columns))
    half = len(columns) // 2
    ends = (columns[0].begins, columns[half].begins)
    drawn.append(f"{'':8}{ends[0]:<{half}}{ends[1]}".rstrip())
    return drawn


# -- fit ---------------------------------------------------------------------------------------------


def _fit(outcome: SurveyOutcome, page: Page) -> list[Block]:
    words = (
        f"Growth model {outcome.model_title} ({outcome.model}): {outcome.relation}. Least squares over"
        f" {counted(outcome.fitted, 'row', 'rows')}; standard deviation of a row about the fit"
        f" {number(outcome.deviation, DIGITS)} m²·K/W, correlation of neighbouring residuals"
        f" {number(outcome.correlation, 2)}"
        f"{', for which the scatter of the parameters is widened' if outcome.correlation > 0.0 else ''}."
    )
    counts = (
        f"{counted(outcome.negative, 'row has', 'rows have')} a resistance below zero and"
        f" {'is' if outcome.negative == 1 else 'are'} kept; for {outcome.not_resolved} it is less than twice its"
        " standard uncertainty (not resolved)."
    )
    columns = (
        "Figure",
        "Meaning",
        "Fit",
        "Unit",
        "Lower 95 % bound",
        "Upper 95 % bound",
        "Standard uncertainty, scatter",
        "Standard uncertainty, systematic",
    )
    return [
        Paragraph(words),
        Paragraph(counts),
        Table(columns, tuple(_figure_row(one, page) for one in outcome.figures)),
    ]


def _figure_row(one: FittedFigure, page: Page) -> tuple[str, ...]:
    meaning = f"{one.title}, on {page.basis}" if "K/W" in one.kind.unit else one.title
    unit = unit_text(one.kind.unit)
    if one.held:
        return (written_name(one.symbol), f"{one.title}; {one.held}", number(one.value), unit, "", "", "", "")
    fit = number(one.value, DIGITS)
    if one.kind.dimension == TIME:
        fit = f"{fit} ({_days(one.value)})"
    rest = (one.lower, one.upper, one.scatter, one.systematic)
    return (written_name(one.symbol), meaning, fit, unit, *(number(figure, DIGITS) for figure in rest))


def _systematic(outcome: SurveyOutcome) -> list[Block]:
    """What is wrong in all rows alike, and what one standard uncertainty of it moves."""
    if not outcome.parts:
        return [Paragraph("No tolerance is stated: the bounds hold the scatter of the rows alone.")]
    words = (
        "What is wrong in all rows alike is carried to each row by the slopes of the chain, taken at"
        f" {counted(outcome.slope_rows, 'row', 'rows')} spread over all, and from the rows to the fit. The bounds"
        " are 1.96 times the root of the summed squares of scatter and all parts. Every part counts once, with"
        " one value for the whole history; a drift starts from nothing at the first row."
    )
    names = [name for name, _ in outcome.parts[0].moves]
    heads = tuple(f"Moves {name}" for name in names)
    blocks: list[Block] = [
        Paragraph(words),
        Table(
            ("Part", "Tolerance", "Distribution", "Standard uncertainty", *heads),
            tuple(_part_row(part) for part in outcome.parts),
        ),
    ]
    if outcome.without_accuracy:
        missing = ", ".join(outcome.without_accuracy)
        blocks.append(Paragraph(f"No accuracy is stated for {missing}: the bounds leave it out."))
    return blocks


def _part_row(part: SystematicPart) -> tuple[str, ...]:
    unit = unit_text(part.kind.unit)
    standard = percent(part.standard, 3) if unit == "1" else f"{number(part.standard, 3)} {unit}"
    return (
        part.title,
        part.tolerance,
        part.distribution,
        standard,
        *(number(moved, 2) for _, moved in part.moves),
    )


def _proposal(outcome: SurveyOutcome, page: Page) -> list[Block]:
    rows = tuple(
        (name, page.base.results[name].title, number(page.base.results[name].value, DIGITS))
        for name in ALLOWANCES
        if name in page.base.results
    )
    words = (
        "The percentile is that of the fitted resistance with its uncertainty, not of single rows: their scatter"
        f" is that of the readings. It counts from the anchored zero, on {page.basis}. Other calculations take"
        " these results by name."
    )
    runs = counted(sum(cycle.zero_rows > 0 for cycle in outcome.cycles), "run", "runs")
    spread = (
        f"It rests on {runs} of this unit: how runs differ from each other is not in the percentile, nor is what a"
        " cleaning leaves behind."
    )
    return [
        Table(("Result", "Meaning", "Value, m²·K/W"), rows),
        Paragraph(words),
        Bullets((_reach(outcome), spread)),
    ]


def _reach(outcome: SurveyOutcome) -> str:
    words = (
        f"The proposal stands {_days(outcome.after)} after a cleaning; rows reach {_days(outcome.period)}."
    )
    return f"{words} Beyond the rows it is the model alone." if outcome.after > outcome.period else words
