"""The record: every section in its order."""

from __future__ import annotations

from collections.abc import Callable

from calcbook.chain.outcome import Solved
from calcbook.record.blocks import Block
from calcbook.record.digest import Digest, digest_of
from calcbook.record.life import Life
from calcbook.record.markdown import markdown
from calcbook.record.page import Page
from calcbook.record.sections.cases import cases, sensitivity
from calcbook.record.sections.chain import chain
from calcbook.record.sections.circuit import circuit
from calcbook.record.sections.closing import closing_line, references, revision_history, sign_off
from calcbook.record.sections.duty import two_ways
from calcbook.record.sections.flips import flips
from calcbook.record.sections.head import brief, changes, purpose, title_block
from calcbook.record.sections.inputs import assumptions, givens
from calcbook.record.sections.review import cautions, review
from calcbook.record.sections.survey import survey
from calcbook.record.sections.sweep import sweep
from calcbook.record.sections.validity import cross_check, validity
from calcbook.record.software import Software, software_of

SECTIONS: tuple[Callable[[Page], list[Block]], ...] = (
    title_block,
    brief,
    changes,
    purpose,
    givens,
    assumptions,
    circuit,
    chain,
    validity,
    cross_check,
    two_ways,
    sensitivity,
    sweep,
    flips,
    cases,
    survey,
    review,
    cautions,
    references,
    sign_off,
    revision_history,
    closing_line,
)


def record_blocks(
    solved: Solved, digest: Digest, software: Software | None = None, life: Life | None = None
) -> tuple[Block, ...]:
    """The blocks of a record; without ``software`` that of this installation, without ``life`` not signed."""
    page = Page(solved, digest, software or software_of(digest), life or Life())
    return tuple(block for section in SECTIONS for block in section(page))


def record_text(solved: Solved, life: Life | None = None) -> str:
    """The Markdown text of a record, with the life of the calculation where it is known."""
    return markdown(record_blocks(solved, digest_of(solved), None, life))
