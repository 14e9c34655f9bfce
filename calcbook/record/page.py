"""What the sections of a record share: the solved calculation, its digest, and a few look-ups."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field

from calcbook.calcfile import Calculation
from calcbook.chain.outcome import CaseOutcome, CheckResult, CriterionResult, Result, Solved
from calcbook.chain.rating_outcome import DayOne
from calcbook.chain.types import Chain
from calcbook.library.cards import Material, Method, Situation
from calcbook.record.digest import Digest
from calcbook.record.life import Life
from calcbook.record.software import Software

# What a book's own card is called wherever the record stands on it.
HOUSE_METHOD = "house method"


@dataclass(frozen=True)
class Page:
    """One record in the making."""

    solved: Solved
    digest: Digest
    software: Software
    life: Life = field(default_factory=Life)

    @property
    def chain(self) -> Chain:
        return self.solved.chain

    @property
    def calculation(self) -> Calculation:
        return self.solved.chain.calculation

    @property
    def base(self) -> CaseOutcome:
        return self.solved.base

    @property
    def basis(self) -> str:
        """The name of the surface that *the* U stands on."""
        return self.chain.surfaces[self.chain.basis].name

    @property
    def is_preliminary(self) -> bool:
        return bool(self.solved.open_items)

    @property
    def days(self) -> dict[str, DayOne]:
        """What the clean unit does at the same inlets, by case; nothing without a rating that tells it."""
        return self.solved.rating.answered if self.solved.rating is not None else {}

    def missed_on_day_one(self, case: str) -> tuple[CriterionResult, ...]:
        """The criteria that the clean unit does not meet at the inlets of a case, each with its state as the case."""
        day = self.days.get(case)
        return tuple(item for item in (day.criteria if day is not None else ()) if not item.met)

    @property
    def has_cases(self) -> bool:
        return len(self.solved.cases) > 1

    def result(self, name: str) -> Result | None:
        """A result of the base case by name."""
        return self.base.results.get(name)

    def cards(self) -> tuple[Method | Situation | Material, ...]:
        """The cards that the digest binds, in the order in which they were used."""
        found: list[Method | Situation | Material] = []
        for name in self.solved.cards:
            kind, _, card = name.partition(" ")
            if kind == "method":
                found.append(self.chain.library.method(card))
            elif kind == "situation":
                found.append(self.chain.library.situation(card))
            elif kind == "material":
                found.append(self.chain.library.material(card))
        return tuple(found)

    def reference(self, card: str, cite: str) -> str:
        """The id of a publication of a used card, or the text itself where the card does not list it."""
        for used in self.cards():
            if used.id == card:
                for place, source in enumerate(used.sources, 1):
                    if source.cite == cite:
                        return reference_id(card, place)
        return cite

    def is_house(self, card: str) -> bool:
        """Whether a used card is the book's own."""
        return any(used.id == card and getattr(used, "house", False) for used in self.cards())

    def methods(self) -> tuple[Method, ...]:
        """The method cards that were used."""
        return tuple(card for card in self.cards() if isinstance(card, Method))

    def every_check(self) -> Iterable[CheckResult]:
        """The checks of every case."""
        for case in self.solved.cases:
            yield from case.checks


def case_name(name: str) -> str:
    """A case as it is printed; the base case has a name too."""
    return name or "base"


def counted(count: int, singular: str, plural: str) -> str:
    """A number with its noun."""
    return f"{count} {singular if count == 1 else plural}"


def reference_id(card: str, place: int) -> str:
    """How a publication of a card is cited; it does not move when another card comes or goes."""
    return f"{card} / {place}"
