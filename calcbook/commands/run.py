"""``calcbook run``: calculation files to records."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from pathlib import Path

import click

from calcbook.book import Found, Outcome, find_calculations, run_all
from calcbook.book.mistakes import MISTAKE_ACTION
from calcbook.commands import INTERRUPTED
from calcbook.commands.options import NamedPath, output_option
from calcbook.faults import Collector, Faults

COLUMNS = ("number", "revision", "U clean", "U service", "open items")
PROGRESS_FROM = 5
FAULT, NOT_CONVERGED, MISTAKE = 2, 3, 4


@click.command("run", short_help="Calculate files or folders and write their records.")
@click.argument("paths", nargs=-1, required=True, type=NamedPath(), metavar="FILE_OR_FOLDER...")
@output_option()
@click.option(
    "--jobs",
    type=click.IntRange(1, 256),
    default=None,
    metavar="N",
    help="Processes for a book of many calculations; else one a core.",
)
def command(paths: tuple[Path, ...], output: Path | None, jobs: int | None) -> None:
    """Calculate every file (a folder: its *.yaml) and write record.md and results.json for each.

    A file with a fault writes nothing; all its faults are told, and the other files are written. Open items
    do not stop a record: it is preliminary then, and says so. Exit codes: 0 written, 2 fault, 3 not
    converged, 4 a mistake of calcbook itself, 130 interrupted; the records written until then are whole.
    """
    collector = Collector()
    try:
        files = find_calculations(paths, output, collector)
        collector.stop_if_any()
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(FAULT)
    try:
        outcomes = _run(files, jobs or os.cpu_count() or 1)
    except KeyboardInterrupt:
        click.echo(
            "interrupted: the records written until now are whole, the others are as they were", err=True
        )
        sys.exit(INTERRUPTED)
    for outcome in outcomes:
        tell_failure(outcome)
    summary([outcome for outcome in outcomes if outcome.is_written])
    if any(outcome.mistake for outcome in outcomes):
        sys.exit(MISTAKE)
    if any(outcome.faults for outcome in outcomes):
        sys.exit(FAULT)
    if any(outcome.not_converged for outcome in outcomes):
        sys.exit(NOT_CONVERGED)


def _run(files: Sequence[Found], jobs: int) -> list[Outcome]:
    if len(files) < PROGRESS_FROM or not sys.stderr.isatty():
        return run_all(files, jobs, lambda outcome: None)
    from rich.console import Console
    from rich.progress import Progress

    with Progress(console=Console(stderr=True), transient=True) as progress:
        task = progress.add_task("calculations", total=len(files))
        return run_all(files, jobs, lambda outcome: progress.advance(task))


def tell_failure(outcome: Outcome) -> None:
    """Say on standard error why a file has no new record; nothing for one that is written."""
    if outcome.faults:
        click.echo(str(Faults(outcome.faults)), err=True)
    elif outcome.not_converged:
        click.echo(f"{outcome.name}: not-converged: {outcome.not_converged}; no record is written", err=True)
    elif outcome.mistake:
        click.echo(
            f"{outcome.name}: mistake-of-calcbook: {outcome.mistake}; no record is written; please {MISTAKE_ACTION}",
            err=True,
        )


def cells(outcome: Outcome) -> tuple[str, ...]:
    """A written calculation under ``COLUMNS``."""
    return (outcome.number, outcome.revision, outcome.u_clean, outcome.u_service, str(outcome.open_items))


def summary(outcomes: Sequence[Outcome]) -> None:
    """The table of what was written, on standard output; nothing where nothing was."""
    rows = [cells(outcome) for outcome in outcomes]
    if not rows:
        return
    if sys.stdout.isatty():
        from rich.console import Console
        from rich.table import Table
        from rich.text import Text

        table = Table(*COLUMNS, box=None)
        for row in rows:
            table.add_row(*(Text(cell) for cell in row))
        Console().print(table)
        return
    for line in (COLUMNS, *rows):
        click.echo("\t".join(line))
