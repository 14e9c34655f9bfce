"""Other methods closed together give, bit for bit, what each gives when it is closed alone."""

from __future__ import annotations

import re
import shutil
from pathlib import Path

import numpy as np
import pytest

from calcbook.chain.alternatives import Alternative, alternatives, needs_temperatures
from calcbook.chain.solve import solve
from calcbook.chain.types import SERVICE, following_elements
from calcbook.interface import record_text, solve_file

CALCS = Path(__file__).resolve().parents[2] / "calcs"


# A film beside a stated one, two films, fins, boiling against a radiating surface: films that share little and much.
@pytest.mark.parametrize("name", ["wc-101", "ab-901", "ac-501", "kr-801"])
def test_together_and_alone_give_the_same_bits(name: str) -> None:
    solved = solve_file(CALCS / f"{name}.yaml")
    chain = solved.chain
    inputs = chain.case_inputs("")
    base = solved.base.solutions[SERVICE]
    compared = 0
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            others = branch.alternatives
            found = alternatives(chain, branch, [Alternative(other, inputs, base) for other in others])
            assert len(found) == len(others)
            for other, together in zip(others, found, strict=True):
                forced = {branch.name: other}
                is_near = following_elements(chain, forced) == following_elements(chain)
                alone = solve(chain, inputs, SERVICE, forced, start=base.unknowns if is_near else None)
                assert bool(together.converged) == bool(alone.converged), other.method.id
                if not bool(alone.converged):
                    continue
                for key in (chain.results["U"], other.coefficient, *(step.id for step in other.steps)):
                    assert together.number(key) == alone.number(key) or (
                        np.isnan(together.number(key)) and np.isnan(alone.number(key))
                    ), (other.method.id, key)
                compared += needs_temperatures(chain, branch, other)
    assert compared > 1


def test_the_governing_case_is_crossed_as_a_base_case_of_its_figures_is(tmp_path: Path) -> None:
    text = (CALCS / "co-993.yaml").read_text(encoding="utf-8")
    solved = solve_file(CALCS / "co-993.yaml")
    assert set(solved.governing.values()) == {"winter"}
    assert list(solved.cross) == ["", "winter"]
    restated = solved.chain.calculation.cases["winter"]
    for symbol, given in restated.items():
        text = re.sub(rf"(?m)^(  {symbol}: .*?value: )[^,}}]+", rf"\g<1>{given.value.quantity.text}", text)
    # The settings of the book hold here too: the site pressure is among the figures.
    shutil.copy(CALCS / "book.yaml", tmp_path)
    trial = tmp_path / "co-993.yaml"
    trial.write_text(re.sub(r"(?m)^cases:\n(?: .*\n)+", "", text), encoding="utf-8")
    alone = solve_file(trial)
    assert list(alone.cross) == [""]
    assert len(alone.cross[""]) == len(solved.cross["winter"]) > 20
    for own, other in zip(alone.cross[""], solved.cross["winter"], strict=True):
        assert own.method == other.method and own.turned == other.turned
        assert own.left_out == other.left_out
        # Series of properties over another range of temperature agree with the backend within 1e-11.
        assert own.overall == pytest.approx(other.overall, rel=1e-10, nan_ok=True)


@pytest.mark.parametrize(
    ("method", "is_met"),
    [("jaster-kosky-1976", False), ("shah-2016-condensation", False), ("shah-1979-condensation", True)],
)
def test_a_criterion_of_the_clean_unit_is_crossed_as_a_file_that_names_the_method(
    method: str, is_met: bool, tmp_path: Path
) -> None:
    """The heat flux of the clean kettle bounds it from above: the larger film coefficients turn its verdict."""
    row = next(row for row in solve_file(CALCS / "kr-801.yaml").cross[""] if row.method == method)
    text = (CALCS / "kr-801.yaml").read_text(encoding="utf-8")
    named = text.replace("method: chato-1962", f"method: {method}")
    named = re.sub(r"(?ms)^accept:.*?(?=^report:)", "", named)
    shutil.copy(CALCS / "book.yaml", tmp_path)
    (tmp_path / "kr-801.yaml").write_text(named, encoding="utf-8")
    alone = solve_file(tmp_path / "kr-801.yaml").base
    assert row.overall_clean == pytest.approx(alone.results["U_clean"].value, rel=1e-10)
    flux = next(item for item in alone.criteria if item.that.startswith("heat_flux_clean"))
    assert flux.met is is_met
    assert (flux.id in row.turned) is not is_met


def test_figures_of_other_methods_show_on_which_side_of_a_limit_they_lie() -> None:
    """With Dittus-Boelter SC-701 has 2302.7 against 2300 W/(m^2 K): three digits would print the limit itself."""
    solved = solve_file(CALCS / "sc-701.yaml")
    row = next(row for row in solved.cross[""] if row.method == "dittus-boelter-mcadams")
    assert 2300.0 < row.overall < 2305.0 and not row.turned
    line = next(line for line in record_text(solved).splitlines() if "(dittus-boelter-mcadams)" in line)
    assert "| 2303 |" in line
    # The handbook holds it for small differences between surface and bulk: the row says that this is exceeded.
    assert "limit ≤ 6 K" in line


def test_a_verdict_that_another_method_turns_is_among_the_cautions() -> None:
    solved = solve_file(CALCS / "hr-821.yaml")
    turned = {(case, row.method) for case, rows in solved.cross.items() for row in rows if row.turned}
    assert turned == {("yearly cleaning", "dittus-boelter-mcadams")}
    row = next(row for row in solved.cross["yearly cleaning"] if row.turned)
    case = next(case for case in solved.cases if case.name == "yearly cleaning")
    item = next(item for item in case.criteria if item.id in row.turned)
    # The margin of area goes with U where the duty and its temperatures stand.
    margin = (1.0 + item.value) * row.overall / case.results["U_service"].value - 1.0
    assert item.is_met_as_stated and item.value >= 0.0 > margin
    page = record_text(solved)
    assert (
        f"in case yearly cleaning: with {row.method} on {row.term}, within its range here, it is not met"
        in page
    )


def test_every_criterion_has_its_governing_case_and_that_is_crossed(tmp_path: Path) -> None:
    """The case with the smallest margin of one criterion need not be that of another: other methods are tried in both."""
    text = (CALCS / "sh-831.yaml").read_text(encoding="utf-8")
    bound = "- {that: T inside surface service <= 100 degC, source: test}"
    text = text.replace("acceptance:\n", f"acceptance:\n  {bound}\n")
    shutil.copy(CALCS / "book.yaml", tmp_path)
    path = tmp_path / "sh-831.yaml"
    path.write_text(text, encoding="utf-8")
    solved = solve_file(path)
    margins = {(item.id, case.name): item.margin for case in solved.cases for item in case.criteria}
    for name, least in solved.governing.items():
        assert margins[name, least] == min(margin for (one, _), margin in margins.items() if one == name)
    assert solved.governing == {"criterion 1": "low load", "criterion 2": "winter"}
    assert list(solved.cross) == ["", "low load", "winter"]
    assert all(solved.cross.values())
    page = record_text(solved)
    assert "Governing cases: winter (smallest margin of area_margin >= 0), U in service" in page
    assert "; low load (smallest margin of T inside surface service <= 100 degC), U in service" in page
    assert "#### Case low load, which governs" in page and "#### Case winter, which governs" in page
