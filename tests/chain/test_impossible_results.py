"""Names of results that no calculation has, told where no results are there to look them up in."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from calcbook.chain.impossible_results import tell_impossible_results
from calcbook.faults import Collector, Place
from calcbook.interface import read, solve_file

EXAMPLES = Path(__file__).resolve().parents[2] / "calcs"


@pytest.mark.parametrize("name", ["wc-101", "kr-801", "sh-831", "wc-105", "hc-985", "hr-821"])
def test_every_result_of_an_example_may_be_asked_for(name):
    path = EXAMPLES / f"{name}.yaml"
    base = solve_file(path, for_record=False).base
    calculation = read(path)
    one = calculation.acceptance[0]
    asked = tuple(one._replace(result=result) for result in base.results)
    collector = Collector()
    tell_impossible_results(_asking(calculation, asked), collector)
    assert len(asked) > 15
    assert not collector


def test_a_slip_of_the_keyboard_is_told_with_the_nearest_name():
    calculation = read(EXAMPLES / "kr-801.yaml")
    slip = calculation.acceptance[0]._replace(result="area_margn", place=Place("kr-801.yaml", 68, 12))
    collector = Collector()
    tell_impossible_results(_asking(calculation, (slip,)), collector)
    (fault,) = collector
    assert (fault.code, fault.place.line) == ("result-unknown", 68)
    assert "area_margin" in fault.nearest


def _asking(calculation, criteria):
    return replace(calculation, acceptance=criteria)
