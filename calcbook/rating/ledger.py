"""The margin ledger: the area of all tubes, split in m² into the duty at clean U and everything beyond it.

The area that a resistance asks for is Q/(F·ΔT_lm)·R, so that the parts of terms in series add up exactly.
"""

from __future__ import annotations

from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.plausible import stated_figure
from calcbook.chain.rating_outcome import Ledger, LedgerRow
from calcbook.chain.types import CLEAN, SERVICE, Chain

# Below this part of the installed area a difference of two solved resistances is rounding.
NOTHING = 1e-9


def ledger(chain: Chain, case: CaseOutcome) -> Ledger:
    """The entries of a case, from the duty at clean U to what is left; they add up to the area of all tubes."""
    service = case.solutions[SERVICE]
    installed = service.number(chain.results["area installed"])
    required = {
        condition: case.solutions[condition].number(chain.results["area required"])
        for condition in (CLEAN, SERVICE)
    }
    # m² for each m² K/W on the basis area
    per_resistance = required[SERVICE] * service.number(chain.results["U"])
    factors = _factor_rows(chain, case, per_resistance)
    duty = required[CLEAN] - sum(row.area for row in factors)
    basis = "A_req clean, without the method factors" if factors else "A_req clean"
    rows = [LedgerRow("duty at clean U", duty, basis, False), *factors]
    moved = 0.0
    for row, other in zip(case.terms[SERVICE], case.terms[CLEAN], strict=True):
        if row.kind == "fouling":
            rows.append(LedgerRow(row.name, per_resistance * row.resistance, "its allowance", True))
        else:
            moved += row.resistance - other.resistance
    if abs(per_resistance * moved) > NOTHING * installed:
        rows.append(
            LedgerRow(
                "films and walls at the fouled surface",
                per_resistance * moved,
                "their resistance in service less that clean",
                True,
            )
        )
    left = installed - required[SERVICE]
    rows.append(LedgerRow("left over the duty in service, rounding included", left, "A_inst − A_req", True))
    plugged = _plugged_area(chain, case, installed)
    if plugged:
        rows.append(LedgerRow("plugged tubes", plugged, "beside the installed area", True))
    return Ledger(tuple(rows))


def _factor_rows(chain: Chain, case: CaseOutcome, per_resistance: float) -> list[LedgerRow]:
    """The area that a factor on a method's coefficient asks for: R_film·(1 − F_m) of the clean film."""
    rows = []
    clean = case.solutions[CLEAN]
    for term in chain.calculation.resistances:
        value = term.values.get("method factor")
        row = next((row for row in case.terms[CLEAN] if row.name == term.name), None)
        if value is None or row is None:
            continue
        factor = stated_figure(clean, value, term.name, "method factor")
        area = per_resistance * row.resistance * (1.0 - factor)
        rows.append(LedgerRow(f"method factor of {term.name}", area, f"F_m = {factor:g} on its method", True))
    return rows


def _plugged_area(chain: Chain, case: CaseOutcome, installed: float) -> float:
    """The area of plugged tubes, which stands beside the installed one; 0 where none is stated."""
    geometry = chain.calculation.geometry
    plugged, tubes = (geometry.dimensions.get(key) if geometry else None for key in ("plugged", "tubes"))
    if plugged is None or tubes is None:
        return 0.0
    service = case.solutions[SERVICE]
    closed, every = (
        stated_figure(service, value, "geometry", key)
        for value, key in ((plugged, "plugged"), (tubes, "tubes"))
    )
    return installed * closed / (every - closed)
