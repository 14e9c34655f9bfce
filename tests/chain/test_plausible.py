"""Plausible bands: the slipped decimal, the wrong unit, the swapped pair are named; nothing is blocked."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from small_calculations import (
    COOLER_GIVENS,
    COOLER_REST,
    OIL,
    SPHERE,
    STATED,
    analysed,
    chain_of,
    givens,
    insulated_pipe,
)

from calcbook.chain.outcome import CheckResult, Solved
from calcbook.chain.plausible import FILMS, PAIRS, figures
from calcbook.chain.types import CLEAN, CONDITIONS, SERVICE
from calcbook.faults import Faults
from calcbook.library.plausibility import bands
from calcbook.record import record_text


def cooler(**changes: str) -> str:
    return givens(**(COOLER_GIVENS | changes)) + COOLER_REST


def cautions(solved: Solved, condition: str = SERVICE) -> dict[str, CheckResult]:
    """What lies outside its band or far from its service, by id."""
    return {
        check.id: check
        for check in solved.base.checks
        if check.condition == condition and (" / band / " in check.id or " / typical / " in check.id)
    }


@pytest.mark.parametrize("body", [cooler(), OIL, SPHERE, STATED, insulated_pipe()], ids=range(5))
def test_a_sound_calculation_lies_within_every_band(tmp_path: Path, body: str) -> None:
    solved = analysed(tmp_path, body)
    assert cautions(solved) == {} and cautions(solved, CLEAN) == {}
    known = bands()
    held = list(figures(solved.chain, solved.base.solutions[SERVICE]))
    assert len(held) >= 6
    for figure in held:
        assert known[figure.band].low <= figure.value <= known[figure.band].high


@pytest.mark.parametrize(
    ("change", "expected"),
    [
        # a decimal slipped
        ({"d_i": "1.575 mm"}, {"geometry / band / tube bore"}),
        ({"R_fo": "0.035 m^2 K/W"}, {"outer deposit / band / fouling allowance"}),
        ({"R_fi": "0.0000009 m^2 K/W"}, {"inner deposit / band / fouling allowance"}),
        ({"h_o": "0.52 W/(m^2 K)"}, {"shell film / band / stated film coefficient"}),
        ({"m_hot": "182 kg/s"}, {"tube film / band / velocity of a liquid in tubes"}),
        # a wrong unit
        ({"L": "4.88 mm"}, {"geometry / band / tube length"}),
        (
            {"d_i": "15.75 in", "d_o": "19.05 in"},
            {"geometry / band / tube bore", "geometry / band / tube outside diameter"},
        ),
        ({"m_hot": "18.2 kg/h"}, {"tube film / band / flow per tube"}),
        # a pair swapped: length and outside diameter
        (
            {"L": "19.05 mm", "d_o": "4.88 m"},
            {
                "geometry / band / tube length",
                "geometry / band / tube outside diameter",
                "tube wall / band / tube wall thickness",
            },
        ),
    ],
)
def test_a_slip_in_an_input_is_a_caution_that_names_the_band(
    tmp_path: Path, change: dict[str, str], expected: set[str]
) -> None:
    solved = analysed(tmp_path, cooler(**change))
    found = cautions(solved)
    assert expected <= set(found)
    for name in expected:
        check = found[name]
        band = bands()[check.id.rpartition(" / ")[2]]
        assert check.level == "caution" and check.state == "outside"
        assert check.because == f"plausible band of {band.place}: {band.because}"
        assert (check.source, check.standing) == (band.source, band.standing)
        assert not band.low <= check.value <= band.high


def test_the_flow_and_the_number_of_tubes_swapped_are_told(tmp_path: Path) -> None:
    found = cautions(analysed(tmp_path, cooler(m_hot="62 kg/s", N="18")))
    assert "tube film / band / velocity of a liquid in tubes" in found


def test_a_result_outside_its_band_is_told_where_no_input_is(tmp_path: Path) -> None:
    # every input within its band; the oil is so slow and cold that the results are not
    body = OIL.replace("45 W/(m K)", "6 W/(m K)").replace("6 kg/s", "0.09 kg/s")
    body = body.replace("0.0002 m^2 K/W", "0.0049 m^2 K/W").replace("0.0001 m^2 K/W", "0.0049 m^2 K/W")
    found = cautions(analysed(tmp_path, body))
    assert "oil film / band / velocity of a liquid in tubes" in found
    assert found["oil film / band / velocity of a liquid in tubes"].value < 0.1


def test_a_caution_never_blocks_and_fills_nothing_in(tmp_path: Path) -> None:
    solved = analysed(tmp_path, cooler(R_fo="0.035 m^2 K/W"))
    assert solved.open_items == ()
    assert solved.base.inputs["given/R_fo"] == 0.035
    page = record_text(solved)
    row = next(line for line in page.splitlines() if "outer deposit / band / fouling allowance" in line)
    assert "R = 0.035 m²·K/W" in row and "1e\u22125 to 0.005 m²·K/W" in row
    assert "outside (common practice)" in row and "caution" in row


def test_an_allowance_is_judged_in_service_only_and_one_of_nothing_is_not(tmp_path: Path) -> None:
    solved = analysed(tmp_path, cooler(R_fo="0.035 m^2 K/W"))
    name = "outer deposit / band / fouling allowance"
    assert name in cautions(solved) and name not in cautions(solved, CLEAN)
    assert cautions(analysed(tmp_path, cooler(R_fo="0 m^2 K/W"))) == {}


def test_a_case_is_held_against_the_bands_like_the_base(tmp_path: Path) -> None:
    body = cooler() + "cases:\n  slip: {m_hot: {value: 182 kg/s, source: test}}\n"
    solved = analysed(tmp_path, body)
    slip = next(case for case in solved.cases if case.name == "slip")
    ids = {check.id for check in slip.checks if check.condition == SERVICE}
    assert "tube film / band / velocity of a liquid in tubes" in ids
    assert cautions(solved) == {}


@pytest.mark.parametrize(
    ("material", "speed", "warned"),
    [
        ("admiralty-c44300-cda", "2.1 m/s", True),
        ("admiralty-c44300-cda", "1.9 m/s", False),
        ("cupronickel-9010-cda", "2.5 m/s", True),
        ("stainless-316-kaschnitz-2017", "4.6 m/s", True),
        ("titanium-grade-2-asm", "4.9 m/s", False),
    ],
)
def test_the_window_of_speed_belongs_to_the_tube_metal(
    tmp_path: Path, material: str, speed: str, warned: bool
) -> None:
    body = cooler(m_hot=speed).replace("stainless-316-kaschnitz-2017", material)
    found = [
        name
        for name in cautions(analysed(tmp_path, body))
        if name.startswith("tube film / band / velocity in")
    ]
    assert bool(found) is warned


def test_every_edge_of_a_band_belongs_to_it(tmp_path: Path) -> None:
    band = bands()["fouling allowance"]
    for text, outside in (
        (f"{band.high!r} m^2 K/W", False),
        (f"{math.nextafter(band.high, 1.0)!r} m^2 K/W", True),
        (f"{band.low!r} m^2 K/W", False),
        (f"{math.nextafter(band.low, 0.0)!r} m^2 K/W", True),
    ):
        found = cautions(analysed(tmp_path, cooler(R_fi=text)))
        assert ("inner deposit / band / fouling allowance" in found) is outside


def test_a_metal_with_a_decimal_slipped_is_told_and_an_insulation_is_not_called_metal(tmp_path: Path) -> None:
    found = cautions(analysed(tmp_path, STATED.replace("16 W/(m K)", "1.6 W/(m K)")))
    assert set(found) == {"wall / band / wall conductivity of metals"}
    solved = analysed(tmp_path, insulated_pipe())
    held = {(figure.owner, figure.band) for figure in figures(solved.chain, solved.base.solutions[SERVICE])}
    assert ("insulation", "wall conductivity of insulations") in held
    assert ("insulation", "insulation thickness") in held
    # an insulated surface has no usual U
    assert not any(band.startswith("U ") for _, band in held)


def held_in(folder: Path, body: str) -> dict[tuple[str, str], float]:
    """Every figure in service that has a band in its place."""
    solved = analysed(folder, body)
    found = figures(solved.chain, solved.base.solutions[SERVICE])
    return {(figure.owner, figure.band): figure.value for figure in found}


def test_a_tube_wall_has_the_thickness_between_its_diameters_and_a_lining_another_band(
    tmp_path: Path,
) -> None:
    """(19.05 − 15.75)/2 mm of the tube; the layer of 0.5 mm about it is a wall, and no tube."""
    lining = "  - {name: sleeve, kind: wall, material: copper-c12200-cda, thickness: {value: 0.5 mm, source: test}}\n"
    body = cooler().replace("  - {name: outer deposit,", lining + "  - {name: outer deposit,")
    assert lining in body
    held = held_in(tmp_path, body)
    assert held["tube wall", "tube wall thickness"] == pytest.approx(1.65e-3, rel=1e-12)
    assert held["sleeve", "metal wall thickness"] == pytest.approx(0.5e-3, rel=1e-12)
    assert ("sleeve", "tube wall thickness") not in held


def test_the_flow_of_one_tube_alone_is_no_flow_per_tube(tmp_path: Path) -> None:
    """18.2 kg/s in 62 tubes are 0.29 kg/s in each; one tube alone is held by its speed only."""
    many, one = cooler(), cooler(N="1", m_hot="0.3 kg/s")
    assert held_in(tmp_path, many)["tube film", "flow per tube"] == pytest.approx(18.2 / 62.0, rel=1e-12)
    held = held_in(tmp_path, one)
    assert ("tube film", "flow per tube") not in held
    assert ("tube film", "velocity of a liquid in tubes") in held


def test_a_wall_that_conducts_as_no_metal_does_leaves_no_usual_coefficient(tmp_path: Path) -> None:
    """A second wall of 0.04 W/(m K) without a card: what its U is depends on its thickness alone."""
    wall = (
        "  - {name: cover, kind: wall, thickness: {value: 30 mm, source: test},"
        " conductivity: {value: CONDUCTIVITY W/(m K), source: test}}\n"
    )
    for conductivity, is_usual in (("0.04", False), ("20", True)):
        cover = wall.replace("CONDUCTIVITY", conductivity)
        body = STATED.replace("  - {name: outer deposit,", cover + "  - {name: outer deposit,")
        assert cover in body
        held = held_in(tmp_path, body)
        assert any(band.startswith("U ") for _, band in held) is is_usual


def test_a_service_holds_its_own_allowance_and_coefficient_against_what_is_typical(tmp_path: Path) -> None:
    stated = cooler(R_fo="0.0045 m^2 K/W")
    named = stated.replace(
        "resistance: R_fo, on: outside}",
        'resistance: R_fo, on: outside, service: "cooling tower water, treated"}',
    ).replace("{U on: outside}", "{U on: outside, service: steam condenser}")
    found = cautions(analysed(tmp_path, named))
    assert set(found) == {
        "outer deposit / typical / cooling tower water, treated",
        "U / typical / steam condenser",
    }
    allowance = found["outer deposit / typical / cooling tower water, treated"]
    # 0.00018 to 0.00035 m2 K/W in both public tables, told beyond a factor of five
    assert allowance.limit == "3.6e−5 to 0.00175 m²·K/W" and allowance.level == "caution"
    assert allowance.standing == "common practice"
    # 1000 to 6000 W/(m2 K), told beyond a factor of three; the textbook is remembered, so the range is too
    coefficient = found["U / typical / steam condenser"]
    assert coefficient.limit == "333.33 to 18 000 W/(m²·K)" and coefficient.standing == "from memory"
    # without a service the same allowance is held against the overall band only, which it meets
    assert cautions(analysed(tmp_path, stated)) == {}


def test_an_unknown_service_is_a_fault_with_the_nearest(tmp_path: Path) -> None:
    body = cooler().replace(
        "resistance: R_fo, on: outside}", "resistance: R_fo, on: outside, service: sea watter}"
    )
    with pytest.raises(Faults) as caught:
        chain_of(tmp_path, body)
    (fault,) = caught.value.faults
    assert fault.code == "service-unknown" and "sea water" in fault.nearest


def test_every_band_has_a_place_and_every_place_a_band(tmp_path: Path) -> None:
    stated = Path("calcbook/chain/plausible.py")
    text = (Path(__file__).parents[2] / stated).read_text(encoding="utf-8")
    for name, band in bands().items():
        by_rule = name.startswith("velocity of a ") or band.materials
        assert by_rule or f'"{name}"' in text, f"nothing in {stated} holds a figure against {name}"
        assert band.low < band.high
    assert {*FILMS.values(), *PAIRS.values()} <= set(bands())
    assert {f"velocity of a {kind} in tubes" for kind in ("liquid", "gas")} <= set(bands())


def test_both_conditions_are_judged_alike(tmp_path: Path) -> None:
    solved = analysed(tmp_path, cooler(d_i="1.575 mm"))
    assert all("geometry / band / tube bore" in cautions(solved, condition) for condition in CONDITIONS)
