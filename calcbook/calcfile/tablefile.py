"""A fluid table in a CSV file beside the calculation: a row of names, a row of units, rows of figures."""

from __future__ import annotations

import csv
from pathlib import Path

from calcbook.calcfile.calculation import Value
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.quantities import QuantityFault, read_any

COLUMNS = ("T", "density", "viscosity", "conductivity", "heat capacity")
MAXIMUM_BYTES = 2_000_000


def read_table_file(path: Path, place: Place, collector: Collector) -> dict[str, tuple[Value, ...]]:
    """Columns by name. Codes: file-not-found, file-too-large, file-not-utf8, column-unknown, table-row-length."""
    try:
        data = path.read_bytes()
    except OSError:
        collector.add("file-not-found", place, "the table file cannot be read", found=path.name,
                      expected="a CSV file beside the calculation file")
        return {}
    if len(data) > MAXIMUM_BYTES:
        collector.add("file-too-large", place, "the table file is too large", expected="at most 2 MB")
        return {}
    try:
        lines = data.decode("utf-8-sig").splitlines()
    except UnicodeDecodeError:
        collector.add("file-not-utf8", place, "the table file is not UTF-8 text", expected="UTF-8 text")
        return {}
    rows = [(number, [cell.strip() for cell in row]) for number, row in enumerate(csv.reader(lines), 1) if any(row)]
    if len(rows) < 3:
        collector.add("table-row-length", place, "the table file lacks rows",
                      expected="a row of names, a row of units, then figures")
        return {}
    names, units = rows[0][1], rows[1][1]
    for name in names:
        if name not in COLUMNS:
            collector.add("column-unknown", Place(path.name, 1, 1, 2, lines[0]), f"there is no property `{shown(name)}`",
                          found=shown(name), expected=", ".join(COLUMNS), nearest=nearest_names(name, COLUMNS))
    columns: dict[str, list[Value]] = {name: [] for name in names if name in COLUMNS}
    for number, row in rows[2:]:
        where = Place(path.name, number, 1, 2, lines[number - 1])
        if len(row) != len(names) or len(units) != len(names):
            collector.add("table-row-length", where, "the row does not fit the names", expected=", ".join(names))
            continue
        for name, cell, unit in zip(names, row, units, strict=True):
            if name in columns:
                _take(columns[name], f"{cell} {unit}".strip(), where, collector)
    return {name: tuple(values) for name, values in columns.items()}


def _take(column: list[Value], text: str, where: Place, collector: Collector) -> None:
    try:
        column.append(Value(text, where, quantity=read_any(text)))
    except QuantityFault as error:
        collector.add(error.code, where, error.message, found=error.found, expected=error.expected,
                      nearest=error.nearest)
