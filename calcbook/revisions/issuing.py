"""Issue: file, settings, house cards, record, results and sign-offs frozen under a revision, with a seal."""

from __future__ import annotations

import datetime
import os
import shutil
import tempfile
from collections.abc import Iterator, Mapping
from pathlib import Path

from calcbook.calcfile import BOOK_FILE
from calcbook.chain.types import REASON
from calcbook.faults import Collector, Fault, Faults
from calcbook.interface import HOUSE_CARDS
from calcbook.library import ROOT as BUILT_IN
from calcbook.record import digest_of, record_text, results_text, software_of
from calcbook.revisions.lifecycle import (
    VALID,
    Lifecycle,
    changes_of,
    life_from,
    lifecycle_of,
    with_issue,
)
from calcbook.revisions.signing import Work, head_place, refuse_closed, write_record
from calcbook.revisions.signoffs import PARTS, PREPARED, SignOffFile, signoffs_path, signoffs_text
from calcbook.seals import (
    BOOK,
    CALCULATION,
    FINAL,
    PRELIMINARY,
    RECORD,
    RESULTS,
    SEAL_NAME,
    SIGNOFFS,
    Issued,
    check_seal,
    issued_folder,
    revision_order,
    seal_text,
    sha256_of,
)

REFUSE_ANY = "refuse any issue"

__all__ = ["check_seal", "issue"]


def issue(work: Work, date: datetime.date, preliminary: bool = False) -> Issued:
    """Freeze a calculation under its revision, and write its record anew.

    The folder of the issued copy appears whole or not at all. A final issue needs valid sign-offs of every
    role and no open item; a preliminary one that of the preparer, and no open item where the book refuses it.
    Raises ``Faults``: issue-sign-off, issue-open-item, calculation-void, revision-issued, revision-not-later,
    revision-not-listed, date-order; ``OSError`` where the folder cannot be written.
    """
    lifecycle = lifecycle_of(work.path, work.solved, work.output)
    refuse_closed(work, lifecycle)
    collector = Collector()
    _check_revision(work, lifecycle, collector)
    _check_signoffs(work, lifecycle, date, preliminary, collector)
    _check_open_items(work, lifecycle, preliminary, collector)
    collector.stop_if_any()
    copy = _frozen(work, lifecycle, date, PRELIMINARY if preliminary else FINAL)
    write_record(work)
    return copy


# --- what may be issued -----------------------------------------------------------------------------


def _check_revision(work: Work, lifecycle: Lifecycle, collector: Collector) -> None:
    calculation = work.solved.chain.calculation
    place = head_place(work, "revision")
    latest = lifecycle.latest_issued
    if latest is not None and revision_order(calculation.revision) <= revision_order(latest.revision):
        collector.add(
            "revision-not-later",
            place,
            f"revision {calculation.revision} does not come after {latest.revision}, which is issued",
            expected=f"a revision after {latest.revision}",
        )
    if not any(item.revision == calculation.revision for item in calculation.revisions):
        collector.add(
            "revision-not-listed",
            place,
            f"the revision history has no line for {calculation.revision}",
            expected=f"revisions: - {{revision: {calculation.revision}, date: …, reason: …}}",
        )


def _check_signoffs(
    work: Work, lifecycle: Lifecycle, date: datetime.date, preliminary: bool, collector: Collector
) -> None:
    for item in lifecycle.signoffs:
        if preliminary and item.role != PREPARED:
            continue
        if item.validity != VALID:
            why = f": {'; '.join(item.why)}" if item.why else ""
            collector.add(
                "issue-sign-off",
                work.place,
                f"the sign-off {item.role} is {item.validity}{why}",
                expected=f"calcbook sign {work.name} --role {item.role} --person …",
            )
        elif item.signoff is not None and date.isoformat() < item.signoff.date:
            collector.add(
                "date-order",
                work.place,
                f"an issue on {date.isoformat()} lies before the sign-off {item.role}",
                found=date.isoformat(),
                expected=f"{item.signoff.date} or later",
            )
    latest = lifecycle.latest_issued
    if latest is not None and date.isoformat() < latest.date:
        collector.add(
            "date-order",
            work.place,
            f"an issue on {date.isoformat()} lies before that of {latest.revision}",
            found=date.isoformat(),
            expected=f"{latest.date} or later",
        )


def _check_open_items(work: Work, lifecycle: Lifecycle, preliminary: bool, collector: Collector) -> None:
    """A preliminary issue may have open items where the book lets it, never a reason to be written."""
    calculation = work.solved.chain.calculation
    lets_pass = preliminary and calculation.settings.open_items != REFUSE_ANY
    cure = (
        "the item closed"
        if preliminary or calculation.settings.open_items == REFUSE_ANY
        else "the item closed, or a preliminary issue"
    )
    for item in lifecycle.open_items:
        if lets_pass and not (item.kind == "revision" and item.id.endswith(f"/ {REASON}")):
            continue
        collector.add("issue-open-item", work.place, f"open item {item.id}: {item.text}", expected=cure)


# --- the copy ---------------------------------------------------------------------------------------


def _frozen(work: Work, lifecycle: Lifecycle, date: datetime.date, kind: str) -> Issued:
    calculation = work.solved.chain.calculation
    folder = issued_folder(work.output, calculation.number)
    target = folder / calculation.revision
    digest = digest_of(work.solved)
    software = software_of(digest)
    latest = lifecycle.latest_issued
    copy = Issued(
        target,
        calculation.number,
        calculation.revision,
        kind,
        date.isoformat(),
        latest.revision if latest is not None else "",
        latest.whole if latest is not None else "",
        {part: getattr(digest, part) for part in PARTS},
        {"calcbook": software.calcbook, "CoolProp": software.coolprop, "library": software.library},
        {},
    )
    issued = with_issue(lifecycle, copy)
    changes = changes_of(work.path, work.solved, work.output, issued)
    texts = dict(_copied(work))
    texts[RECORD] = record_text(work.solved, life_from(issued, calculation.settings, changes)).encode("utf-8")
    texts[RESULTS] = results_text(work.solved, digest, software).encode("utf-8")
    copy = copy._replace(files={name: sha256_of(data) for name, data in sorted(texts.items())})
    _write_folder(target, {**texts, SEAL_NAME: seal_text(copy).encode("utf-8")}, work)
    return copy


def _copied(work: Work) -> Iterator[tuple[str, bytes]]:
    """The files that are frozen byte for byte, by their name in the copy."""
    calculation, chain = work.solved.chain.calculation, work.solved.chain
    yield CALCULATION, work.path.read_bytes()
    book = work.path.parent / BOOK_FILE
    if book.is_file():
        yield BOOK, book.read_bytes()
    for name in work.solved.cards:
        kind, _, card = name.partition(" ")
        # A built-in card goes before a house card of the same name.
        if chain.library.house is not None and not (BUILT_IN / f"{kind}s" / f"{card}.yaml").is_file():
            yield f"{HOUSE_CARDS}/{card}.yaml", (chain.library.house / f"{card}.yaml").read_bytes()
    history = {calculation.survey.file} if calculation.survey is not None else set()
    for table in sorted({*_table_files(calculation.meaning), *history}):
        if table in (CALCULATION, BOOK, RECORD, RESULTS, SIGNOFFS, SEAL_NAME):
            message = f"the table file {table} has the name of a part of the issued copy"
            raise Faults([Fault("name-not-allowed", work.place, message, table, "another name for it")])
        yield table, (work.path.parent / table).read_bytes()
    signoffs = signoffs_path(work.path)
    yield (
        SIGNOFFS,
        signoffs.read_bytes() if signoffs.is_file() else signoffs_text(SignOffFile()).encode("utf-8"),
    )


def _table_files(meaning: object) -> Iterator[str]:
    """The names of the table files that a calculation reads."""
    if isinstance(meaning, Mapping):
        for key, value in meaning.items():
            if key == "table file" and isinstance(value, str):
                yield value
            else:
                yield from _table_files(value)
    elif isinstance(meaning, list):
        for item in meaning:
            yield from _table_files(item)


def _write_folder(target: Path, files: Mapping[str, bytes], work: Work) -> None:
    """Write a folder beside its place, flush every file, and rename it: it appears whole or not at all."""
    target.parent.mkdir(parents=True, exist_ok=True)
    scratch = Path(tempfile.mkdtemp(prefix=".issuing-", dir=target.parent))
    try:
        for name, data in files.items():
            path = scratch / name
            path.parent.mkdir(exist_ok=True)
            with path.open("wb") as stream:
                stream.write(data)
                stream.flush()
                os.fsync(stream.fileno())
        scratch.chmod(0o755)
        if any(path.name.casefold() == target.name.casefold() for path in target.parent.iterdir()):
            raise FileExistsError
        scratch.rename(target)
    except BaseException as error:
        shutil.rmtree(scratch, ignore_errors=True)
        if isinstance(error, OSError) and target.exists():
            raise Faults(
                [
                    Fault(
                        "revision-issued",
                        work.place,
                        f"revision {target.name} is issued already",
                        "",
                        "the next revision: calcbook revise",
                    )
                ]
            ) from None
        raise
