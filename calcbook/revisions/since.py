"""Everything that changed since a git revision, on one page: for the comment on a pull request."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

from calcbook.calcfile import BOOK_FILE
from calcbook.chain.analysis import NotConverged
from calcbook.documents import Mapping, read_file
from calcbook.faults import Faults
from calcbook.interface import HOUSE_CARDS
from calcbook.record.blocks import Block, Bullets, Code, Heading, Paragraph
from calcbook.record.page import counted
from calcbook.revisions.comparing import Comparison, compare
from calcbook.revisions.comparison_page import comparison_blocks, comparison_data
from calcbook.revisions.git import Commit, commit_of
from calcbook.revisions.sides import Side, book_output, load_from_commit, load_side
from calcbook.seals import ISSUED

BESIDE = (".signoffs.yaml", ".form.yaml")


@dataclass(frozen=True)
class Since:
    """What became of every calculation file since a git revision; ``failed`` holds the texts of faults by
    file."""

    revision: str
    compared: tuple[Comparison, ...]
    added: tuple[Side, ...]
    removed: tuple[Side, ...]
    same: tuple[Side, ...]
    failed: tuple[tuple[str, str], ...]
    not_converged: bool = False


def compare_since(folder: Path, revision: str, results: Sequence[str], output: Path | None = None) -> Since:
    """Compare every calculation file beneath a folder that changed since a git revision.

    A file changes with its book settings, house cards and table files too. A file that moved is found by its
    number. Raises ``Faults`` of git; faults of one file stand in ``failed``, and the others are compared.
    """
    return _Search(folder, commit_of(folder, revision), results, output).found()


class _Search:
    def __init__(self, folder: Path, commit: Commit, results: Sequence[str], output: Path | None):
        self.folder = folder
        self.commit = commit
        self.results = results
        self.output = output
        self.failed: list[tuple[str, str]] = []
        self.not_converged = False

    def found(self) -> Since:
        olds: dict[str, Side] = {}
        news: dict[str, Side] = {}
        for path in self._touched():
            inside = self.commit.blob(path) is not None
            old = self._old(path) if inside else None
            new = self._new(path) if _is_calculation(self.folder / path) else None
            if old is not None:
                olds[path] = old
            if new is not None:
                news[path] = new
        return self._paired(olds, news)

    def _paired(self, olds: dict[str, Side], news: dict[str, Side]) -> Since:
        """Old and new sides of one path, else of one number."""
        moved = {side.calculation.number: path for path, side in olds.items() if path not in news}
        compared, added, same, taken = [], [], [], set()
        for path, new in news.items():
            source = path if path in olds else moved.get(new.calculation.number, "")
            if not source:
                if path not in dict(self.failed):
                    added.append(new)
                continue
            taken.add(source)
            comparison = self._compared(path, olds[source], new)
            if comparison is None:
                continue
            if comparison.is_empty:
                same.append(new)
            else:
                compared.append(comparison)
        named = dict(self.failed)
        removed = [
            side
            for path, side in olds.items()
            if path not in taken and path not in news and path not in named
        ]
        return Since(
            self.commit.asked,
            tuple(compared),
            tuple(added),
            tuple(removed),
            tuple(same),
            tuple(self.failed),
            self.not_converged,
        )

    def _compared(self, path: str, old: Side, new: Side) -> Comparison | None:
        common = [
            name for name in self.results if all(name in side.solved.base.results for side in (old, new))
        ]
        try:
            return compare(old, new, common)
        except Faults as faults:
            self.failed.append((path, str(faults)))
            return None

    def _touched(self) -> list[str]:
        """Calculation files that changed, or whose book settings, cards or table files did."""
        changed = [PurePosixPath(name) for name in self.commit.changed()]
        found = {name.as_posix() for name in changed if self._may_be_calculation(name)}
        for name in changed:
            parent = name.parent.parent if name.parent.name == HOUSE_CARDS else name.parent
            if name.name == BOOK_FILE or name.parent.name == HOUSE_CARDS or name.suffix == ".csv":
                here = self.folder / parent
                found |= {
                    (parent / path.name).as_posix()
                    for path in here.glob("*.yaml")
                    if self._may_be_calculation(parent / path.name)
                }
        return sorted(found)

    def _may_be_calculation(self, name: PurePosixPath) -> bool:
        return (
            name.suffix == ".yaml"
            and name.name != BOOK_FILE
            and not name.name.endswith(BESIDE)
            and HOUSE_CARDS not in name.parts[:-1]
            and ISSUED not in name.parts[:-1]
            and not any(part.startswith(".") for part in name.parts)
            and (_is_calculation(self.folder / name) or self._was_calculation(name))
        )

    def _was_calculation(self, name: PurePosixPath) -> bool:
        data = self.commit.blob(name.as_posix())
        return data is not None and any(line.startswith(b"calculation:") for line in data.splitlines())

    def _old(self, path: str) -> Side | None:
        try:
            return load_from_commit(self.folder, self.commit.asked, path)
        except (Faults, NotConverged) as error:
            self._fail(path, f"as it was in {self.commit.asked}:\n{error}", error)
            return None

    def _new(self, path: str) -> Side | None:
        try:
            return load_side(path, self.folder, book_output(self.folder / path, self.output))
        except (Faults, NotConverged) as error:
            self._fail(path, str(error), error)
            return None

    def _fail(self, path: str, text: str, error: Exception) -> None:
        self.not_converged |= isinstance(error, NotConverged)
        self.failed.append((path, text))


def _is_calculation(path: Path) -> bool:
    """Whether a file is a calculation, or so broken that only its reader can tell."""
    if not path.is_file():
        return False
    try:
        root = read_file(path).root
    except Faults:
        return True
    return isinstance(root, Mapping) and (
        root.get("calculation") is not None or root.get("resistances") is not None
    )


def since_blocks(since: Since) -> tuple[Block, ...]:
    """One page: the counts, what cannot be compared, then every comparison one heading lower."""
    counts = [
        counted(len(since.compared), "calculation changed", "calculations changed"),
        counted(len(since.added), "calculation is new", "calculations are new"),
        counted(len(since.removed), "calculation is gone", "calculations are gone"),
        f"{counted(len(since.same), 'file', 'files')} touched without any effect",
    ]
    blocks: list[Block] = [Heading(1, f"Calculations changed since {since.revision}"), Bullets(tuple(counts))]
    blocks += [Paragraph(f"New: {side.label}, {side.calculation.title}.") for side in since.added]
    blocks += [Paragraph(f"Gone: {side.label}, {side.calculation.title}.") for side in since.removed]
    if since.failed:
        blocks.append(Heading(2, "Not compared"))
    for path, text in since.failed:
        blocks += [Paragraph(f"{path} has faults:"), Code(text)]
    for comparison in since.compared:
        blocks += [_lower(block) for block in comparison_blocks(comparison)]
    return tuple(blocks)


def _lower(block: Block) -> Block:
    return Heading(min(block.level + 1, 6), block.text) if isinstance(block, Heading) else block


def since_data(since: Since) -> dict[str, object]:
    """The same for programs."""
    return {
        "since": since.revision,
        "comparisons": [comparison_data(comparison) for comparison in since.compared],
        "added": [_named(side) for side in since.added],
        "removed": [_named(side) for side in since.removed],
        "unchanged": [_named(side) for side in since.same],
        "failed": [{"file": path, "faults": text} for path, text in since.failed],
    }


def _named(side: Side) -> dict[str, str]:
    return {"number": side.calculation.number, "revision": side.revision, "title": side.calculation.title}
