"""Fins on the surface that a film acts on: their areas, and the resistance that they put in series.

The film and its fouling act on the total finned surface at its mean temperature. The fins stand between that
and the root: with the surface efficiency η of the combined coefficient h_c = 1/(1/h + R_f) all three together
are (1/h + R_f)/η, so the fins alone are (1/h + R_f)·(1/η − 1), each on the total finned area.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from calcbook.calcfile.calculation import Fins, Term, Value
from calcbook.chain.circuit import branch_coefficient
from calcbook.chain.films import FilmScope
from calcbook.chain.scope import Scope
from calcbook.chain.surfaces import Shape
from calcbook.chain.types import ChainCheck, ChainStep, Group, Layer, Surface
from calcbook.faults import Place, nearest_names, shown
from calcbook.formulas import parse_expression
from calcbook.library import Library, vocabulary
from calcbook.library.cards import Situation, practice_limit

EFFICIENCIES = {
    "annular": ("fin-annular-bessel", "fin-annular-schmidt"),
    "straight": ("fin-straight-rect",),
}
OVERALL = "fin-overall-surface"
# Figures of the fins that a situation asks for when it is made for finned surfaces.
FINNED_NEEDS = ("fin height", "fin thickness", "fin pitch", "fin tip diameter", "total finned area")


@dataclass(frozen=True)
class FinnedSide:
    """The film that has fins, the term that its fins make, and their figures by quantity name."""

    side: str
    film: Term
    fins: Fins
    term: Term
    figures: dict[str, str]
    bare_area: str
    unfinned_area: str

    @property
    def name(self) -> str:
        return self.term.name


def lay_out_fins(scope: Scope, terms: tuple[Term, ...], shape: Shape) -> tuple[Shape, FinnedSide | None]:
    """The shape with its total finned surface, and the fins; the shape as it is where no film has fins."""
    found = [(term, part) for term in terms for part in (term, *term.branches) if part.fins is not None]
    if not found:
        return shape, None
    term, film = found[0]
    assert film.fins is not None
    side = "inside" if term is terms[0] else "outside"
    if not _fits(scope, found, shape, side):
        return replace(shape, fins_failed=True), None
    fins = film.fins
    values = dict(fins.values)
    texts = {key: text for key, text in fins.texts.items() if key == "material"}
    tip = {"tip": Value(fins.texts["tip"], fins.place_of("tip"))} if "tip" in fins.texts else {}
    own = Term(f"fins of {film.name}", "fins", fins.place, texts, fins.text_places, values, tip)
    if any(own.name in (other.name, *(branch.name for branch in other.branches)) for other in terms):
        scope.collector.add(
            "term-twice",
            film.place,
            f"`{own.name}` is the name of the fins",
            expected="another name for the term",
        )
        return replace(shape, fins_failed=True), None
    return _Areas(scope, shape, side, film, own).laid_out()


def _fits(scope: Scope, found: list[tuple[Term, Term]], shape: Shape, side: str) -> bool:
    """Whether the fins can stand where they do; a fault where not."""
    term, film = found[0]
    assert film.fins is not None

    def refuse(place: Place, message: str, expected: str) -> bool:
        scope.collector.add(
            "fins-not-here", place, message, found=f"{side} of a {shape.name}", expected=expected
        )
        return False

    if len(found) > 1:
        return refuse(found[1][1].place_of("fins"), "films on both sides have fins", "fins on one film")
    if term is not film:
        return refuse(
            film.place_of("fins"),
            "a film beside another way for heat has fins",
            "fins on a film that acts alone, its coefficient with the radiation in it",
        )
    if shape.name == "sphere" or not shape.walls:
        return refuse(
            film.place_of("fins"),
            "fins stand on the wall of a tube or plane",
            "a tube or a plane with a wall",
        )
    if film.fins.shape == "annular" and (shape.name != "tube" or side == "inside"):
        return refuse(
            film.fins.place_of("shape"), "annular fins stand on the outside of a tube", "shape: straight"
        )
    if film.fins.shape not in EFFICIENCIES:
        return False
    by_count = film.fins.shape == "straight" and shape.name == "tube"
    if "count" in film.fins.values and not by_count:
        return refuse(
            film.fins.place_of("count"),
            "only straight fins around a tube are counted",
            "pitch: … with its unit",
        )
    if not {"pitch", "count"} & set(film.fins.values):
        scope.collector.add(
            "need-missing",
            film.fins.place,
            f"the fins of `{film.name}` have no pitch",
            expected="pitch: … with its unit" + (", or count: … around the tube" if by_count else ""),
        )
        return False
    return True


@dataclass(frozen=True)
class _Areas:
    """The areas of one finned surface: fins, unfinned part, total."""

    scope: Scope
    shape: Shape
    side: str
    film: Term
    own: Term

    def laid_out(self) -> tuple[Shape, FinnedSide | None]:
        fins = self.film.fins
        assert fins is not None
        kinds = {"height": "fin height", "thickness": "fin thickness", "pitch": "fin pitch", "count": "fins"}
        figures = {
            kind: self.scope.value(fins.values.get(key), kind, self.own.name, key)
            for key, kind in kinds.items()
        }
        figures = {kind: name for kind, name in figures.items() if name}
        if not {"fin height", "fin thickness"} <= set(figures):
            return replace(self.shape, fins_failed=True), None
        bare = self.shape.surfaces[self.shape.bare(self.side)]
        unfinned, area = (
            self._annular(figures, bare) if fins.shape == "annular" else self._straight(figures, bare)
        )
        total = self._step(
            "A_tf", "area, total finned", "A_f + A_u", {"A_f": area, "A_u": unfinned}, "total finned area"
        )
        figures |= {"fin area": area, "total finned area": total}
        shape = replace(
            self.shape,
            surfaces=(*self.shape.surfaces, Surface("total finned", total, "")),
            finned_side=self.side,
        )
        self.scope.assume(
            f"{self.own.name}/surfaces",
            f"The surfaces {self.side} and bare are one: the wall without its fins.",
            "fins are stated on this side",
            self.own.name,
        )
        return shape, FinnedSide(self.side, self.film, fins, self.own, figures, bare.area, unfinned)

    @property
    def _tip(self) -> str:
        """What a tip that exchanges heat adds to the height: half the thickness, as for the efficiency."""
        tip = self.own.with_values.get("tip")
        return " + t_f/2" if tip is None or tip.text == "convective" else ""

    def _along(self) -> dict[str, str]:
        length = self.shape.dimensions.get("length", "geometry/1 m")
        return {"L": length, "N": self.shape.dimensions["open tubes"]}

    def _annular(self, figures: dict[str, str], bare: Surface) -> tuple[str, str]:
        along = self._along()
        figures["fin root diameter"] = bare.diameter
        figures["fin tip diameter"] = self._step(
            "d_f",
            "tip diameter of a fin",
            "d_r + 2*L_f",
            {"d_r": bare.diameter, "L_f": figures["fin height"]},
            "fin tip diameter",
        )
        figures["fins"] = self._step(
            "n_fin", "fins of one tube", "L/p_f", {"L": along["L"], "p_f": figures["fin pitch"]}, "fins"
        )
        inputs = {"n_fin": figures["fins"], "N": along["N"], "t_f": figures["fin thickness"]}
        tip = f"d_f/2{self._tip}"
        area = self._step(
            "A_f",
            "area, fins",
            f"2*pi*(({tip})**2 - (d_r/2)**2)*n_fin*N",
            inputs | {"d_f": figures["fin tip diameter"], "d_r": bare.diameter},
            "fin area",
        )
        unfinned = self._step(
            "A_u",
            "area, unfinned",
            "pi*d_r*(L - n_fin*t_f)*N",
            inputs | {"d_r": bare.diameter, "L": along["L"]},
            "area",
        )
        return unfinned, area

    def _straight(self, figures: dict[str, str], bare: Surface) -> tuple[str, str]:
        height, thickness = figures["fin height"], figures["fin thickness"]
        if self.shape.name == "plane":
            inputs = {"t_f": thickness, "p_f": figures["fin pitch"], "A": bare.area}
            area = self._step(
                "A_f", "area, fins", f"2*(L_f{self._tip})/p_f*A", inputs | {"L_f": height}, "fin area"
            )
            return self._step("A_u", "area, unfinned", "(1 - t_f/p_f)*A", inputs, "area"), area
        if "fins" not in figures:
            figures["fins"] = self._step(
                "n_fin",
                "fins around one tube",
                "pi*d_r/p_f",
                {"d_r": bare.diameter, "p_f": figures["fin pitch"]},
                "fins",
            )
        inputs = {"n_fin": figures["fins"], "t_f": thickness, **self._along()}
        area = self._step(
            "A_f", "area, fins", f"2*(L_f{self._tip})*L*n_fin*N", inputs | {"L_f": height}, "fin area"
        )
        unfinned = self._step(
            "A_u", "area, unfinned", "(pi*d_r - n_fin*t_f)*L*N", inputs | {"d_r": bare.diameter}, "area"
        )
        return unfinned, area

    def _step(self, symbol: str, title: str, text: str, inputs: dict[str, str], kind: str) -> str:
        relation = parse_expression(text)
        return self.scope.relation_step(
            f"geometry/{symbol}",
            symbol,
            title,
            "geometry",
            relation,
            {name: inputs[name] for name in relation.symbols},
            "fins",
            kind,
        )


def check_finned_situation(scope: Scope, term: Term, situation: Situation, finned: bool) -> bool:
    """That a situation for finned surfaces takes its figures from the fins of its film; a fault where not."""
    needs = [need for need in situation.needs if need.quantity.name in FINNED_NEEDS]
    if needs and not finned:
        scope.collector.add(
            "need-missing",
            term.place,
            f"`{term.name}` acts on fins, and none are stated",
            expected="fins: {shape: …, height: …, thickness: …, pitch: …, material: …} on the film",
        )
        return False
    for need in needs:
        for key in (need.symbol, need.quantity.name):
            if key in term.with_values:
                scope.collector.add(
                    "key-conflict",
                    term.with_values[key].place,
                    f"`{key}` is stated by the fins of `{term.name}`",
                    found=f"`{key}` under `with:`",
                    expected="it under `fins:` alone",
                )
                return False
    return True


# --- the term in series -----------------------------------------------------------------------------


def lay_out_fins_layer(
    scope: Scope,
    library: Library,
    finned: FinnedSide,
    shape: Shape,
    group: Group,
    fouling: Sequence[Layer],
    conductivity: str,
    temperatures: tuple[str, str],
) -> Layer | None:
    """The fins as a term in series with their film; ``conductivity`` is the id of k, ``temperatures`` what it
    is the mean between (empty where it is stated). None after a fault."""
    return _Series(scope, library, finned, shape, group).layer(fouling, conductivity, temperatures)


@dataclass(frozen=True)
class _Series:
    scope: Scope
    library: Library
    finned: FinnedSide
    shape: Shape
    group: Group

    def layer(
        self, fouling: Sequence[Layer], conductivity: str, temperatures: tuple[str, str]
    ) -> Layer | None:
        method = self._method()
        if not method:
            return None
        name, surface = self.finned.name, len(self.shape.surfaces) - 1
        series, combined = self._combined(fouling)
        figures = {**self.finned.figures, "film coefficient": combined, "wall conductivity": conductivity}
        single = self._card(method, figures)
        overall = self._card(OVERALL, figures | {"effectiveness": single[0]}) if single is not None else None
        if single is None or overall is None:
            return None
        efficiency = overall[0]
        whole = self._step(
            "R_o",
            "film, fouling and fins on the total finned area",
            "R_c/eta_o",
            {"R_c": series, "eta_o": efficiency},
            "area resistance",
        )
        resistance = self._step(
            "R",
            "fins on the total finned area",
            "R_o - R_c",
            {"R_o": whole, "R_c": series},
            "area resistance",
        )
        checks = (*single[1], *overall[1], *self._own_checks())
        steps = self._own_steps([resistance, *(bound for check in checks for bound in check.inputs.values())])
        first, second = temperatures
        return Layer(
            name,
            "fins",
            surface,
            resistance,
            steps,
            first,
            second,
            method,
            checks,
            self.group.name,
            efficiency,
        )

    def _method(self) -> str:
        """The method of the fin efficiency: the one named, or the exact one of the shape, which is said."""
        fins = self.finned.fins
        allowed = EFFICIENCIES[fins.shape]
        stated = fins.texts.get("method", "")
        if stated and stated not in allowed:
            self.scope.collector.add(
                "method-unknown",
                fins.place_of("method"),
                f"`{shown(stated)}` is no method for {fins.shape} fins",
                found=shown(stated),
                expected=", ".join(allowed),
                nearest=nearest_names(stated, allowed),
            )
            return ""
        if not stated:
            self.scope.assume(
                f"{self.finned.name}/method",
                f"The fin efficiency is taken from {allowed[0]}.",
                f"exact for {fins.shape} fins of constant thickness; none is named",
                self.finned.name,
            )
        return stated or allowed[0]

    def _combined(self, fouling: Sequence[Layer]) -> tuple[str, str]:
        """Film and fouling in series on the total finned area, and the coefficient of both together."""
        held = branch_coefficient(self.group, self.group.branches[0].name)
        self.scope.dimensions[held] = vocabulary()["film coefficient"].dimension
        total = self.finned.figures["total finned area"]
        parts, inputs = ["1/h"], {"h": held}
        for number, layer in enumerate(fouling, 1):
            symbol = f"R_f{number}" if len(fouling) > 1 else "R_f"
            own, area = layer.resistance, self.shape.surfaces[layer.surface].area
            if area != total:
                own = self._step(
                    symbol,
                    f"{layer.name} on the total finned area",
                    "R*A_tf/A",
                    {"R": layer.resistance, "A_tf": total, "A": area},
                    "area resistance",
                )
            parts.append(symbol)
            inputs[symbol] = own
        series = self._step(
            "R_c", "film and fouling on the total finned area", " + ".join(parts), inputs, "area resistance"
        )
        combined = self._step(
            "h_c", "coefficient of film and fouling combined", "1/R_c", {"R_c": series}, "film coefficient"
        )
        return series, combined

    def _card(self, method: str, figures: dict[str, str]) -> tuple[str, tuple[ChainCheck, ...]] | None:
        """The result of a fin card laid out, and its checks."""
        film = FilmScope(self.scope, self.library, self.finned.term, self.group.name, figures)
        program = self.library.program(method)
        names = film.laid_out(program)
        if names is None:
            return None
        return names[program.result], film.checks(program, names)

    def _own_steps(self, wanted: list[str]) -> tuple[ChainStep, ...]:
        film = FilmScope(self.scope, self.library, self.finned.term, self.group.name, {})
        return tuple(step for step in film.ancestors(wanted) if step.owner == self.finned.name)

    def _own_checks(self) -> tuple[ChainCheck, ...]:
        """That the fins leave a gap (and a bore), and that the film's situation knows fins."""
        finned = self.finned
        figures = {
            "A_u": finned.unfinned_area,
            "A": finned.bare_area,
            "A_tf": finned.figures["total finned area"],
        }
        checks = [self._check("gap", "A_u/A > 0", "stop", "the fins leave part of the surface free", figures)]
        if finned.side == "inside" and self.shape.name == "tube":
            inner = {"L_f": finned.figures["fin height"], "d_i": self.shape.surfaces[0].diameter}
            checks.append(self._check("bore", "2*L_f < d_i", "stop", "the fins leave a bore", inner))
        situation = self.group.branches[0].situation
        if situation is not None and not any(need.quantity.name in FINNED_NEEDS for need in situation.needs):
            checks.append(
                self._check(
                    "plain surface",
                    "A_tf/A <= 1",
                    "range",
                    f"the methods of {situation.id} are for a surface without fins: its film, speed and pressure drop"
                    " leave out what the fins take of the flow area",
                    figures,
                )
            )
        return tuple(checks)

    def _check(self, name: str, that: str, level: str, because: str, figures: dict[str, str]) -> ChainCheck:
        limit = practice_limit(name, that, level, because, self.finned.fins.place)
        inputs = {symbol: figures[symbol] for symbol in limit.that.symbols}
        return ChainCheck(f"{self.finned.name} / fins / {name}", self.finned.name, "fins", limit, inputs)

    def _step(self, symbol: str, title: str, text: str, inputs: dict[str, str], kind: str) -> str:
        return self.scope.relation_step(
            f"{self.finned.name}/{symbol}",
            symbol,
            title,
            self.finned.name,
            parse_expression(text),
            inputs,
            "fins",
            kind,
        )
