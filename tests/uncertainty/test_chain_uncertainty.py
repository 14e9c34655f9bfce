"""The uncertainty of whole calculations: closed forms, methods' factors, chances, counts, and the record."""

from __future__ import annotations

import math
import sys
from pathlib import Path
from statistics import NormalDist

import numpy as np
import pytest
from plain_models import Plain
from uncertain_calculations import (
    HEATED,
    STATED,
    house_method,
    house_situation,
    plane_between,
    solved,
    with_tolerance,
)

from calcbook.chain.factors import with_factors
from calcbook.chain.measured import measured
from calcbook.chain.solve import solve
from calcbook.interface import record_text, solve_file
from calcbook.record.uncertainty_data import uncertainty_data
from calcbook.uncertainty.budget import wide_slopes
from calcbook.uncertainty.samples import ChainModel
from calcbook.uncertainty.sampling import propagate

SAMPLED = "uncertainty:\n  of: [{}]\n"
K95 = 1.959964


TRIAL_LAW = house_method(
    "trial-law",
    "h = c + 0*(T_s - T_b)*e",
    {"c": "500 W/(m^2 K)", "e": "1 W/(m^2 K^2)"},
    points=(("T_s: 350, T_b: 340", 500.0), ("T_s: 320, T_b: 340", 500.0)),
)


def budget_of(found, result: str):
    return next(one for one in found.uncertainty.budgets if one.result == result)


def sampled_of(found, result: str):
    return next(one for one in found.uncertainty.sampling.results if one.result == result)


# --- first order against closed forms ---------------------------------------------------------------


def test_stated_coefficients_in_closed_form(tmp_path) -> None:
    body = with_tolerance(
        STATED,
        h_i="10 %",
        h_o="{triangular: 300 W/(m^2 K)}",
        R_fi="{standard: 0.00002 m^2 K/W}",
        k_w="{expanded: 8 %, k: 2}",
    )
    found = solved(tmp_path, body)
    d_i, d_o, k, h_i, h_o, r_i, r_o = 0.01483, 0.01905, 16.0, 5000.0, 1500.0, 1.8e-4, 1.8e-4
    ratio = d_o / d_i
    wall = d_o * math.log(d_o / d_i) / (2.0 * k)
    u = 1.0 / (ratio * (1.0 / h_i + r_i) + wall + r_o + 1.0 / h_o)
    expected = {
        "given/h_i": u**2 * ratio / h_i**2 * 0.10 * h_i / math.sqrt(3.0),
        "given/h_o": u**2 / h_o**2 * 300.0 / math.sqrt(6.0),
        "given/R_fi": -(u**2) * ratio * 2e-5,
        "given/k_w": u**2 * wall / k * 0.04 * k,
    }
    budget = budget_of(found, "U_service")
    assert budget.value == pytest.approx(u, rel=1e-12)
    assert {row.input.id: row.contribution for row in budget.rows} == pytest.approx(expected, rel=1e-9)
    standard = math.sqrt(sum(part**2 for part in expected.values()))
    assert budget.standard == pytest.approx(standard, rel=1e-9)
    assert budget.expanded == pytest.approx(K95 * standard, rel=1e-6)
    assert sum(row.share for row in budget.rows) == pytest.approx(1.0, rel=1e-12)
    # Clean, the deposit is not there: its tolerance is no line of that budget.
    assert "given/R_fi" not in {row.input.id for row in budget_of(found, "U_clean").rows}


def test_cleanliness_follows_both_conditions(tmp_path) -> None:
    body = with_tolerance(STATED, h_o="10 %")
    found = solved(tmp_path, body, SAMPLED.format("cleanliness"))
    base = found.base.results
    clean, service = base["U_clean"].value, base["U_service"].value
    # Both coefficients move with 1/h_o: d(U_s/U_c) = (U_s/U_c)·(U_s - U_c)/h_o² · dh_o.
    slope = service / clean * (service - clean) / 1500.0**2
    budget = budget_of(found, "cleanliness")
    assert budget.rows[0].slope == pytest.approx(slope, rel=1e-9)


def test_without_a_tolerance_there_is_no_uncertainty(tmp_path) -> None:
    found = solved(tmp_path, STATED)
    assert found.uncertainty is None
    assert "No tolerance is stated; no uncertainty of a result is given." in record_text(found)


# --- first order against samples --------------------------------------------------------------------


def test_a_linear_chain_is_validated(tmp_path) -> None:
    body = with_tolerance(HEATED, T_i="{standard: 0.8 K}", T_o="{standard: 0.6 K}")
    found = solved(tmp_path, body, SAMPLED.format("heat_flow_service"))
    conductance = found.base.results["UA_service"].value
    budget, samples = (one(found, "heat_flow_service") for one in (budget_of, sampled_of))
    assert budget.standard == pytest.approx(conductance * 1.0, rel=1e-9)
    assert not budget.is_nonlinear
    assert samples.is_validated
    answered = found.uncertainty.sampling.trials
    assert samples.standard == pytest.approx(budget.standard, rel=3.0 / math.sqrt(2.0 * answered))
    assert samples.mean == pytest.approx(budget.value, abs=3.0 * budget.standard / math.sqrt(answered))


@pytest.mark.parametrize("r", [-0.9, 0.5, 1.0])
def test_correlated_temperatures_in_closed_form(tmp_path, r: float) -> None:
    body = with_tolerance(HEATED, T_i="{standard: 0.8 K}", T_o="{standard: 0.6 K}")
    more = SAMPLED.format("heat_flow_service")
    more += f"  correlation:\n    - {{between: [T_o, T_i], r: {r}, source: one transmitter}}\n"
    found = solved(tmp_path, body, more)
    conductance = found.base.results["UA_service"].value
    expected = conductance * math.sqrt(0.8**2 + 0.6**2 - 2.0 * r * 0.8 * 0.6)
    budget, samples = (one(found, "heat_flow_service") for one in (budget_of, sampled_of))
    assert budget.standard == pytest.approx(expected, rel=1e-9)
    assert samples.standard == pytest.approx(
        expected, rel=3.0 / math.sqrt(2.0 * found.uncertainty.sampling.trials)
    )
    assert all(math.isnan(row.share) for row in budget.rows)
    assert "not separable" in record_text(found)


def test_the_chance_of_a_criterion(tmp_path) -> None:
    body = with_tolerance(HEATED, T_i="{standard: 1 K}")
    plain = solved(tmp_path, body)
    flow, conductance = (plain.base.results[name].value for name in ("heat_flow_service", "UA_service"))
    limit = f"acceptance:\n  - {{that: heat_flow_service >= {flow - conductance:.6f} W, source: test}}\n"
    found = solved(tmp_path, body, SAMPLED.format("U_service, heat_flow_service") + limit)
    chance = found.uncertainty.sampling.chances[0]
    expected = NormalDist().cdf(1.0)  # one standard uncertainty below the value
    assert chance.nominal
    assert chance.probability == pytest.approx(expected, abs=3.0 * chance.deviation)
    assert chance.deviation == pytest.approx(
        math.sqrt(expected * (1.0 - expected) / found.uncertainty.sampling.trials), rel=0.05
    )


def test_a_limit_that_is_itself_uncertain(tmp_path) -> None:
    """P(U >= U_lim) with U_lim = U nominal and its own normal tolerance: one half."""
    value = solved(tmp_path, STATED).base.results["U_service"].value
    body = with_tolerance(STATED, h_i="1 %").replace(
        "givens:\n",
        f"givens:\n  U_lim: {{value: {value:.9f} W/(m^2 K), is: limit, source: test,"
        " tolerance: {standard: 5 %}}\n",
    )
    more = SAMPLED.format("U_service") + "acceptance:\n  - {that: U_service >= U_lim, source: test}\n"
    chance = solved(tmp_path, body, more).uncertainty.sampling.chances[0]
    assert chance.probability == pytest.approx(0.5, abs=4.0 * chance.deviation)


def test_a_limit_may_be_a_derived_figure(tmp_path) -> None:
    """It moves with what it is derived from: U against 1.0001 and 0.9999 of itself by a derived share of the limit."""
    value = solved(tmp_path, STATED).base.results["U_service"].value
    for share, sure in (("0.9999", True), ("1.0001", False)):
        body = with_tolerance(STATED, R_fi="{standard: 0.0000000001 m^2 K/W}").replace(
            "givens:\n",
            f"givens:\n  U_0: {{value: {value!r} W/(m^2 K), is: base of the limit, source: test}}\n",
        )
        body = body.replace(
            "geometry:", f"derived: {{U_lim: {{is: limit, relation: U_0*{share}}}}}\ngeometry:", 1
        )
        more = SAMPLED.format("U_service") + "acceptance:\n  - {that: U_service >= U_lim, source: test}\n"
        chance = solved(tmp_path, body, more).uncertainty.sampling.chances[0]
        # The tolerance of the deposit moves U by 2e-7 of itself: no sample comes near 1e-4.
        assert chance.probability == float(sure)


def test_what_does_not_foul_has_one_budget_and_what_rests_on_no_tolerance_is_named(tmp_path) -> None:
    body = with_tolerance(STATED, h_o="10 %", R_fi="0.00005 m^2 K/W")
    fouled = solved(tmp_path, body).uncertainty
    assert [one.result for one in fouled.budgets] == ["U_service", "U_clean"]
    assert fouled.exact_allowances == ("outer deposit",)
    bare = "".join(line for line in body.splitlines(keepends=True) if "R_f" not in line)
    assert [one.result for one in solved(tmp_path, bare).uncertainty.budgets] == ["U_service"]


def test_few_readings_widen_the_interval(tmp_path) -> None:
    body = with_tolerance(HEATED, T_i="{standard: 1 K, degrees of freedom: 4}")
    found = solved(tmp_path, body, SAMPLED.format("heat_flow_service"))
    budget, samples = (one(found, "heat_flow_service") for one in (budget_of, sampled_of))
    assert budget.degrees == pytest.approx(4.0)
    assert budget.factor == pytest.approx(2.776, abs=5e-4)  # JCGM 100:2008, table G.2: t_95(4) = 2.78
    assert samples.is_validated
    # The law itself: variance of t with 4 degrees of freedom is 2 (tails so heavy that 5 % must do).
    assert samples.standard == pytest.approx(budget.standard * math.sqrt(2.0), rel=0.05)


# --- factors of methods -----------------------------------------------------------------------------

FLOW = """\
givens:
  d_i: {value: 15.75 mm, is: bore, source: test}
  d_o: {value: 19.05 mm, is: outside diameter, source: test}
  L: {value: 4.88 m, is: length, source: test}
  N: {value: 62, is: tubes, source: test}
  m_hot: {value: MASS kg/s, is: flow, source: test}
  T_hot: {value: 74 degC, is: hot, source: test}
  T_cold: {value: 31 degC, is: cold, source: test}
  h_o: {value: 5200 W/(m^2 K), is: outside coefficient, source: test}
  k_w: {value: 16 W/(m K), is: conductivity, source: test}
streams:
  hot: {fluid: water, temperature: T_hot, pressure: {value: 4 bara, source: test}, flow: m_hot}
geometry: {shape: tube, inside diameter: d_i, outside diameter: d_o, length: L, parallel: N}
resistances:
  - {name: tube film, kind: film, stream: hot, situation: inside-tube, method: dittus-boelter-mcadams}
  - {name: wall, kind: wall, conductivity: k_w}
  - {name: shell film, kind: film, coefficient: h_o, on: outside, temperature: T_cold}
report: {U on: outside}
"""


def test_the_factor_of_a_method_in_closed_form(tmp_path) -> None:
    """Dittus and Boelter's equation takes no surface temperature: U = 1/(R + d_o/(d_i·B·h))."""
    found = solved(tmp_path, with_tolerance(FLOW.replace("MASS", "18.2"), h_o="10 %"))
    budget = budget_of(found, "U_service")
    row = next(row for row in budget.rows if row.input.is_method)
    assert row.input.id == "factor/dittus-boelter-mcadams"
    h, u = (found.base.results[name].value for name in ("h tube film service", "U_service"))
    assert row.slope == pytest.approx(u**2 * (19.05 / 15.75) / h, rel=1e-9)
    assert row.input.standard == pytest.approx(0.25 / K95, rel=1e-6)  # "within 25 %, most data"


def test_factors_of_one_change_nothing(tmp_path) -> None:
    chain = solved(tmp_path, FLOW.replace("MASS", "18.2")).chain
    plain = solve(chain, chain.case_inputs(""), "service")
    factored = with_factors(chain)
    other = solve(factored, factored.case_inputs(""), "service")
    assert plain.number(chain.results["U"]) == other.number(chain.results["U"])


def test_two_terms_of_one_card_have_one_factor(tmp_path) -> None:
    """Both films by one card: h_1 = h_2 = 500, U = 1/(2/(B·h) + t/k), so dU/dB = U²·2/h."""
    situation = house_situation("trial-film", "- {use: trial-law, because: the only one}", "trial-law")
    law = TRIAL_LAW.replace(
        "assumes:",
        "accuracy: {within: 20 %, coverage: most data, stated by: test, standing: common practice}\nassumes:",
    )
    body = with_tolerance(plane_between("trial-film", "trial-film"), t="5 %")
    found = solved(tmp_path, body, cards={"trial-film": situation, "trial-law": law})
    rows = [row for row in budget_of(found, "U_service").rows if row.input.is_method]
    assert [row.input.id for row in rows] == ["factor/trial-law"]
    u = found.base.results["U_service"].value
    assert u == pytest.approx(1.0 / (2.0 / 500.0 + 0.002 / 20.0), rel=1e-9)
    assert rows[0].slope == pytest.approx(u**2 * 2.0 / 500.0, rel=1e-9)


def test_a_card_without_accuracy_is_said(tmp_path) -> None:
    situation = house_situation("trial-film", "- {use: trial-law, because: the only one}", "trial-law")
    law = TRIAL_LAW
    body = with_tolerance(plane_between("trial-film", "trial-film"), t="5 %")
    found = solved(tmp_path, body, cards={"trial-film": situation, "trial-law": law})
    text = record_text(found)
    assert not any(row.input.is_method for row in budget_of(found, "U_service").rows)
    assert "hot film: the part of the method trial-law is missing: its card states no accuracy." in text
    assert "Expanded uncertainty, 95 %, of the stated parts alone" in text


# --- samples that leave a range or have no answer ---------------------------------------------------


def test_samples_that_leave_the_range_of_a_method_are_counted(tmp_path) -> None:
    """Re is proportional to the flow: with Re 2 % above 10 000 and ± 10 % of flow, 4/10 of an even law lie below."""
    at_one = solved(tmp_path, FLOW.replace("MASS", "1.0")).base.results["Re hot"].value
    body = with_tolerance(FLOW.replace("MASS", f"{1.02 * 1e4 / at_one:.12f}"), m_hot="10 %")
    found = solved(tmp_path, body, SAMPLED.format("U_service"))
    samples = found.uncertainty.sampling
    row = next(row for row in samples.outside if row.check.endswith("turbulent"))
    expected = 0.5 - (1.0 - 1.0 / 1.02) / 0.2
    assert row.samples / samples.trials == pytest.approx(
        expected, abs=3.0 * math.sqrt(expected * (1 - expected) / samples.trials)
    )
    assert row.nominal == "within" and samples.outside_any >= row.samples
    assert "Caution: Samples outside a range limit of a method or term, or" in record_text(found)


def test_samples_above_the_boiling_point_have_no_answer(tmp_path) -> None:
    body = FLOW.replace("MASS", "18.2").replace("4 bara", "1.01325 bara").replace("74 degC", "98 degC")
    found = solved(tmp_path, with_tolerance(body, T_hot="4 K"), SAMPLED.format("U_service"))
    samples = found.uncertainty.sampling
    # Water boils at 99.97 °C there (IAPWS-95): 2.03 of the 8 K of an even law lie above it.
    assert samples.unanswered / samples.trials == pytest.approx(2.03 / 8.0, abs=0.01)
    assert "Caution: Samples without an answer:" in record_text(found)


# --- one answer -------------------------------------------------------------------------------------


def test_the_record_is_the_same_each_time_and_however_blocks_are_joined(tmp_path) -> None:
    body = with_tolerance(FLOW.replace("MASS", "18.2"), m_hot="5 %", h_o="10 %", T_hot="1 K")
    more = SAMPLED.format("U_service, U_clean")
    found = solved(tmp_path, body, more)
    assert record_text(found) == record_text(solved(tmp_path, body, more))
    chain = with_factors(found.chain)
    from calcbook.faults import Collector
    from calcbook.uncertainty.figures import method_figures, stated_figures
    from calcbook.uncertainty.sampling import Drawn

    factors, _ = method_figures(chain, found.base.solutions)
    drawn = [Drawn(one.id, one.distribution) for one in (*stated_figures(chain, Collector()), *factors)]
    results = [measured(chain, name) for name in ("U_service", "U_clean")]
    model = ChainModel(
        chain, chain.case_inputs(""), found.base.solutions, [one for one in results if one is not None]
    )
    several = [propagate(model, drawn, 0.95, 1, together=count) for count in (1, 8)]
    assert several[0] == several[1]
    assert several[0] is not None
    assert several[0].intervals["U_service"].mean == sampled_of(found, "U_service").mean


def test_every_result_that_is_propagated_is_the_result(tmp_path) -> None:
    found = solved(tmp_path, FLOW.replace("MASS", "18.2"))
    chain = found.chain
    values = {condition: one.values for condition, one in found.base.solutions.items()}
    names = [name for name in found.base.results if measured(chain, name) is not None]
    for name in names:
        one = measured(chain, name)
        assert one is not None
        assert float(np.asarray(one.value(values)).ravel()[0]) == pytest.approx(
            found.base.results[name].value, rel=1e-15
        ), name
    assert {"U_service", "cleanliness", "excess_surface", "heat_flux_clean", "speed hot", "Re hot"} <= set(
        names
    )
    assert {"h tube film clean", "R wall service", "T inside surface service", "dT hot service"} <= set(names)


# --- duties, pressures, and the examples of the book ------------------------------------------------

DUTY = (
    HEATED.replace("geometry:", "DUTY_STREAMSgeometry:")
    .replace("on: inside, temperature: T_i}", "on: inside, stream: warm}")
    .replace("on: outside, temperature: T_o}", "on: outside, stream: cool}")
    .replace(
        "DUTY_STREAMS",
        "fluids:\n"
        "  liquor: {constants: {density: 1000 kg/m^3, viscosity: 0.001 Pa s, conductivity: 0.6 W/(m K),"
        " heat capacity: 4000 J/(kg K)}, source: test}\n"
        "streams:\n"
        "  warm: {fluid: liquor, phase: liquid, flow: m}\n"
        "  cool: {fluid: liquor, phase: liquid}\n",
    )
    .replace(
        "givens:\n",
        "givens:\n"
        "  m: {value: 5 kg/s, is: flow, source: test}\n"
        "  T_1: {value: 85 degC, is: warm inlet, source: test}\n"
        "  T_2: {value: 75 degC, is: warm outlet, source: test}\n"
        "  T_3: {value: 25 degC, is: cool inlet, source: test}\n"
        "  T_4: {value: 36 degC, is: cool outlet, source: test}\n",
    )
    .replace("  T_i: {value: 80 degC, is: inside temperature, source: test}\n", "")
    .replace("  T_o: {value: 30 degC, is: outside temperature, source: test}\n", "")
    + "duty:\n"
    "  arrangement: counterflow\n"
    "  hot: {stream: warm, inlet: T_1, outlet: T_2}\n"
    "  cold: {stream: cool, inlet: T_3, outlet: T_4}\n"
)


def test_the_margin_of_a_duty_in_closed_form(tmp_path) -> None:
    """Ends 49 and 50 K apart: M + 1 = U·A·ΔT_lm/(m·cp·(T_1 - T_2)), U free of temperatures."""
    body = with_tolerance(DUTY, m="2 %", T_2="{standard: 0.5 K}", h_o="10 %")
    found = solved(tmp_path, body, SAMPLED.format("area_margin"))
    ratio = 1.0 + found.base.results["area_margin"].value
    u = found.base.results["U_service"].value

    def mean(warm_out: float) -> float:
        first, second = 85.0 - 36.0, warm_out - 25.0
        return first if first == second else (first - second) / math.log(first / second)

    def ratio_at(warm_out: float) -> float:
        return ratio * mean(warm_out) / mean(75.0) * (85.0 - 75.0) / (85.0 - warm_out)

    expected = {
        "given/m": -ratio / 5.0 * (0.02 * 5.0 / math.sqrt(3.0)),
        "given/T_2": (ratio_at(75.001) - ratio_at(74.999)) / 0.002 * 0.5,
        "given/h_o": ratio * u / 1500.0**2 * (150.0 / math.sqrt(3.0)),
    }
    budget = budget_of(found, "area_margin")
    assert {row.input.id: row.contribution for row in budget.rows} == pytest.approx(expected, rel=1e-5)
    chance = found.uncertainty.sampling.chances[0]
    assert chance.text == "area_margin > 0"
    # The margin lies some ten standard uncertainties above zero: no sample shows another sign.
    assert budget.value > 8.0 * budget.standard
    assert chance.nominal and chance.probability == 1.0


def test_a_drawn_pressure_is_what_that_pressure_gives(tmp_path) -> None:
    """Air at 3 bar ± 5 %: properties about the stated pressure against those of the pressure itself.

    The density of air is straight in pressure within 1e-4 over 5 % (its compressibility factor is 0.9996 there), and
    the film follows it to the power 0.8.
    """
    body = FLOW.replace("MASS", "0.9").replace("fluid: water", "fluid: air")
    body = body.replace("{value: 4 bara, source: test}", "p_air").replace(
        "givens:\n", "givens:\n  p_air: {value: 3 bara, is: pressure, source: test, tolerance: 5 %}\n"
    )
    body = body.replace("flow: m_hot", "flow: {value: 9 m/s, source: test}")
    found = solved(tmp_path, body)
    chain = with_factors(found.chain)
    one = measured(chain, "U_service")
    assert one is not None
    model = ChainModel(chain, chain.case_inputs(""), found.base.solutions, [one])
    at = np.array([2.85e5, 2.95e5, 3.0e5, 3.15e5])
    values = model.outputs({"given/p_air": at})["U_service"]
    for pressure, value in zip(at, values, strict=True):
        inputs = {**chain.case_inputs(""), "given/p_air": np.asarray(pressure)}
        direct = solve(chain, inputs, "service").number(chain.results["U"])
        assert value == pytest.approx(direct, rel=1e-4)
    budget = budget_of(found, "U_service")
    assert any(row.input.id == "given/p_air" for row in budget.rows)


BOOK = Path(__file__).resolve().parents[2] / "calcs"
EXAMPLES = sorted(
    path for path in BOOK.glob("*.yaml") if path.name != "book.yaml" and "signoffs" not in path.name
)


@pytest.mark.parametrize("path", EXAMPLES, ids=lambda path: path.stem)
def test_slopes_of_every_example_against_differences(path: Path) -> None:
    """Every budget against central differences of the chain itself, closed again beside the stated figures.

    A step of 1e-3 standard uncertainties leaves 1e-6 of curvature and some 1e-5 of rounding where little moves.
    """
    found = solve_file(path)
    stated = any(given.tolerance for given in found.chain.calculation.givens.values())
    assert (found.uncertainty is not None) == stated
    if found.uncertainty is None:
        return
    chain = with_factors(found.chain)
    results = [measured(chain, budget.result) for budget in found.uncertainty.budgets]
    model = ChainModel(
        chain, chain.case_inputs(""), found.base.solutions, [one for one in results if one is not None]
    )
    lines = {row.input.id: row.input for budget in found.uncertainty.budgets for row in budget.rows}
    small = [Plain(name, item.value, 1e-3 * item.standard) for name, item in lines.items()]
    differences = wide_slopes(model.outputs, small)
    for budget in found.uncertainty.budgets:
        uncorrelated = sum(row.share for row in budget.rows if not math.isnan(row.share))
        assert uncorrelated <= 1.0 + 1e-12
        for row in budget.rows:
            there = differences[budget.result][row.input.id] * row.input.standard
            assert there == pytest.approx(row.contribution, rel=1e-4, abs=1e-7 * budget.standard), (
                row.input.id
            )


def test_the_example_whose_decision_the_uncertainty_changes() -> None:
    """HC-985: the margin is positive, its probability is below the 95 % of the procedure, and the clamp on the
    outlet counts for most, not the shell-side film that was to be tested."""
    found = solve_file(BOOK / "hc-985.yaml")
    (criterion,) = found.base.criteria
    assert criterion.is_met_as_stated and not criterion.met
    assert 0.8 < found.uncertainty.sampling.chances[0].probability < 0.9
    rows = {row.input.symbol: row.share for row in budget_of(found, "area_margin").rows}
    assert max(rows, key=lambda name: rows[name] if not math.isnan(rows[name]) else 0.0) == "T_ho"
    assert rows["h_o"] < 0.05
    assert "area_margin >= 0: 85." in record_text(found)


def test_a_case_without_an_uncertainty_says_why() -> None:
    """SL-301 in still air: 0 m/s with the 1 m/s of the base case would be a speed below zero."""
    text = record_text(solve_file(BOOK / "sl-301.yaml"))
    assert "Case still air has no uncertainty: the tolerance of" in text and "(0 m/s with 1 m/s)" in text


def test_every_case_of_a_criterion_with_a_probability_is_sampled(tmp_path: Path) -> None:
    """The verdict of a case is that of the same file whose samples are of this case."""
    text = (BOOK / "hc-985.yaml").read_text(encoding="utf-8")
    case = "\ncases:\n  warm day:\n    T_ci: {value: 26 degC, source: s}\n    T_co: {value: 35 degC, source: s}\n"
    path = tmp_path / "hc-985.yaml"
    path.write_text(text + case, encoding="utf-8")
    found = solve_file(path)
    (criterion,) = found.cases[1].criteria
    assert criterion.is_met_as_stated and not criterion.met
    told = f"it holds with {100 * criterion.reached:.2f} %, and 95 % is asked for"
    assert told in record_text(found)
    path.write_text(
        text.replace("uncertainty:\n", "uncertainty:\n  case: warm day\n", 1) + case, encoding="utf-8"
    )
    sampled = solve_file(path)
    (chance,) = sampled.uncertainty.sampling.chances
    assert criterion.reached == chance.probability
    (judged,) = sampled.cases[1].criteria
    assert judged.reached == chance.probability
    assert not math.isnan(sampled.base.criteria[0].reached)


def test_the_cooler_against_the_same_sampling_by_hand() -> None:
    """The sampling of the benchmark written out in numpy, with other random numbers and 200 000 samples of each.

    Ends of an interval: sqrt(0.025·0.975/N)/density is 2.67 standard uncertainties over sqrt(N), on both sides.
    """
    sys.path.insert(0, str(Path(__file__).resolve().parent.parent / "benchmarks"))
    import monte_carlo

    count = 200_000
    chain, solutions, drawn, result = monte_carlo.cooler()
    hand = monte_carlo.by_hand(chain.case_inputs(""), count)
    model = ChainModel(chain, chain.case_inputs(""), solutions, [result])
    found = propagate(model, drawn, 0.95, 2, most_trials=count)
    assert found is not None and found.answered == count
    y = found.intervals["U_service"]
    allowed = 3.0 * math.sqrt(2.0) * y.standard / math.sqrt(count)
    assert y.mean == pytest.approx(hand[0], abs=allowed)
    assert y.standard == pytest.approx(hand[1], abs=allowed)
    assert (y.low, y.high) == pytest.approx(hand[2:], abs=2.67 * allowed)


def test_a_case_has_its_own_figures_and_tolerances(tmp_path) -> None:
    """Heat flow is linear in T_i: its uncertainty is UA times that of the case's own tolerance."""
    body = with_tolerance(HEATED, T_i="{standard: 0.8 K}", T_o="{standard: 0.1 K}")
    cases = (
        "cases:\n"
        "  winter:\n"
        "    T_i: {value: 70 degC, source: test, tolerance: {standard: 0.4 K}}\n"
        "    T_o: {value: 10 degC, source: test}\n"
        "acceptance:\n  - {that: heat_flow_service >= 1 W, source: test}\n"
    )
    found = solved(tmp_path, body, SAMPLED.format("heat_flow_service") + "  case: winter\n" + cases)
    winter = next(case for case in found.cases if case.name == "winter").results
    budget = budget_of(found, "heat_flow_service")
    assert budget.value == winter["heat_flow_service"].value != found.base.results["heat_flow_service"].value
    assert budget.standard == pytest.approx(winter["UA_service"].value * math.hypot(0.4, 0.1), rel=1e-9)
    assert sampled_of(found, "heat_flow_service").is_validated
    assert {row.input.id: row.input.value for row in budget.rows}["given/T_i"] == pytest.approx(343.15)
    text = record_text(found)
    assert "(JCGM 100:2008, 5.1.2) in case winter, from the tolerances" in text
    assert "Probability that it holds in case winter" in text


def test_a_flip_at_the_other_end_of_a_stream_is_printed_as_it_would_be_typed(tmp_path) -> None:
    """The warm inlet flips the duty at its outlet, 75 °C: 348.15 K less 273.15 K is not 75 in floats."""
    found = solved(tmp_path, DUTY)
    assert found.flips is not None
    ends = [one for one in found.flips.of_kind("limit") if one.input.symbol == "T_1" and one.at == 348.15]
    assert [one.printed for one in ends] == [75.0] * len(ends) and ends


def test_samples_that_boil_at_the_wall_are_counted(tmp_path) -> None:
    """Dittus and Boelter's equation takes no surface temperature: T_s is linear in that of the other side."""
    body = FLOW.replace("MASS", "18.2").replace("4 bara", "1.01325 bara")
    body = body.replace("74 degC", "90 degC").replace("31 degC", "118 degC")
    found = solved(tmp_path, with_tolerance(body, T_cold="12 K"), SAMPLED.format("U_service"))
    samples = found.uncertainty.sampling
    part = (found.base.results["T inside surface service"].value - 363.15) / 28.0
    # The film's part of the whole difference falls with its factor B; "within 25 %, most data" is 0.25/1.96.
    shares = [(place + 0.5) / 4000.0 for place in range(4000)]
    factors = np.array([NormalDist(1.0, 0.25 / K95).inv_cdf(share) for share in shares])
    parts = part / (part + factors * (1.0 - part))
    # Water boils at 99.974 °C there (CoolProp, IAPWS-95); T_o is even within 106 to 130 °C.
    expected = float(np.clip((40.0 - 9.974 / parts) / 24.0, 0.0, 1.0).mean())
    assert 0.1 < expected < 0.9
    row = next(row for row in samples.outside if row.check == "tube film / wall phase / boils")
    assert row.samples / samples.trials == pytest.approx(
        expected, abs=3.0 * math.sqrt(expected * (1.0 - expected) / samples.trials) + 1e-3
    )


def test_samples_that_boil_at_the_wall_of_a_stated_film_are_counted(tmp_path) -> None:
    """T_s = T_i - (T_i - T)·(t/k)/(t/k + 1/h) is linear in T_i, which is even within 6 K of 102 degC."""
    body = """\
givens:
  H: {value: 1 m, is: height, source: test}
  t: {value: 1 mm, is: thickness, source: test}
  k_w: {value: 50 W/(m K), is: conductivity, source: test}
  h_i: {value: 1e9 W/(m^2 K), is: film coefficient, source: test}
  h: {value: 2000 W/(m^2 K), is: film coefficient, source: test}
  T_i: {value: 102 degC, is: temperature, source: test}
  T: {value: 60 degC, is: temperature, source: test}
  p: {value: 1.01325 bara, is: pressure, source: test}
streams:
  water: {fluid: water, temperature: T, pressure: p}
geometry: {shape: plane, height: H, width: H}
resistances:
  - {name: heater, kind: film, coefficient: h_i, temperature: T_i}
  - {name: wall, kind: wall, conductivity: k_w, thickness: t}
  - {name: film, kind: film, stream: water, coefficient: h}
report: {U on: outside}
"""
    found = solved(tmp_path, with_tolerance(body, T_i="6 K"), SAMPLED.format("U_clean"))
    samples = found.uncertainty.sampling
    part = (0.001 / 50.0) / (0.001 / 50.0 + 1.0 / 2000.0 + 1e-9)
    # Water boils at 99.974 °C there (CoolProp, IAPWS-95).
    boils = 60.0 + 39.974 / (1.0 - part)
    expected = (108.0 - boils) / 12.0
    assert 0.2 < expected < 0.8
    row = next(row for row in samples.outside if row.check == "film / wall phase / boils")
    deviation = math.sqrt(expected * (1.0 - expected) / samples.trials)
    assert row.samples / samples.trials == pytest.approx(expected, abs=3.0 * deviation + 1e-3)


# R_f = R_a - R_b is below zero where R_b, even within 8e-5 of 9e-5, is above 1e-4: 7 of 16 samples.
DIFFERENCE = """\
givens:
  R_a: {value: 1e-4 m^2 K/W, is: both deposits, source: test}
  R_b: {value: 9e-5 m^2 K/W, is: deposit of the other side, source: test}
derived: {R_f: {is: deposit, relation: R_a - R_b}}
geometry: {shape: plane, area: {value: 3 m^2, source: test}}
resistances:
  - {name: inner film, kind: film, coefficient: {value: 2000 W/(m^2 K), source: test}, on: inside}
  - {name: deposit, kind: fouling, resistance: R_f, on: inside}
  - {name: wall, kind: wall, thickness: {value: 2 mm, source: test}, conductivity: {value: 16 W/(m K), source: test}}
  - {name: outer film, kind: film, coefficient: {value: 500 W/(m^2 K), source: test}, on: outside}
report: {U on: outside}
"""
OF_DIFFERENCE = "acceptance:\n  - {{that: 'U_service >= 1 W/(m^2 K)', source: test, probability: {}}}\n"


def test_samples_whose_derived_figure_cannot_be_have_no_answer(tmp_path) -> None:
    found = solved(tmp_path, with_tolerance(DIFFERENCE, R_b="8e-5 m^2 K/W"), SAMPLED.format("U_service"))
    samples = found.uncertainty.sampling
    expected = 7.0 / 16.0
    deviation = math.sqrt(expected * (1.0 - expected) / samples.trials)
    assert samples.unanswered / samples.trials == pytest.approx(expected, abs=4.0 * deviation)


def test_a_criterion_is_judged_where_few_samples_have_an_answer(tmp_path) -> None:
    """R_b must lie between R_c and R_a, within 1e-5 of its value, and is drawn evenly within 8e-5: 1 of 8 samples."""
    body = DIFFERENCE.replace(
        "derived: {R_f: {is: deposit, relation: R_a - R_b}}",
        "  R_c: {value: 8e-5 m^2 K/W, is: deposit when new, source: test}\n"
        "derived:\n"
        "  R_f: {is: deposit, relation: R_a - R_b}\n"
        "  R_g: {is: deposit since, relation: R_b - R_c}\n",
    ).replace(
        "  - {name: wall,",
        "  - {name: further deposit, kind: fouling, resistance: R_g, on: inside}\n  - {name: wall,",
    )
    more = SAMPLED.format("U_service") + OF_DIFFERENCE.format("50 %")
    found = solved(tmp_path, with_tolerance(body, R_b="8e-5 m^2 K/W"), more)
    (criterion,) = found.base.criteria
    assert criterion.is_met_as_stated and not criterion.met
    deviation = math.sqrt(7.0 / 64.0 / found.uncertainty.sampling.trials)
    assert criterion.reached == pytest.approx(1.0 / 8.0, abs=4.0 * deviation)
    text = record_text(found)
    assert "fewer than half of a block have an answer" in text
    assert f"it holds with {100.0 * criterion.reached:.2f} % (" in text and "and 50 % is asked for;" in text
    assert uncertainty_data(found.uncertainty)["samples"]["results"] == {}


# A counterflow cooler whose resistances are as they stand, whatever the temperatures.
TWO_ENDS = """\
givens:
  H: {value: 5 m, is: height, source: test}
  W: {value: 8 m, is: width, source: test}
  t: {value: 2 mm, is: thickness, source: test}
  m_h: {value: 10 kg/s, is: hot flow, source: test}
  T_hi: {value: 80 degC, is: hot inlet, source: test}
  T_ho: {value: 60 degC, is: hot outlet, source: test}
  T_ci: {value: 25 degC, is: cold inlet, source: test}
  T_co: {value: 45 degC, is: cold outlet, source: test}
  m_c: {value: 15 kg/s, is: cold flow, source: test}
  h_h: {value: 3000 W/(m^2 K), is: hot coefficient, source: test}
streams:
  hot: {fluid: water, pressure: {value: 6 bara, source: test}, flow: m_h, phase: liquid}
  cold: {fluid: water, pressure: {value: 0.2 bara, source: test}, flow: m_c, phase: liquid}
duty:
  arrangement: counterflow
  hot: {stream: hot, inlet: T_hi, outlet: T_ho}
  cold: {stream: cold, inlet: T_ci, outlet: T_co}
geometry: {shape: plane, height: H, width: W}
resistances:
  - {name: hot film, kind: film, stream: hot, coefficient: h_h, on: inside}
  - {name: wall, kind: wall, conductivity: {value: 50 W/(m K), source: test}, thickness: t}
  - {name: cold film, kind: film, stream: cold, situation: trial-film}
report: {U on: outside}
"""


def test_samples_that_boil_at_one_end_are_counted_there(tmp_path) -> None:
    """T_s = T_co + U·(T_hi - T_co)/h at the hot inlet; at 0.2 bar water boils at 60.06 degC (IAPWS-IF97)."""
    situation = house_situation("trial-film", "- {use: trial-law, because: the only one}", "trial-law")
    law = TRIAL_LAW.replace("500 W", "4000 W").replace("h: 500.0", "h: 4000.0")
    body = with_tolerance(TWO_ENDS, T_hi="10 K")
    found = solved(tmp_path, body, SAMPLED.format("U_clean"), {"trial-film": situation, "trial-law": law})
    samples = found.uncertainty.sampling
    u = found.base.results["U_clean"].value
    assert u == pytest.approx(1.0 / (1.0 / 3000.0 + 0.002 / 50.0 + 1.0 / 4000.0))
    boils = 45.0 + 15.06 * 4000.0 / u
    expected = (90.0 - boils) / 20.0
    assert 0.2 < expected < 0.8
    boiling = {row.check: row for row in samples.outside if "boils" in row.check}
    assert list(boiling) == ["cold film / wall phase / boils at the hot inlet"]
    (row,) = boiling.values()
    # Without a deposit both conditions are one.
    assert (row.condition, row.nominal) == ("clean and service", "within")
    deviation = math.sqrt(expected * (1.0 - expected) / samples.trials)
    assert row.samples / samples.trials == pytest.approx(expected, abs=3.0 * deviation + 1e-3)


def test_a_wall_turned_inside_out_has_no_answer(tmp_path) -> None:
    """d_o even within ± 4 mm, d_i 3.3 mm below it: a share (4 - 3.3)/8 of the samples has no wall."""
    body = with_tolerance(FLOW.replace("MASS", "18.2"), d_o="4 mm")
    samples = solved(tmp_path, body, SAMPLED.format("U_service")).uncertainty.sampling
    expected = (4.0 - 3.3) / 8.0
    assert samples.unanswered / samples.trials == pytest.approx(
        expected, abs=3.0 * math.sqrt(expected * (1.0 - expected) / samples.trials)
    )
