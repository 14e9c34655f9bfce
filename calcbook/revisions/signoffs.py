"""Sign-offs: who signed what, when and how, beside the calculation and bound to what was signed."""

from __future__ import annotations

import datetime
import hashlib
import json
import re
import unicodedata
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import NamedTuple

from calcbook.calcfile import Settings
from calcbook.chain.outcome import Solved
from calcbook.documents import Mapping as MappingNode
from calcbook.documents import Node, Scalar, Sequence, read_file
from calcbook.faults import Fault, Faults, Place, nearest_names, shown
from calcbook.files import write_whole
from calcbook.record.digest import Digest, digest_of, displayed
from calcbook.record.software import Software, software_of

PREPARED, CHECKED, APPROVED = "prepared", "checked", "approved"
PARTS = ("meaning", "cards", "results")
SHORT = 12  # hexadecimal digits by which a part of the content is told from another
NAMED_CHANGES = 6
HEADLINES = ("U_service", "U_clean")
HEAD = """\
# Sign-offs of a calculation, written by calcbook. They stand beside the file, so that signing changes nothing
# that is signed. Each is bound to the meaning of the file, the cards used and the displayed results; `bound`
# shows that nobody altered the entry. The program shows neither identity nor competence.
"""

Data = dict[str, object]


def today() -> datetime.date:
    """Today, asked only to refuse a date that lies in the future."""
    return datetime.date.today()


def lies_ahead(date: str) -> bool:
    """Whether a date (YYYY-MM-DD) lies in the future."""
    return date > today().isoformat()


# --- what was signed -------------------------------------------------------------------------------


class Content(NamedTuple):
    """What a sign-off is bound to: the digests, the software, and marks of the parts, to name what changed.

    ``meaning``, ``cards`` and ``results`` hold short digests by the name of a part; ``headlines`` the
    displayed overall coefficients.
    """

    digest: Digest
    software: Software
    meaning: Mapping[str, str]
    cards: Mapping[str, str]
    results: Mapping[str, str]
    headlines: Mapping[str, str]


def content_of(solved: Solved) -> Content:
    """The content of a solved calculation."""
    digest = digest_of(solved)
    calculation = solved.chain.calculation
    shown_results = displayed(solved)
    return Content(
        digest,
        software_of(digest),
        {**_parts(calculation.meaning, ""), **_parts(calculation.settings.plain or {}, "book / ")},
        {name: _mark(text) for name, text in solved.cards.items()},
        _grouped(shown_results),
        {name: entry[0] for name in HEADLINES if (entry := shown_results.get(f"result {name}"))},
    )


def _mark(content: object) -> str:
    text = json.dumps(content, ensure_ascii=False, sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()[:SHORT]


def _parts(meaning: object, prefix: str) -> dict[str, str]:
    """Marks by the two uppermost keys; a list entry is called by its name where it has one."""
    if not isinstance(meaning, dict):
        return {}
    found: dict[str, str] = {}
    for key, value in meaning.items():
        if isinstance(value, dict):
            found |= {f"{prefix}{key} / {name}": _mark(part) for name, part in value.items()}
        elif isinstance(value, list):
            for place, item in enumerate(value, 1):
                own = (
                    item.get("name") or item.get("check") or item.get("revision")
                    if isinstance(item, dict)
                    else None
                )
                found[f"{prefix}{key} / {own if isinstance(own, str) else place}"] = _mark([place, item])
        else:
            found[f"{prefix}{key}"] = _mark(value)
    return found


def _grouped(results: Mapping[str, list[str]]) -> dict[str, str]:
    """Marks of the displayed results by kind and term, such as `step tube wall`, with the case before."""
    groups: dict[str, list[object]] = {}
    for name, text in sorted(results.items()):
        groups.setdefault(_group(name), []).append([name, text])
    return {name: _mark(rows) for name, rows in groups.items()}


def _group(name: str) -> str:
    case, bar, rest = name.partition(" / ") if name.startswith("case ") else ("", "", name)
    kind, _, owner = rest.partition(" ")
    if kind == "result":
        group = f"{kind} {owner}"
    elif kind in ("step", "check"):
        group = f"{kind} {owner.partition('/')[0].strip()}"
    else:
        group = "criteria" if kind == "criterion" else kind
    return f"{case} / {group}" if bar else group


def changed_since(then: Content, now: Content) -> tuple[str, ...]:
    """What changed between two contents, one sentence per part; empty where every digest is the same.

    A change of displayed results under the same meaning and the same cards is laid to the software.
    """
    sentences = []
    for part in ("meaning", "cards"):
        if getattr(then.digest, part) != getattr(now.digest, part):
            sentences.append(f"{part} changed: {_differences(getattr(then, part), getattr(now, part))}")
    if then.digest.results != now.digest.results:
        by_software = "" if sentences else f" by the software ({_software_step(then.software, now.software)})"
        sentences.append(f"results changed{by_software}: {_results_changed(then, now)}")
    return tuple(sentences)


def _results_changed(then: Content, now: Content) -> str:
    moved = [
        f"{name} {then.headlines[name]} then, {text} now"
        for name, text in now.headlines.items()
        if name in then.headlines and then.headlines[name] != text
    ]
    return "; ".join(moved) if moved else _differences(then.results, now.results)


def _differences(then: Mapping[str, str], now: Mapping[str, str]) -> str:
    names = [name for name in then if now.get(name, "") != then[name]] + [
        name for name in now if name not in then
    ]
    named = [
        f"{name}{'' if name in now and name in then else ' added' if name in now else ' removed'}"
        for name in names[:NAMED_CHANGES]
    ]
    more = len(names) - len(named)
    return (
        ", ".join(named) + (f" and {more} more" if more > 0 else "")
        if named
        else "in its order or layout of parts"
    )


def _software_step(then: Software, now: Software) -> str:
    if software_changed(then, now):
        return software_changed(then, now)
    return "the versions are the same: another machine, or a file beside the calculation"


def software_changed(then: Software, now: Software) -> str:
    """The versions that differ, as words; empty where they are the same."""
    pairs = (("calcbook", then.calcbook, now.calcbook), ("CoolProp", then.coolprop, now.coolprop))
    return ", ".join(f"{name} {old} then, {new} now" for name, old, new in pairs if old != new)


# --- a sign-off -------------------------------------------------------------------------------------


class Answer(NamedTuple):
    """The checker's words to one question that only a person can answer."""

    number: str
    question: str
    answer: str


# The word of one who accepts what the runner decided without a remark.
ACKNOWLEDGED = "acknowledged"


class Acknowledged(NamedTuple):
    """An assumption that the runner made, with the checker's acknowledgement."""

    id: str
    text: str
    words: str


class HandValue(NamedTuple):
    """A value found by hand; ``shown`` and ``deviation`` are empty until it is revealed."""

    result: str
    value: str
    shown: str = ""
    deviation: str = ""


class HandValues(NamedTuple):
    """Values that a checker stored before filling in the form, with the content they were stored for."""

    role: str
    person: str
    date: str
    revision: str
    digest: str
    values: tuple[HandValue, ...]
    bound: str = ""


class SignOff(NamedTuple):
    """A person's role, name and date, bound to a content. ``way`` and what follows are a checker's."""

    role: str
    person: str
    name: str
    date: str
    revision: str
    content: Content
    way: str = ""
    checked_with: str = ""
    answers: tuple[Answer, ...] = ()
    acknowledged: tuple[Acknowledged, ...] = ()
    blind: HandValues | None = None
    bound: str = ""


class Voiding(NamedTuple):
    """The end of a calculation: who declared it void, when and why."""

    person: str
    date: str
    because: str


class SignOffFile(NamedTuple):
    """Everything that stands in the file of sign-offs."""

    signoffs: tuple[SignOff, ...] = ()
    hand_values: tuple[HandValues, ...] = ()
    void: Voiding | None = None


def bound(entry: SignOff) -> SignOff:
    """The sign-off with the digest of its own words."""
    return entry._replace(bound=_whole(_signoff_data(entry)))


def is_unaltered(entry: SignOff) -> bool:
    """Whether an entry still is what was written when it was made."""
    return entry.bound == _whole(_signoff_data(entry))


def bound_values(values: HandValues) -> HandValues:
    """Hand values with the digest of their own words."""
    return values._replace(bound=_whole(_hand_data(values)))


def are_unaltered(values: HandValues) -> bool:
    """Whether hand values still are what was stored."""
    bare = values._replace(values=tuple(item._replace(shown="", deviation="") for item in values.values))
    return values.bound == _whole(_hand_data(bare))


def _whole(data: Data) -> str:
    plain = {key: value for key, value in data.items() if key != "bound"}
    text = json.dumps(plain, ensure_ascii=False, sort_keys=True, separators=(",", ":"))
    return hashlib.sha256(b"calcbook-sign-off-1\0" + text.encode("utf-8", "surrogatepass")).hexdigest()


# --- people -----------------------------------------------------------------------------------------


def spelled(text: str) -> str:
    """A name without capitals, points and blanks' number; `Smith, J.` is `J. Smith`."""
    first, comma, rest = unicodedata.normalize("NFKC", text).casefold().partition(",")
    ordered = f"{rest} {first}" if comma else first
    return " ".join(re.findall(r"\w+", ordered))


def _spellings(settings: Settings, person: str) -> frozenset[str]:
    return frozenset(spelled(text) for text in (person, *settings.people[person]))


def person_id(settings: Settings, text: str) -> str:
    """The id of the person of the book who is spelled so, or an empty text."""
    if text in settings.people:
        return text
    wanted = spelled(text)
    return next(
        (person for person in settings.people if wanted and wanted in _spellings(settings, person)), ""
    )


def is_same_person(settings: Settings, one: str, other: str) -> bool:
    """Whether two ids are one person: the same id, or a spelling that both have."""
    if one == other:
        return True
    known = one in settings.people and other in settings.people
    return known and bool(_spellings(settings, one) & _spellings(settings, other))


def wanted_person(settings: Settings, text: str, place: Place) -> str:
    """The id of a person named on the command line. Raises ``Faults``: person-unknown."""
    found = person_id(settings, text)
    if not found:
        names = tuple(settings.people)
        raise Faults(
            [
                Fault(
                    "person-unknown",
                    place,
                    f"the book lists no person `{shown(text)}`",
                    shown(text),
                    f"one of the people of book.yaml: {', '.join(names)}"
                    if names
                    else "a book.yaml with `people:` beside the calculation file",
                    nearest_names(text, names),
                )
            ]
        )
    return found


def printed_name(settings: Settings, person: str) -> str:
    """A person's name as it is signed."""
    return settings.people[person][0] if person in settings.people else person


# --- the file ---------------------------------------------------------------------------------------


def signoffs_path(calc_path: Path) -> Path:
    """Where the sign-offs of a calculation file stand."""
    return calc_path.with_name(f"{calc_path.stem}.signoffs.yaml")


def read_signoffs(path: Path) -> SignOffFile:
    """The sign-offs of a file; none where there is no file.

    Raises ``Faults``: what the YAML reader finds, and sign-offs-unreadable.
    """
    if not path.is_file():
        return SignOffFile()
    document = read_file(path)
    if not isinstance(document.root, MappingNode):
        raise _unreadable(document.root.place, "a mapping of sign-offs")
    reader = _Reader(document.root.place)
    return SignOffFile(
        tuple(reader.signoff(item) for item in reader.items(document.root, "sign-offs")),
        tuple(reader.hand_values(item) for item in reader.items(document.root, "hand values")),
        reader.voiding(document.root.get("void")),
    )


def write_signoffs(path: Path, content: SignOffFile, read: SignOffFile) -> None:
    """Write the sign-offs whole, where the file still says what was ``read`` from it.

    Raises ``Faults`` (sign-offs-moved) where another has written meanwhile, and ``OSError``.
    """
    if read_signoffs(path) != read:
        raise Faults(
            [
                Fault(
                    "sign-offs-moved",
                    Place(path.as_posix()),
                    "another has written the sign-offs meanwhile; nothing is signed",
                    "",
                    "the same command again",
                )
            ]
        )
    write_whole(path, signoffs_text(content))


def signoffs_text(content: SignOffFile) -> str:
    """The text of the file of sign-offs."""
    data: Data = {"sign-offs": [{**_signoff_data(entry), "bound": entry.bound} for entry in content.signoffs]}
    if content.hand_values:
        data["hand values"] = [{**_hand_data(entry), "bound": entry.bound} for entry in content.hand_values]
    if content.void is not None:
        data["void"] = {
            "person": content.void.person,
            "date": content.void.date,
            "because": content.void.because,
        }
    return HEAD + "\n".join(yaml_lines(data)) + "\n"


def _signoff_data(entry: SignOff) -> Data:
    data: Data = {
        "role": entry.role,
        "person": entry.person,
        "name": entry.name,
        "date": entry.date,
        "revision": entry.revision,
        "digest": {part: getattr(entry.content.digest, part) for part in PARTS},
        "software": {
            "calcbook": entry.content.software.calcbook,
            "CoolProp": entry.content.software.coolprop,
        },
    }
    if entry.way:
        data["way of checking"] = entry.way
    if entry.checked_with:
        data["checked with"] = entry.checked_with
    if entry.answers:
        data["answers"] = [
            {"number": item.number, "question": item.question, "answer": item.answer}
            for item in entry.answers
        ]
    if entry.acknowledged:
        data["acknowledged"] = [
            {"id": item.id, "text": item.text, "words": item.words} for item in entry.acknowledged
        ]
    if entry.blind is not None:
        data["blind"] = {**_hand_data(entry.blind), "bound": entry.blind.bound}
    data["signed content"] = {
        "displayed": dict(entry.content.headlines),
        **{part: dict(getattr(entry.content, part)) for part in PARTS},
    }
    return data


def _hand_data(entry: HandValues) -> Data:
    values: list[Data] = []
    for item in entry.values:
        revealed = {"in the record": item.shown, "deviation": item.deviation} if item.shown else {}
        values.append({"result": item.result, "by hand": item.value, **revealed})
    return {
        "role": entry.role,
        "person": entry.person,
        "date": entry.date,
        "revision": entry.revision,
        "digest": entry.digest,
        "values": values,
    }


class _Reader:
    """Turns the tree of a file of sign-offs into its types; a missing part is a fault at its entry."""

    def __init__(self, place: Place):
        self.place = place

    def items(self, node: Node | None, key: str) -> tuple[Node, ...]:
        found = node.get(key) if isinstance(node, MappingNode) else None
        if found is None or (isinstance(found, Scalar) and found.is_empty):
            return ()
        if not isinstance(found, Sequence):
            raise _unreadable(found.place, f"a list under `{key}`")
        return found.items

    def text(self, node: Node | None, key: str, required: bool = True) -> str:
        found = node.get(key) if isinstance(node, MappingNode) else None
        if isinstance(found, Scalar):
            return found.text
        if found is not None or required:
            raise _unreadable(found.place if found is not None else self._place(node), f"a text `{key}`")
        return ""

    def mapping(self, node: Node | None, key: str) -> dict[str, str]:
        found = node.get(key) if isinstance(node, MappingNode) else None
        if not isinstance(found, MappingNode):
            return {}
        return {name.text: self.text(found, name.text) for name, _ in found.entries}

    def part(self, node: Node | None, key: str) -> Node | None:
        return node.get(key) if isinstance(node, MappingNode) else None

    def _place(self, node: Node | None) -> Place:
        return node.place if node is not None else self.place

    def signoff(self, node: Node) -> SignOff:
        blind = self.part(node, "blind")
        return SignOff(
            role=self.text(node, "role"),
            person=self.text(node, "person"),
            name=self.text(node, "name"),
            date=self.text(node, "date"),
            revision=self.text(node, "revision"),
            content=self.content(node),
            way=self.text(node, "way of checking", required=False),
            checked_with=self.text(node, "checked with", required=False),
            answers=tuple(
                Answer(*(self.text(item, key) for key in ("number", "question", "answer")))
                for item in self.items(node, "answers")
            ),
            acknowledged=tuple(
                Acknowledged(*(self.text(item, key) for key in ("id", "text", "words")))
                for item in self.items(node, "acknowledged")
            ),
            blind=self.hand_values(blind) if blind is not None else None,
            bound=self.text(node, "bound", required=False),
        )

    def content(self, node: Node) -> Content:
        parts = self.part(node, "digest")
        meaning, cards, results = (self.text(parts, part) for part in PARTS)
        made_with = self.part(node, "software")
        software = Software(self.text(made_with, "calcbook"), self.text(made_with, "CoolProp"), cards)
        signed = self.part(node, "signed content")
        return Content(
            Digest("", meaning, cards, results),
            software,
            meaning=self.mapping(signed, "meaning"),
            cards=self.mapping(signed, "cards"),
            results=self.mapping(signed, "results"),
            headlines=self.mapping(signed, "displayed"),
        )

    def hand_values(self, node: Node) -> HandValues:
        values = tuple(
            HandValue(
                self.text(item, "result"),
                self.text(item, "by hand"),
                self.text(item, "in the record", required=False),
                self.text(item, "deviation", required=False),
            )
            for item in self.items(node, "values")
        )
        return HandValues(
            role=self.text(node, "role"),
            person=self.text(node, "person"),
            date=self.text(node, "date"),
            revision=self.text(node, "revision"),
            digest=self.text(node, "digest"),
            values=values,
            bound=self.text(node, "bound", required=False),
        )

    def voiding(self, node: Node | None) -> Voiding | None:
        return (
            Voiding(*(self.text(node, key) for key in ("person", "date", "because")))
            if node is not None
            else None
        )


def _unreadable(place: Place, expected: str) -> Faults:
    return Faults(
        [
            Fault(
                "sign-offs-unreadable",
                place,
                "this is not what calcbook wrote here",
                "",
                f"{expected}; take the file back from the last commit, or sign again",
            )
        ]
    )


# --- writing YAML -----------------------------------------------------------------------------------


def quoted(text: str) -> str:
    """A text in double quotes that YAML reads back as it was; what is not seen is written by its number."""
    return '"' + "".join(_quoted_character(character) for character in text) + '"'


def _quoted_character(character: str) -> str:
    if character in '"\\':
        return "\\" + character
    if unicodedata.category(character)[0] == "C" or character in "\u2028\u2029":
        code = ord(character)
        return f"\\x{code:02X}" if code < 0x100 else f"\\u{code:04X}" if code < 0x10000 else f"\\U{code:08X}"
    return character


def yaml_lines(data: object, indent: str = "") -> Iterable[str]:
    """Mappings, lists and texts as YAML in lines, one fact a line."""
    if isinstance(data, Mapping):
        for key, value in data.items():
            name = key if re.fullmatch(r"[a-zA-Z][a-zA-Z -]*", key) else quoted(key)
            yield from _entry(f"{indent}{name}:", value, indent + "  ")
    elif isinstance(data, list):
        for item in data:
            lines = list(yaml_lines(item, indent + "  "))
            yield f"{indent}- {lines[0].lstrip()}"
            yield from lines[1:]


def _entry(head: str, value: object, indent: str) -> Iterable[str]:
    if isinstance(value, str):
        yield f"{head} {quoted(value)}"
    elif not value:
        yield f"{head} {'[]' if isinstance(value, list) else '{}'}"
    else:
        yield head
        yield from yaml_lines(value, indent)
