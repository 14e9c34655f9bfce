"""The unit over the time since its cleaning, and its cleaning interval, in the record."""

from __future__ import annotations

import math

from calcbook.calcfile.in_service import DUTY
from calcbook.chain.growth_outcome import Interval, OverTime, TimeRow
from calcbook.formulas import number_text, write, write_with_values
from calcbook.library import vocabulary
from calcbook.quantities import in_unit
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table
from calcbook.record.numbers import (
    CONCLUSION_DIGITS,
    NOT_KNOWN,
    PLAIN_DIGITS,
    celsius,
    number,
    percent,
    report_unit,
    unit_text,
)
from calcbook.record.page import Page, counted

DAY = 86400.0
# A unit out of service for a third of the time and more is told: the run is shorter than two cleanings.
SHORT_RUN = 2.0
Column = tuple[str, list[str]]


def time_brief_rows(page: Page) -> list[tuple[str, str, str]]:
    """When the duty is lost, and the cleaning interval, where they are asked for."""
    found = page.solved.over_time
    if found is None:
        return []
    rows = []
    if "area margin" in page.chain.results:
        words = _time(found, found.duty_lost) if math.isfinite(found.duty_lost) else found.duty_words
        rows.append(("Time until the duty is lost", words, "A_installed/A_service − 1 = 0"))
    if found.interval is not None:
        rows.append(("Cleaning interval", _interval_words(found, found.interval), _aim(found.interval)))
    return rows


def _interval_words(found: OverTime, interval: Interval) -> str:
    return _time(found, interval.interval) if math.isfinite(interval.interval) else interval.no_interval


def _aim(interval: Interval) -> str:
    return "least mean cost over a cycle" if interval.counts_money else "most heat over a cycle"


def _stated(page: Page) -> str:
    """Where U and the margin stand, and what the basis of the heat is said of."""
    duty = page.calculation.duty
    if duty is not None and not duty.has_ends:
        return "the stated saturation temperatures; the heat is what U and area give"
    return "the stated ends; heat and outlets"


def time_blocks(page: Page) -> list[Block]:
    """The table over the time in service, when the duty is lost, and the interval."""
    found = page.solved.over_time
    if found is None:
        return []
    columns = _columns(page, found)
    rows = tuple(zip(*(values for _, values in columns), strict=True))
    blocks: list[Block] = [
        Heading(3, "Time in service"),
        Paragraph(
            "The unit from one cleaning on. Every term that grows starts from nothing there; what else fouls stays as"
            f" stated. U and the margin stand at {_stated(page)} {found.heat_basis}. Section 9"
            " stands at the times that the terms state."
            if found.rows and math.isfinite(found.rows[0].heat)
            else "The unit from one cleaning on. Every term that grows starts from nothing there; what else fouls stays"
            " as stated. Section 9 stands at the times that the terms state."
        ),
        Table(tuple(title for title, _ in columns), rows),
    ]
    if found.failed:
        blocks.append(Paragraph(f"{counted(found.failed, 'row has', 'rows have')} no answer of the circuit."))
    blocks.append(Paragraph(_duty_sentence(page, found)))
    blocks += _turns(page, found)
    return blocks + (_interval(page, found, found.interval) if found.interval is not None else [])


def _turns(page: Page, found: OverTime) -> list[Block]:
    """The verdicts at the stated ends that turn on the way."""
    alone = (
        ""
        if len(page.solved.cases) == 1
        else " The table is that of the base case; other cases are not followed."
    )
    if not found.turns:
        return [Paragraph(f"No criterion, limit, method or controlling term turns within the table.{alone}")]
    rows = tuple(
        (
            turn.id,
            turn.kind + (f", {turn.level}" if turn.level else ""),
            turn.was,
            turn.becomes,
            _time(found, turn.time),
        )
        for turn in found.turns
    )
    return [
        Paragraph(f"Verdicts at the stated ends that turn on the way, in the order of their times.{alone}"),
        Table(("Verdict", "Kind", "Before", "Then", "From"), rows),
    ]


def _columns(page: Page, found: OverTime) -> list[Column]:
    """Title and texts of every column that has a figure."""
    rows, kinds, report = found.rows, vocabulary(), page.calculation.report

    def column(title: str, kind: str, values: list[float], digits: int) -> Column:
        unit = report_unit(kinds[kind], report)
        point = kinds[kind].scale == "point"
        texts = [_in(value, unit, point, digits) for value in values]
        return f"{title}, {unit_text(unit)}", texts

    columns: list[Column] = [(f"Time, {found.unit}", [_plain_time(found, row.time) for row in rows])]
    for name in rows[0].resistances:
        values = [row.resistances[name] for row in rows]
        columns.append(column(f"R_f of {name}", "area resistance", values, CONCLUSION_DIGITS))
    columns.append(column("U", "overall coefficient", [row.overall for row in rows], CONCLUSION_DIGITS))
    if "area margin" in page.chain.results:
        columns.append(("Margin of area", [percent(row.margin) for row in rows]))
    if any(math.isfinite(row.heat) for row in rows):
        columns.append(column("Heat reached", "heat flow", [row.heat for row in rows], 4))
    for name in rows[0].outlets:
        columns.append(
            column(f"Outlet {name}", "temperature", [row.outlets[name] for row in rows], PLAIN_DIGITS)
        )
    for name in rows[0].pressure_drops:
        values = [row.pressure_drops[name] for row in rows]
        columns.append(column(f"Pressure drop of {name}", "pressure drop", values, CONCLUSION_DIGITS))
    return columns + (_loss_columns(page, found.interval, rows) if found.interval is not None else [])


def _loss_columns(page: Page, interval: Interval, rows: tuple[TimeRow, ...]) -> list[Column]:
    """What fouling loses, and the mean over the cycle if the unit were cleaned then."""
    unit, scale = _rate_unit(page, interval)
    return [
        (f"Loss, {unit}", [number(row.loss * scale, 4) for row in rows]),
        (
            f"Mean if cleaned then, {unit}",
            [number(row.mean * scale, 4) if math.isfinite(row.mean) else "no run" for row in rows],
        ),
    ]


def _rate_unit(page: Page, interval: Interval) -> tuple[str, float]:
    """The unit that losses in a time are printed in, and the factor from SI."""
    cleaning = page.calculation.cleaning
    assert cleaning is not None
    if interval.counts_money:
        return f"{cleaning.currency}/day", DAY
    unit = report_unit(vocabulary()["heat flow"], page.calculation.report)
    return unit_text(unit), in_unit(1.0, unit)


def _in(value: float, unit: str, point: bool, digits: int) -> str:
    if not math.isfinite(value):
        return NOT_KNOWN
    return celsius(value) if unit == "degC" else number_text(in_unit(value, unit, point=point), digits)


def _plain_time(found: OverTime, time: float) -> str:
    return number_text(in_unit(time, found.unit), 4)


def _time(found: OverTime, time: float) -> str:
    """A time in the unit of the table, with days beside it where that is another."""
    text = f"{number_text(in_unit(time, found.unit), CONCLUSION_DIGITS)} {found.unit}"
    days = f"{number_text(time / DAY, CONCLUSION_DIGITS)} days"
    return text if found.unit in ("day", "days", "d") else f"{text} ({days})"


def _duty_sentence(page: Page, found: OverTime) -> str:
    if math.isfinite(found.duty_lost):
        return f"The duty is lost after {_time(found, found.duty_lost)}: the margin of area falls to nothing then."
    words = found.duty_words
    return f"{words[0].upper()}{words[1:]}."


# --- the interval -------------------------------------------------------------------------------------


def _interval(page: Page, found: OverTime, interval: Interval) -> list[Block]:
    """The interval with its condition, both sides of it with values put in, and what stands beside it."""
    reference = "the duty" if interval.against == DUTY else "the heat of the cleaned unit"
    what = "cost" if interval.counts_money else "heat that is not transferred"
    blocks: list[Block] = [
        Heading(3, "Cleaning interval"),
        Paragraph(
            f"Lost heat is counted from {reference}. The mean {what} over a cycle, the run and the cleaning, is least"
            " where the loss has risen to that mean. "
            + (
                "The cost of one cleaning holds the production that is lost in it; money of later years counts in full."
                if interval.counts_money
                else "The unit transfers nothing while it is cleaned."
            )
        ),
    ]
    if not math.isfinite(interval.interval):
        return [*blocks, Paragraph(f"No interval: {interval.no_interval}.")]
    return [*blocks, _condition(page, found, interval), Bullets(_remarks(page, found, interval))]


def _condition(page: Page, found: OverTime, interval: Interval) -> Table:
    """Loss and mean at the interval, each with its relation and the values put in."""
    cleaning = page.calculation.cleaning
    assert cleaning is not None
    unit = f"{cleaning.currency}/s" if interval.counts_money else "W"
    rate, scale = _rate_unit(page, interval)
    rows = []
    for title, relation in (("loss", interval.loss), ("mean over the cycle", interval.mean)):
        text = number_text(interval.least, PLAIN_DIGITS)
        rows.append(
            (
                title,
                write(relation),
                write_with_values(relation, interval.values, text),
                f"{text} {unit} ({number_text(interval.least * scale, 4)} {rate})",
            )
        )
    money = f", {cleaning.currency}/J" if interval.counts_money else ""
    notes = (
        f"t is the interval, t_c the duration of a cleaning, s; Q_0 {_reference_words(interval)} and Q that at the"
        " end of the run, W.",
        "S is the sum of the losses over the run"
        + (
            f", {cleaning.currency}; C_c the cost of one cleaning, {cleaning.currency}; p_Q the price of heat{money}."
            if interval.counts_money
            else ", J."
        ),
    )
    return Table(("Figure", "Relation", "Values put in", "Value"), tuple(rows), notes)


def _reference_words(interval: Interval) -> str:
    return "the duty" if interval.against == DUTY else "the heat of the cleaned unit"


def _remarks(page: Page, found: OverTime, interval: Interval) -> tuple[str, ...]:
    """The interval itself, its flat range, what comes before it, and the closed form beside it."""
    low, high = interval.flat
    start = _time(found, low) if math.isfinite(low) else "the cleaning itself"
    end = _time(found, high) if math.isfinite(high) else "the end of the table"
    span = f"from {start} to {end}"
    lines = [
        f"Cleaning interval: {_time(found, interval.interval)} in service.",
        f"The mean stays within {percent(interval.flat_part, 0)} of the least {span}.",
    ]
    if math.isfinite(found.duty_lost) and found.duty_lost < interval.interval:
        lines.append(
            f"The duty is lost before, after {_time(found, found.duty_lost)}: the interval does not carry it."
        )
    elif math.isfinite(found.duty_lost):
        spare = found.duty_lost - interval.interval
        lines.append(f"A cleaning may be late by {_time(found, spare)}: then the duty is lost.")
    if interval.interval < SHORT_RUN * interval.values["t_c"]:
        lines.append(
            "The run is shorter than two cleanings: the unit is out of service a third of the time and more."
        )
    form = interval.closed_form
    if form is not None:
        difference = percent(form.interval / interval.interval - 1.0)
        lines.append(
            f"In closed form ({form.card}; {form.because}): {_time(found, form.interval)}, a difference of"
            f" {difference}."
        )
    return tuple(lines)
