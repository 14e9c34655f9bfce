"""``calcbook library``: the cards as pages for a reader."""

from __future__ import annotations

import sys
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING

import click

from calcbook.commands.options import cards_option, page_folder_option

if TYPE_CHECKING:
    from calcbook.library import Library
    from calcbook.record.blocks import Block

USAGE = 2


@click.group("library", short_help="List and show situations, methods, materials, fluids, fault codes.")
def command() -> None:
    """List the library, or show one card as a page with its limits, accuracy, sources and check points."""


def _library(cards: Path | None) -> Library:
    from calcbook.library import Library

    return Library(cards)


def _print(blocks: Iterable[Block]) -> None:
    from calcbook.record.markdown import markdown

    click.echo(markdown(blocks), nl=False)


@command.command("list")
@cards_option("listed with the others")
def list_cards(cards: Path | None) -> None:
    """List every situation with its methods, and every material."""
    from calcbook.record.library_pages import overview

    _print(overview(_library(cards)))


@command.command("overview")
@page_folder_option("library.md")
@cards_option("counted in")
def overview_page(output: Path, cards: Path | None) -> None:
    """Write library.md: every situation, its methods, their ranges as bars, accuracy, state and source."""
    from calcbook.files import write_whole
    from calcbook.record.library_overview import library_overview
    from calcbook.record.markdown import markdown

    library = _library(cards)
    write_whole(output / "library.md", markdown(library_overview(library)))
    click.echo(
        f"situations {len(library.names('situations'))}, methods {len(library.names('methods'))},"
        f" materials {len(library.names('materials'))}"
    )


@command.command("family")
@click.argument("name")
@cards_option("counted in")
def family(name: str, cards: Path | None) -> None:
    """Show the page of the family NAME: methods that share an ancestor, their ranges, and where they act."""
    from calcbook.faults import nearest_names
    from calcbook.record.library_overview import families, family_page

    library = _library(cards)
    blocks = family_page(name, library)
    if blocks is None:
        near = ", ".join(nearest_names(name, families(library)))
        click.echo(f"the library has no family `{name}`" + (f"; nearest: {near}" if near else ""), err=True)
        sys.exit(USAGE)
    _print(blocks)


@command.command("show")
@click.argument("name")
@cards_option("shown like the others")
def show(name: str, cards: Path | None) -> None:
    """Show the page of the situation, method or material NAME."""
    from calcbook.faults import nearest_names
    from calcbook.record.library_pages import page

    library = _library(cards)
    blocks = page(library, name)
    if blocks is None:
        known = [*library.names("situations"), *library.names("methods"), *library.names("materials")]
        near = ", ".join(nearest_names(name, known))
        click.echo(f"the library has no card `{name}`" + (f"; nearest: {near}" if near else ""), err=True)
        sys.exit(USAGE)
    _print(blocks)


@command.command("fluids")
def fluids() -> None:
    """List the fluids that a stream may name."""
    from calcbook.record.library_pages import fluids_page

    _print(fluids_page())


@command.command("faults")
def faults() -> None:
    """List every fault code with its meaning."""
    from calcbook.record.library_pages import faults_page

    _print(faults_page())


@command.command("bands")
def bands() -> None:
    """List the plausible bands that figures are held against."""
    from calcbook.record.library_pages import bands_page

    _print(bands_page())


@command.command("allowances")
def allowances() -> None:
    """List typical fouling allowances and typical overall coefficients by service."""
    from calcbook.record.library_pages import allowances_page

    _print(allowances_page())


@command.command("emissivities")
def emissivities() -> None:
    """List emissivities of surfaces."""
    from calcbook.record.library_pages import emissivities_page

    _print(emissivities_page())
