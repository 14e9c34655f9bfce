"""What a card says, as frozen types. Nothing here reads a file or computes a number."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from calcbook.faults import Place
from calcbook.formulas import Relation, parse_expression
from calcbook.quantities import QuantityKind

# What a card of a film coefficient gives: the coefficient, or the Nusselt number that it follows from.
FILM_RESULTS = ("h", "Nu")
BAND = re.compile(r"([0-9]+(?:\.[0-9]+)?) %")
STANDINGS = (
    "published",
    "independent library",
    "independent numerics",
    "plant data",
    "common practice",
    "from memory",
)
PLACES = ("bulk", "film", "surface", "saturated liquid", "saturated vapour", "liquid film")


@dataclass(frozen=True, slots=True)
class Source:
    """A publication and what it supports."""

    cite: str
    supports: str
    standing: str


@dataclass(frozen=True, slots=True)
class Need:
    """What a card asks for: a quantity, and the place (one of ``PLACES``) its properties are taken.

    ``one_of`` lists the words or numbers that a choice may take (fixed when the chain is built);
    ``absent`` is the value taken when nothing is given, or None when it must be given.
    """

    symbol: str
    quantity: QuantityKind
    place: str
    where: Place
    one_of: tuple[str, ...] = ()
    absent: str | None = None

    @property
    def key(self) -> tuple[str, str]:
        """Two needs of one key are the same figure: vocabulary name and place."""
        name = self.quantity.name
        return (f"{name} {self.symbol}" if self.one_of or name in ("ratio", "number") else name, self.place)


@dataclass(frozen=True, slots=True)
class Use:
    """Another card's result under a symbol of this card, with needs overridden by relations."""

    symbol: str
    method: str
    overrides: Mapping[str, Relation]
    counts_when: Relation | None
    where: Place


@dataclass(frozen=True, slots=True)
class Table:
    """Rows of figures found by one or more symbols.

    ``by`` maps a symbol to exact, step, linear or log-log; ``cells`` is rows by columns, words of a
    choice held as their number in the choice.
    """

    name: str
    by: Mapping[str, str]
    outside: str
    columns: tuple[str, ...]
    cells: np.ndarray
    texts: tuple[tuple[str, ...], ...]
    where: Place


@dataclass(frozen=True, slots=True)
class Assignment:
    """One line of ``relations``: a plain relation."""

    symbol: str
    relation: Relation
    where: Place


@dataclass(frozen=True, slots=True)
class Sum:
    """One line of ``relations``: a sum over 0, 1, … terms − 1."""

    symbol: str
    over: str
    terms: int
    of: Relation
    where: Place


@dataclass(frozen=True, slots=True)
class Solve:
    """One line of ``relations``: the root of an equation between two bounds.

    ``sum`` is the sum that the equation names, taken anew for every value of the root; None where it names none.
    """

    symbol: str
    between: tuple[float, float]
    start: float
    equation: Relation
    where: Place
    sum: Sum | None = None


Line = Assignment | Solve | Sum


@dataclass(frozen=True, slots=True)
class Limit:
    """A condition for using a card. Level: stop, range or caution."""

    id: str
    that: Relation
    level: str
    because: str
    source: str
    standing: str
    where: Place


def practice_limit(name: str, that: str, level: str, because: str, where: Place) -> Limit:
    """A limit of the trade that no card holds, for something that stands at a place of the file."""
    practice = "common practice"
    return Limit(name, parse_expression(that), level, because, practice, practice, where)


@dataclass(frozen=True, slots=True)
class CheckPoint:
    """Given values and the values that must follow, from a named source."""

    given: Mapping[str, str]
    gives: Mapping[str, float]
    within: float
    source: str
    standing: str
    where: Place

    @property
    def is_outside(self) -> bool:
        """Whether the reference lies outside this project's own arithmetic."""
        return self.standing in ("published", "independent library", "independent numerics", "plant data")


@dataclass(frozen=True, slots=True)
class State:
    """Lifecycle of a card: trial, checked or withdrawn (then with its successor)."""

    status: str
    since: str
    successor: str = ""


@dataclass(frozen=True, slots=True)
class Accuracy:
    """How good a method is said to be, by whom, and how that figure stands."""

    within: str
    coverage: str
    stated_by: str
    standing: str

    @property
    def band(self) -> float | None:
        """The half width as a part of the value; None where the card states more or less than one figure."""
        found = BAND.fullmatch(self.within)
        return float(found[1]) / 100.0 if found is not None else None


@dataclass(frozen=True, slots=True)
class Method:
    """A published correlation as a card."""

    id: str
    title: str
    gives: str
    closes_on: str
    properties_at: str
    needs: tuple[Need, ...]
    constants: Mapping[str, tuple[float, str, tuple]]
    uses: tuple[Use, ...]
    tables: Mapping[str, Table]
    lines: tuple[Line, ...]
    limits: tuple[Limit, ...]
    accuracy: Accuracy | None
    assumes: tuple[str, ...]
    family: str
    sources: tuple[Source, ...]
    check_points: tuple[CheckPoint, ...]
    state: State
    notes: tuple[str, ...]
    house: bool
    where: Place
    digest_text: str = field(default="", repr=False)
    serves: tuple[str, ...] = ()

    def need(self, symbol: str) -> Need | None:
        for need in self.needs:
            if need.symbol == symbol:
                return need
        return None


@dataclass(frozen=True, slots=True)
class Group:
    """A dimensionless group that a situation forms, at the place a method asks for."""

    symbol: str
    quantity: QuantityKind
    relation: Relation
    where: Place


@dataclass(frozen=True, slots=True)
class Choice:
    """One row of the choice table: the first whose condition holds is taken."""

    when: Relation | None
    use: str
    because: str
    where: Place


@dataclass(frozen=True, slots=True)
class Friction:
    """How a situation finds the pressure drop: what it needs more, the friction laws, and the card of the sum.

    ``choose`` is empty where the card ``dp`` has its own friction law.
    """

    needs: tuple[Need, ...]
    groups: tuple[Group, ...]
    choose: tuple[Choice, ...]
    dp: str
    where: Place


@dataclass(frozen=True, slots=True)
class Situation:
    """Where a film acts: what it needs, which groups it forms, which methods fit."""

    id: str
    title: str
    shapes: tuple[str, ...]
    surfaces: tuple[str, ...]
    flow: str
    needs: tuple[Need, ...]
    flow_area: Relation | None
    characteristic_length: Relation
    groups: tuple[Group, ...]
    choose: tuple[Choice, ...]
    choose_at: str
    methods: tuple[str, ...]
    assumes: tuple[str, ...]
    sources: tuple[Source, ...]
    where: Place
    digest_text: str = field(default="", repr=False)
    changes_phase: str = ""
    friction: Friction | None = None


@dataclass(frozen=True, slots=True)
class Material:
    """Conductivity of a solid against temperature, with its source and spread."""

    id: str
    title: str
    kind: str
    temperatures: np.ndarray
    conductivities: np.ndarray
    outside: str
    spread: str
    spread_because: str
    standing: str
    sources: tuple[Source, ...]
    check_points: tuple[CheckPoint, ...]
    state: State
    notes: tuple[str, ...]
    house: bool
    where: Place
    digest_text: str = field(default="", repr=False)
