"""Terms that are called otherwise in the new revision: the old side, with the names of the new one.

A term that is gone and one that came, alike in everything but the name, are one term. Told as two changes, each of
them would move U by the whole of its resistance, and the two parts would say nothing but that they cancel.
"""

from __future__ import annotations

import json
import re
from collections import defaultdict
from collections.abc import Callable, Iterator, Mapping

from calcbook.calcfile.meaning import meaning_of
from calcbook.chain.analysis import NotConverged
from calcbook.documents import Mapping as MappingNode
from calcbook.documents import Node, Scalar, Sequence
from calcbook.faults import Faults
from calcbook.revisions.changes import text_of
from calcbook.revisions.sides import Side, solved_again

Renaming = Callable[[str], str]

# Sections that speak of results and limits, which are called by the terms of this calculation. A given may speak of one
# of another.
SPEAKING = ("acceptance", "accept", "uncertainty", "sweep")
# What a person wrote in his own words there.
PROSE = ("source", "because", "by")


def with_new_names(old: Side, new: Side) -> tuple[Side, dict[str, str]]:
    """The old side with its renamed terms called as on the new side, and the new names by the old ones.

    The old side itself, and no names, where no term was renamed, or where the file with the new names gives no answer.
    """
    names = renamed_terms(old.tree, new.tree)
    if not names:
        return old, {}
    known = [name for name, _ in _terms(old.tree)]
    try:
        return solved_again(old, lambda root: _with_names(root, names, known)), names
    except (Faults, NotConverged):
        return old, {}


def renamed_terms(old: Node, new: Node) -> dict[str, str]:
    """New names by old ones, for terms of which only the name differs. Twins are taken in their order, where as many
    came as are gone."""
    before, after = (dict(_terms(root)) for root in (old, new))
    gone, come = (
        _by_meaning({name: mark for name, mark in one.items() if name not in other})
        for one, other in ((before, after), (after, before))
    )
    return {
        was: now
        for mark, names in gone.items()
        if len(names) == len(come.get(mark, ()))
        for was, now in zip(names, come[mark], strict=True)
    }


def _terms(root: Node) -> Iterator[tuple[str, str]]:
    """Every term with a name, branches of parallel terms among them, with what else is said of it as a text."""
    stated = root.get("resistances") if isinstance(root, MappingNode) else None
    waiting = list(stated.items) if isinstance(stated, Sequence) else []
    while waiting:
        item = waiting.pop(0)
        if not isinstance(item, MappingNode):
            continue
        branches = item.get("parallel")
        if isinstance(branches, Sequence):
            waiting = [*branches.items, *waiting]
        name = item.get("name")
        if name is not None:
            yield text_of(name), json.dumps(meaning_of(_nameless(item)), sort_keys=True)


def _nameless(item: Node) -> Node:
    """A term without its name, and without those of its branches."""
    if not isinstance(item, MappingNode):
        return item
    entries = []
    for key, value in item.entries:
        if key.text == "parallel" and isinstance(value, Sequence):
            value = value._replace(items=tuple(_nameless(branch) for branch in value.items))
        if key.text != "name":
            entries.append((key, value))
    return item._replace(entries=tuple(entries))


def _by_meaning(terms: Mapping[str, str]) -> dict[str, list[str]]:
    found: dict[str, list[str]] = defaultdict(list)
    for name, meaning in terms.items():
        found[meaning].append(name)
    return found


def _with_names(root: Node, names: Mapping[str, str], known: list[str]) -> Node:
    """A file's tree with other names for some of its terms, wherever it names them."""
    assert isinstance(root, MappingNode)
    # The longest first: `film` is not renamed inside `inner film`.
    longest = sorted(map(re.escape, known), key=len, reverse=True)
    whole = re.compile(rf"(?<!\w)(?:{'|'.join(longest)})(?!\w)")

    def renamed(text: str) -> str:
        return whole.sub(lambda found: names.get(found[0], found[0]), text)

    entries = []
    for key, value in root.entries:
        if key.text == "resistances":
            value = _terms_renamed(value, renamed)
        elif key.text == "fouling specified as":
            value = _shares_renamed(value, renamed)
        elif key.text in SPEAKING:
            value = _speaking_renamed(value, renamed)
        entries.append((key, value))
    return root._replace(entries=tuple(entries))


def _terms_renamed(node: Node, renamed: Renaming) -> Node:
    """Terms with their names, and what a stated coefficient includes, renamed."""
    if isinstance(node, Sequence):
        return node._replace(items=tuple(_terms_renamed(item, renamed) for item in node.items))
    if not isinstance(node, MappingNode):
        return node
    entries = []
    for key, value in node.entries:
        if key.text in ("name", "includes"):
            value = _speaking_renamed(value, renamed)
        elif key.text == "parallel":
            value = _terms_renamed(value, renamed)
        entries.append((key, value))
    return node._replace(entries=tuple(entries))


def _shares_renamed(node: Node, renamed: Renaming) -> Node:
    """A fouling of the whole unit, whose shares stand under the names of the terms."""
    shares = node.get("split") if isinstance(node, MappingNode) else None
    if not isinstance(node, MappingNode) or not isinstance(shares, MappingNode):
        return node
    named = tuple((key._replace(text=renamed(key.text)), value) for key, value in shares.entries)
    whole = shares._replace(entries=named)
    return node._replace(
        entries=tuple((key, whole if value is shares else value) for key, value in node.entries)
    )


def _speaking_renamed(node: Node, renamed: Renaming) -> Node:
    if isinstance(node, Scalar):
        return node._replace(text=renamed(node.text))
    if isinstance(node, Sequence):
        return node._replace(items=tuple(_speaking_renamed(item, renamed) for item in node.items))
    return node._replace(
        entries=tuple(
            (key, value if key.text in PROSE else _speaking_renamed(value, renamed))
            for key, value in node.entries
        )
    )
