"""The rating of a solved calculation that states a duty."""

from __future__ import annotations

from dataclasses import replace

from calcbook.chain.outcome import Solved
from calcbook.chain.rating_outcome import Rating
from calcbook.rating.day_one import day_one
from calcbook.rating.ledger import ledger
from calcbook.rating.parts import parts, with_parts


def rated(solved: Solved) -> Solved:
    """A solved calculation with its rating; unchanged where no duty is stated or the duty is what is reached."""
    if "duty" not in solved.chain.results:
        return solved
    rows = ledger(solved)
    along = parts(solved)
    rating = Rating(
        rows,
        sum(row.area for row in rows),
        along,
        day_one(solved),
    )
    rated_so = replace(solved, rating=rating)
    return with_parts(rated_so, along) if along is not None else rated_so
