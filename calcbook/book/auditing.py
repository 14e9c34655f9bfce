"""The audit: the gate for a pull request and for CI. Each finding says where, what, and what to do."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path

from calcbook.book.current import record_difference, results_difference
from calcbook.book.entries import Entry
from calcbook.book.mistakes import MISTAKE_ACTION
from calcbook.book.running import RECORD, RESULTS
from calcbook.faults import Faults
from calcbook.interface import NotConverged
from calcbook.library.errata import Erratum, read_errata
from calcbook.record.blocks import Block, Heading, Paragraph, Table
from calcbook.revisions.sides import load_issued
from calcbook.revisions.signoffs import lies_ahead, signoffs_path
from calcbook.seals import Issued, check_seals

REFUSE_ANY = "refuse any issue"


@dataclass(frozen=True, slots=True)
class AuditFinding:
    """One finding: a kind in words, the file and line it is about (0: no line), what was found, what to do."""

    kind: str
    file: str
    line: int
    text: str
    action: str

    def __str__(self) -> str:
        place = f"{self.file}:{self.line}" if self.line else self.file
        return f"{place}: {self.kind}: {self.text}\n    do: {self.action}"


def audit(entries: Sequence[Entry], errata: Sequence[Erratum] | None = None) -> list[AuditFinding]:
    """Every finding of a book, in the order of its files."""
    known = read_errata() if errata is None else errata
    findings: list[AuditFinding] = []
    numbers: dict[str, str] = {}
    for entry in entries:
        findings += _of_entry(entry, known)
        if entry.number:
            first = numbers.setdefault(entry.number.casefold(), entry.found.name)
            if first != entry.found.name:
                findings.append(
                    AuditFinding(
                        "number taken",
                        entry.found.name,
                        0,
                        f"the number {entry.number} stands in {first} too",
                        "give one another number",
                    )
                )
    return [*findings, *_orphans(entries)]


def _orphans(entries: Sequence[Entry]) -> Iterator[AuditFinding]:
    """Sign-offs whose calculation file is gone, under another name or not at all."""
    for folder in sorted({entry.found.path.parent for entry in entries}):
        for path in sorted(folder.glob("*.signoffs.yaml")):
            if not path.with_name(path.name.replace(".signoffs.yaml", ".yaml")).is_file():
                yield AuditFinding(
                    "sign-offs alone",
                    path.as_posix(),
                    0,
                    "the calculation file that these sign-offs stand beside is gone",
                    "give the calculation file its name back, or move its sign-offs with it",
                )


def _of_entry(entry: Entry, errata: Sequence[Erratum]) -> Iterator[AuditFinding]:
    for fault in entry.faults:
        yield AuditFinding(
            f"fault {fault.code}",
            fault.place.file,
            fault.place.line,
            fault.message,
            fault.expected or "mend the file",
        )
    if entry.not_converged:
        yield AuditFinding(
            "not converged", entry.found.name, 0, entry.not_converged, "change the givens or the method"
        )
    if entry.mistake:
        yield AuditFinding("mistake of calcbook", entry.found.name, 0, entry.mistake, MISTAKE_ACTION)
    if entry.lifecycle is None:
        return
    yield from _stored(entry)
    yield from _signoffs(entry)
    yield from _issued(entry, errata)
    yield from _links(entry)
    if entry.policy == REFUSE_ANY and entry.lifecycle.open_items:
        count = len(entry.lifecycle.open_items)
        yield AuditFinding(
            "open items",
            entry.found.name,
            0,
            f"{count} open; the book refuses any issue with open items",
            "close or accept each, see section 2 of the record",
        )


def _stored(entry: Entry) -> Iterator[AuditFinding]:
    folder = entry.found.output / entry.number
    for name, now, difference in (
        (RECORD, entry.record, record_difference),
        (RESULTS, entry.results, results_difference),
    ):
        path = folder / name
        try:
            stored = path.read_bytes().decode("utf-8")
        except (OSError, UnicodeDecodeError):
            yield AuditFinding(
                "record missing",
                path.as_posix(),
                0,
                f"{name} of {entry.number} is not there",
                f"run {entry.found.name} and commit its record",
            )
            continue
        differs = difference(stored, now)
        if differs:
            yield AuditFinding(
                "record not current",
                path.as_posix(),
                0,
                differs,
                f"run {entry.found.name}, read what changed, and commit the record",
            )


def _signoffs(entry: Entry) -> Iterator[AuditFinding]:
    assert entry.lifecycle is not None
    path = signoffs_path(entry.found.path)
    file = path.as_posix()
    if entry.lifecycle.issued and not path.is_file():
        yield AuditFinding(
            "sign-offs missing",
            file,
            0,
            f"revision {entry.lifecycle.issued[-1].revision} was issued, and its sign-offs no longer stand beside the file",
            "restore them from the commit of the issue",
        )
    for item in entry.lifecycle.signoffs:
        if item.validity == "void":
            yield AuditFinding(
                "sign-off void",
                file,
                0,
                f"{item.role}: {'; '.join(item.why)}",
                "have the role sign the content as it is now",
            )
        elif item.signoff is not None and lies_ahead(item.signoff.date):
            yield AuditFinding(
                "date in the future",
                file,
                0,
                f"{item.role} is dated {item.signoff.date}",
                "have the role sign with the date of the day",
            )


def _issued(entry: Entry, errata: Sequence[Erratum]) -> Iterator[AuditFinding]:
    assert entry.lifecycle is not None
    for revision, finding in check_seals(entry.found.output, entry.number):
        file = (entry.found.output / entry.number / "issued" / revision / finding.file).as_posix()
        yield AuditFinding(
            "issued copy altered", file, 0, finding.text, "restore it from the commit of its issue"
        )
    if errata:
        for copy in entry.lifecycle.issued:
            yield from _touched(copy, entry.found.output, errata)


def _touched(copy: Issued, output: Path, errata: Sequence[Erratum]) -> Iterator[AuditFinding]:
    version = copy.software.get("calcbook", "")
    suspects = [erratum for erratum in errata if version in erratum.versions]
    if not suspects:
        return
    try:
        cards = {
            name.partition(" ")[2] for name in load_issued(copy.number, copy.revision, output).solved.cards
        }
    except (Faults, NotConverged):
        cards = {erratum.card for erratum in suspects}
    for erratum in suspects:
        if erratum.card in cards:
            yield AuditFinding(
                "erratum",
                copy.folder.as_posix(),
                0,
                f"revision {copy.revision} used {erratum.card} in version {version}: {erratum.wrong}",
                f"recalculate with version {erratum.mended_in} or later and issue the next revision",
            )


def _links(entry: Entry) -> Iterator[AuditFinding]:
    for link in entry.links:
        if link.state != "current":
            yield AuditFinding(
                "link",
                entry.found.name,
                0,
                f"{link.symbol} takes {link.result} from {link.calculation}: {link.state}",
                "look at the source, then pin the revision and digest that are meant",
            )


def audit_blocks(name: str, entries: Sequence[Entry], findings: Sequence[AuditFinding]) -> tuple[Block, ...]:
    """The audit as a page."""
    head = Heading(1, f"Audit{f' of {name}' if name else ''}")
    words = f"{len(entries)} calculation(s) looked into, {len(findings)} finding(s)."
    if not findings:
        return head, Paragraph(words)
    rows = tuple(
        (
            finding.kind,
            f"{finding.file}:{finding.line}" if finding.line else finding.file,
            finding.text,
            finding.action,
        )
        for finding in findings
    )
    return head, Paragraph(words), Table(("Finding", "Where", "What", "What to do"), rows)
