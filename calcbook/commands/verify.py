"""``calcbook verify``: run all check points here and write the software verification record."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from calcbook.commands.options import cards_option, page_folder_option

FINDINGS, FAULT = 1, 2


@click.command("verify", short_help="Run every check point on this installation.")
@page_folder_option("verification.md")
@cards_option("checked with the others")
def command(output: Path, cards: Path | None) -> None:
    """Run every check point of every card on this installation and write verification.md.

    Each figure of a card is also moved by one per cent, to see whether an outside check point misses it.
    Exit code 1 when a check point is not met.
    """
    from calcbook.book.verifying import verify
    from calcbook.files import write_whole
    from calcbook.library import Library
    from calcbook.record.markdown import markdown
    from calcbook.record.software import software_line
    from calcbook.record.verification import verification_blocks

    library = Library(cards)
    if sys.stderr.isatty():
        from rich.console import Console
        from rich.progress import Progress

        count = sum(len(library.names(kind)) for kind in ("methods", "materials", "situations"))
        with Progress(console=Console(stderr=True), transient=True) as progress:
            task = progress.add_task("cards", total=count)
            found = verify(library, lambda name: progress.advance(task))
    else:
        found = verify(library, lambda name: None)
    blocks = verification_blocks(software_line(), found.points, found.uncovered, found.trial, found.faults)
    try:
        write_whole(output / "verification.md", markdown(blocks))
    except OSError as error:
        click.echo(f"{output.as_posix()}: output-not-writable: {error.strerror or error}", err=True)
        sys.exit(FAULT)
    missed = sum(not point.holds for point in found.points)
    click.echo(
        f"check points {len(found.points)}, not met {missed}, faults of cards {len(found.faults)},"
        f" figures not covered {len(found.uncovered)}, cards on trial {len(found.trial)}"
    )
    if found.has_findings:
        for fault in found.faults:
            click.echo(fault, err=True)
        sys.exit(FINDINGS)
