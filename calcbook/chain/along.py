"""How much U differs along the unit of a duty, by the circuits closed at both of its ends."""

from __future__ import annotations

from collections.abc import Sequence

from calcbook.chain.ends import EndState
from calcbook.chain.outcome import CheckResult
from calcbook.chain.types import CONDITIONS
from calcbook.formulas import number_text

# Common practice: beyond it one mean state hardly stands for the unit.
U_SPREAD = 0.2
# Results of a unit in parts: areas in service and clean, and the margin in service.
OF_PARTS = ("area_service of parts", "area_clean of parts", "area_margin of parts")
BECAUSE = "one mean state hardly stands for the unit"
IN_PARTS = "`parts:` of the duty sums the area part by part"


def u_along(states: Sequence[EndState], case: str) -> list[CheckResult]:
    """A caution in each condition in which U differs much between the ends; nothing where one does not close."""
    found = []
    for condition in reversed(CONDITIONS):
        overall = [
            state.solution.number(state.chain.results["U"])
            for state in states
            if state.solution.condition == condition
        ]
        if len(overall) > 1:
            duty = states[0].chain.calculation.duty
            because = f"{BECAUSE}: {IN_PARTS}" if duty is not None and duty.can_be_cut else BECAUSE
            found.append(_check(max(overall) / min(overall) - 1.0, condition, case, because))
    return found


def _check(spread: float, condition: str, case: str, because: str) -> CheckResult:
    is_held = spread <= U_SPREAD
    return CheckResult(
        "duty / ends / overall coefficient",
        "duty",
        "ends",
        condition,
        case,
        f"U_max/U_min - 1 <= {U_SPREAD}",
        f"U_max/U_min − 1 = {number_text(spread, 5)} between the ends",
        f"≤ {U_SPREAD}",
        spread,
        "1",
        "caution",
        "within" if is_held else "outside",
        because,
        "common practice",
        "common practice",
        "" if is_held else "above",
    )
