"""Cut a command at each of its file operations in turn: a process kills itself right before the operation.

    python tests/robustness/cut_at_writes.py COMMAND BEFORE AFTER

BEFORE and AFTER are the book before the command and what the command makes of it. Random kills seldom fall
between two file operations; this goes through all of them. Prints what was lost and how many cuts there were;
the exit code is 1 when anything was lost, or when the uncut command made something else than AFTER.
"""

from __future__ import annotations

import os
import shutil
import signal
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path

import kill_runs
from signed_book import day, work_of

OPERATIONS = (
    "os.rename",
    "os.mkdir",
    "os.remove",
    "os.rmdir",
    "os.chmod",
    "tempfile.mkstemp",
    "tempfile.mkdtemp",
)
MOST_CUTS = 200  # an issue has about forty operations; a command that never ends is found by this


def cut_before(number: int, root: str) -> None:
    """Kill this process before its file operation of that number under a folder, counted from now."""
    count = 0

    def watch(event: str, arguments: tuple[object, ...]) -> None:
        nonlocal count
        writing = (
            event == "open" and isinstance(arguments[2], int) and arguments[2] & (os.O_WRONLY | os.O_RDWR)
        )
        if (writing or event in OPERATIONS) and (
            isinstance(arguments[0], int) or str(arguments[0]).startswith(root)
        ):
            if count == number:
                os.kill(os.getpid(), signal.SIGKILL)
            count += 1

    sys.addaudithook(watch)


def step(command: str, path: Path) -> Callable[[], object]:
    """One step of the life of a calculation, solved and ready to write."""
    work = work_of(path)
    if command == "issue":
        from calcbook.revisions.issuing import issue

        return lambda: issue(work, day("2026-09-05"))
    if command == "sign":
        from calcbook.revisions.signing import sign

        return lambda: sign(work, "approved", "ta", day("2026-09-04"))
    from calcbook.book import Found, run_all

    found = Found(path, "calcs/wc-101.yaml", path.parent.parent / "output")
    return lambda: run_all([found], 1, lambda outcome: None)


def cut_once(action: Callable[[], object], number: int, book: Path) -> bool:
    """Do a step in a process that is cut before an operation; whether it came to its end."""
    process = os.fork()
    if process == 0:
        cut_before(number, str(book))
        action()
        os._exit(0)
    _, status = os.waitpid(process, 0)
    if os.WIFSIGNALED(status):
        return False
    assert os.WEXITSTATUS(status) == 0, "the step failed by itself"
    return True


def main(command: str, before: Path, after: Path) -> int:
    files = kill_runs.Prepared(before, after, kill_runs.files_of(before), kill_runs.files_of(after), 0.0)
    losses = 0
    with tempfile.TemporaryDirectory() as scratch:
        book = Path(scratch) / "book"
        shutil.copytree(before, book)
        action = step(command, book / "calcs" / "wc-101.yaml")
        for number in range(MOST_CUTS):
            ended = cut_once(action, number, book)
            for name in kill_runs.lost(files, book):
                losses += 1
                print(f"lost: cut {number}: {name}")
            now = kill_runs.files_of(book)
            shutil.rmtree(book)
            if ended:
                print(f"cuts {number}")
                return 1 if losses or now != files.after else 0
            shutil.copytree(before, book)
    print("the command has no end")
    return 1


if __name__ == "__main__":
    sys.exit(main(sys.argv[1], Path(sys.argv[2]), Path(sys.argv[3])))
