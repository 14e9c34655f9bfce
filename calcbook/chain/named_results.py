"""Results by name on arrays: what a record names, for every sample of a solution."""

from __future__ import annotations

import re
from collections.abc import Mapping

import numpy as np

from calcbook.chain.duty import DUTY_RESULTS
from calcbook.chain.figures import by_size, interfaces
from calcbook.chain.pressure import drops, evaluate_pressure_drops
from calcbook.chain.solve import Solution
from calcbook.chain.types import CLEAN, CONDITIONS, SERVICE, Chain

Array = np.ndarray
RATIOS = ("cleanliness", "excess_surface")
_WITH_CONDITION = re.compile(r"(U|UA|heat_flux|heat_flow)_(clean|service)(?: on (.+))?")
_OF_TERM = re.compile(r"(T|h|R|dT|phase_change) (.+) (clean|service)")
_OF_STREAM = re.compile(r"(speed|Re) (.+)")
_PRESSURE_DROP = re.compile(r"dp (.+)_(clean|service)")
_IN_TABLE = {"U": "U", "UA": "UA", "heat_flux": "heat flux", "heat_flow": "heat flow"}


def conditions_of(name: str) -> tuple[str, ...]:
    """The conditions that a result is made from."""
    if name in RATIOS:
        return CONDITIONS
    if name in DUTY_RESULTS:
        return (DUTY_RESULTS[name][0],)
    found = _WITH_CONDITION.fullmatch(name) or _OF_TERM.fullmatch(name) or _PRESSURE_DROP.fullmatch(name)
    return (CLEAN,) if found is not None and CLEAN in found.groups() else (SERVICE,)


def is_named_by_pattern(name: str) -> bool:
    """Whether a name is built like that of a result of a condition, a term or a stream; not whether it is there."""
    patterns = (_WITH_CONDITION, _OF_TERM, _OF_STREAM, _PRESSURE_DROP)
    return any(pattern.fullmatch(name) for pattern in patterns)


def pressure_drop_of(name: str) -> tuple[str, str] | None:
    """The stream and the condition of a pressure drop by its name; None for another result."""
    found = _PRESSURE_DROP.fullmatch(name)
    return (found[1], found[2]) if found is not None else None


def is_coefficient(name: str) -> bool:
    """Whether a result is an overall coefficient, so that its reciprocal is a resistance."""
    found = _WITH_CONDITION.fullmatch(name)
    return found is not None and found[1] == "U"


def result_values(chain: Chain, solutions: Mapping[str, Solution], name: str) -> Array | None:
    """A result for every sample; None where the chain has no such result."""
    if name in RATIOS:
        clean, service = (solutions[condition].figure(chain.results["U"]) for condition in CONDITIONS)
        return service / clean if name == "cleanliness" else clean / service - 1.0
    if name in DUTY_RESULTS:
        condition, key = DUTY_RESULTS[name]
        return _figure(chain, solutions[condition], name, key)
    found = _WITH_CONDITION.fullmatch(name)
    if found is not None:
        key = _IN_TABLE[found[1]] + (f" on {found[3]}" if found[3] else "")
        return _figure(chain, solutions[found[2]], name, key)
    found = _OF_TERM.fullmatch(name)
    if found is not None and found[1] == "T":
        return dict(interfaces(chain, solutions[found[3]])).get(found[2])
    if found is not None:
        key = f"{found[1]} {found[2]}"
        return solutions[found[3]].figure(chain.results[key]) if key in chain.results else None
    found = _PRESSURE_DROP.fullmatch(name)
    if found is not None:
        return _pressure_drop(chain, solutions[found[2]], found[1])
    return _of_stream(chain, solutions[SERVICE], name)


def _figure(chain: Chain, solution: Solution, name: str, key: str) -> Array | None:
    return by_size(name, solution.figure(chain.results[key])) if key in chain.results else None


def _pressure_drop(chain: Chain, solution: Solution, stream: str) -> Array | None:
    for _, branch, drop in drops(chain):
        if branch.stream == stream:
            evaluate_pressure_drops(chain, solution)
            return solution.figure(drop.total.coefficient)
    return None


def _of_stream(chain: Chain, solution: Solution, name: str) -> Array | None:
    found = _OF_STREAM.fullmatch(name)
    if found is None:
        return None
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            if branch.stream != found[2]:
                continue
            state = chain.streams[branch.stream]
            step = f"{branch.name}/Re" if found[1] == "Re" else f"{branch.name}/speed"
            if found[1] == "speed" and state.flow_kind == "speed":
                step = state.flow
            if step in solution.values:
                return solution.figure(step)
    return None
