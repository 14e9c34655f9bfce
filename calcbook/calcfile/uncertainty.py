"""What `uncertainty:` asks for, as the file says it: results, coverage, digits, and correlated givens."""

from __future__ import annotations

import re
from collections.abc import Collection
from typing import NamedTuple

from calcbook.calcfile import descriptions as described
from calcbook.documents import Fields, Node, Scalar, Sequence, read_mapping
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.quantities import DIMENSIONLESS, QuantityFault, read_any

USUAL_COVERAGE = 0.95
USUAL_DIGITS = 1
# Below half, an interval says nothing; above 99.9 % a million samples hold too few in each tail.
LOWEST_COVERAGE, HIGHEST_COVERAGE = 0.5, 0.999
COEFFICIENT = re.compile(r"[+-]?([0-9]{1,3}(\.[0-9]{1,15})?|\.[0-9]{1,15})")


class Correlation(NamedTuple):
    """Two givens whose errors go together, with their correlation coefficient."""

    first: str
    second: str
    coefficient: float
    source: str
    place: Place


class AskedResult(NamedTuple):
    """A result whose uncertainty is asked for, by name."""

    name: str
    place: Place


class UncertaintyText(NamedTuple):
    """The `uncertainty:` of a file. ``digits`` are the significant digits of a standard uncertainty that
    the sampling makes sure of."""

    results: tuple[AskedResult, ...]
    coverage: float
    digits: int
    correlations: tuple[Correlation, ...]
    place: Place
    case: str = ""


def read_uncertainty(
    node: Node | None, symbols: Collection[str], cases: Collection[str], collector: Collector
) -> UncertaintyText | None:
    """Read `uncertainty:`; ``symbols`` are the givens of the file, ``cases`` its cases. None where not stated."""
    if node is None:
        return None
    fields = read_mapping(node, described.UNCERTAINTY, collector, node.place)
    return UncertaintyText(
        _results(fields.node("of"), collector),
        _coverage(fields.scalar("coverage"), collector),
        int(fields.text("digits", str(USUAL_DIGITS))),
        _correlations(fields.node("correlation"), symbols, collector),
        node.place,
        _case(fields.scalar("case"), cases, collector),
    )


def _case(node: Scalar | None, cases: Collection[str], collector: Collector) -> str:
    if node is None or node.text in cases:
        return node.text if node is not None else ""
    collector.add(
        "choice-unknown",
        node.place,
        f"there is no case `{shown(node.text)}`",
        found=shown(node.text),
        expected=", ".join(cases) or "a case of the file",
        nearest=nearest_names(node.text, cases),
    )
    return ""


def _results(node: Node | None, collector: Collector) -> tuple[AskedResult, ...]:
    found: dict[str, AskedResult] = {}
    for item in node.items if isinstance(node, Sequence) else ():
        if not isinstance(item, Scalar):
            collector.add(
                "value-not-text", item.place, "the name of a result is wanted here", expected="[U_service]"
            )
            continue
        name = " ".join(item.text.split())
        found.setdefault(name, AskedResult(name, item.place))
    return tuple(found.values())


def _coverage(node: Scalar | None, collector: Collector) -> float:
    if node is None:
        return USUAL_COVERAGE
    try:
        quantity = read_any(node.text)
    except QuantityFault:
        quantity = None
    if (
        quantity is None
        or quantity.dimension != DIMENSIONLESS
        or not LOWEST_COVERAGE <= quantity.value <= HIGHEST_COVERAGE
    ):
        collector.add(
            "number-unreadable",
            node.place,
            "this is no coverage probability",
            found=shown(node.text),
            expected="a share from 50 % to 99.9 %, such as 95 %",
        )
        return USUAL_COVERAGE
    return quantity.value


def _correlations(
    node: Node | None, symbols: Collection[str], collector: Collector
) -> tuple[Correlation, ...]:
    found: dict[frozenset[str], Correlation] = {}
    for item in node.items if isinstance(node, Sequence) else ():
        one = _correlation(
            read_mapping(item, described.CORRELATION, collector, item.place), symbols, collector
        )
        if one is None:
            continue
        pair = frozenset((one.first, one.second))
        if pair in found:
            collector.add(
                "correlation-twice",
                one.place,
                f"the correlation of {one.first} and {one.second} is stated twice",
                expected="one coefficient for each pair",
            )
            continue
        found[pair] = one
    return tuple(found.values())


def _correlation(fields: Fields, symbols: Collection[str], collector: Collector) -> Correlation | None:
    pair = _pair(fields, symbols, collector)
    coefficient = _coefficient(fields.scalar("r"), collector)
    if pair is None or coefficient is None:
        return None
    return Correlation(*pair, coefficient, fields.text("source"), fields.place_of("between"))


def _pair(fields: Fields, symbols: Collection[str], collector: Collector) -> tuple[str, str] | None:
    node = fields.node("between")
    if not isinstance(node, Sequence):
        return None
    names = [item.text for item in node.items if isinstance(item, Scalar)]
    if len(names) != 2 or len(node.items) != 2 or names[0] == names[1]:
        collector.add(
            "correlation-pair",
            node.place,
            "a correlation stands between two different givens",
            found=shown(", ".join(names)),
            expected="between: [T_hot, T_cold]",
        )
        return None
    for item in node.items:
        assert isinstance(item, Scalar)
        if item.text not in symbols:
            collector.add(
                "symbol-unknown",
                item.place,
                f"`{shown(item.text)}` is no given",
                found=shown(item.text),
                expected=", ".join(symbols),
                nearest=nearest_names(item.text, symbols),
            )
            return None
    return names[0], names[1]


def _coefficient(node: Scalar | None, collector: Collector) -> float | None:
    if node is None:
        return None
    if COEFFICIENT.fullmatch(node.text) is None:
        collector.add(
            "number-unreadable",
            node.place,
            "this is no correlation coefficient",
            found=shown(node.text),
            expected="a number from -1 to 1, such as 0.5",
        )
        return None
    value = float(node.text)
    if abs(value) > 1.0:
        collector.add(
            "correlation-outside",
            node.place,
            "a correlation coefficient lies between -1 and 1",
            found=shown(node.text),
            expected="a number from -1 to 1, such as 0.5",
        )
        return None
    return value
