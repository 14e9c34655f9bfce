"""A mistake of calcbook's own in one calculation, in words that can be reported."""

from __future__ import annotations

import traceback
from pathlib import Path

PROCESS_ENDED = "the process that calculated it ended without an answer (killed, or out of memory)"
MISTAKE_ACTION = "report it with the calculation file; the file itself may be sound"
PACKAGE = Path(__file__).resolve().parent.parent
MOST_FRAMES = 4


def mistake_words(error: Exception) -> str:
    """The error and the innermost places of calcbook it came through, without a path of this machine."""
    frames = []
    for frame in traceback.extract_tb(error.__traceback__):
        path = Path(frame.filename)
        if path.is_relative_to(PACKAGE):
            frames.append(f"{path.relative_to(PACKAGE.parent).as_posix()}:{frame.lineno}")
    where = f" at {' < '.join(frames[: -MOST_FRAMES - 1 : -1])}" if frames else ""
    told = " ".join(str(error).split())
    return f"{type(error).__name__}{f': {told}' if told else ''}{where}"
