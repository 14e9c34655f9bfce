"""What a record says beside a verdict: how sure it is, what a proposal rests on, what a figure leaves out."""

from __future__ import annotations

import math
import re
from functools import cache
from pathlib import Path

import pytest

from calcbook.faults import Faults
from calcbook.interface import record_text, solve_file

CALCS = Path(__file__).resolve().parents[2] / "calcs"


@cache
def lines(name: str) -> tuple[str, ...]:
    return tuple(record_text(solve_file(CALCS / f"{name}.yaml")).splitlines())


def line_with(name: str, start: str) -> str:
    return next(line for line in lines(name) if line.startswith(start))


def with_criterion(folder: Path, criterion: str, *changes: tuple[str, str]) -> Path:
    """HC-985 with another criterion in the place of its own."""
    text = (CALCS / "hc-985.yaml").read_text(encoding="utf-8")
    for old, new in (
        ("that: area_margin >= 0, source: procedure LM-PR-21, probability: 95 %", criterion),
        *changes,
    ):
        assert text.count(old) == 1
        text = text.replace(old, new)
    path = folder / "hc-985.yaml"
    path.write_text(text, encoding="utf-8")
    return path


def test_a_criterion_of_samples_says_with_which_probability_it_holds(tmp_path: Path) -> None:
    path = with_criterion(tmp_path, "that: area_margin >= 0, source: test")
    found = record_text(solve_file(path)).splitlines()
    sampled = next(line for line in found if line.startswith("Probability that it holds"))
    probability = sampled.rpartition(": ")[2].rstrip(".")
    row = next(line for line in found if line.startswith("| criterion 1"))
    assert f"criterion met at the stated values; holds with {probability} |" in row


@pytest.mark.parametrize(("asked", "met"), [("80 %", True), ("0.95", False)])
def test_a_criterion_that_asks_for_a_probability_is_decided_by_it(
    tmp_path: Path, asked: str, met: bool
) -> None:
    """The margin is above zero in 86 % of the samples, as the record of HC-985 gives it."""
    path = with_criterion(tmp_path, f"that: area_margin >= 0, source: test, probability: {asked}")
    solved = solve_file(path)
    (criterion,) = solved.base.criteria
    assert (criterion.met, criterion.is_met_as_stated) == (met, True)
    assert criterion.reached == pytest.approx(0.86, abs=0.01)
    text = record_text(solved)
    assert f"{int(met)} of 1 criterion met" in text
    assert ("- criterion 1 is not met in case base" in text) is not met
    assert "is searched by its verdict at the stated values" in text
    assert " | criterion 1 at the stated values: met to not met |" in text
    assert " | criterion 1: met" not in text


@pytest.mark.parametrize(
    ("criterion", "code"),
    [
        ("that: area_margin >= 0, source: test, probability: 100 %", "number-unreadable"),
        ("that: area_margin >= 0, source: test, probability: 95", "number-unreadable"),
        ("that: area_margin >= 0, source: test, probability: 5 K", "number-unreadable"),
        ("that: dp condensate_service <= 9 kPa, source: test, probability: 95 %", "result-not-propagated"),
    ],
)
def test_a_probability_that_cannot_be_is_a_fault(tmp_path: Path, criterion: str, code: str) -> None:
    with pytest.raises(Faults) as caught:
        solve_file(with_criterion(tmp_path, criterion), for_record=False)
    assert [fault.code for fault in caught.value.faults] == [code]


def test_a_share_next_to_what_is_asked_says_so(tmp_path: Path) -> None:
    """A share of N samples has the standard deviation sqrt(p(1 − p)/N) (binomial law)."""
    near, far = ("probability: 86 %", "probability: 87 %")
    rows = []
    for asked in (near, far):
        path = with_criterion(tmp_path, f"that: area_margin >= 0, source: test, {asked}")
        solved = solve_file(path)
        rows.append(
            next(line for line in record_text(solved).splitlines() if line.startswith("| criterion 1"))
        )
    sampling = solved.uncertainty.sampling
    (share,) = (one.probability for one in sampling.chances if one.id == "criterion 1")
    deviation = 100.0 * math.sqrt(share * (1.0 - share) / sampling.trials)
    assert abs(100.0 * share - 86.0) < 2.0 * deviation < 1.0
    assert (
        f"a standard deviation of {deviation:#.2g} %, so that other samples may decide otherwise" in rows[0]
    )
    assert "may decide otherwise" not in rows[1]


def test_a_probability_wants_samples(tmp_path: Path) -> None:
    text = (CALCS / "hc-985.yaml").read_text(encoding="utf-8")
    start, end = text.index("\nuncertainty:"), text.index("\nreport:")
    path = tmp_path / "hc-985.yaml"
    path.write_text(text[:start] + text[end:], encoding="utf-8")
    with pytest.raises(Faults) as caught:
        solve_file(path, for_record=False)
    (fault,) = caught.value.faults
    assert (fault.code, fault.expected) == ("key-missing", "uncertainty: … in the file, which draws them")


def test_a_criterion_inside_its_uncertainty_is_no_plain_verdict() -> None:
    answer = solve_file(CALCS / "wc-105.yaml")
    budget = next(one for one in answer.uncertainty.budgets if one.result == "area_margin")
    first = answer.base.criteria[0]
    assert first.met and abs(first.margin) < budget.expanded
    assert "the limit lies within the expanded uncertainty" in line_with("wc-105", "| criterion 1")
    verdict = line_with("wc-105", "| criterion 2").split(" | ")[-2]
    assert verdict == "criterion met; not met on day one: turned down"


def test_a_proposal_says_what_it_does_not_hold() -> None:
    found = [
        line for line in lines("wc-111") if line.startswith(("Caution: the offsets", "- The proposal stands"))
    ]
    assert len(found) == 2
    assert "Beyond the rows it is the model alone." in found[1]


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("wc-105", "thickness and roughness of a deposit are not counted"),
        ("hr-821", "the deposit narrows the flow, its roughness is not counted"),
    ],
)
def test_a_pressure_drop_in_service_says_what_of_the_deposit_it_holds(name: str, words: str) -> None:
    rows = [line for line in lines(name) if line.startswith("| Pressure drop of ") and "in service" in line]
    assert rows and all(words in row for row in rows)


def test_only_a_surface_that_stands_in_the_open_can_burn() -> None:
    """A bank in a duct, tubes in a boiling pool and a wall under its jacket are surfaces that nobody touches, hot as
    they are; a bare tube in the air of a fan is one."""
    for name in ("ha-992", "kr-801", "jv-971"):
        assert not any("burn hazard" in line for line in lines(name))
    burning = [line for line in lines("ac-501") if "burn hazard" in line]
    assert len(burning) == 2 and "86.76 °C" in burning[0]


def test_a_deposit_is_told_of_the_side_it_stands_on() -> None:
    """The nitrogen of AC-501 has no deposit; the dust on its other side does not change what its pressure drop holds."""
    row = next(line for line in lines("ac-501") if line.startswith("| Pressure drop of nitrogen, in service"))
    assert "deposit" not in row


def test_a_criterion_on_a_clean_surface_is_judged_on_day_one_too() -> None:
    """Against the surface by hand: T_co + U_clean·(T_hi − T_co)/h_o, with U at the means and the coefficient of the
    shell side at its flow, (m/m_ref)^0.6. U at the hot end is some 1 % above that at the means: 0.3 K here."""
    day = solve_file(CALCS / "wc-105.yaml", for_record=False).rating.answered[""]
    clean, turned_down = (item for item in day.criteria if item.id == "criterion 2")
    for item, state in ((clean, day.clean), (turned_down, day.turned_down)):
        coefficient = 5200.0 * (state.sides["cold"].mass_flow / 20.6) ** 0.6
        outlet = state.sides["cold"].outlet
        by_hand = outlet + state.overall * (79.2 + 273.15 - outlet) / coefficient
        assert item.value == pytest.approx(by_hand, abs=0.3)
    assert clean.met and not turned_down.met
    assert any(
        line.startswith("- criterion 2 is not met on day one, turned down") for line in lines("wc-105")
    )


def test_what_its_own_tolerance_can_flip_stands_first() -> None:
    flips = solve_file(CALCS / "wc-105.yaml").flips.of_kind("criterion")
    reached = [flip.is_within_tolerance for flip in flips]
    assert reached == sorted(reached, reverse=True) and reached[0]


def test_only_what_the_methods_in_use_take_is_assumed() -> None:
    """WC-105 flows turbulent: the profile and the boundary of the laminar and the transition law are not its own. The
    oil of OC-201 is laminar and takes the profile that its file states."""
    turbulent = [line for line in lines("wc-105") if line.startswith("| tube-side film/")]
    assert turbulent and not any("/profile |" in line or "/boundary |" in line for line in turbulent)
    assert any(line.startswith("| profile stated for oil film | developed |") for line in lines("oc-201"))


def test_a_margin_below_zero_is_taken_from_the_stacked_ones() -> None:
    """The stacked margins of WC-105 less what is below zero are the installed area over the clean one, less one."""
    line = next(line for line in lines("wc-105") if line.startswith("Stacked margins:"))
    together, less = (float(word[:-2]) for word in re.findall(r"[0-9.]+ %", line))
    solved = solve_file(CALCS / "wc-105.yaml", for_record=False)
    installed, clean = (solved.base.results[f"area_{name}"].value for name in ("installed", "clean"))
    assert together - less == pytest.approx(
        100.0 * (installed / clean - 1.0), abs=0.11
    )  # two roundings to 0.1 %


def with_case_as_base(name: str, case: str, folder: Path) -> Path:
    """A calculation file with the figures of one of its cases in the place of those of the base case."""
    text = (CALCS / f"{name}.yaml").read_text(encoding="utf-8")
    block = text.split(f"\n  {case}:\n", 1)[1]
    for line in block.splitlines():
        found = re.fullmatch(r"    (\w+): +\{value: ([^,]+), .*", line)
        if found is None:
            break
        text, count = re.subn(rf"(?m)^(  {found[1]}: +\{{value: )[^,]+", rf"\g<1>{found[2]}", text, count=1)
        assert count == 1
    path = folder / f"{name}.yaml"
    path.write_text(text, encoding="utf-8")
    return path


@pytest.mark.parametrize(
    ("name", "case", "result"),
    [
        ("co-993", "winter", "U_service"),
        ("ha-992", "fresh air", "U_service"),
        ("jv-971", "storage", "U_service"),
        ("hr-821", "yearly cleaning", "area_margin"),
    ],
)
def test_a_case_is_as_sure_as_it_would_be_as_the_base(
    tmp_path: Path, name: str, case: str, result: str
) -> None:
    spreads = solve_file(CALCS / f"{name}.yaml", for_record=False).uncertainty.elsewhere
    (spread,) = [one for one in spreads if (one.case, one.result) == (case, result)]
    alone = solve_file(with_case_as_base(name, case, tmp_path), for_record=False)
    budget = next(one for one in alone.uncertainty.budgets if one.result == result)
    # The curves of the properties end elsewhere with another base case: they agree within about 1e-8.
    assert spread.value == pytest.approx(budget.value, rel=1e-7)
    assert spread.expanded == pytest.approx(budget.expanded, rel=1e-6)


def test_a_verdict_of_a_case_says_how_sure_it_is() -> None:
    rows = [line for line in lines("co-993") if line.startswith("| criterion 1 | winter")]
    assert rows and all("the limit lies within the expanded uncertainty" in row for row in rows)


def test_a_case_whose_figure_has_no_room_for_the_tolerance_says_so() -> None:
    """The wind of 0 m/s of the case cannot have the ± 1 m/s of the base case."""
    rows = [line for line in lines("sl-301") if line.startswith("| criterion 1 | still air")]
    assert rows and all("its uncertainty is not worked out" in row for row in rows)


def test_a_bundle_is_as_sure_as_the_tube_that_it_is_made_of() -> None:
    """Cooper's 30 % is taken as a bound: U moves by its slope times 30 %/√3."""
    budget = next(
        one for one in solve_file(CALCS / "kr-801.yaml").uncertainty.budgets if one.result == "U_service"
    )
    row = next(one for one in budget.rows if one.input.id.endswith("bundle-boiling-cooper"))
    assert row.input.standard == pytest.approx(0.30 / 3.0**0.5)
    assert row.contribution == pytest.approx(row.slope * 0.30 / 3.0**0.5)
    assert "as cooper-1984, which it uses" in row.input.rule
    for number in (1, 2):
        assert "the limit lies within the expanded uncertainty" in line_with(
            "kr-801", f"| criterion {number}"
        )


def test_a_verdict_names_the_film_that_its_uncertainty_lacks() -> None:
    row = line_with("oc-201", "| criterion 1 | warm running")
    assert "criterion not met at the stated values; its uncertainty lacks the part of oil film" in row


def test_a_pressure_drop_is_judged_with_the_accuracy_of_its_cards() -> None:
    """55.7 kPa by a card that states 50 % beside a limit of 60 kPa; 103.6 by one of 2 % beside 120 kPa."""
    assert "within the accuracy of martin-1996-friction, 50.0 %" in line_with("pc-961", "| criterion 2")
    assert "within the accuracy" not in line_with("hr-821", "| criterion 2 | base")
    assert "martin-1996-friction within 50 %" in line_with("pc-961", "| Pressure drop of wash water, in")


def test_one_figure_under_two_names_has_one_budget() -> None:
    budgets = [line for line in lines("ab-901") if line.startswith("#### Budget of U_service")]
    assert budgets == ["#### Budget of U_service, U_service on bare"]
    assert "the limit lies within the expanded uncertainty" in line_with("ab-901", "| criterion 1")


def test_what_limits_a_proposal_stands_among_the_cautions() -> None:
    found = [line for line in lines("wc-111") if line.startswith("- Survey: ")]
    assert len(found) == 2 and "the offsets lie" in found[0] and "rows reach" in found[1]


def test_the_saturation_temperature_that_steam_loses_is_looked_at() -> None:
    """Steam tables (IAPWS-IF97): 1.02 bar 100.16 degC, 0.952 bar 98.24 degC; the pentane boils at 72.1 degC."""
    solved = solve_file(CALCS / "kr-801.yaml")
    (check,) = [
        one
        for one in solved.base.checks
        if one.id == "steam film / saturation / pressure drop" and one.condition == "service"
    ]
    assert (check.level, check.state) == ("caution", "outside")
    assert check.value == pytest.approx(1.92, abs=0.01)
    assert float(check.limit.split()[1]) == pytest.approx(0.05 * (100.16 - 72.1), abs=0.01)


def test_what_no_relation_looks_at_is_no_assumption(tmp_path: Path) -> None:
    """The exponent of gases acts on a heated gas alone; lanes that are not there act with their width."""
    text = (CALCS / "ac-501.yaml").read_text(encoding="utf-8")
    heated = tmp_path / "ac-501.yaml"
    assert text.count("T_air: {value: 24 degC") == 1
    heated.write_text(text.replace("T_air: {value: 24 degC", "T_air: {value: 160 degC"), encoding="utf-8")

    def said(path: Path) -> set[str]:
        return {item.id for item in solve_file(path, for_record=False).base.assumptions}

    assert "nitrogen film/n_gas" in said(heated)
    assert "nitrogen film/n_gas" not in said(CALCS / "ac-501.yaml")
    assert "tube-side film/n_gas" not in said(CALCS / "wc-101.yaml")
    assert {"oil film/N_pl", "oil film/w_pl"} <= said(CALCS / "bd-981.yaml")


def test_a_viscosity_that_is_carried_beyond_its_points_is_told(tmp_path: Path) -> None:
    """Points at 20 and 50 degC: at 58 degC a caution, at 95 degC, more than 40 K beyond, an open item."""
    text = (CALCS / "co-993.yaml").read_text(encoding="utf-8")
    old = "T_c:  {value: 58 degC"
    assert text.count(old) == 1
    found = {}
    for figure in ("45", "58", "95"):
        path = tmp_path / f"co-{figure}.yaml"
        path.write_text(text.replace(old, f"T_c:  {{value: {figure} degC"), encoding="utf-8")
        checks = solve_file(path, for_record=False).base.checks
        found[figure] = [
            one.state for one in checks if "/ viscosity " in one.id and one.condition == "service"
        ]
    assert found == {
        "45": ["within", "within"],
        "58": ["outside", "within"],
        "95": ["outside", "outside"],
    }


def test_a_given_whose_tolerance_reaches_another_verdict_is_named_beside_it() -> None:
    """The flow at which the pressure drop reaches its limit lies 0.59 of its ± 2 % away, by the distance to flip."""
    solved = solve_file(CALCS / "hr-821.yaml")
    flip = next(
        one
        for one in solved.flips.of_kind("criterion")
        if (one.id, one.case, one.input.symbol) == ("criterion 2", "yearly cleaning", "m_h")
    )
    assert 0.5 < abs(flip.tolerances) < 0.7
    assert "; m_h alone turns it at 0.59 of its tolerance" in line_with(
        "hr-821", "| criterion 2 | yearly cleaning"
    )
    assert "alone turns it" not in line_with("hr-821", "| criterion 2 | base")


def test_a_stream_that_would_lose_more_pressure_than_it_has_is_an_open_item(tmp_path: Path) -> None:
    text = (CALCS / "wc-105.yaml").read_text(encoding="utf-8")
    assert text.count("15.75 mm") == text.count("19.05 mm") == 1
    path = tmp_path / "wc-105.yaml"
    path.write_text(text.replace("15.75 mm", "4 mm").replace("19.05 mm", "6 mm"), encoding="utf-8")
    items = {item.id: item.text for item in solve_file(path, for_record=False).open_items}
    assert re.fullmatch(
        r"Stream hot would lose [0-9.]+ bar of its 4 bar \(absolute\), (clean|service)\.",
        items["tube-side film/pressure lost"],
    )


def test_a_probability_that_no_case_works_out_is_told_among_the_questions(tmp_path: Path) -> None:
    """The samples are of the base case, and a case without an uncertainty stands at the stated values alone: here a
    tolerance of 2 kg/s would take its flow below zero."""
    text = (CALCS / "hc-985.yaml").read_text(encoding="utf-8")
    assert "cases:" not in text and "probability: 95 %" in text and text.count("tolerance: 4 %") == 1
    path = tmp_path / "hc-985.yaml"
    path.write_text(
        text.replace("tolerance: 4 %", "tolerance: 2 kg/s")
        + "cases:\n  low: {m_c: {value: 1.9 kg/s, source: heat balance}}\n",
        encoding="utf-8",
    )
    record = record_text(solve_file(path))
    row = next(line for line in record.split("\n") if "| Are the acceptance criteria met? |" in line)
    assert "without the probability asked for: criterion 1 in case low." in row
    (item,) = [item for item in solve_file(path).open_items if item.id == "criterion 1/probability in low"]
    assert "the tolerance of `m_c` takes it below what it can be" in item.text
