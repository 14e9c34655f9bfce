"""One side of a comparison: a calculation file as it stood, solved now, with what was recorded then."""

from __future__ import annotations

import json
import math
import re
import shutil
import tempfile
import weakref
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

from calcbook.calcfile import BOOK_FILE, Calculation, read_settings
from calcbook.calcfile.calculation import Given
from calcbook.calcfile.reading import NUMBER
from calcbook.calcfile.tablefile import read_table_file
from calcbook.chain.outcome import Solved
from calcbook.documents import Document, Node, Scalar, Sequence, read_file
from calcbook.documents import Mapping as MappingNode
from calcbook.faults import Collector, Fault, Faults, Place, nearest_names, shown
from calcbook.interface import HOUSE_CARDS, solve_document, solve_file
from calcbook.record import Digest, digest_of
from calcbook.revisions.git import Commit, commit_of
from calcbook.seals import (
    CALCULATION,
    ISSUED,
    RESULTS,
    SEAL_NAME,
    check_seal,
    issued_altered,
    issued_copies,
    issued_folder,
    read_seal,
)

OUTPUT = "output"
NOT_KNOWN = "not known here"
_ISSUED_COPY = re.compile(r"([A-Za-z0-9][A-Za-z0-9_.-]{0,39})@([A-Za-z0-9][A-Za-z0-9.-]{0,9})")

Data = Mapping[str, object]


# A column of a history is told by the first digits of its digest.
MARK_LENGTH = 12
LARGEST_FIGURE = 1e300


@dataclass(frozen=True)
class Side:
    """A calculation as one side of a comparison.

    ``document`` is the file as it stood, ``tree`` the same with table files and linked values written out in
    place. ``results`` is the results file that was recorded for this content, None where there is none.
    ``software`` is what that results file was made with (empty without one). ``state`` is the state of its lifecycle,
    with the kind of its issue (`issued, final`); that of a revision of the repository is not known. An issued copy
    ``is_frozen``. ``path`` is where it was read from.
    """

    label: str
    revision: str
    document: Document
    calculation: Calculation
    solved: Solved
    results: Data | None
    software: Mapping[str, str]
    file_name: str
    tree: Node
    digest: Digest
    path: Path
    state: str = NOT_KNOWN
    is_frozen: bool = False
    keeper: object = field(default=None, repr=False, compare=False)

    @property
    def signed_digest(self) -> Digest:
        """The digest that people signed: of an issued copy as it was recorded, though this software may give another.

        The whole is empty where it is not that of the recorded parts.
        """
        found = (self.results or {}).get("digest")
        if not self.is_frozen or not isinstance(found, Mapping):
            return self.digest
        parts = [str(found.get(part, "")) for part in ("meaning", "cards", "results")]
        same = parts == [self.digest.meaning, self.digest.cards, self.digest.results]
        return Digest(self.digest.whole if same else "", *parts)

    @property
    def recorded(self) -> dict[str, float]:
        """Results of the base case as they were recorded, by name, SI."""
        found = (self.results or {}).get("results", {})
        if not isinstance(found, Mapping):
            return {}
        figures = {
            name: _figure(item.get("value")) for name, item in found.items() if isinstance(item, Mapping)
        }
        return {name: figure for name, figure in figures.items() if math.isfinite(figure)}

    @property
    def recorded_checks(self) -> dict[str, dict[str, str]]:
        """The states of the limits as they were recorded, by case and then by id and condition; cases without such a
        list are not there."""
        recorded = self.results or {}
        cases = recorded.get("cases")
        groups = {"": recorded.get("checks")}
        for name, case in cases.items() if isinstance(cases, Mapping) else ():
            groups[name] = case.get("checks") if isinstance(case, Mapping) else None
        return {
            name: {
                check_key(str(item.get("id")), str(item.get("condition")), name): str(item["state"])
                for item in items
                if isinstance(item, Mapping) and isinstance(item.get("state"), str)
            }
            for name, items in groups.items()
            if isinstance(items, list) and items
        }


def _figure(value: object) -> float:
    """A recorded value; NaN for what is no figure, as a damaged file may hold."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return math.nan
    return float(value) if abs(value) <= LARGEST_FIGURE else math.nan


def check_key(check: str, condition: str, case: str) -> str:
    """What tells one limit from another over conditions and cases."""
    return f"{check} / {condition} / {case}"


# Issued copies that were solved, by folder, name and seal: their seals are looked at anew each time. `watch` compares
# every save of a revision with the one before it.
SEALED_KEPT = 8
_SEALED: dict[tuple[Path, str, str], Side] = {}


def load_side(text: str, folder: Path, output: Path) -> Side:
    """The side that a text names: a path, `NUMBER@REVISION` (an issued copy), or `git:REVISION:path`.

    Paths are taken from ``folder``; issued copies and recorded results stand under ``output``.
    Raises ``Faults`` (of the file, of its meaning, of git; issued-not-found) and ``NotConverged``.
    """
    if text.startswith("git:"):
        return _from_git(text, folder)
    issued = _ISSUED_COPY.fullmatch(text)
    if issued is not None and not (folder / text).exists():
        return load_issued(issued[1], issued[2], output)
    path = folder / text
    side = _with_recorded(_solved_side(path, Path(text).as_posix()), output)
    return replace(side, state=_state_of(path, side.solved, output))


def side_of(solved: Solved, path: Path, output: Path) -> Side:
    """The side of a file that is solved already, as ``load_side`` gives it by the file's name, but without its state.

    Raises ``Faults`` where its recorded results cannot be read.
    """
    return _with_recorded(_side(solved, path, path.name), output)


def _state_of(path: Path, solved: Solved, output: Path) -> str:
    from calcbook.revisions.lifecycle import lifecycle_of

    life = lifecycle_of(path, solved, output)
    kind = f", {life.current.kind}" if life.is_current and life.current is not None else ""
    return f"{life.state}{kind}" if life.state == ISSUED else life.state


def _with_recorded(side: Side, output: Path) -> Side:
    return _with_results(side, _read_results(output / side.calculation.number / RESULTS))


def load_issued(number: str, revision: str, output: Path) -> Side:
    """The issued copy of a revision. Raises ``Faults``: issued-not-found, and those of ``load_side``."""
    folder = issued_folder(output, number) / revision
    called = f"{number}@{revision}"
    altered = check_seal(folder) if (folder / CALCULATION).is_file() else ()
    if altered:
        raise Faults([issued_altered(altered, Place(called), number, revision)])
    if not (folder / CALCULATION).is_file():
        names = [copy.revision for copy in issued_copies(output, number)]
        raise Faults(
            [
                Fault(
                    "issued-not-found",
                    Place(called),
                    f"revision {revision} of {number} is not issued here",
                    shown(called),
                    ", ".join(f"{number}@{name}" for name in names) or "an issued revision",
                    nearest_names(revision, names),
                )
            ]
        )
    seal = read_seal(folder)
    key = (folder.resolve(), called, seal.whole)
    side = _SEALED.get(key)
    if side is None:
        side = _with_results(
            replace(
                _solved_side(folder / CALCULATION, called), state=f"{ISSUED}, {seal.kind}", is_frozen=True
            ),
            _read_results(folder / RESULTS),
        )
        # What it takes from others is not under its seal.
        if not links_of(side.document.root):
            while len(_SEALED) >= SEALED_KEPT:
                _SEALED.pop(next(iter(_SEALED)))
            _SEALED[key] = side
    return side


def book_output(path: Path, output: Path | None) -> Path:
    """Where the records of a file's book go: the folder given, else the book's own, else `output`."""
    if output is not None:
        return output
    settings = read_settings(path.parent)
    return path.parent / settings.output if settings.output else Path(OUTPUT)


# --- git --------------------------------------------------------------------------------------------


def _from_git(text: str, folder: Path) -> Side:
    _, revision, path = [*text.split(":", 2), "", ""][:3]
    if not revision or not path:
        raise Faults(
            [
                Fault(
                    "side-unreadable",
                    Place(shown(text)),
                    "a side in git names a revision and a file",
                    shown(text),
                    "git:REVISION:path, such as git:HEAD:calcs/wc-101.yaml",
                )
            ]
        )
    return load_from_commit(folder, revision, path)


def load_from_commit(folder: Path, revision: str, path: str) -> Side:
    """A calculation file as it stood in git, with the book settings, house cards and table files beside
    it."""
    whole = folder / path
    here = next(parent for parent in (whole.parent, *whole.parent.parents) if parent.is_dir())
    inside = whole.parent.relative_to(here).as_posix()
    commit = commit_of(here, revision)
    called = f"git:{revision}:{path}"
    if commit.blob(f"{inside}/{whole.name}") is None:
        raise Faults(
            [
                Fault(
                    "git-file-unknown",
                    Place(called),
                    "the revision has no such file",
                    shown(path),
                    "a file of that revision, by its path from the working folder",
                )
            ]
        )
    keeper = _Kept()
    # As deep as in the repository, so that an output folder beside the book is found beside it here too.
    target = keeper.path / commit.prefix() / inside
    target.mkdir(parents=True, exist_ok=True)
    _take_out(commit, inside, target, whole.name)
    side = replace(_solved_side(target / whole.name, called), keeper=keeper)
    output = read_settings(target).output or OUTPUT
    recorded = commit.blob(f"{inside}/{output}/{side.calculation.number}/{RESULTS}")
    if recorded is None:
        return side
    return _with_results(side, _json(recorded.decode("utf-8", "replace"), called))


class _Kept:
    """A folder that is kept as long as the side that reads from it."""

    def __init__(self) -> None:
        self.path = Path(tempfile.mkdtemp(prefix="calcbook-"))
        weakref.finalize(self, shutil.rmtree, self.path, True)


def _take_out(commit: Commit, inside: str, target: Path, name: str) -> None:
    """Write the calculation file and what its reading needs beside it into a folder."""
    tables = [item for item in commit.names(inside) if item.lower().endswith(".csv")]
    cards = [item for item in commit.names(f"{inside}/{HOUSE_CARDS}") if item.endswith(".yaml")]
    _write_out(
        commit, inside, target, (name, BOOK_FILE, *tables, *(f"{HOUSE_CARDS}/{item}" for item in cards))
    )
    root = read_file(target / name, collector=Collector()).root
    links = {link.calculation for link in links_of(root) if NUMBER.fullmatch(link.calculation)}
    if not links:
        return
    _write_out(commit, inside, target, (item for item in commit.names(inside) if item.endswith(".yaml")))
    output = read_settings(target).output or OUTPUT
    for number in sorted(links):
        copies = f"{output}/{number}/{ISSUED}"
        names = [f"{copies}/{copy}" for copy in commit.names(f"{inside}/{copies}")]
        _write_out(
            commit, inside, target, (f"{copy}/{item}" for copy in names for item in (SEAL_NAME, RESULTS))
        )


def _write_out(commit: Commit, inside: str, target: Path, names: Iterable[str]) -> None:
    wanted = {f"{inside}/{name}": target / name for name in names}
    for name, data in commit.blobs(wanted).items():
        wanted[name].parent.mkdir(parents=True, exist_ok=True)
        wanted[name].write_bytes(data)


@dataclass(frozen=True, slots=True)
class LinkOf:
    """A given that a file takes from another calculation, as it is written."""

    symbol: str
    calculation: str
    result: str
    revision: str


def links_of(root: Node) -> tuple[LinkOf, ...]:
    """The links of a calculation file's givens, from its tree."""
    givens = root.get("givens") if isinstance(root, MappingNode) else None
    found = []
    for key, given in givens.entries if isinstance(givens, MappingNode) else ():
        link = given.get("from") if isinstance(given, MappingNode) else None
        if isinstance(link, MappingNode):
            found.append(
                LinkOf(key.text, *(_word(link, name) for name in ("calculation", "result", "revision")))
            )
    return tuple(found)


def _word(node: MappingNode, key: str) -> str:
    value = node.get(key)
    return value.text if isinstance(value, Scalar) else ""


# --- reading ----------------------------------------------------------------------------------------


def _solved_side(path: Path, called: str) -> Side:
    return _side(solve_file(path, called, for_record=False), path, called)


def solved_again(side: Side, edited: Callable[[Node], Node]) -> Side:
    """The side with its file's tree edited; its digest and what was recorded stay those of the file.

    Raises ``Faults`` and ``NotConverged`` where the edited file gives no answer.
    """
    document = side.document._replace(root=edited(side.document.root))
    solved = solve_document(document, side.path)
    calculation = solved.chain.calculation
    return replace(
        side,
        document=document,
        calculation=calculation,
        solved=solved,
        tree=_written_out(document.root, side.path.parent, calculation),
    )


def _side(solved: Solved, path: Path, called: str) -> Side:
    document = read_file(path, called)
    calculation = solved.chain.calculation
    label = f"{calculation.number}, revision {calculation.revision}"
    return Side(
        label,
        calculation.revision,
        document,
        calculation,
        solved,
        None,
        {},
        called,
        _written_out(document.root, path.parent, calculation),
        digest_of(solved),
        path,
    )


def _with_results(side: Side, results: Data | None) -> Side:
    """The side with its recorded results, where they were recorded for this very content."""
    digest = (results or {}).get("digest")
    if results is None or not isinstance(digest, Mapping) or digest.get("meaning") != side.digest.meaning:
        return side
    software = results.get("software")
    versions = (
        {str(name): str(text) for name, text in software.items()} if isinstance(software, Mapping) else {}
    )
    return replace(side, results=results, software=versions)


def _read_results(path: Path) -> Data | None:
    try:
        text = path.read_text(encoding="utf-8", errors="replace")
    except OSError:
        return None
    return _json(text, path.name)


def _json(text: str, called: str) -> Data:
    try:
        found = json.loads(text)
    except ValueError:
        found = None
    if not isinstance(found, dict):
        raise Faults(
            [
                Fault(
                    "results-unreadable",
                    Place(called),
                    "this is no results file that was written here",
                    expected="the file as it was written; take it from git or run again",
                )
            ]
        )
    return found


def _written_out(root: Node, folder: Path, calculation: Calculation) -> Node:
    """A tree that stands by itself: table files as tables, what the history of a survey holds, and the value
    of every given that is taken from elsewhere."""
    root = _with_history(_with_tables(root, folder), calculation)
    givens = root.get("givens") if isinstance(root, MappingNode) else None
    if not isinstance(root, MappingNode) or not isinstance(givens, MappingNode):
        return root
    entries = []
    for key, value in givens.entries:
        given = calculation.givens.get(key.text)
        if given is not None and isinstance(value, MappingNode) and value.get("value") is None:
            value = MappingNode((*_stated(given), *value.entries), value.place)
        entries.append((key, value))
    whole = MappingNode(tuple(entries), givens.place)
    return MappingNode(
        tuple((key, whole if node is givens else node) for key, node in root.entries), root.place
    )


def _with_history(root: Node, calculation: Calculation) -> Node:
    """A tree whose survey says what its history holds: the number of rows, and a mark of each column."""
    survey = root.get("survey") if isinstance(root, MappingNode) else None
    if not (
        isinstance(root, MappingNode) and isinstance(survey, MappingNode) and calculation.survey is not None
    ):
        return root
    place = survey.place
    held = tuple(
        (Scalar(f"{name} of {calculation.survey.file}", place), Scalar(content[:MARK_LENGTH], place))
        for name, (content,) in calculation.survey.history.content().items()
    )
    whole = MappingNode((*survey.entries, *held), place, survey.in_braces)
    return MappingNode(
        tuple((key, whole if node is survey else node) for key, node in root.entries),
        root.place,
        root.in_braces,
    )


def _stated(given: Given) -> tuple[tuple[Scalar, Node], ...]:
    """The value and source of a given that is taken from another calculation, as the file could state
    them."""
    place = given.value.place
    texts = (("value", given.value.text), ("source", given.source))
    return tuple((Scalar(key, place), Scalar(text, place, "quoted")) for key, text in texts)


def _with_tables(root: Node, folder: Path) -> Node:
    """A tree in which every fluid's table file stands as a table, so that its figures can be compared."""
    if isinstance(root, Sequence):
        return Sequence(tuple(_with_tables(item, folder) for item in root.items), root.place)
    if not isinstance(root, MappingNode):
        return root
    entries: list[tuple[Scalar, Node]] = []
    for key, value in root.entries:
        if key.text == "table file" and isinstance(value, Scalar):
            entries.append((Scalar("table", key.place), _table(folder / value.text, value)))
        else:
            entries.append((key, _with_tables(value, folder)))
    return MappingNode(tuple(entries), root.place, root.in_braces)


def _table(path: Path, name: Scalar) -> Node:
    """A table file as the mapping that could stand in the calculation file instead."""
    columns = read_table_file(path, name.place, Collector()) or {}
    return MappingNode(
        tuple(
            (
                Scalar(column, name.place),
                Sequence(tuple(Scalar(item.text, name.place) for item in items), name.place),
            )
            for column, items in columns.items()
        ),
        name.place,
    )
