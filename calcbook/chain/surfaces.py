"""Surfaces of the wall from the inside to the outside: diameters and areas as figures of the chain."""

from __future__ import annotations

from dataclasses import dataclass

from calcbook.calcfile.calculation import Geometry, Term
from calcbook.chain.scope import Scope
from calcbook.chain.types import Surface
from calcbook.faults import nearest_names, shown
from calcbook.formulas import parse_expression
from calcbook.library import vocabulary


@dataclass(frozen=True, slots=True)
class Wall:
    """One wall with the indices of its surfaces and the ids of its dimensions (empty where none)."""

    term: Term
    first: int
    thickness: str


@dataclass(frozen=True, slots=True)
class Shape:
    """Shape, surfaces and walls of a calculation; ``dimensions`` are geometric figures by quantity name."""

    name: str
    surfaces: tuple[Surface, ...]
    walls: tuple[Wall, ...]
    dimensions: dict[str, str]
    per_metre: bool

    def surface_named(self, scope: Scope, name: str, place) -> int | None:  # type: ignore[no-untyped-def]
        """The index of a surface as the file names it; None after a fault."""
        names = self.names()
        if name in names:
            return names[name]
        if name in ("bare", "total finned"):
            scope.collector.add("key-not-yet-available", place, f"the surface `{name}` is not yet available",
                                expected=", ".join(names))
            return None
        scope.collector.add("surface-unknown", place, f"there is no surface `{shown(name)}`", found=shown(name),
                            expected=", ".join(names), nearest=nearest_names(name, names))
        return None

    def names(self) -> dict[str, int]:
        """Every name of a surface with its index."""
        names = {"inside": 0, "outside": len(self.surfaces) - 1}
        for wall in self.walls:
            names[f"outside of {wall.term.name}"] = wall.first + 1
        return names


def lay_out_shape(scope: Scope, geometry: Geometry, walls: tuple[Term, ...]) -> Shape | None:
    """Diameters, areas and surfaces; None after a fault that leaves nothing to go on with."""
    values = {key: scope.value(value, _kind(key), "geometry", key) for key, value in geometry.dimensions.items()}
    for key in geometry.dimensions:
        if key not in _keys(geometry.shape):
            scope.collector.add("key-unknown", geometry.dimensions[key].place,
                                f"a {geometry.shape} has no `{key}`", expected=", ".join(_keys(geometry.shape)))
    values = {key: value for key, value in values.items() if value}
    thicknesses = [scope.value(wall.values.get("thickness"), "thickness", wall.name, "thickness") for wall in walls]
    if geometry.shape == "plane":
        return _plane(scope, walls, thicknesses, values)
    return _round(scope, geometry, walls, thicknesses, values)


def _keys(shape: str) -> tuple[str, ...]:
    return {
        "tube": ("inside diameter", "outside diameter", "length", "parallel"),
        "sphere": ("inside diameter", "outside diameter"),
        "plane": ("height", "width", "area", "perimeter"),
    }.get(shape, ())


def _kind(key: str) -> str:
    return {"parallel": "tubes in parallel"}.get(key, key)


# --- plane ------------------------------------------------------------------------------------------


def _plane(scope: Scope, walls: tuple[Term, ...], thicknesses: list[str], values: dict[str, str]) -> Shape:
    area = values.get("area", "")
    if not area and "height" in values and "width" in values:
        area = scope.relation_step("geometry/A", "A", "area", "geometry", parse_expression("H*W"),
                                   {"H": values["height"], "W": values["width"]}, "geometry", "area")
    if not area:
        area = scope.constant("geometry/area of 1 m²", 1.0, vocabulary()["area"].dimension)
        scope.assume("geometry/area", "Heat flow is for 1 m² of wall.", "no area is stated", "geometry")
    if "perimeter" not in values and "height" in values and "width" in values:
        values["perimeter"] = scope.relation_step("geometry/P", "P", "perimeter", "geometry", parse_expression("2*(H + W)"),
                                                  {"H": values["height"], "W": values["width"]}, "geometry", "perimeter")
    surfaces = tuple(Surface(name, area, "") for name in _surface_names(walls))
    laid = tuple(Wall(wall, index, thicknesses[index]) for index, wall in enumerate(walls))
    for wall, thickness in zip(walls, thicknesses, strict=True):
        if not thickness and "resistance" not in wall.values:
            scope.collector.add("need-missing", wall.place, f"the wall `{wall.name}` has no thickness",
                                expected="thickness: … with its unit")
    return Shape("plane", surfaces, laid, {**values, "area": area}, False)


def _surface_names(walls: tuple[Term, ...]) -> list[str]:
    names = ["inside", *(f"outside of {wall.name}" for wall in walls)]
    names[-1] = "outside" if walls else "inside"
    return names


# --- tube and sphere --------------------------------------------------------------------------------


def _round(scope: Scope, geometry: Geometry, walls: tuple[Term, ...], thicknesses: list[str],
           values: dict[str, str]) -> Shape | None:
    if not walls:
        scope.collector.add("term-order", geometry.place, f"a {geometry.shape} needs a wall",
                            expected="a term of kind wall between the films")
        return None
    diameters = [_bore(scope, geometry, walls, thicknesses, values)]
    for index, wall in enumerate(walls):
        outer = scope.value(wall.values.get("outside diameter"), "outside diameter", wall.name, "outside diameter")
        if not outer and index == 0:
            outer = values.get("outside diameter", "")
        if not outer and diameters[-1] and thicknesses[index]:
            outer = scope.relation_step(f"geometry/outside of {wall.name}", f"d_{index + 1}", f"diameter outside {wall.name}",
                                        "geometry", parse_expression("d + 2*t"),
                                        {"d": diameters[-1], "t": thicknesses[index]}, "geometry", "diameter")
        if not outer:
            scope.collector.add("need-missing", wall.place, f"the wall `{wall.name}` has no outside diameter",
                                expected="thickness or outside diameter on the wall, or the outside diameter in the geometry")
        diameters.append(outer)
    if not all(diameters):
        return None
    length, count, per_metre = _length(scope, geometry, values)
    surfaces = tuple(
        Surface(name, _area(scope, geometry.shape, name, index, len(walls), diameter, length, count), diameter)
        for index, (name, diameter) in enumerate(zip(_surface_names(walls), diameters, strict=True))
    )
    laid = tuple(Wall(wall, index, thicknesses[index]) for index, wall in enumerate(walls))
    dimensions = {"inside diameter": diameters[0], "outside diameter": diameters[-1]}
    if geometry.shape == "tube":
        dimensions["tubes in parallel"] = count
        if not per_metre:
            dimensions["length"] = length
    return Shape(geometry.shape, surfaces, laid, dimensions, per_metre)


def _bore(scope: Scope, geometry: Geometry, walls: tuple[Term, ...], thicknesses: list[str],
          values: dict[str, str]) -> str:
    if "inside diameter" in values:
        return values["inside diameter"]
    if "outside diameter" in values and thicknesses and thicknesses[0]:
        return scope.relation_step("geometry/d_i", "d_i", "inside diameter", "geometry", parse_expression("d_o - 2*t"),
                                   {"d_o": values["outside diameter"], "t": thicknesses[0]}, "geometry",
                                   "inside diameter")
    if "inside diameter" not in geometry.dimensions:
        scope.collector.add("need-missing", geometry.place, "the bore is not stated",
                            expected="inside diameter in the geometry, or its outside diameter and a wall thickness")
    return ""


def _length(scope: Scope, geometry: Geometry, values: dict[str, str]) -> tuple[str, str, bool]:
    count = values.get("parallel", "")
    if not count:
        count = scope.constant("geometry/one tube", 1.0)
        if geometry.shape == "tube":
            scope.assume("geometry/parallel", "One tube carries the flow.", "no number of tubes in parallel is stated", "geometry")
    length = values.get("length", "")
    if length or geometry.shape == "sphere":
        return length, count, False
    scope.assume("geometry/length", "Areas and heat flow are for 1 m of tube.", "no length is stated", "geometry")
    return scope.constant("geometry/1 m", 1.0, vocabulary()["length"].dimension), count, True


def _area(scope: Scope, shape: str, name: str, index: int, last: int, diameter: str, length: str, count: str) -> str:
    mark = "i" if index == 0 else ("o" if index == last else str(index))
    if shape == "sphere":
        return scope.relation_step(f"circuit/A_{mark}", f"A_{mark}", f"area, {name}", "circuit",
                                   parse_expression(f"pi*d_{mark}**2"), {f"d_{mark}": diameter}, "geometry", "area")
    return scope.relation_step(f"circuit/A_{mark}", f"A_{mark}", f"area, {name}", "circuit",
                               parse_expression(f"pi*d_{mark}*L*N"), {f"d_{mark}": diameter, "L": length, "N": count},
                               "geometry", "area")
