"""Time in service and cleaning as a calculation file states them; money is read in the currency of the file."""

from __future__ import annotations

import re
from dataclasses import replace
from typing import TYPE_CHECKING

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import Cleaning, TimeInService, Value
from calcbook.documents import Fields, Node, Scalar, read_mapping
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import shown
from calcbook.quantities import QuantityFault, read_any

if TYPE_CHECKING:
    from calcbook.calcfile.reading import Reader

FEWEST_STEPS, MOST_STEPS = 2, 200
CLEANED_UNIT, DUTY = "cleaned unit", "duty"
MONEY_KEYS = ("cost of one cleaning", "price of heat")
_CURRENCY = re.compile(r"[A-Za-z]{1,10}")
_SYMBOL = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,39}")


def read_time_in_service(reader: Reader) -> TimeInService | None:
    """How long and in how many rows the unit is followed; None where it is not, or after a fault."""
    node = reader.fields.node("time in service")
    if node is None:
        return None
    fields = read_mapping(node, described.TIME_IN_SERVICE, reader.collector, node.place)
    until = reader.value(fields.node("until"))
    steps = fields.scalar("steps")
    if until is None or steps is None:
        return None
    count = reader.whole_number(steps, "steps", FEWEST_STEPS, MOST_STEPS)
    if count is None:
        return None
    return TimeInService(until, count, node.place)


def read_cleaning(reader: Reader) -> Cleaning | None:
    """What a cleaning takes and costs; None where none is stated, or after a fault."""
    node = reader.fields.node("cleaning")
    if node is None:
        return None
    fields = read_mapping(node, described.CLEANING, reader.collector, node.place)
    duration = reader.value(fields.node("duration"))
    stated = [key for key in MONEY_KEYS if key in fields]
    currency = fields.text("currency")
    if len(stated) == 1 or bool(stated) != bool(currency):
        reader.collector.add(
            "key-missing",
            node.place,
            "money is counted with a currency, the cost of one cleaning and the price of heat",
            found=", ".join((*(["currency"] if currency else []), *stated)),
            expected="all three, or none for the interval of most heat",
        )
        return None
    if duration is None or (currency and not _is_currency(reader, fields, currency)):
        return None
    money = {key: _money(reader, fields.node(key), currency) for key in stated}
    if None in money.values():
        return None
    return Cleaning(
        duration,
        currency,
        money.get("cost of one cleaning"),
        money.get("price of heat"),
        fields.text("loss against"),
        node.place,
    )


def _is_currency(reader: Reader, fields: Fields, currency: str) -> bool:
    """Whether a word can stand for money: one that is no unit, so that nothing is converted in silence."""
    if _CURRENCY.fullmatch(currency):
        try:
            read_any(f"1 {currency}")
        except QuantityFault:
            return True
    reader.collector.add(
        "currency-unreadable",
        fields.place_of("currency"),
        "a currency is one word that is no unit",
        found=shown(currency),
        expected="a word such as EUR",
    )
    return False


def _money(reader: Reader, node: Node | None, currency: str) -> Value | None:
    """An amount or a price: the currency stands for 1, and the text stays as it was written."""
    scalar = node.get("value") if isinstance(node, MappingNode) else node
    if not isinstance(scalar, Scalar) or _SYMBOL.fullmatch(scalar.text.strip()):
        return reader.value(node)
    text = " ".join(scalar.text.split())
    found = re.fullmatch(rf"(?P<number>.+?) ?\b{currency}(?P<per> ?/.+)?", text)
    per = (found["per"] or "").strip() if found is not None else ""
    if found is None or re.search(rf"\b{currency}\b", per):
        reader.collector.add(
            "unit-missing",
            scalar.place,
            "an amount of money has its currency",
            found=shown(text),
            expected=f"an amount such as 6800 {currency}, or a price such as 31 {currency}/MWh",
        )
        return None
    source, has_source = "", False
    if isinstance(node, MappingNode):
        fields = read_mapping(node, described.SOURCED, reader.collector, node.place)
        source, has_source = fields.text("source"), "source" in fields
    plain = f"{found['number']} 1{per}" if per else found["number"]
    value = reader.scalar_value(scalar._replace(text=plain), source, has_source)
    return replace(value, text=text)
