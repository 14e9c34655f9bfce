"""What a sweep over one or two givens found. Frozen, nothing computes."""

from __future__ import annotations

from typing import NamedTuple

from calcbook.chain.types import Input
from calcbook.quantities import QuantityKind


class Axis(NamedTuple):
    """One given with the figures that it takes, in SI and in ``unit`` (as the file writes it)."""

    input: Input
    figures: tuple[float, ...]
    shown: tuple[float, ...]
    unit: str


class SweptResult(NamedTuple):
    """One result at every sample (SI, NaN where there is none), and the criteria on it that have a fixed limit."""

    name: str
    title: str
    kind: QuantityKind
    values: tuple[float, ...]
    limits: tuple[tuple[str, float], ...]


class Sweep(NamedTuple):
    """A sweep of the base case, sample by sample; of two givens the second one runs fastest.

    ``missing`` says in words why a sample has no answer, empty where it has one; ``outside`` names the range
    limits that it does not hold.
    """

    axes: tuple[Axis, ...]
    results: tuple[SweptResult, ...]
    missing: tuple[str, ...]
    outside: tuple[tuple[str, ...], ...]

    @property
    def samples(self) -> int:
        return len(self.missing)
