"""`survey:` of a calculation file, text to types, with every fault and its place."""

from __future__ import annotations

import datetime
import re
from collections.abc import Mapping
from pathlib import Path
from typing import Protocol

from calcbook.calcfile import survey_keys as described
from calcbook.calcfile.calculation import Given
from calcbook.calcfile.survey import Cleaning, HeatLoss, Proposal, Rules, Survey, SurveyColumn, Zero
from calcbook.calcfile.surveyfile import History, read_history
from calcbook.documents import Description, Fields, Node, Scalar, Sequence, read_mapping
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import Collector, nearest_names, shown
from calcbook.quantities import (
    DIMENSIONLESS,
    Dimension,
    Quantity,
    QuantityFault,
    QuantityKind,
    Tolerance,
    read_any,
    read_tolerance,
    si_unit,
    unit_factor,
)

FILE_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9 _.-]{0,99}")
DATE_TIME = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}([ T][0-9]{2}:[0-9]{2}(:[0-9]{2})?)?")
RANGE = re.compile(r"\s*(.*?\S)\s*\.\.\s*(\S.*?)\s*")
EPOCH = datetime.datetime(1970, 1, 1)
MOST_ROWS_OF_ZERO = 10_000
TEMPERATURE = unit_factor("K")[1]
TIME = unit_factor("s")[1]


class Helper(Protocol):
    """What the reader of the calculation file lends."""

    @property
    def collector(self) -> Collector: ...

    @property
    def folder(self) -> Path: ...

    @property
    def side_files(self) -> dict[str, dict[str, list[str]]]: ...

    def quantity(self, node: Scalar) -> Quantity | None: ...

    def refuse_pair(self, fields: Fields, one: str, other: str) -> None: ...


def read_survey(helper: Helper, node: Node | None, givens: Mapping[str, Given]) -> Survey | None:
    """The survey of a file, or None where there is none or it has a fault.

    Codes: those of mappings, quantities and of ``read_history``; symbol-unknown, name-not-allowed,
    range-unreadable, number-unreadable, date-unreadable, date-order, unit-dimension.
    """
    if node is None:
        return None
    before = len(tuple(helper.collector))
    survey = _Reader(helper, node, givens).survey()
    return survey if len(tuple(helper.collector)) == before else None


class _Reader:
    def __init__(self, helper: Helper, node: Node, givens: Mapping[str, Given]):
        self.helper = helper
        self.collector = helper.collector
        self.givens = givens
        self.place = node.place
        self.fields = read_mapping(node, described.SURVEY, helper.collector, node.place)

    def survey(self) -> Survey | None:
        """Every part of the mapping is read before any lack of one ends it, so that all faults are told."""
        time = self.inner("time", described.TIME)
        time_unit, time_factor = time.text("unit"), self.time_factor(time)
        columns = self.columns()
        heat_loss = self.heat_loss()
        rules = self.rules()
        cleanings = self.cleanings(bool(time_unit))
        zero = self.zero()
        proposal = self.proposal()
        model = self.fields.scalar("model")
        history = self.history(time, columns)
        if history is None or proposal is None or zero is None or model is None:
            return None
        return Survey(
            self.fields.text("file"),
            self.fields.text("source"),
            time.text("column"),
            time_unit,
            time_factor,
            columns,
            history,
            heat_loss,
            rules,
            cleanings,
            zero,
            model.text,
            model.place,
            proposal,
            self.place,
        )

    def inner(self, name: str, description: Description) -> Fields:
        node = self.fields.node(name)
        if node is None:
            return Fields(self.place)
        return read_mapping(node, description, self.collector, node.place)

    # -- figures ------------------------------------------------------------------------------------

    def figure(
        self,
        fields: Fields,
        name: str,
        dimension: Dimension,
        example: str,
        bounds: tuple[float, float] = (0.0, float("inf")),
    ) -> Quantity | None:
        """A figure of a dimension, above the lower bound and at most the upper one."""
        scalar = fields.scalar(name)
        return self.read_figure(scalar, dimension, example, bounds) if scalar is not None else None

    def read_figure(
        self, scalar: Scalar, dimension: Dimension, example: str, bounds: tuple[float, float]
    ) -> Quantity | None:
        quantity = self.helper.quantity(scalar)
        if quantity is None:
            return None
        if quantity.dimension != dimension or quantity.reading == "point":
            self.collector.add(
                "unit-dimension",
                scalar.place,
                f"a figure such as {example} is wanted here",
                found=shown(scalar.text),
                expected=f"a figure such as {example}",
            )
            return None
        if not bounds[0] <= quantity.value <= bounds[1]:
            self.collector.add(
                "number-out-of-proportion",
                scalar.place,
                "the figure lies outside what has a meaning here",
                found=shown(scalar.text),
                expected=f"a figure such as {example}",
            )
            return None
        return quantity

    def range_of(
        self, scalar: Scalar | None, dimension: Dimension, example: str, point: bool = False
    ) -> tuple[Quantity, Quantity] | None:
        """`low .. high`, of a dimension; ``point`` where the ends are temperatures of a scale."""
        if scalar is None:
            return None
        parts = RANGE.fullmatch(scalar.text)
        ends = [self.end(scalar, *parts.span(number)) for number in (1, 2)] if parts is not None else []
        low, high = ends if len(ends) == 2 else (None, None)
        if parts is not None and (low is None or high is None):
            return None  # the quantity has its own fault
        if low is None or high is None or not low.value < high.value:
            self.collector.add(
                "range-unreadable",
                scalar.place,
                "a range is written low .. high",
                found=shown(scalar.text),
                expected=example,
            )
            return None
        for one in (low, high):
            if one.dimension != dimension or (one.reading == "point") != point:
                self.collector.add(
                    "unit-dimension",
                    scalar.place,
                    "the range is one of another quantity",
                    found=shown(one.text),
                    expected=example,
                )
                return None
        return low, high

    def end(self, scalar: Scalar, start: int, end: int) -> Quantity | None:
        return self.helper.quantity(Scalar(scalar.text[start:end], scalar.part(start + 1, end + 1)))

    # -- time and columns ---------------------------------------------------------------------------

    def time_factor(self, time: Fields) -> float:
        scalar = time.scalar("unit")
        if scalar is None:
            return 1.0
        quantity = self.unit(scalar)
        if quantity is not None and quantity.dimension != TIME:
            self.collector.add(
                "unit-dimension",
                scalar.place,
                "this is no unit of time",
                found=shown(scalar.text),
                expected="h, days, or no unit for dates and times",
            )
        return quantity.value if quantity is not None else 1.0

    def unit(self, scalar: Scalar) -> Quantity | None:
        """One of a unit, so that its size and the start of its scale are known."""
        try:
            return read_any(f"1 {scalar.text}")
        except QuantityFault as error:
            self.collector.add(
                error.code,
                scalar.place,
                error.message,
                found=shown(scalar.text),
                expected=error.expected,
                nearest=error.nearest,
            )
            return None

    def columns(self) -> dict[str, SurveyColumn]:
        node = self.fields.node("columns")
        found: dict[str, SurveyColumn] = {}
        for key, value in node.entries if isinstance(node, MappingNode) else ():
            given = self.givens.get(key.text)
            if given is None:
                self.collector.add(
                    "symbol-unknown",
                    key.place,
                    f"`{shown(key.text)}` is no given: a column stands for a given, which holds in the base case",
                    found=shown(key.text),
                    expected=", ".join(self.givens),
                    nearest=nearest_names(key.text, self.givens),
                )
                continue
            column = self.column(key, value, given)
            if column is not None:
                found[key.text] = column
        return found

    def column(self, key: Scalar, node: Node, given: Given) -> SurveyColumn | None:
        """`TI-111 in degC`, or a mapping that says more."""
        if isinstance(node, Scalar):
            head, mark, unit = node.text.rpartition(" in ")
            if not mark:
                self.collector.add(
                    "unit-missing",
                    node.place,
                    "a column says the unit of its figures",
                    found=shown(node.text),
                    expected="TI-111 in degC, or {column: TI-111, unit: degC}",
                )
                return None
            start = len(head) + len(mark) + 1
            fields = Fields(node.place)
            unit_node = Scalar(unit.strip(), node.part(start, start + len(unit)))
        else:
            fields = read_mapping(node, described.COLUMN, self.collector, node.place)
            head = fields.text("column")
            found = fields.scalar("unit")
            if found is None:
                return None
            unit_node = found
        quantity = self.unit(unit_node)
        if quantity is None or given.value.quantity is None or not self.fits(unit_node, quantity, given):
            return None
        factor = unit_factor(unit_node.text)[0]
        offset = quantity.value - factor if quantity.reading == "point" else 0.0
        ends = self.range_of(
            fields.scalar("range"),
            quantity.dimension,
            f"range: low .. high, each such as {given.value.text}",
            quantity.reading == "point",
        )
        return SurveyColumn(
            key.text,
            " ".join(head.split()),
            unit_node.text,
            factor,
            offset,
            ends[0] if ends else None,
            ends[1] if ends else None,
            self.drift(fields.scalar("drift per year"), given.value.quantity),
            fields.text("source"),
            key.place,
        )

    def fits(self, unit: Scalar, quantity: Quantity, given: Given) -> bool:
        """Whether a unit is one of the given's own quantity.

        A column in degC or degF is one of temperatures: its given must be one too, which a figure in K does not say.
        """
        base = given.value.quantity
        assert base is not None
        is_point = quantity.reading != "point" or base.reading == "point"
        if quantity.dimension == base.dimension and quantity.on_base_of(base) and is_point:
            return True
        self.collector.add(
            "unit-dimension",
            unit.place,
            f"the unit is not one of `{given.symbol}`",
            found=shown(unit.text),
            expected=f"a unit like that of {given.value.text}",
        )
        return False

    def drift(self, scalar: Scalar | None, quantity: Quantity) -> Tolerance | None:
        if scalar is None:
            return None
        point = "point" if quantity.reading in ("point", "point or difference") else ""
        kind = QuantityKind("drift", "x", si_unit(quantity.dimension), quantity.dimension, 5, "", point)
        try:
            return read_tolerance(scalar.text, kind)
        except QuantityFault as error:
            self.collector.add(
                error.code, scalar.place, error.message, found=shown(scalar.text), expected=error.expected
            )
            return None

    def history(self, time: Fields, columns: Mapping[str, SurveyColumn]) -> History | None:
        scalar, head = self.fields.scalar("file"), time.scalar("column")
        if scalar is None or head is None:
            return None
        if not FILE_NAME.fullmatch(scalar.text):
            self.collector.add(
                "name-not-allowed",
                scalar.place,
                "a history stands beside the calculation file",
                found=shown(scalar.text),
                expected="the bare name of a CSV file, such as wc-111-history.csv",
            )
            return None
        wanted = {" ".join(head.text.split()): head.place}
        for column in columns.values():
            if column.head in wanted:
                self.collector.add(
                    "key-twice",
                    column.place,
                    f"the column `{shown(column.head)}` is taken twice",
                    expected="each column for one given",
                )
            wanted.setdefault(column.head, column.place)
        history = read_history(self.helper.folder / scalar.text, wanted, scalar.place, self.collector)
        if history is not None:
            self.helper.side_files[scalar.text] = history.content()
        return history

    # -- the rest -----------------------------------------------------------------------------------

    def heat_loss(self) -> HeatLoss | None:
        if self.fields.node("heat loss") is None:
            return None
        fields = self.inner("heat loss", described.HEAT_LOSS)
        value = self.figure(fields, "value", DIMENSIONLESS, "1 %", (0.0, 0.5))
        tolerance = self.figure(fields, "tolerance", DIMENSIONLESS, "1 %", (0.0, 0.5))
        if value is None:
            return None
        return HeatLoss(value, tolerance, fields.text("source"), fields.place)

    def rules(self) -> Rules:
        fields = self.inner("rules", described.RULES)
        return Rules(
            self.figure(fields, "closure", DIMENSIONLESS, "8 %", (1e-6, 2.0)),
            self.figure(fields, "steady state", TEMPERATURE, "1.5 K", (1e-6, 1e3)),
            self.range_of(fields.scalar("flow ratio"), DIMENSIONLESS, "flow ratio: 0.6 .. 1.4"),
            self.figure(fields, "gap", TIME, "3 days", (1.0, 1e9)),
            fields.text("source"),
            fields.place,
        )

    def cleanings(self, as_number: bool) -> tuple[Cleaning, ...]:
        node = self.fields.node("cleanings")
        found: list[Cleaning] = []
        for item in node.items if isinstance(node, Sequence) else ():
            scalar, source = (item, "") if isinstance(item, Scalar) else self.cleaning(item)
            at = self.moment(scalar, as_number) if scalar is not None else None
            if scalar is None or at is None:
                continue
            if found and not found[-1].at < at:
                self.collector.add(
                    "date-order",
                    scalar.place,
                    "the cleanings do not stand in the order of time",
                    found=f"{shown(scalar.text)} after {found[-1].text}",
                    expected="the earliest first, each once",
                )
            found.append(Cleaning(" ".join(scalar.text.split()), at, source, scalar.place))
        if isinstance(node, Sequence) and not node.items:
            self.collector.add(
                "value-missing", node.place, "`cleanings` has no value", expected="at least one cleaning"
            )
        return tuple(found)

    def cleaning(self, item: Node) -> tuple[Scalar | None, str]:
        fields = read_mapping(item, described.CLEANING, self.collector, item.place)
        return fields.scalar("at"), fields.text("source")

    def moment(self, scalar: Scalar, as_number: bool) -> float | None:
        """A moment in the way of the time column, in seconds."""
        if as_number:
            quantity = self.read_figure(scalar, TIME, "120 days", (-1e12, 1e12))
            return quantity.value if quantity is not None else None
        try:
            if not DATE_TIME.fullmatch(scalar.text):
                raise ValueError
            return (datetime.datetime.fromisoformat(scalar.text) - EPOCH).total_seconds()
        except ValueError:
            self.collector.add(
                "date-unreadable",
                scalar.place,
                "this is no date of the calendar",
                found=shown(scalar.text),
                expected="YYYY-MM-DD or YYYY-MM-DD hh:mm",
            )
            return None

    def zero(self) -> Zero | None:
        fields = self.inner("zero", described.ZERO)
        self.helper.refuse_pair(fields, "rows", "over")
        over = self.figure(fields, "over", TIME, "5 days", (1.0, 1e9))
        rows = fields.scalar("rows")
        if rows is None and "over" not in fields:
            self.collector.add(
                "key-missing",
                fields.place,
                "the zero says on which data it is anchored",
                expected="rows: 10, or over: 5 days",
            )
            return None
        if rows is None:
            return Zero(0, over, fields.text("source"), fields.place) if over is not None else None
        if not re.fullmatch(r"[0-9]{1,5}", rows.text) or not 1 <= int(rows.text) <= MOST_ROWS_OF_ZERO:
            self.collector.add(
                "number-unreadable",
                rows.place,
                "this is no number of rows",
                found=shown(rows.text),
                expected=f"a number from 1 to {MOST_ROWS_OF_ZERO}",
            )
            return None
        return Zero(int(rows.text), None, fields.text("source"), fields.place)

    def proposal(self) -> Proposal | None:
        fields = self.inner("propose", described.PROPOSAL)
        after = self.figure(fields, "after", TIME, "12 months", (1.0, 1e11))
        percentile = self.figure(fields, "percentile", DIMENSIONLESS, "90 %", (0.01, 0.999))
        if after is None or percentile is None:
            return None
        return Proposal(after, percentile, fields.text("source"), fields.place)
