"""Models of the examples in JCGM 100:2008 (annex H) and JCGM 101:2008 (clause 9), and slopes of any model.

Input figures and answers of both documents are `from memory`; the documents are public (BIPM).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Plain:
    """An uncertain figure by its numbers alone."""

    id: str
    value: float
    standard: float
    degrees: float = math.inf


def slopes_of(model, figures, name="y"):
    """Central differences with a step of a thousandth of the standard uncertainty (method notes, G1)."""
    found = {}
    for figure in figures:
        step = 1e-3 * figure.standard
        ends = []
        for sign in (1.0, -1.0):
            inputs = {one.id: np.array([one.value]) for one in figures}
            inputs[figure.id] = np.array([figure.value + sign * step])
            ends.append(float(model(inputs)[name][0]))
        found[figure.id] = (ends[0] - ends[1]) / (2.0 * step)
    return found


@dataclass(frozen=True)
class Arcsine:
    """The law of a figure that swings like a sine within a half-width (JCGM 101:2008, 6.4.6)."""

    mean: float
    half_width: float
    words: str = "arcsine"

    @property
    def standard(self) -> float:
        return self.half_width / math.sqrt(2.0)

    def at(self, share):
        return self.mean - self.half_width * np.cos(np.pi * share)


def gauge_block(x):
    """JCGM 101:2008, 9.5.2: deviation of a gauge block from its nominal length of 50 mm, in nm.

    Limits that are not known exactly (6.4.3) have a second figure each, named with a dash.
    """
    expansion, mean_temperature, swing = x["alpha"], x["theta0"], x["Delta"]
    temperature_difference = x["dtheta"] + 0.025 * x["dtheta-"] * np.sign(x["dtheta"])
    expansion_difference = x["dalpha"] + 0.1e-6 * x["dalpha-"] * np.sign(x["dalpha"])
    theta = mean_temperature + swing
    above = x["L_S"] * (1.0 + expansion * (theta + temperature_difference)) + x["D"] + x["d1"] + x["d2"]
    return {"y": above / (1.0 + (expansion + expansion_difference) * theta) - 50_000_000.0}
