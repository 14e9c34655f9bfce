"""Signing: rules of people, order and dates, the checker's form, and the record with its new sign-off."""

from __future__ import annotations

import datetime
from dataclasses import dataclass
from pathlib import Path

from calcbook.chain.outcome import Solved
from calcbook.documents import Mapping, Scalar, read_file
from calcbook.faults import Fault, Faults, Place, nearest_names, shown
from calcbook.files import write_together, write_whole
from calcbook.interface import solve_file
from calcbook.record import digest_of, record_text, results_text, software_of
from calcbook.record.markdown import visible
from calcbook.revisions import forms
from calcbook.revisions.lifecycle import VALID, VOID, Judged, Lifecycle, life_of, lifecycle_of
from calcbook.revisions.signoffs import (
    APPROVED,
    PREPARED,
    HandValues,
    SignOff,
    SignOffFile,
    Voiding,
    bound,
    bound_values,
    content_of,
    is_same_person,
    person_id,
    printed_name,
    read_signoffs,
    signoffs_path,
    today,
    wanted_person,
    write_signoffs,
)
from calcbook.seals import RECORD, RESULTS

WITHOUT_FORM = (PREPARED, APPROVED)


@dataclass(frozen=True, slots=True)
class Work:
    """A calculation file at hand: its path, the name it is called by, the folder of records, its solution."""

    path: Path
    name: str
    output: Path
    solved: Solved

    @property
    def place(self) -> Place:
        return Place(self.name)


def open_work(path: Path, name: str, output: Path) -> Work:
    """Read and solve a calculation file. Raises ``Faults`` and ``NotConverged``."""
    return Work(path, name, output, solve_file(path, name))


@dataclass(frozen=True, slots=True)
class Step:
    """What a call did: wrote a form to be filled in, stored hand values, or took a sign-off; and where."""

    done: str
    path: Path


FORM_WRITTEN, VALUES_STORED, SIGNED = "form written", "hand values stored", "signed"


def sign(work: Work, role: str, person: str, date: datetime.date, blind: bool = False) -> Step:
    """Take one step of a sign-off: a form first where the role has one, then the sign-off and the record.

    Raises ``Faults``: role-unknown, person-unknown, preparer-unknown, preparer-differs, preparer-signs,
    sign-off-order, date-order, date-in-future, calculation-void, revision-issued, blind-too-late, those of
    ``forms.read_form``; ``OSError`` where a file cannot be written.
    """
    calculation = work.solved.chain.calculation
    settings = calculation.settings
    if role not in settings.roles:
        raise _fault(
            "role-unknown",
            work.place,
            f"the book has no role `{shown(role)}`",
            shown(role),
            ", ".join(settings.roles),
            nearest_names(role, settings.roles),
        )
    signer = wanted_person(settings, person, work.place)
    lifecycle = lifecycle_of(work.path, work.solved, work.output)
    refuse_closed(work, lifecycle)
    _check_person(work, role, signer)
    _check_order(work, role, date, lifecycle)
    if blind:
        return _blind_step(work, role, signer, date, lifecycle)
    form = forms.form_path(work.path, role)
    if role not in WITHOUT_FORM and not _is_written(form):
        write_whole(form, forms.form_text(work.solved, role, signer))
        return Step(FORM_WRITTEN, form)
    return _take(work, role, signer, date)


def _is_written(form: Path) -> bool:
    """Whether a form is there to be read. Raises ``Faults``: file-is-folder where it can neither be read nor
    written."""
    if form.is_dir():
        place = Place(form.as_posix())
        raise _fault("file-is-folder", place, "a folder stands where the form is written", "", "a file")
    return form.is_file()


def parsed_date(text: str | None, place: Place) -> datetime.date:
    """A date of the command line, today without one. Raises ``Faults``: date-unreadable, date-in-future."""
    now = today()
    if text is None:
        return now
    try:
        date = datetime.datetime.strptime(text, "%Y-%m-%d").date()
    except ValueError:
        raise _fault(
            "date-unreadable", place, "this is no date of the calendar", shown(text), "YYYY-MM-DD"
        ) from None
    if date > now:
        raise _fault(
            "date-in-future",
            place,
            f"the date {date.isoformat()} lies in the future",
            date.isoformat(),
            "today or a day before",
        )
    return date


def refuse_closed(work: Work, lifecycle: Lifecycle) -> None:
    """Refuse a calculation that is void, and a revision that is issued already."""
    if lifecycle.state == VOID:
        raise _fault(
            "calculation-void", work.place, f"{lifecycle.number} is void", "", "a new number for new work"
        )
    if lifecycle.current is not None:
        raise _fault(
            "revision-issued",
            work.place,
            f"revision {lifecycle.current.revision} of {lifecycle.number} is issued already",
            "",
            "the next revision: calcbook revise",
        )


def _check_person(work: Work, role: str, signer: str) -> None:
    calculation = work.solved.chain.calculation
    preparer = person_id(calculation.settings, calculation.prepared_by)
    place = head_place(work, "prepared by")
    if not preparer:
        people = calculation.settings.people
        raise _fault(
            "preparer-unknown",
            place,
            f"the book lists no person `{shown(calculation.prepared_by)}`",
            shown(calculation.prepared_by),
            "a name or other spelling of book.yaml",
            nearest_names(calculation.prepared_by, [text for names in people.values() for text in names]),
        )
    is_preparer = is_same_person(calculation.settings, signer, preparer)
    name = printed_name(calculation.settings, signer)
    if role == PREPARED and not is_preparer:
        raise _fault(
            "preparer-differs",
            place,
            f"{name} signs as prepared what {calculation.prepared_by} prepared",
            name,
            calculation.prepared_by,
        )
    if role != PREPARED and is_preparer:
        raise _fault(
            "preparer-signs",
            place,
            f"{name} prepared this calculation and cannot sign it as {role}",
            name,
            "another person of the book",
        )


def head_place(work: Work, key: str) -> Place:
    """Where an entry of the title block stands in the file."""
    root = read_file(work.path, work.name).root
    head = root.get("calculation") if isinstance(root, Mapping) else None
    node = head.get(key) if isinstance(head, Mapping) else None
    return node.place if isinstance(node, Scalar) else work.place


def _check_order(work: Work, role: str, date: datetime.date, lifecycle: Lifecycle) -> None:
    calculation = work.solved.chain.calculation
    if date > today():
        raise _fault(
            "date-in-future",
            work.place,
            f"the date {date.isoformat()} lies in the future",
            date.isoformat(),
            "today or a day before",
        )
    if date.isoformat() < calculation.date:
        raise _fault(
            "date-order",
            head_place(work, "date"),
            f"a sign-off of {date.isoformat()} is older than the file",
            date.isoformat(),
            f"{calculation.date} or later",
        )
    for item in _before(lifecycle, role):
        if item.validity != VALID:
            why = f": {'; '.join(item.why)}" if item.why else ""
            raise _fault(
                "sign-off-order",
                work.place,
                f"{role} rests on {item.role}, which is {item.validity}{why}",
                "",
                f"the sign-off {item.role} first",
            )
        assert item.signoff is not None
        if date.isoformat() < item.signoff.date:
            raise _fault(
                "date-order",
                work.place,
                f"{role} on {date.isoformat()} lies before {item.role}",
                date.isoformat(),
                f"{item.signoff.date} or later",
            )


def _before(lifecycle: Lifecycle, role: str) -> list[Judged]:
    roles = [item.role for item in lifecycle.signoffs]
    return list(lifecycle.signoffs[: roles.index(role)])


# --- hand values ------------------------------------------------------------------------------------


def _blind_step(work: Work, role: str, signer: str, date: datetime.date, lifecycle: Lifecycle) -> Step:
    if role in WITHOUT_FORM:
        raise _fault(
            "blind-too-late",
            work.place,
            f"hand values belong to a checker, not to {role}",
            "",
            "another role",
        )
    kept = read_signoffs(signoffs_path(work.path))
    own = next(item for item in lifecycle.signoffs if item.role == role)
    if (
        forms.form_path(work.path, role).is_file()
        or own.signoff is not None
        or _stored(kept, work, role, signer)
    ):
        raise _fault(
            "blind-too-late",
            work.place,
            "hand values are stored once, and before the form is written",
            "",
            f"a sign-off {role} with what is stored, or without hand values",
        )
    form = forms.form_path(work.path, role, blind=True)
    if not _is_written(form):
        write_whole(form, forms.blind_form_text(work.solved, role, signer))
        return Step(FORM_WRITTEN, form)
    calculation = work.solved.chain.calculation
    values = forms.read_blind_form(form, work.solved, role, signer)
    entry = bound_values(
        HandValues(
            role, signer, date.isoformat(), calculation.revision, digest_of(work.solved).meaning, values
        )
    )
    path = signoffs_path(work.path)
    write_signoffs(path, kept._replace(hand_values=(*kept.hand_values, entry)), kept)
    form.unlink(missing_ok=True)
    return Step(VALUES_STORED, path)


def _stored(kept: SignOffFile, work: Work, role: str, signer: str) -> HandValues | None:
    revision = work.solved.chain.calculation.revision
    return next(
        (
            entry
            for entry in kept.hand_values
            if (entry.role, entry.person, entry.revision) == (role, signer, revision)
        ),
        None,
    )


# --- the sign-off -----------------------------------------------------------------------------------


def _take(work: Work, role: str, signer: str, date: datetime.date) -> Step:
    calculation = work.solved.chain.calculation
    path = signoffs_path(work.path)
    kept = read_signoffs(path)
    earlier = next(
        (one for one in kept.signoffs if (one.role, one.revision) == (role, calculation.revision)), None
    )
    if earlier is not None and date.isoformat() < earlier.date:
        raise _fault(
            "date-order",
            work.place,
            f"{role} on {date.isoformat()} lies before the sign-off that it would replace",
            date.isoformat(),
            f"{earlier.date}, when {earlier.name} signed, or later",
        )
    entry = SignOff(
        role,
        signer,
        printed_name(calculation.settings, signer),
        date.isoformat(),
        calculation.revision,
        content_of(work.solved),
    )
    if role not in WITHOUT_FORM:
        entry = _with_form(entry, work, kept)
    others = [
        other for other in kept.signoffs if other.role != role and other.revision == calculation.revision
    ]
    roles = list(calculation.settings.roles)
    ordered = sorted(
        [*others, bound(entry)], key=lambda item: roles.index(item.role) if item.role in roles else len(roles)
    )
    values = tuple(
        item for item in kept.hand_values if item.revision == calculation.revision and item.role != role
    )
    write_signoffs(path, kept._replace(signoffs=tuple(ordered), hand_values=values), kept)
    write_record(work)
    if role not in WITHOUT_FORM:
        forms.form_path(work.path, role).unlink(missing_ok=True)
    replaced = f", in place of {earlier.name} on {earlier.date}" if earlier is not None else ""
    return Step(f"{SIGNED}{replaced}", path)


def _with_form(entry: SignOff, work: Work, kept: SignOffFile) -> SignOff:
    form = forms.form_path(work.path, entry.role)
    # Answers cite what was calculated: the record without its life.
    filled = forms.read_form(form, work.solved, entry.role, entry.person, record_text(work.solved))
    stored = _stored(kept, work, entry.role, entry.person)
    blind = stored._replace(values=forms.revealed(stored, work.solved)) if stored is not None else None
    return entry._replace(
        way=filled.way,
        checked_with=filled.checked_with,
        answers=filled.answers,
        acknowledged=filled.acknowledged,
        blind=blind,
    )


def write_record(work: Work) -> None:
    """Write record and results of a calculation with its life as it stands. Raises ``OSError``."""
    folder = work.output / work.solved.chain.calculation.number
    record = record_text(work.solved, life_of(work.path, work.solved, work.output))
    digest = digest_of(work.solved)
    results = results_text(work.solved, digest, software_of(digest))
    write_together({folder / RECORD: record, folder / RESULTS: results})


def declare_void(work: Work, person: str, date: datetime.date, because: str) -> Step:
    """End a calculation: its number stays taken, its issued copies stand as void.

    Raises ``Faults``: person-unknown, calculation-void, answer-bare; ``OSError``.
    """
    calculation = work.solved.chain.calculation
    signer = wanted_person(calculation.settings, person, work.place)
    path = signoffs_path(work.path)
    kept = read_signoffs(path)
    if kept.void is not None:
        raise _fault(
            "calculation-void",
            work.place,
            f"{calculation.number} is void already",
            kept.void.date,
            "nothing more",
        )
    if len(forms.own_words(because)) < forms.FEWEST_WORDS:
        raise _fault(
            "answer-bare",
            work.place,
            "the reason is no sentence",
            shown(because),
            "why it is void and what replaces it",
        )
    write_signoffs(path, kept._replace(void=Voiding(signer, date.isoformat(), visible(because))), kept)
    write_record(work)
    return Step(VOID, path)


def _fault(
    code: str, place: Place, message: str, found: str, expected: str, nearest: tuple[str, ...] = ()
) -> Faults:
    return Faults([Fault(code, place, message, found, expected, nearest)])
