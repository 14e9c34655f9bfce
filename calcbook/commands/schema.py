"""``calcbook schema``: the JSON Schema of the calculation file, for editors."""

from __future__ import annotations

import json

import click


@click.command("schema", short_help="Print the JSON Schema of the calculation file, for editors.")
def command() -> None:
    """Print the JSON Schema of the calculation file.

    It comes from the same description that the reader uses. Point your editor's YAML support to the saved
    file to see keys, choices and explanations while you type.
    """
    from calcbook.calcfile.schema import json_schema

    click.echo(json.dumps(json_schema(), indent=1, ensure_ascii=False))
