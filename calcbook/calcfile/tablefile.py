"""A fluid table in a CSV file beside the calculation: a row of names, a row of units, rows of figures."""

from __future__ import annotations

from pathlib import Path

from calcbook.calcfile.calculation import Value
from calcbook.calcfile.sidefile import read_lines
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.quantities import QuantityFault, read_any

COLUMNS = ("T", "density", "viscosity", "conductivity", "heat capacity")
MEGABYTES = 2


def read_table_file(path: Path, place: Place, collector: Collector) -> dict[str, tuple[Value, ...]] | None:
    """Columns by name, or None after a fault.

    Codes: file-not-found, file-too-large, file-not-utf8, file-not-text, column-unknown, table-row-length, and
    those of quantities.
    """
    before = len(tuple(collector))
    lines = read_lines(path, "the table file", MEGABYTES, place, collector)
    columns = _columns(lines, path.name, place, collector) if lines is not None else {}
    return columns if len(tuple(collector)) == before else None


def _columns(lines: list[str], name: str, place: Place, collector: Collector) -> dict[str, tuple[Value, ...]]:
    # No quotes in a table of figures: each line is one row.
    rows = [(number, row) for number, line in enumerate(lines, 1) if any(row := _cells(line))]
    if len(rows) < 3:
        collector.add(
            "table-row-length",
            place,
            "the table file lacks rows",
            expected="a row of names, a row of units, then figures",
        )
        return {}
    (first, names), (_, units) = rows[0], rows[1]
    for position, column in enumerate(names):
        where = _cell_place(name, first, lines[first - 1], position)
        if column not in COLUMNS:
            collector.add(
                "column-unknown",
                where,
                f"there is no property `{shown(column)}`",
                found=shown(column),
                expected=", ".join(COLUMNS),
                nearest=nearest_names(column, COLUMNS),
            )
        elif column in names[:position]:
            collector.add(
                "key-twice", where, f"the column `{column}` stands twice", expected="each column once"
            )
    columns: dict[str, list[Value]] = {column: [] for column in names if column in COLUMNS}
    for number, row in rows[1:]:
        line = lines[number - 1]
        if len(row) != len(names):
            collector.add(
                "table-row-length",
                Place(name, number, 1, len(line) + 1, line),
                f"the row has {len(row)} cells, the names have {len(names)}",
                expected=", ".join(names),
            )
        elif number != rows[1][0] and len(units) == len(names):
            for position, (column, cell, unit) in enumerate(zip(names, row, units, strict=True)):
                if column in columns:
                    where = _cell_place(name, number, line, position)
                    _take(columns[column], f"{cell} {unit}".strip(), where, collector)
    return {column: tuple(values) for column, values in columns.items()}


def _cells(line: str) -> list[str]:
    return [cell.strip() for cell in line.split(",")]


def _cell_place(name: str, number: int, line: str, position: int) -> Place:
    cells = line.split(",")
    start = sum(len(cell) + 1 for cell in cells[:position])
    blanks = len(cells[position]) - len(cells[position].lstrip())
    return Place(name, number, start + blanks + 1, start + len(cells[position].rstrip()) + 1, line)


def _take(column: list[Value], text: str, where: Place, collector: Collector) -> None:
    try:
        column.append(Value(text, where, quantity=read_any(text)))
    except QuantityFault as error:
        collector.take([error.at(where)])
