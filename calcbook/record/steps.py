"""One row of the chain as texts: relation, values put in, clean, service, unit, basis.

A line with values re-evaluates to the printed value: the operands carry as many digits as that takes.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from typing import Any, NamedTuple

import numpy as np

from calcbook.chain.fluids import BoilingOperation, FixedOperation, LiquidOperation, PropertyOperation
from calcbook.chain.outcome import CaseOutcome, StepRow
from calcbook.chain.solve import Solution
from calcbook.chain.types import CLEAN, CONDITIONS, SERVICE, Chain, ChainStep, Group, Layer, StreamState
from calcbook.formulas import (
    Compare,
    Node,
    Relation,
    evaluate,
    number_text,
    parse_expression,
    write,
    write_with_values,
)
from calcbook.formulas.names import written_name
from calcbook.library.cards import Sum
from calcbook.library.cards import Table as CardTable
from calcbook.library.operations import LookupOperation, RelationOperation, SolveOperation, SumOperation
from calcbook.library.reading import is_number, vocabulary
from calcbook.quantities import QuantityKind
from calcbook.record.numbers import NOT_USED, PLAIN_DIGITS, celsius, number, plain, unit_text, value_text

Values = Mapping[str, Any]
PASCALS_OF_BAR = 1e5
LISTED_DIGITS = 7
NO_DEPOSIT = "no deposit"
SATURATED = "saturated"


class ChainLine(NamedTuple):
    """The texts of one row; ``clean_values`` are the clean values put in."""

    quantity: str
    relation: str
    values: str
    clean: str
    service: str
    unit: str
    basis: str
    clean_values: str

    @property
    def cells(self) -> tuple[str, ...]:
        return (self.quantity, self.relation, self.values, self.clean, self.service, self.unit, self.basis)

    @property
    def differs(self) -> bool:
        return self.clean not in (self.service, NOT_USED)


class StepTexts:
    """The texts of steps of one case."""

    def __init__(self, chain: Chain, case: CaseOutcome, cards: Mapping[str, str]):
        self.chain = chain
        self.case = case
        self.methods = frozenset(name.removeprefix("method ") for name in cards if name.startswith("method "))
        self.steps = {row.step.id: row.step for term in case.chains for row in term.rows}
        self.steps |= {row.step.id: row.step for row in case.circuit}
        self.closing = _closing_relations(chain)
        self.deposits = frozenset(
            element.resistance
            for element in chain.elements
            if isinstance(element, Layer) and element.kind == "fouling"
        )
        self.streams = {
            branch.name: branch.stream for group in (chain.inner, chain.outer) for branch in group.branches
        } | {
            element.name: element.name
            for element in chain.elements
            if isinstance(element, Layer) and element.gap is not None
        }

    # -- rows ---------------------------------------------------------------------------------------

    def line(self, row: StepRow) -> ChainLine:
        """The texts of one row of the chain."""
        step = row.step
        kind = step.kind
        service = self._values(step, SERVICE, row.service)
        clean = service if self._is_alike(row) else self._values(step, CLEAN, row.clean)
        return ChainLine(
            quantity=_quantity(step.title, step.symbol),
            relation=self.relation(step),
            values=service,
            clean=_shown_value(step, row.clean),
            service=_shown_value(step, row.service),
            unit=unit_text(kind.unit) if kind is not None else "1",
            basis=self._basis(step, row),
            clean_values=clean,
        )

    def _is_alike(self, row: StepRow) -> bool:
        """Whether a relation takes and gives the same figures clean and in service: its line is then the same."""
        step = row.step
        if not isinstance(step.operation, RelationOperation) or step.id in self.deposits:
            return False
        clean, service = (self.case.solutions[condition].values for condition in (CLEAN, SERVICE))
        return row.clean == row.service and all(
            _is_same(clean.get(bound), service.get(bound)) for bound in step.inputs.values()
        )

    def closing_line(self, name: str) -> ChainLine:
        """The row of a figure that the solution gives: a surface temperature or a heat flux."""
        closing = self.closing[name]
        kind = closing.kind
        names = self._names(closing.inputs, closing.symbol)
        notes = () if names else self._notes(closing.inputs, closing.symbol)
        texts, values = {}, {}
        for condition in CONDITIONS:
            solution = self.case.solutions[condition]
            texts[condition] = value_text(solution.number(name), kind)
            arguments = {symbol: solution.values[bound] for symbol, bound in closing.inputs.items()}
            values[condition] = write_with_values(closing.relation, arguments, texts[condition])
        return ChainLine(
            quantity=_quantity(closing.title, closing.symbol),
            relation=write(closing.relation, names),
            values=values[SERVICE],
            clean=texts[CLEAN],
            service=texts[SERVICE],
            unit=unit_text(kind.unit),
            basis="; ".join(("closed with the circuit", *notes))
            + _celsius_note(kind, *(self.case.solutions[condition].number(name) for condition in CONDITIONS)),
            clean_values=values[CLEAN],
        )

    # -- relation -----------------------------------------------------------------------------------

    def relation(self, step: ChainStep) -> str:
        """The relation of a step in the trade's signs, or the words for what is no relation."""
        operation = step.operation
        if isinstance(operation, RelationOperation):
            return write(operation.relation, self._renamed(step))
        if isinstance(operation, LookupOperation):
            return f"table {operation.table.name}, column {operation.column}"
        if isinstance(operation, SolveOperation):
            low, high = operation.line.between
            inner = operation.line.sum
            named = f", {written_name(inner.symbol)} the {_sum_words(inner)}" if inner is not None else ""
            return (
                f"root {written_name(operation.line.symbol)} of {write(operation.line.equation)}{named},"
                f" between {number(low)} and {number(high)}"
            )
        if isinstance(operation, SumOperation):
            return _sum_words(operation.line)
        if isinstance(operation, PropertyOperation | BoilingOperation | FixedOperation):
            return "property"
        if isinstance(operation, LiquidOperation):
            return "phase of the fluid"
        raise TypeError(f"{type(operation).__name__} has no printed form")

    def _renamed(self, step: ChainStep) -> dict[str, str]:
        """A method keeps the symbols of its source; elsewhere the figures' own symbols are written."""
        return {} if step.basis in self.methods else self._names(step.inputs, step.symbol)

    def _names(self, inputs: Mapping[str, str], own: str) -> dict[str, str]:
        """Written names of symbols outside methods: the symbol of the figure that stands there.

        None is replaced where two figures of one row, or a figure and the row itself, would share a symbol.
        """
        names = {local: written_name(self._symbol(bound) or local) for local, bound in inputs.items()}
        if len({*names.values(), written_name(own)}) < len(names) + (own not in inputs):
            return {}
        return {local: name for local, name in names.items() if "." not in local}

    def _symbol(self, name: str) -> str:
        """The symbol of a figure by id, empty where it has none of its own."""
        if name in self.steps:
            return self.steps[name].symbol
        item = self.chain.inputs.get(name)
        return item.symbol if item is not None and item.is_given else ""

    # -- values -------------------------------------------------------------------------------------

    def _values(self, step: ChainStep, condition: str, value: float | bool) -> str:
        solution = self.case.solutions[condition]
        if condition == CLEAN and step.id in self.deposits:
            return NO_DEPOSIT
        if math.isnan(plain(value)) or any(bound not in solution.values for bound in step.inputs.values()):
            return NOT_USED
        arguments = {local: solution.values[bound] for local, bound in step.inputs.items()}
        operation = step.operation
        if isinstance(operation, RelationOperation):
            flag = isinstance(value, bool)
            return write_with_values(
                operation.relation, arguments, None if flag else value_text(value, step.kind)
            )
        if isinstance(operation, LookupOperation):
            return f"table {operation.table.name}: row for {_row_words(operation, arguments)}"
        if isinstance(operation, SolveOperation):
            return _both_sides(operation, arguments, plain(value))
        if isinstance(operation, SumOperation):
            return f"{operation.line.terms} terms with {_listed(operation.symbols, arguments)}"
        if isinstance(operation, PropertyOperation | LiquidOperation):
            return self._state(step, operation, solution, condition)
        if isinstance(operation, BoilingOperation):
            pressure = solution.number(step.inputs["p"]) / PASCALS_OF_BAR
            return f"{operation.source.text.name}, {number(pressure, 5)} bar, {SATURATED}"
        if isinstance(operation, FixedOperation):
            return operation.source.text.name
        raise TypeError(f"{type(operation).__name__} has no printed form")

    def _state(
        self,
        step: ChainStep,
        operation: PropertyOperation | LiquidOperation,
        solution: Solution,
        condition: str,
    ) -> str:
        """Fluid, temperature, pressure, fraction and phase at which a property is taken."""
        asked = operation.operation if isinstance(operation, LiquidOperation) else operation
        temperature = solution.number(step.inputs["T"])
        parts = [asked.source.text.name, f"{number(temperature, 5)} K ({celsius(temperature)} °C)"]
        if "w" in step.inputs:
            basis = asked.source.text.basis or "mass fraction"
            parts.append(f"{basis} {number(solution.number(step.inputs['w']), 4)}")
        if "p" in step.inputs:
            parts.append(f"{number(solution.number(step.inputs['p']) / PASCALS_OF_BAR, 5)} bar")
        elif asked.source.text.kind == "name":
            parts.append(SATURATED)
        phase = asked.phase or self._phase(step, temperature, condition)
        return ", ".join([*parts, *([phase] if phase else [])])

    def _phase(self, step: ChainStep, temperature: float, condition: str) -> str:
        """The phase that the properties table states for this step's state."""
        for row in self.case.properties:
            if row.place == "bulk":
                fits = step.id.startswith(f"stream {row.stream}/")
            else:
                fits = f"/{row.place}/" in step.id and self.streams.get(step.owner) == row.stream
            if fits and row.condition in ("", condition) and row.temperature == temperature:
                return row.phase
        return ""

    # -- basis --------------------------------------------------------------------------------------

    def _basis(self, step: ChainStep, row: StepRow) -> str:
        """What a row rests on, which figures stand for its symbols, and its Celsius temperature."""
        operation = step.operation
        parts = [step.basis]
        if isinstance(operation, PropertyOperation | LiquidOperation | BoilingOperation | FixedOperation):
            asked = operation.operation if isinstance(operation, LiquidOperation) else operation
            parts = [
                next(
                    (
                        f"properties of {name}"
                        for name, state in self.chain.fluids.items()
                        if state.fluid is asked.source
                    ),
                    step.basis,
                )
            ]
        elif step.basis in self.methods:
            parts += self._notes(step.inputs, step.symbol, step.basis)
        else:
            parts += (
                self._notes(step.inputs, step.symbol)
                if not self._renamed(step)
                else self._literals(step.inputs)
            )
        return "; ".join(parts) + _celsius_note(step.kind, row.clean, row.service)

    def _literals(self, inputs: Mapping[str, str]) -> list[str]:
        """Which figures stated in place stand in a row."""
        found = ((local, self.chain.inputs.get(bound)) for local, bound in inputs.items())
        return [
            f"{written_name(local)} is the {item.title}"
            for local, item in found
            if item and not item.is_given
        ]

    def _notes(self, inputs: Mapping[str, str], own: str, method: str = "") -> list[str]:
        """Which figures stand for symbols that do not say it; ``method`` is the card of the row."""
        notes = []
        for local, bound in inputs.items():
            symbol = self._symbol(bound)
            if bound in self.chain.constants:
                notes += self._constant_note(local, bound)
            elif symbol and "." not in local:
                origin = self.steps[bound].basis if bound in self.steps else ""
                words = f" of {origin}" if origin in self.methods and origin != method else ""
                if words or symbol != local:
                    given = "the given " if bound in self.chain.inputs and symbol in (own, *inputs) else ""
                    notes.append(f"{written_name(local)} is {given}{written_name(symbol)}{words}")
        return notes + self._literals(inputs)

    def _constant_note(self, local: str, bound: str) -> list[str]:
        """The constant of a card that stands for another symbol of a card used by it."""
        _, _, place = bound.partition("/")
        card, _, symbol = place.rpartition("/")
        if card not in self.methods or symbol.rpartition(":")[2] == local or symbol.startswith("word "):
            return []
        return [f"{written_name(local)} is {written_name(symbol)} of {card}"]


def pressure_words(state: StreamState) -> str:
    """What stands for a pressure that the file does not state: a pure fluid is then saturated."""
    return SATURATED if state.fluid.text.kind == "name" else "not stated"


def _is_same(one: object, other: object) -> bool:
    """Whether two figures, or two tables, are one."""
    if isinstance(one, np.ndarray) and isinstance(other, np.ndarray):
        return bool(one == other)
    return one is other


def _celsius_note(kind: QuantityKind | None, clean: float | bool, service: float | bool) -> str:
    """A temperature on the Celsius scale beside its row in kelvin."""
    if kind is None or kind.scale != "point":
        return ""
    texts = [celsius(plain(value)) for value in (clean, service)]
    if texts[0] == texts[1]:
        return f"; {texts[0]} °C"
    return f"; clean {texts[0]} °C, service {texts[1]} °C"


def _quantity(title: str, symbol: str) -> str:
    written = written_name(symbol)
    if title in ("", symbol):
        return written
    return title if symbol in title.split() else f"{title} {written}"


def _shown_value(step: ChainStep, value: float | bool) -> str:
    """The printed value of a row; one read from a table keeps so many digits that its cell is recognised."""
    if isinstance(step.operation, LookupOperation) and not math.isnan(plain(value)):
        return number(plain(value), LISTED_DIGITS)
    return value_text(value, step.kind)


def _listed(symbols: Iterable[str], arguments: Values) -> str:
    return ", ".join(
        f"{written_name(symbol)} = {number(plain(arguments[symbol]), LISTED_DIGITS)}" for symbol in symbols
    )


def _row_words(operation: LookupOperation, arguments: Values) -> str:
    """What a row of a table is found by: a choice in its word, all else as figures."""
    found = []
    for symbol in operation.symbols:
        word = _cell_word(operation.table, symbol, plain(arguments[symbol]))
        found.append(f"{written_name(symbol)} = {word}" if word else _listed((symbol,), arguments))
    return ", ".join(found)


def _cell_word(table: CardTable, symbol: str, value: float) -> str:
    """The word that stands in a table's column for a figure; empty for a column of figures."""
    if symbol not in table.columns:
        return ""
    column = table.columns.index(symbol)
    for cells, texts in zip(table.cells, table.texts, strict=True):
        if cells[column] == value:
            return "" if is_number(texts[column]) else texts[column]
    return ""


def _sum_words(line: Sum) -> str:
    return f"sum of {write(line.of)} for {line.over} = 0 to {line.terms - 1}"


def _both_sides(operation: SolveOperation, arguments: Values, root: float) -> str:
    """The equation with the root put in: both sides give the same figure."""
    equation = operation.line.equation.tree
    assert isinstance(equation, Compare)
    known = operation.completed({**arguments, operation.line.symbol: np.asarray(root)})
    return " = ".join(_side(side, known) for side in (equation.first, equation.rest[0][1]))


def _side(side: Node, known: Values) -> str:
    value = float(evaluate(side, known))
    return write_with_values(
        side, {name: known[name] for name in side.symbols}, number_text(value, PLAIN_DIGITS)
    )


# --- figures that the solution closes ----------------------------------------------------------------


class _Closing(NamedTuple):
    """A figure of the solution, and the relation of the circuit that it satisfies."""

    symbol: str
    title: str
    kind: QuantityKind
    relation: Relation
    inputs: Mapping[str, str]


def _closing_relations(chain: Chain) -> dict[str, _Closing]:
    """Surface temperatures, wall temperatures and fluxes by id, with what each follows from."""
    if not chain.has_temperatures:
        return {}
    kinds = vocabulary()
    found: dict[str, _Closing] = {}
    flux = {"q": chain.results["heat flux"]}
    numbers = {element.name: index for index, element in enumerate(chain.elements, 1)}

    def drop_before(count: int) -> tuple[str, dict[str, str]]:
        """The inner bulk temperature less the drops of the first elements."""
        names = [
            (f"R_{numbers[element.name]}", chain.results[f"R {element.name}"])
            for element in chain.elements[:count]
        ]
        summed = " + ".join(symbol for symbol, _ in names)
        text = "T_in" if not names else f"T_in - q*({summed})" if len(names) > 1 else f"T_in - q*{summed}"
        return text, {"T_in": chain.inner.bulk, **flux, **dict(names)}

    for place, element in enumerate(chain.elements):
        if isinstance(element, Layer) and element.first_temperature:
            for name, mark, words in (
                (element.first_temperature, "T_1", "inner"),
                (element.second_temperature, "T_2", "outer"),
            ):
                text, inputs = drop_before(place + (mark == "T_2"))
                found[name] = _closed(
                    mark, f"temperature at the {words} side", kinds["temperature"], text, inputs
                )
        if isinstance(element, Group):
            mark = f"R_{numbers[element.name]}"
            inputs = {**flux, mark: chain.results[f"R {element.name}"]}
            text = f"T_in - q*{mark}" if element.side == "inside" else f"T_out + q*{mark}"
            inputs["T_in" if element.side == "inside" else "T_out"] = element.bulk
            found[element.surface_temperature] = _closed(
                "T_s", "surface temperature", kinds["temperature"], text, inputs
            )
            area = chain.surfaces[element.surface].area
            found[element.flux] = _closed(
                "q",
                "heat flux at the surface",
                kinds["heat flux"],
                "abs(Q)/A",
                {"Q": chain.results["heat flow"], "A": area},
            )
    return found


def _closed(symbol: str, title: str, kind: QuantityKind, text: str, inputs: dict[str, str]) -> _Closing:
    relation = parse_expression(text)
    return _Closing(symbol, title, kind, relation, {name: inputs[name] for name in relation.symbols})
