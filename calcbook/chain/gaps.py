"""A gap between two walls: a fluid shut in between two surfaces, as a resistance that follows both of them.

The gap stands in the circuit as a layer does: what crosses it follows from the temperatures of its two sides, like
the conduction of a wall whose conductivity follows its temperatures. Its situation forms the groups of the shut-in
fluid, whose properties are taken at the mean of both sides, and chooses the method; radiation from side to side
stands beside it where both emissivities are stated.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

from calcbook.calcfile.calculation import Term
from calcbook.chain.films import FilmScope
from calcbook.chain.scope import Scope
from calcbook.chain.streams import fluid_source, provider
from calcbook.chain.types import Branch, Candidate, Chain, ChainStep, Gap, Layer, StreamState
from calcbook.faults import nearest_names, shown
from calcbook.formulas import parse_expression
from calcbook.library import Library, vocabulary
from calcbook.library.cards import Situation

# The side that a situation of an enclosure acts on, and the place where its fluid's properties are taken.
SIDE = "gap"
PLACE = "between"
RADIATION = "radiation-linear-parallel"
MEAN_PLACES = ("bulk", "film")
EMISSIVITIES = ("inner emissivity", "outer emissivity")


@dataclass
class GapScope(FilmScope):
    """What the methods of a gap may ask for: the fluid at the mean of both sides, and both sides.

    ``first`` and ``second`` are the ids of the temperatures of the inner and the outer side.
    """

    first: str = ""
    second: str = ""

    @property
    def surface(self) -> str:
        return self.first

    def temperature(self, place: str) -> str:
        """The mean of both sides as bulk and film, the inner side as surface."""
        if place not in MEAN_PLACES:
            return self.first if place == "surface" else super().temperature(place)
        return self.scope.relation_step(
            f"{self.owner}/{PLACE}/T",
            "T_m",
            "mean temperature of both sides",
            self.owner,
            parse_expression("(T_1 + T_2)/2"),
            {"T_1": self.first, "T_2": self.second},
            "mean of both sides",
            "temperature",
        )

    def property(self, name: str, place: str) -> str:
        if place not in MEAN_PLACES:
            return super().property(name, place)
        assert self.stream is not None
        text = self.stream.fluid.text
        if not self.stream.fluid.has(name) or (text.kind == "constants" and name == "expansion coefficient"):
            self._fault_property(name)
            return ""
        kind = vocabulary()[name]
        return self.scope.step(
            f"{self.owner}/{PLACE}/{name}",
            kind.symbol,
            f"{name} between both sides",
            self.owner,
            self.stream.operation(name),
            self.stream.state_inputs(self.temperature("bulk")),
            self.stream.fluid_name,
            kind,
        )

    def symbol(self, symbol: str, place: str) -> str:
        sides = {"T_1": self.first, "T_2": self.second}
        return sides[symbol] if symbol in sides else super().symbol(symbol, place)


def lay_out_gap(
    scope: Scope, library: Library, term: Term, shape: str, dimensions: dict[str, str], surface: int
) -> tuple[Layer | None, GapScope | None]:
    """A gap as a layer on a surface, with the scope that it was laid out in; None after a fault."""
    situation = _situation(scope, library, term, shape)
    first, second = f"{term.name}/T_1", f"{term.name}/T_2"
    scope.dimensions[first] = scope.dimensions[second] = vocabulary()["temperature"].dimension
    distance = scope.value(term.values.get("thickness"), "gap", term.name, "thickness")
    if "thickness" not in term.values:
        scope.collector.add(
            "need-missing",
            term.place,
            f"the gap `{term.name}` has no thickness",
            expected="thickness: … with its unit",
        )
    fluid = _fluid(scope, library, term)
    _check_emissivities(scope, term)
    if situation is None or fluid is None or not distance:
        return None, None
    figures = {**dimensions, "gap": distance}
    film = GapScope(scope, library, term, term.name, figures, fluid, situation, first=first, second=second)
    film.stream = replace(fluid, temperature=film.temperature("bulk"))
    branch = film.branch()
    if branch is None:
        return None, film
    scope.cards[f"situation {situation.id}"] = situation.digest_text
    ways = [replace(branch, kind="gap", reference=second, stream="")]
    radiation = _radiation(film)
    if radiation is not None:
        ways.append(radiation)
    return _Ways(film, tuple(ways)).layer(surface), film


@dataclass(frozen=True)
class _Ways:
    """The ways for heat across a gap, put together to one resistance."""

    film: GapScope
    ways: tuple[Branch, ...]

    def layer(self, surface: int) -> Layer:
        film, owner = self.film, self.film.owner
        assert film.stream is not None
        coefficients = tuple(self._coefficient(way) for way in self.ways)
        whole = coefficients[0]
        if len(coefficients) > 1:
            parts = {f"h_{number}": name for number, name in enumerate(coefficients, 1)}
            whole = self._step("h", "across the gap, side by side", " + ".join(parts), parts)
        resistance = film.scope.relation_step(
            f"{owner}/R",
            "R",
            "area resistance of the gap",
            owner,
            parse_expression("1/h"),
            {"h": whole},
            "coefficient across the gap",
            "area resistance",
        )
        wanted = [resistance]
        for way in self.ways:
            wanted += [bound for row in way.choice for bound in row.inputs.values()]
            wanted += [
                bound for part in way.candidates for check in part.checks for bound in check.inputs.values()
            ]
        steps = tuple(step for step in film.ancestors(wanted) if step.owner == owner)
        return Layer(
            owner,
            "gap",
            surface,
            resistance,
            steps,
            film.first,
            film.second,
            gap=Gap(film.stream, self.ways, coefficients),
        )

    def _coefficient(self, way: Branch) -> str:
        """The id of the coefficient of one way: of its method, or of the row of the choice that holds."""
        names = [candidate.coefficient for candidate in way.candidates]
        if len(set(names)) == 1:
            return names[0]
        inputs: dict[str, str] = {}
        text = ""
        for row in reversed(way.choice):
            symbol = f"h_{row.candidate + 1}"
            inputs[symbol] = names[row.candidate]
            if row.relation is None:
                text = symbol
                continue
            inputs |= row.inputs
            text = f"{symbol} if {row.relation.text} else ({text})"
        return self._step("h of the method", "across the gap, of the method that is chosen", text, inputs)

    def _step(self, key: str, title: str, text: str, inputs: dict[str, str]) -> str:
        relation = parse_expression(text)
        return self.film.scope.relation_step(
            f"{self.film.owner}/{key}",
            "h",
            f"film coefficient {title}",
            self.film.owner,
            relation,
            {symbol: inputs[symbol] for symbol in relation.symbols},
            "gap",
            "film coefficient",
        )


def _situation(scope: Scope, library: Library, term: Term, shape: str) -> Situation | None:
    """The situation of a gap; a fault where it is none of an enclosure or does not fit the shape."""
    name = term.texts.get("situation", "")
    known = [item for item in library.names("situations") if SIDE in library.situation(item).surfaces]
    if not name:
        scope.collector.add(
            "key-missing",
            term.place,
            f"the gap `{term.name}` lacks `situation`",
            expected=", ".join(known),
        )
        return None
    if name not in known:
        scope.collector.add(
            "situation-not-here" if name in library.names("situations") else "situation-unknown",
            term.place_of("situation"),
            f"`{shown(name)}` is no situation of a gap",
            found=shown(name),
            expected=", ".join(known),
            nearest=nearest_names(name, known),
        )
        return None
    situation = library.situation(name)
    if shape not in situation.shapes:
        scope.collector.add(
            "situation-not-here",
            term.place_of("situation"),
            f"`{name}` does not fit between the walls of a {shape}",
            found=f"gap of a {shape}",
            expected=f"gap of a {' or '.join(situation.shapes)}",
        )
        return None
    method = term.texts.get("method", "")
    if method and method not in library.names("methods"):
        scope.collector.add(
            "method-unknown",
            term.place_of("method"),
            f"there is no method `{shown(method)}`",
            found=shown(method),
            expected=", ".join(situation.methods),
            nearest=nearest_names(method, situation.methods),
        )
        return None
    return situation


def _fluid(scope: Scope, library: Library, term: Term) -> StreamState | None:
    """The fluid of a gap with its pressure; its temperature follows from both sides."""
    text = term.fluid
    if text is None:
        if "fluid" not in term.text_places:
            scope.collector.add(
                "key-missing", term.place, f"the gap `{term.name}` lacks `fluid`", expected="fluid: air"
            )
        return None
    pressure = scope.value(term.values.get("pressure"), "pressure", term.name, "pressure")
    if text.kind in ("name", "humid air") and "pressure" not in term.values:
        scope.collector.add(
            "key-missing",
            term.place,
            f"the fluid of the gap `{term.name}` has no pressure",
            expected="pressure: … with its unit",
        )
        return None
    if text.basis == "relative humidity":
        scope.collector.add(
            "key-conflict",
            text.place,
            "the relative humidity of a gap is not that of one temperature",
            found="relative humidity",
            expected="humidity ratio: the water that is shut in with the dry air",
        )
        return None
    source = fluid_source(scope, text, library)
    if source is None:
        return None
    fraction = ""
    if text.fraction is not None:
        kind = text.basis if text.kind in ("petroleum", "humid air") else "mass fraction"
        fraction = scope.value(text.fraction, kind, term.name, text.basis)
    return StreamState(
        name=term.name,
        fluid=source,
        fluid_name=provider(scope, source),
        phase=term.texts.get("phase", ""),
        temperature="",
        pressure=pressure,
        fraction=fraction,
        flow="",
        flow_kind="",
        mass_flow="",
        place=text.place,
    )


def _check_emissivities(scope: Scope, term: Term) -> None:
    """Both emissivities or none: radiation from side to side follows from both."""
    missing = [key for key in EMISSIVITIES if key not in term.values]
    if len(missing) == 1:
        scope.collector.add(
            "key-missing",
            term.place,
            f"the gap `{term.name}` lacks `{missing[0]}`",
            expected="both emissivities, or none of them",
        )


def _radiation(film: GapScope) -> Branch | None:
    """Radiation from side to side; none without emissivities, which is said."""
    scope, term = film.scope, film.term
    if not all(key in term.values for key in EMISSIVITIES):
        scope.assume(
            f"{term.name}/no radiation",
            f"No radiation crosses {term.name}.",
            "no emissivities of its sides are stated",
            term.name,
        )
        return None
    kinds = ("emissivity", "surroundings emissivity")
    figures = {
        kind: scope.value(term.values[key], kind, term.name, key)
        for key, kind in zip(EMISSIVITIES, kinds, strict=True)
    }
    across = replace(film, dimensions={**figures, "temperature": film.second}, situation=None, missing=set())
    candidate = across.candidate(RADIATION, "radiation between both sides")
    if candidate is None:
        return None
    return Branch(f"radiation across {term.name}", "radiation", film.second, (candidate,))


# --- on a solution ----------------------------------------------------------------------------------


def gaps(chain: Chain) -> list[tuple[Layer, Gap]]:
    """The gaps of a chain, from the inside to the outside."""
    return [
        (element, element.gap)
        for element in chain.elements
        if isinstance(element, Layer) and element.gap is not None
    ]


def unused_steps(gap: Gap, used: list[Candidate]) -> set[str]:
    """The ids of steps that only methods which are not used lead to."""
    kept = {step.id for candidate in used for step in candidate.steps}
    kept |= {step.id for way in gap.ways for step in way.choice_steps}
    return {step.id for way in gap.ways for part in way.candidates for step in part.steps} - kept


def with_method(chain: Chain, layer: Layer, way: Branch, other: Candidate) -> Chain:
    """The chain with another method in place of the one that a gap would take."""
    assert layer.gap is not None
    held = layer.gap.coefficients[layer.gap.ways.index(way)]
    known = {step.id for step in layer.steps}
    added = tuple(step for step in other.steps if step.owner == layer.name and step.id not in known)
    steps = tuple(_taking(step, held, other.coefficient) for step in layer.steps)
    changed = replace(layer, steps=_in_order((*added, *steps)))
    return replace(
        chain, elements=tuple(changed if element is layer else element for element in chain.elements)
    )


def _taking(step: ChainStep, held: str, other: str) -> ChainStep:
    """A step that takes another figure in place of one."""
    if held not in step.inputs.values():
        return step
    inputs = {local: other if bound == held else bound for local, bound in step.inputs.items()}
    return replace(step, inputs=inputs)


def _in_order(steps: tuple[ChainStep, ...]) -> tuple[ChainStep, ...]:
    """Steps sorted so that each stands after those that it takes."""
    waiting, ordered = list(steps), []
    while waiting:
        names = {step.id for step in waiting}
        ready = [step for step in waiting if not names & set(step.inputs.values())]
        assert ready, "the steps of a gap lead in a circle"
        ordered += ready
        waiting = [step for step in waiting if step not in ready]
    return tuple(ordered)
