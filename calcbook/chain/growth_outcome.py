"""What a unit does as its fouling grows, and when it is best cleaned. Frozen, nothing computes."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

from calcbook.formulas import Relation


class TimeRow(NamedTuple):
    """The unit at one time since its cleaning. Figures that the calculation does not give are NaN.

    ``resistances`` are those of the growing terms, each on its own surface; ``pressure_drops`` go by stream,
    ``outlets`` by side. ``loss`` is what fouling loses in a time, ``mean`` the mean over the cycle if the unit
    were cleaned then: money in a time, or heat flow where no money is counted.
    """

    time: float
    resistances: Mapping[str, float]
    overall: float
    margin: float
    heat: float
    outlets: Mapping[str, float]
    pressure_drops: Mapping[str, float]
    loss: float
    mean: float


class Turn(NamedTuple):
    """A verdict that turns on the way: its kind (criterion, limit, method, controlling term), its id and level, the
    words before and after, and the first time known to have the second."""

    kind: str
    id: str
    level: str
    was: str
    becomes: str
    time: float


class ClosedForm(NamedTuple):
    """A card that gives the interval in closed form, on figures of the chain; ``because`` says which."""

    card: str
    interval: float
    because: str


class Interval(NamedTuple):
    """The cleaning interval at which the mean over the cycle is least: there the loss equals the mean.

    ``interval`` is NaN with the reason in ``no_interval``. ``loss`` and ``mean`` are the relations, ``values``
    their figures at the interval by symbol, and ``least`` the mean there. ``counts_money`` tells money from heat,
    ``against`` what lost heat is counted from. ``flat`` holds the times between which the mean stays within
    ``flat_part`` of the least; an end beyond the table is NaN.
    """

    interval: float
    no_interval: str
    loss: Relation
    mean: Relation
    values: Mapping[str, float]
    least: float
    counts_money: bool
    against: str
    flat: tuple[float, float]
    flat_part: float
    closed_form: ClosedForm | None


# Why there is no time at which the duty is lost, where that is good news.
CARRIED = "the duty is carried to the end of the table"


class OverTime(NamedTuple):
    """The unit over the time since its cleaning.

    ``duty_lost`` is the time at which the margin of area over the duty falls to nothing: NaN with the words in
    ``duty_words`` where it does not, or where there is no duty. ``heat_basis`` says how the heat was found.
    ``turns`` are the verdicts at the stated ends that change on the way, in the order of their times. ``failed``
    counts rows without an answer.
    """

    rows: tuple[TimeRow, ...]
    turns: tuple[Turn, ...]
    unit: str
    duty_lost: float
    duty_words: str
    heat_basis: str
    failed: int
    interval: Interval | None
