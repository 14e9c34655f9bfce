"""Plausible bands, typical fouling allowances and typical coefficients: they warn, and fill nothing in.

``bands.yaml`` holds one band a place; the cards in ``allowances/`` hold what is typical of a service. Both
keep the standing of every figure.
"""

from __future__ import annotations

from collections.abc import Iterable
from functools import cache
from pathlib import Path
from typing import NamedTuple

from calcbook.documents import (
    Description,
    Fields,
    Key,
    Mapping,
    Node,
    Scalar,
    Sequence,
    read_file,
    read_mapping,
)
from calcbook.faults import Collector, Place, nearest_names, shown
from calcbook.library.cards import STANDINGS, Source
from calcbook.library.descriptions import SOURCE
from calcbook.library.reading import vocabulary
from calcbook.quantities import QuantityFault, QuantityKind, read_quantity

BANDS = Path(__file__).with_name("bands.yaml")
ALLOWANCES = Path(__file__).with_name("allowances")
EMISSIVITIES = Path(__file__).with_name("emissivities.yaml")
# What a card of `allowances/` may be typical of.
FOULING, OVERALL = "area resistance", "overall coefficient"

BAND = Description(
    "a band",
    "what a quantity usually is in its place",
    (
        Key("band", "name of the band", "name", required=True),
        Key("quantity", "quantity of the vocabulary", "name", required=True),
        Key("place", "where the figure stands", required=True),
        Key("low", "lowest usual value", "name", required=True),
        Key("high", "highest usual value", "name", required=True),
        Key("materials", "wall materials that it holds for: the start of the card's id", "list"),
        Key("because", "what a value outside usually is", required=True),
        Key("source", "where the band comes from", required=True),
        Key("standing", "how the band stands", "choice", choices=STANDINGS, required=True),
    ),
)
ROW = Description(
    "a row",
    "what one publication calls typical of a service",
    (
        Key("service", "the service", "name", required=True),
        Key("side", "the side or surface that the figure belongs to", required=True),
        Key("low", "lowest typical value", "name", required=True),
        Key("high", "highest typical value", "name", required=True),
        Key("publication", "number of the source", "name", required=True),
        Key("note", "when it holds"),
    ),
)
CARD = Description(
    "an allowance card",
    "typical values by service",
    (
        Key("allowances", "id, the same as the file name", "name", required=True),
        Key("title", "what the card holds", required=True),
        Key("quantity", "what the values are", "choice", choices=(FOULING, OVERALL), required=True),
        Key("far", "factor beyond the range at which a stated value is far outside", "number", required=True),
        Key("rows", "one row a service and publication", "list", of=ROW, required=True),
        Key("sources", "publications", "list", of=SOURCE, required=True),
        Key("notes", "disagreements between publications", "list"),
    ),
)
EMISSIVITY = Description(
    "an emissivity",
    "emissivity of a surface",
    (
        Key("surface", "the surface and its finish", required=True),
        Key("temperature", "temperature of the surface", "name", required=True),
        Key("emissivity", "emissivity or its range", "name", required=True),
        Key("source", "publication", required=True),
        Key("standing", "how the figure stands", "choice", choices=STANDINGS, required=True),
    ),
)


class Band(NamedTuple):
    """What a quantity usually is in one place, ``low`` to ``high`` in SI; ``texts`` are those as written."""

    name: str
    quantity: QuantityKind
    place: str
    low: float
    high: float
    texts: tuple[str, str]
    materials: tuple[str, ...]
    because: str
    source: str
    standing: str


class TypicalRow(NamedTuple):
    """What one publication calls typical of a service, in SI."""

    service: str
    side: str
    low: float
    high: float
    texts: tuple[str, str]
    publication: Source
    note: str


class AllowanceCard(NamedTuple):
    """Typical values of one quantity by service; ``far`` is the factor beyond a range that warns."""

    id: str
    title: str
    quantity: QuantityKind
    far: float
    rows: tuple[TypicalRow, ...]
    sources: tuple[Source, ...]
    notes: tuple[str, ...]


class Typical(NamedTuple):
    """A service over all publications: from the lowest low to the highest high, and who says so."""

    service: str
    quantity: QuantityKind
    low: float
    high: float
    far: float
    card: str
    publications: tuple[str, ...]
    standing: str


class Emissivity(NamedTuple):
    """One row of the page of emissivities, as written."""

    surface: str
    temperature: str
    emissivity: str
    source: str
    standing: str


@cache
def bands(path: Path = BANDS) -> dict[str, Band]:
    """Every plausible band by name. Raises ``Faults`` for a file that cannot be read."""
    collector = Collector()
    found = {}
    for item in _items(path, "bands"):
        band = _band(read_mapping(item, BAND, collector, item.place), collector)
        found[band.name] = band
    collector.stop_if_any()
    return found


@cache
def allowance_cards(folder: Path = ALLOWANCES) -> dict[str, AllowanceCard]:
    """Every card of typical values by id. Raises ``Faults`` for a card that cannot be read."""
    collector = Collector()
    cards = {path.stem: _card(path, collector) for path in sorted(folder.glob("*.yaml"))}
    collector.stop_if_any()
    return cards


@cache
def typical(quantity: str, folder: Path = ALLOWANCES) -> dict[str, Typical]:
    """What is typical of each service, all publications taken together, by the name of the service."""
    found: dict[str, Typical] = {}
    for card in allowance_cards(folder).values():
        if card.quantity.name != quantity:
            continue
        for service in dict.fromkeys(row.service for row in card.rows):
            rows = [row for row in card.rows if row.service == service]
            # The weakest standing of the publications is the standing of the range.
            standing = max((row.publication.standing for row in rows), key=STANDINGS.index)
            found[service] = Typical(
                service,
                card.quantity,
                min(row.low for row in rows),
                max(row.high for row in rows),
                card.far,
                card.id,
                tuple(dict.fromkeys(row.publication.cite for row in rows)),
                standing,
            )
    return found


@cache
def emissivities(path: Path = EMISSIVITIES) -> tuple[Emissivity, ...]:
    """The emissivities of the library page. Raises ``Faults`` for a file that cannot be read."""
    collector = Collector()
    fields = [read_mapping(item, EMISSIVITY, collector, item.place) for item in _items(path, "emissivities")]
    collector.stop_if_any()
    return tuple(Emissivity(*(one.text(key) for key in EMISSIVITY.names())) for one in fields)


def _items(path: Path, key: str) -> tuple[Node, ...]:
    root = read_file(path, path.name).root
    node = root.get(key) if isinstance(root, Mapping) else None
    return node.items if isinstance(node, Sequence) else ()


def _band(fields: Fields, collector: Collector) -> Band:
    kind = _kind(fields, collector)
    ends, texts = _ends(fields, kind, collector)
    return Band(
        fields.text("band"),
        kind,
        fields.text("place"),
        *ends,
        texts,
        _texts(fields.node("materials")),
        fields.text("because"),
        fields.text("source"),
        fields.text("standing"),
    )


def _kind(fields: Fields, collector: Collector) -> QuantityKind:
    name = fields.text("quantity")
    known = vocabulary()
    if name not in known:
        collector.add(
            "quantity-unknown",
            fields.place_of("quantity"),
            f"the vocabulary has no quantity `{shown(name)}`",
            found=shown(name),
            nearest=nearest_names(name, known),
        )
        return known["ratio"]
    return known[name]


def _ends(
    fields: Fields, kind: QuantityKind, collector: Collector
) -> tuple[tuple[float, float], tuple[str, str]]:
    """Both ends in SI, low below or at high, and as written."""
    texts = (fields.text("low"), fields.text("high"))
    ends = []
    for key in ("low", "high"):
        try:
            ends.append(read_quantity(fields.text(key), kind).value)
        except QuantityFault as error:
            collector.take([error.at(fields.place_of(key))])
            ends.append(float("nan"))
    if ends[0] > ends[1]:
        collector.add(
            "table-not-rising",
            fields.place_of("high"),
            "a range rises from low to high",
            found=f"{texts[0]} to {texts[1]}",
            expected="low below or at high",
        )
    return (ends[0], ends[1]), texts


def _card(path: Path, collector: Collector) -> AllowanceCard:
    place = Place(path.name)
    fields = read_mapping(read_file(path, path.name).root, CARD, collector, place)
    if fields.text("allowances") != path.stem:
        collector.add(
            "card-id-differs",
            fields.place_of("allowances"),
            "the id differs from the file name",
            found=fields.text("allowances"),
            expected=path.stem,
        )
    kind = _kind(fields, collector)
    sources = tuple(
        Source(one.text("cite"), one.text("for"), one.text("standing"))
        for item in _list(fields, "sources")
        for one in (read_mapping(item, SOURCE, collector, item.place),)
    )
    rows = tuple(
        row
        for item in _list(fields, "rows")
        if (row := _row(read_mapping(item, ROW, collector, item.place), kind, sources, collector)) is not None
    )
    return AllowanceCard(
        path.stem,
        fields.text("title"),
        kind,
        float(fields.text("far") or 1.0),
        rows,
        sources,
        _texts(fields.node("notes")),
    )


def _row(
    fields: Fields, kind: QuantityKind, sources: tuple[Source, ...], collector: Collector
) -> TypicalRow | None:
    number = fields.text("publication")
    if not number.isdecimal() or not 1 <= int(number) <= len(sources):
        collector.add(
            "limit-source-unknown",
            fields.place_of("publication"),
            "a row names one of the card's sources",
            found=shown(number),
            expected=f"1 to {len(sources)}",
        )
        return None
    ends, texts = _ends(fields, kind, collector)
    return TypicalRow(
        fields.text("service"),
        fields.text("side"),
        *ends,
        texts,
        sources[int(number) - 1],
        fields.text("note"),
    )


def _list(fields: Fields, key: str) -> tuple[Node, ...]:
    node = fields.node(key)
    return node.items if isinstance(node, Sequence) else ()


def _texts(node: Node | None) -> tuple[str, ...]:
    items: Iterable[Node] = node.items if isinstance(node, Sequence) else ()
    return tuple(" ".join(item.text.split()) for item in items if isinstance(item, Scalar))
