"""Resistances that a calculation takes from another: the surface they count on there, and what they stand for."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from calcbook.calcfile.calculation import Given, Term
from calcbook.calcfile.links import OF_A_SURVEY, Link
from calcbook.chain.scope import Scope
from calcbook.library import vocabulary


def check_linked_resistances(
    scope: Scope, terms: Sequence[Term], surfaces: Mapping[str, str], givens: Mapping[str, Given]
) -> None:
    """Open items for a resistance that acts on another surface than where it comes from, and for the resistance of all
    deposits of a unit that stands beside others. ``surfaces`` are the names by term."""
    for term in terms:
        links = _links_of(term, givens)
        here = surfaces.get(term.name, "")
        for link in [link for link in links if link.on and here and link.on != here][:1]:
            scope.open(
                f"{term.name}/linked surface",
                "link",
                f"{term.name} takes {link.result} from {link.calculation}, which counts on the surface"
                f" {link.on} there, and acts on {here}: the same deposit has another resistance on it.",
            )
        others = [other.name for other in terms if other is not term and _adds_fouling(other, givens)]
        for link in [link for link in links if others and link.result.startswith(OF_A_SURVEY)][:1]:
            scope.open(
                f"{term.name}/all deposits",
                "link",
                f"{term.name} takes {link.result} from the survey of {link.calculation}, which is that of all deposits"
                f" of both sides together, and stands beside {' and '.join(others)} here: a deposit may count twice.",
            )


def _links_of(term: Term, givens: Mapping[str, Given]) -> list[Link]:
    """The links of the resistance of a term, or of its growth but for times."""
    figures = [term.values["resistance"]] if "resistance" in term.values else []
    figures += list(term.growth.values.values()) if term.growth is not None else []
    time = vocabulary()["service time"].dimension
    linked = [givens[value.symbol] for value in figures if value.symbol in givens]
    return [
        given.link
        for given in linked
        if given.link is not None
        if given.value.quantity is None or given.value.quantity.dimension != time
    ]


def _adds_fouling(term: Term, givens: Mapping[str, Given]) -> bool:
    """Whether a term is a deposit of its own, not one that is stated as nothing."""
    value = term.values.get("resistance")
    if value is not None and value.symbol in givens:
        value = givens[value.symbol].value
    quantity = value.quantity if value is not None else None
    return term.kind == "fouling" and (quantity is None or quantity.value != 0.0)
