"""Fouling of the whole unit, specified by its cleanliness or its excess surface and split over its terms.

The resistance is found so that U in service over U clean is what is specified, films and all: a deposit moves
the surface that a fluid touches, and with it the film.
"""

from __future__ import annotations

from dataclasses import dataclass

from calcbook.calcfile.calculation import FoulingSpecified, Term
from calcbook.calcfile.specified import ROUNDING
from calcbook.chain.scope import Scope
from calcbook.chain.types import CLEAN, SERVICE, SERVICE_FLAG, ChainCheck, OpenFigure
from calcbook.formulas import parse_expression
from calcbook.library import vocabulary
from calcbook.library.cards import practice_limit

OWNER = "fouling"
CLEAN_U, WHOLE, FOUND = f"{OWNER}/U clean", f"{OWNER}/R whole", f"{OWNER}/R found"
SPECIFIED_FIGURES = (CLEAN_U, WHOLE)
# Where the clean U, W/(m² K), and the resistance, m² K/W, are looked for from.
FIRST_U, FIRST_R = 500.0, 1e-4
# What the resistance must be, from what it is and the U in service with it.
# Clean nothing is missing, so that the resistance stays.
RELATIONS = {
    "cleanliness": "R_f + s*(1/(C_f*U_c) - 1/U)",
    "excess surface": "R_f + s*((1 + S_f)/U_c - 1/U)",
}
SYMBOLS = {"cleanliness": "C_f", "excess surface": "S_f"}
LIMITS = {"cleanliness": "0 < C_f < 1", "excess surface": "S_f > 0"}


@dataclass(frozen=True)
class SpecifiedFouling:
    """The steps of a specified fouling: the whole resistance on the basis area, and the parts of its terms."""

    scope: Scope
    specified: FoulingSpecified

    def open_figures(self) -> tuple[OpenFigure, ...]:
        """The clean U that the specification refers to, and the resistance that makes it true."""
        kinds = vocabulary()
        first_u = self.scope.constant(f"{OWNER}/first U", FIRST_U, kinds["overall coefficient"].dimension)
        first_r = self.scope.constant(f"{OWNER}/first R", FIRST_R, kinds["area resistance"].dimension)
        return (
            OpenFigure(self._open(CLEAN_U, "overall coefficient"), "circuit/U", CLEAN, first_u, first_u),
            OpenFigure(self._open(WHOLE, "area resistance"), FOUND, SERVICE, first_r, first_r),
        )

    def _open(self, name: str, kind: str) -> str:
        self.scope.dimensions[name] = vocabulary()[kind].dimension
        return name

    def found(self, overall: str) -> ChainCheck:
        """Lay out the step that gives the resistance from the U of the circuit; the limit that it must hold."""
        figures = {
            "R_f": self._open(WHOLE, "area resistance"),
            "U_c": self._open(CLEAN_U, "overall coefficient"),
            SYMBOLS[self.specified.kind]: self._figure(),
            "U": overall,
            "s": self.scope.constant(SERVICE_FLAG, 1.0),
        }
        self.scope.relation_step(
            FOUND,
            "R_f",
            f"fouling of the whole unit for {self.specified.kind} (s = 1 in service, 0 clean)",
            OWNER,
            parse_expression(RELATIONS[self.specified.kind]),
            figures,
            f"specified as {self.specified.kind}; U_c is the clean U; found in service",
            "area resistance",
        )
        return self._stop(
            "resistance", "R_f >= 0", {"R_f": WHOLE}, "the deposits that are stated leave some of it"
        )

    def checks(self) -> tuple[ChainCheck, ...]:
        """The specification lies where it can: a fault of the file otherwise."""
        figures = {SYMBOLS[self.specified.kind]: self._figure()}
        that = LIMITS[self.specified.kind]
        self._check_share()
        self._shares_keep_their_sum()
        found = [
            self._stop(
                "specified fouling",
                that,
                figures,
                "a deposit adds resistance; a unit without one has no `fouling specified as`",
            )
        ]
        shares = {
            f"x_{number}": self.scope.value(value, "ratio", OWNER, f"share of {name}")
            for number, (name, value) in enumerate(self.specified.split.items(), 1)
        }
        if shares:
            that = f"abs({' + '.join(shares)} - 1) <= {ROUNDING!r}"
            found.append(self._stop("split", that, shares, "the shares of the terms make one whole"))
            least = f"min({', '.join(shares)})" if len(shares) > 1 else "x_1"
            found.append(self._stop("share", f"{least} >= 0", shares, "a share is a part, or nothing"))
        return tuple(found)

    def _shares_keep_their_sum(self) -> None:
        """That a share with a tolerance leaves another one to be derived: they would make no whole otherwise."""
        calculation = self.scope.calculation
        symbols = [value.symbol for value in self.specified.split.values()]
        moving = [
            name for name in symbols if name in calculation.givens and calculation.givens[name].tolerance
        ]
        if moving and not any(name in calculation.derived for name in symbols):
            self.scope.collector.add(
                "split-unreadable",
                calculation.givens[moving[0]].place,
                "a share with a tolerance leaves shares that make no whole",
                found=moving[0],
                expected=f"the other share derived, as 1 - {moving[0]}",
            )

    def _stop(self, name: str, that: str, figures: dict[str, str], because: str) -> ChainCheck:
        limit = practice_limit(name, that, "stop", because, self.specified.place)
        return ChainCheck(f"{OWNER} / {name}", OWNER, OWNER, limit, figures)

    def _check_share(self) -> None:
        """That a given which the file specifies is a share: it is told where it stands."""
        given = self.scope.calculation.givens.get(self.specified.value.symbol)
        if given is not None:
            given.value.is_share(self.specified.kind, self.scope.collector)

    def _figure(self) -> str:
        return self.scope.value(self.specified.value, "ratio", OWNER, self.specified.kind)

    def resistance(self, term: Term, basis: str, own: str) -> str:
        """The id of a term's resistance on its own area ``own``; ``basis`` is the basis area. Empty after a fault."""
        self.scope.assume(
            f"{OWNER}/specified",
            f"The fouling of the whole unit is specified as {self.specified.kind}; its terms follow from it.",
            "fouling specified as in the file",
            "fouling terms",
        )
        share = self._share(term)
        if not share:
            return ""
        text, inputs = "x*R_f", {"x": share, "R_f": self._open(WHOLE, "area resistance")}
        if basis != own:
            text, inputs = "x*R_f*A/A_b", {**inputs, "A": own, "A_b": basis}
        return self.scope.relation_step(
            f"{term.name}/R",
            "R",
            "area resistance",
            term.name,
            parse_expression(text),
            inputs,
            "its share of the whole, on its own area",
            "area resistance",
        )

    def _share(self, term: Term) -> str:
        value = self.specified.split.get(term.name)
        if value is not None:
            return self.scope.value(value, "ratio", OWNER, f"share of {term.name}")
        return self.scope.constant(f"{OWNER}/whole", 1.0)
