"""The small public interface, and what the commands themselves use: read, solve, record."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import cache, partial
from pathlib import Path
from typing import Any

from calcbook.calcfile import Calculation, Settings, read_calculation, read_document, read_settings
from calcbook.chain.analysis import NotConverged, analyse, judged_later
from calcbook.chain.build import build
from calcbook.chain.flips_outcome import Flips
from calcbook.chain.impossible_results import tell_impossible_results
from calcbook.chain.outcome import Solved
from calcbook.chain.pressure import drops
from calcbook.chain.types import Chain
from calcbook.documents import Document, Mapping, Scalar, read_file
from calcbook.faults import Collector, Fault, Faults, Place, shown
from calcbook.library import CARDS, Library
from calcbook.links import ISSUED, Links, Source
from calcbook.rating.rate import rated
from calcbook.uncertainty.flips import distances_to_flip
from calcbook.uncertainty.sweep import axes_of, sweep_of, swept_names

HOUSE_CARDS = "cards"
# So many calculations may take from each other in a row before one is pinned to an issued revision.
DEEPEST_LINKS = 24
# What gives the distances to flip of a solved calculation.
Search = Callable[[Solved], Flips]

__all__ = ["NotConverged", "read", "record_text", "solve", "solve_file"]


def read(path: str | Path) -> Calculation:
    """Read a calculation file with the settings of the book in its folder.

    Raises ``calcbook.faults.Faults`` with every fault that the text alone shows.
    """
    path = Path(path)
    collector = Collector()
    settings = read_settings(path.parent)
    calculation = read_calculation(path, settings, collector, None, links_of(path, settings))
    collector.stop_if_any()
    return calculation


def solve(calculation: Calculation, library: Library | None = None) -> Solved:
    """Solve every case of a calculation, clean and in service.

    Raises ``Faults`` with every fault of meaning, ``NotConverged`` for a case without a solution.
    """
    collector = Collector()
    solved = _solved(calculation, library or Library(), collector)
    collector.stop_if_any()
    assert solved is not None
    return solved


def solve_file(
    path: Path,
    name: str | None = None,
    above: tuple[Path, ...] = (),
    for_record: bool = True,
    search: Search | None = distances_to_flip,
) -> Solved:
    """Read and solve a file, with the faults of both stages told at once.

    ``above`` are the files whose links led here, so that a circle is found. What only a record shows (sweep,
    distances to flip) is searched ``for_record`` alone; ``search`` gives the latter, None leaves them to the caller.
    Raises ``Faults`` and ``NotConverged``.
    """
    collector = Collector()
    document = read_file(path, name, collector)
    return _solved_document(document, path, collector, above, for_record, search)


def solve_document(document: Document, path: Path) -> Solved:
    """As ``solve_file`` of the file at ``path``, not for a record, with another tree than the file's own.

    Raises ``Faults`` and ``NotConverged``.
    """
    return _solved_document(document, path, Collector(), (), False, None)


def _solved_document(
    document: Document,
    path: Path,
    collector: Collector,
    above: tuple[Path, ...],
    for_record: bool,
    search: Search | None,
) -> Solved:
    settings = _settings(path.parent, collector)
    resolve = links_of(path, settings, above)
    calculation = read_document(document, settings, collector, path.parent, resolve)
    solved = _solved(calculation, library_of(path.parent / HOUSE_CARDS), collector, for_record, search)
    collector.stop_if_any()
    assert solved is not None
    return solved


def search_file(path: Path, name: str) -> Flips | None:
    """The distances to flip of a file as its record has them, and nothing else; None where it has a fault.

    Raises ``Faults`` and ``NotConverged``.
    """
    collector = Collector()
    settings = read_settings(path.parent)
    calculation = read_calculation(path, settings, collector, name, links_of(path, settings))
    chain = None if collector else build(calculation, library_of(path.parent / HOUSE_CARDS), collector)
    solved = analyse(chain, collector, for_record=False) if chain is not None else None
    return distances_to_flip(solved) if solved is not None and not collector else None


def _settings(folder: Path, collector: Collector) -> Settings:
    """The settings of the book; its faults join those of the calculation file."""
    try:
        return read_settings(folder)
    except Faults as faults:
        collector.take(faults.faults)
        return Settings()


@cache
def library_of(house: Path) -> Library:
    """The library of a book, read once a process; cards do not change under a running command but ``watch``."""
    return Library(house)


def forget_house_cards() -> None:
    """Have every book's own cards read again when they are next wanted; built-in cards stay."""
    library_of.cache_clear()


def links_of(path: Path, settings: Settings, above: tuple[Path, ...] = ()) -> Links:
    """What resolves the links of a calculation file: the files beside it, and the issued copies of its book."""
    here = (*above, path.resolve())

    def solve_source(source: Path) -> Source:
        if source.resolve() in here:
            names = " takes from ".join(item.stem for item in (*here, source))
            raise Faults(
                [
                    Fault(
                        "link-circular",
                        Place(path.name),
                        "calculations take from each other in a circle",
                        names,
                        "links that end at a calculation without links",
                    )
                ]
            )
        if len(here) > DEEPEST_LINKS:
            raise Faults(
                [
                    Fault(
                        "link-too-deep",
                        Place(path.name),
                        "calculations take from each other in too long a row",
                        f"{len(here)} calculations",
                        f"at most {DEEPEST_LINKS}; a link to an issued revision ends the row",
                    )
                ]
            )
        return source_of(solve_file(source, source.name, here, for_record=False))

    return Links(path.parent, output_of(path, settings), solve_source)


def output_of(path: Path, settings: Settings) -> Path:
    """The folder of the records that belongs to a file: the book's own, `output` in the working folder, or, for
    an issued copy, the folder it was issued into."""
    if path.parent.parent.name == ISSUED:
        return path.parent.parent.parent.parent
    return path.parent / settings.output if settings.output else Path("output")


def source_of(solved: Solved) -> Source:
    """A solved calculation as a source of links."""
    from calcbook.record import digest_of

    results = {name: (result.value, result.kind.unit) for name, result in solved.base.results.items()}
    return Source(
        solved.chain.calculation.revision,
        digest_of(solved).results,
        results,
        len(solved.open_items),
        solved.chain.surfaces[solved.chain.basis].name,
        {element.name: solved.chain.surfaces[element.surface].name for element in solved.chain.elements},
    )


def _solved(
    calculation: Calculation,
    library: Library,
    collector: Collector,
    for_record: bool = True,
    search: Search | None = distances_to_flip,
) -> Solved | None:
    if collector and calculation.figures_hold:
        _faults_of_figures(calculation, library, collector)
        return None
    chain = build(calculation, library, collector)
    if collector:
        # A card that cannot be read is missing to the calculation that names it.
        _check_strangers(library, collector)
    if chain is None:
        tell_impossible_results(calculation, collector)
        return None
    if library.house is not None:
        check_house_cards(chain, collector)
    axes = axes_of(chain, collector)
    solved = analyse(chain, collector, for_record)
    if solved is not None and collector:
        # An unknown result in one place keeps none from being told in the others.
        swept_names(solved, collector)
        _assessed(solved, collector)
    if solved is None:
        tell_impossible_results(calculation, collector)
    if solved is None or collector:
        return None
    solved = _surveyed(_assessed(_followed(rated(solved)), collector), collector)
    if solved is None or collector:
        return None
    solved = _judged_by_probability(judged_later(solved, collector), collector)
    if collector:
        return None
    if not for_record:
        return solved
    solved = replace(solved, sweep=sweep_of(solved, axes, collector))
    if collector:
        return None
    return replace(solved, flips=search(solved)) if search is not None else solved


def _faults_of_figures(calculation: Calculation, library: Library, collector: Collector) -> None:
    """Add the faults of what a calculation gives to those of its text, which stand beside its figures."""
    own = Collector()
    try:
        _solved(calculation, library, own, for_record=False)
    except NotConverged:
        # Told once the text holds.
        return
    finally:
        collector.take(own)


def _followed(solved: Solved) -> Solved:
    """The solved calculation with its table over the time in service, where the file asks for one."""
    if not solved.chain.in_service:
        return solved
    from calcbook.rating.growth import over_time

    return over_time(solved)


def _assessed(solved: Solved, collector: Collector) -> Solved:
    """The solved calculation with its uncertainty, where a tolerance is stated or the file asks."""
    calculation = solved.chain.calculation
    stated = any(given.tolerance is not None for given in calculation.givens.values())
    if not stated and calculation.uncertainty is None:
        return solved
    from calcbook.uncertainty.assessing import with_uncertainty

    return with_uncertainty(solved, collector)


def _judged_by_probability(solved: Solved, collector: Collector) -> Solved:
    """The solved calculation with the criteria decided that ask for a probability; it was sampled then."""
    if solved.uncertainty is None:
        return solved
    from calcbook.uncertainty.assessing import judged_by_probability

    return judged_by_probability(solved, collector)


def _surveyed(solved: Solved, collector: Collector) -> Solved | None:
    """The solved calculation with its survey of plant data, where the file names one; None after a fault."""
    if solved.chain.calculation.survey is None:
        return solved
    from calcbook.survey.surveying import surveyed

    return surveyed(solved, collector)


def check_house_cards(chain: Chain, collector: Collector) -> None:
    """Hold the book's own cards that a chain uses to the rules of the library, check points first."""
    from calcbook.library.checking import check_material, check_method

    methods, materials = _cards_of(chain)
    for name in methods:
        if chain.library.method(name).house:
            _collected(partial(check_method, library=chain.library), chain.library.method(name), collector)
    for name in materials:
        if chain.library.material(name).house:
            _collected(check_material, chain.library.material(name), collector)


def _check_strangers(library: Library, collector: Collector) -> None:
    """Tell the files among the book's own cards that are none, beside the faults that they may be the reason of."""
    for path in library.strangers():
        try:
            root = read_file(path, path.name).root
        except Faults as faults:
            collector.take(faults.faults)
            continue
        found = root.entries[0][0] if isinstance(root, Mapping) and root.entries else root
        collector.add(
            "key-unknown",
            found.place,
            "a card begins with what it is",
            found=shown(found.text) if isinstance(found, Scalar) else "",
            expected=": … | ".join(CARDS) + ": …",
        )


def _cards_of(chain: Chain) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Ids of the methods and materials that a chain may take, in the order of its terms."""
    methods: dict[str, None] = {}
    taken = [one for branch in chain.branches for one in (*branch.candidates, *branch.alternatives)]
    taken += [one for _, _, drop in drops(chain) for one in (*drop.laws, drop.total)]
    for candidate in taken:
        methods.update(dict.fromkeys(card.id for card in candidate.cards))
    named = [name.partition(" ") for name in chain.cards]
    methods.update(dict.fromkeys(card for kind, _, card in named if kind == "method"))
    return tuple(methods), tuple(card for kind, _, card in named if kind == "material")


def _collected(check: Callable[[Any], None], card: object, collector: Collector) -> None:
    try:
        check(card)
    except Faults as faults:
        collector.take(faults.faults)


def record_text(solved: Solved) -> str:
    """The Markdown text of a solved calculation's record."""
    from calcbook import record

    return record.record_text(solved)
