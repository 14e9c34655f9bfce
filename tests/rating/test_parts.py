"""A unit in parts, one of whose streams keeps its temperature."""

from __future__ import annotations

from pathlib import Path

import pytest
from rated_units import COOLER, HEATER, solved

from calcbook.chain.along import BECAUSE, IN_PARTS
from calcbook.chain.outcome import Solved
from calcbook.faults import Faults

ALONG = "duty / ends / overall coefficient"


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
