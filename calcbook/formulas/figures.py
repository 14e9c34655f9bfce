"""Numbers as they are printed in a relation, and back: exact decimal text, half to even, no locale."""

from __future__ import annotations

import functools
import math
import re
from decimal import ROUND_HALF_EVEN, Context, Decimal

THIN_SPACE = "\u2009"
MINUS = "\u2212"

_SMALLEST_PLAIN = Decimal("0.001")
_LARGEST_PLAIN = Decimal(10_000_000)
_GROUPED_FROM = 5
_EXPONENT = re.compile(r"[eE]")


@functools.lru_cache(maxsize=16384)
def number_text(value: float, digits: int) -> str:
    """``value`` with ``digits`` significant digits, rounded from its shortest exact text, half to even.

    A value that has no more digits than that is exact and drops its trailing zeros (``62``, ``0.023``); a
    rounded one keeps them (``975.570``). Below 1e-3 and from 1e7 with an exponent, ``3.8249e−4``; from five
    digits before the point in groups, ``62 043``. Raises ValueError for NaN and infinite values.
    """
    if not math.isfinite(value):
        raise ValueError(f"{value} cannot be printed as a number")
    exact = Decimal(repr(float(value)))
    if exact == 0:
        return "0"
    rounded = Context(prec=digits, rounding=ROUND_HALF_EVEN).plus(exact)
    if rounded == exact:
        rounded = rounded.normalize()
    sign = MINUS if rounded < 0 else ""
    return sign + _magnitude(abs(rounded), digits)


def _magnitude(value: Decimal, digits: int) -> str:
    if value < _SMALLEST_PLAIN or value >= _LARGEST_PLAIN:
        figures = "".join(map(str, value.as_tuple().digits))
        mantissa = figures[0] + ("." + figures[1:] if len(figures) > 1 else "")
        return f"{mantissa}e{value.adjusted()}".replace("-", MINUS)
    whole, point, part = f"{value:f}".partition(".")
    return _grouped(whole) + point + part


def _grouped(whole: str) -> str:
    return f"{int(whole):,}".replace(",", THIN_SPACE) if len(whole) >= _GROUPED_FROM else whole


def parse_number(text: str) -> float:
    """The inverse of ``number_text``. Raises ValueError for a text that is no printed number."""
    return float(printed_decimal(text))


def printed_decimal(text: str) -> Decimal:
    """A printed number, exactly."""
    plain = text.strip().replace(THIN_SPACE, "").replace(MINUS, "-")
    if not re.fullmatch(r"-?(\d+\.?\d*|\.\d+)([eE][-+]?\d{1,3})?", plain, re.ASCII):
        raise ValueError(f"{text!r} is no printed number")
    return Decimal(plain)


def possible_units(text: str) -> list[Decimal]:
    """What the last printed digit may count, finest first.

    ``0.0199`` counts 0.0001. Zeros that end a whole number may be digits or only hold the place: ``62 000``
    counts 1, 10, 100 or 1000.
    """
    value = printed_decimal(text)
    exponent = value.as_tuple().exponent
    assert isinstance(exponent, int)
    held = 0
    if exponent == 0 and value != 0 and not _EXPONENT.search(text):
        figures = str(abs(value))
        held = len(figures) - len(figures.rstrip("0"))
    return [Decimal(1).scaleb(exponent + place) for place in range(held + 1)]
