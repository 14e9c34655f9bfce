"""Two sides by their texts: which output folder is theirs, and what NEW alone is compared with."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from calcbook.faults import Fault, Faults, Place
from calcbook.revisions.comparing import Comparison, compare
from calcbook.revisions.seals import issued_copies
from calcbook.revisions.sides import OUTPUT, Side, load_issued, load_side, output_of


def compare_texts(
    texts: Sequence[str], folder: Path, output: Path | None, results: Sequence[str]
) -> tuple[Comparison, Path]:
    """Compare two sides, or one side with its last issued revision; also the output folder that was used.

    Raises ``Faults`` (nothing-issued where there is no revision to compare with) and ``NotConverged``.
    """
    where = output_folder(texts, folder, output)
    new = load_side(texts[-1], folder, where)
    old = load_side(texts[0], folder, where) if len(texts) == 2 else last_issued(new, where)
    return compare(old, new, results), where


def last_issued(new: Side, output: Path) -> Side:
    """The last issued revision before a side's own; the issued copy of its own revision where that is the first.

    Raises ``Faults``: nothing-issued.
    """
    number = new.calculation.number
    copies = issued_copies(output, number)
    own = next((copy for copy in copies if copy.revision.casefold() == new.revision.casefold()), None)
    before = [copy for copy in copies if copy.revision == own.supersedes] if own is not None else list(copies)
    chosen = before[-1] if before else own
    if chosen is None:
        raise Faults(
            [
                Fault(
                    "nothing-issued",
                    Place(new.file_name),
                    f"no revision of {number} is issued here",
                    number,
                    "two sides: an old one first",
                )
            ]
        )
    return load_issued(number, chosen.revision, output)


def output_folder(texts: Sequence[str], folder: Path, output: Path | None) -> Path:
    """The output folder: the one given, else that of the book of a side that is a file, else `output`."""
    if output is not None:
        return output
    for text in reversed(texts):
        path = folder / (text.split(":", 2)[-1] if text.startswith("git:") else text)
        if path.parent.is_dir() and (path.is_file() or text.startswith("git:")):
            return output_of(path, None)
    return folder / OUTPUT
