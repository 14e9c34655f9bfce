"""The next revision: its name by the book's scheme, written into the file's text by the smallest edit."""

from __future__ import annotations

import datetime
import re
from dataclasses import dataclass
from pathlib import Path

from calcbook.calcfile import read_settings
from calcbook.calcfile.meaning import meaning_of
from calcbook.documents import Mapping, Scalar, Sequence, read_file, read_text
from calcbook.faults import Fault, Faults, Place, shown
from calcbook.files import write_whole
from calcbook.revisions.lifecycle import TO_BE_WRITTEN, lifecycle_of
from calcbook.seals import FINAL, revision_order

LETTERS, NUMBERS, BOTH = "letters", "numbers", "letters then numbers"
FIRST_NUMBER = "0"


@dataclass(frozen=True, slots=True)
class Revised:
    """What a file's revision was and is now; ``was_issued`` whether the old one is issued."""

    was: str
    now: str
    was_issued: bool


def revise(path: Path, name: str, output: Path, date: datetime.date, numbers: bool = False) -> Revised:
    """Begin the next revision in a file: its name, its date, and a line whose reason is to be written.

    Comments and layout stay. ``numbers`` begins the numbers of a book with letters then numbers.
    Raises ``Faults``: revision-begun, revision-scheme, date-order, revise-by-hand, calculation-void, and
    those of the YAML reader; ``OSError``. The file may have faults of meaning: revising does not solve it.
    """
    data = path.read_bytes() if path.is_file() else b""
    text = _Text(data, path, name)
    head = text.root.get("calculation")
    node = head.get("revision") if isinstance(head, Mapping) else None
    if not isinstance(head, Mapping) or not isinstance(node, Scalar):
        raise _by_hand(text.root.place, "the title block has no revision")
    lifecycle = lifecycle_of(path, None, output)
    if lifecycle.void is not None:
        raise Faults(
            [
                Fault(
                    "calculation-void",
                    node.place,
                    f"{lifecycle.number} is void",
                    "",
                    "a new number for new work",
                )
            ]
        )
    _refuse_begun(text.root, node)
    issued = {copy.revision.casefold() for copy in lifecycle.issued}
    final = any(copy.kind == FINAL for copy in lifecycle.issued)
    scheme = read_settings(path.parent).revisions
    was = " ".join(node.text.split())
    now = next_revision(was, scheme, numbers or final, node.place)
    latest = lifecycle.latest_issued
    if latest is not None and revision_order(now) <= revision_order(latest.revision):
        now = next_revision(latest.revision, scheme, numbers or final, node.place)
    _refuse_earlier(head, date)
    write_whole(path, text.revised(node, head, now, date.isoformat()))
    return Revised(was, now, was.casefold() in issued)


def next_revision(revision: str, scheme: str, numbers: bool = False, place: Place | None = None) -> str:
    """The revision after another by a scheme. Raises ``Faults``: revision-scheme."""
    is_letter = re.fullmatch(r"[A-Za-z]{1,3}", revision) is not None
    is_number = re.fullmatch(r"\d{1,9}", revision) is not None
    if is_letter and scheme in (LETTERS, BOTH):
        return FIRST_NUMBER if scheme == BOTH and numbers else _next_letter(revision)
    if is_number and scheme in (NUMBERS, BOTH):
        return str(int(revision) + 1).zfill(len(revision))
    raise Faults(
        [
            Fault(
                "revision-scheme",
                place or Place(revision),
                f"revision {shown(revision)} does not fit the book's scheme `{scheme}`",
                shown(revision),
                {LETTERS: "a letter such as A", NUMBERS: "a number such as 1"}.get(
                    scheme, "a letter or a number"
                ),
            )
        ]
    )


def _next_letter(revision: str) -> str:
    """A to B, Z to AA; small letters stay small."""
    first, count = ("a" if revision.islower() else "A"), 0
    for letter in revision:
        count = count * 26 + ord(letter.casefold()) - ord("a") + 1
    count += 1
    letters = ""
    while count:
        count, place = divmod(count - 1, 26)
        letters = chr(ord(first) + place) + letters
    return letters


def _refuse_begun(root: Mapping, node: Scalar) -> None:
    lines = root.get("revisions")
    for item in lines.items if isinstance(lines, Sequence) else ():
        revision, reason = (
            found.text if isinstance(item, Mapping) and isinstance(found := item.get(key), Scalar) else ""
            for key in ("revision", "reason")
        )
        if revision == node.text and reason.casefold().strip(" .") == TO_BE_WRITTEN:
            raise Faults(
                [
                    Fault(
                        "revision-begun",
                        item.place,
                        f"revision {revision} is begun and its reason is not written",
                        "",
                        "its reason first",
                    )
                ]
            )


def _refuse_earlier(head: Mapping, date: datetime.date) -> None:
    node = head.get("date")
    if isinstance(node, Scalar) and date.isoformat() < node.text:
        raise Faults(
            [
                Fault(
                    "date-order",
                    node.place,
                    f"a revision of {date.isoformat()} is older than the file",
                    date.isoformat(),
                    f"{node.text} or later",
                )
            ]
        )


def _by_hand(place: Place, message: str) -> Faults:
    return Faults(
        [
            Fault(
                "revise-by-hand",
                place,
                message,
                "",
                "the new revision and its line in `revisions:` written by hand",
            )
        ]
    )


def _without_comment(line: str) -> str:
    """A line up to its comment; a hash in quotes starts none."""
    plain = re.sub(r"\"[^\"]*\"|(?<![\w'])'[^']*'", lambda quoted: "_" * len(quoted.group()), line)
    comment = re.search(r"(^|\s)#", plain)
    return line[: comment.start()] if comment else line


class _Text:
    """A file's text as it is typed, for edits at the places that the YAML reader gives."""

    def __init__(self, data: bytes, path: Path, name: str):
        document = read_file(path, name)
        if not isinstance(document.root, Mapping):
            raise _by_hand(document.root.place, "the file is no mapping")
        self.name = name
        self.root: Mapping = document.root
        typed = data.decode("utf-8")
        self.mark = "\ufeff" if typed.startswith("\ufeff") else ""
        self.end = "\r\n" if "\r\n" in typed else "\n"
        self.lines = document.text.split("\n")

    def revised(self, node: Scalar, head: Mapping, revision: str, date: str) -> bytes:
        """The bytes of the file with the next revision; what it means otherwise is what it meant."""
        wanted = self._wanted(revision, date)
        self._put(node, revision)
        dated = head.get("date")
        if isinstance(dated, Scalar):
            self._put(dated, date)
        self._add_line(f"{{revision: {revision}, date: {date}, reason: {TO_BE_WRITTEN}}}")
        text = "\n".join(self.lines)
        if meaning_of(read_text(text, self.name).root) != wanted:
            raise _by_hand(node.place, "the file is laid out in a way that cannot be edited safely")
        return (self.mark + text.replace("\n", self.end)).encode("utf-8")

    def _wanted(self, revision: str, date: str) -> object:
        meaning = meaning_of(self.root)
        assert isinstance(meaning, dict)
        head = dict(meaning["calculation"])
        head["revision"] = revision
        if "date" in head:
            head["date"] = date
        lines = meaning.get("revisions")
        line = {"revision": revision, "date": date, "reason": TO_BE_WRITTEN}
        return {
            **meaning,
            "calculation": head,
            "revisions": [*(lines if isinstance(lines, list) else []), line],
        }

    def _put(self, node: Scalar, text: str) -> None:
        """Write a scalar anew in its line, in quotes where it stood in quotes."""
        place = node.place
        line = self.lines[place.line - 1]
        start, end = place.column - 1, place.end_column - 1
        quote = line[start] if node.style == "quoted" and line[start : start + 1] in ("'", '"') else ""
        self.lines[place.line - 1] = f"{line[:start]}{quote}{text}{quote}{line[end:]}"

    def _add_line(self, entry: str) -> None:
        keys = [key.place.line for key, _ in self.root.entries]
        key, lines = self.root.key("revisions"), self.root.get("revisions")
        if key is None:
            head = self.root.key("calculation")
            assert head is not None
            at = self._last_line(head.place.line, keys)
            self.lines[at:at] = ["", "revisions:", f"  - {entry}"]
            return
        at = self._last_line(key.place.line, keys)
        if isinstance(lines, Sequence) and lines.items and not self._is_in_brackets(key):
            first = self.lines[lines.items[0].place.line - 1]
            indent = first[: len(first) - len(first.lstrip())]
            self.lines.insert(at, f"{indent}- {entry}")
        elif isinstance(lines, Sequence):
            self._add_in_brackets(key.place.line, at, entry, bool(lines.items))
        else:
            self.lines.insert(at, f"  - {entry}")

    def _is_in_brackets(self, key: Scalar) -> bool:
        after = self.lines[key.place.line - 1][key.place.end_column - 1 :].partition(":")[2].strip()
        return after.startswith("[")

    def _add_in_brackets(self, first: int, last: int, entry: str, has_items: bool) -> None:
        for number in range(last - 1, first - 2, -1):
            place = _without_comment(self.lines[number]).rfind("]")
            if place >= 0:
                line = self.lines[number]
                before = line[:place].rstrip()
                comma = "" if not has_items or before.endswith(",") else ", " if before else ""
                self.lines[number] = f"{before}{comma}{entry}{line[place:]}"
                return

    def _last_line(self, first: int, keys: list[int]) -> int:
        """The number of lines up to the last one that belongs to the entry that starts at ``first``."""
        following = min((line for line in keys if line > first), default=len(self.lines) + 1)
        last = following - 1
        while last > first and (
            not self.lines[last - 1].strip() or self.lines[last - 1].lstrip().startswith("#")
        ):
            last -= 1
        return last
