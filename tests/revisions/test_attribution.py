"""Which change moved U: the check values, the rules that parts obey, and what happens to changes that need
others."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from two_sides import STATED, example, example_side, side_of, with_value

from calcbook.record import markdown
from calcbook.revisions import attribution as module
from calcbook.revisions.attribution import Attribution, exact_shares
from calcbook.revisions.comparison import compare, comparison_blocks
from calcbook.revisions.sides import Side

FOULED = with_value(STATED, "R_fi", "3.5e-4 m^2 K/W")
FOULED_AND_SLOW = with_value(FOULED, "h_o", "1200 W/(m^2 K)")


def parts_of(attribution: Attribution) -> dict[str, float]:
    return {part.changes[0]: part.part for part in attribution.parts}


# --- check values ---------------------------------------------------------------------------------------
# Worked by hand from U_o = 1/(1/h_o + R_fo + d_o ln(d_o/d_i)/(2k) + (R_fi + 1/h_i) d_o/d_i); every digit that
# the arithmetic was stated to is tested.


def test_one_raised_allowance_gives_the_check_values() -> None:
    comparison = compare(side_of(STATED), side_of(FOULED))
    found = {effect.name: effect for effect in comparison.results}
    assert (round(found["U_service"].was, 2), round(found["U_service"].now, 2)) == (673.91, 587.46)
    assert (round(found["U_clean"].was, 2), round(found["U_clean"].now, 2)) == (932.27, 932.27)
    assert (round(found["cleanliness"].was, 3), round(found["cleanliness"].now, 3)) == (0.723, 0.630)
    excess = found["excess_surface"]
    assert (round(100 * excess.was, 1), round(100 * excess.now, 1)) == (38.3, 58.7)
    (attribution,) = comparison.attributions
    assert f"{attribution.resistance_difference:+.4e}" == "+2.1837e-04"
    (part,) = attribution.parts
    # One change is the whole difference, in either space.
    assert part.part == part.alone == part.last
    assert part.resistance == pytest.approx(attribution.resistance_difference, rel=1e-12)
    # The line for hand checking.
    by_hand = 1.0 / (1.0 / attribution.was + attribution.resistance_difference)
    assert by_hand == pytest.approx(attribution.now, rel=1e-14)


def test_two_changes_give_the_check_values() -> None:
    (attribution,) = compare(side_of(STATED), side_of(FOULED_AND_SLOW)).attributions
    assert round(attribution.difference, 2) == -138.84
    by_id = {part.changes[0]: part for part in attribution.parts}
    fouling, film = by_id["givens/R_fi"], by_id["givens/h_o"]
    assert (round(fouling.alone, 2), round(film.alone, 2)) == (-86.45, -68.05)
    assert (round(fouling.part, 3), round(film.part, 3)) == (-78.623, -60.219)
    assert attribution.interaction == pytest.approx(
        attribution.difference - fouling.alone - film.alone, rel=1e-12
    )
    assert (attribution.evaluations, attribution.structures) == (4, 1)


def test_the_page_shows_the_check_values_largest_first() -> None:
    text = markdown(comparison_blocks(compare(side_of(STATED), side_of(FOULED_AND_SLOW))))
    rows = text.split("```")[1].splitlines()[1:]
    assert [row.split()[0] for row in rows] == ["673.912", "−78.623", "−60.219", "535.070"]
    assert all(row[:14].strip() == row.split()[0] and row[14] == " " for row in rows), (
        "the figures stand in one column"
    )
    assert rows[1].endswith("R_fi, inside allowance: was 1.8e-4 m^2 K/W, now 3.5e-4 m^2 K/W")


def test_resistances_in_series_add_without_interaction() -> None:
    """Two allowances and nothing else: in resistance each part is its own increment, whatever the order."""
    new = with_value(with_value(STATED, "R_fi", "2.4e-4 m^2 K/W"), "R_fo", "2.0e-4 m^2 K/W")
    (attribution,) = compare(side_of(STATED), side_of(new)).attributions
    for part in attribution.parts:
        assert part.resistance == pytest.approx(part.resistance_alone, rel=1e-10)
        assert part.resistance == pytest.approx(part.resistance_last, rel=1e-10)
    referred = 19.05 / 14.83 * 0.6e-4
    assert attribution.parts[1].resistance == pytest.approx(referred, rel=1e-10)
    assert attribution.parts[0].resistance == pytest.approx(0.2e-4, rel=1e-10)


# --- the value itself -----------------------------------------------------------------------------------


def by_every_order(values: list[float], count: int) -> list[float]:
    """The mean step of each player over every order, from the definition."""
    sums = [0.0] * count
    orders = list(itertools.permutations(range(count)))
    for order in orders:
        subset = 0
        for player in order:
            sums[player] += values[subset | 1 << player] - values[subset]
            subset |= 1 << player
    return [total / len(orders) for total in sums]


@settings(max_examples=60, deadline=None)
@given(count=st.integers(1, 5), data=st.data())
def test_exact_parts_are_the_mean_over_every_order(count: int, data: st.DataObject) -> None:
    values = data.draw(st.lists(st.floats(-1e3, 1e3), min_size=1 << count, max_size=1 << count))
    shares = exact_shares(np.asarray(values), count)
    # 1e-9 of the largest figure: the promise that the comparison makes for its own sums.
    assert shares.part == pytest.approx(by_every_order(values, count), abs=1e-9 * 1e3)
    assert math.fsum(shares.part) == pytest.approx(values[-1] - values[0], abs=1e-9 * 1e3)
    assert shares.alone == pytest.approx([values[1 << player] - values[0] for player in range(count)])
    last = (1 << count) - 1
    assert shares.last == pytest.approx(
        [values[last] - values[last ^ 1 << player] for player in range(count)]
    )


def test_a_sampled_part_has_an_error_that_covers_the_exact_one(monkeypatch: pytest.MonkeyPatch) -> None:
    old, new = side_of(STATED), side_of(scaled(STATED, 1.2))
    (exact,) = compare(old, new).attributions
    monkeypatch.setattr(module, "EXACT_UP_TO", 3)
    (sampled,) = compare(old, new).attributions
    assert exact.orders == 0 and sampled.orders == 2 * module.PAIRS
    assert math.fsum(part.part for part in sampled.parts) == pytest.approx(sampled.difference, rel=1e-9)
    for one, other in zip(exact.parts, sampled.parts, strict=True):
        assert (one.alone, one.last) == pytest.approx((other.alone, other.last), rel=1e-12)
        # Five standard errors: with seven parts a correct estimate misses one in a million runs, and the seed
        # is fixed.
        assert abs(one.part - other.part) <= 5.0 * other.error + 1e-9 * exact.was
        assert other.error > 0.0 and one.error == 0.0
    again = compare(old, new).attributions[0]
    assert again == sampled, "the seed is fixed"
    text = markdown(comparison_blocks(compare(old, new)))
    assert "standard error" in text and f"Sampled: {2 * module.PAIRS} orders" in text


def scaled(text: str, factor: float) -> str:
    """Every given of the stated calculation multiplied; the bore stays inside the tube."""
    figures = {"d_o": 19.05, "d_i": 14.83, "k": 16, "h_i": 5000, "h_o": 1500, "R_fo": 1.8e-4, "R_fi": 1.8e-4}
    units = {
        "d_o": "mm",
        "d_i": "mm",
        "k": "W/(m K)",
        "h_i": "W/(m^2 K)",
        "h_o": "W/(m^2 K)",
        "R_fo": "m^2 K/W",
        "R_fi": "m^2 K/W",
    }
    for symbol, figure in figures.items():
        # A bore that grows less than the outside diameter, so that every mixture has a wall.
        by = 1.0 + (factor - 1.0) * (0.2 if symbol == "d_i" else 1.0)
        text = with_value(text, symbol, f"{figure * by!r} {units[symbol]}")
    return text


def test_thirteen_changes_of_a_real_calculation_are_sampled_and_add_up() -> None:
    text = example("wc-101")
    new = text
    for symbol, value in {
        "d_i": "15.9 mm",
        "d_o": "19.3 mm",
        "L": "5 m",
        "N": "60",
        "m_hot": "19 kg/s",
        "T_hot": "72 degC",
        "T_cold": "30 degC",
        "R_fi": "0.0001 m^2 K/W",
        "R_fo": "0.0004 m^2 K/W",
        "h_o": "5000 W/(m^2 K)",
    }.items():
        new = with_value(new, symbol, value)
    new = new.replace("4 bara", "5 bara").replace("stainless-316-kaschnitz-2017", "stainless-316-mills-2002")
    new = new.replace("U on: outside ", "U on: inside ")
    (attribution,) = compare(example_side(text), example_side(new)).attributions
    assert len(attribution.parts) == 13 and attribution.orders == 2 * module.PAIRS
    assert attribution.structures == 4
    assert math.fsum(part.part for part in attribution.parts) == pytest.approx(
        attribution.difference, abs=1e-9 * attribution.was
    )
    assert abs(attribution.rest) <= 1e-9 * attribution.was


# --- properties of random pairs -------------------------------------------------------------------------


@st.composite
def stated_files(draw: st.DrawFn) -> str:
    """A tube with figures of the trade, and with or without its parts that make another structure."""
    bore = draw(st.sampled_from((12.0, 14.83, 15.75)))
    wall = draw(st.sampled_from((1.2, 2.11)))
    text = with_value(STATED, "d_i", f"{bore} mm")
    text = with_value(text, "d_o", f"{bore + 2 * wall:.4g} mm")
    text = with_value(text, "h_i", f"{draw(st.sampled_from((900, 3000, 5000)))} W/(m^2 K)")
    text = with_value(text, "h_o", f"{draw(st.sampled_from((60, 1500)))} W/(m^2 K)")
    text = with_value(text, "k", f"{draw(st.sampled_from((16, 50, 380)))} W/(m K)")
    text = with_value(text, "R_fo", f"{draw(st.sampled_from((0, 1.8e-4, 6e-4)))} m^2 K/W")
    if draw(st.booleans()):
        text = text.replace("  - {name: inside deposit, kind: fouling, resistance: R_fi, on: inside}\n", "")
    if draw(st.booleans()):
        text = text.replace("coefficient: h_i, on: inside}", "stream: hot, situation: inside-tube}").replace(
            "coefficient: h_o, on: outside}", "coefficient: h_o, on: outside, temperature: 25 degC}"
        )
        method = draw(st.sampled_from(("", ", method: gnielinski-1976", ", method: petukhov-kirillov-1970")))
        text = text.replace("situation: inside-tube", f"situation: inside-tube{method}")
        text = text.replace("geometry: {shape: tube,", "geometry: {shape: tube, length: 3 m,")
        text += "streams:\n  hot: {fluid: water, temperature: 70 degC, pressure: 4 bara, flow: 2 m/s}\n"
    if draw(st.booleans()):
        text = text.replace("kind: wall, conductivity: k", "kind: wall, conductivity: 45 W/(m K)")
    if draw(st.booleans()):
        text = text.replace("U on: outside", "U on: inside")
    return text


SLOW = settings(max_examples=15, deadline=None, suppress_health_check=[HealthCheck.too_slow])


@SLOW
@given(old=stated_files(), new=stated_files())
def test_parts_add_up_for_random_pairs(old: str, new: str) -> None:
    for attribution in compare(side_of(old), side_of(new), ("U_service", "U_clean")).attributions:
        largest = max(attribution.was, attribution.now)
        assert attribution.has_parts
        assert math.fsum(part.part for part in attribution.parts) == pytest.approx(
            attribution.difference, abs=1e-9 * largest
        )
        assert abs(attribution.rest) <= 1e-9 * largest
        # In resistance to 1e-9 of the larger of the two, 1/U.
        in_resistance = math.fsum(part.resistance for part in attribution.parts)
        assert in_resistance == pytest.approx(
            attribution.resistance_difference, abs=1e-9 / min(attribution.was, attribution.now)
        )


@SLOW
@given(old=stated_files(), new=stated_files())
def test_the_comparison_the_other_way_round_is_the_mirror_image(old: str, new: str) -> None:
    sides = side_of(old), side_of(new)
    there, back = compare(*sides), compare(*reversed(sides))
    assert {change.id for change in there.changes} == {change.id for change in back.changes}
    back_by_id = {change.id: change for change in back.changes}
    for change in there.changes:
        other = back_by_id[change.id]
        assert (change.was, change.now) == (other.now, other.was)
    one, other = there.attributions[0], back.attributions[0]
    assert one.difference == -other.difference
    mirrored = {frozenset(part.changes): part for part in other.parts}
    assert len(mirrored) == len(one.parts)
    for part in one.parts:
        twin = mirrored[frozenset(part.changes)]
        tolerance = 1e-9 * max(one.was, one.now)
        assert part.part == pytest.approx(-twin.part, abs=tolerance)
        # What is done alone from one side is undone last from the other.
        assert part.alone == pytest.approx(-twin.last, abs=tolerance)


@SLOW
@given(text=stated_files())
def test_comparing_a_revision_with_itself_is_empty(text: str) -> None:
    comparison = compare(side_of(text), side_of(text))
    assert comparison.is_empty
    assert comparison.changes == () and comparison.attributions[0].parts == ()
    assert all(item.count == item.total for item in comparison.unchanged)


@settings(max_examples=20, deadline=None)
@given(increment=st.floats(1e-7, 1e-3), side=st.sampled_from(("R_fi", "R_fo")))
def test_adding_to_an_allowance_alone_gives_its_referred_increment(increment: float, side: str) -> None:
    """Where no coefficient depends on a surface temperature."""
    new = with_value(STATED, side, f"{1.8e-4 + increment!r} m^2 K/W")
    (attribution,) = compare(side_of(STATED), side_of(new)).attributions
    referred = increment * (19.05 / 14.83 if side == "R_fi" else 1.0)
    # 1e-9 of the total resistance: the increment is a difference of two sums.
    assert attribution.parts[0].resistance == pytest.approx(referred, abs=1e-9 / attribution.now)


@pytest.mark.parametrize(
    ("symbol", "value"),
    [
        ("d_o", "0.01905 m"),
        ("d_i", "1.483 cm"),
        ("h_o", "1.5 kW/(m^2 K)"),
        ("R_fo", "0.18e-3 m^2 K/W"),
        ("k", "0.16 W/(cm K)"),
    ],
)
def test_a_pure_change_of_unit_moves_nothing(symbol: str, value: str) -> None:
    comparison = compare(side_of(STATED), side_of(with_value(STATED, symbol, value)))
    (change,) = comparison.changes
    assert change.is_apart and not change.moves
    assert comparison.attributions[0].parts == () and comparison.attributions[0].difference == 0.0
    assert not any(effect.difference for effect in comparison.results)


# --- changes that need each other -----------------------------------------------------------------------


def test_changes_that_make_no_calculation_apart_are_joined_and_named() -> None:
    """A given under another symbol: neither the new given nor the field that names it stands alone."""
    new = STATED.replace("  d_i:", "  D_1:").replace("inside diameter: d_i", "inside diameter: D_1")
    new = with_value(new, "h_o", "1200 W/(m^2 K)")
    comparison = compare(side_of(STATED), side_of(new))
    (attribution,) = comparison.attributions
    joined = next(part for part in attribution.parts if len(part.changes) > 1)
    assert set(joined.changes) == {"givens/d_i", "givens/D_1", "geometry/inside diameter"}
    assert joined.part == pytest.approx(0.0, abs=1e-9 * attribution.was)
    assert parts_of(attribution)["givens/h_o"] == pytest.approx(attribution.difference, rel=1e-9)
    assert "Joined, because they make no calculation apart: givens/" in markdown(
        comparison_blocks(comparison)
    )


def test_a_state_that_no_fluid_has_joins_the_changes_that_avoid_it() -> None:
    """Water at 150 degC needs its pressure: at the old pressure the stated liquid would be vapour."""
    hot = (
        example("wc-101")
        .replace("flow: m_hot   ", "phase: liquid\n    flow: m_hot   ")
        .replace("4 bara", "1.5 bara")
    )
    new = with_value(hot, "T_hot", "150 degC").replace("1.5 bara", "9 bara")
    new = new.replace("T_hot: {value: 66 degC", "T_hot: {value: 140 degC")
    (attribution,) = compare(example_side(hot), example_side(new)).attributions
    assert [part.changes for part in attribution.parts] == [("givens/T_hot", "streams/hot/pressure")]


def test_another_method_and_another_material_are_changes_like_any_other() -> None:
    text = example("wc-101")
    new = text.replace("situation: inside-tube}", "situation: inside-tube, method: petukhov-kirillov-1970}")
    new = new.replace("stainless-316-kaschnitz-2017", "stainless-316-mills-2002")
    new = with_value(new, "R_fo", "0.0004 m^2 K/W")
    (attribution,) = compare(example_side(text), example_side(new)).attributions
    assert set(parts_of(attribution)) == {
        "resistances/tube-side film/method",
        "resistances/tube wall/material",
        "givens/R_fo",
    }
    assert (attribution.evaluations, attribution.structures) == (8, 4)
    assert abs(attribution.rest) <= 1e-9 * attribution.was
    assert all(part.part for part in attribution.parts)


def alone_by_hand(old: str, changed: str) -> float:
    """What one change does alone, from two calculations solved apart from any comparison."""
    was, now = (
        side.solved.base.results["U_service"].value for side in (example_side(old), example_side(changed))
    )
    return now - was


@pytest.mark.parametrize(
    ("name", "edits"),
    [
        ("wc-101", (("m_hot", "20 kg/s"), ("R_fi", "0.0002 m^2 K/W"), ("T_cold", "20 degC"))),
        ("oc-201", (("m_oil", "5 kg/s"), ("T_oil", "70 degC"), ("R_oil", "0.0002 m^2 K/W"))),
        ("gc-401", (("w_eg", "30 %"), ("T_brine", "30 degF"), ("h_o", "500 Btu/(h ft^2 degF)"))),
        ("sl-301", (("v_wind", "2 m/s"), ("e_clad", "0.9"), ("t_ins", "60 mm"))),
        ("ac-501", (("p_n2", "8 barg"), ("V_n2", "20 m^3/h"), ("v_air", "5 m/s"))),
    ],
)
def test_effects_alone_are_those_of_files_solved_apart(name: str, edits: tuple[tuple[str, str], ...]) -> None:
    old = example(name)
    new = old
    for symbol, value in edits:
        new = with_value(new, symbol, value)
    (attribution,) = compare(example_side(old), example_side(new)).attributions
    by_id = {part.changes[0]: part for part in attribution.parts}
    assert attribution.structures == 1
    for symbol, value in edits:
        part = by_id[f"givens/{symbol}"]
        # 1e-9 of U: samples of one call and files apart give the same answer to its last digits.
        assert part.alone == pytest.approx(
            alone_by_hand(old, with_value(old, symbol, value)), abs=1e-9 * attribution.was
        )


def test_any_result_can_be_attributed() -> None:
    old, new = (
        example("wc-101"),
        with_value(with_value(example("wc-101"), "R_fo", "0.0005 m^2 K/W"), "m_hot", "20 kg/s"),
    )
    names = (
        "U_clean",
        "cleanliness",
        "excess_surface",
        "heat_flux_service",
        "T tube wall to shell-side deposit service",
        "T outside surface clean",
        "h tube-side film service",
        "R tube wall clean",
        "Re hot",
        "speed hot",
        "U_service on inside",
        "UA_service",
    )
    sides: tuple[Side, Side] = (example_side(old), example_side(new))
    for attribution in compare(*sides, names).attributions:
        was, now = (side.solved.base.results[attribution.result].value for side in sides)
        assert (attribution.was, attribution.now) == (was, now)
        scale = max(abs(was), abs(now))
        assert math.fsum(part.part for part in attribution.parts) == pytest.approx(
            now - was, abs=1e-9 * scale
        )
        assert abs(attribution.rest) <= 1e-9 * scale


def test_a_change_that_moves_nothing_is_joined_only_with_what_needs_it() -> None:
    """Parts belong to counterflow: with them the arrangement changes; the allowance and the tubes stand apart."""
    old = example("wc-105")
    new = old.replace("arrangement: counterflow", "arrangement: shell and tube").replace("  parts: 4\n", "")
    new = new.replace("value: 0.00035 m^2 K/W", "value: 0.00045 m^2 K/W").replace(
        "N:      {value: 62", "N:      {value: 59"
    )
    comparison = compare(example_side(old), example_side(new))
    (attribution,) = comparison.attributions
    blocks = {frozenset(part.changes) for part in attribution.parts}
    assert blocks == {
        frozenset({"givens/N"}),
        frozenset({"givens/R_fo"}),
        frozenset({"duty/arrangement", "duty/parts"}),
    }
    moved = {next(iter(sorted(part.changes))): part.part for part in attribution.parts}
    # Stated films and ends: how the streams flow moves the area that is needed, and no coefficient.
    assert moved["duty/arrangement"] == pytest.approx(0.0, abs=1e-9)
