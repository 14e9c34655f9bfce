"""Both ends of a unit with a duty: its surfaces there, and what the fluid does at the wall, at every sample."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace

import numpy as np

from calcbook.chain.completing import completed
from calcbook.chain.findings import lacking_property, wall_checks
from calcbook.chain.outcome import CheckResult
from calcbook.chain.sensitivity import derivatives
from calcbook.chain.solve import Solution, conditions_of, solve, solve_both
from calcbook.chain.types import CONDITIONS, Chain
from calcbook.chain.variants import with_figures

Array = np.ndarray
OPEN_END = "duty / ends / circuit"
PLACES = ("at the hot inlet", "at the hot outlet")


@dataclass(frozen=True)
class EndState:
    """The circuit at one end of the unit in one condition: the chain with the ends put in, and its solution."""

    chain: Chain
    place: str
    solution: Solution


def has_ends(chain: Chain) -> bool:
    """Whether the circuit can be closed at the ends of a duty as well."""
    duty = chain.calculation.duty
    return duty is not None and duty.has_ends and chain.has_temperatures


def end_states(
    chain: Chain, inputs: Mapping[str, Array], solutions: Mapping[str, Solution], thorough: bool = True
) -> tuple[EndState, ...]:
    """Both ends in every condition, for the samples of the solutions in one row; empty without a duty.

    The hot inlet meets the cold outlet, but in parallel flow the cold inlet. ``inputs`` leave nothing open. Where the
    circuit does not close at an end, its solution has not converged. ``thorough`` is that of ``solve``.
    """
    duty = chain.calculation.duty
    if duty is None or not has_ends(chain):
        return ()
    any_solution = next(iter(solutions.values()))
    size = any_solution.converged.size
    figures = {
        temperature: np.concatenate([any_solution.row(step) for step in steps])
        for temperature, steps in _end_steps(chain).items()
    }
    twice = {name: np.tile(value, 2) if np.ndim(value) else value for name, value in inputs.items()}
    one, given = with_figures(chain, twice, figures)
    start = _start(solutions)
    if tuple(solutions) == CONDITIONS:
        found = conditions_of(solve_both(one, given, thorough, start))
    else:
        found = {
            condition: solve(one, given, condition, thorough=thorough, start=start) for condition in solutions
        }
    return tuple(
        EndState(one, place, solution.part(slice(number * size, (number + 1) * size)))
        for solution in found.values()
        for number, place in enumerate(PLACES)
    )


def _end_steps(chain: Chain) -> dict[str, tuple[str, str]]:
    """The temperature of each stream of a duty, and the steps that give it at both places."""
    duty = chain.calculation.duty
    assert duty is not None, "only a duty has ends"
    orders = {"hot": ("inlet", "outlet"), "cold": ("outlet", "inlet")}
    if duty.arrangement == "parallel flow":
        orders["cold"] = orders["hot"]
    return {
        chain.streams[side.stream].temperature: (
            chain.results[f"T {name} {orders[name][0]}"],
            chain.results[f"T {name} {orders[name][1]}"],
        )
        for name, side in duty.sides.items()
        if f"T {name} mean" in chain.results
    }


def end_slopes(
    chain: Chain,
    inputs: Mapping[str, Array],
    solutions: Mapping[str, Solution],
    state: EndState,
    wanted: tuple[str, ...],
) -> dict[str, dict[str, Array]]:
    """Slopes of steps at one end of a single record with respect to every input, as ``derivatives`` gives them.

    The temperatures that the streams have there, and the figures that the file leaves open, move with the inputs as
    those of the whole unit do. ``solutions`` are those of the record by condition.
    """
    condition, number = state.solution.condition, PLACES.index(state.place)
    temperatures = {name: steps[number] for name, steps in _end_steps(chain).items()}
    found = {name: (condition, step) for name, step in temperatures.items()}
    found |= {item.id: (item.condition, item.found) for item in chain.open_figures}
    whole = completed(chain, inputs)
    put_in = {name: state.solution.figure(name) for name in temperatures}
    put_in |= {item.id: whole[item.id] for item in chain.open_figures}
    one, given = with_figures(chain, whole, put_in)
    direct = derivatives(one, given, condition, wanted, state.solution)
    moved: dict[str, dict[str, Array]] = {}
    for own in dict.fromkeys(where for where, _ in found.values()):
        steps = {name: step for name, (where, step) in found.items() if where == own}
        there = derivatives(chain, inputs, own, tuple(steps.values()), solutions.get(own))
        moved |= {name: there[step] for name, step in steps.items()}
    total: dict[str, dict[str, Array]] = {}
    for step, slopes in direct.items():
        total[step] = {name: slope for name, slope in slopes.items() if name not in moved}
        for name, slope in ((name, slope) for name, slope in slopes.items() if name in moved):
            for key, part in moved[name].items():
                total[step][key] = total[step].get(key, np.zeros(())) + slope * part
    return total


def _start(solutions: Mapping[str, Solution]) -> Array | None:
    """What the circuits closed with at the mean temperatures, for both ends of each condition."""
    rows = [solution.unknowns for solution in solutions.values()]
    known = [row for row in rows if row is not None]
    return np.concatenate([np.tile(row, 2) for row in known], axis=1) if len(known) == len(rows) else None


def closed_ends(states: tuple[EndState, ...]) -> tuple[EndState, ...]:
    """The ends of a single record at which the circuit closes, each as a solution of its own."""
    return tuple(replace(state, solution=state.solution.sample(0)) for state in states if _closes(state))


def end_checks(states: tuple[EndState, ...], case: str) -> list[CheckResult]:
    """Against boiling, condensing and freezing at the wall at both ends of a single record.

    Of an end at which the circuit does not close nothing of that is known, which is a limit of its own.
    """
    found = []
    for state in states:
        solution = state.solution.sample(0)
        why = "" if _closes(state) else _why_open(state.chain, solution)
        found += [_open_end(state, case, why)] if why else []
        checks = wall_checks(state.chain, case, solution, why)
        found += [check._replace(id=id_at(check.id, state)) for check in checks]
    return found


def _closes(state: EndState) -> bool:
    """Whether the circuit of a single record closes at an end."""
    return bool(state.solution.converged.reshape(-1)[0])


def _why_open(chain: Chain, solution: Solution) -> str:
    lacking = lacking_property(chain, solution)
    return "the circuit does not close" + (f"; {lacking}" if lacking else "")


def _open_end(state: EndState, case: str, why: str) -> CheckResult:
    return CheckResult(
        id_at(OPEN_END, state),
        "duty",
        "wall phase",
        state.solution.condition,
        case,
        "the circuit closes",
        why,
        "the circuit closes",
        math.nan,
        "1",
        "range",
        "not evaluable",
        "boiling, condensing and freezing at the wall are not known there",
        "",
        "common practice",
    )


def id_at(name: str, state: EndState) -> str:
    """The id of a limit or result at an end."""
    return f"{name} {state.place}"


def end_surfaces(states: tuple[EndState, ...]) -> Iterator[tuple[str, Array, str]]:
    """Result name, temperatures (NaN where the circuit does not close) and title of both wetted surfaces there."""
    for state in states:
        condition = state.solution.condition
        for group in (state.chain.inner, state.chain.outer):
            if group.side not in state.chain.known_surfaces:
                continue
            surface = f"{group.side} surface"
            figures = state.solution.figure(group.surface_temperature)
            yield (
                id_at(f"T {surface} {condition}", state),
                np.where(state.solution.converged, figures, np.nan),
                f"temperature {surface}, {condition}, {state.place}",
            )
