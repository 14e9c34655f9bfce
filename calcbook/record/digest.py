"""The digest of what was calculated: meaning of the file, cards used, results as they are displayed.

SHA-256 of ``calcbook-digest-1``, a zero byte, and JSON (UTF-8, keys sorted, no spaces, no floats). Each of
the three parts has its own digest beside the whole. Versions, platform and sign-offs stay outside.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass

from calcbook.chain.outcome import CaseOutcome, Solved, StepRow
from calcbook.record.growth_figures import growth_figures
from calcbook.record.numbers import in_report_unit, report_unit, unit_text, value_text
from calcbook.record.rating_figures import rating_figures
from calcbook.record.survey import survey_texts
from calcbook.record.uncertainty_data import displayed_uncertainty

MARK = b"calcbook-digest-1\0"
RESULT_DIGITS = 5


@dataclass(frozen=True, slots=True)
class Digest:
    """SHA-256 of the whole and of its three parts, in hexadecimal digits."""

    whole: str
    meaning: str
    cards: str
    results: str


def digest_of(solved: Solved) -> Digest:
    """The digest of a solved calculation."""
    calculation = solved.chain.calculation
    meaning = _text({"calculation": calculation.meaning, "settings": calculation.settings.plain})
    cards, results = _text(dict(solved.cards)), _text(displayed(solved))
    whole = f'{{"cards":{cards},"meaning":{meaning},"results":{results}}}'
    return Digest(*map(_hash, (whole, meaning, cards, results)))


def _text(content: object) -> str:
    _refuse_numbers(content)
    return json.dumps(content, ensure_ascii=False, sort_keys=True, separators=(",", ":"))


def _hash(text: str) -> str:
    return hashlib.sha256(MARK + text.encode("utf-8", "surrogatepass")).hexdigest()


def _refuse_numbers(content: object) -> None:
    """A digest binds texts: a float would bind bits that nobody sees. Raises ``TypeError``."""
    if content is None or isinstance(content, str):
        return
    if isinstance(content, Mapping):
        for name, value in content.items():
            _refuse_numbers(name)
            _refuse_numbers(value)
    elif isinstance(content, list):
        for value in content:
            _refuse_numbers(value)
    else:
        raise TypeError(f"{type(content).__name__} has no place in a digest")


def displayed(solved: Solved) -> dict[str, list[str]]:
    """Every displayed figure by stable id, as text and unit; states of checks and criteria as words."""
    report = solved.chain.calculation.report
    shown: dict[str, list[str]] = {}
    for case in solved.cases:
        prefix = f"case {case.name} / " if case.name else ""
        for row in _rows(case):
            unit = unit_text(row.step.kind.unit) if row.step.kind is not None else "1"
            for condition, value in (("clean", row.clean), ("service", row.service)):
                shown[f"{prefix}step {row.step.id} / {condition}"] = [value_text(value, row.step.kind), unit]
        for name, result in case.results.items():
            text = in_report_unit(result.value, result.kind, report, RESULT_DIGITS)
            shown[f"{prefix}result {name}"] = [text, unit_text(report_unit(result.kind, report))]
        for check in case.checks:
            shown[f"{prefix}check {check.id} / {check.condition}"] = [
                f"{check.figure}; {check.limit}; {check.state}",
                "",
            ]
        for criterion in case.criteria:
            shown[f"{prefix}{criterion.id}"] = ["criterion met" if criterion.met else "criterion not met", ""]
    if solved.rating is not None:
        for name, value, kind in rating_figures(solved.rating):
            text = in_report_unit(value, kind, report, RESULT_DIGITS)
            shown[f"rating / {name}"] = [text, unit_text(report_unit(kind, report))]
    if solved.uncertainty is not None:
        shown.update(displayed_uncertainty(solved.uncertainty))
    if solved.over_time is not None:
        for name, value, kind in growth_figures(solved.over_time):
            text = in_report_unit(value, kind, report, RESULT_DIGITS)
            shown[f"time in service / {name}"] = [text, unit_text(report_unit(kind, report))]
    if solved.survey is not None:
        shown |= survey_texts(solved.survey)
    return shown


def _rows(case: CaseOutcome) -> list[StepRow]:
    return [*(row for term in case.chains for row in term.rows), *case.circuit]
