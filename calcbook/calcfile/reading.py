"""Text of a calculation file to a ``Calculation``, with every fault and its place."""

from __future__ import annotations

import datetime
import keyword
import math
import re
from collections.abc import Iterable, Mapping
from dataclasses import replace
from pathlib import Path

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import (
    Assumption,
    Calculation,
    Deposit,
    Derived,
    Duty,
    Fins,
    FluidText,
    Geometry,
    Given,
    Growth,
    Report,
    Revision,
    Settings,
    Stream,
    Term,
    Tolerance,
    Value,
    unknown_symbol,
)
from calcbook.calcfile.duty import read_duty
from calcbook.calcfile.empty import is_empty
from calcbook.calcfile.fluids import OF_GAP, read_fluid, read_fluid_record
from calcbook.calcfile.in_service import read_cleaning, read_time_in_service
from calcbook.calcfile.judging import read_acceptance, read_accepted
from calcbook.calcfile.links import LinkText, Resolve
from calcbook.calcfile.meaning import meaning_of
from calcbook.calcfile.specified import read_specified
from calcbook.calcfile.survey_reading import read_survey
from calcbook.calcfile.sweeping import read_sweep
from calcbook.calcfile.uncertainty import read_uncertainty
from calcbook.documents import Description, Document, Fields, Node, Scalar, Sequence, read_file, read_mapping
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import Collector, Faults, Place, nearest_names, shown
from calcbook.formulas import Relation, RelationFault, parse_expression
from calcbook.quantities import (
    Quantity,
    QuantityFault,
    QuantityKind,
    read_any,
    read_tolerance,
    si_unit,
    unit_factor,
)

# A wall, its deposits and films are some ten terms; the sum over them is one relation.
MOST_TERMS = 60
NUMBER = re.compile(r"[A-Za-z0-9][A-Za-z0-9_.-]{0,39}")
SYMBOL = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,39}")
# What other ids of the chain start with: a term of that name would be taken for them.
CLASHING_NAMES = frozenset(
    ["given", "derived", "geometry", "circuit", "solution", "book", "duty", "fouling", "factor", "cleaning"]
)
CLASHING_STARTS = ("stream ", "case ", "fluid ", "assumption ", "word ", "unread ")
AT_PLACE = "at "
# Parts of a file that no figure comes from.
BESIDE_FIGURES = frozenset(
    ("calculation", "purpose", "revisions", "assumptions", "acceptance", "accept", "uncertainty", "sweep")
)
# Beyond these sizes (SI) a figure is a slip of the keyboard; working with it only breaks the arithmetic.
SMALLEST, LARGEST = 1e-12, 1e11
# A fouling rate is a small resistance over the seconds of months: slow ones lie below what else is a slip.
SMALLEST_RATE, RATE_UNIT = 1e-16, "m^2 K/J"
# Names in the folder of the records that no calculation may have, and names that one system keeps for devices.
PAGES = ("register.md", "library.md", "verification.md")
DEVICES = frozenset(
    ("con", "prn", "aux", "nul", *(f"{port}{number}" for port in ("com", "lpt") for number in range(1, 10)))
)
TOLERANCES = ("rectangular", "triangular", "standard", "expanded")
DEGREES = "degrees of freedom"
CASE_WORDS = ("all", "base", "clean", "service")
RESERVED = frozenset(
    [
        "pi",
        "g_n",
        "sigma",
        "sqrt",
        "exp",
        "expm1",
        "ln",
        "log",
        "log10",
        "log1p",
        "abs",
        "min",
        "max",
        "sin",
        "cos",
        "tan",
        "asin",
        "acos",
        "atan",
        "sinh",
        "cosh",
        "tanh",
        "gamma_p",
        "i0e",
        "i1e",
        "k0e",
        "k1e",
        "mean",
        "table",
        "yes",
        "no",
        "true",
        "false",
        "and",
        "or",
        "not",
        "if",
        "else",
    ]
)


def read_calculation(
    path: Path,
    settings: Settings,
    collector: Collector,
    name: str | None = None,
    resolve: Resolve | None = None,
) -> Calculation:
    """Read a calculation file; ``resolve`` gives the figures of givens that are taken from other calculations.

    Faults that leave a calculation to speak of go to ``collector``; a file that is no YAML raises
    ``Faults`` at once.
    """
    document = read_file(path, name, collector)
    return read_document(document, settings, collector, path.parent, resolve)


def read_document(
    document: Document,
    settings: Settings,
    collector: Collector,
    folder: Path,
    resolve: Resolve | None = None,
) -> Calculation:
    """As ``read_calculation``, from a document that is already read."""
    return Reader(document, settings, collector, folder, resolve).calculation()


class Reader:
    def __init__(
        self,
        document: Document,
        settings: Settings,
        collector: Collector,
        folder: Path,
        resolve: Resolve | None,
    ):
        self.resolve = resolve
        self.side_files: dict[str, dict[str, list[str]]] = {}
        self.document = document
        self.settings = settings
        self.collector = collector
        self.folder = folder
        self.place = document.root.place
        self.fields = read_mapping(document.root, described.FILE, collector, self.place)
        self.fluids: dict[str, FluidText | None] = {}
        self.broken: set[str] = set()
        self.symbols: tuple[str, ...] = ()
        self.terms_hold = True

    def calculation(self) -> Calculation:
        head = self.mapping("calculation", described.HEAD)
        givens = self.givens()
        derived = self.derived(givens)
        self.fluids = {
            key.text: read_fluid_record(self, key.text, value) for key, value in self.entries("fluids")
        }
        terms = self.terms(self.fields.node("resistances"))
        cases = self.cases(givens)
        duty = read_duty(self)
        specified = read_specified(self, terms)
        time_in_service, cleaning = read_time_in_service(self), read_cleaning(self)
        streams = {key.text: self.stream(key, value) for key, value in self.entries("streams")}
        self.check_stream_temperatures(streams, duty)
        survey = read_survey(self, self.fields.node("survey"), givens)
        return Calculation(
            file=self.document.name,
            number=self.number(head),
            title=head.text("title"),
            plant=head.text("plant"),
            revision=self.revision_name(head),
            prepared_by=head.text("prepared by"),
            date=self.date(head, "date"),
            purpose=self.fields.text("purpose"),
            revisions=self.revisions(),
            givens=givens,
            derived=derived,
            assumptions=self.assumptions(),
            streams=streams,
            geometry=self.geometry(),
            resistances=terms if self.terms_hold else (),
            acceptance=read_acceptance(self),
            report=self.report(),
            cases=cases,
            accept=read_accepted(self, cases),
            settings=self.settings,
            meaning=self.meaning(),
            place=self.place,
            broken=frozenset(self.broken),
            duty=duty,
            fouling_specified=specified,
            uncertainty=read_uncertainty(
                self.fields.node("uncertainty"), (*givens, *self.broken), cases, self.collector
            ),
            time_in_service=time_in_service,
            cleaning=cleaning,
            survey=survey,
            sweep=read_sweep(self.fields.node("sweep"), givens, self.broken, self.quantity, self.collector),
            figures_hold=self._figures_hold(),
        )

    def _figures_hold(self) -> bool:
        """Whether every fault stands in a part of the file from which no figure comes."""
        root = self.document.root
        keys = [key for key, _ in root.entries] if isinstance(root, MappingNode) else []
        missing = {key.name for key in described.FILE.keys if key.required and key.name not in self.fields}
        # A fault that names no line (of a link, say) is of the whole.
        places = [fault.place for fault in self.collector]
        lines = [place.line if place.excerpt and place.file == self.document.name else 0 for place in places]
        parts = {next((key.text for key in reversed(keys) if key.place.line <= line), "") for line in lines}
        return BESIDE_FIGURES.issuperset(missing | parts)

    def meaning(self) -> object:
        """The content of the file, with that of the table files it names."""
        meaning = meaning_of(self.document.root)
        if isinstance(meaning, dict) and self.side_files:
            return {**meaning, "side files": self.side_files}
        return meaning

    # -- helpers ------------------------------------------------------------------------------------

    def mapping(self, name: str, description: Description) -> Fields:
        node = self.fields.node(name)
        if node is None:
            return Fields(self.place)
        return read_mapping(node, description, self.collector, node.place)

    def entries(self, name: str) -> Iterable[tuple[Scalar, Node]]:
        node = self.fields.node(name)
        return node.entries if isinstance(node, MappingNode) else ()

    def items(self, name: str) -> tuple[Node, ...]:
        node = self.fields.node(name)
        return node.items if isinstance(node, Sequence) else ()

    def value(self, node: Node | None, description: Description = described.SOURCED) -> Value | None:
        """A figure: symbol, word, quantity, or {value: …, source: …}. None only where none is written."""
        if node is None:
            return None
        if isinstance(node, Scalar):
            return self.scalar_value(node, "", False)
        if isinstance(node, MappingNode):
            fields = read_mapping(node, description, self.collector, node.place)
            scalar = fields.scalar("value")
            if scalar is None:
                return Value("", node.place, is_broken=True)
            value = self.scalar_value(scalar, fields.text("source"), "source" in fields)
            at = fields.node("at")
            return value if at is None else replace(value, stated_at=self.flow_state(at))
        self.collector.add(
            "value-not-text",
            node.place,
            "a single value is wanted here",
            found="a list",
            expected="a symbol of the givens, or a number with its unit",
        )
        return Value("", node.place, is_broken=True)

    def flow_state(self, node: Node) -> dict[str, Value]:
        state = read_mapping(node, described.FLOW_STATE, self.collector, node.place)
        return {name: found for name in state if (found := self.value(state.node(name))) is not None}

    def scalar_value(self, node: Scalar, source: str, has_source: bool) -> Value:
        text = " ".join(node.text.split())
        place = node.part(1, len(node.text) + 1)
        if SYMBOL.fullmatch(text) and text.lower() not in ("nan", "inf", "infinity"):
            return Value(text, place, symbol=text, source=source, has_source=has_source)
        quantity = self.quantity(node)
        return Value(text, place, "", quantity, source, has_source, is_broken=quantity is None)

    def quantity(self, node: Scalar) -> Quantity | None:
        try:
            quantity = read_any(node.text)
        except QuantityFault as error:
            self.quantity_fault(node, error)
            return None
        is_rate = quantity.dimension == unit_factor(RATE_UNIT)[1]
        smallest = SMALLEST_RATE if is_rate else SMALLEST
        if quantity.value != 0.0 and not smallest <= abs(quantity.value) <= LARGEST:
            self.collector.add(
                "number-out-of-proportion",
                node.place,
                "no plant has a figure of this size",
                found=shown(node.text),
                expected=f"a figure between {smallest:g} and {LARGEST:g} in SI units, or zero",
            )
            return None
        return quantity

    def quantity_fault(self, node: Scalar, error: QuantityFault) -> None:
        self.collector.take([error.at(node.part(error.column, error.end_column))])

    def relation(self, node: Scalar | None) -> Relation | None:
        if node is None:
            return None
        try:
            return parse_expression(node.text)
        except RelationFault as error:
            self.collector.add(
                error.code,
                node.part(error.column, error.end_column),
                error.message,
                found=shown(node.text),
                expected=error.expected,
                nearest=error.nearest,
            )
            return None

    def date(self, fields: Fields, name: str) -> str:
        node = fields.scalar(name)
        if node is None:
            return ""
        try:
            if not re.fullmatch(r"[0-9]{4}-[0-9]{2}-[0-9]{2}", node.text):
                raise ValueError
            datetime.date.fromisoformat(node.text)
        except ValueError:
            self.collector.add(
                "date-unreadable",
                node.place,
                "this is no date of the calendar",
                found=shown(node.text),
                expected="YYYY-MM-DD",
            )
        return node.text

    def whole_number(self, scalar: Scalar, name: str, least: int, most: int) -> int | None:
        """A whole number within its bounds; None after a fault. Code: count-unreadable."""
        text = scalar.text
        # A text longer than its largest number is none, and need not be turned into one.
        is_number = text.isascii() and text.isdigit() and len(text.lstrip("0")) <= len(str(most))
        if is_number and least <= int(text) <= most:
            return int(text)
        self.collector.add(
            "count-unreadable",
            scalar.place,
            f"`{name}` is a whole number",
            found=shown(text),
            expected=f"{least} to {most}",
        )
        return None

    # -- head ---------------------------------------------------------------------------------------

    def number(self, head: Fields) -> str:
        node = head.scalar("number")
        if node is None:
            return ""
        taken = node.text.casefold() in PAGES or node.text.partition(".")[0].casefold() in DEVICES
        if taken or not NUMBER.fullmatch(node.text) or node.text.endswith(".") or ".." in node.text:
            self.collector.add(
                "number-not-allowed",
                node.place,
                "this cannot be the number of a calculation",
                found=shown(node.text),
                expected="letters, digits, - _ . (at most 40), starting with a letter or digit",
            )
        return node.text

    def revision_name(self, head: Fields) -> str:
        """The revision of a title block or of a line of the history."""
        node = head.scalar("revision")
        if node is not None and not re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9.-]{0,9}", node.text):
            self.collector.add(
                "revision-not-allowed",
                node.place,
                "this cannot be a revision",
                found=shown(node.text),
                expected="a letter or number such as A, B or 2",
            )
        return node.text if node is not None else ""

    def revisions(self) -> tuple[Revision, ...]:
        result = []
        for item in self.items("revisions"):
            fields = read_mapping(item, described.REVISION, self.collector, item.place)
            result.append(
                Revision(
                    self.revision_name(fields), self.date(fields, "date"), fields.text("reason"), item.place
                )
            )
        return tuple(result)

    # -- givens -------------------------------------------------------------------------------------

    def givens(self) -> dict[str, Given]:
        result = {}
        for key, value in self.entries("givens"):
            given = self.given(key, value)
            if given is not None:
                result[key.text] = given
            else:
                self.broken.add(key.text)
        return result

    def given(self, key: Scalar, node: Node) -> Given | None:
        self.check_symbol(key)
        fields = read_mapping(node, described.GIVEN, self.collector, node.place)
        if "from" in fields:
            return self.linked(key, fields)
        scalar = fields.scalar("value")
        if scalar is None and isinstance(node, MappingNode) and node.get("value") is None:
            self.collector.add(
                "key-missing",
                fields.place,
                "a given lacks the key `value`",
                expected="value: number with unit, or from: {calculation: …, result: …}",
            )
        quantity = self.quantity(scalar) if scalar is not None else None
        if scalar is None or quantity is None:
            return None
        text = " ".join(scalar.text.split())
        value = Value(
            text,
            scalar.part(1, len(scalar.text) + 1),
            "",
            quantity,
            fields.text("source"),
            "source" in fields,
        )
        return Given(
            key.text,
            value,
            fields.text("is"),
            fields.text("source"),
            self.tolerance(fields.node("tolerance"), quantity),
            key.place,
        )

    def linked(self, key: Scalar, fields: Fields) -> Given | None:
        """A given whose figure is a result of another calculation."""
        node = fields.node("from")
        place = fields.place_of("from")
        inner = read_mapping(node, described.LINK, self.collector, place)
        if "value" in fields:
            self.collector.add(
                "key-unknown",
                fields.place_of("value"),
                "a linked given has no value of its own",
                expected="value or from, not both",
            )
        text = LinkText(inner.text("calculation"), inner.text("result"), inner.text("revision"), place)
        if not text.calculation or not text.result:
            return None
        if self.resolve is None:
            self.collector.add(
                "link-source-unknown",
                place,
                "other calculations cannot be reached from here",
                found=text.calculation,
                expected="the calculation file in the folder of its book",
            )
            return None
        try:
            link = self.resolve(text)
            quantity = read_any(link.text)
        except Faults as faults:
            self.collector.take(faults.faults)
            return None
        except QuantityFault as error:
            self.collector.add(error.code, place, error.message, found=error.found, expected=error.expected)
            return None
        source = f"calculation {link.calculation} revision {link.revision}, {link.result}, digest {link.digest[:12]}"
        value = Value(link.text, place, "", quantity, source, True)
        tolerance = self.tolerance(fields.node("tolerance"), quantity)
        return Given(key.text, value, fields.text("is"), source, tolerance, key.place, link)

    def check_symbol(self, key: Scalar) -> None:
        text = key.text
        if not SYMBOL.fullmatch(text) or keyword.iskeyword(text) or text in RESERVED:
            self.collector.add(
                "symbol-not-allowed",
                key.place,
                f"`{shown(text)}` cannot be a symbol",
                expected="a letter, then letters, digits or _, and no name of a function or constant",
            )

    def tolerance(self, node: Node | None, quantity: Quantity) -> Tolerance | None:
        if node is None:
            return None
        if isinstance(node, Scalar):
            return self.half_width(node, quantity, "rectangular", 1.0)
        fields = read_mapping(node, described.TOLERANCE, self.collector, node.place)
        stated = [kind for kind in TOLERANCES if kind in fields]
        if not stated:
            self.collector.add(
                "key-missing",
                node.place,
                "a tolerance says `standard` or `expanded`, `rectangular` or `triangular`",
                expected="{standard: 0.5 %} or {expanded: 1 %, k: 2}",
            )
            return None
        for other in stated[1:]:
            self.refuse_pair(fields, stated[0], other)
        if stated[0] != "expanded":
            self.refuse_pair(fields, stated[0], "k")
        if stated[0] in ("rectangular", "triangular"):
            self.refuse_pair(fields, stated[0], DEGREES)
        if stated[0] == "expanded" and "k" not in fields:
            self.collector.add(
                "key-missing",
                node.place,
                "an expanded tolerance states its coverage factor `k`",
                expected="{expanded: 1 %, k: 2}",
            )
        scalar = fields.scalar(stated[0])
        assert scalar is not None
        found = self.half_width(scalar, quantity, stated[0], self.coverage_factor(fields))
        return found._replace(degrees=self.degrees_of_freedom(fields)) if found is not None else None

    def half_width(self, node: Scalar, quantity: Quantity, kind: str, factor: float) -> Tolerance | None:
        """A tolerance whose text can be read beside its value; what it does is settled later."""
        scale = "point" if quantity.reading == "point" else ""
        unit = si_unit(quantity.dimension)
        try:
            read_tolerance(node.text, QuantityKind("tolerance", "x", unit, quantity.dimension, 5, "", scale))
        except QuantityFault as error:
            self.quantity_fault(node, error)
            return None
        return Tolerance(" ".join(node.text.split()), node.place, kind, factor)

    def coverage_factor(self, fields: Fields) -> float:
        node = fields.scalar("k")
        if node is None:
            return 1.0
        factor = float(node.text) if re.fullmatch(r"[0-9]{1,3}(\.[0-9]{1,15})?", node.text) else 0.0
        if not 0.0 < factor < 100.0:
            self.collector.add(
                "number-unreadable",
                node.place,
                "this is no coverage factor",
                found=shown(node.text),
                expected="a number such as 2",
            )
            return 1.0
        return factor

    def degrees_of_freedom(self, fields: Fields) -> float:
        node = fields.scalar(DEGREES)
        if node is None:
            return math.inf
        if re.fullmatch(r"[1-9][0-9]{0,5}", node.text) is None:
            self.collector.add(
                "number-unreadable",
                node.place,
                "degrees of freedom are a whole number above zero",
                found=shown(node.text),
                expected="the number of readings less one, such as 9",
            )
            return math.inf
        return float(node.text)

    def derived(self, givens: Mapping[str, Given]) -> dict[str, Derived]:
        result = {}
        relations: dict[str, Scalar] = {}
        for key, node in self.entries("derived"):
            self.check_symbol(key)
            if key.text in givens or key.text in self.broken:
                self.collector.add(
                    "symbol-twice",
                    key.place,
                    f"`{key.text}` is a given and a derived quantity",
                    expected="one symbol for each quantity",
                )
                continue
            fields = read_mapping(node, described.DERIVED, self.collector, node.place)
            scalar = fields.scalar("relation")
            relation = self.relation(scalar)
            if scalar is None or relation is None:
                self.broken.add(key.text)
                continue
            place = scalar.part(1, len(scalar.text) + 1)
            result[key.text] = Derived(key.text, relation, fields.text("is"), place)
            relations[key.text] = scalar
        self.symbols = (*givens, *self.broken, *result)
        for name, item in result.items():
            if not self.symbols_known(item.relation, relations[name], name):
                self.broken.add(name)
        return self.without_broken(result)

    def symbols_known(self, relation: Relation, scalar: Scalar, but: str = "") -> bool:
        """Whether a relation has symbols of this file only; each that is unknown is a fault."""
        unknown = [symbol for symbol in relation.symbols if symbol not in self.symbols]
        for symbol in unknown:
            found = re.search(rf"(?<![A-Za-z0-9_.]){re.escape(symbol)}(?![A-Za-z0-9_(])", scalar.text)
            place = scalar.part(found.start() + 1, found.end() + 1) if found is not None else scalar.place
            self.report_symbol(symbol, place, but)
        return not unknown

    def report_symbol(self, symbol: str, place: Place, but: str = "") -> None:
        known = [name for name in self.symbols if name != but]
        self.collector.take([unknown_symbol(symbol, place, known, "a given of that symbol")])

    def without_broken(self, derived: dict[str, Derived]) -> dict[str, Derived]:
        """The derived quantities that have no fault and rest on no symbol that has one."""
        derived = {name: item for name, item in derived.items() if name not in self.broken}
        while True:
            broken = {name for name, item in derived.items() if self.broken & set(item.relation.symbols)}
            if not broken:
                return derived
            self.broken |= broken
            derived = {name: item for name, item in derived.items() if name not in broken}

    def assumptions(self) -> tuple[Assumption, ...]:
        result = []
        for key, node in self.entries("assumptions"):
            if not re.fullmatch(r"[A-Za-z][A-Za-z0-9_.-]{0,19}", key.text):
                self.collector.add(
                    "name-not-allowed",
                    key.place,
                    f"an assumption cannot be called `{shown(key.text)}`",
                    expected="a letter, then letters, digits, - _ or ., such as A1",
                )
            fields = read_mapping(node, described.ASSUMPTION, self.collector, node.place)
            by = date = evidence = ""
            answer = fields.node("verified")
            if isinstance(answer, MappingNode):
                verified = read_mapping(answer, described.VERIFIED, self.collector, answer.place)
                by, date = self.saying(verified, "by"), self.date(verified, "date")
                evidence = self.saying(verified, "evidence")
            elif isinstance(answer, Scalar) and answer.text not in ("no", "false"):
                self.collector.add(
                    "verification-incomplete",
                    answer.place,
                    "a verified assumption says by whom and how",
                    found=shown(answer.text),
                    expected="no, or {by: …, date: …, evidence: …}",
                )
            result.append(
                Assumption(key.text, fields.text("text"), fields.text("basis"), by, date, evidence, key.place)
            )
        return tuple(result)

    # -- streams ------------------------------------------------------------------------------------

    def stream(self, key: Scalar, node: Node) -> Stream:
        if not key.text.strip() or "/" in key.text:
            self.collector.add(
                "name-not-allowed",
                key.place,
                f"a stream cannot be called `{shown(key.text)}`",
                expected="a name without /",
            )
        fields = read_mapping(node, described.STREAM, self.collector, node.place)
        return Stream(
            key.text,
            read_fluid(self, fields.node("fluid")),
            self.stream_temperature(fields, node),
            self.value(fields.node("pressure")),
            self.value(fields.node("flow"), described.FLOW),
            fields.text("phase"),
            key.place,
            self.non_condensable(fields.node("non-condensable")),
        )

    def stream_temperature(self, fields: Fields, node: Node) -> Value | None:
        """The temperature of a stream; a key without a value has its fault already and is not called missing."""
        keys = node.entries if isinstance(node, MappingNode) else ()
        empty = next((key for key, _ in keys if key.text == "temperature" and key.text not in fields), None)
        return Value("", empty.place, is_broken=True) if empty else self.value(fields.node("temperature"))

    def check_stream_temperatures(self, streams: Mapping[str, Stream], duty: Duty | None) -> None:
        """A stream without a temperature takes the mean of its ends: it must stand in the duty with an end."""
        for name, stream in streams.items():
            if stream.temperature is not None:
                continue
            sides = duty.sides.values() if duty is not None else ()
            if not any(side.stream == name and side.has_ends for side in sides):
                self.collector.add(
                    "key-missing",
                    stream.place,
                    f"the stream `{shown(name)}` has no temperature",
                    expected="temperature: …, or an end of it in the duty",
                )

    def non_condensable(self, node: Node | None) -> Value | None:
        if node is None:
            return None
        fields = read_mapping(node, described.NON_CONDENSABLE, self.collector, node.place)
        return self.value(fields.node("mole fraction"))

    def has_fault_in(self, node: MappingNode) -> bool:
        """Whether a key of a mapping has a fault already: what is missing may be what was mistyped."""
        keys = {key.place for key, _ in node.entries}
        return any(fault.place in keys for fault in self.collector)

    def refuse_pair(self, fields: Fields, one: str, other: str) -> None:
        """A fault where two keys stand of which only one can."""
        if one in fields and other in fields:
            self.collector.add(
                "key-conflict",
                fields.key_places[other],
                f"`{other}` cannot stand beside `{one}`",
                found=f"`{one}` and `{other}`",
                expected="one of the two",
            )

    # -- geometry and terms -------------------------------------------------------------------------

    def geometry(self) -> Geometry | None:
        node = self.fields.node("geometry")
        if node is None:
            return None
        fields = read_mapping(node, described.GEOMETRY, self.collector, node.place)
        dimensions = {
            name: value
            for name in fields
            if name not in ("shape", "plugged")
            if (value := self.value(fields.node(name))) is not None
        }
        for other in ("tubes", "passes", "plugged"):
            self.refuse_pair(fields, "parallel", other)
        plugged = self.plugged(fields.node("plugged"))
        if plugged is not None:
            dimensions["plugged"] = plugged
        return Geometry(fields.text("shape"), dimensions, node.place)

    def plugged(self, node: Node | None) -> Value | None:
        """The count of plugged tubes with its source."""
        if node is None:
            return None
        fields = read_mapping(node, described.PLUGGED, self.collector, node.place)
        scalar = fields.scalar("count")
        if scalar is None:
            return Value("", node.place, is_broken=True)
        return self.scalar_value(scalar, fields.text("source"), "source" in fields)

    def terms(self, node: Node | None) -> tuple[Term, ...]:
        result: list[Term] = []
        names: dict[str, Place] = {}
        if isinstance(node, Sequence) and not node.items:
            self.terms_hold = False
            self.collector.add(
                "value-missing",
                node.place,
                "a list of terms is empty",
                expected="terms in order, from the inside to the outside",
            )
        if isinstance(node, Sequence) and len(node.items) > MOST_TERMS:
            self.terms_hold = False
            self.collector.add(
                "terms-too-many",
                node.items[MOST_TERMS].place,
                "a list has more terms than a calculation is read with",
                found=f"{len(node.items)} terms",
                expected=f"at most {MOST_TERMS}; layers of one kind can be stated as one",
            )
            return ()
        for index, item in enumerate(node.items if isinstance(node, Sequence) else ()):
            term = self.term(item, index)
            result.append(term)
            for part in (term, *term.branches):
                if part.name in names:
                    self.collector.add(
                        "term-twice",
                        part.place_of("name"),
                        f"two terms are called `{shown(part.name)}`",
                        found=f"first on line {names[part.name].line}",
                        expected="each name once",
                    )
                names.setdefault(part.name, part.place_of("name"))
        return tuple(result)

    def term(self, node: Node, index: int) -> Term:
        fields = read_mapping(node, described.TERM, self.collector, node.place)
        name = fields.text("name") or f"term {index + 1}"
        self.check_term_name(fields, name)
        if isinstance(node, MappingNode) and node.key("parallel") is not None:
            return self.parallel(fields, name)
        kind = self.term_kind(fields, node)
        text_keys = ("name", "kind", "stream", "situation", "method", "on", "material", "service", "phase")
        value_keys = (
            "coefficient",
            "resistance",
            "temperature",
            "conductivity",
            "thickness",
            "outside diameter",
            "emissivity",
            "surroundings",
            "vapour velocity",
            "method factor",
            "pressure",
            *described.GAP_SIDES,
        )
        values = {key: value for key in value_keys if (value := self.value(fields.node(key))) is not None}
        return Term(
            name=name,
            kind=kind,
            place=fields.place,
            texts={key: fields.text(key) for key in text_keys if key in fields},
            text_places={key: fields.place_of(key) for key in fields},
            values=values,
            with_values=self.with_values(fields.node("with")),
            deposit=self.deposit(fields.node("deposit"), "growth" in fields),
            growth=self.growth(fields.node("growth")),
            fins=self.fins(fields.node("fins")),
            fluid=read_fluid(self, fields.node("fluid"), OF_GAP),
            includes=self.names_of(fields.node("includes")),
            holds_for=self.range_of(fields.node("holds for")),
            scales_with=self.factor(fields.scalar("scales with")),
        )

    def factor(self, scalar: Scalar | None) -> Relation | None:
        """The relation of `scales with`; None where a symbol of it has a fault."""
        relation = self.relation(scalar)
        if scalar is None or relation is None or not self.symbols_known(relation, scalar):
            return None
        return None if self.broken & set(relation.symbols) else relation

    def term_kind(self, fields: Fields, node: Node) -> str:
        """The kind of a term, with its keys checked; a mistyped kind is read on as the nearest one."""
        written = node.get("kind") if isinstance(node, MappingNode) else None
        kind = written.text if isinstance(written, Scalar) else ""
        for key in ("name", "kind"):
            if isinstance(node, MappingNode) and node.key(key) is None:
                self.collector.add(
                    "key-missing",
                    fields.place,
                    f"a term lacks the key `{key}`",
                    expected="name: …, kind: " + " | ".join(described.TERM_KINDS),
                )
        if kind not in described.TERM_KINDS:
            self.terms_hold = self.terms_hold and bool(nearest_names(kind, described.TERM_KINDS))
            kind = next(iter(nearest_names(kind, described.TERM_KINDS)), "")
        if kind:
            self.check_term_keys(fields, kind)
        return kind

    def check_term_keys(self, fields: Fields, kind: str) -> None:
        allowed = described.TERM_KEYS[kind]
        for key in fields:
            if key not in ("name", "kind", *allowed):
                self.collector.add(
                    "key-unknown",
                    fields.key_places[key],
                    f"a term of kind {kind} has no key `{key}`",
                    found=key,
                    expected=", ".join(("name", "kind", *allowed)),
                    nearest=nearest_names(key, allowed),
                )
        for one, other in described.TERM_CONFLICTS:
            if one in allowed and other in allowed:
                self.refuse_pair(fields, one, other)

    def check_term_name(self, fields: Fields, name: str) -> None:
        if "/" in name or name in CLASHING_NAMES or name.startswith(CLASHING_STARTS):
            self.collector.add(
                "name-not-allowed",
                fields.place_of("name"),
                f"a term cannot be called `{shown(name)}`",
                found=shown(name),
                expected="a name without /, such as tube-side film, that does not start with a word"
                " such as given, derived, stream or case",
            )

    def parallel(self, fields: Fields, name: str) -> Term:
        for key in fields:
            if key not in ("name", "parallel"):
                self.collector.add(
                    "key-unknown",
                    fields.key_places[key],
                    f"a parallel entry has no key `{key}`",
                    found=key,
                    expected="name, parallel",
                )
        branches = self.terms(fields.node("parallel"))
        for branch in branches:
            if branch.kind not in ("film", "radiation"):
                self.terms_hold = False
                self.collector.add(
                    "term-order",
                    branch.place_of("kind"),
                    "films and radiation can act side by side on a surface",
                    found=branch.kind,
                    expected="kind: film or radiation",
                )
        self.terms_hold = self.terms_hold and bool(branches)
        if "name" not in fields:
            name = " beside ".join(branch.name for branch in branches)
        return Term(
            name,
            "parallel",
            fields.place,
            branches=branches,
            text_places={key: fields.place_of(key) for key in fields},
        )

    def with_values(self, node: Node | None) -> dict[str, Value]:
        if not isinstance(node, MappingNode):
            return {}
        return {key.text: value for key, item in node.entries if (value := self.value(item)) is not None}

    def deposit(self, node: Node | None, grows: bool) -> Deposit | None:
        if node is None:
            return None
        fields = read_mapping(node, described.DEPOSIT, self.collector, node.place)
        if grows and "thickness" in fields:
            self.collector.add(
                "key-conflict",
                fields.place_of("thickness"),
                "the thickness of a deposit that grows follows from its resistance",
                found="thickness",
                expected="conductivity, narrows",
            )
        elif not grows and isinstance(node, MappingNode) and node.key("thickness") is None:
            self.collector.add(
                "key-missing",
                fields.place,
                "a deposit lacks the key `thickness`",
                expected="thickness: thickness of the layer; or growth: {…} on the term",
            )
        return Deposit(
            self.value(fields.node("thickness")),
            self.value(fields.node("conductivity")),
            fields.text("narrows") in ("yes", "true"),
            node.place,
        )

    def growth(self, node: Node | None) -> Growth | None:
        if node is None:
            return None
        fields = read_mapping(node, described.GROWTH, self.collector, node.place)
        figures = (key for key in fields if key not in described.GROWTH.names())
        return Growth(
            fields.text("model"),
            self.value(fields.node("after")),
            {key: value for key in figures if (value := self.value(fields.node(key))) is not None},
            dict(fields.key_places) | {"model": fields.place_of("model")},
            node.place,
        )

    def fins(self, node: Node | None) -> Fins | None:
        if node is None:
            return None
        fields = read_mapping(node, described.FINS, self.collector, node.place)
        self.refuse_pair(fields, "material", "conductivity")
        self.refuse_pair(fields, "pitch", "count")
        figures = ("height", "thickness", "pitch", "count", "conductivity")
        return Fins(
            fields.text("shape"),
            {key: value for key in figures if (value := self.value(fields.node(key))) is not None},
            {key: fields.text(key) for key in ("material", "tip", "method") if key in fields},
            {key: fields.place_of(key) for key in fields},
            node.place,
        )

    def names_of(self, node: Node | None) -> tuple[str, ...]:
        names = []
        for item in node.items if isinstance(node, Sequence) else ():
            if isinstance(item, Scalar):
                names.append(item.text)
            else:
                self.collector.add(
                    "value-not-text", item.place, "the name of a term is wanted here", expected="[tube wall]"
                )
        return tuple(names)

    def range_of(self, node: Node | None) -> tuple[Value, Value] | None:
        """`holds for: {flow: 20 kg/s .. 26 kg/s}`; the key is a symbol or `flow`, `temperature`, `pressure`.

        The key stands as the source of both ends.
        """
        if node is None:
            return None
        entries = node.entries if isinstance(node, MappingNode) else ()
        key, scalar = entries[0] if len(entries) == 1 else (None, node)
        parts = None
        if key is not None and isinstance(scalar, Scalar):
            parts = re.fullmatch(r"\s*(.*?\S)\s*\.\.\s*(\S.*?)\s*", scalar.text)
        if key is None or not isinstance(scalar, Scalar) or parts is None:
            self.report_range(scalar.place)
            return None
        if key.text not in (*self.symbols, "flow", "temperature", "pressure"):
            self.report_symbol(key.text, key.place)
            return None
        low, high = (self.range_end(scalar, *parts.span(number)) for number in (1, 2))
        if low is None or high is None or key.text in self.broken:
            return None
        if low.dimension == high.dimension and not low.value < high.value:
            self.report_range(scalar.place)
            return None
        return (
            Value(low.text, scalar.place, "", low, key.text, True),
            Value(high.text, scalar.place, "", high, key.text, True),
        )

    def report_range(self, place: Place) -> None:
        self.collector.add(
            "range-unreadable",
            place,
            "`holds for` gives one symbol and its range, low to high",
            expected="holds for: {m_cold: 20 kg/s .. 26 kg/s}",
        )

    def range_end(self, scalar: Scalar, start: int, end: int) -> Quantity | None:
        """One end of a range, which stands from ``start`` to ``end`` in its text."""
        return self.quantity(Scalar(scalar.text[start:end], scalar.part(start + 1, end + 1)))

    # -- acceptance, report, cases ------------------------------------------------------------------

    def report(self) -> Report:
        fields = self.mapping("report", described.REPORT)
        units = fields.node("units")
        default = self.settings.units or "SI"
        by_quantity: dict[str, str] = {}
        if isinstance(units, Scalar):
            if units.text not in ("SI", "US customary"):
                self.collector.add(
                    "choice-unknown",
                    units.place,
                    f"units cannot be `{shown(units.text)}`",
                    found=shown(units.text),
                    expected="SI | US customary | a mapping of quantity: unit",
                    nearest=nearest_names(units.text, ("SI", "US customary")),
                )
            default = units.text
        elif isinstance(units, MappingNode):
            by_quantity = {key.text: self.unit(item) for key, item in units.entries}
        elif units is not None:
            self.collector.add(
                "value-not-text",
                units.place,
                "`units` must be a word or a mapping",
                found="a list",
                expected="SI | US customary | a mapping of quantity: unit",
            )
        return Report(
            fields.text("U on"),
            fields.place_of("U on"),
            default,
            by_quantity,
            fields.text("service"),
            fields.place_of("service") if "service" in fields else None,
        )

    def unit(self, node: Node) -> str:
        """The unit that a quantity is reported in."""
        if not isinstance(node, Scalar):
            self.collector.add(
                "value-not-text", node.place, "a unit is wanted here", expected="a unit such as W/(m^2 K)"
            )
            return "1"
        try:
            unit_factor(node.text)
        except QuantityFault as error:
            self.quantity_fault(node, error)
        return node.text

    def cases(self, givens: Mapping[str, Given]) -> dict[str, dict[str, Given]]:
        """Named variations of the givens; a place along the unit is a case called `at <place>`."""
        places = self.restatements("evaluate at", givens)
        return {
            **self.restatements("cases", givens),
            **{f"{AT_PLACE}{name}": changes for name, changes in places.items()},
        }

    def restatements(self, section: str, givens: Mapping[str, Given]) -> dict[str, dict[str, Given]]:
        result: dict[str, dict[str, Given]] = {}
        for key, node in self.entries(section):
            if not re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9 _.-]{0,39}", key.text) or key.text in CASE_WORDS:
                self.collector.add(
                    "name-not-allowed",
                    key.place,
                    f"a case cannot be called `{shown(key.text)}`",
                    found=shown(key.text),
                    expected=f"letters, digits, blanks, - _ . and not {', '.join(CASE_WORDS)}",
                )
            result[key.text] = self.case(node, givens)
        return result

    def case(self, node: Node, givens: Mapping[str, Given]) -> dict[str, Given]:
        changes: dict[str, Given] = {}
        for key, item in node.entries if isinstance(node, MappingNode) else ():
            base = givens.get(key.text)
            if base is not None:
                change = self.restated(key, item, base)
                if change is not None:
                    changes[key.text] = change
            elif key.text not in self.broken:
                self.collector.add(
                    "symbol-unknown",
                    key.place,
                    f"a case restates givens; `{shown(key.text)}` is none",
                    found=shown(key.text),
                    expected=", ".join(givens),
                    nearest=nearest_names(key.text, givens),
                )
        return changes

    def restated(self, key: Scalar, item: Node, base: Given) -> Given | None:
        """A given as a case restates it: of the same quantity, its tolerance carried over."""
        if isinstance(item, Scalar):
            quantity = self.quantity(item)
            if quantity is None:
                return None
            value = Value(" ".join(item.text.split()), item.part(1, len(item.text) + 1), "", quantity)
            given = Given(key.text, value, base.meaning, "", base.tolerance, key.place)
        else:
            found = self.given(key, item)
            if found is None:
                return None
            given = found._replace(
                meaning=found.meaning or base.meaning, tolerance=found.tolerance or base.tolerance
            )
        before, after = base.value.quantity, given.value.quantity
        assert before is not None and after is not None
        if before.dimension != after.dimension:
            self.collector.add(
                "unit-dimension",
                given.value.place,
                f"a case restates `{key.text}` as another quantity",
                found=given.value.text,
                expected=f"a unit like that of {base.value.text}",
            )
            return None
        if not after.on_base_of(before):
            self.collector.add(
                "unit-dimension",
                given.value.place,
                f"a case restates `{key.text}` on another pressure base",
                found=given.value.text,
                expected=f"gauge or absolute as in {base.value.text}",
            )
            return None
        return given

    def saying(self, fields: Fields, key: str) -> str:
        """A text that closes an open item: a fault where it says nothing."""
        text = fields.text(key)
        if key in fields and is_empty(text):
            self.collector.add(
                "text-empty",
                fields.place_of(key),
                f"`{key}` closes an open item and says nothing",
                found=shown(text),
                expected="what it rests on, or who answers for it",
            )
        return text
