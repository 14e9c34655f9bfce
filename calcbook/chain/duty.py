"""The duty laid out: heat balance of both streams, mean difference, required area, effectiveness.

Its steps come in three lots. The means of the ends stand before the streams, the heat balance after them, and
what needs U (areas, margins, the heat that the installed area reaches) after the circuit.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from calcbook.calcfile.calculation import Duty, DutySide, Term, Value
from calcbook.chain.films import FilmScope
from calcbook.chain.latent import (
    BECAUSE,
    NO_FLOW,
    PHASE_CHANGE,
    SOME_FLOW,
    WHOLE_FLOW,
    changed_part,
    flow_needed,
)
from calcbook.chain.scope import Scope
from calcbook.chain.solve import Solution
from calcbook.chain.types import (
    CLEAN,
    SERVICE,
    Chain,
    ChainCheck,
    ChainStep,
    Element,
    Group,
    OpenFigure,
    StreamState,
)
from calcbook.faults import Place, shown
from calcbook.formulas import parse_expression
from calcbook.library import Library, vocabulary
from calcbook.library.cards import Need, practice_limit

Array = np.ndarray
OWNER, AGAIN = "duty", "duty again"
# The check of the passes of the geometry: the same in every state of the unit.
PASSES = "arrangement / tube passes"
# Where one stream keeps its temperature; of two the side follows the words.
FLOW_NEEDED = "flow needed"
SIDES = ("hot", "cold")
# Balances of plant data close within these parts of the duty; beyond the first the flows or temperatures are
# not those of one state, beyond the second they cannot be rated.
CLOSURE_CAUTION, CLOSURE_RANGE = "0.05", "0.1"
# An area that is rounded, or counted without the tube sheets, agrees with its geometry this well; beyond the second it
# is that of another surface, or of another unit: common practice.
SAME_AREA, LIKE_AREA = "0.05", "0.1"
EFFECTIVENESS = {
    "counterflow": "effectiveness-counterflow",
    "parallel flow": "effectiveness-parallel-flow",
    "shell and tube": "effectiveness-shell-and-tube",
    "crossflow both unmixed": "effectiveness-crossflow-both-unmixed",
    "crossflow both mixed": "effectiveness-crossflow-both-mixed",
}
FACTORS = {
    "shell and tube": "bowman-1940-f-factor",
    "crossflow both unmixed": "crossflow-f-factor-both-unmixed",
    "crossflow hot mixed": "crossflow-f-factor-one-mixed",
    "crossflow cold mixed": "crossflow-f-factor-one-mixed",
    "crossflow both mixed": "crossflow-f-factor-both-mixed",
}
ISOTHERMAL = "effectiveness-isothermal"
END_DIFFERENCES = ("first end difference", "second end difference")
# A stream that is mixed across its flow, by the card for the case that it has the larger or the smaller capacity.
MIXED = ("effectiveness-crossflow-cmax-mixed", "effectiveness-crossflow-cmin-mixed")


def is_of_duty(step: ChainStep) -> bool:
    """Whether a row of the chain belongs to the duty."""
    return step.owner in (OWNER, AGAIN)


@dataclass
class DutyLayout:
    """One duty on its way into the chain. ``results`` are the ids of its figures by name."""

    scope: Scope
    library: Library
    duty: Duty
    results: dict[str, str] = field(default_factory=dict)
    checks: list[ChainCheck] = field(default_factory=list)
    open_figures: list[OpenFigure] = field(default_factory=list)
    isothermal: tuple[str, ...] = ()
    states: dict[str, StreamState] = field(default_factory=dict)

    # -- before the streams ---------------------------------------------------------------------------

    def means(self) -> dict[str, str]:
        """The id of the mean of its ends for every stream of the duty that has ends."""
        means = {}
        for name, side in self.duty.sides.items():
            if not side.has_ends:
                continue
            inlet, outlet = (self._end(name, end, value) for end, value in side.ends)
            self.results |= {f"T {name} inlet": inlet, f"T {name} outlet": outlet}
            self.results[f"T {name} mean"] = means[side.stream] = self._step(
                f"{name}/mean",
                f"T_{name[0]}m",
                f"mean temperature of {side.stream}",
                f"(T_{name[0]}i + T_{name[0]}o)/2",
                {f"T_{name[0]}i": inlet, f"T_{name[0]}o": outlet},
                "arithmetic mean of its ends",
                "temperature",
            )
        return means

    def _end(self, name: str, end: str, value: Value | None) -> str:
        if value is not None:
            return self.scope.value(value, "temperature", f"duty {name}", end)
        open_id = f"{OWNER}/{name}/{end}"
        self.scope.dimensions[open_id] = vocabulary()["temperature"].dimension
        return open_id

    # -- the heat balance -----------------------------------------------------------------------------

    def balance(self, streams: Mapping[str, StreamState]) -> bool:
        """Capacities, heat of each side and the duty; False after a fault that leaves no duty."""
        sides = self.duty.sides
        self.states = {name: streams[side.stream] for name, side in sides.items() if side.stream in streams}
        if len(self.states) < len(sides):
            return False
        for name, side in sides.items():
            state = self.states[name]
            if not side.has_ends and not self._is_isothermal(name, side, state):
                return False
            if side.has_ends and state.is_saturated and state.pressure:
                self._fault(
                    side.place,
                    f"the {name} stream `{shown(side.stream)}` is saturated and has a temperature at its end",
                    "no inlet and outlet: a saturated stream keeps its temperature",
                )
                return False
        for name in SIDES:
            self._capacity(name)
            self._mean_check(name)
        heats = {name: self._heat(name) for name in SIDES if self._has_heat(name)}
        if self.duty.heat_flow is not None:
            self._stated_heat(self.duty.heat_flow, heats)
        elif not heats:
            return self._by_effectiveness()
        elif len(heats) == 2:
            self._mean_heat(heats["hot"], heats["cold"])
        else:
            (self.results["duty"],) = heats.values()
        for name in SIDES:
            self._from_heat(name)
        self._end_checks()
        return True

    def read_stated(self) -> None:
        """Read what the duty itself states, where it came to no balance: so its faults are told in one round."""
        self.scope.value(self.duty.heat_flow, "heat flow", OWNER, "heat flow")
        self.scope.value(self.duty.installed_area, "area", OWNER, "installed area")

    def _is_isothermal(self, name: str, side: DutySide, state: StreamState) -> bool:
        if not state.is_saturated:
            self._fault(
                side.place,
                f"the {name} side has no inlet temperature",
                "inlet: … and outlet: …, or a stream with temperature: saturation",
            )
            return False
        self.isothermal = (*self.isothermal, name)
        self.results |= {f"T {name} inlet": state.temperature, f"T {name} outlet": state.temperature}
        self.scope.assume(
            f"{OWNER}/{name}/isothermal",
            f"{side.stream} keeps its saturation temperature along the whole unit.",
            "it is saturated and changes phase",
            OWNER,
        )
        return True

    def _capacity(self, name: str) -> None:
        """The capacity flow of a side whose mass flow is known."""
        state = self.states[name]
        if name in self.isothermal or not state.mass_flow:
            return
        heat_capacity = self.scope.step(
            f"stream {state.name}/heat capacity",
            "cp",
            "heat capacity",
            f"stream {state.name}",
            state.operation("heat capacity"),
            state.state_inputs(state.temperature),
            state.fluid_name,
            vocabulary()["heat capacity"],
        )
        self.results[f"C {name}"] = self._step(
            f"{name}/C",
            f"C_{name[0]}",
            f"capacity flow of {state.name}",
            "m*cp",
            {"m": state.mass_flow, "cp": heat_capacity},
            "mass flow and heat capacity at the mean temperature",
            "conductance",
        )
        self._flow_check(name)

    def holds_passes(self, passes: str) -> None:
        """A caution where the passes of the geometry are not those that the arrangement has."""
        if self.isothermal:
            return
        is_multiple = self.duty.arrangement == "shell and tube"
        that = "N_p >= 2" if is_multiple else "N_p <= 1"
        has = "an even number of tube passes" if is_multiple else "one pass of each stream"
        because = f"the mean temperature difference of this arrangement is that of {has}"
        self._check(PASSES, that, "caution", because, {"N_p": passes})
        if is_multiple:
            self._say_odd(passes)

    def _say_odd(self, passes: str) -> None:
        """That an odd number of tube passes is taken as an even one."""
        symbol = passes.removeprefix("given/")
        given = self.scope.calculation.givens.get(symbol)
        stated = self.scope.inputs.get(passes)
        value = stated.value if stated is not None else math.nan
        if given is not None and given.value.quantity is not None:
            value = given.value.quantity.value
        if value > 1.0 and value % 2.0 == 1.0:
            self.scope.assume(
                "duty/odd passes",
                f"{value:g} tube passes are taken as an even number of them.",
                "the mean temperature difference of this arrangement is that of an even number of tube passes",
                "duty",
            )

    def _flow_check(self, name: str) -> None:
        self._check(f"ends / {name} flow", SOME_FLOW, "stop", NO_FLOW, {"m": self.states[name].mass_flow})

    def _mean_check(self, name: str) -> None:
        """A stated temperature of a stream beside the mean of its ends."""
        state = self.states[name]
        mean = self.results.get(f"T {name} mean", "")
        if mean and state.temperature != mean:
            ends = {
                "T_i": self.results[f"T {name} inlet"],
                "T_o": self.results[f"T {name} outlet"],
            }
            self._check(
                f"ends / {name} mean between the ends",
                "min(T_i, T_o) <= T_b <= max(T_i, T_o)",
                "range",
                "the stated temperature of a stream lies between its ends",
                {"T_b": state.temperature, **ends},
            )
            self._check(
                f"ends / {name} mean",
                f"abs(T_b - T_{name[0]}m) <= abs(T_i - T_o)/4",
                "caution",
                "the stated mean temperature and the ends are of one state; a viscous liquid may be taken off the middle",
                {
                    "T_b": state.temperature,
                    f"T_{name[0]}m": mean,
                    **ends,
                },
            )

    def _has_heat(self, name: str) -> bool:
        """Whether the heat of a side follows from its own flow and stated ends."""
        side = self.duty.sides[name]
        return side.has_ends and not side.open_end and f"C {name}" in self.results

    def _heat(self, name: str) -> str:
        sign = "T_hi - T_ho" if name == "hot" else "T_co - T_ci"
        return self._step(
            f"{name}/Q",
            f"Q_{name[0]}",
            f"heat of the {name} stream",
            f"C_{name[0]}*({sign})",
            {f"C_{name[0]}": self.results[f"C {name}"], **self._ends(name)},
            "heat balance",
            "heat flow",
        )

    def _stated_heat(self, stated: Value, heats: Mapping[str, str]) -> None:
        """The duty as the file states it, and the heat balance of every stream that has one beside it."""
        duty = self.results["duty"] = self._step(
            "Q",
            "Q_d",
            "duty",
            "Q",
            {"Q": self.scope.value(stated, "heat flow", OWNER, "heat flow")},
            "as stated",
            "heat flow",
        )
        self._check(
            "heat balance / heat flow",
            "Q_d > 0",
            "stop",
            "a duty is heat from the hot stream to the cold one",
            {"Q_d": duty},
        )
        for name, heat in heats.items():
            mark = name[0]
            closure = self.results[f"closure {name}"] = self._step(
                f"{name}/closure",
                f"e_{mark}",
                f"closure error of the heat balance of the {name} stream",
                f"(Q_{mark} - Q_d)/Q_d",
                {f"Q_{mark}": heat, "Q_d": duty},
                "its heat balance beside the stated heat flow",
                "ratio",
            )
            self._closure_checks(f"{name} closure", f"e_{mark}", closure)

    def _closure_checks(self, name: str, symbol: str, closure: str) -> None:
        for level, limit in (("caution", CLOSURE_CAUTION), ("range", CLOSURE_RANGE)):
            self._check(
                f"heat balance / {name} {level}",
                f"abs({symbol}) <= {limit}",
                level,
                "the two streams must carry one heat: flows or temperatures are not of one state",
                {symbol: closure},
            )

    def _mean_heat(self, hot: str, cold: str) -> None:
        self.results["duty"] = self._step(
            "Q",
            "Q_d",
            "duty",
            "(Q_h + Q_c)/2",
            {"Q_h": hot, "Q_c": cold},
            "mean of both heat balances",
            "heat flow",
        )
        closure = self.results["closure"] = self._step(
            "closure",
            "e_Q",
            "closure error of the heat balances",
            "(Q_h - Q_c)/Q_d",
            {"Q_h": hot, "Q_c": cold, "Q_d": self.results["duty"]},
            "heat balance",
            "ratio",
        )
        self._closure_checks("closure", "e_Q", closure)

    def _from_heat(self, name: str) -> None:
        """What the duty gives for a side: the end that is open, or its capacity where its flow is not stated."""
        side = self.duty.sides[name]
        if name in self.isothermal:
            return
        known = f"C {name}" in self.results
        if side.open_end and not known:
            self._fault(
                side.place,
                f"neither the {side.open_end} nor the flow of the {name} stream is stated",
                f"{side.open_end}: … here, or flow: … on the stream",
            )
        elif side.open_end:
            self._found_end(name, side.open_end, self.results["duty"])
            if side.open_end == "inlet":
                self.results[f"T {name} inlet found"] = self.results[f"T {name} inlet"]
        elif not known:
            ends = "T_hi - T_ho" if name == "hot" else "T_co - T_ci"
            self.results[f"C {name}"] = self._step(
                f"{name}/C",
                f"C_{name[0]}",
                f"capacity flow of {side.stream}",
                f"Q_d/({ends})",
                {"Q_d": self.results["duty"], **self._ends(name)},
                "the duty and its ends; its flow is not stated",
                "conductance",
            )

    def _found_end(self, name: str, end: str, heat: str) -> None:
        """The step that gives an open end from a heat and the other end, and the open figure that agrees with it."""
        known_end = "outlet" if end == "inlet" else "inlet"
        mark, known = name[0], self.results[f"T {name} {known_end}"]
        sign = "+" if (name == "hot") == (end == "inlet") else "-"
        found = self._step(
            f"{name}/{end} found",
            f"T_{mark}{end[0]}",
            f"{end} of {self.duty.sides[name].stream}",
            f"T_{mark}{known_end[0]} {sign} Q/C_{mark}",
            {f"T_{mark}{known_end[0]}": known, "Q": heat, f"C_{mark}": self.results[f"C {name}"]},
            "found: its heat balance",
            "temperature",
        )
        # An outlet lies on the way to the other inlet; nothing stands beyond an inlet.
        other = "cold" if name == "hot" else "hot"
        far = self.results[f"T {other} inlet"] if end == "outlet" else known
        self.open_figures.append(OpenFigure(self.results[f"T {name} {end}"], found, SERVICE, known, far))

    def _by_effectiveness(self) -> bool:
        """Nothing stated gives the duty: both streams that change their temperature need their flow and leave their outlet
        open."""
        for name, side in self.duty.sides.items():
            if name in self.isothermal:
                continue
            if side.outlet is not None or f"C {name}" not in self.results:
                self._fault(
                    side.place,
                    "the duty follows from neither stream",
                    "flow and both ends of one stream, the flows of both streams and no outlet, or heat flow: …",
                )
                return False
        self._end_checks()
        return True

    @property
    def is_by_effectiveness(self) -> bool:
        """Whether the duty itself is what the installed area reaches."""
        return "duty" not in self.results

    def _ends(self, name: str) -> dict[str, str]:
        mark = name[0]
        return {
            f"T_{mark}i": self.results[f"T {name} inlet"],
            f"T_{mark}o": self.results[f"T {name} outlet"],
        }

    def _inlets(self) -> dict[str, str]:
        return {"T_hi": self.results["T hot inlet"], "T_ci": self.results["T cold inlet"]}

    def _end_checks(self) -> None:
        """The temperatures must fall along the hot stream, rise along the cold one, and start hot above cold."""
        self._check(
            "ends / hot above cold",
            "T_hi > T_ci",
            "stop",
            "heat flows from the hot inlet to the cold one",
            self._inlets(),
        )
        for name, that in (("hot", "T_hi > T_ho"), ("cold", "T_co > T_ci")):
            if name not in self.isothermal:
                self._check(
                    f"ends / {name} stream",
                    that,
                    "stop",
                    f"the {name} stream gives its name",
                    self._ends(name),
                )

    # -- after the circuit ----------------------------------------------------------------------------

    def rating(self, circuit: Mapping[str, str], area: str, elements: tuple[Element, ...]) -> None:
        """Mean difference, required area, margin, effectiveness."""
        if not self._streams_have_films(elements):
            return
        overall = circuit["U"]
        area = self.results["area installed"] = self._installed(area)
        if not self.is_by_effectiveness:
            self._changes_phase(self.results["duty"])
        else:
            self._reached(overall, area)
            self._changes_phase(self.results["heat reached"])
            for name in SIDES:
                if name not in self.isothermal:
                    self._found_end(name, "outlet", self.results["heat reached"])
            return
        self._difference()
        driving = {"Q_d": self.results["duty"], "dT_lm": self.results["LMTD"]}
        factor = ""
        if "F" in self.results:
            driving["F"], factor = self.results["F"], "F*"
        self.results["area required"] = self._step(
            "A required",
            "A_req",
            "area that the duty needs",
            f"Q_d/(U*{factor}dT_lm)",
            {**driving, "U": overall},
            "rate equation",
            "area",
        )
        self.results["area margin"] = self._step(
            "area margin",
            "M_A",
            "margin of area over the duty",
            "A_inst/A_req - 1",
            {"A_inst": area, "A_req": self.results["area required"]},
            "installed area over required area",
            "ratio",
        )
        self._check(
            "area / margin",
            "M_A >= 0",
            "range",
            "the installed area carries the duty",
            {"M_A": self.results["area margin"]},
        )
        self.results["U required"] = self._step(
            "U required",
            "U_req",
            "overall coefficient that the installed area needs for the duty",
            f"Q_d/(A_inst*{factor}dT_lm)",
            {**driving, "A_inst": area},
            "rate equation",
            "overall coefficient",
        )
        self._reached(overall, area)
        if self.duty.has_ends:
            self._second_way(area)

    def _installed(self, area: str) -> str:
        """The stated area of the unit, held against that of the geometry; the latter where none is stated."""
        if self.duty.installed_area is None:
            return area
        stated = self.scope.value(self.duty.installed_area, "area", OWNER, "installed area")
        figures = {"A_inst": stated, "A_geo": area}
        because = "the films are worked out in a geometry of another area than the stated one"
        for name, level, part in (("stated", "range", LIKE_AREA), ("closely stated", "caution", SAME_AREA)):
            that = f"abs(A_inst/A_geo - 1) <= {part}"
            self._check(f"area / {name}", that, level, because, figures)
        return stated

    def _changes_phase(self, heat: str) -> None:
        """The flow of every saturated stream that the heat needs, beside the stated one."""
        for name in self.isothermal:
            state, mark = self.states[name], "" if self.duty.has_ends else f" {name}"
            self.results[f"{FLOW_NEEDED}{mark}"] = flow_needed(self.scope, state, heat, OWNER)
            if state.mass_flow:
                changed = changed_part(self.scope, state, heat, OWNER)
                self.results[f"{PHASE_CHANGE} {state.name}"] = changed
                self._flow_check(name)
                figures = {"x_pc": changed}
                self._check(f"heat balance / phase change{mark}", WHOLE_FLOW, "range", BECAUSE, figures)

    def _streams_have_films(self, elements: tuple[Element, ...]) -> bool:
        groups = [element for element in elements if isinstance(element, Group)]
        touched = {branch.stream for group in groups for branch in group.branches}
        for name, side in self.duty.sides.items():
            if side.stream not in touched:
                self._fault(
                    side.place,
                    f"no film has the {name} stream `{shown(side.stream)}`",
                    f"stream: {side.stream} on the film that touches it",
                )
        return all(side.stream in touched for side in self.duty.sides.values())

    def _difference(self) -> None:
        """The logarithmic mean difference, and F where the flows do not pass each other end to end."""
        ends = {**self._ends("hot"), **self._ends("cold")}
        pairs = ("T_hi - T_co", "T_ho - T_ci")
        if self.duty.arrangement == "parallel flow":
            pairs = ("T_hi - T_ci", "T_ho - T_co")
        differences = {}
        for number, (name, text) in enumerate(zip(END_DIFFERENCES, pairs, strict=True), 1):
            relation = parse_expression(text)
            differences[name] = self._step(
                f"dT_{number}",
                f"dT_{number}",
                f"temperature difference at end {number}",
                text,
                {symbol: ends[symbol] for symbol in relation.symbols},
                "ends of the streams",
                "temperature difference",
            )
        self.results["LMTD"] = self._card("lmtd", differences)
        if not (self.isothermal or self.duty.arrangement in ("counterflow", "parallel flow")):
            self._factor(ends)

    def _factor(self, ends: Mapping[str, str]) -> None:
        figures = {
            "capacity flow ratio": self._step(
                "R",
                "R",
                "ratio of the temperature changes",
                "(T_hi - T_ho)/(T_co - T_ci)",
                dict(ends),
                "ends of the streams",
                "capacity flow ratio",
            ),
            "temperature effectiveness": self._step(
                "P",
                "P",
                "temperature effectiveness of the cold stream",
                "(T_co - T_ci)/(T_hi - T_ci)",
                {symbol: ends[symbol] for symbol in ("T_co", "T_ci", "T_hi")},
                "ends of the streams",
                "temperature effectiveness",
            ),
        }
        figures["shells in series"] = self._shells()
        # The temperature effectiveness is that of the cold stream.
        mixed = "this" if self.duty.arrangement == "crossflow cold mixed" else "other"
        self.results["F"] = self._card(FACTORS[self.duty.arrangement], figures, words={"mixed": mixed})

    def _reached(self, overall: str, area: str) -> None:
        """The heat that the installed area transfers from the same inlets, by effectiveness; between two streams that keep
        their temperatures by their difference."""
        if not self.duty.has_ends:
            figures = {"U": overall, "A_inst": area, **self._inlets()}
            self.results["heat reached"] = self._step(
                "heat reached",
                "Q_r",
                "heat that the installed area reaches",
                "U*A_inst*(T_hi - T_ci)",
                figures,
                "rate equation; both streams keep their temperatures",
                "heat flow",
            )
            return
        units = self._units(overall, "U", area, "")
        self.results |= {"NTU": units}
        effectiveness = self._effectiveness(units, OWNER)
        self.results["effectiveness"] = effectiveness
        self.results["heat reached"] = self._largest_times(
            effectiveness, "heat reached", "Q_r", "heat that the installed area reaches"
        )

    def _second_way(self, area: str) -> None:
        """The duty once more, by effectiveness at the U that the rate equation asks for."""
        units = self._units(self.results["U required"], "U_req", area, " required")
        effectiveness = self._effectiveness(units, AGAIN)
        self.results["duty by effectiveness"] = self._largest_times(
            effectiveness, "Q by effectiveness", "Q_e", "duty by effectiveness at the required U"
        )

    def _least(self) -> str:
        """The smaller capacity flow."""
        if self.isothermal:
            return self.results["C cold" if "hot" in self.isothermal else "C hot"]
        return self._step(
            "C_min",
            "C_min",
            "smaller capacity flow",
            "min(C_h, C_c)",
            {"C_h": self.results["C hot"], "C_c": self.results["C cold"]},
            "both streams",
            "conductance",
        )

    def _ratio(self) -> str:
        return self._step(
            "C_r",
            "C_r",
            "ratio of the capacity flows",
            "min(C_h, C_c)/max(C_h, C_c)",
            {"C_h": self.results["C hot"], "C_c": self.results["C cold"]},
            "both streams",
            "capacity ratio",
        )

    def _units(self, overall: str, symbol: str, area: str, mark: str) -> str:
        return self._step(
            f"NTU{mark}",
            "NTU_req" if mark else "NTU",
            f"number of transfer units{mark}",
            f"{symbol}*A_inst/C_min",
            {symbol: overall, "A_inst": area, "C_min": self._least()},
            "installed area",
            "transfer units",
        )

    def _largest_times(self, effectiveness: str, key: str, symbol: str, title: str) -> str:
        return self._step(
            key,
            symbol,
            title,
            "eps*C_min*(T_hi - T_ci)",
            {"eps": effectiveness, "C_min": self._least(), **self._inlets()},
            "effectiveness",
            "heat flow",
        )

    def _effectiveness(self, units: str, owner: str) -> str:
        """The effectiveness of the arrangement at a number of transfer units."""
        figures = {"transfer units": units}
        if self.isothermal:
            return self._card(ISOTHERMAL, figures, owner)
        figures |= {"capacity ratio": self._ratio(), "shells in series": self._shells()}
        arrangement = self.duty.arrangement
        if arrangement in EFFECTIVENESS:
            return self._card(EFFECTIVENESS[arrangement], figures, owner)
        larger, smaller = (self._card(card, figures, owner) for card in MIXED)
        mixed, other = ("h", "c") if arrangement == "crossflow hot mixed" else ("c", "h")
        capacities = {"C_h": self.results["C hot"], "C_c": self.results["C cold"]}
        return self._step(
            "effectiveness" if owner == OWNER else "effectiveness again",
            "eps",
            "effectiveness, by the card for the stream that is mixed",
            f"eps_max if C_{mixed} >= C_{other} else eps_min",
            {"eps_max": larger, "eps_min": smaller, **capacities},
            "capacity flows",
            "exchanger effectiveness",
        )

    def _shells(self) -> str:
        return self.scope.constant(f"{OWNER}/shells", float(self.duty.shells))

    # -- small parts ----------------------------------------------------------------------------------

    def _card(
        self,
        card: str,
        figures: Mapping[str, str],
        owner: str = OWNER,
        words: Mapping[str, str] | None = None,
    ) -> str:
        """The id of a card's result on figures by quantity name and on words by symbol; its limits join the checks."""
        program = self.library.program(card)
        term = Term(owner, OWNER, self.duty.place)
        film = FilmScope(self.scope, self.library, term, owner, {})
        names = {
            item.name: self._word(item.need, (words or {})[item.need.symbol])
            if item.need.one_of
            else figures[item.need.quantity.name]
            for item in program.needs
        }
        for name, value in program.constants.items():
            names[name] = self.scope.constant(
                f"{owner}/{card}/{name}", value, program.constant_dimensions[name]
            )
        film.lay_out(program, names)
        self.scope.cards |= {f"method {item.id}": item.digest_text for item in program.cards}
        if owner == OWNER:
            self.checks += film.checks(program, names)
        return names[program.result]

    def _word(self, need: Need, word: str) -> str:
        return self.scope.constant(f"{OWNER}/with {need.symbol}", float(need.one_of.index(word)))

    def _check(self, name: str, that: str, level: str, because: str, figures: Mapping[str, str]) -> None:
        limit = practice_limit(name.rpartition("/")[2].strip(), that, level, because, self.duty.place)
        self.checks.append(ChainCheck(f"{OWNER} / {name}", OWNER, OWNER, limit, figures))

    def _fault(self, place: Place, message: str, expected: str) -> None:
        self.scope.collector.add("duty-incomplete", place, message, expected=expected)

    def _step(
        self, key: str, symbol: str, title: str, text: str, inputs: Mapping[str, str], basis: str, kind: str
    ) -> str:
        return self.scope.relation_step(
            f"{OWNER}/{key}",
            symbol,
            title,
            OWNER,
            parse_expression(text),
            inputs,
            basis,
            kind,
            self.duty.place,
        )


# Result names with the id they stand for in ``Chain.results``, their kind and what they are; each in service.
_RESULTS = (
    ("duty", "duty", "heat flow", "duty"),
    ("closure", "closure", "ratio", "closure error of the heat balances"),
    ("closure_hot", "closure hot", "ratio", "closure error of the hot stream to the stated heat flow"),
    ("closure_cold", "closure cold", "ratio", "closure error of the cold stream to the stated heat flow"),
    ("flow_needed", FLOW_NEEDED, "mass flow", "flow of the saturated stream that its heat balance needs"),
    ("flow_needed_hot", f"{FLOW_NEEDED} hot", "mass flow", "flow of the hot stream that condenses"),
    ("flow_needed_cold", f"{FLOW_NEEDED} cold", "mass flow", "flow of the cold stream that evaporates"),
    ("T_hot_inlet", "T hot inlet found", "temperature", "inlet of the hot stream, found"),
    ("T_cold_inlet", "T cold inlet found", "temperature", "inlet of the cold stream, found"),
    ("T_hot_outlet", "T hot outlet", "temperature", "outlet of the hot stream"),
    ("T_cold_outlet", "T cold outlet", "temperature", "outlet of the cold stream"),
    ("LMTD", "LMTD", "temperature difference", "logarithmic mean temperature difference"),
    ("F", "F", "ratio", "correction factor of the mean temperature difference"),
    ("area_installed", "area installed", "area", "installed area on the basis of U"),
    ("area_service", "area required", "area", "area that the duty needs in service"),
    (
        "area_margin",
        "area margin",
        "ratio",
        "margin of area over the duty in service, A_installed/A_service − 1",
    ),
    ("U_required", "U required", "overall coefficient", "U that the installed area needs for the duty"),
    ("NTU_service", "NTU", "transfer units", "number of transfer units in service"),
    ("effectiveness_service", "effectiveness", "ratio", "effectiveness in service"),
    ("heat_reached_service", "heat reached", "heat flow", "heat that the installed area reaches in service"),
)
_CLEAN_RESULTS = (
    ("area_clean", "area required", "area", "area that the duty needs clean"),
    (
        "area_margin_clean",
        "area margin",
        "ratio",
        "margin of area over the duty clean, A_installed/A_clean − 1",
    ),
    (
        "heat_reached_clean",
        "heat reached",
        "heat flow",
        "heat that the installed area reaches clean, at the same means",
    ),
)


# Every result name of the duty with its condition and its key in ``Chain.results``.
DUTY_RESULTS = {
    name: (condition, key)
    for condition, table in ((SERVICE, _RESULTS), (CLEAN, _CLEAN_RESULTS))
    for name, key, _, _ in table
}


def duty_results(
    chain: Chain, solutions: Mapping[str, Solution], put: Callable[[str, Array, str, str], None]
) -> None:
    """Hand every result of the duty to ``put``: name, value at every sample, kind, title."""
    if chain.calculation.duty is None:
        return
    for condition, table in ((SERVICE, _RESULTS), (CLEAN, _CLEAN_RESULTS)):
        for name, key, kind, title in table:
            if key in chain.results:
                put(name, solutions[condition].figure(chain.results[key]), kind, title)


def duty_step(chain: Chain, name: str) -> tuple[str, str] | None:
    """The condition and the id of the step that a result of the duty is taken from; None for another name."""
    condition, key = DUTY_RESULTS.get(name, ("", ""))
    return (condition, chain.results[key]) if key in chain.results else None
