"""Figures held against what is usual in their place: the slipped decimal, the wrong unit, the swapped pair.

Every figure that stands where a plausible band exists is compared with it, inputs and results alike; a value
outside is a caution that names the band. So is an allowance, or a U, far outside what is typical of the
service that the file names. Nothing here blocks, and nothing fills a figure in. Only what lies outside is
returned: a figure within its band says nothing.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from calcbook.calcfile.calculation import Value
from calcbook.chain.checks import apart
from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.gaps import gaps
from calcbook.chain.outcome import CheckResult
from calcbook.chain.scope import STANDARD_PRESSURE
from calcbook.chain.solve import Solution
from calcbook.chain.types import SERVICE, Branch, Chain, Group, Layer, StreamState
from calcbook.library.plausibility import FOULING, OVERALL, Band, Typical, bands, typical
from calcbook.quantities import QuantityKind, unit_display

# Situations whose speed is that through the bore of a tube, and those of a fluid across or along a bundle.
IN_TUBES = ("inside-tube", "inside-coil")
ON_SHELL = ("shell-side", "tube-bank")
# Below this conductivity a stated wall is no metal, W/(m K): common practice.
INSULATING = 5.0
# U by what the fluids of both sides do.
PAIRS = {
    frozenset(("gas",)): "U of gas to gas",
    frozenset(("liquid", "gas")): "U of liquid to gas",
    frozenset(("liquid",)): "U of liquid to liquid",
    frozenset(("condensing", "liquid")): "U of condensing to liquid",
    frozenset(("condensing", "gas")): "U of condensing to gas",
    frozenset(("boiling", "liquid")): "U with boiling",
    frozenset(("boiling", "condensing")): "U with boiling",
    frozenset(("boiling", "gas")): "U of liquid to gas",
}
FILMS = {
    "liquid": "film coefficient of a liquid",
    "gas": "film coefficient of a gas",
    "condensing": "film coefficient of condensing",
    "boiling": "film coefficient of boiling",
    "": "stated film coefficient",
}

THROTTLED_VAPOUR = "pressure of a throttled vapour"


@dataclass(frozen=True, slots=True)
class Figure:
    """A figure in its place: what it belongs to, the band that it is held against, its value in SI."""

    owner: str
    band: str
    value: float


def band_checks(chain: Chain, case: str, solution: Solution) -> list[CheckResult]:
    """A caution for every figure of one condition outside its plausible band or far from its service."""
    known = bands()
    found = [
        _outside(figure, known[figure.band], case, solution.condition) for figure in figures(chain, solution)
    ]
    if solution.condition == SERVICE:
        found += _service_checks(chain, case, solution)
    return [check for check in found if check is not None]


def throttled_vapour(
    chain: Chain, stream: StreamState, stated: float, throttled: float, condition: str
) -> list[CheckResult]:
    """A caution where a condensing vapour is throttled from above the pressure of the site to below it (pressures in Pa)."""
    band = bands()[THROTTLED_VAPOUR]._replace(low=site_pressure(chain))
    if not stated >= band.low:
        return []
    check = _outside(Figure(f"stream {stream.name}", band.name, throttled), band, "", condition)
    return [check] if check is not None else []


def site_pressure(chain: Chain) -> float:
    """The pressure of the site that the book states, else the standard atmosphere, Pa."""
    stated = chain.calculation.settings.site_pressure
    return stated.quantity.value if stated is not None and stated.quantity is not None else STANDARD_PRESSURE


def figures(chain: Chain, solution: Solution) -> Iterator[Figure]:
    """Every figure that has a plausible band in its place; a figure that is not known is left out."""
    for figure in _all_figures(chain, solution):
        if math.isfinite(figure.value):
            yield figure


def _all_figures(chain: Chain, solution: Solution) -> Iterator[Figure]:
    yield from _dimensions(chain, solution)
    walls = list(_walls(chain, solution))
    for wall in walls:
        yield Figure(wall.owner, wall.thickness_band, wall.thickness)
        yield Figure(wall.owner, wall.conductivity_band, wall.conductivity)
    terms = {term.name: term for term in chain.calculation.resistances}
    for layer, _ in gaps(chain):
        stated = terms[layer.name].values.get("thickness")
        yield Figure(
            layer.name, "gap between two walls", stated_figure(solution, stated, layer.name, "thickness")
        )
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            if branch.kind != "radiation":
                yield from _film(chain, solution, group, branch)
    if solution.condition == SERVICE:
        for element in chain.elements:
            # An allowance of nothing is stated on purpose.
            if (
                isinstance(element, Layer)
                and element.kind == "fouling"
                and solution.number(element.resistance) != 0.0
            ):
                yield Figure(element.name, "fouling allowance", solution.number(element.resistance))
        if "area margin" in chain.results:
            over = 1.0 + solution.number(chain.results["area margin"])
            yield Figure("duty", "installed over required area", over)
    if "heat flux" in chain.results:
        yield Figure("U", "heat flux", abs(solution.number(chain.results["heat flux"])))
    if not any(wall.insulates for wall in walls) and not gaps(chain):
        pair = frozenset(_side(chain, solution, group) for group in (chain.inner, chain.outer))
        yield Figure(
            "U", PAIRS.get(pair, "U of any uninsulated surface"), solution.number(chain.results["U"])
        )


# --- dimensions and walls ---------------------------------------------------------------------------


def _shape(chain: Chain) -> str:
    return chain.calculation.geometry.shape if chain.calculation.geometry is not None else ""


def _tubes(chain: Chain, solution: Solution) -> float:
    """How many tubes there are; one where nothing says so."""
    for key in ("tubes", "parallel"):
        count = stated_figure(solution, _dimension(chain, key), "geometry", key)
        if math.isfinite(count):
            return count
    return 1.0


def _dimension(chain: Chain, key: str) -> Value | None:
    geometry = chain.calculation.geometry
    return geometry.dimensions.get(key) if geometry is not None else None


def stated_figure(solution: Solution, value: Value | None, owner: str, key: str) -> float:
    """A figure of the file as the solution holds it; NaN where the file has none."""
    if value is None:
        return math.nan
    names = (f"given/{value.symbol}", f"derived/{value.symbol}") if value.symbol else (f"{owner}/{key}",)
    return next((solution.number(name) for name in names if name in solution.values), math.nan)


def _dimensions(chain: Chain, solution: Solution) -> Iterator[Figure]:
    if _shape(chain) == "plane":
        return
    bundle = _tubes(chain, solution) > 1.0
    bore, outer = ("tube bore", "tube outside diameter") if bundle else ("pipe bore", "pipe outside diameter")
    round_surfaces = [surface for surface in chain.surfaces if surface.diameter]
    yield Figure("geometry", bore, solution.number(round_surfaces[0].diameter))
    if len(round_surfaces) > 1:
        yield Figure("geometry", outer, solution.number(round_surfaces[1].diameter))
    if bundle:
        yield Figure(
            "geometry",
            "tube length",
            stated_figure(solution, _dimension(chain, "length"), "geometry", "length"),
        )


@dataclass(frozen=True, slots=True)
class _Wall:
    """One wall with its figures, NaN where not known, and the bands they are held against."""

    owner: str
    thickness: float
    conductivity: float
    kind: str
    thickness_band: str

    @property
    def conductivity_band(self) -> str:
        names = {"metal": "wall conductivity of metals", "insulation": "wall conductivity of insulations"}
        return names.get(self.kind, "wall conductivity of any solid")

    @property
    def insulates(self) -> bool:
        return self.kind == "insulation" or self.conductivity < INSULATING


def _walls(chain: Chain, solution: Solution) -> Iterator[_Wall]:
    bundle = _tubes(chain, solution) > 1.0
    terms = {term.name: term for term in chain.calculation.resistances if term.kind == "wall"}
    first = next(iter(terms), "")
    for element in chain.elements:
        if (
            not isinstance(element, Layer)
            or element.kind != "wall"
            or "resistance" in terms[element.name].values
        ):
            continue
        term = terms[element.name]
        kind = chain.library.material(element.material).kind if element.material else ""
        if not kind and term.name == first and _shape(chain) != "plane":
            kind = "metal"
        thickness = stated_figure(solution, term.values.get("thickness"), term.name, "thickness")
        if chain.surfaces[element.surface].diameter and element.surface > 0:
            before, after = (
                solution.number(chain.surfaces[index].diameter)
                for index in (element.surface - 1, element.surface)
            )
            thickness = (after - before) / 2.0
        conductivity = stated_figure(solution, term.values.get("conductivity"), term.name, "conductivity")
        if element.material:
            conductivity = solution.number(f"{term.name}/{element.material}/k")
        thickness_band = "insulation thickness" if kind == "insulation" else "metal wall thickness"
        if bundle and term.name == first and kind == "metal":
            thickness_band = "tube wall thickness"
        yield _Wall(term.name, thickness, conductivity, kind, thickness_band)


# --- films and sides --------------------------------------------------------------------------------


def _film(chain: Chain, solution: Solution, group: Group, branch: Branch) -> Iterator[Figure]:
    kind = _kind(chain, solution, branch)
    yield Figure(branch.name, FILMS[kind], solution.number(branch_coefficient(group, branch.name)))
    factor = chain.calculation.term(branch.name).values.get("method factor")
    yield Figure(branch.name, "method factor", stated_figure(solution, factor, branch.name, "method factor"))
    if kind not in ("liquid", "gas") or branch.situation is None:
        return
    state = chain.streams[branch.stream]
    name = state.flow if state.flow_kind == "speed" else f"{branch.name}/speed"
    if name not in solution.values:
        return
    speed = solution.number(name)
    if branch.situation.id in ON_SHELL and kind == "liquid":
        yield Figure(branch.name, "velocity of a liquid on the shell side", speed)
    if branch.situation.id not in IN_TUBES:
        return
    yield Figure(branch.name, f"velocity of a {kind} in tubes", speed)
    if kind == "liquid":
        yield from (Figure(branch.name, band.name, speed) for band in _bands_of_metal(chain))
        tubes = _in_parallel(chain, solution)
        if tubes > 1.0 and state.mass_flow:
            yield Figure(branch.name, "flow per tube", solution.number(state.mass_flow) / tubes)


def _in_parallel(chain: Chain, solution: Solution) -> float:
    """How many tubes share the flow."""
    shared = "geometry/tubes in parallel"
    return solution.number(shared) if shared in solution.values else _tubes(chain, solution)


def _bands_of_metal(chain: Chain) -> Iterator[Band]:
    """The bands of speed that hold for the material of the first wall."""
    material = next(
        (
            element.material
            for element in chain.elements
            if isinstance(element, Layer) and element.kind == "wall"
        ),
        "",
    )
    for band in bands().values():
        if material and any(material.startswith(start) for start in band.materials):
            yield band


def _kind(chain: Chain, solution: Solution, branch: Branch) -> str:
    """What the fluid of a film does: liquid, gas, condensing, boiling; empty where no fluid is named."""
    if branch.situation is not None and branch.situation.changes_phase:
        return branch.situation.changes_phase
    if not branch.stream:
        return ""
    duty = chain.calculation.duty
    for name, side in duty.sides.items() if duty is not None else ():
        if side.stream == branch.stream and not side.has_ends:
            return "condensing" if name == "hot" else "boiling"
    state = chain.streams[branch.stream]
    if state.phase:
        return state.phase
    pressure = solution.number(state.pressure) if state.pressure else None
    fraction = solution.number(state.fraction) if state.fraction else None
    phase = state.fluid.state(pressure, fraction, "").phase_at(solution.number(state.temperature))
    return phase if phase in ("liquid", "gas") else ""


def _side(chain: Chain, solution: Solution, group: Group) -> str:
    """What the fluid of a side does; empty where no film of it names a fluid."""
    kinds: Iterable[str] = (_kind(chain, solution, branch) for branch in group.branches)
    return next((kind for kind in kinds if kind), "")


# --- verdicts ---------------------------------------------------------------------------------------


def _outside(figure: Figure, band: Band, case: str, condition: str) -> CheckResult | None:
    if band.low <= figure.value <= band.high:
        return None
    return _caution(
        f"{figure.owner} / band / {band.name}",
        figure.owner,
        "band",
        case,
        condition,
        band.quantity,
        figure.value,
        (band.low, band.high),
        f"plausible band of {band.place}: {band.because}",
        band.source,
        band.standing,
    )


def _service_checks(chain: Chain, case: str, solution: Solution) -> Iterator[CheckResult | None]:
    """Stated allowances and U against what is typical of the services that the file names."""
    named = {
        term.name: term.texts["service"] for term in chain.calculation.resistances if "service" in term.texts
    }
    for element in chain.elements:
        if isinstance(element, Layer) and element.name in named:
            yield _far(
                element.name, typical(FOULING)[named[element.name]], solution.number(element.resistance), case
            )
    if chain.calculation.report.service:
        yield _far(
            "U", typical(OVERALL)[chain.calculation.report.service], solution.number(chain.results["U"]), case
        )


def _far(owner: str, usual: Typical, value: float, case: str) -> CheckResult | None:
    """A caution where a figure lies a factor beyond the range of its service."""
    low, high = usual.low / usual.far, usual.high * usual.far
    if not math.isfinite(value) or low <= value <= high:
        return None
    ends = tuple(dict.fromkeys(apart(end, ()) for end in (usual.low, usual.high)))
    unit = unit_display(usual.quantity.unit)
    because = (
        f"typical of {usual.service} is {' to '.join(ends)} {unit}; warned beyond a factor of {usual.far:g}"
    )
    return _caution(
        f"{owner} / typical / {usual.service}",
        owner,
        usual.card,
        case,
        SERVICE,
        usual.quantity,
        value,
        (low, high),
        because,
        "; ".join(usual.publications),
        usual.standing,
    )


def _caution(
    name: str,
    owner: str,
    card: str,
    case: str,
    condition: str,
    kind: QuantityKind,
    value: float,
    ends: tuple[float, float],
    because: str,
    source: str,
    standing: str,
) -> CheckResult:
    unit = unit_display(kind.unit)
    low, high = (apart(end, (value,)) for end in ends)
    return CheckResult(
        name,
        owner,
        card,
        condition,
        case,
        f"{low} ≤ {kind.symbol} ≤ {high} {unit}",
        f"{kind.symbol} = {apart(value, ends)} {unit}",
        f"{low} to {high} {unit}",
        value,
        unit,
        "caution",
        "outside",
        because,
        source,
        standing,
        "below" if value < ends[0] else "above",
    )
