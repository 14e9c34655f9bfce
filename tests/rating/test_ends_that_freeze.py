"""Water that freezes at the wall of one end: the circuit does not close there, and nothing of that is passed over."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from calcbook.chain.ends import OPEN_END
from calcbook.chain.outcome import Solved
from calcbook.interface import record_text, solve_file

CALCS = Path(__file__).resolve().parents[2] / "calcs"


def cooled(folder: Path, cold: str, rest: str = "") -> Solved:
    """WC-105 with water from 14 to 9 °C against glycol that enters at ``cold``; its outlet is found."""
    text = (CALCS / "wc-105.yaml").read_text(encoding="utf-8")
    for symbol, value in (("T_hi", "14 degC"), ("T_ho", "9 degC"), ("T_ci", cold)):
        text = re.sub(rf"(?m)^(  {symbol}: +{{value: )[^,]+", rf"\g<1>{value}", text)
    glycol = "  cold:\n    fluid: {mixture: ethylene glycol + water, mass fraction: {value: 45 %, source: s}}"
    text = text.replace("  cold:\n    fluid: water", glycol)
    text = text.replace(
        "material: stainless-316-kaschnitz-2017", "conductivity: {value: 14 W/(m K), source: s}"
    )
    text = text.replace("inlet: T_ci, outlet: T_co", "inlet: T_ci")
    text = re.sub(r"(?ms)^(sweep|acceptance):.*?(?=^\S)", "", text)
    path = folder / "wc-105.yaml"
    path.write_text(text + rest, encoding="utf-8")
    return solve_file(path)


def test_an_end_that_freezes_is_an_open_item_and_no_limit_within(tmp_path: Path) -> None:
    """By hand, with the record's own clean figures: T_s = T_ho − (T_ho − T_ci)·U·(d_o/d_i)/h at the hot outlet of
    counterflow, where the glycol enters."""
    solved = cooled(tmp_path, "-17 degC")
    clean = solved.base.solutions["clean"]
    overall, film = (
        clean.number(solved.chain.results["U"]),
        clean.number(solved.chain.results["h tube-side film"]),
    )
    assert 9.0 - (9.0 + 17.0) * overall * (19.05 / 15.75) / film < -1.0
    (found,) = (check for check in solved.base.checks if check.id.startswith(OPEN_END))
    assert (found.id, found.condition) == (f"{OPEN_END} at the hot outlet", "clean")
    assert found.state == "not evaluable" and "hot has no viscosity" in found.figure
    freezes = "tube-side film / wall phase / freezes at the hot outlet"
    states = {check.condition: check.state for check in solved.base.checks if check.id == freezes}
    assert states == {"service": "within", "clean": "not evaluable"}
    # One reason is one open item; it names what is not known with it.
    (item,) = solved.open_items
    assert item.id == f"{OPEN_END} at the hot outlet / clean"
    others = item.text.partition(" Not evaluable with it: ")[2].rstrip(".").split(", ")
    assert {one.partition(" / wall phase / ")[0] for one in others} == {"tube-side film", "shell-side film"}
    assert len(others) == 3 and freezes in others
    page = record_text(solved)
    assert "4 of 19 checks at the wall are not within" in page
    assert "is held in these states" not in page


def test_a_search_stops_where_an_end_freezes(tmp_path: Path) -> None:
    """In service both ends of the unit and clean both are free of ice at −10 °C; colder glycol ends that."""
    solved = cooled(tmp_path, "-10 degC")
    assert not [check for check in solved.base.checks if check.id.startswith(OPEN_END)]
    row = next(row for row in solved.flips.searched if row.input.symbol == "T_ci")
    assert row.low_end == "the circuit does not close at the hot outlet, clean"
    assert -17.0 < row.low < -10.0


@pytest.mark.parametrize(("cold", "answers"), [("-10 degC", True), ("-19 degC", False)])
def test_day_one_without_an_answer_is_told(tmp_path: Path, cold: str, answers: bool) -> None:
    solved = cooled(tmp_path, cold)
    assert (solved.rating.answered.get("") is not None) is answers
    page = record_text(solved)
    assert ("Day one has no answer: the circuit of the clean unit does not close" in page) is not answers
    assert ("day one" in {item.id for item in solved.open_items}) is not answers


def test_a_case_without_a_day_one_is_an_open_item_of_its_own(tmp_path: Path) -> None:
    solved = cooled(tmp_path, "-10 degC", "cases:\n  cold spell: {T_ci: {value: -19 degC, source: s}}\n")
    assert list(solved.rating.answered) == [""] and list(solved.rating.unanswered) == ["cold spell"]
    ids = {item.id for item in solved.open_items}
    assert "day one in case cold spell" in ids and "day one" not in ids
    page = record_text(solved)
    assert "Day one has no answer in case cold spell: the circuit of the clean unit does not close" in page
