"""``calcbook compare``: two revisions of a calculation, or everything changed since a git revision."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import click

from calcbook.commands.options import form_option, output_option

FAULT, NOT_CONVERGED = 2, 3
PAGE = "comparison.md"


@click.command("compare", short_help="Compare two revisions: what changed, and which change moved U.")
@click.argument("sides", nargs=-1, metavar="[OLD] NEW")
@click.option(
    "--since", metavar="REV", help="Compare every calculation file that changed since a git revision."
)
@click.option(
    "--result",
    "results",
    multiple=True,
    metavar="NAME",
    help="Result to attribute; else U_service. Repeatable.",
)
@form_option("markdown", "json")
@output_option("records and issued copies")
def command(
    sides: tuple[str, ...], since: str | None, results: tuple[str, ...], form: str, output: Path | None
) -> None:
    """Compare two revisions and say what each change moved.

    A side is a path, an issued copy (WC-101@A), or a file in git (git:REV:path). With one side, NEW is
    compared with its last issued revision. The page goes to standard output and to comparison.md beside the
    record of NEW; with --since, to standard output alone. Exit codes: 0 compared, 2 fault or usage, 3 a side
    did not converge.
    """
    from calcbook.faults import Faults
    from calcbook.interface import NotConverged

    if (since is None) == (not sides) or len(sides) > 2:
        raise click.UsageError("one side or two, or --since REV")
    try:
        if since is not None:
            _since(since, results or ("U_service",), form, output)
        else:
            _pair(sides, results or ("U_service",), form, output)
    except Faults as faults:
        click.echo(str(faults), err=True)
        sys.exit(FAULT)
    except NotConverged as error:
        click.echo(f"not-converged: {error}", err=True)
        sys.exit(NOT_CONVERGED)


def _pair(sides: tuple[str, ...], results: tuple[str, ...], form: str, output: Path | None) -> None:
    from calcbook.files import write_whole
    from calcbook.record.markdown import markdown
    from calcbook.revisions.comparison import comparison_blocks, comparison_data
    from calcbook.revisions.pairs import compare_texts

    comparison, folder = compare_texts(sides, Path(), output, results)
    page = markdown(comparison_blocks(comparison))
    if form == "json":
        click.echo(json.dumps(comparison_data(comparison), indent=1, ensure_ascii=False, allow_nan=False))
    else:
        click.echo(page, nl=False)
    path = folder / comparison.new.calculation.number / PAGE
    try:
        write_whole(path, page)
    except OSError as error:
        click.echo(
            f"{path.as_posix()}: output-not-writable: {error.strerror or 'the page cannot be written'}",
            err=True,
        )
        sys.exit(FAULT)


def _since(revision: str, results: tuple[str, ...], form: str, output: Path | None) -> None:
    from calcbook.record.markdown import markdown
    from calcbook.revisions.since import compare_since, since_blocks, since_data

    since = compare_since(Path(), revision, results, output)
    if form == "json":
        click.echo(json.dumps(since_data(since), indent=1, ensure_ascii=False, allow_nan=False))
    else:
        click.echo(markdown(since_blocks(since)), nl=False)
    for _, text in since.failed:
        click.echo(text, err=True)
    if since.failed:
        sys.exit(NOT_CONVERGED if since.not_converged else FAULT)
