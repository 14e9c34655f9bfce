"""Material cards and emissivities as plain data: shape, standing, rising tables, means."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import yaml

LIBRARY = Path(__file__).parents[2] / "calcbook" / "library"
CARDS = sorted((LIBRARY / "materials").glob("*.yaml"))
KEYS = (
    "material",
    "title",
    "kind",
    "quantity",
    "table",
    "outside",
    "spread",
    "standing",
    "sources",
    "check points",
    "state",
    "notes",
)
STANDINGS = ("published", "independent library", "independent numerics", "common practice", "from memory")
OUTSIDE_STANDINGS = ("published", "independent library", "independent numerics")

every_card = pytest.mark.parametrize("path", CARDS, ids=lambda path: path.stem)


def read(path: Path) -> Any:
    """A file as nested lists, dictionaries and texts: nothing is guessed to be a number or a truth value."""
    return yaml.load(path.read_text(encoding="utf-8"), Loader=yaml.BaseLoader)


def column(card: dict[str, Any], name: str, unit: str) -> np.ndarray:
    """The figures of one column of a table, all of which must carry the unit."""
    texts = card["table"][name]
    assert all(text.endswith(f" {unit}") for text in texts), f"{name} is in {unit}"
    return np.array([float(text.removesuffix(unit)) for text in texts])


def mean_conductivity(
    temperatures: np.ndarray, conductivities: np.ndarray, first: float, second: float
) -> float:
    """Mean of the piecewise-linear table between two temperatures, by the exact trapezoid sum."""
    low, high = sorted((first, second))
    if low == high:
        return float(np.interp(low, temperatures, conductivities))
    inner = temperatures[(temperatures > low) & (temperatures < high)]
    nodes = np.concatenate(([low], inner, [high]))
    values = np.interp(nodes, temperatures, conductivities)
    return float(np.sum(np.diff(nodes) * (values[1:] + values[:-1])) / 2 / (high - low))


def deviations(card: dict[str, Any], conductivities: np.ndarray) -> list[tuple[float, float]]:
    """For each check point: relative deviation of the mean of these conductivities, and what is allowed."""
    temperatures = column(card, "T", "K")
    result = []
    for point in card["check points"]:
        first, second = (float(point["given"][name]) for name in ("T_1", "T_2"))
        reference = float(point["gives"]["k"])
        mean = mean_conductivity(temperatures, conductivities, first, second)
        result.append((abs(mean / reference - 1), float(point["within"])))
    return result


def test_trapezoid_of_a_straight_line_is_its_middle_value() -> None:
    """A linear conductivity has its mean at the mean temperature, whatever rows lie between."""
    temperatures = np.array([300.0, 310.0, 355.0, 400.0])
    conductivities = 10 + 0.02 * (temperatures - 300)
    # Three roundings of the sum: 1e-14 is far above them and far below any slip.
    assert mean_conductivity(temperatures, conductivities, 305, 395) == pytest.approx(11.0, rel=1e-14)
    assert mean_conductivity(temperatures, conductivities, 395, 305) == pytest.approx(11.0, rel=1e-14)


def test_the_library_holds_the_materials_of_the_trade() -> None:
    kinds = [read(path)["kind"] for path in CARDS]
    assert kinds.count("metal") >= 24
    assert kinds.count("insulation") >= 12


@every_card
def test_keys_stand_in_order(path: Path) -> None:
    card = read(path)
    assert list(card) == [key for key in KEYS if key in card]
    assert set(KEYS) - set(card) <= {"notes"}
    assert card["material"] == path.stem
    assert re.fullmatch(r"[a-z0-9]+(-[a-z0-9]+)*", path.stem)
    assert card["kind"] in ("metal", "insulation", "other")
    assert card["quantity"] == "wall conductivity"
    assert card["state"]["is"] in ("trial", "checked", "withdrawn")


@every_card
def test_standing_is_known_and_no_stronger_than_the_table_sources(path: Path) -> None:
    card = read(path)
    named = [card["standing"]]
    named += [source["standing"] for source in card["sources"]]
    named += [point["standing"] for point in card["check points"]]
    assert set(named) <= set(STANDINGS)
    rows = [source["standing"] for source in card["sources"] if not source["for"].startswith("primary")]
    assert card["standing"] == max(rows, key=STANDINGS.index)


@every_card
def test_table_rises_in_temperature_and_has_positive_conductivity(path: Path) -> None:
    card = read(path)
    temperatures, conductivities = column(card, "T", "K"), column(card, "k", "W/(m K)")
    assert len(temperatures) == len(conductivities) >= 1
    assert np.all(np.diff(temperatures) > 0)
    assert temperatures[0] > 0
    assert np.all(conductivities > 0)


@every_card
def test_one_temperature_is_held_and_said(path: Path) -> None:
    card = read(path)
    single = len(card["table"]["T"]) == 1
    assert card["outside"] == ("hold last" if single else "open item")
    assert any(note.startswith("Constant:") for note in card.get("notes", [])) == single


@every_card
def test_spread_is_a_figure_with_its_reason(path: Path) -> None:
    spread = read(path)["spread"]
    assert re.fullmatch(r"[1-9]\d? %", spread["within"])
    assert spread["because"].strip()


@every_card
def test_means_agree_with_the_check_points(path: Path) -> None:
    card = read(path)
    points = card["check points"]
    assert len(points) >= 2
    conductivities = column(card, "k", "W/(m K)")
    for point, (deviation, allowed) in zip(points, deviations(card, conductivities), strict=True):
        assert deviation <= allowed, point["source"]


@every_card
def test_check_points_lie_within_the_table(path: Path) -> None:
    card = read(path)
    if card["outside"] == "hold last":
        return
    temperatures = column(card, "T", "K")
    for point in card["check points"]:
        for name in ("T_1", "T_2"):
            assert temperatures[0] <= float(point["given"][name]) <= temperatures[-1]


@every_card
def test_checked_cards_have_a_reference_from_outside(path: Path) -> None:
    card = read(path)
    outside = [point for point in card["check points"] if point["standing"] in OUTSIDE_STANDINGS]
    if card["state"]["is"] == "checked":
        assert any("identity" not in point["source"] for point in outside)


@every_card
def test_every_row_is_held_by_a_check_point(path: Path) -> None:
    """A row that is 1 % off makes at least one check point fail."""
    card = read(path)
    conductivities = column(card, "k", "W/(m K)")
    for row in range(len(conductivities)):
        changed = conductivities.copy()
        changed[row] *= 1.01
        assert any(deviation > allowed for deviation, allowed in deviations(card, changed)), f"row {row + 1}"


@every_card
def test_notes_and_check_points_name_cards_that_exist(path: Path) -> None:
    card = read(path)
    known = {each.stem for each in CARDS}
    texts = [point["source"] for point in card["check points"]] + card.get("notes", [])
    named = [match for text in texts for match in re.findall(r"second source, card ([a-z0-9-]+)", text)]
    for text in texts:
        if "other cards of this material: " in text or text.startswith("Cards of other densities: "):
            named += text.rsplit(": ", 1)[1].rstrip(".").split(", ")
    assert set(named) <= known - {path.stem}


def test_cards_of_one_material_name_each_other() -> None:
    """Where sources differ, whoever reads one card learns of every other one."""
    others = {}
    for path in CARDS:
        for note in read(path).get("notes", []):
            if "other cards of this material: " in note:
                others[path.stem] = set(note.rsplit(": ", 1)[1].rstrip(".").split(", "))
    assert len(others) >= 20
    for name, named in others.items():
        for other in named:
            assert name in others[other], f"{other} names {name}"


def test_emissivities_are_readable_figures() -> None:
    entries = read(LIBRARY / "emissivities.yaml")["emissivities"]
    assert len(entries) >= 40
    for entry in entries:
        assert list(entry) == ["surface", "temperature", "emissivity", "source", "standing"]
        assert entry["standing"] in STANDINGS
        assert re.fullmatch(r"\d+( to \d+)? degC", entry["temperature"])
        figures = [float(text) for text in entry["emissivity"].split(" to ")]
        assert all(0 < figure <= 1 for figure in figures)
        assert figures == sorted(figures)
    facts = [(entry["surface"], entry["temperature"], entry["source"]) for entry in entries]
    assert len(set(facts)) == len(facts)
