"""A book goes on whatever becomes of one of its calculations, and ends cleanly when interrupted."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from click.testing import CliRunner

from calcbook.book import running
from calcbook.book.mistakes import mistake_words
from calcbook.book.pool import pool_map
from calcbook.commands import main

ROOT = Path(__file__).resolve().parents[2]
TEXT = (ROOT / "calcs/sl-301.yaml").read_text(encoding="utf-8")
COPIES = 40
GIVE_UP = 60.0


def squared(number: int) -> int:
    """Work for a pool; 3 takes its process with it."""
    if number == 3:
        os._exit(9)
    return number * number


def refused(number: int) -> int:
    raise AssertionError(f"{number} is lost though no process ended")


def test_a_process_that_dies_costs_its_own_answer_only() -> None:
    found = list(pool_map(squared, list(range(12)), 2, lambda number: -1))
    assert found == [-1 if number == 3 else number * number for number in range(12)]


def test_one_process_and_several_give_the_same_in_order() -> None:
    items = [number for number in range(20) if number != 3]
    expected = [number * number for number in items]
    assert list(pool_map(squared, items, 1, refused)) == expected
    assert list(pool_map(squared, items, 2, refused)) == expected
    assert list(pool_map(squared, [], 2, refused)) == []


def book_of(folder: Path, copies: int) -> Path:
    calcs = folder / "calcs"
    calcs.mkdir()
    for number in range(copies):
        text = TEXT.replace("number: SL-301", f"number: SL-{number}")
        (calcs / f"{number:03d}.yaml").write_text(text, encoding="utf-8")
    return calcs


def test_a_mistake_of_calcbook_is_told_and_the_others_are_written(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    calcs = book_of(tmp_path, 3)
    solve_file = running.solve_file

    def solved(path: Path, name: str, **words: object) -> object:
        if path.name == "001.yaml":
            {}["a figure that nobody laid out"]
        return solve_file(path, name, **words)

    monkeypatch.setattr(running, "solve_file", solved)
    result = CliRunner().invoke(main, ["run", str(calcs), "--output", str(tmp_path / "out")])
    assert result.exit_code == 4
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == ["SL-0", "SL-2"]
    (line,) = result.stderr.splitlines()
    assert "001.yaml: mistake-of-calcbook: KeyError: 'a figure that nobody laid out' at calcbook/" in line
    assert "no record is written" in line and "Traceback" not in result.output
    assert [row.split("\t")[0] for row in result.stdout.splitlines()] == ["number", "SL-0", "SL-2"]


def test_a_mistake_names_the_places_of_calcbook_alone() -> None:
    with pytest.raises(KeyError) as caught:
        running.conclusion(_NoSuchResult(), "U")  # type: ignore[arg-type]
    words = mistake_words(caught.value)
    assert words.startswith("KeyError: 'U' at calcbook/book/running.py:")
    assert str(ROOT) not in words


class _NoSuchResult:
    class base:
        results: dict[str, object] = {}  # noqa: RUF012


def test_an_interrupt_ends_a_run_over_several_processes_with_whole_records(tmp_path: Path) -> None:
    calcs = book_of(tmp_path, COPIES)
    output = tmp_path / "out"
    process = subprocess.Popen(
        [sys.executable, "-m", "calcbook", "run", str(calcs), "--output", str(output), "--jobs", "2"],
        env={**os.environ, "PYTHONPATH": str(ROOT)},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    end = time.monotonic() + GIVE_UP
    while not (output / "SL-0/results.json").is_file():
        assert process.poll() is None and time.monotonic() < end
        time.sleep(0.005)
    os.killpg(process.pid, signal.SIGINT)  # as the keyboard does: to every process of the group
    _, faults = process.communicate(timeout=GIVE_UP)
    assert process.returncode == 130, faults
    assert "Traceback" not in faults and faults.startswith("interrupted")
    folders = list(output.iterdir())
    assert 0 < len(folders) < COPIES
    for folder in folders:
        # Both files of a calculation are written one after the other: an interrupt may fall between them.
        assert {path.name for path in folder.iterdir()} <= {"record.md", "results.json"}
        assert all(path.read_text(encoding="utf-8").endswith("\n") for path in folder.iterdir())
