"""What holds for terms of every kind: withdrawn cards, and entries of `with:` that nobody asks for."""

from __future__ import annotations

from calcbook.calcfile.calculation import Term
from calcbook.chain.films import FilmScope
from calcbook.chain.pressure import asked_symbols
from calcbook.chain.scope import Scope
from calcbook.faults import nearest_names, shown
from calcbook.library.cards import State


def refuse_withdrawn(scope: Scope, card: str, state: State, term: Term) -> None:
    """A fault where a term uses a card that is withdrawn."""
    if state.status == "withdrawn":
        scope.collector.add(
            "card-withdrawn", term.place, f"the card {card} is withdrawn", expected=state.successor
        )


def check_with_values(film: FilmScope) -> None:
    """Every entry of `with:` must be asked for by the situation of its term or one of its methods."""
    term, situation = film.term, film.situation
    if not term.with_values or situation is None:
        return
    asked = {need.symbol for need in situation.needs} | {need.quantity.name for need in situation.needs}
    methods = [term.texts["method"]] if "method" in term.texts else situation.methods
    for method in methods:
        for item in film.library.program(method).needs:
            asked |= {item.need.symbol, item.need.quantity.name}
    asked |= asked_symbols(film)
    for key, value in term.with_values.items():
        if key not in asked:
            film.scope.collector.add(
                "key-unknown",
                value.place,
                f"`{shown(key)}` is asked for by no card of `{term.name}`",
                found=shown(key),
                expected=", ".join(sorted(need.symbol for need in situation.needs)),
                nearest=nearest_names(key, sorted(asked)),
            )
