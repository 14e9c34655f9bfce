"""The saturation temperature of a throttled stream at which the clean unit has nothing to spare, at many samples.

It is looked for between the stated one and the temperature of the other stream where that leaves, where the need for
area has no end: in steps first, then between two of them. A sample's answer does not depend on its neighbours.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from calcbook.chain.rating_outcome import Throttle
from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import CLEAN, Chain, StreamState
from calcbook.chain.variants import with_figures
from calcbook.formulas import number_text

Array = np.ndarray
# So many steps, up to this part of the way.
STEPS, LARGEST_PART = 12, 0.999
# A saturation temperature is known this well, in K. Where the circuit ends first, that place is halved so often.
KNOWN, HALVINGS = 1e-9, 20
# What becomes of a sample that has something to spare as it stands: its place is known, or why it has none.
FOUND, CARRIED_STILL, CARRIED_TO_END, NO_SATURATION = range(4)


def spare(
    chain: Chain, inputs: Mapping[str, Array], figures: Mapping[str, Array], stated: Array | None = None
) -> Array:
    """What the clean unit has to spare at several figures, NaN where it has no answer: the margin of area over the duty
    of the chain, or where that has none what it reaches over the ``stated`` one."""
    has_duty = "duty" in chain.results
    wanted = chain.results["area margin" if has_duty else "heat reached"]
    one, given = with_figures(chain, inputs, figures)
    solution = solve(one, given, CLEAN, keep=(wanted,), thorough=False)
    (shape,) = {np.shape(figure) for figure in figures.values()}
    found = np.where(solution.converged, np.asarray(solution.values[wanted], dtype=float), np.nan)
    return np.broadcast_to(found if has_duty else found / stated - 1.0, shape)


def nothing_to_spare(margin: float, where: str) -> str:
    """Why there is no state to look for where the clean unit has nothing to spare as it stands; else nothing."""
    if math.isnan(margin):
        return f"the circuit of the clean unit does not close at the duty and {where}"
    return f"the clean unit does not carry the duty: it is {percent(-margin)} short" if margin <= 0.0 else ""


def percent(share: float) -> str:
    """A share in per cent, to three digits."""
    return f"{number_text(100.0 * share, 3)} %"


class Places(NamedTuple):
    """Of every sample the part of the way (NaN without one), what became of it, and what it has to spare as stated."""

    places: Array
    became: Array
    spare: Array

    def reason(self, sample: int, throttle: Throttle) -> str:
        """Why a sample has no place, in words."""
        became, what = int(self.became[sample]), throttle.what
        short = nothing_to_spare(float(self.spare[sample]), f"the stated {what}")
        if short:
            return short
        if became == CARRIED_STILL:
            return f"the clean unit carries the duty with {percent(1.0 - LARGEST_PART)} of the temperature difference still"
        way = "down" if throttle.way == "turned down" else "up"
        why = (
            "beyond which the stream has no saturation"
            if became == NO_SATURATION
            else "at which its circuit does not close"
        )
        return f"the clean unit carries the duty {way} to a {what} {why}"


@dataclass(frozen=True, eq=False)
class Way:
    """The way of a saturated stream from its stated temperature to the outlet of the other stream, sample by sample.

    ``inputs`` leave open what the chain finds; ``stated`` and ``length`` are rows of temperatures and differences.
    """

    chain: Chain
    stream: StreamState
    inputs: Mapping[str, Array]
    stated: Array
    length: Array

    @classmethod
    def of(cls, chain: Chain, throttle: Throttle, inputs: Mapping[str, Array], service: Solution) -> Way:
        """The way of the throttled stream from where it and the other one stand in a solution in service."""
        duty = chain.calculation.duty
        assert duty is not None
        stream = chain.streams[duty.sides[throttle.side].stream]
        stated = service.row(stream.temperature)
        return cls(
            chain, stream, inputs, stated, service.row(chain.results[f"T {throttle.other} outlet"]) - stated
        )

    def at(self, parts: Array, samples: Array) -> dict[str, Array]:
        """The figure that gives the stream its temperature at parts of the way of some samples; NaN where there is none."""
        temperatures = self.stated[samples] + parts * self.length[samples]
        if not self.stream.pressure:
            return {self.stream.temperature: temperatures}
        fluid = self.stream.fluid.state(None, None, self.stream.phase)
        return {self.stream.pressure: fluid.saturation_pressure(temperatures, outside="nan")}

    def spare(self, parts: Array, samples: Array) -> Array:
        """What the clean unit has to spare there; NaN where it has no answer."""
        figures = self.at(parts, samples)
        (figure,) = figures.values()
        known = np.isfinite(figure)
        found = np.full(parts.shape, np.nan)
        if known.any():
            chosen = samples[known]
            inputs = {name: value[chosen] if np.ndim(value) else value for name, value in self.inputs.items()}
            put_in = {name: value[known] for name, value in figures.items()}
            found[known] = spare(self.chain, inputs, put_in)
        return found

    def found(self) -> Places:
        """Where every sample has nothing to spare."""
        size = len(self.stated)
        everyone = np.arange(size)
        steps = np.linspace(0.0, LARGEST_PART, STEPS + 1)
        table = self.spare(np.tile(steps, size), np.repeat(everyone, len(steps))).reshape(size, -1)
        first = (~(table > 0.0)).argmax(axis=1)
        became = np.where((table > 0.0).all(axis=1), CARRIED_STILL, FOUND)
        active = everyone[(became == FOUND) & (table[:, 0] > 0.0)]
        low, high = steps[first[active] - 1], steps[first[active]]
        closes = ~np.isnan(table[active, first[active]])
        if not closes.all():
            low, high, closes = self._halved(active, low, high, closes)
            (figure,) = self.at(high, active).values()
            became[active[~closes]] = np.where(np.isnan(figure), NO_SATURATION, CARRIED_TO_END)[~closes]
        places = np.full(size, np.nan)
        places[active[closes]] = self._between(active[closes], low[closes], high[closes])
        return Places(places, became, table[:, 0])

    def _halved(self, active: Array, low: Array, high: Array, closes: Array) -> tuple[Array, Array, Array]:
        """The interval of each sample, cut until nothing is to spare at its end, and where that was reached."""
        low, high, closes = low.copy(), high.copy(), closes.copy()
        for _ in range(HALVINGS):
            still = np.flatnonzero(~closes)
            if not len(still):
                break
            middle = 0.5 * (low[still] + high[still])
            margin = self.spare(middle, active[still])
            low[still] = np.where(margin > 0.0, middle, low[still])
            high[still] = np.where(margin > 0.0, high[still], middle)
            closes[still] = margin <= 0.0
        return low, high, closes

    def _between(self, samples: Array, low: Array, high: Array) -> Array:
        """The place between two parts of the way, of the latter of which nothing is to spare."""
        from scipy.optimize import elementwise

        if not len(samples):
            return np.empty(0)

        def margin(kelvin: Array, *others: Array) -> Array:
            length, numbers = others
            return self.spare(kelvin / length, numbers.astype(int))

        length = self.length[samples]
        found = elementwise.find_root(
            margin,
            (low * length, high * length),
            args=(length, samples.astype(float)),
            tolerances={"xatol": KNOWN, "xrtol": 0.0, "fatol": 0.0, "frtol": 0.0},
        )
        return np.where(found.success, found.x / length, np.nan)
