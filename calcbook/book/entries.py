"""The calculations of a book with their life: what the register lists and the audit looks into."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from calcbook.book.finding import Found
from calcbook.book.mistakes import PROCESS_ENDED, mistake_words
from calcbook.book.pool import pool_map
from calcbook.book.running import PARALLEL_FROM, conclusion
from calcbook.faults import Fault, Faults
from calcbook.interface import NotConverged, solve_file
from calcbook.revisions.lifecycle import Lifecycle, changes_of, life_from, lifecycle_of


@dataclass(frozen=True, slots=True)
class Link:
    """A given that is taken from another calculation's result, and how that stands."""

    symbol: str
    calculation: str
    result: str
    state: str


@dataclass(frozen=True, slots=True)
class Entry:
    """One calculation of a book, solved anew; ``record`` and ``results`` are the texts it gives now."""

    found: Found
    number: str = ""
    title: str = ""
    revision: str = ""
    u_service: str = ""
    basis: str = ""
    lifecycle: Lifecycle | None = None
    links: tuple[Link, ...] = ()
    cards: tuple[str, ...] = ()
    policy: str = ""
    record: str = ""
    results: str = ""
    faults: tuple[Fault, ...] = ()
    not_converged: str = ""
    mistake: str = ""


def read_entries(files: Sequence[Found], jobs: int) -> list[Entry]:
    """Every file of a book, in order, over several processes where there are many."""
    return list(pool_map(read_entry, files, jobs if len(files) >= PARALLEL_FROM else 1, _lost))


def _lost(found: Found) -> Entry:
    return Entry(found, mistake=PROCESS_ENDED)


def read_entry(found: Found) -> Entry:
    """One calculation as an entry; a mistake of calcbook itself is this entry's alone."""
    try:
        return _solved_entry(found)
    except Exception as error:
        return Entry(found, mistake=mistake_words(error))


def _solved_entry(found: Found) -> Entry:
    """One calculation: solved anew, with its life and the texts of record and results file."""
    from calcbook.record import digest_of, markdown, record_blocks, results_text, software_of

    try:
        solved = solve_file(found.path, found.name)
        lifecycle = lifecycle_of(found.path, solved, found.output)
        changes = changes_of(found.path, solved, found.output, lifecycle)
    except Faults as faults:
        return Entry(found, faults=faults.faults)
    except NotConverged as error:
        return Entry(found, not_converged=str(error))
    calculation = solved.chain.calculation
    digest = digest_of(solved)
    software = software_of(digest)
    life = life_from(lifecycle, calculation.settings, changes)
    links = tuple(
        Link(given.symbol, given.link.calculation, given.link.result, given.link.state)
        for given in calculation.givens.values()
        if given.link is not None
    )
    return Entry(
        found,
        calculation.number,
        calculation.title,
        calculation.revision,
        conclusion(solved, "U_service"),
        solved.chain.surfaces[solved.chain.basis].name,
        lifecycle,
        links,
        tuple(solved.cards),
        calculation.settings.open_items,
        markdown(record_blocks(solved, digest, software, life)),
        results_text(solved, digest, software),
    )
