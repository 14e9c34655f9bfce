"""Stragglers: samples that Newton did not close, bracketed in Q, where the summed drop rises with Q.

A law that jumps at a joint can have no root there: then the side with the lower coefficient is taken,
both figures are kept, and the caller raises an open item.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from calcbook.chain.types import Group, Layer

if TYPE_CHECKING:
    from calcbook.chain.solve import _Engine

Array = np.ndarray
SPAN = 60
BISECTIONS = 200
SMALLEST = 1e-9
LAW_TOLERANCE = 1e-7


def bracket(engine: _Engine, samples: Array) -> Array:
    """Close the samples one by one; writes flow and drops; returns which have an answer."""
    return np.asarray([_Straggler(engine, int(sample)).close() for sample in samples], dtype=bool)


class _Straggler:
    def __init__(self, engine: _Engine, sample: int):
        self.engine = engine
        self.sample = np.asarray([sample])
        self.at = sample
        self.difference = float(engine.difference[sample])

    def close(self) -> bool:
        low, high = self._bounds()
        if low is None or high is None:
            return False
        for _ in range(BISECTIONS):
            middle = 0.5 * (low + high)
            if middle in (low, high):
                break
            excess = self._excess(middle)
            if not np.isfinite(excess):
                return False
            if excess > 0.0:
                high = middle
            else:
                low = middle
        flow = 0.5 * (low + high)
        drops = self._drops(flow)
        if drops is None:
            return False
        self.engine.flow[self.at] = flow
        self.engine.drops[:, self.at] = drops
        return self._settle(flow, drops)

    # -- bounds of Q --------------------------------------------------------------------------------

    def _bounds(self) -> tuple[float | None, float | None]:
        """Two heat flows between which the summed drop passes the whole difference."""
        scale = max(abs(self.difference), 1e-3)
        if not self.engine.foreign:
            sign = 1.0 if self.difference > 0 else -1.0
            low, high = sign * SMALLEST * scale, sign * scale
            for _ in range(SPAN):
                excess = self._excess(high)
                if np.isfinite(excess) and sign * excess > 0.0:
                    return (low, high) if sign > 0 else (high, low)
                if not np.isfinite(excess):
                    return None, None
                high *= 4.0
            return None, None
        reach = scale
        for _ in range(SPAN):
            below, above = self._excess(-reach), self._excess(reach)
            if below < 0.0 < above:
                return -reach, reach
            reach *= 4.0
        return None, None

    def _excess(self, flow: float) -> float:
        drops = self._drops(flow)
        if drops is None:
            return float("nan")
        return float(drops.sum() + flow * self.engine.still[self.at] - self.difference)

    # -- drops at a given Q -------------------------------------------------------------------------

    def _drops(self, flow: float) -> Array | None:
        """The drop of every moving element when it carries a heat flow."""
        drops = np.zeros(len(self.engine.moving))
        for index, _ in enumerate(self.engine.moving):
            found = self._drop(index, flow, drops)
            if found is None:
                return None
            drops[index] = found
        return drops

    def _drop(self, index: int, flow: float, drops: Array) -> float | None:
        sign = 1.0 if flow > 0 else -1.0
        low, high = self._drop_bounds(index, flow, drops, sign)
        if low is None or high is None:
            return None
        for _ in range(BISECTIONS):
            middle = 0.5 * (low + high)
            if middle in (low, high):
                break
            carried = self._carried(index, middle, flow, drops)
            if not np.isfinite(carried):
                return None
            if carried > flow:
                high = middle
            else:
                low = middle
        return 0.5 * (low + high)

    def _drop_bounds(self, index: int, flow: float, drops: Array, sign: float) -> tuple[float | None, float | None]:
        """Two drops between which the carried heat flow passes the given one (it rises with the drop)."""
        reach = 1e-6
        for _ in range(SPAN):
            low, high = (-reach, reach) if self.engine.foreign else ((0.0, reach) if sign > 0 else (-reach, 0.0))
            edge = high if sign > 0 or self.engine.foreign else low
            carried = self._carried(index, edge, flow, drops)
            other = self._carried(index, low, flow, drops) if self.engine.foreign else None
            if not np.isfinite(carried):
                return None, None
            if other is None and sign * carried >= sign * flow:
                return low, high
            if other is not None and other <= flow <= carried:
                return low, high
            reach *= 2.0
        return None, None

    def _carried(self, index: int, drop: float, flow: float, drops: Array) -> float:
        trial = drops.copy()
        trial[index] = drop
        values, slopes = self.engine._local(self.sample)
        response, _ = self.engine.response(self.engine.moving[index], index, trial[:, None], np.asarray([flow]),
                                           self.sample, values, slopes)
        return float(response[0])

    # -- a law without a root -----------------------------------------------------------------------

    def _settle(self, flow: float, drops: Array) -> bool:
        """True when every law is met; a jump is settled on its lower side and remembered."""
        for index, element in enumerate(self.engine.moving):
            carried = self._carried(index, float(drops[index]), flow, drops)
            if abs(carried - flow) <= LAW_TOLERANCE * abs(flow):
                continue
            if isinstance(element, Layer) or not isinstance(element, Group):
                return False
            self._take_lower(index, element, flow, drops)
        return True

    def _take_lower(self, index: int, group: Group, flow: float, drops: Array) -> None:
        drop = float(drops[index])
        either_side = []
        for shift in (-1e-9, 1e-9):
            moved = drop * (1.0 + shift)
            either_side.append(self._carried(index, moved, flow, drops) / moved)
        area = float(self.engine._full(self.engine.chain.surfaces[group.surface].area)[self.at])
        lower, upper = (side / area for side in sorted(either_side))
        film = group.branches[0].name
        size = self.engine.size
        mask = self.engine.jumps.setdefault(film, np.zeros(size, dtype=bool))
        mask[self.at] = True
        sides = self.engine.jump_sides.setdefault(film, (np.full(size, np.nan), np.full(size, np.nan)))
        sides[0][self.at], sides[1][self.at] = lower, upper
        self._close_with(index, lower * area)

    def _close_with(self, index: int, conductance: float) -> None:
        """Close the circuit with one element held at a conductance."""
        rest = self.engine.still[self.at] + 1.0 / conductance
        others = [place for place in range(len(self.engine.moving)) if place != index]
        flow = float(self.engine.flow[self.at])
        for _ in range(BISECTIONS):
            drops = self._drops_of(others, flow)
            if drops is None:
                return
            carried_rest = rest + float(drops[others].sum()) / flow
            following = self.difference / carried_rest
            if following == flow:
                break
            flow = following
        drops[index] = flow / conductance
        self.engine.flow[self.at] = flow
        self.engine.drops[:, self.at] = drops

    def _drops_of(self, places: list[int], flow: float) -> Array | None:
        drops = np.zeros(len(self.engine.moving))
        for index in places:
            found = self._drop(index, flow, drops)
            if found is None:
                return None
            drops[index] = found
        return drops
