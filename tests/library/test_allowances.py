"""Cards of typical values and the file of plausible bands: read whole, each row with its standing."""

from __future__ import annotations

from pathlib import Path

import pytest
from click.testing import CliRunner

from calcbook.commands.library import command
from calcbook.faults import Faults
from calcbook.library.cards import STANDINGS
from calcbook.library.plausibility import (
    ALLOWANCES,
    FOULING,
    OVERALL,
    allowance_cards,
    bands,
    emissivities,
    typical,
)

HOUR_FOOT = 0.176110  # 1 h ft2 F/Btu in m2 K/W, by its definition


def test_the_cards_and_their_rows_are_all_there() -> None:
    cards = allowance_cards()
    assert set(cards) == {path.stem for path in ALLOWANCES.glob("*.yaml")}
    assert {card: len(one.rows) for card, one in cards.items()} == {
        "fouling-gases": 11,
        "fouling-liquids": 8,
        "fouling-waters": 28,
        "typical-coefficients": 27,
    }
    assert len(bands()) == 37 and len(emissivities()) == 43


def test_every_row_has_a_range_a_publication_and_its_standing() -> None:
    for card in allowance_cards().values():
        assert card.far > 1.0
        assert {row.publication for row in card.rows} == set(card.sources), "a source that no row names"
        for row in card.rows:
            assert 0.0 < row.low <= row.high
            assert row.side and row.publication.cite and row.publication.standing in STANDINGS
    for band in bands().values():
        assert 0.0 < band.low < band.high and band.source and band.standing in STANDINGS
    for one in emissivities():
        low, _, high = one.emissivity.partition(" to ")
        assert 0.0 < float(low) <= float(high or low) <= 1.0 and one.standing in STANDINGS


def test_nothing_that_was_not_read_is_called_published() -> None:
    standings = {row.publication.standing for card in allowance_cards().values() for row in card.rows}
    assert standings == {"common practice", "from memory"}


def test_the_range_of_a_service_covers_its_publications_and_has_the_weakest_standing() -> None:
    # river water: 0.00035 to 0.0007 (two public tables), 0.0002 to 0.0006 (a textbook, from memory)
    river = typical(FOULING)["river water, average"]
    assert (river.low, river.high, river.standing) == (0.0002, 0.0007, "from memory")
    assert len(river.publications) == 3
    # treated cooling-tower water: both tables say 0.001 to 0.002 h ft2 F/Btu (common practice), rounded
    tower = typical(FOULING)["cooling tower water, treated"]
    assert tower.low == pytest.approx(0.001 * HOUR_FOOT, rel=0.03)
    assert tower.high == pytest.approx(0.002 * HOUR_FOOT, rel=0.01)
    assert tower.standing == "common practice"
    # steam condensers: the two tables disagree at the top, 6000 and 4000 W/(m2 K): both are covered
    condenser = typical(OVERALL)["steam condenser"]
    assert (condenser.low, condenser.high) == (1000.0, 6000.0)


def test_the_band_of_allowances_holds_every_typical_one() -> None:
    band = bands()["fouling allowance"]
    for usual in typical(FOULING).values():
        assert band.low < usual.low and usual.high < band.high


def test_typical_coefficients_of_a_pair_lie_within_its_band() -> None:
    by_service = {
        "gas to gas, atmospheric": "U of gas to gas",
        "gas to gas, high pressure": "U of gas to gas",
        "liquid to gas, atmospheric": "U of liquid to gas",
        "liquid to gas, high pressure": "U of liquid to gas",
        "water to air, finned": "U of liquid to gas",
        "water to water": "U of liquid to liquid",
        "water to oil": "U of liquid to liquid",
        "liquid to liquid, plates": "U of liquid to liquid",
        "steam condenser": "U of condensing to liquid",
        "feed water heater": "U of condensing to liquid",
        "steam to heavy fuel oil": "U of condensing to liquid",
        "steam to air, finned": "U of condensing to gas",
        "evaporator, forced circulation": "U with boiling",
    }
    for service, name in by_service.items():
        usual, band = typical(OVERALL)[service], bands()[name]
        assert band.low <= usual.low and usual.high <= band.high


@pytest.mark.parametrize(
    ("old", "new", "code"),
    [
        ("publication: 1", "publication: 4", "limit-source-unknown"),
        ("low: 0.0002 m^2 K/W, high: 0.0006", "low: 0.0008 m^2 K/W, high: 0.0006", "table-not-rising"),
        ("low: 0.0001 m^2 K/W", "low: 0.0001 W/(m^2 K)", "unit-dimension"),
        ("quantity: area resistance", "quantity: overall coeficient", "choice-unknown"),
        ("allowances: fouling-waters", "allowances: waters", "card-id-differs"),
        ("standing: from memory", "standing: hearsay", "choice-unknown"),
    ],
)
def test_a_bad_card_is_refused_with_its_place(tmp_path: Path, old: str, new: str, code: str) -> None:
    text = (ALLOWANCES / "fouling-waters.yaml").read_text(encoding="utf-8")
    assert old in text
    (tmp_path / "fouling-waters.yaml").write_text(text.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(Faults) as caught:
        allowance_cards(tmp_path)
    assert code in {fault.code for fault in caught.value.faults}


def test_a_bad_band_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "bands.yaml"
    path.write_text(
        "bands:\n  - {band: x, quantity: no such, place: a place, low: 1 m, high: 2 m, because: a trial,"
        " source: common practice, standing: common practice}\n",
        encoding="utf-8",
    )
    with pytest.raises(Faults) as caught:
        bands(path)
    assert caught.value.faults[0].code == "quantity-unknown"


@pytest.mark.parametrize(
    ("name", "lines"),
    [
        ("bands", ["tube bore", "4 to 80 mm", "velocity in admiralty tubes"]),
        (
            "allowances",
            ["cooling tower water, treated", "0.00018 to 0.00035 m²·K/W", "factor of 5", "steam condenser"],
        ),
        ("emissivities", ["steel, oxidised", "0.04 to 0.06", "from memory"]),
    ],
)
def test_the_library_shows_its_page(name: str, lines: list[str]) -> None:
    shown = CliRunner().invoke(command, [name])
    assert shown.exit_code == 0
    for line in lines:
        assert line in shown.output
