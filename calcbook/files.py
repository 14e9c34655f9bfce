"""Files written whole or not at all: a temporary file beside the target, flushed, then renamed over it.

May import: the standard library only.
"""

from __future__ import annotations

import contextlib
import os
import tempfile
from pathlib import Path


def write_whole(path: Path, text: str | bytes) -> None:
    """Write bytes, or UTF-8 text with LF line ends; a reader of the path sees the old file or the new one.

    Raises ``OSError`` when the folder cannot be written; the old file stays.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, name = tempfile.mkstemp(prefix=".writing-", dir=path.parent)
    temporary = Path(name)
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(text.encode("utf-8") if isinstance(text, str) else text)
            stream.flush()
            os.fsync(stream.fileno())
        temporary.chmod(0o644)
        temporary.replace(path)
    except BaseException:
        with contextlib.suppress(OSError):
            temporary.unlink()
        raise
