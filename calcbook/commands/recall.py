"""``calcbook recall``: what rests on a source or a card, and what a replacement would do."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import click

from calcbook.commands.options import NamedPath, form_option, output_option

FAULT = 2


@click.command("recall", short_help="List what rests on a source or a card, and what another value would do.")
@click.argument("paths", nargs=-1, required=True, type=NamedPath(), metavar="FILE_OR_FOLDER...")
@click.option(
    "--source", metavar="TEXT", help="Text of a source, or a part of it; case and blanks do not count."
)
@click.option("--card", metavar="ID", help="Id of a method, material or situation card.")
@click.option(
    "--value",
    default="",
    metavar="VALUE",
    help="Replacement: a quantity for a source; for a card OLD=NEW, a figure as the card writes it.",
)
@click.option("--only", multiple=True, metavar="PLACE", help="Replace only here, such as R_fo. Repeatable.")
@form_option("markdown", "json")
@output_option("issued copies")
def command(
    paths: tuple[Path, ...],
    source: str | None,
    card: str | None,
    value: str,
    only: tuple[str, ...],
    form: str,
    output: Path | None,
) -> None:
    """List every calculation file and issued record that rests on a source or a card.

    With --value, solve each with the replacement and show what U and which verdicts would move. Nothing is
    written. Exit codes: 0 looked through, 2 fault or usage; a file that cannot be read is told, and the
    others are looked through.
    """
    from calcbook.book import find_calculations
    from calcbook.faults import Collector, Faults
    from calcbook.record.markdown import markdown
    from calcbook.revisions.recall import Wanted, recall, recall_blocks, recall_data

    if bool(source and source.strip()) == bool(card):
        raise click.UsageError("--source TEXT or --card ID")
    if only and not (source and value):
        raise click.UsageError("--only says where a --value replaces the figure of a --source")
    collector = Collector()
    try:
        files = find_calculations(paths, output, collector)
        collector.stop_if_any()
        found = recall(
            ((file.path, file.output) for file in files), Wanted(source or "", card or "", value, only)
        )
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(FAULT)
    if card and not _is_card(card, paths):
        click.echo(f"there is no card `{card}` in the library or beside the calculations", err=True)
        sys.exit(FAULT)
    if form == "json":
        click.echo(json.dumps(recall_data(found), indent=1, ensure_ascii=False, allow_nan=False))
    else:
        click.echo(markdown(recall_blocks(found)), nl=False)
    for _, text in found.failed:
        click.echo(text, err=True)
    if found.failed:
        sys.exit(FAULT)


def _is_card(card: str, paths: tuple[Path, ...]) -> bool:
    """Whether the library or a book that is looked through has a card of this id."""
    from calcbook.interface import HOUSE_CARDS
    from calcbook.library import Library

    folders = {path if path.is_dir() else path.parent for path in paths}
    libraries = [Library(folder / HOUSE_CARDS) for folder in sorted(folders)]
    return any(
        card in library.names(kind)
        for library in libraries
        for kind in ("methods", "materials", "situations")
    )
