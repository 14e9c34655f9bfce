"""A first calculation file for a situation: commented, complete, and full of sources to be filled in."""

from __future__ import annotations

from calcbook.library import Library
from calcbook.library.cards import Need, Situation

# Figures to start from, so that the file runs at once; every one has the source `tbd`, an open item.
START = {
    "inside diameter": ("d_i", "16 mm", "tube bore"),
    "outside diameter": ("d_o", "20 mm", "tube outside diameter"),
    "length": ("L", "3 m", "tube length"),
    "tubes in parallel": ("N", "40", "tubes in parallel"),
    "height": ("H", "1 m", "height of the wall"),
    "width": ("W", "2 m", "width of the wall"),
    "shell inside diameter": ("D_shell", "35 mm", "inside diameter of the outer tube"),
    "area": ("A", "2 m^2", "area of the surface"),
    "perimeter": ("P", "6 m", "perimeter of the surface"),
    "coil diameter": ("D_w", "0.4 m", "mean diameter of the coil"),
    "coil pitch": ("p_w", "40 mm", "pitch of the coil"),
    "duct area": ("A_d", "0.0004 m^2", "flow area of one duct"),
    "wetted perimeter": ("P_w", "0.09 m", "wetted perimeter of one duct"),
    "long side": ("s_1", "30 mm", "long side of the duct"),
    "short side": ("s_2", "12 mm", "short side of the duct"),
    "channel gap": ("b_g", "3 mm", "gap between two plates"),
    "enlargement": ("Phi", "1.2", "developed to projected area of a plate"),
    "chevron angle": ("beta_c", "60 deg", "angle of the corrugation to the flow"),
    "channels in parallel": ("N_ch", "20", "channels in parallel"),
    "tube pitch": ("P_t", "25 mm", "tube pitch"),
    "baffle spacing": ("L_bc", "0.2 m", "central baffle spacing"),
    "baffle cut": ("B_c", "0.25", "baffle cut as a part of the shell diameter"),
    "outer tube limit": ("D_otl", "0.47 m", "circle around the outermost tubes"),
    "tube holes": ("N_t", "240", "tube holes of a baffle"),
    "baffles": ("N_b", "10", "number of baffles"),
    "inlet baffle spacing": ("L_bi", "0.25 m", "baffle spacing at the inlet"),
    "outlet baffle spacing": ("L_bo", "0.25 m", "baffle spacing at the outlet"),
    "shell clearance": ("d_sb", "4 mm", "shell diameter less baffle diameter"),
    "hole clearance": ("d_tb", "0.6 mm", "baffle hole diameter less tube diameter"),
    "sealing strips": ("N_ss", "2", "pairs of sealing strips"),
    "vessel diameter": ("D_v", "1.6 m", "inside diameter of the vessel"),
    "liquid height": ("H_liq", "1.6 m", "height of the liquid"),
    "impeller speed": ("n_imp", "120 rpm", "speed of the impeller"),
    "impeller diameter": ("D_imp", "0.53 m", "diameter of the impeller"),
    "transverse pitch": ("S_T", "40 mm", "pitch across the flow"),
    "longitudinal pitch": ("S_L", "35 mm", "pitch along the flow"),
    "tube rows": ("N_r", "6", "rows that the flow meets"),
    "face area": ("A_face", "1.2 m^2", "area of the flow before the bank"),
    "tubes in a column": ("n_c", "6", "tubes one below the other"),
    "vapour quality": ("x_v", "0.4", "mean vapour quality"),
    "fin height": ("L_f", "6 mm", "fin height"),
    "fin thickness": ("t_f", "0.4 mm", "fin thickness"),
    "fin pitch": ("p_f", "3 mm", "fin pitch"),
    "gap": ("s_g", "20 mm", "distance of the two walls"),
    "angle": ("theta", "45 deg", "tilt from the horizontal"),
    "bundle diameter": ("D_b", "0.5 m", "diameter of the bundle"),
}
# A shell of the size of its tubes stands in for the annulus; a shell with baffles is a larger one.
SHELL = ("D_shell", "0.5 m", "inside diameter of the shell")
FIN_FIGURES = ("fin height", "fin thickness", "fin pitch")
FINS = """
     fins: {shape: annular, height: L_f, thickness: t_f, pitch: p_f, conductivity: {value: 200 W/(m K), source: tbd}}"""
# The side that a situation of an enclosure acts on.
GAP = "gap"
DIMENSIONS = {
    "tube": ("inside diameter", "outside diameter", "length"),
    "sphere": ("inside diameter", "outside diameter"),
    "plane": ("height", "width"),
}


def starting_file(library: Library, name: str, shape: str | None = None) -> str:
    """The text of a calculation file whose one film is of the situation, the other stated.

    Raises ``Faults`` (situation-unknown); ``ValueError`` for a shape that the situation does not fit.
    """
    situation = library.situation(name)
    shape = shape or situation.shapes[0]
    if shape not in situation.shapes:
        raise ValueError(f"{name} fits {' or '.join(situation.shapes)}, not {shape}")
    side = situation.surfaces[0]
    if side == GAP:
        parts = [
            *_head(situation),
            *_givens_of_gap(situation, shape),
            *_geometry(situation, shape),
            *_resistances_of_gap(situation, shape),
            *_tail(),
        ]
        return "\n".join(parts) + "\n"
    return (
        "\n".join(
            [
                *_head(situation),
                *_givens(situation, shape),
                *_stream(situation, _is_saturated(library, situation)),
                *_geometry(situation, shape),
                *_resistances(situation, side, shape),
                *_tail(),
            ]
        )
        + "\n"
    )


def _head(situation: Situation) -> list[str]:
    return [
        f"# {situation.title}. Every figure below stands there to make the file run; replace each, and write its",
        "# source. A source `tbd` is an open item, and the record stays preliminary until it is filled in.",
        "calculation:",
        "  number: NEW-1                     # letters, digits, - _ . ; the record goes to output/NEW-1/",
        "  title: Overall coefficient of ...",
        "  plant: ...",
        "  revision: A",
        "  prepared by: ...",
        "  date: 2026-01-01                  # YYYY-MM-DD",
        "",
        "purpose: What decision does the result serve?",
        "",
        "revisions:",
        "  - {revision: A, date: 2026-01-01, reason: First issue}",
        "",
    ]


def _wanted(situation: Situation, shape: str) -> list[str]:
    names = list(DIMENSIONS[shape])
    needed = [need.quantity.name for need in situation.needs if need.quantity.name in START]
    return list(dict.fromkeys([*names, *needed]))


def _start(need_name: str, situation: Situation) -> tuple[str, str, str]:
    """Symbol, value and meaning to start from."""
    if need_name == "shell inside diameter" and any(
        need.quantity.name == "baffles" for need in situation.needs
    ):
        return SHELL
    return START[need_name]


def _is_saturated(library: Library, situation: Situation) -> bool:
    """Whether the methods of a situation take a fluid on its saturation line."""
    if "boiling" in situation.id:
        return True
    needs = [need for method in situation.methods for need in library.method(method).needs]
    return any(
        need.place.startswith("saturated") or need.quantity.name == "saturation temperature" for need in needs
    )


def _givens(situation: Situation, shape: str) -> list[str]:
    lines = ["givens:                             # number with unit, as the source writes it"]
    for name in _wanted(situation, shape):
        if shape == "plane" and name in ("area", "perimeter"):
            continue
        symbol, value, meaning = _start(name, situation)
        lines.append(f"  {symbol}: {{value: {value}, is: {meaning}, source: tbd}}")
    flow = (
        "3 m/s, is: speed of the stream" if situation.flow_area is None else "10 kg/s, is: flow of the stream"
    )
    if _asks_for_flow(situation):
        lines.append(f"  flow: {{value: {flow}, source: tbd, tolerance: 2 %}}")
    lines += [
        "  T_1: {value: 70 degC, is: mean temperature of the stream, source: tbd, tolerance: 1 K}",
        f"  T_2: {{value: {75 if 'boiling' in situation.id else 30} degC, is: mean temperature of the other side,"
        " source: tbd, tolerance: 1 K}",
        "  h_2: {value: 3000 W/(m^2 K), is: film coefficient of the other side, source: tbd, tolerance: 20 %}",
        "  R_f: {value: 0.0002 m^2 K/W, is: fouling allowance, source: tbd}",
        "",
        "assumptions:",
        "  A1: {text: ..., basis: ..., verified: no}   # or verified: {by: ..., date: ..., evidence: ...}",
        "",
    ]
    return lines


def _givens_of_gap(situation: Situation, shape: str) -> list[str]:
    lines = ["givens:                             # number with unit, as the source writes it"]
    for name in _wanted(situation, shape):
        symbol, value, meaning = START[name]
        lines.append(f"  {symbol}: {{value: {value}, is: {meaning}, source: tbd}}")
    return [
        *lines,
        "  T_in: {value: 60 degC, is: temperature on the inside, source: tbd, tolerance: 1 K}",
        "  T_out: {value: 20 degC, is: temperature on the outside, source: tbd, tolerance: 1 K}",
        "  h_in: {value: 10 W/(m^2 K), is: film coefficient on the inside, source: tbd, tolerance: 20 %}",
        "  h_out: {value: 10 W/(m^2 K), is: film coefficient on the outside, source: tbd, tolerance: 20 %}",
        "  p: {value: 1.013 bara, is: pressure in the gap, source: tbd}",
        "  eps: {value: 0.9, is: emissivity of both sides of the gap, source: tbd}",
        "",
    ]


def _resistances_of_gap(situation: Situation, shape: str) -> list[str]:
    wall = "kind: wall, thickness: {value: 2 mm, source: tbd}, material: stainless-316-kaschnitz-2017}"
    return [
        "resistances:                        # in order, from the inside to the outside",
        "  - {name: inner film, kind: film, coefficient: h_in, on: inside, temperature: T_in}",
        f"  - {{name: inner wall, {wall}",
        f"  - {{name: gap, kind: gap, situation: {situation.id}{_with(situation, shape)}, fluid: air, pressure: p,",
        "     thickness: s_g, inner emissivity: eps, outer emissivity: eps}",
        f"  - {{name: outer wall, {wall}",
        "  - {name: outer film, kind: film, coefficient: h_out, on: outside, temperature: T_out}",
        "",
    ]


def _asks_for_flow(situation: Situation) -> bool:
    """Whether the situation forms its groups with the speed of the stream."""
    return situation.flow_area is not None or any("v" in group.relation.symbols for group in situation.groups)


def _stream(situation: Situation, saturated: bool) -> list[str]:
    if saturated:
        boiling = "boiling" in situation.id
        phase, pressure = ("liquid", "0.1 bara") if boiling else ("gas", "1.2 bara")
        return [
            "streams:",
            "  main:",
            "    fluid: water                    # `calcbook library fluids` lists them",
            f"    phase: {phase}",
            "    temperature: saturation         # that of its pressure",
            f"    pressure: {{value: {pressure}, source: tbd}}",
            *(["    flow: flow"] if _asks_for_flow(situation) else []),
            "",
        ]
    fluid = (
        "air"
        if situation.flow != "forced"
        or _has_fins(situation)
        or (situation.flow_area is None and _asks_for_flow(situation))
        else "water"
    )
    pressure = "4 bara" if fluid == "water" else "1.013 bara"
    lines = [
        "streams:",
        "  main:",
        f"    fluid: {fluid}                    # `calcbook library fluids` lists them",
        "    temperature: T_1",
        f"    pressure: {{value: {pressure}, source: tbd}}",
    ]
    if _asks_for_flow(situation):
        lines.append(
            "    flow: flow                      # mass flow, volume flow or speed, told apart by its unit"
        )
    return [*lines, ""]


def _geometry(situation: Situation, shape: str) -> list[str]:
    lines = ["geometry:", f"  shape: {shape}"]
    lines += [f"  {name}: {START[name][0]}" for name in DIMENSIONS[shape]]
    if any(need.quantity.name == "tubes in parallel" for need in situation.needs) and shape == "tube":
        lines.append("  parallel: N")
    return [*lines, ""]


def _resistances(situation: Situation, side: str, shape: str) -> list[str]:
    film = (
        f"  - {{name: main film, kind: film, stream: main, situation: {situation.id}{_with(situation, shape)}"
    )
    film += ("," + FINS if _has_fins(situation) else "") + "}"
    other = "outside" if side == "inside" else "inside"
    deposit = f"  - {{name: deposit, kind: fouling, resistance: R_f, on: {'total finned' if _has_fins(situation) else side}}}"
    thickness = ", thickness: {value: 2 mm, source: tbd}" if shape == "plane" else ""
    wall = f"  - {{name: wall, kind: wall{thickness}, material: stainless-316-kaschnitz-2017}}"
    stated = f"  - {{name: other film, kind: film, coefficient: h_2, on: {other}, temperature: T_2}}"
    order = [film, deposit, wall, stated] if side == "inside" else [stated, wall, deposit, film]
    return ["resistances:                        # in order, from the inside to the outside", *order, ""]


def _has_fins(situation: Situation) -> bool:
    """Whether a situation is made for a finned surface."""
    return any(need.quantity.name in FIN_FIGURES for need in situation.needs)


def _with(situation: Situation, shape: str) -> str:
    """The `with:` of a film: what the situation needs and the geometry does not give."""
    given = (
        *DIMENSIONS[shape],
        "tubes in parallel",
        GAP,
        *FIN_FIGURES,
        *(("area", "perimeter") if shape == "plane" else ()),
    )
    entries = [
        _entry(need, situation) for need in situation.needs if need.quantity.name not in given or need.one_of
    ]
    entries = [entry for entry in entries if entry]
    return f", with: {{{', '.join(entries)}}}" if entries else ""


def _entry(need: Need, situation: Situation) -> str:
    if need.one_of:
        return f"{need.symbol}: {need.absent or need.one_of[0]}"
    if need.quantity.name in START:
        return f"{need.symbol}: {_start(need.quantity.name, situation)[0]}"
    if need.absent is not None:
        return ""
    return f"{need.symbol}: {{value: 1 {need.quantity.unit}, source: tbd}}".replace("1 1,", "1,")


def _tail() -> list[str]:
    return [
        "acceptance:                         # stated before the result",
        "  - {that: U_service >= 500 W/(m^2 K), source: tbd}",
        "",
        "report:",
        "  U on: outside                     # the area basis of U",
        "  units: SI                         # or US customary",
    ]
