"""Cases beside the base case."""

from __future__ import annotations

from pathlib import Path

from calcbook.interface import record_text, solve_file

CALCULATIONS = Path(__file__).resolve().parents[2] / "calcs"


def test_a_case_with_the_figures_of_the_base_case_has_its_results(tmp_path: Path) -> None:
    """Nothing moves between the cases: both are the one sample that is solved."""
    text = (CALCULATIONS / "wc-101.yaml").read_text(encoding="utf-8")
    old = "T_cold: {value: 12 degC, source: heat balance sheet 14}\n    T_hot:  {value: 66 degC"
    assert old in text
    base = {
        symbol: text.split(f"\n  {symbol}:", 1)[1].split("value: ", 1)[1].split(",")[0]
        for symbol in ("T_cold", "T_hot")
    }
    new = f"T_cold: {{value: {base['T_cold']}, source: heat balance sheet 14}}\n    T_hot:  {{value: {base['T_hot']}"
    path = tmp_path / "wc-101.yaml"
    path.write_text(text.replace(old, new), encoding="utf-8")
    solved = solve_file(path)
    first, same = solved.cases
    assert same.name == "winter"
    assert {name: one.value for name, one in same.results.items()} == {
        name: first.results[name].value for name in same.results
    }
    assert "winter" in record_text(solved)
