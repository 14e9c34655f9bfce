"""What a file means, apart from how it is typed: the part of the digest that comes from the text.

Scalars as typed, in Unicode form NFC, white space collapsed; lists in order; keys sorted when hashed.
Comments, key order and layout are not part of it.
"""

from __future__ import annotations

import unicodedata

from calcbook.documents import Mapping, Node, Sequence


def meaning_of(node: Node) -> object:
    """A tree as dictionaries, lists and normalised texts."""
    if isinstance(node, Mapping):
        return {_text(key.text): meaning_of(value) for key, value in node.entries}
    if isinstance(node, Sequence):
        return [meaning_of(item) for item in node.items]
    return _text(node.text)


def _text(text: str) -> str:
    return " ".join(unicodedata.normalize("NFC", text).split())
