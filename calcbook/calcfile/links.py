"""A given that is taken from another calculation's result: what the file says, and what was found."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from calcbook.documents import Mapping, Node, Scalar
from calcbook.faults import Place

CURRENT = "current"


@dataclass(frozen=True, slots=True)
class LinkText:
    """`from:` as written: number and result, and the revision it is pinned to (empty: as the source stands)."""

    calculation: str
    result: str
    revision: str
    place: Place


@dataclass(frozen=True, slots=True)
class Link:
    """A link with what the source gave: revision, digest, the figure as text, and how the source stands.

    ``state`` is current, or says why not: not pinned, source moved, source preliminary, source void. ``on`` is the
    surface of the source that a resistance or an overall coefficient counts on; empty for other results.
    """

    calculation: str
    result: str
    revision: str
    digest: str
    text: str
    state: str
    on: str = ""

    @property
    def is_difference(self) -> bool:
        """Whether the result, where it is in kelvin, is a difference of temperatures."""
        return self.result == "LMTD" or self.result.startswith("dT ")


# How the results of a survey begin: resistances of all deposits of a unit together, and how they grow.
OF_A_SURVEY = ("allowance_", "fitted ")
# And those that count on the surface of the term that they name.
OF_A_DEPOSIT, OF_A_FILM = "largest_allowance", "h"


def surface_of(result: str, basis: str, terms: dict[str, str]) -> str:
    """The surface that a result counts on, by its name: ``basis`` for most, its own for those of ``terms`` (surfaces by
    name of a term); empty where it counts on none."""
    name, _, surface = result.partition(" on ")
    if name in ("U_service", "U_clean"):
        return surface or basis
    kind, _, term = result.partition(" ")
    if kind == OF_A_DEPOSIT:
        return terms.get(term, "")
    if kind == OF_A_FILM:
        return terms.get(term.rpartition(" ")[0], "")
    return basis if result.startswith(("R ", *OF_A_SURVEY)) else ""


def number_of(root: Node) -> str:
    """The number that stands in a calculation file's title block; empty where there is none."""
    head = root.get("calculation") if isinstance(root, Mapping) else None
    number = head.get("number") if isinstance(head, Mapping) else None
    return number.text if isinstance(number, Scalar) else ""


# Gives the link behind a `from:`. Raises ``Faults`` for a source or result that cannot be had.
Resolve = Callable[[LinkText], Link]
