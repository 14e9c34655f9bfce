"""What a fault of the machine leaves behind: every file old or new, never torn, and told in words."""

from __future__ import annotations

import contextlib
import os
import resource
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest

ROBUSTNESS = Path(__file__).resolve().parents[1] / "robustness"
sys.path.insert(0, str(ROBUSTNESS))

import kill_runs  # noqa: E402
from signed_book import CALCULATION, day, make_book, sign_all, sign_prepared, work_of  # noqa: E402

from calcbook.book import Found, run_all, running  # noqa: E402
from calcbook.revisions.issuing import issue  # noqa: E402
from calcbook.seals import check_seals  # noqa: E402

KILLS = 30  # `kill_runs.py --kills 200` tries more
# A file that is written whole takes a temporary file, an opening, a change of its rights and a renaming.
FEWEST_OPERATIONS = {"run": 8, "sign": 12, "issue": 20}


def call(folder: Path, *arguments: str, **options: object) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "calcbook", *arguments],
        cwd=folder,
        capture_output=True,
        text=True,
        env=kill_runs.environment(folder),
        check=False,
        **options,
    )  # type: ignore[call-overload,no-any-return]


@pytest.fixture(scope="module", params=list(kill_runs.COMMANDS))
def prepared(
    request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory
) -> tuple[str, kill_runs.Prepared]:
    return request.param, kill_runs.prepare(tmp_path_factory.mktemp(request.param), request.param)


def test_random_kills_leave_every_file_old_or_new(tmp_path: Path) -> None:
    tried = kill_runs.kill_many(KILLS, 20261124, tmp_path)
    assert len(tried) == KILLS
    # The delays do meet the program at work; on a loaded machine many end before it is there.
    assert sum(item.was_at_work for item in tried) >= KILLS / 10
    assert [item for item in tried if item.lost] == []


def test_a_cut_before_any_file_operation_leaves_every_file_old_or_new(
    prepared: tuple[str, kill_runs.Prepared],
) -> None:
    command, book = prepared
    finished = subprocess.run(
        [sys.executable, str(ROBUSTNESS / "cut_at_writes.py"), command, str(book.folder), str(book.whole)],
        env=kill_runs.environment(book.folder),
        capture_output=True,
        text=True,
        check=False,
    )
    assert finished.returncode == 0, finished.stdout + finished.stderr
    cuts = int(finished.stdout.removeprefix("cuts "))
    assert cuts >= FEWEST_OPERATIONS[command]


def test_a_command_that_was_killed_can_be_given_again(
    prepared: tuple[str, kill_runs.Prepared], tmp_path: Path
) -> None:
    command, book = prepared
    copy = tmp_path / "book"
    shutil.copytree(book.folder, copy)
    process = kill_runs.start(copy, command)
    with contextlib.suppress(subprocess.TimeoutExpired):
        process.wait(book.seconds * 0.8)
    process.kill()
    process.communicate()
    if command == "issue" and process.returncode == 0:
        pytest.skip("the issue had come to its end before it was killed")
    again = kill_runs.start(copy, command)
    _, errors = again.communicate()
    done = command == "issue" and b"revision-issued" in errors  # killed after the copy was in its place
    assert again.returncode == 0 or done, errors.decode()
    assert {
        name: data for name, data in kill_runs.files_of(copy).items() if "issued" in name or not done
    } == {name: data for name, data in book.after.items() if "issued" in name or not done}


def test_two_runs_at_once_on_one_book_write_what_one_would(tmp_path: Path) -> None:
    path = make_book(tmp_path / "book")
    for number in range(102, 105):
        path.with_name(f"wc-{number}.yaml").write_text(
            CALCULATION.replace("WC-101", f"WC-{number}"), encoding="utf-8"
        )
    shutil.copytree(tmp_path / "book", tmp_path / "alone")
    assert call(tmp_path / "alone", "run", "calcs").returncode == 0
    both = [kill_runs.start(tmp_path / "book", "run") for _ in range(2)]
    for process in both:
        _, errors = process.communicate()
        assert process.returncode == 0, errors.decode()
    assert kill_runs.files_of(tmp_path / "book") == kill_runs.files_of(tmp_path / "alone")
    left = [item.name for item in (tmp_path / "book").rglob(".*")]
    assert left == []


def test_two_issues_at_once_leave_one_whole_copy(tmp_path: Path) -> None:
    path = make_book(tmp_path / "book")
    sign_all(path)
    both = [kill_runs.start(tmp_path / "book", "issue") for _ in range(2)]
    codes = []
    for process in both:
        _, errors = process.communicate()
        codes.append(process.returncode)
        assert process.returncode == 0 or b"revision-issued" in errors
    assert codes.count(0) >= 1
    assert codes.count(0) == 1 or (tmp_path / "book" / "output" / "WC-101" / "issued" / "A").is_dir()
    assert check_seals(tmp_path / "book" / "output", "WC-101") == ()
    assert [item.name for item in (tmp_path / "book" / "output" / "WC-101" / "issued").iterdir()] == ["A"]


# --- an output that cannot be written ---------------------------------------------------------------


@pytest.fixture
def guarded() -> Iterator[Path]:
    """A signed book whose output may be read and not written, also where the tests run with every right."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        folder.chmod(0o755)
        path = make_book(folder / "book")
        sign_all(path)
        output = folder / "book" / "output"
        before = {item: item.stat().st_mode for item in (output, *output.rglob("*"))}
        for item in before:
            item.chmod(0o555 if item.is_dir() else 0o444)
        yield path
        for item in before:
            item.chmod(0o755)


class Unprivileged:
    """Without the rights of an administrator, to whom no folder is read-only."""

    def __enter__(self) -> None:
        self.user = os.geteuid()
        if self.user == 0:
            os.seteuid(65534)

    def __exit__(self, *error: object) -> None:
        if self.user == 0:
            os.seteuid(0)


def test_a_run_into_an_output_that_is_read_only_is_a_fault_and_leaves_the_records(
    guarded: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    folder = guarded.parent.parent
    before = kill_runs.files_of(folder)
    guarded.write_text(CALCULATION.replace("0.00018 m^2 K/W", "0.00035 m^2 K/W"), encoding="utf-8")
    # Solved with every right, which a checkout in a private folder asks for: what fails below is the writing.
    found = Found(guarded, "wc-101.yaml", folder / "output")
    texts = running.solved_texts(found)
    monkeypatch.setattr(running, "solved_texts", lambda found: texts)
    with Unprivileged():
        (outcome,) = run_all([found], 1, lambda outcome: None)
    assert [fault.code for fault in outcome.faults] == ["output-not-writable"]
    changed = {name for name, data in kill_runs.files_of(folder).items() if data != before[name]}
    assert changed == {"calcs/wc-101.yaml"}


def test_an_issue_into_an_output_that_is_read_only_leaves_nothing(guarded: Path) -> None:
    folder = guarded.parent.parent
    before = kill_runs.files_of(folder)
    work = work_of(guarded)
    with Unprivileged(), pytest.raises(PermissionError):
        issue(work, day("2026-09-05"))
    assert kill_runs.files_of(folder) == before


@pytest.mark.parametrize("command", ["run", "sign", "issue"])
def test_a_file_where_a_folder_is_wanted_is_told(tmp_path: Path, command: str) -> None:
    path = make_book(tmp_path / "book")
    sign_all(path)
    shutil.rmtree(tmp_path / "book" / "output")
    (tmp_path / "book" / "output").write_text("no folder", encoding="utf-8")
    finished = call(tmp_path / "book", *kill_runs.COMMANDS[command])
    assert finished.returncode == 2
    assert "output-not-writable" in finished.stderr
    assert "Traceback" not in finished.stderr
    assert (tmp_path / "book" / "output").read_text(encoding="utf-8") == "no folder"


# --- a disk that is full ----------------------------------------------------------------------------


@pytest.mark.parametrize("limit", [1000, 8192])
def test_a_full_disk_leaves_every_file_as_it_was_and_is_told(
    prepared: tuple[str, kill_runs.Prepared], tmp_path: Path, limit: int
) -> None:
    """A limit on the size of a file stands for a disk that fills while a file is written."""
    command, book = prepared
    copy = tmp_path / "book"
    shutil.copytree(book.folder, copy)
    finished = call(
        copy,
        *kill_runs.COMMANDS[command],
        preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (limit, limit)),
    )
    assert finished.returncode == 2, finished.stderr
    assert "output-not-writable" in finished.stderr
    assert "Traceback" not in finished.stderr
    assert list(kill_runs.lost(book, copy)) == []
    assert not [item for item in copy.rglob("*") if item.name.startswith(kill_runs.SCRATCH)]
    assert not (copy / "output" / "WC-101" / "issued" / "A").exists()
    again = kill_runs.start(copy, command)
    _, errors = again.communicate()
    assert again.returncode == 0, errors.decode()
    assert kill_runs.files_of(copy) == book.after


# --- numbers that lead elsewhere --------------------------------------------------------------------


@pytest.mark.parametrize("number", ["../../x", "..", "/tmp/x", "a/../b", "a\\\\b", "x" * 41])
@pytest.mark.parametrize("command", ["run", "sign", "issue"])
def test_a_number_never_leaves_the_output_folder(tmp_path: Path, number: str, command: str) -> None:
    folder = tmp_path / "inside" / "book"
    path = make_book(folder, CALCULATION.replace("number: WC-101", f"number: '{number}'"))
    before = {item.as_posix() for item in tmp_path.rglob("*")}
    # In this process: the commands do no more than call these.
    if command == "run":
        (outcome,) = run_all([Found(path, "wc-101.yaml", folder / "output")], 1, lambda outcome: None)
        assert "number-not-allowed" in {fault.code for fault in outcome.faults}
    else:
        with pytest.raises(Exception) as caught:
            sign_prepared(path) if command == "sign" else issue(
                work_of(path), day("2026-09-05"), preliminary=True
            )
        assert "number-not-allowed" in str(caught.value)
    assert {item.as_posix() for item in tmp_path.rglob("*")} == before
