"""Cut a command at each of its file operations in turn: the process kills itself right before the operation.

Called as ``cut_at_writes.py COMMAND BOOK NUMBER``: does one step of the book's life in this process and is killed
before its operation of that number; ends with exit code 0 when there is no such operation. Random kills seldom fall
between two of them; this goes through all.
"""

from __future__ import annotations

import os
import signal
import sys
from collections.abc import Callable
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "revisions"))

from signed_book import day, work_of

OPERATIONS = ("os.rename", "os.mkdir", "os.remove", "os.rmdir", "os.chmod", "tempfile.mkstemp", "tempfile.mkdtemp")


def cut_before(number: int, root: str) -> None:
    """Kill this process before its file operation of that number, counted from now."""
    count = 0

    def watch(event: str, arguments: tuple[object, ...]) -> None:
        nonlocal count
        writing = event == "open" and isinstance(arguments[2], int) and arguments[2] & (os.O_WRONLY | os.O_RDWR)
        if (writing or event in OPERATIONS) and _inside(arguments[0], root):
            if count == number:
                os.kill(os.getpid(), signal.SIGKILL)
            count += 1

    sys.addaudithook(watch)


def _inside(path: object, root: str) -> bool:
    return isinstance(path, int) or str(path).startswith(root)


def step(command: str, path: Path) -> Callable[[], object]:
    """One step of the life of a calculation, solved and ready to write."""
    work = work_of(path)
    if command == "issue":
        from calcbook.revisions.issuing import issue

        return lambda: issue(work, day("2026-09-05"))
    if command == "sign":
        from calcbook.revisions.signing import sign

        return lambda: sign(work, "approved", "ta", day("2026-09-04"))
    from calcbook.book.finding import Found
    from calcbook.book.running import run_all

    return lambda: run_all([Found(path, "calcs/wc-101.yaml", path.parent.parent / "output")], 1, lambda outcome: None)


if __name__ == "__main__":
    book = Path(sys.argv[2])
    action = step(sys.argv[1], book / "calcs" / "wc-101.yaml")
    cut_before(int(sys.argv[3]), str(book))
    action()
