"""Run calculations: each to its record and results file, faults of all of them told together."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from calcbook.book.finding import Found
from calcbook.book.mistakes import PROCESS_ENDED, mistake_words
from calcbook.book.pool import pool_map
from calcbook.chain.outcome import Solved
from calcbook.faults import Fault, Faults, Place
from calcbook.files import write_together
from calcbook.interface import NotConverged, Search, solve_file
from calcbook.uncertainty.flips import distances_to_flip

RECORD, RESULTS = "record.md", "results.json"
PARALLEL_FROM = 8
CONCLUSION_DIGITS = 3


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of one file: written, or its faults, or the case that did not converge.

    ``mistake`` says in words what went wrong in calcbook itself.
    """

    name: str
    number: str = ""
    revision: str = ""
    u_clean: str = ""
    u_service: str = ""
    open_items: int = 0
    faults: tuple[Fault, ...] = ()
    not_converged: str = ""
    mistake: str = ""

    @property
    def is_written(self) -> bool:
        return not (self.faults or self.not_converged or self.mistake)


def run_all(files: Sequence[Found], jobs: int, tell: Callable[[Outcome], None]) -> list[Outcome]:
    """Run files in order, over ``jobs`` processes where there are many; ``tell`` is called as each ends.

    Two calculations with one number are a fault of the later file, and it is not written.
    """
    taken: dict[str, str] = {}
    outcomes = []
    for solved in _solved(files, jobs):
        outcome = solved if isinstance(solved, Outcome) else written(solved, taken)
        outcomes.append(outcome)
        tell(outcome)
    return outcomes


@dataclass(frozen=True, slots=True)
class Texts:
    """The texts of a solved calculation, as they come back from a worker."""

    found: Found
    outcome: Outcome
    record: str
    results: str


def _solved(files: Sequence[Found], jobs: int) -> Iterator[Outcome | Texts]:
    yield from pool_map(solved_texts, files, jobs if len(files) >= PARALLEL_FROM else 1, _lost)


def _lost(found: Found) -> Outcome | Texts:
    return Outcome(found.name, mistake=PROCESS_ENDED)


def solved_texts(found: Found, search: Search = distances_to_flip) -> Outcome | Texts:
    """Solve one file and make its texts; nothing is written yet. ``search`` gives its distances to flip.

    A mistake of calcbook itself is this file's outcome, so that the others of its book are written.
    """
    try:
        return texts_of(found, solve_file(found.path, found.name, search=None), search)
    except Faults as faults:
        return Outcome(found.name, faults=faults.faults)
    except NotConverged as error:
        return Outcome(found.name, not_converged=str(error))
    except Exception as error:
        return Outcome(found.name, mistake=mistake_words(error))


def texts_of(found: Found, solved: Solved, search: Search) -> Texts:
    """Record and results of a solved calculation, from one digest and one list of versions.

    ``search`` is asked last, as another process may be at it meanwhile.

    Raises ``Faults`` when the sign-offs beside the file or an issued copy cannot be read.
    """
    from calcbook.record import digest_of, markdown, record_blocks, results_text, software_of
    from calcbook.revisions.lifecycle import life_of

    digest = digest_of(solved)
    software = software_of(digest)
    life = life_of(found.path, solved, found.output)
    calculation = solved.chain.calculation
    outcome = Outcome(
        found.name,
        calculation.number,
        calculation.revision,
        conclusion(solved, "U_clean"),
        conclusion(solved, "U_service"),
        len(solved.open_items),
    )
    solved = replace(solved, flips=search(solved))
    record = markdown(record_blocks(solved, digest, software, life))
    return Texts(found, outcome, record, results_text(solved, digest, software))


def conclusion(solved: Solved, name: str) -> str:
    """A result as a conclusion prints it: three digits, in the unit of the report."""
    from calcbook.record.numbers import in_report_unit

    result = solved.base.results[name]
    return in_report_unit(result.value, result.kind, solved.chain.calculation.report, CONCLUSION_DIGITS)


def _file_of(error: OSError) -> str:
    """Which of both files cannot be written; empty for what stands in their way."""
    name = Path(str(error.filename or "")).name
    return name if name in (RECORD, RESULTS) else ""


def written(texts: Texts, taken: dict[str, str]) -> Outcome:
    """Write the record and the results of one calculation, unless its number is taken."""
    number = texts.outcome.number
    first = taken.setdefault(number.casefold(), texts.found.name)
    place = Place(texts.found.name)
    if first != texts.found.name:
        fault = Fault(
            "number-in-two-files",
            place,
            f"the number {number} stands in two files",
            found=first,
            expected="each number once in a book",
        )
        return Outcome(texts.found.name, faults=(fault,))
    folder = texts.found.output / number
    try:
        write_together({folder / RECORD: texts.record, folder / RESULTS: texts.results})
    except OSError as error:
        fault = Fault(
            "output-not-writable",
            place,
            f"the record of {number} cannot be written",
            found=": ".join(text for text in (error.strerror, _file_of(error)) if text),
            expected="a folder, and files in it, that can be written",
        )
        return Outcome(texts.found.name, faults=(fault,))
    return texts.outcome
