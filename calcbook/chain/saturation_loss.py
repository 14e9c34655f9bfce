"""What a saturated stream loses of its saturation temperature along its way, with the pressure that it loses."""

from __future__ import annotations

from dataclasses import replace

from calcbook.chain.fluids import BoilingOperation
from calcbook.chain.scope import Scope
from calcbook.chain.types import Branch, ChainCheck, Element, Group, StreamState
from calcbook.faults import Place
from calcbook.formulas import parse_expression
from calcbook.library import vocabulary
from calcbook.library.cards import practice_limit

# A twentieth of the driving difference is as much as the ranges of good methods leave open (common practice).
SMALL = "dT_sat <= 0.05*abs(T_b - T_o)"
BECAUSE = (
    "the saturation temperature of the stated pressure stands for the whole way of the stream; with the pressure that it"
    " loses it changes by more than a twentieth of the difference to the other side"
)


def with_saturation_losses(
    scope: Scope, elements: tuple[Element, ...], streams: dict[str, StreamState]
) -> tuple[Element, ...]:
    """The elements of a chain, with a caution beside the pressure drop of every saturated stream."""
    inner, outer = elements[0], elements[-1]
    assert isinstance(inner, Group) and isinstance(outer, Group)
    place = scope.calculation.place
    return (
        _of_group(scope, inner, outer.bulk, streams, place),
        *elements[1:-1],
        _of_group(scope, outer, inner.bulk, streams, place),
    )


def _of_group(scope: Scope, group: Group, other: str, streams: dict[str, StreamState], place: Place) -> Group:
    if other not in scope.dimensions:
        return group
    branches = (_of_branch(scope, branch, other, streams, place) for branch in group.branches)
    return replace(group, branches=tuple(branches))


def _of_branch(
    scope: Scope, branch: Branch, other: str, streams: dict[str, StreamState], place: Place
) -> Branch:
    state, drop = streams.get(branch.stream), branch.pressure_drop
    if state is None or drop is None or not (state.is_saturated and state.pressure):
        return branch
    before = frozenset(scope.steps)
    left = scope.relation_step(
        f"{branch.name}/pressure left",
        "p_out",
        f"pressure of {state.name} at its outlet",
        branch.name,
        parse_expression("p - dp"),
        {"p": state.pressure, "dp": drop.total.coefficient},
        "pressure drop",
        "pressure",
    )
    temperature = scope.step(
        f"{branch.name}/outlet/saturation temperature",
        "T_sat_out",
        f"saturation temperature of {state.name} at its outlet",
        branch.name,
        BoilingOperation(state.fluid),
        {"p": left},
        state.fluid_name,
        vocabulary()["saturation temperature"],
    )
    loss = scope.relation_step(
        f"{branch.name}/saturation loss",
        "dT_sat",
        f"saturation temperature that {state.name} loses with its pressure",
        branch.name,
        parse_expression("abs(T_sat - T_sat_out)"),
        {"T_sat": state.saturation, "T_sat_out": temperature},
        "pressure drop",
        "temperature difference",
    )
    added = tuple(step for name, step in scope.steps.items() if name not in before)
    check = ChainCheck(
        f"{branch.name} / saturation / pressure drop",
        branch.name,
        "saturation",
        practice_limit("pressure drop", SMALL, "caution", BECAUSE, place),
        {"dT_sat": loss, "T_b": branch.reference, "T_o": other},
    )
    total = replace(drop.total, steps=(*drop.total.steps, *added), checks=(*drop.total.checks, check))
    return replace(branch, pressure_drop=replace(drop, total=total))
