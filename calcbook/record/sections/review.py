"""Review questions and cautions."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

from calcbook.chain.findings import lacks_freezing_point, lacks_vapour_pressure
from calcbook.chain.outcome import CriterionResult, CrossRow, Solved
from calcbook.chain.outside import stands_in_the_open
from calcbook.chain.types import CONDITIONS, SERVICE
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Quote, Table
from calcbook.record.numbers import celsius, in_report_unit, percent
from calcbook.record.page import HOUSE_METHOD, Page, case_name, counted
from calcbook.record.sections.criteria import not_judged
from calcbook.record.sections.head import confirmation
from calcbook.record.sections.survey import survey_cautions
from calcbook.record.sections.validity import SMALLEST_RESIDUAL, residual, verdict

FOR_CHECKER = "for the checker:"
GROUND = "On what ground the result may be used as it is, for the checker:"
EXCESS_LIMIT = 0.5  # common practice: above it the clean unit behaves as another machine
Answer = Callable[[Page], str]


# --- answers that the figures give ------------------------------------------------------------------


def _identity(page: Page) -> str:
    calculation = page.calculation
    own = [item for item in calculation.revisions if item.revision == calculation.revision]
    words = "does not stand in the revision history"
    if own:
        dated = "with this date" if own[-1].date == calculation.date else f"with the date {own[-1].date}"
        words = f"stands in the revision history {dated}"
    return f"{calculation.number}, revision {calculation.revision}, {calculation.date}; the revision {words}."


def _sources(page: Page) -> str:
    missing = [item for item in page.solved.open_items if item.kind == "source"]
    count = len(page.chain.inputs)
    if not missing:
        return (
            f"All {counted(count, 'figure has', 'figures have')} a source."
            if count != 1
            else "The figure has a source."
        )
    return (
        f"{counted(len(missing), 'figure lacks', 'figures lack')} a source, of {count}; each is an open item."
    )


def _dimensions(page: Page) -> str:
    steps = sum(len(term.rows) for term in page.base.chains) + len(page.base.circuit)
    return f"Yes: dimensions were pushed through each of the {steps} steps of the chain before it was solved."


def _temperatures(page: Page) -> str:
    taken = [item for item in page.base.assumptions if "absolute" in item.id or "site pressure" in item.id]
    words = (
        f" {counted(len(taken), 'pressure reading was', 'pressure readings were')} decided by the runner."
        if taken
        else " No pressure reading was left to the runner."
    )
    return "Temperatures and temperature differences are two quantities and are never mixed." + words


def _unverified(page: Page) -> str:
    items = page.calculation.assumptions
    open_ones = [item.id for item in items if not item.is_verified]
    if not items:
        return "The engineer states no assumption."
    if not open_ones:
        return (
            "The assumption is verified."
            if len(items) == 1
            else f"All {len(items)} assumptions are verified."
        )
    return f"Of {counted(len(items), 'assumption', 'assumptions')}, not verified: {', '.join(open_ones)}."


def _ranges(page: Page) -> str:
    checks = [
        check for check in page.every_check() if check.level == "range" and check.state != "not counting"
    ]
    outside = [check for check in checks if check.state == "outside"]
    accepted = [check for check in checks if check.state == "accepted"]
    unknown = [check for check in checks if check.state == "not evaluable"]
    cautions = [
        check for check in page.every_check() if check.level == "caution" and check.state == "outside"
    ]
    cautions += [check for day in page.days.values() for check in day.checks if check.level == "caution"]
    names = ", ".join(dict.fromkeys(check.id for check in cautions))
    told = f" Cautions outside: {names}." if cautions else " No caution is outside."
    return (
        f"{len(checks)} range limits over every case and condition: {len(outside)} outside, {len(accepted)}"
        f" accepted, {len(unknown)} not evaluable, the others within.{told}"
    )


def _wall_phase(page: Page) -> str:
    checks = [check for check in page.every_check() if check.card == "wall phase"]
    meant = [
        f"{branch.name} ({branch.situation.changes_phase})"
        for group in (page.chain.inner, page.chain.outer)
        for branch in group.branches
        if branch.situation is not None and branch.situation.changes_phase
    ]
    change = f" A change of phase is meant: {', '.join(meant)}." if meant else ""
    fluids, service = page.chain.fluids, page.base.solutions[SERVICE]
    blind = [name for name, state in fluids.items() if lacks_vapour_pressure(state)]
    if blind:
        change += f" Boiling is not checked for {', '.join(blind)}: no vapour pressure is known."
    blind = [name for name, state in fluids.items() if lacks_freezing_point(state, service)]
    if blind:
        change += (
            f" Freezing is not checked for {', '.join(blind)}, nor pour point, nor what separates at a cold wall (wax,"
            " salt): no freezing point is known."
        )
    failed = [check for check in checks if check.state != "within"]
    if not checks:
        return f"No film has a fluid whose phase at the wall could be checked.{change}"
    if not failed:
        return (
            f"{len(checks)} checks against boiling, condensing and freezing at the wall, all within.{change}"
        )
    first = f"{failed[0].figure}, limit {failed[0].limit}"
    return f"{len(failed)} of {len(checks)} checks at the wall are not within: {first}.{change}"


def _basis(page: Page) -> str:
    surfaces = ", ".join(surface.name for surface in page.chain.surfaces)
    return f"U stands on the surface {page.basis}; the chain gives it on {surfaces} as well."


def _closure(page: Page) -> str:
    rows = [row for case in page.solved.cases for row in case.closure]
    if not rows:
        return "There is nothing to close."
    worst = max(rows, key=lambda row: row.residual)
    if worst.residual <= SMALLEST_RESIDUAL:
        # Which of them is the largest is a matter of the last bits there, and says nothing.
        return f"Residual of every equation in every case: {residual(worst.residual)}."
    return f"Largest residual over every case: {residual(worst.residual)} ({worst.what}, {worst.condition})."


def _other_methods(page: Page) -> str:
    texts = []
    for case, crossed in page.solved.cross.items():
        rows = [row for row in crossed if not row.left_out]
        if rows:
            independent = [row for row in rows if not row.same_family]
            low, high = (pick(row.difference for row in rows) for pick in (min, max))
            texts.append(
                f"{f'Case {case}: ' if case else ''}{counted(len(rows), 'other method', 'other methods')} within range,"
                f" {len(independent)} of another family: U in service differs by {percent(low)} to {percent(high)}."
            )
    return " ".join(texts) or "No other method applies here."


def _largest_effect(page: Page) -> str:
    if not page.solved.sensitivity:
        return "U depends on no figure of the file."
    first = page.solved.sensitivity[0]
    return f"{first.input.title}: {first.step} moves U in service by {percent(first.relative, 2)}."


def _both_conditions(page: Page) -> str:
    texts = []
    for condition in reversed(CONDITIONS):
        result = page.base.results[f"U_{condition}"]
        texts.append(f"{condition} {in_report_unit(result.value, result.kind, page.calculation.report, 3)}")
    return f"{'; '.join(texts)}; {counted(len(page.solved.cases), 'case', 'cases')}, the base case counted."


def _criteria(page: Page) -> str:
    items = [item for case in page.solved.cases for item in case.criteria]
    if not items:
        return "No criterion is stated: the result is for information."
    failed = [item for item in items if not item.met]
    words = f"; not met: {_named(failed)}" if failed else ""
    words = f"{len(items) - len(failed)} of {counted(len(items), 'criterion', 'criteria')} met{words}."
    return " ".join((words, *_without_probability(page, items), *_failed_on_day_one(page), *_left_out(page)))


def _without_probability(page: Page, items: Sequence[CriterionResult]) -> list[str]:
    """The criteria that ask for a probability in cases for which none is worked out."""
    found = [
        item
        for item in items
        if not math.isnan(page.calculation.criterion(item.id).probability) and math.isnan(item.reached)
    ]
    return (
        [f"At the stated values alone, without the probability asked for: {_named(found)}."] if found else []
    )


def _named(items: Sequence[CriterionResult]) -> str:
    """Criteria with the cases that they are judged in, in words."""
    return ", ".join(f"{item.id} in case {case_name(item.case)}" for item in items)


def _failed_on_day_one(page: Page) -> list[str]:
    failed = [f"{item.id}, {item.case}" for case in page.days for item in page.missed_on_day_one(case)]
    return [f"Not met on day one: {'; '.join(failed)}."] if failed else []


def _left_out(page: Page) -> list[str]:
    left = not_judged(page)
    return [f"{left[0].upper()}{left[1:]}."] if left else []


def _cards(page: Page) -> str:
    trial = [
        card.id for card in page.cards() if getattr(getattr(card, "state", None), "status", "") == "trial"
    ]
    house = [card.id for card in page.cards() if getattr(card, "house", False)]
    words = f"{counted(len(page.cards()), 'card', 'cards')} used"
    words += f"; on trial: {', '.join(trial)}" if trial else "; none on trial"
    return words + (f"; of the house: {', '.join(house)}." if house else "; none of the house.")


def _unused(page: Page) -> str:
    unused = [symbol for symbol, places in page.chain.used_in.items() if not places]
    return f"Not used: {', '.join(unused)}." if unused else "Every given is used."


QUESTIONS: tuple[tuple[str, Answer | None], ...] = (
    ("Do number, revision and date agree with the revision history?", _identity),
    ("Is the purpose clear, and does this calculation serve it?", None),
    ("Were the acceptance criteria set before the result was known?", None),
    ("Has every figure a source?", _sources),
    ("Is each figure copied rightly from its source: value, unit, operating state?", None),
    ("Is every source that is cited in its current edition?", None),
    ("Is every given used?", _unused),
    ("Do the dimensions agree in every relation?", _dimensions),
    (
        "Are temperature differences and gauge pressures told apart from points and absolute pressures?",
        _temperatures,
    ),
    ("Which assumptions are not verified?", _unverified),
    ("Is each assumption reasonable, and does it err in the direction that matters here?", None),
    ("Does each situation and method fit the real geometry, fluid and boundary condition?", None),
    ("Are the figures inside the range of each method, in every case and condition?", _ranges),
    ("Does any fluid change its phase at the wall?", _wall_phase),
    ("Does each fouling allowance suit this fluid, speed, temperature and cleaning interval?", None),
    ("Is a margin hidden in a fouling allowance or in a stated coefficient?", None),
    ("On which surface does U stand?", _basis),
    ("Does the circuit close?", _closure),
    ("What do other methods give?", _other_methods),
    ("Was the result checked by a calculation made in another way?", None),
    ("Which figure moves U most?", _largest_effect),
    ("Are clean and service and every case looked at?", _both_conditions),
    ("Are the cases that were chosen the worst ones: flows, temperatures, plugged tubes?", None),
    ("Are the acceptance criteria met?", _criteria),
    ("Are the result and its parts plausible beside like equipment and the last revision?", None),
    ("Which cards were used, and are any on trial?", _cards),
    ("Who must be told of this result: relief, mechanical design, operation?", None),
)


def questions_for_a_person(solved: Solved) -> dict[int, str]:
    """Number and words of the questions that the figures do not answer; of criteria, where one is not met."""
    found = {place: words for place, (words, answer) in enumerate(QUESTIONS, 1) if answer is None}
    missed = [item for case in solved.cases for item in case.criteria if not item.met]
    if missed:
        place = next(place for place, (_, answer) in enumerate(QUESTIONS, 1) if answer is _criteria)
        found[place] = f"Not met: {_named(missed)}. On what ground may the result be used as it is?"
    return dict(sorted(found.items()))


def review(page: Page) -> list[Block]:
    """Questions with the answers of the figures; those for a person stay open."""
    answered = dict(page.life.answers)
    asked = questions_for_a_person(page.solved)
    rows = []
    for place, (question, answer) in enumerate(QUESTIONS, 1):
        texts = [answer(page)] if answer is not None else []
        if place in asked:
            texts.append(answered.get(place, GROUND if texts else FOR_CHECKER))
        rows.append((str(place), question, " ".join(texts)))
    people = sum(answer is None for _, answer in QUESTIONS)
    words = (
        f"{len(QUESTIONS) - people} questions are answered by the figures of this record; {people} are for"
        " the checker, who answers each in words that cite a step, a given or a figure."
    )
    return [Heading(2, "13. Review"), Paragraph(words), Table(("No", "Question", "Answer"), tuple(rows))]


# --- cautions ---------------------------------------------------------------------------------------

FIXED = (
    "This record is a heat-transfer calculation and nothing else. It does not show that equipment may be"
    " built, operated, opened or put under pressure.",
    "It covers no wall thickness, nozzle load, piping or relief device, and is no evidence that a code,"
    " directive or licence is met.",
    "Heat from the other side can put an isolated side under pressure: a relief path must stay open. What a"
    " burst tube would do is a study of its own.",
    "Corrosion, fatigue, vibration and attack by hydrogen do not show in U.",
    "A fouling allowance is a choice of design, not a forecast. The clean unit transfers more heat: look at"
    " overcooling, overheating, boiling and freezing with clean surfaces as well.",
    "A guarantee of performance needs a test under an agreed code.",
    "Results hold for the figures, methods and ranges stated here. A competent engineer, licensed where the"
    " law asks for it, must judge them and answers for their use.",
    "The program compares names and digests. It knows neither who a person is nor what that person can do.",
    "Whoever acts on this record at the equipment first sees to isolation, entry permits and cleaning"
    " chemicals.",
    "A copy may be out of date: look up the current revision in the register.",
)


def cautions(page: Page) -> list[Block]:
    """The fixed block, always; then what the figures bring up."""
    lines = tuple(_triggered(page))
    return [
        Heading(2, "14. Cautions"),
        Quote(FIXED),
        Heading(3, "Brought up by the figures"),
        Bullets(lines) if lines else Paragraph("The figures bring up no further caution."),
    ]


def _triggered(page: Page) -> list[str]:
    return [
        *_preliminary(page),
        *_hot_surface(page),
        *_wall(page),
        *_outside(page),
        *_undecided(page),
        *_negative(page),
        *_excess(page),
        *_trial(page),
        *_house(page),
        *_criterion(page),
        *_day_one(page),
        *_survey(page),
    ]


def _preliminary(page: Page) -> list[str]:
    items = len(page.solved.open_items)
    if not items:
        return []
    return [
        f"This calculation is {confirmation(page)}, with {counted(items, 'open item', 'open items')}: not"
        " for purchase, fabrication or decisions on safety."
    ]


def _hot_surface(page: Page) -> list[str]:
    """Outer surfaces above the site's limit, by case and condition."""
    limit = page.calculation.settings.surface_temperature
    if limit is None or limit.quantity is None or not can_be_touched(page):
        return []
    lines = []
    for case in page.solved.cases:
        for condition in reversed(CONDITIONS):
            temperature = case.terms[condition][-1].inner_temperature
            if temperature > limit.quantity.value:
                lines.append(
                    f"Case {case_name(case.name)}, {condition}: the outside surface is at"
                    f" {celsius(temperature)} °C, above the site limit of {limit.text}"
                    f" ({limit.source or 'no source'}): burn hazard."
                )
    return lines


def can_be_touched(page: Page) -> bool:
    """Whether the outside stands in the open in the base case."""
    return stands_in_the_open(page.chain, page.base.solutions[SERVICE])


def _wall(page: Page) -> list[str]:
    return [
        f"{check.id}, case {case_name(check.case)}, {check.condition}: {check.figure}, limit {check.limit};"
        f" {check.because}."
        for check in page.every_check()
        if check.card == "wall phase" and check.state in ("outside", "accepted")
    ]


def _outside(page: Page) -> list[str]:
    """Cautions whose limit is not held: shown, not blocking, and not to be overlooked."""
    return [
        f"{check.id}, case {case_name(check.case)}, {check.condition}: {check.figure}, limit {check.limit}:"
        f" outside ({check.because})."
        for check in page.every_check()
        if check.level == "caution" and check.state == "outside"
    ]


def _undecided(page: Page) -> list[str]:
    """Methods within their range with which a criterion has another verdict."""
    return [
        f"{item.id} ({item.that}) depends on the method{f' in case {case.name}' if case.name else ''}: with"
        f" {row.method} on {row.term}, within its range here{_but_cautioned(row)}, it is"
        f" {'not met' if item.is_met_as_stated else 'met'}."
        for case in page.solved.cases
        for item in case.criteria
        for row in page.solved.cross.get(case.name, ())
        if item.id in row.turned
    ]


def _but_cautioned(row: CrossRow) -> str:
    """That a method's own cautions speak against its verdict."""
    count = len(row.cautions)
    return f" but for {counted(count, 'caution', 'cautions')}" if count else ""


def _negative(page: Page) -> list[str]:
    """Terms whose resistance is negative, because radiation goes to another temperature than the fluid's."""
    return [
        f"Case {case_name(case.name)}, {condition}: the resistance of {row.name} is negative, because"
        " radiation goes to another temperature than that of the fluid: U and the shares say little here,"
        " the heat flows do."
        for case in page.solved.cases
        for condition in reversed(CONDITIONS)
        for row in case.terms[condition]
        if row.share < 0.0
    ]


def _excess(page: Page) -> list[str]:
    """Surface added for fouling above the limit of the book, else above common practice."""
    stated = page.calculation.settings.excess_surface
    limit = stated.quantity.value if stated is not None and stated.quantity is not None else EXCESS_LIMIT
    origin = (stated.source or "no source") if stated is not None else "common practice"
    lines = []
    for case in page.solved.cases:
        excess = case.results["excess_surface"].value
        if excess > limit:
            lines.append(
                f"Case {case_name(case.name)}: the excess surface for fouling is {percent(excess)}, above"
                f" {percent(limit)} ({origin}): the clean unit is much stronger than the one in service, and"
                " a low speed in an oversized unit can itself bring fouling."
            )
    return lines


def _trial(page: Page) -> list[str]:
    trial = [
        card.id for card in page.cards() if getattr(getattr(card, "state", None), "status", "") == "trial"
    ]
    return [f"The card {name} is on trial: no figure from outside bears it out yet." for name in trial]


def _house(page: Page) -> list[str]:
    return [
        f"The card {card.id} is a {HOUSE_METHOD}: it rests on the plant's own data and holds for the equipment"
        " that they were taken on; no publication bears it out."
        for card in page.cards()
        if getattr(card, "house", False)
    ]


def _criterion(page: Page) -> list[str]:
    return [
        f"{item.id} is not met in case {case_name(item.case)}: {item.that}."
        for case in page.solved.cases
        for item in case.criteria
        if not item.met
    ]


def _survey(page: Page) -> list[str]:
    """What limits the allowance that plant data give."""
    outcome = page.solved.survey
    return (
        [f"Survey: {line[0].lower()}{line[1:]}" for line in survey_cautions(outcome)]
        if outcome is not None
        else []
    )


def _day_one(page: Page) -> list[str]:
    """What the unit leaves at the inlets of the duty, and the criteria that it does not meet there."""
    words = []
    for case, day in page.days.items():
        words += [
            f"{check.id}, day one, {check.condition}: {check.figure}, limit {check.limit}: {verdict(check)}."
            for check in day.checks
        ]
        words += [
            f"{item.id} is not met on day one, {item.case}: {item.that}."
            for item in page.missed_on_day_one(case)
        ]
    return words
