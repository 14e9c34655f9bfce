"""Check points of cards: do the printed equations give the published figures, and which constants are covered.

Coverage is by mutation: each figure of a card's relations and tables is moved by one per cent in turn,
and at least one outside check point must then fail.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields, is_dataclass, replace

import numpy as np

from calcbook.faults import Collector, Faults, nearest_names
from calcbook.formulas import Node, Number, Relation, write
from calcbook.library import Library, evaluate_method
from calcbook.library.cards import Assignment, CheckPoint, Friction, Line, Material, Method, Solve, Sum
from calcbook.library.conductivity import ConductivityTable

MUTATION = 1.01


@dataclass(frozen=True, slots=True)
class PointResult:
    """One figure of one check point: expected, got, and whether it lies within."""

    card: str
    given: str
    symbol: str
    expected: float
    got: float
    within: float
    source: str
    standing: str

    @property
    def deviation(self) -> float:
        """Relative deviation from the reference; absolute where the reference is zero."""
        if self.expected == 0.0:
            return abs(self.got)
        return abs(self.got / self.expected - 1.0)

    @property
    def holds(self) -> bool:
        return bool(self.deviation <= self.within)


@dataclass(frozen=True, slots=True)
class Uncovered:
    """A figure of a card that no outside check point would miss."""

    card: str
    where: str
    figure: str


def method_points(card: Method, library: Library) -> list[PointResult]:
    """Run every check point of a method card."""
    return [result for point in card.check_points for result in _method_point(card, point, library)]


def _method_point(card: Method, point: CheckPoint, library: Library) -> Iterator[PointResult]:
    given: dict[str, object] = {symbol: _figure(text) for symbol, text in point.given.items()}
    values = evaluate_method(card, given, library)
    text = ", ".join(f"{symbol} = {figure}" for symbol, figure in point.given.items())
    for symbol, expected in point.gives.items():
        got = values.get(symbol, float("nan"))
        yield PointResult(card.id, text, symbol, expected, got, point.within, point.source, point.standing)


def _figure(text: str) -> object:
    try:
        return float(text)
    except ValueError:
        return text


def material_points(card: Material) -> list[PointResult]:
    """Run every check point of a material card: k at T, or the mean of k between T_1 and T_2."""
    table = ConductivityTable(card)
    results = []
    for point in card.check_points:
        figures = {symbol: np.asarray(float(text)) for symbol, text in point.given.items()}
        got = table.mean(figures["T_1"], figures["T_2"]) if "T_1" in figures else table.value(figures["T"])
        text = ", ".join(f"{symbol} = {figure}" for symbol, figure in point.given.items())
        results.append(
            PointResult(
                card.id, text, "k", point.gives["k"], float(got), point.within, point.source, point.standing
            )
        )
    return results


def check_method(card: Method, library: Library) -> None:
    """Check a method card fully. Raises ``Faults``: what its program raises, check-point-unknown,
    check-point-failed, check-points-missing, card-unchecked."""
    library.program(card.id)
    collector = Collector()
    for name in card.serves:
        if name not in library.names("situations"):
            collector.add(
                "situation-unknown",
                card.where,
                f"{card.id} serves `{name}`, which the library does not have",
                found=name,
                expected="a situation of `calcbook library`",
                nearest=nearest_names(name, library.names("situations")),
            )
    _check_count(card, collector)
    for point in card.check_points:
        try:
            results = list(_method_point(card, point, library))
        except KeyError as error:
            collector.add("check-point-unknown", point.where, str(error.args[0]))
            continue
        _check_results(results, point, collector)
    collector.stop_if_any()


def check_material(card: Material) -> None:
    """Check a material card fully. Raises ``Faults`` as ``check_method`` does."""
    collector = Collector()
    _check_count(card, collector)
    for point, result in zip(card.check_points, material_points(card), strict=True):
        _check_results([result], point, collector)
    collector.stop_if_any()


def check_situation(name: str, library: Library) -> None:
    """Check that a situation's methods and choice table exist and that its choice names its methods."""
    situation = library.situation(name)
    collector = Collector()
    for choice in situation.choose:
        if choice.use not in situation.methods:
            collector.add(
                "method-unknown",
                choice.where,
                f"`{choice.use}` is not among the methods of the situation",
                expected=", ".join(situation.methods),
            )
    for method in situation.methods:
        try:
            library.program(method)
        except Faults as faults:
            collector.take(faults.faults)
    if situation.friction is not None:
        _check_friction(situation.friction, library, collector)
    collector.stop_if_any()


def _check_friction(friction: Friction, library: Library, collector: Collector) -> None:
    """That the laws of a situation give a friction factor, and the card under `dp` a pressure drop."""
    asked = (
        *((choice.use, "f", choice.where) for choice in friction.choose),
        (friction.dp, "dp", friction.where),
    )
    for method, gives, where in asked:
        try:
            card = library.program(method).method
        except Faults as faults:
            collector.take(faults.faults)
            continue
        if card.gives != gives:
            collector.add(
                "method-not-friction",
                where,
                f"`{method}` gives {card.gives}, not {gives}",
                found=card.gives,
                expected=gives,
            )


def _check_count(card: Method | Material, collector: Collector) -> None:
    outside = sum(point.is_outside for point in card.check_points)
    if len(card.check_points) < 2:
        collector.add("check-points-missing", card.where, f"{card.id} has fewer than two check points")
    if card.state.status == "checked" and not outside:
        collector.add(
            "card-unchecked",
            card.where,
            f"{card.id} is called checked without an outside check point",
            expected="a check point from outside the project, or state trial",
        )


def _check_results(results: list[PointResult], point: CheckPoint, collector: Collector) -> None:
    for result in results:
        if not result.holds:
            collector.add(
                "check-point-failed",
                point.where,
                f"{result.card}: {result.symbol} deviates by {result.deviation:.3g}",
                found=repr(result.got),
                expected=f"{result.expected!r} within {result.within:g}",
            )


def uncovered_constants(card: Method, library: Library) -> list[Uncovered]:
    """The figures of a method card that no outside check point misses when they move by one per cent."""
    outside = replace(card, check_points=tuple(point for point in card.check_points if point.is_outside))
    result = []
    for where, figure, mutant in _mutants(outside):
        if all(point.holds for point in method_points(mutant, library)):
            result.append(Uncovered(card.id, where, figure))
    return result


def _mutants(card: Method) -> Iterator[tuple[str, str, Method]]:
    for index, line in enumerate(card.lines):
        for figure, mutant in _line_mutants(line):
            lines = (*card.lines[:index], mutant, *card.lines[index + 1 :])
            yield f"relation of {line.symbol}", figure, replace(card, lines=lines)
    for table in card.tables.values():
        found_by = {"from", "to", *table.by}
        for row in range(table.cells.shape[0]):
            for column, name in enumerate(table.columns):
                if name in found_by or table.cells[row, column] == 0.0:
                    continue
                cells = table.cells.copy()
                cells[row, column] *= MUTATION
                tables = {**card.tables, table.name: replace(table, cells=cells)}
                yield (
                    f"table {table.name}, row {row + 1}, {name}",
                    table.texts[row][column],
                    replace(card, tables=tables),
                )


def _line_mutants(line: Line) -> Iterator[tuple[str, Line]]:
    if isinstance(line, Assignment):
        for figure, tree in _tree_mutants(line.relation.tree):
            yield figure, replace(line, relation=_with_tree(line.relation, tree))
    elif isinstance(line, Solve):
        for figure, tree in _tree_mutants(line.equation.tree):
            yield figure, replace(line, equation=_with_tree(line.equation, tree))
        if line.sum is not None:
            for figure, inner in _sum_mutants(line.sum):
                yield figure, replace(line, sum=inner)
    else:
        yield from _sum_mutants(line)


def _sum_mutants(line: Sum) -> Iterator[tuple[str, Sum]]:
    for figure, tree in _tree_mutants(line.of.tree):
        yield figure, replace(line, of=_with_tree(line.of, tree))


def _with_tree(relation: Relation, tree: Node) -> Relation:
    return replace(relation, tree=tree, text=write(tree))


def _tree_mutants(tree: Node) -> Iterator[tuple[str, Node]]:
    """Every tree in which one non-zero number is moved."""
    if isinstance(tree, Number):
        if tree.value != 0.0:
            moved = tree.value * MUTATION
            yield tree.text, replace(tree, value=moved, text=repr(moved))
        return
    for name in (item.name for item in fields(tree) if item.init):
        part = getattr(tree, name)
        for figure, mutant in _part_mutants(part):
            yield figure, replace(tree, **{name: mutant})


def _part_mutants(part: object) -> Iterator[tuple[str, object]]:
    if isinstance(part, tuple):
        for index, item in enumerate(part):
            for figure, mutant in _part_mutants(item):
                yield figure, (*part[:index], mutant, *part[index + 1 :])
    elif is_dataclass(part) and not isinstance(part, type):
        yield from _tree_mutants(part)  # type: ignore[arg-type]
