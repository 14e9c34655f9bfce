"""Monte Carlo propagation: examples of JCGM 101:2008, exact laws, and that the answer is one answer.

Tolerances: an end of an interval over N samples has a standard deviation of sqrt(0.025·0.975/N)/density there;
three of them are allowed, so that a right program fails in one of some hundred changes of the seed.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from plain_models import Arcsine, Plain, gauge_block, slopes_of

from calcbook.uncertainty.budget import coverage_factor, first_order
from calcbook.uncertainty.distributions import Normal, Rectangular, Student
from calcbook.uncertainty.sampling import (
    Drawn,
    Sampled,
    _Propagation,
    _summary,
    block_size,
    draw,
    is_possible,
    propagate,
    shares,
    tolerance_of,
)


def sampled(model):
    """A plain model as one for samples."""
    return lambda x: Sampled(model(x))


def added(x):
    return {"y": x["a"] + x["b"] + x["c"] + x["d"]}


def four(law) -> list[Drawn]:
    return [Drawn(name, law) for name in "abcd"]


def test_sum_of_four_normal_figures() -> None:
    """JCGM 101:2008, 9.2.2: ±3.92 (from memory); exact 2·1.959964."""
    found = propagate(sampled(added), four(Normal(0.0, 1.0)), 0.95, 2)
    y = found.intervals["y"]
    allowed = 3.0 * 2.0 * 2.67 / math.sqrt(found.answered)
    assert y.standard == pytest.approx(2.0, abs=3.0 * 2.0 / math.sqrt(2 * found.answered))
    assert y.low == pytest.approx(-3.91993, abs=allowed)
    assert y.high == pytest.approx(3.91993, abs=allowed)


def test_sum_of_four_rectangular_figures() -> None:
    """JCGM 101:2008, 9.2.3: ±3.88 (from memory); exact quantile of the sum of four, 3.87941."""
    found = propagate(sampled(added), four(Rectangular(0.0, math.sqrt(3.0))), 0.95, 2)
    y = found.intervals["y"]
    allowed = 3.0 * 2.0 * 2.67 / math.sqrt(found.answered)
    assert y.low == pytest.approx(-3.87941, abs=allowed)
    assert y.high == pytest.approx(3.87941, abs=allowed)


def test_one_rectangular_figure_that_outweighs_the_others() -> None:
    """JCGM 101:2008, 9.2.4: first order gives 10.1 and ±19.9, the samples ±17.0; from memory."""
    width = math.sqrt(3.0)
    figures = [*four(Rectangular(0.0, width))[:3], Drawn("d", Rectangular(0.0, 10.0 * width))]
    plain = [Plain(one.id, 0.0, one.distribution.standard) for one in figures]
    budget = first_order(plain, dict.fromkeys("abcd", 1.0))
    assert budget.standard == pytest.approx(10.15, abs=0.01)
    expanded = coverage_factor(0.95, budget.degrees) * budget.standard
    assert expanded == pytest.approx(19.9, abs=0.05)
    found = propagate(sampled(added), figures, 0.95, 2)
    y = found.intervals["y"]
    assert y.low == pytest.approx(-17.0, abs=0.1) and y.high == pytest.approx(17.0, abs=0.1)
    assert abs(expanded - y.high) > y.tolerance  # 9.2.4: first order is not validated


def test_mass_calibration() -> None:
    """JCGM 101:2008, 9.3: first order 0.0539 mg, samples 1.2341, 0.0754, [1.0834, 1.3825] mg; from memory."""
    laws = {
        "m_Rc": Normal(100_000.000, 0.050),
        "dm_Rc": Normal(1.234, 0.020),
        "rho_a": Rectangular(1.20, 0.10),
        "rho_W": Rectangular(8000.0, 1000.0),
        "rho_R": Rectangular(8000.0, 50.0),
    }

    def model(x):
        air = (x["rho_a"] - 1.2) * (1.0 / x["rho_W"] - 1.0 / x["rho_R"])
        return {"y": (x["m_Rc"] + x["dm_Rc"]) * (1.0 + air) - 100_000.0}

    plain = [Plain(name, law.mean, law.standard) for name, law in laws.items()]
    budget = first_order(plain, slopes_of(model, plain))
    assert budget.standard == pytest.approx(0.0539, abs=5e-5)
    found = propagate(sampled(model), [Drawn(name, law) for name, law in laws.items()], 0.95, 2)
    y = found.intervals["y"]
    allowed = 3.0 * 0.0754 * 2.67 / math.sqrt(found.answered)
    assert y.mean == pytest.approx(1.234, abs=allowed)
    assert y.standard == pytest.approx(0.0754, abs=allowed)
    # The document prints the shortest interval: of a law this even its length is that of equal tails, while its
    # ends may lie anywhere within some thousandths.
    assert y.high - y.low == pytest.approx(1.3825 - 1.0834, abs=math.sqrt(2.0) * allowed)
    assert (y.low, y.high) == pytest.approx((1.0834, 1.3825), abs=3e-3)
    assert abs(1.234 + 1.96 * budget.standard - y.high) > y.tolerance  # 9.3.2.5: not validated


@pytest.mark.parametrize("r", [0.0, 0.9])
@pytest.mark.parametrize("x_1", [0.0, 0.010, 0.050])
def test_comparison_loss(x_1: float, r: float) -> None:
    """JCGM 101:2008, 9.4: Y = X_1² + X_2², u = 0.005 both; mean and variance are exact here.

    With x_2 = 0: E = x_1² + 2u², V = 4·x_1²·u² + 4·u⁴·(1 + r²). The figures of tables 8 and 9 (from memory):
    50 and 50, 150 and 112, 2 550 and 502 (all 1e-6) without correlation.
    """
    u = 0.005
    figures = [Drawn("X_1", Normal(x_1, u)), Drawn("X_2", Normal(0.0, u))]
    found = propagate(
        lambda x: Sampled({"y": x["X_1"] ** 2 + x["X_2"] ** 2}),
        figures,
        0.95,
        2,
        {frozenset(("X_1", "X_2")): r},
    )
    y = found.intervals["y"]
    mean = x_1**2 + 2.0 * u**2
    standard = math.sqrt(4.0 * x_1**2 * u**2 + 4.0 * u**4 * (1.0 + r**2))
    assert y.mean == pytest.approx(mean, abs=3.0 * standard / math.sqrt(found.answered))
    # Kurtosis of such a sum is at most that of a squared normal figure, 15: that of the standard deviation follows.
    assert y.standard == pytest.approx(standard, abs=3.0 * standard * math.sqrt(14.0 / 4.0 / found.answered))
    table = {0.0: (50e-6, 50e-6), 0.010: (150e-6, 112e-6), 0.050: (2550e-6, 502e-6)}
    if r == 0.0:
        assert (mean, standard) == pytest.approx(table[x_1], rel=5e-3)


def test_gauge_block() -> None:
    """JCGM 101:2008, 9.5: 838 nm; first order 32 and [745, 931], samples 36 and [745, 932] at 99 %; from memory."""
    figures = [
        Drawn("L_S", Student(50_000_623.0, 25.0, 18)),
        Drawn("D", Student(215.0, 6.0, 24)),
        Drawn("d1", Student(0.0, 4.0, 5)),
        Drawn("d2", Student(0.0, 7.0, 8)),
        Drawn("alpha", Rectangular(11.5e-6, 2e-6)),
        Drawn("theta0", Normal(-0.1, 0.2)),
        Drawn("Delta", Arcsine(0.0, 0.5)),
        Drawn("dalpha", Rectangular(0.0, 1e-6)),
        Drawn("dalpha-", Rectangular(0.0, 1.0)),
        Drawn("dtheta", Rectangular(0.0, 0.050)),
        Drawn("dtheta-", Rectangular(0.0, 1.0)),
    ]
    found = propagate(sampled(gauge_block), figures, 0.99, 2)
    y = found.intervals["y"]
    assert y.mean == pytest.approx(838.0, abs=0.5)
    assert y.standard == pytest.approx(36.0, abs=0.5)
    # The document prints whole nanometres; its figures are from memory: two of them are allowed.
    assert y.low == pytest.approx(745.0, abs=2.0)
    assert y.high == pytest.approx(932.0, abs=2.0)


# --- one answer -------------------------------------------------------------------------------------


def test_the_answer_does_not_depend_on_how_many_blocks_are_solved_together() -> None:
    figures = [Drawn("a", Normal(2.0, 0.3)), Drawn("b", Rectangular(5.0, 1.0))]
    model = sampled(lambda x: {"y": np.exp(x["a"]) / x["b"]})
    found = [propagate(model, figures, 0.95, 2, together=count) for count in (1, 3, 8)]
    assert found[0] == found[1] == found[2]


def test_a_block_does_not_depend_on_other_blocks_or_other_figures() -> None:
    figures = [Drawn("a", Normal(2.0, 0.3)), Drawn("b", Rectangular(5.0, 1.0))]
    later = draw(figures, {}, 7, 1000)
    draw(figures, {}, 3, 1000)
    again = draw(figures[1:], {}, 7, 1000)
    assert np.array_equal(later["b"], again["b"])
    assert not np.array_equal(later["b"], draw(figures, {}, 8, 1000)["b"])


def test_the_stream_of_a_figure_is_fixed() -> None:
    """Philox gives the same raw numbers in every version of numpy: other ones would change records."""
    first = shares("given/T_hot", 0, 3)
    assert first == pytest.approx([0.98196031, 0.14925207, 0.45998106], abs=5e-9)


def test_shares_are_even() -> None:
    values = np.sort(shares("a", 0, 100_000))
    assert values[0] > 0.0 and values[-1] < 1.0
    # Kolmogorov's distance is below 1.95/sqrt(N) in 999 of 1000 cases.
    assert np.abs(values - (np.arange(100_000) + 0.5) / 100_000).max() < 1.95 / math.sqrt(100_000)


def test_blocks_and_tolerances_of_the_supplement() -> None:
    assert block_size(0.95) == 10_000  # JCGM 101:2008, 7.9.4 b
    assert block_size(0.999) == 100_000
    # 7.9.2, examples: 0.00035 with two digits is 35e-5, so 0.5e-5; 2 kg with one digit is 2e0, so 0.5; from memory.
    assert tolerance_of(0.00035, 2) == pytest.approx(0.5e-5)
    assert tolerance_of(2.0, 1) == 0.5
    assert tolerance_of(9.96, 2) == 0.5  # written with two digits it is 1.0e1
    assert tolerance_of(0.0, 2) == 0.0


def test_most_trials_are_told() -> None:
    figures = [Drawn("a", Normal(0.0, 1.0))]
    found = propagate(lambda x: Sampled({"y": x["a"]}), figures, 0.95, 2, most_trials=50_000)
    assert found.is_capped and found.trials == 50_000
    assert max(found.intervals["y"].spread) > found.intervals["y"].aim


@pytest.mark.parametrize(
    ("count", "coverage", "low", "high"),
    [
        (10, 0.5, 3.0, 8.0),  # q = 5 by rounding, M − q is odd: r = (5 + 1)/2
        (10, 0.6, 2.0, 8.0),  # q = 6, M − q is even: r = 4/2
        (100, 0.95, 3.0, 98.0),  # q = 95: r = (5 + 1)/2
        (1000, 0.95, 25.0, 975.0),  # q = 950: r = 50/2
    ],
)
def test_the_ends_of_an_interval_are_those_of_the_supplement(
    count: int, coverage: float, low: float, high: float
) -> None:
    """JCGM 101:2008, 7.7.2, on the numbers from 1 in any order: from y_(r) to y_(r+q); from memory."""
    values = np.arange(count, 0.0, -1.0)
    assert _summary(values, coverage)[2:] == (low, high)


def test_what_is_steady_at_once_takes_five_blocks_and_is_as_steady_as_they_say() -> None:
    """JCGM 101:2008, 7.9.4 g: s_z² = Σ(z_r − z)²/(h·(h − 1)), here by hand for the means of the blocks."""
    figures = [Drawn("a", Normal(10.0, 1.0))]
    found = propagate(lambda x: Sampled({"y": x["a"]}), figures, 0.95, 1)
    means = [draw(figures, {}, number, 10_000)["a"].mean() for number in range(found.blocks)]
    scatter = sum((one - np.mean(means)) ** 2 for one in means) / (found.blocks * (found.blocks - 1))
    assert found.intervals["y"].spread[0] == pytest.approx(2.0 * math.sqrt(scatter), rel=1e-12)
    still = propagate(lambda x: Sampled({"y": 0.0 * x["a"] + 3.0}), figures, 0.95, 1)
    assert (still.blocks, still.trials, still.is_capped) == (5, 50_000, False)


def test_the_uncertainty_over_blocks_is_that_of_all_their_samples() -> None:
    """Blocks that lie apart, some of whose samples have no answer: against the deviation of all samples at once."""
    calls = iter(range(100))

    def model(x):
        place = next(calls)
        return Sampled({"y": np.where(x["a"] > 0.3 * place, x["a"] + 2.0 * place, np.nan)})

    run = _Propagation(model, [Drawn("a", Normal(5.0, 1.0))], 0.95, 2, {}, 50_000, 1)
    found = run.run()
    assert found.is_answered and found.blocks == 5
    whole = np.concatenate(run.kept["y"]).std(ddof=1)
    assert run._standard("y") == pytest.approx(whole, rel=1e-12)
    assert whole > 2.0


def test_half_of_the_samples_are_enough() -> None:
    def of_a_block(answered: int):
        return lambda x: Sampled({"y": np.where(np.arange(len(x["a"])) < answered, x["a"], np.nan)})

    figures = [Drawn("a", Rectangular(0.5, 0.5))]
    for answered, enough in ((5_000, True), (4_999, False)):
        found = propagate(of_a_block(answered), figures, 0.95, 1, most_trials=10_000, together=1)
        assert found.is_answered is enough


def test_samples_without_an_answer_are_counted_and_left_out() -> None:
    figures = [Drawn("a", Rectangular(0.5, 0.5))]
    found = propagate(
        lambda x: Sampled({"y": np.where(x["a"] < 0.1, np.nan, x["a"])}, {"high": x["a"] > 0.55}),
        figures,
        0.95,
        1,
    )
    assert 1.0 - found.answered / found.trials == pytest.approx(0.1, abs=0.005)
    assert found.marks["high"] / found.answered == pytest.approx(0.5, abs=0.01)
    assert found.intervals["y"].low == pytest.approx(0.1 + 0.9 * 0.025, abs=0.003)


def test_where_few_samples_have_an_answer_they_are_counted_and_no_figure_is_made() -> None:
    found = propagate(
        lambda x: Sampled({"y": np.where(x["a"] < 0.6, np.nan, x["a"])}, {"high": x["a"] > 0.3}),
        [Drawn("a", Rectangular(0.5, 0.5))],
        0.95,
        1,
    )
    assert not found.is_answered and not found.intervals
    assert found.trials == found.block_size and found.marks["high"] == found.answered
    # A share of 0.4 of 10 000: 0.02 are four standard deviations.
    assert found.answered / found.trials == pytest.approx(0.4, abs=0.02)


def test_a_block_without_enough_answers_takes_back_the_figures_of_those_before() -> None:
    calls = iter(range(100))

    def model(x):
        return Sampled({"y": np.where(x["a"] < (1.0, 0.4)[next(calls)], x["a"], np.nan)})

    found = propagate(model, [Drawn("a", Rectangular(0.5, 0.5))], 0.95, 1, together=1)
    assert found.blocks == 2 and not found.is_answered and found.intervals == {}
    # What was given up has not become steady.
    assert found.is_capped


def test_a_sample_has_an_answer_where_every_output_has_one() -> None:
    """Two outputs without an answer below 0.1 and above 0.8: seven tenths of the samples are left, for both."""
    found = propagate(
        lambda x: Sampled(
            {
                "low": np.where(x["a"] < 0.1, np.nan, x["a"]),
                "high": np.where(x["a"] > 0.8, np.nan, x["a"]),
            },
            {"below": x["a"] < 0.45},
        ),
        [Drawn("a", Rectangular(0.5, 0.5))],
        0.95,
        1,
    )
    # Three standard deviations of a share of at least 50 000 samples are 0.0067 at most.
    assert found.answered / found.trials == pytest.approx(0.7, abs=0.0067)
    assert found.marks["below"] / found.answered == pytest.approx(0.5, abs=0.0081)
    for one in found.intervals.values():
        assert 0.1 <= one.low < one.high <= 0.8


def test_every_figure_of_every_output_is_five_times_steadier_than_the_tolerance() -> None:
    """JCGM 101:2008, 7.9.4 and 8.2: twice the spread of mean, deviation and both ends, against a fifth of the tolerance."""
    figures = [Drawn("a", Normal(10.0, 1.0)), Drawn("b", Normal(10.0, 1.0))]
    found = propagate(
        lambda x: Sampled({"still": x["a"] * 0.0 + 1.0, "y": x["a"] + np.exp(x["b"] - 10.0)}),
        figures,
        0.95,
        1,
    )
    y = found.intervals["y"]
    assert not found.is_capped and found.blocks > 5
    assert y.tolerance == tolerance_of(y.standard, 1) and y.aim == y.tolerance / 5.0
    assert max(y.spread) <= y.aim
    before = propagate(
        lambda x: Sampled({"still": x["a"] * 0.0 + 1.0, "y": x["a"] + np.exp(x["b"] - 10.0)}),
        figures,
        0.95,
        1,
        most_trials=found.trials - found.block_size,
    )
    assert before.is_capped and max(before.intervals["y"].spread) > before.intervals["y"].aim


def test_correlated_figures_have_their_coefficient() -> None:
    figures = [Drawn(name, Normal(1.0, 0.5)) for name in "abc"]
    stated = {frozenset("ab"): 0.5, frozenset("bc"): -0.3, frozenset("ac"): 0.2}
    values = draw(figures, stated, 0, 200_000)
    for pair, r in stated.items():
        one, other = sorted(pair)
        assert np.corrcoef(values[one], values[other])[0, 1] == pytest.approx(
            r, abs=0.007
        )  # three of 1/sqrt(N)
    assert values["a"].std() == pytest.approx(0.5, abs=0.0025)


@pytest.mark.parametrize("r", [-0.9, 0.3, 0.6, 1.0])
def test_correlated_figures_keep_their_own_law(r: float) -> None:
    """Rectangular figures from normal scores with r have (6/pi)·asin(r/2) (Pearson 1907; from memory)."""
    figures = [Drawn("a", Rectangular(2.0, 0.5)), Drawn("b", Rectangular(-1.0, 3.0))]
    values = draw(figures, {frozenset("ab"): r}, 0, 200_000)
    for figure in figures:
        law = figure.distribution
        shares_of = np.sort((values[figure.id] - law.mean) / law.half_width / 2.0 + 0.5)
        assert shares_of[0] >= 0.0 and shares_of[-1] <= 1.0
        even = (np.arange(200_000) + 0.5) / 200_000
        assert np.abs(shares_of - even).max() < 1.95 / math.sqrt(200_000)
    found = np.corrcoef(values["a"], values["b"])[0, 1]
    assert found == pytest.approx(6.0 / math.pi * math.asin(r / 2.0), abs=0.007)  # three of 1/sqrt(N)
    # Largest difference between r and that of the figures, as the record tells.
    assert abs(found - r) < 0.02 + 0.007


def test_matrices_that_cannot_be() -> None:
    assert is_possible(np.array([[1.0, 1.0], [1.0, 1.0]]))
    # Three figures that are one: the eigenvalues are 3, 0 and 0, to rounding on either side of nothing.
    assert np.linalg.eigvalsh(np.ones((3, 3))).min() < 0.0 and is_possible(np.ones((3, 3)))
    assert not is_possible(np.array([[1.0, 0.9, -0.9], [0.9, 1.0, 0.9], [-0.9, 0.9, 1.0]]))
