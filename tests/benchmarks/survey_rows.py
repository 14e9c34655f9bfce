"""A survey of many rows: the engine beside the same equations written out in numpy by hand.

Run with `python tests/benchmarks/survey_rows.py [rows]`. Both sides start from the texts of the columns, apply
the same rules, take properties from the same curves, close the wall temperature to rounding, anchor zero and
fit the asymptotic model by Gauss and Newton's steps. The engine gives bounds and a plot besides. Prints
seconds of the processor (least of three runs), the ratios engine / by hand, the differences of the fit, and
the memory at its highest.
"""

from __future__ import annotations

import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parent.parent / "survey"))

from history import BORE, DAY, HEADS, LENGTH, OUTSIDE, SHELL_FILM, TUBES, WALL, Truth, cells, drawn, history
from survey_calculations import solved_survey, with_history

from calcbook.chain.solve import PIECE
from calcbook.properties import pure
from calcbook.survey.resistance import resistances
from calcbook.survey.rows import read_rows

Array = np.ndarray
CLOSED = 1e-13
NAMES = ("T_hi", "T_ho", "T_ci", "T_co", "m_hot", "m_cold")
LIMITS = {"T_hi": (40, 110), "T_ho": (20, 110), "T_ci": (0, 50), "T_co": (0, 80), "m_hot": (2, 30)}
LIMITS |= {"m_cold": (7 / 3.6, 110 / 3.6)}


class ByHand:
    """The whole survey written out for this one cooler."""

    def __init__(self) -> None:
        self.water = pure("water").at(4e5)

    def read(self, columns: dict[str, str]) -> dict[str, Array]:
        """Texts to °C and kg/s."""
        found = {"t": np.array(columns[HEADS["t"]].split("\n"), dtype="datetime64[s]").astype(float)}
        for name in NAMES:
            found[name] = np.array(columns[HEADS[name]].split("\n"), dtype=np.str_).astype(float)
        for name in ("T_ci", "T_co"):
            found[name] = (found[name] - 32.0) / 1.8
        found["m_cold"] /= 3.6
        return found

    def sift(self, x: dict[str, Array]) -> dict[str, Array]:
        """Readable, new, within the sensors' ranges, not crossed, steady, within the flow ratio."""
        left = np.isfinite(x["t"])
        for name in NAMES:
            low, high = LIMITS[name]
            left &= np.isfinite(x[name]) & (x[name] >= low) & (x[name] <= high)
        left[1:] &= np.diff(x["t"]) > 0
        left &= (x["T_hi"] > x["T_ho"]) & (x["T_co"] > x["T_ci"]) & (x["T_hi"] > x["T_co"])
        left &= x["T_ho"] > x["T_ci"]
        x = {name: figures[left] for name, figures in x.items()}
        steady = np.ones(len(x["t"]), dtype=bool)
        for name in NAMES[:4]:
            steady[1:] &= np.abs(np.diff(x[name])) <= 8.0
        for name, base in (("m_hot", 18.0), ("m_cold", 20.0)):
            steady &= (x[name] >= 0.6 * base) & (x[name] <= 1.4 * base)
        return {name: figures[steady] for name, figures in x.items()}

    def prandtl(self, at: Array) -> Array:
        value = self.water.value
        return value("viscosity", at) * value("heat capacity", at) / value("conductivity", at)

    def resistance(self, x: dict[str, Array]) -> tuple[Array, Array]:
        """Fouling resistance on the outside and the closure of each row."""
        T_hi, T_ho, T_ci, T_co = (x[name] + 273.15 for name in NAMES[:4])
        hot, cold = (T_hi + T_ho) / 2, (T_ci + T_co) / 2
        value = self.water.value
        mu, lam, cp = (value(name, hot) for name in ("viscosity", "conductivity", "heat capacity"))
        pr = mu * cp / lam
        speed = x["m_hot"] / (value("density", hot) * TUBES * np.pi / 4 * BORE**2)
        re = value("density", hot) * speed * BORE / mu
        f = (1.82 * np.log10(re) - 1.64) ** -2
        plain = f / 8 * (re - 1000) * pr / (1 + 12.7 * np.sqrt(f / 8) * (pr ** (2 / 3) - 1))
        plain = plain * (1 + (BORE / LENGTH) ** (2 / 3)) * lam / BORE
        rest = OUTSIDE * np.log(OUTSIDE / BORE) / (2 * WALL) + 1 / (SHELL_FILM * (x["m_cold"] / 20.0) ** 0.6)
        surface = hot - (hot - cold) / 3
        for _ in range(60):
            inner = OUTSIDE / BORE / (plain * (pr / self.prandtl(surface)) ** 0.11)
            following = hot - (hot - cold) * inner / (inner + rest)
            moved = np.max(np.abs(following - surface) / following)
            surface = following
            if moved <= CLOSED:
                break
        Q_h = 0.99 * x["m_hot"] * cp * (T_hi - T_ho)
        Q_c = x["m_cold"] * value("heat capacity", cold) * (T_co - T_ci)
        one, other = T_hi - T_co, T_ho - T_ci
        lmtd = self.mean_difference(one, other)
        actual = (Q_h + Q_c) / 2 / (np.pi * OUTSIDE * LENGTH * TUBES * lmtd)
        return 1 / actual - inner - rest, 2 * (Q_h - Q_c) / (Q_h + Q_c)

    def mean_difference(self, one: Array, other: Array) -> Array:
        mean, ratio = (one + other) / 2, one / other
        alike = np.abs(ratio - 1) <= 1e-4
        series = mean * (1 - ((one - other) / mean) ** 2 / 12)
        return np.where(alike, series, (one - other) / np.log(np.where(alike, 2.0, ratio)))

    def in_pieces(self, x: dict[str, Array]) -> tuple[Array, Array]:
        """The same, piece by piece, so that arrays stay in the cache."""
        count = len(x["t"])
        found, closure = np.empty(count), np.empty(count)
        for start in range(0, count, PIECE):
            part = {name: figures[start : start + PIECE] for name, figures in x.items()}
            found[start : start + PIECE], closure[start : start + PIECE] = self.resistance(part)
        return found, closure

    def fit(self, times: Array, values: Array, starts: tuple[float, ...]) -> Array:
        """R_inf and tau by Gauss and Newton's steps on the anchored rows."""
        cycle = np.searchsorted(np.array(starts), times, side="right") - 1
        since = times - np.array(starts)[cycle]
        zero = since <= 10 * DAY
        count = np.bincount(cycle[zero])

        def anchored(figures: Array) -> Array:
            return figures - (np.bincount(cycle[zero], weights=figures[zero]) / count)[cycle]

        wanted = anchored(values)
        found = np.array([np.quantile(wanted, 0.95), since.max() / 3])
        for _ in range(50):
            shrunk = np.exp(-since / found[1])
            off = wanted - anchored(found[0] * (1 - shrunk))
            slopes = np.stack(
                [anchored(1 - shrunk), anchored(-found[0] * shrunk * since / found[1] ** 2)], axis=1
            )
            scale = np.linalg.norm(slopes, axis=0)
            step = np.linalg.solve((slopes / scale).T @ (slopes / scale), (slopes / scale).T @ off) / scale
            # No step takes more than half of a parameter away.
            found = np.maximum(found + step, 0.5 * found)
            if np.all(np.abs(step) <= 1e-10 * np.abs(found)):
                break
        return found


def seconds(work, times: int = 3):  # type: ignore[no-untyped-def]
    """The result of some work, and the least time of the processor that it took."""
    best = float("inf")
    for _ in range(times):
        start = time.process_time()
        result = work()
        best = min(best, time.process_time() - start)
    return result, best


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 1_000_000
    truth = Truth(errors=drawn(1))
    with tempfile.TemporaryDirectory() as folder:
        small = solved_survey(Path(folder), cells(history(truth, 1)))
    texts = [
        "\n".join(column) for column in zip(*cells(history(truth, 1, rows=count, days=800.0)), strict=True)
    ]
    columns = dict(zip((HEADS[name] for name in ("t", *NAMES)), texts, strict=True))
    survey = small.chain.calculation.survey
    assert survey is not None
    hand = ByHand()
    starts = tuple(one.at for one in survey.cleanings)

    def by_hand(read: dict[str, Array]) -> Array:
        x = hand.sift(read)
        values, closure = hand.in_pieces(x)
        keep = np.abs(closure) <= 0.08
        return hand.fit(x["t"][keep], values[keep], starts)

    large, whole_engine = seconds(lambda: with_history(small, count, columns))
    read, read_hand = seconds(lambda: hand.read(columns))
    found, rest_hand = seconds(lambda: by_hand(read))
    rows, read_engine = seconds(lambda: read_rows(large.chain.calculation.survey))
    result, chain_engine = seconds(lambda: resistances(large.chain, rows.columns, 0.01).resistance)
    (values, _), chain_hand = seconds(lambda: hand.in_pieces(read))
    one_piece = seconds(lambda: hand.resistance(read))[1]
    outcome = large.survey
    assert outcome is not None
    engine = np.array([outcome.figure(name).value for name in ("fitted R_inf", "fitted tau")])
    print(f"{count} rows, kept {outcome.kept}, fitted {outcome.fitted}")
    print(
        f"texts to numbers: engine {read_engine:.2f} s, by hand {read_hand:.2f} s,"
        f" ratio {read_engine / read_hand:.2f}"
    )
    print(
        f"rows to resistance: engine {chain_engine:.2f} s, by hand {chain_hand:.2f} s in pieces,"
        f" {one_piece:.2f} s whole; ratio {chain_engine / chain_hand:.2f} to pieces,"
        f" {chain_engine / one_piece:.2f} to whole; they differ by {np.nanmax(np.abs(result - values)):.1e} m² K/W"
    )
    print(
        f"whole survey: engine {whole_engine:.2f} s, by hand {read_hand + rest_hand:.2f} s,"
        f" ratio {whole_engine / (read_hand + rest_hand):.2f}; without texts"
        f" {(whole_engine - read_engine) / rest_hand:.2f}; the fits differ by"
        f" {np.max(np.abs(engine / found - 1)):.1e}"
    )
    print(f"highest memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MiB")


if __name__ == "__main__":
    main()
