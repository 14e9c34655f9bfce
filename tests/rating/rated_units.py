"""Units with a duty: a cooler, a steam heater, one with a stated film, a chiller, an evaporator (all invented)."""

from __future__ import annotations

from pathlib import Path

from calcbook.chain.outcome import Solved
from calcbook.interface import solve_file

CASES = Path(__file__).resolve().parent.parent / "cases" / "ok"
COOLER = (CASES / "rated-cooler.yaml").read_text(encoding="utf-8").replace("  parts: 4\n", "")
HEAD = """\
calculation: {number: TD-1, title: A unit under its control (invented), plant: Larkmoor Works (invented), revision: A, \
prepared by: K. L., date: 2026-12-03}
purpose: test
"""
HEATER = (
    HEAD
    + """\
givens:
  d_i:  {value: 15.75 mm,  is: tube bore,             source: drawing}
  d_o:  {value: 19.05 mm,  is: tube outside diameter, source: drawing}
  p_st: {value: 2.6 bara,  is: steam pressure,        source: sheet}
  m_w:  {value: 9.5 kg/s,  is: water flow,            source: sheet}
  T_ci: {value: 18 degC,   is: water inlet,           source: sheet}
  T_co: {value: 66 degC,   is: water outlet,          source: sheet}
  R_f:  {value: 0.00018 m^2 K/W, is: allowance,       source: sheet}
streams:
  steam: {fluid: water, phase: gas, temperature: saturation, pressure: p_st}
  water: {fluid: water, pressure: {value: 5 bara, source: sheet}, flow: m_w}
geometry:
  {shape: tube, inside diameter: d_i, outside diameter: d_o, length: {value: 2.44 m, source: s},
   tubes: {value: 116, source: s}, passes: {value: 2, source: s}}
resistances:
  - {name: water film, kind: film, stream: water, situation: inside-tube}
  - {name: deposit, kind: fouling, resistance: R_f, on: inside}
  - {name: wall, kind: wall, conductivity: {value: 15 W/(m K), source: s}}
  - {name: steam film, kind: film, stream: steam, situation: condensing-horizontal-bundle, with: {n_c: {value: 6, source: s}}}
duty:
  arrangement: shell and tube
  hot: {stream: steam}
  cold: {stream: water, inlet: T_ci, outlet: T_co}
report: {U on: outside}
"""
)
# Steam of a stated temperature, without a pressure, and a stated coefficient.
BY_TEMPERATURE = (
    HEATER.replace("  p_st: {value: 2.6 bara,", "  T_st: {value: 128.7 degC,")
    .replace("temperature: saturation, pressure: p_st", "temperature: T_st")
    .replace(
        "situation: condensing-horizontal-bundle, with: {n_c: {value: 6, source: s}}",
        "coefficient: {value: 9000 W/(m^2 K), source: s}, on: outside",
    )
)
# A liquid that boils outside the tubes cools the water inside.
CHILLER = (
    BY_TEMPERATURE.replace("T_st: {value: 128.7 degC,", "T_st: {value: -4 degC,")
    .replace("steam: {fluid: water, phase: gas", "steam: {fluid: ammonia, phase: liquid")
    .replace("hot: {stream: steam}", "cold: {stream: steam}")
    .replace("cold: {stream: water, inlet", "hot: {stream: water, inlet")
    .replace("T_ci: {value: 18 degC", "T_ci: {value: 14 degC")
    .replace("T_co: {value: 66 degC", "T_co: {value: 9 degC")
)
# Steam outside, pentane that boils inside: both keep their temperatures, and the duty is stated.
EVAPORATOR = (
    HEATER.replace(
        "water: {fluid: water, pressure: {value: 5 bara, source: sheet}, flow: m_w}",
        "pentane: {fluid: n-pentane, phase: liquid, temperature: saturation, pressure: {value: 3 bara, source: sheet}}",
    )
    .replace(
        "  m_w:  {value: 9.5 kg/s,  is: water flow, ",
        "  Q_ev: {value: 1500 kW,  is: heat of the evaporator, ",
    )
    .replace("  T_ci: {value: 18 degC,   is: water inlet,           source: sheet}\n", "")
    .replace("  T_co: {value: 66 degC,   is: water outlet,          source: sheet}\n", "")
    .replace(
        "{name: water film, kind: film, stream: water, situation: inside-tube}",
        "{name: boiling film, kind: film, stream: pentane, coefficient: {value: 6000 W/(m^2 K), source: s}, on: inside}",
    )
    .replace("{stream: water, inlet: T_ci, outlet: T_co}", "{stream: pentane}\n  heat flow: Q_ev")
)


def solved(folder: Path, text: str) -> Solved:
    path = folder / "td-1.yaml"
    path.write_text(text, encoding="utf-8")
    return solve_file(path, for_record=False)
