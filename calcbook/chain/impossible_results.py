"""Names of results that no calculation has: told where a fault leaves no results to look them up in."""

from __future__ import annotations

from collections.abc import Iterator

from calcbook.calcfile import Calculation
from calcbook.chain.allowance import LARGEST_ALLOWANCE
from calcbook.chain.analysis import LATER, STARTS, is_found_later
from calcbook.chain.duty import DUTY_RESULTS
from calcbook.chain.named_results import RATIOS, is_named_by_pattern
from calcbook.chain.types import CONDITIONS
from calcbook.faults import Collector, Place, nearest_names, shown

WHOLE = (
    *(f"{kind}_{condition}" for kind in ("U", "UA", "heat_flux", "heat_flow") for condition in CONDITIONS),
    *RATIOS,
    *DUTY_RESULTS,
    *(name for name in LATER if name not in STARTS),
)
# What names of a deposit, and of a surface with its place, start with.
OPEN_NAMES = (LARGEST_ALLOWANCE, "T ")


def tell_impossible_results(calculation: Calculation, collector: Collector) -> None:
    """Add a fault, result-unknown, for every name that no file gives a result; whether this one does is not asked."""
    for name, place in _asked_for(calculation):
        if name in WHOLE or is_named_by_pattern(name) or is_found_later(name) or name.startswith(OPEN_NAMES):
            continue
        collector.add(
            "result-unknown",
            place,
            f"there is no result `{shown(name)}`",
            found=shown(name),
            expected=f"{', '.join(WHOLE[:4])} and others: the record lists what this calculation has",
            nearest=nearest_names(name, WHOLE),
        )


def _asked_for(calculation: Calculation) -> Iterator[tuple[str, Place]]:
    yield from ((criterion.result, criterion.place) for criterion in calculation.acceptance)
    if calculation.sweep is not None:
        yield from calculation.sweep.of
    if calculation.uncertainty is not None:
        yield from ((item.name, item.place) for item in calculation.uncertainty.results)
