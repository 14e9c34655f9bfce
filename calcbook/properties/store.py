"""What the backend once answered, kept on disk so that a repeat run repeats the same numbers.

One file per fluid, backend version, pressure and phase, in the user's cache folder (``CALCBOOK_CACHE``
overrides it). A file is a line with the mark of the code that made it and a checksum, and a JSON text;
floats survive it bit for bit. A file that is damaged, of another fluid or backend version, or made by
other code (other nodes, another agreement) is not used and is replaced; a folder that cannot be written
costs time, never an answer.
"""

from __future__ import annotations

import contextlib
import functools
import hashlib
import json
import os
import re
import tempfile
from pathlib import Path
from typing import Any

FORMAT = "calcbook-properties-3"
# The files whose text decides what is kept: which temperatures are asked, how, and when a series is taken.
MAKERS = ("backed.py", "backend.py", "curves.py", "humid.py", "series.py")
DIRECT_LIMIT = 20_000  # direct answers kept per property and file: bounds the file to about 1 MB


@functools.cache
def made_by() -> str:
    """The mark of the code that makes the answers; answers of other code are stale."""
    mark = hashlib.sha256()
    for name in MAKERS:
        mark.update(Path(__file__).with_name(name).read_bytes().replace(b"\r\n", b"\n"))
    return mark.hexdigest()[:16]


def _header(text: bytes) -> bytes:
    return f"{FORMAT} {made_by()} {hashlib.sha256(text).hexdigest()}".encode()


def folder() -> Path:
    """The folder of the kept answers."""
    stated = os.environ.get("CALCBOOK_CACHE", "")
    if stated:
        return Path(stated) / "properties"
    import platformdirs

    return platformdirs.user_cache_path("calcbook", appauthor=False) / "properties"


class Store:
    """The kept answers of one key: facts, series by property and panel, direct answers by temperature.

    Every entry depends on its key alone, never on what else was asked; so entries of two processes may
    be joined in any order.
    """

    def __init__(self, key: str):
        self.key = key
        self.facts: dict[str, Any] = {}
        self.series: dict[str, dict[str, list[float] | None]] = {}
        self.direct: dict[str, dict[str, float | None]] = {}
        self._changed = False
        self._load()

    @property
    def path(self) -> Path:
        plain = re.sub(r"[^A-Za-z0-9.+]+", "_", self.key)[:80]
        return folder() / f"{plain}-{hashlib.sha256(self.key.encode()).hexdigest()[:12]}.json"

    def changed(self) -> None:
        """Say that something was added and ``save`` has work to do."""
        self._changed = True

    def save(self) -> None:
        """Write what was added, joined with what another process wrote meanwhile; whole or not at all."""
        if not self._changed:
            return
        self._changed = False
        self._load()
        text = json.dumps(
            {"key": self.key, "facts": self.facts, "series": self.series, "direct": self._bounded()},
            sort_keys=True,
            separators=(",", ":"),
            allow_nan=False,
        ).encode()
        with contextlib.suppress(OSError):
            _replace(self.path, _header(text) + b"\n" + text)

    def _bounded(self) -> dict[str, dict[str, float | None]]:
        return {name: dict(sorted(answers.items())[:DIRECT_LIMIT]) for name, answers in self.direct.items()}

    def _load(self) -> None:
        kept = _read(self.path, self.key)
        if kept is None:
            return
        self.facts = kept["facts"] | self.facts
        for name, panels in kept["series"].items():
            self.series[name] = panels | self.series.get(name, {})
        for name, answers in kept["direct"].items():
            self.direct[name] = answers | self.direct.get(name, {})


def _read(path: Path, key: str) -> dict[str, Any] | None:
    """The content of a kept file, or None where there is none that can be trusted."""
    try:
        header, _, text = path.read_bytes().partition(b"\n")
    except OSError:
        return None
    if header != _header(text):
        return None
    kept = json.loads(text)
    parts = ("facts", "series", "direct")
    if not isinstance(kept, dict) or kept.get("key") != key:
        return None
    return kept if all(isinstance(kept.get(part), dict) for part in parts) else None


def _replace(path: Path, content: bytes) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, temporary = tempfile.mkstemp(dir=path.parent, prefix=".part-")
    try:
        with os.fdopen(handle, "wb") as stream:
            stream.write(content)
            stream.flush()
        os.replace(temporary, path)
    except OSError:
        with contextlib.suppress(OSError):
            os.unlink(temporary)
        raise


_stores: dict[tuple[str, str], Store] = {}


def store(key: str) -> Store:
    """The one store of a key in this process (and of the cache folder now stated)."""
    place = (key, os.environ.get("CALCBOOK_CACHE", ""))
    if place not in _stores:
        _stores[place] = Store(key)
    return _stores[place]


def clear_memory() -> None:
    """Forget everything held in this process; the files stay."""
    _stores.clear()
