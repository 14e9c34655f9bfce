"""Properties along a curve of single-phase states (one pressure and phase, or one side of saturation).

The curve's whole temperature interval is cut in halves, and the halves again, until a Chebyshev series
repeats the backend at other points; a panel that is still not met at the last cut is answered by direct
calls. Which panel answers a temperature follows from the curve alone, not from what was asked before;
so panels can be made when first needed, and kept.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from calcbook.properties import series
from calcbook.properties.faults import PropertyFault
from calcbook.properties.series import Array
from calcbook.properties.store import Store

DEPTH = 10  # the smallest panel is 1/1024 of the interval: below 2 K for steam up to 2000 K
AGREEMENT = 1e-11  # of a series with the backend, relative (of the largest value where not in logarithms)
NEGLECTED = 0.1  # so much of the agreement may be left out at the end of a series, where its terms are noise
SLOPE_AGREEMENT = 1e-5  # of slopes in pressure: differences of the backend hold about 1e-6
PRESSURE_SLOPE = " per pressure"

Sample = Callable[[float], Mapping[str, float]]


@dataclass(frozen=True)
class Family:
    """Properties that one call of ``sample`` gives together; a missing or failed one is NaN."""

    properties: tuple[str, ...]
    sample: Sample
    agreement: float


# A property of a curve, and whether its slope along the curve is asked for.
Asked = tuple[str, bool]
# Rows of an array; those that follow each other as a slice, which takes them without a copy.
_Places = list[int] | slice


class _Panel(NamedTuple):
    """One part of a curve's interval with its series; ``path`` says by which halves it is reached."""

    path: str
    low: float
    high: float
    coefficients: list[float]


class SeriesRows(NamedTuple):
    """Series of several properties, and slopes, laid out to be summed together: a row of figures each.

    ``low`` and ``high`` are the ends of the stretch that every one of their panels holds, ``middle`` and ``half``
    what reduces a temperature to each interval. ``logged`` are the rows of logarithms; ``sloped`` are the rows of
    their slopes, ``of`` the rows of what they are slopes of.
    """

    low: float
    high: float
    coefficients: Array
    middle: Array
    half: Array
    logged: _Places
    sloped: _Places
    of: _Places


@dataclass(frozen=True, eq=False)
class Curve:
    """One curve: its interval of temperature, where its answers are kept, and how to ask anew."""

    low: float
    high: float
    store: Store
    families: tuple[Family, ...]
    _sloped: dict[tuple[str, str], list[float]] = field(init=False, repr=False, default_factory=dict)
    _laid_out: dict[tuple[tuple[Asked, ...], tuple[str, ...]], SeriesRows] = field(
        init=False, repr=False, default_factory=dict
    )
    _last: dict[tuple[Asked, ...], SeriesRows] = field(init=False, repr=False, default_factory=dict)

    def value(self, name: str, temperatures: Array) -> Array:
        """The property at temperatures (1-d, all within the interval); NaN where the backend fails."""
        return self._walk(name, temperatures, sloped=False)

    def slope(self, name: str, temperatures: Array) -> Array:
        """Its derivative along the curve, from the same series."""
        return self._walk(name, temperatures, sloped=True)

    def rows(
        self, asked: tuple[Asked, ...], temperatures: Array, ends: tuple[float, float] | None = None
    ) -> Array:
        """Values and slopes at the same temperatures (1-d), a row for each of ``asked``; NaN outside the interval.

        The bits are those of ``value`` and ``slope``. Where one panel of each property holds all the
        temperatures, their series are summed together. ``ends`` are the coldest and the hottest of them, if known.
        """
        if not temperatures.size:
            return np.empty((len(asked), 0))
        least, most = ends or ends_of(temperatures)
        if not self.low <= least <= most <= self.high:
            inside = (temperatures >= self.low) & (temperatures <= self.high)
            result = np.full((len(asked), temperatures.size), np.nan)
            result[:, inside] = self.rows(asked, temperatures[inside])
            return result
        rows = self._rows_of(asked, least, most) if temperatures.size > 1 else None
        if rows is None:
            return np.stack([self._walk(name, temperatures, sloped) for name, sloped in asked])
        sums = series.evaluate_rows(rows.coefficients, rows.middle, rows.half, temperatures)
        return _from_sums(rows, sums)[: len(asked)]

    def series_rows(self, asked: tuple[Asked, ...], least: float, most: float) -> SeriesRows | None:
        """The series of ``asked`` for a stretch of temperatures; None where one panel of each does not hold it."""
        return self._rows_of(asked, least, most) if self.low <= least <= most <= self.high else None

    def _rows_of(self, asked: tuple[Asked, ...], least: float, most: float) -> SeriesRows | None:
        last = self._last.get(asked)
        # A temperature between two panels belongs to the hotter one.
        if last is not None and last.low <= least and most < last.high:
            return last
        panels = self._common_panels(asked, least, most)
        if panels is None:
            return None
        place = (asked, tuple(panel.path for panel in panels))
        rows = self._laid_out.get(place)
        if rows is None:
            rows = self._laid_out[place] = self._lay_out(asked, panels)
        self._last[asked] = rows
        return rows

    def _common_panels(self, asked: tuple[Asked, ...], least: float, most: float) -> list[_Panel] | None:
        """For each of ``asked`` the panel that holds a stretch of temperatures; None where there is none."""
        panels: dict[str, _Panel] = {}
        for name in dict.fromkeys(name for name, _ in asked):
            panel = self._holding(name, least, most)
            if panel is None:
                return None
            panels[name] = panel
        self.store.save()
        return [panels[name] for name, _ in asked]

    def _holding(self, name: str, least: float, most: float) -> _Panel | None:
        """The panel that holds a stretch of temperatures; None where it is cut, or where no series is met."""
        path, low, high = "", self.low, self.high
        while (coefficients := self._panel(name, path, low, high)) is None and len(path) < DEPTH:
            middle = 0.5 * (low + high)
            if (least < middle) != (most < middle):
                return None
            path, low, high = (path + "0", low, middle) if most < middle else (path + "1", middle, high)
        return _Panel(path, low, high, coefficients) if coefficients is not None else None

    def _lay_out(self, asked: tuple[Asked, ...], panels: list[_Panel]) -> SeriesRows:
        """The series of ``asked``, then those of the values that logarithmic slopes need and were not asked for."""
        needed = dict(zip(asked, panels, strict=True))
        for (name, sloped), panel in zip(asked, panels, strict=True):
            if sloped and logged(name):
                needed.setdefault((name, False), panel)
        places = {key: place for place, key in enumerate(needed)}
        listed = [
            self._derivative(name, panel) if sloped else panel.coefficients
            for (name, sloped), panel in needed.items()
        ]
        coefficients = np.zeros((max(map(len, listed)), len(listed), 1))
        for place, found in enumerate(listed):
            coefficients[: len(found), place, 0] = found
        slopes = [(name, sloped) for name, sloped in needed if sloped and logged(name)]
        low, high = (
            np.array([[panel.low] for panel in needed.values()]),
            np.array([[panel.high] for panel in needed.values()]),
        )
        if (low == low[0]).all() and (high == high[0]).all():
            low, high = low[:1], high[:1]
        return SeriesRows(
            float(low.max()),
            float(high.min()),
            coefficients,
            0.5 * (low + high),
            0.5 * (high - low),
            _placed([place for (name, sloped), place in places.items() if logged(name) and not sloped]),
            _placed([places[key] for key in slopes]),
            _placed([places[name, False] for name, _ in slopes]),
        )

    def _walk(self, name: str, temperatures: Array, sloped: bool) -> Array:
        if not temperatures.size:
            return np.empty_like(temperatures)
        panel = self._holding(name, *ends_of(temperatures))
        if panel is not None:
            result = self._from_series(name, panel, temperatures, sloped)
        else:
            result = self._parted(name, temperatures, sloped)
        self.store.save()
        return result

    def _parted(self, name: str, temperatures: Array, sloped: bool) -> Array:
        """Samples that lie in different panels, or where no series is met."""
        result = np.empty_like(temperatures)
        waiting = [("", self.low, self.high, np.arange(temperatures.size))]
        while waiting:
            path, low, high, chosen = waiting.pop()
            if chosen.size == 0:
                continue
            coefficients = self._panel(name, path, low, high)
            if coefficients is not None:
                panel = _Panel(path, low, high, coefficients)
                result[chosen] = self._from_series(name, panel, temperatures[chosen], sloped)
            elif len(path) == DEPTH:
                result[chosen] = self.direct(name, temperatures[chosen], sloped)
            else:
                middle = 0.5 * (low + high)
                below = temperatures[chosen] < middle
                waiting.append((path + "0", low, middle, chosen[below]))
                waiting.append((path + "1", middle, high, chosen[~below]))
        return result

    def _from_series(self, name: str, panel: _Panel, temperatures: Array, sloped: bool) -> Array:
        if not sloped:
            value = series.evaluate(panel.coefficients, panel.low, panel.high, temperatures)
            return np.exp(value) if logged(name) else value
        slope = series.evaluate(self._derivative(name, panel), panel.low, panel.high, temperatures)
        if not logged(name):
            return slope
        return np.exp(series.evaluate(panel.coefficients, panel.low, panel.high, temperatures)) * slope

    def _derivative(self, name: str, panel: _Panel) -> list[float]:
        """The coefficients of a panel's slope, worked out once."""
        place = (name, panel.path)
        if place not in self._sloped:
            self._sloped[place] = series.derivative(panel.coefficients, panel.low, panel.high)
        return self._sloped[place]

    def _panel(self, name: str, path: str, low: float, high: float) -> list[float] | None:
        panels = self.store.series.get(name)
        if panels is None or path not in panels:
            self._make(self._family(name), path, low, high)
            panels = self.store.series[name]
        return panels[path]

    def _make(self, family: Family, path: str, low: float, high: float) -> None:
        """Fit every property of the family that reaches this panel, and keep the verdicts."""
        at_nodes = [family.sample(temperature) for temperature in series.nodes(low, high).tolist()]
        tested = series.test_points(low, high)
        at_tested = [family.sample(temperature) for temperature in tested.tolist()]
        for name in family.properties:
            panels = self.store.series.setdefault(name, {})
            if path in panels or (path and panels.get(path[:-1], []) is not None):
                continue
            values = np.array([row[name] for row in at_nodes])
            targets = np.array([row[name] for row in at_tested])
            panels[path] = _accepted(name, values, targets, low, high, tested, family.agreement)
        self.store.changed()

    def direct(self, name: str, temperatures: Array, sloped: bool) -> Array:
        """Answers of the backend itself, asked one by one and kept by temperature."""
        kept = self.store.direct.setdefault(name + " slope" if sloped else name, {})
        family = self._family(name)
        result = np.empty_like(temperatures)
        for index, temperature in enumerate(temperatures.tolist()):
            place = temperature.hex()
            if place not in kept:
                found = self._difference(name, temperature) if sloped else family.sample(temperature)[name]
                kept[place] = float(found) if np.isfinite(found) else None
                self.store.changed()
            answer = kept[place]
            result[index] = np.nan if answer is None else answer
        return result

    def _difference(self, name: str, temperature: float) -> float:
        """Slope by a central difference of direct calls, one-sided at the ends of the curve."""
        step = 1e-5 * temperature  # rounding 1e-12/1e-5 and curvature (1e-5)^2 are both far below 1e-6
        low = max(temperature - step, self.low)
        high = min(temperature + step, self.high)
        sample = self._family(name).sample
        return (sample(high)[name] - sample(low)[name]) / (high - low)

    def _family(self, name: str) -> Family:
        for family in self.families:
            if name in family.properties:
                return family
        raise PropertyFault("property-missing", f"no {name} along this curve")


def side_by_side(several: Sequence[SeriesRows], place: Array, temperatures: Array) -> Array:
    """Values and slopes of samples that each lie on one of several curves, of which the same was asked.

    ``place`` is the number of each sample's curve. The bits are those of each curve alone.
    """
    first = several[0]
    terms, count = max(len(rows.coefficients) for rows in several), first.coefficients.shape[1]
    coefficients = np.zeros((terms, count, len(several)))
    middle, half = np.empty((2, count, len(several)))
    for number, rows in enumerate(several):
        coefficients[: len(rows.coefficients), :, number] = rows.coefficients[:, :, 0]
        middle[:, number], half[:, number] = rows.middle[:, 0], rows.half[:, 0]
    sums = series.evaluate_rows(coefficients[:, :, place], middle[:, place], half[:, place], temperatures)
    return _from_sums(first, sums)


def _from_sums(rows: SeriesRows, sums: Array) -> Array:
    """Values and slopes from the sums of their series (which are written over)."""
    sums[rows.logged] = np.exp(sums[rows.logged])
    sums[rows.sloped] = sums[rows.of] * sums[rows.sloped]
    return sums


def ends_of(temperatures: Array) -> tuple[float, float]:
    """The coldest and the hottest of some samples."""
    if temperatures.size == 1:
        return temperatures.item(), temperatures.item()
    return float(temperatures.min()), float(temperatures.max())


def _placed(rows: list[int]) -> _Places:
    """Rows as they are best taken."""
    if rows and rows == list(range(rows[0], rows[-1] + 1)):
        return slice(rows[0], rows[-1] + 1)
    return rows


def logged(name: str) -> bool:
    """Whether the series of a property is one of its logarithm: those that are always positive."""
    return name != "expansion coefficient" and not name.endswith(PRESSURE_SLOPE)


def _accepted(
    name: str, values: Array, targets: Array, low: float, high: float, tested: Array, agreement: float
) -> list[float] | None:
    everything = np.concatenate((values, targets))
    if not np.all(np.isfinite(everything)) or (logged(name) and not np.all(everything > 0.0)):
        return None
    if logged(name):
        values, targets, scale = np.log(values), np.log(targets), 1.0
    else:
        scale = float(np.max(np.abs(everything)))
    coefficients = series.shortened(series.fit(values), NEGLECTED * agreement * scale)
    apart = np.abs(series.evaluate(coefficients, low, high, tested) - targets)
    return coefficients if np.max(apart) <= agreement * scale else None
