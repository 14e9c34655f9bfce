"""What the rating finds from a solved calculation, found again at many samples of it.

The areas summed over the parts of the duty, the saturation that the control of the clean unit moves, and the time until
the duty is lost. A flow that the control moves and the cleaning interval are found once, for the record alone.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np

from calcbook.chain.along import OF_PARTS
from calcbook.chain.analysis import DUTY_LOST, OF_DUTY_LOST, keeps_what_is_found_later, limit_at
from calcbook.chain.figures import ResultFigures
from calcbook.chain.outcome import CaseOutcome, Solved
from calcbook.chain.rating_outcome import FLOW, OF_DAY_ONE, PRESSURE, PRESSURE_RESULT, TEMPERATURE_RESULT
from calcbook.chain.solve import Solution
from calcbook.chain.types import SERVICE, Chain
from calcbook.library import vocabulary
from calcbook.rating.duty_lost import times_until_lost
from calcbook.rating.opened import holds_of_case, open_chain
from calcbook.rating.parts import parts_at_samples
from calcbook.rating.saturation_way import Way
from calcbook.rating.turning_down import throttle_of

Array = np.ndarray
# The time until the duty is lost is looked for so far beyond what is asked of it.
BEYOND = 2.0


def names_at_samples(solved: Solved) -> frozenset[str]:
    """The results found from a solved calculation that can be found at samples of it too."""
    chain = solved.chain
    if chain.calculation.duty is None or "duty" not in chain.results:
        return frozenset()
    parts = OF_PARTS if chain.calculation.duty.parts > 1 else ()
    lost = (DUTY_LOST,) if finds_duty_lost(chain) else ()
    return frozenset((*parts, *_moved(chain), *lost))


def finds_duty_lost(chain: Chain) -> bool:
    """Whether samples show when the duty is lost: a growth is followed over time, and no criterion asks for an early
    loss."""
    asked = (item for item in chain.calculation.acceptance if item.result == DUTY_LOST)
    follows = "until" in chain.in_service and "area margin" in chain.results and bool(chain.growing)
    return follows and all(item.direction > 0.0 for item in asked)


def _moved(chain: Chain) -> tuple[str, ...]:
    """The names of what the control moves where that is a saturation, and nothing of its way was found for a case."""
    what = throttle_of(chain).what
    if what == FLOW or holds_of_case(chain):
        return ()
    return (PRESSURE_RESULT, TEMPERATURE_RESULT) if what == PRESSURE else (TEMPERATURE_RESULT,)


class AtSamples:
    """What is ``asked`` of a solved calculation, at samples that are given with their solutions."""

    def __init__(self, solved: Solved, asked: Iterable[str]):
        self.chain: Chain = solved.chain
        self.base: CaseOutcome = solved.base
        self.names = names_at_samples(solved) & frozenset(asked)
        named = ("", *self.chain.calculation.cases)
        # Places of the cases whose time until the duty is lost is that of the base case.
        self.with_times = [
            place for place, name in enumerate(named) if keeps_what_is_found_later(self.chain, name)
        ]

    def __call__(
        self, inputs: Mapping[str, Array], solutions: Mapping[str, Solution], case_of: Array
    ) -> dict[str, ResultFigures]:
        """Every result at every sample, NaN where there is none; of parts in the base case (place 0) alone.

        ``inputs`` leave nothing open. A time until the duty is lost is infinite where it is carried to the end.
        """
        found: dict[str, ResultFigures] = {}
        service = solutions[SERVICE]
        if self.names & set(OF_PARTS):
            for name, values, kind, title in parts_at_samples(self.chain, inputs, service):
                found[name] = ResultFigures(np.where(case_of == 0, values, np.nan), kind, title)
        if self.names & set(OF_DAY_ONE):
            found |= self._control(inputs, service)
        if DUTY_LOST in self.names:
            times = self._until_lost(inputs, service)
            judged = np.isin(case_of, self.with_times)
            quantity, title = OF_DUTY_LOST
            found[DUTY_LOST] = ResultFigures(np.where(judged, times, np.nan), vocabulary()[quantity], title)
        return {name: figures for name, figures in found.items() if name in self.names}

    def _until_lost(self, inputs: Mapping[str, Array], service: Solution) -> Array:
        """Looked for beyond what any criterion asks for, and to the end of the table at least."""
        given = {name: value for name, value in inputs.items() if name in self.chain.inputs}
        kind = vocabulary()[OF_DUTY_LOST[0]]
        limits = (
            limit_at(self.chain, item, kind, service)
            for item in self.chain.calculation.acceptance
            if item.result == DUTY_LOST
        )
        asked = [BEYOND * np.broadcast_to(limit, service.converged.shape) for limit in limits]
        until = np.max([service.row(self.chain.in_service["until"]), *asked], axis=0)
        return times_until_lost(self.chain, given, until)

    def _control(self, inputs: Mapping[str, Array], service: Solution) -> dict[str, ResultFigures]:
        throttle, opened = throttle_of(self.chain), open_chain(self.chain, self.base)
        assert opened is not None, "the calculation itself was built from the same file"
        given = {name: value for name, value in inputs.items() if name in self.chain.inputs}
        way = Way.of(opened, throttle, given, service)
        places, everyone = way.found().places, np.arange(service.converged.size)
        values = {TEMPERATURE_RESULT: way.stated + places * way.length}
        if throttle.what == PRESSURE:
            (values[PRESSURE_RESULT],) = way.at(places, everyone).values()
        return {
            name: ResultFigures(figures, vocabulary()[OF_DAY_ONE[name][0]], OF_DAY_ONE[name][1])
            for name, figures in values.items()
        }
