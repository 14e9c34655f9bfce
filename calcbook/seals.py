"""Issued copies and their seals: what was frozen under a revision, and whether it still is so."""

from __future__ import annotations

import hashlib
import json
import re
from collections.abc import Mapping
from pathlib import Path
from typing import NamedTuple

from calcbook.faults import Fault, Faults, Place, shown

SEAL_NAME, SEAL = "seal.json", "calcbook-seal-1"
ISSUED = "issued"
FINAL, PRELIMINARY = "final", "preliminary"
CALCULATION, BOOK, RECORD, RESULTS, SIGNOFFS = (
    "calculation.yaml",
    "book.yaml",
    "record.md",
    "results.json",
    "signoffs.yaml",
)
TEXTS = ("number", "revision", "kind", "date", "supersedes", "supersedes_seal", "whole")
REVISION = re.compile(r"[A-Za-z0-9][A-Za-z0-9.-]{0,9}")


class Issued(NamedTuple):
    """One issued copy: its folder and what its seal says. ``whole`` is the digest of the seal itself."""

    folder: Path
    number: str
    revision: str
    kind: str
    date: str
    supersedes: str
    supersedes_seal: str
    digest: Mapping[str, str]
    software: Mapping[str, str]
    files: Mapping[str, str]
    whole: str = ""


class SealFinding(NamedTuple):
    """One way in which an issued copy is not what was frozen."""

    file: str
    text: str


def seal_text(issued: Issued) -> str:
    """The text of a seal; its own digest is made here."""
    data: dict[str, object] = {
        "seal": SEAL,
        "number": issued.number,
        "revision": issued.revision,
        "kind": issued.kind,
        "date": issued.date,
        "files": dict(sorted(issued.files.items())),
        "digest": dict(issued.digest),
        "software": dict(issued.software),
        "supersedes": issued.supersedes,
        "supersedes_seal": issued.supersedes_seal,
    }
    text = json.dumps(data, ensure_ascii=False, sort_keys=True, separators=(",", ":"))
    data["whole"] = hashlib.sha256(f"{SEAL}\0{text}".encode()).hexdigest()
    return json.dumps(data, indent=1, ensure_ascii=False) + "\n"


def sha256_of(data: bytes) -> str:
    """SHA-256 in hexadecimal digits."""
    return hashlib.sha256(data).hexdigest()


def issued_folder(output: Path, number: str) -> Path:
    """Where the issued copies of a calculation stand."""
    return output / number / ISSUED


def issued_copies(output: Path, number: str) -> tuple[Issued, ...]:
    """The issued copies of a calculation, oldest first.

    Raises ``Faults``: seal-unreadable for a copy whose seal cannot be read, issued-unreadable where the
    folder of issued copies cannot be looked into.
    """
    folder = issued_folder(output, number)
    copies = [read_seal(path) for path in _copies_in(folder)]
    return tuple(sorted(copies, key=lambda copy: revision_order(copy.revision)))


def _copies_in(folder: Path) -> list[Path]:
    """The folders of issued copies; none where nothing is issued. Raises ``Faults``: issued-unreadable."""
    try:
        if not folder.exists():
            return []
        return [path for path in folder.iterdir() if path.is_dir() and not path.name.startswith(".")]
    except OSError as error:
        raise Faults(
            [
                Fault(
                    "issued-unreadable",
                    Place(folder.as_posix()),
                    "the folder of issued copies cannot be looked into",
                    error.strerror or "",
                    "a readable folder, with one folder for each issued revision",
                )
            ]
        ) from None


def read_seal(folder: Path) -> Issued:
    """An issued copy by its folder. Raises ``Faults``: seal-unreadable."""
    path = folder / SEAL_NAME
    try:
        data = json.loads(path.read_bytes().decode("utf-8"))
        if data["seal"] != SEAL or not all(isinstance(data[name], str) for name in TEXTS):
            raise ValueError
        digest, software, files = (
            {str(key): str(value) for key, value in data[name].items()}
            for name in ("digest", "software", "files")
        )
    except (OSError, ValueError, KeyError, TypeError, AttributeError):
        place = Place(path.as_posix())
        raise Faults(
            [
                Fault(
                    "seal-unreadable",
                    place,
                    "the seal of this issued copy cannot be read",
                    "",
                    "the folder as it was issued: take it back from the commit of its issue",
                )
            ]
        ) from None
    return Issued(
        folder,
        data["number"],
        data["revision"],
        data["kind"],
        data["date"],
        data["supersedes"],
        data["supersedes_seal"],
        digest,
        software,
        files,
        data["whole"],
    )


def check_seal(folder: Path) -> tuple[SealFinding, ...]:
    """Everything in an issued copy that is not what was frozen, down to one character; empty when whole.

    A copy that was sealed anew after an alteration shows only against the seal of its successor, see
    ``check_seals``, and in the history of the book.
    """
    try:
        issued = read_seal(folder)
    except Faults:
        return (SealFinding(SEAL_NAME, "the seal is missing or cannot be read"),)
    findings = []
    if (folder / SEAL_NAME).read_bytes() != seal_text(issued).encode("utf-8"):
        findings.append(SealFinding(SEAL_NAME, "the seal was altered after the issue"))
    if issued.revision != folder.name:
        findings.append(
            SealFinding(SEAL_NAME, f"the seal is of revision {issued.revision}, the folder of {folder.name}")
        )
    present = {path.relative_to(folder).as_posix() for path in folder.rglob("*") if not path.is_dir()}
    for name in sorted(present - set(issued.files) - {SEAL_NAME}):
        findings.append(SealFinding(name, "the file was added after the issue"))
    for name, digest in issued.files.items():
        if name not in present:
            findings.append(SealFinding(name, "the file is missing"))
        elif sha256_of((folder / name).read_bytes()) != digest:
            findings.append(SealFinding(name, "the file was altered after the issue"))
    return tuple(findings)


def issued_altered(findings: tuple[SealFinding, ...], place: Place, number: str, revision: str) -> Fault:
    """The fault of an issued copy that is not what was frozen, at the place where it is wanted."""
    found = "; ".join(f"{finding.file}: {finding.text}" for finding in findings)
    message = f"revision {revision} of {number} is not what was issued"
    return Fault("issued-altered", place, message, shown(found, 200), "the copy as it was issued")


def check_seals(output: Path, number: str) -> tuple[tuple[str, SealFinding], ...]:
    """The findings of every issued copy of a calculation, by revision; seals are held against each other."""
    folder = issued_folder(output, number)
    names = sorted((path.name for path in _copies_in(folder)), key=revision_order)
    findings = [(name, finding) for name in names for finding in check_seal(folder / name)]
    if findings:
        return tuple(findings)
    copies = {name: read_seal(folder / name) for name in names}
    for name, copy in copies.items():
        older = copies.get(copy.supersedes)
        if copy.supersedes and older is None:
            findings.append(
                (name, SealFinding(SEAL_NAME, f"the copy {copy.supersedes} that it supersedes is missing"))
            )
        elif older is not None and older.whole != copy.supersedes_seal:
            findings.append(
                (copy.supersedes, SealFinding(SEAL_NAME, f"the copy was sealed anew after {name} was issued"))
            )
    return tuple(findings)


def revision_order(revision: str) -> tuple[int, int, str]:
    """A key that puts revisions in order: letters (A, B … Z, AA), then numbers, then what is neither."""
    if revision.isascii() and revision.isalpha():
        return (0, len(revision), revision.upper())
    if revision.isascii() and revision.isdigit():
        return (1, int(revision), "")
    return (2, 0, revision)
