"""The films at both ends of the circuit: methods, stated coefficients and radiation, alone or side by side."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from calcbook.calcfile.calculation import Term, unknown_symbol
from calcbook.chain.films import FilmScope
from calcbook.chain.findings import factor_of_term
from calcbook.chain.fins import FinnedSide, check_finned_situation
from calcbook.chain.layers import Layers
from calcbook.chain.pressure import lay_out_pressure_drop
from calcbook.chain.scope import Scope
from calcbook.chain.surfaces import Shape, stated_surface
from calcbook.chain.terms import check_with_values, refuse_withdrawn
from calcbook.chain.types import SERVICE_FLAG, Branch, Candidate, ChainCheck, Group, StreamState
from calcbook.faults import Place, nearest_names, shown
from calcbook.formulas import Relation, RelationFault, dimension, parse_expression
from calcbook.library import Library, vocabulary
from calcbook.library.cards import Limit, Method, State
from calcbook.quantities import DIMENSIONLESS

STATED = Method(
    id="stated",
    title="Stated coefficient",
    gives="h",
    closes_on="nothing",
    properties_at="",
    needs=(),
    constants={},
    uses=(),
    tables={},
    lines=(),
    limits=(),
    accuracy=None,
    assumes=(),
    family="stated",
    sources=(),
    check_points=(),
    state=State("checked", "0.1"),
    notes=(),
    house=False,
    where=Place("calculation file"),
)


class Groups:
    """Lays out the films of a shape, those of one side as a group.

    Faults go to the scope's collector, and what has one is None.
    ``speeds`` are what stated speeds make mass flows with, for the heat balance alone; ``checks`` are the limits
    that belong to no method. Without ``cross_check`` the other methods of a situation are not laid out.
    """

    def __init__(
        self,
        scope: Scope,
        library: Library,
        streams: dict[str, StreamState],
        layers: Layers,
        cross_check: bool,
        rated: bool,
    ):
        self.scope = scope
        self.library = library
        self.streams = streams
        self.layers = layers
        self.shape: Shape = layers.shape
        self.finned: FinnedSide | None = layers.finned
        self.cross_check = cross_check
        self.rated = rated
        self.speeds: dict[str, dict[str, str]] = {}
        self.checks: list[ChainCheck] = []

    def group(self, term: Term, side: str) -> Group | None:
        """The films of a side: one term, or several side by side on one fluid."""
        surface = self.shape.wetted(side)
        parts = term.branches if term.kind == "parallel" else (term,)
        scope = self.scope
        for mark, quantity in (("T_s", "temperature"), ("q", "heat flux")):
            scope.dimensions[f"{term.name}/{mark}"] = vocabulary()[quantity].dimension
        branches = [self._branch(part, term.name, side, surface) for part in parts]
        films = [branch for branch in branches if branch is not None and branch.kind != "radiation"]
        if any(branch is None for branch in branches):
            return None
        if not films:
            films = [branch for branch in branches if branch is not None]
        bulk = films[0].reference
        for other in films[1:]:
            if other.reference != bulk:
                self.scope.collector.add(
                    "term-order",
                    term.place,
                    "films side by side act on one fluid",
                    expected="one stream or temperature for the films of a parallel term",
                )
        return Group(
            term.name, side, surface, bulk, tuple(branch for branch in branches if branch is not None)
        )

    def _branch(self, term: Term, group: str, side: str, surface: int) -> Branch | None:
        if term.kind == "radiation":
            return self._radiation(term, group)
        if "coefficient" in term.values or "resistance" in term.values:
            return self._stated_film(term, surface)
        return self._film(term, group, side)

    def _stream_of(self, term: Term) -> StreamState | None:
        name = term.texts.get("stream", "")
        if name in self.streams:
            return self.streams[name]
        if name and name not in self.scope.calculation.streams:
            self.scope.collector.add(
                "stream-unknown",
                term.place_of("stream"),
                f"there is no stream `{shown(name)}`",
                found=shown(name),
                expected=", ".join(self.scope.calculation.streams) or "a stream",
                nearest=nearest_names(name, self.scope.calculation.streams),
            )
        return None

    def _film(self, term: Term, group: str, side: str) -> Branch | None:
        expected = "stream and situation, or a stated coefficient"
        self._tell_missing(term, "film", ("stream", "situation"), expected, term.texts)
        stream = self._stream_of(term)
        name = term.texts.get("situation", "")
        if not name:
            return None
        if name not in self.library.names("situations"):
            self.scope.collector.add(
                "situation-unknown",
                term.place_of("situation"),
                f"there is no situation `{shown(name)}`",
                found=shown(name),
                expected=", ".join(self.library.names("situations")),
                nearest=nearest_names(name, self.library.names("situations")),
            )
            return None
        situation = self.library.situation(name)
        if self.shape.name not in situation.shapes or side not in situation.surfaces:
            self.scope.collector.add(
                "situation-not-here",
                term.place_of("situation"),
                f"`{name}` does not fit the {side} of a {self.shape.name}",
                found=f"{side} of a {self.shape.name}",
                expected=f"{' or '.join(situation.surfaces)} of a {' or '.join(situation.shapes)}",
            )
            return None
        method = term.texts.get("method", "")
        if method and method not in self.library.names("methods"):
            self.scope.collector.add(
                "method-unknown",
                term.place_of("method"),
                f"there is no method `{shown(method)}`",
                found=shown(method),
                expected=", ".join(situation.methods),
                nearest=nearest_names(method, (*situation.methods, *self.library.names("methods"))),
            )
            return None
        if stream is None:
            return None
        self.scope.cards[f"situation {situation.id}"] = situation.digest_text
        dimensions, moved = self._wetted(side)
        has_fins = self.finned is not None and self.finned.side == side
        if not self.shape.fins_failed and not check_finned_situation(self.scope, term, situation, has_fins):
            return None
        if self.finned is not None and has_fins:
            dimensions = {**dimensions, **self.finned.figures}
        film = FilmScope(
            self.scope, self.library, term, group, dimensions, stream, situation, deposit_surface=moved
        )
        check_with_values(film)
        branch = film.branch(self.cross_check)
        if branch is not None:
            drop, reason = lay_out_pressure_drop(film)
            branch = replace(branch, pressure_drop=drop, no_pressure_drop=reason)
        if branch is not None and stream.flow_kind == "speed" and not self.rated:
            self.speeds[stream.name] = film.flow_of_speed()
        self.checks += film.vapour_checks()
        for candidate in branch.candidates if branch is not None else ():
            refuse_withdrawn(self.scope, candidate.method.id, candidate.method.state, term)
        return branch

    def _tell_missing(
        self, term: Term, what: str, keys: tuple[str, ...], expected: str, stated: Mapping[str, object]
    ) -> None:
        """A fault for each key that a term must have and does not state."""
        for key in keys:
            if key not in stated:
                self.scope.collector.add(
                    "key-missing", term.place, f"the {what} `{term.name}` lacks `{key}`", expected=expected
                )

    def _wetted(self, side: str) -> tuple[dict[str, str], tuple[str, str] | None]:
        """Dimensions of the surface a film touches: a deposit that narrows moves it in service."""
        key = "inside diameter" if side == "inside" else "outside diameter"
        layers = self._narrowing(side)
        if not layers or self.shape.name != "tube":
            return self.shape.dimensions, None
        metal = wetted = self.shape.dimensions[key]
        sign = "-" if side == "inside" else "+"
        self.scope.constant(SERVICE_FLAG, 1.0)
        for term in layers:
            thickness = self.layers.thickness(term, side)
            if not thickness:
                return self.shape.dimensions, None
            wetted = self.scope.relation_step(
                f"{term.name}/wetted diameter",
                "d_n",
                f"{key} over {term.name} (s = 1 in service, 0 clean)",
                term.name,
                parse_expression(f"d {sign} 2*t*s"),
                {"d": wetted, "t": thickness, "s": SERVICE_FLAG},
                "deposit",
                key,
            )
        self.scope.assume(
            f"{layers[0].name}/narrows",
            f"The deposit moves the {side} surface that the fluid touches; the"
            " film is referred to the metal.",
            "narrows is answered by yes",
            layers[0].name,
        )
        return {**self.shape.dimensions, key: wetted}, (wetted, metal)

    def _narrowing(self, side: str) -> list[Term]:
        """The fouling terms on a side whose deposit narrows the flow."""
        return [
            term
            for term in self.scope.calculation.on_side(side)
            if term.deposit is not None and term.deposit.narrows
        ]

    # -- stated coefficients ------------------------------------------------------------------------

    def _stated_film(self, term: Term, surface: int) -> Branch | None:
        scope = self.scope
        stated_on = stated_surface(scope, self.shape, term, surface)
        if stated_on is None:
            return None
        coefficient = scope.value(
            term.values.get("coefficient"), "film coefficient", term.name, "coefficient"
        )
        if not coefficient and "resistance" in term.values:
            resistance = scope.value(term.values["resistance"], "area resistance", term.name, "resistance")
            if resistance:
                coefficient = scope.relation_step(
                    f"{term.name}/stated/h",
                    "h",
                    "film coefficient",
                    term.name,
                    parse_expression("1/R"),
                    {"R": resistance},
                    "stated",
                    "film coefficient",
                )
        if not coefficient:
            return None
        if term.scales_with is not None:
            coefficient = self._scaled(term, coefficient)
        else:
            self._say_kept(term)
        if stated_on != surface:
            self._say_referred(term, stated_on)
            coefficient = scope.relation_step(
                f"{term.name}/referred/h",
                "h",
                f"film coefficient on {self.shape.surfaces[surface].name}",
                term.name,
                parse_expression("h_stated*A_stated/A"),
                {
                    "h_stated": coefficient,
                    "A_stated": self.shape.surfaces[stated_on].area,
                    "A": self.shape.surfaces[surface].area,
                },
                "referred from the stated surface",
                "film coefficient",
            )
        bulk = scope.value(term.values.get("temperature"), "temperature", term.name, "temperature")
        stream = self._stream_of(term)
        if not bulk and stream is not None:
            bulk = stream.temperature
        checks = self._holds_for(term)
        film = FilmScope(scope, self.library, term, term.name, self.shape.dimensions, stream)
        steps = film.ancestors([coefficient])
        candidate = Candidate(STATED, steps, coefficient, checks, "stated in the calculation file", False, ())
        return Branch(
            term.name, "stated", bulk, (candidate,), is_forced=True, stream=stream.name if stream else ""
        )

    def _say_referred(self, term: Term, stated_on: int) -> None:
        """Say of a finned film stated on another surface that the efficiency of its fins still acts."""
        if term.fins is None:
            return
        self.scope.assume(
            f"{term.name}/referred",
            f"The coefficient of {term.name} is stated on the surface {self.shape.surfaces[stated_on].name} and referred"
            " by the areas; the efficiency of the fins acts on top of it.",
            "a stated coefficient is taken as that of the fluid: one that holds the fins already needs no fins here",
            term.name,
        )

    def _say_kept(self, term: Term) -> None:
        """Say of every case that restates what the fluid of a stated film does that its coefficient stays."""
        calculation = self.scope.calculation
        stream = calculation.streams.get(term.texts.get("stream", ""))
        state = [term.values.get("temperature")]
        state += [stream.temperature, stream.pressure, stream.flow] if stream is not None else []
        symbols = {value.symbol for value in state if value is not None}
        coefficient = term.values.get("coefficient") or term.values.get("resistance")
        for case, changes in calculation.cases.items():
            moved = [symbol for symbol in changes if symbol in symbols]
            if moved and coefficient is not None and coefficient.symbol not in changes:
                where = case if case in calculation.places else f"in case {case}"
                self.scope.assume(
                    f"{term.name}/kept in {case}",
                    f"{term.name} keeps its stated coefficient {where}, though {', '.join(moved)}"
                    f" {'is' if len(moved) == 1 else 'are'} another there.",
                    "no `scales with` says how it follows, and the case does not restate it",
                    term.name,
                )

    def _scaled(self, term: Term, coefficient: str) -> str:
        assert term.scales_with is not None
        inputs = self._bind_givens(term.scales_with, term, "scales with")
        if inputs is None:
            return coefficient
        try:
            dim = dimension(
                term.scales_with, {symbol: self.scope.dimensions[name] for symbol, name in inputs.items()}
            )
            if dim != DIMENSIONLESS:
                self.scope.collector.add(
                    "dimension-slip", term.place_of("scales with"), "`scales with` is a plain factor"
                )
        except RelationFault as error:
            self.scope.collector.add("dimension-slip", term.place_of("scales with"), error.message)
            return coefficient
        factor = self.scope.relation_step(
            factor_of_term(term),
            "x",
            "factor on the stated coefficient",
            term.name,
            term.scales_with,
            inputs,
            "calculation file",
            "ratio",
        )
        return self.scope.relation_step(
            f"{term.name}/scaled/h",
            "h",
            "film coefficient",
            term.name,
            parse_expression("h_stated*x"),
            {"h_stated": coefficient, "x": factor},
            "stated and scaled",
            "film coefficient",
        )

    def _bind_givens(self, relation: Relation, term: Term, key: str) -> dict[str, str] | None:
        inputs = {}
        for symbol in relation.symbols:
            name = self.scope.in_relation(symbol, term.name, f"{term.name}, {key}")
            if name not in self.scope.dimensions:
                self.scope.collector.take(
                    [unknown_symbol(symbol, term.place_of(key), self.scope.calculation.symbols)]
                )
                return None
            inputs[symbol] = name
        return inputs

    def _holds_for(self, term: Term) -> tuple[ChainCheck, ...]:
        """The range in which a stated coefficient holds, as a check on the symbol it names."""
        if term.holds_for is None:
            return ()
        low, high = term.holds_for
        name = self._held_figure(term, low.source)
        if not name:
            self.scope.collector.add(
                "symbol-unknown",
                low.place,
                f"`{shown(low.source)}` is neither a given nor derived",
                found=shown(low.source),
                expected=", ".join((*self.scope.calculation.givens, "flow", "temperature")),
                nearest=nearest_names(low.source, self.scope.calculation.givens),
            )
            return ()
        bounds = {}
        for key, value in (("low", low), ("high", high)):
            if value.quantity is None or value.quantity.dimension != self.scope.dimensions[name]:
                self.scope.collector.add(
                    "unit-dimension",
                    value.place,
                    "the range has another dimension than its figure",
                    found=value.text,
                )
                return ()
            bounds[key] = self.scope.above_site(value.quantity, f"{term.name}/holds for {key}", term.name)
        limit = Limit(
            "holds for",
            parse_expression("low <= x <= high"),
            "range",
            f"the stated value holds for {low.source} {low.text} to {high.text}",
            "calculation file",
            "as stated",
            term.place,
        )
        return (
            ChainCheck(
                f"{term.name} / stated / holds for", term.name, "stated", limit, {"x": name, **bounds}
            ),
        )

    def _held_figure(self, term: Term, key: str) -> str:
        stream = self.streams.get(term.texts.get("stream", ""))
        if stream is not None and key in ("flow", "temperature", "pressure"):
            return getattr(stream, key)
        name = self.scope.in_relation(key, term.name, f"{term.name}, holds for")
        return name if name in self.scope.dimensions else ""

    # -- radiation ----------------------------------------------------------------------------------

    def _radiation(self, term: Term, group: str) -> Branch | None:
        emissivity = self.scope.value(term.values.get("emissivity"), "emissivity", term.name, "emissivity")
        surroundings = self.scope.value(
            term.values.get("surroundings"), "temperature", term.name, "surroundings"
        )
        keys = ("emissivity", "surroundings")
        self._tell_missing(term, "radiation", keys, " and ".join(keys), term.values)
        if not emissivity or not surroundings:
            return None
        figures = {"emissivity": emissivity, "temperature": surroundings}
        film = FilmScope(self.scope, self.library, term, group, figures)
        method = term.texts.get("method", "radiation-linear-small")
        candidate = film.candidate(method, "radiation to large surroundings")
        if candidate is None:
            return None
        return Branch(term.name, "radiation", surroundings, (candidate,))
