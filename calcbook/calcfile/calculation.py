"""What a calculation file says, as frozen types: every value with its place, nothing resolved yet."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

from calcbook.calcfile.links import Link
from calcbook.calcfile.survey import Survey
from calcbook.calcfile.uncertainty import UncertaintyText
from calcbook.faults import Collector, Fault, Place, nearest_names, shown
from calcbook.formulas import Relation
from calcbook.quantities import Quantity

# A share is stated no larger without a sign of per cent: 500 % (common practice).
LARGEST_SHARE = 5.0


@dataclass(frozen=True, slots=True)
class Value:
    """A figure where the file asks for one: a symbol of the givens, a word, or a quantity with its source.

    ``stated_at`` is the state a volume flow is measured at. A figure that ``is_broken`` has its fault
    already: it stands where a figure was written, so that nothing is called missing.
    """

    text: str
    place: Place
    symbol: str = ""
    quantity: Quantity | None = None
    source: str = ""
    has_source: bool = False
    stated_at: Mapping[str, Value] = field(default_factory=dict)
    is_broken: bool = False

    @property
    def is_literal(self) -> bool:
        return self.quantity is not None

    def is_share(self, name: str, collector: Collector) -> bool:
        """Whether a figure for a share is no larger than shares are; else the fault, number-out-of-proportion."""
        quantity = self.quantity
        if quantity is None or quantity.unit_text or quantity.value <= LARGEST_SHARE:
            return True
        collector.add(
            "number-out-of-proportion",
            self.place,
            f"`{name}` is a share: {self.text} would be {100.0 * quantity.value:g} %",
            found=self.text,
            expected="a share of one, or per cent",
            nearest=(f"{self.text} %",),
        )
        return False


class Tolerance(NamedTuple):
    """A tolerance as written: ``kind`` is rectangular, triangular, standard, or expanded with its factor k.

    ``degrees`` are the degrees of freedom behind a standard or expanded tolerance; infinite where none are
    stated.
    """

    text: str
    place: Place
    kind: str
    factor: float = 1.0
    degrees: float = math.inf


class Given(NamedTuple):
    """A named input quantity."""

    symbol: str
    value: Value
    meaning: str
    source: str
    tolerance: Tolerance | None
    place: Place
    link: Link | None = None


class Derived(NamedTuple):
    """A quantity that follows from givens by a relation."""

    symbol: str
    relation: Relation
    meaning: str
    place: Place


class Assumption(NamedTuple):
    """A statement taken as true by the engineer."""

    id: str
    text: str
    basis: str
    verified_by: str
    verified_on: str
    evidence: str
    place: Place

    @property
    def is_verified(self) -> bool:
        return bool(self.verified_by and self.verified_on and self.evidence)


class Revision(NamedTuple):
    """One line of the revision history."""

    revision: str
    date: str
    reason: str
    place: Place


@dataclass(frozen=True, slots=True)
class FluidText:
    """A fluid as the file names it.

    ``kind``: name, mixture, humid air, petroleum, table or constants. ``fraction`` is the figure that tells
    one mixture from another: a fraction, the humidity by its ``basis``, or the relative density.
    ``columns`` holds the entries of a table or constants by property name; ``astm`` the two points of a
    D341 viscosity as (temperature, kinematic viscosity).
    """

    kind: str
    name: str
    place: Place
    basis: str = ""
    fraction: Value | None = None
    columns: Mapping[str, tuple[Value, ...]] = field(default_factory=dict)
    astm: tuple[tuple[Value, Value], ...] = ()
    source: str = ""
    product: str = ""


@dataclass(frozen=True, slots=True)
class Stream:
    """A fluid with its state and flow."""

    name: str
    fluid: FluidText | None
    temperature: Value | None
    pressure: Value | None
    flow: Value | None
    phase: str
    place: Place
    non_condensable: Value | None = None


@dataclass(frozen=True, slots=True)
class DutySide:
    """One stream of the duty, from its inlet to its outlet; a saturated stream has neither.

    One end may be left out beside the other: it is found.
    """

    stream: str
    inlet: Value | None
    outlet: Value | None
    place: Place

    @property
    def has_ends(self) -> bool:
        """Whether its temperature changes along the unit."""
        return self.inlet is not None or self.outlet is not None

    @property
    def ends(self) -> tuple[tuple[str, Value | None], ...]:
        """Inlet and outlet, each by its name."""
        return ("inlet", self.inlet), ("outlet", self.outlet)

    @property
    def open_end(self) -> str:
        """The end whose temperature is to be found; empty where both are stated, or neither."""
        if not self.has_ends or (self.inlet is not None and self.outlet is not None):
            return ""
        return "inlet" if self.inlet is None else "outlet"


# Only flows that pass each other end to end can be cut into parts that follow each other.
CUT_ARRANGEMENTS = ("counterflow", "parallel flow")


@dataclass(frozen=True, slots=True)
class Duty:
    """What the unit has to transfer: arrangement of the flows, both streams, parts that it is cut into.

    ``heat_flow`` is the duty where it is stated; None where the heat balances give it, or the unit itself.
    ``installed_area`` is that of the drawing on the surface of U; None where the geometry gives it. ``throttled`` is the
    side that the control acts on; empty where the file does not say.
    """

    arrangement: str
    shells: int
    hot: DutySide
    cold: DutySide
    parts: int
    place: Place
    installed_area: Value | None = None
    throttled: str = ""
    heat_flow: Value | None = None

    @property
    def sides(self) -> dict[str, DutySide]:
        return {"hot": self.hot, "cold": self.cold}

    @property
    def has_ends(self) -> bool:
        """Whether anything changes along the unit: not so between two streams that keep their temperatures."""
        return self.hot.has_ends or self.cold.has_ends

    @property
    def is_beside_one_temperature(self) -> bool:
        """Whether a stream keeps its temperature, beside which every arrangement has one mean difference."""
        return not (self.hot.has_ends and self.cold.has_ends)

    @property
    def can_be_cut(self) -> bool:
        """Whether parts follow each other along the unit: flows that pass end to end, or one that keeps its temperature."""
        follow = self.is_beside_one_temperature or self.arrangement in CUT_ARRANGEMENTS
        return self.has_ends and follow

    def names(self, stream: str) -> bool:
        """Whether a stream stands on one of the sides."""
        return stream in (self.hot.stream, self.cold.stream)


class FoulingSpecified(NamedTuple):
    """Fouling of the whole unit by ``kind`` (cleanliness or excess surface), split over its terms by name."""

    kind: str
    value: Value
    split: Mapping[str, Value]
    place: Place


class Geometry(NamedTuple):
    """Shape and the dimensions that stand in the file, by their key."""

    shape: str
    dimensions: Mapping[str, Value]
    place: Place


class Deposit(NamedTuple):
    """A fouling layer by thickness and conductivity; without a thickness it follows from a growing resistance."""

    thickness: Value | None
    conductivity: Value | None
    narrows: bool
    place: Place


class Growth(NamedTuple):
    """A fouling resistance that grows in service: its card, the time in service, the card's figures by symbol."""

    model: str
    after: Value | None
    values: Mapping[str, Value]
    text_places: Mapping[str, Place]
    place: Place

    def place_of(self, key: str) -> Place:
        return self.text_places.get(key, self.place)


class Fins(NamedTuple):
    """Fins on the surface that a film acts on; ``values`` holds the figures by their key."""

    shape: str
    values: Mapping[str, Value]
    texts: Mapping[str, str]
    text_places: Mapping[str, Place]
    place: Place

    def place_of(self, key: str) -> Place:
        return self.text_places.get(key, self.place)


@dataclass(frozen=True, slots=True)
class Term:
    """One entry of the resistance list, as written. ``values`` holds the figures by their key."""

    name: str
    kind: str
    place: Place
    texts: Mapping[str, str] = field(default_factory=dict)
    text_places: Mapping[str, Place] = field(default_factory=dict)
    values: Mapping[str, Value] = field(default_factory=dict)
    with_values: Mapping[str, Value] = field(default_factory=dict)
    deposit: Deposit | None = None
    growth: Growth | None = None
    fins: Fins | None = None
    fluid: FluidText | None = None
    branches: tuple[Term, ...] = ()
    includes: tuple[str, ...] = ()
    holds_for: tuple[Value, Value] | None = None
    scales_with: Relation | None = None

    def place_of(self, key: str) -> Place:
        if key in self.text_places:
            return self.text_places[key]
        return self.values[key].place if key in self.values else self.place


class Criterion(NamedTuple):
    """An acceptance criterion: a result, an operator, and a quantity or given.

    ``probability`` is the share of the samples in which it must hold, NaN where the stated values decide.
    """

    text: str
    result: str
    operator: str
    limit: Value
    source: str
    place: Place
    probability: float = math.nan

    @property
    def direction(self) -> float:
        """1 where more of the result is good, −1 where less is."""
        return 1.0 if ">" in self.operator else -1.0


class Acceptance(NamedTuple):
    """The engineer's answer to a failed check, with its bound and reason.

    It acts in one ``condition``, or in both where that is empty, and in one ``case`` (the base case by its empty name),
    or in every one where that is None.
    """

    check: str
    condition: str
    case: str | None
    direction: str
    bound: Value | None
    because: str
    by: str
    date: str
    place: Place

    def acts_in(self, condition: str, case: str) -> bool:
        """Whether it answers for a check in a condition of a case."""
        return self.condition in ("", condition) and self.case in (None, case)

    def meets(self, other: Acceptance) -> bool:
        """Whether both answer for one check in some condition of some case."""
        conditions, cases = {self.condition, other.condition}, {self.case, other.case}
        together = len(conditions) == 1 or "" in conditions
        return self.check == other.check and together and (len(cases) == 1 or None in cases)


class Report(NamedTuple):
    """How results are reported: the basis of U, and units."""

    u_on: str
    u_on_place: Place
    units: str
    quantity_units: Mapping[str, str]
    service: str = ""
    service_place: Place | None = None


class Swept(NamedTuple):
    """A given with the first and the last of the evenly spaced figures that it takes."""

    symbol: str
    first: Quantity
    last: Quantity
    steps: int
    first_place: Place
    last_place: Place
    place: Place


class SweepText(NamedTuple):
    """A sweep over one or two givens; ``of`` are the names of the results wanted, each with its place."""

    swept: tuple[Swept, ...]
    of: tuple[tuple[str, Place], ...]
    place: Place


@dataclass(frozen=True, slots=True)
class Settings:
    """What book.yaml says; the defaults hold where there is no book."""

    name: str = ""
    site_pressure: Value | None = None
    units: str = ""
    output: str = ""
    revisions: str = "letters"
    roles: tuple[str, ...] = ("prepared", "checked", "approved")
    people: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    surface_temperature: Value | None = None
    excess_surface: Value | None = None
    open_items: str = "refuse final issue"
    plain: object = None


class TimeInService(NamedTuple):
    """How long the unit is followed as its fouling grows, and in how many rows from the cleaned unit on."""

    until: Value
    steps: int
    place: Place


class Cleaning(NamedTuple):
    """What one cleaning takes and costs. Without money (``currency`` empty) the interval of most heat is meant.

    ``against`` names what the heat that is lost is counted from: the cleaned unit, the duty, or nothing stated.
    """

    duration: Value
    currency: str
    cost: Value | None
    price: Value | None
    against: str
    place: Place


@dataclass(frozen=True, slots=True)
class Calculation:
    """One calculation file, read. ``meaning`` is its canonical content, for the digest.

    ``broken`` are the symbols of givens and derived quantities that have a fault of their own and stand in
    neither mapping. ``figures_hold`` says that no fault of the text stands in a part that figures come from: the
    calculation can be solved, so that faults of what it gives are told beside those.
    """

    file: str
    number: str
    title: str
    plant: str
    revision: str
    prepared_by: str
    date: str
    purpose: str
    revisions: tuple[Revision, ...]
    givens: Mapping[str, Given]
    derived: Mapping[str, Derived]
    assumptions: tuple[Assumption, ...]
    streams: Mapping[str, Stream]
    geometry: Geometry | None
    resistances: tuple[Term, ...]
    acceptance: tuple[Criterion, ...]
    report: Report
    cases: Mapping[str, Mapping[str, Given]]
    accept: tuple[Acceptance, ...]
    settings: Settings
    meaning: object
    place: Place

    @property
    def symbols(self) -> tuple[str, ...]:
        """The symbols of the givens and of the derived quantities."""
        return (*self.givens, *self.derived)

    @property
    def every_term(self) -> tuple[Term, ...]:
        """The terms of the resistance list, each followed by those that stand side by side in it."""
        return tuple(one for term in self.resistances for one in (term, *term.branches))

    def term(self, name: str) -> Term:
        """The term of a name, wherever it stands. Raises ``StopIteration`` where there is none."""
        return next(term for term in self.every_term if term.name == name)

    def on_side(self, side: str) -> tuple[Term, ...]:
        """The terms between a fluid and the wall, of the side (inside, outside) that is named; none without a wall."""
        walls = [place for place, term in enumerate(self.resistances) if term.kind == "wall"]
        if not walls:
            return ()
        return self.resistances[: walls[0]] if side == "inside" else self.resistances[walls[-1] + 1 :]

    def criterion(self, name: str) -> Criterion:
        """The acceptance criterion of a number, as `criterion 2`."""
        return self.acceptance[int(name.removeprefix("criterion ")) - 1]

    @property
    def places(self) -> tuple[str, ...]:
        """The cases that are places along the unit."""
        return tuple(name for name in self.cases if name.startswith("at "))

    broken: frozenset[str] = frozenset()
    duty: Duty | None = None
    fouling_specified: FoulingSpecified | None = None
    uncertainty: UncertaintyText | None = None
    time_in_service: TimeInService | None = None
    cleaning: Cleaning | None = None
    survey: Survey | None = None
    sweep: SweepText | None = None
    figures_hold: bool = True


def unknown_symbol(symbol: str, place: Place, known: Sequence[str], instead: str = "") -> Fault:
    """The fault of a symbol that the file does not have; ``instead`` is what can stand there where it has none."""
    return Fault(
        "symbol-unknown",
        place,
        f"`{shown(symbol)}` is neither a given nor derived",
        shown(symbol),
        ", ".join(known) or instead,
        nearest_names(symbol, known),
    )
