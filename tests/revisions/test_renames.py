"""Renamed terms: one term under two names moves nothing, and is called by its new name throughout.

Expected figures are made by hand from 1/U = sum of the resistances on the basis area, as Incropera, DeWitt, Bergman
and Lavine, Fundamentals of Heat and Mass Transfer, state it for a tube.
"""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from two_sides import EXAMPLES, STATED, example, seal, with_value

from calcbook.interface import solve_file
from calcbook.record import digest_of, markdown, results_text, software_of
from calcbook.revisions.comparison import Comparison, compare, comparison_blocks
from calcbook.revisions.sides import load_side

RENAMED = STATED.replace("inside deposit", "scale").replace("name: wall", "name: tube metal")
ACCEPTED = """\
  - {that: R inside deposit service <= 3e-4 m^2 K/W, source: the inside deposit of the standard 3}
report:"""


def compared(folder: Path, old: str, new: str, results: tuple[str, ...] = ("U_service",)) -> Comparison:
    for name, text in (("old.yaml", old), ("new.yaml", new)):
        (folder / name).write_text(text, encoding="utf-8")
    sides = [load_side(name, folder, folder / "output") for name in ("old.yaml", "new.yaml")]
    return compare(*sides, results)


def ids(comparison: Comparison) -> list[tuple[str, str]]:
    return [(change.id, change.kind) for change in comparison.changes]


def test_a_new_name_alone_is_a_wording_that_moves_nothing(tmp_path: Path) -> None:
    comparison = compared(tmp_path, STATED, RENAMED)
    assert ids(comparison) == [
        ("resistances/scale/name", "text only"),
        ("resistances/tube metal/name", "text only"),
    ]
    assert comparison.attributions[0].parts == () and not comparison.is_empty
    assert {item.term for item in comparison.terms} == {
        *("inside film", "scale", "tube metal", "outside deposit", "outside film"),
    }
    assert all(item.difference == 0.0 for item in (*comparison.terms, *comparison.results))
    counts = {item.what: (item.count, item.total) for item in comparison.unchanged}
    assert counts["terms"] == (5, 5)
    page = markdown(comparison_blocks(comparison))
    row = "| resistances/scale/name | text only | term scale, name | inside deposit | scale | | |"
    assert row in page.splitlines()


def test_a_value_that_changed_beside_a_name_has_the_whole_part(tmp_path: Path) -> None:
    comparison = compared(tmp_path, STATED, with_value(RENAMED, "R_fi", "3.5e-4 m^2 K/W"))
    (part,) = comparison.attributions[0].parts
    assert part.changes == ("givens/R_fi",)
    # The allowance acts on the bore: (3.5e-4 - 1.8e-4) * 19.05/14.83.
    assert part.resistance == pytest.approx(1.7e-4 * 19.05 / 14.83, rel=1e-9)
    assert part.alone == pytest.approx(part.part, rel=1e-12)


def test_criteria_follow_the_name_and_prose_does_not(tmp_path: Path) -> None:
    old = STATED.replace("report:", ACCEPTED)
    new = old.replace("{name: inside deposit", "{name: scale").replace("R inside deposit", "R scale")
    comparison = compared(tmp_path, old, new, ("U_service", "R scale service"))
    assert ids(comparison) == [("resistances/scale/name", "text only")]
    assert comparison.verdicts == ()
    assert "the inside deposit of the standard 3" in comparison.old.document.text
    moved = compared(tmp_path, old, new.replace("standard 3}\nreport", "standard 4}\nreport"))
    assert [kind for _, kind in ids(moved)] == ["text only", "criterion"]


def test_accepted_checks_follow_the_name(tmp_path: Path) -> None:
    shutil.copy(EXAMPLES / "book.yaml", tmp_path)
    old = example("fw-601")
    new = old.replace("name: sample film", "name: film of the sample").replace(
        "check: sample film", "check: film of the sample"
    )
    comparison = compared(tmp_path, old, new)
    assert ids(comparison) == [("resistances/film of the sample/name", "text only")]
    assert not (comparison.checks or comparison.opened or comparison.closed)


def test_a_share_of_a_fouling_of_the_whole_unit_follows_the_name(tmp_path: Path) -> None:
    old = (
        STATED.replace(", resistance: R_fi, on: inside}", ", on: inside}")
        .replace(", resistance: R_fo, on: outside}", ", on: outside}")
        .replace("  R_fo: {value: 1.8e-4 m^2 K/W, is: outside allowance, source: standard 3}\n", "")
        .replace("  R_fi: {value: 1.8e-4 m^2 K/W, is: inside allowance, source: standard 3}\n", "")
        .replace(
            "acceptance:",
            "fouling specified as:\n  cleanliness: {value: 0.8, source: specification 4}\n"
            "  split:\n    inside deposit: {value: 0.25, source: specification 4}\n"
            "    outside deposit: {value: 0.75, source: specification 4}\nacceptance:",
        )
    )
    comparison = compared(tmp_path, old, old.replace("inside deposit", "scale"))
    assert ids(comparison) == [("resistances/scale/name", "text only")]
    assert comparison.attributions[0].difference == 0.0


def test_a_name_inside_a_longer_one_stays(tmp_path: Path) -> None:
    """`film` is another term than `inside film`, and a kind of term too."""
    old = STATED.replace("name: outside film", "name: film").replace(
        "report:",
        "  - {that: h inside film service >= 4000 W/(m^2 K), source: s}\n"
        "  - {that: R film service <= 0.001 m^2 K/W, source: s}\nreport:",
    )
    new = old.replace("name: film", "name: shell film").replace("R film", "R shell film")
    assert ids(compared(tmp_path, old, new)) == [("resistances/shell film/name", "text only")]


def test_names_that_were_exchanged_are_no_new_names(tmp_path: Path) -> None:
    """Both names are on both sides: it is the terms under them that changed."""
    new = (
        STATED.replace("inside deposit", "x")
        .replace("outside deposit", "inside deposit")
        .replace("name: x,", "name: outside deposit,")
    )
    comparison = compared(tmp_path, STATED, new)
    assert not [change for change in comparison.changes if change.kind == "text only"]


def test_twins_are_taken_in_their_order_and_only_as_many_as_are_gone(tmp_path: Path) -> None:
    line = "  - {name: paint, kind: stated, resistance: {value: 1e-5 m^2 K/W, source: s}, on: outside}\n"
    film = "  - {name: outside film,"
    old = STATED.replace(film, line + line.replace("paint", "primer") + film)
    new = old.replace("paint", "top coat").replace("primer", "first coat")
    assert [change.title for change in compared(tmp_path, old, new).changes] == [
        "term top coat, name",
        "term first coat, name",
    ]
    third = new.replace(film, line.replace("paint", "third coat") + film)
    kinds = [change.kind for change in compared(tmp_path, old, third).changes]
    assert sorted(kinds) == ["added"] * 3 + ["removed"] * 2


def test_a_term_that_changed_beside_its_name_is_another_term(tmp_path: Path) -> None:
    new = STATED.replace(
        "{name: inside deposit, kind: fouling, resistance: R_fi, on: inside}",
        "{name: scale, kind: fouling, resistance: R_fo, on: inside}",
    )
    kinds = dict(ids(compared(tmp_path, STATED, new)))
    assert kinds == {"resistances/inside deposit": "removed", "resistances/scale": "added"}


def test_branches_and_groups_of_parallel_terms_have_new_names_too(tmp_path: Path) -> None:
    shutil.copy(EXAMPLES / "book.yaml", tmp_path)
    old = example("sl-301")
    new = old.replace("name: radiation", "name: radiation to the yard").replace(
        "name: weather side", "name: outer side"
    )
    comparison = compared(tmp_path, old, new)
    assert [change.title for change in comparison.changes] == [
        "term outer side, name",
        "term radiation to the yard, name",
    ]
    one = compared(tmp_path, old, old.replace("name: weather side", "name: outer side"))
    assert ids(one) == [("resistances/outer side/name", "text only")]


def test_what_was_recorded_is_found_under_the_old_names(tmp_path: Path) -> None:
    folder = tmp_path / "output" / "CV-1" / "issued" / "A"
    folder.mkdir(parents=True)
    (folder / "calculation.yaml").write_text(STATED, encoding="utf-8")
    solved = solve_file(folder / "calculation.yaml")
    digest = digest_of(solved)
    recorded = json.loads(results_text(solved, digest, software_of(digest)))
    recorded["results"]["R inside deposit service"]["value"] *= 1.1
    (folder / "results.json").write_text(json.dumps(recorded), encoding="utf-8")
    seal(folder, "CV-1", "A")
    new = tmp_path / "new.yaml"
    new.write_text(RENAMED.replace("revision: A", "revision: B"), encoding="utf-8")
    sides = [load_side(name, tmp_path, tmp_path / "output") for name in ("CV-1@A", "new.yaml")]
    comparison = compare(*sides)
    moved = [part.name for part in comparison.software if part.software]
    assert moved == ["R inside deposit service"]
    assert comparison.old.digest == sides[0].digest and comparison.software_checks == ()


def test_history_of_a_survey_stays_with_the_renamed_side(tmp_path: Path) -> None:
    shutil.copytree(EXAMPLES, tmp_path, dirs_exist_ok=True)
    old = example("wc-111")
    name = next(line.split("name: ")[1].split(",")[0] for line in old.splitlines() if "kind: fouling" in line)
    comparison = compared(tmp_path, old, old.replace(f"name: {name},", "name: bore scale,"))
    assert ids(comparison) == [("resistances/bore scale/name", "text only")]
    fitted = [item for item in comparison.results if item.name.startswith(("fitted ", "allowance_"))]
    assert fitted and all(item.difference == 0.0 for item in fitted)
