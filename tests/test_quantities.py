"""Quantities: what is read and what is refused, exactness of factors, units to and from text.

Conversions come from NIST Special Publication 811 (2008), Appendix B, unless a comment names another source.
"""

import math
import subprocess
import sys
from decimal import Decimal
from fractions import Fraction
from pathlib import Path

import pytest
import yaml
from hypothesis import given
from hypothesis import strategies as st

import calcbook
from calcbook import quantities
from calcbook.quantities import (
    DIMENSIONLESS,
    SI_DISPLAY,
    US_CUSTOMARY,
    Quantity,
    QuantityFault,
    QuantityKind,
    as_kind,
    display_unit,
    in_unit,
    kind_from_entry,
    read_any,
    read_quantity,
    read_tolerance,
    si_unit,
    si_value,
    unit_display,
    unit_factor,
    unit_names,
)

LIBRARY = Path(calcbook.__file__).parent / "library"
ENTRIES = yaml.load((LIBRARY / "vocabulary.yaml").read_text("utf-8"), Loader=yaml.BaseLoader)["quantities"]
KINDS: dict[str, QuantityKind] = {name: kind_from_entry(name, entry) for name, entry in ENTRIES.items()}

# One rounding to double precision is at most half a unit in the last place.
ROUNDING = 2.0**-53


def fault_of(text: str, kind: str | None = None) -> QuantityFault:
    with pytest.raises(QuantityFault) as caught:
        if kind is None:
            read_any(text)
        else:
            read_quantity(text, KINDS[kind])
    return caught.value


def marked(text: str, fault: QuantityFault) -> str:
    """The part of the text that the fault points at."""
    return text[fault.column - 1 : fault.end_column - 1]


# --- what is read ---------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "kind", "value"),
    [
        ("15.4 mm", "diameter", 0.0154),
        ("15.4mm", "diameter", 0.0154),
        ("0.00018 m^2 K/W", "area resistance", 0.00018),
        ("1e-4 m²·K/W", "area resistance", 1e-4),
        ("1e-4 m**2*K/W", "area resistance", 1e-4),
        ("1e\u22124 m² K W⁻¹", "area resistance", 1e-4),
        ("1e-4 (m^2 K)/W", "area resistance", 1e-4),
        ("5 K", "temperature difference", 5.0),
        ("\u22125 K", "temperature difference", -5.0),
        ("9 degR", "temperature difference", 5.0),
        ("78 degC", "temperature", 351.15),
        ("78 °C", "temperature", 351.15),
        ("78 ℃", "temperature", 351.15),
        ("345 K", "temperature", 345.0),
        # SP 811: T/K = (t/degF + 459.67)/1.8
        ("172 degF", "temperature", float(Fraction("631.67") / Fraction("1.8"))),
        ("172 °F", "temperature", float(Fraction("631.67") / Fraction("1.8"))),
        # SP 811: T/K = (T/degR)/1.8
        ("621 degR", "temperature", 345.0),
        ("-40 degF", "temperature", 233.15),
        ("5200 W/(m^2 K)", "film coefficient", 5200.0),
        ("5200 W/(m²·K)", "film coefficient", 5200.0),
        ("5200 W m^-2 K^-1", "film coefficient", 5200.0),
        ("5200 W/(m^2 degC)", "film coefficient", 5200.0),
        ("18.2 kg/s", "mass flow", 18.2),
        ("0.0002 1/K", "expansion coefficient", 0.0002),
        ("0.0002/K", "expansion coefficient", 0.0002),
        ("62", "tubes in parallel", 62.0),
        ("62\u202f043", "Reynolds number", 62043.0),
        ("1\u2009200\u2009000 W", "heat flow", 1.2e6),
        ("62\u00a0043\u00a0W", "heat flow", 62043.0),
        ("2 %", "mass fraction", 0.02),
        ("40%", "mass fraction", 0.4),
        ("30 deg", "angle", math.pi / 6),
        ("30°", "angle", math.pi / 6),
        ("0.5 rad", "angle", 0.5),
        ("45 µm", "roughness", 45e-6),
        ("45 μm", "roughness", 45e-6),
        ("0 mm", "roughness", 0.0),
        ("6 months", "time", 6 * 30.4375 * 86400),
        ("46 mm^2/s", "kinematic viscosity", 46e-6),
        ("6.8 cSt", "kinematic viscosity", 6.8e-6),
        ("1.002 mPa s", "viscosity", 1.002e-3),
        ("1.002 cP", "viscosity", 1.002e-3),
        ("12000 m^3/h", "volume flow", 12000 / 3600),
    ],
)
def test_reads_the_written_quantity(text: str, kind: str, value: float) -> None:
    # one rounding on our side; the expected expression may have two more
    assert read_quantity(text, KINDS[kind]).value == pytest.approx(value, rel=4 * ROUNDING, abs=0.0)


@pytest.mark.parametrize(
    ("text", "kind", "value", "digits"),
    [
        # Btu_IT/(h ft^2 degF) = 5.678263 W/(m^2 K), SP 811
        ("1 Btu/(h ft^2 degF)", "film coefficient", 5.678263, 7),
        # degF h ft^2/Btu_IT = 0.1761102 m^2 K/W, SP 811; with the scale's offset it would be 81 m^2 K/W
        ("1 h ft^2 degF/Btu", "area resistance", 0.1761102, 7),
        ("0.002 h ft^2 degF/Btu", "area resistance", 3.522204e-4, 7),
        # Btu_IT/(h ft degF) = 1.730735 W/(m K), SP 811
        ("1 Btu/(h ft degF)", "wall conductivity", 1.730735, 7),
        ("60 Btu/(h ft degF)", "wall conductivity", 103.84, 5),
        # Btu_IT/(lb degF) = 4.1868e3 J/(kg K), SP 811
        ("1 Btu/(lb degF)", "heat capacity", 4186.8, 7),
        # Btu_IT/h = 0.2930711 W, SP 811
        ("1 Btu/h", "heat flow", 0.2930711, 7),
        # Btu_IT/(ft^2 h) = 3.154591 W/m^2, SP 811
        ("1 Btu/(h ft^2)", "heat flux", 3.154591, 7),
        # psi = 6.894757e3 Pa, SP 811
        ("1 psia", "pressure", 6894.757, 7),
        # kgf/cm^2 = 9.80665e4 Pa, SP 811
        ("4 kgf/cm^2", "pressure", 392266.0, 9),
        # torr = 1.333224e2 Pa, conventional mmHg = 1.333224e2 Pa, inHg = 3.386389e3 Pa, SP 811
        ("1 Torr", "pressure", 133.3224, 7),
        ("1 mmHg", "pressure", 133.3224, 7),
        ("1 inHg", "pressure", 3386.389, 7),
        # conventional inch of water = 2.490889e2 Pa, SP 811
        ("1 inH2O", "pressure", 249.0889, 7),
        ("1 atm", "pressure", 101325.0, 9),
        # kcal_IT = 4.1868e3 J, SP 811
        ("0.0002 m^2 h degC/kcal", "area resistance", 0.0002 * 3600 / 4186.8, 14),
        # lb/h = 1.259979e-4 kg/s, SP 811
        ("1 lb/h", "mass flow", 1.259979e-4, 7),
        # gallon (US) per minute = 6.309020e-5 m^3/s, cubic foot per minute = 4.719474e-4 m^3/s, SP 811
        ("1 gpm", "volume flow", 6.309020e-5, 7),
        ("1 cfm", "volume flow", 4.719474e-4, 7),
        # lb/ft^3 = 1.601846e1 kg/m^3, SP 811
        ("1 lb/ft^3", "density", 16.01846, 7),
        # ft^2/s = 9.290304e-2 m^2/s, SP 811
        ("1 ft^2/s", "kinematic viscosity", 0.09290304, 9),
        # lb/(ft s) = 1.488164 Pa s, SP 811
        ("1 lb/(ft s)", "viscosity", 1.488164, 7),
        ("1 P", "viscosity", 0.1, 9),
        ("36 in", "length", 0.9144, 9),
        ("1 ft", "length", 0.3048, 9),
        ("1 yd", "length", 0.9144, 9),
        # mil = 2.54e-5 m, SP 811
        ("1 mil", "roughness", 2.54e-5, 9),
        ("1 ft^2", "area", 0.09290304, 9),
        ("1 kWh/h", "heat flow", 1000.0, 9),
    ],
)
def test_factors_are_those_of_sp_811(text: str, kind: str, value: float, digits: int) -> None:
    read = read_quantity(text, KINDS[kind]).value
    # published to `digits` significant digits: half a unit of the last digit, at most 0.5 * 10^(1-digits)
    assert read == pytest.approx(value, rel=0.5 * 10.0 ** (1 - digits))


@pytest.mark.parametrize(
    ("unit", "exact"),
    [
        ("in", Fraction("0.0254")),
        ("lb", Fraction("0.45359237")),
        ("Btu", Fraction("1055.05585262")),
        ("cal", Fraction("4.1868")),
        ("gal", Fraction("0.003785411784")),
        ("kgf", Fraction("9.80665")),
        ("lbf", Fraction("4.4482216152605")),
        # psi = lbf/in^2 of the two exact factors above it
        ("psi", Fraction("4.4482216152605") / Fraction("0.0254") ** 2),
        ("month", Fraction("30.4375") * 86400),
    ],
)
def test_factors_are_rounded_once(unit: str, exact: Fraction) -> None:
    assert unit_factor(unit)[0] == float(exact)


@pytest.mark.parametrize(
    ("unit", "same"),
    [
        # SI prefixes, SI Brochure, 9th edition, table 7; litre, tonne, bar, hour: table 8 there
        ("km", "1000 m"), ("cm", "0.01 m"), ("um", "1e-6 m"), ("g", "0.001 kg"), ("mg", "1e-6 kg"),
        ("t", "1000 kg"), ("kmol", "1000 mol"), ("L", "0.001 m^3"), ("l", "1000 mL"), ("ml", "1e-6 m^3"),
        ("kN", "1000 N"), ("uPa", "1e-6 Pa"), ("mPa", "0.001 Pa"), ("hPa", "100 Pa"), ("MPa", "1e6 Pa"),
        ("mbar", "100 Pa"), ("MJ", "1e6 J"), ("GJ", "1e9 J"), ("mW", "0.001 W"), ("MW", "1e6 W"),
        ("MWh", "3.6e9 J"), ("min", "60 s"), ("day", "86400 s"), ("hr", "3600 s"), ("Hz", "1 1/s"),
        # Julian year, IAU Style Manual (1989)
        ("year", "31557600 s"), ("years", "12 months"),
        # a revolution is counted as one: the choice of this book
        ("rpm", "1 1/min"),
        # kcal_IT = 4.1868e3 J; St = 1e-4 m^2/s; pound-mole by the pound, SP 811
        ("Mcal", "4186800 J"), ("Gcal", "1e6 kcal"), ("St", "1e-4 m^2/s"), ("cP", "0.01 P"),
        ("lbmol", "453.59237 mol"), ("lbm", "0.45359237 kg"),
        # common practice: MM is a thousand thousands on US data sheets
        ("MMBtu", "1055055852.62 J"), ("BTU", "1055.05585262 J"),
    ],
)  # fmt: skip
def test_multiples_and_other_spellings(unit: str, same: str) -> None:
    one, other = read_any(f"1 {unit}"), read_any(same)
    assert (one.value, one.dimension) == (other.value, other.dimension)


def test_a_plain_si_value_is_the_typed_float() -> None:
    assert read_quantity("18.2 kg/s", KINDS["mass flow"]).value == float("18.2")
    # 0.1 * 3 in floats is 0.30000000000000004: 300 mm must not pass through such a product
    assert read_quantity("300.3 mm", KINDS["length"]).value == float("0.3003")


def test_btu_follows_from_its_definition() -> None:
    # Btu_IT: cal_IT per gram and kelvin equals Btu_IT per pound and degree Fahrenheit (SP 811)
    assert unit_factor("Btu/(lb degF)")[0] == unit_factor("cal/(g K)")[0]


# --- pressure and temperature readings ------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "value", "reading"),
    [
        ("4 bar", 4e5, "taken as absolute"),
        ("60 psi", 60 * 6894.757293168361, "taken as absolute"),
        ("4 bara", 4e5, "absolute"),
        ("4 bar(a)", 4e5, "absolute"),
        ("400 kPa(a)", 4e5, "absolute"),
        ("30 psia", 30 * 6894.757293168361, "absolute"),
        ("2 barg", 2e5, "gauge"),
        ("2 bar(g)", 2e5, "gauge"),
        ("2 kgf/cm^2(g)", 196133.0, "gauge"),
        ("30 psig", 30 * 6894.757293168361, "gauge"),
        ("-0.3 barg", -3e4, "gauge"),
    ],
)
def test_pressure_says_how_it_was_read(text: str, value: float, reading: str) -> None:
    quantity = read_quantity(text, KINDS["pressure"])
    assert quantity.reading == reading
    # the expected products are rounded twice
    assert quantity.value == pytest.approx(value, rel=4 * ROUNDING)


def test_gauge_pressure_must_say_so() -> None:
    assert read_quantity("2 barg", KINDS["gauge pressure"]).value == 2e5
    plain = fault_of("2 bar", "gauge pressure")
    assert (plain.code, plain.nearest) == ("unit-ambiguous", ("barg",))
    assert fault_of("2 kPa", "gauge pressure").nearest == ("kPa(g)",)
    assert fault_of("2 bara", "gauge pressure").code == "unit-dimension"
    assert fault_of("2 m(g)").code == "unit-unknown"


def test_kelvin_is_a_point_or_a_difference_as_the_field_says() -> None:
    either = read_any("5 K")
    assert (either.value, either.reading) == (5.0, "point or difference")
    assert as_kind(either, KINDS["temperature"]).reading == "point"
    assert as_kind(either, KINDS["temperature difference"]).reading == "difference"
    assert read_any("5 degR").reading == "point or difference"
    assert read_any("5 degC") == Quantity(278.15, "5 degC", "5", "degC", either.dimension, "point")
    assert read_any("5 W K/W").reading == ""


@pytest.mark.parametrize(("text", "better"), [("5 degC", "5 K"), ("9 degF", "9 degR"), ("5 °C", "5 K")])
def test_a_difference_is_not_written_as_a_point(text: str, better: str) -> None:
    fault = fault_of(text, "temperature difference")
    assert (fault.code, fault.nearest) == ("unit-offset-compound", (better,))
    assert better in fault.message
    with pytest.raises(QuantityFault) as caught:
        as_kind(read_any(text), KINDS["temperature difference"])
    assert caught.value.code == "unit-offset-compound"


def test_a_temperature_is_one_unit() -> None:
    # as a compound the degree would be a difference and 30 degC would silently be 30 K
    assert fault_of("30 degC m/m", "temperature").code == "unit-offset-compound"


@pytest.mark.parametrize(
    "text", ["0 K", "-1 K", "-273.15 degC", "-300 degC", "-459.67 degF", "-500 °F", "0 degR"]
)
def test_a_temperature_is_above_absolute_zero(text: str) -> None:
    assert fault_of(text, "temperature").code == "temperature-not-absolute"


@pytest.mark.parametrize("text", ["-273.14 degC", "-459.66 degF", "0.01 K"])
def test_just_above_absolute_zero_is_read(text: str) -> None:
    # 0.01 K, or a hundredth of 5/9 K
    assert 0 < read_quantity(text, KINDS["temperature"]).value <= 0.01


# --- what is refused ------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "kind", "code", "part", "nearest"),
    [
        ("5200 W/m^2 K", "film coefficient", "unit-ambiguous", "/m^2 K", ("W/(m^2 K)",)),
        ("5200 W/m²·K", "film coefficient", "unit-ambiguous", "/m²·K", ("W/(m² K)",)),
        ("5200 W/m^2/K", "film coefficient", "unit-ambiguous", "/m^2/K", ("W/(m^2 K)",)),
        ("0.1 K/W m^2", "area resistance", "unit-ambiguous", "/W m^2", ("K m^2/W",)),
        ("82 C", "temperature", "unit-coulomb", "C", ("82 degC",)),
        ("82 W/(m^2 C)", "film coefficient", "unit-coulomb", "C", ("82 W/(m^2 degC)",)),
        ("1,5 mm", "diameter", "number-decimal-comma", "1,5 mm", ("1.5 mm",)),
        ("12,000 mm", "diameter", "number-decimal-comma", "12,000 mm", ("12.000 mm", "12000 mm")),
        ("1,234.5 mm", "diameter", "number-decimal-comma", "1,234.5 mm", ("1234.5 mm",)),
        ("15.4", "length", "unit-missing", "15.4", ()),
        ("30", "angle", "unit-missing", "30", ()),
        ("30", "temperature", "unit-missing", "30", ()),
        ("nan", "number", "number-not-finite", "nan", ()),
        ("NaN m", "length", "number-not-finite", "NaN m", ()),
        ("inf", "number", "number-not-finite", "inf", ()),
        ("-inf K", "temperature", "number-not-finite", "-inf K", ()),
        ("1e999", "number", "number-not-finite", "1e999", ()),
        ("1e-999 m", "length", "number-not-finite", "1e-999 m", ()),
        ("1e308 km", "length", "number-not-finite", "1e308 km", ()),
        ("1e-323 mm", "length", "number-not-finite", "1e-323 mm", ()),
        ("-3 mm", "length", "quantity-negative", "-3", ()),
        ("0 mm", "diameter", "quantity-negative", "0", ()),
        ("-1 kg/s", "mass flow", "quantity-negative", "-1", ()),
        ("-4 bara", "pressure", "quantity-negative", "-4", ()),
        ("5 kg", "length", "unit-dimension", "kg", ()),
        ("5 kg", "tubes in parallel", "unit-dimension", "kg", ()),
        ("5 deg", "number", "unit-dimension", "deg", ()),
        ("5 %", "angle", "unit-dimension", "%", ()),
        ("5 mm", "temperature", "unit-dimension", "mm", ()),
        ("5 furlong", "length", "unit-unknown", "furlong", ()),
        ("5 KW", "heat flow", "unit-unknown", "KW", ("kW",)),
        ("5 psii", "pressure", "unit-unknown", "psii", ("psi",)),
        ("5 m2 K/W", "area resistance", "unit-unknown", "m2", ("m^2",)),
        ("5 kg/m3", "density", "unit-unknown", "m3", ("m^3",)),
        ("78 deg C", "temperature", "unit-unknown", "deg C", ("degC",)),
        ("172 deg F", "temperature", "unit-unknown", "deg F", ("degF",)),
        ("78 Celsius", "temperature", "unit-unknown", "Celsius", ("degC",)),
        ("172 F", "temperature", "unit-unknown", "F", ("degF",)),
        ("5 delta_degC", "temperature difference", "unit-unknown", "delta_degC", ("K",)),
        ("5 meters", "length", "unit-unknown", "meters", ("m",)),
        ("5 ms", "time", "unit-unknown", "ms", None),
        ('5"', "length", "unit-unknown", '"', ("in",)),
        ("5 m^7", "length", "unit-too-complex", "^7", ()),
        ("5 m^0", "number", "unit-too-complex", "^0", ()),
        ("5 m^1.5", "length", "unit-too-complex", "^1.5", ()),
        ("5 m^9^9^9", "length", "unit-too-complex", "^9^9^9", ()),
        ("5 m^99999999999", "length", "unit-too-complex", "^99999999999", ()),
        ("62 043 W", "heat flow", "number-unreadable", "62 043 W", ("62043 W",)),
        ("3/4 in", "diameter", "number-unreadable", "3/4 in", ("0.75 in",)),
        ("1.2x10^-4 m", "length", "number-unreadable", "1.2x10^-4 m", ("1.2e-4 m",)),
        ("1.2·10⁻⁴ m", "length", "number-unreadable", "1.2·10⁻⁴ m", ("1.2e-4 m",)),
        ("10^-4 m", "length", "number-unreadable", "10^-4 m", ("1e-4 m",)),
        ("5 +- 1 mm", "length", "number-unreadable", "5 +- 1 mm", ()),
        ("5..7 mm", "length", "number-unreadable", "5..7 mm", ()),
        ("1_000 mm", "length", "number-unreadable", "1_000 mm", ()),
        ("about 5 mm", "length", "number-unreadable", "about 5 mm", ()),
        ("٣ mm", "length", "number-unreadable", "٣ mm", ()),
        ("mm", "length", "number-unreadable", "mm", ()),
    ],
)
def test_refuses_and_points(
    text: str, kind: str, code: str, part: str, nearest: tuple[str, ...] | None
) -> None:
    fault = fault_of(text, kind)
    assert fault.code == code
    assert marked(text, fault) == part
    if nearest is not None:
        assert fault.nearest == nearest


def test_columns_count_from_the_start_of_the_text() -> None:
    text = "   5 W/(m^2 parsec)"
    assert marked(text, fault_of(text)) == "parsec"


def test_both_readings_of_an_ambiguous_unit_are_named_while_no_kind_is_known() -> None:
    assert fault_of("5200 W/m^2 K").nearest == ("W/(m^2 K)", "W K/m^2")
    assert fault_of("5 W/(m^2 K) s").nearest == ("W/(m^2 K s)", "W s/(m^2 K)")


def test_every_suggestion_for_a_unit_can_be_read() -> None:
    wrong = [*quantities._MEANT, "KW", "m2", "psii", "Watts", "kgs", "btus", "cmm"]
    suggested = {unit for name in wrong for unit in quantities._nearest_units(name)}
    assert len(suggested) > 20
    for unit in suggested:
        assert unit_factor(unit)[0] > 0


def test_a_wrong_name_is_never_a_unit() -> None:
    assert not set(quantities._MEANT) & set(unit_names())


def test_the_fault_of_a_missing_unit_names_units() -> None:
    assert fault_of("15.4", "inside diameter").expected == "a unit such as mm, m, in"


def test_look_alike_letters_are_named() -> None:
    fault = fault_of("5 м")
    assert fault.code == "unit-unknown"
    assert "cyrillic small letter em" in fault.message


@pytest.mark.parametrize(
    "text",
    [
        "9" * 200_000,
        "5 " + "m" * 200_000,
        "5 m" + "^9" * 50,
        "5 " + "(" * 50,
        "5 " + "m " * 50,
        "5 m m m m m m m m m",
        "1e999999999",
        "1e-999999999",
        "5 __import__('os').system('true')",
        "__import__('os')",
        "5 m; import os",
        "5 {m}",
        "5 m\x00",
        "\x1b[31m5 m",
        "5 [length]",
        "5 m if m else m",
        "5 lambda: m",
        "5 ΔdegC",
        "5 W/()",
        "5 W/(m/K)",
        "5 W/(m K",
        "5 W)",
        "5 W//m",
        "5 ^2",
        "5 (m K)^2",
        "5 W*",
        "5 */m",
        "5 /",
        "5 (g)",
        "",
        "   ",
        "-",
        "e5",
        ".",
    ],
)
def test_hostile_text_is_refused(text: str) -> None:
    fault = fault_of(text)
    assert 1 <= fault.column < fault.end_column
    assert len(fault.message) < 300
    assert "\x1b" not in fault.message + fault.found
    assert "\x00" not in fault.message + fault.found


def test_a_zero_with_an_enormous_exponent_is_zero() -> None:
    assert read_any("0e999999999 m").value == 0.0


@given(st.text(max_size=130))
def test_any_text_is_a_finite_quantity_or_a_fault(text: str) -> None:
    try:
        quantity = read_any(text)
    except QuantityFault as fault:
        assert fault.column >= 1
    else:
        assert math.isfinite(quantity.value)
        assert read_any(quantity.text) == quantity


@given(st.lists(st.sampled_from([*"5mKW/()^2- *·²", "degC", "Btu", "ft", "1e3", "C"]), max_size=24))
def test_any_mix_of_unit_signs_is_a_finite_quantity_or_a_fault(parts: list[str]) -> None:
    text = "5 " + "".join(parts)
    try:
        assert math.isfinite(read_any(text).value)
    except QuantityFault as fault:
        assert marked(text, fault) or fault.column > len(text.rstrip())


# --- text kept as typed ---------------------------------------------------------------------------


def test_the_typed_text_is_kept() -> None:
    quantity = read_quantity("  0.00009   m^2  K/W ", KINDS["area resistance"])
    assert quantity.text == "0.00009 m^2 K/W"
    assert (quantity.number_text, quantity.unit_text) == ("0.00009", "m^2 K/W")
    assert [int(exponent) for exponent in quantity.dimension] == [0, -1, 3, 1, 0]


def test_as_kind_is_as_if_read_with_the_kind() -> None:
    for text, kind in [("4 bar", "pressure"), ("62", "number"), ("0.5 K", "temperature difference")]:
        assert as_kind(read_any(text), KINDS[kind]) == read_quantity(text, KINDS[kind])
    with pytest.raises(QuantityFault) as caught:
        as_kind(read_any("4 bar"), KINDS["length"])
    assert caught.value.code == "unit-dimension"
    with pytest.raises(QuantityFault) as caught:
        as_kind(read_any("-5 K"), KINDS["temperature"])
    assert caught.value.code == "temperature-not-absolute"


# --- tolerances -----------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "kind", "half_width", "relative"),
    [
        ("2 %", "mass flow", 0.02, True),
        ("20 %", "film coefficient", 0.2, True),
        ("0.5 K", "temperature", 0.5, False),
        ("1.8 degR", "temperature", 1.0, False),
        ("0.1 mm", "diameter", 1e-4, False),
        ("0.1 bar", "pressure", 1e4, False),
        ("0.1 bar", "gauge pressure", 1e4, False),
        ("0.02", "mass fraction", 0.02, False),
        ("1 %", "temperature difference", 0.01, True),
        ("0 K", "temperature", 0.0, False),
    ],
)
def test_reads_a_tolerance(text: str, kind: str, half_width: float, relative: bool) -> None:
    tolerance = read_tolerance(text, KINDS[kind])
    assert (tolerance.half_width, tolerance.relative, tolerance.text) == (half_width, relative, text)


@pytest.mark.parametrize(
    ("text", "kind", "code", "nearest"),
    [
        ("1 degC", "temperature", "unit-offset-compound", ("1 K",)),
        ("1 °C", "temperature", "unit-offset-compound", ("1 K",)),
        ("1 degF", "temperature", "unit-offset-compound", ("1 degR",)),
        ("1 degC", "temperature difference", "unit-offset-compound", ("1 K",)),
        ("0.1 barg", "pressure", "unit-offset-compound", ("0.1 bar",)),
        ("2 %", "temperature", "quantity-percent-of-temperature", ()),
        ("0.5", "temperature", "unit-missing", ()),
        ("0.5 mm", "temperature", "unit-dimension", ()),
        ("-2 %", "mass flow", "quantity-negative", ()),
        ("-0.1 mm", "diameter", "quantity-negative", ()),
    ],
)
def test_refuses_a_tolerance(text: str, kind: str, code: str, nearest: tuple[str, ...]) -> None:
    with pytest.raises(QuantityFault) as caught:
        read_tolerance(text, KINDS[kind])
    assert (caught.value.code, caught.value.nearest) == (code, nearest)


# --- SI and US customary agree --------------------------------------------------------------------


def decimal_text(exact: Fraction) -> str:
    """A decimal of 40 digits: beyond double precision by far, as a converted drawing value could be."""
    whole = round(exact * 10**40)
    return f"{whole // 10**40}.{whole % 10**40:040d}"


# factors from the exact definitions in SP 811, written out independently of units.txt
INCH, FOOT, POUND = Fraction("0.0254"), Fraction("0.3048"), Fraction("0.45359237")
BTU, HOUR, RANKINE = Fraction("1055.05585262"), Fraction(3600), Fraction(5, 9)
PAIRS = [
    ("diameter", "in", "m", INCH),
    ("length", "ft", "m", FOOT),
    ("mass flow", "lb/h", "kg/s", POUND / HOUR),
    ("density", "lb/ft^3", "kg/m^3", POUND / FOOT**3),
    ("film coefficient", "Btu/(h ft^2 degF)", "W/(m^2 K)", BTU / (HOUR * FOOT**2 * RANKINE)),
    ("area resistance", "h ft^2 degF/Btu", "m^2 K/W", HOUR * FOOT**2 * RANKINE / BTU),
    ("wall conductivity", "Btu/(h ft degF)", "W/(m K)", BTU / (HOUR * FOOT * RANKINE)),
    ("pressure", "psi", "Pa", POUND * Fraction("9.80665") / INCH**2),
    ("temperature difference", "degR", "K", RANKINE),
]


@given(st.sampled_from(PAIRS), st.decimals("0.001", "99999", places=3))
def test_one_case_in_both_systems_is_one_float(pair: tuple[str, str, str, Fraction], number: object) -> None:
    kind, us_unit, si, factor = pair
    us = read_quantity(f"{number} {us_unit}", KINDS[kind]).value
    same = read_quantity(f"{decimal_text(Fraction(str(number)) * factor)} {si}", KINDS[kind]).value
    # the decimal is cut at 1e-40; the smallest value here is 1e-7, so the floats agree but for a tie
    assert us == pytest.approx(same, rel=2 * ROUNDING, abs=0.0)


@given(st.integers(-40000, 200000))
def test_fahrenheit_and_celsius_are_one_point(hundredths: int) -> None:
    celsius = Fraction(hundredths, 100)
    if celsius <= Fraction("-273.15"):
        celsius = -celsius
    fahrenheit = celsius * Fraction(9, 5) + 32
    in_c = read_quantity(f"{float(celsius):.2f} degC", KINDS["temperature"]).value
    in_f = read_quantity(f"{float(fahrenheit):.3f} degF", KINDS["temperature"]).value
    # both texts are exact decimals of one temperature, and each is rounded once
    assert in_c == in_f


@given(st.sampled_from(sorted(US_CUSTOMARY)), st.floats(1e-6, 1e6))
def test_in_unit_and_back(kind: str, value: float) -> None:
    for display in (US_CUSTOMARY[kind], SI_DISPLAY[kind]):
        factor = unit_factor(display)[0]
        # one rounding going, one in the factor, one in this product
        assert in_unit(value, display) * factor == pytest.approx(value, rel=4 * ROUNDING)


@pytest.mark.parametrize(
    ("text", "kind", "expected"),
    [
        ("101 %", "baffle cut", "1 or less"),
        ("1.02", "emissivity", "1 or less"),
        ("90.1 deg", "chevron angle", "90 deg or less"),
        ("0.99", "enlargement", "1 or more"),
        ("10.5", "tubes", "a whole number"),
        ("4.5", "tube passes", "a whole number"),
    ],
)
def test_a_quantity_beyond_its_definition(text: str, kind: str, expected: str) -> None:
    fault = fault_of(text, kind)
    assert (fault.code, fault.expected) == ("quantity-beyond-definition", expected)


@pytest.mark.parametrize(
    ("text", "kind"),
    [
        ("100 %", "baffle cut"),
        ("90 deg", "chevron angle"),
        ("1", "enlargement"),
        ("0", "emissivity"),
        ("11", "tubes"),
    ],
)
def test_a_quantity_at_the_end_of_its_definition(text: str, kind: str) -> None:
    assert read_quantity(text, KINDS[kind]).text == text


@pytest.mark.parametrize(
    "text",
    ["15.4 mm", "-40 degF", "75.00 degC", "1E-7 m", "0.000350 m^2 K/W", "3 bar", "2.5 barg", "0", "7 %"],
)
def test_the_value_of_a_number_is_that_of_its_text(text: str) -> None:
    number, _, unit = text.partition(" ")
    assert si_value(Decimal(number), unit) == read_any(text).value


def test_in_unit_of_a_point_and_of_a_difference() -> None:
    # 351.15 K lies within half an ulp (2.9e-14 K) of 78 degC
    assert in_unit(351.15, "degC", point=True) == pytest.approx(78.0, abs=3e-14)
    assert in_unit(5.0, "degC") == 5.0
    assert in_unit(5.0, "degF") == 9.0
    # SP 811: 0 degC = 32 degF
    assert in_unit(273.15, "degF", point=True) == pytest.approx(32.0, abs=6e-14)
    assert in_unit(2e5, "barg") == 2.0
    with pytest.raises(ValueError, match="nan"):
        in_unit(math.nan, "m")


# --- units to text --------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "display"),
    [
        # forms after the SI Brochure, 9th edition, section 5.2 and table 4
        ("W/(m^2 K)", "W/(m²·K)"),
        ("m^2 K/W", "m²·K/W"),
        ("kg/m^3", "kg/m³"),
        ("degC", "°C"),
        ("Btu/(h ft^2 degF)", "Btu/(h·ft²·°F)"),
        ("h ft^2 degF/Btu", "h·ft²·°F/Btu"),
        ("W m^-2 K^-1", "W·m⁻²·K⁻¹"),
        ("1/K", "1/K"),
        ("/K", "1/K"),
        ("um", "µm"),
        ("%", "%"),
        ("deg", "°"),
        ("1", ""),
        ("", ""),
        ("barg", "barg"),
        ("kPa(a)", "kPa(a)"),
        ("m^0.5", "m^0.5"),
    ],
)
def test_unit_display(text: str, display: str) -> None:
    assert unit_display(text) == display


@pytest.mark.parametrize("unit", sorted({*SI_DISPLAY.values(), *US_CUSTOMARY.values()}))
def test_a_displayed_unit_reads_as_itself(unit: str) -> None:
    assert unit_factor(unit_display(unit)) == unit_factor(unit)


@pytest.mark.parametrize("table", [SI_DISPLAY, US_CUSTOMARY], ids=["SI", "US customary"])
def test_display_units_have_the_dimension_of_their_quantity(table: dict[str, str]) -> None:
    for name, unit in table.items():
        assert unit_factor(unit)[1] == KINDS[name].dimension, name


@pytest.mark.parametrize("name", sorted(KINDS))
def test_every_quantity_has_a_display_unit_of_its_dimension(name: str) -> None:
    for units in ("SI", "US customary"):
        assert unit_factor(display_unit(KINDS[name], units))[1] == KINDS[name].dimension


def test_a_quantity_that_no_table_names_is_displayed_like_its_dimension() -> None:
    stand_off = kind_from_entry("stand-off", ENTRIES["length"])
    assert display_unit(stand_off, "SI") == "m"
    assert display_unit(stand_off, "US customary") == "ft"
    assert display_unit(KINDS["diameter"], "SI") == "mm"
    assert display_unit(KINDS["Reynolds number"], "US customary") == "1"


@pytest.mark.parametrize("name", sorted(KINDS))
def test_si_unit_has_factor_one_and_the_dimension(name: str) -> None:
    assert unit_factor(si_unit(KINDS[name].dimension)) == (1.0, KINDS[name].dimension)


def test_si_unit_of_uncommon_dimensions() -> None:
    assert si_unit(DIMENSIONLESS) == "1"
    assert si_unit(unit_factor("W/(m^2 K)")[1]) == "W/(m^2 K)"
    assert si_unit(unit_factor("kg m/(K mol)")[1]) == "m kg/(K mol)"
    assert si_unit(unit_factor("m^0.5")[1]) == "m^0.5"
    assert si_unit((Fraction(1, 3), *DIMENSIONLESS[1:])) == "m^(1/3)"


def test_half_powers() -> None:
    # the square root of 25.4 mm in metres, to double precision
    assert unit_factor("in^0.5")[0] == math.sqrt(0.0254)
    assert unit_factor("1/in^0.5")[0] == pytest.approx(1 / math.sqrt(0.0254), rel=2 * ROUNDING)
    assert unit_factor("in^0.5 in^0.5")[1] == unit_factor("m")[1]


# --- the registry and the vocabulary --------------------------------------------------------------


@pytest.mark.parametrize("name", sorted(quantities._READY))
def test_units_ready_without_the_registry_are_those_of_units_txt(name: str) -> None:
    assert quantities._READY[name] == quantities._registered(name)


def test_every_unit_of_the_definition_file_can_be_read() -> None:
    for name in unit_names():
        assert read_any(f"1 {name}").value > 0


def test_no_prefix_and_no_plural_is_added_to_the_list() -> None:
    for name in ("Mm", "kbar", "ms", "Ks", "mils", "degCs", "kilom"):
        assert fault_of(f"1 {name}").code == "unit-unknown"


def test_importing_quantities_does_not_load_the_unit_library() -> None:
    code = (
        "import sys; from calcbook.quantities import read_any;"
        "read_any('5200 W/(m^2 K)'); read_any('78 degC'); read_any('15.4 mm');"
        "print('pint' in sys.modules)"
    )
    shown = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert shown.stdout.strip() == "False"


@pytest.mark.parametrize(
    ("name", "sign"),
    [
        ("diameter", "positive"),
        ("area", "positive"),
        ("density", "positive"),
        ("viscosity", "positive"),
        ("pressure", "positive"),
        ("mass flow", "not negative"),
        ("speed", "not negative"),
        ("area resistance", "not negative"),
        ("roughness", "not negative"),
        ("thickness", "not negative"),
        ("temperature difference", "any"),
        ("angle", "any"),
        ("gauge pressure", "any"),
        ("expansion coefficient", "any"),
        ("heat flux", "any"),
        ("number", "any"),
    ],
)
def test_default_signs(name: str, sign: str) -> None:
    assert KINDS[name].sign == sign


def test_a_vocabulary_entry_becomes_a_kind() -> None:
    assert KINDS["temperature"].scale == "point"
    assert KINDS["pressure"].reading == "absolute"
    assert KINDS["fluid heated"].flag is True
    assert KINDS["diameter"].digits == 5
    assert [int(exponent) for exponent in KINDS["viscosity"].dimension] == [-1, 1, -1, 0, 0]
    stated = kind_from_entry("lift", {**ENTRIES["length"], "sign": "any"})
    assert read_quantity("-3 m", stated).value == -3.0


@pytest.mark.parametrize("change", [{"scales": "point"}, {"scale": "dot"}, {"sign": "up"}, {"flag": "yes"}])
def test_a_wrong_vocabulary_entry_is_refused(change: dict[str, str]) -> None:
    with pytest.raises(ValueError, match="vocabulary entry 'length'"):
        kind_from_entry("length", {**ENTRIES["length"], **change})


def test_a_number_of_things_is_at_least_one_and_no_part_of_something() -> None:
    tubes = KINDS["tubes in parallel"]
    assert read_quantity("66.5", tubes).value == 66.5
    for text, code in (("6200 %", "unit-dimension"), ("0.5", "quantity-beyond-definition")):
        assert fault_of(text, "tubes in parallel").code == code
    assert fault_of("62.5", "tubes").code == "quantity-beyond-definition"


@pytest.mark.parametrize(
    ("text", "nearest"),
    [
        ("2 bar g", "barg"),
        ("200 kPa g", "kPa(g)"),
        ("30 PSIG", "psig"),
        ("4 atg", "kgf/cm^2(g)"),
        ("10 W/(m2K)", "m^2 K"),
    ],
)
def test_the_nearest_unit_is_the_one_that_is_meant(text: str, nearest: str) -> None:
    assert nearest in fault_of(text, "pressure").nearest[0]
