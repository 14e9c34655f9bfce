"""``calcbook audit``: the gate for a pull request and for CI."""

from __future__ import annotations

import os
import sys
from pathlib import Path

import click

from calcbook.commands.options import NamedPath, form_option, output_option

FINDINGS = 1


@click.command("audit", short_help="Check files, records, sign-offs and issued copies of a book.")
@click.argument(
    "paths",
    nargs=-1,
    required=True,
    type=NamedPath(exists=True),
    metavar="FILE_OR_FOLDER...",
)
@output_option()
@form_option("text", "markdown")
def command(paths: tuple[Path, ...], output: Path | None, form: str) -> None:
    """Check that every file is valid, every record current, sign-offs valid for the content, issued copies
    unaltered, links current, and no erratum touches an issued record.

    Exit code 0 without findings, 1 with findings, 2 for a fault of the call itself.
    """
    from calcbook.book.auditing import audit, audit_blocks
    from calcbook.book.entries import read_entries
    from calcbook.book.finding import find_calculations
    from calcbook.calcfile import read_settings
    from calcbook.faults import Collector, Faults
    from calcbook.record.markdown import markdown

    collector = Collector()
    try:
        files = find_calculations(paths, output, collector)
        collector.stop_if_any()
        entries = read_entries(files, os.cpu_count() or 1)
        findings = audit(entries)
        name = read_settings(files[0].path.parent).name
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(2)
    if form == "markdown":
        click.echo(markdown(audit_blocks(name, entries, findings)), nl=False)
    else:
        for finding in findings:
            click.echo(str(finding))
        click.echo(f"{len(entries)} calculation(s), {len(findings)} finding(s)")
    if findings:
        sys.exit(FINDINGS)
