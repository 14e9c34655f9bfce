"""What a record shows of a calculation's life. Types only: who fills them knows the files."""

from __future__ import annotations

from dataclasses import dataclass

from calcbook.record.blocks import Block


@dataclass(frozen=True, slots=True)
class SignOffLine:
    """One role of the sign-off block.

    ``person`` is the name with its id, ``way`` how a checker checked. ``validity`` is valid, void or missing;
    ``note`` says what changed since, or what else a reader must know.
    """

    role: str
    person: str
    date: str
    way: str
    validity: str
    note: str


@dataclass(frozen=True, slots=True)
class Life:
    """State and sign-offs of a calculation, beside what was calculated.

    ``issued`` says the kind, revision and date of the issue that this content has, or is empty. ``notice``
    holds the sentences that must stand on top of the record: a preliminary issue, a calculation that is void.
    ``changes`` are the blocks of the short comparison with the last issued revision. ``answers`` are the
    words of the checkers whose sign-off is valid, by the number of the question in the review; ``remarks`` are theirs
    to what the runner decided, by its id, where they wrote more than that they acknowledge it.
    """

    state: str = "in preparation"
    signoffs: tuple[SignOffLine, ...] = ()
    issued: str = ""
    notice: tuple[str, ...] = ()
    changes: tuple[Block, ...] = ()
    answers: tuple[tuple[int, str], ...] = ()
    remarks: tuple[tuple[str, str], ...] = ()

    def line(self, role: str) -> SignOffLine | None:
        """The sign-off line of a role, if there is one."""
        return next((line for line in self.signoffs if line.role == role), None)
