"""Printed numbers: how many digits, in which unit, and the words for what is no number."""

from __future__ import annotations

import math
from decimal import ROUND_HALF_EVEN, Decimal

import numpy as np

from calcbook.calcfile.calculation import Report
from calcbook.formulas import number_text, parse_number
from calcbook.quantities import QuantityFault, QuantityKind, display_unit, in_unit, unit_display

NOT_USED = "not used"
NOT_KNOWN = "not known"
CONCLUSION_DIGITS = 3
AS_GIVEN_DIGITS = 10
PLAIN_DIGITS = 5
MOST_DIGITS = 17

Figure = float | bool | np.ndarray | np.generic


def is_flag(value: object) -> bool:
    """Whether a figure is yes or no."""
    return isinstance(value, bool | np.bool_) or (isinstance(value, np.ndarray) and value.dtype == bool)


def plain(value: Figure) -> float:
    """A single figure as a float."""
    return float(np.asarray(value).ravel()[0])


def value_text(value: Figure, kind: QuantityKind | None) -> str:
    """A figure in SI with the digits of its kind; yes or no for a flag; words where there is none."""
    number = plain(value)
    if math.isnan(number):
        return NOT_USED
    if is_flag(value) or (kind is not None and kind.flag):
        return "yes" if number else "no"
    if math.isinf(number):
        return "infinite"
    return number_text(number, kind.digits if kind is not None else PLAIN_DIGITS)


def number(value: float, digits: int = PLAIN_DIGITS) -> str:
    """A number with significant digits, or the words for one that is not known."""
    return number_text(value, digits) if math.isfinite(value) else NOT_KNOWN


def unit_text(unit: str) -> str:
    """A unit as it is printed; `1` for a plain number."""
    try:
        return unit_display(unit) or "1"
    except QuantityFault:
        return unit


def with_unit(text: str, unit: str) -> str:
    """A number with its unit after a blank; a plain number stands alone."""
    return text if unit in ("", "1") or text in (NOT_USED, NOT_KNOWN) else f"{text} {unit}"


def fixed(value: float, places: int) -> str:
    """A number with decimal places, rounded from its shortest text, half to even."""
    if not math.isfinite(value):
        return NOT_KNOWN
    rounded = Decimal(repr(float(value))).quantize(Decimal(1).scaleb(-places), rounding=ROUND_HALF_EVEN)
    return f"{rounded:f}".replace("-", "\u2212") if rounded else f"{abs(rounded):f}"


def celsius(kelvin: float, places: int = 2) -> str:
    """A temperature on the Celsius scale, without its unit."""
    return fixed(in_unit(kelvin, "degC", point=True), places) if math.isfinite(kelvin) else NOT_KNOWN


def percent(ratio: float, places: int = 1) -> str:
    """A ratio in per cent, with the sign."""
    return f"{fixed(ratio * 100.0, places)} %" if math.isfinite(ratio) else NOT_KNOWN


def share_places(share: float, asked: float = math.nan) -> int:
    """The decimal places of a share in per cent: two, and as many more as show on which side of the one asked for it
    lies, and that it is neither none nor all."""
    marks = [100.0 * mark for mark in (0.0, 1.0, asked) if mark != share]
    for places in range(2, MOST_DIGITS):
        shown = parse_number(fixed(100.0 * share, places))
        if all(math.isnan(mark) or (shown - mark) * (100.0 * share - mark) > 0.0 for mark in marks):
            return places
    return MOST_DIGITS


def share_text(share: float, asked: float = math.nan) -> str:
    """A share of samples in per cent, with the places that ``share_places`` finds."""
    return percent(share, share_places(share, asked))


def asked_text(asked: float) -> str:
    """A share that is asked for in per cent, with no figure of it rounded away."""
    return f"{number(float(f'{100.0 * asked:.{AS_GIVEN_DIGITS}g}'), AS_GIVEN_DIGITS)} %"


def report_unit(kind: QuantityKind, report: Report) -> str:
    """The unit that results of a kind are reported in, as unit text."""
    if kind.name in report.quantity_units:
        return report.quantity_units[kind.name]
    return display_unit(kind, "US customary" if report.units == "US customary" else "SI")


def in_report_unit(value: float, kind: QuantityKind, report: Report, digits: int) -> str:
    """A figure in the unit of the report, with that in SI beside it where they differ."""
    if not math.isfinite(value):
        return NOT_KNOWN
    unit, common = report_unit(kind, report), display_unit(kind, "SI")
    first = _in(value, kind, unit, digits)
    return first if unit == common else f"{first} ({_in(value, kind, common, digits)})"


def _in(value: float, kind: QuantityKind, unit: str, digits: int) -> str:
    converted = (
        fixed(in_unit(value, unit, point=True), 2)
        if kind.scale == "point"
        else number_text(in_unit(value, unit), digits)
    )
    return with_unit(converted, unit_text(unit))


def apart(value: float, limit: float, unit: str, point: bool, digits: int) -> tuple[str, str]:
    """A figure and its limit in a unit, with so many digits that which is larger can be seen."""
    if not (math.isfinite(value) and math.isfinite(limit)):
        return number(value, digits), number(limit, digits)
    one, two = in_unit(value, unit, point=point), in_unit(limit, unit, point=point)
    for more in range(digits, MOST_DIGITS):
        first, second = number_text(one, more), number_text(two, more)
        if value == limit or parse_number(first) != parse_number(second):
            return first, second
    return number_text(one, MOST_DIGITS), number_text(two, MOST_DIGITS)
