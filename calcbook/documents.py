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
from functools import lru_cache
from pathlib import Path
from typing import NamedTuple

import yaml

from calcbook.faults import Collector, Fault, Faults, Place, nearest_names, shown

MAXIMUM_BYTES = 2_000_000
MAXIMUM_DEPTH = 40
MAXIMUM_SYNTAX_FAULTS = 20
MENDED_UP_TO = 100_000  # characters: reading on after a fault of syntax reads the whole text again
KEPT_DOCUMENTS = 16  # settings are read for each file of a book, sign-offs at every save under watch


class _Loader(getattr(yaml, "CSafeLoader", yaml.SafeLoader)):  # type: ignore[misc]
    """The parser without its guessing: every scalar is a text, and no pattern of a number or date is tried."""

    def resolve(self, kind: type[yaml.Node], value: str | None, implicit: object) -> str:
        return "tag:yaml.org,2002:str"


class Scalar(NamedTuple):
    """One piece of text. ``style`` is plain, quoted or block; an absent value is an empty plain text."""

    text: str
    place: Place
    style: str = "plain"

    @property
    def is_empty(self) -> bool:
        return self.style == "plain" and not self.text

    def part(self, column: int, end_column: int) -> Place:
        """The place of the text's characters from ``column`` (1-based) up to ``end_column``.

        Where the text does not stand in its line as it was read (escapes, several lines), the whole place.
        """
        for quote in (0, 1):
            start = self.place.column - 1 + quote
            if self.text and self.place.excerpt[start : start + len(self.text)] == self.text:
                return self.place.part(quote + column - 1, end_column - column)
        return self.place


class Sequence(NamedTuple):
    """A list of nodes."""

    items: tuple[Node, ...]
    place: Place


class Mapping(NamedTuple):
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


class Document(NamedTuple):
    """A whole file: the name it is reported under, its text, and the tree."""

    name: str
    text: str
    root: Node


def read_file(path: Path, name: str | None = None, collector: Collector | None = None) -> Document:
    """Read a YAML file into a tree.

    ``name`` is how faults call the file (the path as given by default). Traps that leave a tree to speak
    of (a key written twice, a text cut short) go to ``collector`` where one is given.
    Raises ``Faults``: file-not-found, file-is-folder, file-unreadable, file-too-large, file-not-utf8,
    file-not-text, file-empty, yaml-syntax, yaml-several-documents, and without a collector the traps.
    """
    called = name if name is not None else path.as_posix()
    return read_text(_text_of(path, called), called, collector)


def read_text(text: str, name: str, collector: Collector | None = None) -> Document:
    """Read YAML text into a tree; raises ``Faults`` and fills ``collector`` as ``read_file`` does."""
    document, traps = _read(text, name)
    if collector is not None:
        collector.take(traps)
    elif traps:
        raise Faults(traps)
    return document


@lru_cache(maxsize=KEPT_DOCUMENTS)
def _read(text: str, name: str) -> tuple[Document, tuple[Fault, ...]]:
    """The tree of a text and the traps in it; raises ``Faults`` where there is no tree to speak of."""
    text = text.removeprefix("\ufeff").replace("\r\n", "\n").replace("\r", "\n")
    lines = text.split("\n")
    whole = Place(name, 1, 1, 1, lines[0])
    _refuse_characters(text, name, lines)
    if not text.strip():
        raise _single("file-empty", whole, "the file is empty", expected="one YAML mapping")
    nodes, faults = _composed(name, lines)
    if not nodes:
        raise Faults(
            [*faults, Fault("file-empty", whole, "the file holds only comments", "", "one YAML mapping")]
        )
    builder = _Builder(name, lines)
    builder.collector.take(faults)
    if len(nodes) > 1:
        dashes = next(
            number for number in range(nodes[1].start_mark.line, -1, -1) if lines[number].startswith("---")
        )
        place = Place(name, dashes + 1, 1, 4, lines[dashes])
        builder.collector.add(
            "yaml-several-documents",
            place,
            "the file holds more than one document",
            expected="one document, without a line of three dashes in it",
        )
        builder.collector.stop_if_any()
    root = builder.build(nodes[0], 0)
    return Document(name, text, root), tuple(builder.collector)


# Control characters, what YAML takes for the end of a line and no editor does, and the marks that turn
# the direction of writing: a reviewer would not see what the file says.
_FORBIDDEN = re.compile(
    "[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\u2028\u2029\u202a-\u202e\u2066-\u2069\ufeff\ufffe\uffff]"
)


def _refuse_characters(text: str, name: str, lines: list[str]) -> None:
    forbidden = _FORBIDDEN.search(text)
    if forbidden is None:
        return
    line = text.count("\n", 0, forbidden.start())
    column = forbidden.start() - text.rfind("\n", 0, forbidden.start())
    character = f"U+{ord(forbidden.group()):04X}"
    raise _single(
        "file-not-text",
        Place(name, line + 1, column, column + 1, lines[line]),
        f"the character {character} cannot be seen and stands in no text",
        found=character,
        expected="plain UTF-8 text; remove the character",
    )


def _compose(text: str) -> list[yaml.Node]:
    loader = _Loader(text)
    nodes: list[yaml.Node] = []
    try:
        while loader.check_node() and len(nodes) < 2:
            node = loader.get_node()
            assert node is not None  # check_node has seen one
            nodes.append(node)
    finally:
        loader.dispose()
    return nodes


def _composed(name: str, lines: list[str]) -> tuple[list[yaml.Node], list[Fault]]:
    """The documents of a text, and the faults of syntax that could be mended to read on.

    A mended text has the same characters at the same places, but for one: what follows keeps its columns.
    Raises ``Faults`` where nothing can be read on.
    """
    faults: list[Fault] = []
    text = list(lines)
    nodes, error = _attempt(text)
    small = sum(map(len, lines)) <= MENDED_UP_TO
    for _ in range(MAXIMUM_SYNTAX_FAULTS):
        if error is None:
            return nodes, faults
        for fault, mended in _suspects(error, name, lines, text):
            if mended is None or not small:
                raise Faults([*faults, fault])
            nodes, following = _attempt(mended)
            if following is None or _mark(following) > _mark(error):
                faults.append(fault)
                text, error = mended, following
                break
    raise Faults(faults)


def _attempt(lines: list[str]) -> tuple[list[yaml.Node], yaml.YAMLError | None]:
    try:
        return _compose("\n".join(lines)), None
    except yaml.YAMLError as error:
        return [], error


def _mark(error: yaml.YAMLError) -> tuple[int, int]:
    mark = getattr(error, "problem_mark", None) or getattr(error, "context_mark", None)
    return (mark.line, mark.column) if mark is not None else (0, 0)


def _text_of(path: Path, called: str) -> str:
    place = Place(called)
    if path.is_dir():
        raise _single("file-is-folder", place, "this is a folder, not a file", expected="a YAML file")
    if path.exists() and not path.is_file():
        raise _single("file-unreadable", place, "this is no regular file", expected="a readable YAML file")
    try:
        with path.open("rb") as stream:
            data = stream.read(MAXIMUM_BYTES + 1)
    except FileNotFoundError:
        beside = (
            [item.name for item in path.parent.glob("*.yaml") if item.exists()]
            if path.parent.is_dir()
            else []
        )
        near = nearest_names(path.name, sorted(beside))
        raise _single(
            "file-not-found", place, "there is no such file", expected="an existing YAML file", nearest=near
        ) from None
    except OSError as error:
        raise _single(
            "file-unreadable",
            place,
            "the file cannot be read",
            found=error.strerror or "",
            expected="a readable YAML file",
        ) from None
    if len(data) > MAXIMUM_BYTES:
        raise _single(
            "file-too-large",
            place,
            "the file is too large for a calculation",
            found="more than 2 MB",
            expected="at most 2 MB",
        )
    try:
        return data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        kind = "binary data" if b"\x00" in data[:4096] else f"byte 0x{data[error.start]:02X}"
        before = data[data.rfind(b"\n", 0, error.start) + 1 : error.start].decode("utf-8", "replace")
        raise _single(
            "file-not-utf8",
            Place(called, line, len(before) + 1),
            "the file is not UTF-8 text",
            found=kind,
            expected="UTF-8 text; save the file with that encoding",
        ) from None


def _single(
    code: str,
    place: Place,
    message: str,
    *,
    found: str = "",
    expected: str = "",
    nearest: tuple[str, ...] = (),
) -> Faults:
    return Faults([Fault(code, place, message, found, expected, nearest)])


_COMMENT = re.compile(r"(\s+)#(\S?)")


class _Builder:
    """Turns the parser's nodes into our tree and finds the traps that YAML accepts in silence."""

    def __init__(self, name: str, lines: list[str]):
        self.name = name
        self.lines = lines
        self.collector = Collector()
        self.seen: set[int] = set()

    def build(self, node: yaml.Node, depth: int, key: Place | None = None) -> Node:
        """A node of our tree; a mapping or list in lines of its own stands at its ``key``."""
        place = _place(node, self.name, self.lines)
        if id(node) in self.seen:
            self.collector.add(
                "yaml-alias",
                self._alias(place),
                "a YAML alias repeats an earlier part",
                found=f"what stands on line {place.line}",
                expected="the value itself, written out",
            )
            return Scalar("alias", place, "quoted")
        self.seen.add(id(node))
        self._look_for_mark(place)
        if depth > MAXIMUM_DEPTH:
            self.collector.add(
                "yaml-too-deep",
                place,
                "the file is nested too deeply",
                expected=f"at most {MAXIMUM_DEPTH} levels",
            )
            return Scalar("too deep", place, "quoted")
        if isinstance(node, yaml.ScalarNode):
            return self._scalar(node, place)
        assert isinstance(node, yaml.CollectionNode)
        if key is not None and not node.flow_style:
            place = key
        if isinstance(node, yaml.SequenceNode):
            return Sequence(tuple(self.build(item, depth + 1) for item in node.value), place)
        assert isinstance(node, yaml.MappingNode)
        return self._mapping(node, place, depth, key)

    def _alias(self, anchored: Place) -> Place:
        """Where the alias of a node stands: the parser gives the place of the anchor only."""
        name = re.match(r"&([\w-]+)", anchored.excerpt[anchored.column - 1 :])
        pattern = re.compile(rf"(?:^|[\s,\[{{])(\*{name.group(1)})(?![\w-])") if name is not None else None
        for number in range(anchored.line - 1, len(self.lines) if pattern is not None else 0):
            found = pattern.search(self.lines[number]) if pattern is not None else None
            if found is not None:
                return Place(self.name, number + 1, found.start(1) + 1, found.end(1) + 1, self.lines[number])
        return anchored

    def _look_for_mark(self, place: Place) -> None:
        first = place.excerpt[place.column - 1 : place.column]
        if first in ("&", "!"):
            kind = "anchor" if first == "&" else "tag"
            end = re.search(r"[\s,}\]]|$", place.excerpt[place.column - 1 :])
            assert end is not None
            where = place.part(0, end.start())
            self.collector.add(
                "yaml-alias",
                where,
                f"`{first}` starts a YAML {kind}, not a text",
                found=shown(place.excerpt[place.column - 1 :]),
                expected="the value in quotes, or without the mark",
            )

    def _scalar(self, node: yaml.ScalarNode, place: Place) -> Scalar:
        style = {"'": "quoted", '"': "quoted", "|": "block", ">": "block"}.get(node.style or "", "plain")
        cut = self._cut(node) if style == "plain" else None
        if cut is not None and not node.value:
            return Scalar(cut.excerpt[cut.column - 1 :].strip(), cut)
        hidden = _FORBIDDEN.search(node.value) if style == "quoted" else None
        if hidden is not None:
            self.collector.add(
                "file-not-text",
                place,
                f"the text holds the character U+{ord(hidden.group()):04X}, which cannot be seen",
                expected="plain text without such escapes",
            )
            return Scalar(_FORBIDDEN.sub("_", node.value), place, style)
        return Scalar(node.value, place, style)

    def _cut(self, node: yaml.ScalarNode) -> Place | None:
        """`drawing #12` loses its number: a comment that does not look like one is a fault."""
        line = self.lines[node.end_mark.line] if node.end_mark.line < len(self.lines) else ""
        rest = line[node.end_mark.column :]
        cut = _COMMENT.match(rest) if "#" in rest else None
        after_text = node.value and cut is not None and cut.group(1) == " "
        if cut is None or not (after_text or cut.group(2)) or rest.startswith(" # ---"):
            return None
        column = node.end_mark.column + len(cut.group(1)) + 1
        where = Place(self.name, node.end_mark.line + 1, column, len(line) + 1, line)
        self.collector.add(
            "comment-cuts-text",
            where,
            "` #` starts a comment and cuts the text short",
            found=shown(line[column - 1 :]),
            expected="the whole text in quotes, or two blanks before and one after the #",
        )
        return where

    def _mapping(self, node: yaml.MappingNode, place: Place, depth: int, own_key: Place | None) -> Mapping:
        entries: list[tuple[Scalar, Node]] = []
        first_line: dict[str, int] = {}
        for key_node, value_node in node.value:
            key = self.build(key_node, depth + 1)
            if not isinstance(key, Scalar):
                self.collector.add(
                    "key-not-text",
                    key.place,
                    "a key must be a text",
                    found="a list" if isinstance(key, Sequence) else "a mapping",
                    expected="a key such as `title`; a text that starts with { or [ in quotes",
                )
                continue
            value = self.build(value_node, depth + 1, key.place)
            if key.text in first_line:
                self.collector.add(
                    "key-twice",
                    key.place,
                    f"the key `{shown(key.text)}` is written twice",
                    found=f"first on line {first_line[key.text]}",
                    expected="each key once",
                )
                continue
            first_line[key.text] = key.place.line
            entries.append((key, value))
        if own_key is None and not node.flow_style and entries:
            place = entries[0][0].place
        return Mapping(tuple(entries), place, bool(node.flow_style))


def _place(node: yaml.Node, name: str, lines: list[str]) -> Place:
    start, end = node.start_mark, node.end_mark
    excerpt = lines[start.line] if start.line < len(lines) else ""
    stop = end.column + 1 if end.line == start.line else len(excerpt) + 1
    return Place(name, start.line + 1, start.column + 1, max(stop, start.column + 2), excerpt)


# --- faults of syntax -----------------------------------------------------------------------------


_Suspect = tuple[Fault, list[str] | None]


@dataclass(frozen=True, slots=True)
class _Stop:
    """Where the parser stopped: ``lines`` as typed, ``text`` with the faults before this one mended.

    ``line`` and ``column`` count from 0, ``begun`` is the line of what the parser was reading.
    """

    name: str
    lines: list[str]
    text: list[str]
    line: int
    column: int
    begun: int

    def place(self, number: int, start: int, end: int) -> Place:
        return Place(self.name, number + 1, start + 1, max(end, start + 1) + 1, self.lines[number])

    def mended(self, number: int, start: int, end: int, new: str) -> list[str]:
        line = self.text[number]
        return [*self.text[:number], line[:start] + new + line[end:], *self.text[number + 1 :]]


def _suspects(error: yaml.YAMLError, name: str, lines: list[str], text: list[str]) -> Iterator[_Suspect]:
    """What may be wrong, in our own words: a fault and the text mended, None where it cannot be mended.

    The last suspect cannot be mended.
    """
    line, column = _mark(error)
    line = min(line, len(lines) - 1)
    context = getattr(error, "context_mark", None)
    begun = min(context.line, len(lines) - 1) if context is not None else line
    stop = _Stop(name, lines, text, line, column, begun)
    yield from _cut_texts(stop)
    yield from _colons(stop)
    yield from _brackets(stop)
    yield from _signs(stop)
    yield from _open_brackets(stop)
    yield _unmended(stop, str(getattr(error, "problem", ""))), None


def _cut_texts(stop: _Stop) -> Iterator[_Suspect]:
    message = "` #` starts a comment inside { } and cuts the text short"
    for number, start in _comments_in_braces(stop.text, stop.line):
        line = stop.lines[number]
        place = stop.place(number, start, len(line))
        fault = Fault("comment-cuts-text", place, message, shown(line[start:]), "the text in quotes")
        yield fault, stop.mended(number, start, start + 1, "_")


def _colons(stop: _Stop) -> Iterator[_Suspect]:
    for number in dict.fromkeys((stop.line, stop.begun)):
        line = stop.text[number]
        block = re.search(r"^\s*(?:- )?[^\s#'\"{\[][^#'\"{\[]*?: +[^'\"{\[|>\s].*?(:)(?= |$)", line)
        found = [(block.start(1), len(line))] if block else []
        for start, end in (*found, *_colons_in_braces(line)):
            place = stop.place(number, start, start + 1)
            message = "`: ` inside a text starts a new key"
            # one text gives one fault, however many colons it has
            rest = re.sub(r":(?= |$)", ";", line[start:end])
            fault = Fault("colon-in-text", place, message, "", "the whole text in quotes")
            yield fault, stop.mended(number, start, end, rest)


def _brackets(stop: _Stop) -> Iterator[_Suspect]:
    line = stop.text[stop.line]
    inside = re.search(r"[:,{] *[^\s,:{}\[\]'\"][^,:{}\[\]]*(\[[^\[\]{}]*\]|\{[^\[\]{}]*\})", _unquoted(line))
    if inside is not None:
        start, end = inside.span(1)
        plain = re.sub("[,:]", ";", line[start + 1 : end - 1])
        place = stop.place(stop.line, start, end)
        fault = Fault("yaml-syntax", place, "brackets stand inside a text", "", "the whole text in quotes")
        yield fault, stop.mended(stop.line, start, end, f"({plain})")


def _signs(stop: _Stop) -> Iterator[_Suspect]:
    line, column = stop.text[stop.line], stop.column
    indent = line[: len(line) - len(line.lstrip())]
    if "\t" in indent:
        start = indent.index("\t")
        place = stop.place(stop.line, start, start + 1)
        yield Fault("yaml-tab", place, "a tab is used to indent", "", "blanks"), None
    sign = line[column : column + 1]
    place = stop.place(stop.line, column, column + 1)
    mended = stop.mended(stop.line, column, column + 1, "_")
    if sign == "*":
        yield (
            Fault("yaml-alias", place, "`*` starts a YAML alias, not a text", "", "the value in quotes"),
            mended,
        )
    elif sign and sign in "@`%":
        message = f"a text cannot start with `{sign}`"
        yield Fault("yaml-syntax", place, message, "", "the whole text in quotes"), mended


def _open_brackets(stop: _Stop) -> Iterator[_Suspect]:
    opened = _unclosed(stop.text, stop.line)
    if opened is None:
        return
    number, start = opened
    bracket, end = stop.text[number][start], len(stop.text[number])
    fault = Fault(
        "yaml-syntax",
        stop.place(number, start, start + 1),
        f"`{bracket}` is not closed, or a `: ` or comma inside it is not quoted",
        "",
        "`}` or `]` at the end, texts with brackets, `: ` or a comma in quotes",
    )
    yield fault, stop.mended(number, end, end, "}" if bracket == "{" else "]")
    yield fault, None


def _unmended(stop: _Stop, problem: str) -> Fault:
    """The fault of a text that cannot be read on."""
    source, line = stop.lines[stop.begun], stop.lines[stop.line]
    if "expected ':'" in problem and ":" not in source:
        place = stop.place(stop.begun, len(source) - len(source.lstrip()), len(source))
        message = "the line has no `: ` between key and value"
        return Fault("yaml-syntax", place, message, shown(source.strip()), "a line `key: value`")
    quote = next((mark for mark in ('"', "'") if source.count(mark) % 2), "")
    if "end of stream" in problem and quote:
        start = source.rindex(quote)
        return Fault(
            "yaml-syntax",
            stop.place(stop.begun, start, start + 1),
            f"the quote `{quote}` is not closed",
            "",
            "the same quote at the end of the text; a quote inside the text written twice",
        )
    spaces = len(line) - len(line.lstrip())
    deeper = "mapping values" in problem and ":" not in line[: stop.column]
    if line.strip() and (deeper or (stop.column == spaces and "expected" in problem)):
        return Fault(
            "yaml-syntax",
            stop.place(stop.line, spaces, len(line)),
            "the line does not fit the lines above: its indent, or what stands before it",
            "",
            "`key: value` lines of one mapping at one indent, in blanks",
        )
    return Fault(
        "yaml-syntax",
        stop.place(stop.line, stop.column, stop.column + 1),
        "the text is not YAML from here on",
        shown(line.strip()),
        "`key: value` lines, indented by blanks alike",
    )


def _unquoted(line: str) -> str:
    """A line with what stands in quotes blanked out, of the same length."""
    return re.sub(r"\"[^\"]*\"|(?<![\w'])'[^']*'", lambda quoted: " " * len(quoted.group()), line)


def _comments_in_braces(lines: list[str], last: int) -> Iterator[tuple[int, int]]:
    """Where a ` #` inside an open `{` stands, looking back from the line of the error."""
    for number in range(last, max(-1, last - 30), -1):
        line = _unquoted(lines[number])
        for match in re.finditer(r"(?<=\s)#", line):
            before = line[: match.start()]
            if before.count("{") > before.count("}"):
                yield number, match.start()


def _colons_in_braces(line: str) -> Iterator[tuple[int, int]]:
    """Where a second `: ` stands between two commas inside `{ }`, and where its text ends."""
    plain = _unquoted(line)
    opening = plain.find("{")
    seen = False
    for start in range(opening + 1 if opening >= 0 else len(plain), len(plain)):
        if plain[start] in ",{}[]":
            seen = False
        elif plain[start] == ":" and plain[start + 1 : start + 2] in (" ", ""):
            if seen:
                end = re.search(r"[,{}\[\]]|$", plain[start:])
                assert end is not None
                yield start, start + end.start()
            seen = True


def _unclosed(lines: list[str], last: int) -> tuple[int, int] | None:
    for number in range(last, max(-1, last - 30), -1):
        line = _unquoted(lines[number])
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
    ``of`` describes the mapping, or the items of the list.
    """

    name: str
    meaning: str
    kind: str = "prose"
    quantity: str = ""
    choices: tuple[str, ...] = ()
    required: bool = False
    of: Description | Callable[[], Description] | None = None
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

    Codes: mapping-expected, key-unknown, comma-starts-key, key-missing,
    value-missing, value-not-text, list-expected, choice-unknown, flag-unreadable.
    """
    if node is None or (isinstance(node, Scalar) and node.is_empty):
        fields = Fields(node.place if node is not None else place)
        _report_missing(fields, description, collector)
        return fields
    if not isinstance(node, Mapping):
        collector.add(
            "mapping-expected",
            node.place,
            f"{description.name} must be a mapping",
            found="a list" if isinstance(node, Sequence) else shown(node.text),
            expected=_key_list(description),
        )
        return Fields(node.place)
    fields = Fields(node.place)
    for key, value in node.entries:
        known = description.key(key.text) or description.free
        if known is None:
            _report_unknown(node, key, value, description, collector)
        elif _shape_holds(key, value, known, collector):
            fields.nodes[key.text] = value
            fields.key_places[key.text] = key.place
    # a mistyped key is told as such, not as missing too
    written = {key.text for key, _ in node.entries}
    meant = {
        name
        for key in written - set(description.names())
        for name in nearest_names(key, description.names(), 1)
    }
    _report_missing(fields, description, collector, written | meant)
    return fields


def _report_unknown(
    node: Mapping, key: Scalar, value: Node, description: Description, collector: Collector
) -> None:
    if node.in_braces and isinstance(value, Scalar) and value.is_empty:
        before = _before(node, key)
        if before is not None and re.fullmatch(r"[-+]?\d+", before.text) and key.text[:1].isdigit():
            written = f"{before.text},{key.text}"
            place = before.place.part(0, key.place.end_column - before.place.column)
            collector.add(
                "number-decimal-comma",
                place,
                f"`{shown(written)}` has a decimal comma",
                found=shown(written),
                expected=f"a decimal point: {shown(written.replace(',', '.', 1))}",
            )
            return
        collector.add(
            "comma-starts-key",
            key.place,
            f"the comma starts a new key `{shown(key.text)}`",
            expected="the text before it in quotes, if the comma belongs to the text",
        )
        return
    collector.add(
        "key-unknown",
        key.place,
        f"{description.name} has no key `{shown(key.text)}`",
        found=shown(key.text),
        expected=_key_list(description),
        nearest=nearest_names(key.text, description.names()),
    )


def _before(node: Mapping, key: Scalar) -> Scalar | None:
    """The value that stands right before a key, on its line."""
    for (_, value), (following, _) in zip(node.entries, node.entries[1:], strict=False):
        if following is key and isinstance(value, Scalar) and value.place.line == key.place.line:
            return value
    return None


def _report_missing(
    fields: Fields, description: Description, collector: Collector, written: set[str] | None = None
) -> None:
    for key in description.keys:
        if key.required and key.name not in fields and key.name not in (written or set()):
            collector.add(
                "key-missing",
                fields.place,
                f"{description.name} lacks the key `{key.name}`",
                expected=f"{key.name}: {key.meaning}",
            )


def _shape_holds(key: Scalar, value: Node, known: Key, collector: Collector) -> bool:
    """Whether a value has the shape its key asks for; what its text means is the reader's business."""
    name = key.text
    if known.kind == "mapping" and not known.required and isinstance(value, Scalar) and value.is_empty:
        return False  # a heading without lines: as if it were absent
    if isinstance(value, Scalar) and not value.text.strip() and (known.required or known.kind != "prose"):
        # a source or a meaning may be left empty: an open item, no fault
        collector.add("value-missing", key.place, f"`{name}` has no value", expected=known.meaning)
        return False
    if known.kind == "node":
        return True
    if known.kind == "mapping":
        if isinstance(value, Mapping):
            return True
        collector.add(
            "mapping-expected",
            value.place,
            f"`{name}` must be a mapping",
            found="a list" if isinstance(value, Sequence) else shown(value.text),
            expected=_keys_of(known),
        )
        return False
    if known.kind == "list":
        if isinstance(value, Sequence):
            return True
        collector.add(
            "list-expected",
            value.place,
            f"`{name}` must be a list",
            found="a mapping" if isinstance(value, Mapping) else shown(value.text),
            expected=f"lines that start with a hyphen: {known.meaning}",
        )
        return False
    if not isinstance(value, Scalar):
        collector.add(
            "value-not-text",
            value.place,
            f"`{name}` must be a single value",
            found="a mapping" if isinstance(value, Mapping) else "a list",
            expected=" | ".join(known.choices) or known.meaning,
        )
        return False
    if known.kind == "choice" and value.text not in known.choices:
        collector.add(
            "choice-unknown",
            value.place,
            f"`{name}` cannot be `{shown(value.text)}`",
            found=shown(value.text),
            expected=" | ".join(known.choices),
            nearest=nearest_names(value.text, known.choices),
        )
        return False
    if known.kind == "flag" and value.text not in ("yes", "no", "true", "false"):
        collector.add(
            "flag-unreadable",
            value.place,
            f"`{name}` is answered by yes or no",
            found=shown(value.text),
            expected="yes | no",
        )
        return False
    return True


def _keys_of(key: Key) -> str:
    described = key.described()
    return f"key: value lines ({_key_list(described) if described is not None else key.meaning})"


def _key_list(description: Description) -> str:
    names = [key.name for key in description.keys]
    if description.free is not None:
        names.append(description.free.meaning)
    return ", ".join(names)
