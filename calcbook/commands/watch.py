"""``calcbook watch``: records kept current while their files are worked on."""

from __future__ import annotations

from pathlib import Path

import click

from calcbook.book import Outcome
from calcbook.commands.options import NamedPath, output_option
from calcbook.commands.run import COLUMNS, cells, tell_failure
from calcbook.faults import Faults


@click.command("watch", short_help="Calculate anew whenever a file is saved, until Ctrl-C.")
@click.argument("paths", nargs=-1, required=True, type=NamedPath(), metavar="FILE_OR_FOLDER...")
@output_option()
def command(paths: tuple[Path, ...], output: Path | None) -> None:
    """Calculate every file (a folder: its *.yaml), then keep running: when a file is saved, its record is
    written anew, as when book.yaml, a card of the book, a table file or a calculation that it takes from
    changes.

    Faults are told, and the old record stays. Ctrl-C ends it, with exit code 0.
    """
    from calcbook.book.watching import Watch

    click.echo("\t".join(COLUMNS))
    try:
        Watch(paths, output, _tell, _tell_fault).run()
    except KeyboardInterrupt:
        click.echo("no longer watching", err=True)


def _tell(outcome: Outcome) -> None:
    tell_failure(outcome)
    if outcome.is_written:
        click.echo("\t".join(cells(outcome)))


def _tell_fault(faults: Faults) -> None:
    click.echo(str(faults), err=True)
