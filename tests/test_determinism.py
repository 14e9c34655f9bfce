"""Same input, same bytes: whatever the hash seed, time zone, language, working folder or state of the cache."""

from __future__ import annotations

import os
import shutil
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]


def run_book(
    output: Path, cwd: Path, cache: Path, calculations: str = "calcs", **environment: str
) -> dict[str, bytes]:
    kept = {
        name: value
        for name, value in os.environ.items()
        if name in ("PATH", "HOME", "SYSTEMROOT", "PYTHONPATH")
    }
    before = environment.pop("PYTHONPATH", "")
    path = os.pathsep.join(filter(None, [before, str(ROOT), kept.get("PYTHONPATH", "")]))
    done = subprocess.run(
        [sys.executable, "-m", "calcbook", "run", str(ROOT / calculations), "--output", str(output)],
        cwd=cwd,
        env={**kept, "PYTHONPATH": path, "CALCBOOK_CACHE": str(cache), **environment},
        capture_output=True,
        text=True,
        encoding="utf-8",
        check=False,
    )
    assert done.returncode == 0, done.stderr
    files = sorted(path for path in output.rglob("*") if path.is_file())
    return {path.relative_to(output).as_posix(): path.read_bytes() for path in files}


@dataclass(frozen=True)
class Cold:
    """The example book run with an empty cache, and what it left in the cache."""

    files: dict[str, bytes]
    kept: dict[str, bytes]
    cache: Path

    def cache_in(self, folder: Path) -> Path:
        """A copy of the cache as the cold run left it."""
        return shutil.copytree(self.cache, folder / "cache")


@pytest.fixture(scope="module")
def cold(tmp_path_factory: pytest.TempPathFactory) -> Cold:
    folder = tmp_path_factory.mktemp("cold")
    cache = folder / "cache"
    files = run_book(folder / "out", folder, cache, PYTHONHASHSEED="0", TZ="UTC", LANG="C", LC_ALL="C")
    assert len(files) >= 12
    return Cold(files, contents(cache), cache)


def contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.rglob("*.json")}


def refuse(folder: Path, package: str) -> None:
    """Put a package that refuses to be imported where it stands in front of the installed one."""
    (folder / package).mkdir()
    (folder / package / "__init__.py").write_text("raise ImportError('asked for')\n", encoding="utf-8")


def test_a_repeat_run_gives_the_same_bytes_and_needs_no_backend(cold: Cold, tmp_path: Path) -> None:
    elsewhere = tmp_path / "a folder with blanks"
    elsewhere.mkdir()
    refuse(tmp_path, "CoolProp")
    cache = cold.cache_in(tmp_path)
    warm = run_book(
        tmp_path / "out",
        elsewhere,
        cache,
        PYTHONHASHSEED="4711",
        TZ="Asia/Tokyo",
        LANG="de_DE.UTF-8",
        COLUMNS="40",
        PYTHONPATH=str(tmp_path),
    )
    assert warm == cold.files
    assert contents(cache) == cold.kept


def test_a_repeat_run_of_a_file_in_si_units_needs_no_unit_library(cold: Cold, tmp_path: Path) -> None:
    refuse(tmp_path, "pint")
    calculation, cache = "calcs/wc-101.yaml", cold.cache_in(tmp_path)
    warm = run_book(tmp_path / "out", tmp_path, cache, calculation, PYTHONPATH=str(tmp_path))
    assert set(warm) == {"WC-101/record.md", "WC-101/results.json"}
    assert warm == {name: cold.files[name] for name in warm}


def test_a_damaged_foreign_or_stale_cache_gives_the_same_bytes_and_is_made_anew(
    cold: Cold, tmp_path: Path
) -> None:
    cache = cold.cache_in(tmp_path)
    files = sorted(cache.rglob("*.json"))
    assert len(files) > 20
    whole = [path.read_bytes() for path in files]
    for number, path in enumerate(files):
        head, _, text = whole[number].partition(b"\n")
        kind, mark, checksum = head.split(b" ")
        path.write_bytes(
            (
                whole[number][: len(whole[number]) // 2],  # damaged
                whole[number - 1],  # foreign: of another key
                b" ".join((kind, mark[::-1], checksum)) + b"\n" + text,  # stale: of other code
                b" ".join((b"calcbook-properties-1", checksum)) + b"\n" + text,  # stale: of another format
            )[number % 4]
        )
    assert contents(cache) != cold.kept
    assert run_book(tmp_path / "out", tmp_path, cache) == cold.files
    assert contents(cache) == cold.kept


def test_records_name_no_machine(cold: Cold) -> None:
    for name, content in cold.files.items():
        assert str(cold.cache.parent).encode() not in content, name
        assert str(ROOT).encode() not in content, name
