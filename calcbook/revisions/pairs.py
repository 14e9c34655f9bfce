"""Two sides by their texts: which output folder is theirs, and what NEW alone is compared with."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from calcbook.calcfile.links import number_of
from calcbook.documents import read_file
from calcbook.faults import Collector, Fault, Faults, Place
from calcbook.revisions.comparing import Comparison, compare
from calcbook.revisions.lifecycle import VOID, lifecycle_of
from calcbook.revisions.sides import OUTPUT, Side, book_output, links_of, load_issued, load_side
from calcbook.revisions.signoffs import printed_name
from calcbook.seals import issued_copies


def compare_texts(
    texts: Sequence[str], folder: Path, output: Path | None, results: Sequence[str]
) -> tuple[Comparison, Path]:
    """Compare two sides, or one side with its last issued revision; also the output folder that was used.

    Raises ``Faults`` (nothing-issued where there is no revision to compare with) and ``NotConverged``.
    """
    where = output_folder(texts, folder, output)
    new = load_side(texts[-1], folder, where)
    old = load_side(texts[0], folder, where) if len(texts) == 2 else last_issued(new, where)
    path = folder / texts[-1]
    if not path.is_file():
        return compare(old, new, results), where
    return compare(old, new, results, void_signoffs(path, new, where), fed_by(path, new)), where


def void_signoffs(path: Path, side: Side, output: Path) -> tuple[str, ...]:
    """A sentence for each sign-off of a calculation file that its content has made void.

    Raises ``Faults``: sign-offs-unreadable, seal-unreadable.
    """
    settings = side.calculation.settings
    judged = lifecycle_of(path, side.solved, output).signoffs
    return tuple(
        f"{item.role} by {printed_name(settings, item.signoff.person)}, {item.signoff.date}: void."
        f" {' '.join(item.why)}"
        for item in judged
        if item.signoff is not None and item.validity == VOID
    )


def fed_by(path: Path, side: Side) -> tuple[str, ...]:
    """A sentence for each given, in the files beside a calculation file, that is taken from its results."""
    found = []
    for other in sorted(path.parent.glob("*.yaml")):
        try:
            root = read_file(other, collector=Collector()).root
        except Faults:
            continue  # told where that file is run
        for link in links_of(root):
            if link.calculation.casefold() == side.calculation.number.casefold():
                revision = f"revision {link.revision}" if link.revision else "the file as it stands"
                found.append(f"{number_of(root)}: {link.symbol} is {link.result} of {revision}")
    return tuple(found)


def last_issued(new: Side, output: Path) -> Side:
    """The last issued revision before a side's own; the issued copy of its own revision where that is the
    first.

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
            return book_output(path, None)
    return folder / OUTPUT
