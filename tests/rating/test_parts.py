"""A unit in parts: fouled, of a stated mean temperature, and one of whose streams keeps its temperature."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from rated_units import CASES, COOLER, HEATER, solved

from calcbook.chain.along import BECAUSE, IN_PARTS, U_SPREAD
from calcbook.chain.outcome import Solved
from calcbook.faults import Faults

ALONG = "duty / ends / overall coefficient"
FOULED = (CASES / "rated-cooler.yaml").read_text(encoding="utf-8")


def in_parts(folder: Path, arrangement: str) -> Solved:
    return solved(
        folder, HEATER.replace("arrangement: shell and tube", f"arrangement: {arrangement}\n  parts: 4")
    )


def because(answer: Solved) -> set[str]:
    return {check.because for check in answer.base.checks if check.id == ALONG}


def test_beside_a_stream_that_keeps_its_temperature_any_arrangement_can_be_cut(tmp_path: Path) -> None:
    """All arrangements are then one (Kays, London, Compact Heat Exchangers: effectiveness 1 - exp(-NTU))."""
    found = [in_parts(tmp_path, name) for name in ("shell and tube", "counterflow", "crossflow both mixed")]
    areas = [answer.base.results["area_service of parts"].value for answer in found]
    assert areas[1:] == pytest.approx([areas[0]] * 2, rel=1e-12)
    # U rises with the water's temperature: the parts differ, and their sum is near the area of one mean state.
    assert found[0].rating is not None and found[0].rating.parts is not None
    mean = found[0].base.results["area_service"].value
    assert areas[0] != mean and areas[0] == pytest.approx(mean, rel=0.01)
    rows = found[0].rating.parts.rows
    assert [row.hot for row in rows] == [rows[0].hot] * 4
    assert [row.cold[1] for row in rows[:-1]] == [row.cold[0] for row in rows[1:]]
    assert rows[-1].overall["clean"] > rows[0].overall["clean"]


def test_parts_are_advised_where_there_can_be_some(tmp_path: Path) -> None:
    assert because(solved(tmp_path, HEATER)) == {f"{BECAUSE}: {IN_PARTS}"}
    two_pass = COOLER.replace("arrangement: counterflow", "arrangement: shell and tube")
    assert because(solved(tmp_path, two_pass)) == {BECAUSE}
    with pytest.raises(Faults) as caught:
        solved(tmp_path, two_pass.replace("shell and tube", "shell and tube\n  parts: 4"))
    (fault,) = caught.value.faults
    assert fault.code == "duty-unreadable" and "shell and tube cannot be cut" in fault.message


def test_u_may_differ_by_a_fifth_between_the_ends(tmp_path: Path) -> None:
    """The bound of common practice: clean U of the heater differs by 24 %, and by less with its allowance."""
    found = [check for check in solved(tmp_path, HEATER).base.checks if check.id == ALONG]
    spread = {check.condition: check.value for check in found}
    assert 0.0 < spread["service"] < 0.2 < spread["clean"] < 0.3
    assert {check.condition: check.state for check in found} == {"service": "within", "clean": "outside"}


def test_a_fouled_unit_in_parts_keeps_service_and_clean_apart(tmp_path: Path) -> None:
    """Each part by hand: the area of a quarter of the duty is Q/(4·U·ΔT_lm) in counterflow, fouled and clean."""
    answer = solved(tmp_path, FOULED)
    results = {name: result.value for name, result in answer.base.results.items()}
    assert answer.rating is not None and answer.rating.parts is not None
    found = answer.rating.parts
    # Hot inlet against cold outlet, hot outlet against cold inlet.
    ends = [(row.hot[0] - row.cold[1], row.hot[1] - row.cold[0]) for row in found.rows]
    means = [(first - last) / math.log(first / last) for first, last in ends]
    for condition in ("service", "clean"):
        areas = [
            results["duty"] / (4.0 * row.overall[condition] * mean)
            for row, mean in zip(found.rows, means, strict=True)
        ]
        # 1e-11: the logarithm of two differences that are a few per cent apart loses a digit.
        assert [row.area[condition] for row in found.rows] == pytest.approx(areas, rel=1e-11)
        assert results[f"area_{condition} of parts"] == pytest.approx(sum(areas), rel=1e-11)
    # The deposits are worth half the clean area: service and clean are not mistaken for each other.
    assert results["area_service of parts"] > 1.5 * results["area_clean of parts"]
    margin = results["area_installed"] / results["area_service of parts"] - 1.0
    assert results["area_margin of parts"] == pytest.approx(margin, rel=1e-12)
    spread = {
        condition: max(row.overall[condition] for row in found.rows)
        / min(row.overall[condition] for row in found.rows)
        - 1.0
        for condition in ("service", "clean")
    }
    # A resistance that is the same everywhere evens U out: the spread in service is the smaller one.
    assert spread["service"] < spread["clean"]
    assert found.spread == pytest.approx(spread["service"], rel=1e-12)


def test_a_part_has_its_own_mean_temperature_where_the_file_states_that_of_the_unit(tmp_path: Path) -> None:
    """74 °C is the mean of 78 and 70 °C: stated beside the ends or not, the parts are the same."""
    apart = FOULED.replace(
        "    flow: m_hot\n", "    flow: m_hot\n    temperature: {value: 74 degC, source: s}\n"
    )
    assert apart != FOULED
    by_ends, stated = (solved(tmp_path, text).rating for text in (FOULED, apart))
    assert by_ends is not None and by_ends.parts is not None
    assert stated is not None and stated.parts is not None
    for one, other in zip(by_ends.parts.rows, stated.parts.rows, strict=True):
        assert other.overall == pytest.approx(one.overall, rel=1e-12)


@pytest.mark.parametrize(("length", "is_open"), [("2.1475 m", True), ("2.1 m", False), ("2.2 m", False)])
def test_parts_that_decide_otherwise_than_one_mean_state_are_an_open_item(
    tmp_path: Path, length: str, is_open: bool
) -> None:
    """The summed area is 0.1 % below that of one mean state, so that a unit between both carries the duty in parts only.

    U differs too little along it to be an open item by itself."""
    text = HEATER.replace("arrangement: shell and tube", "arrangement: shell and tube\n  parts: 4")
    answer = solved(tmp_path, text.replace("2.44 m", length))
    assert answer.rating is not None and answer.rating.parts is not None
    assert answer.rating.parts.spread < U_SPREAD
    single, summed = (answer.base.results[name].value for name in ("area_margin", "area_margin of parts"))
    assert (single < 0.0 < summed) is is_open
    assert ("duty / parts" in {item.id for item in answer.open_items}) is is_open
