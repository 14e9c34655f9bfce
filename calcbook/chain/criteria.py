"""Acceptance criteria on figures: their margin, and whether it meets them."""

from __future__ import annotations

import numpy as np

from calcbook.calcfile.calculation import Criterion

Figures = np.ndarray | float


def criterion_margin(criterion: Criterion, value: Figures, limit: Figures) -> np.ndarray:
    """Value less limit, in the direction that is good."""
    return (np.asarray(value) - limit) * criterion.direction


def is_met(criterion: Criterion, margin: Figures) -> np.ndarray:
    """Whether a margin meets the criterion: at the limit itself only where the operator has an equal sign."""
    return np.asarray(margin) >= 0.0 if "=" in criterion.operator else np.asarray(margin) > 0.0
