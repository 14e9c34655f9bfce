"""A sweep over one or two givens: the table, and a plot in plain text."""

from __future__ import annotations

import math

from calcbook.chain.sweep_outcome import Axis, Sweep, SweptResult
from calcbook.formulas.names import written_name
from calcbook.quantities import in_unit
from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph, Table
from calcbook.record.numbers import (
    AS_GIVEN_DIGITS,
    MOST_DIGITS,
    PLAIN_DIGITS,
    fixed,
    number,
    report_unit,
    unit_text,
    with_unit,
)
from calcbook.record.page import Page, counted

# Places of a plot from its left to its right end.
WIDTH = 60
LIMIT, SAMPLE, SEVERAL, AXIS = ":", "o", "+", "|"
LETTERS = "abcdefghijklmnopqrst"


def sweep(page: Page) -> list[Block]:
    """The sweep of the file, if it has one."""
    found = page.solved.sweep
    if found is None:
        return []
    names = " and ".join(written_name(axis.input.symbol) for axis in found.axes)
    cases = " of the base case" if page.has_cases else ""
    words = (
        f"{counted(found.samples, 'sample', 'samples')}{cases} over {names}, {_spacing(found)}, the other figures as"
        f" they stand. {_counted_words(found)}"
    )
    blocks: list[Block] = [Heading(3, f"Sweep over {names}"), Paragraph(words)]
    if len(found.axes) == 1:
        blocks.append(_table(page, found))
    for result in found.results:
        if len(found.axes) > 1:
            blocks += [Paragraph(_heading(page, result)), _grid(page, found, result)]
        blocks += _plot(page, found, result)
    return [*blocks, *_outside_lines(found)]


def _spacing(found: Sweep) -> str:
    """How the figures lie apart: evenly, but for numbers of things that are taken to whole ones."""
    steps = [
        [later - earlier for earlier, later in zip(axis.figures, axis.figures[1:], strict=False)]
        for axis in found.axes
    ]
    even = all(max(row) - min(row) <= 1e-9 * max(map(abs, row)) for row in steps if row)
    return "evenly spaced" if even else "by whole numbers, as evenly as they allow"


def _counted_words(found: Sweep) -> str:
    missing = sum(bool(reason) for reason in found.missing)
    outside = sum(bool(names) for names in found.outside)
    return (
        f"{counted(missing, 'sample has', 'samples have')} no answer;"
        f" {counted(outside, 'sample lies', 'samples lie')} outside a range limit."
    )


# --- one given --------------------------------------------------------------------------------------


def _table(page: Page, found: Sweep) -> Table:
    (axis,) = found.axes
    columns = (_axis_heading(axis), *(_heading(page, result) for result in found.results), "Remark")
    rows = tuple(
        (
            _shown(axis, place),
            *(_value(page, result, place) for result in found.results),
            _remark(found, place),
        )
        for place in range(found.samples)
    )
    return Table(columns, rows)


def _axis_heading(axis: Axis) -> str:
    return with_comma(written_name(axis.input.symbol), unit_text(axis.unit) if axis.unit else "1")


def with_comma(name: str, unit: str) -> str:
    """A column heading: the name, and its unit where it has one."""
    return name if unit == "1" else f"{name}, {unit}"


def _heading(page: Page, result: SweptResult) -> str:
    return with_comma(result.name, unit_text(report_unit(result.kind, page.calculation.report)))


def _shown(axis: Axis, place: int) -> str:
    return number(float(f"{axis.shown[place]:.{AS_GIVEN_DIGITS}g}"), MOST_DIGITS)


def _in_unit(page: Page, result: SweptResult, value: float) -> float:
    unit = report_unit(result.kind, page.calculation.report)
    return in_unit(value, unit, point=result.kind.scale == "point")


def _value(page: Page, result: SweptResult, place: int) -> str:
    value = result.values[place]
    if not math.isfinite(value):
        return "none"
    shown = _in_unit(page, result, value)
    return fixed(shown, 2) if result.kind.scale == "point" else number(shown, PLAIN_DIGITS)


def _remark(found: Sweep, place: int) -> str:
    if found.missing[place]:
        return f"no answer: {found.missing[place]}"
    return f"outside: {'; '.join(found.outside[place])}" if found.outside[place] else ""


# --- two givens -------------------------------------------------------------------------------------


def _grid(page: Page, found: Sweep, result: SweptResult) -> Table:
    down, across = found.axes
    columns = (
        f"{_axis_heading(down)}; across {_axis_heading(across)}",
        *(_shown(across, place) for place in range(len(across.figures))),
    )
    rows = []
    for row in range(len(down.figures)):
        cells = []
        for column in range(len(across.figures)):
            place = row * len(across.figures) + column
            mark = ", outside" if found.outside[place] else ""
            cells.append(_value(page, result, place) + mark)
        rows.append((_shown(down, row), *cells))
    return Table(columns, tuple(rows))


def _outside_lines(found: Sweep) -> list[Block]:
    """What is outside or missing in a sweep of two givens, each named once with its count."""
    if len(found.axes) == 1:
        return []
    counts: dict[str, int] = {}
    for place in range(found.samples):
        for name in found.outside[place]:
            counts[f"outside {name}"] = counts.get(f"outside {name}", 0) + 1
        if found.missing[place]:
            name = f"no answer, {found.missing[place]}"
            counts[name] = counts.get(name, 0) + 1
    if not counts:
        return []
    return [
        Bullets(tuple(f"{name}: {counted(count, 'sample', 'samples')}." for name, count in counts.items()))
    ]


# --- the plot ---------------------------------------------------------------------------------------


def _plot(page: Page, found: Sweep, result: SweptResult) -> list[Block]:
    """One line for each figure of the first given; the second one's figures are letters on it."""
    known = [value for value in result.values if math.isfinite(value)]
    if not known:
        return []
    down = found.axes[0]
    across = len(found.axes[1].figures) if len(found.axes) > 1 else 1
    low, high = min(known), max(known)
    if low == high:
        return [Paragraph(f"{result.name} is the same in every sample that has an answer.")]
    limits = {name: limit for name, limit in result.limits if low <= limit <= high}
    labels = [_shown(down, row) for row in range(len(down.figures))]
    widest = max(len(label) for label in labels)
    lines = [_scale(page, result, low, high, limits)]
    if across > 1:
        second = found.axes[1]
        lines.append(
            f"{_axis_heading(second)}: "
            + ", ".join(f"{LETTERS[place]} {_shown(second, place)}" for place in range(across))
        )
    lines.append(_axis_heading(down))
    for row, label in enumerate(labels):
        places = [" "] * (WIDTH + 1)
        for limit in limits.values():
            places[_place(limit, low, high)] = LIMIT
        drawn: set[int] = set()
        for column in range(across):
            value = result.values[row * across + column]
            if math.isfinite(value):
                at = _place(value, low, high)
                places[at] = SEVERAL if at in drawn else (LETTERS[column] if across > 1 else SAMPLE)
                drawn.add(at)
        lines.append(f"{label.rjust(widest)} {AXIS}{''.join(places)}".rstrip())
    return [Code("\n".join(lines))]


def _place(value: float, low: float, high: float) -> int:
    return round((value - low) / (high - low) * WIDTH)


def _scale(page: Page, result: SweptResult, low: float, high: float, limits: dict[str, float]) -> str:
    unit = unit_text(report_unit(result.kind, page.calculation.report))
    ends = [number(_in_unit(page, result, end), PLAIN_DIGITS) for end in (low, high)]
    words = [f"{result.name}: {with_unit(f'{ends[0]} to {ends[1]}', unit)} from left to right"]
    words += [
        f"{LIMIT} {name} at {number(_in_unit(page, result, limit), PLAIN_DIGITS)}"
        for name, limit in limits.items()
    ]
    return "; ".join(words)
