"""Figures as the results file writes them."""

from __future__ import annotations

import math

DIGITS = 10
Data = dict[str, object]


def rounded(value: object) -> object:
    """A figure with 10 significant digits, a flag as it is, None for what is not known."""
    if isinstance(value, bool):
        return value
    number = float(value)  # type: ignore[arg-type]
    return float(f"{number:.{DIGITS}g}") if math.isfinite(number) else None
