"""The duty: published ratings, effectiveness of an independent library, and what must hold of every rating."""

from __future__ import annotations

import re
from pathlib import Path

import ht
import numpy as np
import pytest

from calcbook.chain.sensitivity import derivatives
from calcbook.chain.solve import solve
from calcbook.chain.types import SERVICE
from calcbook.faults import Faults
from calcbook.interface import record_text, solve_file

BTU = 5.678263  # W/(m² K) of 1 Btu/(h ft² °F)
FILE = """
calculation: {{number: RT-1, title: Rating, plant: Larkmoor Works (invented), revision: A, prepared by: K. L., date: 2026-11-20}}
purpose: Rate a unit whose films are stated.
givens:
  d_i: {{value: 20 mm, is: bore, source: s}}
  d_o: {{value: 20.002 mm, is: outside diameter, source: s}}
  L: {{value: "{length}", is: length, source: s}}
  m_h: {{value: "{hot_flow}", is: hot flow, source: s}}
  m_c: {{value: "{cold_flow}", is: cold flow, source: s}}
  T_hi: {{value: "{T_hi}", is: hot inlet, source: s}}
  T_ho: {{value: "{T_ho}", is: hot outlet, source: s}}
  T_ci: {{value: "{T_ci}", is: cold inlet, source: s}}
  T_co: {{value: "{T_co}", is: cold outlet, source: s}}
  h: {{value: "{film}", is: both films, source: s}}
  R_f: {{value: "{fouling}", is: allowance, source: s}}
fluids:
  warm:
    constants: {{density: 1000 kg/m^3, viscosity: 0.001 Pa s, conductivity: 0.6 W/(m K), heat capacity: "{hot_cp}"}}
    source: s
  cool:
    constants: {{density: 1000 kg/m^3, viscosity: 0.001 Pa s, conductivity: 0.6 W/(m K), heat capacity: "{cold_cp}"}}
    source: s
streams:
  hot: {{fluid: warm, flow: m_h, phase: liquid}}
  cold: {{fluid: cool, flow: m_c, phase: liquid}}
geometry: {{shape: tube, inside diameter: d_i, outside diameter: d_o, length: L}}
resistances:
  - {{name: inner film, kind: film, coefficient: h, on: outside, stream: hot}}
  - {{name: deposit, kind: fouling, resistance: R_f, on: outside}}
  - {{name: wall, kind: wall, conductivity: {{value: 400 W/(m K), source: s}}}}
  - {{name: outer film, kind: film, coefficient: h, on: outside, stream: cold, scales with: m_c/m_c}}
duty:
  arrangement: {arrangement}
{shells}  hot: {{stream: hot, inlet: T_hi{hot_outlet}}}
  cold: {{stream: cold, inlet: T_ci{cold_outlet}}}
report: {{U on: outside}}
"""
RATED = Path(__file__).resolve().parent.parent / "cases" / "ok" / "rated-cooler.yaml"
ALONG = "duty / ends / overall coefficient"
# W.M. Kreith, R.M. Manglik, M.S. Bohn, Principles of Heat Transfer, 7th ed., example 8.1: inputs read in a public
# companion; U is 568 W/(m² K), so both films together have that coefficient.
KREITH = {
    "length": "600 m",
    "hot_flow": "6.93 kg/s",
    "cold_flow": "6.3 kg/s",
    "hot_cp": "3810 J/(kg K)",
    "cold_cp": "4187 J/(kg K)",
    "T_hi": "65.6 degC",
    "T_ho": "39.4 degC",
    "T_ci": "10 degC",
    "T_co": "36 degC",
    "film": "1136 W/(m^2 K)",
    "fouling": "0 m^2 K/W",
    "arrangement": "counterflow",
    "shells": "",
    "hot_outlet": ", outlet: T_ho",
    "cold_outlet": "",
}


def solved(folder: Path, **figures: str):
    path = folder / "rt-1.yaml"
    path.write_text(FILE.format(**{**KREITH, **figures}), encoding="utf-8")
    return solve_file(path)


def figure(answer, name: str) -> float:
    return answer.base.results[name].value


# --- published ratings --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("arrangement", "shells", "area"),
    [
        ("parallel flow", "", 66.51),
        ("counterflow", "", 41.44),
        ("shell and tube", "  shells: 2\n", 42.90),
        ("crossflow hot mixed", "", 47.16),
    ],
)
def test_areas_of_kreith_example_8_1(tmp_path: Path, arrangement: str, shells: str, area: float) -> None:
    """Recomputed areas of the example in the public companion; it prints four digits, and the thin wall moves U by 3e-6."""
    answer = solved(tmp_path, arrangement=arrangement, shells=shells)
    assert figure(answer, "duty") == pytest.approx(691_766, rel=1e-6)
    assert figure(answer, "T_cold_outlet") == pytest.approx(36.225 + 273.15, abs=5e-4)
    assert figure(answer, "area_service") == pytest.approx(area, rel=2e-4)


def test_kern_example_6_1_with_its_allowances(tmp_path: Path) -> None:
    """D.Q. Kern, Process Heat Transfer (1950), example 6.1, inputs read in a public companion: Q 166 940 Btu/h, LMTD 28.854 °F,
    Uc 147.367 and 0.001 h ft² °F/Btu on each side: UD 113.820 Btu/(h ft² °F), 50.83 ft²; recomputed, five digits."""
    answer = solved(
        tmp_path,
        hot_flow="1.24 kg/s",  # both capacity flows are set by Q below; only their product with cp acts
        hot_cp="1185.04 J/(kg K)",
        cold_flow="1.237 kg/s",
        cold_cp="1779.6 J/(kg K)",
        T_hi="160 degF",
        T_ho="100 degF",
        T_ci="80 degF",
        film=f"{2 * 147.367 * BTU} W/(m^2 K)",
        fouling="0.002 h ft^2 degF/Btu",
        cold_outlet=", outlet: T_co",
        T_co="120 degF",
    )
    assert figure(answer, "LMTD") * 1.8 == pytest.approx(28.854, rel=2e-5)
    assert figure(answer, "U_service") / BTU == pytest.approx(113.820, rel=2e-5)
    duty = figure(answer, "duty") / 0.29307107  # W of 1 Btu/h
    area = duty / (figure(answer, "U_service") / BTU * figure(answer, "LMTD") * 1.8)
    assert figure(answer, "area_service") / 0.09290304 == pytest.approx(area, rel=1e-6)
    assert figure(answer, "area_service") / 0.09290304 / duty == pytest.approx(50.83 / 166_940, rel=1e-4)


# --- an independent library ---------------------------------------------------------------------------

HT_SUBTYPE = {
    "counterflow": "counterflow",
    "parallel flow": "parallel",
    "shell and tube": "2S&T",
    "crossflow both unmixed": "crossflow",
    "crossflow hot mixed": "crossflow, mixed Cmin",
    "crossflow cold mixed": "crossflow, mixed Cmax",
}


@pytest.mark.parametrize("arrangement", HT_SUBTYPE)
@pytest.mark.parametrize("length", ["60 m", "250 m", "900 m"])
def test_outlets_by_effectiveness_agree_with_ht(tmp_path: Path, arrangement: str, length: str) -> None:
    """Both outlets open: the heat is effectiveness times the largest one, by ht 1.2.0 effectiveness_from_NTU.

    The hot stream has the larger capacity flow here (26 403 against 26 378 W/K with the cold one made 4000 J/(kg K)), so
    that mixed and unmixed are told apart; 1e-9 is what the closing of the outlets leaves, the crossflow form of the
    library being exact for one mixed stream, and approximate (left out of the tight bound) for both unmixed.
    """
    shells = "  shells: 2\n" if arrangement == "shell and tube" else ""
    answer = solved(
        tmp_path,
        arrangement=arrangement,
        shells=shells,
        length=length,
        hot_outlet="",
        cold_cp="8000 J/(kg K)",
    )
    hot, cold = 6.93 * 3810.0, 6.3 * 8000.0
    units = figure(answer, "UA_service") / hot
    kind = HT_SUBTYPE[arrangement]
    if arrangement == "shell and tube":
        effectiveness = ht.effectiveness_from_NTU(units, hot / cold, subtype="S&T", n_shell_tube=2)
    elif arrangement == "crossflow both unmixed":
        effectiveness = ht.effectiveness_from_NTU(units, hot / cold, subtype="crossflow")
    else:
        effectiveness = ht.effectiveness_from_NTU(units, hot / cold, subtype=kind)
    heat = effectiveness * hot * 55.6
    assert figure(answer, "heat_reached_service") == pytest.approx(heat, rel=1e-9)
    assert figure(answer, "T_hot_outlet") == pytest.approx(65.6 + 273.15 - heat / hot, rel=1e-10)
    assert figure(answer, "T_cold_outlet") == pytest.approx(10 + 273.15 + heat / cold, rel=1e-10)


@pytest.mark.parametrize(
    "arrangement",
    ["shell and tube", "crossflow both unmixed", "crossflow both mixed", "crossflow cold mixed"],
)
def test_both_ways_to_the_duty_agree(tmp_path: Path, arrangement: str) -> None:
    """A unit whose outlets follow from effectiveness needs, by the mean difference between them, the area it has."""
    reached = solved(tmp_path, arrangement=arrangement, length="700 m", hot_outlet="")
    answer = solved(
        tmp_path,
        arrangement=arrangement,
        length="700 m",
        T_ho=f"{figure(reached, 'T_hot_outlet') - 273.15!r} degC",
    )
    assert figure(answer, "area_service") == pytest.approx(figure(answer, "area_installed"), rel=1e-9)
    two = answer.base.solutions["service"].number(answer.chain.results["duty by effectiveness"])
    assert two == pytest.approx(figure(answer, "duty"), rel=1e-9)


RATED_COOLER = Path(__file__).resolve().parents[2] / "calcs" / "wc-105.yaml"


@pytest.mark.parametrize(
    ("side", "ends", "given"),
    [
        ("hot", "hot:  {stream: hot,  inlet: T_hi, outlet: T_ho}", "T_hi"),
        ("cold", "cold: {stream: cold, inlet: T_ci, outlet: T_co}", "T_ci"),
    ],
)
def test_an_inlet_by_heat_balance(tmp_path: Path, side: str, ends: str, given: str) -> None:
    """The inlet that closes the balance: with it stated, all is as it was found (closing to 1e-13 of the figures)."""
    text = RATED_COOLER.read_text(encoding="utf-8")
    assert text.count(ends) == 1
    path = tmp_path / "trial.yaml"
    path.write_text(text.replace(ends, ends.replace(f"inlet: {given}, ", "")), encoding="utf-8")
    found = solve_file(path)
    inlet = figure(found, f"T_{side}_inlet")
    # By hand from the other side's heat and this side's flow and heat capacity at its mean.
    solution = found.base.solutions["service"]
    capacity = solution.number(found.chain.results[f"C {side}"])
    outlet = solution.number(found.chain.results[f"T {side} outlet"])
    sign = 1.0 if side == "hot" else -1.0
    assert inlet == pytest.approx(outlet + sign * figure(found, "duty") / capacity, rel=1e-13)
    stated = re.sub(rf"(?m)^(  {given}: +{{value: )[0-9.]+ degC", rf"\g<1>{inlet - 273.15!r} degC", text)
    assert stated != text
    path.write_text(stated, encoding="utf-8")
    answer = solve_file(path)
    assert abs(figure(answer, "closure")) < 1e-12
    assert f"T_{side}_inlet" not in answer.base.results
    for name in ("U_service", "area_service", "LMTD", "heat_reached_service", "area_margin_clean"):
        assert figure(found, name) == pytest.approx(figure(answer, name), rel=1e-11), name
    assert found.rating.answered[""].clean.heat == pytest.approx(
        answer.rating.answered[""].clean.heat, rel=1e-10
    )


@pytest.mark.parametrize(("length", "effectiveness"), [("0.001 mm", 0.0), ("90 km", 1.0)])
def test_ends_of_the_effectiveness(tmp_path: Path, length: str, effectiveness: float) -> None:
    """NTU to nothing and to infinity in counterflow (closed form): no heat, and the largest one."""
    answer = solved(tmp_path, length=length, hot_outlet="", cold_cp="8000 J/(kg K)")
    assert figure(answer, "effectiveness_service") == pytest.approx(effectiveness, abs=1e-6)


# --- what must hold ---------------------------------------------------------------------------------------


def test_the_ledger_adds_up_and_names_the_allowance(tmp_path: Path) -> None:
    answer = solved(tmp_path, fouling="0.0003 m^2 K/W", length="900 m")
    rating = answer.rating
    assert rating is not None
    assert rating.ledger.sum == pytest.approx(figure(answer, "area_installed"), rel=1e-12)
    parts = {row.name: row.area for row in rating.ledger.rows}
    assert parts["duty at clean U"] == pytest.approx(figure(answer, "area_clean"), rel=1e-12)
    # Q·R_f/ΔT_lm, by hand
    assert parts["deposit"] == pytest.approx(
        figure(answer, "duty") * 0.0003 / figure(answer, "LMTD"), rel=1e-9
    )


def test_the_largest_allowance_leaves_no_margin(tmp_path: Path) -> None:
    answer = solved(tmp_path, fouling="0.0003 m^2 K/W", length="900 m")
    largest = figure(answer, "largest_allowance deposit")
    # With stated films it is the resistance between the required U and the clean one.
    by_hand = 1.0 / figure(answer, "U_required") - 1.0 / figure(answer, "U_clean")
    assert largest == pytest.approx(by_hand, rel=1e-9)
    again = solved(tmp_path, fouling=f"{largest!r} m^2 K/W", length="900 m")
    assert figure(again, "area_margin") == pytest.approx(0.0, abs=1e-12)


def test_terms_that_share_a_figure_have_one_largest_allowance(tmp_path: Path) -> None:
    """Both sides take R_fi: put in, what is found leaves no margin, though the films move with the surfaces."""
    text = RATED.read_text(encoding="utf-8").replace("resistance: R_fo", "resistance: R_fi")
    text = "".join(line for line in text.splitlines(keepends=True) if "  R_fo:" not in line)
    path = tmp_path / "rt-2.yaml"
    path.write_text(text, encoding="utf-8")
    largest = figure(solve_file(path), "largest_allowance tube-side deposit, shell-side deposit")
    path.write_text(text.replace("value: 0.00009 m^2 K/W", f"value: {largest!r} m^2 K/W"), encoding="utf-8")
    # Within the rounding of a closed circuit.
    assert figure(solve_file(path), "area_margin") == pytest.approx(0.0, abs=1e-11)


def test_the_only_allowance_needs_no_name(tmp_path: Path) -> None:
    """The result name of the list without a term stands for that of the only term."""
    answer = solved(tmp_path, length="900 m")
    results = answer.base.results
    (named,) = [name for name in results if name.startswith("largest_allowance ")]
    assert results["largest_allowance"].value == results[named].value


def test_a_stated_area_is_what_carries_the_duty(tmp_path: Path) -> None:
    """A_inst/A_req − 1 with the stated area; U, and so the area needed, stay those of the geometry."""
    path = tmp_path / "rt-1.yaml"
    text = FILE.format(**{**KREITH, "length": "900 m"})
    path.write_text(text, encoding="utf-8")
    own = solve_file(path)
    stated = 1.2 * figure(own, "area_installed")
    path.write_text(
        text.replace("duty:\n", f"duty:\n  installed area: {{value: {stated!r} m^2, source: s}}\n", 1),
        encoding="utf-8",
    )
    answer = solve_file(path)
    assert figure(answer, "area_installed") == pytest.approx(stated, rel=1e-14)
    assert figure(answer, "area_service") == pytest.approx(figure(own, "area_service"), rel=1e-14)
    assert figure(answer, "area_margin") == pytest.approx(
        stated / figure(own, "area_service") - 1.0, rel=1e-12
    )
    states = {check.id: check.state for check in answer.base.checks}
    assert states["duty / area / stated"] == states["duty / area / closely stated"] == "outside"
    assert "duty / area / stated / service" in {item.id for item in answer.open_items}
    assert answer.rating.ledger.sum == pytest.approx(stated, rel=1e-12)


def test_a_unit_that_is_too_small_has_an_allowance_below_zero(tmp_path: Path) -> None:
    answer = solved(tmp_path, length="300 m")
    assert figure(answer, "area_margin") < 0.0
    assert [item.id for item in answer.open_items] == [
        "duty / area / margin / service",
        "duty / area / margin / clean",
    ]
    # Both films are stated: the whole without a deposit is too much by what the area lacks.
    lacking = 1.0 / figure(answer, "U_required") - 1.0 / figure(answer, "U_clean")
    assert figure(answer, "largest_allowance deposit") == pytest.approx(lacking, rel=1e-9)
    assert lacking < 0.0
    table = record_text(answer).partition("### Largest allowances")[2].partition("\n### ")[0]
    assert "none: the duty is not carried even without it" in table


def test_day_one_is_the_clean_unit_with_open_outlets(tmp_path: Path) -> None:
    fouled = solved(tmp_path, fouling="0.0003 m^2 K/W", length="900 m")
    clean = solved(tmp_path, length="900 m", hot_outlet="")
    day = fouled.rating.answered[""]
    assert day is not None and day.turned_down is not None
    assert day.clean.heat == pytest.approx(figure(clean, "heat_reached_service"), rel=1e-10)
    assert day.clean.heat > day.service.heat > figure(fouled, "duty")
    # Turned down, it gives the duty and keeps the hot outlet.
    assert day.turned_down.heat == pytest.approx(figure(fouled, "duty"), rel=1e-12)
    flow = day.turned_down.sides["cold"].mass_flow
    turned = solved(tmp_path, length="900 m", hot_outlet="", cold_flow=f"{flow!r} kg/s")
    assert figure(turned, "T_hot_outlet") == pytest.approx(39.4 + 273.15, abs=1e-6)


def test_a_cold_stream_whose_properties_end_first_is_not_turned_down(tmp_path: Path) -> None:
    """In so long a unit the cold outlet would come near 65.6 °C and its mean above 37 °C, where its table has ended."""
    text = FILE.format(**{**KREITH, "length": "9000 m"})
    constants = next(line for line in text.splitlines() if "4187 J/(kg K)" in line)
    table = (
        "    table: {T: [0 degC, 26.5 degC], density: [1000 kg/m^3, 1000 kg/m^3], viscosity: [0.001 Pa s, 0.001 Pa s],"
        " conductivity: [0.6 W/(m K), 0.6 W/(m K)], heat capacity: [4187 J/(kg K), 4187 J/(kg K)]}"
    )
    path = tmp_path / "rt-1.yaml"
    path.write_text(text.replace(constants, table), encoding="utf-8")
    day = solve_file(path).rating.answered[""]
    assert day is not None and day.turned_down is None
    assert (
        day.no_turn_down
        == "the clean unit carries the duty down to a cold flow at which its circuit does not close"
    )


def test_day_one_says_what_is_not_checked_of_fluids_of_stated_properties(tmp_path: Path) -> None:
    """Four constants tell neither a vapour pressure nor a freezing point of either liquid."""
    answer = solved(tmp_path, fouling="0.0001 m^2 K/W", length="900 m")
    told = record_text(answer).partition("### Day one")[2].partition("\n## ")[0]
    for words in (
        "Not checked is boiling of hot, cold at the wall: no vapour pressure, or no pressure of the stream, is known.",
        "Not checked is freezing of hot, cold at the wall: no freezing point, or no pressure of the stream, is known.",
    ):
        assert words in told


def test_a_fluid_that_is_written_in_place_is_called_by_its_stream(tmp_path: Path) -> None:
    named = FILE.format(**{**KREITH, "length": "900 m"})
    constants = re.search(r"  warm:\n    (constants: .*)\n    source: s\n", named)
    assert constants is not None
    inside = named.replace(constants[0], "").replace("fluid: warm", f"fluid: {{{constants[1]}, source: s}}")
    path = tmp_path / "rt-1.yaml"
    for text, heading in ((named, "Fluid warm of stream hot"), (inside, "Fluid of stream hot")):
        path.write_text(text, encoding="utf-8")
        assert f"### {heading}\n" in record_text(solve_file(path))


def test_a_stated_film_that_knows_no_flow_is_not_turned_down() -> None:
    day = solve_file(RATED).rating.answered[""]
    assert day is not None and day.turned_down is None
    assert (
        day.no_turn_down
        == "the coefficient of shell-side film is stated, and nothing says how it follows the flow"
    )


def test_both_ends_have_their_surfaces(tmp_path: Path) -> None:
    """By hand: with equal films inside and outside and no wall to speak of, a clean surface lies between its fluids."""
    answer = solved(tmp_path, length="900 m")
    middle = (65.6 + figure(answer, "T_cold_outlet") - 273.15) / 2.0 + 273.15
    at_end = figure(answer, "T outside surface clean at the hot inlet")
    assert at_end == pytest.approx(middle, abs=0.05)
    # It is hotter there than at the mean temperatures, which a criterion on the surface must not hide.
    assert at_end > figure(answer, "T outside surface clean")
    assert answer.base.results["T outside surface clean"].title.endswith("at the mean temperatures")


def test_parts_of_constant_properties_add_up_to_one(tmp_path: Path) -> None:
    answer = solved(tmp_path, shells="  parts: 5\n", length="900 m")
    parts = answer.rating.parts
    assert parts is not None and len(parts.rows) == 5
    assert parts.area["service"] == pytest.approx(figure(answer, "area_service"), rel=1e-12)
    assert parts.rows[0].hot[0] == pytest.approx(65.6 + 273.15)
    assert parts.rows[0].cold[1] == pytest.approx(figure(answer, "T_cold_outlet"), rel=1e-12)


def conducting(tmp_path: Path, parts: int):
    """A hot gas in a long tube against a film without resistance: h goes with its conductivity, linear in T."""
    constants = (
        "constants: {density: 1000 kg/m^3, viscosity: 0.001 Pa s, conductivity: 0.6 W/(m K),"
        ' heat capacity: "4000 J/(kg K)"}'
    )
    table = (
        "table: {T: [10 degC, 110 degC], density: [1000 kg/m^3, 1000 kg/m^3], viscosity: [0.001 Pa s, 0.001 Pa s],"
        " conductivity: [0.05 W/(m K), 0.55 W/(m K)], heat capacity: [4000 J/(kg K), 4000 J/(kg K)]}"
    )
    stated = {
        "length": "60000 m",
        "hot_flow": "0.01 kg/s",
        "cold_flow": "0.02 kg/s",
        "film": "1000000 W/(m^2 K)",
    }
    ends = {"T_hi": "90 degC", "T_ho": "50 degC", "T_ci": "20 degC", "T_co": "40 degC"}
    capacities = {"hot_cp": "4000 J/(kg K)", "cold_cp": "4000 J/(kg K)", "cold_outlet": ", outlet: T_co"}
    text = FILE.format(**{**KREITH, **stated, **ends, **capacities, "shells": f"  parts: {parts}\n"})
    text = text.replace(constants, table, 1).replace("flow: m_h, phase: liquid", "flow: m_h, phase: gas")
    text = text.replace("coefficient: h, on: outside, stream: hot", "stream: hot, situation: inside-tube")
    path = tmp_path / "rt-1.yaml"
    path.write_text(text, encoding="utf-8")
    return solve_file(path)


def test_parts_sum_up_to_the_area_of_a_u_that_is_linear_along_the_unit(tmp_path: Path) -> None:
    """A.P. Colburn, Industrial and Engineering Chemistry 25 (1933) 873-877 (from memory): for U linear in temperature
    A = Q·ln(U_1·ΔT_2/(U_2·ΔT_1))/(U_1·ΔT_2 − U_2·ΔT_1). Nu lies between 3.66 and (3.66^3 + 0.7^3)^(1/3), the ends
    of the card's law of a long tube; film, wall and deposit outside add 7e-5 to the resistance."""
    u_hot, u_cold = (conductivity / 0.020002 for conductivity in (0.45, 0.25))
    area = 1600.0 * np.log(u_hot * 30.0 / (u_cold * 50.0)) / (u_hot * 30.0 - u_cold * 50.0)
    largest, least = area / 3.66, area / (3.66**3 + 0.7**3) ** (1.0 / 3.0)
    found = {parts: conducting(tmp_path, parts) for parts in (20, 40)}
    summed = {parts: answer.rating.parts.area["service"] for parts, answer in found.items()}
    # The rule of midpoints: with twice the parts a quarter of its error is left.
    limit = summed[40] + (summed[40] - summed[20]) / 3.0
    assert least < limit < largest * (1.0 + 7e-5)
    answer = found[40]
    assert figure(answer, "area_service") < 0.96 * summed[40]
    assert figure(answer, "area_service of parts") == summed[40]
    margin = figure(answer, "area_installed") / summed[40] - 1.0
    assert figure(answer, "area_margin of parts") == pytest.approx(margin, rel=1e-12)
    assert "duty / parts" in {item.id for item in answer.open_items}


def test_a_u_that_differs_along_a_unit_in_one_part_is_a_caution(tmp_path: Path) -> None:
    answer = conducting(tmp_path, 1)
    found = {check.condition: check for check in answer.base.checks if check.id == ALONG}
    # The conductivity is 0.45 W/(m K) at the hot inlet and 0.25 at the hot outlet.
    assert found["service"].value == pytest.approx(0.45 / 0.25 - 1.0, abs=0.01)
    assert (found["service"].level, found["service"].state) == ("caution", "outside")
    even = solved(tmp_path, length="900 m")
    assert {check.state for check in even.base.checks if check.id == ALONG} == {"within"}


def test_a_criterion_takes_the_area_of_the_parts(tmp_path: Path) -> None:
    text = RATED.read_text(encoding="utf-8")
    assert "\n  parts: " in text
    text += "\nacceptance:\n  - {that: area_margin of parts >= 0, source: s}\n"
    path = tmp_path / "rated.yaml"
    path.write_text(text, encoding="utf-8")
    answer = solve_file(path)
    (item,) = answer.base.criteria
    assert item.value == figure(answer, "area_margin of parts") != figure(answer, "area_margin")
    path.write_text(re.sub(r"(?m)^  parts: .*\n", "", text), encoding="utf-8")
    with pytest.raises(Faults, match="is found only where the file has `parts:` in its `duty:`"):
        solve_file(path)


def test_slopes_pass_through_open_outlets(tmp_path: Path) -> None:
    """Derivatives of heat and U by every figure against central differences of the whole solution."""
    answer = solved(
        tmp_path, length="500 m", hot_outlet="", fouling="0.0002 m^2 K/W", arrangement="shell and tube"
    )
    chain, inputs = answer.chain, answer.chain.case_inputs("")
    wanted = (chain.results["heat reached"], chain.results["UA"])
    slopes = derivatives(chain, inputs, "service", wanted)
    for name, value in inputs.items():
        step = 1e-4 * abs(float(value)) or 1e-7
        both = solve(chain, {**inputs, name: np.array([value - step, value + step])}, "service")
        for one in wanted:
            low, high = np.broadcast_to(both.values[one], (2,))
            numeric = (high - low) / (2.0 * step)
            analytic = float(np.ravel(slopes[one].get(name, 0.0))[0])
            assert analytic == pytest.approx(numeric, rel=1e-5, abs=1e-9 * abs(high / float(value or 1.0)))


def test_a_sample_does_not_depend_on_its_neighbours(tmp_path: Path) -> None:
    answer = solved(tmp_path, length="500 m", hot_outlet="", arrangement="crossflow cold mixed")
    chain, inputs = answer.chain, answer.chain.case_inputs("")
    films = np.linspace(300.0, 3000.0, 7)
    together = solve(chain, {**inputs, "given/h": films}, "service").values[chain.results["heat reached"]]
    alone = [
        solve(chain, {**inputs, "given/h": np.array([film])}, "service").values[
            chain.results["heat reached"]
        ][0]
        for film in films
    ]
    assert together.tolist() == alone


@pytest.mark.parametrize(
    ("way", "value", "ratio"), [("cleanliness", "80 %", 0.8), ("excess surface", "25 %", 0.8)]
)
def test_fouling_specified_for_the_whole_unit(tmp_path: Path, way: str, value: str, ratio: float) -> None:
    """With stated films U_service/U_clean is the cleanliness, and 1/(1 + excess surface): identities."""
    path = tmp_path / "rt-1.yaml"
    text = FILE.format(**{**KREITH, "length": "900 m"}).replace(", resistance: R_f", "")
    path.write_text(
        f'{text}fouling specified as: {{{way}: {{value: "{value}", source: s}}}}\n', encoding="utf-8"
    )
    answer = solve_file(path)
    assert figure(answer, "cleanliness") == pytest.approx(ratio, rel=1e-12)
    # The resistance that is missing is told alike in both conditions, though only the service has it.
    clean, service = (answer.base.solutions[name].number("fouling/R found") for name in ("clean", "service"))
    assert clean == pytest.approx(service, rel=1e-12)


def test_a_method_factor_has_its_own_line_in_the_ledger() -> None:
    """F_m = 0.9 on a film of resistance R: R·(1 − 0.9) of it is the factor's, Q/ΔT_lm·R in m²."""
    answer = solve_file(RATED)
    clean = answer.base.solutions["clean"]
    film = clean.number(answer.chain.results["R tube-side film"])
    lines = {row.name: row.area for row in answer.rating.ledger.rows}
    expected = figure(answer, "duty") / figure(answer, "LMTD") * film * 0.1
    assert lines["method factor of tube-side film"] == pytest.approx(expected, rel=1e-9)
    assert answer.rating.ledger.sum == pytest.approx(figure(answer, "area_installed"), rel=1e-12)
    # The methods of the cross-check stand without the factor: the same law in another's place differs by it.
    assert clean.number("tube-side film/gnielinski-1976/h with factor") == pytest.approx(
        0.9 * clean.number("tube-side film/gnielinski-1976/h"), rel=1e-14
    )


def test_plugged_tubes_stand_in_the_ledger_beside_the_installed_area(tmp_path: Path) -> None:
    """By hand: a tube has π·d_o·L outside; 57 of 62 are installed, and the ledger adds up to all of them."""
    path = tmp_path / "rt-2.yaml"
    tubes = "tubes: N, passes: {value: 1, source: s}, plugged: {count: 5, source: s}}"
    path.write_text(RATED.read_text(encoding="utf-8").replace("parallel: N}", tubes), encoding="utf-8")
    answer = solve_file(path)
    tube = np.pi * 0.01905 * 4.88
    lines = {row.name: row.area for row in answer.rating.ledger.rows}
    assert lines["plugged tubes"] == pytest.approx(5.0 * tube, rel=1e-12)
    assert figure(answer, "area_installed") == pytest.approx(57.0 * tube, rel=1e-12)
    assert answer.rating.ledger.sum == pytest.approx(62.0 * tube, rel=1e-12)


@pytest.mark.parametrize(
    ("way", "value", "ratio", "inner_share", "outer_share"),
    [
        ("cleanliness", "80 %", 0.8, "tube-side deposit", "shell-side deposit"),
        ("excess surface", "60 %", 1 / 1.6, "inside", "outside"),
    ],
)
def test_a_specified_fouling_is_met_though_films_move_with_it(
    tmp_path: Path, way: str, value: str, ratio: float, inner_share: str, outer_share: str
) -> None:
    """By definition U_service/U_clean, or 1/(1 + excess surface); the tube-side film follows its surface here."""
    text = (
        RATED.read_text(encoding="utf-8").replace("resistance: R_fi, ", "").replace("resistance: R_fo, ", "")
    )
    path = tmp_path / "rt-2.yaml"
    path.write_text(
        f"{text}fouling specified as:\n  {way}: {{value: {value}, source: s}}\n"
        f"  split: {{{inner_share}: {{value: 40 %, source: s}}, {outer_share}: {{value: 60 %, source: s}}}}\n",
        encoding="utf-8",
    )
    answer = solve_file(path)
    assert figure(answer, "cleanliness") == pytest.approx(ratio, rel=1e-12)
    films = [figure(answer, f"h tube-side film {condition}") for condition in ("clean", "service")]
    assert films[0] != pytest.approx(films[1], rel=1e-3)
    inner, outer = (
        figure(answer, f"R {name} service") for name in ("tube-side deposit", "shell-side deposit")
    )
    assert inner / outer == pytest.approx(40 / 60, rel=1e-12)


def test_a_side_with_two_open_deposits_is_told(tmp_path: Path) -> None:
    text = (
        RATED.read_text(encoding="utf-8").replace("resistance: R_fi, ", "").replace("resistance: R_fo, ", "")
    )
    lines = text.split("\n")
    place = next(place for place, line in enumerate(lines) if "name: shell-side deposit" in line)
    lines.insert(place, lines[place].replace("shell-side deposit", "second deposit"))
    path = tmp_path / "rt-3.yaml"
    path.write_text(
        "\n".join(lines) + "fouling specified as:\n  cleanliness: {value: 80 %, source: s}\n"
        "  split: {inside: {value: 40 %, source: s}, outside: {value: 60 %, source: s}}\n",
        encoding="utf-8",
    )
    with pytest.raises(Faults) as told:
        solve_file(path)
    assert "more than one term is open outside, and `outside` does not say which" in str(told.value)


def test_a_stated_area_and_plugged_tubes_do_not_go_together(tmp_path: Path) -> None:
    path = tmp_path / "ab-901.yaml"
    text = (RATED_COOLER.parent / "ab-901.yaml").read_text(encoding="utf-8")
    assert "plugged:" in text and "\nduty:" not in text
    duty = "\nduty:\n  arrangement: crossflow both unmixed\n  installed area: {value: 90 m^2, source: s}\n"
    duty += "  hot: {stream: loop water}\n  cold: {stream: air}\n"
    path.write_text(text + duty, encoding="utf-8")
    with pytest.raises(Faults) as told:
        solve_file(path)
    assert "does not say whether it counts the plugged tubes" in str(told.value)


@pytest.mark.parametrize(
    ("arrangement", "passes", "state"),
    [
        ("counterflow", 1, "within"),
        ("counterflow", 2, "outside"),
        ("crossflow both unmixed", 4, "outside"),
        ("shell and tube", 1, "outside"),
        ("shell and tube", 2, "within"),
    ],
)
def test_passes_that_the_arrangement_does_not_have_are_a_caution(
    tmp_path: Path, arrangement: str, passes: int, state: str
) -> None:
    """Counterflow and crossflow are of one pass of each stream, a shell has an even number of tube passes (any of the
    books on the mean temperature difference; common practice)."""
    solved(tmp_path, arrangement=arrangement)
    path = tmp_path / "rt-1.yaml"
    text = path.read_text(encoding="utf-8")
    path.write_text(
        text.replace(
            "length: L}",
            f"length: L, tubes: {{value: 12, source: s}}, passes: {{value: {passes}, source: s}}}}",
        ),
        encoding="utf-8",
    )
    checks = [
        check for check in solve_file(path).base.checks if check.id == "duty / arrangement / tube passes"
    ]
    assert {(check.state, check.level) for check in checks} == {(state, "caution")}


def test_an_odd_number_of_tube_passes_is_said_to_be_taken_as_an_even_one(tmp_path: Path) -> None:
    text = (Path(__file__).resolve().parents[2] / "calcs/hr-821.yaml").read_text(encoding="utf-8")
    old = "passes: {value: 4,"
    assert text.count(old) == 1
    said = {}
    for number in (3, 4):
        path = tmp_path / f"hr-{number}.yaml"
        path.write_text(text.replace(old, f"passes: {{value: {number},"), encoding="utf-8")
        solved = solve_file(path, for_record=False)
        said[number] = [item.text for item in solved.base.assumptions if item.id == "duty/odd passes"]
    assert said == {3: ["3 tube passes are taken as an even number of them."], 4: []}


def test_a_margin_that_no_unit_has_is_a_caution_that_names_the_slip(tmp_path: Path) -> None:
    text = RATED_COOLER.read_text(encoding="utf-8")
    name = "duty / band / installed over required area"
    sound = tmp_path / "sound.yaml"
    sound.write_text(text, encoding="utf-8")
    assert name not in {check.id for check in solve_file(sound).base.checks}
    # 18.2 kg/h in place of 18.2 kg/s on both sides: a duty of a few hundred W for 18 m²
    slipped = tmp_path / "slipped.yaml"
    slipped.write_text(
        text.replace("18.2 kg/s", "18.2 kg/h").replace(
            "20.6 kg/s, is: cooling water flow,", "20.6 kg/h, is: flow,"
        ),
        encoding="utf-8",
    )
    answer = solve_file(slipped)
    found = [check for check in answer.base.checks if check.id == name]
    assert [(check.condition, check.level, check.state) for check in found] == [
        (SERVICE, "caution", "outside")
    ]
    assert found[0].value == 1.0 + figure(answer, "area_margin") > 3.0
    assert "kg/h in place of kg/s" in found[0].because


# --- where the limits of a duty lie -------------------------------------------------------------------


def states(answer, name: str) -> set[str]:
    """What both conditions say of a check."""
    return {check.state for check in answer.base.checks if check.id == name}


@pytest.mark.parametrize(
    ("error", "caution", "range_"),
    [
        (0.0499, "within", "within"),
        (0.0501, "outside", "within"),
        (-0.0501, "outside", "within"),
        (0.0999, "outside", "within"),
        (0.1001, "outside", "outside"),
        (-0.1001, "outside", "outside"),
    ],
)
def test_heat_balances_close_within_five_and_ten_per_cent(
    tmp_path: Path, error: float, caution: str, range_: str
) -> None:
    """By hand: (Q_h − Q_c)/((Q_h + Q_c)/2) = e with Q_c = Q_h·(2 − e)/(2 + e), by the heat capacity of the cold stream."""
    heat = 6.93 * 3810.0 * 26.2 * (2.0 - error) / (2.0 + error)
    answer = solved(tmp_path, cold_outlet=", outlet: T_co", cold_cp=f"{heat / (6.3 * 26.0)!r} J/(kg K)")
    assert figure(answer, "closure") == pytest.approx(abs(error), rel=1e-9)
    assert states(answer, "duty / heat balance / closure caution") == {caution}
    assert states(answer, "duty / heat balance / closure range") == {range_}


@pytest.mark.parametrize(
    ("part", "caution", "range_"),
    [
        (1.0499, "within", "within"),
        (1.0501, "outside", "within"),
        (0.9499, "outside", "within"),
        (1.0999, "outside", "within"),
        (1.1001, "outside", "outside"),
        (0.8999, "outside", "outside"),
    ],
)
def test_a_stated_area_is_that_of_its_geometry_within_five_and_ten_per_cent(
    tmp_path: Path, part: float, caution: str, range_: str
) -> None:
    area = part * np.pi * 0.020002 * 600.0
    answer = solved(tmp_path, shells=f"  installed area: {{value: {area!r} m^2, source: s}}\n")
    assert states(answer, "duty / area / closely stated") == {caution}
    assert states(answer, "duty / area / stated") == {range_}


@pytest.mark.parametrize(("part", "state"), [(1.001, "within"), (0.999, "outside")])
def test_the_installed_area_carries_the_duty_or_does_not(tmp_path: Path, part: float, state: str) -> None:
    """The films are stated: the area needed stays, and the installed one goes with the length."""
    needed = figure(solved(tmp_path), "area_service") / (np.pi * 0.020002)
    answer = solved(tmp_path, length=f"{part * needed!r} m")
    assert figure(answer, "area_margin") == pytest.approx(part - 1.0, abs=1e-12)
    assert states(answer, "duty / area / margin") == {state}


@pytest.mark.parametrize(
    ("figures", "stopped"),
    [
        ({"T_ho": "65.6 degC"}, {"hot stream", "cold stream"}),
        ({"T_hi": "10 degC", "hot_outlet": ""}, {"hot above cold", "hot stream", "cold stream"}),
        ({"cold_outlet": ", outlet: T_co", "T_co": "10 degC"}, {"cold stream"}),
        ({"cold_flow": "0 kg/s"}, {"cold flow"}),
        ({"shells": "  heat flow: {value: 0 W, source: s}\n"}, {"heat flow"}),
        ({"hot_flow": "0 kg/s", "hot_outlet": ""}, {"hot flow"}),
    ],
)
def test_a_duty_without_heat_or_flow_is_no_number(
    tmp_path: Path, figures: dict[str, str], stopped: set[str]
) -> None:
    """Equal temperatures transfer nothing; a stream is there only with a flow."""
    with pytest.raises(Faults) as told:
        solved(tmp_path, **figures)
    assert {fault.code for fault in told.value.faults} == {"limit-stops"}
    text = str(told.value)
    assert stopped <= {name for name in stopped if f"/ {name}" in text}


@pytest.mark.parametrize(
    ("temperature", "between", "mean"),
    [
        (52.5 + 6.54, "within", "within"),
        (52.5 - 6.54, "within", "within"),
        (52.5 + 6.56, "within", "outside"),
        (52.5 - 6.56, "within", "outside"),
        (65.7, "outside", "outside"),
        (39.3, "outside", "outside"),
    ],
)
def test_a_stated_mean_lies_between_its_ends_and_near_their_middle(
    tmp_path: Path, temperature: float, between: str, mean: str
) -> None:
    """65.6 °C and 39.4 °C: the middle is 52.5 °C, and a quarter of the way is 6.55 K."""
    text = FILE.format(**{**KREITH, "length": "900 m"})
    stated = f"{{fluid: warm, temperature: {{value: {temperature!r} degC, source: s}}, flow"
    assert text.count("{fluid: warm, flow") == 1
    path = tmp_path / "rt-1.yaml"
    path.write_text(text.replace("{fluid: warm, flow", stated), encoding="utf-8")
    answer = solve_file(path)
    found = {check.id: (check.level, check.state) for check in answer.base.checks}
    assert found["duty / ends / hot mean between the ends"] == ("range", between)
    assert found["duty / ends / hot mean"] == ("caution", mean)
    assert "duty / ends / cold mean" not in found


def test_one_tube_pass_in_a_shell_is_not_said_to_be_an_odd_number(tmp_path: Path) -> None:
    """The caution of the passes tells it already."""
    path = tmp_path / "rt-1.yaml"
    text = FILE.format(**{**KREITH, "arrangement": "shell and tube"})
    passes = "length: L, tubes: {value: 12, source: s}, passes: {value: %d, source: s}}"
    said = {}
    for number in (1, 3):
        path.write_text(text.replace("length: L}", passes % number), encoding="utf-8")
        answer = solve_file(path, for_record=False)
        said[number] = [item.id for item in answer.base.assumptions if item.id == "duty/odd passes"]
    assert said == {1: [], 3: ["duty/odd passes"]}


@pytest.mark.parametrize("outlet", [", outlet: T_ho", ""])
def test_a_duty_that_follows_from_neither_stream_is_told(tmp_path: Path, outlet: str) -> None:
    """Without the hot flow neither stream has a heat, and none is found by effectiveness: the cold outlet is open."""
    text = FILE.format(**{**KREITH, "hot_outlet": outlet})
    old = "warm, flow: m_h,"
    assert text.count(old) == 1
    path = tmp_path / "rt-1.yaml"
    path.write_text(text.replace(old, "warm,"), encoding="utf-8")
    with pytest.raises(Faults) as told:
        solve_file(path)
    assert [(fault.code, fault.message) for fault in told.value.faults] == [
        ("duty-incomplete", "the duty follows from neither stream")
    ]


@pytest.mark.parametrize(
    ("specified", "fouling", "stopped"),
    [
        ("cleanliness: {value: 100 %, source: s}", "", "fouling / specified fouling"),
        ("excess surface: {value: 0 %, source: s}", "", "fouling / specified fouling"),
        # Clean 1/U is 2/1136 m² K/W and a hundredth of it is 1.8e-5: a deposit of 2e-5 beside it is more already.
        ("excess surface: {value: 1 %, source: s}", "0.00002 m^2 K/W", "fouling / resistance"),
        ("excess surface: {value: 2 %, source: s}", "0.00002 m^2 K/W", ""),
    ],
)
def test_a_specified_fouling_adds_a_resistance(
    tmp_path: Path, specified: str, fouling: str, stopped: str
) -> None:
    text = FILE.format(**{**KREITH, "length": "900 m"})
    deposit = "  - {name: deposit, kind: fouling, resistance: R_f, on: outside}\n"
    assert text.count(deposit) == 1
    lines = deposit.replace(", resistance: R_f", "")
    if fouling:
        lines += deposit.replace("deposit,", "stated deposit,").replace(
            "R_f", f"{{value: {fouling}, source: s}}"
        )
    path = tmp_path / "rt-1.yaml"
    path.write_text(
        f"{text.replace(deposit, lines)}fouling specified as: {{{specified}}}\n", encoding="utf-8"
    )
    if not stopped:
        answer = solve_file(path)
        # By hand: S·(1/U_clean) less what is stated.
        expected = 0.02 / figure(answer, "U_clean") - 2e-5
        assert figure(answer, "R deposit service") == pytest.approx(expected, rel=1e-9)
        return
    check_stopped(path, stopped)


def check_stopped(path: Path, name: str) -> None:
    """No number is given outside a limit, and nothing else is wrong."""
    with pytest.raises(Faults) as told:
        solve_file(path)
    assert {fault.code for fault in told.value.faults} == {"limit-stops"} and name in str(told.value)


@pytest.mark.parametrize(
    ("inner", "outer", "stopped"),
    [
        ("40 %", "59.9 %", "fouling / split"),
        ("40 %", "60.1 %", "fouling / split"),
        ("-10 %", "110 %", "fouling / share"),
        ("110 %", "-10 %", "fouling / share"),
        ("0 %", "100 %", ""),
    ],
)
def test_shares_that_a_case_restates_are_parts_of_one_whole(
    tmp_path: Path, inner: str, outer: str, stopped: str
) -> None:
    text = FILE.format(**{**KREITH, "length": "900 m"})
    deposit = "  - {name: deposit, kind: fouling, resistance: R_f, on: outside}\n"
    hot = "coefficient: h, on: outside, stream: hot"
    for old, new in (
        (
            "fluids:\n",
            "  x_1: {value: 40 %, is: share, source: s}\n  x_2: {value: 60 %, is: share, source: s}\nfluids:\n",
        ),
        (deposit, "  - {name: inner deposit, kind: fouling, on: inside}\n"),
        (
            "  - {name: outer film",
            "  - {name: outer deposit, kind: fouling, on: outside}\n  - {name: outer film",
        ),
        (hot, hot.replace("outside", "inside")),
    ):
        assert text.count(old) == 1
        text = text.replace(old, new)
    text += (
        "fouling specified as: {cleanliness: {value: 80 %, source: s}, split: {inside: x_1, outside: x_2}}\n"
        f"cases: {{moved: {{x_1: {{value: {inner}, source: s}}, x_2: {{value: {outer}, source: s}}}}}}\n"
    )
    path = tmp_path / "rt-1.yaml"
    path.write_text(text, encoding="utf-8")
    if stopped:
        check_stopped(path, stopped)
        return
    results = solve_file(path).cases[1].results
    # By hand: all of (1/0.8 − 1)/U_clean lies outside.
    assert results["R inner deposit service"].value == 0.0
    outside = 0.25 / results["U_clean"].value
    assert results["R outer deposit service"].value == pytest.approx(outside, rel=1e-9)
