"""The resistances in series: from each term's own area to the basis area, to U on every surface."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from calcbook.chain.latent import PHASE_CHANGE, changed_part
from calcbook.chain.scope import Scope
from calcbook.chain.surfaces import Shape
from calcbook.chain.types import Branch, ChainStep, Element, Group, Layer, StreamState
from calcbook.formulas import parse_expression
from calcbook.library import vocabulary


class Circuit:
    """Lays out the circuit steps of one chain."""

    def __init__(
        self,
        scope: Scope,
        elements: tuple[Element, ...],
        shape: Shape,
        basis: int,
        streams: Mapping[str, StreamState],
        speeds: Mapping[str, dict[str, str]],
    ):
        self.streams = dict(streams)
        self.speeds = speeds
        self.scope = scope
        self.elements = elements
        self.shape = shape
        self.basis = basis
        self.before = set(scope.steps)
        self.results: dict[str, str] = {}

    @property
    def basis_mark(self) -> str:
        return self._mark(self.basis)

    def _mark(self, surface: int) -> str:
        return self.shape.mark(surface)

    def lay_out(self) -> tuple[tuple[ChainStep, ...], dict[str, str]]:
        """The steps in order, and result names with the ids that hold them."""
        referred = [self._referred(number, element) for number, element in enumerate(self.elements, 1)]
        symbols = {f"R_{number}": name for number, name in enumerate(referred, 1)}
        total = self._step(
            "R",
            "R_tot",
            f"total resistance on {self._basis_name}",
            " + ".join(symbols),
            symbols,
            "terms in series",
            "area resistance",
        )
        coefficient = self._step(
            "U",
            f"U_{self.basis_mark}",
            f"overall coefficient on {self._basis_name}",
            "1/R_tot",
            {"R_tot": total},
            "terms in series",
            "overall coefficient",
        )
        self.results |= {"U": coefficient, "R total": total}
        area = self.shape.surfaces[self.basis].area
        for index, surface in enumerate(self.shape.surfaces):
            name = coefficient
            if index != self.basis and surface.area != area:
                name = self._step(
                    f"U on {surface.name}",
                    f"U_{self._mark(index)}",
                    f"overall coefficient on {surface.name}",
                    f"U_{self.basis_mark}*A_{self.basis_mark}/A_{self._mark(index)}",
                    {
                        f"U_{self.basis_mark}": coefficient,
                        f"A_{self.basis_mark}": area,
                        f"A_{self._mark(index)}": surface.area,
                    },
                    "areas",
                    "overall coefficient",
                )
            self.results[f"U on {surface.name}"] = name
        if self.shape.finned_side:
            bare = self.shape.surfaces[self.shape.bare(self.shape.finned_side)]
            self.results["U on bare"] = self.results[f"U on {bare.name}"]
        self.results["UA"] = self._step(
            "UA",
            "UA",
            "conductance",
            f"U_{self.basis_mark}*A_{self.basis_mark}",
            {f"U_{self.basis_mark}": coefficient, f"A_{self.basis_mark}": area},
            "circuit",
            "conductance",
        )
        self._heat_flow(coefficient)
        self._root_temperatures()
        steps = tuple(step for name, step in self.scope.steps.items() if name not in self.before)
        return steps, self.results

    def _heat_flow(self, coefficient: str) -> None:
        first, last = self.elements[0], self.elements[-1]
        assert isinstance(first, Group) and isinstance(last, Group)
        if not first.bulk or not last.bulk:
            return
        mark = self.basis_mark
        flux = self._step(
            "q",
            f"q_{mark}",
            f"heat flux on {self._basis_name}",
            f"U_{mark}*(T_in - T_out)",
            {f"U_{mark}": coefficient, "T_in": first.bulk, "T_out": last.bulk},
            "circuit",
            "heat flux",
        )
        self.results["heat flux"] = flux
        self.results["heat flow"] = self._step(
            "Q",
            "Q",
            f"heat flow{'' if self.scope.calculation.duty is None else ' at the mean temperatures'},"
            " inside to outside",
            f"q_{mark}*A_{mark}",
            {f"q_{mark}": flux, f"A_{mark}": self.shape.surfaces[self.basis].area},
            "circuit",
            "heat flow",
        )

        if self.scope.calculation.duty is None:
            self._implied_changes()

    def _implied_changes(self) -> None:
        """What the heat flow does to each stream whose mass flow is known: dT = Q/(m·cp), or to a saturated one the
        part of it that changes phase, Q/(m·h_fg).

        It stands beside the stated mean temperature, which it must not contradict, and beside the stated flow.
        """
        for name, inputs in self.speeds.items():
            if inputs:
                flow = self._step(
                    f"m {name}",
                    "m",
                    f"mass flow of {name} at its speed",
                    "v*rho*A_c",
                    inputs,
                    "speed and flow area",
                    "mass flow",
                )
                self.streams[name] = replace(self.streams[name], mass_flow=flow)
        for group in (self.elements[0], self.elements[-1]):
            assert isinstance(group, Group)
            for branch in group.branches:
                stream = self.streams.get(branch.stream)
                if stream is None or not stream.mass_flow:
                    continue
                if _changes_phase(stream, branch):
                    self.results[f"{PHASE_CHANGE} {branch.stream}"] = changed_part(
                        self.scope, stream, self.results["heat flow"], "circuit"
                    )
                    continue
                if branch.kind != "film":
                    continue
                capacity = self.scope.step(
                    f"circuit/cp {branch.stream}",
                    "cp",
                    f"heat capacity of {branch.stream}",
                    "circuit",
                    stream.operation("heat capacity"),
                    stream.state_inputs(stream.temperature),
                    stream.fluid_name,
                    vocabulary()["heat capacity"],
                )
                self.results[f"dT {branch.stream}"] = self._step(
                    f"dT {branch.stream}",
                    "dT",
                    f"temperature change of {branch.stream} that Q implies",
                    "abs(Q)/(m*cp)",
                    {"Q": self.results["heat flow"], "m": stream.mass_flow, "cp": capacity},
                    "heat balance of the stream",
                    "temperature difference",
                )

    def _root_temperatures(self) -> None:
        """Where a film has fins, its surface temperature at their root: there it lies furthest from the bulk."""
        for fins in self.elements:
            if not isinstance(fins, Layer) or not fins.film:
                continue
            group = next(element for element in self.elements if element.name == fins.film)
            assert isinstance(group, Group)
            if self.results.get("heat flux"):
                self.results[f"T root {group.name}"] = self._step(
                    f"T root {group.name}",
                    "T_r",
                    f"surface temperature of {group.name} at the root of the fins",
                    "T_b + (T_s - T_b)/eta_o",
                    {"T_b": group.bulk, "T_s": group.surface_temperature, "eta_o": fins.efficiency},
                    "fins",
                    "temperature",
                )

    @property
    def _basis_name(self) -> str:
        return self.shape.surfaces[self.basis].name

    def _referred(self, number: int, element: Element) -> str:
        """The id of an element's resistance on the basis area."""
        own = self._own(element)
        surface = self.shape.surfaces[element.surface]
        basis = self.shape.surfaces[self.basis]
        if surface.area == basis.area:
            text, inputs = "R", {"R": own}
        else:
            text = f"R*A_{self.basis_mark}/A_{self._mark(element.surface)}"
            inputs = {
                "R": own,
                f"A_{self.basis_mark}": basis.area,
                f"A_{self._mark(element.surface)}": surface.area,
            }
        name = self._step(
            f"R {element.name}",
            f"R_{number}",
            f"{element.name} on {self._basis_name}",
            text,
            inputs,
            "areas",
            "area resistance",
        )
        self.results[f"R {element.name}"] = name
        return name

    def _own(self, element: Element) -> str:
        """The id of an element's resistance on the area it acts on."""
        if isinstance(element, Layer):
            return element.resistance
        coefficient = self._group_coefficient(element)
        self.results[f"h {element.name}"] = coefficient
        return self._step(
            f"R own {element.name}",
            "R",
            f"{element.name} on its own area",
            "1/h",
            {"h": coefficient},
            "film coefficient",
            "area resistance",
        )

    def _group_coefficient(self, group: Group) -> str:
        """The id of the coefficient of everything side by side, for the surface-to-fluid difference."""
        parts = {}
        for index, branch in enumerate(group.branches, 1):
            held = branch_coefficient(group, branch.name)
            self.scope.dimensions[held] = self.scope.dimensions[branch.candidates[0].coefficient]
            if branch.reference == group.bulk:
                parts[f"h_{index}"] = held
                continue
            parts[f"h_{index}"] = self._step(
                f"h {branch.name}",
                f"h_{index}",
                f"{branch.name}, for the surface-to-fluid difference",
                "h*(T_s - T_sur)/(T_s - T_b)",
                {"h": held, "T_s": group.surface_temperature, "T_sur": branch.reference, "T_b": group.bulk},
                "same heat flow",
                "film coefficient",
            )
        if len(parts) == 1:
            return next(iter(parts.values()))
        return self._step(
            f"h {group.name}",
            "h",
            f"{group.name}, side by side",
            " + ".join(parts),
            parts,
            "branches side by side",
            "film coefficient",
        )

    def _step(
        self, key: str, symbol: str, title: str, text: str, inputs: dict[str, str], basis: str, kind: str
    ) -> str:
        return self.scope.relation_step(
            f"circuit/{key}", symbol, title, "circuit", parse_expression(text), inputs, basis, kind
        )


def _changes_phase(stream: StreamState, branch: Branch) -> bool:
    """Whether heat changes the phase of a stream, and not its temperature.

    A stream without a pressure stands on its saturation line only because nothing else is known of it: there the
    situation says what it does.
    """
    in_situation = branch.situation is not None and bool(branch.situation.changes_phase)
    return stream.is_saturated and (in_situation or bool(stream.pressure))


def branch_coefficient(group: Group, branch: str) -> str:
    """The id under which a branch's film coefficient stands, whichever method gave it."""
    return f"{group.name}/h of {branch}"
