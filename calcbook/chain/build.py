"""Calculation and cards to a chain: names, units, methods and order resolved, every fault collected."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from calcbook.calcfile import Calculation
from calcbook.calcfile.calculation import Derived, Term, Value, unknown_symbol
from calcbook.calcfile.empty import is_empty
from calcbook.calcfile.links import CURRENT
from calcbook.calcfile.specified import is_open
from calcbook.chain.circuit import Circuit
from calcbook.chain.duty import DutyLayout
from calcbook.chain.films import FilmScope
from calcbook.chain.findings import factor_of_term
from calcbook.chain.fins import FinnedSide, check_finned_situation, lay_out_fins, lay_out_fins_layer
from calcbook.chain.gaps import lay_out_gap
from calcbook.chain.growth import Grown, GrownDeposit, lay_out_growth, lay_out_thickness
from calcbook.chain.in_service import lay_out_in_service
from calcbook.chain.latent import BECAUSE, NO_FLOW, PHASE_CHANGE, SOME_FLOW, WHOLE_FLOW
from calcbook.chain.linked import check_linked_resistances
from calcbook.chain.petroleum import lay_out_cards
from calcbook.chain.pressure import asked_symbols, lay_out_pressure_drop
from calcbook.chain.saturation_loss import with_saturation_losses
from calcbook.chain.scope import Scope, unnamed_kind
from calcbook.chain.services import check_services
from calcbook.chain.specified import SpecifiedFouling
from calcbook.chain.streams import lay_out_stream, viscosity_checks
from calcbook.chain.surfaces import Shape, Wall, lay_out_shape
from calcbook.chain.types import (
    REASON,
    SERVICE_FLAG,
    Branch,
    Candidate,
    Chain,
    ChainCheck,
    ChainStep,
    Element,
    Group,
    Growing,
    Input,
    Layer,
    OpenFigure,
    StreamState,
    follows_temperature,
)
from calcbook.faults import Collector, Faults, Place, nearest_names, shown
from calcbook.formulas import Relation, RelationFault, dimension, parse_expression
from calcbook.library import Library, vocabulary
from calcbook.library.cards import Limit, Method, Situation, State, practice_limit
from calcbook.library.conductivity import ConductivityTable
from calcbook.quantities import DIMENSIONLESS, QuantityKind, as_kind

FOULING_WAYS = ", or deposit: {thickness: …, conductivity: …}, or growth: {model: …, after: …}"
WALL_CARDS = {"tube": "wall-cylinder", "plane": "wall-plane", "sphere": "wall-sphere"}


def build(
    calculation: Calculation, library: Library, collector: Collector, cross_check: bool = True
) -> Chain | None:
    """The chain of a calculation. Faults go to the collector; None when too little is left to build.

    Without ``cross_check`` the other methods of each situation, which only a record shows, are not laid out.
    """
    return _Builder(calculation, library, collector, cross_check).chain()


class _Builder:
    def __init__(self, calculation: Calculation, library: Library, collector: Collector, cross_check: bool):
        self.calculation = calculation
        self.library = library
        self.cross_check = cross_check
        self.collector = collector
        self.scope = Scope(calculation, collector)
        self.streams: dict[str, StreamState] = {}
        # What stated speeds make mass flows with, for the heat balance alone.
        self.speeds: dict[str, dict[str, str]] = {}
        self.checks: list[ChainCheck] = []
        self.early: frozenset[str] = frozenset()
        self.finned: FinnedSide | None = None
        self.open_figures: tuple[OpenFigure, ...] = ()
        self.specified = (
            SpecifiedFouling(self.scope, calculation.fouling_specified)
            if calculation.fouling_specified is not None
            else None
        )
        self.duty = (
            DutyLayout(self.scope, library, calculation.duty) if calculation.duty is not None else None
        )
        self.growing: dict[str, Grown | None] = {}

    def chain(self) -> Chain | None:
        calculation, scope = self.calculation, self.scope
        self._givens()
        self._derived()
        means = self.duty.means() if self.duty is not None else {}
        self.streams = {
            name: state
            for name, stream in calculation.streams.items()
            if (state := lay_out_stream(scope, stream, self.library, means.get(name, ""))) is not None
        }
        if self.specified is not None:
            self.checks += self.specified.checks()
            self.open_figures = self.specified.open_figures()
        has_duty = self.duty is not None and self.duty.balance(self.streams)
        self.checks += lay_out_cards(scope, self.library, self.streams)
        self.checks += viscosity_checks(scope, self.streams)
        terms = calculation.resistances
        walls = tuple(term for term in terms if term.kind == "wall")
        if calculation.geometry is None or not calculation.geometry.shape or not terms:
            return None
        shape = lay_out_shape(scope, calculation.geometry, walls)
        if not self._order_holds(terms) or shape is None:
            return None
        shape, self.finned = lay_out_fins(scope, terms, shape)
        self.checks += shape.checks
        self.early = frozenset(scope.steps)
        elements = self._elements(terms, shape)
        basis = (
            shape.surface_named(scope, calculation.report.u_on, calculation.report.u_on_place)
            if calculation.report.u_on
            else None
        )
        self._check_temperatures(elements)
        surfaces = {element.name: shape.surfaces[element.surface].name for element in elements or ()}
        check_linked_resistances(scope, calculation, surfaces)
        self._assumptions_of_engineer()
        check_services(calculation, self.collector)
        if self.collector or basis is None or elements is None:
            return None
        elements = with_saturation_losses(scope, elements, self.streams)
        laid_out = Circuit(scope, elements, shape, basis, self.streams, self.speeds)
        circuit, results = laid_out.lay_out()
        if self.specified is not None:
            before = frozenset(scope.steps)
            self.checks.append(self.specified.found(results["U"]))
            circuit = (*circuit, *(step for name, step in scope.steps.items() if name not in before))
        if has_duty:
            circuit, results = self._rated(elements, shape, basis, circuit, results)
        else:
            self.checks += self._heat_balance(elements, results, laid_out.streams)
        return self._finished(elements, shape, basis, circuit, results) if not self.collector else None

    def _rated(
        self,
        elements: tuple[Element, ...],
        shape: Shape,
        basis: int,
        circuit: tuple[ChainStep, ...],
        results: dict[str, str],
    ) -> tuple[tuple[ChainStep, ...], dict[str, str]]:
        """The circuit and its results with those of the duty."""
        assert self.duty is not None
        before = frozenset(self.scope.steps)
        if shape.per_metre:
            self.collector.add(
                "duty-incomplete",
                self.duty.duty.place,
                "the geometry gives the area of 1 m only",
                expected="length: … in the geometry",
            )
        if "tube passes" in shape.dimensions:
            self.duty.holds_passes(shape.dimensions["tube passes"])
        self.duty.rating(results, shape.surfaces[basis].area, elements)
        self.checks += self.duty.checks
        added = tuple(step for name, step in self.scope.steps.items() if name not in before)
        return (*circuit, *added), {**results, **self.duty.results}

    def _heat_balance(
        self, elements: tuple[Element, ...], results: dict[str, str], streams: Mapping[str, StreamState]
    ) -> list[ChainCheck]:
        """A caution where a stream would change its temperature by more than its stated mean can stand for, and
        where a saturated one would have to change more than its whole flow."""
        first, last = elements[0], elements[-1]
        assert isinstance(first, Group) and isinstance(last, Group)
        place = self.calculation.place
        change = practice_limit(
            "temperature change",
            "dT <= abs(T_in - T_out)/2",
            "caution",
            "beyond it the stated means must come from the arrangement of the flows (logarithmic mean), and one state"
            " hardly stands for the stream",
            place,
        )
        whole = practice_limit("phase change", WHOLE_FLOW, "caution", BECAUSE, place)
        flow = practice_limit("flow", SOME_FLOW, "stop", NO_FLOW, place)
        checks = []
        for name, bound in results.items():
            kind, _, stream = name.partition(" ")
            if kind == "dT":
                inputs = {"dT": bound, "T_in": first.bulk, "T_out": last.bulk}
                checks.append(_balance_check(stream, change, inputs))
            elif kind == PHASE_CHANGE:
                checks.append(_balance_check(stream, flow, {"m": streams[stream].mass_flow}))
                checks.append(_balance_check(stream, whole, {"x_pc": bound}))
        return checks

    def _finished(
        self,
        elements: tuple[Element, ...],
        shape: Shape,
        basis: int,
        circuit: tuple[ChainStep, ...],
        results: dict[str, str],
    ) -> Chain:
        scope = self.scope
        later = {step.id for element in elements for step in _steps_of(element)} | {
            step.id for step in circuit
        }
        in_service = lay_out_in_service(scope, any(self.growing.values()), results)
        static = tuple(step for step in scope.steps.values() if step.id in self.early or step.id not in later)
        self._mark_unused()
        return Chain(
            calculation=self.calculation,
            library=self.library,
            inputs={**self._typed_givens(), **scope.inputs},
            steps=static,
            elements=elements,
            surfaces=shape.surfaces,
            basis=basis,
            circuit=circuit,
            streams=self.streams,
            checks=tuple(self.checks),
            assumptions=tuple(scope.assumptions.values()),
            open_items=tuple(scope.open_items.values()),
            derived_kinds={
                symbol: scope.kinds[symbol] for symbol in self.calculation.derived if symbol in scope.kinds
            },
            used_in={symbol: tuple(dict.fromkeys(places)) for symbol, places in scope.used_in.items()},
            cards=dict(scope.cards),
            results=results,
            constants=dict(scope.constants),
            dimensions=dict(scope.dimensions),
            per_metre=shape.per_metre,
            restated={
                case: {symbol: self._restated_value(symbol, given.value) for symbol, given in changes.items()}
                for case, changes in self.calculation.cases.items()
            },
            open_figures=(*self.open_figures, *(self.duty.open_figures if self.duty is not None else ())),
            growing=self._growing_terms(),
            in_service=in_service,
        )

    def _growing_terms(self) -> tuple[Growing, ...]:
        """The terms whose resistance grows, in the order of the file."""
        return tuple(
            Growing(term.name, term.growth.model, grown.time, grown.fouling, grown.needs)
            for term in self.calculation.resistances
            if term.growth is not None and (grown := self.growing.get(term.name)) is not None
        )

    def _restated_value(self, symbol: str, value: Value) -> float:
        assert value.quantity is not None
        kind = self.scope.kinds.get(symbol)
        return as_kind(value.quantity, kind).value if kind is not None else value.quantity.value

    # -- givens and derived -------------------------------------------------------------------------

    def _givens(self) -> None:
        for symbol, given in self.calculation.givens.items():
            assert given.value.quantity is not None
            self.scope.dimensions[f"given/{symbol}"] = given.value.quantity.dimension
            self.scope.check_source(given.value, f"given/{symbol}")
            if given.link is not None and given.link.state != CURRENT:
                self.scope.open(
                    f"given/{symbol}/link",
                    "link",
                    f"{symbol} takes {given.link.result} from"
                    f" {given.link.calculation} revision {given.link.revision}: {given.link.state}.",
                )
        for case, changes in self.calculation.cases.items():
            for symbol, given in changes.items():
                self.scope.check_source(given.value, f"case {case}/{symbol}")

        for number, criterion in enumerate(self.calculation.acceptance, 1):
            if criterion.limit.is_literal and is_empty(criterion.source):
                self.scope.open(
                    f"criterion {number}/source",
                    "source",
                    f"The limit of criterion {number} ({criterion.text}) has no source.",
                )
        stated = self.calculation.uncertainty
        for one in stated.correlations if stated is not None else ():
            if is_empty(one.source):
                self.scope.open(
                    f"correlation {one.first} {one.second}/source",
                    "source",
                    f"The correlation of {one.first} and {one.second} has no source.",
                )

    def _typed_givens(self) -> dict[str, Input]:
        """Every given as an input of the chain, with the kind that its uses gave it."""
        typed = {}
        for symbol, given in self.calculation.givens.items():
            quantity = given.value.quantity
            assert quantity is not None
            kind = self.scope.kinds.get(symbol) or _kind_of_dimension(quantity.dimension, quantity.reading)
            figure = as_kind(quantity, kind).value if symbol in self.scope.kinds else quantity.value
            typed[f"given/{symbol}"] = Input(
                f"given/{symbol}",
                symbol,
                given.meaning,
                kind,
                figure,
                given.value.text,
                given.source,
                given.place,
                True,
            )
        return typed

    def _derived(self) -> None:
        """Derived quantities in the order of what they need; a circle is told in full."""
        waiting = dict(self.calculation.derived)
        while waiting:
            ready = [
                item
                for item in waiting.values()
                if not any(symbol in waiting for symbol in item.relation.symbols)
            ]
            if not ready:
                self._report_circle(waiting)
                return
            for item in ready:
                del waiting[item.symbol]
                self._derived_step(item)

    def _report_circle(self, waiting: dict[str, Derived]) -> None:
        start = min(waiting.values(), key=lambda item: item.place)
        path = [start.symbol]
        while True:
            following = next(symbol for symbol in waiting[path[-1]].relation.symbols if symbol in waiting)
            if following in path:
                path = [*path[path.index(following) :], following]
                break
            path.append(following)
        self.collector.add(
            "derived-circular",
            waiting[path[0]].place,
            "derived quantities need each other in a circle",
            found=" needs ".join(path),
            expected="relations that end at givens",
        )

    def _derived_step(self, item: Derived) -> None:
        inputs = {}
        for symbol in item.relation.symbols:
            inputs[symbol] = self.scope.in_relation(symbol, "derived", f"derived {item.symbol}")
            if not inputs[symbol]:
                self.collector.take([unknown_symbol(symbol, item.place, self.calculation.symbols)])
                return
        if any(name not in self.scope.dimensions for name in inputs.values()):
            return
        self.scope.relation_step(
            f"derived/{item.symbol}",
            item.symbol,
            item.meaning,
            "derived",
            item.relation,
            inputs,
            "calculation file",
            place=item.place,
        )

    def _mark_unused(self) -> None:
        for symbol in self.calculation.givens:
            if symbol not in self.scope.used_in:
                self.scope.used_in[symbol] = []

    def _history(self) -> None:
        """That the revision history, where there is one, has the revision of the title block with its date."""
        calculation = self.calculation
        name = f"revision {calculation.revision} / history"
        own = [one for one in calculation.revisions if one.revision == calculation.revision]
        if calculation.revisions and not own:
            self.scope.open(
                name, "revision", f"Revision {calculation.revision} does not stand in the revision history."
            )
        elif len(own) > 1:
            self.scope.open(
                name,
                "revision",
                f"Revision {calculation.revision} stands {len(own)} times in the revision history.",
            )
        elif own and own[-1].date != calculation.date:
            self.scope.open(
                name,
                "revision",
                f"The title block dates revision {calculation.revision} {calculation.date}, the revision history"
                f" {own[-1].date}.",
            )

    def _assumptions_of_engineer(self) -> None:
        self._history()
        for revision in self.calculation.revisions:
            if is_empty(revision.reason):
                self.scope.open(
                    f"revision {revision.revision} / {REASON}",
                    "revision",
                    f"The reason of revision {revision.revision} is to be written.",
                )
        for item in self.calculation.assumptions:
            if not item.is_verified:
                self.scope.open(
                    f"assumption {item.id}", "assumption", f"Assumption {item.id} is not verified."
                )

    # -- order of terms -----------------------------------------------------------------------------

    def _order_holds(self, terms: tuple[Term, ...]) -> bool:
        before = len(list(self.collector))
        ends = ("film", "parallel", "radiation")
        if len(terms) < 2 or terms[0].kind not in ends:
            self.collector.add(
                "film-missing",
                terms[0].place,
                "no film stands on the inside",
                found=terms[0].kind or terms[0].name,
                expected="the first term of kind film",
            )
        if len(terms) < 2 or terms[-1].kind not in ends:
            self.collector.add(
                "film-missing",
                terms[-1].place,
                "no film stands on the outside",
                found=terms[-1].kind or terms[-1].name,
                expected="the last term of kind film",
            )
        walls = [index for index, term in enumerate(terms) if term.kind == "wall"]
        for index, term in enumerate(terms[1:-1], 1):
            if term.kind in ends:
                self.collector.add(
                    "term-order",
                    term.place,
                    f"`{term.name}` stands between other terms",
                    found=term.kind,
                    expected="films and radiation first or last only",
                )
            elif term.kind == "fouling" and walls and walls[0] < index < walls[-1]:
                self.collector.add(
                    "term-order",
                    term.place,
                    f"`{term.name}` lies between two walls",
                    expected="fouling between a film and the wall next to it",
                )
            elif term.kind in ("contact", "gap") and not (walls and walls[0] < index < walls[-1]):
                self.collector.add(
                    "term-order",
                    term.place,
                    f"`{term.name}` does not lie between two walls",
                    expected=f"a {term.kind} between two walls",
                )
            elif term.kind == "gap" and terms[index + 1].kind == "gap":
                self.collector.add(
                    "term-order",
                    terms[index + 1].place,
                    f"no wall lies between `{term.name}` and `{terms[index + 1].name}`",
                    expected="a wall between two gaps",
                )
        return len(list(self.collector)) == before

    # -- elements -----------------------------------------------------------------------------------

    def _elements(self, terms: tuple[Term, ...], shape: Shape) -> tuple[Element, ...] | None:
        included = {name for term in terms for name in term.includes}
        known = {term.name for term in terms}
        for term in terms:
            for name in term.includes:
                if name not in known:
                    self.collector.add(
                        "term-unknown",
                        term.place_of("includes"),
                        f"there is no term `{shown(name)}`",
                        found=shown(name),
                        expected=", ".join(sorted(known)),
                        nearest=nearest_names(name, known),
                    )
        elements: list[Element | None] = []
        at = 0
        for index, term in enumerate(terms):
            if index in (0, len(terms) - 1):
                elements.append(self._group(term, shape, "inside" if index == 0 else "outside"))
                continue
            wall = next((wall for wall in shape.walls if wall.term is term), None)
            if wall is not None:
                at = wall.first + 1
            if term.name in included:
                self.scope.assume(
                    f"{term.name}/included",
                    f"{term.name} is not counted: a stated coefficient includes it.",
                    "stated in the calculation file",
                    term.name,
                )
                continue
            if term.kind == "gap":
                elements.append(self._gap(term, shape, at))
                continue
            elements.append(self._wall(wall, shape) if wall is not None else self._layer(term, shape, at))
        if any(element is None for element in elements):
            return None
        return self._with_fins(tuple(element for element in elements if element is not None), shape)

    def _with_fins(self, elements: tuple[Element, ...], shape: Shape) -> tuple[Element, ...] | None:
        """The fins put between the wall and the fouling of the film that has them."""
        finned = self.finned
        if finned is None:
            return elements
        inside = finned.side == "inside"
        group = elements[0] if inside else elements[-1]
        assert isinstance(group, Group)
        part = elements[1:] if inside else elements[-2::-1]
        fouling: list[Layer] = []
        for element in part:
            if not isinstance(element, Layer) or element.kind != "fouling":
                break
            fouling.append(element)
        for element in part[len(fouling) :]:
            if not isinstance(element, Layer) or element.kind == "wall":
                break
            if element.kind == "fouling":
                term = next(term for term in self.calculation.resistances if term.name == element.name)
                self.collector.add(
                    "term-order",
                    term.place,
                    f"`{element.name}` does not lie next to the film with fins",
                    expected="only fouling between the fins and their film",
                )
                return None
        layer = self._fins_layer(finned, shape, group, fouling)
        if layer is None:
            return None
        place = 1 + len(fouling) if inside else len(elements) - 1 - len(fouling)
        return (*elements[:place], layer, *elements[place:])

    def _fins_layer(
        self, finned: FinnedSide, shape: Shape, group: Group, fouling: list[Layer]
    ) -> Layer | None:
        first, second = f"{finned.name}/T_1", f"{finned.name}/T_2"
        if not {"material", "conductivity"} & {*finned.term.texts, *finned.term.values}:
            self.collector.add(
                "need-missing",
                finned.term.place,
                f"the {finned.name} have no conductivity",
                expected="material: <card> or conductivity: … W/(m K)",
            )
            return None
        conductivity, table = self._conductivity(finned.term, first, second)
        if not conductivity:
            return None
        layer = lay_out_fins_layer(
            self.scope,
            self.library,
            finned,
            shape,
            group,
            fouling,
            conductivity,
            (first, second) if table is not None else ("", ""),
        )
        if layer is None or table is None:
            return layer
        self.scope.assume(
            f"{finned.name}/conductivity",
            "The fins have one conductivity: the mean of their card between the root"
            " and the mean temperature of the finned surface.",
            "a fin card takes a constant conductivity",
            finned.name,
        )
        return replace(layer, checks=layer.checks + self._material_checks(finned.term, table, first, second))

    def _surface(self, term: Term, shape: Shape, default: int) -> int | None:
        name = term.texts.get("on", "")
        if name:
            return shape.surface_named(self.scope, name, term.place_of("on"))
        self.scope.assume(
            f"{term.name}/on",
            f"{term.name} acts on the surface {shape.surfaces[default].name}.",
            "the surface next to it; no other is stated",
            term.name,
        )
        return default

    def _layer(self, term: Term, shape: Shape, at: int) -> Layer | None:
        default = self._wetted_surface(term, shape) if term.kind == "fouling" else at
        surface = self._surface(term, shape, default if default is not None else at)
        if surface is None:
            return None
        if term.growth is not None:
            return self._growing_layer(term, shape, surface, at)
        if term.deposit is not None:
            return self._deposit(term, shape, surface)
        if self.specified is not None and is_open(term):
            return self._specified_layer(self.specified, term, shape, surface)
        resistance = self.scope.value(
            term.values.get("resistance"), "area resistance", term.name, "resistance"
        )
        if not resistance and "coefficient" in term.values:
            coefficient = self.scope.value(
                term.values["coefficient"], "film coefficient", term.name, "coefficient"
            )
            if coefficient:
                resistance = self.scope.relation_step(
                    f"{term.name}/R",
                    "R",
                    "area resistance",
                    term.name,
                    parse_expression("1/h"),
                    {"h": coefficient},
                    "stated",
                    "area resistance",
                )
        if not resistance:
            if "resistance" not in term.values and "coefficient" not in term.values:
                self.collector.add(
                    "need-missing",
                    term.place,
                    f"`{term.name}` has no resistance",
                    expected="resistance: … m^2 K/W" + (FOULING_WAYS if term.kind == "fouling" else ""),
                )
            return None
        return Layer(term.name, term.kind, surface, resistance)

    def _specified_layer(
        self, specified: SpecifiedFouling, term: Term, shape: Shape, surface: int
    ) -> Layer | None:
        """A fouling layer that takes its share of what the file specifies for the whole unit."""
        basis = shape.names().get(self.calculation.report.u_on)
        if basis is None:
            return None
        areas = shape.surfaces
        resistance = specified.resistance(term, areas[basis].area, areas[surface].area)
        return Layer(term.name, term.kind, surface, resistance) if resistance else None

    def _wetted_surface(self, term: Term, shape: Shape) -> int | None:
        """The finned surface for the fouling that lies on it, else None."""
        terms = self.calculation.resistances
        walls = [index for index, other in enumerate(terms) if other.kind == "wall"]
        if self.finned is None or not walls:
            return None
        side = "inside" if terms.index(term) < walls[0] else "outside"
        return shape.wetted(side) if side == self.finned.side else None

    def _growing_layer(self, term: Term, shape: Shape, surface: int, at: int) -> Layer | None:
        """A fouling layer whose resistance its growth card gives; a deposit beside it gives it a thickness."""
        grown = self._grown(term)
        if grown is None:
            return None
        checks = grown.checks
        if term.deposit is not None:
            if self._narrows_fins(term, shape):
                return None
            if surface != at:
                self.collector.add(
                    "key-conflict",
                    term.deposit.place,
                    "the thickness of a deposit follows from the resistance on the surface that it lies on",
                    found=f"on: {shape.surfaces[surface].name}",
                    expected=f"on: {shape.surfaces[at].name}, or no `deposit`",
                )
                return None
            deposit = self._grown_deposit(term, grown, shape, at)
            if deposit is None:
                return None
            checks += deposit.checks
        return Layer(term.name, term.kind, surface, grown.resistance, checks=checks)

    def _grown(self, term: Term) -> Grown | None:
        """The growth of a term, laid out when it is first asked for."""
        if term.name not in self.growing:
            self.growing[term.name] = lay_out_growth(self.scope, self.library, term)
            self._evaluate_first(term)
        return self.growing[term.name]

    def _evaluate_first(self, term: Term) -> None:
        """What has grown follows from the file alone, though films take it: it is evaluated before them."""
        self.early |= {step.id for step in self.scope.steps.values() if step.owner == term.name}

    def _thickness(self, term: Term, shape: Shape, side: str) -> str:
        """The id of a deposit's thickness: as stated, or from the resistance that has grown; empty after a fault."""
        assert term.deposit is not None
        if term.growth is None:
            return self.scope.value(term.deposit.thickness, "thickness", term.name, "thickness")
        grown = self._grown(term)
        if grown is None:
            return ""
        deposit = self._grown_deposit(term, grown, shape, shape.bare(side))
        return deposit.thickness if deposit is not None else ""

    def _grown_deposit(self, term: Term, grown: Grown, shape: Shape, surface: int) -> GrownDeposit | None:
        deposit = lay_out_thickness(self.scope, self.library, term, grown, shape, surface)
        self._evaluate_first(term)
        return deposit

    def _narrows_fins(self, term: Term, shape: Shape) -> bool:
        """Whether a deposit is to narrow the flow over fins, which is a fault."""
        assert term.deposit is not None
        if not term.deposit.narrows or self._wetted_surface(term, shape) is None:
            return False
        self.collector.add(
            "key-conflict",
            term.deposit.place,
            "a deposit on fins cannot narrow the flow",
            found="narrows: yes",
            expected="narrows: no on a finned surface",
        )
        return True

    def _deposit(self, term: Term, shape: Shape, surface: int) -> Layer | None:
        assert term.deposit is not None
        if self._narrows_fins(term, shape):
            return None
        thickness = self.scope.value(term.deposit.thickness, "thickness", term.name, "thickness")
        conductivity = self.scope.value(
            term.deposit.conductivity, "wall conductivity", term.name, "conductivity"
        )
        if not thickness or not conductivity:
            return None
        inputs = {"t": thickness, "k": conductivity}
        if shape.name != "tube" or not shape.surfaces[surface].diameter:
            text = "t/k"
        elif surface == 0:
            text, inputs["d_i"] = "d_i*ln(d_i/(d_i - 2*t))/(2*k)", shape.surfaces[0].diameter
        else:
            text, inputs["d_o"] = "d_o*ln((d_o + 2*t)/d_o)/(2*k)", shape.surfaces[surface].diameter
        resistance = self.scope.relation_step(
            f"{term.name}/R",
            "R_f",
            "area resistance of the deposit",
            term.name,
            parse_expression(text),
            inputs,
            "deposit",
            "area resistance",
        )
        checks: tuple[ChainCheck, ...] = ()
        if "d_i" in inputs:
            limit = practice_limit(
                "bore", "2*t < d_i", "stop", "the deposit leaves a bore", term.deposit.place
            )
            checks = (
                ChainCheck(
                    f"{term.name} / deposit / bore",
                    term.name,
                    "deposit",
                    limit,
                    {"t": thickness, "d_i": inputs["d_i"]},
                ),
            )
        return Layer(term.name, term.kind, surface, resistance, checks=checks)

    def _gap(self, term: Term, shape: Shape, at: int) -> Layer | None:
        layer, film = lay_out_gap(self.scope, self.library, term, shape.name, shape.dimensions, at)
        if film is not None and film.situation is not None:
            self._check_with(term, film.situation, film)
        for way in layer.gap.ways if layer is not None and layer.gap is not None else ():
            for candidate in way.candidates:
                self._card_state(
                    candidate.method.id, candidate.method.state.status, candidate.method.state.successor, term
                )
        return layer

    # -- walls --------------------------------------------------------------------------------------

    def _wall(self, wall: Wall, shape: Shape) -> Layer | None:
        term, scope = wall.term, self.scope
        stated = scope.value(term.values.get("resistance"), "area resistance", term.name, "resistance")
        if stated:
            surface = self._surface(term, shape, wall.first + 1)
            return Layer(term.name, "wall", surface, stated) if surface is not None else None
        first, second = f"{term.name}/T_1", f"{term.name}/T_2"
        conductivity, table = self._conductivity(term, first, second)
        if not conductivity:
            return None
        program = self.library.program(WALL_CARDS[shape.name])
        figures = {
            "inside diameter": shape.surfaces[wall.first].diameter,
            "outside diameter": shape.surfaces[wall.first + 1].diameter,
            "thickness": wall.thickness,
            "wall conductivity": conductivity,
        }
        film = FilmScope(scope, self.library, term, term.name, figures)
        names = film.bind_needs(program)
        if names is None:
            return None
        film.lay_out(program, names)
        scope.cards |= {f"method {card.id}": card.digest_text for card in program.cards}
        resistance = names[program.result]
        steps = film.ancestors([resistance])
        own = tuple(step for step in steps if step.owner == term.name)
        checks = film.checks(program, names) + (
            self._material_checks(term, table, first, second) if table else ()
        )
        if table is None:
            return Layer(term.name, "wall", wall.first + 1, resistance, checks=checks)
        return Layer(term.name, "wall", wall.first + 1, resistance, own, first, second, table.id, checks)

    def _conductivity(self, term: Term, first: str, second: str) -> tuple[str, ConductivityTable | None]:
        """The id of a wall's conductivity, and its table where it follows the wall's temperatures."""
        if "conductivity" in term.values:
            return self.scope.value(
                term.values["conductivity"], "wall conductivity", term.name, "conductivity"
            ), None
        name = term.texts.get("material", "")
        if not name:
            self.collector.add(
                "need-missing",
                term.place,
                f"the wall `{term.name}` has no conductivity",
                expected="material: <card> or conductivity: … W/(m K)",
            )
            return "", None
        try:
            card = self.library.material(name)
        except Faults as faults:
            for fault in faults.faults:
                place = term.place_of("material") if fault.code == "material-unknown" else fault.place
                self.collector.take([replace(fault, place=place)])
            return "", None
        self.scope.cards[f"material {card.id}"] = card.digest_text
        self._card_state(card.id, card.state.status, card.state.successor, term)
        table = ConductivityTable(card)
        self.scope.dimensions[first] = self.scope.dimensions[second] = vocabulary()["temperature"].dimension
        column = self.scope.constant(
            f"{term.name}/table.k", table, vocabulary()["wall conductivity"].dimension
        )
        conductivity = self.scope.relation_step(
            f"{term.name}/{card.id}/k",
            "k",
            "mean conductivity",
            term.name,
            parse_expression("mean(table.k, T_1, T_2)"),
            {"table.k": column, "T_1": first, "T_2": second},
            card.id,
            "wall conductivity",
        )
        return conductivity, table

    def _material_checks(
        self, term: Term, table: ConductivityTable, first: str, second: str
    ) -> tuple[ChainCheck, ...]:
        card = self.library.material(table.id)
        low, high = table.limits
        if card.outside == "hold last" and low == high:
            return ()
        source = card.sources[0]
        checks = []
        for symbol, bound in (("T_1", first), ("T_2", second)):
            that = parse_expression(f"{low!r}*K_1 <= {symbol} <= {high!r}*K_1")
            unit = self.scope.constant("one kelvin", 1.0, vocabulary()["temperature"].dimension)
            limit = Limit(
                f"table {symbol}",
                that,
                "range",
                "conductivity is tabulated within these temperatures",
                source.cite,
                source.standing,
                card.where,
            )
            checks.append(
                ChainCheck(
                    f"{term.name} / {card.id} / table {symbol}",
                    term.name,
                    card.id,
                    limit,
                    {symbol: bound, "K_1": unit},
                )
            )
        return tuple(checks)

    def _card_state(self, card: str, status: str, successor: str, term: Term) -> None:
        if status == "withdrawn":
            self.collector.add(
                "card-withdrawn", term.place, f"the card {card} is withdrawn", expected=successor
            )

    # -- groups -------------------------------------------------------------------------------------

    def _group(self, term: Term, shape: Shape, side: str) -> Group | None:
        surface = shape.wetted(side)
        parts = term.branches if term.kind == "parallel" else (term,)
        scope = self.scope
        for mark, quantity in (("T_s", "temperature"), ("q", "heat flux")):
            scope.dimensions[f"{term.name}/{mark}"] = vocabulary()[quantity].dimension
        branches = [self._branch(part, term.name, shape, side, surface) for part in parts]
        films = [branch for branch in branches if branch is not None and branch.kind != "radiation"]
        if any(branch is None for branch in branches):
            return None
        if not films:
            films = [branch for branch in branches if branch is not None]
        bulk = films[0].reference
        for other in films[1:]:
            if other.reference != bulk:
                self.collector.add(
                    "term-order",
                    term.place,
                    "films side by side act on one fluid",
                    expected="one stream or temperature for the films of a parallel term",
                )
        return Group(
            term.name, side, surface, bulk, tuple(branch for branch in branches if branch is not None)
        )

    def _branch(self, term: Term, group: str, shape: Shape, side: str, surface: int) -> Branch | None:
        if term.kind == "radiation":
            return self._radiation(term, group)
        if "coefficient" in term.values or "resistance" in term.values:
            return self._stated_film(term, shape, surface)
        return self._film(term, group, shape, side)

    def _stream_of(self, term: Term) -> StreamState | None:
        name = term.texts.get("stream", "")
        if name in self.streams:
            return self.streams[name]
        if name and name not in self.calculation.streams:
            self.collector.add(
                "stream-unknown",
                term.place_of("stream"),
                f"there is no stream `{shown(name)}`",
                found=shown(name),
                expected=", ".join(self.calculation.streams) or "a stream",
                nearest=nearest_names(name, self.calculation.streams),
            )
        return None

    def _film(self, term: Term, group: str, shape: Shape, side: str) -> Branch | None:
        for key in ("stream", "situation"):
            if key not in term.texts:
                self.collector.add(
                    "key-missing",
                    term.place,
                    f"the film `{term.name}` lacks `{key}`",
                    expected="stream and situation, or a stated coefficient",
                )
        stream = self._stream_of(term)
        name = term.texts.get("situation", "")
        if not name:
            return None
        if name not in self.library.names("situations"):
            self.collector.add(
                "situation-unknown",
                term.place_of("situation"),
                f"there is no situation `{shown(name)}`",
                found=shown(name),
                expected=", ".join(self.library.names("situations")),
                nearest=nearest_names(name, self.library.names("situations")),
            )
            return None
        situation = self.library.situation(name)
        if shape.name not in situation.shapes or side not in situation.surfaces:
            self.collector.add(
                "situation-not-here",
                term.place_of("situation"),
                f"`{name}` does not fit the {side} of a {shape.name}",
                found=f"{side} of a {shape.name}",
                expected=f"{' or '.join(situation.surfaces)} of a {' or '.join(situation.shapes)}",
            )
            return None
        method = term.texts.get("method", "")
        if method and method not in self.library.names("methods"):
            self.collector.add(
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
        dimensions, moved = self._wetted(shape, side)
        has_fins = self.finned is not None and self.finned.side == side
        if not shape.fins_failed and not check_finned_situation(self.scope, term, situation, has_fins):
            return None
        if self.finned is not None and has_fins:
            dimensions = {**dimensions, **self.finned.figures}
        film = FilmScope(
            self.scope, self.library, term, group, dimensions, stream, situation, deposit_surface=moved
        )
        self._check_with(term, situation, film)
        branch = film.branch(self.cross_check)
        if branch is not None:
            drop, reason = lay_out_pressure_drop(film)
            branch = replace(branch, pressure_drop=drop, no_pressure_drop=reason)
        if branch is not None and stream.flow_kind == "speed" and self.duty is None:
            self.speeds[stream.name] = film.flow_of_speed()
        self.checks += film.vapour_checks()
        for candidate in branch.candidates if branch is not None else ():
            self._card_state(
                candidate.method.id, candidate.method.state.status, candidate.method.state.successor, term
            )
        return branch

    def _wetted(self, shape: Shape, side: str) -> tuple[dict[str, str], tuple[str, str] | None]:
        """Dimensions of the surface a film touches: a deposit that narrows moves it in service."""
        key = "inside diameter" if side == "inside" else "outside diameter"
        layers = self._narrowing(side)
        if not layers or shape.name != "tube":
            return shape.dimensions, None
        metal = wetted = shape.dimensions[key]
        sign = "-" if side == "inside" else "+"
        self.scope.constant(SERVICE_FLAG, 1.0)
        for term in layers:
            thickness = self._thickness(term, shape, side)
            if not thickness:
                return shape.dimensions, None
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
        return {**shape.dimensions, key: wetted}, (wetted, metal)

    def _narrowing(self, side: str) -> list[Term]:
        """The fouling terms on a side whose deposit narrows the flow."""
        return [
            term
            for term in self.calculation.on_side(side)
            if term.deposit is not None and term.deposit.narrows
        ]

    def _check_with(self, term: Term, situation: Situation, film: FilmScope) -> None:
        """Every entry of `with:` must be asked for by the situation or one of its methods."""
        if not term.with_values:
            return
        asked = {need.symbol for need in situation.needs} | {need.quantity.name for need in situation.needs}
        methods = [term.texts["method"]] if "method" in term.texts else situation.methods
        for method in methods:
            for item in self.library.program(method).needs:
                asked |= {item.need.symbol, item.need.quantity.name}
        asked |= asked_symbols(film)
        for key, value in term.with_values.items():
            if key not in asked:
                self.collector.add(
                    "key-unknown",
                    value.place,
                    f"`{shown(key)}` is asked for by no card of `{term.name}`",
                    found=shown(key),
                    expected=", ".join(sorted(need.symbol for need in situation.needs)),
                    nearest=nearest_names(key, sorted(asked)),
                )

    def _stated_film(self, term: Term, shape: Shape, surface: int) -> Branch | None:
        scope = self.scope
        stated_on = self._surface(term, shape, surface)
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
        if stated_on != surface:
            coefficient = scope.relation_step(
                f"{term.name}/referred/h",
                "h",
                f"film coefficient on {shape.surfaces[surface].name}",
                term.name,
                parse_expression("h_stated*A_stated/A"),
                {
                    "h_stated": coefficient,
                    "A_stated": shape.surfaces[stated_on].area,
                    "A": shape.surfaces[surface].area,
                },
                "referred from the stated surface",
                "film coefficient",
            )
        bulk = scope.value(term.values.get("temperature"), "temperature", term.name, "temperature")
        stream = self._stream_of(term)
        if not bulk and stream is not None:
            bulk = stream.temperature
        checks = self._holds_for(term)
        film = FilmScope(scope, self.library, term, term.name, shape.dimensions, stream)
        steps = film.ancestors([coefficient])
        candidate = Candidate(STATED, steps, coefficient, checks, "stated in the calculation file", False, ())
        return Branch(
            term.name, "stated", bulk, (candidate,), is_forced=True, stream=stream.name if stream else ""
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
                self.collector.add(
                    "dimension-slip", term.place_of("scales with"), "`scales with` is a plain factor"
                )
        except RelationFault as error:
            self.collector.add("dimension-slip", term.place_of("scales with"), error.message)
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
                self.collector.take([unknown_symbol(symbol, term.place_of(key), self.calculation.symbols)])
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
            self.collector.add(
                "symbol-unknown",
                low.place,
                f"`{shown(low.source)}` is neither a given nor derived",
                found=shown(low.source),
                expected=", ".join((*self.calculation.givens, "flow", "temperature")),
                nearest=nearest_names(low.source, self.calculation.givens),
            )
            return ()
        bounds = {}
        for key, value in (("low", low), ("high", high)):
            if value.quantity is None or value.quantity.dimension != self.scope.dimensions[name]:
                self.collector.add(
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

    def _radiation(self, term: Term, group: str) -> Branch | None:
        emissivity = self.scope.value(term.values.get("emissivity"), "emissivity", term.name, "emissivity")
        surroundings = self.scope.value(
            term.values.get("surroundings"), "temperature", term.name, "surroundings"
        )
        for key in ("emissivity", "surroundings"):
            if key not in term.values:
                self.collector.add(
                    "key-missing",
                    term.place,
                    f"the radiation `{term.name}` lacks `{key}`",
                    expected="emissivity and surroundings",
                )
        if not emissivity or not surroundings:
            return None
        figures = {"emissivity": emissivity, "temperature": surroundings}
        film = FilmScope(self.scope, self.library, term, group, figures)
        method = term.texts.get("method", "radiation-linear-small")
        candidate = film.candidate(method, "radiation to large surroundings")
        if candidate is None:
            return None
        return Branch(term.name, "radiation", surroundings, (candidate,))

    # -- temperatures -------------------------------------------------------------------------------

    def _check_temperatures(self, elements: tuple[Element, ...] | None) -> None:
        """Where anything follows the surface temperature, both bulk temperatures must be known."""
        if elements is None:
            return
        groups = [element for element in elements if isinstance(element, Group)]
        moving = [element for element in elements if follows_temperature(element)]
        for group in groups:
            if not group.bulk and moving:
                term = next(term for term in self.calculation.resistances if term.name == group.name)
                self.collector.add(
                    "temperature-missing",
                    term.place,
                    f"`{group.name}` has no bulk temperature",
                    found=f"`{moving[0].name}` needs the temperature of its surface",
                    expected="temperature: … or stream: … on the term",
                )


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


def _balance_check(stream: str, limit: Limit, inputs: Mapping[str, str]) -> ChainCheck:
    return ChainCheck(f"{stream} / heat balance / {limit.id}", stream, "heat balance", limit, inputs)


def _steps_of(element: Element) -> tuple[ChainStep, ...]:
    if isinstance(element, Layer):
        across = _steps_of_ways(element.gap.ways) if element.gap is not None else ()
        return (*element.steps, *(step for step in across if step.owner == element.name))
    films = _steps_of_ways(element.branches)
    drops = tuple(branch.pressure_drop for branch in element.branches if branch.pressure_drop is not None)
    return (*films, *(step for drop in drops for step in drop.steps))


def _steps_of_ways(branches: tuple[Branch, ...]) -> tuple[ChainStep, ...]:
    return tuple(
        step
        for branch in branches
        for candidate in (*branch.candidates, *branch.alternatives)
        for step in (*candidate.steps, *branch.choice_steps)
    )


def _kind_of_dimension(dim: tuple, reading: str) -> QuantityKind:
    """A kind for a given that nothing uses or that only derived quantities use."""
    for kind in vocabulary().values():
        if kind.dimension == dim and kind.reading in ("", reading) and not kind.flag:
            return kind
    return unnamed_kind("x", dim)
