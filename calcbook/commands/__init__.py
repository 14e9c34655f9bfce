"""The commands: one thin file each. They read the command line, call a room below, print, and exit.

May import: every room. Must never: hold logic that another caller would want.

Exit codes: 0 written, open items or not; 1 findings (``verify``); 2 fault or usage; 3 a calculation did
not converge; 4 a mistake of calcbook itself in a calculation; 130 interrupted.
"""

from __future__ import annotations

import atexit
import gc
import importlib

import click

import calcbook

INTERRUPTED = 130
# A record takes some hundred thousand objects and leaves few circles among them: looked for as often as Python
# does by itself, they cost a twentieth of a run.
COLLECT_AFTER = (200_000, 5, 5)
# A process that ends gives all its memory back: to look for circles in it before costs another twentieth.
atexit.register(gc.freeze)
COMMANDS = (
    "run",
    "watch",
    "new",
    "library",
    "verify",
    "schema",
    "sign",
    "issue",
    "revise",
    "register",
    "audit",
    "compare",
    "recall",
)


class _Commands(click.Group):
    """Loads a command's file when it is asked for, so that a run does not pay for the others."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, name: str) -> click.Command | None:
        if name not in COMMANDS:
            return None
        command: click.Command = importlib.import_module(f"calcbook.commands.{name}").command
        return command

    def invoke(self, ctx: click.Context) -> object:
        """As click has it, but an interrupt that no command answers itself ends with its own exit code."""
        gc.set_threshold(*COLLECT_AFTER)
        try:
            return super().invoke(ctx)
        except KeyboardInterrupt:
            click.echo("interrupted", err=True)
            raise click.exceptions.Exit(INTERRUPTED) from None


@click.group(
    cls=_Commands, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100}
)
@click.version_option(calcbook.__version__, message="calcbook %(version)s")
def main() -> None:
    """Run controlled calculations of overall heat-transfer coefficients.

    An engineer writes a YAML calculation file; `calcbook run` writes its record, ready to be checked. Start
    with `calcbook new inside-tube > calcs/first.yaml`, then `calcbook run calcs/first.yaml`.
    """
