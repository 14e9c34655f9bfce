"""What a calculation means: ordered steps with everything resolved. Nothing here looks at YAML."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any, NamedTuple

import numpy as np

from calcbook.calcfile import Calculation
from calcbook.chain.fluids import FluidSource, PropertyOperation
from calcbook.faults import Place
from calcbook.formulas import Relation
from calcbook.library import Library
from calcbook.library.cards import Limit, Method, Situation
from calcbook.library.operations import Operation
from calcbook.library.programs import Counting
from calcbook.quantities import QuantityKind

Array = np.ndarray
CLEAN, SERVICE = "clean", "service"
CONDITIONS = (CLEAN, SERVICE)
# How the constant of a figure ends that is taken for want of a stated one.
ABSENT = " absent"
# How the step ends that gives the absolute pressure of a gauge one.
ABOVE_SITE = "/absolute"
# The figure that is 1 in service and 0 clean: it narrows a bore by a deposit.
SERVICE_FLAG = "condition/service"


@dataclass(frozen=True, slots=True)
class Input:
    """One figure that a calculation starts from: a given, or a literal in the file."""

    id: str
    symbol: str
    title: str
    kind: QuantityKind
    value: float
    text: str
    source: str
    place: Place
    is_given: bool


@dataclass(frozen=True, slots=True)
class ChainStep:
    """One row of the chain: quantity, operation with bound inputs, and where it comes from.

    ``owner`` is the term, stream or `circuit` that the row belongs to; ``basis`` names the card,
    property provider or rule that it rests on.
    """

    id: str
    symbol: str
    title: str
    kind: QuantityKind | None
    owner: str
    operation: Operation
    inputs: Mapping[str, str]
    basis: str

    @property
    def name(self) -> str:
        return self.id


class Surface(NamedTuple):
    """A surface of the wall, from the inside to the outside. ``diameter`` is empty for a plane.

    Where a film acts on fins, the total finned surface stands last, also without a diameter.
    """

    name: str
    area: str
    diameter: str


@dataclass(frozen=True, slots=True)
class ChainCheck:
    """One limit to be evaluated: its id, the relation with bound inputs, and where it comes from."""

    id: str
    owner: str
    card: str
    limit: Limit
    inputs: Mapping[str, str]
    counts_when: tuple[Counting, ...] = ()


@dataclass(frozen=True, slots=True)
class Candidate:
    """One method of a film, laid out: its steps in order, the film coefficient, and its checks."""

    method: Method
    steps: tuple[ChainStep, ...]
    coefficient: str
    checks: tuple[ChainCheck, ...]
    because: str
    needs_direction: bool
    cards: tuple[Method, ...]


class ChoiceRow(NamedTuple):
    """One row of a choice table, bound; the last has no condition."""

    relation: Relation | None
    inputs: Mapping[str, str]
    candidate: int
    because: str


@dataclass(frozen=True, slots=True)
class PressureDrop:
    """How a film's stream loses pressure: friction laws, the choice between them, and the sum that gives dp.

    ``factor`` is the id under which the chosen friction factor stands; it and ``laws`` are empty where the
    card of the sum has its own law. The coefficient of a law is its friction factor, that of ``total`` is dp.
    """

    factor: str
    laws: tuple[Candidate, ...]
    choice: tuple[ChoiceRow, ...]
    choice_steps: tuple[ChainStep, ...]
    total: Candidate

    @property
    def steps(self) -> tuple[ChainStep, ...]:
        """Every step of every law, in order."""
        return (*self.choice_steps, *(step for part in (*self.laws, self.total) for step in part.steps))


@dataclass(frozen=True, slots=True)
class Branch:
    """One way for heat between a surface and a temperature: a film, a stated coefficient, radiation.

    ``reference`` is the id of that temperature. A film holds its candidates and the choice between
    them; ``choice_steps`` are the figures that the choice is made on. ``alternatives`` are the other methods
    of the situation for the cross-check; ``unusable`` are those that lack a figure, with the reason.
    ``no_pressure_drop`` says why a forced film gives none.
    """

    name: str
    kind: str
    reference: str
    candidates: tuple[Candidate, ...]
    choice_steps: tuple[ChainStep, ...] = ()
    choice: tuple[ChoiceRow, ...] = ()
    situation: Situation | None = None
    stream: str = ""
    is_forced: bool = False
    alternatives: tuple[Candidate, ...] = ()
    unusable: Mapping[str, str] = field(default_factory=dict)
    pressure_drop: PressureDrop | None = None
    no_pressure_drop: str = ""


@dataclass(frozen=True, slots=True)
class Group:
    """Everything that carries heat side by side between one fluid and the surface it touches."""

    name: str
    side: str
    surface: int
    bulk: str
    branches: tuple[Branch, ...]

    @property
    def surface_temperature(self) -> str:
        return f"{self.name}/T_s"

    @property
    def flux(self) -> str:
        return f"{self.name}/q"


@dataclass(frozen=True, slots=True)
class Gap:
    """A fluid shut in between two walls: the fluid, the ways for heat across it, and their coefficients.

    ``ways`` refer to the outer side; ``coefficients`` are the ids of their film coefficients in the same order.
    The temperature of the fluid is the mean of both sides.
    """

    fluid: StreamState
    ways: tuple[Branch, ...]
    coefficients: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Layer:
    """A resistance in series: fouling, contact, stated, fins, gap, or a wall between two surfaces.

    ``resistance`` is the id of its area resistance on ``surface``; a wall whose conductivity follows
    its temperatures has ``steps`` that make it from T_1 and T_2, and so has a ``gap``. Fins have steps that make
    it from the coefficient of the group named by ``film``, and the id of their surface ``efficiency``.
    """

    name: str
    kind: str
    surface: int
    resistance: str
    steps: tuple[ChainStep, ...] = ()
    first_temperature: str = ""
    second_temperature: str = ""
    material: str = ""
    checks: tuple[ChainCheck, ...] = ()
    film: str = ""
    efficiency: str = ""
    gap: Gap | None = None


Element = Group | Layer


@dataclass(frozen=True, slots=True)
class RunnerAssumption:
    """Something the runner decided by itself: stable id, the sentence, what decided it, where it acts."""

    id: str
    text: str
    decided_by: str
    acts_on: str


# The last part of the id of an open item on a reason in the revision history that is to be written.
REASON = "reason"


@dataclass(frozen=True, slots=True)
class OpenItem:
    """What blocks issue. Kinds: check, source, assumption, state, jump, link, revision."""

    id: str
    kind: str
    text: str


@dataclass(frozen=True, slots=True)
class StreamState:
    """A stream with the ids of its state and flow, and the fluid that gives its properties.

    Ids are empty where the file gives nothing. ``flow_kind`` is mass flow, volume flow, speed or empty;
    ``saturation`` is the saturation temperature of a stream that stands on its saturation line.
    """

    name: str
    fluid: FluidSource
    fluid_name: str
    phase: str
    temperature: str
    pressure: str
    fraction: str
    flow: str
    flow_kind: str
    mass_flow: str
    place: Place
    saturation: str = ""
    non_condensable: str = ""

    @property
    def is_saturated(self) -> bool:
        """Whether the stream stands on its saturation line: heat then changes its phase, not its temperature."""
        return bool(self.saturation)

    def operation(self, name: str, keeps_phase: bool = False) -> PropertyOperation:
        """The operation that gives a property of this stream, at the bulk or (``keeps_phase``) elsewhere."""
        return PropertyOperation(
            self.fluid, name, self.phase, bool(self.pressure), bool(self.fraction), keeps_phase
        )

    def state_inputs(self, temperature: str) -> dict[str, str]:
        """The inputs of a property operation at a temperature."""
        inputs = {"T": temperature}
        if self.pressure:
            inputs["p"] = self.pressure
        if self.fraction:
            inputs["w"] = self.fraction
        return inputs


@dataclass(frozen=True, slots=True)
class Growing:
    """A fouling term that grows in service: its card, and the ids of its time in service, of the resistance, and
    of the card's needs by symbol."""

    name: str
    model: str
    time: str
    fouling: str
    needs: Mapping[str, str]


@dataclass(frozen=True, slots=True)
class OpenFigure:
    """A figure that the file leaves open: its id, the step that gives it, and the condition it belongs to.

    It is looked for from ``near`` towards ``far``, two ids of figures that stand before the circuit is closed.
    """

    id: str
    found: str
    condition: str
    near: str
    far: str


@dataclass(frozen=True)
class Chain:
    """A calculation ready to be solved."""

    calculation: Calculation
    library: Library
    inputs: Mapping[str, Input]
    steps: tuple[ChainStep, ...]
    elements: tuple[Element, ...]
    surfaces: tuple[Surface, ...]
    basis: int
    circuit: tuple[ChainStep, ...]
    streams: Mapping[str, StreamState]
    checks: tuple[ChainCheck, ...]
    assumptions: tuple[RunnerAssumption, ...]
    open_items: tuple[OpenItem, ...]
    used_in: Mapping[str, tuple[str, ...]]
    cards: Mapping[str, str]
    results: Mapping[str, str]
    constants: Mapping[str, object]
    dimensions: Mapping[str, tuple]
    per_metre: bool = False
    restated: Mapping[str, Mapping[str, float]] = field(default_factory=dict)
    open_figures: tuple[OpenFigure, ...] = ()
    growing: tuple[Growing, ...] = ()
    in_service: Mapping[str, str] = field(default_factory=dict)
    derived_kinds: Mapping[str, QuantityKind] = field(default_factory=dict)

    @cached_property
    def memory(self) -> dict[object, Any]:
        """What others worked out from this chain's structure alone, so that each is worked out once."""
        return {}

    @property
    def inner(self) -> Group:
        first = self.elements[0]
        assert isinstance(first, Group)
        return first

    @property
    def outer(self) -> Group:
        last = self.elements[-1]
        assert isinstance(last, Group)
        return last

    @property
    def known_surfaces(self) -> tuple[str, ...]:
        """The sides whose wetted surface has a temperature: what a stated film includes stands before its surface."""
        terms = self.calculation.resistances
        sides = {"inside": terms[0], "outside": terms[-1]}
        return tuple(side for side, term in sides.items() if not term.includes)

    @property
    def branches(self) -> tuple[Branch, ...]:
        """Every film and way across a gap, from the inside to the outside."""
        return tuple(branch for element in self.elements for branch in branches_of(element))

    @property
    def has_temperatures(self) -> bool:
        """Whether both bulk temperatures are known, so that heat flow and surfaces can be found."""
        return bool(self.inner.bulk and self.outer.bulk)

    @property
    def fluids(self) -> dict[str, StreamState]:
        """Every fluid with its state: the streams by name, and the fluids of gaps by the name of the term."""
        enclosed = {
            layer.name: layer.gap.fluid
            for layer in self.elements
            if isinstance(layer, Layer) and layer.gap is not None
        }
        return {
            **self.streams,
            **{name: fluid for name, fluid in enclosed.items() if name not in self.streams},
        }

    def case_inputs(self, case: str) -> dict[str, Array]:
        """The figures of a case (the empty name is the base case) by input id."""
        values = {name: np.asarray(item.value) for name, item in self.inputs.items()}
        for symbol, item in self.case_changes(case).items():
            values[f"given/{symbol}"] = np.asarray(item)
        return values

    def case_changes(self, case: str) -> dict[str, float]:
        """SI values of the givens that a case restates."""
        return dict(self.restated.get(case, {}))


def branches_of(element: Element) -> tuple[Branch, ...]:
    """The films of a group, or the ways across the gap of a layer."""
    if isinstance(element, Group):
        return element.branches
    return element.gap.ways if element.gap is not None else ()


def follows_temperature(element: Element, forced: Mapping[str, Candidate] | None = None) -> bool:
    """Whether an element's resistance depends on its own temperatures or flux.

    ``forced`` holds candidates that stand in place of a film's own. Fins follow their film besides.
    """
    if isinstance(element, Layer):
        return bool(element.first_temperature)
    if any(branch.reference != element.bulk for branch in element.branches):
        return True
    moving = {element.surface_temperature, element.flux}
    chosen_by = (row for branch in element.branches for row in branch.choice)
    if any(bound in moving for row in chosen_by for bound in row.inputs.values()):
        return True
    return any(
        bound in moving
        for branch in element.branches
        for candidate in ((forced[branch.name],) if forced and branch.name in forced else branch.candidates)
        for step in (*candidate.steps, *branch.choice_steps)
        for bound in step.inputs.values()
    )


def following_elements(chain: Chain, forced: Mapping[str, Candidate] | None = None) -> list[str]:
    """The names of the elements whose resistance follows their temperatures; ``forced`` as there."""
    return [element.name for element in chain.elements if follows_temperature(element, forced)]


__all__ = [
    "CLEAN",
    "CONDITIONS",
    "SERVICE",
    "SERVICE_FLAG",
    "Branch",
    "Candidate",
    "Chain",
    "ChainCheck",
    "ChainStep",
    "ChoiceRow",
    "Element",
    "Gap",
    "Group",
    "Growing",
    "Input",
    "Layer",
    "OpenFigure",
    "OpenItem",
    "PressureDrop",
    "RunnerAssumption",
    "StreamState",
    "Surface",
    "following_elements",
    "follows_temperature",
]
