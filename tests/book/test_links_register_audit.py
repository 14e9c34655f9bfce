"""A book as a whole: calculations that take from each other, the register, the audit."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest
from click.testing import CliRunner, Result

from calcbook.book.auditing import audit
from calcbook.book.entries import read_entries
from calcbook.book.finding import find_calculations
from calcbook.commands import main
from calcbook.faults import Collector, Faults
from calcbook.interface import record_text, solve_file
from calcbook.library.errata import Erratum, read_errata

ROOT = Path(__file__).resolve().parents[2]
GOOD = (Path(__file__).resolve().parents[2] / "calcs/wc-101.yaml").read_text(encoding="utf-8")
HOT = (
    "T_hot:  {value: 74 degC,   is: mean hot temperature,   source: heat balance sheet 12, tolerance: 0.5 K}"
)
FILM = "{name: T, kind: film, coefficient: X, on: %s, temperature: T_hot}"
STATED = "{name: T, kind: stated, resistance: X, on: %s}"
FED = "T_hot:  {from: {calculation: S-1, result: T inside surface service}, is: surface of the source}"


def invoke(*words: str) -> Result:
    return CliRunner().invoke(main, list(words), catch_exceptions=False)


@pytest.fixture
def book(tmp_path: Path) -> Path:
    """A source and a calculation that it feeds, with their records."""
    folder = tmp_path / "calcs"
    folder.mkdir()
    (folder / "book.yaml").write_text("book: A test book\noutput: ../output\n", encoding="utf-8")
    (folder / "source.yaml").write_text(GOOD.replace("number: WC-101", "number: S-1"), encoding="utf-8")
    assert HOT in GOOD
    fed = GOOD.replace("number: WC-101", "number: F-1").replace(HOT, FED)
    (folder / "fed.yaml").write_text(fed, encoding="utf-8")
    assert invoke("run", str(folder)).exit_code == 0
    return folder


def test_a_given_takes_the_figure_of_its_source(book: Path) -> None:
    source = solve_file(book / "source.yaml")
    fed = solve_file(book / "fed.yaml")
    wanted = source.base.results["T inside surface service"].value
    # Ten digits travel from one calculation to the other, as the results file stores them.
    assert fed.base.inputs["given/T_hot"] == pytest.approx(wanted, rel=1e-9)
    given = fed.chain.calculation.givens["T_hot"]
    assert given.link is not None and given.link.revision == "B"
    assert given.source.startswith("calculation S-1 revision B, T inside surface service, digest ")
    words = "T_hot is a result of calculation S-1; what that says of its uncertainty does not come with it"
    assert words in record_text(fed) and "does not come with it" not in record_text(source)


@pytest.mark.parametrize(("revision", "told"), [("", "unpinned"), (", revision: A", "issued")])
def test_an_allowance_on_another_surface_is_an_open_item(revision: str, told: str, tmp_path: Path) -> None:
    """A resistance of 1 m2 of the outside is d_i/d_o times as much on 1 m2 of the inside: common practice."""
    calcs, output = tmp_path / "calcs", tmp_path / "output"
    shutil.copytree(ROOT / "calcs", calcs)
    shutil.copytree(ROOT / "output" / "WC-111" / "issued", output / "WC-111" / "issued")
    path = calcs / "wc-112.yaml"
    text = path.read_text(encoding="utf-8")
    pinned = "result: allowance_proposed, revision: A"
    placed = "resistance: R_fo, on: outside"
    assert text.count(pinned) == text.count(placed) == 1
    text = text.replace(pinned, f"result: allowance_proposed{revision}")
    name = "shell-side deposit/linked surface"
    path.write_text(text, encoding="utf-8")
    assert name not in {item.id for item in solve_file(path).open_items}
    lines = text.split("\n")
    deposit = next(line for line in lines if placed in line)
    lines.remove(deposit)
    film = next(place for place, line in enumerate(lines) if "name: tube wall" in line)
    lines.insert(film, deposit.replace("on: outside", "on: inside"))
    path.write_text("\n".join(lines), encoding="utf-8")
    items = {item.id: item.text for item in solve_file(path).open_items}
    assert "counts on the surface outside there, and acts on inside" in items[name], told


@pytest.mark.parametrize("pin", ["", ", revision: A"])
@pytest.mark.parametrize(
    ("result", "term", "right", "wrong", "here"),
    [
        ("h tube-side film service", FILM, "inside", "outside", "outside"),
        ("U_service", FILM, "outside", "inside", "inside"),
        ("R tube wall service", STATED, "outside", "inside", "inside"),
    ],
)
def test_a_figure_on_another_surface_is_an_open_item_whatever_term_takes_it(
    result: str, term: str, right: str, wrong: str, here: str, pin: str, tmp_path: Path
) -> None:
    """A coefficient of 1 m2 of the inside is d_i/d_o of it on 1 m2 of the outside: common practice."""
    calcs, output = tmp_path / "calcs", tmp_path / "output"
    shutil.copytree(ROOT / "calcs", calcs)
    shutil.copytree(ROOT / "output" / "WC-101" / "issued", output / "WC-101" / "issued")
    path = calcs / "wc-102.yaml"
    text = path.read_text(encoding="utf-8")
    text = text.replace("result: h tube-side film service, revision: A", f"result: {result}{pin}")
    text = text.replace("  h_i:\n", "  X:\n")
    film = next(line for line in text.split("\n") if "coefficient: h_i" in line)
    for surface, found in ((right, False), (wrong, True)):
        lines = text.split("\n")
        own = "  - " + term % surface
        stated = "  - {name: in, kind: film, coefficient: {value: 9000 W/(m^2 K), source: test}, on: inside, temperature: T_hot}"
        place = lines.index(film)
        lines[place : place + 1] = [own] if "film" in term else [stated, own]
        path.write_text("\n".join(lines), encoding="utf-8")
        items = {item.id: item.text for item in solve_file(path).open_items}
        assert ("T/linked surface" in items) is found
    source = {"inside": "outside", "outside": "inside"}[here]
    assert f"counts on the surface {source} there, and acts on {here}" in items["T/linked surface"]


@pytest.mark.parametrize(("result", "told"), [("LMTD", True), ("T_hot_outlet", False)])
def test_a_difference_of_temperatures_is_no_temperature(result: str, told: bool, tmp_path: Path) -> None:
    shutil.copytree(ROOT / "calcs", tmp_path / "calcs")
    path = tmp_path / "calcs" / "wc-102.yaml"
    text = path.read_text(encoding="utf-8")
    hot = next(line for line in text.split("\n") if line.startswith("  T_hot:"))
    linked = f"  T_hot: {{from: {{calculation: WC-105, result: {result}}}, is: linked}}"
    text = text.replace(hot, linked).replace(
        "result: h tube-side film service, revision: A", "result: h tube-side film service"
    )
    path.write_text(text, encoding="utf-8")
    if not told:
        assert solve_file(path).base.inputs["given/T_hot"] == pytest.approx(341.95, abs=0.5)
        return
    with pytest.raises(Faults) as caught:
        solve_file(path)
    (fault,) = caught.value.faults
    assert fault.code == "unit-dimension"
    assert fault.message == "LMTD of WC-105 is a temperature difference"


def test_a_source_that_is_not_pinned_or_preliminary_is_an_open_item(book: Path) -> None:
    items = {item.id: item.text for item in solve_file(book / "fed.yaml").open_items}
    assert "preliminary, 1 open item(s), and not pinned" in items["given/T_hot/link"]


def test_a_changed_source_moves_what_it_feeds(book: Path) -> None:
    before = solve_file(book / "fed.yaml").base.results["U_service"].value
    source = book / "source.yaml"
    source.write_text(source.read_text(encoding="utf-8").replace("74 degC", "80 degC"), encoding="utf-8")
    assert solve_file(book / "fed.yaml").base.results["U_service"].value != before


@pytest.mark.parametrize(
    ("link", "code"),
    [
        ("{calculation: S-2, result: U_service}", "link-source-unknown"),
        ("{calculation: S-1, result: U_servise}", "link-result-unknown"),
        ("{calculation: S-1, result: U_service, revision: A}", "link-revision-unknown"),
        ("{calculation: S-1, result: U_service}", "unit-dimension"),
        ("{calculation: F-1, result: T inside surface service}", "link-circular"),
    ],
)
def test_a_link_that_leads_nowhere_is_a_fault(book: Path, link: str, code: str) -> None:
    fed = book / "fed.yaml"
    text = fed.read_text(encoding="utf-8").replace(
        "{calculation: S-1, result: T inside surface service}", link
    )
    fed.write_text(text, encoding="utf-8")
    with pytest.raises(Faults) as caught:
        solve_file(fed)
    assert code in {fault.code for fault in caught.value.faults}


def test_a_link_takes_nothing_from_an_issued_copy_that_was_altered(tmp_path: Path) -> None:
    """The issued copy of the example book, with one digit of its results changed, or another file added."""
    shutil.copytree(ROOT / "calcs", tmp_path / "calcs")
    shutil.copytree(ROOT / "output" / "WC-101", tmp_path / "output" / "WC-101")
    fed, results = tmp_path / "calcs" / "wc-102.yaml", tmp_path / "output/WC-101/issued/A/results.json"
    before = solve_file(fed).base.results["U_service"].value
    text = results.read_text(encoding="utf-8")
    results.write_text(text.replace('"value": 1', '"value": 2', 1), encoding="utf-8")
    with pytest.raises(Faults) as caught:
        solve_file(fed)
    (fault,) = caught.value.faults
    assert (fault.code, fault.place.line) == ("issued-altered", 21)
    assert "results.json: the file was altered after the issue" in fault.found
    results.write_text(text, encoding="utf-8")
    assert solve_file(fed).base.results["U_service"].value == before


def test_a_link_finds_its_source_by_the_number_of_the_title_alone(book: Path) -> None:
    """A text that names the number, in a file that stands first, is no calculation of that number."""
    before = solve_file(book / "fed.yaml").base.inputs["given/T_hot"]
    other = GOOD.replace("number: WC-101", "number: OTHER-1").replace("74 degC", "61 degC")
    (book / "aa.yaml").write_text(
        f"# number: S-1\n{other}notes: |\n  number: S-1 of last year\n", encoding="utf-8"
    )
    first = f"purpose: |\n  number: S-1 of last year.\n{other.split('purpose:')[0]}"
    (book / "ab.yaml").write_text(first, encoding="utf-8")
    assert solve_file(book / "fed.yaml").base.inputs["given/T_hot"] == before


def test_a_link_to_a_number_in_two_files_is_a_fault(book: Path) -> None:
    shutil.copy(book / "source.yaml", book / "again.yaml")
    with pytest.raises(Faults) as caught:
        solve_file(book / "fed.yaml")
    (fault,) = caught.value.faults
    assert (fault.code, fault.found) == ("number-in-two-files", "again.yaml, source.yaml")


def test_a_draft_that_cannot_be_read_is_no_second_source(book: Path) -> None:
    before = solve_file(book / "fed.yaml").base.inputs["given/T_hot"]
    (book / "draft.yaml").write_text("calculation:\n  number: S-1\n  title: [x\n", encoding="utf-8")
    assert solve_file(book / "fed.yaml").base.inputs["given/T_hot"] == before


def test_calculations_that_take_from_each_other_in_a_long_row_are_told(tmp_path: Path) -> None:
    count = 40
    for number in range(count):
        text = GOOD.replace("number: WC-101", f"number: S-{number}")
        if number + 1 < count:
            text = text.replace(HOT, FED.replace("S-1,", f"S-{number + 1},"))
        (tmp_path / f"s{number:02d}.yaml").write_text(text, encoding="utf-8")
    with pytest.raises(Faults) as caught:
        solve_file(tmp_path / "s00.yaml")
    assert {fault.code for fault in caught.value.faults} == {"link-too-deep"}
    assert solve_file(tmp_path / f"s{count - 3}.yaml", for_record=False).base.results["U_service"].value > 0.0


def test_a_circle_over_two_calculations_is_told(book: Path) -> None:
    source = book / "source.yaml"
    back = "T_hot:  {from: {calculation: F-1, result: T inside surface service}, is: surface of the other}"
    source.write_text(source.read_text(encoding="utf-8").replace(HOT, back), encoding="utf-8")
    with pytest.raises(Faults) as caught:
        solve_file(source)
    assert "link-circular" in {fault.code for fault in caught.value.faults}


def test_the_register_lists_every_calculation_with_what_it_takes_and_feeds(book: Path) -> None:
    result = invoke("register", str(book))
    assert result.exit_code == 0
    text = (book.parent / "output/register.md").read_text(encoding="utf-8")
    assert result.stdout == text
    rows = {
        row[1]: row
        for row in ([cell.strip() for cell in line.split("|")] for line in text.splitlines())
        if len(row) > 5
    }
    assert rows["S-1"][4:6] == ["in preparation", "preliminary"]
    assert rows["S-1"][10] == "F-1 (T_hot)"
    assert rows["F-1"][9].startswith("S-1 (T_hot; preliminary")
    data = json.loads(invoke("register", str(book), "--format", "json").stdout)
    assert [item["number"] for item in data] == ["F-1", "S-1"]
    assert data[1]["U_service"] == "1130 W/(m²·K)"


def kinds(book: Path) -> dict[str, str]:
    collector = Collector()
    entries = read_entries(find_calculations([book], None, collector), 1)
    return {finding.kind: finding.text for finding in audit(entries)}


def test_an_audit_of_a_current_book_finds_only_the_link_that_is_not_pinned(book: Path) -> None:
    assert set(kinds(book)) == {"link"}


def test_an_audit_finds_a_record_that_is_not_current(book: Path) -> None:
    source = book / "source.yaml"
    source.write_text(source.read_text(encoding="utf-8").replace("0.00035", "0.00036"), encoding="utf-8")
    found = kinds(book)
    assert "record not current" in found
    assert invoke("audit", str(book)).exit_code == 1


def test_an_audit_finds_a_stored_value_that_was_altered(book: Path) -> None:
    results = book.parent / "output/S-1/results.json"
    data = json.loads(results.read_text(encoding="utf-8"))
    data["results"]["U_service"]["value"] *= 1.00000001
    results.write_text(json.dumps(data), encoding="utf-8")
    assert "/results/U_service/value" in kinds(book)["record not current"]


def test_an_audit_passes_values_that_differ_in_the_last_place(book: Path) -> None:
    results = book.parent / "output/S-1/results.json"
    data = json.loads(results.read_text(encoding="utf-8"))
    # 1e-10 relative is below the 1e-9 that processors are allowed to differ by.
    data["results"]["U_service"]["value"] *= 1 + 1e-10
    results.write_text(json.dumps(data), encoding="utf-8")
    assert set(kinds(book)) == {"link"}


def test_an_audit_finds_a_missing_record_and_a_fault(book: Path) -> None:
    (book.parent / "output/S-1/record.md").unlink()
    (book / "wrong.yaml").write_text("calculation: {number: X-1}\n", encoding="utf-8")
    result = invoke("audit", str(book), "--format", "markdown")
    assert result.exit_code == 1
    assert "record missing" in result.stdout and "fault key-missing" in result.stdout


def test_an_audit_misses_the_sign_offs_of_an_issued_calculation(tmp_path: Path) -> None:
    for folder in ("calcs", "output"):
        shutil.copytree(ROOT / folder, tmp_path / folder)
    assert not kinds(tmp_path / "calcs")
    (tmp_path / "calcs/wc-101.signoffs.yaml").unlink()
    assert "sign-offs missing" in kinds(tmp_path / "calcs")


def test_the_errata_file_reads_and_an_erratum_names_its_card(tmp_path: Path) -> None:
    assert read_errata() == ()
    path = tmp_path / "errata.yaml"
    path.write_text(
        "errata:\n  - {card: gnielinski-1976, versions: [0.1.0], wrong: a constant, mended in: 0.1.1}\n",
        encoding="utf-8",
    )
    assert read_errata(path) == (Erratum("gnielinski-1976", ("0.1.0",), "a constant", "0.1.1"),)
