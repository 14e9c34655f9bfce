"""Recall: every calculation and issued record that rests on a source or a card, and what a replacement would
do."""

from __future__ import annotations

import math
import re
import tempfile
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path

from calcbook.calcfile import read_document
from calcbook.chain.analysis import NotConverged, analyse, is_found_later
from calcbook.chain.build import build
from calcbook.chain.outcome import Solved
from calcbook.documents import Document, Mapping, Node, Scalar
from calcbook.documents import Sequence as ListNode
from calcbook.faults import Collector, Fault, Faults, Place, nearest_names, shown
from calcbook.library import ROOT, Library
from calcbook.library.cards import Material, Method, Situation
from calcbook.library.reading import read_material, read_method
from calcbook.quantities import Quantity, QuantityFault, read_any
from calcbook.record.blocks import Block, Bullets, Heading, Paragraph, Table
from calcbook.record.numbers import with_unit
from calcbook.record.page import case_name, counted
from calcbook.revisions.changes import entries_of, figure_of, text_of
from calcbook.revisions.comparing import Verdict, check_flips, criteria_flips
from calcbook.revisions.comparison_page import Scale, relative_text, side_name
from calcbook.revisions.mixtures import LISTS, unlinked
from calcbook.revisions.sides import Side, load_issued, load_side
from calcbook.seals import CALCULATION, ISSUED, issued_copies

# Keys whose text says what a figure or statement rests on.
GROUNDS = ("source", "basis", "evidence")
# Parts of a card's file that hold its figures.
FIGURES = ("constants", "relations", "tables", "table")
_CRITERION = re.compile(r"(.+?(?:>=|<=|>|<))\s*(.+)")
CURRENT_FILE = "calculation file"


@dataclass(frozen=True, slots=True)
class Wanted:
    """What is recalled: a source text or a card, with the replacement (empty: none) and the places it is
    meant for.

    For a source, ``value`` is a quantity; for a card, `OLD=NEW` with a figure as the card writes it, or the
    name of one of its constants, on the left. Without ``only`` every figure of the source with a fitting unit
    is replaced.
    """

    source: str = ""
    card: str = ""
    value: str = ""
    only: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Rest:
    """One place that rests on what is recalled: its path in the file, the figure or statement, the source."""

    where: str
    text: str
    source: str


@dataclass(frozen=True)
class Effect:
    """What the replacement does: U in service, the places replaced, the verdicts and check states that
    change."""

    was: Solved
    now: Solved
    replaced: tuple[str, ...]
    verdicts: tuple[Verdict, ...]
    checks: tuple[Verdict, ...]


# How the ids of the checks of a survey begin.
OF_SURVEY = "survey /"
NOT_HERE = (
    "Criteria over the time in service, cleaning, the mean of places or a survey, and probabilities, are not worked out"
    " here: change the file and run it. The verdicts below are those at the stated values."
)


@dataclass(frozen=True)
class Recalled:
    """One calculation file or issued copy that rests on what is recalled."""

    side: Side
    state: str
    rests: tuple[Rest, ...]
    effect: Effect | None
    failure: str = ""


@dataclass(frozen=True)
class Recall:
    """The answer to a recall; ``looked_at`` counts the sides, ``failed`` holds faults by side."""

    wanted: Wanted
    found: tuple[Recalled, ...]
    looked_at: int
    failed: tuple[tuple[str, str], ...]


def recall(files: Iterable[tuple[Path, Path]], wanted: Wanted) -> Recall:
    """Look through calculation files, each with its output folder, and through the issued copies in those
    folders.

    Raises ``Faults``: replacement-unfit for a replacement that cannot be read, or that fits nothing found;
    place-not-recalled for a place of ``only`` where nothing stands that was found.
    """
    replacement = _replacement(wanted)
    found, failed, looked_at = [], [], 0
    for called, state, load in _sides(tuple(files)):
        looked_at += 1
        try:
            side = load()
        except (Faults, NotConverged) as error:
            failed.append((called, str(error)))
            continue
        rests = tuple(_rests(side, wanted))
        if rests:
            found.append(_recalled(side, state, rests, wanted, replacement))
    _check_places(found, wanted)
    if wanted.value and found and not any(item.effect or item.failure for item in found):
        raise Faults(
            [
                Fault(
                    "replacement-unfit",
                    Place("--value"),
                    "the replacement fits no figure of what was recalled",
                    shown(wanted.value),
                    "a figure with the unit of what it replaces",
                )
            ]
        )
    return Recall(wanted, tuple(found), looked_at, tuple(failed))


def _check_places(found: Sequence[Recalled], wanted: Wanted) -> None:
    """Refuse a name of ``only`` that is no place of what was recalled: a mistyped one would replace nothing."""
    places = list(dict.fromkeys(rest.where for item in found for rest in item.rests))
    names = {*places, *(place.rpartition("/")[2] for place in places)}
    faults = [
        Fault(
            "place-not-recalled",
            Place("--only"),
            f"nothing that is recalled stands at `{shown(name)}`",
            shown(name),
            ", ".join(places) or "a place that rests on what is recalled",
            nearest_names(name, sorted(names)),
        )
        for name in wanted.only
        if name not in names
    ]
    if faults and found:
        raise Faults(faults)


def _sides(files: Sequence[tuple[Path, Path]]) -> Iterator[tuple[str, str, Callable[[], Side]]]:
    """Every side with its name, its state and what loads it: files first, then issued copies by number."""
    for path, output in files:
        yield path.as_posix(), CURRENT_FILE, partial(load_side, path.as_posix(), Path(), output)
    for output in dict.fromkeys(output.resolve() for _, output in files):
        numbers = sorted({path.parents[2].name for path in output.glob(f"*/{ISSUED}/*/{CALCULATION}")})
        for number in numbers:
            copies = issued_copies(output, number)
            for copy in copies:
                state = f"issued, {copy.kind}" + ("" if copy is copies[-1] else ", superseded")
                yield f"{number}@{copy.revision}", state, partial(load_issued, number, copy.revision, output)


def _replacement(wanted: Wanted) -> Quantity | tuple[str, str] | None:
    if not wanted.value:
        return None
    if wanted.card:
        old, equals, new = (part.strip() for part in wanted.value.partition("="))
        if old and equals and new:
            return old, new
        raise Faults(
            [
                Fault(
                    "replacement-unfit",
                    Place("--value"),
                    "a card's figure is replaced by OLD=NEW",
                    shown(wanted.value),
                    "0.023=0.0243, or the name of a constant on the left",
                )
            ]
        )
    try:
        return read_any(wanted.value)
    except QuantityFault as error:
        raise Faults([error.at(Place("--value"))]) from None


# --- what rests on it -------------------------------------------------------------------------------


def _rests(side: Side, wanted: Wanted) -> Iterator[Rest]:
    if wanted.card:
        for name in side.solved.cards:
            kind, _, card = name.partition(" ")
            if card == wanted.card:
                yield Rest(f"{kind} card", card, "")
        return
    yield from _in_tree(side.tree, (), _folded(wanted.source))
    settings = side.calculation.settings
    for name, value in (
        ("site pressure", settings.site_pressure),
        ("surface temperature", settings.surface_temperature),
        ("excess surface", settings.excess_surface),
    ):
        if value is not None and _folded(wanted.source) in _folded(value.source):
            yield Rest(f"book/{name}", value.text, value.source)


def _in_tree(node: Node, path: tuple[str, ...], text: str) -> Iterator[Rest]:
    """Every mapping whose source, basis or evidence holds a text."""
    if isinstance(node, Mapping):
        grounds = [text_of(node.get(key)) for key in GROUNDS if node.get(key) is not None]
        for ground in grounds:
            if text in _folded(ground):
                yield Rest("/".join(path), _stated(node), ground)
    section = path[-1] if path else ""
    for name, (_, value) in entries_of(node, section).items():
        if isinstance(value, Mapping) or (isinstance(value, ListNode) and name in LISTS):
            yield from _in_tree(value, (*path, name), text)


def _stated(node: Mapping) -> str:
    """What a mapping states: its value, its criterion, its text, or all but its grounds."""
    for key in ("value", "that", "text"):
        if node.get(key) is not None:
            return text_of(node.get(key))
    return text_of(
        Mapping(tuple(entry for entry in node.entries if entry[0].text not in GROUNDS), node.place)
    )


def _folded(text: str) -> str:
    return " ".join(text.casefold().split())


# --- what a replacement does ------------------------------------------------------------------------


def _recalled(
    side: Side,
    state: str,
    rests: tuple[Rest, ...],
    wanted: Wanted,
    replacement: Quantity | tuple[str, str] | None,
) -> Recalled:
    try:
        if isinstance(replacement, Quantity):
            effect = _with_value(side, rests, replacement, wanted.only)
        elif replacement is not None:
            effect = _with_card(side, wanted.card, replacement)
        else:
            effect = None
    except (Faults, NotConverged) as error:
        return Recalled(side, state, rests, None, str(error))
    return Recalled(side, state, rests, effect)


def _with_value(side: Side, rests: Sequence[Rest], value: Quantity, only: Sequence[str]) -> Effect | None:
    tree, replaced = side.tree, []
    for rest in rests:
        path = tuple(rest.where.split("/"))
        if only and not {rest.where, path[-1]} & set(only):
            continue
        changed = _replaced(tree, path, "", value)
        if changed is not tree:
            tree = changed
            replaced.append(rest.where)
    return _effect(side, tree, side.solved.chain.library, replaced) if replaced else None


def _replaced(node: Node, path: tuple[str, ...], section: str, value: Quantity) -> Node:
    """A tree with another figure at a path, where the one that stands there is of the same dimension."""
    if not path:
        return _with_figure(node, value) if isinstance(node, Mapping) else node
    names = list(entries_of(node, section))
    if path[0] not in names:
        return node
    place = names.index(path[0])
    if isinstance(node, Mapping):
        key, inner = node.entries[place]
        changed = _replaced(inner, path[1:], path[0], value)
        entries = (*node.entries[:place], (key, changed), *node.entries[place + 1 :])
        return node if changed is inner else Mapping(entries, node.place, node.in_braces)
    assert isinstance(node, ListNode)
    inner = node.items[place]
    changed = _replaced(inner, path[1:], path[0], value)
    return (
        node
        if changed is inner
        else ListNode((*node.items[:place], changed, *node.items[place + 1 :]), node.place)
    )


def _with_figure(node: Mapping, value: Quantity) -> Mapping:
    """A mapping with its `value:`, or the limit of its `that:`, replaced; itself where the dimension is
    another."""
    entries = []
    for key, inner in node.entries:
        text = text_of(inner) if isinstance(inner, Scalar) else ""
        criterion = _CRITERION.fullmatch(text) if key.text == "that" else None
        head, old = (
            (f"{criterion[1]} ", criterion[2]) if criterion else ("", text if key.text == "value" else "")
        )
        figure = figure_of(Scalar(old, inner.place)) if old else None
        if figure is None or figure.quantity is None or figure.quantity.dimension != value.dimension:
            entries.append((key, inner))
        else:
            entries.append((key, Scalar(head + value.text, inner.place, "quoted")))
    same = all(one is other for (_, one), (_, other) in zip(entries, node.entries, strict=True))
    return node if same else Mapping(tuple(entries), node.place, node.in_braces)


def _effect(side: Side, tree: Node, library: Library, replaced: Sequence[str]) -> Effect:
    collector = Collector()
    document = Document(side.document.name, "", unlinked(tree))
    calculation = read_document(document, side.calculation.settings, collector, Path())
    chain = build(calculation, library, collector)
    solved = analyse(chain, collector, for_record=False) if chain is not None else None
    collector.stop_if_any()
    assert solved is not None
    before = _as_solved_here(side.solved)
    return Effect(
        side.solved,
        solved,
        tuple(replaced),
        criteria_flips(before, solved),
        check_flips(before, solved),
    )


def _as_solved_here(solved: Solved) -> Solved:
    """What was recorded as a replacement is solved: judged at the stated values, without what is found later."""
    criterion = solved.chain.calculation.criterion
    cases = [
        replace(
            case,
            criteria=tuple(
                item._replace(met=item.is_met_as_stated, stated_met=None, required=math.nan, reached=math.nan)
                for item in case.criteria
                if not is_found_later(criterion(item.id).result)
            ),
            checks=tuple(check for check in case.checks if not check.id.startswith(OF_SURVEY)),
        )
        for case in solved.cases
    ]
    return replace(solved, cases=tuple(cases))


def _leaves_out(solved: Solved) -> bool:
    """Whether a calculation has verdicts that a replacement does not work out."""
    calculation = solved.chain.calculation
    more = (
        is_found_later(item.result) or not math.isnan(item.probability) for item in calculation.acceptance
    )
    return calculation.survey is not None or any(more)


# --- cards ------------------------------------------------------------------------------------------


class CorrectedLibrary(Library):
    """A library with other figures in one card."""

    def __init__(self, library: Library, card: Method | Material):
        super().__init__(None)
        self.library = library
        self.card = card

    def method(self, name: str) -> Method:
        """A method card, as ``Library`` gives it."""
        return (
            self.card if isinstance(self.card, Method) and name == self.card.id else self.library.method(name)
        )

    def situation(self, name: str) -> Situation:
        """A situation card, as ``Library`` gives it."""
        return self.library.situation(name)

    def material(self, name: str) -> Material:
        """A material card, as ``Library`` gives it."""
        return (
            self.card
            if isinstance(self.card, Material) and name == self.card.id
            else self.library.material(name)
        )

    def names(self, kind: str) -> tuple[str, ...]:
        """The ids of the cards of a kind."""
        return self.library.names(kind)


def _with_card(side: Side, card: str, replacement: tuple[str, str]) -> Effect | None:
    library = side.solved.chain.library
    corrected: Method | Material
    with tempfile.TemporaryDirectory(prefix="calcbook-") as folder:
        copy = Path(folder) / f"{card}.yaml"
        if f"method {card}" in side.solved.cards:
            copy.write_text(
                _corrected(
                    _card_text(library, "methods", card, library.method(card).house), card, *replacement
                ),
                encoding="utf-8",
            )
            corrected = read_method(copy, library.method(card).house)
        elif f"material {card}" in side.solved.cards:
            copy.write_text(
                _corrected(
                    _card_text(library, "materials", card, library.material(card).house), card, *replacement
                ),
                encoding="utf-8",
            )
            corrected = read_material(copy, library.material(card).house)
        else:
            return None
    return _effect(side, side.tree, CorrectedLibrary(library, corrected), [f"{card}, {replacement[0]}"])


def _card_text(library: Library, folder: str, card: str, house: bool) -> str:
    """The text of a card's file, of the library or of the book."""
    where = library.house if house and library.house is not None else ROOT / folder
    return (where / f"{card}.yaml").read_text(encoding="utf-8")


def _corrected(text: str, card: str, old: str, new: str) -> str:
    """A card's text with a figure, or the value of a constant, replaced wherever the card computes with
    it."""
    number = re.compile(rf"(?<![\w.]){re.escape(old)}(?![\w.])")
    constant = re.compile(rf"^(\s+{re.escape(old)}\s*:\s*)(.+)$")
    section, lines, count = "", [], 0
    for line in text.split("\n"):
        head = re.match(r"([A-Za-z][A-Za-z ]*):", line)
        section = head[1] if head else section
        if section == "constants" and constant.match(line):
            line, times = constant.sub(lambda found: found[1] + new, line), 1
        elif section in FIGURES and re.match(r"[\d.]", old):
            line, times = number.subn(new, line)
        else:
            times = 0
        count += times
        lines.append(line)
    if not count:
        raise Faults(
            [
                Fault(
                    "replacement-unfit",
                    Place(card),
                    f"the card computes with no figure `{shown(old)}`",
                    shown(old),
                    "a figure as the card writes it, or the name of one of its constants",
                )
            ]
        )
    return "\n".join(lines)


# --- the page ---------------------------------------------------------------------------------------


def recall_blocks(found: Recall) -> tuple[Block, ...]:
    """What rests on a source or card, one row a place; with a replacement, what it does to each."""
    what = f"the card {found.wanted.card}" if found.wanted.card else f"the source “{found.wanted.source}”"
    blocks: list[Block] = [Heading(1, f"Recall of {what}")]
    count = counted(
        len(found.found), "calculation or issued record rests", "calculations and issued records rest"
    )
    blocks.append(Paragraph(f"{count} on it, of {found.looked_at} looked at."))
    if found.found:
        rows = tuple(
            (*_named(item), rest.where, rest.text, rest.source) for item in found.found for rest in item.rests
        )
        blocks.append(Table(("Calculation", "Revision", "State", "Side", "Where", "Stated", "Source"), rows))
    if found.wanted.value and found.found:
        blocks += _effects(found)
    if found.failed:
        blocks += [
            Heading(2, "Not looked into"),
            Bullets(tuple(f"{name}: {text.splitlines()[0]}" for name, text in found.failed)),
        ]
    return tuple(blocks)


def _named(item: Recalled) -> tuple[str, str, str, str]:
    return item.side.calculation.number, item.side.revision, item.state, side_name(item.side)


def _effects(found: Recall) -> list[Block]:
    columns = (
        "Calculation",
        "Revision",
        "State",
        "Side",
        "Replaced",
        "U in service was",
        "Now",
        "Difference",
        "Relative",
    )
    rows, flips = [], []
    for item in found.found:
        head = _named(item)
        if item.effect is None:
            rows.append(
                (
                    *head,
                    item.failure.splitlines()[0] if item.failure else "nothing: another quantity",
                    *("",) * 4,
                )
            )
            continue
        was, now = (solved.base.results["U_service"] for solved in (item.effect.was, item.effect.now))
        scale = Scale(was.kind, item.side.calculation.report, (was.value, now.value))
        rows.append(
            (
                *head,
                ", ".join(item.effect.replaced),
                with_unit(scale.value(was.value), scale.unit),
                with_unit(scale.value(now.value), scale.unit),
                with_unit(scale.signed(now.value - was.value), scale.difference_unit),
                relative_text(was.value, now.value),
            )
        )
        flips += [
            (*head, flip.what, case_name(flip.case), flip.condition, flip.was, flip.now)
            for flip in (*item.effect.verdicts, *item.effect.checks)
        ]
    blocks: list[Block] = [Heading(2, f"With {found.wanted.value}"), Table(columns, tuple(rows))]
    if any(item.effect is not None and _leaves_out(item.effect.was) for item in found.found):
        blocks.append(Paragraph(NOT_HERE))
    if not any(item.effect is not None for item in found.found):
        return [
            *blocks,
            Paragraph("No calculation was solved with it: whether a verdict changes is not known."),
        ]
    if not flips:
        return [*blocks, Paragraph("No verdict and no check changes its state.")]
    return [
        *blocks,
        Table(
            (
                "Calculation",
                "Revision",
                "State",
                "Side",
                "Criterion or check",
                "Case",
                "Condition",
                "Was",
                "Would be",
            ),
            tuple(flips),
        ),
    ]


def recall_data(found: Recall) -> dict[str, object]:
    """The same for programs, SI."""
    return {
        "source": found.wanted.source,
        "card": found.wanted.card,
        "value": found.wanted.value,
        "looked_at": found.looked_at,
        "found": [_recalled_data(item) for item in found.found],
        "failed": [{"side": name, "faults": text} for name, text in found.failed],
    }


def _recalled_data(item: Recalled) -> dict[str, object]:
    data: dict[str, object] = {
        "number": item.side.calculation.number,
        "revision": item.side.revision,
        "side": item.side.file_name,
        "state": item.state,
        "rests": [{"where": rest.where, "stated": rest.text, "source": rest.source} for rest in item.rests],
        "failure": item.failure,
        "effect": None,
    }
    if item.effect is not None:
        was, now = (solved.base.results["U_service"].value for solved in (item.effect.was, item.effect.now))
        data["effect"] = {
            "replaced": list(item.effect.replaced),
            "U_service": {
                "was": float(f"{was:.10g}"),
                "now": float(f"{now:.10g}"),
                "difference": float(f"{now - was:.10g}"),
                "unit": "W/(m^2 K)",
            },
            "verdicts": [
                {"id": flip.what, "case": flip.case, "was": flip.was, "now": flip.now}
                for flip in item.effect.verdicts
            ],
            "checks": [
                {
                    "id": flip.what,
                    "case": flip.case,
                    "condition": flip.condition,
                    "was": flip.was,
                    "now": flip.now,
                }
                for flip in item.effect.checks
            ],
        }
    return data
