"""A comparison as blocks for a reader, in a short form for the record, and as data for programs.

Numbers stand in the units of the new side's report. One fact a row, a stable order, and no row whose width
follows another's.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

from calcbook.calcfile.calculation import Report
from calcbook.chain.analysis import is_found_later
from calcbook.quantities import QuantityKind, in_unit, si_unit
from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph, Table
from calcbook.record.numbers import fixed, number, percent, report_unit, unit_text, with_unit
from calcbook.record.page import case_name, counted
from calcbook.record.software import software_line
from calcbook.revisions.attribution import Attribution, Part
from calcbook.revisions.changes import Change
from calcbook.revisions.comparing import Comparison, ResultEffect, SoftwarePart, TermEffect, Verdict
from calcbook.revisions.sides import Side

DIGITS = 6
RESISTANCE_UNIT = "m²·K/W"
FIGURE_WIDTH, UNIT_WIDTH = 14, 14
# A part below this share of the result moved it by nothing that a reader could see.
NOTHING = 1e-12
FROM_ZERO = "from zero"


def comparison_blocks(comparison: Comparison) -> tuple[Block, ...]:
    """The page of a comparison."""
    old, new = comparison.old, comparison.new
    number = new.calculation.number
    title = f"Comparison of {number}: revision {old.revision}, then revision {new.revision}"
    if old.calculation.number != number:
        title = f"Comparison of {old.label}, with {new.label}"
    sections = (
        _head,
        _verdicts,
        _attributions,
        _inputs,
        _apart,
        _chain,
        _software,
        _checks,
        _open_items,
        _unchanged,
        _others,
    )
    return (Heading(1, title), *(block for section in sections for block in section(comparison)))


def short_blocks(comparison: Comparison) -> tuple[Block, ...]:
    """The short form, for the record: verdicts that flipped, what moved the first result, open items, the
    link."""
    old = comparison.old
    blocks: list[Block] = [
        Paragraph(
            f"Compared with revision {old.revision} ({old.state}), digest of its displayed results"
            f" {old.signed_digest.results}."
        )
    ]
    if comparison.is_empty:
        return (*blocks, Paragraph("Nothing changed."))
    blocks += _flips(comparison.verdicts)
    for attribution in comparison.attributions[:1]:
        blocks += _moved(attribution, comparison)
    blocks.append(Bullets(tuple(_counts(comparison))))
    blocks.append(Paragraph("The whole comparison is comparison.md beside this record."))
    return tuple(blocks)


# --- head and verdicts ------------------------------------------------------------------------------


def _head(comparison: Comparison) -> list[Block]:
    sides = (comparison.old, comparison.new)
    digests = [side.signed_digest for side in sides]
    rows = [
        ("Calculation", *(side.calculation.number for side in sides)),
        ("Revision", *(side.revision for side in sides)),
        ("Side", *(side_name(side) for side in sides)),
        ("State", *(side.state for side in sides)),
        ("Confirmation", *(_confirmation(side) for side in sides)),
        ("Digest", *(digest.whole or "stands in the issued record" for digest in digests)),
        ("Digest of the file's meaning", *(digest.meaning for digest in digests)),
        ("Digest of the cards used", *(digest.cards for digest in digests)),
        ("Digest of the displayed results", *(digest.results for digest in digests)),
        ("Software of the recorded results", *(_software_of(side) for side in sides)),
        ("Software of this comparison", software_line(), software_line()),
    ]
    return [Table(("", "Was", "Now"), tuple(rows))]


def side_name(side: Side) -> str:
    """What the side was read from; of a path only its last name, so that the page is the same wherever it is
    made."""
    return side.file_name if side.file_name.startswith("git:") else side.file_name.rpartition("/")[2]


def _confirmation(side: Side) -> str:
    items = len(side.solved.open_items)
    return f"preliminary, {counted(items, 'open item', 'open items')}" if items else "confirmed"


def _software_of(side: Side) -> str:
    if not side.software:
        return "no results recorded for this content"
    return ", ".join(f"{name} {version}" for name, version in side.software.items())


def _verdicts(comparison: Comparison) -> list[Block]:
    return [Heading(2, "Verdicts that flipped"), *_flips(comparison.verdicts)]


def _flips(verdicts: Sequence[Verdict]) -> list[Block]:
    if not verdicts:
        return [Paragraph("No acceptance criterion has another verdict.")]
    rows = tuple(
        (
            item.what,
            case_name(item.case),
            item.was,
            item.now,
            item.figure_was or "none",
            item.figure_now or "none",
        )
        for item in verdicts
    )
    return [
        Table(
            ("Criterion", "Case", "Was", "Now", "Value against limit, was", "Value against limit, now"), rows
        )
    ]


# --- what moved a result ----------------------------------------------------------------------------


def _attributions(comparison: Comparison) -> list[Block]:
    blocks: list[Block] = []
    for attribution in comparison.attributions:
        blocks.append(Heading(2, f"What moved {_title(attribution)}"))
        blocks += _moved(attribution, comparison)
        blocks += _parts(attribution, comparison)
    return blocks


def _title(attribution: Attribution) -> str:
    return "U" if attribution.result == "U_service" else attribution.result


def _moved(attribution: Attribution, comparison: Comparison) -> list[Block]:
    """Was, each part signed, now: one row each, the figure in a column of fixed width."""
    scale = Scale(attribution.kind, comparison.new.calculation.report, (attribution.was, attribution.now))
    lines = [
        _line(scale.value(attribution.was), scale.unit, f"{attribution.result} was, {comparison.old.label}")
    ]
    if not attribution.has_parts:
        lines.append(
            _line(scale.signed(attribution.difference), scale.difference_unit, "in all; see the note")
        )
    still = []
    changes = {change.id: change for change in comparison.changes}
    for part in attribution.ranked():
        if abs(part.part) <= NOTHING * max(abs(attribution.was), abs(attribution.now)):
            still.append(part.title)
            continue
        error = f", standard error {scale.size(part.error)}" if attribution.orders else ""
        lines.append(_line(scale.signed(part.part), scale.difference_unit, _words(part, changes) + error))
    if _is_seen(attribution):
        lines.append(_line(scale.signed(attribution.rest), scale.difference_unit, "explained by no change"))
    lines.append(
        _line(scale.value(attribution.now), scale.unit, f"{attribution.result} now, {comparison.new.label}")
    )
    blocks: list[Block] = [Code("\n".join(lines))]
    if attribution.has_parts and not scale.adds_up(attribution):
        blocks.append(Paragraph("Each figure is rounded by itself; before that the column adds up."))
    if still:
        blocks.append(Paragraph(f"Moved by nothing: {'; '.join(still)}."))
    return blocks


def _line(figure: str, unit: str, words: str) -> str:
    return f"{figure:>{FIGURE_WIDTH}} {unit:<{UNIT_WIDTH}} {' '.join(words.split())}"


def _words(part: Part, changes: dict[str, Change]) -> str:
    members = [changes[name] for name in part.changes]
    return " with ".join(f"{change.title}: was {change.was}, now {change.now}" for change in members)


def _is_seen(attribution: Attribution) -> bool:
    return math.isfinite(attribution.rest) and abs(attribution.rest) > 1e-9 * max(
        abs(attribution.was), abs(attribution.now)
    )


def _parts(attribution: Attribution, comparison: Comparison) -> list[Block]:
    if not attribution.has_parts:
        why = (
            "is found from a solved calculation, and not in mixtures of the two revisions"
            if is_found_later(attribution.result)
            else "does not exist in every mixture of the two revisions"
        )
        return [Paragraph(f"This result {why}, so it has no parts.")]
    if not attribution.parts:
        return [Paragraph("No change can move this result.")]
    scale = Scale(attribution.kind, comparison.new.calculation.report, (attribution.was, attribution.now))
    unit = f", {scale.difference_unit}" if scale.difference_unit else ""
    blocks: list[Block] = []
    if attribution.is_coefficient:
        columns = ["Change", f"Part, {RESISTANCE_UNIT}", "Alone", "Last"]
        rows = [
            (
                part.title,
                *map(_resistance, (part.resistance, part.resistance_alone, part.resistance_last)),
                *_error(attribution, number(part.resistance_error, 2)),
            )
            for part in attribution.parts
        ]
        rows.append(
            ("in all", _resistance(attribution.resistance_difference), "", "", *_error(attribution, ""))
        )
        blocks += [
            Paragraph("In resistance, on the area of this U:"),
            Table((*columns, *_error(attribution, "Standard error")), tuple(rows)),
        ]
    columns = ["Change", f"Part{unit}", "Alone", "Last"]
    rows = [
        (
            part.title,
            *map(scale.signed, (part.part, part.alone, part.last)),
            *_error(attribution, scale.size(part.error)),
        )
        for part in attribution.parts
    ]
    rows.append(("in all", scale.signed(attribution.difference), "", "", *_error(attribution, "")))
    name = "In U:" if attribution.is_coefficient else f"In {attribution.result}:"
    blocks += [Paragraph(name), Table((*columns, *_error(attribution, "Standard error")), tuple(rows))]
    return [*blocks, Bullets(tuple(_notes(attribution, scale)))]


def _error(attribution: Attribution, text: str) -> tuple[str, ...]:
    return (text,) if attribution.orders else ()


def _notes(attribution: Attribution, scale: Scale) -> Iterable[str]:
    if attribution.is_coefficient:
        was, moved = number(attribution.was, 8), number(attribution.resistance_difference, 8)
        now = number(attribution.now, DIGITS)
        yield f"By hand: U_now = 1/(1/U_was + ΔR) = 1/(1/{was} + ({moved})) = {now} W/(m²·K)."
    yield (
        "Each part is the Shapley value of its change: its effect averaged over every order in which the"
        " changes can be made. The parts add up to the whole difference; none is scaled."
    )
    yield "Alone: the one change made to the old revision. Last: the one change made after all others."
    interaction = _with(scale.signed(attribution.interaction), scale)
    yield f"Interaction, the difference less the sum of what each does alone: {interaction}."
    solved = counted(attribution.evaluations, "subset of the changes", "subsets of the changes")
    structures = f"with {counted(attribution.structures, 'list', 'lists')} of terms and methods"
    if attribution.orders:
        yield (
            f"Sampled: {attribution.orders} orders with a fixed seed, every order and its reverse;"
            f" {solved} solved, {structures}. The standard error is that of the mean."
        )
    else:
        yield f"Exact: {solved} solved, {structures}."
    for part in attribution.parts:
        if len(part.changes) > 1:
            yield f"Joined, because they make no calculation apart: {', '.join(part.changes)}."
    if _is_seen(attribution):
        yield f"Explained by no change: {_with(scale.signed(attribution.rest), scale)}."


def _with(text: str, scale: Scale) -> str:
    return with_unit(text, scale.difference_unit)


# --- changes ----------------------------------------------------------------------------------------


def _inputs(comparison: Comparison) -> list[Block]:
    heading = Heading(2, "Changed inputs")
    if not comparison.inputs:
        return [heading, Paragraph("No input changed.")]
    columns = ("Id", "Kind", "Input", "Was", "Now", "Difference", "Relative", "Source was", "Source now")
    rows = tuple(
        (
            change.id,
            change.kind,
            change.title,
            change.was,
            change.now,
            *_differences(change),
            *_sources(change),
        )
        for change in comparison.inputs
    )
    return [heading, Table(columns, rows)]


def _sources(change: Change) -> tuple[str, str]:
    if change.quantity_was is None and not change.source_was and not change.source_now:
        return "", ""
    now = change.source_now or "no source"
    was = change.source_was or "no source"
    return was, "the same" if was == now else now


def _differences(change: Change) -> tuple[str, str]:
    """Difference in the unit that both are written in, else in SI; relative to the old value."""
    was, now = change.quantity_was, change.quantity_now
    if was is None or now is None:
        return "", ""
    if not was.on_base_of(now):
        return "none: one is a gauge pressure", "none"
    is_point = was.reading == "point" or now.reading == "point"
    if is_point:
        return f"{_signed(now.value - was.value)} K", "none: a temperature"
    unit = was.unit_text if was.unit_text == now.unit_text else si_unit(was.dimension)
    difference = with_unit(_signed(in_unit(now.value - was.value, unit)), unit_text(unit))
    return difference, relative_text(was.value, now.value)


def relative_text(was: float, now: float) -> str:
    """(now − was)/was in per cent, from the unrounded values; or the words that it starts from zero."""
    if was == 0.0:
        return FROM_ZERO if now else "0.00 %"
    ratio = (now - was) / abs(was)
    return ("+" if ratio > 0.0 else "") + percent(ratio, 2)


def _apart(comparison: Comparison) -> list[Block]:
    if not comparison.apart:
        return []
    columns = ("Id", "Kind", "What", "Was", "Now", "Source was", "Source now")
    rows = tuple(
        (change.id, change.kind, change.title, change.was, change.now, *_sources(change))
        for change in comparison.apart
    )
    return [Heading(2, "Changes that leave every number as it was"), Table(columns, rows)]


# --- along the chain --------------------------------------------------------------------------------


def _chain(comparison: Comparison) -> list[Block]:
    blocks: list[Block] = [Heading(2, "Effect along the chain")]
    columns = ("Term", "Condition", f"Was, {RESISTANCE_UNIT}", "Now", "Difference", "Share of the change")
    rows = tuple(
        (
            effect.term,
            effect.condition,
            _plain_resistance(effect.was),
            _plain_resistance(effect.now),
            _resistance(effect.difference if _is_moved(effect) else 0.0),
            percent(effect.share) if _is_moved(effect) else "none",
        )
        for effect in comparison.terms
    )
    blocks += [Paragraph("Resistances on the basis area."), Table(columns, rows)]
    report = comparison.new.calculation.report
    effects = (*comparison.results, *comparison.margins, *comparison.cases)
    columns = ("Result", "Case", "Was", "Now", "Difference", "Relative")
    return [*blocks, Table(columns, tuple(_effect(item, report) for item in effects))]


def _effect(effect: ResultEffect, report: Report) -> tuple[str, ...]:
    margin = effect.name.startswith("margin of ")
    scale = Scale(effect.kind, report, (effect.was, effect.now), is_difference=margin)
    cells = [
        with_unit(scale.value(value), scale.unit) if math.isfinite(value) else "none"
        for value in (effect.was, effect.now)
    ]
    if not (math.isfinite(effect.was) and math.isfinite(effect.now)):
        return effect.name, case_name(effect.case), *cells, "", ""
    relative = (
        "none: a temperature"
        if effect.kind.scale == "point" and not margin
        else relative_text(effect.was, effect.now)
    )
    return (
        effect.name,
        case_name(effect.case),
        *cells,
        _with(scale.signed(effect.difference), scale),
        relative,
    )


def _software(comparison: Comparison) -> list[Block]:
    blocks: list[Block] = [Heading(2, "The software's part")]
    if not comparison.software:
        return [
            *blocks,
            Paragraph(
                "No results are recorded for the old revision, so that the software's part cannot be told."
            ),
        ]
    report = comparison.new.calculation.report
    columns = (
        "Result",
        "Recorded then",
        "Recomputed now",
        "New inputs now",
        "Software's part",
        "Inputs' part",
    )
    return [
        *blocks,
        Table(columns, tuple(_software_row(part, report) for part in comparison.software)),
        Paragraph(
            f"Recorded with {_software_of(comparison.old)}; recomputed with {software_line()}."
            " A difference within the 10 digits of the results file counts as none. Other results that the software"
            " moved stand here too."
        ),
        *_software_checks(comparison),
    ]


def _software_checks(comparison: Comparison) -> list[Block]:
    if comparison.software_checks is None:
        return [Paragraph("No limits are recorded for the old revision.")]
    if not comparison.software_checks:
        return [Paragraph("Every limit of the old revision is in the state that was recorded.")]
    rows = tuple(
        (item.what, case_name(item.case), item.condition, item.was, item.now, item.figure_now)
        for item in comparison.software_checks
    )
    return [Table(("Check of the old revision", "Case", "Condition", "Recorded", "Now", "Figure now"), rows)]


def _software_row(part: SoftwarePart, report: Report) -> tuple[str, ...]:
    scale = Scale(part.kind, report, (part.recorded, part.recomputed, part.now))
    values = [
        with_unit(scale.value(value), scale.unit) for value in (part.recorded, part.recomputed, part.now)
    ]
    software = _with(scale.signed(part.software), scale) if part.software else "none"
    return part.name, *values, software, _with(scale.signed(part.inputs), scale)


def _checks(comparison: Comparison) -> list[Block]:
    heading = Heading(2, "Checks that changed state")
    if not comparison.checks:
        return [heading, Paragraph("No check changed its state.")]
    rows = tuple(
        (
            item.what,
            case_name(item.case),
            item.condition,
            item.was,
            item.now,
            item.figure_was,
            item.figure_now,
        )
        for item in comparison.checks
    )
    return [heading, Table(("Check", "Case", "Condition", "Was", "Now", "Figure was", "Figure now"), rows)]


def _open_items(comparison: Comparison) -> list[Block]:
    heading = Heading(2, "Open items")
    rows = [("opened", item.kind, item.id, item.text) for item in comparison.opened]
    rows += [("closed", item.kind, item.id, item.text) for item in comparison.closed]
    if not rows:
        return [heading, Paragraph("No open item was opened or closed.")]
    return [heading, Table(("", "Kind", "Id", "Open item"), tuple(rows))]


def _unchanged(comparison: Comparison) -> list[Block]:
    rows = tuple((item.what, f"{item.count} of {item.total}") for item in comparison.unchanged)
    return [Heading(2, "What did not change"), Table(("What", "Unchanged"), rows)]


def _others(comparison: Comparison) -> list[Block]:
    blocks: list[Block] = []
    if comparison.signoffs:
        blocks += [Heading(2, "Sign-offs"), Bullets(comparison.signoffs)]
    if comparison.feeds:
        blocks += [Heading(2, "Calculations that this one feeds"), Bullets(comparison.feeds)]
    return blocks


def _counts(comparison: Comparison) -> Iterable[str]:
    yield counted(len(comparison.inputs), "changed input", "changed inputs")
    if comparison.apart:
        yield f"{counted(len(comparison.apart), 'change', 'changes')} of a source, a unit or a wording"
    yield f"{counted(len(comparison.checks), 'check', 'checks')} changed state"
    yield f"open items: {len(comparison.opened)} opened, {len(comparison.closed)} closed"
    moved = [part for part in comparison.software if part.software]
    if moved:
        yield f"the software moved {', '.join(part.name for part in moved)}; see its part in the comparison"
    if comparison.software_checks:
        count = len(comparison.software_checks)
        words = f"{counted(count, 'limit', 'limits')} of the old revision {'is' if count == 1 else 'are'}"
        yield f"with this software {words} in another state than recorded"


# --- figures ----------------------------------------------------------------------------------------


class Scale:
    """One unit and one number of decimals for figures of a kind, so that a column of parts can be added
    up."""

    def __init__(
        self, kind: QuantityKind, report: Report, values: Iterable[float], is_difference: bool = False
    ):
        unit = report_unit(kind, report)
        self.point = kind.scale == "point" and not is_difference
        self.source = unit
        # A difference of temperatures is in kelvin, or in the degree of Rankine where the report is in °F.
        self.difference_source = (
            {"degC": "K", "degF": "degR"}.get(unit, unit) if kind.scale == "point" else unit
        )
        if is_difference:
            self.source = self.difference_source
        self.unit = _plain_unit(self.source)
        self.difference_unit = _plain_unit(self.difference_source)
        largest = max((abs(self._in(value)) for value in values if math.isfinite(value)), default=0.0)
        self.places = max(0, DIGITS - 1 - math.floor(math.log10(largest))) if largest else DIGITS

    def _in(self, value: float) -> float:
        return in_unit(value, self.source, point=self.point)

    def value(self, value: float) -> str:
        """A figure."""
        return fixed(self._in(value), self.places) if math.isfinite(value) else "none"

    def signed(self, difference: float) -> str:
        """A difference with its sign; one that the decimals do not show has two digits of its own."""
        if not math.isfinite(difference):
            return "none"
        moved = in_unit(difference, self.difference_source)
        text = fixed(moved, self.places)
        return _plus(text if text.strip("0.") or not moved else number(moved, 2))

    def adds_up(self, attribution: Attribution) -> bool:
        """Whether the figures of a column, each rounded by itself, add up to the last of them."""
        parts = [in_unit(part.part, self.difference_source) for part in attribution.parts]
        rounded = round(self._in(attribution.was), self.places) + sum(
            round(part, self.places) for part in parts
        )
        return abs(rounded - round(self._in(attribution.now), self.places)) < 0.5 * 10.0**-self.places

    def size(self, difference: float) -> str:
        """A difference without a sign, to two digits."""
        return number(abs(in_unit(difference, self.difference_source)), 2)


def _plain_unit(unit: str) -> str:
    text = unit_text(unit)
    return "" if text == "1" else text


def _plus(text: str) -> str:
    return text if text.startswith("\u2212") or not text.strip("0.") else f"+{text}"


def _signed(value: float) -> str:
    return _plus(number(value))


def _is_moved(effect: TermEffect) -> bool:
    """Whether a resistance moved by more than the rounding of both figures."""
    return abs(effect.difference) > NOTHING * max(abs(effect.was), abs(effect.now))


def _resistance(value: float) -> str:
    return _plus(number(value))


def _plain_resistance(value: float) -> str:
    return number(value)


# --- data -------------------------------------------------------------------------------------------


def comparison_data(comparison: Comparison) -> dict[str, object]:
    """The comparison for programs: SI values with 10 significant digits, None for what is not known."""
    return {
        "old": _side_data(comparison.old),
        "new": _side_data(comparison.new),
        "verdicts": [_verdict_data(item) for item in comparison.verdicts],
        "changes": [_change_data(change) for change in comparison.changes],
        "attributions": [_attribution_data(item) for item in comparison.attributions],
        "terms": [
            {
                "term": item.term,
                "condition": item.condition,
                "was": _ten(item.was),
                "now": _ten(item.now),
                "difference": _ten(item.difference),
                "share": _ten(item.share),
                "unit": "m^2 K/W",
            }
            for item in comparison.terms
        ],
        "results": [_effect_data(item) for item in (*comparison.results, *comparison.cases)],
        "margins": [_effect_data(item) for item in comparison.margins],
        "software": [
            {
                "result": item.name,
                "recorded": _ten(item.recorded),
                "recomputed": _ten(item.recomputed),
                "now": _ten(item.now),
                "software": _ten(item.software),
                "inputs": _ten(item.inputs),
                "unit": item.kind.unit,
            }
            for item in comparison.software
        ],
        "software_checks": [_verdict_data(item) for item in comparison.software_checks or ()],
        "checks": [_verdict_data(item) for item in comparison.checks],
        "open_items": {
            "opened": [{"id": item.id, "kind": item.kind, "text": item.text} for item in comparison.opened],
            "closed": [{"id": item.id, "kind": item.kind, "text": item.text} for item in comparison.closed],
        },
        "unchanged": [
            {"what": item.what, "count": item.count, "total": item.total} for item in comparison.unchanged
        ],
        "signoffs": list(comparison.signoffs),
        "feeds": list(comparison.feeds),
    }


def _ten(value: float) -> float | None:
    return float(f"{value:.10g}") if math.isfinite(value) else None


def _side_data(side: Side) -> dict[str, object]:
    return {
        "number": side.calculation.number,
        "revision": side.revision,
        "file": side.file_name,
        "state": side.state,
        "open_items": len(side.solved.open_items),
        "digest": {
            "whole": side.digest.whole,
            "meaning": side.digest.meaning,
            "cards": side.digest.cards,
            "results": side.digest.results,
        },
        "software": dict(side.software),
    }


def _verdict_data(item: Verdict) -> dict[str, object]:
    return {
        "id": item.what,
        "case": item.case,
        "condition": item.condition,
        "was": item.was,
        "now": item.now,
        "figure_was": item.figure_was,
        "figure_now": item.figure_now,
    }


def _change_data(change: Change) -> dict[str, object]:
    was, now = change.quantity_was, change.quantity_now
    return {
        "id": change.id,
        "kind": change.kind,
        "title": change.title,
        "was": change.was,
        "now": change.now,
        "source_was": change.source_was,
        "source_now": change.source_now,
        "moves": change.moves,
        "value_was": _ten(was.value) if was is not None else None,
        "value_now": _ten(now.value) if now is not None else None,
        "unit": si_unit(was.dimension) if was is not None else None,
    }


def _attribution_data(item: Attribution) -> dict[str, object]:
    return {
        "result": item.result,
        "unit": item.kind.unit,
        "was": _ten(item.was),
        "now": _ten(item.now),
        "difference": _ten(item.difference),
        "resistance_difference": _ten(item.resistance_difference) if item.is_coefficient else None,
        "interaction": _ten(item.interaction),
        "rest": _ten(item.rest),
        "evaluations": item.evaluations,
        "structures": item.structures,
        "orders": item.orders,
        "parts": [_part_data(part) for part in item.parts],
    }


def _part_data(part: Part) -> dict[str, object]:
    return {
        "changes": list(part.changes),
        "title": part.title,
        "part": _ten(part.part),
        "alone": _ten(part.alone),
        "last": _ten(part.last),
        "error": _ten(part.error),
        "resistance": _ten(part.resistance),
        "resistance_alone": _ten(part.resistance_alone),
        "resistance_last": _ten(part.resistance_last),
        "resistance_error": _ten(part.resistance_error),
    }


def _effect_data(item: ResultEffect) -> dict[str, object]:
    return {
        "name": item.name,
        "case": item.case,
        "unit": item.kind.unit,
        "was": _ten(item.was),
        "now": _ten(item.now),
        "difference": _ten(item.difference),
    }
