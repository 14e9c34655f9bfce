"""Errors found in cards after their release, so that an audit can name the records they touched."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from calcbook.documents import Description, Key, Mapping, Scalar, Sequence, read_file, read_mapping
from calcbook.faults import Collector

ERRATA = Path(__file__).with_name("errata.yaml")
ERRATUM = Description(
    "an erratum",
    "an error found in a card",
    (
        Key("card", "id of the card", "name", required=True),
        Key("versions", "versions of calcbook that held the error", "list", required=True),
        Key("wrong", "what was wrong and what it did", required=True),
        Key("mended in", "version that mended it", "name", required=True),
    ),
)


@dataclass(frozen=True, slots=True)
class Erratum:
    """One error of a card."""

    card: str
    versions: tuple[str, ...]
    wrong: str
    mended_in: str


def read_errata(path: Path = ERRATA) -> tuple[Erratum, ...]:
    """The known errors of cards. Raises ``Faults`` for a file that cannot be read."""
    root = read_file(path, path.name).root
    node = root.get("errata") if isinstance(root, Mapping) else None
    collector = Collector()
    found = []
    for item in node.items if isinstance(node, Sequence) else ():
        fields = read_mapping(item, ERRATUM, collector, item.place)
        versions = fields.node("versions")
        names = (
            tuple(one.text for one in versions.items if isinstance(one, Scalar))
            if isinstance(versions, Sequence)
            else ()
        )
        found.append(Erratum(fields.text("card"), names, fields.text("wrong"), fields.text("mended in")))
    collector.stop_if_any()
    return tuple(found)
