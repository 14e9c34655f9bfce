"""``calcbook run``: calculation files to records."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from pathlib import Path

import click

from calcbook.book import Found, Outcome, find_calculations, run_all
from calcbook.faults import Collector, Faults

COLUMNS = ("number", "revision", "U clean", "U service", "open items")
PROGRESS_FROM = 5
FAULT, NOT_CONVERGED = 2, 3


@click.command("run", short_help="Calculate files or folders and write their records.")
@click.argument(
    "paths", nargs=-1, required=True, type=click.Path(path_type=Path), metavar="FILE_OR_FOLDER..."
)
@click.option(
    "--output",
    type=click.Path(path_type=Path, file_okay=False),
    metavar="DIR",
    help="Folder of the records; else the book's own, else ./output.",
)
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
    do not stop a record: it is preliminary then, and says so.
    """
    collector = Collector()
    try:
        files = find_calculations(paths, output, collector)
        collector.stop_if_any()
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(FAULT)
    outcomes = _run(files, jobs or os.cpu_count() or 1)
    for outcome in outcomes:
        if outcome.faults:
            click.echo(str(Faults(outcome.faults)), err=True)
        elif outcome.not_converged:
            click.echo(
                f"{outcome.name}: not-converged: {outcome.not_converged}; no record is written", err=True
            )
    _summary([outcome for outcome in outcomes if outcome.is_written])
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


def _summary(outcomes: Sequence[Outcome]) -> None:
    rows = [
        (item.number, item.revision, item.u_clean, item.u_service, str(item.open_items)) for item in outcomes
    ]
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
