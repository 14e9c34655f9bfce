"""``calcbook register``: the list of all calculations of a book, with status."""

from __future__ import annotations

import json
import os
import sys
from pathlib import Path

import click

from calcbook.commands.options import NamedPath, form_option, output_option


@click.command("register", short_help="List every calculation of a book with its status.")
@click.argument("folder", type=NamedPath(exists=True, file_okay=False))
@output_option()
@form_option("markdown", "json", words="markdown also writes register.md to the folder of the records.")
def command(folder: Path, output: Path | None, form: str) -> None:
    """List the calculations in FOLDER: number, title, revision, state, confirmation, U in service, open items,
    what each takes from others and what it feeds."""
    from calcbook.book.entries import read_entries
    from calcbook.book.finding import find_calculations
    from calcbook.book.register import register_blocks, register_data
    from calcbook.calcfile import read_settings
    from calcbook.faults import Collector, Faults
    from calcbook.files import write_whole
    from calcbook.record.markdown import markdown

    collector = Collector()
    try:
        files = find_calculations([folder], output, collector)
        collector.stop_if_any()
        entries = read_entries(files, os.cpu_count() or 1)
        name = read_settings(folder).name
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(2)
    if form == "json":
        click.echo(json.dumps(register_data(entries), indent=1, ensure_ascii=False))
    else:
        text = markdown(register_blocks(name, entries))
        click.echo(text, nl=False)
        try:
            write_whole(files[0].output / "register.md", text)
        except OSError as error:
            click.echo(
                f"{files[0].output.as_posix()}: output-not-writable: {error.strerror or error}", err=True
            )
            sys.exit(2)
    if any(entry.faults for entry in entries):
        sys.exit(2)
    if any(entry.mistake for entry in entries):
        sys.exit(4)
