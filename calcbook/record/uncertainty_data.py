"""The uncertainty of results as the results file and the digest hold it."""

from __future__ import annotations

from collections.abc import Iterator

from calcbook.chain.uncertainty_outcome import Budget, Chance, SampledResult, Sampling, Uncertainty
from calcbook.record.data import Data, rounded
from calcbook.record.numbers import share_places


def uncertainty_data(found: Uncertainty) -> Data:
    """Budgets, what is missing in them, and samples; SI values, units beside."""
    return {
        "case": found.case,
        "coverage": rounded(found.coverage),
        "budgets": {budget.result: _budget(budget) for budget in found.budgets},
        "methods_left_out": [
            {"term": item.term, "card": item.card, "reason": item.reason} for item in found.left_out
        ],
        "correlations": [
            {"between": [one.first, one.second], "r": rounded(one.coefficient), "source": one.source}
            for one in found.correlations
        ],
        "other_cases": [
            {
                "case": one.case,
                "result": one.result,
                "value": rounded(one.value),
                "standard_uncertainty": rounded(one.standard),
                "expanded_uncertainty": rounded(one.expanded),
                "unit": one.kind.unit,
                "terms_left_out": list(one.missing),
            }
            for one in found.elsewhere
        ],
        "probabilities_in_other_cases": [
            {
                "case": one.case,
                "criterion": one.chance.id,
                "probability": rounded(one.chance.probability),
                "samples": one.trials,
                "without_answer": rounded(one.chance.unanswered),
            }
            for one in found.chances
        ],
        "samples": _samples(found.sampling) if found.sampling is not None else None,
    }


def displayed_uncertainty(found: Uncertainty) -> Iterator[tuple[str, list[str]]]:
    """What the digest binds: standard and expanded uncertainties, intervals and probabilities, by stable id."""
    for budget in found.budgets:
        for name, value in (("standard", budget.standard), ("expanded", budget.expanded)):
            yield f"uncertainty {budget.result} / {name}", [f"{value:.2g}", budget.kind.unit]
    for spread in found.elsewhere:
        name = f"uncertainty {spread.result} in {spread.case or 'base'} / expanded"
        yield name, [f"{spread.expanded:.2g}", spread.kind.unit]
    for one in found.chances:
        yield (
            f"uncertainty samples {one.chance.id} in {one.case or 'base'}",
            [_displayed(one.chance), "1"],
        )
    if found.sampling is None:
        return
    for result in found.sampling.results:
        yield f"uncertainty samples {result.result} / standard", [f"{result.standard:.2g}", result.kind.unit]
        yield f"uncertainty samples {result.result} / first order", [result.verdict, ""]
    for chance in found.sampling.chances:
        yield f"uncertainty samples {chance.id}", [_displayed(chance), "1"]


def _displayed(chance: Chance) -> str:
    """A probability with the digits that the record shows of it."""
    return f"{chance.probability:.{share_places(chance.probability, chance.required) + 2}f}"


def _budget(budget: Budget) -> Data:
    return {
        "value": rounded(budget.value),
        "standard_uncertainty": rounded(budget.standard),
        "coverage_factor": rounded(budget.factor),
        "expanded_uncertainty": rounded(budget.expanded),
        "effective_degrees_of_freedom": rounded(budget.degrees),
        "unit": budget.kind.unit,
        "nonlinear": budget.is_nonlinear,
        "lines": [
            {
                "id": row.input.id,
                "value": rounded(row.input.value),
                "standard_uncertainty": rounded(row.input.standard),
                "unit": row.input.kind.unit,
                "distribution": row.input.distribution,
                "sensitivity": rounded(row.slope),
                "contribution": rounded(row.contribution),
                "share": rounded(row.share),
            }
            for row in budget.rows
        ],
    }


def _samples(found: Sampling) -> Data:
    return {
        "trials": found.trials,
        "blocks": found.blocks,
        "generator": found.generator,
        "steady": not found.is_capped,
        "results": {one.result: _sampled(one) for one in found.results},
        "probabilities": [_chance(one) for one in found.chances],
        "not_sampled": list(found.not_sampled),
        "without_answer": found.unanswered,
        "outside_a_range": found.outside_any,
        "limits_left": [
            {
                "id": row.check,
                "condition": row.condition,
                "level": row.level,
                "samples": row.samples,
                "state": row.nominal,
            }
            for row in found.outside
        ],
    }


def _sampled(one: SampledResult) -> Data:
    return {
        "mean": rounded(one.mean),
        "standard_uncertainty": rounded(one.standard),
        "low": rounded(one.low),
        "high": rounded(one.high),
        "unit": one.kind.unit,
        "tolerance": rounded(one.tolerance),
        "first_order": one.verdict,
    }


def _chance(one: Chance) -> Data:
    return {
        "id": one.id,
        "that": one.text,
        "holds_at_stated_values": one.nominal,
        "probability": rounded(one.probability),
        "standard_deviation": rounded(one.deviation),
    }
