"""Fouling of the whole unit as a calculation file specifies it: cleanliness or excess surface, with its split."""

from __future__ import annotations

from typing import TYPE_CHECKING

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import FoulingSpecified, Term, Value
from calcbook.documents import Mapping as MappingNode
from calcbook.documents import Node, read_mapping
from calcbook.faults import nearest_names, shown

if TYPE_CHECKING:
    from calcbook.calcfile.reading import Reader

WAYS = ("cleanliness", "excess surface")
# Shares in per cent are written with few digits: their sum is one within this.
ROUNDING = 1e-9


def read_specified(reader: Reader, terms: tuple[Term, ...]) -> FoulingSpecified | None:
    """The specification of the file; None where there is none or it has a fault."""
    node = reader.fields.node("fouling specified as")
    if node is None:
        return None
    fields = read_mapping(node, described.FOULING_SPECIFIED, reader.collector, node.place)
    stated = [way for way in WAYS if way in fields]
    if len(stated) != 1:
        reader.collector.add(
            "key-conflict" if stated else "key-missing",
            node.place,
            "the fouling of the unit is specified in one way",
            found=" and ".join(stated),
            expected="cleanliness: … or excess surface: …",
        )
        return None
    value = reader.value(fields.node(stated[0]))
    assert value is not None
    value.is_share(stated[0], reader.collector)
    open_terms = [term.name for term in terms if is_open(term)]
    sides = _open_on_sides(terms)
    split = _split(reader, fields.node("split"), _alone(sides))
    _check_split(reader, node, split, open_terms, sides)
    return FoulingSpecified(stated[0], value, split, node.place)


def is_open(term: Term) -> bool:
    """Whether a fouling term states no resistance of its own."""
    stated = any(key in term.values for key in ("resistance", "coefficient"))
    return term.kind == "fouling" and not stated and term.deposit is None and term.growth is None


def _open_on_sides(terms: tuple[Term, ...]) -> dict[str, list[str]]:
    """The open terms by side: `inside` and `outside` of a split stand for the only one there, unless a term is called so."""
    walls = [place for place, term in enumerate(terms) if term.kind == "wall"]
    if not walls:
        return {}
    sides = {
        "inside": [term.name for term in terms[: walls[0]] if is_open(term)],
        "outside": [term.name for term in terms[walls[-1] :] if is_open(term)],
    }
    called = {term.name for term in terms}
    return {side: names for side, names in sides.items() if side not in called}


def _split(reader: Reader, node: Node | None, sides: dict[str, str]) -> dict[str, Value]:
    """The shares by the name of their term; the term of a side may be named by the side."""
    if not isinstance(node, MappingNode):
        return {}
    found: dict[str, Value] = {}
    for key, item in node.entries:
        value = reader.value(item)
        name = sides.get(key.text, key.text)
        if name in found:
            _refuse(reader, item, f"{name} has two shares", "one share for each term")
        if value is not None:
            found[name] = value
    return found


def _check_split(
    reader: Reader,
    node: Node,
    split: dict[str, Value],
    open_terms: list[str],
    sides: dict[str, list[str]],
) -> None:
    """Every open term has its share, and the shares make one."""
    alone = list(_alone(sides))
    for name, value in split.items():
        if len(sides.get(name, ())) > 1:
            _refuse(
                reader,
                node,
                f"more than one term is open {name}, and `{name}` does not say which",
                f"a share for each of {', '.join(sides[name])}",
            )
        elif name not in open_terms:
            reader.collector.add(
                "term-unknown",
                value.place,
                f"no fouling term without a resistance is called `{shown(name)}`",
                found=shown(name),
                expected=", ".join([*open_terms, *alone])
                or "a term of kind fouling that states no resistance",
                nearest=nearest_names(name, open_terms) or nearest_names(name, alone),
            )
    missing = [name for name in open_terms if name not in split]
    if not open_terms:
        _refuse(
            reader, node, "no fouling term is left open for it", "a term of kind fouling without a resistance"
        )
    elif missing and (split or len(open_terms) > 1):
        _refuse(
            reader, node, f"the split has no share for {', '.join(missing)}", f"split: {{{missing[0]}: 50 %}}"
        )
    shares = [value.quantity.value for value in split.values() if value.quantity is not None]
    if len(shares) == len(split) and split and abs(sum(shares) - 1.0) > ROUNDING:
        _refuse(
            reader, node, f"the shares of the split make {100.0 * sum(shares):g} %", "shares that make 100 %"
        )
    if any(share < 0.0 for share in shares):
        _refuse(reader, node, "a share of the split is below zero", "shares from 0 to 100 %")


def _alone(sides: dict[str, list[str]]) -> dict[str, str]:
    """The open term of every side that has one alone: there the side names it."""
    return {side: names[0] for side, names in sides.items() if len(names) == 1}


def _refuse(reader: Reader, node: Node, message: str, expected: str) -> None:
    reader.collector.add("split-unreadable", node.place, message, expected=expected)
