"""A stated coefficient that includes other terms: what is known of surfaces and of the clean unit then."""

from __future__ import annotations

from pathlib import Path

import pytest

from calcbook.faults import Faults
from calcbook.interface import record_text, solve_file

TUBE = """\
calculation: {number: IN-1, title: A film that includes terms, plant: Works, revision: A, prepared by: K. L., date: 2026-12-01}
purpose: Show what a stated film leaves unknown.
givens:
  T_1: {value: 120 degC, is: inner fluid, source: test}
  T_2: {value: 40 degC, is: outer fluid, source: test}
geometry:
  shape: tube
  inside diameter: {value: 20 mm, source: test}
  outside diameter: {value: 25 mm, source: test}
  length: {value: 3 m, source: test}
  parallel: {value: 10, source: test}
resistances:
  - {name: f1, kind: film, coefficient: {value: 2000 W/(m^2 K), source: test}, on: inside, temperature: T_1}
  - {name: wall, kind: wall, conductivity: {value: 15 W/(m K), source: test}}
  - {name: dirt, kind: fouling, resistance: {value: 1e-4 m^2 K/W, source: test}, on: outside}
  - {name: f2, kind: film, coefficient: {value: 500 W/(m^2 K), source: test}, on: outside, temperature: T_2}
acceptance:
  - {that: T outside surface service >= 95 degC, source: test}
report: {U on: outside, units: SI}
"""


def text(includes: str) -> str:
    return TUBE.replace(
        "temperature: T_2}\nacceptance", f"temperature: T_2, includes: [{includes}]}}\nacceptance"
    )


@pytest.mark.parametrize("includes", ["wall, dirt", "dirt"])
def test_the_surface_of_a_film_that_includes_terms_is_not_known(includes: str, tmp_path: Path) -> None:
    """By hand the flux through f2 gives T_2 + q/h_2 for the surface of what it includes' inner face, not for its own."""
    path = tmp_path / "in-1.yaml"
    path.write_text(text(includes), encoding="utf-8")
    with pytest.raises(Faults) as caught:
        solve_file(path)
    (fault,) = caught.value.faults
    assert fault.message == (
        "`T outside surface service` is not known: the stated film there includes other terms"
    )
    path.write_text(text(includes).replace("T outside surface", "T inside surface"), encoding="utf-8")
    solved = solve_file(path, for_record=False)
    assert not [name for name in solved.base.results if name.startswith("T outside surface")]
    assert {item.id for item in solved.open_items} == {"dirt/included"}
    assert "without the fouling terms" not in record_text(solved)
    assert "a stated coefficient includes the deposit" in record_text(solved)


def test_the_surface_of_a_film_alone_is_known(tmp_path: Path) -> None:
    path = tmp_path / "in-1.yaml"
    path.write_text(TUBE, encoding="utf-8")
    solved = solve_file(path, for_record=False)
    assert "T outside surface service" in solved.base.results and not solved.open_items


@pytest.mark.parametrize("part", [0.8, 0.85, 0.9])
def test_a_result_at_its_limit_by_the_file_meets_it(part: float, tmp_path: Path) -> None:
    """Cleanliness is specified as the limit that it is held to: what is left of it is the rounding of the circuit."""
    path = tmp_path / "in-2.yaml"
    dirt = next(line for line in TUBE.splitlines() if "name: dirt" in line)
    found = TUBE.replace(dirt, "  - {name: dirt, kind: fouling, on: outside}").replace(
        "T outside surface service >= 95 degC", f"cleanliness >= {part * 100:g} %"
    )
    specified = (
        f"fouling specified as: {{cleanliness: {{value: {part * 100:g} %, source: test}}}}\nacceptance:"
    )
    path.write_text(found.replace("acceptance:", specified), encoding="utf-8")
    (criterion,) = solve_file(path, for_record=False).base.criteria
    assert criterion.met and criterion.margin == 0.0
    path.write_text(found.replace("acceptance:", specified).replace(">=", ">"), encoding="utf-8")
    (criterion,) = solve_file(path, for_record=False).base.criteria
    assert not criterion.met


def test_a_result_at_its_limit_in_every_sample_meets_it_in_every_sample(tmp_path: Path) -> None:
    """The cleanliness that is specified does not move with the films: it is met surely, not as a coin falls."""
    path = tmp_path / "in-3.yaml"
    dirt = next(line for line in TUBE.splitlines() if "name: dirt" in line)
    text = TUBE.replace(dirt, "  - {name: dirt, kind: fouling, on: outside}").replace(
        "T outside surface service >= 95 degC", "cleanliness >= 80 %, probability: 90 %"
    )
    text = text.replace("is: inner fluid, source: test", "is: inner fluid, source: test, tolerance: 1 K")
    text = text.replace("coefficient: {value: 500 W/(m^2 K), source: test}", "coefficient: h_2")
    text = text.replace(
        "givens:\n", "givens:\n  h_2: {value: 500 W/(m^2 K), is: film, source: test, tolerance: 10 %}\n"
    )
    specified = (
        "fouling specified as: {cleanliness: {value: 80 %, source: test}}\nuncertainty: {of: [U_service]}\n"
    )
    path.write_text(text.replace("acceptance:", f"{specified}acceptance:"), encoding="utf-8")
    (criterion,) = solve_file(path, for_record=False).base.criteria
    assert criterion.met and criterion.reached == 1.0
