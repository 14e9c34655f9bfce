"""The fouling resistance of every row: the calculation's own chain, clean, in one call on arrays.

The chain gives the heat of both streams, the mean temperature difference and the clean coefficient at the
row's own flows and temperatures; the card of plant data makes the fouling resistance from them.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from calcbook.chain.checks import OUTSIDE, check_states
from calcbook.chain.factors import with_factors
from calcbook.chain.findings import figures_to_hold
from calcbook.chain.samples import Samples, mark_derived
from calcbook.chain.sensitivity import derivatives
from calcbook.chain.solve import PIECE, Solution, solve
from calcbook.chain.survey_outcome import RowFigure
from calcbook.chain.types import CLEAN, Chain, ChainCheck
from calcbook.formulas import dimension, evaluate, parse_expression, write
from calcbook.library.cards import Limit
from calcbook.library.operations import RelationOperation, Slopes, run
from calcbook.library.programs import Program, ProgramLimit, ProgramStep
from calcbook.quantities import DIMENSIONLESS, si_unit

Array = np.ndarray
CARD = "fouling-from-plant-data"
HOT, COLD, ONE_SIDE = "duty/hot/Q", "duty/cold/Q", "duty/Q"
# What passes the wall of the hot stream's heat, where a part x of it goes to the surroundings; a side whose heat its
# own flow does not show carries what passes.
PASSES = parse_expression("Q_hot*(1 - x)")
AS_HOT, AS_COLD = parse_expression("Q_h"), parse_expression("Q_c")
STREAM_HEAT = "Q_h of the stream"
LOSS, CLOSURE = "heat loss", "closure"
ONE = np.ones(())


@dataclass(frozen=True)
class Found:
    """What each row gives (NaN where it gives nothing): m² K/W, W/(m² K), and 1.

    ``closure`` is NaN throughout where only one stream shows its heat, ``factor`` one where no F is needed.
    ``outside`` has each limit of the card with the rows that it does not hold for. ``beyond`` marks rows at
    which a film's method leaves its range, ``methods`` are those with such limits that were used.
    """

    resistance: Array
    coefficient: Array
    clean: Array
    closure: Array
    factor: Array
    outside: tuple[tuple[Limit, Array], ...]
    beyond: Array
    methods: tuple[str, ...]

    def part(self, places: Array) -> Found:
        """Some of the rows."""
        return Found(
            self.resistance[places],
            self.coefficient[places],
            self.clean[places],
            self.closure[places],
            self.factor[places],
            tuple((limit, outside[places]) for limit, outside in self.outside),
            self.beyond[places],
            self.methods,
        )


@dataclass(frozen=True)
class _Way:
    """The way from the chain's figures to the resistance: ids by the needs of the card, and the steps ``first``, that
    give the heat of both sides at the wall from those of the streams."""

    program: Program
    first: tuple[ProgramStep, ...]
    bound: Mapping[str, str]
    has_closure: bool

    @property
    def steps(self) -> tuple[ProgramStep, ...]:
        """All of it; the closure of two heats that are one says nothing."""
        card = (step for step in self.program.steps if step.symbol != CLOSURE or self.has_closure)
        return (*self.first, *card)

    def values(self, solution: Solution, loss: float, count: int) -> dict[str, Array]:
        values: dict[str, Array] = {
            name: np.asarray(figure) for name, figure in self.program.constants.items()
        }
        for name, step in self.bound.items():
            values[name] = np.broadcast_to(solution.values[step], (count,)) if step else ONE
        return values | {"x": np.asarray(loss)}


def _way(chain: Chain) -> _Way:
    """The heat of both sides at the wall, then the steps of the card."""
    program = chain.library.program(CARD)
    known = {step.id for step in (*chain.steps, *chain.circuit)}
    loses = ProgramStep("Q_h", "Q_h", CARD, "", RelationOperation(PASSES), {"Q_hot": STREAM_HEAT, "x": "x"})
    as_hot = ProgramStep("Q_c", "Q_c", CARD, "", RelationOperation(AS_HOT), {"Q_h": "Q_h"})
    as_cold = ProgramStep("Q_h", "Q_h", CARD, "", RelationOperation(AS_COLD), {"Q_c": "Q_c"})
    heats: dict[str, str]
    first: tuple[ProgramStep, ...]
    if HOT in known and COLD in known:
        heats, first = {STREAM_HEAT: HOT, "Q_c": COLD}, (loses,)
    elif HOT in known:
        heats, first = {STREAM_HEAT: HOT}, (loses, as_hot)
    else:
        heats, first = {"Q_c": COLD if COLD in known else ONE_SIDE}, (as_cold,)
    bound = {
        **heats,
        "A": chain.results["area installed"],
        "F": chain.results.get("F", ""),
        "LMTD": chain.results["LMTD"],
        "U_c": chain.results["U"],
    }
    return _Way(program, first, bound, HOT in known and COLD in known)


def relations_of(chain: Chain) -> str:
    """The relations that make the resistance of a row, as text."""
    operations = ((step.symbol, step.operation) for step in _way(chain).steps)
    return "; ".join(
        f"{symbol} = {write(operation.relation)}"
        for symbol, operation in operations
        if isinstance(operation, RelationOperation)
    )


def inputs_of(chain: Chain, columns: Mapping[str, Array]) -> dict[str, Array]:
    """The inputs of the base case, with the measured figures in place of theirs."""
    return {**chain.case_inputs(""), **{f"given/{symbol}": figures for symbol, figures in columns.items()}}


def resistances(chain: Chain, columns: Mapping[str, Array], loss: float) -> Found:
    """The fouling resistance of every row on the basis area; ``loss`` is the part that the hot stream loses.

    Many rows are taken in pieces, so that the arrays on the way stay in the processor's cache.
    """
    way, limits = _way(chain), _range_limits(chain)
    wanted = {name for name in way.bound.values() if name}
    asked = {name for limit in limits for name in limit.names}
    held = figures_to_hold(chain)
    shorter = _only(chain, wanted)
    count = len(next(iter(columns.values())))
    found = []
    for start in range(0, count, PIECE):
        part = {symbol: figures[start : start + PIECE] for symbol, figures in columns.items()}
        solution = solve(shorter, inputs_of(chain, part), CLEAN, keep=wanted | asked | held)
        size = min(PIECE, count - start)
        states = Samples(np.zeros(size, dtype=int))
        mark_derived(chain, solution.values, states)
        solution.converged = solution.converged & (states.missing == 0)
        found.append(_found(way, limits, solution, loss, size))
    return joined(found)


def worked(
    chain: Chain, columns: Mapping[str, Array], loss: float
) -> tuple[tuple[RowFigure, ...], tuple[RowFigure, ...]]:
    """One row (columns of one figure): what its resistance takes from the chain, and every step to it."""
    way = _way(chain)
    solution = solve(
        chain, inputs_of(chain, columns), CLEAN, keep={name for name in way.bound.values() if name}
    )
    values = way.values(solution, loss, 1)
    with np.errstate(all="ignore"):
        run(way.steps, values)
    needs = {item.name: item.need for item in way.program.needs}
    kinds = {name: need.quantity for name, need in needs.items()} | {STREAM_HEAT: needs["Q_h"].quantity}
    symbols = {name: needs[name].symbol if name in needs else "Q_hot" for name in way.bound}
    taken = tuple(
        RowFigure(symbols[name], kinds[name].meaning, float(values[name].ravel()[0]), kinds[name].unit)
        for name in way.bound
    )
    dimensions = {name: kind.dimension for name, kind in kinds.items()} | {"x": DIMENSIONLESS}
    dimensions |= way.program.constant_dimensions
    steps = []
    for step in way.steps:
        assert isinstance(step.operation, RelationOperation)
        relation = step.operation.relation
        dimensions[step.name] = dimension(
            relation, {one: dimensions[name] for one, name in step.inputs.items()}
        )
        put_in = {one: float(np.ravel(values[name])[0]) for one, name in step.inputs.items()}
        value, unit = float(np.ravel(values[step.name])[0]), si_unit(dimensions[step.name])
        steps.append(RowFigure(step.symbol, "", value, unit, relation, put_in))
    return taken, tuple(steps)


def _found(way: _Way, limits: tuple[_RangeLimit, ...], solution: Solution, loss: float, count: int) -> Found:
    values = way.values(solution, loss, count)
    with np.errstate(all="ignore"):
        run(way.steps, values)

    def told(name: str) -> Array:
        return np.where(solution.converged, np.broadcast_to(values[name], (count,)), np.nan)

    closure = told(CLOSURE) if way.has_closure else np.full(count, np.nan)
    outside = tuple(
        (item.limit, np.broadcast_to(~_holds(item, values), (count,)))
        for item in way.program.limits
        if way.has_closure or CLOSURE not in item.inputs
    )
    beyond = np.zeros(count, dtype=bool)
    methods: dict[str, None] = {}
    for limit in limits:
        used = limit.used(solution)
        if used.any():
            methods[limit.check.card] = None
            beyond |= used & (check_states(limit.check, solution.values) == OUTSIDE)
    return Found(
        told(way.program.result), told("U"), told("U_c"), closure, told("F"), outside, beyond, tuple(methods)
    )


def joined(parts: Sequence[Found]) -> Found:
    """Pieces put together again, in their order; nothing where there is no row."""
    if len(parts) == 1:
        return parts[0]

    def whole(name: str) -> Array:
        return np.concatenate([getattr(part, name) for part in parts] or [np.zeros(0)])

    outside = tuple(
        (limit, np.concatenate([part.outside[number][1] for part in parts]))
        for number, (limit, _) in enumerate(parts[0].outside if parts else ())
    )
    return Found(
        whole("resistance"),
        whole("coefficient"),
        whole("clean"),
        whole("closure"),
        whole("factor"),
        outside,
        whole("beyond").astype(bool),
        tuple(dict.fromkeys(name for part in parts for name in part.methods)),
    )


@dataclass(frozen=True)
class _RangeLimit:
    """A range or stop limit of one candidate of a film."""

    branch: str
    candidate: int
    check: ChainCheck

    @property
    def names(self) -> tuple[str, ...]:
        """The ids that the limit takes."""
        counting = (name for one in self.check.counts_when for name in one.inputs.values())
        return (*self.check.inputs.values(), *counting)

    def used(self, solution: Solution) -> Array:
        """The rows at which the film uses this candidate."""
        return np.asarray(solution.chosen.get(self.branch, np.zeros((), int)) == self.candidate)


def _range_limits(chain: Chain) -> tuple[_RangeLimit, ...]:
    return tuple(
        _RangeLimit(branch.name, number, check)
        for group in (chain.inner, chain.outer)
        for branch in group.branches
        if branch.situation is not None
        for number, candidate in enumerate(branch.candidates)
        for check in candidate.checks
        if check.limit.level in ("stop", "range")
    )


def _only(chain: Chain, wanted: Collection[str]) -> Chain:
    """The chain without the steps after the circuit that nothing wanted follows from."""
    needed, steps = set(wanted), []
    for step in reversed(chain.circuit):
        if step.id in needed:
            needed |= set(step.inputs.values())
            steps.append(step)
    return replace(chain, circuit=tuple(reversed(steps)))


def _holds(item: ProgramLimit, values: Mapping[str, Array]) -> Array:
    arguments = {symbol: values[bound] for symbol, bound in item.inputs.items()}
    return np.asarray(evaluate(item.limit.that, arguments), dtype=bool)


def slopes(chain: Chain, columns: Mapping[str, Array], loss: float) -> dict[str, Array]:
    """Slopes of the resistance of rows in each input and in each method's factor (by id), and in `heat loss`."""
    chain = with_factors(chain)
    way, inputs = _way(chain), inputs_of(chain, columns)
    solution = solve(chain, inputs, CLEAN)
    count = len(next(iter(columns.values())))
    values = way.values(solution, loss, count)
    seeds = [name for name, step in way.bound.items() if step]
    outer: Slopes = {name: {name: ONE} for name in (*seeds, "x")}
    run(way.steps, values, outer)
    local = outer[way.program.result]
    wanted = tuple(dict.fromkeys(way.bound[name] for name in seeds))
    traced = derivatives(chain, inputs, CLEAN, wanted, solution)
    found: dict[str, Array] = {}
    for name in seeds:
        for key, slope in traced[way.bound[name]].items():
            found[key] = found.get(key, np.zeros(count)) + np.broadcast_to(local[name] * slope, (count,))
    found[LOSS] = np.broadcast_to(local.get("x", np.zeros(())), (count,))
    return found
