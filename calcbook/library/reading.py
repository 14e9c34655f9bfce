"""Text of a card to its frozen type, with every fault of the card and its line."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

import numpy as np

from calcbook.documents import Description, Fields, Node, Scalar, Sequence, read_file, read_mapping
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.formulas import Relation, RelationFault, parse_expression, parse_relation
from calcbook.library import descriptions as described
from calcbook.library.cards import (
    PLACES,
    STANDINGS,
    Accuracy,
    Assignment,
    CheckPoint,
    Choice,
    Friction,
    Group,
    Limit,
    Line,
    Material,
    Method,
    Need,
    Situation,
    Solve,
    Source,
    State,
    Sum,
    Table,
    Use,
)
from calcbook.quantities import QuantityFault, QuantityKind, kind_from_entry, read_any, read_quantity

# A figure of an accuracy, and the largest part of a figure by which a check point may be missed.
SHARE = re.compile(r"(?<![-−0-9.])[0-9]+(?:\.[0-9]+)?")
LOOSEST = 0.5
_VOCABULARY = Path(__file__).with_name("vocabulary.yaml")
_kinds: dict[str, QuantityKind] = {}


def vocabulary() -> dict[str, QuantityKind]:
    """Every quantity that a card, a calculation file or a record may name, by its name."""
    if not _kinds:
        root = read_file(_VOCABULARY, "vocabulary.yaml").root
        assert isinstance(root, MappingNode)
        entries = root.get("quantities")
        assert isinstance(entries, MappingNode)
        for key, value in entries.entries:
            assert isinstance(value, MappingNode)
            entry = {name.text: node.text for name, node in value.entries if isinstance(node, Scalar)}
            _kinds[key.text] = kind_from_entry(key.text, entry)
    return _kinds


def read_method(path: Path, house: bool = False) -> Method:
    """Read a method card. Raises ``Faults`` with every mistake in it."""
    reader = _Reader(path, described.METHOD, "method")
    method = reader.method(house)
    reader.collector.stop_if_any()
    return method


def read_situation(path: Path) -> Situation:
    """Read a situation card. Raises ``Faults`` with every mistake in it."""
    reader = _Reader(path, described.SITUATION, "situation")
    situation = reader.situation()
    reader.collector.stop_if_any()
    return situation


def read_material(path: Path, house: bool = False) -> Material:
    """Read a material card. Raises ``Faults`` with every mistake in it."""
    reader = _Reader(path, described.MATERIAL, "material")
    material = reader.material(house)
    reader.collector.stop_if_any()
    return material


class _Reader:
    def __init__(self, path: Path, description: Description, kind: str):
        self.collector = Collector()
        document = read_file(path, path.name)
        self.place = Place(path.name)
        self.fields = read_mapping(document.root, description, self.collector, self.place)
        self.collector.stop_if_any()
        self.id = self.fields.text(kind)
        if self.id != path.stem:
            self.fault(
                self.fields.place_of(kind),
                "card-id-differs",
                "the id differs from the file name",
                found=self.id,
                expected=path.stem,
            )

    def fault(self, place: Place, code: str, message: str, **facts: object) -> None:
        self.collector.add(code, place, message, **facts)  # type: ignore[arg-type]

    # -- pieces -------------------------------------------------------------------------------------

    def items(self, name: str, fields: Fields | None = None) -> tuple[Node, ...]:
        node = (fields or self.fields).node(name)
        return node.items if isinstance(node, Sequence) else ()

    def texts(self, name: str) -> tuple[str, ...]:
        result = []
        for item in self.items(name):
            if isinstance(item, Scalar):
                result.append(" ".join(item.text.split()))
            else:
                self.fault(
                    item.place,
                    "value-not-text",
                    f"an entry of `{name}` must be a single text",
                    expected="the text in quotes if it holds `: `",
                )
        return tuple(result)

    def entries(self, name: str, fields: Fields | None = None) -> Iterable[tuple[Scalar, Node]]:
        node = (fields or self.fields).node(name)
        return node.entries if isinstance(node, MappingNode) else ()

    def record(self, node: Node, description: Description) -> Fields:
        return read_mapping(node, description, self.collector, node.place)

    def relation(self, node: Scalar, *, target: bool = False) -> Relation | None:
        try:
            return parse_relation(node.text) if target else parse_expression(node.text)
        except RelationFault as error:
            self.fault(
                node.place.part(error.column - 1, error.end_column - error.column),
                error.code,
                error.message,
                expected=error.expected,
                nearest=error.nearest,
            )
            return None

    def number(self, node: Node | None, place: Place) -> float:
        if isinstance(node, Scalar):
            try:
                value = float(node.text)
                if math.isfinite(value):
                    return value
            except ValueError:
                pass
            self.fault(
                node.place,
                "number-unreadable",
                "this is no number",
                found=shown(node.text),
                expected="a number such as 0.023 or 1e4",
            )
        elif node is not None:
            self.fault(place, "number-unreadable", "a number is wanted here")
        return math.nan

    # -- shared parts -------------------------------------------------------------------------------

    def sources(self) -> tuple[Source, ...]:
        result = []
        for item in self.items("sources"):
            fields = self.record(item, described.SOURCE)
            result.append(Source(fields.text("cite"), fields.text("for"), fields.text("standing")))
        if not result:
            self.fault(
                self.fields.place_of("sources"),
                "card-without-source",
                "a card names its sources",
                expected="at least one source with its standing",
            )
        return tuple(result)

    def state(self) -> State:
        node = self.fields.node("state")
        fields = self.record(node, described.STATE) if node is not None else Fields(self.place)
        state = State(fields.text("is"), fields.text("since"), fields.text("successor"))
        if state.status == "withdrawn" and not state.successor:
            self.fault(
                fields.place,
                "card-without-successor",
                "a withdrawn card names its successor",
                expected="successor: the id of the card that replaces it, or `none`",
            )
        return state

    def check_points(self) -> tuple[CheckPoint, ...]:
        result = []
        for item in self.items("check points"):
            fields = self.record(item, described.CHECK_POINT)
            given = self._texts_of(fields.node("given"))
            gives_node = fields.node("gives")
            gives: dict[str, float] = {}
            if isinstance(gives_node, MappingNode):
                gives = {key.text: self.number(value, key.place) for key, value in gives_node.entries}
            within = self.number(fields.node("within"), fields.place)
            if within > LOOSEST or within < 0.0:
                self.fault(
                    fields.place_of("within"),
                    "check-point-loose",
                    "a check point that hardly any figure misses checks nothing",
                    found=f"{within:g}",
                    expected=f"a part of the figure, from 0 to {LOOSEST:g}",
                )
            result.append(
                CheckPoint(given, gives, within, fields.text("source"), fields.text("standing"), item.place)
            )
        return tuple(result)

    def _texts_of(self, node: Node | None) -> dict[str, str]:
        if not isinstance(node, MappingNode):
            return {}
        return {key.text: value.text for key, value in node.entries if isinstance(value, Scalar)}

    def needs(self, within: Fields | None = None) -> tuple[Need, ...]:
        result = []
        for key, value in self.entries("needs", within):
            if isinstance(value, Scalar):
                need = self._need(key, value.text, value.place, (), None)
            else:
                fields = self.record(value, described.NEED)
                options = fields.node("one of")
                words = (
                    tuple(item.text for item in options.items if isinstance(item, Scalar))
                    if isinstance(options, Sequence)
                    else ()
                )
                absent = fields.text("absent") if "absent" in fields else None
                need = self._need(key, fields.text("is"), value.place, words, absent)
            if need is not None:
                result.append(need)
        return tuple(result)

    def _need(
        self, key: Scalar, text: str, place: Place, one_of: tuple[str, ...], absent: str | None
    ) -> Need | None:
        name, _, where = text.partition(" at ")
        quantity = vocabulary().get(name.strip())
        if quantity is None:
            self.fault(
                place,
                "quantity-unknown",
                f"the vocabulary has no quantity `{shown(name)}`",
                found=shown(name),
                expected="a quantity of vocabulary.yaml, then ` at ` and one of " + ", ".join(PLACES),
                nearest=nearest_names(name, vocabulary()),
            )
            return None
        if where and where.strip() not in PLACES:
            self.fault(
                place,
                "place-unknown",
                f"properties cannot be taken at `{shown(where)}`",
                found=shown(where),
                expected=" | ".join(PLACES),
                nearest=nearest_names(where, PLACES),
            )
            return None
        return Need(key.text, quantity, where.strip(), key.place, one_of, absent)

    # -- method -------------------------------------------------------------------------------------

    def method(self, house: bool) -> Method:
        needs = self.needs()
        sources = self.sources()
        method = Method(
            id=self.id,
            title=self.fields.text("title"),
            gives=self.fields.text("gives"),
            closes_on=self.fields.text("closes on"),
            properties_at=self.fields.text("properties at"),
            needs=needs,
            constants=self._constants(),
            uses=self._uses(),
            tables=self._tables({need.symbol: need.one_of for need in needs}),
            lines=self._lines(),
            limits=self._limits(sources),
            accuracy=self._accuracy(),
            assumes=self.texts("assumes"),
            family=self.fields.text("family"),
            sources=sources,
            check_points=self.check_points(),
            state=self.state(),
            notes=self.texts("notes"),
            house=house,
            where=self.fields.place,
            serves=self._serves(house),
            digest_text=self._digest_text(
                (
                    "needs",
                    "constants",
                    "uses",
                    "tables",
                    "relations",
                    "limits",
                    "properties at",
                    "closes on",
                    "gives",
                    # That of a built-in card goes with the version of the program.
                    *(("accuracy",) if house else ()),
                )
            ),
        )
        if method.gives == "Nu" and not method.properties_at:
            self.fault(
                self.place,
                "key-missing",
                "a method that gives Nu says where its conductivity is taken",
                expected="properties at: bulk | film | surface",
            )
        if method.lines and method.lines[-1].symbol != method.gives:
            self.fault(
                method.lines[-1].where,
                "card-result-differs",
                "the last relation does not give the result",
                found=method.lines[-1].symbol,
                expected=method.gives,
            )
        return method

    def _constants(self) -> dict[str, tuple[float, str, tuple]]:
        result = {}
        for key, value in self.entries("constants"):
            if not isinstance(value, Scalar):
                self.fault(value.place, "value-not-text", "a constant is a figure with its unit")
                continue
            try:
                quantity = read_any(value.text)
                result[key.text] = (quantity.value, " ".join(value.text.split()), quantity.dimension)
            except QuantityFault as error:
                self.collector.take([error.at(value.place)])
        return result

    def _uses(self) -> tuple[Use, ...]:
        result = []
        for key, value in self.entries("uses"):
            if isinstance(value, Scalar):
                result.append(Use(key.text, value.text, {}, None, key.place))
                continue
            fields = self.record(value, described.USE)
            overrides = {}
            with_node = fields.node("with")
            if isinstance(with_node, MappingNode):
                for name, node in with_node.entries:
                    relation = self.relation(node) if isinstance(node, Scalar) else None
                    if relation is not None:
                        overrides[name.text] = relation
            condition = fields.scalar("counts when")
            counts = self.relation(condition) if condition is not None else None
            result.append(Use(key.text, fields.text("method"), overrides, counts, key.place))
        return tuple(result)

    def _tables(self, words: Mapping[str, tuple[str, ...]]) -> dict[str, Table]:
        result = {}
        for key, value in self.entries("tables"):
            fields = self.record(value, described.TABLE)
            by = self._texts_of(fields.node("by"))
            columns_node, rows_node = fields.node("columns"), fields.node("rows")
            if not isinstance(columns_node, Sequence) or not isinstance(rows_node, Sequence):
                continue
            columns = tuple(item.text for item in columns_node.items if isinstance(item, Scalar))
            texts = self._rows(rows_node, columns)
            for symbol, way in by.items():
                if way not in ("exact", "step", "linear", "log-log"):
                    self.fault(
                        fields.place_of("by"),
                        "choice-unknown",
                        f"a table is not found by `{shown(way)}`",
                        found=shown(way),
                        expected="exact | step | linear | log-log",
                    )
                wanted = ("from", "to") if way == "step" else (symbol,)
                for column in wanted:
                    if column not in columns:
                        self.fault(
                            columns_node.place,
                            "table-column-missing",
                            f"the table lacks the column `{column}`",
                            expected=", ".join(wanted),
                        )
            cells = self._cells(texts, columns, words, rows_node)
            result[key.text] = Table(key.text, by, fields.text("outside"), columns, cells, texts, key.place)
        return result

    def _rows(self, rows: Sequence, columns: tuple[str, ...]) -> tuple[tuple[str, ...], ...]:
        result = []
        for row in rows.items:
            if not isinstance(row, Sequence) or len(row.items) != len(columns):
                self.fault(
                    row.place,
                    "table-row-length",
                    "the row does not fit the columns",
                    expected=f"{len(columns)} figures: {', '.join(columns)}",
                )
                continue
            result.append(tuple(item.text for item in row.items if isinstance(item, Scalar)))
        return tuple(result)

    def _cells(
        self,
        texts: tuple[tuple[str, ...], ...],
        columns: tuple[str, ...],
        words: Mapping[str, tuple[str, ...]],
        rows: Sequence,
    ) -> np.ndarray:
        cells = np.full((len(texts), len(columns)), np.nan)
        for number, row in enumerate(texts):
            for index, text in enumerate(row):
                options = words.get(columns[index], ())
                try:
                    cells[number, index] = choice_number(text, options)
                except ValueError:
                    self.fault(
                        rows.items[number].place,
                        "number-unreadable",
                        "a cell of the table is no number",
                        found=shown(text),
                        expected="a number, or a word of the choice",
                    )
        return cells

    def _lines(self) -> tuple[Line, ...]:
        result: list[Line] = []
        for item in self.items("relations"):
            line = self._line(item)
            if line is not None:
                result.append(line)
        return tuple(result)

    def _line(self, item: Node) -> Line | None:
        if isinstance(item, Scalar):
            relation = self.relation(item, target=True)
            if relation is None or relation.target is None:
                return None
            return Assignment(relation.target, relation, item.place)
        if isinstance(item, MappingNode) and len(item.entries) == 1:
            key, value = item.entries[0]
            if key.text == "solve":
                return self._solve(self.record(value, described.SOLVE), item.place)
            if key.text == "sum":
                return self._sum(self.record(value, described.SUM), item.place)
        self.fault(
            item.place,
            "relation-syntax",
            "a line of `relations` is a relation, a solve or a sum",
            expected="`x = …`, `solve: {…}` or `sum: {…}`; quote a text that holds `: `",
        )
        return None

    def _solve(self, fields: Fields, place: Place) -> Solve | None:
        equation = self.relation(scalar) if (scalar := fields.scalar("equation")) is not None else None
        between = fields.node("between")
        if equation is None or not isinstance(between, Sequence) or len(between.items) != 2:
            self.fault(
                place, "solve-bounds", "a solve names two bounds and an equation", expected="between: [1, 30]"
            )
            return None
        bounds = tuple(self.number(item, item.place) for item in between.items)
        start = self.number(fields.node("start"), fields.place)
        node = fields.node("sum")
        inner = self._sum(self.record(node, described.SUM), node.place) if node is not None else None
        return Solve(fields.text("for"), (bounds[0], bounds[1]), start, equation, place, inner)

    def _sum(self, fields: Fields, place: Place) -> Sum | None:
        term = self.relation(scalar) if (scalar := fields.scalar("of")) is not None else None
        count = self.number(fields.node("terms"), fields.place)
        if term is None or not 1 <= count <= 10_000:
            self.fault(place, "sum-terms", "a sum has 1 to 10 000 terms and a relation")
            return None
        return Sum(fields.text("gives"), fields.text("over"), int(count), term, place)

    def _limits(self, sources: tuple[Source, ...]) -> tuple[Limit, ...]:
        result = []
        seen: set[str] = set()
        for item in self.items("limits"):
            fields = self.record(item, described.LIMIT)
            that = self.relation(scalar) if (scalar := fields.scalar("that")) is not None else None
            if that is None:
                continue
            name = fields.text("id")
            if name in seen:
                self.fault(fields.place_of("id"), "limit-twice", f"two limits are called `{shown(name)}`")
            seen.add(name)
            if not that.symbols:
                self.fault(
                    fields.place_of("that"),
                    "limit-without-symbol",
                    "a limit names at least one symbol",
                    found=shown(that.text),
                )
            cite, standing = self._limit_source(fields, sources)
            result.append(
                Limit(name, that, fields.text("level"), fields.text("because"), cite, standing, item.place)
            )
        return tuple(result)

    def _limit_source(self, fields: Fields, sources: tuple[Source, ...]) -> tuple[str, str]:
        text = fields.text("source")
        override = fields.text("standing")
        if text in STANDINGS:
            return text, override or text
        if text.isdigit() and 1 <= int(text) <= len(sources):
            source = sources[int(text) - 1]
            return source.cite, override or source.standing
        self.fault(
            fields.place_of("source"),
            "limit-source-unknown",
            "the limit's source is not among the sources",
            found=shown(text),
            expected=f"1 to {len(sources)}, `common practice` or `from memory`",
        )
        return text, override or "from memory"

    def _accuracy(self) -> Accuracy | None:
        node = self.fields.node("accuracy")
        if node is None:
            return None
        fields = self.record(node, described.ACCURACY)
        figures = [float(found) for found in SHARE.findall(fields.text("within"))]
        if "within" in fields and not any(figure > 0.0 for figure in figures):
            self.fault(
                fields.place_of("within"),
                "number-unreadable",
                "an accuracy is a part of the value, in per cent",
                found=shown(fields.text("within")),
                expected="a figure above zero, such as 20 % or 15 % mean",
            )
        return Accuracy(
            fields.text("within"), fields.text("coverage"), fields.text("stated by"), fields.text("standing")
        )

    # -- situation ----------------------------------------------------------------------------------

    def situation(self) -> Situation:
        flow_area = self.fields.scalar("flow area")
        length = self.fields.scalar("characteristic length")
        assert length is not None
        return Situation(
            id=self.id,
            title=self.fields.text("title"),
            shapes=self.texts("shape"),
            surfaces=self.texts("on"),
            flow=self.fields.text("flow"),
            needs=self.needs(),
            flow_area=self.relation(flow_area) if flow_area is not None else None,
            characteristic_length=self.relation(length) or parse_expression("1"),
            groups=self._groups(),
            choose=self._choices(),
            choose_at=self.fields.text("choose at"),
            methods=self.texts("methods"),
            assumes=self.texts("assumes"),
            sources=self.sources(),
            where=self.fields.place,
            digest_text=self._digest_text(
                (
                    "changes phase",
                    "needs",
                    "flow area",
                    "characteristic length",
                    "groups",
                    "choose",
                    "choose at",
                    "friction",
                )
            ),
            changes_phase=self.fields.text("changes phase"),
            friction=self._friction(),
        )

    def _serves(self, house: bool) -> tuple[str, ...]:
        """Situations that a book's own method is made for; a card of the library is listed in the situation itself."""
        if "serves" in self.fields and not house:
            self.fault(
                self.fields.place_of("serves"),
                "key-unknown",
                "only a book's own card says what it serves",
                found="serves",
                expected="the method in the list of the situation's card",
            )
        return self.texts("serves")

    def _friction(self) -> Friction | None:
        node = self.fields.node("friction")
        if node is None:
            return None
        fields = self.record(node, described.FRICTION)
        return Friction(
            self.needs(fields), self._groups(fields), self._choices(fields), fields.text("dp"), node.place
        )

    def _groups(self, within: Fields | None = None) -> tuple[Group, ...]:
        result = []
        for key, value in self.entries("groups", within):
            fields = self.record(value, described.GROUP)
            quantity = vocabulary().get(fields.text("is"))
            scalar = fields.scalar("relation")
            relation = self.relation(scalar) if scalar is not None else None
            if quantity is None:
                self.fault(
                    fields.place_of("is"),
                    "quantity-unknown",
                    "the vocabulary has no such quantity",
                    found=fields.text("is"),
                    nearest=nearest_names(fields.text("is"), vocabulary()),
                )
            elif relation is not None:
                result.append(Group(key.text, quantity, relation, key.place))
        return tuple(result)

    def _choices(self, within: Fields | None = None) -> tuple[Choice, ...]:
        result = []
        for item in self.items("choose", within):
            fields = self.record(item, described.CHOICE)
            scalar = fields.scalar("when")
            when = self.relation(scalar) if scalar is not None else None
            result.append(Choice(when, fields.text("use"), fields.text("because"), item.place))
        if result and result[-1].when is not None:
            self.fault(
                result[-1].where,
                "choice-without-end",
                "the last row of the choice table has no condition",
                expected="a last row without `when`",
            )
        return tuple(result)

    # -- material -----------------------------------------------------------------------------------

    def material(self, house: bool) -> Material:
        node = self.fields.node("table")
        table = self.record(node, described.MATERIAL_TABLE) if node is not None else Fields(self.place)
        temperatures = self._column(table, "T", "temperature")
        conductivities = self._column(table, "k", "wall conductivity")
        if len(temperatures) != len(conductivities):
            self.fault(
                table.place, "table-row-length", "the table has not as many conductivities as temperatures"
            )
        if np.any(np.diff(temperatures) <= 0):
            self.fault(table.place, "table-not-rising", "the temperatures do not rise")
        spread_node = self.fields.node("spread")
        spread = self.record(spread_node, described.SPREAD) if spread_node is not None else Fields(self.place)
        return Material(
            id=self.id,
            title=self.fields.text("title"),
            kind=self.fields.text("kind"),
            temperatures=temperatures,
            conductivities=conductivities,
            outside=self.fields.text("outside"),
            spread=spread.text("within"),
            spread_because=spread.text("because"),
            standing=self.fields.text("standing"),
            sources=self.sources(),
            check_points=self.check_points(),
            state=self.state(),
            notes=self.texts("notes"),
            house=house,
            where=self.fields.place,
            digest_text=self._digest_text(("table", "outside", *(("spread",) if house else ()))),
        )

    def _column(self, table: Fields, name: str, quantity: str) -> np.ndarray:
        node = table.node(name)
        values = []
        for item in node.items if isinstance(node, Sequence) else ():
            if not isinstance(item, Scalar):
                continue
            try:
                values.append(read_quantity(item.text, vocabulary()[quantity]).value)
            except QuantityFault as error:
                self.collector.take([error.at(item.place)])
        return np.array(values, dtype=float)

    def _digest_text(self, names: tuple[str, ...]) -> str:
        """What of a card decides numbers, as canonical text: relations, tables, constants, limits."""
        parts: dict[str, Any] = {name: plain(self.fields.node(name)) for name in names if name in self.fields}
        if "limits" in parts:
            # A limit that lacks one of these has its fault already.
            parts["limits"] = [
                {key: row[key] for key in ("id", "that", "level") if key in row}
                if isinstance(row, dict)
                else row
                for row in parts["limits"]
            ]
        return json.dumps(parts, sort_keys=True, ensure_ascii=False, separators=(",", ":"))


def plain(node: Node | None) -> object:
    """A node as lists, dictionaries and texts with white space collapsed, for digests."""
    if isinstance(node, MappingNode):
        return {key.text: plain(value) for key, value in node.entries}
    if isinstance(node, Sequence):
        return [plain(item) for item in node.items]
    return " ".join(node.text.split()) if node is not None else ""


def choice_number(text: str, options: tuple[str, ...]) -> float:
    """The number that stands for a text: the figure itself, or the place of a word in its choice."""
    if options and not is_number(options[0]):
        if text in options:
            return float(options.index(text))
        raise ValueError(text)
    return float(text)


def is_number(text: str) -> bool:
    """Whether a text is a figure and no word."""
    try:
        float(text)
    except ValueError:
        return False
    return True
