"""The life of a calculation: state, confirmation and validity, derived from evidence, none of them typed."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from calcbook.calcfile import Calculation, Settings
from calcbook.calcfile.reading import NUMBER
from calcbook.chain.outcome import Solved
from calcbook.chain.types import OpenItem
from calcbook.documents import Mapping, Scalar, read_file
from calcbook.faults import Faults
from calcbook.interface import NotConverged
from calcbook.record.blocks import Block, Paragraph
from calcbook.record.life import Life, SignOffLine
from calcbook.revisions.signoffs import (
    ACKNOWLEDGED,
    PARTS,
    PREPARED,
    Content,
    SignOff,
    SignOffFile,
    Voiding,
    are_unaltered,
    changed_since,
    content_of,
    is_same_person,
    is_unaltered,
    person_id,
    printed_name,
    read_signoffs,
    signoffs_path,
    software_changed,
)
from calcbook.seals import FINAL, PRELIMINARY, Issued, issued_copies

IN_PREPARATION, ISSUED_STATE, SUPERSEDED, VOID = "in preparation", "issued", "superseded", "void"
NOT_KNOWN = "not known"
VALID, MISSING = "valid", "missing"
CONFIRMED = "confirmed"
TO_BE_WRITTEN = "to be written"


@dataclass(frozen=True, slots=True)
class Judged:
    """One role with its sign-off and what became of it: valid, void or missing.

    ``why`` says why it is void, one sentence each; ``notes`` what a reader must know of a valid one.
    """

    role: str
    signoff: SignOff | None
    validity: str
    why: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Lifecycle:
    """State, confirmation, sign-offs by role, issued copies (oldest first) and open items of a calculation.

    ``current`` is the issued copy of the file's own revision, ``is_current`` whether its content is that of
    the file.
    """

    number: str
    revision: str
    state: str
    confirmation: str
    signoffs: tuple[Judged, ...]
    issued: tuple[Issued, ...]
    open_items: tuple[OpenItem, ...]
    current: Issued | None
    is_current: bool
    void: Voiding | None

    @property
    def latest_issued(self) -> Issued | None:
        return self.issued[-1] if self.issued else None

    @property
    def last_before(self) -> Issued | None:
        """The last issued copy of another revision than the file's: what changes are told against."""
        if self.current is not None:
            return next((copy for copy in self.issued if copy.revision == self.current.supersedes), None)
        return self.latest_issued


def lifecycle_of(calc_path: Path, solved: Solved | None, output: Path) -> Lifecycle:
    """The life of a calculation file whose records stand under ``output``.

    Without ``solved`` (a file with a fault) state, confirmation and sign-offs are not known; issued copies
    are.
    Raises ``Faults``: sign-offs-unreadable, seal-unreadable.
    """
    if solved is None:
        return _unsolved(calc_path, output)
    calculation = solved.chain.calculation
    kept = read_signoffs(signoffs_path(calc_path))
    copies = issued_copies(output, calculation.number)
    content = content_of(solved)
    judged = judge(kept, calculation, content)
    items = solved.open_items
    current = next(
        (copy for copy in copies if copy.revision.casefold() == calculation.revision.casefold()), None
    )
    is_current = current is not None and all(
        current.digest.get(part) == getattr(content.digest, part) for part in PARTS
    )
    state = _state(judged, calculation.settings, copies, current if is_current else None, kept.void)
    is_issued_so = current is not None and is_current and current.kind != FINAL
    confirmation = PRELIMINARY if items or is_issued_so else CONFIRMED
    return Lifecycle(
        calculation.number,
        calculation.revision,
        state,
        confirmation,
        judged,
        copies,
        items,
        current,
        is_current,
        kept.void,
    )


def _unsolved(calc_path: Path, output: Path) -> Lifecycle:
    number = revision = ""
    try:
        root = read_file(calc_path).root
    except Faults:
        root = None
    head = root.get("calculation") if isinstance(root, Mapping) else None
    if isinstance(head, Mapping):
        number, revision = (
            found.text if isinstance(found := head.get(name), Scalar) else ""
            for name in ("number", "revision")
        )
    copies = issued_copies(output, number) if NUMBER.fullmatch(number) else ()
    void = read_signoffs(signoffs_path(calc_path)).void
    return Lifecycle(
        number, revision, VOID if void else NOT_KNOWN, NOT_KNOWN, (), copies, (), None, False, void
    )


def _state(
    judged: Sequence[Judged],
    settings: Settings,
    copies: Sequence[Issued],
    issued: Issued | None,
    void: Voiding | None,
) -> str:
    if void is not None:
        return VOID
    if issued is not None:
        return ISSUED_STATE if issued is copies[-1] else SUPERSEDED
    state = IN_PREPARATION
    for item in judged:
        if item.validity != VALID:
            break
        state = item.role
    return state


# --- sign-offs judged -------------------------------------------------------------------------------


def judge(kept: SignOffFile, calculation: Calculation, content: Content) -> tuple[Judged, ...]:
    """Every role of the book in order, with its sign-off judged against the content as it is now."""
    result: list[Judged] = []
    for role in calculation.settings.roles:
        own = [entry for entry in kept.signoffs if entry.role == role]
        entry = next((entry for entry in own if entry.revision == calculation.revision), None)
        if entry is None:
            notes = tuple(f"signed for revision {other.revision}" for other in own)
            result.append(Judged(role, None, MISSING, notes=notes))
            continue
        why = _why_void(entry, calculation, content, result)
        result.append(
            Judged(
                role,
                entry,
                VOID if why else VALID,
                tuple(why),
                tuple(_notes(entry, calculation.settings, content, result)),
            )
        )
    return tuple(result)


def _why_void(
    entry: SignOff, calculation: Calculation, content: Content, before: Sequence[Judged]
) -> list[str]:
    settings = calculation.settings
    why = list(changed_since(entry.content, content))
    if not is_unaltered(entry):
        why.append("the sign-off was altered after it was made")
    if entry.person not in settings.people:
        why.append(f"{entry.person} is not among the people of the book")
    else:
        why += _person_rule(entry, calculation)
    if entry.date < calculation.date:
        why.append(f"its date lies before that of the file, {calculation.date}")
    for item in before:
        if item.validity != VALID:
            why.append(f"the sign-off {item.role} that it rests on is {item.validity}")
        elif item.signoff is not None and entry.date < item.signoff.date:
            why.append(f"its date lies before that of {item.role}, {item.signoff.date}")
    return why


def _person_rule(entry: SignOff, calculation: Calculation) -> list[str]:
    preparer = person_id(calculation.settings, calculation.prepared_by)
    is_preparer = bool(preparer) and is_same_person(calculation.settings, entry.person, preparer)
    if entry.role == PREPARED and not is_preparer:
        return [f"the file is prepared by {calculation.prepared_by}"]
    if entry.role != PREPARED and (is_preparer or not preparer):
        return [
            "the preparer cannot sign for this role"
            if preparer
            else f"{calculation.prepared_by}, who prepared the file, is not among the people of the book"
        ]
    return []


def _notes(entry: SignOff, settings: Settings, content: Content, before: Sequence[Judged]) -> list[str]:
    notes = []
    versions = software_changed(entry.content.software, content.software)
    if versions and entry.content.digest.results == content.digest.results:
        notes.append(f"{versions}: no displayed digit changed")
    for item in before:
        if (
            item.role != PREPARED
            and item.signoff is not None
            and is_same_person(settings, item.signoff.person, entry.person)
        ):
            notes.append(f"the same person signed {item.role}")
    if entry.checked_with:
        notes.append(f"checked with {entry.checked_with}")
    if entry.blind is not None:
        notes.append(_blind_words(entry))
    return notes


def _blind_words(entry: SignOff) -> str:
    blind = entry.blind
    assert blind is not None
    values = "; ".join(
        f"{item.result} {item.value} by hand, {item.shown} in the record, deviation {item.deviation}"
        for item in blind.values
    )
    altered = "" if are_unaltered(blind) else " (altered after they were stored)"
    other = "" if blind.digest == entry.content.digest.meaning else " for another content"
    return f"hand values stored on {blind.date}{other} before the form was filled in{altered}: {values}"


# --- for the record ---------------------------------------------------------------------------------


def life_of(calc_path: Path, solved: Solved, output: Path) -> Life:
    """What the record shows of the life of a calculation. Raises ``Faults`` as ``lifecycle_of`` does."""
    lifecycle = lifecycle_of(calc_path, solved, output)
    return life_from(
        lifecycle, solved.chain.calculation.settings, changes_of(calc_path, solved, output, lifecycle)
    )


def life_from(lifecycle: Lifecycle, settings: Settings, changes: tuple[Block, ...] = ()) -> Life:
    """The lines of the record from a lifecycle that is known."""
    lines = tuple(_line(item, settings) for item in lifecycle.signoffs)
    return Life(
        lifecycle.state,
        lines,
        issue_words(lifecycle),
        _notice(lifecycle),
        changes,
        _answers(lifecycle, settings),
        _remarks(lifecycle, settings),
    )


def _answers(lifecycle: Lifecycle, settings: Settings) -> tuple[tuple[int, str], ...]:
    """The words of valid sign-offs to the questions that only a person can answer, with who says so."""
    return tuple(
        (int(answer.number), f"{printed_name(settings, entry.person)}: {answer.answer}")
        for entry in _valid(lifecycle)
        for answer in entry.answers
        if answer.number.isdecimal()
    )


def _remarks(lifecycle: Lifecycle, settings: Settings) -> tuple[tuple[str, str], ...]:
    """The words of valid sign-offs to what the runner decided, beyond that it is acknowledged."""
    return tuple(
        (item.id, f"{printed_name(settings, entry.person)}: {item.words}")
        for entry in _valid(lifecycle)
        for item in entry.acknowledged
        if item.words.casefold() != ACKNOWLEDGED
    )


def _valid(lifecycle: Lifecycle) -> list[SignOff]:
    """The sign-offs that hold for this content."""
    return [
        item.signoff for item in lifecycle.signoffs if item.validity == VALID and item.signoff is not None
    ]


def _line(item: Judged, settings: Settings) -> SignOffLine:
    entry = item.signoff
    words = "; ".join((*item.why, *item.notes))
    if entry is None:
        return SignOffLine(item.role, "", "", "", item.validity, words)
    person = f"{printed_name(settings, entry.person)} ({entry.person})"
    return SignOffLine(item.role, person, entry.date, entry.way, item.validity, words)


def issue_words(lifecycle: Lifecycle) -> str:
    """How the file's own revision was issued, in words; empty where it was not."""
    copy = lifecycle.current
    if copy is None:
        return ""
    words = f"{copy.kind} issue of revision {copy.revision} on {copy.date}"
    words += f", supersedes revision {copy.supersedes}" if copy.supersedes else ""
    return (
        words if lifecycle.is_current else f"{words}; the file has changed since and needs its next revision"
    )


def _notice(lifecycle: Lifecycle) -> tuple[str, ...]:
    notice = []
    if lifecycle.void is not None:
        notice.append(f"Void since {lifecycle.void.date}: {lifecycle.void.because}")
    elif lifecycle.is_current and lifecycle.current is not None and lifecycle.current.kind != FINAL:
        count = len(lifecycle.open_items)
        items = f" with {count} open item{'' if count == 1 else 's'}" if count else ""
        notice.append(f"Preliminary issue{items}: not for purchase, fabrication or decisions on safety.")
    return tuple(notice)


def changes_of(calc_path: Path, solved: Solved, output: Path, lifecycle: Lifecycle) -> tuple[Block, ...]:
    """The short comparison with the last issued revision; empty where there is none."""
    copy = lifecycle.last_before
    if copy is None:
        return ()
    from calcbook.revisions.comparison import compare, short_blocks
    from calcbook.revisions.sides import load_issued, side_of

    try:
        old = load_issued(copy.number, copy.revision, output)
    except (Faults, NotConverged):
        return (
            Paragraph(
                f"Revision {copy.revision}, the last one issued, cannot be solved with this software: nothing"
                " is compared."
            ),
        )
    return tuple(short_blocks(compare(old, side_of(solved, calc_path, output))))


def with_issue(lifecycle: Lifecycle, copy: Issued) -> Lifecycle:
    """The lifecycle as it is once a copy of the file's content is issued."""
    return replace(
        lifecycle, state=ISSUED_STATE, issued=(*lifecycle.issued, copy), current=copy, is_current=True
    )
