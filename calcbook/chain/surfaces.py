"""Surfaces of the wall from the inside to the outside: diameters and areas as figures of the chain."""

from __future__ import annotations

from dataclasses import dataclass

from calcbook.calcfile.calculation import Geometry, Term
from calcbook.chain.scope import Scope
from calcbook.chain.types import ChainCheck, Surface
from calcbook.faults import Place, nearest_names, shown
from calcbook.formulas import parse_expression
from calcbook.library import vocabulary
from calcbook.library.cards import practice_limit


@dataclass(frozen=True, slots=True)
class Wall:
    """One wall with the indices of its surfaces and the ids of its dimensions (empty where none)."""

    term: Term
    first: int
    thickness: str


@dataclass(frozen=True, slots=True)
class Shape:
    """Shape, surfaces and walls of a calculation; ``dimensions`` are geometric figures by quantity name.

    ``finned_side`` is the side whose film has fins; ``fins_failed`` says that fins are stated and have a fault.
    """

    name: str
    surfaces: tuple[Surface, ...]
    walls: tuple[Wall, ...]
    dimensions: dict[str, str]
    per_metre: bool
    finned_side: str = ""
    fins_failed: bool = False
    checks: tuple[ChainCheck, ...] = ()

    @property
    def outermost(self) -> int:
        """The index of the outermost solid surface, without its fins."""
        return len(self.surfaces) - (2 if self.finned_side else 1)

    def bare(self, side: str) -> int:
        """The index of the solid surface on a side, without its fins."""
        return 0 if side == "inside" else self.outermost

    def wetted(self, side: str) -> int:
        """The index of the surface that the film on a side acts on: the total finned one where it has fins."""
        return len(self.surfaces) - 1 if side == self.finned_side else self.bare(side)

    def mark(self, surface: int) -> str:
        """The index that the symbols of a surface carry."""
        if self.finned_side and surface == len(self.surfaces) - 1:
            return "tf"
        return (
            "i"
            if surface == 0 and self.outermost > 0
            else ("o" if surface == self.outermost else str(surface))
        )

    def surface_named(self, scope: Scope, name: str, place: Place) -> int | None:
        """The index of a surface as the file names it; None after a fault."""
        names = self.names()
        if name in names:
            return names[name]
        if name in ("bare", "total finned") and self.fins_failed:
            return None
        if name in ("bare", "total finned"):
            scope.collector.add(
                "surface-unknown",
                place,
                f"no film has fins: there is no surface `{name}`",
                found=name,
                expected=", ".join(names),
            )
            return None
        scope.collector.add(
            "surface-unknown",
            place,
            f"there is no surface `{shown(name)}`",
            found=shown(name),
            expected=", ".join(names),
            nearest=nearest_names(name, names),
        )
        return None

    def names(self) -> dict[str, int]:
        """Every name of a surface with its index."""
        names = {"inside": 0, "outside": self.outermost}
        for wall in self.walls:
            names[f"outside of {wall.term.name}"] = wall.first + 1
        if self.finned_side:
            names |= {"bare": self.bare(self.finned_side), "total finned": len(self.surfaces) - 1}
        return names


BUNDLE_KEYS = ("tubes", "passes", "plugged", "effective length")


def stated_surface(scope: Scope, shape: Shape, term: Term, default: int) -> int | None:
    """The index of the surface that a term acts on: the one it names, else the ``default``; None after a fault."""
    name = term.texts.get("on", "")
    if name:
        return shape.surface_named(scope, name, term.place_of("on"))
    scope.assume(
        f"{term.name}/on",
        f"{term.name} acts on the surface {shape.surfaces[default].name}.",
        "the surface next to it; no other is stated",
        term.name,
    )
    return default


def lay_out_shape(scope: Scope, geometry: Geometry, walls: tuple[Term, ...]) -> Shape | None:
    """Diameters, areas and surfaces; None after a fault that leaves nothing to go on with."""
    values = {
        key: scope.value(value, _kind(key), "geometry", key) for key, value in geometry.dimensions.items()
    }
    for key in geometry.dimensions:
        if key not in _keys(geometry.shape):
            scope.collector.add(
                "key-unknown",
                geometry.dimensions[key].place,
                f"a {geometry.shape} has no `{key}`",
                expected=", ".join(_keys(geometry.shape)),
            )
    values = {key: value for key, value in values.items() if value}
    thicknesses = [
        scope.value(wall.values.get("thickness"), "thickness", wall.name, "thickness") for wall in walls
    ]
    if geometry.shape == "plane":
        return _plane(scope, walls, thicknesses, values)
    return _round(scope, geometry, walls, thicknesses, values)


def _keys(shape: str) -> tuple[str, ...]:
    return {
        "tube": ("inside diameter", "outside diameter", "length", "parallel", *BUNDLE_KEYS),
        "sphere": ("inside diameter", "outside diameter"),
        "plane": ("height", "width", "area", "perimeter"),
    }.get(shape, ())


def _kind(key: str) -> str:
    names = {"parallel": "tubes in parallel", "passes": "tube passes", "plugged": "plugged tubes"}
    return names.get(key, "length" if key == "effective length" else key)


# --- plane ------------------------------------------------------------------------------------------


def _plane(scope: Scope, walls: tuple[Term, ...], thicknesses: list[str], values: dict[str, str]) -> Shape:
    area = values.get("area", "")
    if not area and "height" in values and "width" in values:
        area = scope.relation_step(
            "geometry/A",
            "A",
            "area",
            "geometry",
            parse_expression("H*W"),
            {"H": values["height"], "W": values["width"]},
            "geometry",
            "area",
        )
    if not area:
        area = scope.constant("geometry/area of 1 m²", 1.0, vocabulary()["area"].dimension)
        scope.assume("geometry/area", "Heat flow is for 1 m² of wall.", "no area is stated", "geometry")
    if "perimeter" not in values and "height" in values and "width" in values:
        values["perimeter"] = scope.relation_step(
            "geometry/P",
            "P",
            "perimeter",
            "geometry",
            parse_expression("2*(H + W)"),
            {"H": values["height"], "W": values["width"]},
            "geometry",
            "perimeter",
        )
    surfaces = tuple(Surface(name, area, "") for name in _surface_names(walls))
    laid = tuple(Wall(wall, index, thicknesses[index]) for index, wall in enumerate(walls))
    for wall, thickness in zip(walls, thicknesses, strict=True):
        if not thickness and "resistance" not in wall.values:
            scope.collector.add(
                "need-missing",
                wall.place,
                f"the wall `{wall.name}` has no thickness",
                expected="thickness: … with its unit",
            )
    return Shape("plane", surfaces, laid, {**values, "area": area}, False)


def _surface_names(walls: tuple[Term, ...]) -> list[str]:
    names = ["inside", *(f"outside of {wall.name}" for wall in walls)]
    names[-1] = "outside" if walls else "inside"
    return names


# --- tube and sphere --------------------------------------------------------------------------------


def _round(
    scope: Scope, geometry: Geometry, walls: tuple[Term, ...], thicknesses: list[str], values: dict[str, str]
) -> Shape | None:
    if not walls:
        scope.collector.add(
            "term-order",
            geometry.place,
            f"a {geometry.shape} needs a wall",
            expected="a term of kind wall between the films",
        )
        return None
    diameters = [_bore(scope, geometry, thicknesses, values)]
    for index, wall in enumerate(walls):
        outer = scope.value(
            wall.values.get("outside diameter"), "outside diameter", wall.name, "outside diameter"
        )
        if not outer and index == 0:
            outer = values.get("outside diameter", "")
        if not outer and diameters[-1] and thicknesses[index]:
            outer = scope.relation_step(
                f"geometry/outside of {wall.name}",
                f"d_{index + 1}",
                f"diameter outside {wall.name}",
                "geometry",
                parse_expression("d + 2*t"),
                {"d": diameters[-1], "t": thicknesses[index]},
                "geometry",
                "diameter",
            )
        if not outer:
            scope.collector.add(
                "need-missing",
                wall.place,
                f"the wall `{wall.name}` has no outside diameter",
                expected="thickness or outside diameter on the wall, or the outside diameter in the geometry",
            )
        diameters.append(outer)
    if not all(diameters):
        return None
    length, count, per_metre = _length(scope, geometry, values)
    heated = _heated_length(scope, values, length)
    tubes = _open_tubes(scope, geometry, values)
    if tubes:
        count = _tubes_in_parallel(scope, geometry, values, tubes)
    surfaces = tuple(
        Surface(
            name,
            _area(scope, geometry.shape, name, index, len(walls), diameter, heated, tubes or count),
            diameter,
        )
        for index, (name, diameter) in enumerate(zip(_surface_names(walls), diameters, strict=True))
    )
    laid = tuple(Wall(wall, index, thicknesses[index]) for index, wall in enumerate(walls))
    dimensions = {"inside diameter": diameters[0], "outside diameter": diameters[-1]}
    if geometry.shape == "tube":
        dimensions["tubes in parallel"] = count
        dimensions["open tubes"] = tubes or count
        if values.get("passes"):
            dimensions["tube passes"] = values["passes"]
        if not per_metre:
            dimensions |= {"length": heated, "tube length": length}
    checks = _bundle_checks(geometry, values, tubes, length)
    return Shape(geometry.shape, surfaces, laid, dimensions, per_metre, checks=checks)


def _bore(scope: Scope, geometry: Geometry, thicknesses: list[str], values: dict[str, str]) -> str:
    if "inside diameter" in values:
        return values["inside diameter"]
    if "outside diameter" in values and thicknesses and thicknesses[0]:
        return scope.relation_step(
            "geometry/d_i",
            "d_i",
            "inside diameter",
            "geometry",
            parse_expression("d_o - 2*t"),
            {"d_o": values["outside diameter"], "t": thicknesses[0]},
            "geometry",
            "inside diameter",
        )
    if "inside diameter" not in geometry.dimensions:
        scope.collector.add(
            "need-missing",
            geometry.place,
            "the bore is not stated",
            expected="inside diameter in the geometry, or its outside diameter and a wall thickness",
        )
    return ""


def _length(scope: Scope, geometry: Geometry, values: dict[str, str]) -> tuple[str, str, bool]:
    count = values.get("parallel", "")
    if not count and "tubes" not in geometry.dimensions:
        count = scope.constant("geometry/one tube", 1.0)
        if geometry.shape == "tube":
            scope.assume(
                "geometry/parallel",
                "One tube carries the flow.",
                "no number of tubes in parallel is stated",
                "geometry",
            )
    length = values.get("length", "") or values.get("effective length", "")
    if length or geometry.shape == "sphere":
        return length, count, False
    scope.assume(
        "geometry/length", "Areas and heat flow are for 1 m of tube.", "no length is stated", "geometry"
    )
    return scope.constant("geometry/1 m", 1.0, vocabulary()["length"].dimension), count, True


def _heated_length(scope: Scope, values: dict[str, str], length: str) -> str:
    """The length that transfers heat: the effective one where it is stated, else the whole length."""
    effective = values.get("effective length", "")
    if not effective:
        return length
    scope.assume(
        "geometry/effective length",
        "Areas and heat-transfer methods take the effective length; friction takes the whole length.",
        "an effective length is stated",
        "geometry",
    )
    return effective


def _open_tubes(scope: Scope, geometry: Geometry, values: dict[str, str]) -> str:
    """The id of the tubes of a bundle that are not plugged; empty where no bundle is stated."""
    tubes, plugged = values.get("tubes", ""), values.get("plugged", "")
    _refuse_parts_of_tubes(scope, geometry)
    for key in ("passes", "plugged"):
        if (
            key in geometry.dimensions
            and "tubes" not in geometry.dimensions
            and "parallel" not in geometry.dimensions
        ):
            scope.collector.add(
                "key-missing",
                geometry.dimensions[key].place,
                f"`{key}` belongs to a bundle: `tubes` is missing",
                expected="tubes: the number of tubes of the bundle, plugged ones included",
            )
            return ""
    if not tubes or not plugged:
        return tubes
    return scope.relation_step(
        "geometry/open tubes",
        "N_open",
        "tubes that are not plugged",
        "geometry",
        parse_expression("N_all - N_plug"),
        {"N_all": tubes, "N_plug": plugged},
        "bundle",
        "open tubes",
    )


def _refuse_parts_of_tubes(scope: Scope, geometry: Geometry) -> None:
    """Tubes, passes and plugged tubes are counted: a fault where a figure is no whole number."""
    for key in ("tubes", "passes", "plugged"):
        value = geometry.dimensions.get(key)
        given = scope.calculation.givens.get(value.symbol) if value is not None else None
        held = given.value if given is not None else value
        if held is not None and held.quantity is not None and held.quantity.value != int(held.quantity.value):
            scope.collector.add(
                "number-unreadable",
                held.place,
                f"`{key}` counts whole tubes or passes",
                found=shown(held.text),
                expected="a whole number",
            )


def _bundle_checks(
    geometry: Geometry, values: dict[str, str], tubes: str, length: str
) -> tuple[ChainCheck, ...]:
    """That a bundle keeps open tubes, a tube or more for each pass, and an effective length within the length."""
    checks = []

    def check(name: str, that: str, because: str, **figures: str) -> None:
        if all(figures.values()):
            limit = practice_limit(name, that, "stop", because, geometry.place)
            checks.append(ChainCheck(f"geometry / bundle / {name}", "geometry", "bundle", limit, figures))

    check(
        "plugged",
        "N_plug < N_all",
        "some tubes are open",
        N_plug=values.get("plugged", ""),
        N_all=values.get("tubes", ""),
    )
    check(
        "passes",
        "1 <= N_pass <= N_open",
        "each pass has a tube",
        N_pass=values.get("passes", ""),
        N_open=tubes,
    )
    if values.get("length"):
        check(
            "effective length",
            "L_eff <= L_t",
            "it is a part of the length",
            L_eff=values.get("effective length", ""),
            L_t=length,
        )
    return tuple(checks)


def _tubes_in_parallel(scope: Scope, geometry: Geometry, values: dict[str, str], tubes: str) -> str:
    """The tubes that share the flow: the open tubes over the passes."""
    if not values.get("passes"):
        if "passes" not in geometry.dimensions:
            scope.assume(
                "geometry/passes",
                "The bundle has one tube pass.",
                "no number of passes is stated",
                "geometry",
            )
        return tubes
    scope.assume(
        "geometry/passes",
        "Open tubes are spread evenly over the passes.",
        "plugged tubes are stated for the whole bundle, not pass by pass",
        "geometry",
    )
    return scope.relation_step(
        "geometry/tubes in parallel",
        "N",
        "tubes in parallel",
        "geometry",
        parse_expression("N_open/N_pass"),
        {"N_open": tubes, "N_pass": values["passes"]},
        "bundle",
        "tubes in parallel",
    )


def _area(
    scope: Scope, shape: str, name: str, index: int, last: int, diameter: str, length: str, count: str
) -> str:
    mark = "i" if index == 0 else ("o" if index == last else str(index))
    if shape == "sphere":
        return scope.relation_step(
            f"circuit/A_{mark}",
            f"A_{mark}",
            f"area, {name}",
            "circuit",
            parse_expression(f"pi*d_{mark}**2"),
            {f"d_{mark}": diameter},
            "geometry",
            "area",
        )
    return scope.relation_step(
        f"circuit/A_{mark}",
        f"A_{mark}",
        f"area, {name}",
        "circuit",
        parse_expression(f"pi*d_{mark}*L*N"),
        {f"d_{mark}": diameter, "L": length, "N": count},
        "geometry",
        "area",
    )
