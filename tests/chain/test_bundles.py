"""Bundles: tubes that carry flow, tubes that transfer heat, passes, and the length that counts for which."""

from __future__ import annotations

import math

import pytest
from small_calculations import COOLER, chain_of

from calcbook.chain.solve import solve
from calcbook.chain.types import SERVICE
from calcbook.faults import Faults
from calcbook.interface import record_text, solve_file

PARALLEL = "length: L, parallel: N}"


def bundle(geometry: str) -> str:
    assert PARALLEL in COOLER
    return COOLER.replace(PARALLEL, geometry + "}")


def solved(tmp_path, body):
    chain = chain_of(tmp_path, body)
    return chain, solve(chain, chain.case_inputs(""), SERVICE)


def codes(tmp_path, body) -> list[str]:
    with pytest.raises(Faults) as caught:
        chain_of(tmp_path, body)
        solve_file(tmp_path / "trial.yaml")
    return [fault.code for fault in caught.value.faults]


WHOLE = """length: L, tubes: {value: 130, source: drawing}, passes: {value: 2, source: drawing},
  plugged: {count: 6, source: inspection report}, effective length: {value: 4.7 m, source: drawing}"""


def test_open_tubes_share_the_flow_pass_by_pass(tmp_path):
    """(130 - 6)/2 = 62 tubes share the flow: the speed is that of 62 tubes in parallel."""
    chain, found = solved(tmp_path, bundle(WHOLE))
    _, plain = solved(tmp_path, COOLER)
    assert found.number("geometry/tubes in parallel") == 62.0
    assert found.number("tube film/speed") == pytest.approx(plain.number("tube film/speed"), rel=1e-12)
    speed = 18.2 / (found.number("stream hot/density") * 62 * math.pi / 4 * 0.01575**2)
    assert found.number("tube film/speed") == pytest.approx(speed, rel=1e-12)
    # Every open tube transfers heat, along the effective length.
    area = math.pi * 0.01905 * 4.7 * 124
    assert found.number(chain.surfaces[chain.basis].area) == pytest.approx(area, rel=1e-12)
    assert found.number(chain.results["UA"]) == pytest.approx(
        found.number(chain.results["U"]) * area, rel=1e-12
    )


def test_the_heat_transfer_methods_take_the_effective_length(tmp_path):
    """The entrance term (d/L)^(2/3) of the tube side follows the heated length, 4.7 m."""
    _, short = solved(tmp_path, bundle(WHOLE))
    _, same = solved(tmp_path, COOLER.replace("length: L,", "length: {value: 4.7 m, source: drawing},"))
    assert short.number("tube film/h of tube film") == pytest.approx(
        same.number("tube film/h of tube film"), rel=1e-12
    )


def test_a_bundle_of_one_pass_is_tubes_in_parallel(tmp_path):
    chain, found = solved(tmp_path, bundle("length: L, tubes: N"))
    _, plain = solved(tmp_path, COOLER)
    for name in ("U", "UA", "heat flow"):
        assert found.number(chain.results[name]) == plain.number(chain.results[name])
    assert any(item.id == "geometry/passes" for item in chain.assumptions)


def test_plugging_raises_the_speed_and_lowers_the_conductance(tmp_path):
    def body(count):
        return bundle(
            f"length: L, tubes: {{value: 124, source: drawing}}, passes: {{value: 2, source: drawing}},"
            f" plugged: {{count: {count}, source: inspection report}}"
        )

    _, few = solved(tmp_path, body(2))
    chain, many = solved(tmp_path, body(12))
    assert many.number("tube film/speed") / few.number("tube film/speed") == pytest.approx(
        122 / 112, rel=1e-12
    )
    assert many.number(chain.results["UA"]) < few.number(chain.results["UA"])
    assert many.number(chain.results["U"]) > few.number(chain.results["U"])


def test_the_record_has_a_row_for_each(tmp_path):
    chain_of(tmp_path, bundle(WHOLE))
    text = record_text(solve_file(tmp_path / "trial.yaml"))
    for row in (
        "| tubes of geometry | 130 |",
        "| passes of geometry | 2 |",
        "| plugged of geometry | 6 |",
        "| effective length of geometry | 4.7 m |",
        "130 − 6",
        "124/2",
    ):
        assert row in text, row
    assert "inspection report" in text


def test_a_count_without_source_is_open(tmp_path):
    chain = chain_of(tmp_path, bundle("length: L, tubes: N, plugged: {count: 6}"))
    assert "geometry/plugged/source" in [item.id for item in chain.open_items]


def test_faults_of_bundles(tmp_path):
    assert codes(tmp_path, bundle("length: L, parallel: N, tubes: N")) == ["key-conflict"]
    assert codes(tmp_path, bundle("length: L, plugged: {count: 6, source: x y}")) == ["key-missing"]
    assert codes(tmp_path, bundle("length: L, tubes: N, plugged: {count: 6.5, source: x y}")) == [
        "number-unreadable"
    ]
    # 62 plugged of 62: no tube is open, and no pass has one.
    assert set(codes(tmp_path, bundle("length: L, tubes: N, plugged: {count: 62, source: x y}"))) == {
        "limit-stops"
    }
    assert set(codes(tmp_path, bundle("length: L, tubes: N, passes: {value: 80, source: x y}"))) == {
        "limit-stops"
    }
    assert set(
        codes(tmp_path, bundle("length: L, tubes: N, effective length: {value: 5 m, source: x y}"))
    ) == {"limit-stops"}
    assert codes(tmp_path, bundle("length: L, tubes: N, plugged: {source: x y}")) == ["key-missing"]
