"""The results file: what the record shows, for programs. SI values with units, 10 significant digits."""

from __future__ import annotations

import json
import math

from calcbook.chain.flips_outcome import Flip
from calcbook.chain.growth_outcome import OverTime
from calcbook.chain.outcome import CaseOutcome, CheckResult, CriterionResult, Solved, StepRow, TermRow
from calcbook.chain.rating_outcome import Rating
from calcbook.chain.sweep_outcome import Sweep
from calcbook.chain.types import CONDITIONS, SERVICE, OpenItem
from calcbook.formulas import Relation
from calcbook.quantities import QuantityKind
from calcbook.record.data import Data, rounded
from calcbook.record.digest import Digest
from calcbook.record.growth_figures import growth_figures
from calcbook.record.rating_figures import rating_figures
from calcbook.record.software import Software
from calcbook.record.steps import StepTexts
from calcbook.record.survey import survey_data
from calcbook.record.uncertainty_data import uncertainty_data


def results_text(solved: Solved, digest: Digest, software: Software) -> str:
    """The text of the results file, one newline at the end."""
    return (
        json.dumps(results_data(solved, digest, software), indent=1, ensure_ascii=False, allow_nan=False)
        + "\n"
    )


def results_data(solved: Solved, digest: Digest, software: Software) -> Data:
    """The results file as dictionaries and lists, in a stable order; figures that are not known are None."""
    calculation = solved.chain.calculation
    base = solved.base
    survey: Data = {"survey": survey_data(solved.survey)} if solved.survey is not None else {}
    return {
        "calculation": {
            "number": calculation.number,
            "title": calculation.title,
            "revision": calculation.revision,
        },
        "digest": {"meaning": digest.meaning, "cards": digest.cards, "results": digest.results},
        "software": {
            "calcbook": software.calcbook,
            "CoolProp": software.coolprop,
            "library": software.library,
        },
        "results": _results(base),
        "conditions": {condition: [_term(row) for row in base.terms[condition]] for condition in CONDITIONS},
        **({"rating": _rating(solved.rating)} if solved.rating is not None else {}),
        **({"time in service": _over_time(solved.over_time)} if solved.over_time is not None else {}),
        "steps": _steps(solved),
        "checks": [_check(check) for check in base.checks],
        "acceptance": [_criterion(item) for case in solved.cases for item in case.criteria],
        "assumptions": _assumptions(solved),
        "open_items": [_open_item(item) for item in solved.open_items],
        "cases": {case.name: _case(case) for case in solved.cases[1:]},
        **({"uncertainty": uncertainty_data(solved.uncertainty)} if solved.uncertainty is not None else {}),
        **survey,
        "sweep": _sweep(solved.sweep) if solved.sweep is not None else None,
        "flips": [_flip(flip) for flip in solved.flips.flips] if solved.flips is not None else [],
    }


def _figure(value: float, kind: QuantityKind) -> Data:
    return {"value": rounded(value), "unit": kind.unit}


def _results(case: CaseOutcome) -> Data:
    found: Data = {name: _figure(result.value, result.kind) for name, result in case.results.items()}
    found["controlling"] = {
        "value": case.controlling or None,
        "share": rounded(case.controlling_share),
        "unit": "1",
    }
    return found


def _rating(rating: Rating) -> Data:
    return {name: _figure(value, kind) for name, value, kind in rating_figures(rating)}


def _over_time(found: OverTime) -> Data:
    return {name: _figure(value, kind) for name, value, kind in growth_figures(found)}


def _term(row: TermRow) -> Data:
    return {
        "name": row.name,
        "kind": row.kind,
        "surface": row.surface,
        "own_resistance": rounded(row.own_resistance),
        "resistance": rounded(row.resistance),
        "share": rounded(row.share),
        "coefficient": rounded(row.coefficient),
        "T_inner": rounded(row.inner_temperature),
        "T_outer": rounded(row.outer_temperature),
        "method": row.methods,
        "branches": [
            {
                "name": branch.name,
                "kind": branch.kind,
                "coefficient": rounded(branch.coefficient),
                "reference_temperature": rounded(branch.reference_temperature),
                "heat_flow": rounded(branch.heat_flow),
            }
            for branch in row.branches
        ],
    }


def _steps(solved: Solved) -> list[Data]:
    """One entry per step and condition, service first."""
    texts = StepTexts(solved.chain, solved.base, solved.cards)
    found = []
    terms = [(term.name, row) for term in solved.base.chains for row in term.rows]
    terms += [("circuit", row) for row in solved.base.circuit]
    for term, row in terms:
        for condition in reversed(CONDITIONS):
            found.append(
                {
                    "id": row.step.id,
                    "symbol": row.step.symbol,
                    "relation": _relation(row, texts),
                    "value": rounded(row.service if condition == SERVICE else row.clean),
                    "unit": row.step.kind.unit if row.step.kind is not None else "1",
                    "condition": condition,
                    "term": term,
                }
            )
    return found


def _relation(row: StepRow, texts: StepTexts) -> str:
    relation = getattr(row.step.operation, "relation", None)
    return relation.text if isinstance(relation, Relation) else texts.relation(row.step)


def _check(check: CheckResult) -> Data:
    return {
        "id": check.id,
        "condition": check.condition,
        "case": check.case,
        "that": check.that,
        "value": rounded(check.value),
        "unit": check.unit,
        "limit": check.limit,
        "level": check.level,
        "state": check.state,
        "because": check.because,
        "accepted": check.accepted,
    }


def _criterion(item: CriterionResult) -> Data:
    return {
        "id": item.id,
        "case": item.case,
        "that": item.that,
        "value": rounded(item.value),
        "limit": rounded(item.limit),
        "unit": item.kind.unit,
        "met": item.met,
        "margin": rounded(item.margin),
        "source": item.source,
        **({"words": item.words} if item.words else {}),
        **(
            {"probability_asked": rounded(item.required), "probability": rounded(item.reached)}
            if not math.isnan(item.required)
            else {}
        ),
    }


def _assumptions(solved: Solved) -> list[Data]:
    """The engineer's assumptions, then those that the runner made."""
    engineer: list[Data] = [
        {
            "id": item.id,
            "text": item.text,
            "basis": item.basis,
            "verified": item.is_verified,
            "by": item.verified_by,
            "used_in": [],
        }
        for item in solved.chain.calculation.assumptions
    ]
    runner: list[Data] = [
        {
            "id": item.id,
            "text": item.text,
            "basis": item.decided_by,
            "verified": None,
            "by": "runner",
            "used_in": [item.acts_on],
        }
        for item in solved.base.assumptions
    ]
    return engineer + runner


def _open_item(item: OpenItem) -> Data:
    return {"id": item.id, "kind": item.kind, "text": item.text}


def _case(case: CaseOutcome) -> Data:
    return {
        "results": _results(case),
        "checks": [_check(check) for check in case.checks],
        "open_items": [_open_item(item) for item in case.open_items],
    }


def _sweep(sweep: Sweep) -> Data:
    """The givens with their figures, and every result sample by sample; of two givens the second runs fastest."""
    return {
        "givens": [
            {
                "symbol": axis.input.symbol,
                "figures": [rounded(figure) for figure in axis.figures],
                "unit": axis.input.kind.unit,
            }
            for axis in sweep.axes
        ],
        "results": {
            result.name: {"values": [rounded(value) for value in result.values], "unit": result.kind.unit}
            for result in sweep.results
        },
        "no_answer": list(sweep.missing),
        "outside": [list(names) for names in sweep.outside],
    }


def _flip(flip: Flip) -> Data:
    return {
        "kind": flip.kind,
        "id": flip.id,
        "condition": flip.condition,
        "case": flip.case,
        "given": flip.input.symbol,
        "now": rounded(flip.now),
        "flips_at": rounded(flip.at),
        "unit": flip.input.kind.unit,
        "tolerances": rounded(flip.tolerances),
        "was": flip.was,
        "becomes": flip.becomes,
    }
