"""Calculation files with fins for the tests of the engine."""

from __future__ import annotations

from small_calculations import givens

FIGURES = {
    "d_i": "21.2 mm",
    "d_o": "25.4 mm",
    "L": "6 m",
    "N": "120",
    "T_w": "80 degC",
    "p_w": "4 bara",
    "m_w": "30 kg/s",
    "T_a": "35 degC",
    "p_a": "1.013 bara",
    "v_a": "3.2 m/s",
    "h_a": "45 W/(m^2 K)",
    "H": "15.9 mm",
    "t": "0.4 mm",
    "p": "2.31 mm",
    "k_f": "205 W/(m K)",
    "R_i": "0.0001 m^2 K/W",
    "R_o": "0.0003 m^2 K/W",
    "S_T": "63.5 mm",
    "S_L": "55 mm",
    "A": "11 m^2",
}
STATED = "coefficient: h_a, temperature: T_a"
ACROSS = "stream: air, situation: across-tube"
BANK = (
    "stream: air, situation: finned-tube-bank,"
    " with: {S_T: S_T, S_L: S_L, N_r: {value: 5, source: test}, arrangement: staggered, A_face: A}"
)


def finned_tube(
    film: str = STATED,
    material: str = "conductivity: k_f",
    more: str = "",
    fouling: str = "resistance: R_o",
    basis: str = "bare",
    **figures: str,
) -> str:
    """Tubes with water inside and annular fins in air outside."""
    return (
        givens(**(FIGURES | figures))
        + f"""\
streams:
  water: {{fluid: water, temperature: T_w, pressure: p_w, flow: m_w}}
  air: {{fluid: air, temperature: T_a, pressure: p_a, flow: v_a}}
geometry: {{shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}}
resistances:
  - {{name: water film, kind: film, stream: water, situation: inside-tube}}
  - {{name: scale, kind: fouling, resistance: R_i, on: inside}}
  - {{name: tube wall, kind: wall, material: carbon-steel-plain-incropera}}
  - {{name: dust, kind: fouling, {fouling}}}
  - {{name: air film, kind: film, {film},
     fins: {{shape: annular, height: H, thickness: t, pitch: p, {material}{more}}}}}
report: {{U on: {basis}}}
"""
    )


def finned_bore(film: str = "stream: water, situation: inside-tube", **figures: str) -> str:
    """A tube with straight fins along its bore, gas across it outside."""
    stated = FIGURES | {"n": "12", "H": "4 mm", "t": "0.6 mm", "h_w": "900 W/(m^2 K)"} | figures
    return (
        givens(**stated)
        + f"""\
streams:
  water: {{fluid: water, temperature: T_w, pressure: p_w, flow: m_w}}
  air: {{fluid: air, temperature: T_a, pressure: p_a, flow: v_a}}
geometry: {{shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}}
resistances:
  - {{name: water film, kind: film, {film},
     fins: {{shape: straight, height: H, thickness: t, count: n, material: carbon-steel-plain-incropera}}}}
  - {{name: scale, kind: fouling, resistance: R_i}}
  - {{name: tube wall, kind: wall, material: carbon-steel-plain-incropera}}
  - {{name: dust, kind: fouling, resistance: R_o}}
  - {{name: air film, kind: film, stream: air, situation: across-tube}}
report: {{U on: outside}}
"""
    )


def finned_plane(film: str = "coefficient: h_o, temperature: T_out", **figures: str) -> str:
    """A plane wall with straight fins outside, as on the casing of a machine."""
    stated = {
        "T_in": "90 degC",
        "T_out": "25 degC",
        "t_w": "5 mm",
        "H": "0.4 m",
        "W": "0.3 m",
        "k_w": "180 W/(m K)",
        "h_in": "800 W/(m^2 K)",
        "h_o": "60 W/(m^2 K)",
        "L_f": "20 mm",
        "t_f": "2 mm",
        "p_f": "10 mm",
        "R_o": "0.0005 m^2 K/W",
    } | figures
    return (
        givens(**stated)
        + f"""\
geometry: {{shape: plane, height: H, width: W}}
resistances:
  - {{name: oil film, kind: film, coefficient: h_in, temperature: T_in}}
  - {{name: casing, kind: wall, thickness: t_w, conductivity: k_w}}
  - {{name: dust, kind: fouling, resistance: R_o}}
  - {{name: air film, kind: film, {film},
     fins: {{shape: straight, height: L_f, thickness: t_f, pitch: p_f, conductivity: k_w}}}}
report: {{U on: outside}}
"""
    )
