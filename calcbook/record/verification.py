"""The software verification record: every check point run on this installation, counted by standing."""

from __future__ import annotations

from collections.abc import Sequence

from calcbook.formulas import number_text
from calcbook.library.cards import STANDINGS
from calcbook.library.checking import PointResult, Uncovered
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table


def verification_blocks(
    software: str,
    points: Sequence[PointResult],
    uncovered: Sequence[Uncovered],
    trial: Sequence[str],
    faults: Sequence[str],
) -> tuple[Block, ...]:
    """The record's blocks. ``software`` names versions, ``trial`` the cards still on trial."""
    failed = [point for point in points if not point.holds]
    counts = tuple(
        (
            standing,
            str(sum(point.standing == standing for point in points)),
            str(sum(point.standing == standing and not point.holds for point in points)),
        )
        for standing in STANDINGS
    )
    return (
        Heading(1, "Software verification record"),
        Paragraph(
            f"Software: {software}. Every check point of every card was run on this installation. The user's"
            " organisation must accept the software for its own use."
        ),
        Heading(2, "Counts by standing of the reference"),
        Table(("Standing", "Check points", "Not met"), counts),
        Paragraph(f"Check points: {len(points)}. Not met: {len(failed)}."),
        *_listed(
            "Check points that are not met",
            [f"{point.card}: {point.symbol} at {point.given}" for point in failed],
        ),
        *_listed("Faults of cards", faults),
        Heading(2, "Cards on trial"),
        Paragraph(
            "Their only check points are identities or this project's own arithmetic; every record that uses one"
            " is cautioned."
        ),
        _bullets(trial),
        Heading(2, "Figures that no outside check point covers"),
        Paragraph(
            "Each figure of a method's relations and tables was moved by 1 % in turn; for these no outside check"
            " point failed."
        ),
        Table(("Card", "Where", "Figure"), tuple((one.card, one.where, one.figure) for one in uncovered)),
        Heading(2, "Check points"),
        Table(
            ("Card", "Given", "Symbol", "Expected", "Got", "Deviation", "Within", "Source", "Standing"),
            tuple(_row(point) for point in points),
        ),
    )


def _row(point: PointResult) -> tuple[str, ...]:
    return (
        point.card,
        point.given,
        point.symbol,
        number_text(point.expected, 10),
        number_text(point.got, 10),
        f"{point.deviation:.1e}" if point.deviation > 1e-12 else "below 1e-12",
        f"{point.within:g}",
        point.source,
        point.standing,
    )


def _listed(title: str, items: Sequence[str]) -> tuple[Block, ...]:
    return (Heading(2, title), Bullets(tuple(items))) if items else ()


def _bullets(items: Sequence[str]) -> Block:
    return Bullets(tuple(items)) if items else Paragraph("None.")
