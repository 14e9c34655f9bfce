"""``calcbook new``: a commented calculation file to start from."""

from __future__ import annotations

import sys

import click


@click.command("new", short_help="Print a commented calculation file for a situation.")
@click.argument("situation")
@click.option(
    "--shape", type=click.Choice(["tube", "plane", "sphere"]), help="Geometry; else the situation's first."
)
def command(situation: str, shape: str | None) -> None:
    """Print a calculation file whose film is of SITUATION (see `calcbook library list`).

    The file runs as it is; every figure in it waits for its source, and the record says so.
    """
    from calcbook.book.starting import starting_file
    from calcbook.faults import Faults
    from calcbook.library import Library

    try:
        click.echo(starting_file(Library(), situation, shape), nl=False)
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(2)
    except ValueError as error:
        raise click.UsageError(str(error)) from None
