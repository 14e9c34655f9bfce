"""Title block, result in brief, changes, purpose."""

from __future__ import annotations

from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.pressure import acting_methods, drops
from calcbook.chain.solve import Solution
from calcbook.chain.types import CLEAN, SERVICE, PressureDrop
from calcbook.record.blocks import Block, Heading, Paragraph, Quote, Table
from calcbook.record.numbers import (
    CONCLUSION_DIGITS,
    PLAIN_DIGITS,
    in_report_unit,
    number,
    percent,
)
from calcbook.record.page import Page, case_name, counted
from calcbook.record.sections.criteria import CRITERION_COLUMNS, criterion_row, not_judged
from calcbook.record.sections.duty import brief_rows
from calcbook.record.sections.growth import time_brief_rows
from calcbook.record.sections.survey import survey_brief_rows
from calcbook.record.sections.uncertainty import how_sure

PRELIMINARY = "preliminary"


def confirmation(page: Page) -> str:
    """Preliminary while any open item exists or where it was issued so, else confirmed."""
    return PRELIMINARY if page.is_preliminary or page.life.issued.startswith(PRELIMINARY) else "confirmed"


def title_block(page: Page) -> list[Block]:
    """What the calculation is, who signs it, what it was made with."""
    calculation = page.calculation
    rows = [
        ("Number", calculation.number),
        ("Title", calculation.title),
        ("Plant", calculation.plant),
        ("Book", calculation.settings.name or "no book"),
        ("Revision", calculation.revision),
        ("State", page.life.state),
        ("Confirmation", _confirmation_words(page)),
        ("Criteria", _criteria_words(page)),
        *((role.capitalize(), _signed(page, role)) for role in calculation.settings.roles),
        *((("Issue", page.life.issued),) if page.life.issued else ()),
        ("Digest", page.digest.whole),
        ("Digest of the file's meaning", page.digest.meaning),
        ("Digest of the cards used", page.digest.cards),
        ("Digest of the displayed results", page.digest.results),
        ("Software", f"calcbook {page.software.calcbook}"),
        ("Property backend", f"CoolProp {page.software.coolprop}"),
    ]
    return [
        Heading(1, f"Calculation {calculation.number}, revision {calculation.revision}"),
        *((Quote(page.life.notice),) if page.life.notice else ()),
        Heading(2, "1. Title block"),
        Table(("Item", "Entry"), tuple(rows)),
    ]


def _signed(page: Page, role: str) -> str:
    """Who signed for a role, or that nobody did; the preparer stands in the file as well."""
    line = page.life.line(role)
    stated = f"{page.calculation.prepared_by}, {page.calculation.date}; " if role == "prepared" else ""
    if line is None or not line.person:
        return f"{stated}not signed"
    return f"{stated}{line.person}, {line.date}: sign-off {line.validity}"


def _confirmation_words(page: Page) -> str:
    items = len(page.solved.open_items)
    if not items:
        return confirmation(page) + (", as it was issued" if confirmation(page) == PRELIMINARY else "")
    return f"{confirmation(page)}: {counted(items, 'open item', 'open items')}, listed in section 2"


def _criteria_words(page: Page) -> str:
    """The verdicts that are not met: a confirmed calculation may say that the unit does not do."""
    judged = [item for case in page.solved.cases for item in case.criteria]
    if not judged:
        return "none is stated"
    failed = [f"{item.id} not met, case {case_name(item.case)}" for item in judged if not item.met]
    if failed:
        return "; ".join(failed)
    left = not_judged(page)
    return f"every criterion met where it is judged; {left}" if left else "every criterion met in every case"


# --- result in brief --------------------------------------------------------------------------------


def brief(page: Page) -> list[Block]:
    """The conclusion: U, cleanliness, excess surface, what controls, criteria, open items."""
    return [
        Heading(2, "2. Result in brief"),
        Table(("Result", "Value", "Formula or basis"), tuple(_brief_rows(page))),
        *_criteria(page),
        *how_sure(page),
        *_governing(page),
        *open_items(page),
    ]


def _brief_rows(page: Page) -> list[tuple[str, str, str]]:
    basis = f"on the surface {page.basis}, the basis of U"
    rows = []
    for condition in ("service", "clean"):
        result = page.result(f"U_{condition}")
        if result is not None:
            value = in_report_unit(result.value, result.kind, page.calculation.report, CONCLUSION_DIGITS)
            words = _fouling_words(page, condition)
            rows.append(("U in service" if condition == "service" else "U clean", value, f"{basis}; {words}"))
    cleanliness, excess = page.result("cleanliness"), page.result("excess_surface")
    if not _has_fouling(page):
        cleanliness = excess = None
    if cleanliness is not None:
        rows.append(("Cleanliness", number(cleanliness.value, CONCLUSION_DIGITS), "U_service/U_clean"))
    if excess is not None:
        rows.append(("Excess surface for fouling", percent(excess.value), "U_clean/U_service − 1"))
    rows += brief_rows(page)
    rows += time_brief_rows(page)
    rows += survey_brief_rows(page)
    for condition, word in ((SERVICE, "in service"), (CLEAN, "clean")):
        name, title = f"heat_flow_{condition}", f"Heat flow {word}, {_direction(page, condition)}"
        result = page.result(name)
        if result is not None and page.calculation.duty is None:
            suffix = " (for 1 m of length)" if page.chain.per_metre else ""
            value = in_report_unit(result.value, result.kind, page.calculation.report, PLAIN_DIGITS)
            basis = f"U·A times the difference of the bulk temperatures{_beyond_flow(page, name)}"
            rows.append((title + suffix, value, basis))
    rows.append(("Controlling term in service", *_controlling(page.base)))
    return rows + _pressure_rows(page)


def _direction(page: Page, condition: str) -> str:
    """Which way the heat flows."""
    step = page.chain.results.get("heat flow")
    inwards = step is not None and page.base.solutions[condition].number(step) < 0.0
    return "outside to inside" if inwards else "inside to outside"


def _beyond_flow(page: Page, name: str) -> str:
    """Whether a heat flow is more than the whole flow of a saturated stream gives or takes."""
    beyond = [
        check.owner
        for check in page.base.checks
        if check.id.endswith("/ heat balance / phase change")
        and name.endswith(check.condition)
        and check.state == "outside"
    ]
    return f"; more than the stated flow of {', '.join(beyond)} gives or takes" if beyond else ""


def _pressure_rows(page: Page) -> list[tuple[str, str, str]]:
    """What every stream with a law of friction loses; section 8 shows the steps at its film."""
    rows = []
    for group, branch, drop in drops(page.chain):
        for condition, words in (("service", "in service"), ("clean", "clean")):
            result = page.result(f"dp {branch.stream}_{condition}")
            if result is not None:
                value = in_report_unit(result.value, result.kind, page.calculation.report, CONCLUSION_DIGITS)
                basis = (
                    f"{drop.total.method.id}, at {group.name}{_deposit_words(page, group.side, condition)}"
                    f"{_accuracy_words(drop, page.base.solutions[condition])}"
                )
                rows.append((f"Pressure drop of {branch.stream}, {words}", value, basis))
    return rows


def _covered(coverage: str) -> str:
    """What an accuracy holds for, where its card says it."""
    return f" ({coverage})" if coverage else ""


def _accuracy_words(drop: PressureDrop, solution: Solution) -> str:
    """How good the cards of a pressure drop say that they are."""
    stated = [
        f"{method.id} within {method.accuracy.within}{_covered(method.accuracy.coverage)}"
        for method in acting_methods(drop, solution)
        if method.accuracy is not None
    ]
    return f"; {', '.join(stated)}" if stated else ""


def _deposit_words(page: Page, side: str, condition: str) -> str:
    """What a pressure drop in service leaves out of the deposits on its side of the wall."""
    deposits = [term.deposit for term in page.calculation.on_side(side) if term.kind == "fouling"]
    if condition != "service" or not deposits:
        return ""
    if any(deposit is not None and deposit.narrows for deposit in deposits):
        return "; the deposit narrows the flow, its roughness is not counted"
    return "; thickness and roughness of a deposit are not counted"


def _has_fouling(page: Page) -> bool:
    return any(row.kind == "fouling" for row in page.base.terms["service"])


def _fouling_words(page: Page, condition: str) -> str:
    """What sets the two conditions apart; nothing does where no fouling term is stated."""
    if not _has_fouling(page):
        terms = page.calculation.resistances
        included = {name for term in terms for name in term.includes}
        is_inside = any(term.kind == "fouling" and term.name in included for term in terms)
        return "a stated coefficient includes the deposit" if is_inside else "no fouling term is stated"
    return "with the fouling terms" if condition == "service" else "without the fouling terms"


def _controlling(case: CaseOutcome) -> tuple[str, str]:
    share = percent(case.controlling_share)
    if case.controlling:
        return f"{case.controlling}, {share}", "share of the total resistance, at least 50 %"
    return "no single controlling resistance", f"the largest share is {share}, below 50 %"


def _criteria(page: Page) -> list[Block]:
    items = [item for case in page.solved.cases for item in case.criteria]
    if not items:
        return [Paragraph("No acceptance criterion is stated: the result is for information.")]
    rows = tuple(criterion_row(item, page) for item in items)
    return [Table(CRITERION_COLUMNS, rows)]


def _governing(page: Page) -> list[Block]:
    if not page.has_cases:
        return []
    governing = page.solved.governing
    if not governing:
        return []
    named = [_governs(case, page) for case in page.solved.cases if case.name in governing.values()]
    words = "Governing case" if len(named) == 1 else "Governing cases"
    return [Paragraph(f"{words}: {'; '.join(named)}.")]


def _governs(case: CaseOutcome, page: Page) -> str:
    """A case, the criteria that it has the smallest margin of, and its U."""
    criteria = [name for name, governing in page.solved.governing.items() if governing == case.name]
    margins = " and of ".join(page.calculation.criterion(name).text for name in criteria if name)
    rule = f"smallest margin of {margins}" if margins else "lowest U in service"
    result = case.results["U_service"]
    value = in_report_unit(result.value, result.kind, page.calculation.report, CONCLUSION_DIGITS)
    return f"{case_name(case.name)} ({rule}), U in service {value}"


def open_items(page: Page) -> list[Block]:
    """Every open item, counted, with its kind; or the words that there are none."""
    items = page.solved.open_items
    heading = Heading(3, "Open items")
    if not items:
        return [heading, Paragraph("No open items.")]
    rows = tuple((item.kind, item.id, item.text) for item in items)
    words = counted(len(items), "open item", "open items")
    return [
        heading,
        Paragraph(f"{words}. While any is open the calculation is preliminary."),
        Table(("Kind", "Id", "Open item"), rows),
    ]


# --- changes and purpose ----------------------------------------------------------------------------


NO_CHANGES = (
    "There is no earlier issued revision to compare with. The reasons of each revision are in section 17."
)


def changes(page: Page) -> list[Block]:
    """What moved since the last issued revision."""
    return [
        Heading(2, "3. Changes since the last issued revision"),
        *(page.life.changes or (Paragraph(NO_CHANGES),)),
    ]


def purpose(page: Page) -> list[Block]:
    """What the calculation is for."""
    return [Heading(2, "4. Purpose"), Paragraph(page.calculation.purpose or "No purpose is stated.")]
