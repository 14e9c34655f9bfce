"""Fluids stated in the calculation file: a table, constants, a viscosity law through two points."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import ArrayLike

from calcbook.properties.backend import PROPERTIES
from calcbook.properties.faults import PropertyFault
from calcbook.properties.findings import Finding
from calcbook.properties.fluid import Fluid, FluidAtPressure, Phase
from calcbook.properties.series import Array

KINEMATIC = "kinematic viscosity"
VISCOSITY_LAWS = ("log-linear", "astm d341")
EXPANSION_STEP = 0.1  # K
_LN10 = math.log(10.0)


@dataclass(frozen=True)
class ViscosityLaw:
    """Kinematic viscosity by ASTM D341: log10(log10 Z) = A - B log10 T, T in K.

    Z = v + 0.7 + exp(-1.47 - 1.84 v - 0.51 v^2) with v in mm2/s; back to v by the standard's inverse.
    Source: ASTM D341, viscosity-temperature equations for liquid petroleum or hydrocarbon products.
    """

    A: float
    B: float

    def value(self, temperature: ArrayLike) -> Array:
        """Kinematic viscosity in m2/s at temperatures in K."""
        excess = self._excess(temperature)
        return 1e-6 * (excess - np.exp(_inverse(excess)))

    def __call__(self, temperature: ArrayLike) -> Array:
        return self.value(temperature)

    def slope(self, temperature: ArrayLike) -> Array:
        """Its derivative, m2/(s K)."""
        temperatures = np.asarray(temperature, dtype=np.float64)
        excess = self._excess(temperatures)
        inner = self.A - self.B * np.log10(temperatures)
        # Z = 10^(10^inner): dZ/dT = Z ln10 . 10^inner . ln10 . (-B)/(T ln10)
        excess_slope = -(excess + 0.7) * _LN10 * np.power(10.0, inner) * self.B / temperatures
        inner_slope = -3.295 + 2.0 * 0.6119 * excess - 3.0 * 0.3193 * excess * excess
        return 1e-6 * excess_slope * (1.0 - np.exp(_inverse(excess)) * inner_slope)

    def _excess(self, temperature: ArrayLike) -> Array:
        """Z - 0.7."""
        temperatures = np.asarray(temperature, dtype=np.float64)
        return np.power(10.0, np.power(10.0, self.A - self.B * np.log10(temperatures))) - 0.7


def _inverse(excess: Array) -> Array:
    cubic: Array = -0.7487 - 3.295 * excess + 0.6119 * excess * excess - 0.3193 * excess * excess * excess
    return cubic


def astm_d341(points: Sequence[tuple[float, float]]) -> ViscosityLaw:
    """The law through two points (T in K, kinematic viscosity in m2/s).

    Raises ``PropertyFault`` unless there are two points with different positive temperatures, and the
    viscosities are positive and fall with temperature.
    """
    if len(points) != 2:
        raise PropertyFault("viscosity-points", f"{len(points)} viscosity points", "two points")
    (cold, thick), (hot, thin) = sorted((float(t), float(v)) for t, v in points)
    if not (0.0 < cold < hot and thick > thin > 0.0 and math.isfinite(hot) and math.isfinite(thick)):
        raise PropertyFault(
            "viscosity-points",
            f"kinematic viscosity {1e6 * thick:.6g} mm2/s at {cold:.6g} K and {1e6 * thin:.6g} mm2/s "
            f"at {hot:.6g} K",
            "two different temperatures, and the lower viscosity at the higher one",
        )
    high, low = _double_logarithm(1e6 * thick), _double_logarithm(1e6 * thin)
    slope = (high - low) / (math.log10(hot) - math.log10(cold))
    return ViscosityLaw(high + slope * math.log10(cold), slope)


def _double_logarithm(viscosity: float) -> float:
    """log10(log10 Z) of a kinematic viscosity in mm2/s."""
    z = viscosity + 0.7 + math.exp(-1.47 - 1.84 * viscosity - 0.51 * viscosity * viscosity)
    return math.log10(math.log10(z))


@dataclass(frozen=True)
class _Column:
    """One property by temperature: straight between the rows, or straight in its logarithm."""

    temperatures: tuple[float, ...]
    values: tuple[float, ...]
    logarithmic: bool

    def value(self, at: Array) -> Array:
        left, low, rate = self._piece(at)
        straight = low + rate * (at - left)
        return np.exp(straight) if self.logarithmic else straight

    def slope(self, at: Array) -> Array:
        _, _, rate = self._piece(at)
        return rate * self.value(at) if self.logarithmic else rate

    def _piece(self, at: Array) -> tuple[Array, Array, Array]:
        """Start, height and slope of each temperature's piece; the end pieces go on beyond the rows."""
        rows = np.array(self.temperatures)
        heights = np.log(np.array(self.values)) if self.logarithmic else np.array(self.values)
        if rows.size == 1:
            return at, np.broadcast_to(heights, at.shape), np.zeros_like(at)
        piece = np.clip(np.searchsorted(rows, at, side="right") - 1, 0, rows.size - 2)
        rate = (heights[piece + 1] - heights[piece]) / (rows[piece + 1] - rows[piece])
        return rows[piece], heights[piece], rate


@dataclass(frozen=True)
class _LawColumn:
    """Viscosity as kinematic viscosity by ASTM D341 times density."""

    law: ViscosityLaw
    density: Relation

    def value(self, at: Array) -> Array:
        return self.law.value(at) * self.density.value(at)

    def slope(self, at: Array) -> Array:
        return self.law.slope(at) * self.density.value(at) + self.law.value(at) * self.density.slope(at)


@dataclass(frozen=True)
class _ProductColumn:
    """Viscosity as tabulated kinematic viscosity times density."""

    kinematic: _Column
    density: _Column

    def value(self, at: Array) -> Array:
        return self.kinematic.value(at) * self.density.value(at)

    def slope(self, at: Array) -> Array:
        kinematic, density = self.kinematic, self.density
        return kinematic.slope(at) * density.value(at) + kinematic.value(at) * density.slope(at)


@dataclass(frozen=True)
class _ExpansionColumn:
    """Expansion coefficient of a tabulated density, -(d rho/dT)/rho; steps where the table has a row."""

    density: _Column

    def value(self, at: Array) -> Array:
        return -self.density.slope(at) / self.density.value(at)

    def slope(self, at: Array) -> Array:
        ratio = self.density.slope(at) / self.density.value(at)
        return ratio * ratio


class Relation(Protocol):
    """A property against temperature (K) with its derivative; 1-d arrays in and out."""

    def value(self, at: Array) -> Array: ...

    def slope(self, at: Array) -> Array: ...


@dataclass(frozen=True)
class _RelatedExpansion:
    """Expansion coefficient of a density that is a relation, -(d rho/dT)/rho."""

    density: Relation

    def value(self, at: Array) -> Array:
        return -self.density.slope(at) / self.density.value(at)

    def slope(self, at: Array) -> Array:
        """Central difference: a relation gives no second derivative. Curvature, rounding: below 1e-6."""
        return (self.value(at + EXPANSION_STEP) - self.value(at - EXPANSION_STEP)) / (2.0 * EXPANSION_STEP)


_AnyColumn = Relation


@dataclass(frozen=True)
class TableFluid(Fluid):
    """A fluid given by columns over temperature."""

    name: str
    provider: str
    columns: tuple[tuple[str, _AnyColumn], ...]
    rows: tuple[tuple[str, float, float], ...]  # of each property: first and last temperature of its rows
    beyond: float

    def _at(self, pressure: float | None, phase: Phase | None) -> FluidAtPressure:
        return StatedAtPressure(self, pressure, phase)


@dataclass(frozen=True)
class StatedAtPressure(FluidAtPressure):
    """A stated fluid; its pressure is kept, not used."""

    fluid: TableFluid
    pressure: float | None
    phase: Phase | None

    def limits(self) -> tuple[float, float]:
        """The temperatures at which every column has a value, the distance beyond the rows included."""
        low, high = self._rows()
        return low - self.fluid.beyond, high + self.fluid.beyond

    def check_state(self, temperature: float, stated_phase: str | None = None) -> tuple[Finding, ...]:
        """``beyond-table``: an open item up to the stated distance beyond the rows, a fault further."""
        low, high = self._rows()
        if low <= temperature <= high:
            return ()
        first, last = self.limits()
        inside = first <= temperature <= last
        message = (
            f"{self.fluid.name} at {temperature:.8g} K is beyond the rows of its table, {low:.8g} K to "
            f"{high:.8g} K" + (": extrapolated" if inside else f", by more than {self.fluid.beyond:.6g} K")
        )
        figures = {"temperature": float(temperature), "first row": low, "last row": high}
        return (Finding("beyond-table", "open item" if inside else "fault", message, figures),)

    def _rows(self) -> tuple[float, float]:
        rows = self.fluid.rows
        return max(row[1] for row in rows), min(row[2] for row in rows)

    def _flat(self, property_name: str, temperatures: Array, sloped: bool) -> Array:
        column = dict(self.fluid.columns).get(property_name)
        if column is None:
            return np.full(temperatures.shape, np.nan)
        result = column.slope(temperatures) if sloped else column.value(temperatures)
        low, high = self._span(property_name)
        inside = (temperatures >= low - self.fluid.beyond) & (temperatures <= high + self.fluid.beyond)
        return np.where(inside, result, np.nan)

    def _span(self, property_name: str) -> tuple[float, float]:
        return next((low, high) for name, low, high in self.fluid.rows if name == property_name)

    def _explain(self, property_name: str, temperature: float) -> PropertyFault:
        if property_name not in dict(self.fluid.columns):
            return PropertyFault(
                "property-missing", f"no {property_name} is stated for {self.fluid.name}", property_name
            )
        low, high = self._span(property_name)
        return PropertyFault(
            "beyond-table",
            f"{property_name} of {self.fluid.name} at {temperature:.8g} K is more than "
            f"{self.fluid.beyond:.6g} K beyond its rows, {low:.8g} K to {high:.8g} K",
            "further rows, or a greater stated distance",
        )


# The chart of ASTM D341 is drawn through two points to be read beyond them; common practice goes this far (K).
LAW_REACH = 40.0


def tabulated(
    columns: Mapping[str, tuple[ArrayLike, ArrayLike]],
    *,
    viscosity_law: str = "log-linear",
    extrapolate_by: float = 10.0,
    name: str = "table",
) -> Fluid:
    """A fluid from columns: property to (temperatures in K, values in SI).

    Density, heat capacity, conductivity and expansion coefficient are straight between rows; viscosity is
    straight in its logarithm, or follows ASTM D341 through two points (``viscosity_law``). In place of
    viscosity there may be ``kinematic viscosity``, which is multiplied by the density. A stated expansion
    coefficient goes before the one of the density. Up to ``extrapolate_by`` (K) beyond the rows the end
    pieces are carried on. Raises ``PropertyFault`` for what cannot be a table.
    """
    if viscosity_law not in VISCOSITY_LAWS:
        message = f"no viscosity law is called {viscosity_law!r}"
        raise PropertyFault("viscosity-law-unknown", message, ", ".join(VISCOSITY_LAWS))
    read = {key: _read_column(name, key, *columns[key]) for key in columns}
    if not read:
        raise PropertyFault("table-empty", f"{name} has no columns", ", ".join(PROPERTIES))
    made: dict[str, _AnyColumn] = {key: read[key] for key in PROPERTIES if key in read}
    spans = {key: (column.temperatures[0], column.temperatures[-1]) for key, column in read.items()}
    if KINEMATIC in read or (viscosity_law == "astm d341" and "viscosity" in read):
        made["viscosity"], spans["viscosity"] = _viscosity(name, read, spans, viscosity_law)
    spans.pop(KINEMATIC, None)
    if "expansion coefficient" not in made and "density" in read and len(read["density"].values) > 1:
        made["expansion coefficient"] = _ExpansionColumn(read["density"])
        spans["expansion coefficient"] = spans["density"]
    ordered = tuple((key, made[key]) for key in PROPERTIES if key in made)
    rows = tuple((key, *spans[key]) for key, _ in ordered)
    return TableFluid(name, "table in the calculation file", ordered, rows, float(extrapolate_by))


def constant(values: Mapping[str, float], name: str = "constants") -> Fluid:
    """A fluid of stated constants in SI, the same at every temperature.

    An expansion coefficient that is not stated is missing, not zero: it cannot be told from one density.
    """
    for key in values:
        _check_values(name, key, (float(values[key]),))
        if key == KINEMATIC:
            raise PropertyFault("property-unknown", f"{name}: {KINEMATIC} among constants", "viscosity")
    made = [(key, _Column((0.0,), (float(values[key]),), False)) for key in PROPERTIES if key in values]
    if not made:
        raise PropertyFault("table-empty", f"{name} has no constants", ", ".join(PROPERTIES))
    rows = tuple((key, 0.0, math.inf) for key, _ in made)
    return TableFluid(name, "constants stated in the calculation file", tuple(made), rows, 0.0)


def related(
    columns: Mapping[str, Relation],
    span: tuple[float, float],
    *,
    law: ViscosityLaw | None = None,
    name: str,
    provider: str,
) -> Fluid:
    """A liquid whose properties are relations of temperature, good within ``span`` (K).

    ``law`` gives kinematic viscosity, which is multiplied by the density.
    """
    made = dict(columns)
    if "density" in made:
        made["expansion coefficient"] = _RelatedExpansion(made["density"])
        if law is not None:
            made["viscosity"] = _LawColumn(law, made["density"])
    ordered = tuple((key, made[key]) for key in PROPERTIES if key in made)
    rows = tuple((key, *span) for key, _ in ordered)
    return TableFluid(name, provider, ordered, rows, 0.0)


def _viscosity(
    name: str, read: Mapping[str, _Column], spans: Mapping[str, tuple[float, float]], law: str
) -> tuple[_AnyColumn, tuple[float, float]]:
    """Viscosity from kinematic viscosity, or by ASTM D341; and the rows it stands on."""
    if KINEMATIC in read and "viscosity" in read:
        raise PropertyFault("table-values", f"{name} has viscosity and {KINEMATIC}", "one of the two")
    if "density" not in read:
        raise PropertyFault("property-missing", f"{name}: this viscosity needs a density", "density")
    density = read["density"]
    key = KINEMATIC if KINEMATIC in read else "viscosity"
    rows = _meeting(density, spans[key], spans["density"])
    if law == "log-linear":
        return _ProductColumn(read[key], density), rows
    at, values = np.array(read[key].temperatures), np.array(read[key].values)
    kinematic = values if key == KINEMATIC else values / density.value(at)
    chosen = astm_d341(list(zip(at.tolist(), kinematic.tolist(), strict=True)))
    low, high = spans[key]
    return _LawColumn(chosen, density), _meeting(
        density, (low - LAW_REACH, high + LAW_REACH), spans["density"]
    )


def _meeting(
    density: _Column, own: tuple[float, float], of_density: tuple[float, float]
) -> tuple[float, float]:
    """Rows on which both stand; a density of one row holds everywhere."""
    if len(density.values) == 1:
        return own
    return max(own[0], of_density[0]), min(own[1], of_density[1])


def _read_column(name: str, key: str, temperatures: ArrayLike, values: ArrayLike) -> _Column:
    at = np.atleast_1d(np.asarray(temperatures, dtype=np.float64))
    found = np.atleast_1d(np.asarray(values, dtype=np.float64))
    if at.ndim != 1 or at.shape != found.shape or at.size == 0:
        raise PropertyFault(
            "table-values",
            f"{key} of {name}: {at.size} temperatures and {found.size} values",
            "as many values as temperatures",
        )
    if not (np.all(np.isfinite(at)) and np.all(at > 0.0) and np.all(np.diff(at) > 0.0)):
        raise PropertyFault(
            "table-values", f"{key} of {name}: the temperatures do not rise", "rising temperatures above 0 K"
        )
    _check_values(name, key, tuple(found.tolist()))
    logarithmic = key in ("viscosity", KINEMATIC)
    return _Column(tuple(at.tolist()), tuple(found.tolist()), logarithmic)


def _check_values(name: str, key: str, values: tuple[float, ...]) -> None:
    if key not in (*PROPERTIES, KINEMATIC):
        raise PropertyFault(
            "property-unknown", f"{name}: no property is called {key!r}", ", ".join((*PROPERTIES, KINEMATIC))
        )
    for value in values:
        if not math.isfinite(value) or (value <= 0.0 and key != "expansion coefficient"):
            raise PropertyFault("table-values", f"{key} of {name}: {value!r}", "values above zero")
