"""Nothing that a digest binds changes without being told: every node of every example is edited, one at a time.

The property needs no outside source: two files of one meaning show no change, two of another meaning show one, and
the changes that can move a result make the new file out of the old one.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import pytest
from two_sides import EXAMPLES, example, example_side

from calcbook.calcfile.meaning import meaning_of
from calcbook.documents import Document, Mapping, Node, Scalar, Sequence
from calcbook.revisions.changes import changes_between
from calcbook.revisions.mixtures import LEFT_OUT, Mixer, unlinked

Path = tuple[str, ...]
NAMES = [
    path.stem
    for path in sorted(EXAMPLES.glob("*.yaml"))
    # A given that is taken from another calculation needs that one beside it: links have tests of their own.
    if "\ngivens:" in (text := path.read_text(encoding="utf-8")) and "from: {calculation:" not in text
]
# What is said of a figure, or how results are printed: it moves none, and stays as it was in a mixture.
SAID = frozenset(("is", "source", "tolerance", "units", "holds for"))


def edits(node: Node, path: Path = ()) -> Iterator[tuple[Path, Node]]:
    """Every tree that one edit makes of a node, with the edited place and what was done there."""
    if isinstance(node, Scalar):
        yield (*path, "written otherwise"), node._replace(text=f"{node.text}7")
    elif isinstance(node, Sequence):
        items = node.items
        for at, item in enumerate(items):
            inner = (*path, str(at))
            for place, edited in edits(item, inner):
                yield place, node._replace(items=(*items[:at], edited, *items[at + 1 :]))
            yield (*inner, "taken out"), node._replace(items=(*items[:at], *items[at + 1 :]))
            yield (*inner, "put last"), node._replace(items=(*items[:at], *items[at + 1 :], item))
    else:
        entries = node.entries
        for at, (key, value) in enumerate(entries):
            inner = (*path, key.text)
            for place, edited in edits(value, inner):
                yield place, node._replace(entries=(*entries[:at], (key, edited), *entries[at + 1 :]))
            other = key._replace(text=f"{key.text}7")
            yield (*inner, "taken out"), node._replace(entries=(*entries[:at], *entries[at + 1 :]))
            yield (
                (*inner, "called otherwise"),
                node._replace(entries=(*entries[:at], (other, value), *entries[at + 1 :])),
            )
            yield (
                (*inner, "put last"),
                node._replace(entries=(*entries[:at], *entries[at + 1 :], (key, value))),
            )


def moving(meaning: object) -> object:
    """A meaning without what is only said."""
    if isinstance(meaning, dict):
        return {key: moving(value) for key, value in meaning.items() if key not in SAID}
    return [moving(value) for value in meaning] if isinstance(meaning, list) else meaning


@pytest.mark.parametrize("name", NAMES)
def test_every_edit_is_told_and_nothing_else(name: str) -> None:
    side = example_side(example(name))
    meaning = meaning_of(side.tree)
    count = 0
    for place, tree in edits(side.tree):
        if len(place) < 3:
            continue  # a whole section: the file is none without it
        count += 1
        told = changes_between(side, replace(side, tree=tree))
        assert bool(told) == (meaning_of(tree) != meaning), " / ".join(place)
    assert count > 200


@pytest.mark.parametrize("name", NAMES)
def test_changes_that_move_a_result_make_the_new_file_out_of_the_old(name: str) -> None:
    side = example_side(example(name))
    seen = 0
    for place, tree in edits(side.tree):
        if place[0] in LEFT_OUT or place[0] in ("calculation", "purpose") or len(place) < 3:
            continue
        # A term or branch of another name stands elsewhere among its neighbours until the whole order is made.
        if "name" in place[-2:] or "parallel" in place:
            continue
        if place[-1] == "called otherwise" and (place[0] == "report" or place[-2] in SAID):
            continue  # a key that no file has
        new = replace(side, tree=tree)
        moves = [change for change in changes_between(side, new) if change.moves]
        made = tree_of(Mixer(side, new, moves))
        assert isinstance(tree, Mapping)
        kept = tree._replace(entries=tuple(entry for entry in tree.entries if entry[0].text not in LEFT_OUT))
        assert moving(meaning_of(made)) == moving(meaning_of(unlinked(kept))), " / ".join(place)
        seen += bool(moves)
    assert seen > 50


def tree_of(mixer: Mixer) -> Node:
    """The tree from which a mixture of all changes is read."""
    read: list[Document] = []
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr("calcbook.revisions.mixtures.read_document", lambda document, *_: read.append(document))
        patch.setattr("calcbook.revisions.mixtures.build", lambda *_, **__: None)
        mixer.chain(frozenset(range(len(mixer.changes))))
    return read[0].root
