"""The working of a solved case: the rows of every term with their notes, the properties of streams by place."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping

import numpy as np

from calcbook.chain.duty import OWNER as DUTY
from calcbook.chain.duty import is_of_duty
from calcbook.chain.films import SATURATED_SIDES
from calcbook.chain.gaps import PLACE, gaps, unused_steps
from calcbook.chain.outcome import PropertyRow, StepRow, TermChain
from calcbook.chain.pressure import drops, law_of, pressure_notes
from calcbook.chain.solve import Solution, chosen
from calcbook.chain.types import (
    CLEAN,
    CONDITIONS,
    SERVICE,
    Branch,
    Candidate,
    Chain,
    ChainStep,
    Group,
    Layer,
    StreamState,
)
from calcbook.library.cards import FILM_RESULTS, Method
from calcbook.properties import SATURATION_FRACTION


class Working:
    """The rows of one case from its solutions clean and in service; ``used_cards`` are those of the methods that act."""

    def __init__(self, chain: Chain, solutions: Mapping[str, Solution]):
        self.chain = chain
        self.solutions = solutions
        self.used_cards: dict[str, str] = {}

    def circuit(self) -> tuple[StepRow, ...]:
        """The rows of the circuit, after those of the terms."""
        return self._rows(self.chain.circuit)

    def _rows(self, steps: tuple[ChainStep, ...]) -> tuple[StepRow, ...]:
        return tuple(
            StepRow(step, _value(self.solutions[CLEAN], step.id), _value(self.solutions[SERVICE], step.id))
            for step in steps
        )

    def chains(self) -> tuple[TermChain, ...]:
        """The rows of every term, each step once, at the term that uses it first."""
        owners = {name for element in self.chain.elements for name in _names(element)}
        duty = tuple(step for step in self.chain.steps if is_of_duty(step))
        shared = tuple(step for step in self.chain.steps if step.owner not in owners and step not in duty)
        chains = []
        if shared:
            chains.append(
                TermChain(
                    "shared figures",
                    "geometry, streams and derived quantities",
                    self._rows(shared),
                    (),
                )
            )
        if duty:
            chains.append(TermChain(DUTY, "heat balance of both streams", self._rows(duty), ()))
        seen = {step.id for step in (*shared, *duty)}
        for element in self.chain.elements:
            steps = [step for step in self.chain.steps if step.owner in _names(element)]
            notes: list[str] = []
            if isinstance(element, Layer):
                steps += self._layer_steps(element)
                for way in element.gap.ways if element.gap is not None else ():
                    notes += _branch_notes(way, self.solutions)
            else:
                for branch in element.branches:
                    steps += self._branch_steps(branch)
                    notes += _branch_notes(branch, self.solutions)
                steps += self._pressure_steps(element)
                notes += pressure_notes(self.chain, element, self.solutions)
            fresh = tuple({step.id: step for step in steps if step.id not in seen}.values())
            seen |= {step.id for step in fresh}
            chains.append(TermChain(element.name, _title(element), self._rows(fresh), tuple(notes)))
        return tuple(chains)

    def _layer_steps(self, layer: Layer) -> list[ChainStep]:
        """The steps of a layer; of a gap without those of methods that are not used."""
        if layer.gap is None:
            return list(layer.steps)
        used = [chosen(way, self.solutions[condition]) for way in layer.gap.ways for condition in CONDITIONS]
        for candidate in used:
            self._use(candidate.cards)
        unused = unused_steps(layer.gap, used)
        return [step for step in layer.steps if step.id not in unused]

    def _branch_steps(self, branch: Branch) -> list[ChainStep]:
        steps = list(branch.choice_steps)
        for condition in CONDITIONS:
            candidate = chosen(branch, self.solutions[condition])
            steps += candidate.steps
            self._use(candidate.cards)
        return steps

    def _pressure_steps(self, element: Group) -> list[ChainStep]:
        """The steps of the pressure drops beside the films of a group, in both conditions."""
        steps: list[ChainStep] = []
        for group, _, drop in drops(self.chain):
            if group is not element:
                continue
            steps += drop.choice_steps
            for part in (*(law_of(drop, self.solutions[condition]) for condition in CONDITIONS), drop.total):
                if part is not None:
                    steps += part.steps
                    self._use(part.cards)
        return steps

    def _use(self, cards: Iterable[Method]) -> None:
        self.used_cards |= {f"method {card.id}": card.digest_text for card in cards}

    def properties(self) -> tuple[PropertyRow, ...]:
        """Properties of streams by place, as far as the chain asked for them."""
        rows = []
        for state in self.chain.streams.values():
            bulk = self._property_row(
                state, "bulk", "", f"stream {state.name}", state.temperature, self.solutions[SERVICE]
            )
            if bulk is not None:
                rows.append(bulk)
            rows += self._saturated_rows(state)
            for group in (self.chain.inner, self.chain.outer):
                for branch in group.branches:
                    if branch.stream != state.name:
                        continue
                    for place, temperature in (
                        ("film", f"{branch.name}/film/T"),
                        ("surface", group.surface_temperature),
                    ):
                        for condition in CONDITIONS:
                            row = self._property_row(
                                state,
                                place,
                                condition,
                                f"{branch.name}/{place}",
                                temperature,
                                self.solutions[condition],
                            )
                            if row is not None:
                                rows.append(row)
        for layer, gap in gaps(self.chain):
            for condition in CONDITIONS:
                row = self._property_row(
                    gap.fluid,
                    PLACE,
                    condition,
                    f"{layer.name}/{PLACE}",
                    gap.fluid.temperature,
                    self.solutions[condition],
                )
                if row is not None:
                    rows.append(row)
        return tuple(rows)

    def _saturated_rows(self, state: StreamState) -> list[PropertyRow]:
        """Properties on the saturation line of a stream that changes phase."""
        rows = []
        for group in (self.chain.inner, self.chain.outer):
            for branch in group.branches:
                if branch.stream != state.name or not state.saturation:
                    continue
                for place, phase in SATURATED_SIDES.items():
                    moves = place == "liquid film"
                    at = f"{branch.name}/liquid film/T" if moves else state.saturation
                    for condition in CONDITIONS if moves else ("",):
                        row = self._property_row(
                            state,
                            place,
                            condition,
                            f"{branch.name}/{place}",
                            at,
                            self.solutions[condition or SERVICE],
                        )
                        if row is not None:
                            rows.append(row._replace(phase=phase, pressure=math.nan))
        return rows

    def _property_row(
        self,
        state: StreamState,
        place: str,
        condition: str,
        prefix: str,
        temperature: str,
        solution: Solution,
    ) -> PropertyRow | None:
        names = (
            "density",
            "viscosity",
            "conductivity",
            "heat capacity",
            "expansion coefficient",
            SATURATION_FRACTION,
        )
        used = {
            name: solution.number(f"{prefix}/{name}")
            for name in names
            if f"{prefix}/{name}" in solution.values
        }
        if not used or temperature not in solution.values:
            return None
        if all(name in used for name in names[1:4]):
            used["Prandtl number"] = used["viscosity"] * used["heat capacity"] / used["conductivity"]
        pressure = solution.number(state.pressure) if state.pressure else math.nan
        at = solution.number(temperature)
        bulk = solution.number(state.temperature)
        fraction = solution.number(state.fraction) if state.fraction else None
        fluid = state.fluid.state(None if math.isnan(pressure) else pressure, fraction, state.phase)
        phase = state.phase or fluid.phase_at(bulk)
        return PropertyRow(state.name, place, condition, at, pressure, phase, used, state.fluid_name)


def _names(element: Group | Layer) -> set[str]:
    """The names under which an element's steps stand."""
    if isinstance(element, Layer):
        return {element.name}
    return {element.name, *(branch.name for branch in element.branches)}


def _value(solution: Solution, name: str) -> float | bool:
    value = solution.values.get(name)
    if value is None:
        return math.nan
    item = np.asarray(value).ravel()[0]
    return bool(item) if isinstance(item, np.bool_) else float(item)


def _title(element: Group | Layer) -> str:
    if isinstance(element, Layer) and element.gap is not None:
        return " beside ".join(
            way.situation.title if way.situation is not None else way.kind for way in element.gap.ways
        )
    if isinstance(element, Layer):
        return element.material or element.kind
    return " beside ".join(
        branch.situation.title if branch.situation is not None else branch.kind for branch in element.branches
    )


def _card_words(candidate: Candidate) -> str:
    return f"{candidate.method.id}, house method" if candidate.method.house else candidate.method.id


def _branch_notes(branch: Branch, solutions: Mapping[str, Solution]) -> list[str]:
    """Which method acts, in one sentence; two where clean and service differ."""
    clean, service = (chosen(branch, solutions[condition]) for condition in CONDITIONS)
    if branch.situation is None:
        return [f"{branch.name}: {service.because}."]
    if clean is service:
        return [
            f"{branch.name}: {service.method.title} ({_card_words(service)}), {service.because}.",
            *_accuracy_words(branch, service),
        ]
    return [
        f"{branch.name}, service: {service.method.title} ({service.method.id}), {service.because}.",
        f"{branch.name}, clean: {clean.method.title} ({clean.method.id}), {clean.because}.",
    ]


def _accuracy_words(branch: Branch, candidate: Candidate) -> list[str]:
    """How good the method is said to be, and by whom."""
    stated = candidate.method.accuracy
    if stated is None:
        used = "; ".join(
            f"{card.id}, which it uses: within {card.accuracy.within}"
            for card in candidate.cards
            if card.accuracy is not None and card.gives in FILM_RESULTS
        )
        return [
            f"{branch.name}: no accuracy of {candidate.method.id} itself is stated{f'; {used}' if used else ''}."
        ]
    return [
        f"{branch.name}: accuracy of {candidate.method.id} within {stated.within}, {stated.coverage}; stated by"
        f" {stated.stated_by} (standing: {stated.standing})."
    ]
