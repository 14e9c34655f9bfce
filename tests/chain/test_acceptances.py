"""Where an acceptance of a check acts: in every case, in one condition, in one case, in one condition of one case."""

from __future__ import annotations

from pathlib import Path

import pytest

from calcbook.interface import solve_file

FILE = Path(__file__).resolve().parents[1] / "cases" / "bad" / "accept-unknown.yaml"
CHECK = "tube-side film / dittus-boelter-mcadams / turbulent"


@pytest.mark.parametrize(
    ("within", "accepted"),
    [
        ("all", {("", "clean"), ("", "service"), ("winter", "clean"), ("winter", "service")}),
        ("clean", {("", "clean"), ("winter", "clean")}),
        ("winter", {("winter", "clean"), ("winter", "service")}),
        ("base", {("", "clean"), ("", "service")}),
        ("winter service", {("winter", "service")}),
        ("base clean", {("", "clean")}),
    ],
)
def test_an_acceptance_acts_where_it_says(
    within: str, accepted: set[tuple[str, str]], tmp_path: Path
) -> None:
    text = FILE.read_text(encoding="utf-8").split("accept:")[0]
    assert text.count("inside-tube}") == text.count("0.3 kg/s") == text.count("report:") == 1
    # Re of 4000 to 5000 where the equation asks for 10 000.
    text = text.replace("inside-tube}", "inside-tube, method: dittus-boelter-mcadams}")
    text = text.replace("0.3 kg/s", "0.02 kg/s")
    text = text.replace(
        "report:", "cases:\n  winter: {T_hot: {value: 70 degC, source: heat balance 13}}\nreport:"
    )
    path = tmp_path / "trial.yaml"
    path.write_text(
        f"{text}accept:\n  - {{check: {CHECK}, in: {within}, down to: 3000, because: Measured., by: K. L.,"
        " date: 2026-11-20}\n",
        encoding="utf-8",
    )
    solved = solve_file(path)
    states = {
        (case.name, check.condition): check.state
        for case in solved.cases
        for check in case.checks
        if check.id == CHECK
    }
    assert set(states) == {(case, condition) for case in ("", "winter") for condition in ("clean", "service")}
    assert {place for place, state in states.items() if state == "accepted"} == accepted
    assert {state for place, state in states.items() if place not in accepted} <= {"outside"}
    items = [item for item in solved.open_items if CHECK in item.id]
    assert bool(items) == (len(accepted) < 4)
