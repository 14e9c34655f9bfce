"""The calculation chain: one table per term, with the constants and tables of cards that its rows take."""

from __future__ import annotations

from collections.abc import Iterable
from itertools import groupby

from calcbook.chain.duty import is_of_duty
from calcbook.chain.outcome import StepRow, TermChain
from calcbook.chain.types import Branch, Group, Layer
from calcbook.formulas import number_text
from calcbook.formulas.names import written_name
from calcbook.library.cards import Table as CardTable
from calcbook.library.conductivity import ConductivityTable
from calcbook.library.operations import LookupOperation
from calcbook.quantities import Dimension, si_unit
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table
from calcbook.record.numbers import (
    AS_GIVEN_DIGITS,
    PLAIN_DIGITS,
    celsius,
    in_report_unit,
    unit_text,
    with_unit,
)
from calcbook.record.page import Page
from calcbook.record.steps import NO_DEPOSIT, ChainLine, StepTexts

COLUMNS = ("Quantity", "Relation", "Values put in", "Clean", "Service", "Unit", "Basis")
READING = (
    "Values are in SI units: temperatures in kelvin, with the Celsius temperature in the basis. The values"
    " put in are those of service; each line gives the printed service value within its digits. A method's"
    " relation keeps the symbols of its source; the basis says which figure stands for them where it has"
    " another symbol. Figures that the circuit closes (surface and wall temperatures) take rows of the"
    " circuit at the end of this section."
)


def chain(page: Page) -> list[Block]:
    """Every step once, at the term that uses it first; then the circuit."""
    writer = _Writer(page)
    blocks: list[Block] = [Heading(2, "8. Calculation chain"), Paragraph(READING)]
    for term in page.base.chains:
        blocks += writer.term(term)
    return blocks + writer.circuit()


class _Writer:
    def __init__(self, page: Page):
        self.page = page
        self.texts = StepTexts(page.chain, page.base, page.solved.cards)
        self.printed: set[str] = set()

    def term(self, term: TermChain) -> list[Block]:
        """Notes, table, clean values, constants and tables of one term."""
        title = f"{term.name}: {term.title}" if term.title else term.name
        blocks: list[Block] = [Heading(3, title)]
        if term.notes:
            blocks.append(Bullets(term.notes))
        runs = _by_owner(term.rows) if len(self._branches(term.name)) > 1 else [("", list(term.rows))]
        tables: list[Block] = []
        for owner, rows in runs:
            lines = self.lines(rows)
            if lines and owner:
                tables.append(Paragraph(f"Steps of {owner}:"))
            tables += _chain_table(lines)
        if not tables:
            return [*blocks, Paragraph(self._without_steps(term.name))]
        return [*blocks, *tables, *self._constants(term.rows), *self._tables(term.rows)]

    def _branches(self, term: str) -> tuple[Branch, ...]:
        """The ways for heat side by side in a term; none for a layer."""
        for element in self.page.chain.elements:
            if isinstance(element, Group) and element.name == term:
                return element.branches
        return ()

    def circuit(self) -> list[Block]:
        """Resistances on the basis area, their sum, U on each surface; the duty; then every result by name."""
        rows = [row for row in self.page.base.circuit if not is_of_duty(row.step)]
        rated = [row for row in self.page.base.circuit if is_of_duty(row.step)]
        blocks: list[Block] = [
            Heading(3, "Circuit: resistances in series"),
            *_chain_table(self.lines(rows)),
        ]
        if rated:
            blocks += [
                Heading(3, "Duty: areas and effectiveness"),
                *_chain_table(self.lines(rated)),
                *self._constants(rated),
            ]
        return [
            *blocks,
            Heading(3, "Results by name"),
            Paragraph("Criteria and other calculations may name these results."),
            Table(("Name", "Value", "Meaning"), tuple(self._results())),
        ]

    def _results(self) -> Iterable[tuple[str, str, str]]:
        for name, result in self.page.base.results.items():
            yield (
                name,
                in_report_unit(result.value, result.kind, self.page.calculation.report, PLAIN_DIGITS),
                result.title,
            )

    # -- rows ---------------------------------------------------------------------------------------

    def lines(self, rows: Iterable[StepRow]) -> list[ChainLine]:
        """Rows not printed before, each preceded by the solved figures that it takes first."""
        found: list[ChainLine] = []
        for row in rows:
            if row.step.id in self.printed:
                continue
            for bound in row.step.inputs.values():
                found += self._closing(bound)
            self.printed.add(row.step.id)
            found.append(self.texts.line(row))
        return found

    def _closing(self, name: str) -> list[ChainLine]:
        if name not in self.texts.closing or name in self.printed:
            return []
        self.printed.add(name)
        return [self.texts.closing_line(name)]

    def _without_steps(self, term: str) -> str:
        """Where the figure of a term without steps of its own stands."""
        for element in self.page.chain.elements:
            if element.name != term:
                continue
            name = (
                element.resistance
                if isinstance(element, Layer)
                else element.branches[0].candidates[0].coefficient
            )
            item = self.page.chain.inputs.get(name)
            if item is not None:
                value = with_unit(number_text(item.value, AS_GIVEN_DIGITS), unit_text(item.kind.unit))
                return f"Stated: {written_name(item.symbol)} = {value}, {item.source or 'no source'}."
        return "Every figure of this term stands above."

    # -- constants and tables -------------------------------------------------------------------------

    def _constants(self, rows: Iterable[StepRow]) -> list[Block]:
        """Constants of the methods whose relations stand in these rows."""
        cards = dict.fromkeys(row.step.basis for row in rows)
        blocks: list[Block] = []
        for card in self.page.methods():
            if card.id in cards and card.constants:
                texts = (
                    f"{written_name(symbol)} = {_constant(value, dimension)}"
                    for symbol, (value, _, dimension) in card.constants.items()
                )
                blocks.append(Paragraph(f"Constants of {card.id}: {', '.join(texts)}."))
        return blocks

    def _tables(self, rows: Iterable[StepRow]) -> list[Block]:
        """Tables of cards that these rows read, as far as not printed yet."""
        blocks: list[Block] = []
        for row in rows:
            operation = row.step.operation
            if isinstance(operation, LookupOperation) and self._first(
                f"{row.step.basis}, table {operation.table.name}"
            ):
                blocks += _card_table(row.step.basis, operation.table)
            for local, bound in row.step.inputs.items():
                table = self.page.base.solutions["service"].values.get(bound)
                if isinstance(table, ConductivityTable) and self._first(f"{row.step.owner}, {local}"):
                    blocks += _material_table(local, row.step.owner, table)
        return blocks

    def _first(self, name: str) -> bool:
        if name in self.printed:
            return False
        self.printed.add(name)
        return True


def _constant(value: float, dimension: Dimension) -> str:
    return with_unit(number_text(value, AS_GIVEN_DIGITS), unit_text(si_unit(dimension)))


def _by_owner(rows: Iterable[StepRow]) -> list[tuple[str, list[StepRow]]]:
    """Rows in their order, cut where they pass from one owner to another."""
    return [(owner, list(run)) for owner, run in groupby(rows, key=lambda row: row.step.owner)]


def _chain_table(lines: list[ChainLine]) -> list[Block]:
    if not lines:
        return []
    blocks: list[Block] = [Table(COLUMNS, tuple(line.cells for line in lines))]
    clean = tuple(_clean(line) for line in lines if line.differs)
    if clean:
        blocks += [Paragraph("Clean, where it differs, with the clean values put in:"), Bullets(clean)]
    return blocks


def _clean(line: ChainLine) -> str:
    """A row's clean value with the clean values put in."""
    result = with_unit(line.clean, line.unit)
    if line.clean_values == NO_DEPOSIT:
        return f"{line.quantity} = {result}: {NO_DEPOSIT}"
    if line.clean_values == line.clean:
        return f"{line.quantity} = {result}"
    return f"{line.quantity} = {line.clean_values} = {result}"


def _card_table(card: str, table: CardTable) -> list[Block]:
    ways = ", ".join(f"{written_name(symbol)} {way}" for symbol, way in table.by.items())
    return [Paragraph(f"Table {table.name} of {card}; found by {ways}:"), Table(table.columns, table.texts)]


def _material_table(name: str, term: str, table: ConductivityTable) -> list[Block]:
    rows = tuple(
        (
            number_text(float(temperature), AS_GIVEN_DIGITS),
            celsius(float(temperature)),
            number_text(float(conductivity), AS_GIVEN_DIGITS),
        )
        for temperature, conductivity in zip(table.temperatures, table.conductivities, strict=True)
    )
    words = (
        f"{name} of {term} is the conductivity of {table.id}, straight between its rows, the nearest row"
        f" beyond them; mean({name}, T_1, T_2) is its integral from T_1 to T_2 divided by T_2 − T_1:"
    )
    return [Paragraph(words), Table(("T, K", "T, °C", "k, W/(m·K)"), rows)]
