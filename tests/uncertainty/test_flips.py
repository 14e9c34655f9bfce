"""Distance to flip: closed forms, and every line of every example solved again as a record of its own."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import pytest
from small_flips import flips_of, solved_of

from calcbook.chain import analysis
from calcbook.chain.analysis import is_found_later
from calcbook.chain.build import build
from calcbook.chain.criteria import AT_THE_LIMIT
from calcbook.chain.flips_outcome import CONTROLLING, CRITERION, LIMIT, METHOD, Flip, Flips, Searched
from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.pressure import drops, law_of
from calcbook.chain.solve import chosen
from calcbook.chain.types import Chain, Input
from calcbook.faults import Collector, Place
from calcbook.interface import solve_file
from calcbook.library import vocabulary
from calcbook.quantities import read_any
from calcbook.rating.growth import over_time
from calcbook.rating.rate import rated
from calcbook.uncertainty import flips
from calcbook.uncertainty.flips import distances_to_flip
from calcbook.uncertainty.lines import reach

CALCS = Path(__file__).resolve().parent.parent.parent / "calcs"
EXAMPLES = sorted(
    path
    for path in CALCS.glob("*.yaml")
    if path.name != "book.yaml" and not path.name.endswith(".signoffs.yaml")
)


# --- closed forms ---------------------------------------------------------------------------------------

PLANE = """
    givens:
      h_1:  {value: 2000 W/(m^2 K), is: inner coefficient, source: test, tolerance: 10 %}
      h_2:  {value: 500 W/(m^2 K), is: outer coefficient, source: test, tolerance: {expanded: 50 W/(m^2 K), k: 2}}
      R_f:  {value: 0.0002 m^2 K/W, is: allowance, source: test}
      t_w:  {value: 2 mm, is: wall thickness, source: test}
      k_w:  {value: 16 W/(m K), is: wall conductivity, source: test}
      U_min: {value: 250 W/(m^2 K), is: required coefficient, source: test}
      T_1:  {value: 80 degC, is: inner temperature, source: test, tolerance: 0.5 K}
      T_2:  {value: 20 degC, is: outer temperature, source: test}
    geometry: {shape: plane, area: {value: 3 m^2, source: test}}
    resistances:
      - {name: inner film, kind: film, coefficient: h_1, on: inside, temperature: T_1}
      - {name: deposit, kind: fouling, resistance: R_f, on: inside}
      - {name: wall, kind: wall, thickness: t_w, conductivity: k_w}
      - {name: outer film, kind: film, coefficient: h_2, on: outside, temperature: T_2}
    report: {U on: outside}
    acceptance:
      - {that: U_service >= U_min, source: test}
"""
# R_total = 1/h_1 + R_f + t_w/k_w + 1/h_2 = 5e-4 + 2e-4 + 1.25e-4 + 2e-3 = 2.825e-3 m2 K/W; met while R_total <= 1/250.
LEFT = 1.0 / 250.0 - 2.825e-3
CLOSED_FORMS = {
    "R_f": 2e-4 + LEFT,
    "h_1": 1.0 / (5e-4 + LEFT),
    "h_2": 1.0 / (2e-3 + LEFT),
    "t_w": 16.0 * (1.25e-4 + LEFT),
    "k_w": 2e-3 / (1.25e-4 + LEFT),
    "U_min": 1.0 / 2.825e-3,
}


def one(found: Flips, kind: str, symbol: str, case: str = "") -> Flip:
    (flip,) = [flip for flip in found.of_kind(kind) if flip.input.symbol == symbol and flip.case == case]
    return flip


def test_verdicts_of_stated_coefficients_flip_where_the_closed_form_says(tmp_path: Path) -> None:
    found = flips_of(tmp_path, PLANE)
    assert {flip.input.symbol for flip in found.of_kind(CRITERION)} == set(CLOSED_FORMS)
    for symbol, expected in CLOSED_FORMS.items():
        flip = one(found, CRITERION, symbol)
        # Known to 1e-9 of itself, and the engine's own sum of resistances is exact to a few roundings.
        assert flip.at == pytest.approx(expected, rel=2e-9)
        assert (flip.was, flip.becomes) == ("met", "not met")


def test_the_controlling_term_flips_at_half_of_the_resistance(tmp_path: Path) -> None:
    found = flips_of(tmp_path, PLANE)
    # The outer film has 2e-3 of 2.825e-3: it stops controlling when the others add up to 2e-3.
    flip = one(found, CONTROLLING, "R_f")
    assert flip.at == pytest.approx(2e-4 + 2e-3 - 8.25e-4, rel=2e-9)
    assert (flip.was, flip.becomes) == ("outer film", "no controlling term")
    assert one(found, CONTROLLING, "h_2").at == pytest.approx(1.0 / 8.25e-4, rel=2e-9)


def test_a_given_that_nothing_takes_is_not_searched(tmp_path: Path) -> None:
    assert PLANE.count("givens:\n") == 1
    idle = PLANE.replace("givens:\n", "givens:\n      idle: {value: 3 mm, is: spare, source: test}\n")
    before, found = flips_of(tmp_path, PLANE), flips_of(tmp_path, idle)
    assert {one.input.symbol for one in found.searched} == {one.input.symbol for one in before.searched}
    assert "U_min" in {one.input.symbol for one in found.searched}
    told = [
        [(flip.kind, flip.id, flip.input.symbol, flip.becomes, flip.at) for flip in one.flips]
        for one in (before, found)
    ]
    assert told[0] == told[1] and len(told[0]) > 5


def test_ranks_are_by_the_change_in_per_cent(tmp_path: Path) -> None:
    steps = [flip.steps for flip in flips_of(tmp_path, PLANE).of_kind(CRITERION)]
    assert steps == sorted(steps)
    assert one(flips_of(tmp_path, PLANE), CRITERION, "R_f").steps == pytest.approx(
        100 * LEFT / 2e-4, rel=1e-5
    )


def test_tolerances_are_counted_as_they_are_stated(tmp_path: Path) -> None:
    found = flips_of(tmp_path, PLANE)
    inner, outer = (one(found, CRITERION, symbol) for symbol in ("h_1", "h_2"))
    # 10 % of 2000 is 200 W/(m2 K); the expanded tolerance is 50 W/(m2 K) as written, whatever its k. The printed
    # figure has six digits.
    assert inner.tolerances == pytest.approx((2000.0 - CLOSED_FORMS["h_1"]) / 200.0, rel=1e-5)
    assert outer.tolerances == pytest.approx((500.0 - CLOSED_FORMS["h_2"]) / 50.0, rel=1e-5)
    assert math.isnan(one(found, CRITERION, "R_f").tolerances)


def test_printed_figures_enclose_the_flip(tmp_path: Path) -> None:
    for flip in flips_of(tmp_path, PLANE).of_kind(CRITERION):
        outside, inside = (
            read_any(f"{figure!r} {flip.unit}").value for figure in (flip.printed, flip.printed_inside)
        )
        expected = CLOSED_FORMS[flip.input.symbol]
        assert min(outside, inside) < expected < max(outside, inside)
        assert abs(outside - flip.now) > abs(inside - flip.now)
        assert abs(outside - inside) <= 1.001e-5 * abs(expected)


def test_what_flips_nothing_says_how_far_it_was_moved(tmp_path: Path) -> None:
    found = flips_of(tmp_path, PLANE)
    assert not [flip for flip in found.flips if flip.input.symbol in ("T_1", "T_2")]
    (hot,) = [item for item in found.searched if item.input.symbol == "T_1"]
    assert isinstance(hot, Searched)
    assert hot.low_end == "the heat flow turns round" and 20.0 < hot.low < 30.0
    assert hot.high == pytest.approx(280.0) and hot.high_end == "200 K away"


def test_each_case_has_its_own_verdicts(tmp_path: Path) -> None:
    body = (
        PLANE
        + """
    cases:
      scaled: {R_f: {value: 0.0012 m^2 K/W, source: test}}
    """
    )
    found = flips_of(tmp_path, body)
    assert one(found, CRITERION, "R_f").at == pytest.approx(2e-4 + LEFT, rel=2e-9)
    scaled = one(found, CRITERION, "R_f", "scaled")
    assert scaled.now == 0.0012
    assert scaled.at == pytest.approx(2e-4 + LEFT, rel=2e-9)
    # 1e-3 more resistance is there already.
    assert one(found, CRITERION, "h_2", "scaled").at == pytest.approx(1.0 / (2e-3 + LEFT - 1e-3), rel=2e-9)


def test_a_case_that_is_not_met_flips_the_other_way(tmp_path: Path) -> None:
    found = flips_of(tmp_path, PLANE.replace("value: 0.0002 m^2 K/W", "value: 0.003 m^2 K/W"))
    flip = one(found, CRITERION, "R_f")
    assert (flip.was, flip.becomes) == ("not met", "met")
    assert flip.at == pytest.approx(2e-4 + LEFT, rel=2e-9)
    assert flip.printed < flip.printed_inside


def test_a_figure_of_zero_is_moved_from_zero(tmp_path: Path) -> None:
    found = flips_of(tmp_path, PLANE.replace("value: 0.0002 m^2 K/W", "value: 0 m^2 K/W"))
    flip = one(found, CRITERION, "R_f")
    assert flip.at == pytest.approx(2e-4 + LEFT, rel=2e-9)
    assert math.isinf(flip.steps) and flip is found.of_kind(CRITERION)[-1]


def test_without_acceptance_only_the_base_case_is_searched(tmp_path: Path) -> None:
    body = (
        PLANE.partition("    acceptance:")[0]
        + """
    cases:
      scaled: {R_f: {value: 0.0012 m^2 K/W, source: test}}
    """
    )
    solved = solved_of(
        tmp_path,
        body.replace("      U_min: {value: 250 W/(m^2 K), is: required coefficient, source: test}\n", ""),
    )
    assert solved.flips is not None
    assert {item.case for item in solved.flips.searched} == {""}
    assert not solved.flips.of_kind(CRITERION)


TUBES = """
    givens:
      d_i: {value: 16 mm, is: bore, source: test}
      d_o: {value: 20 mm, is: outside diameter, source: test}
      L: {value: 3 m, is: length, source: test}
      N: {value: 40, is: tubes, source: test}
      m_w: {value: 6 kg/s, is: water flow, source: test}
      T_w: {value: 60 degC, is: water temperature, source: test}
      T_o: {value: 30 degC, is: outer temperature, source: test}
      h_o: {value: 3000 W/(m^2 K), is: outer coefficient, source: test}
    streams:
      water: {fluid: water, temperature: T_w, pressure: {value: 4 bara, source: test}, flow: m_w}
    geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}
    resistances:
      - {name: tube film, kind: film, stream: water, situation: inside-tube}
      - {name: tube wall, kind: wall, conductivity: {value: 16 W/(m K), source: test}}
      - {name: outer film, kind: film, coefficient: h_o, on: outside, temperature: T_o}
    report: {U on: outside}
    acceptance:
      - {that: Re water >= 10000, source: test}
"""


def test_counts_step_by_whole_numbers(tmp_path: Path) -> None:
    solved = solved_of(tmp_path, TUBES)
    assert solved.flips is not None
    flip = one(solved.flips, CRITERION, "N")
    # Re falls as 1/N: the last whole number with Re of 10 000 or more is inside, the next one flips.
    last = math.floor(40 * solved.base.results["Re water"].value / 1e4)
    assert (flip.printed_inside, flip.printed, flip.at) == (last, last + 1, last + 1)


def test_a_chosen_method_flips_at_its_reynolds_number(tmp_path: Path) -> None:
    solved = solved_of(tmp_path, TUBES)
    assert solved.flips is not None
    flow, method = (one(solved.flips, kind, "m_w") for kind in (CRITERION, METHOD))
    # At one bulk state Re is proportional to the flow.
    assert flow.at == pytest.approx(6.0 * 1e4 / solved.base.results["Re water"].value, rel=2e-9)
    assert method.at < flow.at and (method.was, method.becomes) == (
        "gnielinski-1976",
        "gnielinski-transition-2013",
    )


@pytest.mark.parametrize(
    ("kind", "now", "direction", "last", "words"),
    [
        ("baffle cut", 0.25, 1, 1.0, "one"),
        ("emissivity", 0.8, 1, 1.0, "one"),
        ("chevron angle", math.radians(60.0), 1, math.radians(90.0), "its definition"),
        ("enlargement", 1.17, -1, 1.0, "one"),
        ("enlargement", 1.17, 1, 117.0, "a hundred times it"),
        ("baffle cut", 0.25, -1, 0.0025, "a hundredth of it"),
    ],
)
def test_the_search_ends_where_a_quantity_does_by_its_definition(
    kind: str, now: float, direction: int, last: float, words: str
) -> None:
    item = Input("given/x", "x", kind, vocabulary()[kind], now, "", "test", Place("x.yaml"), True)
    found = reach(item, now, direction, False)
    assert found.figures[-1] == pytest.approx(last) and found.end == words
    steps = [direction * (after - before) for before, after in pairwise((now, *found.figures))]
    assert min(steps) > 0.0
    beyond = reach(item, last * (1.0 + 0.01 * direction), direction, False)
    assert beyond.figures == () or words.startswith("a hundred")


@pytest.mark.parametrize(
    ("kind", "now", "direction", "last", "words"),
    [
        # An allowance may be nothing; without a flow there is no film.
        ("fouling resistance", 2e-4, -1, 0.0, "zero"),
        ("mass flow", 3.0, -1, 0.03, "a hundredth of it"),
        # From zero there is no way below what cannot be negative.
        ("fouling resistance", 0.0, -1, None, "zero"),
        ("fouling resistance", 0.0, 1, 1e4, "the end of the search"),
        # There may be no sealing strip, and there is at least one row of tubes.
        ("sealing strips", 3.0, -1, 0.0, "none"),
        ("tube rows", 3.0, -1, 1.0, "one"),
        ("temperature", 50.0, 1, 250.0, "200 K away"),
        ("temperature", 300.0, -1, 100.0, "200 K away"),
    ],
)
def test_the_search_ends_where_a_figure_has_no_sense(
    kind: str, now: float, direction: int, last: float | None, words: str
) -> None:
    item = Input("given/x", "x", kind, vocabulary()[kind], now, "", "test", Place("x.yaml"), True)
    found = reach(item, now, direction, False)
    assert found.end == words
    assert (found.figures == ()) if last is None else (found.figures[-1] == pytest.approx(last))


def test_no_temperature_below_nothing_is_looked_at() -> None:
    item = Input("given/T", "T", "T", vocabulary()["temperature"], 50.0, "", "test", Place("x.yaml"), True)
    figures = reach(item, 50.0, -1, False).figures
    assert len(figures) > 5 and 0.0 < min(figures) < 50.0


# --- both ends of a duty, and the largest allowance ---------------------------------------------------

# Stated coefficients and a stated conductivity: every resistance is as it stands, whatever the temperatures.
COOLER = """
    givens:
      d_i: {value: 16 mm, is: bore, source: test}
      d_o: {value: 20 mm, is: outside diameter, source: test}
      L: {value: 5 m, is: length, source: test}
      N: {value: 120, is: tubes, source: test}
      m_h: {value: 10 kg/s, is: hot flow, source: test}
      T_hi: {value: 90 degC, is: hot inlet, source: test}
      T_ho: {value: 60 degC, is: hot outlet, source: test}
      T_ci: {value: 25 degC, is: cold inlet, source: test}
      T_co: {value: 45 degC, is: cold outlet, source: test}
      m_c: {value: 15 kg/s, is: cold flow, source: test}
      h_h: {value: 3000 W/(m^2 K), is: hot coefficient, source: test}
      h_c: {value: 4000 W/(m^2 K), is: cold coefficient, source: test}
      R_f: {value: 0.0002 m^2 K/W, is: allowance, source: test}
    streams:
      hot: {fluid: water, pressure: {value: 6 bara, source: test}, flow: m_h, phase: liquid}
      cold: {fluid: water, pressure: {value: 0.3 bara, source: test}, flow: m_c, phase: liquid}
    duty:
      arrangement: counterflow
      hot: {stream: hot, inlet: T_hi, outlet: T_ho}
      cold: {stream: cold, inlet: T_ci, outlet: T_co}
    geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}
    resistances:
      - {name: hot film, kind: film, stream: hot, coefficient: h_h, on: inside}
      - {name: wall, kind: wall, conductivity: {value: 50 W/(m K), source: test}}
      - {name: deposit, kind: fouling, resistance: R_f, on: outside}
      - {name: cold film, kind: film, stream: cold, coefficient: h_c, on: outside}
    report: {U on: outside}
"""


@pytest.mark.usefixtures("without_other_methods")
def test_a_circuit_that_does_not_close_says_which_property_ends(tmp_path: Path) -> None:
    """Water freezes at 0 degC (common practice): a surface below has no viscosity, and the search ends there."""
    solved = solved_of(tmp_path, TUBES)
    assert solved.flips is not None
    row = next(item for item in solved.flips.searched if item.input.symbol == "T_o")
    assert row.low_end == "the circuit does not close: water has no viscosity at the other side's temperature"
    # Heat flows on until the surface freezes: the other side is colder than ice by then.
    assert row.unit == "degC" and row.low < 0.0
    # On the other side the flow turns round at the water's own temperature.
    assert row.high_end == "the heat flow turns round" and row.high < 60.0


@pytest.mark.usefixtures("without_other_methods")
def test_a_largest_allowance_flips_where_the_closed_form_says(tmp_path: Path) -> None:
    criterion = "    acceptance: [{that: largest_allowance deposit >= 0.0005 m^2 K/W, source: test}]\n"
    solved = solved_of(tmp_path, COOLER + criterion)
    assert solved.flips is not None
    required = solved.base.results["U_required"].value
    whole = solved.base.results["U_clean"].value
    # Without deposits 1/U_clean; the coefficient of the cold film that leaves 0.0005 of 1/U_required.
    room = 1.0 / required - 1.0 / whole
    assert solved.base.results["largest_allowance deposit"].value == pytest.approx(room, rel=1e-9)
    resistance = 1.0 / 4000.0 + room - 0.0005
    flip = one(solved.flips, CRITERION, "h_c")
    assert flip.at == pytest.approx(1.0 / resistance, rel=2e-9)
    # The allowance itself does not move what could be allowed; all else does.
    flipped = {item.input.symbol for item in solved.flips.of_kind(CRITERION)}
    assert "R_f" not in flipped and {"h_h", "h_c", "N", "T_hi", "m_h"} <= flipped
    for item in solved.flips.of_kind(CRITERION):
        check_flip(solved.chain, item)


@pytest.mark.usefixtures("without_other_methods")
def test_a_surface_at_an_end_flips_its_criterion_and_boils_there_first(tmp_path: Path) -> None:
    criterion = (
        "    acceptance: [{that: T outside surface service at the hot inlet <= 66 degC, source: test}]\n"
    )
    solved = solved_of(tmp_path, COOLER + criterion)
    assert solved.flips is not None
    surface = solved.base.results["T outside surface service at the hot inlet"].value
    coefficient = solved.base.results["U_service"].value / 4000.0
    # q = U (T_hi - T_co) at the end, T_s = T_co + q/h_c: of T_hi so much goes to the surface.
    flip = one(solved.flips, CRITERION, "T_hi")
    assert flip.at == pytest.approx(363.15 + (339.15 - surface) / coefficient, abs=1e-6)
    for item in solved.flips.of_kind(CRITERION):
        check_flip(solved.chain, item)


@pytest.mark.usefixtures("without_other_methods")
def test_water_boils_at_the_hot_inlet_before_it_does_at_the_mean(tmp_path: Path) -> None:
    """At 0.3 bar water boils at 69.10 degC (steam tables by IAPWS-IF97)."""
    body = COOLER.replace(
        "stream: hot, coefficient: h_h, on: inside", "stream: hot, coefficient: h_h, on: outside"
    )
    body = body.replace("stream: cold, coefficient: h_c, on: outside", "stream: cold, situation: inside-tube")
    # More tubes than the duty takes, so that the area is not what flips first.
    lines = body.replace("N: {value: 120", "N: {value: 160").splitlines(keepends=True)
    hot, cold = (
        next(place for place, line in enumerate(lines) if f"name: {name} film" in line)
        for name in ("hot", "cold")
    )
    lines[hot], lines[cold] = lines[cold], lines[hot]
    body = "".join(line for line in lines if "h_c:" not in line)
    solved = solved_of(tmp_path, body)
    assert solved.flips is not None
    flip = one(solved.flips, LIMIT, "h_h")
    assert (flip.id, flip.condition) == ("cold film / wall phase / boils at the hot inlet", "clean")
    check_flip(solved.chain, flip)
    outcome, _ = alone(solved.chain, flip, flip.printed)
    assert outcome is not None
    at_end = outcome.results["T inside surface clean at the hot inlet"].value - 273.15
    assert at_end == pytest.approx(69.10, abs=0.01)
    assert outcome.results["T inside surface clean"].value - 273.15 < 60.0


# --- the nearest of several, and what is told of it ---------------------------------------------------


def with_criteria(*criteria: str) -> str:
    lines = "".join(f"      - {{that: {text}, source: test}}\n" for text in criteria)
    return PLANE.partition("    acceptance:\n")[0] + "    acceptance:\n" + lines


def test_of_flips_on_both_sides_the_nearer_is_found_though_its_interval_ends_farther_off(
    tmp_path: Path,
) -> None:
    """The outer film has more than half of the whole below R_f = 0.871e-3 m² K/W, the deposit above 1.106e-3 of them: by hand
    1/h_2 − (1/h_1 + t/k) and 1/h_2 + (1/h_1 + t/k). From 1e-3 the search looks at 0.906e-3 and 0.869e-3, at 1.104e-3 and
    1.150e-3: the interval above ends farther off than the one below.
    """
    spread = (1.106e-3 - 0.871e-3) / 2.0
    outer, rest = 0.871e-3 + spread, spread
    body = PLANE.replace("0.0002 m^2 K/W", "0.001 m^2 K/W").replace(
        "500 W/(m^2 K), is", f"{1.0 / outer!r} W/(m^2 K), is"
    )
    wall = 2e-3 / 200.0
    body = body.replace("16 W/(m K)", "200 W/(m K)").replace(
        "2000 W/(m^2 K)", f"{1.0 / (rest - wall)!r} W/(m^2 K)"
    )
    deposit = Input(
        "given/R_f", "R_f", "R_f", vocabulary()["fouling resistance"], 1e-3, "", "s", Place("x"), True
    )
    ends = {}
    for direction, flip in ((-1, 0.871e-3), (1, 1.106e-3)):
        figures = (1e-3, *reach(deposit, 1e-3, direction, False).figures)
        ends[direction] = next(
            (abs(before - 1e-3), abs(after - 1e-3))
            for before, after in pairwise(figures)
            if direction * before < direction * flip <= direction * after
        )
    assert ends[1][0] < 1e-3 - 0.871e-3 < ends[-1][1] < ends[1][1]
    flip = one(flips_of(tmp_path, body), CONTROLLING, "R_f")
    assert (flip.was, flip.becomes) == ("no controlling term", "deposit")
    assert flip.at == pytest.approx(1.106e-3, rel=2e-9)


def test_each_of_two_criteria_has_its_own_flip(tmp_path: Path) -> None:
    found = flips_of(tmp_path, with_criteria("U_service >= U_min", "U_clean >= 300 W/(m^2 K)"))
    at = {
        flip.id: flip.at for flip in found.of_kind(CRITERION) if (flip.input.symbol, flip.case) == ("h_2", "")
    }
    # Clean the others are 5e-4 + 1.25e-4 m² K/W of the 1/300 that are allowed.
    assert at == pytest.approx(
        {"criterion 1": CLOSED_FORMS["h_2"], "criterion 2": 1.0 / (1.0 / 300.0 - 6.25e-4)}, rel=2e-9
    )


def test_of_another_controlling_term_only_the_nearest_case_is_told(tmp_path: Path) -> None:
    cases = "    cases: {scaled: {R_f: {value: 0.0012 m^2 K/W, source: test}}}\n"
    (flip,) = [
        flip for flip in flips_of(tmp_path, PLANE + cases).of_kind(CONTROLLING) if flip.input.symbol == "h_2"
    ]
    # The others have 8.25e-4 m² K/W, and 1.825e-3 in the case: nearer to the 2e-3 of the film.
    assert flip.case == "scaled" and flip.at == pytest.approx(1.0 / 1.825e-3, rel=2e-9)


def test_a_flip_between_the_last_figure_with_an_answer_and_the_first_without_is_found(tmp_path: Path) -> None:
    """By hand T_1 = T_2 + q·R: 1400 W/m² are left at 23.955 °C; at 20 °C the heat flow turns round."""
    found = flips_of(tmp_path, with_criteria("heat_flux_service >= 1400 W/m^2"))
    assert one(found, CRITERION, "T_1").at - 273.15 == pytest.approx(20.0 + 1400.0 * 2.825e-3, abs=1e-6)
    assert one(found, CRITERION, "T_2").at - 273.15 == pytest.approx(80.0 - 1400.0 * 2.825e-3, abs=1e-6)


def test_a_limit_that_stops_flips_at_the_first_figure_without_an_answer(tmp_path: Path) -> None:
    """A deposit of half the bore leaves none: 9 mm in 18 mm, or a bore of 4 mm with a deposit of 2 mm."""
    body = """
    givens:
      d_i: {value: 18 mm, is: bore, source: test}
      d_o: {value: 40 mm, is: outside diameter, source: test}
      t_d: {value: 2 mm, is: deposit, source: test}
      T_1: {value: 80 degC, is: inner temperature, source: test}
      T_2: {value: 20 degC, is: outer temperature, source: test}
    geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: {value: 3 m, source: test}}
    resistances:
      - {name: inner film, kind: film, coefficient: {value: 900 W/(m^2 K), source: test}, on: inside, temperature: T_1}
      - name: scale
        kind: fouling
        on: inside
        deposit: {thickness: t_d, conductivity: {value: 1 W/(m K), source: test}}
      - {name: wall, kind: wall, conductivity: {value: 16 W/(m K), source: test}}
      - {name: outer film, kind: film, coefficient: {value: 500 W/(m^2 K), source: test}, on: outside, temperature: T_2}
    report: {U on: outside}
    """
    found = flips_of(tmp_path, body)
    for symbol, expected, printed in (("t_d", 0.009, 9.0), ("d_i", 0.004, 4.0)):
        flip = one(found, LIMIT, symbol)
        assert (flip.id, flip.level) == ("scale / deposit / bore", "stop")
        assert (flip.was, flip.becomes) == ("within", "outside")
        assert flip.at == pytest.approx(expected, rel=2e-9)
        # Six digits, the last of them away from the present figure.
        assert flip.printed == pytest.approx(printed, rel=1.001e-5)


def test_cases_tell_the_figures_units_and_tolerances_that_they_restate(tmp_path: Path) -> None:
    cases = """    cases:
      scaled:
        R_f: {value: 1.2 m^2 K/kW, source: test}
        h_1: {value: 1 kW/(m^2 K), source: test}
"""
    found = flips_of(tmp_path, PLANE + cases)
    deposit, inner = (one(found, CRITERION, symbol, "scaled") for symbol in ("R_f", "h_1"))
    # 1/250 less 1e-3 + 1.25e-4 + 2e-3 m² K/W of the others.
    assert (deposit.now_text, deposit.unit) == ("1.2 m^2 K/kW", "m^2 K/kW")
    assert deposit.printed == pytest.approx(0.875, rel=1e-5) and deposit.change == -0.325
    # The 10 % of the base case are those of the figure in the case.
    assert (inner.now_text, inner.tolerance) == ("1 kW/(m^2 K)", "10 %")
    expected = 1.0 / (1.0 / 250.0 - 1.2e-3 - 1.25e-4 - 2e-3)
    assert inner.at == pytest.approx(expected, rel=2e-9)
    assert inner.tolerances == pytest.approx((expected - 1000.0) / 100.0, rel=1e-4)


def test_a_tolerance_of_nothing_is_not_counted(tmp_path: Path) -> None:
    body = PLANE.replace(
        "value: 0.0002 m^2 K/W, is: allowance", "value: 0 m^2 K/W, tolerance: 10 %, is: zero"
    )
    flip = one(flips_of(tmp_path, body), CRITERION, "R_f")
    assert flip.tolerance == "10 %" and math.isnan(flip.tolerances)


@pytest.mark.parametrize(
    ("part", "digits"),
    [
        # Six digits of the figure would not tell a change of 1e-6 of it: four of the change.
        (1e-6, 10),
        # No figure is printed with more than ten.
        (3e-8, 10),
        (1e-4, 8),
    ],
)
def test_a_figure_close_to_its_flip_is_told_with_the_digits_of_the_change(
    tmp_path: Path, part: float, digits: int
) -> None:
    """By hand R_f + (1/U_min − R): what is left is a small part of the allowance of 2e-4 m² K/W."""
    required = 1.0 / (2.825e-3 + part * 2e-4)
    body = PLANE.replace("250 W/(m^2 K), is: required", f"{required!r} W/(m^2 K), is: required")
    flip = one(flips_of(tmp_path, body), CRITERION, "R_f")
    # A coefficient that is short by the rounding of a circuit is at the limit.
    left = (1.0 + AT_THE_LIMIT) / required - 2.825e-3
    # Known to 1e-4 of the change; the sums of resistances round at 4e-19 m² K/W, 1e-7 of the smallest change.
    assert flip.at - 2e-4 == pytest.approx(left, rel=1.1e-4, abs=0.0)
    last = 10.0 ** (-4 - digits + 1)
    assert flip.printed - flip.printed_inside == pytest.approx(last, rel=1e-3, abs=0.0)
    assert 0.0 <= flip.printed - flip.at <= 1.001 * last


def counted(number: str, flow: str) -> str:
    """TUBES with a liquid of constant properties and the given number of tubes: Re = 4 m/(π d_i μ N)."""
    constants = (
        "constants: {density: 1000 kg/m^3, viscosity: 0.001 Pa s, conductivity: 0.6 W/(m K),"
        ' heat capacity: "4200 J/(kg K)"}'
    )
    body = TUBES.replace("fluid: water,", f"fluid: {{{constants}, source: test}}, phase: liquid,")
    return body.replace("value: 40,", f"value: {number},").replace("value: 6 kg/s", f"value: {flow}")


@pytest.mark.usefixtures("without_other_methods")
def test_a_whole_number_flips_at_the_very_next_one_though_the_search_steps_farther(tmp_path: Path) -> None:
    """By hand Re = 10 000 at N = 10.5: the search looks at 10 and then at 12 tubes."""
    flow = 10.5 * 1e4 * math.pi * 0.016 * 0.001 / 4.0
    solved = solved_of(tmp_path, counted("2", f"{flow!r} kg/s"))
    assert solved.flips is not None
    flip = one(solved.flips, CRITERION, "N")
    assert (flip.printed_inside, flip.printed) == (10.0, 11.0)


@pytest.mark.usefixtures("without_other_methods")
def test_a_mean_number_flips_between_whole_ones(tmp_path: Path) -> None:
    flow = 10.37 * 1e4 * math.pi * 0.016 * 0.001 / 4.0
    solved = solved_of(tmp_path, counted("8.5", f"{flow!r} kg/s"))
    assert solved.flips is not None
    assert one(solved.flips, CRITERION, "N").at == pytest.approx(10.37, rel=2e-9)


@pytest.mark.usefixtures("without_other_methods")
def test_a_temperature_difference_is_ranked_by_its_kelvin(tmp_path: Path) -> None:
    """Counterflow with 45 K and 35 K at the ends: 10/ln(45/35) K between the streams."""
    given = "      dT_min: {value: 30 K, is: least difference, source: test}\n"
    body = COOLER.replace("    streams:\n", given + "    streams:\n", 1)
    found = flips_of(tmp_path, body + "    acceptance: [{that: LMTD >= dT_min, source: test}]\n")
    flip = one(found, CRITERION, "dT_min")
    difference = 10.0 / math.log(45.0 / 35.0)
    assert flip.at == pytest.approx(difference, rel=2e-9)
    # The printed figure has six digits.
    assert flip.steps == pytest.approx(difference - 30.0, rel=2e-5)
    # Verdicts of the engineer stand first, then limits, then what controls.
    kinds = list(dict.fromkeys(item.kind for item in found.flips))
    assert kinds == [kind for kind in (CRITERION, LIMIT, METHOD, CONTROLLING) if kind in kinds]
    assert kinds[:2] == [CRITERION, LIMIT]


@pytest.mark.usefixtures("without_other_methods")
def test_of_a_figure_below_zero_change_and_tolerance_count_by_its_size(tmp_path: Path) -> None:
    given = "      M_min: {value: -0.2, is: least margin, source: test, tolerance: 10 %}\n"
    body = COOLER.replace("    streams:\n", given + "    streams:\n", 1)
    solved = solved_of(tmp_path, body + "    acceptance: [{that: area_margin >= M_min, source: test}]\n")
    assert solved.flips is not None
    flip = one(solved.flips, CRITERION, "M_min")
    moved = solved.base.results["area_margin"].value + 0.2
    # The printed figure has six digits.
    assert flip.tolerances == pytest.approx(moved / 0.02, rel=1e-4)
    assert flip.steps == pytest.approx(100.0 * moved / 0.2, rel=1e-4)


@pytest.mark.parametrize(
    ("criterion", "symbol", "printed", "inside"),
    [
        # A coefficient at its limit is not above it: the limit itself flips, and no figure beyond is needed.
        ("h inner film service > 1000 W/(m^2 K)", "h_1", 1000.0, 1000.01),
        ("h outer film service < 900 W/(m^2 K)", "h_2", 900.0, 899.999),
        # At the limit already: ten digits tell the first figure below.
        ("h inner film service >= 2000 W/(m^2 K)", "h_1", 1999.999999, 2000.0),
        # Only without a deposit is the unit as good as clean; a two-thousandth of it is near enough beside.
        ("cleanliness >= 1", "R_f", 0.0, 1e-7),
    ],
)
def test_a_flip_at_a_round_figure_is_printed_as_that_figure(
    tmp_path: Path, criterion: str, symbol: str, printed: float, inside: float
) -> None:
    found = flips_of(tmp_path, with_criteria(criterion))
    flip = one(found, CRITERION, symbol)
    assert (flip.printed, flip.printed_inside) == (printed, inside)
    assert found.unsettled == ()


def test_a_change_of_temperature_is_the_difference_of_what_is_printed(tmp_path: Path) -> None:
    """By hand 20 °C + 14 000 W/m² · 2.825e-3 m² K/W = 59.55 °C from 80.1 °C; 80.1 + 273.15 − 273.15 is not 80.1."""
    body = with_criteria("heat_flux_service >= 14000 W/m^2").replace("80 degC", "80.1 degC")
    flip = one(flips_of(tmp_path, body), CRITERION, "T_1")
    assert (flip.printed, flip.printed_inside, flip.change) == (59.5499, 59.55, -20.5501)


@pytest.mark.usefixtures("without_other_methods")
def test_where_a_duty_ends_only_its_own_limit_flips(tmp_path: Path) -> None:
    """A hot stream that is not cooled is none, at 75 °C and at 90 °C. Beyond, the duty and with it the margin of area are
    below zero: a figure without a record flips no criterion, whose flip lies on the other side."""
    body = COOLER.replace(", outlet: T_co", "").replace("T_ho: {value: 60", "T_ho: {value: 75")
    body = "".join(line for line in body.splitlines(keepends=True) if "T_co:" not in line)
    body = body.replace("N: {value: 120", "N: {value: 400")
    # Constant properties: no other limit is nearer.
    constants = (
        "constants: {density: 1000 kg/m^3, viscosity: 0.001 Pa s, conductivity: 0.6 W/(m K),"
        ' heat capacity: "4190 J/(kg K)"}'
    )
    body = body.replace("fluid: water,", f"fluid: {{{constants}, source: test}},")
    solved = solved_of(tmp_path, body + "    acceptance: [{that: area_margin >= 0, source: test}]\n")
    assert solved.flips is not None
    for symbol, printed, inside in (("T_hi", 75.0, 75.0001), ("T_ho", 90.0, 89.9999)):
        flip = one(solved.flips, LIMIT, symbol)
        assert (flip.id, flip.level, flip.becomes) == ("duty / ends / hot stream", "stop", "outside")
        assert (flip.printed, flip.printed_inside) == (printed, inside)
        check_flip(solved.chain, flip)
    margin = one(solved.flips, CRITERION, "T_ho")
    assert margin.at < 308.15
    check_flip(solved.chain, margin)
    assert not [item for item in solved.flips.of_kind(CRITERION) if item.input.symbol == "T_hi"]


# --- every line of every example ----------------------------------------------------------------------


def replaced(chain: Chain, flip: Flip, figure: float) -> Chain:
    """The chain of one case as a base case, with one given replaced."""
    values = {name: float(value) for name, value in chain.case_inputs(flip.case).items()}
    values[flip.input.id] = figure
    inputs = {name: replace(item, value=values[name]) for name, item in chain.inputs.items()}
    return replace(chain, calculation=replace(chain.calculation, cases={}), inputs=inputs, restated={})


def alone(chain: Chain, flip: Flip, printed: float) -> tuple[CaseOutcome | None, Collector]:
    """The outcome with the printed figure, read as the file would be; None after a fault."""
    collector = Collector()
    figure = read_any(f"{printed!r} {flip.unit}".strip()).value
    solved = analysis.analyse(replaced(chain, flip, figure), collector)
    return (solved.base if solved is not None else None), collector


def rated_alone(chain: Chain, flip: Flip, printed: float) -> CaseOutcome:
    """The outcome with the printed figure, the case a file of its own, with all that is found from a solved one."""
    calculation = chain.calculation
    symbol, restated = flip.input.symbol, calculation.cases.get(flip.case, {})
    given, text = restated.get(symbol) or calculation.givens[symbol], f"{printed!r} {flip.unit}".strip()
    changed = given._replace(value=replace(given.value, text=text, quantity=read_any(text)))
    collector = Collector()
    givens = {**calculation.givens, **restated, symbol: changed}
    probe = replace(calculation, givens=givens, cases={})
    built = build(probe, chain.library, collector)
    solved = analysis.analyse(built, collector) if built is not None else None
    assert solved is not None, list(collector)
    solved = rated(solved)
    # A calculation without a table over time has nothing in service to be followed.
    solved = over_time(solved) if solved.chain.in_service else solved
    return analysis.judged_later(solved, collector).base


def is_later(chain: Chain, flip: Flip) -> bool:
    """Whether a flip is that of a criterion on what is found from a solved calculation."""
    if flip.kind != CRITERION:
        return False
    return is_found_later(chain.calculation.criterion(flip.id).result)


def check_later_flip(chain: Chain, flip: Flip) -> None:
    for printed, word in ((flip.printed, flip.becomes), (flip.printed_inside, flip.was)):
        assert verdicts(chain, rated_alone(chain, flip, printed), flip) == [word]


def verdicts(chain: Chain, case: CaseOutcome, flip: Flip) -> list[str]:
    """What a record says of the verdict that a flip is about."""
    if flip.kind == CRITERION:
        return ["met" if item.met else "not met" for item in case.criteria if item.id == flip.id]
    if flip.kind == LIMIT:
        return [
            check.state for check in case.checks if check.id == flip.id and check.condition == flip.condition
        ]
    if flip.kind == CONTROLLING:
        return [case.controlling or "no controlling term"]
    solution = case.solutions[flip.condition]
    films = [branch for group in (chain.inner, chain.outer) for branch in group.branches]
    found = [chosen(branch, solution).method.id for branch in films if branch.name == flip.id]
    for _, branch, drop in drops(chain):
        law = law_of(drop, solution)
        if f"{branch.name} / pressure drop" == flip.id and law is not None:
            found.append(law.method.id)
    return found


def check_flip(chain: Chain, flip: Flip) -> None:
    case, collector = alone(chain, flip, flip.printed)
    if case is None:
        assert flip.level == "stop" and flip.becomes == "outside"
        assert any(fault.code == "limit-stops" and flip.id in fault.message for fault in collector)
    else:
        assert flip.becomes in verdicts(chain, case, flip)
    case, collector = alone(chain, flip, flip.printed_inside)
    assert case is not None, list(collector)
    found = verdicts(chain, case, flip)
    assert flip.becomes not in found
    assert not found or flip.was in found or set(found) <= {"not counting", "not evaluable"}


@pytest.fixture
def without_other_methods(monkeypatch: pytest.MonkeyPatch) -> None:
    """The cross-check and the sensitivities decide no verdict, and take most of the time."""
    monkeypatch.setattr(analysis, "cross_check", lambda *_: {})
    monkeypatch.setattr(analysis._Analysis, "_sensitivity", lambda *_: ())


@pytest.mark.parametrize("name", ["ha-992", "hr-821", "jv-971"])
@pytest.mark.usefixtures("without_other_methods")
def test_what_is_found_does_not_hang_on_how_intervals_are_divided(
    name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """In these two cases share their nearest flip: the earlier one is reported, whatever the last bits say."""
    solved = solve_file(CALCS / f"{name}.yaml")
    assert solved.flips is not None
    found = [shown_of(solved.flips)]
    for parts in ((1e-3,), (3e-4, 0.02)):
        monkeypatch.setattr(flips, "FIRST_PARTS", parts)
        found.append(shown_of(distances_to_flip(solved)))
    assert found[0] == found[1] == found[2]


def shown_of(found: Flips) -> list[tuple[object, ...]]:
    return [
        (flip.kind, flip.id, flip.condition, flip.case, flip.becomes, flip.input.id, flip.printed, flip.unit)
        for flip in found.flips
    ]


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
@pytest.mark.usefixtures("without_other_methods")
def test_every_line_flips_where_it_says_and_not_just_inside(path: Path) -> None:
    solved = solve_file(path)
    assert solved.flips is not None and solved.flips.flips
    wrong = []
    for flip in solved.flips.flips:
        try:
            (check_later_flip if is_later(solved.chain, flip) else check_flip)(solved.chain, flip)
        except AssertionError as error:
            wrong.append(
                (flip.kind, flip.id, flip.condition, flip.input.symbol, flip.printed, str(error)[:300])
            )
    assert wrong == []


# --- limits of the search at both ends, and allowances below zero -------------------------------------


@pytest.mark.usefixtures("without_other_methods")
def test_an_allowance_below_zero_has_a_verdict_in_every_case_and_flips(tmp_path: Path) -> None:
    criterion = "    acceptance: [{that: largest_allowance deposit >= 0 m^2 K/W, source: test}]\n"
    cases = "    cases: {plugged: {N: {value: 60, source: test}}}\n"
    solved = solved_of(tmp_path, COOLER + criterion + cases)
    assert [(item.case, item.met) for item in (*solved.base.criteria, *solved.cases[1].criteria)] == [
        ("", True),
        ("plugged", False),
    ]
    lacking = solved.cases[1].results["largest_allowance deposit"].value
    required = solved.cases[1].results["U_required"].value
    # Every resistance is as it stands: what is too much is the whole without the deposit less 1/U_required.
    assert lacking == pytest.approx(1 / required - 1 / solved.base.results["U_clean"].value, rel=1e-9)
    assert set(solved.governing.values()) == {"plugged"}
    assert solved.flips is not None
    flip = one(solved.flips, CRITERION, "N")
    # No room is left where the clean unit just carries the duty: its area falls as the number of tubes.
    carries = 120 / (1 + solved.base.results["area_margin_clean"].value)
    assert (flip.printed_inside, flip.printed) == (math.ceil(carries), math.ceil(carries) - 1)
    check_flip(solved.chain, flip)


@pytest.mark.usefixtures("without_other_methods")
def test_a_search_ends_where_a_stream_boils_at_an_end(tmp_path: Path) -> None:
    """Water at 6 bar boils at 158.8 degC (steam tables by IAPWS-IF97): its inlet gets there before its mean."""
    body = COOLER.replace("coefficient: h_h, on: inside", "situation: inside-tube")
    body = "".join(line for line in body.splitlines(keepends=True) if "h_h:" not in line)
    solved = solved_of(tmp_path, body)
    assert solved.flips is not None
    searched = next(item for item in solved.flips.searched if item.input.symbol == "T_hi")
    assert (searched.high_end, searched.high < 158.9) == ("hot at its inlet: liquid is vapour", True)
    for item in solved.flips.flips:
        check_flip(solved.chain, item)
