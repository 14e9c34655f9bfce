"""The figures of a calculation that are not known exactly: givens with a tolerance, factors of methods."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

from calcbook.calcfile.calculation import Given, Tolerance
from calcbook.chain.checks import state_of_check
from calcbook.chain.factors import factor_of, films_of
from calcbook.chain.solve import Solution, chosen
from calcbook.chain.types import Branch, Candidate, Chain, Input
from calcbook.chain.uncertainty_outcome import BudgetInput, LeftOut
from calcbook.faults import Collector
from calcbook.formulas import number_text
from calcbook.quantities import QuantityFault, QuantityKind, read_tolerance
from calcbook.uncertainty.accuracy import factor_of_card
from calcbook.uncertainty.distributions import (
    Distribution,
    Normal,
    Rectangular,
    Student,
    Triangular,
    positive,
)

# Of a value and its tolerance added up, relative.
ROUNDING = 1e-12
BEYOND = "; stated for the range of the card, and used outside it here"


@dataclass(frozen=True, slots=True)
class Uncertain:
    """An uncertain figure: its line in a budget, and the law that samples are drawn from."""

    line: BudgetInput
    distribution: Distribution

    @property
    def id(self) -> str:
        return self.line.id

    @property
    def value(self) -> float:
        return self.line.value

    @property
    def standard(self) -> float:
        return self.line.standard

    @property
    def degrees(self) -> float:
        return self.line.degrees


def stated_figures(chain: Chain, collector: Collector, case: str = "") -> tuple[Uncertain, ...]:
    """Every given with a tolerance in a case, in the order of the file.

    Codes: tolerance-beyond-value, and those of ``read_tolerance`` once the kind of the given is known.
    """
    found = []
    restated = chain.calculation.cases.get(case, {})
    figures = chain.case_inputs(case)
    for symbol, base in chain.calculation.givens.items():
        given = restated.get(symbol, base)
        item = chain.inputs[f"given/{symbol}"]
        item = replace(item, value=float(figures[item.id]))
        if given.tolerance is None:
            continue
        one = _stated(given, given.tolerance, item, _floor_of(chain, item), collector)
        if one is not None:
            found.append(one)
    return tuple(found)


def _floor_of(chain: Chain, item: Input) -> str:
    """The sign that a given must keep: that of its kind, which only a use in the chain gives it."""
    used = chain.used_in.get(item.symbol, ())
    is_typed = any(not place.startswith("derived ") for place in used)
    return item.kind.sign if is_typed and item.kind.reading != "gauge" else "any"


def _stated(
    given: Given, tolerance: Tolerance, item: Input, floor: str, collector: Collector
) -> Uncertain | None:
    try:
        read = read_tolerance(tolerance.text, item.kind)
    except QuantityFault as error:
        collector.take([error.within(tolerance.place, f"tolerance of {given.symbol}")])
        return None
    width = read.half_width * abs(item.value) if read.relative else read.half_width
    if width == 0.0:
        return None
    law = _law(tolerance, item, floor, width)
    if law is None:
        must = "zero or above" if floor == "not negative" else "above zero"
        collector.add(
            "tolerance-beyond-value",
            tolerance.place,
            f"the tolerance of `{given.symbol}` takes it below what it can be: its {item.kind.name} is {must}",
            found=f"{given.value.text} with {tolerance.text}",
            expected="a tolerance smaller than the value",
        )
        return None
    most = item.kind.bounds[1]
    if item.value + width > most * (1.0 + ROUNDING):
        collector.add(
            "tolerance-beyond-value",
            tolerance.place,
            f"the tolerance of `{given.symbol}` takes it beyond what it can be: its {item.kind.name} is"
            f" {item.kind.most} or less",
            found=f"{given.value.text} with {tolerance.text}",
            expected="a tolerance that ends there",
        )
        return None
    rule = _rule(tolerance)
    line = BudgetInput(
        item.id,
        given.symbol,
        given.meaning,
        item.kind,
        item.value,
        law.standard,
        law.words,
        rule,
        tolerance.degrees,
        False,
    )
    return Uncertain(line, law)


def _law(tolerance: Tolerance, item: Input, floor: str, width: float) -> Distribution | None:
    """The law of a given; None where it would take a quantity below what it can be."""
    has_floor = floor != "any"
    if has_floor and (width > item.value or (width == item.value and floor == "positive")):
        return None
    if item.kind.scale == "point" and width >= item.value:
        return None
    if tolerance.kind == "rectangular":
        return Rectangular(item.value, width)
    if tolerance.kind == "triangular":
        return Triangular(item.value, width)
    standard = width / tolerance.factor
    if math.isfinite(tolerance.degrees):
        return Student(item.value, standard, tolerance.degrees)
    return positive(item.value, standard) if has_floor else Normal(item.value, standard)


def _rule(tolerance: Tolerance) -> str:
    words = {
        "rectangular": f"± {tolerance.text}, divided by √3",
        "triangular": f"± {tolerance.text}, triangular, divided by √6",
        "standard": f"standard {tolerance.text}",
        "expanded": f"expanded {tolerance.text}, divided by k = {number_text(tolerance.factor, 4)}",
    }
    return words[tolerance.kind]


def method_figures(
    chain: Chain, solutions: Mapping[str, Solution]
) -> tuple[tuple[Uncertain, ...], tuple[LeftOut, ...]]:
    """A factor for every card that may give a film coefficient, and the cards that act without one.

    Cards that another sample may choose are among the factors; only those that act at the stated values can
    be left out.
    """
    found: dict[str, Uncertain] = {}
    left_out: dict[tuple[str, str], LeftOut] = {}
    for branch in films_of(chain):
        acting = {chosen(branch, solution).method.id for solution in solutions.values()}
        for candidate in branch.candidates:
            method = candidate.method
            factor = factor_of_card(method, chain.library)
            if isinstance(factor, str):
                if method.id in acting:
                    left_out[branch.name, method.id] = LeftOut(branch.name, method.id, factor)
                continue
            name = factor_of(method)
            item = chain.inputs[name]
            law = factor.distribution
            beyond = BEYOND if _is_beyond_range(branch, candidate, solutions) else ""
            if name in found and not beyond:
                continue
            found[name] = Uncertain(
                BudgetInput(
                    name,
                    item.symbol,
                    item.title,
                    item.kind,
                    item.value,
                    law.standard,
                    law.words,
                    f"{factor.rule}{beyond}",
                    math.inf,
                    True,
                ),
                law,
            )
    return tuple(found.values()), tuple(left_out.values())


def _is_beyond_range(branch: Branch, candidate: Candidate, solutions: Mapping[str, Solution]) -> bool:
    """Whether a method acts outside its range, accepted or not: what its card says of itself is not said of that."""
    return any(
        check.limit.level == "range" and state_of_check(check, solution) == "outside"
        for solution in solutions.values()
        if chosen(branch, solution) is candidate
        for check in candidate.checks
    )


def has_floor(kind: QuantityKind) -> bool:
    """Whether a quantity must stay above zero: a sample that does not has no answer."""
    return kind.sign == "positive" and kind.reading != "gauge"
