"""Fouling that grows in service: the resistance from a growth card, and the thickness of its deposit."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import replace
from typing import NamedTuple

from calcbook.calcfile.calculation import Growth, Term, Value
from calcbook.chain.films import FilmScope
from calcbook.chain.scope import Scope
from calcbook.chain.surfaces import Shape
from calcbook.chain.types import ChainCheck
from calcbook.faults import Faults, nearest_names, shown
from calcbook.formulas import parse_expression
from calcbook.library import Library, Program, vocabulary

RESULT = "R_f"
TIME = "service time"
THICKNESS_CARDS = {
    "inside": "deposit-thickness-inside",
    "outside": "deposit-thickness-outside",
    "flat": "deposit-thickness-flat",
}
_CALENDAR = re.compile(r"\b(months?|years?|yr)\b")


class Grown(NamedTuple):
    """What has grown in service: the ids of the card's resistance, of the layer's (none when clean), of the time in
    service and of the card's needs by symbol, and the limits of the card."""

    fouling: str
    resistance: str
    time: str
    needs: Mapping[str, str]
    checks: tuple[ChainCheck, ...]


class GrownDeposit(NamedTuple):
    """The thickness that belongs to a resistance that has grown: its id, and the limits of its card."""

    thickness: str
    checks: tuple[ChainCheck, ...]


def lay_out_growth(scope: Scope, library: Library, term: Term) -> Grown | None:
    """The resistance of a fouling term from the card of its growth; None after a fault.

    Codes: method-unknown, method-not-growth, key-unknown, need-missing, and those of its figures.
    """
    growth = term.growth
    assert growth is not None
    program = _program(scope, library, growth)
    if program is None or not _keys_hold(scope, growth, program, term):
        return None
    time = scope.value(growth.after, TIME, term.name, "after")
    _say_calendar(scope, growth, term)
    figures = {TIME: time}
    for item in program.needs:
        stated = growth.values.get(item.need.symbol)
        if stated is not None and not item.need.one_of:
            name = item.need.quantity.name
            figures[name] = scope.value(stated, name, term.name, f"growth {item.need.symbol}")
    if not all(figures.values()):
        return None
    choices = {
        item.need.symbol: growth.values[item.need.symbol]
        for item in program.needs
        if item.need.one_of and item.need.symbol in growth.values
    }
    laid_out = _lay_out(
        scope, library, replace(term, with_values=choices), program, figures, "fouling resistance"
    )
    if laid_out is None:
        return None
    fouling, checks = laid_out
    needs = {
        item.need.symbol: figures[item.need.quantity.name]
        for item in program.needs
        if item.need.quantity.name in figures
    }
    resistance = scope.relation_step(
        f"{term.name}/R",
        "R",
        "area resistance of the deposit",
        term.name,
        parse_expression(RESULT),
        {RESULT: fouling},
        "growth",
        "area resistance",
    )
    return Grown(fouling, resistance, time, needs, checks)


def lay_out_thickness(
    scope: Scope, library: Library, term: Term, grown: Grown, shape: Shape, surface: int
) -> GrownDeposit | None:
    """The thickness of a deposit from the resistance that has grown on a surface; None after a fault."""
    assert term.deposit is not None
    conductivity = scope.value(term.deposit.conductivity, "deposit conductivity", term.name, "conductivity")
    if not conductivity:
        return None
    diameter = shape.surfaces[surface].diameter if shape.name == "tube" else ""
    side = "flat" if not diameter else ("inside" if surface == 0 else "outside")
    figures = {
        "fouling resistance": grown.fouling,
        "deposit conductivity": conductivity,
        **({f"{side} diameter": diameter} if diameter else {}),
    }
    program = library.program(THICKNESS_CARDS[side])
    laid_out = _lay_out(scope, library, term, program, figures, "thickness")
    return GrownDeposit(*laid_out) if laid_out is not None else None


def _program(scope: Scope, library: Library, growth: Growth) -> Program | None:
    """The program of the growth card; a fault where there is none, or where it gives no grown resistance."""
    if growth.model not in library.names("methods"):
        models = [name for name in library.names("methods") if _is_growth(library, name)]
        scope.collector.add(
            "method-unknown",
            growth.place_of("model"),
            f"there is no method `{shown(growth.model)}`",
            found=shown(growth.model),
            expected=", ".join(models),
            nearest=nearest_names(growth.model, models),
        )
        return None
    try:
        program = library.program(growth.model)
    except Faults as faults:
        scope.collector.take(faults.faults)
        return None
    if not _is_growth(library, growth.model):
        scope.collector.add(
            "method-not-growth",
            growth.place_of("model"),
            f"`{growth.model}` gives {program.method.gives}, no fouling resistance after a time in service",
            found=program.method.gives,
            expected=", ".join(name for name in library.names("methods") if _is_growth(library, name)),
        )
        return None
    return program


def _is_growth(library: Library, name: str) -> bool:
    card = library.method(name)
    return card.gives == RESULT and any(need.quantity.name == TIME for need in card.needs)


def _keys_hold(scope: Scope, growth: Growth, program: Program, term: Term) -> bool:
    """Whether the growth states each figure that its card needs, and no other."""
    needs = {item.need.symbol: item.need for item in program.needs if item.need.quantity.name != TIME}
    unknown = [key for key in growth.values if key not in needs]
    for key in unknown:
        scope.collector.add(
            "key-unknown",
            growth.place_of(key),
            f"`{shown(key)}` is asked for by no card of `{term.name}`",
            found=shown(key),
            expected=", ".join(("model", "after", *needs)),
            nearest=nearest_names(key, tuple(needs)),
        )
    missing = [need for symbol, need in needs.items() if need.absent is None and symbol not in growth.values]
    meant = {name for key in unknown for name in nearest_names(key, tuple(needs), 1)}
    for need in missing:
        if need.symbol not in meant:
            scope.collector.add(
                "need-missing",
                growth.place,
                f"the growth of `{term.name}` needs {need.quantity.name} `{need.symbol}`",
                expected=f"{need.symbol}: a quantity in {need.quantity.unit}",
            )
    return not unknown and not missing


def _say_calendar(scope: Scope, growth: Growth, term: Term) -> None:
    """Months and years are lengths of time here, not dates: said where one is written."""
    figures = {"after": growth.after, **growth.values}
    if any(value is not None and _names_calendar(scope, value) for value in figures.values()):
        scope.assume(
            f"{term.name}/calendar",
            "A year is 365.25 days and a month its twelfth part, 30.4375 days.",
            "a time of the growth is written in months or years",
            term.name,
        )


def _names_calendar(scope: Scope, value: Value) -> bool:
    given = scope.calculation.givens.get(value.symbol)
    return bool(_CALENDAR.search(given.value.text if given is not None else value.text))


def _lay_out(
    scope: Scope,
    library: Library,
    term: Term,
    program: Program,
    figures: Mapping[str, str],
    result: str,
) -> tuple[str, tuple[ChainCheck, ...]] | None:
    """A card's steps on figures by quantity name: the id of its result, called by its name, and its limits."""
    film = FilmScope(scope, library, term, term.name, figures)
    names = film.laid_out(program)
    if names is None:
        return None
    name = names[program.result]
    scope.steps[name] = replace(scope.steps[name], title=result, kind=vocabulary()[result])
    return name, film.checks(program, names)
