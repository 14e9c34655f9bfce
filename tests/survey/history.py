"""A plant history made up: one water cooler whose deposit grows in a known way, measured by sensors that err.

Nothing here comes from calcbook: logarithmic means, films and water are written out again. Run as a script it
writes the history of the example: `python tests/survey/history.py calcs/wc-111-history.csv`. Larkmoor Works and
its cooler are invented.

The unit: hot water in the tubes, cooling water in counterflow outside, whose film coefficient follows the power
0.6 of the flow. What is drawn for each seed, and how far it may lie from what is stated, stands in `STATED`.
"""

from __future__ import annotations

import csv
import sys
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

Array = np.ndarray
DAY = 86400.0
YEAR = 365.25 * DAY
START = np.datetime64("2025-02-03T06:00")

# The unit as its drawing has it (m, m, m, tubes) and the films' reference (W/(m² K), kg/s).
BORE, OUTSIDE, LENGTH, TUBES = 0.01575, 0.01905, 4.88, 62
WALL, SHELL_FILM, SHELL_FLOW = 15.2, 5200.0, 20.0
DESIGN = {"T_hi": 80.0, "T_ci": 22.0, "m_hot": 18.0, "m_cold": 20.0}

# Half-widths of what is wrong in all rows alike: sensors (K, or part of the figure), drift in a year, the
# stated shell film and wall, the heat loss; and the standard deviation of the tube film's factor, as
# Gnielinski's 20 % for 90 % of the data says it (20 % / 1.6449).
STATED = {
    "T": 0.25,
    "m": 0.015,
    "T drift": 0.10,
    "m drift": 0.005,
    "shell film": 0.15,
    "wall": 0.05,
    "loss": 0.01,
    "loss tolerance": 0.005,
    "tube film": 0.20 / 1.6448536269514722,
}
# Standard deviations of single rows.
NOISE = {"T": 0.12, "m": 0.006}


@dataclass(frozen=True)
class Truth:
    """What is true of a history: the parameters of its deposit, and of everything that errs."""

    model: str = "asymptotic"
    R_inf: float = 3.2e-4
    tau: float = 75.0 * DAY
    rate: float = 3.0e-4 / (150.0 * DAY)
    a: float = 4.0e-4 / (60.0 * DAY)
    b: float = 7000.0
    cleanings: tuple[float, ...] = (0.0, 205.0 * DAY)
    left_over: tuple[float, ...] = (0.0, 3.0e-5)
    errors: dict[str, float] = field(default_factory=dict)

    def deposit(self, since: Array) -> Array:
        """The fouling resistance on the outside after a time since cleaning, m² K/W."""
        if self.model == "linear":
            return self.rate * since
        if self.model == "falling rate":
            return (np.sqrt(1.0 + 2.0 * self.a * self.b * since) - 1.0) / self.b
        return self.R_inf * (1.0 - np.exp(-since / self.tau))


def water(celsius: Array) -> tuple[Array, Array, Array, Array]:
    """Density, heat capacity, conductivity and viscosity of water at 4 bar, 5 to 95 °C.

    Polynomials fitted to IAPWS-IF97 values (package iapws); within 2e-5, 7e-5, 7e-4 and 2e-4 of them.
    """
    x = celsius / 100.0
    density = np.polyval([-11.7713, 38.0814, -72.134, 4.16225, 1000.1], x)
    capacity = np.polyval([-356.106, 1076.75, -1260.34, 818.916, -279.686, 4215.46], x)
    conductivity = np.polyval([0.035576, -0.146892, 0.232084, 0.557163], x)
    viscosity = np.exp(np.polyval([-0.513355, 1.84975, -2.97025, 3.22355, -3.43884, -6.32649], x))
    return density, capacity, conductivity, viscosity


def tube_film(flow: Array, bulk: Array, wall: Array) -> Array:
    """Gnielinski 1976 with Filonenko's friction factor, W/(m² K) on the bore."""
    _, capacity, conductivity, viscosity = water(bulk)
    _, capacity_wall, conductivity_wall, viscosity_wall = water(wall)
    reynolds = 4.0 * flow / TUBES / (np.pi * BORE * viscosity)
    prandtl = viscosity * capacity / conductivity
    at_wall = viscosity_wall * capacity_wall / conductivity_wall
    friction = (1.82 * np.log10(reynolds) - 1.64) ** -2
    nusselt = (
        friction
        / 8
        * (reynolds - 1000)
        * prandtl
        / (1 + 12.7 * np.sqrt(friction / 8) * (prandtl ** (2 / 3) - 1))
    )
    return nusselt * (1 + (BORE / LENGTH) ** (2 / 3)) * (prandtl / at_wall) ** 0.11 * conductivity / BORE


def outlets(
    T_hi: Array, T_ci: Array, m_hot: Array, m_cold: Array, deposit: Array, errors: dict[str, float]
) -> tuple[Array, Array]:
    """Outlet temperatures of the true unit, °C: counterflow, films at the mean temperatures, until they rest."""
    area = np.pi * OUTSIDE * LENGTH * TUBES
    wall_resistance = OUTSIDE * np.log(OUTSIDE / BORE) / (2 * WALL * (1 + errors.get("wall", 0.0)))
    shell = SHELL_FILM * (1 + errors.get("shell film", 0.0)) * (m_cold / SHELL_FLOW) ** 0.6
    T_ho, T_co, T_wall = T_hi - 12.0, T_ci + 12.0, T_hi - 20.0
    for _ in range(40):
        hot, cold = (T_hi + T_ho) / 2, (T_ci + T_co) / 2
        tube = tube_film(m_hot, hot, T_wall) * (1 + errors.get("tube film", 0.0))
        inner = OUTSIDE / BORE / tube
        overall = 1 / (inner + wall_resistance + deposit + 1 / shell)
        T_wall = hot - overall * inner * (hot - cold)
        hot_rate, cold_rate = m_hot * water(hot)[1], m_cold * water(cold)[1]
        smaller, ratio = (
            np.minimum(hot_rate, cold_rate),
            np.minimum(hot_rate, cold_rate) / np.maximum(hot_rate, cold_rate),
        )
        units = overall * area / smaller
        shrunk = np.exp(-units * (1 - ratio))
        heat = (1 - shrunk) / (1 - ratio * shrunk) * smaller * (T_hi - T_ci)
        T_ho = T_hi - heat / (1 - errors.get("loss", 0.0)) / hot_rate
        T_co = T_ci + heat / cold_rate
    return T_ho, T_co


def drawn(seed: int) -> dict[str, float]:
    """Everything that is wrong in all rows of one history alike, drawn from what is stated."""
    draw = np.random.default_rng([20260207, seed])
    errors = {}
    for name in ("T_hi", "T_ho", "T_ci", "T_co"):
        errors[name] = draw.uniform(-1, 1) * STATED["T"]
        errors[f"{name} drift"] = draw.uniform(-1, 1) * STATED["T drift"]
    for name in ("m_hot", "m_cold"):
        errors[name] = draw.uniform(-1, 1) * STATED["m"]
        errors[f"{name} drift"] = draw.uniform(-1, 1) * STATED["m drift"]
    errors["shell film"] = draw.uniform(-1, 1) * STATED["shell film"]
    errors["wall"] = draw.uniform(-1, 1) * STATED["wall"]
    errors["loss"] = STATED["loss"] + draw.uniform(-1, 1) * STATED["loss tolerance"]
    errors["tube film"] = draw.normal() * STATED["tube film"]
    return errors


def history(
    truth: Truth, seed: int = 0, rows: int = 400, days: float = 400.0, noise: float = 1.0
) -> dict[str, Array]:
    """Times (s since the first row) and what the sensors show: °C and kg/s.

    Load and season move flows and inlets; sensors add bias, drift and noise.
    """
    draw = np.random.default_rng([20260208, seed])
    times = np.linspace(0.0, days * DAY, rows)
    season = np.sin(2 * np.pi * (times / YEAR - 0.28))
    wander = np.stack([_wandering(draw, rows) for _ in range(3)])
    true = {
        "T_hi": DESIGN["T_hi"] + 2.0 * wander[0],
        "T_ci": DESIGN["T_ci"] + 5.0 * season + 0.8 * wander[1],
        "m_hot": DESIGN["m_hot"] * (1.0 + 0.06 * wander[2]),
        "m_cold": DESIGN["m_cold"] * (1.0 + 0.10 * season + 0.03 * wander[1]),
    }
    cycle = np.searchsorted(np.array(truth.cleanings), times, side="right") - 1
    since = times - np.array(truth.cleanings)[cycle]
    deposit = truth.deposit(since) + np.array(truth.left_over)[cycle]
    true["T_ho"], true["T_co"] = outlets(**true, deposit=deposit, errors=truth.errors)
    shown = {"t": times}
    for name, figures in true.items():
        wrong = truth.errors.get(name, 0.0) + truth.errors.get(f"{name} drift", 0.0) * times / YEAR
        if name.startswith("T"):
            shown[name] = figures + wrong + noise * NOISE["T"] * draw.standard_normal(rows)
        else:
            shown[name] = figures * (1.0 + wrong + noise * NOISE["m"] * draw.standard_normal(rows))
    return shown


def _wandering(draw: np.random.Generator, rows: int) -> Array:
    """A figure that wanders about nothing with a standard deviation of about one."""
    step = draw.standard_normal(rows)
    wandering = np.zeros(rows)
    for number in range(1, rows):
        wandering[number] = 0.9 * wandering[number - 1] + np.sqrt(1 - 0.81) * step[number]
    return wandering


HEADS = {"t": "time", "T_hi": "TI-1111", "T_ho": "TI-1112", "T_ci": "TI-1113", "T_co": "TI-1114"}
HEADS |= {"m_hot": "FI-1111", "m_cold": "FI-1112"}


def cells(shown: dict[str, Array]) -> list[list[str]]:
    """The rows as a historian writes them: the cold side in degF and t/h, as its older cards do."""
    stamps = np.datetime_as_string(START + np.round(shown["t"] / 60.0).astype("timedelta64[m]"), unit="m")
    columns = [
        [stamp.replace("T", " ") for stamp in stamps],
        *([f"{figure:.2f}" for figure in shown[name]] for name in ("T_hi", "T_ho")),
        *([f"{figure * 1.8 + 32.0:.2f}" for figure in shown[name]] for name in ("T_ci", "T_co")),
        [f"{figure:.3f}" for figure in shown["m_hot"]],
        [f"{figure * 3.6:.2f}" for figure in shown["m_cold"]],
    ]
    return [list(row) for row in zip(*columns, strict=True)]


def spoiled(rows: list[list[str]]) -> list[list[str]]:
    """The example's rows with what a plant does to them; which rows, and what, is fixed.

    A shutdown, a dead sensor, a stamp written twice, two swapped columns, a sensor beyond its range, a load
    change in the middle of the hour, a meter that stood at nothing.
    """
    for number in (31, 32, 33, 150):
        rows[number][2] = "Bad"
    rows[77][5] = ""
    for number in (101, 102):
        rows[number][1], rows[number][2] = rows[number][2], rows[number][1]
    rows[171][3] = "-40.00"
    for number in (219, 305):
        rows[number][1] = f"{float(rows[number][1]) + 6.0:.2f}"
    rows[260][6] = "0.00"
    for number in (333, 334):
        rows[number][5] = f"{float(rows[number][5]) * 1.25:.3f}"
    rows.insert(121, list(rows[120]))
    rows.insert(245, [rows[244][0], *rows[246][1:]])
    return [row for number, row in enumerate(rows) if not 130 <= number < 144]


def main() -> None:
    truth = Truth(errors=drawn(7))
    rows = spoiled(cells(history(truth, 7, rows=412, days=411.0)))
    with Path(sys.argv[1]).open("w", encoding="utf-8", newline="") as stream:
        writer = csv.writer(stream, lineterminator="\n")
        writer.writerow([HEADS[name] for name in ("t", "T_hi", "T_ho", "T_ci", "T_co", "m_hot", "m_cold")])
        writer.writerows(rows)


if __name__ == "__main__":
    main()
