"""Recall: what rests on a source or a card, and what a replacement does to it."""

from __future__ import annotations

import json
from pathlib import Path

import pytest
from click.testing import CliRunner
from two_sides import STATED, example, seal, with_value

from calcbook.commands import main
from calcbook.faults import Faults
from calcbook.interface import solve_file
from calcbook.record import markdown
from calcbook.revisions.recall import Recall, Wanted, recall, recall_blocks, recall_data


@pytest.fixture
def book(tmp_path: Path) -> Path:
    """Two calculation files, and two issued copies of the first."""
    (tmp_path / "cv-1.yaml").write_text(STATED, encoding="utf-8")
    (tmp_path / "cv-2.yaml").write_text(
        STATED.replace("CV-1", "CV-2").replace("source: standard 3", "source: Survey 8"), encoding="utf-8"
    )
    for revision, supersedes in (("A", ""), ("B", "A")):
        folder = tmp_path / "output" / "CV-1" / "issued" / revision
        folder.mkdir(parents=True)
        text = with_value(STATED, "h_i", "4000 W/(m^2 K)") if revision == "A" else STATED
        (folder / "calculation.yaml").write_text(
            text.replace("revision: A", f"revision: {revision}"), encoding="utf-8"
        )
        seal(folder, "CV-1", revision, supersedes)
    return tmp_path


def looked(folder: Path, wanted: Wanted) -> Recall:
    return recall([(path, folder / "output") for path in sorted(folder.glob("*.yaml"))], wanted)


def test_a_source_is_found_in_files_and_in_issued_copies(book: Path) -> None:
    found = looked(book, Wanted(source="STANDARD  3"))
    assert found.looked_at == 4
    assert [(item.side.calculation.number, item.side.revision, item.state) for item in found.found] == [
        ("CV-1", "A", "calculation file"),
        ("CV-1", "A", "issued, final, superseded"),
        ("CV-1", "B", "issued, final"),
    ]
    assert [(rest.where, rest.text, rest.source) for rest in found.found[0].rests] == [
        ("givens/R_fo", "1.8e-4 m^2 K/W", "standard 3"),
        ("givens/R_fi", "1.8e-4 m^2 K/W", "standard 3"),
    ]
    assert all(item.effect is None for item in found.found)


def test_a_replacement_shows_what_u_and_the_verdicts_would_be(book: Path) -> None:
    found = looked(book, Wanted(source="standard 3", value="3.5e-4 m^2 K/W", only=("R_fi",)))
    effects = [item.effect for item in found.found]
    assert all(effect is not None and effect.replaced == ("givens/R_fi",) for effect in effects)
    first = effects[0]
    assert first is not None
    # The check values of one raised allowance, see test_attribution.
    assert (
        round(first.was.base.results["U_service"].value, 2),
        round(first.now.base.results["U_service"].value, 2),
    ) == (673.91, 587.46)
    assert [(flip.was, flip.now) for flip in first.verdicts] == [("criterion met", "criterion not met")]
    page = markdown(recall_blocks(found))
    assert "| 673.912 W/(m²·K) | 587.458 W/(m²·K) | −86.454 W/(m²·K) | −12.83 % |" in page
    data = recall_data(found)
    assert json.dumps(data, allow_nan=False)


def test_without_only_every_figure_of_that_source_and_dimension_is_replaced(book: Path) -> None:
    found = looked(book, Wanted(source="standard 3", value="3.5e-4 m^2 K/W"))
    effect = found.found[0].effect
    assert effect is not None and effect.replaced == ("givens/R_fo", "givens/R_fi")
    changed = with_value(with_value(STATED, "R_fo", "3.5e-4 m^2 K/W"), "R_fi", "3.5e-4 m^2 K/W")
    (book / "apart.yaml").write_text(changed, encoding="utf-8")
    apart = solve_file(book / "apart.yaml").base.results["U_service"].value
    assert effect.now.base.results["U_service"].value == apart


def test_the_limit_of_a_criterion_can_be_replaced(book: Path) -> None:
    found = looked(book, Wanted(source="specification 4", value="700 W/(m^2 K)"))
    effect = found.found[0].effect
    assert effect is not None
    assert [(flip.was, flip.now) for flip in effect.verdicts] == [("criterion met", "criterion not met")]
    assert effect.now.base.results["U_service"].value == effect.was.base.results["U_service"].value


def test_a_replacement_of_another_quantity_is_a_fault(book: Path) -> None:
    for value, code in (
        ("5 kg/s", "replacement-unfit"),
        ("5 parsec", "unit-unknown"),
        ("1,5 mm", "number-decimal-comma"),
    ):
        with pytest.raises(Faults) as caught:
            looked(book, Wanted(source="standard 3", value=value))
        assert [fault.code for fault in caught.value.faults] == [code]


def test_a_card_is_found_and_its_wrong_figure_replaced(tmp_path: Path) -> None:
    (tmp_path / "fw-601.yaml").write_text(example("fw-601"), encoding="utf-8")
    (tmp_path / "wc-101.yaml").write_text(example("wc-101"), encoding="utf-8")
    found = looked(tmp_path, Wanted(card="dittus-boelter-mcadams", value="0.023=0.0253"))
    (item,) = found.found
    assert item.side.calculation.number == "FW-601" and item.rests[0].where == "method card"
    assert item.effect is not None
    was, now = (
        solved.base.results["h sample film service"].value for solved in (item.effect.was, item.effect.now)
    )
    # Ten per cent on the constant is ten per cent on h: the method does not close on the surface.
    assert now / was == pytest.approx(1.1, rel=1e-9)
    both = looked(tmp_path, Wanted(card="stainless-316-kaschnitz-2017", value="14.3=15.0"))
    assert [entry.side.calculation.number for entry in both.found] == ["FW-601", "WC-101"]
    for entry in both.found:
        assert entry.effect is not None
        gain = [solved.base.results["U_service"].value for solved in (entry.effect.was, entry.effect.now)]
        assert gain[1] > gain[0], "a wall that conducts better"


@pytest.mark.parametrize("value", ["0.024=0.025", "no such name=1", "0.023", "=1"])
def test_a_figure_that_the_card_does_not_have_is_told(tmp_path: Path, value: str) -> None:
    (tmp_path / "fw-601.yaml").write_text(example("fw-601"), encoding="utf-8")
    try:
        found = looked(tmp_path, Wanted(card="dittus-boelter-mcadams", value=value))
    except Faults as faults:
        assert [fault.code for fault in faults.faults] == ["replacement-unfit"]
    else:
        assert [item.effect for item in found.found] == [None]
        assert "replacement-unfit" in found.found[0].failure


def test_a_file_with_a_fault_is_told_and_the_others_are_looked_through(book: Path) -> None:
    (book / "cv-3.yaml").write_text(STATED.replace("14.83 mm", "14,83 mm"), encoding="utf-8")
    found = looked(book, Wanted(source="survey 8"))
    assert [item.side.calculation.number for item in found.found] == ["CV-2"]
    assert len(found.failed) == 1 and found.failed[0][0].endswith("cv-3.yaml")


def test_the_command(book: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(book)
    run = CliRunner().invoke
    done = run(main, ["recall", ".", "--source", "standard 3", "--value", "3.5e-4 m^2 K/W", "--only", "R_fi"])
    assert done.exit_code == 0 and done.output.startswith("# Recall of the source “standard 3”")
    assert "3 calculations and issued records rest on it, of 4 looked at." in done.output
    for arguments in (
        [],
        ["--source", "x", "--card", "y"],
        ["--source", " "],
        ["--source", "standard 3", "--value", "1 kg"],
    ):
        assert run(main, ["recall", ".", *arguments]).exit_code == 2
    assert (
        json.loads(run(main, ["recall", ".", "--source", "nobody", "--format", "json"]).output)["found"] == []
    )


def test_a_place_that_nothing_recalled_stands_at_is_told_with_the_nearest(book: Path) -> None:
    with pytest.raises(Faults) as caught:
        looked(book, Wanted(source="standard 3", value="3.5e-4 m^2 K/W", only=("R_fi", "R_f0")))
    (fault,) = caught.value.faults
    assert (fault.code, fault.found) == ("place-not-recalled", "R_f0")
    assert "R_fo" in fault.nearest
    assert "givens/R_fo" in fault.expected


def test_a_place_without_a_replacement_is_a_mistake_of_the_command_line(book: Path) -> None:
    result = CliRunner().invoke(main, ["recall", str(book), "--source", "standard 3", "--only", "R_fi"])
    assert result.exit_code == 2
    assert "--only" in result.output


def test_verdicts_that_a_replacement_does_not_work_out_are_told_and_never_turned() -> None:
    """HR-821 has a criterion on the time until its duty is lost: it stands neither as met nor as gone."""
    calcs = Path(__file__).resolve().parents[2] / "calcs"
    words = ["recall", str(calcs / "hr-821.yaml"), "--source", "LM-PS-07", "--value", "0.00005 m^2 K/W"]
    answer = CliRunner().invoke(main, words)
    assert answer.exit_code == 0, answer.output
    assert "time_until_duty_lost" not in answer.output and "no criterion" not in answer.output
    assert "are not worked out here: change the file and run it" in " ".join(answer.output.split())
