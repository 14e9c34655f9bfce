"""Small calculation files and house cards for the tests of the engine."""

from __future__ import annotations

from pathlib import Path
from textwrap import dedent, indent

from calcbook.calcfile import read_calculation, read_settings
from calcbook.chain.analysis import analyse
from calcbook.chain.build import build
from calcbook.chain.outcome import Solved
from calcbook.chain.types import Chain
from calcbook.faults import Collector
from calcbook.library import Library

HEAD = """\
calculation: {number: T-1, title: Trial, plant: Works, revision: A, prepared by: K. L., date: 2026-11-20}
purpose: Trial of the engine.
"""


def chain_of(folder: Path, body: str, cards: dict[str, str] | None = None) -> Chain:
    """The chain of a calculation file written into a folder, with house cards where there are any."""
    path = folder / "trial.yaml"
    path.write_text(HEAD + dedent(body), encoding="utf-8")
    for name, text in (cards or {}).items():
        (folder / "cards").mkdir(exist_ok=True)
        (folder / "cards" / f"{name}.yaml").write_text(text, encoding="utf-8")
    collector = Collector()
    calculation = read_calculation(path, read_settings(folder), collector)
    collector.stop_if_any()
    chain = build(calculation, Library(folder / "cards"), collector)
    collector.stop_if_any()
    assert chain is not None
    return chain


def givens(**figures: str) -> str:
    """The `givens:` of a file."""
    rows = [
        f"  {symbol}: {{value: {text}, is: trial figure {symbol}, source: test}}"
        for symbol, text in figures.items()
    ]
    return "givens:\n" + "\n".join(rows) + "\n"


def analysed(folder: Path, body: str) -> Solved:
    """A calculation with everything that its record holds of the chain. Raises ``Faults``."""
    collector = Collector()
    found = analyse(chain_of(folder, body), collector)
    collector.stop_if_any()
    assert found is not None
    return found


COOLER_GIVENS = {
    "d_i": "15.75 mm",
    "d_o": "19.05 mm",
    "L": "4.88 m",
    "N": "62",
    "m_hot": "18.2 kg/s",
    "T_hot": "74 degC",
    "p_hot": "4 bara",
    "T_cold": "31 degC",
    "R_fi": "0.00009 m^2 K/W",
    "R_fo": "0.00035 m^2 K/W",
    "h_o": "5200 W/(m^2 K)",
}
COOLER_REST = """\
streams:
  hot: {fluid: water, temperature: T_hot, pressure: p_hot, flow: m_hot}
geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}
resistances:
  - {name: tube film, kind: film, stream: hot, situation: inside-tube}
  - {name: inner deposit, kind: fouling, resistance: R_fi, on: inside}
  - {name: tube wall, kind: wall, material: stainless-316-kaschnitz-2017}
  - {name: outer deposit, kind: fouling, resistance: R_fo, on: outside}
  - {name: shell film, kind: film, coefficient: h_o, on: outside, temperature: T_cold}
report: {U on: outside}
"""
COOLER = givens(**COOLER_GIVENS) + COOLER_REST

# A viscous oil from a table: density linear, viscosity log-linear in T.
OIL = (
    givens(
        d_i="16 mm",
        d_o="20 mm",
        L="3 m",
        N="40",
        m_oil="6 kg/s",
        T_oil="90 degC",
        T_cold="20 degC",
        R_fi="0.0002 m^2 K/W",
        R_fo="0.0001 m^2 K/W",
        h_o="4000 W/(m^2 K)",
        k_w="45 W/(m K)",
    )
    + """\
fluids:
  oil:
    table:
      T: [10 degC, 40 degC, 70 degC, 100 degC, 130 degC]
      density: [880 kg/m^3, 862 kg/m^3, 844 kg/m^3, 826 kg/m^3, 808 kg/m^3]
      viscosity: [0.16 Pa s, 0.042 Pa s, 0.0152 Pa s, 0.0071 Pa s, 0.0039 Pa s]
      conductivity: [0.145 W/(m K), 0.142 W/(m K), 0.139 W/(m K), 0.136 W/(m K), 0.133 W/(m K)]
      heat capacity: [1850 J/(kg K), 1970 J/(kg K), 2090 J/(kg K), 2210 J/(kg K), 2330 J/(kg K)]
    source: test
streams:
  oil: {fluid: oil, temperature: T_oil, flow: m_oil, phase: liquid}
geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}
resistances:
  - {name: oil film, kind: film, stream: oil, situation: inside-tube, method: sieder-tate-laminar-1936}
  - {name: oil deposit, kind: fouling, resistance: R_fi, on: inside}
  - {name: wall, kind: wall, conductivity: k_w}
  - {name: water deposit, kind: fouling, resistance: R_fo, on: outside}
  - {name: water film, kind: film, coefficient: h_o, on: outside, temperature: T_cold}
report: {U on: outside}
"""
)


def insulated_pipe(surroundings: str = "20 degC", air: str = "20 degC", steam: str = "180 degC") -> str:
    """An insulated steam pipe: free convection beside radiation, and two walls whose k follows T."""
    return (
        givens(
            d_i="102.3 mm",
            d_o="114.3 mm",
            t_ins="50 mm",
            T_steam=steam,
            T_air=air,
            T_sur=surroundings,
            p_air="1.01325 bara",
            h_i="8000 W/(m^2 K)",
            eps="0.3",
        )
        + """\
streams:
  air: {fluid: air, temperature: T_air, pressure: p_air}
geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o}
resistances:
  - {name: steam film, kind: film, coefficient: h_i, on: inside, temperature: T_steam}
  - {name: pipe, kind: wall, material: carbon-steel-plain-incropera}
  - {name: insulation, kind: wall, material: mineral-wool-rock-100-etsu, thickness: t_ins}
  - name: outer surface
    parallel:
      - {name: free convection, kind: film, stream: air, situation: free-horizontal-cylinder}
      - {name: radiation, kind: radiation, emissivity: eps, surroundings: T_sur}
report: {U on: outside}
"""
    )


def bare_surface(surface_limit: str = "", **figures: str) -> str:
    """A plane wall, thin, with air at rest and radiation outside."""
    stated = {
        "t": "6 mm",
        "k_w": "45 W/(m K)",
        "H": "1 m",
        "W": "1 m",
        "T_in": "60 degC",
        "T_air": "20 degC",
        "T_sur": "20 degC",
        "p_air": "1.01325 bara",
        "h_i": "30 W/(m^2 K)",
        "eps": "0.9",
    } | figures
    return (
        givens(**stated)
        + """\
streams:
  air: {fluid: air, temperature: T_air, pressure: p_air}
geometry: {shape: plane, height: H, width: W}
resistances:
  - {name: inner film, kind: film, coefficient: h_i, temperature: T_in}
  - {name: wall, kind: wall, conductivity: k_w, thickness: t}
  - name: outer surface
    parallel:
      - {name: free convection, kind: film, stream: air, situation: free-vertical-plate}
      - {name: radiation, kind: radiation, emissivity: eps, surroundings: T_sur}
report: {U on: outside}
"""
    )


SPHERE = (
    givens(
        d_i="1.2 m",
        d_o="1.24 m",
        T_in="150 degC",
        T_out="15 degC",
        h_i="250 W/(m^2 K)",
        h_o="12 W/(m^2 K)",
        R_f="0.0003 m^2 K/W",
    )
    + """\
geometry: {shape: sphere, inside diameter: d_i, outside diameter: d_o}
resistances:
  - {name: inner film, kind: film, coefficient: h_i, temperature: T_in}
  - {name: deposit, kind: fouling, resistance: R_f, on: inside}
  - {name: shell, kind: wall, material: carbon-steel-plain-incropera}
  - {name: outer film, kind: film, coefficient: h_o, temperature: T_out}
report: {U on: inside}
"""
)
# Stated figures alone, without temperatures.
STATED = (
    givens(
        d_i="14.83 mm",
        d_o="19.05 mm",
        k_w="16 W/(m K)",
        h_i="5000 W/(m^2 K)",
        h_o="1500 W/(m^2 K)",
        R_fi="0.00018 m^2 K/W",
        R_fo="0.00018 m^2 K/W",
    )
    + """\
geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o}
resistances:
  - {name: inner film, kind: film, coefficient: h_i, on: inside}
  - {name: inner deposit, kind: fouling, resistance: R_fi, on: inside}
  - {name: wall, kind: wall, conductivity: k_w}
  - {name: outer deposit, kind: fouling, resistance: R_fo, on: outside}
  - {name: outer film, kind: film, coefficient: h_o, on: outside}
report: {U on: outside}
"""
)


def house_method(
    name: str,
    relation: str,
    constants: dict[str, str],
    needs: str = "",
    closes_on: str = "surface",
    points: tuple[tuple[str, float], ...] = (("", 1.0),),
) -> str:
    """A house method that gives h; ``points`` are the given figures of its check points with their h."""
    checked = "\n".join(
        f"  - {{given: {{{given}}}, gives: {{h: {value}}}, within: 1e-12, source: by hand, standing: common practice}}"
        for given, value in points
    )
    rows = "\n".join(f"  {symbol}: {text}" for symbol, text in constants.items())
    return f"""\
method: {name}
title: Trial law {name}
gives: h
closes on: {closes_on}
needs:
{indent(needs or "T_s: temperature at surface" + chr(10) + "T_b: temperature at bulk", "  ")}
constants:
{rows}
relations:
  - {relation}
limits:
  - {{id: has a value, that: h/h >= 0.5, level: caution, because: a trial, source: common practice}}
assumes: [A trial law.]
family: trial
sources:
  - {{cite: test, for: equation, standing: common practice}}
check points:
{checked}
state: {{is: trial, since: 0.1}}
"""


def house_situation(name: str, choose: str, methods: str) -> str:
    """A house situation on either side of a plane wall, without flow."""
    return f"""\
situation: {name}
title: Trial situation {name}
shape: [plane]
on: [inside, outside]
flow: free
needs:
  H: height
characteristic length: H
groups:
  x: {{is: ratio, relation: T_s/T_b}}
choose:
{indent(choose, "  ")}
choose at: bulk
methods: [{methods}]
assumes: [A trial situation.]
sources:
  - {{cite: test, for: choice table, standing: common practice}}
"""


def plane_between(inner: str, outer: str, **figures: str) -> str:
    """A plane wall between two house situations, in water on both sides; k is stated."""
    stated = {
        "T_hot": "120 degC",
        "T_cold": "100 degC",
        "t": "2 mm",
        "k_w": "20 W/(m K)",
        "H": "1 m",
        "W": "1 m",
        "p": "5 bara",
    } | figures
    return (
        givens(**stated)
        + f"""\
streams:
  hot: {{fluid: water, temperature: T_hot, pressure: p, phase: liquid}}
  cold: {{fluid: water, temperature: T_cold, pressure: p, phase: liquid}}
geometry: {{shape: plane, height: H, width: W}}
resistances:
  - {{name: hot film, kind: film, stream: hot, situation: {inner}}}
  - {{name: wall, kind: wall, conductivity: k_w, thickness: t}}
  - {{name: cold film, kind: film, stream: cold, situation: {outer}}}
report: {{U on: outside}}
"""
    )
