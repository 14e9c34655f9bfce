"""What stood in git at a revision: files and lists of files, read with git's own plumbing.

Nothing is checked out and nothing is written. Texts that git prints are never shown: a fault says in our
words what cannot be read. Works in a shallow clone as far as its history reaches.
"""

from __future__ import annotations

import io
import os
import re
import subprocess
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from calcbook.faults import Fault, Faults, Place, shown

# A revision as a person types it: no blank, no colon, and nothing that git would take for an option.
_REVISION = re.compile(r"(?!-)[^\s:\x00-\x1f\x7f]{1,200}")


@dataclass(frozen=True, slots=True)
class Commit:
    """A commit of the repository around a folder: the name it was asked for by, and its digits."""

    folder: Path
    asked: str
    digits: str

    def blob(self, path: str) -> bytes | None:
        """The bytes of a file, by its path from the folder; None when the commit has no such file."""
        return self.blobs((path,)).get(path)

    def blobs(self, paths: Iterable[str]) -> dict[str, bytes]:
        """The bytes of many files in one go; those that the commit does not have are left out."""
        wanted = [path for path in paths if "\n" not in path]
        names = "".join(f"{self.digits}:{_from_here(path)}\n" for path in wanted)
        stream = io.BytesIO(
            _git(self.folder, "cat-file", "--batch", given=names.encode("utf-8", "surrogateescape")).stdout
        )
        found = {}
        for path in wanted:
            head = stream.readline().split()
            if len(head) != 3 or head[1] not in (b"blob", b"tree", b"commit", b"tag"):
                continue
            data = stream.read(int(head[2]))
            stream.read(1)
            if head[1] == b"blob":
                found[path] = data
        return found

    def prefix(self) -> str:
        """The folder's own path from the top of its repository, empty at the top."""
        return (
            _git(self.folder, "rev-parse", "--show-prefix")
            .stdout.decode("utf-8", "surrogateescape")
            .strip("\n/")
        )

    def names(self, path: str) -> tuple[str, ...]:
        """The names in a folder of the commit, by its path from the folder; none when there is no such
        folder."""
        inside = f"{_from_here(path)}/"
        finished = _git(self.folder, "ls-tree", "-z", "--name-only", self.digits, inside)
        if finished.returncode != 0:
            return ()
        return tuple(name.rpartition("/")[2] for name in _names(finished.stdout))

    def changed(self) -> tuple[str, ...]:
        """Files that differ between the commit and the working files, and files that git does not know yet.

        Paths from the folder, those above it left out, in alphabetical order.
        """
        known = _git(
            self.folder, "diff", "--name-only", "-z", "--relative", "--no-ext-diff", self.digits, "--", "."
        )
        fresh = _git(self.folder, "ls-files", "-z", "--others", "--exclude-standard", "--", ".")
        return tuple(sorted({*_names(known.stdout), *_names(fresh.stdout)}))


def commit_of(folder: Path, revision: str) -> Commit:
    """The commit that a revision names. Raises ``Faults``: git-not-available, git-revision-unknown."""
    place = Place(f"git:{shown(revision)}")
    if not _REVISION.fullmatch(revision):
        raise Faults(
            [
                Fault(
                    "git-revision-unknown",
                    place,
                    "this cannot be a revision of git",
                    shown(revision),
                    "a branch, a tag or the digits of a commit",
                )
            ]
        )
    finished = _git(folder, "rev-parse", "--verify", "--quiet", f"{revision}^{{commit}}")
    digits = finished.stdout.decode("ascii", "replace").strip()
    if finished.returncode != 0 or not re.fullmatch(r"[0-9a-f]{40,64}", digits):
        raise Faults(
            [
                Fault(
                    "git-revision-unknown",
                    place,
                    "git does not know this revision here",
                    shown(revision),
                    "a branch, a tag or the digits of a commit; in a shallow clone, fetch its history first",
                )
            ]
        )
    return Commit(folder, revision, digits)


def _from_here(path: str) -> str:
    normal = os.path.normpath(path).replace(os.sep, "/")
    return normal if normal.startswith("../") else f"./{normal}"


def _names(output: bytes) -> list[str]:
    return [name for name in output.decode("utf-8", "surrogateescape").split("\0") if name]


def _git(folder: Path, *arguments: str, given: bytes = b"") -> subprocess.CompletedProcess[bytes]:
    command = ["git", "-C", str(folder), *arguments]
    try:
        return subprocess.run(command, capture_output=True, check=False, input=given)
    except OSError:
        place = Place("git")
        expected = "git on the path of programs"
        raise Faults(
            [Fault("git-not-available", place, "git cannot be started here", expected=expected)]
        ) from None
