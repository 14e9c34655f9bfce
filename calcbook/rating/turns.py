"""Verdicts that turn on the way from one cleaning to the end of a table, and when each does."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from calcbook.chain.growth_outcome import Turn
from calcbook.chain.samples import NO_VERDICT, Key, Samples, Verdicts
from calcbook.chain.types import CLEAN

Array = np.ndarray
# Points of one round between the two rows where a verdict turns, and its rounds: 20^-5 of the distance.
POINTS, ROUNDS = 21, 5
NO_WORDS = "no verdict"


@dataclass(frozen=True, slots=True)
class _Between:
    """A verdict that turns between two times, from one code to another."""

    key: Key
    was: int
    low: float
    high: float


def turns(verdicts_at: Callable[[Array], Samples], times: Array) -> tuple[Turn, ...]:
    """Every verdict that differs between two neighbouring times, with the first time at which it has turned.

    A clean unit knows no time: its verdicts stay out. All that turn are looked for in one call a round.
    """
    samples = verdicts_at(times)
    open_turns = [
        _Between(key, int(codes[place]), float(times[place]), float(times[place + 1]))
        for key, verdict in samples.verdicts.items()
        if verdict.condition != CLEAN
        for codes in (samples.codes(key),)
        for place in np.flatnonzero(codes[1:] != codes[:-1])
    ]
    if not open_turns:
        return ()
    for _ in range(ROUNDS):
        places = np.array([np.linspace(item.low, item.high, POINTS) for item in open_turns])
        samples = verdicts_at(places.reshape(-1))
        open_turns = [
            _narrowed(item, samples, row, number)
            for number, (item, row) in enumerate(zip(open_turns, places, strict=True))
        ]
    ends = verdicts_at(np.array([item.high for item in open_turns]))
    found = [
        _turn(item, ends.verdicts[item.key], int(ends.codes(item.key)[number]))
        for number, item in enumerate(open_turns)
    ]
    return tuple(sorted(found, key=lambda turn: turn.time))


def _narrowed(item: _Between, samples: Samples, places: Array, number: int) -> _Between:
    """The piece between two neighbouring points in which the verdict turns first."""
    codes = samples.codes(item.key)[number * POINTS : (number + 1) * POINTS]
    turned = np.flatnonzero(codes != item.was)
    place = max(int(turned[0]) if len(turned) else POINTS - 1, 1)
    return _Between(item.key, item.was, float(places[place - 1]), float(places[place]))


def _turn(item: _Between, verdict: Verdicts, code: int) -> Turn:
    def words(place: int) -> str:
        return verdict.words[place] if place != NO_VERDICT else NO_WORDS

    return Turn(verdict.kind, verdict.id, verdict.level, words(item.was), words(code), item.high)
