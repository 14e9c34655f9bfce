"""Calculation and cards to a chain: names, units, methods and order resolved, every fault collected."""

from __future__ import annotations

from collections.abc import Mapping

from calcbook.calcfile import Calculation
from calcbook.calcfile.calculation import Term, Value
from calcbook.chain.circuit import Circuit
from calcbook.chain.duty import DutyLayout
from calcbook.chain.fins import lay_out_fins
from calcbook.chain.givens import lay_out_derived, lay_out_givens, mark_unused, open_words, typed_givens
from calcbook.chain.groups import Groups
from calcbook.chain.growth import Grown
from calcbook.chain.in_service import lay_out_in_service
from calcbook.chain.latent import BECAUSE, NO_FLOW, PHASE_CHANGE, SOME_FLOW, WHOLE_FLOW
from calcbook.chain.layers import Layers
from calcbook.chain.linked import check_linked_resistances
from calcbook.chain.order import order_holds
from calcbook.chain.petroleum import lay_out_cards
from calcbook.chain.saturation_loss import with_saturation_losses
from calcbook.chain.scope import Scope
from calcbook.chain.services import check_services
from calcbook.chain.specified import SpecifiedFouling
from calcbook.chain.streams import lay_out_stream, viscosity_checks
from calcbook.chain.surfaces import Shape, lay_out_shape
from calcbook.chain.types import (
    Branch,
    Chain,
    ChainCheck,
    ChainStep,
    Element,
    Group,
    Growing,
    Layer,
    OpenFigure,
    StreamState,
    follows_temperature,
)
from calcbook.faults import Collector, nearest_names, shown
from calcbook.library import Library
from calcbook.library.cards import Limit, practice_limit
from calcbook.quantities import as_kind


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
        self.checks: list[ChainCheck] = []
        self.open_figures: tuple[OpenFigure, ...] = ()
        self.specified = (
            SpecifiedFouling(self.scope, calculation.fouling_specified)
            if calculation.fouling_specified is not None
            else None
        )
        self.duty = (
            DutyLayout(self.scope, library, calculation.duty) if calculation.duty is not None else None
        )

    def chain(self) -> Chain | None:
        """The whole chain; None where a fault leaves too little of it."""
        calculation, scope = self.calculation, self.scope
        has_duty = self._streams_and_duty()
        terms = calculation.resistances
        walls = tuple(term for term in terms if term.kind == "wall")
        if calculation.geometry is None or not calculation.geometry.shape or not terms:
            return None
        shape = lay_out_shape(scope, calculation.geometry, walls)
        if not order_holds(terms, self.collector) or shape is None:
            return None
        shape, finned = lay_out_fins(scope, terms, shape)
        self.checks += shape.checks
        before_terms = frozenset(scope.steps)
        layers = Layers(scope, self.library, shape, finned, self.specified)
        groups = Groups(scope, self.library, self.streams, layers, self.cross_check, self.duty is not None)
        elements = self._elements(terms, layers, groups)
        self.checks += groups.checks
        basis = (
            shape.surface_named(scope, calculation.report.u_on, calculation.report.u_on_place)
            if calculation.report.u_on
            else None
        )
        self._check_temperatures(elements)
        # A stated figure counts on the surface that it names, which need not be the one that its element acts on.
        places = {element.name: element.surface for element in elements or ()}
        named = shape.names()
        places |= {term.name: named[on] for term in terms if (on := term.texts.get("on", "")) in named}
        check_linked_resistances(
            scope, calculation, {name: shape.surfaces[place].name for name, place in places.items()}
        )
        open_words(scope)
        check_services(calculation, self.collector)
        if self.collector or basis is None or elements is None:
            return None
        elements = with_saturation_losses(scope, elements, self.streams)
        laid_out = Circuit(scope, elements, shape, basis, self.streams, groups.speeds)
        circuit, results = laid_out.lay_out()
        if self.specified is not None:
            before = frozenset(scope.steps)
            self.checks.append(self.specified.found(results["U"]))
            circuit = (*circuit, *(step for name, step in scope.steps.items() if name not in before))
        if has_duty:
            circuit, results = self._rated(elements, shape, basis, circuit, results)
        else:
            self.checks += self._heat_balance(elements, results, laid_out.streams)
        if self.collector:
            return None
        first = before_terms | layers.first_steps
        return self._finished(elements, shape, basis, circuit, results, first, layers.growing)

    def _streams_and_duty(self) -> bool:
        """Lay out what the terms take from: givens, derived quantities, streams; whether there is a duty to rate."""
        scope = self.scope
        lay_out_givens(scope)
        lay_out_derived(scope)
        means = self.duty.means() if self.duty is not None else {}
        self.streams = {
            name: state
            for name, stream in self.calculation.streams.items()
            if (state := lay_out_stream(scope, stream, self.library, means.get(name, ""))) is not None
        }
        if self.specified is not None:
            self.checks += self.specified.checks()
            self.open_figures = self.specified.open_figures()
        has_duty = self.duty is not None and self.duty.balance(self.streams)
        if self.duty is not None and not has_duty:
            self.duty.read_stated()
        self.checks += lay_out_cards(scope, self.library, self.streams)
        self.checks += viscosity_checks(scope, self.streams)
        return has_duty

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
        first: frozenset[str],
        growing: Mapping[str, Grown | None],
    ) -> Chain:
        """The chain; the steps ``first`` stand before the films, whoever they belong to."""
        scope = self.scope
        later = {step.id for element in elements for step in _steps_of(element)} | {
            step.id for step in circuit
        }
        in_service = lay_out_in_service(scope, any(growing.values()), results)
        static = tuple(step for step in scope.steps.values() if step.id in first or step.id not in later)
        mark_unused(scope)
        return Chain(
            calculation=self.calculation,
            library=self.library,
            inputs={**typed_givens(scope), **scope.inputs},
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
            growing=self._growing_terms(growing),
            in_service=in_service,
        )

    def _growing_terms(self, growing: Mapping[str, Grown | None]) -> tuple[Growing, ...]:
        """The terms whose resistance grows, in the order of the file."""
        return tuple(
            Growing(term.name, term.growth.model, grown.time, grown.fouling, grown.needs)
            for term in self.calculation.resistances
            if term.growth is not None and (grown := growing.get(term.name)) is not None
        )

    def _restated_value(self, symbol: str, value: Value) -> float:
        assert value.quantity is not None
        kind = self.scope.kinds.get(symbol)
        return as_kind(value.quantity, kind).value if kind is not None else value.quantity.value

    def _elements(
        self, terms: tuple[Term, ...], layers: Layers, groups: Groups
    ) -> tuple[Element, ...] | None:
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
                elements.append(groups.group(term, "inside" if index == 0 else "outside"))
                continue
            wall = next((wall for wall in layers.shape.walls if wall.term is term), None)
            if wall is not None:
                at = wall.first + 1
            if term.name in included:
                self.scope.assume(
                    f"{term.name}/included",
                    f"{term.name} is not counted: a stated coefficient includes it.",
                    "stated in the calculation file",
                    term.name,
                )
                if term.kind == "fouling":
                    self.scope.open(
                        f"{term.name}/included",
                        "check",
                        f"{term.name} is a deposit inside a stated coefficient: U clean holds it as U in service does.",
                    )
                continue
            if term.kind == "gap":
                elements.append(layers.gap(term, at))
                continue
            elements.append(layers.wall(wall) if wall is not None else layers.layer(term, at))
        if any(element is None for element in elements):
            return None
        return layers.with_fins(tuple(element for element in elements if element is not None))

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
