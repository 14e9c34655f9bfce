"""What each change moved a result by: Shapley parts over the changes, from the engine's own answers.

The part of a change is its effect averaged over every order in which the changes can be made. Parts do not
depend on an order, and they add up to the whole difference; nothing is scaled. For an overall coefficient the
parts are made in resistance as well, where terms in series add.

Up to ``EXACT_UP_TO`` changes every subset is solved: the subsets of one structure as samples of one call.
Above that, orders are sampled in pairs (an order and its reverse) with a fixed seed, and each part has its
standard error. A change that makes no calculation without others is joined with those it needs.

Source of the value: L. S. Shapley, A value for n-person games, Contributions to the Theory of Games II
(1953).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from hashlib import sha256

import numpy as np

from calcbook.chain.named_results import conditions_of, is_coefficient, result_values
from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import SERVICE, Chain
from calcbook.properties import PropertyFault
from calcbook.quantities import QuantityKind
from calcbook.revisions.changes import Change
from calcbook.revisions.mixtures import Mixer, has_sound_states, moved_inputs, with_inputs
from calcbook.revisions.sides import Side

Array = np.ndarray
EXACT_UP_TO = 12
PAIRS = 128
# Every structure is built on its own; with many structural changes fewer orders are sampled.
PAIRS_OF_MANY_STRUCTURES, MANY_STRUCTURES = 16, 8
SEED = "calcbook comparison 1"
ALWAYS_STRUCTURAL = ("fluid", "card")
# Two chains of one structure differ by rounding alone.
SAME_ANSWER = 1e-12


@dataclass(frozen=True, slots=True)
class Shares:
    """Parts of one difference by block: the Shapley part, the effect alone, the effect when made last.

    ``error`` is the standard error of a sampled part, 0 for an exact one.
    """

    part: tuple[float, ...]
    alone: tuple[float, ...]
    last: tuple[float, ...]
    error: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class Part:
    """What one change, or changes that cannot stand apart, moved a result by.

    The four resistance figures are on the area of that U, m² K/W; NaN for a result that is no coefficient.
    """

    changes: tuple[str, ...]
    title: str
    part: float
    alone: float
    last: float
    error: float
    resistance: float = math.nan
    resistance_alone: float = math.nan
    resistance_last: float = math.nan
    resistance_error: float = math.nan


@dataclass(frozen=True, slots=True)
class Attribution:
    """The parts of one result's difference, in the order of the file.

    ``interaction`` is the difference less the sum of what each part does alone. ``rest`` is what no change
    explains; it is 0 within rounding. ``evaluations`` are the subsets solved, ``structures`` the chains built
    for them, ``orders`` the sampled orders (0: exact). Without ``has_parts`` the result does not exist in
    every mixture of the two revisions, and no parts can be given.
    """

    result: str
    kind: QuantityKind
    was: float
    now: float
    parts: tuple[Part, ...]
    interaction: float
    rest: float
    evaluations: int
    structures: int
    orders: int
    has_parts: bool = True

    @property
    def difference(self) -> float:
        """The result now less the result as it was."""
        return self.now - self.was

    @property
    def is_coefficient(self) -> bool:
        """Whether the parts stand in resistance as well."""
        return is_coefficient(self.result)

    @property
    def resistance_difference(self) -> float:
        """Difference of the reciprocals, m² K/W."""
        return 1.0 / self.now - 1.0 / self.was

    def ranked(self) -> tuple[Part, ...]:
        """The parts, largest first."""
        return tuple(sorted(self.parts, key=lambda part: -float(f"{abs(part.part):.9g}")))


def attribute(
    old: Side, new: Side, changes: Sequence[Change], results: Sequence[str]
) -> tuple[Attribution, ...]:
    """The parts of each named result of the base case, over the changes that can move it.

    Every result must be one of both sides (``KeyError`` else).
    """
    moving = [change for change in changes if change.moves]
    game = _Game(Mixer(old, new, moving), tuple(results))
    values, shares_of, orders = game.played()
    found = []
    for name in results:
        was, now = (side.solved.base.results[name] for side in (old, new))
        found.append(
            _attribution(name, now.kind, was.value, now.value, values[name], game, shares_of, orders)
        )
    return tuple(found)


def _attribution(
    name: str,
    kind: QuantityKind,
    was: float,
    now: float,
    values: Array,
    game: _Game,
    shares_of: Callable[[Array], Shares],
    orders: int,
) -> Attribution:
    counts = (game.evaluations, game.structures, orders)
    if not np.isfinite(values).all():
        return Attribution(name, kind, was, now, (), math.nan, math.nan, *counts, has_parts=False)
    shares = shares_of(values)
    in_resistance = shares_of(1.0 / values) if is_coefficient(name) else None
    parts = []
    for number, block in enumerate(game.blocks):
        figures = [column[number] for column in (shares.part, shares.alone, shares.last, shares.error)]
        if in_resistance is not None:
            figures += [
                column[number]
                for column in (
                    in_resistance.part,
                    in_resistance.alone,
                    in_resistance.last,
                    in_resistance.error,
                )
            ]
        members = [game.mixer.changes[item] for item in block]
        parts.append(
            Part(tuple(item.id for item in members), " with ".join(item.title for item in members), *figures)
        )
    interaction = (now - was) - math.fsum(shares.alone)
    rest = (now - was) - math.fsum(shares.part)
    return Attribution(name, kind, was, now, tuple(parts), interaction, rest, *counts)


class _Game:
    """The changes as players: blocks that can stand apart, and what any subset of them gives."""

    def __init__(self, mixer: Mixer, results: tuple[str, ...]):
        self.mixer = mixer
        self.results = results
        self.conditions = tuple(dict.fromkeys(item for name in results for item in conditions_of(name))) or (
            SERVICE,
        )
        self.blocks: list[tuple[int, ...]] = [(number,) for number in range(len(mixer.changes))]
        self.evaluations = self.structures = 0
        self.overrides: dict[int, dict[str, float]] = {}
        # What is known of a block does not change when others are joined.
        self.moved: dict[tuple[int, ...], dict[str, float] | None] = {}

    def played(self) -> tuple[dict[str, Array], Callable[[Array], Shares], int]:
        """Values of every subset wanted, the function that makes shares of them, and the count of sampled
        orders.

        Blocks are joined until every subset wanted makes a calculation.
        """
        while self._join_what_needs_another():
            pass
        while True:
            self._find_overrides()
            count = len(self.blocks)
            if count <= EXACT_UP_TO:
                subsets, orders, shares_of = _every_subset(count), 0, _exact(count)
            else:
                structural = count - len(self.overrides)
                pairs = PAIRS if structural <= MANY_STRUCTURES else PAIRS_OF_MANY_STRUCTURES
                sample = _Sample(count, pairs)
                subsets, orders, shares_of = sample.subsets, 2 * pairs, sample.shares
            values, answered = self._values(subsets)
            if answered.all():
                return values, shares_of, orders
            failing = subsets[~answered]
            smallest = failing[int(np.argmin(failing.sum(axis=1)))]
            subset = frozenset(np.flatnonzero(smallest).tolist())
            self._join([self._changes(self._smallest(subset, self._stands))])
            if len(self.blocks) == count:
                self._join([self._changes(range(count))])

    # -- joining ------------------------------------------------------------------------------------

    def _join_what_needs_another(self) -> bool:
        """Join every block that makes no calculation alone, or that leaves none when it alone is missing.

        Whether a calculation has an answer is seen when all subsets are solved.

        Returns whether any were joined. A block is joined with a smallest set of those it needs.
        """
        self._find_overrides()
        everything = frozenset(range(len(self.blocks)))
        joins = []
        for number in everything:
            alone = frozenset((number,))
            for holds in (self._makes_sense, lambda part: self._makes_sense(everything - part)):
                if not holds(alone):
                    joins.append(self._changes(self._smallest(alone, holds)))
        self._join(joins)
        return bool(joins)

    def _smallest(self, kept: frozenset[int], holds: Callable[[frozenset[int]], bool]) -> frozenset[int]:
        """A smallest set around ``kept`` for which something holds, taking blocks away one by one."""
        found = frozenset(range(len(self.blocks)))
        for number in sorted(found - kept, key=self._name, reverse=True):
            if holds(found - {number}):
                found = found - {number}
        return found

    def _name(self, block: int) -> str:
        return min(self.mixer.changes[number].id for number in self.blocks[block])

    def _join(self, joins: Iterable[frozenset[int]]) -> None:
        """Make one block of all blocks that hold any of a set of changes, for each set."""
        for members in joins:
            touched = [block for block in self.blocks if members & set(block)]
            joined = tuple(sorted(item for block in touched for item in block))
            first = self.blocks.index(touched[0])
            self.blocks = [
                *self.blocks[:first],
                joined,
                *(block for block in self.blocks[first:] if block not in touched),
            ]

    def _mixed(self, subset: frozenset[int]) -> Chain | None:
        """The chain of a subset of the blocks, with its inputs; None where it makes no calculation."""
        chain = self.mixer.chain(self._changes(number for number in subset if number not in self.overrides))
        if chain is None:
            return None
        moved = [self.overrides[number] for number in sorted(subset) if number in self.overrides]
        return with_inputs(chain, {name: value for inputs in moved for name, value in inputs.items()})

    def _makes_sense(self, subset: frozenset[int]) -> bool:
        """Whether a subset of the blocks makes a calculation with streams in states that they can have."""
        chain = self._mixed(subset)
        return chain is not None and has_sound_states(chain)

    def _stands(self, subset: frozenset[int]) -> bool:
        """Whether a subset of the blocks makes such a calculation, and it has an answer."""
        chain = self._mixed(subset)
        return (
            chain is not None
            and has_sound_states(chain)
            and all(np.isfinite(self._solved(chain, {}, 1, item)[1]).all() for item in self.conditions)
        )

    def _changes(self, subset: Iterable[int]) -> frozenset[int]:
        return frozenset(item for block in subset for item in self.blocks[block])

    # -- values -------------------------------------------------------------------------------------

    def _find_overrides(self) -> None:
        """Blocks that only move inputs of the old chain, with the inputs they move.

        One that moves none of them may still be what another change needs: it is made with the structure.
        """
        before = self.mixer.chain(frozenset())
        assert before is not None
        fresh = [block for block in self.blocks if block not in self.moved]
        found = {block: self._moved_by(before, block) for block in fresh}
        agreeing = self._agreeing(
            before, {block: moved for block, moved in found.items() if moved is not None}
        )
        self.moved |= {block: moved if block in agreeing else None for block, moved in found.items()}
        moves = ((number, self.moved[block]) for number, block in enumerate(self.blocks))
        self.overrides = {number: moved for number, moved in moves if moved}

    def _moved_by(self, before: Chain, block: tuple[int, ...]) -> dict[str, float] | None:
        """The inputs that a block moves; None where it is known to do more than that."""
        after = self.mixer.chain(frozenset(block))
        if after is None or any(self.mixer.changes[item].kind in ALWAYS_STRUCTURAL for item in block):
            return None
        return moved_inputs(before, after)

    def _agreeing(
        self, before: Chain, found: dict[tuple[int, ...], dict[str, float]]
    ) -> set[tuple[int, ...]]:
        """Blocks whose own chain gives the U, in every condition, that the old one gives with the inputs moved.

        The old chain is solved for all blocks in one call, a sample each.
        """
        if not found:
            return set()
        names = {name for moved in found.values() for name in moved}
        inputs = {
            name: np.array([moved.get(name, before.inputs[name].value) for moved in found.values()])
            for name in sorted(names)
        }
        agree = np.ones(len(found), dtype=bool)
        for condition in self.conditions:
            expected = self._solved(before, inputs, len(found), condition)[1]
            for place, block in enumerate(found):
                after = self.mixer.chain(frozenset(block))
                assert after is not None
                own = float(self._solved(after, {}, 1, condition)[1][0])
                agree[place] &= abs(own - expected[place]) <= SAME_ANSWER * abs(own)
        return {block for block, holds in zip(found, agree, strict=True) if holds}

    def _values(self, subsets: Array) -> tuple[dict[str, Array], Array]:
        """Results of subsets (rows of flags by block), and which of them have an answer."""
        values = {name: np.full(len(subsets), np.nan) for name in self.results}
        answered = np.zeros(len(subsets), dtype=bool)
        structural = [number for number in range(len(self.blocks)) if number not in self.overrides]
        patterns, group = np.unique(subsets[:, structural], axis=0, return_inverse=True)
        self.evaluations, self.structures = len(subsets), len(patterns)
        for index, pattern in enumerate(patterns):
            rows = np.flatnonzero(np.ravel(group) == index)
            chain = self.mixer.chain(self._changes(np.asarray(structural, dtype=int)[pattern].tolist()))
            if chain is None:
                continue
            found, good = self._of_structure(chain, subsets[rows])
            answered[rows] = good
            for name, column in found.items():
                values[name][rows] = column
        return values, answered

    def _of_structure(self, chain: Chain, subsets: Array) -> tuple[dict[str, Array], Array]:
        """Results of subsets of one structure; a state that no fluid has costs its own subset only."""
        try:
            return self._of_samples(chain, subsets)
        except PropertyFault:
            if len(subsets) == 1:
                return {}, np.zeros(1, dtype=bool)
        parts = [self._of_structure(chain, half) for half in np.array_split(subsets, 2)]
        columns = {
            name: np.concatenate([part[0].get(name, np.full(len(part[1]), np.nan)) for part in parts])
            for name in self.results
        }
        return columns, np.concatenate([part[1] for part in parts])

    def _of_samples(self, chain: Chain, subsets: Array) -> tuple[dict[str, Array], Array]:
        inputs: dict[str, Array] = {}
        for number, moved in self.overrides.items():
            for name, value in moved.items():
                if name in chain.inputs:
                    inputs[name] = np.where(subsets[:, number], value, chain.inputs[name].value)
        count = len(subsets)
        solutions: dict[str, Solution] = {}
        good = np.ones(count, dtype=bool)
        for condition in self.conditions:
            solutions[condition], coefficient = self._solved(chain, inputs, count, condition)
            good &= np.isfinite(coefficient)
        values = {}
        for name in self.results:
            figures = result_values(chain, solutions, name)
            values[name] = np.broadcast_to(figures if figures is not None else np.nan, (count,))
        return values, good

    def _solved(
        self, chain: Chain, inputs: dict[str, Array], count: int, condition: str
    ) -> tuple[Solution, Array]:
        """A solution, and U for every sample: NaN where there is no answer."""
        solution = solve(chain, {**chain.case_inputs(""), **inputs}, condition)
        coefficient = np.broadcast_to(np.asarray(solution.values[chain.results["U"]], dtype=float), (count,))
        return solution, np.where(np.broadcast_to(solution.converged, (count,)), coefficient, np.nan)


# --- shares -----------------------------------------------------------------------------------------


def _every_subset(count: int) -> Array:
    """Every subset of so many blocks, a row each: block j is in the subsets whose number has bit j."""
    return (np.arange(1 << count)[:, None] >> np.arange(count)[None, :] & 1).astype(bool)


def _exact(count: int) -> Callable[[Array], Shares]:
    return lambda values: exact_shares(values, count)


def exact_shares(values: Array, count: int) -> Shares:
    """Shapley parts from the values of every subset, numbered as ``_every_subset`` does; no error."""
    subsets = np.arange(1 << count)
    sizes = sum((subsets >> number & 1 for number in range(count)), np.zeros_like(subsets))
    weights = np.asarray([1.0 / (count * math.comb(count - 1, size)) for size in range(count)])
    part, alone, last = [], [], []
    for number in range(count):
        without = subsets[(subsets >> number & 1) == 0]
        steps = values[without | 1 << number] - values[without]
        part.append(math.fsum((weights[sizes[without]] * steps).tolist()))
        alone.append(float(steps[0]))
        last.append(float(steps[-1]))
    return Shares(tuple(part), tuple(alone), tuple(last), (0.0,) * count)


class _Sample:
    """Orders drawn in pairs, an order and its reverse, and the subsets on their way."""

    def __init__(self, count: int, pairs: int):
        self.count = count
        self.orders = [order for pair in range(pairs) for order in _pair(count, pair)]
        self.rows: dict[frozenset[int], int] = {}
        for order in self.orders:
            for size in range(count + 1):
                self.rows.setdefault(frozenset(order[:size]), len(self.rows))
        everything = frozenset(range(count))
        for number in range(count):
            self.rows.setdefault(frozenset((number,)), len(self.rows))
            self.rows.setdefault(everything - {number}, len(self.rows))
        self.subsets = np.zeros((len(self.rows), count), dtype=bool)
        for subset, row in self.rows.items():
            self.subsets[row, sorted(subset)] = True

    def shares(self, values: Array) -> Shares:
        """Mean step of every block over the orders; the error is that of the mean of the pairs."""
        steps = np.empty((len(self.orders), self.count))
        for row, order in enumerate(self.orders):
            way = [values[self.rows[frozenset(order[:size])]] for size in range(self.count + 1)]
            steps[row, list(order)] = np.diff(way)
        pairs = 0.5 * (steps[0::2] + steps[1::2])
        error = pairs.std(axis=0, ddof=1) / math.sqrt(len(pairs))
        nothing, everything = frozenset[int](), frozenset(range(self.count))
        alone = [
            float(values[self.rows[frozenset((number,))]] - values[self.rows[nothing]])
            for number in range(self.count)
        ]
        last = [
            float(values[self.rows[everything]] - values[self.rows[everything - {number}]])
            for number in range(self.count)
        ]
        mean = tuple(math.fsum(pairs[:, number].tolist()) / len(pairs) for number in range(self.count))
        return Shares(mean, tuple(alone), tuple(last), tuple(error.tolist()))


def _pair(count: int, pair: int) -> tuple[tuple[int, ...], tuple[int, ...]]:
    """An order of the blocks and its reverse, from a counter and the fixed seed, the same on every
    machine."""
    keys = [sha256(f"{SEED} / {pair} / {number}".encode()).digest() for number in range(count)]
    order = tuple(sorted(range(count), key=keys.__getitem__))
    return order, order[::-1]
