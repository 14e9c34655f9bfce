"""What the rating of a unit holds: ledger, day one, parts. Frozen, nothing computes."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING, NamedTuple

if TYPE_CHECKING:
    from calcbook.chain.outcome import CheckResult, CriterionResult


# The unit at the inlets of the duty as it is in service, beside the clean one.
WITH_ALLOWANCES = "with the allowances"


class LedgerRow(NamedTuple):
    """One entry of the margin ledger: a part of the installed area in m², and what it rests on.

    ``is_margin`` tells what is there beyond the duty at clean U.
    """

    name: str
    area: float
    basis: str
    is_margin: bool


class Ledger(NamedTuple):
    """The margin ledger of one case."""

    rows: tuple[LedgerRow, ...]

    @property
    def sum(self) -> float:
        """The area of all tubes, m²."""
        return sum(row.area for row in self.rows)

    def area(self, name: str) -> float:
        """The area of an entry; nothing where the case has none of its name."""
        return sum(row.area for row in self.rows if row.name == name)


class PartRow(NamedTuple):
    """One of several equal parts of the duty along the unit, with its own U in service and clean."""

    number: int
    hot: tuple[float, float]
    cold: tuple[float, float]
    difference: float
    overall: Mapping[str, float]
    area: Mapping[str, float]


class Parts(NamedTuple):
    """The unit in equal parts of the duty: each with its figures, and the summed area by condition."""

    rows: tuple[PartRow, ...]
    area: Mapping[str, float]
    spread: float


class SideState(NamedTuple):
    """One side of the unit in one state: flow, outlet, speed (NaN where not known), wetted surface, film coefficient.

    ``pressure`` is that of a stream that changes phase and ``changing`` the flow that does so, NaN for others.
    """

    mass_flow: float
    outlet: float
    speed: float
    surface: float
    coefficient: float
    pressure: float
    changing: float


class UnitState(NamedTuple):
    """The unit in one state: its heat flow, U, and both sides by name."""

    heat: float
    overall: float
    sides: Mapping[str, SideState]


FLOW, PRESSURE, TEMPERATURE = "flow", "pressure", "saturation temperature"
# The state of the clean unit under its control, and what that moves on a side.
TURNED_DOWN = "turned down"
# Results of it by name, with their quantity and their meaning.
FLOW_RESULT, PRESSURE_RESULT, TEMPERATURE_RESULT = "flow_turned_down", "pressure_turned_down", "T_turned_down"
OF_DAY_ONE = {
    FLOW_RESULT: ("mass flow", "flow of the throttled stream with which the clean unit gives the duty"),
    PRESSURE_RESULT: (
        "pressure",
        "pressure of the throttled stream with which the clean unit gives the duty",
    ),
    TEMPERATURE_RESULT: (
        "temperature",
        "saturation temperature of the throttled stream with which the clean unit gives the duty",
    ),
}


def in_case(case: str) -> str:
    """Where something stands, behind its name; nothing for the base case."""
    return f" in case {case}" if case else ""


def state_in(state: str, case: str) -> str:
    """A state of the unit with the case that it is of; the base case has no name."""
    return f"{state}, case {case}" if case else state


def other_side(side: str) -> str:
    """The opposite side of a duty."""
    return "cold" if side == "hot" else "hot"


class Throttle(NamedTuple):
    """What the control moves: a side, and of it a flow, a pressure or a temperature; and whether the file says so."""

    side: str
    what: str
    is_stated: bool

    @property
    def other(self) -> str:
        """The side that keeps what the duty states of it."""
        return other_side(self.side)

    @property
    def way(self) -> str:
        """Which way the control moves what it takes, so that less heat flows."""
        return "turned down" if self.what == FLOW or self.side == "hot" else "raised"


class DayOne(NamedTuple):
    """The clean unit at the inlets of the duty: as it runs, and turned down until it gives the duty.

    ``service`` is the unit with its allowances. ``turned_down`` is None with the reason in ``no_turn_down``.
    ``throttle`` is what the control moves for it, ``is_slow`` whether that runs below its usual speed then.
    ``checks`` are phases at the wall and figures outside their bands, in the state that ``condition`` names;
    ``criteria`` are those of the file on temperatures of the clean unit, in the state that their case names;
    ``not_checked`` are the streams of which boiling or freezing at the wall cannot be checked.
    """

    service: UnitState
    clean: UnitState
    turned_down: UnitState | None
    no_turn_down: str
    throttle: Throttle
    is_slow: bool
    checks: tuple[CheckResult, ...]
    criteria: tuple[CriterionResult, ...]
    not_checked: Mapping[str, tuple[str, ...]]

    @property
    def hotter(self) -> float:
        """How much hotter the surface on the cold side is clean than in service, K."""
        return self.clean.sides["cold"].surface - self.service.sides["cold"].surface

    @property
    def colder(self) -> float:
        """How much colder the surface on the hot side is clean than in service, K."""
        return self.service.sides["hot"].surface - self.clean.sides["hot"].surface

    @property
    def flow_part(self) -> float:
        """The turned-down flow over that of service; NaN where there is none."""
        if self.turned_down is None:
            return float("nan")
        side = self.throttle.side
        return self.turned_down.sides[side].mass_flow / self.service.sides[side].mass_flow

    @property
    def moved(self) -> dict[str, float]:
        """What the control has moved, by the names of its results; nothing without a turned-down state."""
        if self.turned_down is None:
            return {}
        side = self.turned_down.sides[self.throttle.side]
        if self.throttle.what == FLOW:
            return {FLOW_RESULT: side.mass_flow}
        found = {PRESSURE_RESULT: side.pressure, TEMPERATURE_RESULT: side.outlet}
        return {name: value for name, value in found.items() if math.isfinite(value)}

    @property
    def turned_down_hotter(self) -> float:
        """As ``hotter``, for the unit turned down."""
        if self.turned_down is None:
            return float("nan")
        return self.turned_down.sides["cold"].surface - self.service.sides["cold"].surface

    def is_like(self, other: DayOne) -> bool:
        """Whether the clean unit does the same as in another case, leaves the same, and is judged alike."""
        return self._marks() == other._marks()

    def _marks(self) -> str:
        # In words: figures that are not known are alike.
        left = [(check.id, check.figure) for check in self.checks]
        judged = [(item.id, item.value, item.limit, item.met) for item in self.criteria]
        return repr((self.clean, self.turned_down, left, judged))


class Rating(NamedTuple):
    """Everything that the rating adds to a solved calculation: ledger and day one by case, parts of the base case.

    ``ledgers`` (none where the duty is what the unit reaches) and ``days`` name the base case by an empty name. ``days``
    holds the clean unit, or in words why it has no answer; nothing where none is asked for.
    """

    ledgers: Mapping[str, Ledger]
    parts: Parts | None
    days: Mapping[str, DayOne | str]

    @property
    def ledger(self) -> Ledger:
        """The ledger of the base case."""
        return self.ledgers[""]

    @property
    def answered(self) -> dict[str, DayOne]:
        """Day one of every case in which the clean unit has an answer."""
        return {case: day for case, day in self.days.items() if isinstance(day, DayOne)}

    @property
    def told(self) -> dict[str, DayOne]:
        """Day one of the base case, and of those in which it is another one."""
        days = self.answered
        return {
            case: day for case, day in days.items() if not case or "" not in days or not day.is_like(days[""])
        }

    @property
    def unanswered(self) -> dict[str, str]:
        """Why the clean unit has no answer, by case."""
        return {case: day for case, day in self.days.items() if isinstance(day, str)}
