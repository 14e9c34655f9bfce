"""`survey:` of a calculation file: what it says, as frozen types."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import NamedTuple

from calcbook.calcfile.surveyfile import History
from calcbook.faults import Place
from calcbook.quantities import Quantity, Tolerance


class SurveyColumn(NamedTuple):
    """The column that gives a given row by row: SI value = cell * factor + offset.

    ``low`` and ``high`` bound what the sensor can show, ``drift`` is what it may wander in a year.
    """

    symbol: str
    head: str
    unit: str
    factor: float
    offset: float
    low: Quantity | None
    high: Quantity | None
    drift: Tolerance | None
    source: str
    place: Place


class Cleaning(NamedTuple):
    """A cleaning: as written, in seconds (of the time column, or since 1970-01-01), and who says so."""

    text: str
    at: float
    source: str
    place: Place


class HeatLoss(NamedTuple):
    """The part of the hot stream's heat that goes to the surroundings, with its half-width."""

    value: Quantity
    tolerance: Quantity | None
    source: str
    place: Place


class Rules(NamedTuple):
    """The limits of the rules that reject rows; None where the file states none."""

    closure: Quantity | None
    steady: Quantity | None
    flow_ratio: tuple[Quantity, Quantity] | None
    gap: Quantity | None
    source: str
    place: Place


class Zero(NamedTuple):
    """The data after each cleaning on which zero is anchored: a number of rows, or a time."""

    rows: int
    over: Quantity | None
    source: str
    place: Place


class Proposal(NamedTuple):
    """The time since cleaning that an allowance is proposed for, and how sure it is to be large enough."""

    after: Quantity
    percentile: Quantity
    source: str
    place: Place


@dataclass(frozen=True, slots=True)
class Survey:
    """Plant data of the unit and what is wanted from them. ``time_unit`` is empty for dates and times."""

    file: str
    source: str
    time_head: str
    time_unit: str
    time_factor: float
    columns: Mapping[str, SurveyColumn]
    history: History
    heat_loss: HeatLoss | None
    rules: Rules
    cleanings: tuple[Cleaning, ...]
    zero: Zero
    model: str
    model_place: Place
    proposal: Proposal
    place: Place

    @property
    def sources(self) -> dict[str, str]:
        """Where each part of the survey comes from, by its name; empty where the file gives no source."""
        found = {"file": self.source, "zero": self.zero.source, "propose": self.proposal.source}
        rules = self.rules
        if any((rules.closure, rules.steady, rules.flow_ratio, rules.gap)):
            found["rules"] = rules.source
        if self.heat_loss is not None:
            found["heat loss"] = self.heat_loss.source
        for column in self.columns.values():
            if column.low is not None or column.drift is not None:
                found[f"column {column.head}"] = column.source
        return found | {f"cleaning {one.text}": one.source for one in self.cleanings}
