"""The duty of a calculation file: arrangement, both streams with their ends, parts."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import CUT_ARRANGEMENTS, Duty, DutySide
from calcbook.documents import Fields, read_mapping
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import Place, nearest_names, shown

if TYPE_CHECKING:
    from calcbook.calcfile.reading import Reader

LARGEST_COUNT = 50


def read_duty(reader: Reader) -> Duty | None:
    """The duty of a file; None where none is stated or a side of it is missing."""
    node = reader.fields.node("duty")
    if node is None:
        return None
    fields = read_mapping(node, described.DUTY, reader.collector, node.place)
    hot, cold = (_side(reader, fields, name) for name in ("hot", "cold"))
    if hot is None or cold is None:
        return None
    duty = Duty(
        fields.text("arrangement"),
        _count(reader, fields, "shells"),
        hot,
        cold,
        _count(reader, fields, "parts"),
        node.place,
        reader.value(fields.node("installed area")),
        fields.text("throttled"),
        reader.value(fields.node("heat flow")),
    )
    _check(reader, duty, fields)
    return duty


def _side(reader: Reader, fields: Fields, name: str) -> DutySide | None:
    node = fields.node(name)
    if node is None:
        return None
    side = read_mapping(node, described.DUTY_SIDE, reader.collector, node.place)
    return DutySide(
        side.text("stream"), reader.value(side.node("inlet")), reader.value(side.node("outlet")), node.place
    )


def _count(reader: Reader, fields: Fields, name: str) -> int:
    """A whole number from 1; 1 where nothing is stated."""
    scalar = fields.scalar(name)
    if scalar is None:
        return 1
    return reader.whole_number(scalar, name, 1, LARGEST_COUNT) or 1


def _check(reader: Reader, duty: Duty, fields: Fields) -> None:
    """What the text alone shows: streams that exist, counts that fit the arrangement, no two inlets open."""
    known = [key.text for key, _ in reader.entries("streams")]
    for side in duty.sides.values():
        if side.stream and side.stream not in known:
            reader.collector.add(
                "stream-unknown",
                side.place,
                f"there is no stream `{shown(side.stream)}`",
                found=shown(side.stream),
                expected=", ".join(known) or "a stream",
                nearest=nearest_names(side.stream, known),
            )
    ends = {side.open_end for side in duty.sides.values()}
    if "inlet" in ends and ends != {"inlet", ""}:
        place = next(side.place for side in duty.sides.values() if side.open_end == "inlet")
        _refuse(
            reader,
            place,
            "an inlet is open, and an end of the other side too",
            "inlet and outlet of the other side",
        )
    if duty.hot.stream and duty.hot.stream == duty.cold.stream:
        _refuse(reader, duty.cold.place, "one stream stands on both sides", "two streams")
    if "shells" in fields and duty.arrangement and duty.arrangement != "shell and tube":
        _refuse(
            reader,
            fields.place_of("shells"),
            f"`shells` has no meaning for {duty.arrangement}",
            "arrangement: shell and tube",
        )
    geometry = reader.fields.node("geometry")
    if (
        "installed area" in fields
        and isinstance(geometry, MappingNode)
        and geometry.get("plugged") is not None
    ):
        _refuse(
            reader,
            fields.place_of("installed area"),
            "a stated area does not say whether it counts the plugged tubes",
            "no installed area: that of the geometry is of the open tubes",
        )
    if "parts" in fields and duty.arrangement and not duty.can_be_cut:
        message, expected = (
            (
                f"{duty.arrangement} cannot be cut into parts that follow each other",
                f"{' or '.join(CUT_ARRANGEMENTS)}, or no parts",
            )
            if duty.has_ends
            else ("between two streams that keep their temperatures every part is like the whole", "no parts")
        )
        _refuse(reader, fields.place_of("parts"), message, expected)


def _refuse(reader: Reader, place: Place, message: str, expected: str) -> None:
    reader.collector.add("duty-unreadable", place, message, expected=expected)
