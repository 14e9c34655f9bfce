"""Mixtures of two revisions: the old file with some of the changes made, read and built like any other file.

A change that only moves inputs of the chain is known by that; all others make another structure. Sections
that cannot move a result of the base case (criteria, cases, accepted checks, assumptions) are left out of a
mixture.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace
from pathlib import Path

from calcbook.calcfile import read_document
from calcbook.calcfile.calculation import Settings
from calcbook.chain.build import build
from calcbook.chain.completing import completed
from calcbook.chain.findings import stream_findings
from calcbook.chain.types import Chain, ChainStep, Element, Layer
from calcbook.documents import Document, Mapping, Node, Scalar
from calcbook.documents import Sequence as ListNode
from calcbook.faults import Collector, Faults
from calcbook.library import Library
from calcbook.library.cards import Material, Method, Situation
from calcbook.library.operations import Operation
from calcbook.revisions.changes import ORDER, Change, Edit, entries_of, item_name
from calcbook.revisions.sides import Side

LEFT_OUT = frozenset(("revisions", "assumptions", "acceptance", "cases", "accept", "uncertainty", "survey"))
LISTS = ("resistances", "parallel", "acceptance", "accept", "revisions")


class MixedLibrary(Library):
    """House cards of two sides: the new one where a card's change is made, else the old one."""

    def __init__(self, old: Library, new: Library, taken: Iterable[str]):
        super().__init__(None)
        self.old = old
        self.new = new
        self.taken = frozenset(taken)

    def _side(self, kind: str, name: str) -> Library:
        is_new = f"{kind} {name}" in self.taken or name not in self.old.names(f"{kind}s")
        return self.new if is_new else self.old

    def method(self, name: str) -> Method:
        """A method card, as ``Library`` gives it."""
        return self._side("method", name).method(name)

    def situation(self, name: str) -> Situation:
        """A situation card, as ``Library`` gives it."""
        return self._side("situation", name).situation(name)

    def material(self, name: str) -> Material:
        """A material card, as ``Library`` gives it."""
        return self._side("material", name).material(name)

    def names(self, kind: str) -> tuple[str, ...]:
        """The ids of the cards of both sides."""
        return tuple(sorted({*self.old.names(kind), *self.new.names(kind)}))


class Mixer:
    """Makes chains of the old side with any of the changes; each once."""

    def __init__(self, old: Side, new: Side, changes: Sequence[Change]):
        self.old = old
        self.new = new
        self.changes = tuple(changes)
        self.root = _trimmed(old.tree)
        before, after = (
            list(entries_of(_section(side.tree, "resistances"), "resistances")) for side in (old, new)
        )
        self.orders = {False: woven(before, after, before), True: woven(before, after, after)}
        self.house = any(side.solved.chain.library.house is not None for side in (old, new))
        self._chains: dict[frozenset[int], Chain | None] = {}

    def chain(self, included: frozenset[int]) -> Chain | None:
        """The chain with some of the changes made, by number; None where they make no calculation."""
        if included not in self._chains:
            self._chains[included] = self._built(included)
        return self._chains[included]

    def _built(self, included: frozenset[int]) -> Chain | None:
        collector = Collector()
        chosen = [self.changes[number] for number in sorted(included)]
        try:
            document = Document(self.new.document.name, "", self._tree(chosen))
            calculation = read_document(document, self._settings(chosen), collector, Path())
            library = self._library(chosen)
            chain = build(calculation, library, collector, cross_check=False) if not collector else None
        except Faults:
            return None
        return None if collector else chain

    def _tree(self, chosen: Sequence[Change]) -> Node:
        root = self.root
        for change in chosen:
            for edit in change.edits:
                root = _edited(root, edit.path, edit)
        order = self.orders[any(change.id == ORDER for change in chosen)]
        return unlinked(_in_order(root, order))

    def _settings(self, chosen: Sequence[Change]) -> Settings:
        settings = self.old.calculation.settings
        if any(change.path == ("book", "site pressure") for change in chosen):
            return replace(settings, site_pressure=self.new.calculation.settings.site_pressure)
        return settings

    def _library(self, chosen: Sequence[Change]) -> Library:
        old, new = (side.solved.chain.library for side in (self.old, self.new))
        if not self.house:
            return old
        return MixedLibrary(old, new, (change.path[1] for change in chosen if change.path[0] == "card"))


def moved_inputs(before: Chain, after: Chain) -> dict[str, float] | None:
    """Inputs that differ between two chains, by id with the later value; None where the structure differs."""
    if before.inputs.keys() != after.inputs.keys() or structure_of(before) != structure_of(after):
        return None
    return {
        name: item.value for name, item in after.inputs.items() if item.value != before.inputs[name].value
    }


def with_inputs(chain: Chain, values: dict[str, float]) -> Chain:
    """A chain with other figures for some of its inputs; those that it does not have are left out."""
    moved = {
        name: replace(chain.inputs[name], value=value)
        for name, value in values.items()
        if name in chain.inputs
    }
    return replace(chain, inputs={**chain.inputs, **moved})


def has_sound_states(chain: Chain) -> bool:
    """Whether every stream of a chain is in a state that its fluid can have."""
    collector = Collector()
    stream_findings(chain, "", completed(chain, chain.case_inputs("")), collector)
    return not collector


# --- trees ------------------------------------------------------------------------------------------


def woven(first: Sequence[str], second: Sequence[str], base: Sequence[str]) -> list[str]:
    """Names of both lists, those of both in the order of ``base``, the others after their own predecessor.

    The same from either direction: two runs of names after one predecessor stand in alphabetical order.
    """
    common = set(first) & set(second)
    runs: dict[str, list[tuple[str, ...]]] = {}
    for names in (first, second):
        anchor, run = "", []
        for name in [*names, ""]:
            if name and name not in common:
                run.append(name)
                continue
            runs.setdefault(anchor, []).append(tuple(run))
            anchor, run = name, []
    order = []
    for anchor in ("", *(name for name in base if name in common)):
        order += [anchor, *(name for run in sorted(runs.get(anchor, [])) for name in run)]
    return order[1:]


def _section(root: Node, name: str) -> Node | None:
    return root.get(name) if isinstance(root, Mapping) else None


def _trimmed(root: Node) -> Node:
    assert isinstance(root, Mapping)
    return Mapping(tuple(entry for entry in root.entries if entry[0].text not in LEFT_OUT), root.place)


def _edited(node: Node, path: tuple[str, ...], edit: Edit, section: str = "") -> Node:
    """A node with one edit made at a path beneath it."""
    name, rest = path[0], path[1:]
    if isinstance(node, ListNode):
        return ListNode(tuple(_edited_items(node, name, rest, edit, section)), node.place)
    assert isinstance(node, Mapping)
    entries = []
    found = False
    for key, value in node.entries:
        if key.text != name:
            entries.append((key, value))
            continue
        found = True
        after = _edited(value, rest, edit, name) if rest else edit.node
        if after is not None:
            entries.append((key, after))
    if not found and edit.node is not None:
        after = _edited(_empty(name, edit.node), rest, edit, name) if rest else edit.node
        entries.append(
            (edit.key if edit.key is not None and not rest else Scalar(name, edit.node.place), after)
        )
    return Mapping(tuple(entries), node.place, node.in_braces)


def _edited_items(node: ListNode, name: str, rest: tuple[str, ...], edit: Edit, section: str) -> list[Node]:
    items: list[Node] = []
    found = False
    for item in node.items:
        if item_name(item, section) != name:
            items.append(item)
            continue
        found = True
        after = _edited(item, rest, edit, name) if rest else edit.node
        if after is not None:
            items.append(after)
    if not found and not rest and edit.node is not None:
        items.append(edit.node)
    return items


def _empty(name: str, like: Node) -> Node:
    return ListNode((), like.place) if name in LISTS else Mapping((), like.place)


def _in_order(root: Node, order: Sequence[str]) -> Node:
    """The tree with its terms in an order of names."""
    assert isinstance(root, Mapping)
    places = {name: place for place, name in enumerate(order)}
    entries = []
    for key, value in root.entries:
        if key.text == "resistances" and isinstance(value, ListNode):
            items = sorted(
                value.items, key=lambda item: places.get(item_name(item, "resistances"), len(places))
            )
            value = ListNode(tuple(items), value.place)
        entries.append((key, value))
    return Mapping(tuple(entries), root.place, root.in_braces)


def unlinked(root: Node) -> Node:
    """The tree that needs no other file: without the links of its givens, whose values are written out, and
    without its survey, whose history stands beside the file and moves no U."""
    assert isinstance(root, Mapping)
    entries = []
    for key, value in root.entries:
        if key.text == "survey":
            continue
        if key.text == "givens" and isinstance(value, Mapping):
            givens = tuple(
                (name, _without(given, "from") if isinstance(given, Mapping) else given)
                for name, given in value.entries
            )
            value = Mapping(givens, value.place)
        entries.append((key, value))
    return Mapping(tuple(entries), root.place)


def _without(node: Mapping, name: str) -> Mapping:
    return Mapping(
        tuple(entry for entry in node.entries if entry[0].text != name), node.place, node.in_braces
    )


# --- structure --------------------------------------------------------------------------------------


def structure_of(chain: Chain) -> tuple[object, ...]:
    """What decides how a chain is solved, without the figures of its inputs.

    Fluids and cards are not part of it: a change of either is told by its kind.
    """
    constants = tuple(
        (name, repr(value) if isinstance(value, float) else getattr(value, "id", type(value).__name__))
        for name, value in sorted(chain.constants.items())
    )
    surfaces = tuple((surface.name, surface.area, surface.diameter) for surface in chain.surfaces)
    return (
        _steps(chain.steps),
        _steps(chain.circuit),
        tuple(_element(item) for item in chain.elements),
        surfaces,
        chain.basis,
        constants,
        tuple(chain.results.items()),
    )


def _steps(steps: Sequence[ChainStep]) -> tuple[object, ...]:
    return tuple((step.id, _operation(step.operation), tuple(step.inputs.items())) for step in steps)


def _operation(operation: Operation) -> tuple[object, ...]:
    inner = getattr(operation, "operation", operation)
    relation = getattr(inner, "relation", None)
    marks = ("property", "phase", "has_pressure", "has_fraction", "keeps_phase", "column")
    return (
        type(operation).__name__,
        relation.text if relation is not None else "",
        *(getattr(inner, mark, "") for mark in marks),
    )


def _element(element: Element) -> tuple[object, ...]:
    if isinstance(element, Layer):
        return (
            element.name,
            element.kind,
            element.surface,
            element.resistance,
            _steps(element.steps),
            element.material,
        )
    branches = tuple(
        (
            branch.name,
            branch.kind,
            branch.reference,
            _steps(branch.choice_steps),
            tuple(
                (
                    row.relation.text if row.relation is not None else "",
                    tuple(row.inputs.items()),
                    row.candidate,
                )
                for row in branch.choice
            ),
            tuple(
                (candidate.method.id, candidate.coefficient, _steps(candidate.steps))
                for candidate in branch.candidates
            ),
        )
        for branch in element.branches
    )
    return (element.name, element.side, element.surface, element.bulk, branches)
