"""``calcbook sign``: take one step of a sign-off."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from calcbook.commands.options import NamedPath, output_option
from calcbook.faults import Collector, Faults, Place

FAULT, NOT_CONVERGED = 2, 3


@click.command("sign", short_help="Sign a calculation as prepared, checked or approved.")
@click.argument("file", type=NamedPath(dir_okay=False), metavar="FILE")
@click.option("--role", metavar="ROLE", help="prepared, checked, approved: a role of book.yaml.")
@click.option("--person", required=True, metavar="ID", help="Id of a person of book.yaml.")
@click.option("--date", metavar="YYYY-MM-DD", help="Date of the sign-off; today without it.")
@click.option("--blind", is_flag=True, help="Store hand values for h and U before the form is written.")
@click.option(
    "--void", "because", metavar="REASON", help="Declare the calculation void, in place of signing it."
)
@output_option()
def command(
    file: Path,
    role: str | None,
    person: str,
    date: str | None,
    blind: bool,
    because: str | None,
    output: Path | None,
) -> None:
    """Sign a calculation: the preparer first, then the checker, then who approves.

    A checker's first call writes a form beside the file; fill it in and give the same command again: it goes
    into the sign-offs, and the record is written anew. A sign-off is bound to what was calculated. Any change
    of the file's meaning, of a card or of a displayed digit voids it; comments and layout do not.
    """
    from calcbook.book import find_calculations
    from calcbook.interface import NotConverged
    from calcbook.revisions.signing import declare_void, open_work, parsed_date, sign

    if (role is None) == (because is None):
        raise click.UsageError("Either --role or --void is wanted.")
    try:
        collector = Collector()
        found = find_calculations([file], output, collector)[0]
        work = open_work(found.path, found.name, found.output)
        day = parsed_date(date, Place(found.name))
        step = (
            declare_void(work, person, day, because)
            if because is not None
            else sign(work, role or "", person, day, blind)
        )
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(FAULT)
    except NotConverged as error:
        click.echo(f"{file.as_posix()}: not-converged: {error}; nothing is signed", err=True)
        sys.exit(NOT_CONVERGED)
    except OSError as error:
        click.echo(f"{file.as_posix()}: output-not-writable: {error.strerror or error}", err=True)
        sys.exit(FAULT)
    again = "; fill it in and give the command again" if step.done == "form written" else ""
    click.echo(f"{step.done}: {step.path.as_posix()}{again}")
