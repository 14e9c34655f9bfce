"""Fouling of the whole unit, specified by its cleanliness or its excess surface and split over its terms.

The resistance follows from the clean unit's U, which is found first: R = (1/cleanliness − 1)/U_clean, or
excess surface over U_clean, on the basis area.
"""

from __future__ import annotations

from dataclasses import dataclass

from calcbook.calcfile.calculation import FoulingSpecified, Term
from calcbook.chain.scope import Scope
from calcbook.chain.types import CLEAN, ChainCheck, OpenFigure
from calcbook.formulas import parse_expression
from calcbook.library import vocabulary
from calcbook.library.cards import Limit

OWNER = "fouling"
# Where the clean U is looked for from, W/(m² K); it depends on no deposit, so the first pass finds it.
FIRST_U = 500.0
RELATIONS = {"cleanliness": "(1/C_f - 1)/U_c", "excess surface": "S_f/U_c"}
SYMBOLS = {"cleanliness": "C_f", "excess surface": "S_f"}
LIMITS = {"cleanliness": "0 < C_f <= 1", "excess surface": "S_f >= 0"}


@dataclass(frozen=True)
class SpecifiedFouling:
    """The steps of a specified fouling: the whole resistance on the basis area, and the parts of its terms."""

    scope: Scope
    specified: FoulingSpecified

    def open_figures(self) -> tuple[OpenFigure, ...]:
        """The clean U that the specification refers to."""
        first = self.scope.constant(
            f"{OWNER}/first U", FIRST_U, vocabulary()["overall coefficient"].dimension
        )
        return (OpenFigure(self._clean, "circuit/U", CLEAN, first, first),)

    @property
    def _clean(self) -> str:
        name = f"{OWNER}/U clean"
        self.scope.dimensions[name] = vocabulary()["overall coefficient"].dimension
        return name

    def checks(self) -> tuple[ChainCheck, ...]:
        """The specification lies where it can: a fault of the file otherwise."""
        limit = Limit(
            "specified fouling",
            parse_expression(LIMITS[self.specified.kind]),
            "stop",
            "a deposit adds resistance, or none",
            "common practice",
            "common practice",
            self.specified.place,
        )
        figures = {SYMBOLS[self.specified.kind]: self._figure()}
        return (ChainCheck(f"{OWNER} / {limit.id}", OWNER, OWNER, limit, figures),)

    def _figure(self) -> str:
        return self.scope.value(self.specified.value, "ratio", OWNER, self.specified.kind)

    def resistance(self, term: Term, basis: str, own: str) -> str:
        """The id of a term's resistance on its own area ``own``; ``basis`` is the basis area. Empty after a fault."""
        whole = self.scope.relation_step(
            f"{OWNER}/R whole",
            "R_f",
            f"fouling of the whole unit for {self.specified.kind}",
            term.name,
            parse_expression(RELATIONS[self.specified.kind]),
            {SYMBOLS[self.specified.kind]: self._figure(), "U_c": self._clean},
            f"specified as {self.specified.kind}; U_c is the clean U on the basis area",
            "area resistance",
        )
        self.scope.assume(
            f"{OWNER}/specified",
            f"The fouling of the whole unit is specified as {self.specified.kind}; the allowances follow from U clean.",
            "fouling specified as in the file",
            "fouling terms",
        )
        share = self._share(term)
        if not share:
            return ""
        text, inputs = "x*R_f", {"x": share, "R_f": whole}
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
