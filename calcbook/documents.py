"""The one YAML reader: text to a tree in which every key and value knows its place.

All scalars stay text (no guessing of numbers, dates or truth values); the field they stand in gives
them meaning. Described mappings check shape, unknown keys, missing keys and choices against one
declarative description, which also makes the documentation and the JSON Schema.

May import: PyYAML, ``faults``. Must never: know what a calculation or a card is, convert a unit.
Only this module reads YAML. The parser's own messages are never printed.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

import yaml

from calcbook.faults import Collector, Fault, Faults, Place, nearest_names, shown

MAXIMUM_BYTES = 2_000_000
MAXIMUM_DEPTH = 40
_LOADER = getattr(yaml, "CSafeLoader", yaml.SafeLoader)


@dataclass(frozen=True, slots=True)
class Scalar:
    """One piece of text. ``style`` is plain, quoted or block; an absent value is an empty plain text."""

    text: str
    place: Place
    style: str = "plain"

    @property
    def is_empty(self) -> bool:
        return self.style == "plain" and not self.text


@dataclass(frozen=True, slots=True)
class Sequence:
    """A list of nodes."""

    items: tuple[Node, ...]
    place: Place


@dataclass(frozen=True, slots=True)
class Mapping:
    """Keys with values in the order written; ``in_braces`` when written as ``{ }``."""

    entries: tuple[tuple[Scalar, Node], ...]
    place: Place
    in_braces: bool = False

    def get(self, name: str) -> Node | None:
        """The value of a key, or None."""
        for key, value in self.entries:
            if key.text == name:
                return value
        return None

    def key(self, name: str) -> Scalar | None:
        """The key itself with its place, or None."""
        for key, _ in self.entries:
            if key.text == name:
                return key
        return None


Node = Scalar | Sequence | Mapping


@dataclass(frozen=True, slots=True)
class Document:
    """A whole file: the name it is reported under, its text, and the tree."""

    name: str
    text: str
    root: Node


def read_file(path: Path, name: str | None = None) -> Document:
    """Read a YAML file into a tree.

    ``name`` is how faults call the file (the path as given by default).
    Raises ``Faults``: file-unreadable, file-too-large, file-not-utf8, file-empty, yaml-syntax,
    key-twice, yaml-alias, and the traps of text in YAML (comment-cuts-text, colon-in-text).
    """
    called = name if name is not None else path.as_posix()
    return read_text(_text_of(path, called), called)


def read_text(text: str, name: str) -> Document:
    """Read YAML text into a tree; raises ``Faults`` as ``read_file`` does."""
    text = text.removeprefix("\ufeff").replace("\r\n", "\n")
    lines = text.split("\n")
    whole = Place(name, 1, 1, 1, lines[0] if lines else "")
    forbidden = re.search(r"[\x00-\x08\x0b\x0c\x0e-\x1f\x7f\ufffe\uffff]", text)
    if forbidden:
        line = text.count("\n", 0, forbidden.start())
        column = forbidden.start() - text.rfind("\n", 0, forbidden.start())
        place = Place(name, line + 1, column, column + 1, lines[line])
        raise _single("file-not-text", place, "the file holds a character that no text holds",
                      found=f"U+{ord(forbidden.group()):04X}", expected="plain UTF-8 text")
    if not text.strip():
        raise _single("file-empty", whole, "the file is empty", expected="one YAML mapping")
    try:
        nodes = _compose(text)
    except RecursionError:
        raise _single("yaml-too-deep", whole, "the file is nested too deeply",
                      expected=f"at most {MAXIMUM_DEPTH} levels") from None
    except yaml.YAMLError as error:
        raise Faults([_syntax_fault(error, name, lines)]) from None
    if not nodes:
        raise _single("file-empty", whole, "the file holds only comments", expected="one YAML mapping")
    if len(nodes) > 1:
        place = _place(nodes[1], name, lines)
        raise _single("yaml-several-documents", place, "the file holds more than one document",
                      expected="one document, without a line of three dashes in it")
    builder = _Builder(name, lines)
    root = builder.build(nodes[0], 0)
    builder.collector.stop_if_any()
    return Document(name, text, root)


def _compose(text: str) -> list[yaml.Node]:
    loader = _LOADER(text)
    nodes: list[yaml.Node] = []
    try:
        while loader.check_node() and len(nodes) < 2:
            nodes.append(loader.get_node())
    finally:
        loader.dispose()
    return nodes


def _text_of(path: Path, called: str) -> str:
    place = Place(called)
    if path.is_dir():
        raise _single("file-is-folder", place, "this is a folder, not a file", expected="a YAML file")
    try:
        with path.open("rb") as stream:
            data = stream.read(MAXIMUM_BYTES + 1)
    except FileNotFoundError:
        beside = [item.name for item in path.parent.glob("*.yaml")] if path.parent.is_dir() else []
        near = nearest_names(path.name, sorted(beside))
        raise _single("file-not-found", place, "there is no such file", expected="an existing YAML file",
                      nearest=near) from None
    except OSError as error:
        raise _single("file-unreadable", place, "the file cannot be read",
                      found=error.strerror or "", expected="a readable YAML file") from None
    if len(data) > MAXIMUM_BYTES:
        raise _single("file-too-large", place, "the file is too large for a calculation",
                      found="more than 2 MB", expected="at most 2 MB")
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        kind = "binary data" if b"\x00" in data[:4096] else f"byte 0x{data[error.start]:02X}"
        raise _single("file-not-utf8", Place(called, line), "the file is not UTF-8 text",
                      found=kind, expected="UTF-8 text; save the file with that encoding") from None


def _single(code: str, place: Place, message: str, *, found: str = "", expected: str = "",
            nearest: tuple[str, ...] = ()) -> Faults:
    return Faults([Fault(code, place, message, found, expected, nearest)])


class _Builder:
    """Turns the parser's nodes into our tree and finds the traps that YAML accepts in silence."""

    def __init__(self, name: str, lines: list[str]):
        self.name = name
        self.lines = lines
        self.collector = Collector()
        self.seen: set[int] = set()

    def build(self, node: yaml.Node, depth: int) -> Node:
        place = _place(node, self.name, self.lines)
        if id(node) in self.seen:
            self.collector.add("yaml-alias", place, "a YAML alias repeats an earlier part",
                               expected="the value itself, written out")
            return Scalar("", place)
        self.seen.add(id(node))
        first = place.excerpt[place.column - 1 : place.column]
        if first in ("&", "!"):
            kind = "anchor" if first == "&" else "tag"
            self.collector.add("yaml-alias", place, f"`{first}` starts a YAML {kind}, not a text",
                               found=shown(place.excerpt[place.column - 1 :]),
                               expected="the value in quotes, or without the mark")
        if depth > MAXIMUM_DEPTH:
            self.collector.add("yaml-too-deep", place, "the file is nested too deeply",
                               expected=f"at most {MAXIMUM_DEPTH} levels")
            return Scalar("", place)
        if isinstance(node, yaml.ScalarNode):
            return self._scalar(node, place)
        if isinstance(node, yaml.SequenceNode):
            return Sequence(tuple(self.build(item, depth + 1) for item in node.value), place)
        return self._mapping(node, place, depth)

    def _scalar(self, node: yaml.ScalarNode, place: Place) -> Scalar:
        style = {"'": "quoted", '"': "quoted", "|": "block", ">": "block"}.get(node.style or "", "plain")
        if style == "plain" and node.value:
            self._look_for_cut(node, place)
        return Scalar(node.value, place, style)

    def _look_for_cut(self, node: yaml.ScalarNode, place: Place) -> None:
        """`drawing #12` loses its number: a comment that does not look like one is a fault."""
        line = self.lines[node.end_mark.line] if node.end_mark.line < len(self.lines) else ""
        rest = line[node.end_mark.column :]
        cut = re.match(r"(\s+)#(\S?)", rest)
        if cut and (cut.group(1) == " " or cut.group(2)) and not rest.startswith(("  # ", " # ---")):
            column = node.end_mark.column + len(cut.group(1)) + 1
            where = Place(self.name, node.end_mark.line + 1, column, len(line) + 1, line)
            self.collector.add("comment-cuts-text", where, "` #` starts a comment and cuts the text short",
                               found=shown(node.value),
                               expected="the whole text in quotes, or two blanks before and one after the #")

    def _mapping(self, node: yaml.MappingNode, place: Place, depth: int) -> Mapping:
        entries: list[tuple[Scalar, Node]] = []
        first_line: dict[str, int] = {}
        for key_node, value_node in node.value:
            key = self.build(key_node, depth + 1)
            if not isinstance(key, Scalar):
                self.collector.add("key-not-text", key.place, "a key must be a text",
                                   expected="a key such as `title`")
                continue
            if key.text in first_line:
                self.collector.add("key-twice", key.place, f"the key `{shown(key.text)}` is written twice",
                                   found=f"first on line {first_line[key.text]}", expected="each key once")
                continue
            first_line[key.text] = key.place.line
            entries.append((key, self.build(value_node, depth + 1)))
        return Mapping(tuple(entries), place, bool(node.flow_style))


def _place(node: yaml.Node, name: str, lines: list[str]) -> Place:
    start, end = node.start_mark, node.end_mark
    excerpt = lines[start.line] if start.line < len(lines) else ""
    stop = end.column + 1 if end.line == start.line else len(excerpt) + 1
    return Place(name, start.line + 1, start.column + 1, max(stop, start.column + 2), excerpt)


def _syntax_fault(error: yaml.YAMLError, name: str, lines: list[str]) -> Fault:
    """Our own words for the commonest ways in which YAML text goes wrong."""
    mark = getattr(error, "problem_mark", None)
    line = min(mark.line, len(lines) - 1) if mark else 0
    column = mark.column if mark else 0
    excerpt = lines[line]
    place = Place(name, line + 1, column + 1, column + 2, excerpt)
    cut = _comment_in_braces(lines, line)
    if cut is not None:
        return Fault("comment-cuts-text", Place(name, cut[0] + 1, cut[1] + 1, len(lines[cut[0]]) + 1, lines[cut[0]]),
                     "` #` starts a comment inside { } and cuts the text short",
                     shown(lines[cut[0]][cut[1] :]), "the text in quotes")
    colon = re.search(r"^\s*(?:- )?[^\s#'\"{\[][^#'\"{\[]*?: +[^'\"{\[|>].*?(: )", excerpt)
    if colon:
        return Fault("colon-in-text", Place(name, line + 1, colon.start(1) + 1, colon.end(1), excerpt),
                     "`: ` inside a text starts a new key",
                     shown(excerpt.strip()), "the whole text in quotes")
    if "\t" in excerpt[: len(excerpt) - len(excerpt.lstrip())]:
        return Fault("yaml-tab", place, "a tab is used to indent", "", "blanks")
    if excerpt[column : column + 1] == "*":
        return Fault("yaml-alias", place, "`*` starts a YAML alias, not a text", "", "the value in quotes")
    opened = _unclosed(lines, line)
    if opened is not None:
        bracket = lines[opened[0]][opened[1]]
        return Fault("yaml-syntax", Place(name, opened[0] + 1, opened[1] + 1, opened[1] + 2, lines[opened[0]]),
                     f"`{bracket}` is not closed, or a `: ` or comma inside it is not quoted", "",
                     "`}` or `]` at the end, texts with `: ` or a comma in quotes")
    return Fault("yaml-syntax", place, "the text is not YAML from here on",
                 shown(excerpt.strip()), "`key: value` lines, indented by blanks alike")


def _comment_in_braces(lines: list[str], last: int) -> tuple[int, int] | None:
    """Where a ` #` inside an open `{` stands, looking back from the line of the error."""
    for number in range(last, max(-1, last - 30), -1):
        line = lines[number]
        for match in re.finditer(r" #", line):
            before = line[: match.start()]
            if before.count("{") > before.count("}") and before.count('"') % 2 == 0 and before.count("'") % 2 == 0:
                return number, match.start() + 1
    return None


def _unclosed(lines: list[str], last: int) -> tuple[int, int] | None:
    for number in range(last, max(-1, last - 30), -1):
        line = re.sub(r"\"[^\"]*\"|'[^']*'", lambda quoted: " " * len(quoted.group()), lines[number])
        for bracket, closing in (("{", "}"), ("[", "]")):
            if line.count(bracket) > line.count(closing):
                return number, line.rfind(bracket)
    return None


# --- described mappings ---------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Key:
    """One key of a described mapping.

    ``kind``: prose (needs words), name, quantity, relation, choice, flag (yes/no), date, number,
    mapping, list, node (checked by its reader). ``quantity`` names the vocabulary entry of a quantity.
    ``of`` describes the mapping, or the items of the list. ``later`` marks what is not yet available.
    """

    name: str
    meaning: str
    kind: str = "prose"
    quantity: str = ""
    choices: tuple[str, ...] = ()
    required: bool = False
    of: Description | Callable[[], Description] | None = None
    later: bool = False
    example: str = ""

    def described(self) -> Description | None:
        """The description of the mapping or of the list's items, if there is one."""
        return self.of() if callable(self.of) else self.of


@dataclass(frozen=True, slots=True)
class Description:
    """One mapping of a file: its keys, or the kind of key that the engineer names himself (``free``)."""

    name: str
    meaning: str
    keys: tuple[Key, ...] = ()
    free: Key | None = None

    def names(self) -> tuple[str, ...]:
        return tuple(key.name for key in self.keys)

    def key(self, name: str) -> Key | None:
        for key in self.keys:
            if key.name == name:
                return key
        return None


@dataclass(frozen=True, slots=True)
class Fields:
    """A checked mapping: known keys to nodes, with the place of the whole for what is missing."""

    place: Place
    nodes: dict[str, Node] = field(default_factory=dict)
    key_places: dict[str, Place] = field(default_factory=dict)

    def __contains__(self, name: str) -> bool:
        return name in self.nodes

    def __iter__(self) -> Iterator[str]:
        return iter(self.nodes)

    def node(self, name: str) -> Node | None:
        return self.nodes.get(name)

    def scalar(self, name: str) -> Scalar | None:
        """The text of a key, or None when it is absent or no text."""
        node = self.nodes.get(name)
        return node if isinstance(node, Scalar) else None

    def text(self, name: str, default: str = "") -> str:
        """The text of a key with white space collapsed, or the default."""
        node = self.scalar(name)
        return " ".join(node.text.split()) if node is not None else default

    def place_of(self, name: str) -> Place:
        node = self.nodes.get(name)
        return node.place if node is not None else self.place


def read_mapping(node: Node | None, description: Description, collector: Collector, place: Place) -> Fields:
    """Check a node against a description and return its known keys; faults go to the collector.

    Codes: mapping-expected, key-unknown, comma-starts-key, key-missing, key-not-yet-available,
    value-missing, value-not-text, list-expected, choice-unknown, flag-unreadable.
    """
    if node is None or (isinstance(node, Scalar) and node.is_empty):
        fields = Fields(node.place if node is not None else place)
        _report_missing(fields, description, collector)
        return fields
    if not isinstance(node, Mapping):
        collector.add("mapping-expected", node.place, f"{description.name} must be a mapping",
                      found="a list" if isinstance(node, Sequence) else shown(node.text),
                      expected=_key_list(description))
        return Fields(node.place)
    fields = Fields(node.place)
    for key, value in node.entries:
        known = description.key(key.text) or description.free
        if known is None:
            _report_unknown(node, key, value, description, collector)
        elif known.later:
            collector.add("key-not-yet-available", key.place, f"`{key.text}` is not yet available in this version",
                          expected="a calculation without it")
        elif _shape_holds(key, value, known, collector):
            fields.nodes[key.text] = value
            fields.key_places[key.text] = key.place
    _report_missing(fields, description, collector, set(key.text for key, _ in node.entries))
    return fields


def _report_unknown(node: Mapping, key: Scalar, value: Node, description: Description, collector: Collector) -> None:
    if node.in_braces and isinstance(value, Scalar) and value.is_empty:
        collector.add("comma-starts-key", key.place, f"the comma starts a new key `{shown(key.text)}`",
                      expected="the text before it in quotes, if the comma belongs to the text")
        return
    collector.add("key-unknown", key.place, f"{description.name} has no key `{shown(key.text)}`",
                  found=shown(key.text), expected=_key_list(description),
                  nearest=nearest_names(key.text, description.names()))


def _report_missing(fields: Fields, description: Description, collector: Collector,
                    written: set[str] | None = None) -> None:
    for key in description.keys:
        if key.required and key.name not in fields and key.name not in (written or set()):
            collector.add("key-missing", fields.place, f"{description.name} lacks the key `{key.name}`",
                          expected=f"{key.name}: {key.meaning}")


def _shape_holds(key: Scalar, value: Node, known: Key, collector: Collector) -> bool:
    """Whether a value has the shape its key asks for; what its text means is the reader's business."""
    name = key.text
    if isinstance(value, Scalar) and value.is_empty and known.kind not in ("mapping", "node"):
        collector.add("value-missing", key.place, f"`{name}` has no value", expected=known.meaning)
        return False
    if known.kind == "node" or known.kind == "mapping":
        return True
    if known.kind == "list":
        if isinstance(value, Sequence):
            return True
        collector.add("list-expected", value.place, f"`{name}` must be a list", expected=known.meaning)
        return False
    if not isinstance(value, Scalar):
        collector.add("value-not-text", value.place, f"`{name}` must be a single value",
                      found="a mapping" if isinstance(value, Mapping) else "a list", expected=known.meaning)
        return False
    if known.kind == "choice" and value.text not in known.choices:
        collector.add("choice-unknown", value.place, f"`{name}` cannot be `{shown(value.text)}`",
                      found=shown(value.text), expected=" | ".join(known.choices),
                      nearest=nearest_names(value.text, known.choices))
        return False
    if known.kind == "flag" and value.text not in ("yes", "no", "true", "false"):
        collector.add("flag-unreadable", value.place, f"`{name}` is answered by yes or no",
                      found=shown(value.text), expected="yes | no")
        return False
    return True


def _key_list(description: Description) -> str:
    names = list(description.names())
    if description.free is not None:
        names.append(description.free.meaning)
    return ", ".join(names)
