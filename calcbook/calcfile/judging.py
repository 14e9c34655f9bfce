"""What a calculation file judges by: acceptance criteria, and checks that are accepted."""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Mapping
from typing import TYPE_CHECKING

from calcbook.calcfile import descriptions as described
from calcbook.calcfile.calculation import Acceptance, Criterion, Given
from calcbook.documents import Fields, Scalar, read_mapping
from calcbook.faults import nearest_names, shown
from calcbook.quantities import DIMENSIONLESS

if TYPE_CHECKING:
    from calcbook.calcfile.reading import Reader

# Of five blocks of 10,000 samples, in all of which a criterion holds, 3/N of others can be left at 95 % confidence: a
# larger share than this cannot be shown.
MOST_PROBABILITY = 0.9999


def read_acceptance(reader: Reader) -> tuple[Criterion, ...]:
    """The acceptance criteria of the file, in its order."""
    result = []
    for item in reader.items("acceptance"):
        fields = read_mapping(item, described.CRITERION, reader.collector, item.place)
        scalar = fields.scalar("that")
        if scalar is None:
            continue
        criterion = _criterion(reader, scalar, fields.text("source"))
        if criterion is not None:
            result.append(criterion._replace(probability=_probability(reader, fields)))
    return tuple(result)


def _probability(reader: Reader, fields: Fields) -> float:
    """The share of the samples in which a criterion must hold; NaN where none is asked for."""
    scalar = fields.scalar("probability")
    if scalar is not None and "uncertainty" not in reader.fields:
        reader.collector.add(
            "key-missing",
            scalar.place,
            "a probability is counted over samples",
            expected="uncertainty: … in the file, which draws them",
        )
    quantity = reader.quantity(scalar) if scalar is not None else None
    if scalar is None or quantity is None:
        return math.nan
    if quantity.dimension != DIMENSIONLESS or not 0.0 < quantity.value <= MOST_PROBABILITY:
        reader.collector.add(
            "number-unreadable",
            scalar.place,
            "this is no probability that a criterion could hold with",
            found=shown(scalar.text),
            expected="a share above 0 and not above 99.99 %, the most that samples can show, such as 95 %",
        )
        return math.nan
    return quantity.value


def _criterion(reader: Reader, scalar: Scalar, source: str) -> Criterion | None:
    match = re.fullmatch(r"\s*(.+?)\s*(>=|<=|>|<)\s*([^=<>\s].*?)\s*", scalar.text, re.DOTALL)
    if match is None:
        reader.collector.add(
            "criterion-unreadable",
            scalar.place,
            "a criterion is a result, an operator and a limit",
            found=shown(scalar.text),
            expected="U_service >= 1000 W/(m^2 K)",
        )
        return None
    limit = reader.scalar_value(
        Scalar(match.group(3), scalar.part(match.start(3) + 1, match.end(3) + 1)), source, bool(source)
    )
    if limit.symbol and limit.symbol not in reader.symbols:
        reader.report_symbol(limit.symbol, limit.place)
    result = " ".join(match.group(1).split())
    place = scalar.part(match.start(1) + 1, match.end(1) + 1)
    return Criterion(" ".join(scalar.text.split()), result, match.group(2), limit, source, place)


def read_accepted(reader: Reader, cases: Mapping[str, Mapping[str, Given]]) -> tuple[Acceptance, ...]:
    """The checks that the file accepts, each with its bound and reason. No check may be accepted twice where both act."""
    result = []
    for item in reader.items("accept"):
        fields = read_mapping(item, described.ACCEPT, reader.collector, item.place)
        direction = next((key for key in ("down to", "up to") if key in fields), "")
        bound = reader.value(fields.node(direction)) if direction else None
        reader.refuse_pair(fields, "down to", "up to")
        if not direction:
            reader.collector.add(
                "key-missing",
                fields.place,
                "an accepted check states its bound",
                expected="down to: … or up to: … (of the checked figure)",
            )
        condition, case = _acts_in(reader, fields.scalar("in"), cases)
        check = " / ".join(part.strip() for part in fields.text("check").split("/"))
        result.append(
            Acceptance(
                check,
                condition,
                case,
                direction,
                bound,
                reader.saying(fields, "because"),
                reader.saying(fields, "by"),
                reader.date(fields, "date"),
                fields.place_of("check"),
            )
        )
    for first, second in itertools.combinations(result, 2):
        if first.meets(second):
            reader.collector.add(
                "accept-twice",
                second.place,
                "the check is accepted twice where both act",
                found=shown(second.check),
                expected=f"one answer to it in each condition of each case; the other is in line {first.place.line}",
            )
    return tuple(result)


def _acts_in(
    reader: Reader, node: Scalar | None, cases: Mapping[str, Mapping[str, Given]]
) -> tuple[str, str | None]:
    """Condition and case of an acceptance; empty and None stand for every one."""
    known: dict[str, tuple[str, str | None]] = {"all": ("", None), "clean": ("clean", None)}
    known |= {"service": ("service", None)}
    plain = (*known, "base", *cases)
    for name in ("base", *cases):
        case = "" if name == "base" else name
        known[name] = ("", case)
        known |= {f"{name} {condition}": (condition, case) for condition in ("clean", "service")}
    if node is not None and node.text not in known:
        reader.collector.add(
            "accept-unknown",
            node.place,
            f"`{shown(node.text)}` is no condition or case",
            found=shown(node.text),
            expected=f"{', '.join(plain)}, or a case with a condition behind it, as in `base service`",
            nearest=nearest_names(node.text, known),
        )
    return known.get(node.text if node is not None else "all", ("", None))
