"""Acceptance criteria on figures: their margin, and whether it meets them."""

from __future__ import annotations

import numpy as np

from calcbook.calcfile.calculation import Criterion

Figures = np.ndarray | float
# A circuit is closed to some 1e-13 of its figures: what differs from a limit by less than ten times that is at it.
AT_THE_LIMIT = 1e-12


def criterion_margin(criterion: Criterion, value: Figures, limit: Figures) -> np.ndarray:
    """Value less limit, in the direction that is good; nothing where they differ by the rounding of a circuit."""
    return beyond(value, limit) * criterion.direction


def beyond(value: Figures, limit: Figures) -> np.ndarray:
    """How far figures lie above a limit; nothing where they are at it."""
    difference = np.asarray(value) - limit
    is_at = np.abs(difference) <= AT_THE_LIMIT * np.maximum(np.abs(value), np.abs(limit))
    return np.where(is_at & np.isfinite(difference), 0.0, difference)


def is_met(criterion: Criterion, margin: Figures) -> np.ndarray:
    """Whether a margin meets the criterion: at the limit itself only where the operator has an equal sign."""
    return np.asarray(margin) >= 0.0 if "=" in criterion.operator else np.asarray(margin) > 0.0
