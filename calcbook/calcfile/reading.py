"""Text of a calculation file to a ``Calculation``, with every fault and its place."""

from __future__ import annotations

import datetime
import keyword
import re
from collections.abc import Iterable, Mapping
from pathlib import Path

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import (
    Acceptance,
    Assumption,
    Calculation,
    Criterion,
    Deposit,
    Derived,
    FluidText,
    Geometry,
    Given,
    Report,
    Revision,
    Settings,
    Stream,
    Term,
    Tolerance,
    Value,
)
from calcbook.calcfile.meaning import meaning_of
from calcbook.calcfile.tablefile import read_table_file
from calcbook.documents import Description, Document, Fields, Node, Scalar, Sequence, read_file, read_mapping
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.formulas import Relation, RelationFault, parse_expression
from calcbook.quantities import Quantity, QuantityFault, read_any

NUMBER = re.compile(r"[A-Za-z0-9][A-Za-z0-9_.-]{0,39}")
SYMBOL = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,39}")
OPERATORS = (">=", "<=", ">", "<")
RESERVED = frozenset(
    "pi g_n sigma sqrt exp expm1 ln log log10 log1p abs min max sin cos tan asin acos atan sinh cosh tanh "
    "gamma_p i0e i1e k0e k1e mean table yes no true false and or not if else".split()
)
PROPERTIES = ("density", "viscosity", "conductivity", "heat capacity", "expansion coefficient")


def read_calculation(path: Path, settings: Settings, collector: Collector, name: str | None = None) -> Calculation:
    """Read a calculation file.

    Faults that leave a calculation to speak of go to ``collector``; a file that is no YAML mapping
    raises ``Faults`` at once.
    """
    document = read_file(path, name)
    return read_document(document, settings, collector, path.parent)


def read_document(document: Document, settings: Settings, collector: Collector, folder: Path) -> Calculation:
    """As ``read_calculation``, from a document that is already read."""
    return _Reader(document, settings, collector, folder).calculation()


class _Reader:
    def __init__(self, document: Document, settings: Settings, collector: Collector, folder: Path):
        self.document = document
        self.settings = settings
        self.collector = collector
        self.folder = folder
        self.place = document.root.place
        self.fields = read_mapping(document.root, described.FILE, collector, self.place)
        self.fluids: dict[str, FluidText] = {}

    def calculation(self) -> Calculation:
        head = self.mapping("calculation", described.HEAD)
        givens = self.givens(self.fields.node("givens"))
        derived = self.derived(givens)
        self.fluids = {key.text: self.fluid_record(key.text, value) for key, value in self.entries("fluids")}
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
            streams={key.text: self.stream(key, value) for key, value in self.entries("streams")},
            geometry=self.geometry(),
            resistances=self.terms(self.fields.node("resistances")),
            acceptance=self.acceptance(),
            report=self.report(),
            cases=self.cases(givens),
            accept=self.accept(),
            settings=self.settings,
            meaning=meaning_of(self.document.root),
            place=self.place,
        )

    # -- helpers ------------------------------------------------------------------------------------

    def mapping(self, name: str, description: Description) -> Fields:
        node = self.fields.node(name)
        if node is None:
            return Fields(self.place)
        return read_mapping(node, description, self.collector, node.place)

    def entries(self, name: str) -> Iterable[tuple[Scalar, Node]]:
        node = self.fields.node(name)
        if node is None or (isinstance(node, Scalar) and node.is_empty):
            return ()
        if isinstance(node, MappingNode):
            return node.entries
        self.collector.add("mapping-expected", node.place, f"`{name}` must be a mapping", expected="name: value lines")
        return ()

    def items(self, name: str) -> tuple[Node, ...]:
        node = self.fields.node(name)
        return node.items if isinstance(node, Sequence) else ()

    def value(self, node: Node | None) -> Value | None:
        """A figure: a symbol or word, a quantity, or {value: …, source: …}."""
        if node is None:
            return None
        if isinstance(node, Scalar):
            return self.scalar_value(node, "", False)
        if isinstance(node, MappingNode):
            fields = read_mapping(node, described.SOURCED, self.collector, node.place)
            scalar = fields.scalar("value")
            if scalar is None:
                return None
            value = self.scalar_value(scalar, fields.text("source"), "source" in fields)
            at = fields.node("at")
            if at is None or value is None:
                return value
            state = read_mapping(at, described.FLOW_STATE, self.collector, at.place)
            stated = {name: found for name in state if (found := self.value(state.node(name))) is not None}
            return Value(value.text, value.place, value.symbol, value.quantity, value.source, value.has_source, stated)
        self.collector.add("value-not-text", node.place, "a single value is wanted here", found="a list",
                           expected="a symbol of the givens, or a number with its unit")
        return None

    def scalar_value(self, node: Scalar, source: str, has_source: bool) -> Value | None:
        text = " ".join(node.text.split())
        if SYMBOL.fullmatch(text) and text.lower() not in ("nan", "inf", "infinity"):
            return Value(text, node.place, symbol=text, source=source, has_source=has_source)
        quantity = self.quantity(node)
        return Value(text, node.place, "", quantity, source, has_source) if quantity is not None else None

    def quantity(self, node: Scalar) -> Quantity | None:
        try:
            return read_any(node.text)
        except QuantityFault as error:
            place = node.place.part(max(error.column - 1, 0), max(error.end_column - error.column, 1))
            self.collector.add(error.code, place if node.style == "plain" else node.place, error.message,
                               found=error.found, expected=error.expected, nearest=error.nearest)
            return None

    def relation(self, node: Scalar | None) -> Relation | None:
        if node is None:
            return None
        try:
            return parse_expression(node.text)
        except RelationFault as error:
            self.collector.add(error.code, node.place.part(error.column - 1, error.end_column - error.column),
                               error.message, expected=error.expected, nearest=error.nearest)
            return None

    def date(self, fields: Fields, name: str) -> str:
        node = fields.scalar(name)
        if node is None:
            return ""
        try:
            if not re.fullmatch(r"\d{4}-\d{2}-\d{2}", node.text):
                raise ValueError
            datetime.date.fromisoformat(node.text)
        except ValueError:
            self.collector.add("date-unreadable", node.place, "this is no date of the calendar",
                               found=shown(node.text), expected="YYYY-MM-DD")
        return node.text

    # -- head ---------------------------------------------------------------------------------------

    def number(self, head: Fields) -> str:
        node = head.scalar("number")
        if node is None:
            return ""
        if not NUMBER.fullmatch(node.text) or node.text.endswith(".") or ".." in node.text:
            self.collector.add("number-not-allowed", node.place, "this cannot be the number of a calculation",
                               found=shown(node.text),
                               expected="letters, digits, - _ . (at most 40), starting with a letter or digit")
        return node.text

    def revision_name(self, head: Fields) -> str:
        node = head.scalar("revision")
        if node is not None and not re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9.-]{0,9}", node.text):
            self.collector.add("revision-not-allowed", node.place, "this cannot be a revision",
                               found=shown(node.text), expected="a letter or number such as A, B or 2")
        return node.text if node is not None else ""

    def revisions(self) -> tuple[Revision, ...]:
        result = []
        for item in self.items("revisions"):
            fields = read_mapping(item, described.REVISION, self.collector, item.place)
            result.append(Revision(fields.text("revision"), self.date(fields, "date"), fields.text("reason"),
                                   item.place))
        return tuple(result)

    # -- givens -------------------------------------------------------------------------------------

    def givens(self, node: Node | None) -> dict[str, Given]:
        if not isinstance(node, MappingNode):
            return {}
        result = {}
        for key, value in node.entries:
            given = self.given(key, value)
            if given is not None:
                result[key.text] = given
        return result

    def given(self, key: Scalar, node: Node) -> Given | None:
        self.check_symbol(key)
        fields = read_mapping(node, described.GIVEN, self.collector, node.place)
        scalar = fields.scalar("value")
        if scalar is None:
            return None
        quantity = self.quantity(scalar)
        if quantity is None:
            return None
        text = " ".join(scalar.text.split())
        value = Value(text, scalar.place, "", quantity, fields.text("source"), "source" in fields)
        return Given(key.text, value, fields.text("is"), fields.text("source"),
                     self.tolerance(fields.node("tolerance")), key.place)

    def check_symbol(self, key: Scalar) -> None:
        text = key.text
        if not SYMBOL.fullmatch(text) or keyword.iskeyword(text) or text in RESERVED:
            self.collector.add("symbol-not-allowed", key.place, f"`{shown(text)}` cannot be a symbol",
                               expected="a letter, then letters, digits or _, and no name of a function or constant")

    def tolerance(self, node: Node | None) -> Tolerance | None:
        if node is None:
            return None
        if isinstance(node, Scalar):
            return Tolerance(" ".join(node.text.split()), node.place, "rectangular")
        fields = read_mapping(node, described.TOLERANCE, self.collector, node.place)
        for kind in ("standard", "expanded"):
            scalar = fields.scalar(kind)
            if scalar is not None:
                return Tolerance(" ".join(scalar.text.split()), scalar.place, kind, self.coverage_factor(fields))
        self.collector.add("key-missing", node.place, "a tolerance says `standard` or `expanded`",
                           expected="{standard: 0.5 %} or {expanded: 1 %, k: 2}")
        return None

    def coverage_factor(self, fields: Fields) -> float:
        node = fields.scalar("k")
        if node is None:
            return 1.0
        try:
            factor = float(node.text)
        except ValueError:
            factor = -1.0
        if not 0.0 < factor < 100.0:
            self.collector.add("number-unreadable", node.place, "this is no coverage factor", found=shown(node.text),
                               expected="a number such as 2")
            return 1.0
        return factor

    def derived(self, givens: Mapping[str, Given]) -> dict[str, Derived]:
        result = {}
        for key, node in self.entries("derived"):
            self.check_symbol(key)
            if key.text in givens:
                self.collector.add("symbol-twice", key.place, f"`{key.text}` is a given and a derived quantity")
            fields = read_mapping(node, described.DERIVED, self.collector, node.place)
            relation = self.relation(fields.scalar("relation"))
            if relation is not None:
                result[key.text] = Derived(key.text, relation, fields.text("is"), fields.place_of("relation"))
        return result

    def assumptions(self) -> tuple[Assumption, ...]:
        result = []
        for key, node in self.entries("assumptions"):
            fields = read_mapping(node, described.ASSUMPTION, self.collector, node.place)
            by = date = evidence = ""
            answer = fields.node("verified")
            if isinstance(answer, MappingNode):
                verified = read_mapping(answer, described.VERIFIED, self.collector, answer.place)
                by, date = verified.text("by"), self.date(verified, "date")
                evidence = verified.text("evidence")
            elif isinstance(answer, Scalar) and answer.text not in ("no", "false"):
                self.collector.add("verification-incomplete", answer.place, "a verified assumption says by whom and how",
                                   found=shown(answer.text), expected="no, or {by: …, date: …, evidence: …}")
            result.append(Assumption(key.text, fields.text("text"), fields.text("basis"), by, date, evidence, key.place))
        return tuple(result)

    # -- streams ------------------------------------------------------------------------------------

    def stream(self, key: Scalar, node: Node) -> Stream:
        fields = read_mapping(node, described.STREAM, self.collector, node.place)
        return Stream(key.text, self.fluid(fields.node("fluid")), self.value(fields.node("temperature")),
                      self.value(fields.node("pressure")), self.value(fields.node("flow")), fields.text("phase"),
                      key.place)

    def fluid(self, node: Node | None) -> FluidText | None:
        if node is None:
            return None
        if isinstance(node, Scalar):
            name = " ".join(node.text.split())
            return self.fluids.get(name, FluidText("name", name, node.place))
        return self.fluid_record("fluid of the stream", node)

    def fluid_record(self, name: str, node: Node) -> FluidText:
        fields = read_mapping(node, described.FLUID, self.collector, node.place)
        source = fields.text("source")
        if "mixture" in fields:
            basis = next((key for key in ("mass fraction", "volume fraction") if key in fields), "")
            if not basis:
                self.collector.add("key-missing", node.place, "a mixture says its mass or volume fraction",
                                   expected="mass fraction: 40 %")
            return FluidText("mixture", fields.text("mixture"), node.place, basis, self.value(fields.node(basis)),
                             source=source)
        if "table file" in fields:
            scalar = fields.scalar("table file")
            assert scalar is not None
            columns = read_table_file(self.folder / scalar.text, scalar.place, self.collector)
            return FluidText("table", name, node.place, columns=columns, source=source)
        kind = "table" if "table" in fields else "constants"
        body = fields.node(kind)
        if body is None:
            self.collector.add("key-missing", node.place, "a fluid is a name, a mixture, a table or constants",
                               expected="mixture: … | table: {…} | table file: … | constants: {…}")
            return FluidText("constants", name, node.place, source=source)
        return self.fluid_table(name, kind, body, source, node.place)

    def fluid_table(self, name: str, kind: str, body: Node, source: str, place: Place) -> FluidText:
        fields = read_mapping(body, described.FLUID_TABLE, self.collector, body.place)
        columns: dict[str, tuple[Value, ...]] = {}
        astm: tuple[tuple[Value, Value], ...] = ()
        for column in fields:
            node = fields.node(column)
            if isinstance(node, MappingNode) and node.get("astm d341") is not None:
                astm = self.astm_points(node.get("astm d341"), node.place)
            elif isinstance(node, Sequence):
                columns[column] = tuple(found for item in node.items if (found := self.value(item)) is not None)
            else:
                found = self.value(node)
                columns[column] = (found,) if found is not None else ()
        rows = len(columns.get("T", ()))
        for column, values in columns.items():
            if kind == "table" and rows and len(values) != rows:
                self.collector.add("table-row-length", fields.place_of(column),
                                   f"`{column}` has {len(values)} entries, T has {rows}", expected=f"{rows} entries")
        return FluidText(kind, name, place, columns=columns, astm=astm, source=source)

    def astm_points(self, node: Node | None, place: Place) -> tuple[tuple[Value, Value], ...]:
        points = []
        for item in node.items if isinstance(node, Sequence) else ():
            pair = [self.value(part) for part in item.items] if isinstance(item, Sequence) else []
            if len(pair) == 2 and pair[0] is not None and pair[1] is not None:
                points.append((pair[0], pair[1]))
        if len(points) != 2:
            self.collector.add("astm-points", place, "a D341 viscosity has two points",
                               expected="[[40 degC, 46 mm^2/s], [100 degC, 6.8 mm^2/s]]")
            return ()
        return tuple(points)

    # -- geometry and terms -------------------------------------------------------------------------

    def geometry(self) -> Geometry | None:
        node = self.fields.node("geometry")
        if node is None:
            return None
        fields = read_mapping(node, described.GEOMETRY, self.collector, node.place)
        dimensions = {name: value for name in fields if name != "shape"
                      if (value := self.value(fields.node(name))) is not None}
        return Geometry(fields.text("shape"), dimensions, node.place)

    def terms(self, node: Node | None) -> tuple[Term, ...]:
        result: list[Term] = []
        names: dict[str, Place] = {}
        for index, item in enumerate(node.items if isinstance(node, Sequence) else ()):
            term = self.term(item, index)
            result.append(term)
            for part in (term, *term.branches):
                if part.name in names:
                    self.collector.add("term-twice", part.place_of("name"), f"two terms are called `{shown(part.name)}`",
                                       found=f"first on line {names[part.name].line}", expected="each name once")
                names.setdefault(part.name, part.place_of("name"))
        return tuple(result)

    def term(self, node: Node, index: int) -> Term:
        fields = read_mapping(node, described.TERM, self.collector, node.place)
        name = fields.text("name") or f"term {index + 1}"
        if "parallel" in fields:
            return self.parallel(fields, name)
        for key in ("name", "kind"):
            if key not in fields:
                self.collector.add("key-missing", fields.place, f"a term lacks the key `{key}`",
                                   expected="name: …, kind: " + " | ".join(described.TERM_KINDS))
        if "/" in name:
            self.collector.add("name-not-allowed", fields.place_of("name"), "a term's name has no solidus",
                               found=shown(name), expected="a name without /")
        text_keys = ("name", "kind", "stream", "situation", "method", "on", "material")
        value_keys = ("coefficient", "resistance", "temperature", "conductivity", "thickness", "outside diameter",
                      "emissivity", "surroundings")
        values = {key: value for key in value_keys if (value := self.value(fields.node(key))) is not None}
        return Term(
            name=name,
            kind=fields.text("kind"),
            place=fields.place,
            texts={key: fields.text(key) for key in text_keys if key in fields},
            text_places={key: fields.place_of(key) for key in fields},
            values=values,
            with_values=self.with_values(fields.node("with")),
            deposit=self.deposit(fields.node("deposit")),
            includes=self.names_of(fields.node("includes")),
            holds_for=self.range_of(fields.node("holds for")),
            scales_with=self.relation(fields.scalar("scales with")),
        )

    def parallel(self, fields: Fields, name: str) -> Term:
        if "kind" in fields:
            self.collector.add("key-unknown", fields.place_of("kind"), "a parallel entry has no kind of its own",
                               expected="name and parallel only")
        branches = self.terms(fields.node("parallel"))
        for branch in branches:
            if branch.kind not in ("film", "radiation"):
                self.collector.add("term-order", branch.place, "films and radiation can act side by side on a surface",
                                   found=branch.kind, expected="kind: film or radiation")
        if "name" not in fields:
            name = " beside ".join(branch.name for branch in branches)
        return Term(name, "parallel", fields.place, branches=branches,
                    text_places={key: fields.place_of(key) for key in fields})

    def with_values(self, node: Node | None) -> dict[str, Value]:
        if not isinstance(node, MappingNode):
            return {}
        return {key.text: value for key, item in node.entries if (value := self.value(item)) is not None}

    def deposit(self, node: Node | None) -> Deposit | None:
        if node is None:
            return None
        fields = read_mapping(node, described.DEPOSIT, self.collector, node.place)
        return Deposit(self.value(fields.node("thickness")), self.value(fields.node("conductivity")),
                       fields.text("narrows") in ("yes", "true"), node.place)

    def names_of(self, node: Node | None) -> tuple[str, ...]:
        if not isinstance(node, Sequence):
            return ()
        return tuple(item.text for item in node.items if isinstance(item, Scalar))

    def range_of(self, node: Node | None) -> tuple[Value, Value] | None:
        """`holds for: {flow: 20 kg/s .. 26 kg/s}`; the key is a symbol or `flow`, `temperature`, `pressure`."""
        if node is None:
            return None
        if isinstance(node, MappingNode) and len(node.entries) == 1 and isinstance(node.entries[0][1], Scalar):
            key, scalar = node.entries[0]
            low, dots, high = scalar.text.partition("..")
            parts = [self.scalar_value(Scalar(part.strip(), scalar.place, "quoted"), key.text, True)
                     for part in (low, high)]
            if dots and parts[0] is not None and parts[1] is not None:
                return parts[0], parts[1]
        self.collector.add("range-unreadable", node.place, "`holds for` gives one symbol and its range",
                           expected="holds for: {m_cold: 20 kg/s .. 26 kg/s}")
        return None

    # -- acceptance, report, cases ------------------------------------------------------------------

    def acceptance(self) -> tuple[Criterion, ...]:
        result = []
        for item in self.items("acceptance"):
            fields = read_mapping(item, described.CRITERION, self.collector, item.place)
            scalar = fields.scalar("that")
            if scalar is None:
                continue
            criterion = self.criterion(scalar, fields.text("source"))
            if criterion is not None:
                result.append(criterion)
        return tuple(result)

    def criterion(self, scalar: Scalar, source: str) -> Criterion | None:
        text = " ".join(scalar.text.split())
        match = re.fullmatch(r"(.+?)\s*(>=|<=|>|<)\s*(.+)", text)
        if match is None:
            self.collector.add("criterion-unreadable", scalar.place, "a criterion is a result, an operator and a limit",
                               found=shown(text), expected="U_service >= 1000 W/(m^2 K)")
            return None
        offset = scalar.text.find(match.group(3)) if scalar.style == "plain" else 0
        limit_node = Scalar(match.group(3), scalar.place.part(max(offset, 0), len(match.group(3))), "plain")
        limit = self.scalar_value(limit_node, source, bool(source))
        return Criterion(text, match.group(1), match.group(2), limit, source, scalar.place) if limit else None

    def report(self) -> Report:
        fields = self.mapping("report", described.REPORT)
        units = fields.node("units")
        default = self.settings.units or "SI"
        by_quantity: dict[str, str] = {}
        if isinstance(units, Scalar):
            if units.text not in ("SI", "US customary"):
                self.collector.add("choice-unknown", units.place, f"units cannot be `{shown(units.text)}`",
                                   expected="SI | US customary | a mapping of quantity: unit",
                                   nearest=nearest_names(units.text, ("SI", "US customary")))
            default = units.text
        elif isinstance(units, MappingNode):
            by_quantity = {key.text: item.text for key, item in units.entries if isinstance(item, Scalar)}
        return Report(fields.text("U on"), fields.place_of("U on"), default, by_quantity)

    def cases(self, givens: Mapping[str, Given]) -> dict[str, dict[str, Given]]:
        result: dict[str, dict[str, Given]] = {}
        for key, node in self.entries("cases"):
            if not re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9 _.-]{0,39}", key.text) or key.text in ("all", "clean", "service"):
                self.collector.add("name-not-allowed", key.place, f"a case cannot be called `{shown(key.text)}`",
                                   expected="letters, digits, blanks, - _ . and not all, clean or service")
            result[key.text] = self.case(node, givens)
        return result

    def case(self, node: Node, givens: Mapping[str, Given]) -> dict[str, Given]:
        changes: dict[str, Given] = {}
        if not isinstance(node, MappingNode):
            self.collector.add("mapping-expected", node.place, "a case restates givens", expected="symbol: value lines")
            return changes
        for key, item in node.entries:
            base = givens.get(key.text)
            if base is None:
                self.collector.add("symbol-unknown", key.place, f"a case restates givens; `{shown(key.text)}` is none",
                                   expected=", ".join(givens), nearest=nearest_names(key.text, givens))
                continue
            if isinstance(item, Scalar):
                quantity = self.quantity(item)
                if quantity is not None:
                    value = Value(" ".join(item.text.split()), item.place, "", quantity)
                    changes[key.text] = Given(key.text, value, base.meaning, "", base.tolerance, key.place)
                continue
            given = self.given(key, item)
            if given is not None:
                tolerance = given.tolerance or base.tolerance
                changes[key.text] = Given(key.text, given.value, given.meaning or base.meaning, given.source,
                                          tolerance, key.place)
        return changes

    def accept(self) -> tuple[Acceptance, ...]:
        result = []
        for item in self.items("accept"):
            fields = read_mapping(item, described.ACCEPT, self.collector, item.place)
            direction = next((key for key in ("down to", "up to") if key in fields), "")
            bound = self.value(fields.node(direction)) if direction else None
            if not direction:
                self.collector.add("key-missing", fields.place, "an accepted check states its bound",
                                   expected="down to: … or up to: … (of the checked figure)")
            check = " / ".join(part.strip() for part in fields.text("check").split("/"))
            result.append(Acceptance(check, fields.text("in") or "all", direction, bound, fields.text("because"),
                                     fields.text("by"), self.date(fields, "date"), fields.place_of("check")))
        return tuple(result)
