"""The register: every calculation of a book with its status, as blocks and as data."""

from __future__ import annotations

from collections.abc import Sequence

from calcbook.book.entries import Entry
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table

COLUMNS = (
    "Number",
    "Title",
    "Revision",
    "State",
    "Confirmation",
    "U in service",
    "On",
    "Open items",
    "Takes from",
    "Feeds",
    "Last issued",
)
NONE = "none"


def register_data(entries: Sequence[Entry]) -> list[dict[str, object]]:
    """One mapping a calculation, in the order of numbers."""
    feeds: dict[str, list[str]] = {}
    for entry in entries:
        for link in entry.links:
            feeds.setdefault(link.calculation.casefold(), []).append(f"{entry.number} ({link.symbol})")
    return [
        _row(entry, feeds)
        for entry in sorted(entries, key=lambda entry: (entry.number.casefold(), entry.found.name))
        if entry.lifecycle is not None
    ]


def _row(entry: Entry, feeds: dict[str, list[str]]) -> dict[str, object]:
    life = entry.lifecycle
    assert life is not None
    latest = life.latest_issued
    return {
        "number": entry.number,
        "title": entry.title,
        "revision": entry.revision,
        "state": life.state,
        "confirmation": life.confirmation,
        "U_service": entry.u_service,
        "on": entry.basis,
        "open_items": len(life.open_items),
        "takes_from": [f"{link.calculation} ({link.symbol}; {link.state})" for link in entry.links],
        "feeds": feeds.get(entry.number.casefold(), []),
        "last_issued": f"{latest.revision}, {latest.kind}" if latest is not None else "",
    }


def register_blocks(name: str, entries: Sequence[Entry]) -> tuple[Block, ...]:
    """The register as a page; files that cannot be read are named beneath."""
    rows = tuple(tuple(_cell(row[key]) for key in row) for row in register_data(entries))
    failed = [entry for entry in entries if entry.lifecycle is None]
    return (
        Heading(1, f"Register{f' of {name}' if name else ''}"),
        Paragraph("Status is derived from the files, sign-offs and issued copies; nothing here is typed."),
        Table(COLUMNS, rows) if rows else Paragraph("No calculation can be read."),
        *(
            (Heading(2, "Files without an entry"), Bullets(tuple(_failure(entry) for entry in failed)))
            if failed
            else ()
        ),
    )


def _cell(value: object) -> str:
    if isinstance(value, list):
        return "; ".join(str(item) for item in value) or NONE
    return str(value) if value != "" else NONE


def _failure(entry: Entry) -> str:
    name = entry.found.path.name
    if entry.not_converged:
        return f"{name}: {entry.not_converged}"
    if entry.mistake:
        return f"{name}: a mistake of calcbook itself; `calcbook run {name}` tells it"
    return f"{name}: {len(entry.faults)} fault(s), the first {entry.faults[0].code} on line {entry.faults[0].place.line}"
