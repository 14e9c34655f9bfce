"""Properties of samples that each have a fluid of their own: another pressure, composition or phase."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from calcbook.properties.curves import Asked, SeriesRows, side_by_side
from calcbook.properties.fluid import FluidAtPressure
from calcbook.properties.series import Array

# More samples are read fluid by fluid: together each has the series of its own fluid in memory.
AT_ONCE = 2000


def rows_of_several(
    fluids: Sequence[FluidAtPressure], place: NDArray[np.intp], asked: tuple[Asked, ...], temperatures: Array
) -> Array:
    """Properties and slopes at 1-d temperatures, NaN where there is none: a row for each of ``asked``.

    ``place`` is the number of each sample's fluid; every fluid has a sample. The bits are those of each fluid
    alone; fluids that are answered by series are answered together.
    """
    order = np.argsort(place, kind="stable")
    starts = np.searchsorted(place[order], np.arange(len(fluids)))
    sorted_temperatures = temperatures[order]
    least = np.minimum.reduceat(sorted_temperatures, starts).tolist()
    most = np.maximum.reduceat(sorted_temperatures, starts).tolist()
    result = np.empty((len(asked), temperatures.size))
    together: list[SeriesRows] = []
    numbers = np.full(len(fluids), -1)
    for number, (fluid, low, high) in enumerate(zip(fluids, least, most, strict=True)):
        rows = fluid.series_rows(asked, low, high) if temperatures.size <= AT_ONCE else None
        if rows is None:
            alone = place == number
            result[:, alone] = fluid.rows(asked, temperatures[alone])
        else:
            numbers[number] = len(together)
            together.append(rows)
    if together:
        number_of_rows = numbers[place]
        chosen = np.flatnonzero(number_of_rows >= 0)
        found = side_by_side(together, number_of_rows[chosen], temperatures[chosen])
        result[:, chosen] = found[: len(asked)]
    return result
