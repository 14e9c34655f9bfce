"""Givens, assumptions, properties."""

from __future__ import annotations

import math
from collections.abc import Iterator

from calcbook.calcfile.calculation import Assumption, FluidText, Given, Value
from calcbook.calcfile.fluids import OF_GAP, OF_STREAM
from calcbook.chain.films import SATURATION_FIGURES
from calcbook.chain.fluids import BoilingOperation, FixedOperation, PropertyOperation
from calcbook.chain.outcome import PropertyRow
from calcbook.chain.petroleum import CARDS
from calcbook.chain.types import SERVICE, Input
from calcbook.formulas import write
from calcbook.formulas.names import written_name
from calcbook.library.cards import Assignment
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table
from calcbook.record.numbers import (
    AS_GIVEN_DIGITS,
    NOT_USED,
    celsius,
    number,
    unit_text,
    value_text,
    with_unit,
)
from calcbook.record.page import Page
from calcbook.record.steps import pressure_words

PROPERTY_COLUMNS = (
    ("density", "ρ, kg/m³", 5),
    ("viscosity", "μ, Pa·s", 5),
    ("conductivity", "λ, W/(m·K)", 5),
    ("heat capacity", "cp, J/(kg·K)", 5),
    ("Prandtl number", "Pr", 5),
    ("expansion coefficient", "β, 1/K", 5),
    ("saturation mole fraction", "x_ws", 5),
)
PASCALS_OF_BAR = 1e5


def givens(page: Page) -> list[Block]:
    """Every figure of the file: givens, and figures stated where they are used."""
    blocks: list[Block] = [Heading(2, "5. Givens")]
    columns = ("Symbol", "Meaning", "Value as written", "Value in SI", "Tolerance", "Source", "Used in")
    rows = tuple(_given_row(given, page) for given in page.calculation.givens.values())
    blocks.append(Table(columns, rows) if rows else Paragraph("The file has no givens."))
    rows = tuple(_literal_row(item) for item in page.chain.inputs.values() if not item.is_given)
    rows += tuple(
        (title, value.text, "a choice", value.source or "no source") for title, value in stated_choices(page)
    )
    if rows:
        blocks.append(Heading(3, "Figures stated where they are used"))
        blocks.append(Table(("Figure", "Value as written", "Value in SI", "Source"), rows))
    fluids = [(f"stream {stream.name}", stream.fluid) for stream in page.calculation.streams.values()]
    fluids += [(term.name, term.fluid) for term in page.calculation.resistances]
    for owner, fluid in fluids:
        if fluid is not None and fluid.kind in ("table", "constants"):
            blocks += _fluid(owner, fluid)
        if fluid is not None and fluid.kind == "petroleum":
            blocks += _petroleum(owner, fluid, page)
    return blocks


def _petroleum(owner: str, fluid: FluidText, page: Page) -> list[Block]:
    """A petroleum liquid: each property with the relations of its card, and the viscosity as written."""
    rows = []
    for name, card in CARDS.items():
        method = page.chain.library.method(card)
        lines = (line for line in method.lines if isinstance(line, Assignment))
        texts = [f"{written_name(line.symbol)} = {write(line.relation)}" for line in lines]
        texts += [f"{written_name(symbol)} = {text}" for symbol, (_, text, _) in method.constants.items()]
        rows.append((name, card, "; ".join(texts)))
    points = "; ".join(f"{temperature.text}: {viscosity.text}" for temperature, viscosity in fluid.astm)
    if points:
        rows.append(("viscosity", "ASTM D341, times the density", points))
    return [
        _title(owner, fluid),
        Paragraph(
            f"A petroleum liquid ({fluid.product or 'no product stated'}) by its relative density. Source:"
            f" {fluid.source or 'no source'}."
        ),
        Table(("Property", "Card", "Relations or points"), tuple(rows)),
    ]


def _title(owner: str, fluid: FluidText) -> Heading:
    named = "" if fluid.name in (OF_STREAM, OF_GAP) else f" {fluid.name}"
    return Heading(3, f"Fluid{named} of {owner}")


def _fluid(owner: str, fluid: FluidText) -> list[Block]:
    """A fluid that the file states itself: each property with its values as written."""
    rows = [(name, "; ".join(value.text for value in values)) for name, values in fluid.columns.items()]
    if fluid.astm:
        points = "; ".join(f"{temperature.text}: {viscosity.text}" for temperature, viscosity in fluid.astm)
        rows.append(("viscosity after ASTM D341", points))
    return [
        _title(owner, fluid),
        Paragraph(f"Source: {fluid.source or 'no source'}."),
        Table(("Property", "Values as written"), tuple(rows)),
    ]


def _given_row(given: Given, page: Page) -> tuple[str, ...]:
    item = page.chain.inputs[f"given/{given.symbol}"]
    symbol = written_name(given.symbol)
    shown = symbol if symbol == given.symbol else f"{symbol} (in the file {given.symbol})"
    used = page.chain.used_in.get(given.symbol, ())
    return (
        shown,
        given.meaning or "no meaning stated",
        given.value.text,
        f"{si_text(item)}{_base(given)}",
        _tolerance(given),
        given.source or "no source",
        "; ".join(used) or "nothing uses it",
    )


def _literal_row(item: Input) -> tuple[str, ...]:
    return (item.title, item.text, si_text(item), item.source or "no source")


def stated_choices(page: Page) -> Iterator[tuple[str, Value]]:
    """The choices that terms state for their methods (an impeller, an arrangement of tubes), each with its title."""
    figures = {*page.calculation.givens, *page.calculation.derived}
    for term in page.calculation.every_term:
        for key, value in term.with_values.items():
            if value.symbol not in figures and f"{term.name}/with {key}" not in page.chain.inputs:
                yield f"{key} stated for {term.name}", value


def si_text(item: Input) -> str:
    """A figure in SI with its unit, every digit that it was given with."""
    return with_unit(number(item.value, AS_GIVEN_DIGITS), unit_text(item.kind.unit))


def _base(given: Given) -> str:
    """That a pressure counts from that of the site, as the absolute one stands in the chain."""
    quantity = given.value.quantity
    return " gauge" if quantity is not None and quantity.reading == "gauge" else ""


def _tolerance(given: Given) -> str:
    tolerance = given.tolerance
    if tolerance is None:
        return "none stated"
    text = tolerance.text
    quantity = given.value.quantity
    if quantity is not None and quantity.unit_text == "%" and text.endswith("%"):
        # Of 40 % with ± 2 %: a part of the figure, and no points.
        text += " of it"
    words = {
        "rectangular": f"± {text}",
        "triangular": f"± {text}, triangular",
        "standard": f"standard {text}",
        "expanded": f"expanded {text}, k = {number(tolerance.factor)}",
    }[tolerance.kind]
    if math.isinf(tolerance.degrees):
        return words
    return f"{words}, {tolerance.degrees:.0f} degrees of freedom"


# --- assumptions ------------------------------------------------------------------------------------


def assumptions(page: Page) -> list[Block]:
    """The engineer's assumptions, the runner's, and what each card takes as true."""
    return [
        Heading(2, "6. Assumptions and properties"),
        Heading(3, "Assumptions of the engineer"),
        *_engineer(page),
        Heading(3, "Assumptions made by the runner"),
        *_runner(page),
        Heading(3, "Assumptions of the situations and methods"),
        *_cards(page),
        Heading(3, "Properties"),
        *_properties(page),
    ]


def _engineer(page: Page) -> list[Block]:
    rows = tuple(
        (item.id, item.text, item.basis, verification(item)) for item in page.calculation.assumptions
    )
    if not rows:
        return [Paragraph("The engineer states no assumption.")]
    return [Table(("Id", "Assumption", "Basis", "Verification"), rows)]


def verification(item: Assumption) -> str:
    """Whether an assumption is verified, by whom and by what evidence."""
    if not item.is_verified:
        return "not verified"
    return f"verified by {item.verified_by}, {item.verified_on}: {item.evidence}"


def _runner(page: Page) -> list[Block]:
    rows = tuple((item.id, item.text, item.decided_by, item.acts_on) for item in page.base.assumptions)
    if not rows:
        return [Paragraph("The runner decided nothing by itself.")]
    return [Table(("Id", "Assumption", "Decided by", "Acts on"), rows)]


def _cards(page: Page) -> list[Block]:
    items = tuple(
        f"{card.id}: {sentence}" for card in page.cards() for sentence in getattr(card, "assumes", ())
    )
    return [Bullets(items)] if items else [Paragraph("The cards used state no assumption.")]


# --- properties -------------------------------------------------------------------------------------


def _properties(page: Page) -> list[Block]:
    rows = (*page.base.properties, *_flow_states(page))
    saturated = _saturation_rows(page)
    if not rows and not saturated:
        return [Paragraph("No property of a fluid is used.")]
    tables: list[Block] = [_property_table(rows, page)] if rows else []
    if saturated:
        tables.append(Heading(3, "Figures of the saturation line"))
        tables.append(Table(("Stream", "Place", "Figure", "Clean", "Service", "Unit", "Provider"), saturated))
    return tables


def _saturation_rows(page: Page) -> tuple[tuple[str, ...], ...]:
    """Saturation temperature, latent heat, surface tension and the like of streams that change phase."""
    streams = {id(state.fluid): name for name, state in page.chain.fluids.items()}
    found = {}
    for row in (row for term in page.base.chains for row in term.rows):
        operation, kind = row.step.operation, row.step.kind
        if kind is None or not isinstance(operation, PropertyOperation | BoilingOperation | FixedOperation):
            continue
        if isinstance(operation, PropertyOperation) and operation.property_name not in SATURATION_FIGURES:
            continue
        owner, _, place = row.step.id.removeprefix("stream ").rpartition("/")[0].partition("/")
        stream = owner if row.step.id.startswith("stream ") else streams[id(operation.source)]
        values = tuple(value_text(value, kind) for value in (row.clean, row.service))
        unit, provider = unit_text(kind.unit), row.step.basis
        found[row.step.id] = (stream, place or "saturation", kind.name, *values, unit, provider)
    return tuple(found.values())


def _property_table(rows: tuple[PropertyRow, ...], page: Page) -> Table:
    asked = [column for column in PROPERTY_COLUMNS if any(column[0] in row.values for row in rows)]
    columns = (
        "Stream",
        "Place",
        "Condition",
        "T, °C",
        "T, K",
        "p, bar",
        "Phase",
        *(title for _, title, _ in asked),
        "Provider",
    )
    return Table(columns, tuple(_property_row(row, asked, page) for row in rows))


def _flow_states(page: Page) -> list[PropertyRow]:
    """The states at which volume flows are measured, with the density taken there."""
    solution = page.base.solutions[SERVICE]
    found = []
    for state in page.chain.streams.values():
        step = next(
            (step for step in page.chain.steps if step.id == f"stream {state.name}/density of flow"), None
        )
        if step is None or step.inputs["T"] == state.temperature:
            continue
        temperature, pressure = (solution.number(step.inputs[name]) for name in ("T", "p"))
        found.append(
            PropertyRow(
                state.name,
                "flow as stated",
                "",
                temperature,
                pressure,
                state.phase or "not stated",
                {"density": solution.number(step.id)},
                state.fluid_name,
            )
        )
    return found


def _property_row(row: PropertyRow, asked: list[tuple[str, str, int]], page: Page) -> tuple[str, ...]:
    without = pressure_words(page.chain.fluids[row.stream])
    pressure = number(row.pressure / PASCALS_OF_BAR) if math.isfinite(row.pressure) else without
    values = (
        number(row.values[name], digits) if name in row.values else NOT_USED for name, _, digits in asked
    )
    return (
        row.stream,
        row.place,
        row.condition or "clean and service",
        celsius(row.temperature),
        number(row.temperature),
        pressure,
        row.phase,
        *values,
        row.provider,
    )
