"""Both ends of a unit with a duty: what the fluid does at the wall where its streams enter and leave."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from calcbook.chain.findings import wall_checks
from calcbook.chain.outcome import CheckResult
from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import Chain
from calcbook.chain.variants import with_figures

Array = np.ndarray
PLACES = ("at the hot inlet", "at the hot outlet")


def end_checks(
    chain: Chain, case: str, inputs: Mapping[str, Array], solutions: Mapping[str, Solution]
) -> list[CheckResult]:
    """Against boiling, condensing and freezing at the wall at both ends, in every condition of a case.

    The hot inlet meets the cold outlet, but in parallel flow the cold inlet. A case that does not close at an
    end has no check there.
    """
    duty = chain.calculation.duty
    if duty is None or not chain.has_temperatures:
        return []
    orders = {"hot": ("inlet", "outlet"), "cold": ("outlet", "inlet")}
    if duty.arrangement == "parallel flow":
        orders["cold"] = orders["hot"]
    figures = {}
    for name, side in duty.sides.items():
        if f"T {name} mean" not in chain.results:
            continue
        bulk = chain.streams[side.stream].temperature
        any_solution = next(iter(solutions.values()))
        figures[bulk] = np.array(
            [any_solution.number(chain.results[f"T {name} {end}"]) for end in orders[name]]
        )
    one, given = with_figures(chain, inputs, figures)
    found: list[CheckResult] = []
    for condition in solutions:
        both = solve(one, given, condition)
        for number, place in enumerate(PLACES):
            if both.converged.reshape(-1)[number]:
                checks = wall_checks(one, case, both.sample(number))
                found += [replace(check, id=f"{check.id} {place}") for check in checks]
    return found
