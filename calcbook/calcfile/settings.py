"""book.yaml to ``Settings``."""

from __future__ import annotations

from pathlib import Path
from typing import NamedTuple

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import Settings, Value
from calcbook.calcfile.meaning import meaning_of
from calcbook.documents import Fields, Node, Scalar, Sequence, read_file, read_mapping
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import Collector, shown
from calcbook.quantities import QuantityFault, read_any, unit_factor

BOOK_FILE = "book.yaml"


def read_settings(folder: Path) -> Settings:
    """The settings of the book in a folder, or the defaults where it has no book.yaml.

    Raises ``Faults`` with every mistake of book.yaml.
    """
    path = folder / BOOK_FILE
    if not path.is_file():
        return Settings()
    collector = Collector()
    document = read_file(path)
    fields = read_mapping(document.root, described.BOOK, collector, document.root.place)
    limits_node = fields.node("limits")
    limits = (
        read_mapping(limits_node, described.BOOK_LIMITS, collector, fields.place)
        if limits_node
        else Fields(fields.place)
    )
    settings = Settings(
        name=fields.text("book"),
        site_pressure=_value(fields.node("site pressure"), collector),
        units=fields.text("units"),
        output=fields.text("output"),
        revisions=fields.text("revisions", "letters"),
        roles=_texts(fields.node("roles")) or ("prepared", "checked", "approved"),
        people=_people(fields.node("people"), collector),
        surface_temperature=_value(limits.node("surface temperature"), collector),
        excess_surface=_value(limits.node("excess surface"), collector),
        open_items=fields.text("open items", "refuse final issue"),
        plain=_calculating(document.root),
    )
    for value, limit in (
        (settings.site_pressure, SITE_PRESSURE),
        (settings.surface_temperature, SURFACE_TEMPERATURE),
        (settings.excess_surface, EXCESS_SURFACE),
    ):
        _hold(value, limit, collector)
    collector.stop_if_any()
    return settings


class _Usual(NamedTuple):
    """Between what a setting lies in every book: beyond it a unit is missing or another one is meant."""

    name: str
    unit: str
    low: float
    high: float
    expected: str


# The highest plants stand at 5000 m; a hand draws back from 43 degC on, and lagging is set at 200 degC at most; a unit
# with more than twice the surface that it needs clean is another machine: all common practice.
SITE_PRESSURE = _Usual("site pressure", "Pa", 4e4, 1.15e5, "an absolute pressure from 40 to 115 kPa")
SURFACE_TEMPERATURE = _Usual("surface temperature", "K", 293.15, 473.15, "a temperature from 20 to 200 degC")
EXCESS_SURFACE = _Usual("excess surface", "1", 0.0, 2.0, "a share from 0 to 200 %")


def _hold(value: Value | None, usual: _Usual, collector: Collector) -> None:
    if value is None or value.quantity is None:
        return
    quantity = value.quantity
    is_kind = quantity.dimension == unit_factor(usual.unit)[1] and quantity.reading != "gauge"
    if not is_kind or not usual.low <= quantity.value <= usual.high:
        collector.add(
            "number-out-of-proportion",
            value.place,
            f"no book has this {usual.name}",
            found=shown(value.text),
            expected=usual.expected,
        )


def _calculating(root: Node) -> object:
    """The settings that a calculation reads: the rest of the book does not belong to its meaning."""
    meaning = meaning_of(root)
    if not isinstance(meaning, dict):
        return {}
    return {name: meaning[name] for name in ("site pressure", "units", "limits") if name in meaning}


def _value(node: Node | None, collector: Collector) -> Value | None:
    if node is None:
        return None
    source, has_source, scalar = "", False, node
    if isinstance(node, MappingNode):
        fields = read_mapping(node, described.SOURCED, collector, node.place)
        found = fields.scalar("value")
        if found is None:
            return None
        scalar, source, has_source = found, fields.text("source"), "source" in fields
    if not isinstance(scalar, Scalar):
        collector.add(
            "value-not-text",
            node.place,
            "a number with its unit is wanted here",
            found="a list",
            expected="{value: 101.3 kPa, source: …}",
        )
        return None
    try:
        place = scalar.part(1, len(scalar.text) + 1)
        return Value(scalar.text, place, quantity=read_any(scalar.text), source=source, has_source=has_source)
    except QuantityFault as error:
        collector.take([error.at(scalar.part(error.column, error.end_column))])
        return None


def _texts(node: Node | None) -> tuple[str, ...]:
    items = node.items if isinstance(node, Sequence) else ()
    return tuple(item.text for item in items if isinstance(item, Scalar))


def _people(node: Node | None, collector: Collector) -> dict[str, tuple[str, ...]]:
    people = {}
    if isinstance(node, MappingNode):
        for key, value in node.entries:
            fields = read_mapping(value, described.PERSON, collector, value.place)
            people[key.text] = (fields.text("name"), *_texts(fields.node("also")))
    return people
