"""The circuit: the path of the heat as lines of text, and the resistances of each condition."""

from __future__ import annotations

import math

from calcbook.chain.outcome import BranchRow, TermRow
from calcbook.chain.types import CONDITIONS, Group
from calcbook.record.blocks import Block, Code, Heading, Paragraph, Table
from calcbook.record.numbers import NOT_KNOWN, PLAIN_DIGITS, celsius, fixed, number, percent
from calcbook.record.page import Page
from calcbook.record.sections.duty import area_blocks

PER_MARK = 0.025
WHOLE_ROUNDING = 1e-9


def circuit(page: Page) -> list[Block]:
    """The drawing, and one table per condition."""
    blocks: list[Block] = [
        Heading(2, "7. Circuit"),
        Paragraph(
            f"From the inside to the outside. Resistances are area resistances; the basis area is the surface"
            f" {page.basis}."
        ),
        Code("\n".join(_drawing(page))),
    ]
    for condition in reversed(CONDITIONS):
        blocks += [Heading(3, f"Circuit, {condition}"), _table(page, condition), *_branches(page, condition)]
    return [*blocks, *area_blocks(page)]


# --- drawing ----------------------------------------------------------------------------------------


def _drawing(page: Page) -> list[str]:
    clean, service = (page.base.terms[condition] for condition in CONDITIONS)
    inner, outer = page.chain.inner, page.chain.outer
    lines = [f"o {_fluid(page, inner)}{_both(clean[0].inner_temperature, service[0].inner_temperature)}"]
    for index, (row, other) in enumerate(zip(service, clean, strict=True), 1):
        lines += _element(index, row)
        if index < len(service):
            between = f"between {row.name} and {service[index].name}"
            lines.append(f"o {between}{_both(other.outer_temperature, row.outer_temperature)}")
    lines.append(
        f"o {_fluid(page, outer)}{_both(clean[-1].outer_temperature, service[-1].outer_temperature)}"
    )
    return lines


def _fluid(page: Page, group: Group) -> str:
    """The fluid on one side: the name of its stream where the file names one."""
    stream = next((branch.stream for branch in group.branches if branch.stream), "")
    return f"{group.side}, bulk of {stream}" if stream else f"{group.side}, bulk"


def _both(clean: float, service: float) -> str:
    if not (math.isfinite(clean) and math.isfinite(service)):
        return f": temperature {NOT_KNOWN}"
    return f": clean {celsius(clean)} °C, service {celsius(service)} °C"


def _element(index: int, row: TermRow) -> list[str]:
    if row.branches:
        first = f"| R_{index} {row.name}: side by side, acts on {row.surface}"
        return [
            first,
            *(f"|   h_{place} {branch.name}: {branch.kind}" for place, branch in enumerate(row.branches, 1)),
        ]
    method = f", {row.methods}" if row.methods and row.methods != row.kind else ""
    only = " (service only)" if row.kind == "fouling" else ""
    return [f"| R_{index} {row.name}: {row.kind}{method}, acts on {row.surface}{only}"]


# --- tables -----------------------------------------------------------------------------------------


def _table(page: Page, condition: str) -> Table:
    columns = (
        "Term",
        "Kind",
        "Acts on",
        "R on that area, m²·K/W",
        f"R on {page.basis}, m²·K/W",
        "Share",
        "Share drawn",
        "T inner side, °C",
        "T outer side, °C",
    )
    rows = [_row(index, row) for index, row in enumerate(page.base.terms[condition], 1)]
    total = page.base.solutions[condition].number(page.chain.results["R total"])
    rows.append(("R_tot total", "", "", "", number(total, PLAIN_DIGITS), percent(1.0), bar(1.0), "", ""))
    return Table(columns, tuple(rows), ("In the drawn share one = stands for 2.5 %.",))


def _row(index: int, row: TermRow) -> tuple[str, ...]:
    return (
        f"R_{index} {row.name}",
        row.kind,
        row.surface,
        number(row.own_resistance),
        number(row.resistance),
        percent(row.share),
        bar(row.share),
        celsius(row.inner_temperature),
        celsius(row.outer_temperature),
    )


def bar(share: float) -> str:
    """A share as a run of equals signs, one for 2.5 %; words for one that is no part of a whole."""
    if share < 0.0:
        return "negative"
    if share > 1.0 + WHOLE_ROUNDING:
        return "more than the whole"
    return "=" * int(fixed(share / PER_MARK, 0))


def _branches(page: Page, condition: str) -> list[Block]:
    """Ways for heat side by side: each with its own temperature and its heat flow in watts."""
    blocks: list[Block] = []
    for row in page.base.terms[condition]:
        if not row.branches:
            continue
        columns = (f"Side by side in {row.name}", "Kind", "h, W/(m²·K)", "Refers to, °C", "Heat flow, W")
        blocks.append(
            Table(
                columns,
                tuple(_branch(branch) for branch in row.branches),
                (
                    "h belongs to the difference between the surface and the temperature it refers to;"
                    " a heat flow is positive from the inside to the outside.",
                ),
            )
        )
    return blocks


def _branch(branch: BranchRow) -> tuple[str, ...]:
    return (
        branch.name,
        branch.kind,
        number(branch.coefficient),
        celsius(branch.reference_temperature),
        number(branch.heat_flow),
    )
