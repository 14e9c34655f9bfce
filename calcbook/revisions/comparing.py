"""The comparison of two revisions: what changed, what moved along the chain, and which change moved it.

Everything is taken from the two solved sides; nothing is scaled to force a sum.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from calcbook.calcfile.calculation import Report
from calcbook.calcfile.meaning import meaning_of
from calcbook.chain.outcome import CheckResult, CriterionResult, Result, Solved
from calcbook.chain.types import CONDITIONS, OpenItem
from calcbook.documents import Mapping as MappingNode
from calcbook.documents import Sequence as ListNode
from calcbook.faults import Fault, Faults, Place, nearest_names, shown
from calcbook.quantities import QuantityKind
from calcbook.record.numbers import (
    PLAIN_DIGITS,
    apart,
    asked_text,
    report_unit,
    share_text,
    unit_text,
    with_unit,
)
from calcbook.revisions.attribution import Attribution, attribute
from calcbook.revisions.changes import Change, changes_between, entries_of, merged
from calcbook.revisions.mixtures import woven
from calcbook.revisions.renames import with_new_names
from calcbook.revisions.sides import Side, check_key

DEFAULT_RESULTS = ("U_service",)
HEADLINES = (
    "U_clean",
    "U_service",
    "cleanliness",
    "excess_surface",
    "heat_flow_clean",
    "heat_flow_service",
    "heat_flux_clean",
    "heat_flux_service",
)
# Two recomputed figures that differ by less than the digits of a results file are the same figure.
RECORDED_DIGITS = 1e-9
# And by less than a comparison prints of them: a difference of two near figures carries more rounding than these.
PRINTED_DIGITS = 1e-6
ABSENT = "not there"
# A limit in one of these states that came or went tells nothing.
QUIET = (ABSENT, "within", "not counting")
# Beside the headlines: results that a reviewer follows, by how their names begin.
FOLLOWED = (
    "T ",
    "dp ",
    "area_",
    "heat_reached",
    "largest_allowance ",
    "time_until_duty_lost",
    "cleaning_interval",
    "allowance_",
    "fitted ",
)


@dataclass(frozen=True, slots=True)
class Verdict:
    """A criterion or check whose state is another now. ``figure_was`` and ``figure_now`` show what decided
    it."""

    what: str
    case: str
    condition: str
    was: str
    now: str
    figure_was: str
    figure_now: str


@dataclass(frozen=True, slots=True)
class TermEffect:
    """A term's resistance on the basis area, m² K/W (0 where the side has no such term)."""

    term: str
    condition: str
    was: float
    now: float
    share: float

    @property
    def difference(self) -> float:
        """Resistance now less the resistance as it was."""
        return self.now - self.was


@dataclass(frozen=True, slots=True)
class ResultEffect:
    """A result on both sides, SI; NaN where a side does not have it. ``case`` is empty for the base case."""

    name: str
    case: str
    kind: QuantityKind
    was: float
    now: float

    @property
    def difference(self) -> float:
        """The result now less the result as it was."""
        return self.now - self.was


@dataclass(frozen=True, slots=True)
class SoftwarePart:
    """A result of the old revision as recorded then and recomputed now, and of the new one; SI."""

    name: str
    kind: QuantityKind
    recorded: float
    recomputed: float
    now: float

    @property
    def software(self) -> float:
        """What the software (with the cards it brings) moved the result by; 0 within the digits recorded."""
        difference = self.recomputed - self.recorded
        return 0.0 if abs(difference) <= RECORDED_DIGITS * abs(self.recorded) else difference

    @property
    def inputs(self) -> float:
        """What the new inputs moved the result by."""
        return self.now - self.recomputed


@dataclass(frozen=True, slots=True)
class Unchanged:
    """How many of a kind are as they were, of how many on the new side."""

    what: str
    count: int
    total: int


@dataclass(frozen=True)
class Comparison:
    """Two revisions of a calculation, compared.

    ``verdicts`` are criteria that flipped, ``checks`` limits that changed state, ``software_checks`` limits of the old
    side that were in another state when its results were recorded (None where none were). ``signoffs`` and ``feeds``
    are sentences from those who know them: sign-offs that are void, calculations that take a result of this
    one.
    """

    old: Side
    new: Side
    changes: tuple[Change, ...]
    verdicts: tuple[Verdict, ...]
    checks: tuple[Verdict, ...]
    opened: tuple[OpenItem, ...]
    closed: tuple[OpenItem, ...]
    terms: tuple[TermEffect, ...]
    results: tuple[ResultEffect, ...]
    margins: tuple[ResultEffect, ...]
    cases: tuple[ResultEffect, ...]
    attributions: tuple[Attribution, ...]
    software: tuple[SoftwarePart, ...]
    software_checks: tuple[Verdict, ...] | None
    unchanged: tuple[Unchanged, ...]
    signoffs: tuple[str, ...] = ()
    feeds: tuple[str, ...] = ()

    @property
    def inputs(self) -> tuple[Change, ...]:
        """Changed inputs: every change that is more than a source, a unit or a wording."""
        return tuple(change for change in self.changes if not change.is_apart)

    @property
    def apart(self) -> tuple[Change, ...]:
        """Changes that leave every number as it was."""
        return tuple(change for change in self.changes if change.is_apart)

    @property
    def is_empty(self) -> bool:
        """Whether the two sides say and give the same."""
        return not (
            self.changes
            or self.verdicts
            or self.checks
            or self.opened
            or self.closed
            or any(effect.difference for effect in self.terms)
            or any(effect.difference for effect in self.results)
            or any(part.software for part in self.software)
            or self.software_checks
        )


def compare(
    old: Side,
    new: Side,
    results: Sequence[str] = DEFAULT_RESULTS,
    signoffs: Iterable[str] = (),
    feeds: Iterable[str] = (),
) -> Comparison:
    """Compare two sides; ``results`` are those whose difference is attributed to the changes.

    Terms that were renamed are called by their new names throughout.
    Raises ``Faults`` (result-unknown) for a result that one side does not have.
    """
    # What was recorded of the old side stands under the names that it had.
    recorded, (old, renamed) = old, with_new_names(old, new)
    _check_results(old, new, results)
    changes = changes_between(old, new, renamed)
    before, after = old.solved, new.solved
    opened, closed = _open_items(before, after)
    return Comparison(
        old=old,
        new=new,
        changes=changes,
        verdicts=criteria_flips(before, after),
        checks=check_flips(before, after),
        opened=opened,
        closed=closed,
        terms=_terms(before, after),
        results=_results(before, after),
        margins=_margins(before, after),
        cases=_cases(before, after),
        attributions=attribute(old, new, changes, tuple(dict.fromkeys(results))),
        software=_software(recorded, new, ("U_clean", *results)),
        software_checks=_software_checks(recorded),
        unchanged=_unchanged(old, new),
        signoffs=tuple(signoffs),
        feeds=tuple(feeds),
    )


def _check_results(old: Side, new: Side, results: Sequence[str]) -> None:
    faults = []
    for side in (old, new):
        known = side.solved.base.results
        faults += [
            Fault(
                "result-unknown",
                Place(side.file_name),
                f"there is no result `{shown(name)}`",
                shown(name),
                ", ".join(known),
                nearest_names(name, known),
            )
            for name in results
            if name not in known
        ]
    if faults:
        raise Faults(faults)


# --- verdicts, checks, open items -------------------------------------------------------------------


def criteria_flips(old: Solved, new: Solved) -> tuple[Verdict, ...]:
    """Criteria with another verdict, by result, operator and case."""
    report = new.chain.calculation.report
    before, after = _criteria_by_name(old), _criteria_by_name(new)
    found = []
    for key in merged(before, after):
        was, now = before.get(key), after.get(key)
        states = [_met(item) for item in (was, now)]
        if states[0] != states[1]:
            item = now or was
            assert item is not None
            found.append(
                Verdict(item.that, item.case, "", *states, *(_against(side, report) for side in (was, now)))
            )
    return tuple(found)


def _criteria_by_name(solved: Solved) -> dict[str, CriterionResult]:
    """Criteria by result, operator and case: one whose limit alone moved is the same criterion."""
    named: dict[str, CriterionResult] = {}
    for case in solved.cases:
        seen: dict[str, int] = {}
        for item in case.criteria:
            stated = solved.chain.calculation.criterion(item.id)
            key = f"{stated.result} {stated.operator}"
            seen[key] = seen.get(key, 0) + 1
            named[f"{key} / {seen[key]} / {case.name}"] = item
    return named


def _met(item: CriterionResult | None) -> str:
    if item is None:
        return "no criterion"
    return "criterion met" if item.met else "criterion not met"


def _against(item: CriterionResult | None, report: Report) -> str:
    """Value against limit, with so many digits that the verdict can be seen."""
    if item is None:
        return ""
    unit = report_unit(item.kind, report)
    figure = item.limit if item.words else item.value
    value, limit = apart(figure, item.limit, unit, item.kind.scale == "point", PLAIN_DIGITS)
    held = (
        ""
        if math.isnan(item.reached)
        else (
            f"; holds with {share_text(item.reached, item.required)}, {asked_text(item.required)} is asked for"
        )
    )
    return f"{item.words or value} against {with_unit(limit, unit_text(unit))}{held}"


def check_flips(old: Solved, new: Solved) -> tuple[Verdict, ...]:
    """Limits whose state is another; one that came or went counts only where it was or is not simply
    within."""
    before, after = _checks_by_name(old), _checks_by_name(new)
    found = []
    for key in merged(before, after):
        was, now = before.get(key), after.get(key)
        states = [item.state if item is not None else ABSENT for item in (was, now)]
        if states[0] == states[1] or (ABSENT in states and all(state in QUIET for state in states)):
            continue
        item = now or was
        assert item is not None
        figures = [f"{side.figure}, limit {side.limit}" if side is not None else "" for side in (was, now)]
        found.append(Verdict(item.id, item.case, item.condition, states[0], states[1], *figures))
    return tuple(found)


def _checks_by_name(solved: Solved) -> dict[str, CheckResult]:
    return {
        check_key(check.id, check.condition, check.case): check
        for case in solved.cases
        for check in case.checks
    }


def _open_items(old: Solved, new: Solved) -> tuple[tuple[OpenItem, ...], tuple[OpenItem, ...]]:
    before, after = ({item.id: item for item in solved.open_items} for solved in (old, new))
    return (
        tuple(item for name, item in after.items() if name not in before),
        tuple(item for name, item in before.items() if name not in after),
    )


# --- along the chain --------------------------------------------------------------------------------


def _terms(old: Solved, new: Solved) -> tuple[TermEffect, ...]:
    found = []
    for condition in reversed(CONDITIONS):
        before, after = (
            {row.name: row.resistance for row in side.base.terms[condition]} for side in (old, new)
        )
        names = woven(list(before), list(after), list(after))
        total = math.fsum(after.values()) - math.fsum(before.values())
        for name in names:
            was, now = before.get(name, 0.0), after.get(name, 0.0)
            found.append(TermEffect(name, condition, was, now, (now - was) / total if total else math.nan))
    return tuple(found)


def _results(old: Solved, new: Solved) -> tuple[ResultEffect, ...]:
    names = merged(old.base.results, new.base.results)
    wanted = [name for name in HEADLINES if name in names] + [
        name for name in names if name.startswith(FOLLOWED)
    ]
    return tuple(_result(name, "", old.base.results.get(name), new.base.results.get(name)) for name in wanted)


def _result(name: str, case: str, was: Result | None, now: Result | None) -> ResultEffect:
    known = now or was
    assert known is not None
    return ResultEffect(
        name, case, known.kind, *(side.value if side is not None else math.nan for side in (was, now))
    )


def _margins(old: Solved, new: Solved) -> tuple[ResultEffect, ...]:
    before, after = _criteria_by_name(old), _criteria_by_name(new)
    found = []
    for key in merged(before, after):
        was, now = before.get(key), after.get(key)
        item = now or was
        assert item is not None
        margins = [side.margin if side is not None else math.nan for side in (was, now)]
        found.append(ResultEffect(f"margin of {item.that}", item.case, item.kind, *margins))
    return tuple(found)


def _cases(old: Solved, new: Solved) -> tuple[ResultEffect, ...]:
    """U of every named case, clean and in service."""
    before, after = ({case.name: case.results for case in side.cases[1:]} for side in (old, new))
    return tuple(
        _result(name, case, before.get(case, {}).get(name), after.get(case, {}).get(name))
        for case in merged(before, after)
        for name in ("U_service", "U_clean")
    )


# --- software, and what stayed ----------------------------------------------------------------------


def _software(old: Side, new: Side, results: Iterable[str]) -> tuple[SoftwarePart, ...]:
    """The asked results that were recorded, and every other that the software moved."""
    recorded, asked = old.recorded, tuple(dict.fromkeys(results))
    before, after = old.solved.base.results, new.solved.base.results
    found = []
    for name in (*asked, *(name for name in recorded if name in before and name not in asked)):
        if name in recorded:
            now = after[name].value if name in after else math.nan
            part = SoftwarePart(name, before[name].kind, recorded[name], before[name].value, now)
            if name in asked or abs(part.software) > PRINTED_DIGITS * abs(part.recorded):
                found.append(part)
    return tuple(found)


def _software_checks(old: Side) -> tuple[Verdict, ...] | None:
    """Limits of the old side whose recorded state is not that of now; None where no limits were recorded.

    One that came or went since counts where it does not, or did not, simply hold.
    """
    recorded = old.recorded_checks
    if not recorded:
        return None
    checks = _checks_by_name(old.solved)
    found = []
    for case, states in recorded.items():
        now = {key: check for key, check in checks.items() if check.case == case}
        for key in merged(states, now):
            check = now.get(key)
            was, state = states.get(key, ABSENT), check.state if check is not None else ABSENT
            if was == state or (ABSENT in (was, state) and was in QUIET and state in QUIET):
                continue
            name, condition = (check.id, check.condition) if check is not None else key.rsplit(" / ", 2)[:2]
            figure = f"{check.figure}, limit {check.limit}" if check is not None else ""
            found.append(Verdict(name, case, condition, was, state, "", figure))
    return tuple(found)


def _unchanged(old: Side, new: Side) -> tuple[Unchanged, ...]:
    counts = []
    for section, words in (
        ("givens", "givens"),
        ("derived", "derived quantities"),
        ("assumptions", "assumptions"),
        ("fluids", "fluids"),
        ("streams", "streams"),
        ("geometry", "entries of the geometry"),
        ("resistances", "terms"),
        ("acceptance", "criteria"),
        ("cases", "cases"),
        ("accept", "accepted checks"),
    ):
        before, after = _meanings(old, section), _meanings(new, section)
        if after:
            counts.append(
                Unchanged(words, sum(before.get(name) == text for name, text in after.items()), len(after))
            )
    counts.append(
        _same(
            "checks in the same state",
            {key: item.state for key, item in _checks_by_name(old.solved).items()},
            {key: item.state for key, item in _checks_by_name(new.solved).items()},
        )
    )
    counts.append(_same("cards used", old.solved.cards, new.solved.cards))
    return tuple(counts)


def _meanings(side: Side, section: str) -> dict[str, object]:
    node = side.tree.get(section) if isinstance(side.tree, MappingNode) else None
    if not isinstance(node, MappingNode | ListNode):
        return {}
    return {name: meaning_of(value) for name, (_, value) in entries_of(node, section).items()}


def _same(what: str, before: Mapping[str, object], after: Mapping[str, object]) -> Unchanged:
    return Unchanged(what, sum(before.get(name) == value for name, value in after.items()), len(after))
