"""The calculation of a rated unit with ends of its streams left open: they are found by effectiveness."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from calcbook.calcfile.calculation import DutySide, Value
from calcbook.chain.build import build
from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.specified import SPECIFIED_FIGURES
from calcbook.chain.types import SERVICE, Chain
from calcbook.faults import Collector
from calcbook.quantities import read_any

Array = np.ndarray


def open_chain(chain: Chain, case: CaseOutcome, *sides: str, condition: str = SERVICE) -> Chain | None:
    """The calculation in one part, with the outlets of some sides open and the means of their ends; None where it has a
    fault.

    What is open is found in the ``condition``. An inlet that the file leaves open stays where it was found in the case,
    and so does a fouling that is specified for the whole unit.
    """
    duty = chain.calculation.duty
    assert duty is not None
    with_inlets = {name: _with_inlet(chain, case, name, side) for name, side in duty.sides.items()}
    built = (_opened, sides, case.name if holds_of_case(chain) else "")
    if built not in chain.memory:
        chain.memory[built] = _opened(chain, with_inlets, sides, _specified_fouling(chain, case))
    opened: Chain | None = chain.memory[built]
    if opened is None:
        return None
    if (_found_in, condition) not in opened.memory:
        opened.memory[_found_in, condition] = _found_in(opened, condition)
    found: Chain = opened.memory[_found_in, condition]
    return found


def holds_of_case(chain: Chain) -> bool:
    """Whether an opened calculation holds what was found in one case: an open inlet, a specified fouling."""
    duty = chain.calculation.duty
    assert duty is not None
    has_inlet = any(side.open_end == "inlet" for side in duty.sides.values())
    return has_inlet or chain.calculation.fouling_specified is not None


def _found_in(chain: Chain, condition: str) -> Chain:
    """A chain that finds its open figures in a condition."""
    return replace(
        chain, open_figures=tuple(replace(item, condition=condition) for item in chain.open_figures)
    )


def _specified_fouling(chain: Chain, case: CaseOutcome) -> dict[str, Array]:
    """What was found in a case for a fouling that is specified for the whole unit, by id."""
    return {
        item.id: case.solutions[item.condition].figure(item.id)
        for item in chain.open_figures
        if item.id in SPECIFIED_FIGURES
    }


def _opened(
    before: Chain, with_inlets: Mapping[str, DutySide], sides: Sequence[str], held: Mapping[str, Array]
) -> Chain | None:
    calculation, duty = before.calculation, before.calculation.duty
    assert duty is not None
    opened = dict(with_inlets)
    opened |= {name: replace(opened[name], outlet=None) for name in sides}
    open_streams = {opened[name].stream for name in sides if opened[name].has_ends}
    streams = {
        name: replace(stream, temperature=None) if name in open_streams else stream
        for name, stream in calculation.streams.items()
    }
    kept = [side for name, side in opened.items() if name not in sides]
    changed = replace(
        calculation,
        duty=replace(
            duty,
            hot=opened["hot"],
            cold=opened["cold"],
            parts=1,
            heat_flow=duty.heat_flow if kept and not _has_balance(before, kept) else None,
        ),
        # Its figures are taken from the calculation itself; what it is counted against may be gone here.
        cleaning=None,
        streams=streams,
    )
    collector = Collector()
    chain = build(changed, before.library, collector, cross_check=False)
    if chain is None or collector:
        return None
    open_figures = tuple(item for item in chain.open_figures if item.id not in held)
    if open_streams and not open_figures:
        return None
    return replace(chain, constants={**chain.constants, **held}, open_figures=open_figures)


def _has_balance(chain: Chain, sides: Sequence[DutySide]) -> bool:
    """Whether a side carries a heat of its own between stated ends: that goes before a stated heat flow, with which it
    need not agree."""
    return any(
        side.has_ends and not side.open_end and bool(chain.streams[side.stream].mass_flow) for side in sides
    )


def _with_inlet(chain: Chain, case: CaseOutcome, name: str, side: DutySide) -> DutySide:
    """A side with the inlet that was found for it, where the file states none."""
    if side.open_end != "inlet":
        return side
    found = case.solutions[SERVICE].number(chain.results[f"T {name} inlet"])
    text = f"{found!r} K"
    return replace(
        side, inlet=Value(text, side.place, quantity=read_any(text), source="found", has_source=True)
    )
