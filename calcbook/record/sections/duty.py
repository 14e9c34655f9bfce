"""The duty in the record: two ways to it, margin ledger, largest allowances, parts."""

from __future__ import annotations

import math

from calcbook.chain.allowance import fouling_figures
from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.rating_outcome import (
    WITH_ALLOWANCES,
    Parts,
    Rating,
)
from calcbook.chain.types import Layer
from calcbook.library import vocabulary
from calcbook.quantities import in_unit
from calcbook.record.blocks import Block, Heading, Paragraph, Table
from calcbook.record.numbers import (
    NOT_KNOWN,
    PLAIN_DIGITS,
    in_report_unit,
    number,
    percent,
    report_unit,
    unit_text,
)
from calcbook.record.page import Page, case_name, counted
from calcbook.record.sections.day_one import throttled_words, until_words


def brief_rows(page: Page) -> list[tuple[str, str, str]]:
    """The conclusion of the duty: arrangement, heat, areas, and both margins with their formulas."""
    rows = _arrangement(page)
    for name, title, basis in (
        ("duty", "Duty", _duty_basis(page)),
        ("area_installed", "Installed area", _installed_basis(page)),
        ("area_service", "Area that the duty needs in service", "Q/(U_service·ΔT_mean)"),
        ("area_clean", "Area that the duty needs clean", "Q/(U_clean·ΔT_mean)"),
        (
            "heat_reached_service",
            "Heat that the installed area reaches in service",
            _reached_basis(page),
        ),
    ):
        result = page.result(name)
        if result is not None:
            rows.append(
                (
                    title,
                    in_report_unit(result.value, result.kind, page.calculation.report, PLAIN_DIGITS),
                    basis,
                )
            )
    margin = page.result("area_margin")
    if margin is not None:
        rows.append(("Margin of area over the duty", percent(margin.value), "A_installed/A_service − 1"))
    day = page.days.get("")
    if day is not None and day.turned_down is not None:
        runs = throttled_words(page, day, day.turned_down)
        rows.append(
            (
                "Clean unit under its control",
                runs,
                f"day one, section 12: {day.throttle.way} until {until_words(page, day)}",
            )
        )
    return rows


def _installed_basis(page: Page) -> str:
    words = "as stated; UA and the heat flows at the mean temperatures stand on the area of the geometry"
    return f"on the surface {page.basis}, {words if _is_stated(page) else 'from the geometry'}"


def _is_stated(page: Page) -> bool:
    """Whether the file states the installed area."""
    duty = page.calculation.duty
    return duty is not None and duty.installed_area is not None


def _arrangement(page: Page) -> list[tuple[str, str, str]]:
    """How the streams flow, which decides the mean temperature difference."""
    duty = page.calculation.duty
    if duty is None:
        return []
    basis = (
        "beside a stream that keeps its temperature all have one mean difference"
        if duty.is_beside_one_temperature
        else "it decides the mean difference"
    )
    shells = (
        f", {counted(duty.shells, 'shell', 'shells')} in series"
        if duty.arrangement == "shell and tube"
        else ""
    )
    return [("Arrangement", f"{duty.arrangement}{shells}", f"stated in `duty:`; {basis}")]


def _reached_basis(page: Page) -> str:
    """What the heat that is reached rests on, and whether a saturated stream has that much."""
    day = page.days.get("")
    if "effectiveness" in page.chain.results:
        words = "effectiveness, from the same inlets, with U at the stated means"
    else:
        words = "U_service·A_installed·ΔT between both saturation temperatures"
    left = [check for check in (day.checks if day is not None else ()) if check.condition == WITH_ALLOWANCES]
    return f"{words}; {left[0].id}: {left[0].figure}, limit {left[0].limit}, outside" if left else words


def _duty_basis(page: Page) -> str:
    duty, closure = page.calculation.duty, page.result("closure")
    if duty is not None and duty.heat_flow is not None:
        return f"as stated{_beside_stated(page)}"
    if closure is None:
        return "heat balance of one stream"
    return f"mean of both heat balances, which differ by {percent(closure.value, 2)}"


def _beside_stated(page: Page) -> str:
    """How far the heat balances of the streams lie off the stated duty."""
    closures = {name: page.result(f"closure_{name}") for name in ("hot", "cold")}
    words = [
        f"of the {name} stream {percent(one.value, 2)}" for name, one in closures.items() if one is not None
    ]
    return f"; off it by heat balance: {', '.join(words)}" if words else ""


# --- section 7 --------------------------------------------------------------------------------------


def area_blocks(page: Page) -> list[Block]:
    """Margin ledger, largest allowances and parts, where a duty is stated."""
    rating = page.solved.rating
    if rating is None or not rating.ledgers:
        return []
    return [
        *_ledger(page, rating),
        *_allowances(page),
        *(_parts(page, rating.parts) if rating.parts else []),
    ]


def _ledger(page: Page, rating: Rating) -> list[Block]:
    unit = report_unit(vocabulary()["area"], page.calculation.report)
    rows = [
        (row.name, _area(page, row.area), percent(row.area / rating.ledger.sum), row.basis)
        for row in rating.ledger.rows
    ]
    whole = "installed area, as stated" if _is_stated(page) else "area of all tubes, or of the wall"
    rows.append(("sum", _area(page, rating.ledger.sum), "100.0 %", whole))
    stacked = [row for row in rating.ledger.rows if row.is_margin and row.area > 0.0]
    words = (
        "The area of a resistance is Q/ΔT_mean times that resistance on the basis area, so that the entries add"
        " up. Each margin stands on its own line; they are stacked, and none of them is a reserve for another."
    )
    blocks: list[Block] = [
        Heading(3, "Margin ledger"),
        Paragraph(words),
        Table(("Part of the area", f"Area, {unit_text(unit)}", "Share", "Rests on"), tuple(rows)),
    ]
    if stacked:
        total = sum(row.area for row in stacked)
        needed = rating.ledger.rows[0].area
        less = [row for row in rating.ledger.rows if row.is_margin and row.area < 0.0]
        taken = "".join(f", less {percent(-row.area / needed)} for {row.name}" for row in less)
        blocks.append(
            Paragraph(
                f"Stacked margins: {', '.join(row.name for row in stacked)}; together {percent(total / needed)} of the"
                f" area that the duty needs clean{taken}."
            )
        )
    return [*blocks, *_ledgers(page, rating)]


def _ledgers(page: Page, rating: Rating) -> list[Block]:
    """The same entries in every case beside each other, where there are more than one."""
    if len(rating.ledgers) == 1:
        return []
    unit = unit_text(report_unit(vocabulary()["area"], page.calculation.report))
    names = dict.fromkeys(row.name for ledger in rating.ledgers.values() for row in ledger.rows)
    rows = [(name, *(_area(page, ledger.area(name)) for ledger in rating.ledgers.values())) for name in names]
    rows.append(("sum", *(_area(page, ledger.sum) for ledger in rating.ledgers.values())))
    return [
        Paragraph(f"The same in every case, in {unit}:"),
        Table(("Part of the area", *map(case_name, rating.ledgers)), tuple(rows)),
    ]


def _area(page: Page, value: float) -> str:
    return _plain(page, value, "area", PLAIN_DIGITS)


def _plain(page: Page, value: float, kind: str, digits: int) -> str:
    """A figure in the unit of the report without that unit, which stands in the head of its column."""
    if not math.isfinite(value):
        return NOT_KNOWN
    unit = report_unit(vocabulary()[kind], page.calculation.report)
    return number(in_unit(value, unit), digits)


def _allowances(page: Page) -> list[Block]:
    rows = tuple(
        _allowance_row(page, figure, layers) for figure, layers in fouling_figures(page.chain).items()
    )
    if not rows:
        return []
    unit = unit_text(report_unit(vocabulary()["area resistance"], page.calculation.report))
    narrows = any(term.deposit is not None and term.deposit.narrows for term in page.calculation.resistances)
    return [
        Heading(3, "Largest allowances"),
        Paragraph(
            "The largest resistance of one fouling figure, on its own surface, with which the installed area still"
            " carries the duty; the others stay as stated. The circuit is closed again with it: films and walls follow"
            " their temperatures, so it is not just what 1/U_req leaves beside the resistances above."
            + (" What is stated is that of the base case." if _named_cases(page) else "")
            + (" The bore stays as the stated deposits narrow it." if narrows else "")
        ),
        Table(
            (
                "Fouling term",
                "On",
                f"Stated, {unit}",
                f"Largest, {unit}",
                *(f"Largest in case {case.name}, {unit}" for case in _named_cases(page)),
            ),
            rows,
        ),
    ]


def _named_cases(page: Page) -> list[CaseOutcome]:
    """The cases beside the base case that are no places along the unit."""
    return [case for case in page.solved.cases[1:] if case.name not in page.calculation.places]


def _allowance_row(page: Page, figure: str, layers: tuple[Layer, ...]) -> tuple[str, ...]:
    name = ", ".join(layer.name for layer in layers)
    surfaces = dict.fromkeys(page.chain.surfaces[layer.surface].name for layer in layers)
    stated = page.base.solutions["service"].number(figure)
    largest = [case.results.get(f"largest_allowance {name}") for case in (page.base, *_named_cases(page))]
    return (
        name,
        ", ".join(surfaces),
        _plain(page, stated, "area resistance", PLAIN_DIGITS),
        *(
            _plain(page, one.value, "area resistance", PLAIN_DIGITS)
            if one is not None and one.value >= 0.0
            else "none: the duty is not carried even without it"
            for one in largest
        ),
    )


def _parts(page: Page, parts: Parts) -> list[Block]:
    area = unit_text(report_unit(vocabulary()["area"], page.calculation.report))
    overall = unit_text(report_unit(vocabulary()["overall coefficient"], page.calculation.report))
    difference = unit_text(report_unit(vocabulary()["temperature difference"], page.calculation.report))
    rows = [
        (
            str(row.number),
            _ends(page, row.hot),
            _ends(page, row.cold),
            _plain(page, row.difference, "temperature difference", PLAIN_DIGITS),
            *(
                text
                for condition in ("service", "clean")
                for text in (
                    _plain(page, row.overall[condition], "overall coefficient", PLAIN_DIGITS),
                    _plain(page, row.area[condition], "area", PLAIN_DIGITS),
                )
            ),
        )
        for row in parts.rows
    ]
    rows.append(
        ("sum", "", "", "", "", _area(page, parts.area["service"]), "", _area(page, parts.area["clean"]))
    )
    single = page.base.results["area_service"].value
    return [
        Heading(3, "Parts of the unit"),
        Paragraph(
            f"Equal parts of the duty{' of the base case' if _named_cases(page) else ''}, numbered from the hot inlet, each"
            " with the properties at its own means. U in"
            f" service differs by {percent(parts.spread)} over them; the summed area in service is"
            f" {percent(parts.area['service'] / single - 1.0, 2)} off that from one mean state."
        ),
        Table(
            (
                "Part",
                "Hot, in to out",
                "Cold, in to out",
                f"ΔT_lm, {difference}",
                f"U service, {overall}",
                f"A service, {area}",
                f"U clean, {overall}",
                f"A clean, {area}",
            ),
            tuple(rows),
        ),
    ]


def _ends(page: Page, pair: tuple[float, float]) -> str:
    kind = vocabulary()["temperature"]
    return " to ".join(in_report_unit(value, kind, page.calculation.report, PLAIN_DIGITS) for value in pair)


# --- section 10 -------------------------------------------------------------------------------------


def two_ways(page: Page) -> list[Block]:
    """The duty by the mean temperature difference and by effectiveness, beside each other."""
    table = page.chain.results
    if "duty by effectiveness" not in table:
        return []
    solution = page.base.solutions["service"]
    duty, other = (solution.number(table[name]) for name in ("duty", "duty by effectiveness"))
    kind, report = vocabulary()["heat flow"], page.calculation.report
    return [
        Heading(3, "Duty by two ways"),
        Table(
            ("Way", "Heat flow", "Difference"),
            (
                (
                    "rate equation: U that the installed area needs, mean temperature difference",
                    in_report_unit(duty, kind, report, PLAIN_DIGITS),
                    "",
                ),
                (
                    "effectiveness at that U from the inlets and the capacity flows",
                    in_report_unit(other, kind, report, PLAIN_DIGITS),
                    percent(other / duty - 1.0, 3),
                ),
            ),
        ),
        Paragraph("The two agree where the heat balances close."),
    ]
