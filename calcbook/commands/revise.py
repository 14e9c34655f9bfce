"""``calcbook revise``: begin the next revision of a calculation in its file."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from calcbook.commands.options import NamedPath, output_option
from calcbook.faults import Collector, Faults, Place

FAULT = 2


@click.command("revise", short_help="Begin the next revision in a calculation file.")
@click.argument("file", type=NamedPath(dir_okay=False), metavar="FILE")
@click.option("--numbers", is_flag=True, help="Begin the numbers of a book with letters then numbers.")
@click.option("--date", metavar="YYYY-MM-DD", help="Date of the revision; today without it.")
@output_option()
def command(file: Path, numbers: bool, date: str | None, output: Path | None) -> None:
    """Write the next revision by the book's scheme into the file, with a line whose reason is to be written.

    Nothing else of the file changes. The reason is an open item until it is written.
    """
    from calcbook.book import find_calculations
    from calcbook.revisions.revising import revise
    from calcbook.revisions.signing import parsed_date

    try:
        collector = Collector()
        found = find_calculations([file], output, collector)[0]
        revised = revise(found.path, found.name, found.output, parsed_date(date, Place(found.name)), numbers)
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(FAULT)
    except OSError as error:
        click.echo(f"{file.as_posix()}: output-not-writable: {error.strerror or error}", err=True)
        sys.exit(FAULT)
    if not revised.was_issued:
        click.echo(f"revision {revised.was} was not issued", err=True)
    click.echo(
        f"revision {revised.was} is now {revised.now} in {found.name}; write its reason in `revisions:`"
    )
