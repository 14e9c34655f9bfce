"""The library: knowledge as cards, their loader, and the programs that cards become.

Cards are YAML files in ``situations/``, ``methods/``, ``materials/`` and ``allowances/``; a book may
bring its own in ``cards/`` beside its calculation files (house methods). A card is loaded by name,
never all at once.

May import: ``formulas``, ``documents``, ``quantities``, ``faults``. Must never: know a calculation, a
fluid or a record.
"""

from __future__ import annotations

import functools
from collections.abc import Mapping
from pathlib import Path

import numpy as np

from calcbook.faults import Fault, Faults, Place, nearest_names
from calcbook.library.cards import Material, Method, Situation
from calcbook.library.programs import Program, build_program, check_dimensions, evaluate_program, need_value
from calcbook.library.reading import read_material, read_method, read_situation, vocabulary

ROOT = Path(__file__).parent

__all__ = [
    "Library",
    "Program",
    "build_program",
    "check_dimensions",
    "evaluate_method",
    "load_material",
    "load_method",
    "load_situation",
    "vocabulary",
]


class Library:
    """Cards by name: the built-in ones, and those of one book where it brings any."""

    def __init__(self, house: Path | None = None):
        self.house = house if house is not None and house.is_dir() else None
        self._methods: dict[str, Method] = {}
        self._situations: dict[str, Situation] = {}
        self._materials: dict[str, Material] = {}
        self._programs: dict[str, Program] = {}
        self._house: dict[Path, str] | None = None

    def method(self, name: str) -> Method:
        """A method card by id. Raises ``Faults``: method-unknown, and every fault of the card."""
        if name not in self._methods:
            path, house = self._path("methods", name)
            # A built-in card is the same for every book: it is read once a process.
            own = house or self is _built_in
            self._methods[name] = read_method(path, house) if own else _built_in.method(name)
        return self._methods[name]

    def situation(self, name: str) -> Situation:
        """A situation card by id. Raises ``Faults``: situation-unknown, and every fault of the card."""
        if name not in self._situations:
            path, house = self._path("situations", name)
            own = house or self is _built_in
            self._situations[name] = read_situation(path) if own else _built_in.situation(name)
        return self._situations[name]

    def material(self, name: str) -> Material:
        """A material card by id. Raises ``Faults``: material-unknown, and every fault of the card."""
        if name not in self._materials:
            path, house = self._path("materials", name)
            own = house or self is _built_in
            self._materials[name] = read_material(path, house) if own else _built_in.material(name)
        return self._materials[name]

    def program(self, name: str) -> Program:
        """The program of a method, with its dimensions checked."""
        if name not in self._programs:
            self._programs[name] = self._built(name)
        return self._programs[name]

    def _built(self, name: str) -> Program:
        card = self.method(name)
        # A built-in card uses built-in cards alone, as the library looks for them before those of a book. A
        # library of another kind (with a card corrected, say) makes its own programs.
        if type(self) is Library and self is not _built_in and not card.house:
            return _built_in.program(name)
        program = build_program(card, self.method)
        check_dimensions(program)
        return program

    def names(self, kind: str) -> tuple[str, ...]:
        """The ids of every card of a kind (methods, situations, materials), in alphabetical order."""
        house = self._house_cards(kind)
        return tuple(sorted({*_built_in_names(kind), *house})) if house else _built_in_names(kind)

    def strangers(self) -> tuple[Path, ...]:
        """The files among the book's own cards that do not begin as a card does."""
        return tuple(path for path, key in self._first_keys().items() if key not in CARDS)

    def _house_cards(self, kind: str) -> dict[str, Path]:
        """The book's own cards of a kind: what a card is, its first key says."""
        return {path.stem: path for path, key in self._first_keys().items() if key == kind.removesuffix("s")}

    def _first_keys(self) -> dict[Path, str]:
        if self._house is None:
            files = self.house.glob("*.yaml") if self.house is not None else ()
            # A name with a dot in front is a lock or a copy that a system keeps for itself.
            plain = sorted(path for path in files if not path.name.startswith(".") and not path.is_dir())
            self._house = {path: _first_key(path) for path in plain}
        return self._house

    def _path(self, kind: str, name: str) -> tuple[Path, bool]:
        path = ROOT / kind / f"{name}.yaml"
        house = self._house_cards(kind).get(name)
        singular = kind.removesuffix("s")
        if _is_plain(name) and path.is_file():
            if house is not None:
                raise Faults([_card_twice(singular, name, house)])
            return path, False
        if house is not None:
            return house, True
        raise Faults(
            [
                Fault(
                    f"{singular}-unknown",
                    Place(name),
                    f"the library has no {singular} `{name}`",
                    name,
                    f"a {singular} of `calcbook library`",
                    nearest_names(name, self.names(kind)),
                )
            ]
        )


def _card_twice(singular: str, name: str, house: Path) -> Fault:
    number, line = _first_line(house)
    return Fault(
        "card-twice",
        Place(f"{house.parent.name}/{house.name}", number, 1, len(line) + 1, line),
        f"the book and the library have a {singular} of one name",
        name,
        "a name of its own for the card of the book",
    )


# The first key of a card, which says what it is.
CARDS = ("method", "situation", "material")


@functools.cache
def _built_in_names(kind: str) -> tuple[str, ...]:
    return tuple(sorted(path.stem for path in (ROOT / kind).glob("*.yaml")))


def _is_plain(name: str) -> bool:
    """Whether a name stays in its folder."""
    return bool(name) and all(character.isalnum() or character in "-_." for character in name)


def _first_key(path: Path) -> str:
    """The word before the first colon of a card's first line that is no comment."""
    return _first_line(path)[1].partition(":")[0].strip(" {\"'")


def _first_line(path: Path) -> tuple[int, str]:
    """A card's first line that is no comment, with its number; an empty one of a file that is no text."""
    try:
        lines = path.read_text(encoding="utf-8-sig").splitlines()
    except (OSError, UnicodeDecodeError):
        return 1, ""
    numbered = enumerate(lines, 1)
    said = (
        item for item in numbered if item[1].strip() and not item[1].lstrip().startswith(("#", "---", "%"))
    )
    return next(said, (1, ""))


_built_in = Library()


def load_method(name: str) -> Method:
    """A built-in method card by id."""
    return _built_in.method(name)


def load_situation(name: str) -> Situation:
    """A built-in situation card by id."""
    return _built_in.situation(name)


def load_material(name: str) -> Material:
    """A built-in material card by id."""
    return _built_in.material(name)


def evaluate_method(
    card: Method, given: Mapping[str, object], library: Library | None = None
) -> dict[str, float]:
    """Evaluate a method card on SI figures by its own symbols; returns every symbol it assigns.

    A use symbol (such as ``f``) may be given directly. Flags take True/False or yes/no, choices their
    word. Raises ``KeyError`` for a symbol that the card does not take.
    """
    find = (library or _built_in).method
    overridden = tuple(use.symbol for use in card.uses if use.symbol in given)
    program = build_program(card, find, overridden)
    values = evaluate_program(program, bind_given(program, given))
    by_symbol = {name: program.scope[name] for name in program.scope if program.scope[name] in values}
    for step in program.steps:
        by_symbol.setdefault(step.symbol, step.name)
    return {symbol: float(values[name]) for symbol, name in by_symbol.items()}


def bind_given(program: Program, given: Mapping[str, object]) -> dict[str, np.ndarray]:
    """Figures by a card's symbols, as arrays by the names of the program's needs."""
    needs = {need.name: need.need for need in program.needs}
    bound: dict[str, np.ndarray] = {}
    for symbol, figure in given.items():
        name = program.scope.get(symbol, symbol)
        if name not in needs:
            name = next((key for key, need in needs.items() if need.symbol == symbol), "")
        if not name:
            raise KeyError(f"{program.method.id} takes no `{symbol}`; it takes {', '.join(needs)}")
        bound[name] = (
            need_value(needs[name], str(figure)) if isinstance(figure, (str, bool)) else np.asarray(figure)
        )
    return bound
