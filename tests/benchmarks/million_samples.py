"""Many samples of one calculation: the engine beside the same equations written out in numpy by hand.

Run with `python tests/benchmarks/million_samples.py [samples]`. Both sides take properties from the same
curves and conductivity from the same rows, and close the wall temperatures to rounding. Prints seconds,
the ratio engine / by hand, the largest relative difference of U and the memory at its highest.
"""

from __future__ import annotations

import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent / "chain"))

from small_calculations import COOLER, chain_of

from calcbook.chain.solve import PIECE, solve
from calcbook.library import load_material
from calcbook.properties import pure

CLOSED = 1e-13
# Where it is drawn, the factor of the method on the film coefficient.
FACTOR = "factor/gnielinski-1976"


def drawn(base: dict[str, np.ndarray], count: int, names: tuple[str, ...]) -> dict[str, np.ndarray]:
    """The inputs with some of them drawn apart: temperatures by 0.5 K, all else by 2 %."""
    draw = np.random.default_rng(20261120)
    inputs = dict(base)
    for name in names:
        part = draw.uniform(-1.0, 1.0, count)
        inputs[name] = base[name] + 0.5 * part if "/T_" in name else base[name] * (1.0 + 0.02 * part)
    return inputs


class ByHand:
    """The cooler written out: Gnielinski 1976 with Filonenko's friction factor, k(T) of the wall."""

    def __init__(self, pressure: float):
        self.water = pure("water").at(pressure)
        card = load_material("stainless-316-kaschnitz-2017")
        self.at, self.k = card.temperatures, card.conductivities
        self.integral = np.concatenate(
            [[0.0], np.cumsum(0.5 * (self.k[1:] + self.k[:-1]) * np.diff(self.at))]
        )

    def to(self, temperature: np.ndarray) -> np.ndarray:
        """The integral of k from the first row to a temperature."""
        place = np.clip(np.searchsorted(self.at, temperature, side="right") - 1, 0, len(self.at) - 2)
        there = np.interp(temperature, self.at, self.k)
        return self.integral[place] + 0.5 * (self.k[place] + there) * (temperature - self.at[place])

    def prandtl(self, temperature: np.ndarray) -> np.ndarray:
        value = self.water.value
        return (
            value("viscosity", temperature)
            * value("heat capacity", temperature)
            / value("conductivity", temperature)
        )

    def overall(self, x: dict[str, np.ndarray]) -> np.ndarray:
        """U in service on the outside, by repeated substitution until the wall stands still."""
        d_i, d_o, length, hot, cold = (x[f"given/{name}"] for name in ("d_i", "d_o", "L", "T_hot", "T_cold"))
        mu, lam = self.water.value("viscosity", hot), self.water.value("conductivity", hot)
        pr = mu * self.water.value("heat capacity", hot) / lam
        speed = x["given/m_hot"] / (self.water.value("density", hot) * x["given/N"] * np.pi / 4 * d_i**2)
        re = self.water.value("density", hot) * speed * d_i / mu
        f = (1.82 * np.log10(re) - 1.64) ** -2
        plain = (
            f
            / 8
            * (re - 1000)
            * pr
            / (1 + 12.7 * np.sqrt(f / 8) * (pr ** (2 / 3) - 1))
            * (1 + (d_i / length) ** (2 / 3))
            * x.get(FACTOR, 1.0)
        )
        outer = x["given/R_fo"] + 1 / x["given/h_o"]
        surface = hot - (hot - cold) / 3
        wall = 0.5 * (hot + cold)
        conductivity = np.interp(wall, self.at, self.k) + 0 * surface
        for _ in range(60):
            h = plain * (pr / self.prandtl(surface)) ** 0.11 * lam / d_i
            by_wall = d_o * np.log(d_o / d_i) / (2 * conductivity)
            total = d_o / d_i * (1 / h + x["given/R_fi"]) + by_wall + outer
            flux = (hot - cold) / total
            following = hot - flux * d_o / d_i / h
            first = following - flux * d_o / d_i * x["given/R_fi"]
            second = first - flux * by_wall
            conductivity = (self.to(first) - self.to(second)) / (first - second)
            moved = np.max(np.abs(following - surface) / following)
            surface = following
            if moved <= CLOSED:
                break
        return 1 / total

    def in_pieces(self, inputs: dict[str, np.ndarray], count: int) -> np.ndarray:
        """The same, piece by piece, so that arrays stay in the cache."""
        result = np.empty(count)
        for start in range(0, count, PIECE):
            part = {
                name: value[start : start + PIECE] if value.ndim else value for name, value in inputs.items()
            }
            result[start : start + PIECE] = self.overall(part)
        return result


def seconds(work):  # type: ignore[no-untyped-def]
    """The result of some work and the time it took."""
    start = time.perf_counter()
    result = work()
    return result, time.perf_counter() - start


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000
    with tempfile.TemporaryDirectory() as folder:
        chain = chain_of(Path(folder), COOLER)
    base = chain.case_inputs("")
    name = chain.results["U"]
    some = ("given/m_hot", "given/h_o", "given/R_fo")
    for title, names in (
        ("flow, film, deposit", some),
        ("and both temperatures", (*some, "given/T_hot", "given/T_cold")),
    ):
        inputs = drawn(base, count, names)
        hand = ByHand(float(base["given/p_hot"]))
        solve(chain, {key: value[:10] if value.ndim else value for key, value in inputs.items()}, "service")
        solution, engine_time = seconds(lambda inputs=inputs: solve(chain, inputs, "service", keep=(name,)))
        whole, hand_time = seconds(lambda inputs=inputs, hand=hand: hand.overall(inputs))
        _, piece_time = seconds(lambda inputs=inputs, hand=hand: hand.in_pieces(inputs, count))
        apart = np.max(np.abs(solution.values[name] / whole - 1))
        print(
            f"{count} samples, {title} drawn: engine {engine_time:.2f} s, by hand {hand_time:.2f} s"
            f" (in pieces {piece_time:.2f} s)"
        )
        print(
            f"  ratio engine / by hand {engine_time / hand_time:.2f},"
            f" to pieces {engine_time / piece_time:.2f};"
            f" U differs by {apart:.1e}; converged {int(solution.converged.sum())}"
        )
    print(f"highest memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MiB")


if __name__ == "__main__":
    main()
