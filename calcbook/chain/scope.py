"""The growing chain: inputs, constants and steps under construction, with their dimensions."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field

from calcbook.calcfile import Calculation
from calcbook.calcfile.calculation import Given, Value, unknown_symbol
from calcbook.calcfile.empty import is_empty
from calcbook.chain.types import ABOVE_SITE, ChainStep, Input, OpenItem, RunnerAssumption
from calcbook.faults import Collector, Fault, Faults, Place, shown
from calcbook.formulas import Relation, RelationFault, dimension, parse_expression
from calcbook.library import vocabulary
from calcbook.library.operations import Operation, RelationOperation
from calcbook.quantities import (
    DIMENSIONLESS,
    Dimension,
    Quantity,
    QuantityFault,
    QuantityKind,
    as_kind,
    si_unit,
)

STANDARD_PRESSURE = 101_325.0


@dataclass
class Trial:
    """What came of a trial: its faults, and whether what it laid out stays (with a fault it never does)."""

    keeps: bool = False
    faults: tuple[Fault, ...] = ()


# What a scope holds by name; a trial that fails takes all of it back.
LAID_OUT = (
    "inputs",
    "constants",
    "steps",
    "dimensions",
    "assumptions",
    "open_items",
    "used_in",
    "kinds",
    "cards",
)


@dataclass
class Scope:
    """What the builder has laid out so far."""

    calculation: Calculation
    collector: Collector
    inputs: dict[str, Input] = field(default_factory=dict)
    constants: dict[str, object] = field(default_factory=dict)
    steps: dict[str, ChainStep] = field(default_factory=dict)
    dimensions: dict[str, Dimension] = field(default_factory=dict)
    assumptions: dict[str, RunnerAssumption] = field(default_factory=dict)
    open_items: dict[str, OpenItem] = field(default_factory=dict)
    used_in: dict[str, list[str]] = field(default_factory=dict)
    kinds: dict[str, QuantityKind] = field(default_factory=dict)
    cards: dict[str, str] = field(default_factory=dict)

    # -- trials -------------------------------------------------------------------------------------

    @contextmanager
    def trial(self) -> Iterator[Trial]:
        """Lay out something that may lack a figure: it leaves nothing behind unless the trial ``keeps`` it.

        Its faults, those that are raised too, go to the trial and not to the collector.
        """
        collector, before = self.collector, {name: dict(getattr(self, name)) for name in LAID_OUT}
        before["used_in"] = {symbol: list(places) for symbol, places in self.used_in.items()}
        self.collector, trial = Collector(), Trial()
        try:
            yield trial
        except Faults as error:
            self.collector.take(error.faults)
        finally:
            trial.faults, self.collector = tuple(self.collector), collector
            if trial.faults or not trial.keeps:
                for name, figures in before.items():
                    setattr(self, name, figures)

    # -- notes --------------------------------------------------------------------------------------

    def assume(self, name: str, text: str, decided_by: str, acts_on: str) -> None:
        """Record something the runner decides by itself."""
        self.assumptions.setdefault(name, RunnerAssumption(name, text, decided_by, acts_on))

    def open(self, name: str, kind: str, text: str) -> None:
        """Record an open item."""
        self.open_items.setdefault(name, OpenItem(name, kind, text))

    # -- figures ------------------------------------------------------------------------------------

    def constant(self, name: str, value: object, dim: Dimension = DIMENSIONLESS) -> str:
        """A fixed figure, under a name. Raises ``ValueError`` for a name that stands for another figure."""
        was = self.constants.get(name, value)
        if isinstance(was, float) and not math.isnan(was) and was != value:
            raise ValueError(f"{name} would be {value} and {was}")
        self.constants[name] = value
        self.dimensions[name] = dim
        return name

    def step(
        self,
        name: str,
        symbol: str,
        title: str,
        owner: str,
        operation: Operation,
        inputs: Mapping[str, str],
        basis: str,
        kind: QuantityKind | None = None,
        place: Place | None = None,
    ) -> str:
        """Add a step (once) and find its dimension; a slip is a fault at ``place``."""
        if name in self.steps:
            return name
        found = kind.dimension if kind is not None else DIMENSIONLESS
        if isinstance(operation, RelationOperation):
            local = {local: self.dimensions.get(bound, DIMENSIONLESS) for local, bound in inputs.items()}
            try:
                found = dimension(operation.relation, local)
            except RelationFault as error:
                where, text = place or self.calculation.place, operation.relation.text
                if where.excerpt[where.column - 1 :].startswith(text):
                    where = where.part(error.column - 1, error.end_column - error.column)
                self.collector.add(
                    "dimension-slip",
                    where,
                    f"{title}: {error.message}",
                    found=shown(text, 100),
                    expected=error.expected or "quantities whose units fit",
                )
        if kind is None or kind.dimension != found:
            kind = unnamed_kind(symbol, found)
        self.dimensions[name] = found
        self.steps[name] = ChainStep(name, symbol, title, kind, owner, operation, dict(inputs), basis)
        return name

    def relation_step(
        self,
        name: str,
        symbol: str,
        title: str,
        owner: str,
        relation: Relation,
        inputs: Mapping[str, str],
        basis: str,
        kind: str = "",
        place: Place | None = None,
    ) -> str:
        """Add a step that is a plain relation."""
        known = vocabulary().get(kind)
        return self.step(name, symbol, title, owner, RelationOperation(relation), inputs, basis, known, place)

    def value(self, value: Value | None, kind_name: str, owner: str, key: str) -> str:
        """The id of a figure of the file, read as a quantity of the vocabulary; empty where none is written."""
        if value is None:
            return ""
        kind = vocabulary()[kind_name]
        if value.is_broken or value.symbol in self.calculation.broken:
            return self.unread(kind)
        read = self._named if value.symbol else self._literal
        return read(value, kind, owner, key) or self.unread(kind)

    def unread(self, kind: QuantityKind) -> str:
        """The id that stands for a figure with a fault: the chain goes on to its other faults with it."""
        return self.constant(f"unread {kind.name}", float("nan"), kind.dimension)

    def in_relation(self, symbol: str, owner: str, use: str) -> str:
        """The id of a given or derived figure as a relation takes it; empty where there is none of that name.

        A gauge pressure stands in a relation as the absolute one, so that what is derived from it is absolute too.
        """
        given = self.calculation.givens.get(symbol)
        name = f"given/{symbol}" if given is not None else f"derived/{symbol}"
        if given is None and symbol not in self.calculation.derived:
            return ""
        self.used_in.setdefault(symbol, []).append(use)
        if given is not None and given.value.quantity is not None and given.value.quantity.reading == "gauge":
            return self._above_site(name, owner, symbol)
        return name

    def above_site(self, quantity: Quantity, name: str, owner: str) -> str:
        """The id of a figure that bounds another, held as a constant; a gauge pressure as the absolute one."""
        name = self.constant(name, quantity.value, quantity.dimension)
        return self._above_site(name, owner, owner) if quantity.reading == "gauge" else name

    def _named(self, value: Value, kind: QuantityKind, owner: str, key: str) -> str:
        symbol = value.symbol
        given = self.calculation.givens.get(symbol)
        if given is None and symbol not in self.calculation.derived:
            known = self.calculation.symbols
            self.collector.take([unknown_symbol(symbol, value.place, known, "a quantity with its unit")])
            return ""
        self.used_in.setdefault(symbol, []).append(f"{owner}, {key}" if key else owner)
        if given is None:
            return self._derived(value, kind)
        return self._given(given, kind, owner, key)

    def _derived(self, value: Value, kind: QuantityKind) -> str:
        name = f"derived/{value.symbol}"
        if name not in self.dimensions:
            return ""
        if self.dimensions[name] != kind.dimension:
            self.collector.add(
                "unit-dimension",
                value.place,
                f"`{value.symbol}` is no {kind.name}",
                found=si_unit(self.dimensions[name]),
                expected=kind.unit,
            )
            return ""
        self.kinds.setdefault(value.symbol, kind)
        if kind.reading == "absolute":
            self._say_parts(value.symbol, kind)
        return name

    def _say_parts(self, symbol: str, kind: QuantityKind) -> None:
        """That pressures without a reading are taken as they are into a derived absolute pressure."""
        for part in self.calculation.derived[symbol].relation.symbols:
            given = self.calculation.givens.get(part)
            quantity = given.value.quantity if given is not None else None
            if quantity is not None and quantity.dimension == kind.dimension and not quantity.reading:
                self.assume(
                    f"derived {symbol}/pressure {part}",
                    f"The pressure {part} = {quantity.text} is taken as absolute, or as a difference of pressures.",
                    f"its unit does not say absolute or gauge, and the relation of {symbol} takes it as it is",
                    f"derived {symbol}",
                )

    def _given(self, given: Given, kind: QuantityKind, owner: str, key: str) -> str:
        before = self.kinds.get(given.symbol)
        if before is not None and (before.scale == "point") != (kind.scale == "point"):
            self.collector.add(
                "given-used-both-ways",
                given.value.place,
                f"`{given.symbol}` is used as a temperature and as a temperature difference",
                expected="two givens, one for each",
            )
            return ""
        gauge = ""
        for one in (
            given,
            *(case[given.symbol] for case in self.calculation.cases.values() if given.symbol in case),
        ):
            reading = self._as_kind(one.value, kind, f"{owner}, {key}")
            if reading is None or self._is_linked_otherwise(one, kind):
                return ""
            gauge = gauge or (reading if reading == "gauge" else "")
            self._say_reading(reading, one.value, f"given {one.symbol}")
        self.kinds.setdefault(given.symbol, kind)
        name = f"given/{given.symbol}"
        return self._above_site(name, owner, owner) if gauge else name

    def _is_linked_otherwise(self, given: Given, kind: QuantityKind) -> bool:
        """Whether a given takes a temperature where a difference is wanted, or the reverse; then it is a fault."""
        link, is_point = given.link, kind.scale == "point"
        if link is None or kind.dimension != vocabulary()["temperature"].dimension:
            return False
        if link.is_difference != is_point:
            return False
        names = ("temperature", "temperature difference")
        self.collector.add(
            "unit-dimension",
            given.value.place,
            f"{link.result} of {link.calculation} is a {names[link.is_difference]}",
            found=shown(given.symbol),
            expected=f"a {names[not is_point]}",
        )
        return True

    def _literal(self, value: Value, kind: QuantityKind, owner: str, key: str) -> str:
        reading = self._as_kind(value, kind, f"{owner}, {key}")
        if reading is None or value.quantity is None:
            return ""
        name = f"{owner}/{key}"
        if name not in self.inputs:
            figure = as_kind(value.quantity, kind).value
            title = f"{key.removeprefix('with ')} {'stated for' if key.startswith('with ') else 'of'} {owner}"
            self.inputs[name] = Input(
                name, kind.symbol, title, kind, figure, value.text, value.source, value.place, False
            )
            self.dimensions[name] = kind.dimension
            self.check_source(value, name)
        self._say_reading(reading, value, f"{owner}, {key}")
        return self._above_site(name, owner, owner) if reading == "gauge" else name

    def _as_kind(self, value: Value, kind: QuantityKind, use: str) -> str | None:
        """How a figure reads as a kind (its reading), or None after a fault."""
        if value.quantity is None:
            self.collector.add(
                "unit-missing",
                value.place,
                f"a {kind.name} is wanted here",
                found=shown(value.text),
                expected=f"a number with its unit, such as 1 {kind.unit}",
            )
            return None
        try:
            return as_kind(value.quantity, kind).reading or "as written"
        except QuantityFault as error:
            self.collector.take([error.within(value.place, use)])
            return None

    def _say_reading(self, reading: str, value: Value, where: str) -> None:
        if reading == "taken as absolute":
            self.assume(
                f"{where}/pressure absolute",
                f"The pressure {value.text} is taken as absolute.",
                "its unit does not say absolute or gauge",
                where,
            )

    def _above_site(self, name: str, owner: str, what: str) -> str:
        """The absolute pressure that belongs to a gauge pressure of ``what``."""
        site = self.site_pressure()
        return self.relation_step(
            f"{name}{ABOVE_SITE}",
            "p",
            f"absolute pressure of {what}",
            owner,
            parse_expression("p_g + p_site"),
            {"p_g": name, "p_site": site},
            "site pressure",
            "pressure",
        )

    def site_pressure(self) -> str:
        """The pressure of the site: from the book, or the standard atmosphere, said in the record."""
        stated = self.calculation.settings.site_pressure
        if stated is not None:
            return self.value(stated, "pressure", "book", "site pressure")
        self.assume(
            "book/site pressure",
            "Gauge pressures stand on 101.325 kPa.",
            "the book states no site pressure; standard atmosphere",
            "gauge pressures",
        )
        return self.constant("book/site pressure", STANDARD_PRESSURE, vocabulary()["pressure"].dimension)

    def check_source(self, value: Value, name: str) -> None:
        """A literal that moves a result needs a source; a bare or empty one is an open item."""
        if is_empty(value.source):
            self.open(
                f"{name}/source",
                "source",
                f"The value {value.text} ({name.replace('/', ', ')}) has no source.",
            )


def unnamed_kind(symbol: str, dim: Dimension) -> QuantityKind:
    """A kind for a figure that the vocabulary does not name: its SI unit from the dimension."""
    return QuantityKind(symbol, symbol, si_unit(dim), dim, 5, "", "", "", False, "any")
