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
}
DIMENSIONS = {"tube": ("inside diameter", "outside diameter", "length"), "sphere": ("inside diameter", "outside diameter"),
              "plane": ("height", "width")}


def starting_file(library: Library, name: str, shape: str | None = None) -> str:
    """The text of a calculation file whose one film is of the situation, the other stated.

    Raises ``Faults`` (situation-unknown); ``ValueError`` for a shape that the situation does not fit.
    """
    situation = library.situation(name)
    shape = shape or situation.shapes[0]
    if shape not in situation.shapes:
        raise ValueError(f"{name} fits {' or '.join(situation.shapes)}, not {shape}")
    side = situation.surfaces[0]
    return "\n".join([
        *_head(situation),
        *_givens(situation, shape),
        *_stream(situation),
        *_geometry(situation, shape),
        *_resistances(situation, side, shape),
        *_tail(),
    ]) + "\n"


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


def _givens(situation: Situation, shape: str) -> list[str]:
    lines = ["givens:                             # number with unit, as the source writes it"]
    for name in _wanted(situation, shape):
        if shape == "plane" and name in ("area", "perimeter"):
            continue
        symbol, value, meaning = START[name]
        lines.append(f"  {symbol}: {{value: {value}, is: {meaning}, source: tbd}}")
    flow = "3 m/s, is: speed of the stream" if situation.flow_area is None else "10 kg/s, is: flow of the stream"
    if situation.flow != "free":
        lines.append(f"  flow: {{value: {flow}, source: tbd, tolerance: 2 %}}")
    lines += [
        "  T_1: {value: 70 degC, is: mean temperature of the stream, source: tbd, tolerance: 1 K}",
        "  T_2: {value: 30 degC, is: mean temperature of the other side, source: tbd, tolerance: 1 K}",
        "  h_2: {value: 3000 W/(m^2 K), is: film coefficient of the other side, source: tbd, tolerance: 20 %}",
        "  R_f: {value: 0.0002 m^2 K/W, is: fouling allowance, source: tbd}",
        "",
        "assumptions:",
        "  A1: {text: ..., basis: ..., verified: no}   # or verified: {by: ..., date: ..., evidence: ...}",
        "",
    ]
    return lines


def _stream(situation: Situation) -> list[str]:
    fluid = "water" if situation.flow == "forced" and situation.flow_area is not None else "air"
    pressure = "4 bara" if fluid == "water" else "1.013 bara"
    lines = ["streams:", "  main:", f"    fluid: {fluid}                    # `calcbook library fluids` lists them",
             "    temperature: T_1", f"    pressure: {{value: {pressure}, source: tbd}}"]
    if situation.flow != "free":
        lines.append("    flow: flow                      # mass flow, volume flow or speed, told apart by its unit")
    return [*lines, ""]


def _geometry(situation: Situation, shape: str) -> list[str]:
    lines = ["geometry:", f"  shape: {shape}"]
    lines += [f"  {name}: {START[name][0]}" for name in DIMENSIONS[shape]]
    if any(need.quantity.name == "tubes in parallel" for need in situation.needs) and shape == "tube":
        lines.append("  parallel: N")
    return [*lines, ""]


def _resistances(situation: Situation, side: str, shape: str) -> list[str]:
    film = f"  - {{name: main film, kind: film, stream: main, situation: {situation.id}{_with(situation, shape)}}}"
    other = "outside" if side == "inside" else "inside"
    deposit = f"  - {{name: deposit, kind: fouling, resistance: R_f, on: {side}}}"
    thickness = ", thickness: {value: 2 mm, source: tbd}" if shape == "plane" else ""
    wall = f"  - {{name: wall, kind: wall{thickness}, material: stainless-316-kaschnitz-2017}}"
    stated = f"  - {{name: other film, kind: film, coefficient: h_2, on: {other}, temperature: T_2}}"
    order = [film, deposit, wall, stated] if side == "inside" else [stated, wall, deposit, film]
    return ["resistances:                        # in order, from the inside to the outside", *order, ""]


def _with(situation: Situation, shape: str) -> str:
    """The `with:` of a film: what the situation needs and the geometry does not give."""
    given = (*DIMENSIONS[shape], "tubes in parallel", *(("area", "perimeter") if shape == "plane" else ()))
    entries = [_entry(need) for need in situation.needs if need.quantity.name not in given or need.one_of]
    return f", with: {{{', '.join(entries)}}}" if entries else ""


def _entry(need: Need) -> str:
    if need.one_of:
        return f"{need.symbol}: {need.absent or need.one_of[0]}"
    return f"{need.symbol}: {START.get(need.quantity.name, (need.symbol, '', ''))[0]}"


def _tail() -> list[str]:
    return [
        "acceptance:                         # stated before the result",
        "  - {that: U_service >= 500 W/(m^2 K), source: tbd}",
        "",
        "report:",
        "  U on: outside                     # the area basis of U",
        "  units: SI                         # or US customary",
    ]
