"""The rating of a solved calculation that states a duty."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from calcbook.calcfile.calculation import Duty
from calcbook.chain.ends import has_ends
from calcbook.chain.outcome import CaseOutcome, Result, Solved
from calcbook.chain.rating_outcome import OF_DAY_ONE, DayOne, Rating, in_case
from calcbook.chain.types import Chain, OpenItem
from calcbook.library import vocabulary
from calcbook.rating.day_one import day_one
from calcbook.rating.ledger import ledger
from calcbook.rating.parts import parts, with_parts

# Results of a circuit at the mean temperatures that are not those of a unit along which they change.
AT_MEANS = ("heat_flow_", "heat_flux_")


def rated(solved: Solved) -> Solved:
    """A solved calculation with its rating; unchanged without a duty. One that is what the unit reaches has day one
    alone."""
    chain = solved.chain
    if chain.calculation.duty is None:
        return solved
    is_stated = "duty" in chain.results
    along = parts(solved) if is_stated else None
    cases = [case for case in solved.cases if case.name not in chain.calculation.places]
    ledgers = {case.name: ledger(chain, case) for case in cases} if is_stated else {}
    rating = Rating(ledgers, along, _days(chain, cases))
    told = [
        replace(
            case,
            open_items=(*case.open_items, *_open_items(rating, case.name), *_at_means(chain, case)),
            results={**case.results, **_results(rating, case.name, chain.calculation.duty)},
        )
        for case in solved.cases
    ]
    solved = replace(solved, rating=rating, cases=tuple(told))
    return with_parts(solved, along) if along is not None else solved


def _days(chain: Chain, cases: Sequence[CaseOutcome]) -> dict[str, DayOne | str]:
    found = {case.name: day_one(chain, case) for case in cases}
    return {name: day for name, day in found.items() if day is not None}


def _open_items(rating: Rating, case: str) -> list[OpenItem]:
    reason = rating.unanswered.get(case)
    if not reason:
        return []
    where = in_case(case)
    return [OpenItem(f"day one{where}", "check", f"Day one has no answer{where}: {reason}.")]


def _at_means(chain: Chain, case: CaseOutcome) -> list[OpenItem]:
    """That a criterion on the heat flow or the flux of a unit judges what is not its heat: one item each, in the base
    case."""
    if case.name or not has_ends(chain):
        return []
    return [
        OpenItem(
            f"criterion {number} / mean temperatures",
            "check",
            f"criterion {number}, {item.text}, judges U times the difference of the mean temperatures: the unit transfers"
            " heat_reached_service or its duty, and its flux is another one at each end.",
        )
        for number, item in enumerate(chain.calculation.acceptance, 1)
        if item.result.startswith(AT_MEANS)
    ]


def _results(rating: Rating, case: str, duty: Duty) -> dict[str, Result]:
    """What the control of the clean unit has moved in a case, as results that a criterion may name."""
    day = rating.answered.get(case)
    if day is None:
        return {}
    moved = f"{duty.sides[day.throttle.side].stream}, {day.throttle.way}"
    found = {}
    for name, value in day.moved.items():
        kind, title = OF_DAY_ONE[name]
        found[name] = Result(name, value, vocabulary()[kind], f"{title}: {moved}")
    return found
