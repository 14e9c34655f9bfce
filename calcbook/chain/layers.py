"""What lies between the films: deposits, contacts, gaps, walls and fins, each with its resistance and its limits."""

from __future__ import annotations

from dataclasses import replace

from calcbook.calcfile.calculation import Term
from calcbook.calcfile.specified import is_open
from calcbook.chain.films import FilmScope
from calcbook.chain.fins import FinnedSide, lay_out_fins_layer
from calcbook.chain.gaps import lay_out_gap
from calcbook.chain.growth import Grown, GrownDeposit, lay_out_growth, lay_out_thickness
from calcbook.chain.scope import Scope
from calcbook.chain.specified import SpecifiedFouling
from calcbook.chain.surfaces import Shape, Wall, stated_surface
from calcbook.chain.terms import check_with_values, refuse_withdrawn
from calcbook.chain.types import ChainCheck, Element, Group, Layer
from calcbook.faults import Faults
from calcbook.formulas import number_text, parse_expression
from calcbook.library import Library, vocabulary
from calcbook.library.cards import Limit, practice_limit
from calcbook.library.conductivity import ConductivityTable
from calcbook.quantities import in_unit

FOULING_WAYS = ", or deposit: {thickness: …, conductivity: …}, or growth: {model: …, after: …}"
WALL_CARDS = {"tube": "wall-cylinder", "plane": "wall-plane", "sphere": "wall-sphere"}


class Layers:
    """Lays out the layers of a shape; faults go to the scope's collector, and what has one is None.

    ``growing`` are the terms whose resistance grows; ``first_steps`` are the steps that films may take from here.
    """

    def __init__(
        self,
        scope: Scope,
        library: Library,
        shape: Shape,
        finned: FinnedSide | None,
        specified: SpecifiedFouling | None,
    ):
        self.scope = scope
        self.library = library
        self.shape = shape
        self.finned = finned
        self.specified = specified
        self.growing: dict[str, Grown | None] = {}
        self.first_steps: set[str] = set()

    def layer(self, term: Term, at: int) -> Layer | None:
        """Fouling or a contact, on the surface that it names or else on that ``at`` its place."""
        default = self._wetted_surface(term) if term.kind == "fouling" else at
        surface = stated_surface(self.scope, self.shape, term, default if default is not None else at)
        if surface is None:
            return None
        if term.growth is not None:
            return self._growing_layer(term, surface, at)
        if term.deposit is not None:
            return self._deposit(term, surface)
        if self.specified is not None and is_open(term):
            return self._specified_layer(self.specified, term, surface)
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
                self.scope.collector.add(
                    "need-missing",
                    term.place,
                    f"`{term.name}` has no resistance",
                    expected="resistance: … m^2 K/W" + (FOULING_WAYS if term.kind == "fouling" else ""),
                )
            return None
        return Layer(term.name, term.kind, surface, resistance)

    def _specified_layer(self, specified: SpecifiedFouling, term: Term, surface: int) -> Layer | None:
        """A fouling layer that takes its share of what the file specifies for the whole unit."""
        basis = self.shape.names().get(self.scope.calculation.report.u_on)
        if basis is None:
            return None
        areas = self.shape.surfaces
        resistance = specified.resistance(term, areas[basis].area, areas[surface].area)
        return Layer(term.name, term.kind, surface, resistance) if resistance else None

    def _wetted_surface(self, term: Term) -> int | None:
        """The finned surface for the fouling that lies on it, else None."""
        terms = self.scope.calculation.resistances
        walls = [index for index, other in enumerate(terms) if other.kind == "wall"]
        if self.finned is None or not walls:
            return None
        side = "inside" if terms.index(term) < walls[0] else "outside"
        return self.shape.wetted(side) if side == self.finned.side else None

    def _growing_layer(self, term: Term, surface: int, at: int) -> Layer | None:
        """A fouling layer whose resistance its growth card gives; a deposit beside it gives it a thickness."""
        grown = self._grown(term)
        if grown is None:
            return None
        checks = grown.checks
        if term.deposit is not None:
            if self._narrows_fins(term):
                return None
            if surface != at:
                self.scope.collector.add(
                    "key-conflict",
                    term.deposit.place,
                    "the thickness of a deposit follows from the resistance on the surface that it lies on",
                    found=f"on: {self.shape.surfaces[surface].name}",
                    expected=f"on: {self.shape.surfaces[at].name}, or no `deposit`",
                )
                return None
            deposit = self._grown_deposit(term, grown, at)
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
        self.first_steps |= {step.id for step in self.scope.steps.values() if step.owner == term.name}

    def thickness(self, term: Term, side: str) -> str:
        """The id of a deposit's thickness: as stated, or from the resistance that has grown; empty after a fault."""
        assert term.deposit is not None
        if term.growth is None:
            return self.scope.value(term.deposit.thickness, "thickness", term.name, "thickness")
        grown = self._grown(term)
        if grown is None:
            return ""
        deposit = self._grown_deposit(term, grown, self.shape.bare(side))
        return deposit.thickness if deposit is not None else ""

    def _grown_deposit(self, term: Term, grown: Grown, surface: int) -> GrownDeposit | None:
        deposit = lay_out_thickness(self.scope, self.library, term, grown, self.shape, surface)
        self._evaluate_first(term)
        return deposit

    def _narrows_fins(self, term: Term) -> bool:
        """Whether a deposit is to narrow the flow over fins, which is a fault."""
        assert term.deposit is not None
        if not term.deposit.narrows or self._wetted_surface(term) is None:
            return False
        self.scope.collector.add(
            "key-conflict",
            term.deposit.place,
            "a deposit on fins cannot narrow the flow",
            found="narrows: yes",
            expected="narrows: no on a finned surface",
        )
        return True

    def _deposit(self, term: Term, surface: int) -> Layer | None:
        assert term.deposit is not None
        if self._narrows_fins(term):
            return None
        thickness = self.scope.value(term.deposit.thickness, "thickness", term.name, "thickness")
        conductivity = self.scope.value(
            term.deposit.conductivity, "wall conductivity", term.name, "conductivity"
        )
        if not thickness or not conductivity:
            return None
        inputs = {"t": thickness, "k": conductivity}
        if self.shape.name != "tube" or not self.shape.surfaces[surface].diameter:
            text = "t/k"
        elif surface == 0:
            text, inputs["d_i"] = "d_i*ln(d_i/(d_i - 2*t))/(2*k)", self.shape.surfaces[0].diameter
        else:
            text, inputs["d_o"] = "d_o*ln((d_o + 2*t)/d_o)/(2*k)", self.shape.surfaces[surface].diameter
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

    # -- gaps and walls -----------------------------------------------------------------------------

    def gap(self, term: Term, at: int) -> Layer | None:
        """A fluid shut in between two walls."""
        layer, film = lay_out_gap(self.scope, self.library, term, self.shape.name, self.shape.dimensions, at)
        if film is not None:
            check_with_values(film)
        for way in layer.gap.ways if layer is not None and layer.gap is not None else ():
            for candidate in way.candidates:
                refuse_withdrawn(self.scope, candidate.method.id, candidate.method.state, term)
        return layer

    def wall(self, wall: Wall) -> Layer | None:
        """A wall, by its conductivity or its stated resistance."""
        term, scope = wall.term, self.scope
        stated = scope.value(term.values.get("resistance"), "area resistance", term.name, "resistance")
        if stated:
            surface = stated_surface(scope, self.shape, term, wall.first + 1)
            return Layer(term.name, "wall", surface, stated) if surface is not None else None
        first, second = f"{term.name}/T_1", f"{term.name}/T_2"
        conductivity, table = self._conductivity(term, first, second)
        if not conductivity:
            return None
        program = self.library.program(WALL_CARDS[self.shape.name])
        figures = {
            "inside diameter": self.shape.surfaces[wall.first].diameter,
            "outside diameter": self.shape.surfaces[wall.first + 1].diameter,
            "thickness": wall.thickness,
            "wall conductivity": conductivity,
        }
        film = FilmScope(scope, self.library, term, term.name, figures)
        names = film.laid_out(program)
        if names is None:
            return None
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
            self.scope.collector.add(
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
                self.scope.collector.take([replace(fault, place=place)])
            return "", None
        self.scope.cards[f"material {card.id}"] = card.digest_text
        refuse_withdrawn(self.scope, card.id, card.state, term)
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
            self.scope.assume(
                f"{term.name}/one temperature",
                f"The conductivity of {card.id} is known at {number_text(in_unit(low, 'degC', True), 5)} °C alone and taken at"
                " every other temperature.",
                "its card holds the last value",
                term.name,
            )
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

    # -- fins ---------------------------------------------------------------------------------------

    def with_fins(self, elements: tuple[Element, ...]) -> tuple[Element, ...] | None:
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
                term = next(term for term in self.scope.calculation.resistances if term.name == element.name)
                self.scope.collector.add(
                    "term-order",
                    term.place,
                    f"`{element.name}` does not lie next to the film with fins",
                    expected="only fouling between the fins and their film",
                )
                return None
        layer = self._fins_layer(finned, group, fouling)
        if layer is None:
            return None
        place = 1 + len(fouling) if inside else len(elements) - 1 - len(fouling)
        return (*elements[:place], layer, *elements[place:])

    def _fins_layer(self, finned: FinnedSide, group: Group, fouling: list[Layer]) -> Layer | None:
        first, second = f"{finned.name}/T_1", f"{finned.name}/T_2"
        if not {"material", "conductivity"} & {*finned.term.texts, *finned.term.values}:
            self.scope.collector.add(
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
            self.shape,
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
