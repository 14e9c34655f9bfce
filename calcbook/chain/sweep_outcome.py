"""What a sweep over one or two givens found. Frozen, nothing computes."""

from __future__ import annotations

from dataclasses import dataclass

from calcbook.chain.types import Input
from calcbook.quantities import QuantityKind


@dataclass(frozen=True, slots=True)
class Axis:
    """One given with the figures that it takes, in SI and in ``unit`` (as the file writes it)."""

    input: Input
    figures: tuple[float, ...]
    shown: tuple[float, ...]
    unit: str


@dataclass(frozen=True, slots=True)
class SweptResult:
    """One result at every sample (SI, NaN where there is none), and the criteria on it that have a fixed limit."""

    name: str
    title: str
    kind: QuantityKind
    values: tuple[float, ...]
    limits: tuple[tuple[str, float], ...]


@dataclass(frozen=True, slots=True)
class Sweep:
    """A sweep of the base case, sample by sample; of two givens the second one runs fastest.

    ``missing`` says in words why a sample has no answer, empty where it has one; ``outside`` names the range
    limits that it does not hold.
    """

    axes: tuple[Axis, ...]
    results: tuple[SweptResult, ...]
    missing: tuple[str, ...]
    outside: tuple[tuple[str, ...], ...]

    @property
    def count(self) -> int:
        return len(self.missing)
