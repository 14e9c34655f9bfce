"""`calcbook watch` in a process of its own: what it writes when files are saved, and how it ends.

No test is timed: each waits until what must come has come, and gives up after a time that no machine needs.
How long it takes is measured by tests/benchmarks/watch_latency.py.
"""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
CALCS = ROOT / "calcs"
CASES = ROOT / "tests/cases/ok"
GIVE_UP = 60.0


class Watching:
    """A book in a folder, and a process that watches it."""

    def __init__(self, folder: Path):
        self.folder = folder
        self.calcs = folder / "calcs"
        self.calcs.mkdir()
        self.output = folder / "out"
        self.process: subprocess.Popen[str] | None = None

    def start(self, *paths: str) -> None:
        with (self.folder / "told.txt").open("w") as told, (self.folder / "faults.txt").open("w") as faults:
            self.process = subprocess.Popen(
                [sys.executable, "-m", "calcbook", "watch", *paths, "--output", str(self.output)],
                cwd=self.folder,
                env={**os.environ, "PYTHONPATH": str(ROOT)},
                stdout=told,
                stderr=faults,
                text=True,
            )

    @property
    def told(self) -> str:
        return (self.folder / "told.txt").read_text(encoding="utf-8")

    @property
    def faults(self) -> str:
        return (self.folder / "faults.txt").read_text(encoding="utf-8")

    def save(self, name: str, text: str) -> None:
        """Save as editors do: a file beside, renamed over the old one."""
        beside = self.calcs / f"{name}~"
        beside.write_text(text, encoding="utf-8")
        os.replace(beside, self.calcs / name)

    def record(self, number: str) -> str:
        path = self.output / number / "record.md"
        return path.read_text(encoding="utf-8") if path.is_file() else ""

    def wait(self, holds: Callable[[], bool], what: str) -> None:
        end = time.monotonic() + GIVE_UP
        while not holds():
            assert self.process is not None and self.process.poll() is None, f"ended: {self.faults}"
            assert time.monotonic() < end, f"{what} has not come; told: {self.told}; faults: {self.faults}"
            time.sleep(0.01)

    def interrupt(self) -> int:
        assert self.process is not None
        self.process.send_signal(signal.SIGINT)
        return self.process.wait(GIVE_UP)


@pytest.fixture
def watching(tmp_path: Path) -> Iterator[Watching]:
    book = Watching(tmp_path)
    yield book
    if book.process is not None and book.process.poll() is None:
        book.process.kill()
        book.process.wait()


def example(name: str) -> str:
    return (CALCS / name).read_text(encoding="utf-8")


def test_a_saved_file_is_calculated_anew_as_a_run_would(watching: Watching, tmp_path: Path) -> None:
    text = example("sl-301.yaml")
    watching.save("a.yaml", text)
    watching.start("calcs/a.yaml")
    watching.wait(lambda: watching.record("SL-301") != "" and watching.told.count("\n") == 2, "the record")
    changed = text.replace("title:", "title: Saved again,", 1)
    watching.save("a.yaml", changed)
    watching.wait(lambda: "Saved again" in watching.record("SL-301"), "the new record")
    watching.wait(lambda: watching.told.count("SL-301") == 2, "its line")
    assert watching.interrupt() == 0
    assert "Traceback" not in watching.faults
    subprocess.run(
        [sys.executable, "-m", "calcbook", "run", "calcs/a.yaml", "--output", "plain"],
        cwd=tmp_path,
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        check=True,
        capture_output=True,
    )
    assert (tmp_path / "plain/SL-301/record.md").read_text(encoding="utf-8") == watching.record("SL-301")
    assert watching.told.splitlines()[0].split("\t")[0] == "number"


def test_a_fault_is_told_and_the_old_record_stays_until_it_is_mended(watching: Watching) -> None:
    text = example("sl-301.yaml")
    watching.save("a.yaml", text)
    watching.start("calcs")
    watching.wait(lambda: watching.record("SL-301") != "", "the record")
    before = watching.record("SL-301")
    watching.save("a.yaml", text.replace("purpose:", "porpoise:", 1))
    watching.wait(lambda: "key-unknown" in watching.faults, "the fault")
    assert watching.record("SL-301") == before
    watching.save("a.yaml", text.replace("title:", "title: Mended,", 1))
    watching.wait(lambda: "Mended" in watching.record("SL-301"), "the mended record")
    assert watching.interrupt() == 0


def test_table_files_sources_settings_and_new_files_count_too(watching: Watching) -> None:
    table = (CASES / "oil.csv").read_text(encoding="utf-8")
    watching.save("oil.csv", table)
    watching.save("oil.yaml", (CASES / "table-file.yaml").read_text(encoding="utf-8"))
    watching.save("source.yaml", example("wc-101.yaml"))
    # The sister takes the coefficient as it stands now, pinned to no issued revision.
    watching.save("sister.yaml", example("wc-102.yaml").replace(", revision: A}", "}"))
    watching.start("calcs")
    numbers = ("WC-7", "WC-101", "WC-102")
    watching.wait(lambda: all(watching.record(number) for number in numbers), "three records")

    before = watching.record("WC-7")
    watching.save("oil.csv", table.replace("0.13", "0.12"))
    watching.wait(lambda: watching.record("WC-7") not in ("", before), "the record of another table")

    before = watching.record("WC-102")
    watching.save("source.yaml", example("wc-101.yaml").replace("18.2 kg/s", "16.2 kg/s"))
    watching.wait(lambda: watching.record("WC-102") not in ("", before), "the record of what takes from it")

    lines = {number: watching.told.count(f"{number}\t") for number in numbers}
    watching.save("book.yaml", "book: Larkmoor Works, renamed\n")
    watching.wait(
        lambda: all(watching.told.count(f"{number}\t") > lines[number] for number in numbers), "all anew"
    )

    watching.save("new.yaml", example("sl-301.yaml").replace("number: SL-301", "number: NEW-1"))
    watching.wait(lambda: watching.record("NEW-1") != "", "the record of a new file")
    watching.save("again.yaml", example("sl-301.yaml").replace("number: SL-301", "number: new-1"))
    watching.wait(lambda: "number-in-two-files" in watching.faults, "the number taken twice")
    assert watching.interrupt() == 0


def test_a_card_of_the_book_is_read_again(watching: Watching) -> None:
    shutil.copytree(CALCS / "cards", watching.calcs / "cards")
    name, card = next(
        (calculation.name, card)
        for calculation in sorted(CALCS.glob("*.yaml"))
        for card in sorted((CALCS / "cards").glob("*.yaml"))
        if card.stem in calculation.read_text(encoding="utf-8") and "signoffs" not in calculation.name
    )
    watching.save(name, example(name))
    watching.start(f"calcs/{name}")
    watching.wait(lambda: watching.told.count("\n") == 2, "the record")
    text = card.read_text(encoding="utf-8")
    (watching.calcs / "cards" / card.name).write_text(text + "\nno such key: 1\n", encoding="utf-8")
    watching.wait(lambda: "key-unknown" in watching.faults, "the fault of the card")
    (watching.calcs / "cards" / card.name).write_text(text, encoding="utf-8")
    watching.wait(lambda: watching.told.count("\n") == 3, "the record with the mended card")
    assert watching.interrupt() == 0


def test_a_number_that_becomes_free_is_taken(watching: Watching) -> None:
    text = example("sl-301.yaml")
    watching.save("a.yaml", text)
    watching.save("b.yaml", text.replace("title:", "title: Second file,", 1))
    watching.start("calcs")
    watching.wait(lambda: "number-in-two-files" in watching.faults, "the fault")
    assert "Second file" not in watching.record("SL-301")
    watching.save("a.yaml", text.replace("number: SL-301", "number: SL-302", 1))
    watching.wait(lambda: "Second file" in watching.record("SL-301"), "the record of the second file")
    watching.wait(lambda: watching.record("SL-302") != "", "the record under the new number")


def test_a_file_that_is_deleted_and_written_again_is_no_fault(watching: Watching) -> None:
    """As some editors save; the folder is empty in between."""
    text = example("sl-301.yaml")
    watching.save("a.yaml", text)
    watching.start("calcs")
    watching.wait(lambda: watching.record("SL-301") != "", "the record")
    for number in range(5):
        title = f"Save {number},"
        (watching.calcs / "a.yaml").unlink()
        watching.save("a.yaml", text.replace("title:", f"title: {title}", 1))
        watching.wait(lambda title=title: title in watching.record("SL-301"), title)
    assert watching.faults == ""


def test_saves_that_come_faster_than_answers_have_records_all_the_same(watching: Watching) -> None:
    text = example("wc-101.yaml")
    watching.save("a.yaml", text)
    watching.start("calcs/a.yaml")
    watching.wait(lambda: watching.record("WC-101") != "", "the record")
    number = 0

    def save_again() -> bool:
        nonlocal number
        number += 1
        watching.save("a.yaml", text.replace("title:", f"title: Save {number},", 1))
        return "Save " in watching.record("WC-101")

    watching.wait(save_again, "a record while saves go on")
    last = f"Save {number},"
    watching.wait(lambda: last in watching.record("WC-101"), "the record of the last save")


def test_an_issued_copy_that_appears_after_the_first_record_is_told(watching: Watching) -> None:
    watching.save("book.yaml", example("book.yaml"))
    watching.save("a.yaml", example("gc-401.yaml"))
    watching.start("calcs/a.yaml")
    watching.wait(lambda: watching.record("GC-401") != "", "the record")
    made = shutil.copytree(ROOT / "output/GC-401/issued", watching.folder / "issued")
    made.rename(watching.output / "GC-401/issued")
    watching.wait(lambda: "preliminary issue of revision A" in watching.record("GC-401"), "the new record")
    assert watching.interrupt() == 0
