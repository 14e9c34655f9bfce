"""Day one in the record: the clean unit at the inlets of every case, and under its control."""

from __future__ import annotations

import math

from calcbook.calcfile.calculation import DutySide
from calcbook.chain.plausible import THROTTLED_VAPOUR, site_pressure
from calcbook.chain.rating_outcome import (
    FLOW,
    PRESSURE,
    WITH_ALLOWANCES,
    DayOne,
    UnitState,
    in_case,
)
from calcbook.library import vocabulary
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table
from calcbook.record.numbers import (
    CONCLUSION_DIGITS,
    PLAIN_DIGITS,
    in_report_unit,
    percent,
)
from calcbook.record.page import Page
from calcbook.record.sections.criteria import CRITERION_COLUMNS, criterion_row
from calcbook.record.sections.validity import verdict

# A surface this much hotter than in service is told, K: common practice.
HOTTER = 2.0
# Why a change of phase at the wall is not checked.
NOT_CHECKED = {
    "boiling": "no vapour pressure, or no pressure of the stream, is known",
    "freezing": "no freezing point, or no pressure of the stream, is known",
}


def day_one_blocks(page: Page) -> list[Block]:
    """The clean unit at the inlets of the duty in every case, where there is a duty and something fouls."""
    rating = page.solved.rating
    if rating is None or not rating.days:
        return []
    blocks: list[Block] = [Heading(3, "Day one")]
    told = rating.told
    for case, day in rating.days.items():
        where = in_case(case)
        if isinstance(day, str):
            blocks.append(Paragraph(f"Day one has no answer{where}: {day}."))
        elif case not in told:
            blocks.append(Paragraph(f"In case {case} the clean unit does what it does in the base case."))
        else:
            blocks += [*([Heading(4, f"Day one{where}")] if case else []), *_day_blocks(page, day, case)]
    return blocks


def _day_blocks(page: Page, day: DayOne, case: str) -> list[Block]:
    states = {WITH_ALLOWANCES: day.service, "clean": day.clean}
    if day.turned_down is not None:
        states[f"clean, {day.throttle.way} until {until_words(page, day)}"] = day.turned_down
    what = (
        f"The same states at the inlets of case {case}."
        if case and "" in page.days
        else f"The unit at {_kept_words(page)}: with its allowances and clean, as it runs uncontrolled{_control(page, day)}"
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


def _kept_words(page: Page) -> str:
    """What stays of the duty in every state of day one, and what is found."""
    duty = page.calculation.duty
    assert duty is not None
    if duty.has_ends:
        return "the inlets of the duty, its outlets found by effectiveness"
    return "the saturation temperatures of both streams"


def _control(page: Page, day: DayOne) -> str:
    """What the control moves for the last state, and who says so."""
    throttle = day.throttle
    stream = _side(page, throttle.side).stream
    moved = f"{throttle.side} flow" if throttle.what == FLOW else f"{throttle.what} of {stream}"
    last = (
        f", and clean with the {moved} {day.throttle.way} until {until_words(page, day)}"
        if day.turned_down
        else ""
    )
    if throttle.is_stated:
        return f"{last}. The file says that the control throttles the {throttle.side} side."
    if day.turned_down is None:
        return "."
    doing = "Turning down" if day.throttle.way == "turned down" else "Raising"
    return f"{last}. {doing} the {moved} is one way of control, taken here as the file names none (`throttled:`)."


def until_words(page: Page, day: DayOne) -> str:
    """What the control stops at."""
    if _holds_outlet(page, day):
        return f"the {day.throttle.other} stream leaves as the duty states"
    return "the unit gives the duty"


def _holds_outlet(page: Page, day: DayOne) -> bool:
    """Whether the side that is not throttled has a stated outlet, which the control holds."""
    other = _side(page, day.throttle.other)
    return other.has_ends and other.open_end != "outlet"


def _side(page: Page, name: str) -> DutySide:
    duty = page.calculation.duty
    assert duty is not None
    return duty.sides[name]


def _end_of(page: Page, side: str) -> str:
    """What the temperature of a side at its end is called."""
    return (
        f"outlet of the {side} stream" if _side(page, side).has_ends else f"saturation of the {side} stream"
    )


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
            row(
                f"film coefficient on the {name} side",
                "film coefficient",
                [side.coefficient for side in sides],
            ),
        ]
        if any(math.isfinite(side.mass_flow) for side in sides) or _side(page, name).has_ends:
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
    return f"With the stated {f'{day.throttle.other} outlet' if _holds_outlet(page, day) else 'duty'}"


def _of_saturation(page: Page, day: DayOne) -> list[str]:
    """What a moved saturation means for condensate, vapour and design, of the unit turned down."""
    throttle, state = day.throttle, day.turned_down
    if throttle.what == FLOW or state is None:
        return []
    stream = _side(page, throttle.side).stream
    if throttle.side == "cold":
        return [
            f"Stream {stream} stands above its stated state then: design pressure and relief must allow for that."
        ]
    over = state.sides["hot"].pressure - site_pressure(page.chain)
    saturated = [
        f"Stream {stream} is taken as saturated; behind a throttling valve it is a little superheated."
    ]
    if any(check.id.endswith(THROTTLED_VAPOUR) for check in day.checks):
        return [
            f"Stream {stream} stands below the pressure of the site then: air leaks in and the condensate does not leave by a"
            " trap, so that the unit fills with it until enough surface is covered, unless a pump draws it. The clean unit"
            " knows no allowance: only less installed area raises that pressure.",
            *saturated,
        ]
    if not over > 0.0:
        return saturated
    pressure = in_report_unit(over, vocabulary()["pressure"], page.calculation.report, CONCLUSION_DIGITS)
    return [
        f"Stream {stream} stands {pressure} above the pressure of the site then: that drives its condensate out.",
        *saturated,
    ]


def _of_kept_flow(page: Page, day: DayOne) -> list[str]:
    """That a stated flow of a stream whose saturation is moved is kept, though less of it changes phase."""
    throttle, state = day.throttle, day.turned_down
    if throttle.what == FLOW or state is None:
        return []
    side = state.sides[throttle.side]
    if not math.isfinite(side.mass_flow):
        return []
    kind, report = vocabulary()["mass flow"], page.calculation.report
    flow, changing = (
        in_report_unit(one, kind, report, CONCLUSION_DIGITS) for one in (side.mass_flow, side.changing)
    )
    return [
        f"The flow of {_side(page, throttle.side).stream} is kept as stated, {flow}, of which {changing} change phase then: a"
        " film that follows the flow is that of the former."
    ]


def _heat(page: Page, state: UnitState) -> str:
    return in_report_unit(state.heat, vocabulary()["heat flow"], page.calculation.report, CONCLUSION_DIGITS)


def throttled_words(page: Page, day: DayOne, state: UnitState) -> str:
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
    return f"{word} of {now} of {_side(page, throttle.side).stream} in place of {stated}"


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
    if day.colder > HOTTER and _side(page, "hot").has_ends:
        found.append(
            f"The surface on the hot side is {kelvin(day.colder)} colder clean than with the allowances: what sets, freezes"
            " or condenses on a cold surface starts there."
        )
    if day.turned_down is not None:
        throttle, hotter = day.throttle, day.turned_down_hotter
        found.append(
            f"{_with(page, day)} the clean unit runs at {throttled_words(page, day, day.turned_down)};"
            f" the surface on the cold side then stands {kelvin(abs(hotter))} {'above' if hotter >= 0.0 else 'below'} that"
            f" with the allowances, which is that of {_heat(page, day.service)} uncontrolled."
        )
        found += [*_of_saturation(page, day), *_of_kept_flow(page, day)]
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
