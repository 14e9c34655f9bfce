"""The rating of a solved calculation that states a duty."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from calcbook.chain.outcome import CaseOutcome, Solved
from calcbook.chain.rating_outcome import DayOne, Rating
from calcbook.chain.types import Chain, OpenItem
from calcbook.rating.day_one import day_one
from calcbook.rating.ledger import ledger
from calcbook.rating.parts import parts, with_parts


def rated(solved: Solved) -> Solved:
    """A solved calculation with its rating; unchanged where no duty is stated or the duty is what is reached."""
    if "duty" not in solved.chain.results:
        return solved
    along = parts(solved)
    cases = [case for case in solved.cases if case.name not in solved.chain.calculation.places]
    rating = Rating(
        {case.name: ledger(solved.chain, case) for case in cases}, along, _days(solved.chain, cases)
    )
    told = [
        replace(case, open_items=(*case.open_items, *_open_items(rating, case.name))) for case in solved.cases
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
    where = f" in case {case}" if case else ""
    return [OpenItem(f"day one{where}", "check", f"Day one has no answer{where}: {reason}.")]
