"""Resistances and coefficients that a calculation takes from another: the surface they count on, what they stand for."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from calcbook.calcfile.calculation import Calculation, Given, Term, Value
from calcbook.calcfile.links import OF_A_SURVEY, Link
from calcbook.chain.scope import Scope
from calcbook.library import vocabulary


def check_linked_resistances(scope: Scope, calculation: Calculation, surfaces: Mapping[str, str]) -> None:
    """Open items for a figure that acts on another surface than where it comes from, and for the resistance of all
    deposits of a unit that stands beside others. ``surfaces`` are the names by term."""
    linked = _Linked(calculation)
    terms = calculation.resistances
    for term in terms:
        direct = list(linked.direct(term))
        here = surfaces.get(term.name, "")
        for link in [link for link in direct if link.on and here and link.on != here][:1]:
            scope.open(
                f"{term.name}/linked surface",
                "link",
                f"{term.name} takes {link.result} from {link.calculation}, which counts on the surface"
                f" {link.on} there, and acts on {here}: the same {_what(term)} has another"
                f" {'coefficient' if 'coefficient' in term.values else 'resistance'} on it.",
            )
        others = [other for other in terms if other is not term and linked.adds_fouling(other)]
        for link in linked.behind(term):
            # A figure derived from it may be one side's part, beside the other side's.
            beside = [other.name for other in others if link in direct or link not in linked.behind(other)]
            if beside and link.result.startswith(OF_A_SURVEY):
                scope.open(
                    f"{term.name}/all deposits",
                    "link",
                    f"{term.name} takes {link.result} from the survey of {link.calculation}, which is that of all"
                    f" deposits of both sides together, and stands beside {' and '.join(beside)} here: a deposit may"
                    " count twice.",
                )
                break


class _Linked:
    """What the resistances of a calculation are taken from, in the base case or any other."""

    def __init__(self, calculation: Calculation):
        self.calculation = calculation
        self.time = vocabulary()["service time"].dimension

    def direct(self, term: Term) -> Iterator[Link]:
        """The links of the resistance of a term, or of its growth but for times."""
        for figure in _figures(term):
            yield from self._links(figure.symbol)

    def behind(self, term: Term) -> list[Link]:
        """The same, and the links of the givens that its figures are derived from."""
        symbols = dict.fromkeys(figure.symbol for figure in _figures(term) if figure.symbol)
        waiting = list(symbols)
        while waiting:
            item = self.calculation.derived.get(waiting.pop())
            fresh = [
                name for name in (item.relation.symbols if item is not None else ()) if name not in symbols
            ]
            symbols |= dict.fromkeys(fresh)
            waiting += fresh
        return [link for symbol in symbols for link in self._links(symbol)]

    def _stated(self, symbol: str) -> list[Given]:
        """A given as the base case and every other case state it."""
        groups = (self.calculation.givens, *self.calculation.cases.values())
        return [group[symbol] for group in groups if symbol in group]

    def _links(self, symbol: str) -> Iterator[Link]:
        for given in self._stated(symbol):
            quantity = given.value.quantity
            if given.link is not None and (quantity is None or quantity.dimension != self.time):
                yield given.link

    def adds_fouling(self, term: Term) -> bool:
        """Whether a term is a deposit of its own, not one that is stated as nothing in every case."""
        value = term.values.get("resistance")
        if term.kind != "fouling" or value is None:
            return term.kind == "fouling"
        stated = [given.value for given in self._stated(value.symbol)] or [value]
        return any(item.quantity is None or item.quantity.value != 0.0 for item in stated)


def _what(term: Term) -> str:
    return {"fouling": "deposit", "stated": "term"}.get(term.kind, term.kind)


def _figures(term: Term) -> list[Value]:
    """The figures that the resistance of a term rests on."""
    own = [term.values[key] for key in ("resistance", "coefficient") if key in term.values]
    return [*own, *(term.growth.values.values() if term.growth is not None else ())]
