"""What stands in a file before its terms: givens, derived quantities, and the words that are still to be written."""

from __future__ import annotations

from calcbook.calcfile.calculation import Derived, unknown_symbol
from calcbook.calcfile.empty import is_empty
from calcbook.calcfile.links import CURRENT
from calcbook.chain.scope import Scope, unnamed_kind
from calcbook.chain.types import REASON, Input
from calcbook.library import vocabulary
from calcbook.quantities import QuantityKind, as_kind


def lay_out_givens(scope: Scope) -> None:
    """The dimension of every given, and open items for figures without a source and links that are not current."""
    for symbol, given in scope.calculation.givens.items():
        assert given.value.quantity is not None
        scope.dimensions[f"given/{symbol}"] = given.value.quantity.dimension
        scope.check_source(given.value, f"given/{symbol}")
        if given.link is not None and given.link.state != CURRENT:
            scope.open(
                f"given/{symbol}/link",
                "link",
                f"{symbol} takes {given.link.result} from"
                f" {given.link.calculation} revision {given.link.revision}: {given.link.state}.",
            )
    for case, changes in scope.calculation.cases.items():
        for symbol, given in changes.items():
            scope.check_source(given.value, f"case {case}/{symbol}")
    for number, criterion in enumerate(scope.calculation.acceptance, 1):
        if criterion.limit.is_literal and is_empty(criterion.source):
            scope.open(
                f"criterion {number}/source",
                "source",
                f"The limit of criterion {number} ({criterion.text}) has no source.",
            )
    stated = scope.calculation.uncertainty
    for one in stated.correlations if stated is not None else ():
        if is_empty(one.source):
            scope.open(
                f"correlation {one.first} {one.second}/source",
                "source",
                f"The correlation of {one.first} and {one.second} has no source.",
            )


def typed_givens(scope: Scope) -> dict[str, Input]:
    """Every given as an input of the chain, with the kind that its uses gave it."""
    typed = {}
    for symbol, given in scope.calculation.givens.items():
        quantity = given.value.quantity
        assert quantity is not None
        kind = scope.kinds.get(symbol) or _kind_of_dimension(quantity.dimension, quantity.reading)
        figure = as_kind(quantity, kind).value if symbol in scope.kinds else quantity.value
        typed[f"given/{symbol}"] = Input(
            f"given/{symbol}",
            symbol,
            given.meaning,
            kind,
            figure,
            given.value.text,
            given.source,
            given.place,
            True,
        )
    return typed


def mark_unused(scope: Scope) -> None:
    """Have givens that nothing takes stand among those whose uses are listed."""
    for symbol in scope.calculation.givens:
        scope.used_in.setdefault(symbol, [])


def lay_out_derived(scope: Scope) -> None:
    """Derived quantities in the order of what they need; a circle is told in full."""
    waiting = dict(scope.calculation.derived)
    while waiting:
        ready = [
            item
            for item in waiting.values()
            if not any(symbol in waiting for symbol in item.relation.symbols)
        ]
        if not ready:
            _report_circle(scope, waiting)
            return
        for item in ready:
            del waiting[item.symbol]
            _derived_step(scope, item)


def _report_circle(scope: Scope, waiting: dict[str, Derived]) -> None:
    start = min(waiting.values(), key=lambda item: item.place)
    path = [start.symbol]
    while True:
        following = next(symbol for symbol in waiting[path[-1]].relation.symbols if symbol in waiting)
        if following in path:
            path = [*path[path.index(following) :], following]
            break
        path.append(following)
    scope.collector.add(
        "derived-circular",
        waiting[path[0]].place,
        "derived quantities need each other in a circle",
        found=" needs ".join(path),
        expected="relations that end at givens",
    )


def _derived_step(scope: Scope, item: Derived) -> None:
    inputs = {}
    for symbol in item.relation.symbols:
        inputs[symbol] = scope.in_relation(symbol, "derived", f"derived {item.symbol}")
        if not inputs[symbol]:
            scope.collector.take([unknown_symbol(symbol, item.place, scope.calculation.symbols)])
            return
    if any(name not in scope.dimensions for name in inputs.values()):
        return
    scope.relation_step(
        f"derived/{item.symbol}",
        item.symbol,
        item.meaning,
        "derived",
        item.relation,
        inputs,
        "calculation file",
        place=item.place,
    )


def _history(scope: Scope) -> None:
    """That the revision history, where there is one, has the revision of the title block with its date."""
    calculation = scope.calculation
    name = f"revision {calculation.revision} / history"
    own = [one for one in calculation.revisions if one.revision == calculation.revision]
    if calculation.revisions and not own:
        scope.open(
            name, "revision", f"Revision {calculation.revision} does not stand in the revision history."
        )
    elif len(own) > 1:
        scope.open(
            name,
            "revision",
            f"Revision {calculation.revision} stands {len(own)} times in the revision history.",
        )
    elif own and own[-1].date != calculation.date:
        scope.open(
            name,
            "revision",
            f"The title block dates revision {calculation.revision} {calculation.date}, the revision history"
            f" {own[-1].date}.",
        )


def open_words(scope: Scope) -> None:
    """Open items for the revision history, reasons that are not written, and assumptions that are not verified."""
    _history(scope)
    for revision in scope.calculation.revisions:
        if is_empty(revision.reason):
            scope.open(
                f"revision {revision.revision} / {REASON}",
                "revision",
                f"The reason of revision {revision.revision} is to be written.",
            )
    for acceptance in scope.calculation.accept:
        if acceptance.date > scope.calculation.date:
            scope.open(
                f"acceptance of {acceptance.check} / date",
                "revision",
                f"The acceptance of {acceptance.check} is of {acceptance.date}, after the date of the calculation,"
                f" {scope.calculation.date}.",
            )
    for item in scope.calculation.assumptions:
        if not item.is_verified:
            scope.open(f"assumption {item.id}", "assumption", f"Assumption {item.id} is not verified.")


def _kind_of_dimension(dim: tuple, reading: str) -> QuantityKind:
    """A kind for a given that nothing uses or that only derived quantities use."""
    for kind in vocabulary().values():
        if kind.dimension == dim and kind.reading in ("", reading) and not kind.flag:
            return kind
    return unnamed_kind("x", dim)
