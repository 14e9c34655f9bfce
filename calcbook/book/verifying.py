"""Run every check point of the library, and find the figures that none covers."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from calcbook.faults import Faults
from calcbook.library import Library
from calcbook.library.checking import (
    PointResult,
    Uncovered,
    check_material,
    check_method,
    check_situation,
    material_points,
    method_points,
    uncovered_constants,
)


@dataclass(frozen=True, slots=True)
class Verified:
    """What a verification found."""

    points: tuple[PointResult, ...]
    uncovered: tuple[Uncovered, ...]
    trial: tuple[str, ...]
    faults: tuple[str, ...]

    @property
    def has_findings(self) -> bool:
        return bool(self.faults) or any(not point.holds for point in self.points)


def verify(library: Library, tell: Callable[[str], None]) -> Verified:
    """Load and check every card; ``tell`` is called with each card's id as it ends."""
    points: list[PointResult] = []
    uncovered: list[Uncovered] = []
    trial: list[str] = []
    faults: list[str] = []
    for name in library.names("methods"):
        try:
            check_method(library.method(name), library)
        except Faults as found:
            faults += [str(fault) for fault in found.faults]
        else:
            uncovered += uncovered_constants(library.method(name), library)
            points += method_points(library.method(name), library)
            trial += [name] if library.method(name).state.status == "trial" else []
        tell(name)
    for name in library.names("materials"):
        try:
            check_material(library.material(name))
        except Faults as found:
            faults += [str(fault) for fault in found.faults]
        else:
            points += material_points(library.material(name))
            trial += [name] if library.material(name).state.status == "trial" else []
        tell(name)
    for name in library.names("situations"):
        try:
            check_situation(name, library)
        except Faults as found:
            faults += [str(fault) for fault in found.faults]
        tell(name)
    return Verified(tuple(points), tuple(uncovered), tuple(trial), tuple(faults))
