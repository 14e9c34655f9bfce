"""A small book for the tests of sign-off and issue: one calculation without open items, and its way."""

from __future__ import annotations

import datetime
import re
from pathlib import Path

from calcbook.revisions.signing import Work, open_work, sign

BOOK = """\
book: Larkmoor Works heat-transfer calculations
site pressure: {value: 101.3 kPa, source: site data LM-SD-01}
output: ../output
revisions: letters
roles: [prepared, checked, approved]
people:
  kl: {name: K. L., also: [Karl L., "L., K."]}
  mr: {name: M. R.}
  ta: {name: T. A.}
open items: refuse final issue
"""
CALCULATION = """\
# A cooler of the closed water loop.
calculation:
  number: WC-101
  title: Overall coefficient of the closed-loop water cooler
  plant: Larkmoor Works
  revision: A
  prepared by: K. L.
  date: 2026-09-02

purpose: >
  Set the clean and service overall coefficient of cooler WC-101
  for the summer duty.

revisions:
  - {revision: A, date: 2026-09-02, reason: First issue}   # the first

givens:
  d_i:    {value: 15.75 mm,  is: tube bore,              source: drawing LM-WC-101-03 rev 2}
  d_o:    {value: 19.05 mm,  is: tube outside diameter,  source: drawing LM-WC-101-03 rev 2}
  L:      {value: 4.88 m,    is: tube length,            source: drawing LM-WC-101-03 rev 2}
  N:      {value: 62,        is: tubes in parallel,      source: drawing LM-WC-101-03 rev 2}
  m_hot:  {value: 18.2 kg/s, is: hot water flow,         source: flow meter FT-101}
  T_hot:  {value: 74 degC,   is: mean hot temperature,   source: heat balance sheet 12}
  T_cold: {value: 31 degC,   is: mean cold temperature,  source: heat balance sheet 12}
  R_fi:   {value: 0.00009 m^2 K/W, is: tube-side allowance,  source: plant standard LM-PS-07 table 2}
  R_fo:   {value: 0.00018 m^2 K/W, is: shell-side allowance, source: plant standard LM-PS-07 table 2}
  h_o:    {value: 5200 W/(m^2 K),  is: shell-side film coefficient, source: vendor data sheet p. 3}

streams:
  hot:
    {fluid: water, temperature: T_hot, pressure: {value: 4 bara, source: heat balance sheet 12}, flow: m_hot}

geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}

resistances:
  - {name: tube-side film,     kind: film, stream: hot, situation: inside-tube}
  - {name: tube-side deposit,  kind: fouling, resistance: R_fi, on: inside}
  - {name: tube wall,          kind: wall, material: stainless-316-kaschnitz-2017}
  - {name: shell-side deposit, kind: fouling, resistance: R_fo, on: outside}
  - {name: shell-side film,    kind: film, coefficient: h_o, on: outside, temperature: T_cold}

acceptance:
  - {that: U_service >= 1000 W/(m^2 K), source: duty specification LM-DS-101 rev 2}

report: {U on: outside, units: SI}
"""
ANSWER = "I compared R_fo and the bore of 15.75 mm with the drawing and the standard line by line."


def day(text: str) -> datetime.date:
    return datetime.date.fromisoformat(text)


def make_book(folder: Path, calculation: str = CALCULATION, book: str = BOOK) -> Path:
    """A book under a folder; returns the path of its calculation file."""
    calcs = folder / "calcs"
    calcs.mkdir(parents=True, exist_ok=True)
    (calcs / "book.yaml").write_text(book, encoding="utf-8")
    path = calcs / "wc-101.yaml"
    path.write_text(calculation, encoding="utf-8")
    return path


def work_of(path: Path) -> Work:
    """The calculation read and solved as it stands now."""
    return open_work(path, path.name, path.parent.parent / "output")


def fill(form: Path, answer: str = ANSWER, way: str = "review of every line") -> None:
    """Fill in a checker's form as a careful person would."""
    text = form.read_text(encoding="utf-8")
    text = text.replace('answer: ""', f'answer: "{answer}"').replace(
        'acknowledged: ""', 'acknowledged: "acknowledged"'
    )
    form.write_text(text.replace('way of checking: ""', f'way of checking: "{way}"'), encoding="utf-8")


def sign_prepared(path: Path, date: str = "2026-09-02") -> None:
    sign(work_of(path), "prepared", "kl", day(date))


def sign_checked(path: Path, date: str = "2026-09-03", person: str = "mr") -> None:
    """Both calls of a checker, with the form filled in between."""
    work = work_of(path)
    fill(sign(work, "checked", person, day(date)).path)
    sign(work, "checked", person, day(date))


def sign_all(path: Path) -> None:
    """Every sign-off of the book, on three days."""
    sign_prepared(path)
    sign_checked(path)
    sign(work_of(path), "approved", "ta", day("2026-09-04"))


def change(path: Path, old: str, new: str) -> None:
    """Replace a text that stands once in a file."""
    text = path.read_text(encoding="utf-8")
    assert len(re.findall(re.escape(old), text)) == 1, old
    path.write_text(text.replace(old, new), encoding="utf-8")
