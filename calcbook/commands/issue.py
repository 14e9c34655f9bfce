"""``calcbook issue``: freeze a calculation under its revision."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from calcbook.commands.options import NamedPath, output_option
from calcbook.faults import Collector, Faults, Place

FAULT, NOT_CONVERGED = 2, 3


@click.command("issue", short_help="Freeze a calculation under its revision, with a seal.")
@click.argument("file", type=NamedPath(dir_okay=False), metavar="FILE")
@click.option("--preliminary", is_flag=True, help="Issue with open items; the record says so on top.")
@click.option("--date", metavar="YYYY-MM-DD", help="Date of the issue; today without it.")
@output_option()
def command(file: Path, preliminary: bool, date: str | None, output: Path | None) -> None:
    """Freeze file, settings, house cards, record, results and sign-offs under issued/REVISION, with a seal.

    A final issue needs a valid sign-off of every role and no open item. It supersedes the issue before; a
    revision is never issued twice.
    """
    from calcbook.book import find_calculations
    from calcbook.interface import NotConverged
    from calcbook.revisions.issuing import issue
    from calcbook.revisions.signing import open_work, parsed_date

    try:
        collector = Collector()
        found = find_calculations([file], output, collector)[0]
        work = open_work(found.path, found.name, found.output)
        copy = issue(work, parsed_date(date, Place(found.name)), preliminary)
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(FAULT)
    except NotConverged as error:
        click.echo(f"{file.as_posix()}: not-converged: {error}; nothing is issued", err=True)
        sys.exit(NOT_CONVERGED)
    except OSError as error:
        click.echo(f"{file.as_posix()}: output-not-writable: {error.strerror or error}", err=True)
        sys.exit(FAULT)
    supersedes = f", supersedes revision {copy.supersedes}" if copy.supersedes else ""
    click.echo(f"{copy.kind} issue: {copy.folder.as_posix()}{supersedes}")
