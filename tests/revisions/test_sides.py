"""Sides: files, issued copies, and files in git, with what was recorded for them."""

from __future__ import annotations

import json
import math
import subprocess
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner
from two_sides import EXAMPLES, STATED, seal, with_value

from calcbook.commands import main
from calcbook.faults import Faults
from calcbook.interface import solve_file
from calcbook.record import digest_of, markdown, results_text, software_of
from calcbook.revisions.comparison import compare, comparison_blocks
from calcbook.revisions.comparison_page import short_blocks
from calcbook.revisions.git import commit_of
from calcbook.revisions.pairs import compare_texts
from calcbook.revisions.sides import load_side
from calcbook.revisions.since import compare_since, since_blocks, since_data

NUMBER = "CV-1"
ROOT = Path(__file__).resolve().parents[2]


def git(folder: Path, *arguments: str) -> str:
    """Git with a person of its own and no settings of this machine."""
    person = (
        "-c",
        "user.name=K. L.",
        "-c",
        "user.email=kl@example.org",
        "-c",
        "commit.gpgsign=false",
        "-c",
        "core.autocrlf=false",
        "-c",
        "init.defaultBranch=main",
    )
    finished = subprocess.run(
        ["git", *person, "-C", str(folder), *arguments], capture_output=True, text=True, check=True
    )
    return finished.stdout.strip()


@pytest.fixture
def repository(tmp_path: Path) -> Path:
    """A repository with three commits: revision A with its book, a raised allowance, a second raised."""
    folder = tmp_path / "repository"
    (folder / "calcs").mkdir(parents=True)
    git(folder, "init", "-q")
    (folder / "calcs" / "book.yaml").write_text(
        (EXAMPLES / "book.yaml").read_text(encoding="utf-8"), encoding="utf-8"
    )
    for text, message in (
        (STATED, "revision A"),
        (with_value(STATED, "R_fi", "3.5e-4 m^2 K/W"), "inspection"),
        (with_value(STATED, "R_fi", "4e-4 m^2 K/W"), "second inspection"),
    ):
        (folder / "calcs" / "cv-1.yaml").write_text(text, encoding="utf-8")
        git(folder, "add", "-A")
        git(folder, "commit", "-q", "-m", message)
    return folder


def issue(
    output: Path, text: str, revision: str, supersedes: str = "", recorded: dict[str, float] | None = None
) -> None:
    """An issued copy, with other recorded results where they are given."""
    folder = output / NUMBER / "issued" / revision
    folder.mkdir(parents=True)
    (folder / "calculation.yaml").write_text(
        text.replace("revision: A", f"revision: {revision}"), encoding="utf-8"
    )
    solved = solve_file(folder / "calculation.yaml")
    digest = digest_of(solved)
    results = json.loads(results_text(solved, digest, software_of(digest)))
    for name, value in (recorded or {}).items():
        results["results"][name]["value"] = value
    results["software"]["calcbook"] = "0.0.9"
    (folder / "results.json").write_text(json.dumps(results), encoding="utf-8")
    seal(folder, NUMBER, revision, supersedes)


# --- git ------------------------------------------------------------------------------------------------


def test_revisions_are_compared_from_git(repository: Path) -> None:
    comparison, _ = compare_texts(
        ("git:HEAD~2:calcs/cv-1.yaml", "git:HEAD~1:calcs/cv-1.yaml"), repository, None, ["U_service"]
    )
    assert [change.id for change in comparison.changes] == ["givens/R_fi"]
    # The check value of one raised allowance, see test_attribution.
    assert round(comparison.attributions[0].now, 2) == 587.46
    assert comparison.new.calculation.settings.name.startswith("Larkmoor"), (
        "the book settings of that revision"
    )


def test_a_file_on_disk_is_compared_with_git(repository: Path) -> None:
    old = load_side("git:HEAD~2:calcs/cv-1.yaml", repository, repository / "output")
    new = load_side("calcs/cv-1.yaml", repository, repository / "output")
    assert [(change.was, change.now) for change in compare(old, new).changes] == [
        ("1.8e-4 m^2 K/W", "4e-4 m^2 K/W")
    ]


def test_the_working_folder_may_be_any_folder_of_the_repository(repository: Path) -> None:
    inside = load_side("git:HEAD~1:cv-1.yaml", repository / "calcs", repository / "output")
    above = load_side(
        f"git:HEAD~1:{repository.name}/calcs/cv-1.yaml", repository.parent, repository / "output"
    )
    assert inside.digest == above.digest


def test_book_settings_of_the_git_revision_are_used(repository: Path) -> None:
    book = repository / "calcs" / "book.yaml"
    book.write_text(book.read_text(encoding="utf-8").replace("101.3 kPa", "95 kPa"), encoding="utf-8")
    comparison, _ = compare_texts(
        ("git:HEAD:calcs/cv-1.yaml", "calcs/cv-1.yaml"), repository, None, ["U_service"]
    )
    assert [(change.id, change.kind) for change in comparison.changes] == [
        ("book/site pressure", "book setting")
    ]


def test_a_shallow_clone_compares_as_far_as_its_history_reaches(repository: Path, tmp_path: Path) -> None:
    clone = tmp_path / "clone"
    git(tmp_path, "clone", "-q", "--depth", "1", repository.as_uri(), str(clone))
    side = load_side("git:HEAD:calcs/cv-1.yaml", clone, clone / "output")
    # By hand: the check value of revision A with 2.2e-4 m^2 K/W more on the inside area.
    by_hand = 1.0 / (1.0 / 673.91 + 2.2e-4 * 19.05 / 14.83)
    assert side.solved.base.results["U_service"].value == pytest.approx(by_hand, abs=0.01)
    with pytest.raises(Faults) as caught:
        load_side("git:HEAD~2:calcs/cv-1.yaml", clone, clone / "output")
    assert caught.value.faults[0].code == "git-revision-unknown"
    assert "shallow" in caught.value.faults[0].expected
    git(clone, "fetch", "-q", "--depth", "3")
    comparison, _ = compare_texts(
        ("git:origin/HEAD~2:calcs/cv-1.yaml", "calcs/cv-1.yaml"), clone, None, ["U_service"]
    )
    assert [change.id for change in comparison.changes] == ["givens/R_fi"]
    since = compare_since(clone, "origin/HEAD~1", ["U_service"])
    assert [item.new.calculation.number for item in since.compared] == [NUMBER]


@pytest.mark.parametrize(
    "revision", ["--output=x", "-h", "no such", "HEAD:x", "", "main..HEAD", "nowhere", "HEAD^{tree}"]
)
def test_what_is_no_revision_is_a_fault(repository: Path, revision: str) -> None:
    with pytest.raises(Faults) as caught:
        commit_of(repository, revision)
    assert [fault.code for fault in caught.value.faults] == ["git-revision-unknown"]


def test_faults_of_sides(repository: Path, tmp_path: Path) -> None:
    cases = {
        "git:HEAD:calcs/none.yaml": "git-file-unknown",
        "git:HEAD": "side-unreadable",
        "CV-1@Q": "issued-not-found",
        "calcs/none.yaml": "file-not-found",
    }
    for text, code in cases.items():
        with pytest.raises(Faults) as caught:
            load_side(text, repository, repository / "output")
        assert [fault.code for fault in caught.value.faults] == [code]
    with pytest.raises(Faults) as caught:
        commit_of(tmp_path, "HEAD")
    assert caught.value.faults[0].code == "git-revision-unknown", "no repository here"


def test_a_side_never_leaves_the_output_folder(tmp_path: Path) -> None:
    for text in ("../../x@A", "..@A", "CV-1@../A", "CV-1@.."):
        with pytest.raises(Faults) as caught:
            load_side(text, tmp_path, tmp_path / "output")
        assert caught.value.faults[0].code in ("file-not-found", "issued-not-found")
        assert "x" not in [path.name for path in tmp_path.iterdir()]


# --- since ----------------------------------------------------------------------------------------------


def test_since_tells_changed_new_gone_moved_and_broken_files(repository: Path) -> None:
    calcs = repository / "calcs"
    (calcs / "second.yaml").write_text(STATED.replace("CV-1", "CV-2"), encoding="utf-8")
    (calcs / "third.yaml").write_text(STATED.replace("CV-1", "CV-3"), encoding="utf-8")
    git(repository, "add", "-A")
    git(repository, "commit", "-q", "-m", "two more")
    (calcs / "cv-1.yaml").rename(calcs / "moved.yaml")
    moved = calcs / "moved.yaml"
    moved.write_text(with_value(moved.read_text(encoding="utf-8"), "h_o", "1400 W/(m^2 K)"), encoding="utf-8")
    (calcs / "second.yaml").unlink()
    (calcs / "fresh.yaml").write_text(STATED.replace("CV-1", "CV-4"), encoding="utf-8")
    (calcs / "third.yaml").write_text("# a remark\n" + STATED.replace("CV-1", "CV-3"), encoding="utf-8")
    (calcs / "broken.yaml").write_text(
        STATED.replace("CV-1", "CV-5").replace("14.83 mm", "14,83 mm"), encoding="utf-8"
    )
    since = compare_since(repository, "HEAD", ["U_service"])
    assert [item.new.calculation.number for item in since.compared] == ["CV-1"]
    assert [change.id for change in since.compared[0].changes] == ["givens/h_o"]
    assert [side.calculation.number for side in since.added] == ["CV-4"]
    assert [side.calculation.number for side in since.removed] == ["CV-2"]
    assert [side.calculation.number for side in since.same] == ["CV-3"]
    assert [path for path, _ in since.failed] == ["calcs/broken.yaml"]
    assert "number-decimal-comma" in since.failed[0][1]
    page = markdown(since_blocks(since))
    assert page.startswith("# Calculations changed since HEAD\n") and "calcs/broken.yaml has faults:" in page
    assert json.dumps(since_data(since), allow_nan=False)


def test_since_sees_a_changed_book_setting_in_every_file_of_the_folder(repository: Path) -> None:
    book = repository / "calcs" / "book.yaml"
    book.write_text(book.read_text(encoding="utf-8").replace("101.3 kPa", "95 kPa"), encoding="utf-8")
    since = compare_since(repository, "HEAD", ["U_service"])
    assert [change.id for item in since.compared for change in item.changes] == ["book/site pressure"]


# --- issued copies and what was recorded ----------------------------------------------------------------


def test_new_alone_is_compared_with_the_last_issued_revision_before_it(tmp_path: Path) -> None:
    output = tmp_path / "output"
    with pytest.raises(Faults) as caught:
        (tmp_path / "cv-1.yaml").write_text(STATED, encoding="utf-8")
        compare_texts(("cv-1.yaml",), tmp_path, output, ["U_service"])
    assert caught.value.faults[0].code == "nothing-issued"
    issue(output, STATED, "A")
    issue(output, with_value(STATED, "h_o", "1450 W/(m^2 K)"), "B", "A")
    text = with_value(STATED, "h_o", "1400 W/(m^2 K)").replace("revision: A", "revision: C")
    (tmp_path / "cv-1.yaml").write_text(text, encoding="utf-8")
    comparison, _ = compare_texts(("cv-1.yaml",), tmp_path, output, ["U_service"])
    assert (comparison.old.revision, comparison.old.state) == ("B", "issued, final")
    assert [change.was for change in comparison.inputs] == ["1450 W/(m^2 K)"]
    # A file whose own revision is issued is compared with the one that its copy supersedes.
    (tmp_path / "cv-1.yaml").write_text(text.replace("revision: C", "revision: B"), encoding="utf-8")
    assert compare_texts(("cv-1.yaml",), tmp_path, output, ["U_service"])[0].old.revision == "A"
    assert (
        compare_texts((f"{NUMBER}@A", f"{NUMBER}@B"), tmp_path, output, ["U_service"])[0].new.revision == "B"
    )


def test_the_part_of_the_software_stands_apart_from_that_of_the_inputs(tmp_path: Path) -> None:
    output = tmp_path / "output"
    issue(output, STATED, "A", recorded={"U_service": 680.0})
    (tmp_path / "cv-1.yaml").write_text(with_value(STATED, "R_fi", "3.5e-4 m^2 K/W"), encoding="utf-8")
    comparison, _ = compare_texts((f"{NUMBER}@A", "cv-1.yaml"), tmp_path, output, ["U_service"])
    parts = {part.name: part for part in comparison.software}
    service = parts["U_service"]
    assert service.recorded == 680.0
    assert (round(service.recomputed, 2), round(service.now, 2)) == (673.91, 587.46)
    assert service.software == pytest.approx(673.912 - 680.0, abs=1e-3)
    assert service.inputs == comparison.attributions[0].difference
    # What was recorded to 10 digits and is recomputed to the same is no part of the software.
    assert parts["U_clean"].software == 0.0
    assert comparison.old.software["calcbook"] == "0.0.9"


def test_what_the_software_moved_beside_what_is_asked_stands_there_too() -> None:
    """Another result and the state of a limit, as an older software would have recorded them."""
    side = load_side("calcs/wc-101.yaml", ROOT, ROOT / "output")
    assert side.results is not None and compare(side, side).software_checks == ()
    results = json.loads(json.dumps(side.results))
    check = results["checks"][0]
    assert check["state"] == "within"
    check["state"] = "outside"
    results["results"]["UA_service"]["value"] *= 1.1
    comparison = compare(replace(side, results=results), side)
    assert [part.name for part in comparison.software if part.software] == ["UA_service"]
    (moved,) = comparison.software_checks
    assert (moved.what, moved.was, moved.now) == (check["id"], "outside", "within")
    page = markdown(comparison_blocks(comparison))
    told = "with this software 1 limit of the old revision is in another state than recorded"
    assert told in markdown(short_blocks(comparison))
    assert f"| {check['id']} |" in page.partition("## The software's part")[2]


def test_what_is_recorded_of_limits_is_compared_as_far_as_it_goes() -> None:
    """A limit that is gone, a list that is damaged, a number that is none: as a merge may leave a results file."""
    side = load_side("calcs/wc-101.yaml", ROOT, ROOT / "output")

    def told(change: Callable[[Any], object]):
        results = json.loads(json.dumps(side.results))
        change(results)
        return compare(replace(side, results=results), side)

    gone = {"id": "hot film / gone", "condition": "service", "case": "", "state": "outside"}
    (moved,) = told(lambda results: results["checks"].append(gone)).software_checks
    assert (moved.what, moved.condition, moved.was, moved.now) == (
        "hot film / gone",
        "service",
        "outside",
        "not there",
    )
    for damage in (None, [], {}, "x"):
        assert (
            told(lambda results, damage=damage: results.update(checks=damage, cases=damage)).software_checks
            is None
        )
    for number in (10**400, True, math.nan, "7"):
        changed = told(lambda results, number=number: results["results"]["UA_service"].update(value=number))
        assert not [part for part in changed.software if part.software]


def test_results_of_other_content_are_not_taken_for_those_of_this_file(tmp_path: Path) -> None:
    output = tmp_path / "output"
    issue(output, STATED, "A")
    record = output / NUMBER / "results.json"
    record.write_bytes((output / NUMBER / "issued" / "A" / "results.json").read_bytes())
    (tmp_path / "same.yaml").write_text("# a remark\n" + STATED, encoding="utf-8")
    (tmp_path / "other.yaml").write_text(with_value(STATED, "h_o", "1400 W/(m^2 K)"), encoding="utf-8")
    assert load_side("same.yaml", tmp_path, output).recorded["U_service"] == pytest.approx(673.91, abs=0.005)
    assert load_side("other.yaml", tmp_path, output).results is None
    record.write_text("[]", encoding="utf-8")
    with pytest.raises(Faults) as caught:
        load_side("same.yaml", tmp_path, output)
    assert caught.value.faults[0].code == "results-unreadable"


# --- the command ----------------------------------------------------------------------------------------


def test_the_command_prints_and_writes_the_page(repository: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(repository)
    run = CliRunner().invoke(
        main, ["compare", "git:HEAD~2:calcs/cv-1.yaml", "calcs/cv-1.yaml", "--result", "U_clean"]
    )
    assert run.exit_code == 0, run.output
    assert run.output == (repository / "output" / NUMBER / "comparison.md").read_text(encoding="utf-8")
    assert str(repository) not in run.output
    again = CliRunner().invoke(
        main, ["compare", "git:HEAD~2:calcs/cv-1.yaml", "calcs/cv-1.yaml", "--format", "json"]
    )
    assert json.loads(again.output)["attributions"][0]["result"] == "U_service"


def test_exit_codes_of_the_command(repository: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(repository)
    run = CliRunner().invoke
    for arguments, code in (
        ([], 2),
        (["a", "b", "c"], 2),
        (["calcs/cv-1.yaml", "--since", "HEAD"], 2),
        (["calcs/cv-1.yaml"], 2),
        (["--since", "HEAD"], 0),
        (["--since", "HEAD~1"], 0),
        (["calcs/cv-1.yaml", "calcs/cv-1.yaml", "--result", "U"], 2),
    ):
        assert run(main, ["compare", *arguments]).exit_code == code, arguments
    (repository / "calcs" / "broken.yaml").write_text("calculation: {number: X-1}\n", encoding="utf-8")
    assert run(main, ["compare", "--since", "HEAD"]).exit_code == 2


# --- links ----------------------------------------------------------------------------------------------

TAKER = STATED.replace("CV-1", "TK-2").replace(
    "h_o:  {value: 1500 W/(m^2 K), is: outside film coefficient, source: data sheet 2}",
    "h_o:  {is: outside film coefficient, from: {calculation: CV-1, result: U_service}}",
)


def test_a_given_taken_from_another_calculation_changes_with_its_source(repository: Path) -> None:
    """In git the source stands beside the file as it stood then."""
    calcs = repository / "calcs"
    (calcs / "tk-2.yaml").write_text(TAKER, encoding="utf-8")
    git(repository, "add", "-A")
    git(repository, "commit", "-q", "-m", "a calculation that is fed")
    source = calcs / "cv-1.yaml"
    source.write_text(
        with_value(source.read_text(encoding="utf-8"), "R_fi", "1e-4 m^2 K/W"), encoding="utf-8"
    )
    comparison, _ = compare_texts(
        ("git:HEAD:calcs/tk-2.yaml", "calcs/tk-2.yaml"), repository, None, ["U_service"]
    )
    (change,) = comparison.changes
    assert change.id == "givens/h_o" and change.moves
    assert change.quantity_was is not None and change.quantity_now is not None
    assert change.quantity_was.value < change.quantity_now.value
    (attribution,) = comparison.attributions
    assert attribution.difference > 0.0 and abs(attribution.rest) <= 1e-9 * attribution.was


def test_a_comparison_names_what_the_calculation_feeds(repository: Path) -> None:
    (repository / "calcs" / "tk-2.yaml").write_text(TAKER, encoding="utf-8")
    comparison, _ = compare_texts(
        ("git:HEAD~1:calcs/cv-1.yaml", "calcs/cv-1.yaml"), repository, None, ["U_service"]
    )
    assert comparison.feeds == ("TK-2: h_o is U_service of the file as it stands",)
