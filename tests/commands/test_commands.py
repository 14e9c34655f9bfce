"""The commands as a user meets them: what they write, print and exit with."""

from __future__ import annotations

import json
from pathlib import Path

import click
import pytest
from click.testing import CliRunner, Result

from calcbook.commands import main
from calcbook.library import Library

CALCS = Path(__file__).resolve().parents[2] / "calcs"
GOOD = (CALCS / "wc-101.yaml").read_text(encoding="utf-8")


def invoke(*words: str) -> Result:
    return CliRunner().invoke(main, list(words), catch_exceptions=False)


def calculation(folder: Path, name: str, number: str, text: str = GOOD) -> Path:
    path = folder / name
    path.write_text(text.replace("number: WC-101", f"number: {number}"), encoding="utf-8")
    return path


def test_run_writes_record_and_results_under_the_number(tmp_path: Path) -> None:
    path = calculation(tmp_path, "cooler.yaml", "T-1")
    result = invoke("run", str(path), "--output", str(tmp_path / "out"))
    assert result.exit_code == 0
    record = (tmp_path / "out/T-1/record.md").read_bytes()
    data = json.loads((tmp_path / "out/T-1/results.json").read_text(encoding="utf-8"))
    assert record.startswith(b"#") and record.endswith(b"\n") and b"\r" not in record
    assert data["calculation"]["number"] == "T-1"
    assert sorted(item.name for item in (tmp_path / "out/T-1").iterdir()) == ["record.md", "results.json"]
    number, revision, clean, service, items = result.stdout.splitlines()[1].split("\t")
    assert (number, revision, items) == ("T-1", "B", "1")
    assert clean.startswith("2320 ") and service.startswith("1130 ")


def test_a_fault_in_one_file_writes_nothing_for_it_and_the_rest_is_written(tmp_path: Path) -> None:
    calculation(tmp_path, "a.yaml", "T-1", GOOD.replace("15.75 mm", "15,75 mm"))
    calculation(tmp_path, "b.yaml", "T-2")
    result = invoke("run", str(tmp_path), "--output", str(tmp_path / "out"))
    assert result.exit_code == 2
    assert "number-decimal-comma" in result.stderr
    assert [item.name for item in (tmp_path / "out").iterdir()] == ["T-2"]


def test_a_fault_leaves_the_old_record_as_it_was(tmp_path: Path) -> None:
    path = calculation(tmp_path, "a.yaml", "T-1")
    invoke("run", str(path), "--output", str(tmp_path / "out"))
    before = (tmp_path / "out/T-1/record.md").read_bytes()
    calculation(tmp_path, "a.yaml", "T-1", GOOD.replace("74 degC", "74 C"))
    assert invoke("run", str(path), "--output", str(tmp_path / "out")).exit_code == 2
    assert (tmp_path / "out/T-1/record.md").read_bytes() == before


def test_one_number_in_two_files_is_a_fault_case_ignored(tmp_path: Path) -> None:
    calculation(tmp_path, "a.yaml", "T-1")
    calculation(tmp_path, "b.yaml", "t-1")
    result = invoke("run", str(tmp_path), "--output", str(tmp_path / "out"))
    assert result.exit_code == 2
    assert "number-in-two-files" in result.stderr


def test_a_folder_gives_its_own_files_except_book_and_signoffs(tmp_path: Path) -> None:
    calculation(tmp_path, "a.yaml", "T-1")
    (tmp_path / "book.yaml").write_text("book: A book\noutput: records\n", encoding="utf-8")
    (tmp_path / "a.signoffs.yaml").write_text("not: a calculation\n", encoding="utf-8")
    inner = tmp_path / "inner"
    inner.mkdir()
    calculation(inner, "b.yaml", "T-2")
    result = invoke("run", str(tmp_path))
    assert result.exit_code == 0
    assert [item.name for item in (tmp_path / "records").iterdir()] == ["T-1"]


def test_an_empty_folder_and_a_missing_file_are_told(tmp_path: Path) -> None:
    assert invoke("run", str(tmp_path)).exit_code == 2
    result = invoke("run", str(tmp_path / "missing.yaml"))
    assert result.exit_code == 2
    assert "file-not-found" in result.stderr


@pytest.mark.parametrize(
    "command", ["run", "watch", "recall", "audit", "register", "sign", "issue", "revise"]
)
def test_an_empty_name_is_not_the_working_folder(command: str) -> None:
    result = invoke(command, "")
    assert result.exit_code == 2 and "the name is empty" in result.output


def test_an_output_that_cannot_be_written_is_a_fault(tmp_path: Path) -> None:
    path = calculation(tmp_path, "a.yaml", "T-1")
    blocked = tmp_path / "out"
    blocked.write_text("a file, not a folder", encoding="utf-8")
    result = CliRunner().invoke(main, ["run", str(path), "--output", str(tmp_path / "out" / "deep")])
    assert result.exit_code == 2
    assert "output-not-writable" in result.stderr
    assert blocked.read_text(encoding="utf-8") == "a file, not a folder"


@pytest.mark.parametrize("situation", Library().names("situations"))
def test_new_prints_a_file_that_runs_and_waits_for_its_sources(situation: str, tmp_path: Path) -> None:
    text = invoke("new", situation)
    assert text.exit_code == 0
    path = tmp_path / "first.yaml"
    path.write_text(text.stdout, encoding="utf-8")
    result = invoke("run", str(path), "--output", str(tmp_path / "out"))
    assert result.exit_code == 0, result.stderr
    data = json.loads((tmp_path / "out/NEW-1/results.json").read_text(encoding="utf-8"))
    assert any(item["kind"] == "source" for item in data["open_items"])


def test_new_names_the_nearest_situation() -> None:
    result = invoke("new", "inside-tubes")
    assert result.exit_code == 2
    assert "nearest: inside-tube" in result.stderr


def test_library_lists_and_shows_cards() -> None:
    listing = invoke("library", "list").stdout
    assert "gnielinski-1976" in listing and "stainless-316-kaschnitz-2017" in listing
    page = invoke("library", "show", "gnielinski-1976").stdout
    assert "2300 ≤ Re ≤ 5000000" in page and "## Check points" in page
    assert "## Choice of method" in invoke("library", "show", "inside-tube").stdout
    assert invoke("library", "show", "gnielinsky-1976").exit_code == 2
    assert "unit-missing" in invoke("library", "faults").stdout
    assert "Water" in invoke("library", "fluids").stdout


def test_verify_writes_every_check_point_with_its_standing(tmp_path: Path) -> None:
    result = invoke("verify", "--output", str(tmp_path))
    assert result.exit_code == 0
    text = (tmp_path / "verification.md").read_text(encoding="utf-8")
    assert "| independent library |" in text
    assert "Not met: 0." in text


def test_schema_is_json_of_the_readers_own_description() -> None:
    schema = json.loads(invoke("schema").stdout)
    assert set(schema["required"]) >= {"calculation", "purpose", "geometry", "resistances", "report"}


def test_help_teaches_and_lists_every_command() -> None:
    text = invoke("--help").stdout
    for name in ("run", "new", "library", "verify", "schema"):
        assert name in text


@pytest.mark.parametrize("name", ["audit", "verify", "compare", "recall", "run"])
def test_an_interrupt_ends_every_command_with_its_own_exit_code(
    name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupted(**_: object) -> None:
        raise KeyboardInterrupt

    command = main.get_command(click.Context(main), name)
    assert command is not None
    monkeypatch.setattr(command, "callback", interrupted)
    words = [] if name == "verify" else [str(Path(__file__))]
    words += ["--card", "gnielinski-1976"] if name == "recall" else []
    finished = CliRunner().invoke(main, [name, *words])
    assert (finished.exit_code, finished.stderr) == (130, "interrupted\n")
