"""The fluids of a calculation file: named, mixed, humid air, a petroleum liquid, a table or constants."""

from __future__ import annotations

import re
from typing import TYPE_CHECKING

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import FluidText, Value
from calcbook.calcfile.tablefile import read_table_file
from calcbook.documents import Fields, Node, Scalar, Sequence, read_mapping
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import Place, shown

if TYPE_CHECKING:
    from calcbook.calcfile.reading import Reader

FLUID_KINDS = ("mixture", "humid air", "petroleum", "table", "table file", "constants")
# What a fluid is called that is written in place.
OF_STREAM, OF_GAP = "fluid of the stream", "fluid of the gap"


def read_fluid(reader: Reader, node: Node | None, name_here: str = OF_STREAM) -> FluidText | None:
    """A fluid, or None where there is none or it has a fault; ``name_here`` names one that is written in place."""
    if node is None:
        return None
    if isinstance(node, Scalar):
        name = " ".join(node.text.split())
        place = node.part(1, len(node.text) + 1)
        return reader.fluids[name] if name in reader.fluids else FluidText("name", name, place)
    return read_fluid_record(reader, name_here, node)


def read_fluid_record(reader: Reader, name: str, node: Node) -> FluidText | None:
    """A fluid from its mapping, called ``name`` here; None after a fault."""
    fields = read_mapping(node, described.FLUID, reader.collector, node.place)
    kinds = [key for key in FLUID_KINDS if key in fields]
    for other in kinds[1:]:
        reader.refuse_pair(fields, kinds[0], other)
    if not kinds:
        if isinstance(node, MappingNode) and not reader.has_fault_in(node):
            reader.collector.add(
                "key-missing",
                node.place,
                "a fluid is a name, a mixture, humid air, a petroleum liquid, a table or constants",
                expected=" | ".join(f"{kind}: …" for kind in FLUID_KINDS),
            )
        return None
    source = fields.text("source")
    if kinds[0] != "petroleum":
        reader.refuse_pair(fields, kinds[0], "viscosity")
    if kinds[0] == "mixture":
        return _mixture(reader, fields, source, node)
    for key in ("mass fraction", "volume fraction"):
        reader.refuse_pair(fields, kinds[0], key)
    if kinds[0] == "humid air":
        return _humid_air(reader, fields, source)
    if kinds[0] == "petroleum":
        return _petroleum(reader, fields, name, source, node.place)
    if kinds[0] == "table file":
        return _table_file(reader, fields, name, source, node.place)
    body = fields.node(kinds[0])
    assert body is not None
    return _fluid_table(reader, name, kinds[0], body, source, node.place)


def _mixture(reader: Reader, fields: Fields, source: str, node: Node) -> FluidText | None:
    reader.refuse_pair(fields, "mass fraction", "volume fraction")
    basis = next((key for key in ("mass fraction", "volume fraction") if key in fields), "")
    if not basis:
        reader.collector.add(
            "key-missing",
            node.place,
            "a mixture says its mass or volume fraction",
            expected="mass fraction: 40 %",
        )
        return None
    return FluidText(
        "mixture",
        fields.text("mixture"),
        fields.place_of("mixture"),
        basis,
        reader.value(fields.node(basis)),
        source=source,
    )


def _humid_air(reader: Reader, fields: Fields, source: str) -> FluidText | None:
    body = fields.node("humid air")
    assert body is not None
    inner = read_mapping(body, described.HUMID_AIR, reader.collector, body.place)
    reader.refuse_pair(inner, "relative humidity", "humidity ratio")
    basis = next(iter(inner), "")
    if not basis:
        if isinstance(body, MappingNode) and not reader.has_fault_in(body):
            reader.collector.add(
                "key-missing",
                body.place,
                "humid air says its humidity",
                expected="relative humidity: 60 % | humidity ratio: 0.012",
            )
        return None
    humidity = reader.value(inner.node(basis))
    return FluidText("humid air", "humid air", body.place, basis, humidity, source=source)


def _petroleum(reader: Reader, fields: Fields, name: str, source: str, place: Place) -> FluidText | None:
    body = fields.node("petroleum")
    inner = read_mapping(body, described.PETROLEUM, reader.collector, place)
    density = reader.value(inner.node("relative density"))
    viscosity = fields.node("viscosity")
    astm: tuple[tuple[Value, Value], ...] = ()
    if viscosity is not None:
        points = viscosity.get("astm d341") if isinstance(viscosity, MappingNode) else None
        astm = _astm_points(reader, points if points is not None else viscosity, viscosity.place)
        if not astm:
            return None
    if density is None:
        return None
    return FluidText(
        "petroleum", name, place, "relative density", density, astm=astm, source=source,
        product=inner.text("product"),
    )  # fmt: skip


def _table_file(reader: Reader, fields: Fields, name: str, source: str, place: Place) -> FluidText | None:
    scalar = fields.scalar("table file")
    assert scalar is not None
    if not re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9 _.-]{0,99}", scalar.text):
        reader.collector.add(
            "name-not-allowed",
            scalar.place,
            "a table file stands beside the calculation file",
            found=shown(scalar.text),
            expected="the bare name of a CSV file, such as oil.csv",
        )
        return None
    columns = read_table_file(reader.folder / scalar.text, scalar.place, reader.collector)
    reader.side_files[scalar.text] = {
        column: [value.text for value in values] for column, values in (columns or {}).items()
    }
    return FluidText("table", name, place, columns=columns, source=source) if columns is not None else None


def _fluid_table(
    reader: Reader, name: str, kind: str, body: Node, source: str, place: Place
) -> FluidText | None:
    before = len(tuple(reader.collector))
    fields = read_mapping(body, described.FLUID_TABLE, reader.collector, body.place)
    columns: dict[str, tuple[Value, ...]] = {}
    astm: tuple[tuple[Value, Value], ...] = ()
    for column in fields:
        node = fields.node(column)
        points = node.get("astm d341") if isinstance(node, MappingNode) else None
        if points is not None and node is not None:
            astm = _astm_points(reader, points, node.place)
            continue
        items = node.items if isinstance(node, Sequence) else (node,)
        columns[column] = tuple(value for item in items if (value := reader.value(item)) is not None)
    for column, values in columns.items():
        symbols = [value for value in values if value.symbol]
        for value in symbols:
            reader.collector.add(
                "unit-missing",
                value.place,
                "a fluid's property is a number with its unit",
                found=value.text,
                expected="a number with its unit, no symbol",
            )
        rows = len(columns.get("T", ()))
        if kind == "table" and rows and len(values) != rows:
            reader.collector.add(
                "table-row-length",
                fields.place_of(column),
                f"`{column}` has {len(values)} entries, T has {rows}",
                expected=f"{rows} entries",
            )
        elif kind == "constants" and len(values) != 1:
            reader.collector.add(
                "table-row-length",
                fields.place_of(column),
                f"`{column}` has {len(values)} entries, a constant has one",
                expected="one figure",
            )
    if len(tuple(reader.collector)) > before:
        return None
    return FluidText(kind, name, place, columns=columns, astm=astm, source=source)


def _astm_points(reader: Reader, node: Node, place: Place) -> tuple[tuple[Value, Value], ...]:
    points = []
    for item in node.items if isinstance(node, Sequence) else ():
        pair = [reader.value(part) for part in item.items] if isinstance(item, Sequence) else []
        if len(pair) == 2 and pair[0] is not None and pair[1] is not None:
            points.append((pair[0], pair[1]))
    if len(points) != 2:
        reader.collector.add(
            "astm-points",
            place,
            "a D341 viscosity has two points",
            found=f"{len(points)}",
            expected="[[40 degC, 46 mm^2/s], [100 degC, 6.8 mm^2/s]]",
        )
        return ()
    return tuple(points)
