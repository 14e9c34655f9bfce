"""Files are put in place whole, with the permissions of those that they replace; a read-only one stays."""

from __future__ import annotations

import stat
from pathlib import Path

import pytest

from calcbook.files import write_together, write_whole


def mode(path: Path) -> int:
    return stat.S_IMODE(path.stat().st_mode)


def test_permissions_stay_as_they_were(tmp_path: Path) -> None:
    kept, new = tmp_path / "kept.yaml", tmp_path / "new.yaml"
    kept.write_text("old", encoding="utf-8")
    kept.chmod(0o600)
    write_together({kept: "one", new: "two"})
    assert (kept.read_text(encoding="utf-8"), mode(kept)) == ("one", 0o600)
    assert (new.read_text(encoding="utf-8"), mode(new)) == ("two", 0o644)


def test_a_read_only_file_is_not_replaced_nor_those_with_it(tmp_path: Path) -> None:
    """Also for an administrator, whom the system lets write everything."""
    closed, other = tmp_path / "closed.yaml", tmp_path / "other.yaml"
    for path in (closed, other):
        path.write_text("old", encoding="utf-8")
    closed.chmod(0o444)
    with pytest.raises(PermissionError):
        write_together({other: "new", closed: "new"})
    with pytest.raises(PermissionError):
        write_whole(closed, "new")
    assert [path.read_text(encoding="utf-8") for path in (closed, other)] == ["old", "old"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["closed.yaml", "other.yaml"]
