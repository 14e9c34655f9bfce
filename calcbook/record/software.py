"""What a record was made with: versions by name, and the digest of the cards used."""

from __future__ import annotations

from dataclasses import dataclass

import calcbook
from calcbook.properties import backend_version
from calcbook.record.digest import Digest


@dataclass(frozen=True, slots=True)
class Software:
    """Versions of calcbook and of the property backend, and the digest of the cards that were used."""

    calcbook: str
    coolprop: str
    library: str


def software_of(digest: Digest) -> Software:
    """The software of this installation."""
    return Software(calcbook.__version__, backend_version(), digest.cards)


def software_line() -> str:
    """The versions of this installation in one line."""
    return f"calcbook {calcbook.__version__}, CoolProp {backend_version()}"
