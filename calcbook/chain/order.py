"""The order of the terms of a file, from the inside to the outside."""

from __future__ import annotations

from calcbook.calcfile.calculation import Term
from calcbook.faults import Collector


def order_holds(terms: tuple[Term, ...], collector: Collector) -> bool:
    """Whether terms stand in an order that a circuit can have: films at both ends, deposits on walls, gaps between."""
    before = len(list(collector))
    ends = ("film", "parallel", "radiation")
    if len(terms) < 2 or terms[0].kind not in ends:
        collector.add(
            "film-missing",
            terms[0].place,
            "no film stands on the inside",
            found=terms[0].kind or terms[0].name,
            expected="the first term of kind film",
        )
    if len(terms) < 2 or terms[-1].kind not in ends:
        collector.add(
            "film-missing",
            terms[-1].place,
            "no film stands on the outside",
            found=terms[-1].kind or terms[-1].name,
            expected="the last term of kind film",
        )
    walls = [index for index, term in enumerate(terms) if term.kind == "wall"]
    for index, term in enumerate(terms[1:-1], 1):
        if term.kind in ends:
            collector.add(
                "term-order",
                term.place,
                f"`{term.name}` stands between other terms",
                found=term.kind,
                expected="films and radiation first or last only",
            )
        elif term.kind == "fouling" and walls and walls[0] < index < walls[-1]:
            collector.add(
                "term-order",
                term.place,
                f"`{term.name}` lies between two walls",
                expected="fouling between a film and the wall next to it",
            )
        elif term.kind in ("contact", "gap") and not (walls and walls[0] < index < walls[-1]):
            collector.add(
                "term-order",
                term.place,
                f"`{term.name}` does not lie between two walls",
                expected=f"a {term.kind} between two walls",
            )
        elif term.kind == "gap" and terms[index + 1].kind == "gap":
            collector.add(
                "term-order",
                terms[index + 1].place,
                f"no wall lies between `{term.name}` and `{terms[index + 1].name}`",
                expected="a wall between two gaps",
            )
    return len(list(collector)) == before
