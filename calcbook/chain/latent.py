"""The heat of a saturated stream: the part of its flow that changes phase, and the flow that a heat needs."""

from __future__ import annotations

from calcbook.chain.fluids import PropertyOperation
from calcbook.chain.scope import Scope
from calcbook.chain.types import StreamState
from calcbook.formulas import parse_expression
from calcbook.library import vocabulary

PHASE_CHANGE = "phase_change"
WHOLE_FLOW, SOME_FLOW = "x_pc <= 1", "m > 0"
BECAUSE = (
    "a saturated stream gives or takes no more heat than its whole flow does from one side of saturation to the other;"
    " beyond it part of the unit is without it"
)
NO_FLOW = "a stream without flow carries no heat"


def changed_part(scope: Scope, stream: StreamState, heat: str, owner: str) -> str:
    """The id of the part of a stream's mass flow that changes phase at a heat flow: |Q|/(m·h_fg)."""
    return scope.relation_step(
        f"{owner}/phase change {stream.name}",
        "x_pc",
        f"part of the flow of {stream.name} that changes phase",
        owner,
        parse_expression("abs(Q)/(m*h_fg)"),
        {"Q": heat, "m": stream.mass_flow, "h_fg": _latent_heat(scope, stream, owner)},
        "heat balance of the stream",
        "ratio",
    )


def flow_needed(scope: Scope, stream: StreamState, heat: str, owner: str) -> str:
    """The id of the mass flow that gives or takes a heat flow when all of it changes phase."""
    return scope.relation_step(
        f"{owner}/flow needed of {stream.name}",
        "m_pc",
        f"flow of {stream.name} that changes phase",
        owner,
        parse_expression("abs(Q)/h_fg"),
        {"Q": heat, "h_fg": _latent_heat(scope, stream, owner)},
        "heat balance of the stream",
        "mass flow",
    )


def _latent_heat(scope: Scope, stream: StreamState, owner: str) -> str:
    return scope.step(
        f"{owner}/latent heat {stream.name}",
        "h_fg",
        f"latent heat of {stream.name}",
        owner,
        PropertyOperation(stream.fluid, "latent heat", "liquid", False, False),
        {"T": stream.saturation},
        stream.fluid_name,
        vocabulary()["latent heat"],
    )
