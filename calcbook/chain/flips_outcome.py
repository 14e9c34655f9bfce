"""What the search for the distance to flip found. Frozen, nothing computes."""

from __future__ import annotations

from typing import NamedTuple

from calcbook.chain.types import Input

# The kinds of verdict that can flip.
CRITERION, LIMIT, METHOD, CONTROLLING = "criterion", "limit", "method", "controlling term"


class Flip(NamedTuple):
    """The smallest change of one given that flips one verdict of one case, the other figures as they stand.

    ``kind`` is criterion, limit, method or controlling term; ``was`` and ``becomes`` are its words. ``now``
    and ``at`` are in SI, ``at`` the first figure known to flip. ``printed`` is that figure in ``unit`` (the
    unit of the file), rounded away from ``now``, and ``printed_inside`` lies one of its last digit nearer:
    the first flips, the second does not. ``change`` is ``printed`` less the present figure, in ``unit``
    (of a temperature: its degree). ``tolerances`` is the change in multiples of the stated ``tolerance``, NaN
    without one. ``steps`` is the change in steps of 1 %, or 1 K of a temperature, infinite from zero.
    """

    kind: str
    id: str
    condition: str
    case: str
    level: str
    was: str
    becomes: str
    input: Input
    now: float
    at: float
    printed: float
    printed_inside: float
    unit: str
    now_text: str
    change: float
    tolerance: str
    tolerances: float
    steps: float

    @property
    def is_within_tolerance(self) -> bool:
        """Whether the stated tolerance reaches the flip."""
        return abs(self.tolerances) <= 1.0


class Searched(NamedTuple):
    """How far a given of a case was moved, in ``unit``, and in words what ended the search on each side."""

    input: Input
    case: str
    unit: str
    low: float
    low_end: str
    high: float
    high_end: str


class Flips(NamedTuple):
    """Every distance to flip, and the ranges that were searched.

    Within a kind stands first what its own tolerance reaches, then the nearest.

    ``unsettled`` names in words what flips somewhere, but at no figure with a few digits. ``left_out`` are the criteria
    that are not searched.
    """

    flips: tuple[Flip, ...]
    searched: tuple[Searched, ...]
    unsettled: tuple[str, ...] = ()
    left_out: tuple[str, ...] = ()

    def of_kind(self, kind: str) -> tuple[Flip, ...]:
        """The flips of one kind, nearest first."""
        return tuple(flip for flip in self.flips if flip.kind == kind)
