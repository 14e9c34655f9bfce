"""What the rating finds from a solved calculation, at many samples: each is held against a file of its own."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from rated_units import COOLER, EVAPORATOR, HEATER, solved

from calcbook.chain.rating_outcome import Throttle
from calcbook.chain.samples import evaluate_samples
from calcbook.faults import Faults
from calcbook.interface import record_text, solve_file
from calcbook.rating.at_samples import AtSamples, names_at_samples
from calcbook.rating.saturation_way import Way, nothing_to_spare
from calcbook.rating.turning_down import _narrowed

PARTED = COOLER.replace("duty:\n", "duty:\n  parts: 4\n")
SPECIFIED = (
    HEATER.replace("resistance: R_f, on: inside", "on: inside")
    .replace("  R_f:  {value: 0.00018 m^2 K/W, is: allowance,       source: sheet}\n", "")
    .replace("report:", "fouling specified as: {cleanliness: 85 %, split: {deposit: 100 %}}\nreport:")
)
OF_PARTS = {"area_service of parts", "area_clean of parts", "area_margin of parts"}
CONTROL = {"pressure_turned_down", "T_turned_down"}


def recorded(folder: Path, text: str):
    path = folder / "td-1.yaml"
    path.write_text(text, encoding="utf-8")
    return solve_file(path)


@pytest.mark.parametrize("text", [HEATER, EVAPORATOR])
def test_a_sweep_of_the_control_is_that_of_files_of_their_own(tmp_path: Path, text: str) -> None:
    sweep = (
        "sweep:\n  p_st: {from: 2 bara, to: 3 bara, steps: 3}\n  of: [pressure_turned_down, T_turned_down]\n"
    )
    answer = recorded(tmp_path, text + sweep)
    assert answer.sweep is not None
    found = {result.name: result.values for result in answer.sweep.results}
    assert set(found) == CONTROL
    for place, pressure in enumerate(("2 bara", "2.5 bara", "3 bara")):
        alone = solved(tmp_path, text.replace("2.6 bara", pressure)).base.results
        for name, values in found.items():
            expected = alone[name].value if name in alone else float("nan")
            assert values[place] == pytest.approx(expected, rel=1e-9, nan_ok=True), (name, pressure)
    # More steam pressure changes nothing of what the clean unit needs.
    assert found["pressure_turned_down"][1] == pytest.approx(found["pressure_turned_down"][2], rel=1e-9)


def test_a_sweep_of_the_summed_margin_is_that_of_files_of_their_own(tmp_path: Path) -> None:
    sweep = "sweep:\n  m_cold: {from: 20 kg/s, to: 24 kg/s, steps: 3}\n  of: [area_margin of parts]\n"
    answer = recorded(tmp_path, PARTED + sweep)
    assert answer.sweep is not None
    (found,) = answer.sweep.results
    stated = next(line for line in PARTED.splitlines() if line.strip().startswith("m_cold:"))
    figure = stated.split("value: ")[1].split(",")[0]
    for place, flow in enumerate(("20 kg/s", "22 kg/s", "24 kg/s")):
        alone = solved(tmp_path, PARTED.replace(stated, stated.replace(figure, flow))).base.results
        assert found.values[place] == pytest.approx(alone["area_margin of parts"].value, rel=1e-9)


def test_the_summed_margin_flips_where_a_file_with_that_figure_has_none(tmp_path: Path) -> None:
    criterion = "acceptance:\n  - {that: area_margin of parts >= 0, source: sheet}\n"
    answer = recorded(tmp_path, PARTED + criterion)
    assert answer.flips is not None and not answer.flips.left_out
    flip = next(one for one in answer.flips.of_kind("criterion") if one.input.symbol == "L")
    stated = next(line for line in PARTED.splitlines() if line.strip().startswith("L:"))
    figure = stated.split("value: ")[1].split(",")[0]
    margins = []
    for length in (flip.printed, flip.printed_inside):
        text = PARTED.replace(stated, stated.replace(figure, f"{length!r} {flip.unit}"))
        margins.append(solved(tmp_path, text).base.results["area_margin of parts"].value)
    assert (margins[0] >= 0.0) != (margins[1] >= 0.0)
    assert (margins[0] >= 0.0) == (flip.becomes == "met")


def test_a_sample_does_not_depend_on_its_neighbours(tmp_path: Path) -> None:
    answer = solved(tmp_path, HEATER)
    later = AtSamples(answer, CONTROL)
    values = []
    for pressures in ([2.6e5], [1.2e5, 2.6e5, 9e5], [4e5, 2.6e5]):
        inputs = dict(answer.chain.case_inputs(""))
        inputs["given/p_st"] = np.array(pressures)
        found = evaluate_samples(answer.chain, inputs, later=later).results
        values.append({name: found[name].values[pressures.index(2.6e5)] for name in CONTROL})
    assert values[0] == values[1] == values[2]
    assert values[0]["pressure_turned_down"] == answer.base.results["pressure_turned_down"].value


def test_samples_beyond_the_critical_point_leave_the_others_what_they_are(tmp_path: Path) -> None:
    """Propane is raised no further than 369.9 K; the way to steam of 2.6 bar leads beyond, that to 0.8 bar does not."""
    text = (
        EVAPORATOR.replace("duty:\n", "duty:\n  throttled: cold\n")
        .replace("n-pentane", "propane")
        .replace("value: 3 bara", "value: 20 bara")
        .replace("1500 kW", "600 kW")
    )
    answer = solved(tmp_path, text)
    later = AtSamples(answer, CONTROL)
    pressures = [2.6e5, 0.8e5, 2.0e5, 0.7e5]

    def found(of: list[float]) -> np.ndarray:
        inputs = {**answer.chain.case_inputs(""), "given/p_st": np.array(of)}
        return evaluate_samples(answer.chain, inputs, later=later).results["T_turned_down"].values

    alone = np.concatenate([found([pressure]) for pressure in pressures])
    assert np.isnan(alone).tolist() == [True, False, True, False]
    assert np.array_equal(found(pressures), alone, equal_nan=True)


def test_where_the_clean_unit_does_not_carry_the_duty_there_is_no_such_state(tmp_path: Path) -> None:
    """The clean area needed at a pressure is more than the installed one exactly where the state is missing."""
    answer = solved(tmp_path, HEATER)
    inputs = dict(answer.chain.case_inputs(""))
    inputs["given/p_st"] = np.linspace(0.4e5, 2.6e5, 12)
    found = evaluate_samples(answer.chain, inputs, later=AtSamples(answer, CONTROL)).results
    carries = found["area_margin_clean"].values > 0.0
    assert carries.any() and not carries.all()
    assert (np.isfinite(found["T_turned_down"].values) == carries).all()


class Curved(Way):
    """A way of 50 K whose clean unit has edge³ − part³ to spare; it does not close beyond one part of the way, and
    beyond another the stream has no saturation."""

    EDGES = np.array([0.43, 0.45, 0.45, 0.45, 1.2, -0.1, 0.9985])
    CLOSES = np.array([2.0, 0.4502, 0.4, 0.4, 2.0, 2.0, 2.0])
    ENDS = np.array([2.0, 2.0, 2.0, 0.4, 2.0, 2.0, 2.0])

    def at(self, parts, samples):
        return {"T": np.where(parts > self.ENDS[samples], np.nan, self.stated[samples] + 50.0 * parts)}

    def spare(self, parts, samples):
        return np.where(parts > self.CLOSES[samples], np.nan, self.EDGES[samples] ** 3 - parts**3)


def test_the_way_of_every_sample_is_followed_to_where_it_ends(tmp_path: Path) -> None:
    """Roots by hand. The second is halved towards its end, 0.02 % of the way behind the root; the third does not close
    from 0.4 on, the fourth has no saturation there, the fifth spares something to 99.9 % of the way, the sixth nothing
    as it stands, the last comes to nothing just before the end."""
    stream = next(iter(solved(tmp_path, HEATER).chain.streams.values()))
    way = Curved(None, stream, {}, np.full(7, 350.0), np.full(7, 50.0))
    found = way.found()
    expected = [0.43, 0.45, np.nan, np.nan, np.nan, np.nan, 0.9985]
    # A saturation temperature is known to 1e-9 K, of 50 K.
    assert found.places == pytest.approx(expected, abs=2e-11, nan_ok=True)
    steam, chiller = Throttle("hot", "pressure", False), Throttle("cold", "saturation temperature", False)
    carried = "the clean unit carries the duty"
    assert found.reason(2, steam) == f"{carried} down to a pressure at which its circuit does not close"
    assert found.reason(2, chiller).startswith(f"{carried} up to a saturation temperature at which")
    assert found.reason(3, steam) == f"{carried} down to a pressure beyond which the stream has no saturation"
    assert found.reason(4, steam) == f"{carried} with 0.100 % of the temperature difference still"
    assert found.reason(5, steam) == "the clean unit does not carry the duty: it is 0.100 % short"


def test_a_clean_unit_without_an_answer_is_not_said_to_lack_area() -> None:
    words = nothing_to_spare(float("nan"), "the stated pressure")
    assert words == "the circuit of the clean unit does not close at the duty and the stated pressure"
    assert nothing_to_spare(0.01, "the stated pressure") == ""


@pytest.mark.parametrize(
    ("spare", "places"),
    [
        ((np.nan, -0.2, -0.1, 0.1, 0.3), (2, 3)),
        # Twice through nothing: the flow nearest to the stated one is taken, and the first beyond it.
        ((-0.1, 0.1, np.nan, -0.05, 0.2, 0.3), (3, 4)),
        # Nothing below: the end of what has no answer, and not one between those that spare something.
        ((np.nan, np.nan, 0.1, np.nan, 0.2), (1, 2)),
    ],
)
def test_a_flow_is_narrowed_between_lacking_and_sparing(
    spare: tuple[float, ...], places: tuple[int, int]
) -> None:
    assert _narrowed(np.array(spare)) == places


def test_only_what_is_asked_is_found_at_samples(tmp_path: Path) -> None:
    answer = solved(tmp_path, HEATER)
    inputs = dict(answer.chain.case_inputs(""))
    inputs["given/p_st"] = np.array([2.6e5, 2.7e5])
    found = evaluate_samples(answer.chain, inputs, later=AtSamples(answer, {"T_turned_down"})).results
    assert set(found) & CONTROL == {"T_turned_down"}


@pytest.mark.parametrize(
    ("text", "names"),
    [
        (HEATER, CONTROL),
        (PARTED, OF_PARTS),
        (COOLER, set()),
        (EVAPORATOR.replace("\n  heat flow: Q_ev", ""), set()),
        # What the fouling is was found for a case, and other samples have another.
        (SPECIFIED, set()),
    ],
)
def test_what_can_be_found_at_samples(tmp_path: Path, text: str, names: set[str]) -> None:
    assert names_at_samples(solved(tmp_path, text)) == names


def test_a_flow_that_the_control_moves_is_said_not_to_be_searched(tmp_path: Path) -> None:
    text = COOLER + "acceptance:\n  - {that: flow_turned_down >= 5 kg/s, source: sheet}\n"
    answer = recorded(tmp_path, text)
    assert answer.flips is not None and answer.flips.left_out == ("flow_turned_down >= 5 kg/s",)
    assert "is not searched: flow_turned_down >= 5 kg/s." in record_text(answer)


def test_a_flow_that_the_control_moves_cannot_be_swept(tmp_path: Path) -> None:
    sweep = "sweep:\n  m_cold: {from: 20 kg/s, to: 24 kg/s, steps: 3}\n  of: [flow_turned_down]\n"
    with pytest.raises(Faults) as told:
        recorded(tmp_path, COOLER + sweep)
    (fault,) = told.value.faults
    assert fault.code == "result-unknown" and "cannot be swept" in fault.message


# --- how often a criterion on the summed area holds ------------------------------------------------------


def chances(folder: Path, text: str) -> dict[str, float]:
    """Of every criterion the share of the samples in which it holds."""
    return {row.that: row.reached for row in solved(folder, text).base.criteria}


def with_criteria(text: str, limits: dict[str, float]) -> str:
    rows = "".join(
        f"  - {{that: {name} >= {limit!r}, source: s, probability: 50 %}}\n" for name, limit in limits.items()
    )
    return text + f"acceptance:\n{rows}uncertainty: {{of: [area_margin]}}\n"


def test_the_samples_show_how_often_the_summed_margin_holds(tmp_path: Path) -> None:
    """The duty alone is uncertain and normal: the margin falls with it, so that the share is that of a normal variable
    below the duty at which a file of its own has the limit."""
    text = PARTED.replace("duty:\n", "duty:\n  heat flow: Q_d\n").replace(
        "givens:\n", "givens:\n  Q_d: {value: %s, is: duty, source: s, tolerance: {standard: 5 %%}}\n", 1
    )
    text = without_accuracy(text)
    whole = solved(tmp_path, PARTED).base.results["duty"].value
    # 0.4 standard uncertainties above the stated duty: Phi(0.4) = 0.6554 (tables of the normal distribution).
    limits = solved(tmp_path, text % f"{1.02 * whole!r} W").base.results
    stated = text % f"{whole!r} W"
    margins = {name: limits[name].value for name in ("area_margin", "area_margin of parts")}
    found = chances(tmp_path, with_criteria(stated, margins))
    assert len(found) == 2
    for that, share in found.items():
        # Three standard deviations of 50 000 samples, five blocks, the fewest that are drawn.
        assert share == pytest.approx(0.6554, abs=0.0064), that


def without_accuracy(text: str) -> str:
    """The unit with a stated coefficient in place of the method, whose accuracy would be sampled with the rest."""
    method = "situation: inside-tube, method factor: {value: 0.9, source: house rule}"
    assert method in text and ", tolerance: 20 %}" in text
    return text.replace(method, "coefficient: {value: 6000 W/(m^2 K), source: s}, on: inside").replace(
        ", tolerance: 20 %}", "}"
    )


def test_a_margin_summed_over_parts_is_not_sampled_where_the_file_has_none(tmp_path: Path) -> None:
    text = COOLER + "acceptance:\n  - {that: area_margin of parts >= 0, source: s, probability: 90 %}\n"
    with pytest.raises(Faults) as told:
        solved(tmp_path, text)
    assert any("only where the file has `parts:`" in fault.message for fault in told.value.faults)


# --- the time until the duty is lost -------------------------------------------------------------------------

HR_821 = Path(__file__).resolve().parents[2] / "calcs/hr-821.yaml"


def growing(folder: Path, symbol: str, figure: str, case: str = ""):
    """HR-821 as a file of its own with another figure of a given, in the base case or in the other one; its table is
    short, and its cleaning, which no time until the duty is lost hangs on, is left out."""
    text, _, rest = (
        HR_821.read_text(encoding="utf-8").replace("steps: 13", "steps: 2").partition("cleaning:\n")
    )
    text += rest[rest.index("report:\n") :]
    lines = [line for line in text.splitlines() if line.strip().startswith(f"{symbol}:")]
    line = lines[-1] if case and symbol == "t_after" else lines[0]
    present = line.split("value: ")[1].split(",")[0]
    return solved(folder, text.replace(line, line.replace(present, figure)))


def test_flips_of_the_time_until_the_duty_is_lost_hold_in_files_of_their_own(tmp_path: Path) -> None:
    flips = solve_file(HR_821).flips
    assert flips is not None and not flips.left_out
    of_time = [one for one in flips.of_kind("criterion") if one.id == "criterion 3"]
    assert len(of_time) > 20
    for flip in (one for one in of_time if one.input.symbol in ("m_h", "R_inf", "t_after")):
        verdicts = []
        for figure in (flip.printed, flip.printed_inside):
            answer = growing(tmp_path, flip.input.symbol, f"{figure!r} {flip.unit}".strip(), flip.case)
            case = next(one for one in answer.cases if one.name == flip.case)
            verdicts.append(next(item.met for item in case.criteria if item.id == "criterion 3"))
        assert verdicts == [flip.becomes == "met", flip.was == "met"], flip.input.symbol


def test_a_sweep_of_the_time_until_the_duty_is_lost_is_that_of_files_of_their_own(tmp_path: Path) -> None:
    """At 10 kg/s it is carried through the two years looked at, at 20 kg/s not even by the cleaned unit."""
    sweep = "sweep:\n  m_h: {from: 10 kg/s, to: 20 kg/s, steps: 6}\n  of: [time_until_duty_lost]\n"
    answer = recorded(tmp_path, HR_821.read_text(encoding="utf-8") + sweep)
    assert answer.sweep is not None
    (found,) = answer.sweep.results
    expected = []
    for flow in (10, 12, 14, 16, 18, 20):
        alone = growing(tmp_path, "m_h", f"{flow} kg/s").base.results
        name = "time_until_duty_lost"
        expected.append(alone[name].value if name in alone else float("nan"))
    assert 2 <= sum(np.isfinite(expected)) < 6
    # The record takes a straight line over a part of 40^-6 of the two years.
    assert found.values == pytest.approx(expected, rel=1e-8, nan_ok=True)


def test_a_duty_that_is_carried_to_the_end_or_never_is_not_unknown(tmp_path: Path) -> None:
    answer = growing(tmp_path, "m_h", "14 kg/s")
    inputs = dict(answer.chain.case_inputs(""))
    inputs["given/m_h"] = np.array([8.0, 14.0, 40.0])
    later = AtSamples(answer, {"time_until_duty_lost"})
    found = evaluate_samples(answer.chain, inputs, later=later)
    never, lost, at_once = found.results["time_until_duty_lost"].values
    assert (never, at_once) == (np.inf, -np.inf)
    assert lost == pytest.approx(answer.base.results["time_until_duty_lost"].value, rel=1e-8)
    codes = found.codes(("criterion", "criterion 3", ""))
    assert codes.tolist() == [0, 0, 1]


def test_how_sure_the_time_until_the_duty_is_lost_is_follows_from_the_margin_at_that_time(
    tmp_path: Path,
) -> None:
    """Fouling only grows here: the duty is carried for 4 and for 12 months where the margin then is above zero, in each
    sample. That margin is another criterion of the same file, on the same samples."""
    text = HR_821.read_text(encoding="utf-8").replace("steps: 13", "steps: 2")
    for criterion in ("area_margin >= 0", "time_until_duty_lost >= t_after"):
        assert f"{criterion}, source" in text
        text = text.replace(f"{criterion}, source", f"{criterion}, probability: 90 %, source")
    text = text.replace("\nreport:\n", "\nuncertainty: {of: [area_margin]}\n\nreport:\n")
    answer = solved(tmp_path, text)
    shares = {(case.name, row.id): row.reached for case in answer.cases for row in case.criteria}
    for case in ("", "yearly cleaning"):
        assert shares[case, "criterion 3"] == shares[case, "criterion 1"]
    assert 0.5 < shares["yearly cleaning", "criterion 3"] < 0.9 < shares["", "criterion 3"]
    verdicts = {case.name: {row.id: row.met for row in case.criteria} for case in answer.cases}
    assert verdicts[""]["criterion 3"] and not verdicts["yearly cleaning"]["criterion 3"]
    assert not [item for item in answer.open_items if "not worked out" in item.text]
