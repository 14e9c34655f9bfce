"""Pages of the library, made from the cards: situations, methods, materials, fluids, fault codes."""

from __future__ import annotations

from calcbook.fault_codes import CODES
from calcbook.formulas import number_text, write
from calcbook.library import Library
from calcbook.library.cards import (
    Assignment,
    Limit,
    Line,
    Material,
    Method,
    Need,
    Situation,
    Solve,
    Source,
    Table,
)
from calcbook.library.plausibility import AllowanceCard, allowance_cards, bands, emissivities
from calcbook.properties import fluid_names, mixture_names
from calcbook.quantities import unit_display
from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph
from calcbook.record.blocks import Table as TableBlock

ICE_POINT = 273.15


def overview(library: Library) -> tuple[Block, ...]:
    """Every situation with its methods, the methods of no situation, every material, by name."""
    blocks: list[Block] = [Heading(1, "Library"), Heading(2, "Situations and their methods")]
    for name in library.names("situations"):
        situation = library.situation(name)
        blocks.append(Heading(3, f"{name}: {situation.title}"))
        rows = [
            (
                method,
                library.method(method).title,
                library.method(method).family,
                library.method(method).state.status,
            )
            for method in situation.methods
        ]
        blocks.append(TableBlock(("Method", "Title", "Family", "State"), tuple(rows)))
    blocks += _methods_apart(library)
    blocks.append(Heading(2, "Materials"))
    materials: list[tuple[str, ...]] = []
    for name in library.names("materials"):
        card = library.material(name)
        materials.append((name, card.title, card.kind, _temperatures(card), card.standing, card.state.status))
    blocks.append(TableBlock(("Material", "Title", "Kind", "Range", "Standing", "State"), tuple(materials)))
    return tuple(blocks)


def _methods_apart(library: Library) -> list[Block]:
    """The methods that no situation lists: walls, fins, friction, rating, growth of fouling, cleaning."""
    listed = {method for name in library.names("situations") for method in library.situation(name).methods}
    rows = []
    for name in library.names("methods"):
        if name not in listed:
            card = library.method(name)
            rows.append((name, card.title, card.gives, card.family, card.state.status))
    return [
        Heading(2, "Methods of no situation"),
        TableBlock(("Method", "Title", "Gives", "Family", "State"), tuple(rows)),
    ]


def page(library: Library, name: str) -> tuple[Block, ...] | None:
    """The page of a situation, method or material; None when the library has no such card."""
    if name in library.names("situations"):
        return situation_page(library.situation(name))
    if name in library.names("methods"):
        return method_page(library.method(name))
    if name in library.names("materials"):
        return material_page(library.material(name))
    return None


def situation_page(card: Situation) -> tuple[Block, ...]:
    """One situation: what it needs, the groups it forms, the choice between its methods."""
    groups = tuple((group.symbol, group.quantity.name, write(group.relation)) for group in card.groups)
    choices = tuple(
        (write(choice.when) if choice.when is not None else "otherwise", choice.use, choice.because)
        for choice in card.choose
    )
    blocks: list[Block] = [
        Heading(1, card.title),
        Paragraph(
            f"Situation {card.id}; {card.flow} flow; on the {' or '.join(card.surfaces)} of a"
            f" {' or '.join(card.shapes)}."
        ),
        Heading(2, "Needs"),
        TableBlock(("Symbol", "Quantity", "Unit", "Choice"), _needs(card.needs)),
        Heading(2, "Groups"),
        TableBlock(
            ("Symbol", "Quantity", "Relation"),
            groups,
            (f"Characteristic length L_c = {write(card.characteristic_length)}.",),
        ),
        Heading(2, f"Choice of method (groups at {card.choose_at} temperature)"),
        TableBlock(("When", "Method", "Because"), choices),
        Heading(2, "Methods"),
        Bullets(card.methods),
        *_friction(card),
        Heading(2, "Assumes"),
        Bullets(card.assumes),
        *_sources(card.sources),
    ]
    return tuple(blocks)


def _friction(card: Situation) -> list[Block]:
    """How the pressure drop of a situation is found; nothing where it has no law of friction."""
    friction = card.friction
    if friction is None:
        return []
    blocks: list[Block] = [
        Heading(2, "Pressure drop beside the film"),
        Paragraph(f"Added up by {friction.dp}."),
    ]
    if friction.needs:
        blocks.append(TableBlock(("Symbol", "Quantity", "Unit", "Choice"), _needs(friction.needs)))
    if friction.groups:
        blocks.append(
            TableBlock(
                ("Symbol", "Quantity", "Relation"),
                tuple(
                    (group.symbol, group.quantity.name, write(group.relation)) for group in friction.groups
                ),
            )
        )
    if friction.choose:
        blocks.append(
            TableBlock(
                ("When", "Friction law", "Because"),
                tuple(
                    (
                        write(choice.when) if choice.when is not None else "otherwise",
                        choice.use,
                        choice.because,
                    )
                    for choice in friction.choose
                ),
            )
        )
    return blocks


def method_page(card: Method) -> tuple[Block, ...]:
    """One method: needs, relations, limits, accuracy, check points, sources."""
    at = (
        f" The conductivity of h = Nu·λ/L_c is taken at {card.properties_at} temperature."
        if card.properties_at
        else ""
    )
    closes = {
        "nothing": "Nothing of the solution is needed.",
        "surface": "It needs the temperature of the surface.",
        "flux": "It needs the heat flux.",
    }[card.closes_on]
    blocks: list[Block] = [
        Heading(1, card.title),
        *((Paragraph("A book's own card: house method."),) if card.house else ()),
        Paragraph(
            f"Method {card.id}; family {card.family}; state {card.state.status} since {card.state.since}."
            f" Gives {card.gives}. {closes}{at}"
        ),
        Heading(2, "Needs"),
        TableBlock(("Symbol", "Quantity", "Unit", "Choice"), _needs(card.needs)),
        Heading(2, "Relations"),
        Code(
            "\n".join(
                [
                    *(f"{symbol} = {text}" for symbol, (_, text, _) in card.constants.items()),
                    *(f"{use.symbol} from {use.method}" for use in card.uses),
                    *(_line(line) for line in card.lines),
                ]
            )
        ),
        *(block for table in card.tables.values() for block in _table(table)),
        Heading(2, "Limits"),
        TableBlock(
            ("Limit", "That", "Level", "Because", "Source", "Standing"),
            tuple(_limit(one) for one in card.limits),
        ),
        Heading(2, "Accuracy"),
        Paragraph(_accuracy(card)),
        Heading(2, "Assumes"),
        Bullets(card.assumes),
        Heading(2, "Check points"),
        TableBlock(
            ("Given", "Gives", "Within", "Source", "Standing"),
            tuple(
                (
                    ", ".join(f"{symbol} = {text}" for symbol, text in point.given.items()),
                    ", ".join(f"{symbol} = {value!r}" for symbol, value in point.gives.items()),
                    f"{point.within:g}",
                    point.source,
                    point.standing,
                )
                for point in card.check_points
            ),
        ),
        *_sources(card.sources),
        *_notes(card.notes),
    ]
    return tuple(blocks)


def material_page(card: Material) -> tuple[Block, ...]:
    """One material: conductivity against temperature, spread, sources."""
    rows = tuple(
        (number_text(temperature - ICE_POINT, 5), number_text(temperature, 5), number_text(conductivity, 4))
        for temperature, conductivity in zip(
            card.temperatures.tolist(), card.conductivities.tolist(), strict=True
        )
    )
    return (
        Heading(1, card.title),
        Paragraph(
            f"Material {card.id}; {card.kind}; standing {card.standing}; state {card.state.status} since"
            f" {card.state.since}. Spread between sources: {card.spread} ({card.spread_because})."
        ),
        TableBlock(
            ("T, °C", "T, K", "k, W/(m·K)"),
            rows,
            (
                "Straight between the rows; beyond them the nearest row is held"
                + (", and that is an open item." if card.outside == "open item" else "."),
            ),
        ),
        *_sources(card.sources),
        *_notes(card.notes),
    )


def fluids_page() -> tuple[Block, ...]:
    """Fluids that a stream may name."""
    return (
        Heading(1, "Fluids"),
        Paragraph("Besides these a calculation may bring a table, a D341 viscosity or stated constants."),
        Heading(2, "Pure fluids"),
        Bullets(tuple(fluid_names())),
        Heading(2, "Mixtures, with a mass or volume fraction of the first part"),
        Bullets(tuple(str(name) for name in mixture_names())),
    )


def faults_page() -> tuple[Block, ...]:
    """Every fault code with what it means."""
    return (Heading(1, "Fault codes"), TableBlock(("Code", "Meaning"), tuple(CODES.items())))


def bands_page() -> tuple[Block, ...]:
    """Every plausible band, in the order of the calculation: dimensions, walls, films, speeds, results."""
    rows = tuple(
        (
            band.name,
            band.quantity.name,
            band.place,
            _range(band.texts),
            band.because,
            band.source,
            band.standing,
        )
        for band in bands().values()
    )
    return (
        Heading(1, "Plausible bands"),
        Paragraph(
            "A figure outside its band is a caution of the record that names the band. It blocks nothing, and no"
            " figure is ever filled in from here."
        ),
        TableBlock(("Band", "Quantity", "Place", "Usual", "Because", "Source", "Standing"), rows),
    )


def allowances_page() -> tuple[Block, ...]:
    """Typical fouling allowances and typical coefficients, each with its publication and standing."""
    blocks: list[Block] = [
        Heading(1, "Typical fouling allowances and coefficients"),
        Paragraph(
            "They are for reading, and to warn where a stated figure lies far from what is typical of the service"
            " that the calculation names with `service:` on the fouling term or in `report:`. No allowance is ever"
            " filled in."
        ),
    ]
    for card in allowance_cards().values():
        blocks += _allowances(card)
    return tuple(blocks)


def emissivities_page() -> tuple[Block, ...]:
    """Emissivities of surfaces, each with its publication and standing."""
    rows = tuple(
        (one.surface, one.temperature, one.emissivity, one.source, one.standing) for one in emissivities()
    )
    return (
        Heading(1, "Emissivities"),
        Paragraph("They are for reading: a calculation states its emissivity with a source."),
        TableBlock(("Surface", "Temperature", "Emissivity", "Source", "Standing"), rows),
    )


def _allowances(card: AllowanceCard) -> list[Block]:
    numbers = {source: str(number) for number, source in enumerate(card.sources, 1)}
    rows = tuple(
        (
            row.service,
            row.side,
            _range(row.texts),
            numbers[row.publication],
            row.publication.standing,
            row.note,
        )
        for row in card.rows
    )
    note = f"Warned of beyond a factor of {card.far:g} outside the range of all publications of a service."
    sources = tuple(f"{number}: {source.cite} ({source.standing})" for source, number in numbers.items())
    return [
        Heading(2, card.title),
        TableBlock(("Service", "Side", "Typical", "Source", "Standing", "Note"), rows, (note,)),
        Bullets((*sources, *card.notes)),
    ]


# --- pieces -------------------------------------------------------------------------------------------


def _needs(needs: tuple[Need, ...]) -> tuple[tuple[str, str, str, str], ...]:
    rows = []
    for need in needs:
        quantity = need.quantity.name + (f" at {need.place}" if need.place else "")
        choice = " | ".join(need.one_of)
        if need.absent is not None:
            choice = f"{choice}; absent: {need.absent}" if choice else f"absent: {need.absent}"
        rows.append((write_symbol(need.symbol), quantity, unit_display(need.quantity.unit), choice))
    return tuple(rows)


def write_symbol(symbol: str) -> str:
    """A symbol as it is printed in relations."""
    from calcbook.formulas import Symbol

    return write(Symbol(symbol))


def _line(line: Line) -> str:
    if isinstance(line, Assignment):
        return f"{write_symbol(line.symbol)} = {write(line.relation)}"
    if isinstance(line, Solve):
        low, high = line.between
        named = f", with {_line(line.sum)}" if line.sum is not None else ""
        return f"{write_symbol(line.symbol)} from {write(line.equation)}{named}, between {low:g} and {high:g}"
    return f"{write_symbol(line.symbol)} = sum over {line.over} = 0 … {line.terms - 1} of {write(line.of)}"


def _table(table: Table) -> list[Block]:
    by = ", ".join(f"{symbol} ({way})" for symbol, way in table.by.items())
    return [
        Heading(3, f"Table {table.name}"),
        TableBlock(table.columns, table.texts, (f"Found by {by}; outside: {table.outside}.",)),
    ]


def _limit(limit: Limit) -> tuple[str, ...]:
    return (limit.id, write(limit.that), limit.level, limit.because, limit.source, limit.standing)


def _accuracy(card: Method) -> str:
    if card.accuracy is None:
        return "No accuracy is stated."
    one = card.accuracy
    return f"Within {one.within} for {one.coverage}, stated by {one.stated_by} (standing: {one.standing})."


def _sources(sources: tuple[Source, ...]) -> list[Block]:
    rows = tuple(
        (str(number), source.cite, source.supports, source.standing)
        for number, source in enumerate(sources, 1)
    )
    return [Heading(2, "Sources"), TableBlock(("No.", "Source", "For", "Standing"), rows)]


def _notes(notes: tuple[str, ...]) -> list[Block]:
    return [Heading(2, "Notes"), Bullets(notes)] if notes else []


def _range(texts: tuple[str, str]) -> str:
    """Both ends of a range as written, the unit once."""
    (low, _, unit), (high, _, other) = (text.partition(" ") for text in texts)
    shown = unit_display(other)
    if texts[0] == texts[1]:
        return f"{high} {shown}"
    return f"{low} to {high} {shown}" if unit == other else f"{low} {unit_display(unit)} to {high} {shown}"


def _temperatures(card: Material) -> str:
    low, high = float(card.temperatures[0]), float(card.temperatures[-1])
    if low == high:
        return f"{number_text(low - ICE_POINT, 4)} °C"
    return f"{number_text(low - ICE_POINT, 4)} to {number_text(high - ICE_POINT, 4)} °C"
