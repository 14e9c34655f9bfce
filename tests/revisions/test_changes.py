"""What two revisions say differently: every kind of change, in the order of the file."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from two_sides import EXAMPLES, STATED, example, example_side, side_of, with_value

from calcbook.chain.types import Chain, Group, Layer
from calcbook.documents import read_text
from calcbook.revisions.changes import Change, changes_between, entries_of, merged, text_of
from calcbook.revisions.comparison import compare
from calcbook.revisions.mixtures import woven
from calcbook.revisions.sides import Side, load_side


def changes(old: str, new: str) -> tuple[Change, ...]:
    return changes_between(side_of(old), side_of(new))


def one(old: str, new: str) -> Change:
    (change,) = changes(old, new)
    return change


# --- seeded changes of the examples ---------------------------------------------------------------------

GIVEN = re.compile(r"^  ([A-Za-z]\w*): *\{value: ([0-9.e-]+)( [^,]+)?,", re.MULTILINE)


NEXT_SECTION = re.compile(r"^\S", re.MULTILINE)


def givens_of_examples() -> list[tuple[str, str, str]]:
    """Every given of every example, with another value that is near the first."""
    found = []
    for path in sorted(EXAMPLES.glob("*.yaml")):
        text = path.read_text(encoding="utf-8").partition("\ncases:")[0]
        # A given that is taken from another calculation needs that one beside it: links have tests of their own.
        if "\ngivens:" not in text or "from: {calculation:" in text:
            continue
        givens = text.partition("\ngivens:")[2]
        for symbol, number, unit in GIVEN.findall(givens[: NEXT_SECTION.search(givens).start()]):
            value = float(number)
            moved = (
                str(int(value) + 1)
                if not unit
                else f"{value + 0.5 if 'deg' in unit and '(' not in unit else value * 1.02:.8g}"
            )
            found.append((path.stem, symbol, f"{moved}{unit}"))
    return found


def dependents(chain: Chain, symbol: str) -> set[str]:
    """Every figure that follows from a given, found by walking the steps; temperatures of the circuit follow
    the heat."""
    steps = [*chain.steps, *chain.circuit]
    coupled = []
    for element in chain.elements:
        if isinstance(element, Layer):
            steps += element.steps
            coupled += [name for name in (element.first_temperature, element.second_temperature) if name]
            continue
        coupled += [element.surface_temperature, element.flux]
        for branch in element.branches:
            for candidate in branch.candidates:
                steps += [*branch.choice_steps, *candidate.steps]
    found = {f"given/{symbol}"}
    while True:
        more = {step.id for step in steps if set(step.inputs.values()) & found}
        more |= {item.id for item in chain.open_figures if item.found in found}
        for element in chain.elements:
            if isinstance(element, Group) and any(
                candidate.coefficient in found
                for branch in element.branches
                for candidate in branch.candidates
            ):
                more.add(chain.results[f"h {element.name}"])
                more |= {f"{element.name}/h of {branch.name}" for branch in element.branches}
            if isinstance(element, Layer) and element.resistance in found:
                more.add(chain.results[f"R {element.name}"])
        bulks = {
            chain.inner.bulk,
            chain.outer.bulk,
            *(branch.reference for group in (chain.inner, chain.outer) for branch in group.branches),
        }
        if chain.has_temperatures and (found | more) & {chain.results["R total"], *bulks}:
            more |= set(coupled)
        if more <= found:
            return found
        found |= more


@pytest.mark.parametrize(("name", "symbol", "value"), givens_of_examples())
def test_a_seeded_change_shows_exactly_that_input_and_its_dependents(
    name: str, symbol: str, value: str
) -> None:
    old = example_side(example(name))
    new = example_side(with_value(example(name), symbol, value))
    comparison = compare(old, new)
    assert [change.id for change in comparison.changes] == [f"givens/{symbol}"]
    assert [part.changes for part in comparison.attributions[0].parts] == [(f"givens/{symbol}",)]
    chain = new.solved.chain
    followers = dependents(chain, symbol)
    moved = {effect.term for effect in comparison.terms if effect.difference}
    assert moved <= {
        element.name for element in chain.elements if chain.results[f"R {element.name}"] in followers
    }
    if not followers & set(chain.results.values()):
        # A pressure drop follows from the answer, and may move alone.
        assert not any(
            effect.difference for effect in comparison.results if not effect.name.startswith("dp ")
        )
    # The slopes of U know the same dependents, by another way: derivatives of the relations at the solution.
    # A slope below 1e-12 of U for 1 % is what rounding leaves of one that is zero.
    if any(row.input.id == f"given/{symbol}" and abs(row.relative) > 1e-12 for row in old.solved.sensitivity):
        assert any(effect.difference for effect in comparison.results if effect.name == "U_service")
    givens = next(item for item in comparison.unchanged if item.what == "givens")
    assert givens.count == givens.total - 1


# --- each kind ------------------------------------------------------------------------------------------


def test_a_value_and_its_source_are_one_change() -> None:
    new = with_value(STATED, "R_fo", "2.2e-4 m^2 K/W").replace(
        "is: outside allowance, source: standard 3", "is: outside allowance, source: inspection 9"
    )
    change = one(STATED, new)
    assert (change.id, change.kind, change.was, change.now) == (
        "givens/R_fo",
        "given",
        "1.8e-4 m^2 K/W",
        "2.2e-4 m^2 K/W",
    )
    assert (change.source_was, change.source_now) == ("standard 3", "inspection 9")
    assert change.moves and change.quantity_was is not None and change.quantity_was.value == 1.8e-4


@pytest.mark.parametrize(
    ("edit", "kind", "name"),
    [
        (("R_fi: {value: 1.8e-4 m^2 K/W", "R_fi: {value: 0.18 m^2 K/kW"), "unit only", "givens/R_fi"),
        (("R_fi: {value: 1.8e-4 m^2 K/W", "R_fi: {value: 0.00018 m^2 K/W"), "text only", "givens/R_fi"),
        (
            ("inside allowance, source: standard 3", "inside allowance, source: standard 4"),
            "source only",
            "givens/R_fi",
        ),
        (("is: inside allowance", "is: allowance inside"), "text only", "givens/R_fi/is"),
        (("purpose: Compare two", "purpose: To compare two"), "text only", "purpose"),
        (("title: Stated coefficients", "title: Coefficients stated"), "text only", "calculation/title"),
    ],
)
def test_what_leaves_every_number_as_it_was_stands_apart(edit: tuple[str, str], kind: str, name: str) -> None:
    change = one(STATED, STATED.replace(*edit))
    assert (change.id, change.kind, change.moves, change.is_apart) == (name, kind, False, True)


@pytest.mark.parametrize(
    ("edit", "name", "kind", "moves"),
    [
        (
            ("source: data sheet 2}\n  R_fo", "source: data sheet 2, tolerance: 5 %}\n  R_fo"),
            "givens/h_o/tolerance",
            "given",
            False,
        ),
        (
            ("coefficient: h_o,", "coefficient: 1500 W/(m^2 K),"),
            "resistances/outside film/coefficient",
            "term",
            True,
        ),
        (
            ("on: outside}\nacc", "on: outside, temperature: 30 degC}\nacc"),
            "resistances/outside film/temperature",
            "term",
            True,
        ),
        (
            ("kind: wall, conductivity: k", "kind: wall, resistance: 1.4e-4 m^2 K/W"),
            "resistances/wall",
            "term",
            True,
        ),
        (
            ("  - {name: outside deposit, kind: fouling, resistance: R_fo, on: outside}\n", ""),
            "resistances/outside deposit",
            "removed",
            True,
        ),
        (("U on: outside", "U on: inside"), "report/U on", "report", True),
        (("units: SI", "units: US customary"), "report/units", "report", False),
        (("U_service >= 600 W", "U_service >= 500 W"), "acceptance/U_service >=", "criterion", False),
        (("inside diameter: d_i", "inside diameter: 14.83 mm"), "geometry/inside diameter", "geometry", True),
        (
            ("geometry: {", "cases: {cold: {h_o: {value: 900 W/(m^2 K), source: s}}}\ngeometry: {"),
            "cases/cold",
            "added",
            False,
        ),
        (
            (
                "geometry: {",
                "assumptions: {A1: {text: No tube is plugged., basis: none, verified: no}}\ngeometry: {",
            ),
            "assumptions/A1",
            "added",
            False,
        ),
        (
            ("geometry: {", "derived: {x: {relation: h_i/h_o, is: ratio}}\ngeometry: {"),
            "derived/x",
            "added",
            True,
        ),
    ],
)
def test_every_kind_of_change(edit: tuple[str, str], name: str, kind: str, moves: bool) -> None:
    new = STATED.replace(*edit)
    assert new != STATED
    change = one(STATED, new)
    assert (change.id, change.kind, change.moves) == (name, kind, moves)
    mirrored = one(new, STATED)
    opposite = {"added": "removed", "removed": "added"}.get(kind, kind)
    assert (mirrored.id, mirrored.kind, mirrored.was, mirrored.now) == (
        name,
        opposite,
        change.now,
        change.was,
    )


def test_streams_fluids_methods_and_cases_of_an_example() -> None:
    old = example("wc-101")
    new = old.replace("4 bara", "5 bara").replace(
        "fluid: water", "fluid: {mixture: ethylene glycol + water, mass fraction: 30 %}"
    )
    new = new.replace("situation: inside-tube}", "situation: inside-tube, method: gnielinski-1976}")
    new = new.replace("T_cold: {value: 12 degC", "T_cold: {value: 11 degC").replace(
        "verified: no}", "verified: {by: M. R., date: 2026-11-01, evidence: drawing 7}}"
    )
    found = changes_between(example_side(old), example_side(new))
    assert [(change.id, change.kind, change.moves) for change in found] == [
        ("assumptions/A1/verified", "assumption", False),
        ("streams/hot/fluid", "fluid", True),
        ("streams/hot/pressure", "stream", True),
        ("resistances/tube-side film/method", "method", True),
        ("cases/winter/T_cold", "case", False),
    ]


def test_a_reworded_assumption_stands_apart_from_one_that_is_verified() -> None:
    old = example("wc-101")
    basis = "basis: to be confirmed at the next shutdown"
    assert old.count(basis) == 1
    found = changes_between(example_side(old), example_side(old.replace(basis, "basis: seen in 2025")))
    assert [(change.id, change.kind, change.moves) for change in found] == [
        ("assumptions/A1/basis", "text only", False)
    ]


def test_a_fraction_of_a_mixture_is_a_figure_of_its_stream() -> None:
    old = example("gc-401").replace("mass fraction: w_eg", "mass fraction: 40 %")
    (change,) = changes_between(
        example_side(old), example_side(old.replace("mass fraction: 40 %", "mass fraction: 35 %"))
    )
    assert (change.id, change.kind, change.was, change.now) == (
        "streams/brine/fluid/mass fraction",
        "stream",
        "40 %",
        "35 %",
    )


def test_an_edited_branch_of_a_parallel_term_is_found_by_its_name() -> None:
    old = example("sl-301")
    new = old.replace(
        "emissivity: e_clad", "emissivity: {value: 0.3, source: insulation schedule LM-IS-301 note 3}"
    )
    (change,) = changes_between(example_side(old), example_side(new))
    assert change.id == "resistances/weather side/parallel/radiation/emissivity"


def test_another_order_of_terms_is_a_change() -> None:
    old = example("sl-301")
    first = old.index("  - {name: insulation")
    second = old.index("  - {name: cladding")
    end = old.index("  - name: weather side")
    new = old[:first] + old[second:end] + old[first:second] + old[end:]
    comparison = compare(example_side(old), example_side(new))
    assert [change.id for change in comparison.changes] == ["resistances/order of the terms"]
    (attribution,) = comparison.attributions
    assert attribution.difference and abs(attribution.rest) <= 1e-9 * attribution.was


def test_another_order_of_criteria_branches_and_history_is_told() -> None:
    """The first criterion says which case governs, so that its place is part of what is signed."""
    criterion = "  - {that: U_service >= 600 W/(m^2 K), source: specification 4}\n"
    second = "  - {that: U_clean >= 700 W/(m^2 K), source: specification 4}\n"
    old, new = (STATED.replace(criterion, both) for both in (criterion + second, second + criterion))
    change = one(old, new)
    assert (change.id, change.kind, change.moves) == (
        "acceptance/order of the criteria",
        "criterion",
        False,
    )
    assert (change.was, change.now) == ("U_service >=, U_clean >=", "U_clean >=, U_service >=")
    assert not changes(old, old)


def test_a_changed_table_file_is_a_changed_fluid(tmp_path: Path) -> None:
    head = "T,density,viscosity,conductivity,heat capacity\ndegC,kg/m^3,Pa s,W/(m K),J/(kg K)\n"
    rows = "20,990,{viscosity},0.6,4180\n90,960,0.0003,0.67,4190\n"
    text = (
        STATED.replace("coefficient: h_i, on: inside}", "stream: hot, situation: inside-tube}")
        .replace("coefficient: h_o, on: outside}", "coefficient: h_o, on: outside, temperature: 25 degC}")
        .replace("geometry: {shape: tube,", "geometry: {shape: tube, length: 3 m,")
    )
    text += (
        "fluids: {oil: {table file: oil.csv, source: sheet 8}}\n"
        "streams: {hot: {fluid: oil, phase: liquid, temperature: 60 degC, flow: 2 m/s}}\n"
    )
    sides: list[Side] = []
    for name, viscosity in (("one", "0.001"), ("two", "0.002")):
        folder = tmp_path / name
        folder.mkdir()
        (folder / "oil.csv").write_text(head + rows.format(viscosity=viscosity), encoding="utf-8")
        (folder / "calc.yaml").write_text(text, encoding="utf-8")
        sides.append(load_side("calc.yaml", folder, folder / "output"))
    comparison = compare(*sides)
    assert [(change.id, change.kind) for change in comparison.changes] == [("fluids/oil", "fluid")]
    (attribution,) = comparison.attributions
    assert attribution.difference < 0.0 and abs(attribution.rest) <= 1e-9 * attribution.was


def test_a_changed_house_card_is_a_change_of_its_own(tmp_path: Path) -> None:
    card = """\
material: house-alloy
title: House alloy
kind: metal
quantity: wall conductivity
table: {{T: [20 degC, 100 degC], k: [{first} W/(m K), 17 W/(m K)]}}
outside: open item
standing: published
spread: {{within: 5 %, because: works certificate}}
sources:
  - {{cite: Works certificate 7, for: table, standing: published}}
check points:
  - {{given: {{T_1: 293.15, T_2: 293.15}}, gives: {{k: {first}}}, within: 1e-9,
     source: works certificate, standing: published}}
  - {{given: {{T_1: 373.15, T_2: 373.15}}, gives: {{k: 17}}, within: 1e-9,
     source: works certificate, standing: published}}
state: {{is: checked, since: 0.1}}
"""
    text = STATED.replace("conductivity: k}", "material: house-alloy}").replace(
        "on: inside}\n  - {name: inside dep", "on: inside, temperature: 80 degC}\n  - {name: inside dep"
    )
    text = text.replace("on: outside}\nacc", "on: outside, temperature: 30 degC}\nacc")
    sides = []
    for name, first in (("one", "15"), ("two", "14")):
        folder = tmp_path / name
        (folder / "cards").mkdir(parents=True)
        (folder / "cards" / "house-alloy.yaml").write_text(card.format(first=first), encoding="utf-8")
        changed = text if name == "one" else with_value(text, "h_o", "1400 W/(m^2 K)")
        (folder / "calc.yaml").write_text(changed, encoding="utf-8")
        sides.append(load_side("calc.yaml", folder, folder / "output"))
    comparison = compare(*sides)
    assert [change.id for change in comparison.changes] == ["givens/h_o", "card/material house-alloy"]
    (attribution,) = comparison.attributions
    assert all(part.part < 0.0 for part in attribution.parts)
    assert abs(attribution.rest) <= 1e-9 * attribution.was


# --- small helpers --------------------------------------------------------------------------------------


def test_merged_keeps_the_new_order_and_leaves_old_names_at_their_predecessor() -> None:
    assert merged(["a", "x", "y", "b"], ["a", "n", "b"]) == ["a", "x", "y", "n", "b"]
    assert merged(["x", "a"], ["a"]) == ["x", "a"]
    assert merged([], ["a"]) == ["a"]


def test_woven_is_the_same_from_either_side() -> None:
    old, new = ["a", "x", "b", "c"], ["n", "a", "m", "b", "c"]
    assert woven(old, new, old) == woven(new, old, new) == ["n", "a", "m", "x", "b", "c"]
    assert [name for name in woven(old, new, new) if name in new] == new


def test_nodes_as_text() -> None:
    root = read_text("a: {b:   c,  d: [e, {f: g}]}\n", "x").root
    assert text_of(root) == "a: (b: c, d: [e, (f: g)])"
    twins = read_text("- {that: U >= 1}\n- {that: U >= 2}\n", "x").root
    assert list(entries_of(twins, "acceptance")) == ["U >=", "U >= #2"]
