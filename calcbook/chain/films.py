"""Films: the groups a situation forms, the methods laid out on them, and the choice between methods."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace

from calcbook.calcfile.calculation import Term, Value
from calcbook.chain.fluids import FixedOperation, LiquidOperation, PropertyOperation
from calcbook.chain.scope import Scope
from calcbook.chain.types import ABSENT, Branch, Candidate, ChainCheck, ChainStep, ChoiceRow, StreamState
from calcbook.faults import Faults, nearest_names, shown
from calcbook.formulas import Relation, parse_expression
from calcbook.library import Library, Program
from calcbook.library.cards import Method, Need, Situation, practice_limit
from calcbook.library.programs import ProgramStep
from calcbook.library.reading import choice_number, vocabulary
from calcbook.quantities import DIMENSIONLESS, QuantityKind, unit_display

PROPERTY_SYMBOLS = {
    "rho": "density",
    "mu": "viscosity",
    "lam": "conductivity",
    "cp": "heat capacity",
    "beta": "expansion coefficient",
}
# Symbols that mean one thing in every card: a step of another symbol is called by its symbol.
NAMED_GROUPS = ("Re", "Pr", "Nu", "Gr", "Ra", "Gz", "Pe", "f")
PLACE_MARKS = {
    "bulk": "b",
    "film": "f",
    "surface": "s",
    "saturated liquid": "l",
    "saturated vapour": "g",
    "liquid film": "lf",
}
# The side of saturation that properties are taken on at places of a fluid that changes phase.
SATURATED_SIDES = {"saturated liquid": "liquid", "saturated vapour": "gas", "liquid film": "liquid"}
# What belongs to the saturation line of a fluid, with its symbol.
SATURATION_FIGURES = {"latent heat": "h_fg", "surface tension": "sig", "saturation pressure": "p_sat"}
FIXED_FIGURES = {"critical pressure": "p_c", "molar mass": "M"}


@dataclass
class FilmScope:
    """Everything that one film term may ask for, made into steps when it is first asked for.

    ``dimensions`` gives the ids of geometric figures by vocabulary name for the surface the film acts on. ``missing``
    names what was told to be missing, once each; ``lacks`` counts how often anything of it was asked for.
    """

    scope: Scope
    library: Library
    term: Term
    group: str
    dimensions: Mapping[str, str]
    stream: StreamState | None = None
    situation: Situation | None = None
    missing: set[str] = field(default_factory=set)
    lacks: int = 0
    candidates: frozenset[str] = frozenset()
    deposit_surface: tuple[str, str] | None = None

    # -- temperatures and properties ------------------------------------------------------------------

    @property
    def owner(self) -> str:
        return self.term.name

    @property
    def bulk(self) -> str:
        return self.stream.temperature if self.stream is not None else ""

    @property
    def surface(self) -> str:
        return f"{self.group}/T_s"

    def temperature(self, place: str) -> str:
        """The id of a temperature: bulk, surface, or film (the mean of both)."""
        if place == "bulk":
            return self.bulk
        if place == "surface":
            return self.surface
        if place in ("saturated liquid", "saturated vapour"):
            return self.saturation()
        if place == "liquid film":
            return self.scope.relation_step(
                f"{self.owner}/liquid film/T",
                "T_lf",
                "liquid film temperature",
                self.owner,
                parse_expression("(T_s + T_sat)/2"),
                {"T_s": self.surface, "T_sat": self.saturation()},
                "mean of surface and saturation",
                "temperature",
            )
        return self.scope.relation_step(
            f"{self.owner}/film/T",
            "T_f",
            "film temperature",
            self.owner,
            parse_expression("(T_s + T_b)/2"),
            {"T_s": self.surface, "T_b": self.bulk},
            "mean of surface and bulk",
            "temperature",
        )

    def property(self, name: str, place: str) -> str:
        """The id of a property of the stream at a place."""
        assert self.stream is not None
        stream = self.stream
        symbol = next(symbol for symbol, known in PROPERTY_SYMBOLS.items() if known == name)
        step = f"stream {stream.name}/{name}" if place == "bulk" else f"{self.owner}/{place}/{name}"
        if step in self.scope.steps:
            return step
        if not stream.fluid.has(name):
            self._fault_property(name)
            return ""
        if place in SATURATED_SIDES:
            return self.on_saturation(
                step, name, f"{symbol}_{PLACE_MARKS[place]}", f"{name} of {place}", place
            )
        inputs = stream.state_inputs(self.temperature(place))
        if place != "bulk":
            inputs["liquid"] = self.flag("fluid liquid")
        shown_symbol = symbol if place == "bulk" else f"{symbol}_{PLACE_MARKS[place]}"
        title = name if place == "bulk" else f"{name} at {place} temperature"
        return self.scope.step(
            step,
            shown_symbol,
            title,
            self.owner,
            stream.operation(name, place != "bulk"),
            inputs,
            stream.fluid_name,
            vocabulary()[name],
        )

    def _fault_property(self, name: str) -> None:
        """A table or constants without a property that a film asks for: said once per term."""
        assert self.stream is not None
        if not self._is_first(name):
            return
        text = self.stream.fluid.text
        self.scope.collector.add(
            "property-missing",
            text.place,
            f"{text.name} has no {name}, which `{self.owner}` needs",
            found=", ".join(column for column in text.columns if column != "T"),
            expected=f"{name}: ... with its unit",
        )

    # -- the saturation line --------------------------------------------------------------------------

    def saturation(self) -> str:
        """The id of the stream's saturation temperature; a fault where the stream is not saturated."""
        assert self.stream is not None
        if self.stream.saturation:
            return self.stream.saturation
        if self._is_first("saturation"):
            self.scope.collector.add(
                "stream-not-saturated",
                self.stream.place,
                f"`{self.owner}` needs a saturated stream",
                found=f"stream {self.stream.name} with its own temperature",
                expected="temperature: saturation with the pressure and phase of a pure fluid",
            )
        return self.scope.unread(vocabulary()["saturation temperature"])

    def on_saturation(self, step: str, name: str, symbol: str, title: str, place: str) -> str:
        """The id of a property on the saturation line, at the temperature of a place."""
        assert self.stream is not None
        stream, temperature = self.stream, self.temperature(place)
        operation = PropertyOperation(stream.fluid, name, SATURATED_SIDES.get(place, "liquid"), False, False)
        return self.scope.step(
            step,
            symbol,
            title,
            self.owner,
            operation,
            {"T": temperature},
            stream.fluid_name,
            vocabulary()[name],
        )

    def pressure(self) -> str:
        """The id of the stream's pressure: as stated, or the vapour pressure at its temperature."""
        assert self.stream is not None
        return self.stream.pressure or self.saturation_figure("saturation pressure", "saturated liquid")

    def saturation_figure(self, name: str, place: str) -> str:
        """The id of a figure of the saturation line, at saturation or at another place."""
        assert self.stream is not None
        place = place if place not in ("", "bulk") else "saturated liquid"
        own = place in ("saturated liquid", "saturated vapour")
        step = f"stream {self.stream.name}/{name}" if own else f"{self.owner}/{place}/{name}"
        symbol = SATURATION_FIGURES[name]
        if step in self.scope.steps:
            return step
        return self.on_saturation(
            step,
            name,
            symbol if own else f"{symbol}_{PLACE_MARKS[place]}",
            name if own else f"{name} at {place} temperature",
            place,
        )

    def fixed_figure(self, name: str) -> str:
        """The id of a figure that the fluid has in every state."""
        assert self.stream is not None
        self.saturation()
        return self.scope.step(
            f"stream {self.stream.name}/{name}",
            FIXED_FIGURES[name],
            name,
            self.owner,
            FixedOperation(self.stream.fluid, name),
            {},
            self.stream.fluid_name,
            vocabulary()[name],
        )

    def saturated(self, name: str, place: str) -> str:
        """The id of what only a fluid on its saturation line has; empty for every other quantity."""
        if self.stream is None:
            return ""
        if name == "saturation temperature":
            return self.saturation()
        if name == "pressure":
            return self.pressure()
        if name in SATURATION_FIGURES:
            return self.saturation_figure(name, place)
        if name in FIXED_FIGURES:
            return self.fixed_figure(name)
        if name == "reduced pressure":
            return self.scope.relation_step(
                f"stream {self.stream.name}/reduced pressure",
                "p_r",
                name,
                self.owner,
                parse_expression("p/p_c"),
                {"p": self.pressure(), "p_c": self.fixed_figure("critical pressure")},
                "critical pressure",
                name,
            )
        return ""

    def vapour_checks(self) -> tuple[ChainCheck, ...]:
        """What speaks against a pure vapour at rest, for a film that condenses one; absent figures are assumed."""
        assert self.stream is not None and self.situation is not None
        stated = self.term.values.get("vapour velocity")
        if self.situation.changes_phase != "condensing":
            if stated is not None:
                self.scope.collector.add(
                    "key-unknown",
                    stated.place,
                    f"`{self.owner}` does not condense a vapour",
                    found="vapour velocity",
                    expected="a situation that condenses",
                )
            return ()
        checks = []
        share = self.stream.non_condensable
        if share:
            checks.append(
                self._none_of(
                    "non-condensable gas",
                    "y_n",
                    share,
                    "range",
                    "mole fraction",
                    "the method is for a pure vapour; a few per cent of gas can halve the coefficient",
                )
            )
        else:
            self.scope.assume(
                f"{self.owner}/pure",
                f"The vapour of {self.stream.name} is pure.",
                "no non-condensable gas is stated",
                self.owner,
            )
            checks.append(self._no_vacuum())
        if self.situation.flow == "forced":
            return tuple(checks)
        speed = self.scope.value(stated, "vapour velocity", self.owner, "vapour velocity")
        if speed:
            checks.append(
                self._none_of(
                    "vapour at rest",
                    "v_g",
                    speed,
                    "caution",
                    "vapour velocity",
                    "the method is for a vapour at rest; its shear thins or piles up the film",
                )
            )
        else:
            self.scope.assume(
                f"{self.owner}/at rest",
                f"The vapour of {self.stream.name} is at rest.",
                "no vapour velocity is stated",
                self.owner,
            )
        return tuple(checks)

    def _no_vacuum(self) -> ChainCheck:
        """A caution where a vapour that is taken as pure stands below the pressure of the air around it."""
        assert self.situation is not None
        outside = self.scope.site_pressure()
        because = (
            "air leaks into a vapour below the pressure of the site, a few per cent of it can halve the coefficient,"
            " and `non-condensable:` of the stream is not stated"
        )
        limit = practice_limit("no vacuum", "p >= p_site", "caution", because, self.situation.where)
        inputs = {"p": self.pressure(), "p_site": outside}
        return ChainCheck(f"{self.owner} / vapour / no vacuum", self.owner, "vapour", limit, inputs)

    def _none_of(
        self, name: str, symbol: str, figure: str, level: str, kind: str, because: str
    ) -> ChainCheck:
        assert self.situation is not None
        none = self.scope.constant(f"{self.owner}/no {kind}", 0.0, vocabulary()[kind].dimension)
        limit = practice_limit(name, f"{symbol} <= none", level, because, self.situation.where)
        return ChainCheck(
            f"{self.owner} / vapour / {name}", self.owner, "vapour", limit, {symbol: figure, "none": none}
        )

    # -- flow and geometry ----------------------------------------------------------------------------

    def need_of_situation(self, name: str) -> str:
        """The id of a figure that the situation needs, by its quantity name."""
        assert self.situation is not None
        for need in self.situation.needs:
            if need.quantity.name == name:
                return self.from_term(need)
        return ""

    def from_term(self, need: Need) -> str:
        """A need from the term's `with:`, from the geometry, or its absent value."""
        stated = self.term.with_values.get(need.symbol) or self.term.with_values.get(need.quantity.name)
        if need.one_of:
            return self._choice(need, stated)
        if stated is not None:
            return self.scope.value(stated, need.quantity.name, self.owner, f"with {need.symbol}")
        if need.quantity.name in self.dimensions:
            return self.dimensions[need.quantity.name]
        if need.absent is not None:
            name = f"{self.owner}/{need.symbol}{ABSENT}"
            unit = "" if need.quantity.unit == "1" else f" {unit_display(need.quantity.unit)}"
            self.scope.assume(
                f"{self.owner}/{need.symbol}",
                f"{need.quantity.name} {need.symbol} is taken as {need.absent}{unit}.",
                "nothing is stated",
                self.owner,
            )
            return self.scope.constant(name, float(need.absent), need.quantity.dimension)
        return ""

    def _choice(self, need: Need, stated: Value | None) -> str:
        text = stated.text if stated is not None else need.absent
        if text is None:
            self.report_missing(need, " | ".join(need.one_of))
            return ""
        try:
            number = choice_number(text, need.one_of)
            if (
                not _words(need)
                and text not in need.one_of
                and number not in [float(item) for item in need.one_of]
            ):
                raise ValueError(text)
        except ValueError:
            assert stated is not None
            self.scope.collector.add(
                "choice-unknown",
                stated.place,
                f"`{need.symbol}` cannot be `{shown(text)}`",
                found=shown(text),
                expected=" | ".join(need.one_of),
                nearest=nearest_names(text, need.one_of),
            )
            return ""
        if stated is None:
            self.scope.assume(
                f"{self.owner}/{need.symbol}",
                f"{need.symbol} is taken as {text}.",
                "nothing is stated",
                self.owner,
            )
        # A word's number is its place in the method's own list, and another in the list of another method.
        among = f" among {', '.join(need.one_of)}" if _words(need) else ""
        return self.scope.constant(f"{self.owner}/with {need.symbol}{among}", number)

    def _is_first(self, name: str) -> bool:
        """Whether something that is missing is so for the first time; it counts each time."""
        self.lacks += 1
        is_first = name not in self.missing
        self.missing.add(name)
        return is_first

    def report_missing(self, need: Need, example: str) -> None:
        """A figure that nothing gives: said once per term."""
        if not self._is_first(need.symbol):
            return
        self.scope.collector.add(
            "need-missing",
            self.term.place,
            f"`{self.owner}` needs {need.quantity.name} `{need.symbol}`",
            expected=f"it in the geometry, or with: {{{need.symbol}: {example}}} on the term",
        )

    def speed(self) -> str:
        """The id of the stream's speed at this film: as stated, or from its flow and the flow area."""
        assert self.stream is not None and self.situation is not None
        stream = self.stream
        if stream.flow_kind == "speed":
            return stream.flow
        if not stream.flow_kind:
            self._fault_flow("the stream has no flow", "flow: mass flow, volume flow or speed on the stream")
            return ""
        if self.situation.flow_area is None:
            self._fault_flow(
                "the situation has no flow area: the flow must be a speed", "flow: 4 m/s on the stream"
            )
            return ""
        area = self.local_step("flow area", "A_c", "flow area", self.situation.flow_area, "flow area")
        density = self.property("density", "bulk")
        return self.scope.relation_step(
            f"{self.owner}/speed",
            "v",
            "speed",
            self.owner,
            parse_expression("m/(rho*A_c)"),
            {"m": stream.mass_flow, "rho": density, "A_c": area},
            self.situation.id,
            "speed",
        )

    def flow_of_speed(self) -> dict[str, str]:
        """What a stated speed makes a mass flow with (v, rho, A_c); nothing where flow area or density is not given.

        Nothing is missing then: the film needs the speed alone.
        """
        assert self.stream is not None and self.situation is not None
        relation = self.situation.flow_area
        needs = {need.symbol: need for need in self.situation.needs}
        if relation is None or not self.stream.fluid.has("density"):
            return {}
        if not all(symbol in needs and self._is_given(needs[symbol]) for symbol in relation.symbols):
            return {}
        area = self.local_step("flow area", "A_c", "flow area", relation, "flow area")
        return {"v": self.stream.flow, "rho": self.property("density", "bulk"), "A_c": area}

    def _is_given(self, need: Need) -> bool:
        """Whether the file gives a figure that the situation needs."""
        stated = need.symbol in self.term.with_values or need.quantity.name in self.term.with_values
        return stated or need.quantity.name in self.dimensions or need.absent is not None

    def flow_of_situation(self, symbol: str) -> str:
        """The id of the stream's mass flow, or of the situation's flow area."""
        assert self.stream is not None and self.situation is not None
        if symbol == "A_c" and self.situation.flow_area is not None:
            return self.local_step("flow area", "A_c", "flow area", self.situation.flow_area, "flow area")
        if symbol == "m" and self.stream.mass_flow:
            return self.stream.mass_flow
        self._fault_flow("the stream has no mass flow", "flow: a mass flow on the stream")
        return ""

    def _fault_flow(self, message: str, expected: str) -> None:
        if self._is_first("flow"):
            self.scope.collector.add(
                "flow-missing", self.term.place, f"`{self.owner}`: {message}", expected=expected
            )

    def local_step(self, key: str, symbol: str, title: str, relation: Relation, kind: str) -> str:
        """A relation of the situation card over its needs."""
        assert self.situation is not None
        inputs = self.bind(relation, "bulk")
        if inputs is None:
            return ""
        only = relation.text.strip()
        if only in inputs:
            return inputs[only]
        return self.scope.relation_step(
            f"{self.owner}/{key}",
            symbol,
            title,
            self.owner,
            relation,
            inputs,
            self.situation.id,
            kind,
            self.term.place,
        )

    def length(self) -> str:
        """The id of the characteristic length."""
        assert self.situation is not None
        return self.local_step(
            "L_c",
            "L_c",
            "characteristic length",
            self.situation.characteristic_length,
            "characteristic length",
        )

    def bind(self, relation: Relation, place: str) -> dict[str, str] | None:
        """The ids of a situation relation's symbols at a place, or None after a fault."""
        bound = {}
        for symbol in relation.symbols:
            found = self.symbol(symbol, place)
            if not found:
                return None
            bound[symbol] = found
        return bound

    def symbol(self, symbol: str, place: str) -> str:
        """The id of a symbol of a situation card at a place."""
        assert self.situation is not None
        if symbol in PROPERTY_SYMBOLS:
            return self.property(PROPERTY_SYMBOLS[symbol], place)
        special = {"v": self.speed, "L_c": self.length}
        if symbol in special:
            return special[symbol]()
        if symbol in ("T_b", "T_s", "T_f"):
            return self.temperature({"T_b": "bulk", "T_s": "surface", "T_f": "film"}[symbol])
        if symbol in ("heated", "liquid"):
            return self.flag(f"fluid {symbol}")
        for need in self.situation.needs:
            if symbol in need.one_of:
                return self.scope.constant(
                    f"word {symbol} of {', '.join(need.one_of)}", float(need.one_of.index(symbol))
                )
            if need.symbol == symbol:
                found = self.from_term(need)
                if not found and not need.one_of:
                    self.report_missing(need, f"1 {need.quantity.unit}")
                return found
        for group in self.situation.groups:
            if group.symbol == symbol:
                return self.group_step(group.quantity.name, place)
        if symbol in ("m", "A_c"):
            return self.flow_of_situation(symbol)
        if symbol in ("q", "T_sat", "h_fg"):
            return {
                "q": lambda: f"{self.group}/q",
                "T_sat": self.saturation,
                "h_fg": lambda: self.saturation_figure("latent heat", ""),
            }[symbol]()
        self.scope.collector.add(
            "symbol-unknown",
            self.situation.where,
            f"situation {self.situation.id}: `{symbol}` is neither a need, a group nor a property",
        )
        return ""

    def flag(self, name: str) -> str:
        """The id of a flag: the fluid is heated, the fluid is a liquid."""
        assert self.stream is not None
        if name == "fluid heated":
            return self.scope.relation_step(
                f"{self.owner}/heated",
                "heated",
                "fluid heated",
                self.owner,
                parse_expression("T_s > T_b"),
                {"T_s": self.surface, "T_b": self.bulk},
                "surface minus bulk of this fluid",
                "fluid heated",
            )
        stream = self.stream
        operation = LiquidOperation(stream.operation("density"))
        return self.scope.step(
            f"stream {stream.name}/liquid",
            "liquid",
            "fluid liquid",
            self.owner,
            operation,
            stream.state_inputs(stream.temperature),
            stream.fluid_name,
            vocabulary()["fluid liquid"],
        )

    def group_step(self, name: str, place: str) -> str:
        """The id of a dimensionless group of the situation at a place."""
        assert self.situation is not None
        for group in self.situation.groups:
            if group.quantity.name == name:
                mark = "" if place == "bulk" else f"_{PLACE_MARKS[place]}"
                inputs = self.bind(group.relation, place)
                if inputs is None:
                    return ""
                only = group.relation.text.strip()
                if only in inputs:
                    return inputs[only]
                title = name if place == "bulk" else f"{name} at {place} temperature"
                return self.scope.relation_step(
                    f"{self.owner}/{group.symbol}{mark}",
                    f"{group.symbol}{mark}",
                    title,
                    self.owner,
                    group.relation,
                    inputs,
                    self.situation.id,
                    name,
                    self.term.place,
                )
        return ""

    # -- needs of methods -----------------------------------------------------------------------------

    def need(self, need: Need) -> str:
        """The id of what a method needs. Empty when the calculation does not give it."""
        name, place = need.quantity.name, need.place or "bulk"
        if need.one_of:
            return self.from_term(need)
        if need.quantity.flag:
            return self.flag(name)
        if name == "temperature" and need.place:
            return self.temperature(need.place)
        if name in PROPERTY_SYMBOLS.values() and self.stream is not None:
            return self.property(name, place)
        if name == "heat flux":
            return f"{self.group}/q"
        found = self.saturated(name, place)
        if found:
            return found
        if self.situation is not None:
            if name == "characteristic length":
                return self.length()
            if name == "speed":
                return self.speed()
            found = self.group_step(name, place) or self.need_of_situation(name)
            if found:
                return found
        return self.from_term(need)

    # -- a method laid out ----------------------------------------------------------------------------

    def laid_out(self, program: Program) -> dict[str, str] | None:
        """A card and those that it uses laid out and named among the cards; its ids by symbol, None after a fault."""
        names = self.bind_needs(program)
        if names is None:
            return None
        self.lay_out(program, names)
        self.scope.cards |= {f"method {card.id}": card.digest_text for card in program.cards}
        return names

    def candidate(self, method: str, because: str, is_used: bool = True) -> Candidate | None:
        """Lay out a method on this film; None after a fault. What only checks another method takes no factor."""
        try:
            program = self.library.program(method)
        except Faults as faults:
            self.scope.collector.take(faults.faults)
            return None
        card = program.method
        names = self.bind_needs(program)
        if names is None:
            return None
        self.lay_out(program, names)
        coefficient = self.coefficient(card, names[program.result])
        if coefficient and is_used:
            coefficient = self.with_method_factor(card, coefficient)
        if not coefficient:
            return None
        checks = self.checks(program, names)
        steps = self.ancestors([coefficient, *(bound for check in checks for bound in check.inputs.values())])
        return Candidate(
            card, steps, coefficient, checks, because, program.uses_flag("fluid heated"), program.cards
        )

    def bind_needs(self, program: Program) -> dict[str, str] | None:
        """Ids for a program's needs and constants. What only limits ask for may stay unknown (NaN)."""
        names = {}
        used = {bound for step in program.steps for bound in step.inputs.values()} | {program.result}
        complete = True
        for item in program.needs:
            before = len(list(self.scope.collector)), self.lacks
            found = self.need(item.need)
            if not found:
                # What follows from a figure that is missing already is not missing itself.
                if (len(list(self.scope.collector)), self.lacks) != before:
                    complete = False
                elif item.name in used:
                    self.report_missing(item.need, f"1 {item.need.quantity.unit}")
                    complete = False
                found = self.scope.constant(
                    f"{self.owner}/{item.need.symbol} not given", float("nan"), item.need.quantity.dimension
                )
            names[item.name] = found
        for name, value in program.constants.items():
            names[name] = self.scope.constant(
                f"{self.owner}/{program.method.id}/{name}", value, program.constant_dimensions[name]
            )
        return names if complete else None

    def lay_out(self, program: Program, names: dict[str, str]) -> None:
        """Add a program's steps to the chain; ``names`` grows by their ids."""
        for step in program.steps:
            inputs = {local: names[bound] for local, bound in step.inputs.items()}
            name = self.step_name(program.method.id, step, inputs)
            kind = _kind_of_symbol(step.symbol)
            title = kind.name if kind is not None else step.symbol
            self.scope.step(
                name, step.symbol, title, self.owner, step.operation, inputs, step.card, kind, self.term.place
            )
            names[step.name] = name

    def step_name(self, method: str, step: ProgramStep, inputs: Mapping[str, str]) -> str:
        """`<term>/<card>/<symbol>`; where a card stands inside another on other figures, that is named too."""
        plain = f"{self.owner}/{step.card}/{step.symbol}"
        inside = f"{self.owner}/{step.card} in {method}/{step.symbol}"
        use = step.path.strip(":").replace(":", " of ")
        names = [plain, inside, f"{self.owner}/{step.card} as {use} in {method}/{step.symbol}"]
        if step.path and step.card in self.candidates:
            names = names[1:]
        for name in names:
            there = self.scope.steps.get(name)
            if there is None or (there.operation == step.operation and dict(there.inputs) == dict(inputs)):
                return name
        raise AssertionError(f"no free name for {plain}")

    def coefficient(self, card: Method, result: str) -> str:
        """The id of the film coefficient that a method's result leads to."""
        if card.gives == "h":
            return result
        if card.gives != "Nu" or self.situation is None:
            self.scope.collector.add(
                "method-not-for-film",
                self.term.place_of("method"),
                f"`{card.id}` gives {card.gives}, no film coefficient",
                expected="a method that gives Nu or h",
            )
            return ""
        inputs = {
            "Nu": result,
            "lam": self.property("conductivity", card.properties_at),
            "L_c": self.length(),
        }
        if not all(inputs.values()):
            return ""
        coefficient = self.scope.relation_step(
            f"{self.owner}/{card.id}/h",
            "h",
            "film coefficient",
            self.owner,
            parse_expression("Nu*lam/L_c"),
            inputs,
            card.id,
            "film coefficient",
        )
        return self.referred(card, coefficient)

    def with_method_factor(self, card: Method, coefficient: str) -> str:
        """The coefficient times the factor that the file puts on its method; as it is where it states none."""
        factor = self.scope.value(
            self.term.values.get("method factor"), "method factor", self.owner, "method factor"
        )
        if not factor:
            return coefficient
        return self.scope.relation_step(
            f"{self.owner}/{card.id}/h with factor",
            "h_F",
            "film coefficient with the method factor",
            self.owner,
            parse_expression("F_m*h"),
            {"F_m": factor, "h": coefficient},
            "method factor of the calculation file",
            "film coefficient",
        )

    def referred(self, card: Method, coefficient: str) -> str:
        """The coefficient on the metal's surface, where a deposit moves the surface that the fluid touches."""
        if self.deposit_surface is None:
            return coefficient
        wetted, metal = self.deposit_surface
        return self.scope.relation_step(
            f"{self.owner}/{card.id}/h on metal",
            "h_m",
            "film coefficient on the metal surface",
            self.owner,
            parse_expression("h*d_n/d"),
            {"h": coefficient, "d_n": wetted, "d": metal},
            "areas",
            "film coefficient",
        )

    def checks(self, program: Program, names: Mapping[str, str]) -> tuple[ChainCheck, ...]:
        """The limits of a method and of the cards it uses, each with bound inputs."""
        result: dict[str, ChainCheck] = {}
        for item in program.limits:
            inputs = {local: names[bound] for local, bound in item.inputs.items()}
            counting = tuple(
                type(one)(one.relation, {local: names[bound] for local, bound in one.inputs.items()})
                for one in item.counts_when
            )
            name = f"{self.owner} / {item.card} / {item.limit.id}"
            if name in result and result[name].inputs != inputs:
                name = f"{self.owner} / {item.card} for {item.path.strip(':')} / {item.limit.id}"
            result.setdefault(name, ChainCheck(name, self.owner, item.card, item.limit, inputs, counting))
        return tuple(result.values())

    def ancestors(self, wanted: Iterable[str]) -> tuple[ChainStep, ...]:
        """The steps that lead to the wanted ids, in the order they were laid out."""
        needed: set[str] = set()
        stack = list(wanted)
        while stack:
            name = stack.pop()
            if name in self.scope.steps and name not in needed:
                needed.add(name)
                stack.extend(self.scope.steps[name].inputs.values())
        return tuple(step for name, step in self.scope.steps.items() if name in needed)

    # -- the whole branch -----------------------------------------------------------------------------

    def branch(self, cross_check: bool = True) -> Branch | None:
        """The film with its method: forced by the file, or chosen by the situation's table.

        With ``cross_check`` the situation's other methods are laid out beside it.
        """
        assert self.situation is not None
        forced = self.term.texts.get("method", "")
        self.candidates = frozenset((*self.situation.methods, forced))
        branch = self.forced_branch(forced) if forced else self.chosen_branch()
        if branch is None or not cross_check:
            return branch
        alternatives, unusable = self.alternatives({candidate.method.id for candidate in branch.candidates})
        return replace(branch, alternatives=alternatives, unusable=unusable)

    def chosen_branch(self) -> Branch | None:
        """A film whose method the choice table finds."""
        assert self.situation is not None
        candidates: list[Candidate] = []
        rows: list[ChoiceRow] = []
        for choice in self.situation.choose:
            candidate = self.candidate(choice.use, choice.because)
            inputs = self.bind(choice.when, self.situation.choose_at) if choice.when is not None else {}
            if candidate is None or inputs is None:
                return None
            rows.append(ChoiceRow(choice.when, inputs, len(candidates), choice.because))
            candidates.append(candidate)
        steps = self.ancestors([bound for row in rows for bound in row.inputs.values()])
        return Branch(
            self.owner,
            "film",
            self.bulk,
            tuple(candidates),
            steps,
            tuple(rows),
            self.situation,
            self.stream.name if self.stream else "",
        )

    def forced_branch(self, method: str) -> Branch | None:
        """A film whose method the file names."""
        assert self.situation is not None
        if method not in self.situation.methods and not self._is_served(method):
            self.scope.open(
                f"{self.owner}/method",
                "check",
                f"The method {method} is not one of the situation {self.situation.id}.",
            )
        candidate = self.candidate(method, "named in the calculation file")
        if candidate is None:
            return None
        return Branch(
            self.owner,
            "film",
            self.bulk,
            (candidate,),
            (),
            (),
            self.situation,
            self.stream.name if self.stream else "",
            True,
        )

    def _is_served(self, method: str) -> bool:
        """Whether a book's own method is made for this situation."""
        assert self.situation is not None
        try:
            return self.situation.id in self.library.method(method).serves
        except Faults:
            return False

    def alternatives(self, laid_out: set[str]) -> tuple[tuple[Candidate, ...], dict[str, str]]:
        """The other methods of the situation; one that lacks a figure is named with the reason, no fault."""
        assert self.situation is not None
        found, unusable = [], {}
        for method in self.situation.methods:
            if method in laid_out:
                continue
            # A record lists neither what they assume nor where they use a figure.
            notes, missing, candidate = (self.scope.assumptions, self.scope.used_in), self.missing, None
            self.missing = set()
            with self.scope.trial() as trial:
                self.scope.assumptions, self.scope.used_in = dict(notes[0]), {}
                candidate = self.candidate(method, "cross-check", is_used=False)
                trial.keeps = candidate is not None
            (self.scope.assumptions, self.scope.used_in), self.missing = notes, missing
            if candidate is not None and not trial.faults:
                found.append(candidate)
            else:
                unusable[method] = "; ".join(fault.message for fault in trial.faults)
        return tuple(found), unusable


def _kind_of_symbol(symbol: str) -> QuantityKind | None:
    for kind in vocabulary().values():
        if kind.symbol == symbol and symbol in NAMED_GROUPS and kind.dimension == DIMENSIONLESS:
            return kind
    return next(
        (
            kind
            for kind in vocabulary().values()
            if kind.symbol == symbol and symbol in ("h", "R", "q", "q_chf", "dp")
        ),
        None,
    )


def _words(need: Need) -> bool:
    try:
        float(need.one_of[0])
    except ValueError:
        return True
    return False
