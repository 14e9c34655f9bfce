"""The fit: known parameters come back, the covariance is that of repeated draws, errors move it as foretold."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from history import DAY

from calcbook.faults import Collector, Place
from calcbook.library import Library
from calcbook.survey.fitting import Data, Fit, _neighbours_alike, fit
from calcbook.survey.growth import GrowthModel, growth_model

PLACE = Place("trial.yaml")
# The growth written out apart from the cards: the usual closed forms (Epstein 1981; Kern and Seaton 1959).
GROWTH = {
    "fouling-linear": ({"r": 3e-4 / (150 * DAY)}, lambda t, r: r * t),
    "fouling-falling-rate": (
        {"a": 4e-4 / (60 * DAY), "b": 7000.0},
        lambda t, a, b: (np.sqrt(1 + 2 * a * b * t) - 1) / b,
    ),
    "kern-seaton-1959": (
        {"R_inf": 3.2e-4, "tau": 75 * DAY},
        lambda t, R_inf, tau: R_inf * (1 - np.exp(-t / tau)),
    ),
}


def model_of(name: str) -> GrowthModel:
    collector = Collector()
    model = growth_model(Library(), name, PLACE, collector)
    collector.stop_if_any()
    assert model is not None
    return model


def rows_of(name: str, count: int = 300, noise: float = 0.0, seed: int = 0) -> Data:
    """Two cycles of 150 days with different offsets, and zero anchored on the first ten days of each."""
    figures, growth = GROWTH[name]
    times = np.linspace(0.0, 299.9 * DAY, count)
    cycles = (times >= 150 * DAY).astype(int)
    since = times - 150 * DAY * cycles
    draw = np.random.default_rng(seed)
    values = growth(since, *figures.values()) + np.array([4e-5, -1e-5])[cycles]
    return Data(since, values + noise * draw.standard_normal(count), cycles, since <= 10 * DAY)


def fitted(name: str, data: Data) -> Fit:
    found = fit(model_of(name), data)
    assert found.determined
    return found


@pytest.mark.parametrize("name", GROWTH)
def test_known_parameters_come_back_without_noise(name: str) -> None:
    found = fitted(name, rows_of(name))
    # Rounding of the rows, relative 1e-16 of 1e-4, against slopes of the same size.
    assert dict(zip(found.model.symbols, found.parameters, strict=True)) == pytest.approx(
        GROWTH[name][0], rel=1e-9
    )
    assert found.deviation < 1e-15
    # What is left is rounding, which says nothing of neighbours.
    assert found.correlation == 0.0


@pytest.mark.parametrize("name", GROWTH)
def test_what_is_wrong_by_the_same_amount_in_a_cycle_drops_out(name: str) -> None:
    data = rows_of(name, noise=1e-5)
    shifted = Data(data.times, data.values + np.array([7e-5, -3e-5])[data.cycles], data.cycles, data.zero)
    assert fitted(name, shifted).parameters == pytest.approx(fitted(name, data).parameters, rel=1e-7)


@pytest.mark.parametrize("name", GROWTH)
def test_the_covariance_is_that_of_repeated_draws(name: str) -> None:
    draws = [fitted(name, rows_of(name, noise=4e-6, seed=seed)) for seed in range(60)]
    apart = np.array([found.parameters for found in draws])
    stated = np.mean([np.sqrt(np.diag(found.scatter)) for found in draws], axis=0)
    # A standard deviation of 60 draws is itself known to 1/sqrt(120) = 9 %; three times that.
    assert np.std(apart, axis=0) / stated == pytest.approx(np.ones(apart.shape[1]), abs=0.27)


def test_rows_that_wander_together_widen_the_scatter() -> None:
    data = rows_of("fouling-linear")
    draw = np.random.default_rng(1)
    wander = np.zeros(len(data))
    for number, step in enumerate(draw.standard_normal(len(data) - 1), 1):
        wander[number] = 0.6 * wander[number - 1] + step
    rows = Data(data.times, data.values + 4e-6 * wander, data.cycles, data.zero)
    found = fitted("fouling-linear", rows)
    # The correlation of 300 such rows is known to about sqrt(1 - 0.6**2)/sqrt(300) = 0.05; three times that.
    assert found.correlation == pytest.approx(0.6, abs=0.15)


def test_the_covariance_of_rows_that_wander_together_is_that_of_repeated_draws() -> None:
    """Each row takes 0.6 of what the row before is off: neighbours are alike by 0.6, and one draw stands for four."""
    draw = np.random.default_rng(2)
    plain, draws = rows_of("fouling-linear"), []
    for _ in range(60):
        wander = draw.standard_normal(len(plain))
        for number in range(1, len(wander)):
            wander[number] += 0.6 * wander[number - 1]
        draws.append(
            fitted(
                "fouling-linear", Data(plain.times, plain.values + 4e-6 * wander, plain.cycles, plain.zero)
            )
        )
    apart = np.std([found.parameters[0] for found in draws])
    stated = np.mean([np.sqrt(found.scatter[0, 0]) for found in draws])
    # As above, three times 9 %; without the correlation the stated one would be half of it.
    assert apart / stated == pytest.approx(1.0, abs=0.27)


def test_the_covariance_of_four_rows_by_hand() -> None:
    """Times 0, 1, 2, 3 s, zero on the first two: s = t - 0.5, sum of s² = 9, sum of s = 4. The slope takes s/9 of every
    row, and 4/9/2 of either that anchors zero are taken off: (-2.5, -1.5, 1.5, 2.5)/9, squares 17/81."""
    times, zero = np.arange(4.0), np.array([True, True, False, False])
    data = Data(times, 1e-6 * times + 1e-8 * np.array([1.0, -1.0, -1.0, 1.0]), np.zeros(4, int), zero)
    found = fit(model_of("fouling-linear"), data)
    # Four rows less one parameter and one zero.
    assert found.deviation == pytest.approx(np.sqrt(np.sum(found.residuals**2) / (4 - 1 - 1)), rel=1e-12)
    alike = (1.0 + found.correlation) / (1.0 - found.correlation)
    assert found.scatter[0, 0] == pytest.approx(17.0 / 81.0 * found.deviation**2 * alike, rel=1e-12)


@pytest.mark.parametrize(
    ("residuals", "cycles", "correlation"),
    [
        # Two pairs of neighbours within cycles, of a sum of squares of four.
        ((1.0, 1.0, 1.0, 1.0), (0, 0, 1, 1), 0.5),
        # Neighbours on opposite sides do not make a mean any surer than rows apart.
        ((1.0, -1.0, 1.0, -1.0), (0, 0, 0, 0), 0.0),
        # 99 of 100: such rows say nothing of the scatter of their mean, and the bound is taken.
        ((1.0,) * 100, (0,) * 100, 0.95),
    ],
)
def test_neighbours_are_alike_within_a_cycle_from_nothing_to_the_bound(
    residuals: tuple[float, ...], cycles: tuple[int, ...], correlation: float
) -> None:
    off, zero = np.array(residuals), np.zeros(len(cycles), bool)
    zero[[cycles.index(cycle) for cycle in set(cycles)]] = True
    data = Data(np.arange(float(len(off))), np.arange(float(len(off))), np.array(cycles), zero)
    assert _neighbours_alike(data, off) == correlation


@pytest.mark.parametrize("name", GROWTH)
def test_an_error_of_the_rows_moves_the_fit_as_the_first_order_says(name: str) -> None:
    data = rows_of(name, noise=2e-6)
    error = 1e-8 * np.sin(data.times / (20 * DAY))
    moved = Data(data.times, data.values + error, data.cycles, data.zero)
    found = fitted(name, data)
    foretold = found.moved_by(error[None, :], np.arange(len(data)))[:, 0]
    # Beside the first order: residuals of 2e-6 on the curvature of the model, some per cent.
    assert fitted(name, moved).parameters - found.parameters == pytest.approx(foretold, rel=0.05)


def test_rows_that_do_not_bend_leave_the_final_resistance_open() -> None:
    found = fit(model_of("kern-seaton-1959"), rows_of("fouling-linear", noise=1e-5))
    unsure = np.sqrt(np.diag(found.scatter))
    assert not found.determined or bool(np.any(unsure > 0.5 * np.abs(found.parameters)))


def test_rows_at_one_time_do_not_tell_two_parameters_apart() -> None:
    """Every R_inf has a tau that meets the one resistance at 60 days: the slopes in both are parallel."""
    times = np.array([0.0] * 5 + [60 * DAY] * 7)
    data = Data(times, 1e-4 * (times > 0.0) + 1e-7 * (-1.0) ** np.arange(12), np.zeros(12, int), times == 0.0)
    assert not fit(model_of("kern-seaton-1959"), data).determined


def test_a_parameter_that_only_shifts_the_zero_is_not_fitted(tmp_path: Path) -> None:
    text = (Path(__file__).parents[2] / "calcbook/library/methods/fouling-linear.yaml").read_text(
        encoding="utf-8"
    )
    text = text.replace("method: fouling-linear", "method: shifted")
    text = text.replace("R_0: {is: first fouling resistance, absent: 0}", "R_0: first fouling resistance")
    (tmp_path / "shifted.yaml").write_text(text, encoding="utf-8")
    collector = Collector()
    model = growth_model(Library(tmp_path), "shifted", PLACE, collector)
    assert model is not None and set(model.symbols) == {"r", "R_0"}
    found = fit(model, rows_of("fouling-linear"))
    assert found.model.symbols == ("r",)
    assert found.model.held["R_0"] == 0.0
    assert found.parameters == pytest.approx([GROWTH["fouling-linear"][0]["r"]], rel=1e-9)


def test_a_card_of_something_else_is_no_growth_model() -> None:
    collector = Collector()
    assert growth_model(Library(), "gnielinski-1976", PLACE, collector) is None
    assert [fault.code for fault in collector] == ["model-not-growth"]
