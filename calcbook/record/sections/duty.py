"""The duty in the record: two ways to it, margin ledger, largest allowances, parts, day one."""

from __future__ import annotations

import math

from calcbook.chain.allowance import fouling_figures
from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.plausible import THROTTLED_VAPOUR, site_pressure
from calcbook.chain.rating_outcome import (
    FLOW,
    PRESSURE,
    WITH_ALLOWANCES,
    DayOne,
    Parts,
    Rating,
    UnitState,
)
from calcbook.chain.types import Layer
from calcbook.library import vocabulary
from calcbook.quantities import in_unit
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table
from calcbook.record.numbers import (
    CONCLUSION_DIGITS,
    NOT_KNOWN,
    PLAIN_DIGITS,
    in_report_unit,
    number,
    percent,
    report_unit,
    unit_text,
)
from calcbook.record.page import Page, case_name, counted
from calcbook.record.sections.criteria import CRITERION_COLUMNS, criterion_row
from calcbook.record.sections.validity import verdict

# A surface this much hotter than in service is told, K: common practice.
HOTTER = 2.0
# Why a change of phase at the wall is not checked.
NOT_CHECKED = {
    "boiling": "no vapour pressure, or no pressure of the stream, is known",
    "freezing": "no freezing point, or no pressure of the stream, is known",
}


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
        runs = _throttled(page, day, day.turned_down)
        rows.append(
            (
                "Clean unit under its control",
                runs,
                f"day one, section 12: {_way(day)} until {_until(page, day)}",
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
    shells = (
        f", {counted(duty.shells, 'shell', 'shells')} in series"
        if duty.arrangement == "shell and tube"
        else ""
    )
    return [
        ("Arrangement", f"{duty.arrangement}{shells}", "stated in `duty:`; it decides the mean difference")
    ]


def _reached_basis(page: Page) -> str:
    """What the heat that is reached rests on, and whether a saturated stream has that much."""
    day = page.days.get("")
    words = "effectiveness, from the same inlets, with U at the stated means"
    left = [check for check in (day.checks if day is not None else ()) if check.condition == WITH_ALLOWANCES]
    return f"{words}; {left[0].id}: {left[0].figure}, limit {left[0].limit}, outside" if left else words


def _duty_basis(page: Page) -> str:
    closure = page.result("closure")
    if closure is None:
        return "heat balance of one stream"
    return f"mean of both heat balances, which differ by {percent(closure.value, 2)}"


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


# --- section 12 -------------------------------------------------------------------------------------


def day_one_blocks(page: Page) -> list[Block]:
    """The clean unit at the inlets of the duty in every case, where there is a duty and something fouls."""
    rating = page.solved.rating
    if rating is None or not rating.days:
        return []
    blocks: list[Block] = [Heading(3, "Day one")]
    for case, day in rating.days.items():
        where = f" in case {case}" if case else ""
        if isinstance(day, str):
            blocks.append(Paragraph(f"Day one has no answer{where}: {day}."))
        elif case not in rating.told:
            blocks.append(Paragraph(f"In case {case} the clean unit does what it does in the base case."))
        else:
            blocks += [*([Heading(4, f"Day one{where}")] if case else []), *_day_blocks(page, day, case)]
    return blocks


def _day_blocks(page: Page, day: DayOne, case: str) -> list[Block]:
    states = {WITH_ALLOWANCES: day.service, "clean": day.clean}
    if day.turned_down is not None:
        states[f"clean, {_way(day)} until {_until(page, day)}"] = day.turned_down
    what = (
        f"The same states at the inlets of case {case}."
        if case and "" in page.days
        else "The unit at the inlets of the duty, its outlets found by effectiveness: with its allowances and clean, as it"
        f" runs uncontrolled{_control(page, day)}"
    )
    if page.calculation.duty is not None and page.calculation.duty.parts > 1:
        what += " Every state is one mean state of the whole unit, not of its parts."
    blocks: list[Block] = [
        Paragraph(what),
        Table(("Figure", *states), tuple(_state_rows(page, list(states.values())))),
    ]
    if day.turned_down is None:
        blocks.append(Paragraph(f"No turned-down state: {day.no_turn_down}."))
    sentences = _sentences(page, day)
    if sentences:
        blocks.append(Bullets(sentences))
    if day.checks:
        rows = tuple(
            (check.id, check.condition, check.figure, check.limit, verdict(check)) for check in day.checks
        )
        blocks += [
            Paragraph("Limits, ranges and usual windows that are left in these states:"),
            Table(("Check", "State", "Figure", "Limit", "Verdict"), rows),
        ]
    else:
        blocks.append(
            Paragraph(
                "Every limit of phase at a wall that is known, every range of a method, a wall or a stated film, and every"
                " usual window is held in these states."
            )
        )
    blocks += [
        Paragraph(f"Not checked is {change} of {', '.join(names)} at the wall: {NOT_CHECKED[change]}.")
        for change, names in day.not_checked.items()
    ]
    if day.criteria:
        columns = tuple("State" if name == "Case" else name for name in CRITERION_COLUMNS)
        blocks += [
            Paragraph(
                "The acceptance criteria on temperatures of the clean unit, which section 2 judges at the stated ends,"
                " in these states:"
            ),
            Table(columns, tuple(criterion_row(item, page) for item in day.criteria)),
        ]
    return blocks


def _control(page: Page, day: DayOne) -> str:
    """What the control moves for the last state, and who says so."""
    throttle = day.throttle
    stream = _stream_of(page, throttle.side)
    moved = f"{throttle.side} flow" if throttle.what == FLOW else f"{throttle.what} of {stream}"
    last = f", and clean with the {moved} {_way(day)} until {_until(page, day)}" if day.turned_down else ""
    if throttle.is_stated:
        return f"{last}. The file says that the control throttles the {throttle.side} side."
    if day.turned_down is None:
        return "."
    doing = "Turning down" if _way(day) == "turned down" else "Raising"
    return f"{last}. {doing} the {moved} is one way of control, taken here as the file names none (`throttled:`)."


def _way(day: DayOne) -> str:
    """Which way the control moves what it takes."""
    return "turned down" if day.throttle.what == FLOW or day.throttle.side == "hot" else "raised"


def _until(page: Page, day: DayOne) -> str:
    """What the control stops at."""
    duty, other = page.calculation.duty, day.throttle.other
    assert duty is not None
    if duty.sides[other].has_ends and duty.sides[other].open_end != "outlet":
        return f"the {other} stream leaves as the duty states"
    return "the unit gives the duty"


def _has_ends(page: Page, side: str) -> bool:
    duty = page.calculation.duty
    assert duty is not None
    return duty.sides[side].has_ends


def _end_of(page: Page, side: str) -> str:
    """What the temperature of a side at its end is called."""
    return f"outlet of the {side} stream" if _has_ends(page, side) else f"saturation of the {side} stream"


def _stream_of(page: Page, side: str) -> str:
    duty = page.calculation.duty
    assert duty is not None
    return duty.sides[side].stream


def _state_rows(page: Page, states: list[UnitState]) -> list[tuple[str, ...]]:
    report, kinds = page.calculation.report, vocabulary()

    def row(title: str, kind: str, values: list[float], digits: int = PLAIN_DIGITS) -> tuple[str, ...]:
        return (title, *(in_report_unit(value, kinds[kind], report, digits) for value in values))

    rows = [
        row("heat flow", "heat flow", [state.heat for state in states]),
        row("U", "overall coefficient", [state.overall for state in states], CONCLUSION_DIGITS),
    ]
    for name in ("hot", "cold"):
        sides = [state.sides[name] for state in states]
        rows += [
            row(_end_of(page, name), "temperature", [side.outlet for side in sides]),
            row(f"surface on the {name} side, at the means", "temperature", [side.surface for side in sides]),
        ]
        if any(math.isfinite(side.mass_flow) for side in sides) or _has_ends(page, name):
            rows.append(row(f"flow of the {name} stream", "mass flow", [side.mass_flow for side in sides]))
        if any(math.isfinite(side.changing) for side in sides):
            does = "condenses" if name == "hot" else "evaporates"
            rows.append(
                row(f"flow of the {name} stream that {does}", "mass flow", [side.changing for side in sides])
            )
        if any(math.isfinite(side.speed) for side in sides):
            rows.append(row(f"speed of the {name} stream", "speed", [side.speed for side in sides]))
        if any(math.isfinite(side.pressure) for side in sides):
            rows.append(row(f"pressure of the {name} stream", "pressure", [side.pressure for side in sides]))
    return rows


def _with(page: Page, day: DayOne) -> str:
    """What the unit gives in its turned-down state, at the head of a sentence."""
    return (
        f"With the stated {day.throttle.other} outlet"
        if "leaves" in _until(page, day)
        else "With the stated duty"
    )


def _of_saturation(page: Page, day: DayOne) -> list[str]:
    """What a moved saturation means for condensate, vapour and design, of the unit turned down."""
    throttle, state = day.throttle, day.turned_down
    if throttle.what == FLOW or state is None:
        return []
    stream = _stream_of(page, throttle.side)
    if throttle.side == "cold":
        return [
            f"Stream {stream} stands above its stated state then: design pressure and relief must allow for that."
        ]
    over = state.sides["hot"].pressure - site_pressure(page.chain)
    found = [f"Stream {stream} is taken as saturated; behind a throttling valve it is a little superheated."]
    if any(check.id.endswith(THROTTLED_VAPOUR) for check in day.checks):
        return [
            f"Stream {stream} stands below the pressure of the site then: air leaks in and the condensate does not leave by a"
            " trap, so that the unit fills with it until enough surface is covered, unless a pump draws it. The clean unit"
            " knows no allowance: only less installed area raises that pressure.",
            *found,
        ]
    if over > 0.0:
        pressure = in_report_unit(over, vocabulary()["pressure"], page.calculation.report, CONCLUSION_DIGITS)
        found.insert(
            0,
            f"Stream {stream} stands {pressure} above the pressure of the site then: that drives its condensate out.",
        )
    return found


def _throttled(page: Page, day: DayOne, state: UnitState) -> str:
    """How far the control is throttled, in words."""
    throttle, report, kinds = day.throttle, page.calculation.report, vocabulary()
    if throttle.what == FLOW:
        return f"{percent(day.flow_part)} of the {throttle.side} flow"
    kind = kinds["pressure" if throttle.what == PRESSURE else "temperature"]
    now, stated = (
        in_report_unit(
            one.sides[throttle.side].pressure
            if throttle.what == PRESSURE
            else one.sides[throttle.side].outlet,
            kind,
            report,
            CONCLUSION_DIGITS,
        )
        for one in (state, day.service)
    )
    word = "an absolute pressure" if throttle.what == PRESSURE else f"a {throttle.what}"
    return f"{word} of {now} of {_stream_of(page, throttle.side)} in place of {stated}"


def _sentences(page: Page, day: DayOne) -> tuple[str, ...]:
    """What the generous area does to the clean unit, with its figures."""
    found = []
    difference = vocabulary()["temperature difference"]

    def kelvin(value: float) -> str:
        return in_report_unit(value, difference, page.calculation.report, CONCLUSION_DIGITS)

    if day.hotter > HOTTER:
        found.append(
            f"The surface on the cold side is {kelvin(day.hotter)} hotter clean than with the allowances: what"
            " deposits faster on a hot surface starts there."
        )
    if day.colder > HOTTER and _has_ends(page, "hot"):
        found.append(
            f"The surface on the hot side is {kelvin(day.colder)} colder clean than with the allowances: what sets, freezes"
            " or condenses on a cold surface starts there."
        )
    if day.turned_down is not None:
        throttle, hotter = day.throttle, day.turned_down_hotter
        found.append(
            f"{_with(page, day)} the clean unit runs at {_throttled(page, day, day.turned_down)};"
            f" the surface on the cold side then stands {kelvin(abs(hotter))} {'above' if hotter >= 0.0 else 'below'} that"
            " with the allowances."
        )
        found += _of_saturation(page, day)
        if throttle.what == FLOW and day.is_slow:
            found.append(
                "At that flow its speed lies below its usual window: the allowances, on whichever side, breed"
                f" fouling on the {throttle.side} side."
            )
        elif throttle.what == FLOW and throttle.side == "cold" and hotter > HOTTER:
            found.append(
                "Less flow and a hotter surface both favour deposits on the cold side, whichever side the allowances stand"
                " on."
            )
    return tuple(found)
