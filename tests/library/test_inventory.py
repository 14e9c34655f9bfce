"""What the library holds: how many cards, and that each can be read and rests on a check from outside.

The numbers are pinned so that a card is added or dropped on purpose. A card without a check point from outside this
project must stand on trial, which the record of every calculation that uses it says.
"""

import pytest

from calcbook.library import Library

LIBRARY = Library()
HELD = {"methods": 180, "situations": 33, "materials": 97}


@pytest.mark.parametrize(("kind", "count"), HELD.items())
def test_the_number_of_cards_is_the_one_last_agreed(kind: str, count: int) -> None:
    assert len(LIBRARY.names(kind)) == count


@pytest.mark.parametrize("name", LIBRARY.names("methods"))
def test_a_method_has_an_outside_check_point_or_is_on_trial(name: str) -> None:
    card = LIBRARY.method(name)
    assert card.check_points, "a card without any check point"
    outside = sum(point.is_outside for point in card.check_points)
    assert outside or card.state.status == "trial"


@pytest.mark.parametrize("name", LIBRARY.names("methods"))
def test_the_limits_of_a_method_have_ids_of_their_own_and_a_source(name: str) -> None:
    limits = LIBRARY.method(name).limits
    assert len({limit.id for limit in limits}) == len(limits)
    assert all(limit.id and limit.standing for limit in limits)


@pytest.mark.parametrize("name", LIBRARY.names("situations"))
def test_a_situation_chooses_among_methods_that_the_library_holds(name: str) -> None:
    methods = LIBRARY.situation(name).methods
    assert methods
    assert set(methods) <= set(LIBRARY.names("methods"))
