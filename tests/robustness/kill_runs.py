"""Kill `calcbook run`, `sign` and `issue` at random moments, and look whether every file is whole.

    python tests/robustness/kill_runs.py --kills 200 --seed 1

Every kill is SIGKILL, so nothing of the program can tidy up. A file is whole when its bytes are those of
before the command or those of after it; an issued copy is whole when it is not there or its seal holds. What
a writer leaves beside (`.writing-…`, `.issuing-…`) is no file of the book. Prints how many were tried, how
many met the program at work, and what was lost; the exit code is 1 when anything was.
"""

from __future__ import annotations

import argparse
import os
import random
import shutil
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[1] / "revisions"))

from signed_book import change, make_book, sign_all, sign_checked, sign_prepared

from calcbook.seals import check_seals

ROOT = Path(__file__).resolve().parents[2]
SCRATCH = (".writing-", ".issuing-")
COMMANDS: dict[str, tuple[str, ...]] = {
    "run": ("run", "calcs"),
    "sign": ("sign", "calcs/wc-101.yaml", "--role", "approved", "--person", "ta", "--date", "2026-09-04"),
    "issue": ("issue", "calcs/wc-101.yaml", "--date", "2026-09-05"),
}
Files = dict[str, bytes]


@dataclass(frozen=True)
class Tried:
    """One command, killed once: whether it was still at work, and the files that are neither old nor new."""

    command: str
    delay: float
    was_at_work: bool
    lost: tuple[str, ...]


@dataclass(frozen=True)
class Prepared:
    """A book just before a command and just after, with the files of both, and how long the command takes."""

    folder: Path
    whole: Path
    before: Files
    after: Files
    seconds: float


def start(folder: Path, command: str) -> subprocess.Popen[bytes]:
    """The command in a process of its own, in the folder of the book."""
    return subprocess.Popen(
        [sys.executable, "-m", "calcbook", *COMMANDS[command]],
        cwd=folder,
        stdin=subprocess.DEVNULL,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        env=environment(folder),
    )


def environment(folder: Path) -> dict[str, str]:
    """This environment, with the program under test and a cache beside the book."""
    return {
        **os.environ,
        "PYTHONPATH": os.pathsep.join((str(ROOT), str(ROOT / "tests" / "revisions"))),
        "PYTHONDONTWRITEBYTECODE": "1",
        "CALCBOOK_CACHE": str(folder.parent / "cache"),
    }


def files_of(folder: Path) -> Files:
    """Every file of a book by its path, without what a killed writer leaves beside."""
    found = {}
    for path in sorted(folder.rglob("*")):
        name = path.relative_to(folder).as_posix()
        if path.is_file() and not any(part.startswith(SCRATCH) for part in name.split("/")):
            found[name] = path.read_bytes()
    return found


def prepare(folder: Path, command: str) -> Prepared:
    """A book in the state that the command starts from, and what the command makes of it when it ends."""
    base = folder / f"{command}-base"
    path = make_book(base)
    if command == "issue":
        sign_all(path)
    else:
        sign_prepared(path)
        sign_checked(path)
    if command == "run":
        # The records on disk are those of another allowance: a run has something to write over.
        change(path, "0.00018 m^2 K/W", "0.00035 m^2 K/W")
    whole = folder / f"{command}-whole"
    shutil.copytree(base, whole)
    begun = time.monotonic()
    finished = start(whole, command)
    _, errors = finished.communicate()
    assert finished.returncode == 0, errors.decode()
    seconds = time.monotonic() - begun
    return Prepared(base, whole, files_of(base), files_of(whole), seconds)


def kill_once(prepared: Prepared, command: str, delay: float, scratch: Path) -> Tried:
    """Start the command on a copy of the book, kill it after a delay, and look at every file."""
    copy = scratch / "book"
    shutil.copytree(prepared.folder, copy)
    try:
        process = start(copy, command)
        time.sleep(delay)
        process.kill()
        process.communicate()
        return Tried(command, delay, process.returncode != 0, tuple(lost(prepared, copy)))
    finally:
        shutil.rmtree(copy)


def lost(prepared: Prepared, folder: Path) -> Iterator[str]:
    """The files of a book that are neither what they were nor what they were to be."""
    now = files_of(folder)
    for name in sorted({*prepared.before, *now}):
        states = [files.get(name) for files in (prepared.before, prepared.after)]
        if now.get(name) not in states:
            yield name
    for revision, finding in check_seals(folder / "output", "WC-101"):
        yield f"issued {revision}: {finding.file}: {finding.text}"


def kill_many(kills: int, seed: int, folder: Path) -> list[Tried]:
    """Kills spread over the commands in turn; the seed decides the moments, the machine what they meet."""
    generator = random.Random(seed)
    prepared = {command: prepare(folder, command) for command in COMMANDS}
    tried = []
    for number in range(kills):
        command = list(COMMANDS)[number % len(COMMANDS)]
        # The first part of a call only loads the program; most kills fall where it solves and writes.
        delay = prepared[command].seconds * generator.uniform(0.3, 1.05)
        tried.append(kill_once(prepared[command], command, delay, folder))
    return tried


def main() -> int:
    parser = argparse.ArgumentParser(description="Kill commands at random moments and look at the files.")
    parser.add_argument("--kills", type=int, default=200)
    parser.add_argument("--seed", type=int, default=1)
    arguments = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        tried = kill_many(arguments.kills, arguments.seed, Path(folder))
    for command in COMMANDS:
        own = [item for item in tried if item.command == command]
        print(
            f"{command}: tried {len(own)}, killed at work {sum(item.was_at_work for item in own)},"
            f" lost {sum(len(item.lost) for item in own)}"
        )
    for item in tried:
        for name in item.lost:
            print(f"lost: {item.command} after {item.delay:.3f} s: {name}")
    return 1 if any(item.lost for item in tried) else 0


if __name__ == "__main__":
    sys.exit(main())
