"""A survey of plant data for the digest and for the results file."""

from __future__ import annotations

import math

from calcbook.chain.survey_outcome import SurveyOutcome
from calcbook.record.numbers import number, unit_text

DIGITS = 4


def survey_texts(outcome: SurveyOutcome) -> dict[str, list[str]]:
    """The displayed figures of a survey by stable id, as text and unit, for the digest."""
    shown: dict[str, list[str]] = {
        f"survey rule {rule.id}": [f"{rule.count}; {rule.limit}", ""] for rule in outcome.rules
    }
    for figure in (*outcome.worked.chain, *outcome.worked.steps):
        shown[f"survey worked row / {figure.symbol}"] = [number(figure.value), unit_text(figure.unit)]
    shown["survey rows"] = [f"{outcome.rows}; {outcome.kept}; {outcome.fitted}", ""]
    for one in outcome.figures:
        text = f"{number(one.value, DIGITS)}; {number(one.lower, DIGITS)}; {number(one.upper, DIGITS)}"
        shown[f"survey {one.id}"] = [text, unit_text(one.kind.unit)]
    return shown


def survey_data(outcome: SurveyOutcome) -> dict[str, object]:
    """A survey for the results file: counts, rules, and fitted figures with their bounds in SI."""
    return {
        "file": outcome.file,
        "rows": outcome.rows,
        "kept": outcome.kept,
        "fitted": outcome.fitted,
        "before_cleaning": outcome.before_cleaning,
        "not_anchored": outcome.not_anchored,
        "negative": outcome.negative,
        "not_resolved": outcome.not_resolved,
        "rules": [{"id": rule.id, "limit": rule.limit, "count": rule.count} for rule in outcome.rules],
        "cycles": [
            {
                "cleaning": one.cleaning,
                "rows": one.rows,
                "zero_rows": one.zero_rows,
                "offset": _rounded(one.offset),
                "scatter": _rounded(one.scatter),
                "systematic": _rounded(one.systematic),
            }
            for one in outcome.cycles
        ],
        "model": outcome.model,
        "figures": [
            {
                "id": one.id,
                "value": _rounded(one.value),
                "lower": _rounded(one.lower),
                "upper": _rounded(one.upper),
                "scatter": _rounded(one.scatter),
                "systematic": _rounded(one.systematic),
                "unit": one.kind.unit,
            }
            for one in outcome.figures
        ],
    }


def _rounded(value: float) -> float | None:
    return float(f"{value:.10g}") if math.isfinite(value) else None
