"""Calculation files as texts, and sides made from them, for the tests of the comparison."""

from __future__ import annotations

import functools
import re
import tempfile
from pathlib import Path

from calcbook.revisions.sides import Side, load_side
from calcbook.seals import Issued, seal_text, sha256_of

EXAMPLES = Path(__file__).resolve().parents[2] / "calcs"

# The check values' calculation: everything stated, so that U can be made by hand.
STATED = """\
calculation:
  {number: CV-1, title: Stated coefficients, plant: Larkmoor Works, revision: A, prepared by: K. L.,
   date: 2026-09-02}
purpose: Compare two revisions by hand.
givens:
  d_o:  {value: 19.05 mm, is: tube outside diameter, source: drawing 1}
  d_i:  {value: 14.83 mm, is: tube bore, source: drawing 1}
  k:    {value: 16 W/(m K), is: wall conductivity, source: drawing 1}
  h_i:  {value: 5000 W/(m^2 K), is: inside film coefficient, source: data sheet 2}
  h_o:  {value: 1500 W/(m^2 K), is: outside film coefficient, source: data sheet 2}
  R_fo: {value: 1.8e-4 m^2 K/W, is: outside allowance, source: standard 3}
  R_fi: {value: 1.8e-4 m^2 K/W, is: inside allowance, source: standard 3}
geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o}
resistances:
  - {name: inside film, kind: film, coefficient: h_i, on: inside}
  - {name: inside deposit, kind: fouling, resistance: R_fi, on: inside}
  - {name: wall, kind: wall, conductivity: k}
  - {name: outside deposit, kind: fouling, resistance: R_fo, on: outside}
  - {name: outside film, kind: film, coefficient: h_o, on: outside}
acceptance:
  - {that: U_service >= 600 W/(m^2 K), source: specification 4}
report: {U on: outside, units: SI}
"""


@functools.lru_cache(maxsize=256)
def _kept(text: str, beside: tuple[tuple[str, str], ...]) -> Side:
    with tempfile.TemporaryDirectory() as folder:
        for name, content in (*beside, ("calculation.yaml", text)):
            path = Path(folder) / name
            path.parent.mkdir(exist_ok=True)
            path.write_text(content, encoding="utf-8")
        return load_side("calculation.yaml", Path(folder), Path(folder) / "output")


def side_of(text: str, beside: dict[str, str] | None = None) -> Side:
    """A side from the text of its file, with other files in its folder; each text is solved once."""
    return _kept(text, tuple((beside or {}).items()))


def seal(folder: Path, number: str, revision: str, supersedes: str = "") -> None:
    """Seal the files of a folder as an issued copy, final."""
    files = {path.name: sha256_of(path.read_bytes()) for path in folder.iterdir()}
    issued = Issued(folder, number, revision, "final", "2026-09-02", supersedes, "", {}, {}, files)
    (folder / "seal.json").write_text(seal_text(issued), encoding="utf-8")


def example(name: str) -> str:
    """The text of a calculation file of the example book."""
    return (EXAMPLES / f"{name}.yaml").read_text(encoding="utf-8")


def example_side(text: str) -> Side:
    """A side of an example's text, with the settings, histories and house cards of the example book."""
    beside = [
        EXAMPLES / "book.yaml",
        *sorted(EXAMPLES.glob("*.csv")),
        *sorted((EXAMPLES / "cards").glob("*.yaml")),
    ]
    return side_of(
        text, {path.relative_to(EXAMPLES).as_posix(): path.read_text(encoding="utf-8") for path in beside}
    )


def with_value(text: str, symbol: str, value: str) -> str:
    """A file's text with another value for a given."""
    changed, count = re.subn(rf"(\n  {symbol}: *{{value: )[^,]+,", rf"\g<1>{value},", text, count=1)
    assert count == 1, symbol
    return changed
