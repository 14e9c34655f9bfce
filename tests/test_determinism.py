"""Same input, same bytes: whatever the hash seed, time zone, language, working folder or state of the cache."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]


def run_book(output: Path, cwd: Path, cache: Path, **environment: str) -> dict[str, bytes]:
    kept = {
        name: value
        for name, value in os.environ.items()
        if name in ("PATH", "HOME", "SYSTEMROOT", "PYTHONPATH")
    }
    path = os.pathsep.join(filter(None, [str(ROOT), kept.get("PYTHONPATH", "")]))
    done = subprocess.run(
        [sys.executable, "-m", "calcbook", "run", str(ROOT / "calcs"), "--output", str(output)],
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


def test_two_runs_of_the_example_book_give_the_same_bytes(tmp_path: Path) -> None:
    elsewhere = tmp_path / "a folder with blanks"
    elsewhere.mkdir()
    cache = tmp_path / "cache"
    cold = run_book(tmp_path / "one", tmp_path, cache, PYTHONHASHSEED="0", TZ="UTC", LANG="C", LC_ALL="C")
    warm = run_book(
        tmp_path / "two",
        elsewhere,
        cache,
        PYTHONHASHSEED="4711",
        TZ="Asia/Tokyo",
        LANG="de_DE.UTF-8",
        COLUMNS="40",
    )
    assert len(cold) >= 12
    assert cold == warm


def test_records_name_no_machine(tmp_path: Path) -> None:
    files = run_book(tmp_path / "out", tmp_path, tmp_path / "cache", PYTHONHASHSEED="1")
    for name, content in files.items():
        assert str(tmp_path).encode() not in content, name
        assert str(ROOT).encode() not in content, name
