"""The rating of a solved calculation that states a duty."""

from __future__ import annotations

from dataclasses import replace

from calcbook.chain.outcome import Solved
from calcbook.chain.rating_outcome import Rating
from calcbook.chain.types import OpenItem
from calcbook.rating.day_one import day_one
from calcbook.rating.ledger import ledger
from calcbook.rating.parts import parts, with_parts


def rated(solved: Solved) -> Solved:
    """A solved calculation with its rating; unchanged where no duty is stated or the duty is what is reached."""
    if "duty" not in solved.chain.results:
        return solved
    rows = ledger(solved)
    along, first = parts(solved), day_one(solved)
    day, reason = (None, first) if isinstance(first, str) else (first, "")
    rating = Rating(rows, sum(row.area for row in rows), along, day, reason)
    solved = replace(solved, rating=rating)
    if reason:
        item = OpenItem("day one", "check", f"Day one has no answer: {reason}.")
        solved = solved.with_base(replace(solved.base, open_items=(*solved.base.open_items, item)))
    return with_parts(solved, along) if along is not None else solved
