"""Links between calculations: the figure that a result of another calculation gives, and how that source stands.

A link that names a revision takes the figure from that issued copy; one that names none takes it from the
source as it stands now, solved in turn, and is not pinned. May import: ``calcfile``, ``documents``,
``faults``, ``seals``. Must never: write, or solve by itself (the solver is handed in).
"""

from __future__ import annotations

import json
import math
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

from calcbook.calcfile.links import CURRENT, Link, LinkText, number_of, surface_of
from calcbook.documents import Mapping as MappingNode
from calcbook.documents import Scalar, read_file, read_text
from calcbook.faults import Collector, Fault, Faults, nearest_names
from calcbook.seals import CALCULATION, FINAL, ISSUED, RESULTS, check_seal, issued_altered, read_seal

DIGITS = 10


@dataclass(frozen=True, slots=True)
class Source:
    """What a solved source gives: revision, digest, results by name (value, unit), open items, the surface of U, and the
    surface of every term by its name."""

    revision: str
    digest: str
    results: Mapping[str, tuple[float, str]]
    open_items: int
    basis: str
    surfaces: dict[str, str]


Solve = Callable[[Path], Source]


class Links:
    """Resolves the links of the calculations of one folder whose issued copies stand under ``output``."""

    def __init__(self, folder: Path, output: Path, solve: Solve):
        self.folder = folder
        self.output = output
        self.solve = solve

    def __call__(self, text: LinkText) -> Link:
        """The link behind a `from:`. Raises ``Faults``: link-source-unknown, number-in-two-files,
        link-revision-unknown, issued-altered, link-result-unknown, and the faults of a source that is solved in turn."""
        files = self._files(text.calculation)
        if text.revision:
            return self._pinned(text, files[0] if files else None)
        if len(files) > 1:
            raise _fault(
                "number-in-two-files",
                text,
                f"the number {text.calculation} stands in two files",
                ", ".join(path.name for path in files),
                "each number once in a book",
            )
        file = files[0] if files else None
        if file is None:
            known = sorted({number for number, _, _ in self._numbers()})
            raise _fault(
                "link-source-unknown",
                text,
                f"there is no calculation {text.calculation} in this folder",
                text.calculation,
                ", ".join(known),
                nearest_names(text.calculation, known),
            )
        source = self.solve(file)
        value, unit = self._result(text, source.results)
        state = "void" if _is_void(file) else "not pinned to an issued revision"
        if source.open_items and state != "void":
            state = f"preliminary, {source.open_items} open item(s), and not pinned"
        return Link(
            text.calculation,
            text.result,
            source.revision,
            source.digest,
            figure(value, unit),
            state,
            surface_of(text.result, source.basis, source.surfaces),
        )

    def _pinned(self, text: LinkText, file: Path | None) -> Link:
        folder = self.output / text.calculation / ISSUED / text.revision
        try:
            seal = read_seal(folder)
            altered = check_seal(folder)
            stated = json.loads((folder / RESULTS).read_text(encoding="utf-8"))
            results = stated["results"]
            rows = stated.get("conditions", {}).get("clean", [])
            surfaces = {row["name"]: row["surface"] for row in rows}
        except (Faults, OSError, ValueError, KeyError, TypeError):
            raise _fault(
                "link-revision-unknown",
                text,
                f"{text.calculation} has no issued revision {text.revision}",
                text.revision,
                ", ".join(self._issued(text.calculation)) or "an issued revision",
            ) from None
        if altered:
            raise Faults([issued_altered(altered, text.place, text.calculation, text.revision)])
        table = {
            name: (item["value"], item["unit"])
            for name, item in results.items()
            if isinstance(item, dict) and isinstance(item.get("value"), int | float) and item.get("unit")
        }
        value, unit = self._result(text, table)
        state = CURRENT
        if file is not None and _is_void(file):
            state = "void"
        elif seal.kind != FINAL:
            state = "preliminary"
        elif newer := self._superseding(text.calculation, text.revision):
            state = f"source moved: revision {newer} supersedes {text.revision}"
        digest = seal.digest.get("results", "")
        return Link(
            text.calculation,
            text.result,
            text.revision,
            digest,
            figure(value, unit),
            state,
            surface_of(text.result, _basis_of(folder / CALCULATION), surfaces),
        )

    def _result(self, text: LinkText, results: Mapping[str, tuple[float, str]]) -> tuple[float, str]:
        if text.result not in results:
            raise _fault(
                "link-result-unknown",
                text,
                f"{text.calculation} has no result `{text.result}`",
                text.result,
                ", ".join(results),
                nearest_names(text.result, results),
            )
        value, unit = results[text.result]
        if not math.isfinite(value):
            raise _fault(
                "link-result-unknown",
                text,
                f"the result `{text.result}` of {text.calculation} is not known",
                text.result,
                "a result with a figure",
            )
        return value, unit

    def _superseding(self, number: str, revision: str) -> str:
        """The issued revision that supersedes one, if there is any."""
        for other in self._issued(number):
            try:
                seal = read_seal(self.output / number / ISSUED / other)
            except Faults:
                continue
            if seal.supersedes == revision:
                return other
        return ""

    def _issued(self, number: str) -> list[str]:
        folder = self.output / number / ISSUED
        return sorted(path.name for path in folder.iterdir() if path.is_dir()) if folder.is_dir() else []

    def _files(self, number: str) -> list[Path]:
        """The calculation files of a number; one that cannot be read whole only where there is no other."""
        found = [(path, is_whole) for name, path, is_whole in self._numbers(number) if name == number]
        return [path for path, is_whole in found if is_whole] or [path for path, _ in found]

    def _numbers(self, wanted: str = "") -> Iterator[tuple[str, Path, bool]]:
        """The files of the folder that name ``wanted``: the number of the title block, and whether all can be read."""
        for path in sorted(self.folder.glob("*.yaml")):
            try:
                text = path.read_text(encoding="utf-8")
                faults = Collector()
                number = number_of(read_text(text, path.name, faults).root) if wanted in text else ""
            except (OSError, UnicodeDecodeError, Faults):
                continue
            if number:
                yield number, path, not faults


def figure(value: float, unit: str) -> str:
    """A result as a given writes it: ten digits and the SI unit."""
    number = f"{value:.{DIGITS}g}"
    return number if unit == "1" else f"{number} {unit}"


def _basis_of(file: Path) -> str:
    """The surface that U stands on by a calculation file; empty where that cannot be read."""
    try:
        root = read_file(file).root
    except Faults:
        return ""
    report = root.get("report") if isinstance(root, MappingNode) else None
    basis = report.get("U on") if isinstance(report, MappingNode) else None
    return basis.text if isinstance(basis, Scalar) else ""


def _is_void(file: Path) -> bool:
    """Whether the sign-offs beside a calculation file declare it void."""
    signoffs = file.with_name(f"{file.stem}.signoffs.yaml")
    if not signoffs.is_file():
        return False
    try:
        root = read_file(signoffs).root
    except Faults:
        return False
    return isinstance(root, MappingNode) and root.get("void") is not None


def _fault(
    code: str, text: LinkText, message: str, found: str, expected: str, nearest: tuple[str, ...] = ()
) -> Faults:
    return Faults([Fault(code, text.place, message, found, expected, nearest)])
