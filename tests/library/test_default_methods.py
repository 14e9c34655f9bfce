"""The method that a situation takes by itself rests on a check from outside, or its exception is named here."""

from __future__ import annotations

import pytest

from calcbook.library import Library

LIBRARY = Library()
# Cards on trial that a choice table still takes, or that its method uses, each with the reason.
ON_TRIAL = {
    # Creeping flow across a tube: no other equation of the library reaches there.
    ("across-tube", "nakai-okazaki-1975"),
    # Steep layers heated from below: the tilted part is from memory, upright it is the checked law.
    ("enclosure-inclined", "el-sherbiny-1982"),
    # The only rule for a stable layer in forced and free flow together.
    ("blended-horizontal-plate", "mixed-blend-horizontal-plate-stable"),
    # Bridges between laminar and turbulent flow: straight lines between two checked ends.
    ("inside-duct", "duct-transition-section"),
    ("inside-rectangular-duct", "duct-transition-rectangle"),
    # The limit of heat flux of a bundle, in a method that is itself checked.
    ("pool-boiling-bundle", "palen-small-1964-bundle-chf"),
    # The ideal bank behind the five checked factors of the shell side.
    ("shell-side", "bell-ideal-bank"),
}


def taken_on_trial(situation: str) -> set[tuple[str, str]]:
    """Every card on trial behind the rows of a choice table."""
    return {
        (situation, card.id)
        for choice in LIBRARY.situation(situation).choose
        for card in LIBRARY.program(choice.use).cards
        if card.state.status == "trial"
    }


@pytest.mark.parametrize("situation", LIBRARY.names("situations"))
def test_a_default_is_checked_or_its_exception_is_named(situation: str) -> None:
    assert taken_on_trial(situation) == {pair for pair in ON_TRIAL if pair[0] == situation}


def test_flow_boiling_takes_the_checked_equation_of_both_positions() -> None:
    situation = LIBRARY.situation("boiling-inside-tube")
    assert [choice.use for choice in situation.choose] == ["liu-winterton-1991"]
    better = {"shah-1982-boiling", "gungor-winterton-1987"}  # by the published test that the card names
    assert better <= set(situation.methods), "the cross-check runs what the published test ranks first"
