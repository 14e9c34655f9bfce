"""Whether the outside of a unit stands in the open, where a hand can reach it."""

from __future__ import annotations

from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.findings import stream_phases
from calcbook.chain.solve import Solution
from calcbook.chain.types import Branch, Chain

# Air, still or in wind, gives less; a liquid, a boiling or a condensing fluid more (common practice), W/(m² K).
MOST_OF_AIR = 100.0


def stands_in_the_open(chain: Chain, solution: Solution) -> bool:
    """Whether radiation, or a gas that no channel holds, acts on the outer surface.

    A stated coefficient without a stream is taken as that of air where it is no larger than air can give.
    """
    return any(_is_open(chain, branch, solution) for branch in chain.outer.branches)


def _is_open(chain: Chain, branch: Branch, solution: Solution) -> bool:
    if branch.kind == "radiation":
        return True
    stream = chain.streams.get(branch.stream)
    if stream is None:
        return solution.number(branch_coefficient(chain.outer, branch.name)) <= MOST_OF_AIR
    if branch.situation is not None and branch.situation.flow_area is not None:
        return False
    return not stream.is_saturated and stream_phases(stream, solution.values)[0][0][0] == "gas"
