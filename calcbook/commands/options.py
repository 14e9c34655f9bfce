"""Options that several commands have, made once: what they are called, what they take, and their words."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import click

Decorator = Callable[[Callable[..., Any]], Callable[..., Any]]


class NamedPath(click.Path):
    """A path that has a name: an empty one, as an unset variable leaves it, is not the working folder."""

    def __init__(self, **options: Any):
        super().__init__(path_type=Path, **options)

    def convert(self, value: Any, param: click.Parameter | None, ctx: click.Context | None) -> Any:
        if value == "":
            self.fail("the name is empty; `.` is the working folder", param, ctx)
        return super().convert(value, param, ctx)


FOLDER = NamedPath(file_okay=False)


def output_option(what: str = "records") -> Decorator:
    """``--output DIR``: the folder of what a command writes or reads, the book's own without it."""
    words = f"Folder of the {what}; else the book's own, else ./output."
    return click.option("--output", type=FOLDER, metavar="DIR", help=words)


def page_folder_option(page: str) -> Decorator:
    """``--output DIR`` of a command that writes one page, ./output without it."""
    return click.option(
        "--output",
        type=FOLDER,
        default=Path("output"),
        metavar="DIR",
        show_default=True,
        help=f"Folder of {page}.",
    )


def form_option(*forms: str, words: str = "Form on standard output.") -> Decorator:
    """``--format FORM``, handed over as ``form``: the first of the forms without it."""
    return click.option(
        "--format", "form", type=click.Choice(forms), default=forms[0], show_default=True, help=words
    )


def cards_option(what_becomes: str) -> Decorator:
    """``--cards DIR``: the cards of a book beside those of the library."""
    folder = NamedPath(exists=True, file_okay=False)
    return click.option("--cards", type=folder, metavar="DIR", help=f"A book's own cards, {what_becomes}.")
