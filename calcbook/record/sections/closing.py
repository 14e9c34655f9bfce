"""References, sign-off block, revision history, closing line."""

from __future__ import annotations

from calcbook.calcfile.calculation import Value
from calcbook.formulas.names import written_name
from calcbook.record.blocks import Block, Heading, Paragraph, Table
from calcbook.record.page import HOUSE_METHOD, Page, reference_id
from calcbook.record.sections.inputs import stated_choices
from calcbook.record.sections.review import can_be_touched


def references(page: Page) -> list[Block]:
    """Publications of the cards used, numbered; then the documents that the figures come from."""
    return [Heading(2, "15. References"), *_publications(page), *_documents(page)]


def _publications(page: Page) -> list[Block]:
    """One row per publication of each card, numbered within the card, so that no number moves."""
    rows = tuple(
        (
            reference_id(card.id, place),
            source.cite,
            source.supports or "the card",
            _standing(page, card.id, source.standing),
        )
        for card in page.cards()
        for place, source in enumerate(card.sources, 1)
    )
    if not rows:
        return [Paragraph("No card with a publication is used.")]
    words = (
        "A publication is cited by its card and its number there; methods of the cross-check are not listed."
    )
    return [
        Heading(3, "Publications"),
        Paragraph(words),
        Table(("Reference", "Publication", "What it supports", "Standing"), rows),
    ]


def _standing(page: Page, card: str, standing: str) -> str:
    """How a source stands, and whether it belongs to a book's own card."""
    return f"{HOUSE_METHOD}; {standing}" if page.is_house(card) else standing


def _documents(page: Page) -> list[Block]:
    """Every source text of the file once, with what comes from it."""
    found: dict[str, list[str]] = {}
    for item in page.chain.inputs.values():
        name = written_name(item.symbol) if item.is_given else item.title
        found.setdefault(item.source, []).append(name)
    for title, choice in stated_choices(page):
        found.setdefault(choice.source, []).append(title)
    for case, changes in page.calculation.cases.items():
        for symbol, given in changes.items():
            found.setdefault(given.source, []).append(f"{written_name(symbol)} in case {case}")
    for state in page.chain.streams.values():
        if state.fluid.text.source:
            found.setdefault(state.fluid.text.source, []).append(f"properties of {state.fluid.text.name}")
    for criterion in page.calculation.acceptance:
        found.setdefault(criterion.source, []).append(criterion.text)
    stated = page.calculation.uncertainty
    for one in stated.correlations if stated is not None else ():
        names = f"{written_name(one.first)} and {written_name(one.second)}"
        found.setdefault(one.source, []).append(f"correlation of {names}")
    survey = page.calculation.survey
    for name, source in survey.sources.items() if survey is not None else ():
        found.setdefault(source, []).append(f"{name} of the survey")
    for assumption in page.calculation.assumptions:
        if assumption.is_verified:
            found.setdefault(assumption.evidence, []).append(f"evidence of assumption {assumption.id}")
    for name, limit in _limits_of_the_book(page).items():
        found.setdefault(limit.source, []).append(f"limit of the book, {name}: {limit.text}")
    rows = tuple((source, "; ".join(names)) for source, names in found.items() if source)
    if not rows:
        return []
    return [Heading(3, "Documents"), Table(("Document", "What comes from it"), rows)]


def _limits_of_the_book(page: Page) -> dict[str, Value]:
    """The limits of the book that this calculation is held against."""
    settings = page.calculation.settings
    limits = {"excess surface": settings.excess_surface}
    if can_be_touched(page):
        limits["surface temperature"] = settings.surface_temperature
    return {name: limit for name, limit in limits.items() if limit is not None}


def sign_off(page: Page) -> list[Block]:
    """One row per role: valid, void with what changed since, or not signed."""
    rows = tuple(_sign_off_row(page, role) for role in page.calculation.settings.roles)
    words = (
        "A sign-off stands in a file beside the calculation and names the digest of section 1; any change"
        " of meaning, cards or displayed results voids it. The program shows that names differ and that"
        " content is unchanged; it shows neither identity nor competence."
    )
    return [
        Heading(2, "16. Sign-off"),
        Paragraph(words),
        Table(("Role", "Sign-off", "Name", "Date", "Way of checking", "Note"), rows),
        *_remarks(page),
    ]


def _remarks(page: Page) -> list[Block]:
    """What those who signed wrote to the runner's assumptions, where it is more than that they acknowledge them."""
    if not page.life.remarks:
        return []
    return [
        Paragraph("To what the runner decided (section 6), those who signed remark:"),
        Table(("Id", "Remark"), page.life.remarks),
    ]


def _sign_off_row(page: Page, role: str) -> tuple[str, str, str, str, str, str]:
    line = page.life.line(role)
    if line is None or not line.person:
        return (role, "not signed", "", "", "", line.note if line is not None else "")
    return (role, line.validity, line.person, line.date, line.way, line.note)


def revision_history(page: Page) -> list[Block]:
    """The revisions as the file lists them."""
    rows = tuple((item.revision, item.date, item.reason) for item in page.calculation.revisions)
    heading = Heading(2, "17. Revision history")
    if not rows:
        return [heading, Paragraph("The file lists no revision.")]
    return [heading, Table(("Revision", "Date", "Reason"), rows)]


def closing_line(page: Page) -> list[Block]:
    """The line by which a reader sees that the record is whole."""
    calculation = page.calculation
    return [
        Heading(2, "18. End"),
        Paragraph(f"End of calculation {calculation.number}, revision {calculation.revision}."),
    ]
