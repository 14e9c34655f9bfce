"""Files written whole or not at all: a temporary file beside the target, flushed, then renamed over it.

May import: the standard library only.
"""

from __future__ import annotations

import contextlib
import errno
import os
import stat
import tempfile
from collections.abc import Mapping
from pathlib import Path

USUAL_MODE = 0o644
WRITABLE = stat.S_IWUSR | stat.S_IWGRP | stat.S_IWOTH


def write_whole(path: Path, text: str | bytes) -> None:
    """Write bytes, or UTF-8 text with LF line ends; a reader of the path sees the old file or the new one.

    Raises ``OSError`` when the folder cannot be written; the old file stays.
    """
    write_together({path: text})


def write_together(texts: Mapping[Path, str | bytes]) -> None:
    """Write several files as ``write_whole`` does, none of them put in its place before all are written.

    A file that was there keeps its permissions; one that nobody may write is not replaced.
    Raises ``OSError`` where one cannot be written or stands where no file can be; all old files stay.
    """
    temporaries: dict[Path, Path] = {}
    try:
        for path, text in texts.items():
            path.parent.mkdir(parents=True, exist_ok=True)
            if path.is_dir():
                raise IsADirectoryError(errno.EISDIR, os.strerror(errno.EISDIR), str(path))
            temporaries[path] = _temporary(path.parent, text, _mode(path))
        for path, temporary in temporaries.items():
            temporary.replace(path)
    except BaseException:
        for temporary in temporaries.values():
            with contextlib.suppress(OSError):
                temporary.unlink()
        raise


def _mode(path: Path) -> int:
    """The permissions that a file is to have: those of the one in its place. Raises ``OSError`` for a read-only one."""
    try:
        mode = stat.S_IMODE(path.stat().st_mode)
    except FileNotFoundError:
        return USUAL_MODE
    # Asked of the file and not of the system, which lets an administrator write everything.
    if not mode & WRITABLE:
        raise PermissionError(errno.EACCES, os.strerror(errno.EACCES), str(path))
    return mode


def _temporary(folder: Path, text: str | bytes, mode: int) -> Path:
    """A file of its own in a folder that holds a text, down to the disk."""
    handle, name = tempfile.mkstemp(prefix=".writing-", dir=folder)
    temporary = Path(name)
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(text.encode("utf-8") if isinstance(text, str) else text)
            stream.flush()
            os.fsync(stream.fileno())
        temporary.chmod(mode)
    except BaseException:
        with contextlib.suppress(OSError):
            temporary.unlink()
        raise
    return temporary
