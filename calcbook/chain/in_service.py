"""Time in service and cleaning laid out: the ids of their figures, and what they need of the calculation."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import replace

from calcbook.calcfile.calculation import Calculation, TimeInService
from calcbook.calcfile.in_service import CLEANED_UNIT, DUTY
from calcbook.chain.scope import Scope
from calcbook.faults import Place
from calcbook.library import vocabulary
from calcbook.quantities import QuantityFault, as_kind

OWNER, CLEANING = "time in service", "cleaning"


def lay_out_in_service(scope: Scope, grows: bool, results: Collection[str]) -> dict[str, str]:
    """The ids of the end of the table and of the cleaning's figures by name; empty where nothing is stated.

    ``results`` are the names of what the chain gives. Codes: need-missing, and those of the figures.
    """
    time, cleaning = scope.calculation.time_in_service, scope.calculation.cleaning
    found: dict[str, str] = {}
    for place, name in (
        (time.place if time else None, OWNER),
        (cleaning.place if cleaning else None, CLEANING),
    ):
        if place is not None and not grows:
            _missing(
                scope, place, f"`{name}` needs a fouling term that grows", "growth: {…} on a fouling term"
            )
            return {}
    if time is not None:
        found["until"] = _until(scope, time)
    if cleaning is None:
        return found
    if time is None:
        _missing(
            scope,
            cleaning.place,
            "`cleaning` needs the time that the unit is followed for",
            f"{OWNER}: {{…}}",
        )
    if not {"duty", "heat reached", "heat flow"} & set(results):
        _missing(
            scope, cleaning.place, "`cleaning` needs a heat flow", "temperatures on both sides, or a duty"
        )
    if cleaning.against == DUTY and "duty" not in results:
        _missing(
            scope,
            cleaning.place,
            "the loss is counted against a duty that is not stated",
            "a duty: {…} with both ends of a stream, or with its heat flow",
        )
    if not cleaning.against:
        is_duty = loss_against(scope.calculation) == DUTY
        scope.assume(
            "cleaning/loss against",
            f"The heat that fouling loses is counted from the {'duty' if is_duty else 'cleaned unit'}.",
            "the heat flow of the duty is stated" if is_duty else "nothing is stated",
            CLEANING,
        )
    for key, value, kind, title in (
        ("duration", cleaning.duration, "cleaning time", "duration of a cleaning"),
        ("cost", cleaning.cost, "cleaning cost", "cost of one cleaning"),
        ("price", cleaning.price, "price of heat", "price of heat"),
    ):
        if value is not None:
            name = found[key] = scope.value(value, kind, CLEANING, key)
            if not value.symbol and name in scope.inputs:
                scope.inputs[name] = replace(scope.inputs[name], title=title)
    return found


def loss_against(calculation: Calculation) -> str:
    """What the heat that fouling loses is counted from: as stated, else a stated duty, else the cleaned unit."""
    cleaning, duty = calculation.cleaning, calculation.duty
    if cleaning is not None and cleaning.against:
        return cleaning.against
    return DUTY if duty is not None and duty.heat_flow is not None else CLEANED_UNIT


def _until(scope: Scope, time: TimeInService) -> str:
    """The id of the table's end. It moves no result, so that a plain figure needs no source."""
    kind = vocabulary()["cleaning interval"]
    until = time.until
    if until.quantity is not None:
        try:
            return scope.constant(f"{OWNER}/until", as_kind(until.quantity, kind).value, kind.dimension)
        except QuantityFault:
            pass  # read once more below, where the fault is told with its place
    return scope.value(until, kind.name, OWNER, "until")


def _missing(scope: Scope, place: Place, message: str, expected: str) -> None:
    scope.collector.add("need-missing", place, message, expected=expected)
