"""What two revisions say differently: one change per fact, in the order of the file.

Terms are matched by name, renamed ones by that of the new side (see ``renames``); givens by symbol. A change that can
move a result of the base case carries the edits that make it in the old file's tree, so that any subset of changes can
be read and solved on its own.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from hashlib import sha256

from calcbook.calcfile.meaning import meaning_of
from calcbook.documents import Mapping, Node, Scalar, Sequence
from calcbook.faults import Faults
from calcbook.library import Library
from calcbook.quantities import Quantity, QuantityFault, read_any
from calcbook.revisions.sides import Side

# Changes that leave every number as it was; they are listed apart from the changed inputs.
APART = ("source only", "unit only", "text only")
# Keys that say in which way a term resists: where one comes or goes, the whole term is one change.
WAY = frozenset(
    (
        "kind",
        "parallel",
        "stream",
        "coefficient",
        "resistance",
        "material",
        "conductivity",
        "deposit",
        "growth",
        "thickness",
        "outside diameter",
        "fins",
    )
)
# What stands beside the figure of a given and moves no result, with the words for it.
BESIDE = {"tolerance": "tolerance", "is": "meaning", "from": "taken from"}
NOT_STATED = "not stated"
ORDER = "resistances/order of the terms"
# New names of terms by their old ones.
Renames = dict[str, str]
NO_NAMES: Renames = {}


@dataclass(frozen=True, slots=True)
class Edit:
    """One edit of the old tree: the node that stands at a path now, or None where nothing does any more."""

    path: tuple[str, ...]
    node: Node | None
    key: Scalar | None = None


@dataclass(frozen=True, slots=True)
class Change:
    """One difference between two revisions.

    ``id`` is stable and the same in both directions. ``moves`` says whether it can move a result of the base
    case. ``quantity_was`` and ``quantity_now`` are there where both sides state a figure of one dimension.
    """

    id: str
    kind: str
    path: tuple[str, ...]
    title: str
    was: str
    now: str
    source_was: str = ""
    source_now: str = ""
    edits: tuple[Edit, ...] = ()
    moves: bool = False
    quantity_was: Quantity | None = None
    quantity_now: Quantity | None = None

    @property
    def is_apart(self) -> bool:
        """Whether it leaves every number as it was: a source, a unit or a wording."""
        return self.kind in APART


@dataclass(frozen=True, slots=True)
class Figure:
    """A figure as the file states it; ``quantity`` is None for a symbol or a word."""

    text: str
    source: str
    quantity: Quantity | None
    beside: object


def changes_between(old: Side, new: Side, renamed: Renames = NO_NAMES) -> tuple[Change, ...]:
    """Every difference from the old side to the new one, in the order of the file; then book settings and
    cards. ``renamed`` are terms that the old side calls by their new names already, by the old ones."""
    return _Differences(old, new, renamed).found()


def entries_of(node: Node | None, section: str) -> dict[str, tuple[Scalar | None, Node]]:
    """The named parts of a mapping or of a list whose items have a name, in their order."""
    if isinstance(node, Mapping):
        return {key.text: (key, value) for key, value in node.entries}
    if isinstance(node, Sequence):
        named: dict[str, tuple[Scalar | None, Node]] = {}
        for item in node.items:
            name = item_name(item, section)
            twins = sum(other == name or other.startswith(f"{name} #") for other in named)
            named[f"{name} #{twins + 1}" if twins else name] = (None, item)
        return named
    return {}


def item_name(item: Node, section: str) -> str:
    """What an item of a list is called: a term by its name, a criterion by result and operator, and so on."""
    if not isinstance(item, Mapping):
        return text_of(item)
    if section in ("resistances", "parallel"):
        name = item.get("name")
        if name is not None:
            return text_of(name)
        return " beside ".join(entries_of(item.get("parallel"), "parallel"))
    if section == "acceptance":
        words = text_of(item.get("that")).split()
        return " ".join(
            words[: next((at + 1 for at, word in enumerate(words) if word[0] in "<>"), len(words))]
        )
    keys = {"accept": ("check", "in"), "revisions": ("revision",)}.get(section, ())
    return ", ".join(text_of(item.get(key)) for key in keys if item.get(key) is not None)


def text_of(node: Node | None) -> str:
    """A node as one line of text."""
    if node is None:
        return ""
    if isinstance(node, Scalar):
        return " ".join(node.text.split())
    if isinstance(node, Sequence):
        return ", ".join(_nested(item) for item in node.items)
    return ", ".join(f"{key.text}: {_nested(value)}" for key, value in node.entries)


def _nested(node: Node) -> str:
    if isinstance(node, Scalar):
        return text_of(node)
    return f"[{text_of(node)}]" if isinstance(node, Sequence) else f"({text_of(node)})"


def merged(first: Iterable[str], second: Iterable[str]) -> list[str]:
    """The names of the second list in their order; those of the first alone after their own predecessor."""
    earlier, order = list(first), list(second)
    for place, name in enumerate(earlier):
        if name not in order:
            order.insert(order.index(earlier[place - 1]) + 1 if place else 0, name)
    return order


def figure_of(node: Node | None) -> Figure | None:
    """The figure that a node states, as text or as {value: …, source: …}; None for anything else."""
    source, beside, scalar = "", {}, node
    if isinstance(node, Mapping):
        scalar = node.get("value")
        source = text_of(node.get("source"))
        beside = {
            key.text: meaning_of(value) for key, value in node.entries if key.text not in ("value", "source")
        }
    if not isinstance(scalar, Scalar):
        return None
    try:
        quantity = read_any(scalar.text)
    except QuantityFault:
        quantity = None
    return Figure(text_of(scalar), source, quantity, beside)


def same_number(one: Figure, other: Figure) -> bool:
    """Whether two figures mean one number: equal in SI, of one dimension, both gauge or neither."""
    if one.quantity is None or other.quantity is None:
        return one.text == other.text
    first, second = one.quantity, other.quantity
    same = first.value == second.value and first.dimension == second.dimension
    return same and first.on_base_of(second)


class _Differences:
    def __init__(self, old: Side, new: Side, renamed: Renames):
        self.old = old
        self.new = new
        self.renamed = renamed
        self.changes: list[Change] = []

    def found(self) -> tuple[Change, ...]:
        sections: tuple[tuple[str, Callable[[str], None]], ...] = (
            ("calculation", self._texts),
            ("purpose", self._text),
            ("revisions", self._statements),
            ("givens", self._givens),
            ("derived", self._derived),
            ("assumptions", self._assumptions),
            ("fluids", self._fluids),
            ("streams", self._streams),
            ("geometry", self._geometry),
            ("resistances", self._terms),
            ("acceptance", self._statements),
            ("report", self._report),
            ("cases", self._cases),
            ("accept", self._statements),
            ("uncertainty", self._beside),
            ("survey", self._beside),
        )
        for name, read in sections:
            read(name)
        known = {name for name, _ in sections}
        trees = (entries_of(self.old.tree, ""), entries_of(self.new.tree, ""))
        for name in merged(*trees):
            if name not in known:
                self._other(name)
        self._book()
        self._cards()
        return tuple(self.changes)

    # -- helpers ------------------------------------------------------------------------------------

    def _roots(self, section: str) -> tuple[Node | None, Node | None]:
        old, new = self.old.tree, self.new.tree
        return (
            old.get(section) if isinstance(old, Mapping) else None,
            new.get(section) if isinstance(new, Mapping) else None,
        )

    def _pairs(
        self, old: Node | None, new: Node | None, section: str
    ) -> Iterable[tuple[str, Scalar | None, Node | None, Node | None]]:
        """Names of both sides in the order of the file, with the new key and both nodes, where they
        differ."""
        before, after = entries_of(old, section), entries_of(new, section)
        for name in merged(before, after):
            _, was = before.get(name, (None, None))
            key, now = after.get(name, (None, None))
            if was is None or now is None or meaning_of(was) != meaning_of(now):
                yield name, key, was, now

    def _order(
        self,
        path: tuple[str, ...],
        kind: str,
        items: str,
        old: Node | None,
        new: Node | None,
        moves: bool = False,
    ) -> None:
        """One change where what both lists hold stands in another order."""
        before, after = entries_of(old, path[-1]), entries_of(new, path[-1])
        was, now = [name for name in before if name in after], [name for name in after if name in before]
        if was != now:
            title = f"order of the {items}"
            self.changes.append(
                Change(
                    "/".join((*path, title)), kind, path, title, ", ".join(was), ", ".join(now), moves=moves
                )
            )

    def _add(
        self,
        path: tuple[str, ...],
        kind: str,
        title: str,
        old: Node | None,
        new: Node | None,
        key: Scalar | None = None,
        moves: bool = True,
    ) -> None:
        """One change of a node as a whole."""
        was, now = _differing(old, new)
        if kind not in ("criterion", "accept", "text only"):
            kind = "added" if old is None else "removed" if new is None else kind
        edits = (Edit(path, new, key),) if moves else ()
        one, two = figure_of(old), figure_of(new)
        self.changes.append(
            Change(
                "/".join(path),
                kind,
                path,
                title,
                was or NOT_STATED,
                now or NOT_STATED,
                one.source if one else "",
                two.source if two else "",
                edits,
                moves,
            )
        )

    def _figure(
        self,
        path: tuple[str, ...],
        kind: str,
        title: str,
        old: Node | None,
        new: Node | None,
        key: Scalar | None = None,
        moves: bool = True,
    ) -> None:
        """One change of a figure; of its source or unit alone, where the number is as it was."""
        one, two = figure_of(old), figure_of(new)
        if one is None or two is None or one.beside != two.beside:
            self._whole(path, kind, title, old, new, key, moves)
            return
        if one.text == two.text and one.source == two.source:
            return
        if same_number(one, two):
            kind, moves = _apart_kind(one, two), False
        alike = (
            one.quantity is not None
            and two.quantity is not None
            and one.quantity.dimension == two.quantity.dimension
        )
        self.changes.append(
            Change(
                "/".join(path),
                kind,
                path,
                title,
                one.text,
                two.text,
                one.source,
                two.source,
                (Edit(path, new, key),) if moves else (),
                moves,
                one.quantity if alike else None,
                two.quantity if alike else None,
            )
        )

    def _whole(
        self,
        path: tuple[str, ...],
        kind: str,
        title: str,
        old: Node | None,
        new: Node | None,
        key: Scalar | None,
        moves: bool,
    ) -> None:
        """A figure that is no longer one, or one that came or went: the key is a change, not the entry."""
        was, now = _differing(old, new)
        self.changes.append(
            Change(
                "/".join(path),
                kind,
                path,
                title,
                was or NOT_STATED,
                now or NOT_STATED,
                edits=(Edit(path, new, key),) if moves else (),
                moves=moves,
            )
        )

    # -- title, purpose, statements -----------------------------------------------------------------

    def _texts(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            self._add((section, name), "text only", name, old, new, key, moves=False)

    def _text(self, section: str) -> None:
        old, new = self._roots(section)
        if meaning_of(old) != meaning_of(new) if old is not None and new is not None else old is not new:
            self._add((section,), "text only", section, old, new, moves=False)

    def _statements(self, section: str) -> None:
        kinds = {
            "revisions": ("text only", "revision history, ", "revisions of the history"),
            "acceptance": ("criterion", "criterion ", "criteria"),
            "accept": ("accept", "accepted check ", "accepted checks"),
        }
        kind, title, items = kinds[section]
        for name, key, old, new in self._pairs(*self._roots(section), section):
            self._add((section, name), kind, f"{title}{name}", old, new, key, moves=False)
        self._order((section,), kind, items, *self._roots(section))

    def _assumptions(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            if old is None or new is None:
                self._add((section, name), "assumption", f"assumption {name}", old, new, key, moves=False)
                continue
            for part, part_key, was, now in self._pairs(old, new, name):
                self._whole(
                    (section, name, part),
                    "assumption" if part == "verified" else "text only",
                    f"assumption {name}, {part}",
                    was,
                    now,
                    part_key,
                    moves=False,
                )

    # -- givens and derived -------------------------------------------------------------------------

    def _givens(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            if not isinstance(old, Mapping) or not isinstance(new, Mapping):
                self._add((section, name), "given", _given_title(name, new or old), old, new, key)
                continue
            self._given((section, name), name, key, old, new)

    def _given(
        self, path: tuple[str, ...], name: str, key: Scalar | None, old: Mapping, new: Mapping
    ) -> None:
        title = _given_title(name, new)
        count = len(self.changes)
        self._figure(path, "given", title, _without(old, *BESIDE), _without(new, *BESIDE), key)
        if len(self.changes) > count and self.changes[-1].moves:
            self.changes[-1] = _with_edit(self.changes[-1], Edit(path, new, key))
        for part, words in BESIDE.items():
            was, now = old.get(part), new.get(part)
            if _meaning(was) != _meaning(now):
                kind = "text only" if part == "is" else "given"
                self._whole((*path, part), kind, f"{name}, {words}", was, now, None, False)

    def _derived(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            only_text = (
                isinstance(old, Mapping)
                and isinstance(new, Mapping)
                and _meaning(old.get("relation")) == _meaning(new.get("relation"))
            )
            kind = "text only" if only_text else "derived"
            self._add((section, name), kind, f"{name}, derived", old, new, key, moves=not only_text)

    # -- fluids, streams, geometry ------------------------------------------------------------------

    def _fluids(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            self._fluid((section, name), f"fluid {name}", old, new, key)

    def _fluid(
        self, path: tuple[str, ...], title: str, old: Node | None, new: Node | None, key: Scalar | None
    ) -> None:
        if isinstance(old, Mapping) and isinstance(new, Mapping):
            if _meaning(_without(old, "source")) == _meaning(_without(new, "source")):
                self._source(path, title, old, new)
                return
            differing = [name for name, *_ in self._pairs(old, new, "fluid")]
            if len(differing) == 1 and differing[0] in ("mass fraction", "volume fraction"):
                part = differing[0]
                self._figure(
                    (*path, part), "stream", f"{title}, {part}", old.get(part), new.get(part), new.key(part)
                )
                return
        self._add(path, "fluid", title, old, new, key)

    def _source(self, path: tuple[str, ...], title: str, old: Mapping, new: Mapping) -> None:
        was, now = text_of(old.get("source")), text_of(new.get("source"))
        self.changes.append(Change("/".join(path), "source only", path, title, "", "", was, now))

    def _streams(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            if not isinstance(old, Mapping) or not isinstance(new, Mapping):
                self._add((section, name), "stream", f"stream {name}", old, new, key)
                continue
            for part, part_key, was, now in self._pairs(old, new, section):
                path, title = (section, name, part), f"stream {name}, {part}"
                if part == "fluid":
                    self._fluid(path, title, was, now, part_key)
                else:
                    self._figure(path, "stream", title, was, now, part_key)

    def _geometry(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            self._figure((section, name), "geometry", name, old, new, key)

    def _report(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            self._whole((section, name), "report", f"report, {name}", old, new, key, moves=name == "U on")

    def _beside(self, section: str) -> None:
        """A section that moves no U: one change as a whole."""
        old, new = self._roots(section)
        if _meaning(old) != _meaning(new):
            self._whole((section,), section, section, old, new, None, moves=False)

    def _other(self, section: str) -> None:
        """A section without rules of its own: each entry is a change, of the kind that the section is
        called."""
        old, new = self._roots(section)
        if isinstance(old, Mapping) and isinstance(new, Mapping):
            for name, key, was, now in self._pairs(old, new, section):
                self._figure((section, name), section, f"{section}, {name}", was, now, key)
        elif _meaning(old) != _meaning(new):
            self._whole((section,), section, section, old, new, None, moves=True)

    # -- terms --------------------------------------------------------------------------------------

    def _terms(self, section: str) -> None:
        old, new = self._roots(section)
        for called, name in self.renamed.items():
            path = (section, name, "name")
            self.changes.append(Change("/".join(path), "text only", path, f"term {name}, name", called, name))
        for name, key, was, now in self._pairs(old, new, section):
            self._term((section, name), name, was, now, key)
        self._order((section,), "term", "terms", old, new, moves=True)

    def _term(
        self, path: tuple[str, ...], name: str, old: Node | None, new: Node | None, key: Scalar | None
    ) -> None:
        title = f"term {name}"
        if not isinstance(old, Mapping) or not isinstance(new, Mapping):
            self._add(path, "term", title, old, new, key)
            return
        ways = [{item.text for item, _ in node.entries} & WAY for node in (old, new)]
        if ways[0] != ways[1] or _meaning(old.get("kind")) != _meaning(new.get("kind")):
            self._add(path, "term", title, old, new, key)
            return
        for part, part_key, was, now in self._pairs(old, new, name):
            self._term_part((*path, part), f"{name}, {part}", part, was, now, part_key)

    def _term_part(
        self,
        path: tuple[str, ...],
        title: str,
        part: str,
        old: Node | None,
        new: Node | None,
        key: Scalar | None,
    ) -> None:
        both = isinstance(old, Mapping | Sequence) and isinstance(new, Mapping | Sequence)
        if part == "parallel" and both:
            for name, _, was, now in self._pairs(old, new, part):
                self._term((*path, name), name, was, now, None)
            self._order(path, "text only", f"branches of {path[-2]}", old, new)
        elif part in ("with", "deposit", "growth", "fins") and both:
            for name, inner_key, was, now in self._pairs(old, new, part):
                if part == "growth" and name == "model":
                    self._whole((*path, name), "method", f"{title} {name}", was, now, inner_key, moves=True)
                    continue
                self._figure((*path, name), "term", f"{title} {name}", was, now, inner_key)
        elif part in ("method", "situation"):
            self._whole(path, "method", title, old, new, key, moves=True)
        else:
            self._figure(path, "term", title, old, new, key, moves=part != "holds for")

    # -- cases, book, cards -------------------------------------------------------------------------

    def _cases(self, section: str) -> None:
        for name, key, old, new in self._pairs(*self._roots(section), section):
            if not isinstance(old, Mapping) or not isinstance(new, Mapping):
                self._add((section, name), "case", f"case {name}", old, new, key, moves=False)
                continue
            for symbol, inner_key, was, now in self._pairs(old, new, section):
                self._figure(
                    (section, name, symbol),
                    "case",
                    f"case {name}, {symbol}",
                    was,
                    now,
                    inner_key,
                    moves=False,
                )

    def _book(self) -> None:
        was, now = self.old.calculation.settings, self.new.calculation.settings
        for name in ("site pressure", "surface temperature", "excess surface"):
            one, two = (getattr(settings, name.replace(" ", "_")) for settings in (was, now))
            texts = [(value.text, value.source) if value is not None else None for value in (one, two)]
            if texts[0] == texts[1]:
                continue
            figures = [
                Figure(value.text, value.source, value.quantity, {}) if value else None
                for value in (one, two)
            ]
            same = figures[0] is not None and figures[1] is not None and same_number(figures[0], figures[1])
            kind = (
                _apart_kind(figures[0], figures[1]) if same and figures[0] and figures[1] else "book setting"
            )
            shown = [figure or Figure(NOT_STATED, "", None, {}) for figure in figures]
            self.changes.append(
                Change(
                    f"book/{name}",
                    kind,
                    ("book", name),
                    f"book, {name}",
                    shown[0].text,
                    shown[1].text,
                    shown[0].source,
                    shown[1].source,
                    moves=name == "site pressure" and not same,
                )
            )
        if was.units != now.units:
            self.changes.append(
                Change(
                    "book/units",
                    "book setting",
                    ("book", "units"),
                    "book, units",
                    was.units or NOT_STATED,
                    now.units or NOT_STATED,
                )
            )

    def _cards(self) -> None:
        """House cards of one name with another content. The cards of calcbook are the same on both sides."""
        libraries = self.old.solved.chain.library, self.new.solved.chain.library
        if all(library.house is None for library in libraries):
            return
        for name in merged(self.old.solved.cards, self.new.solved.cards):
            was, now = (card_text(library, name) for library in libraries)
            if was is not None and now is not None and was != now:
                self.changes.append(
                    Change(
                        f"card/{name}",
                        "card",
                        ("card", name),
                        f"house card, {name}",
                        f"content {_short(was)}",
                        f"content {_short(now)}",
                        moves=True,
                    )
                )


def card_text(library: Library, name: str) -> str | None:
    """What a digest binds of a card, by the name under which a calculation lists it; None where there is
    none."""
    kind, _, card = name.partition(" ")
    find: dict[str, Callable[[str], object]] = {
        "method": library.method,
        "situation": library.situation,
        "material": library.material,
    }
    try:
        return str(find[kind](card).digest_text)  # type: ignore[attr-defined]
    except (Faults, KeyError):
        return None


def _short(text: str) -> str:
    return sha256(text.encode("utf-8")).hexdigest()[:12]


def _apart_kind(one: Figure, two: Figure) -> str:
    """The kind of a change that leaves the number as it was."""
    if one.text == two.text:
        return "source only"
    units = [figure.quantity.unit_text if figure.quantity is not None else "" for figure in (one, two)]
    return "unit only" if units[0] != units[1] else "text only"


def _meaning(node: Node | None) -> object:
    return meaning_of(node) if node is not None else None


def _without(node: Mapping, *names: str) -> Mapping:
    return Mapping(
        tuple(entry for entry in node.entries if entry[0].text not in names), node.place, node.in_braces
    )


def _with_edit(change: Change, edit: Edit) -> Change:
    return replace(change, edits=(edit,))


def _given_title(name: str, node: Node | None) -> str:
    meaning = text_of(node.get("is")) if isinstance(node, Mapping) else ""
    return f"{name}, {meaning}" if meaning else name


def _differing(old: Node | None, new: Node | None) -> tuple[str, str]:
    """Both nodes as text; of two mappings only the entries that differ."""
    if not isinstance(old, Mapping) or not isinstance(new, Mapping):
        return text_of(old), text_of(new)
    same = {key.text for key, value in old.entries if _meaning(new.get(key.text)) == meaning_of(value)}
    return text_of(_without(old, *same)), text_of(_without(new, *same))
