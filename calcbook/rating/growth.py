"""The unit over the time since its cleaning: U, heat, margin and pressure drop as its fouling grows; its interval.

Every time is a sample of the same chain. Between two cleanings every growing term starts from nothing; what else
fouls stays as stated.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from calcbook.calcfile.in_service import CLEANED_UNIT, DUTY
from calcbook.chain.analysis import DUTY_LOST, OF_DUTY_LOST
from calcbook.chain.growth_outcome import CARRIED, ClosedForm, Interval, OverTime, TimeRow
from calcbook.chain.in_service import loss_against
from calcbook.chain.outcome import Result, Solved
from calcbook.chain.pressure import drops, evaluate_pressure_drops
from calcbook.chain.samples import Samples, evaluate_samples
from calcbook.chain.solve import Solution, solve
from calcbook.chain.types import SERVICE, Chain
from calcbook.chain.variants import with_figures
from calcbook.formulas import evaluate, parse_expression
from calcbook.library import evaluate_method, vocabulary
from calcbook.rating.opened import open_chain
from calcbook.rating.summing import Summed, crossing, root
from calcbook.rating.turns import turns

Array = np.ndarray
NAN = math.nan
# What fouling loses in a time, in money or as heat, by what it is counted from.
LOSS = {
    (True, CLEANED_UNIT): parse_expression("p_Q*(Q_0 - Q)"),
    (True, DUTY): parse_expression("p_Q*max(Q_0 - Q, 0)"),
    (False, CLEANED_UNIT): parse_expression("Q_0 - Q"),
    (False, DUTY): parse_expression("max(Q_0 - Q, 0)"),
}
# The mean of a cycle: what one cleaning takes and the sum S of the losses of a run t, over the run and the cleaning.
MEAN = {True: parse_expression("(C_c + S)/(t + t_c)"), False: parse_expression("(Q_0*t_c + S)/(t + t_c)")}
# Rounding of a closed circuit, relative: some hundred times that of a figure.
ROUNDING = 1e-13
# Points at which the loss and the mean are compared before the place is found between two of them.
POINTS_OF_SEARCH = 401
# How far from the least mean the flat range reaches.
FLAT_PART = 0.05
# By then exp(-t/tau) is below the rounding of a resistance.
TIME_CONSTANTS_TO_REST = 60.0


def over_time(solved: Solved) -> Solved:
    """A solved calculation with its table over the time in service; unchanged where none is asked for."""
    if "until" not in solved.chain.in_service:
        return solved
    table = _table(_Course(solved))
    used = dict(solved.cards)
    if table.interval is not None and table.interval.closed_form is not None:
        card = solved.chain.library.method(table.interval.closed_form.card)
        used[f"method {card.id}"] = card.digest_text
    base = replace(solved.base, results={**solved.base.results, **_results(table)})
    return replace(solved.with_base(base), over_time=table, cards=used)


def _results(table: OverTime) -> dict[str, Result]:
    """The named results that other calculations may take: times that are there."""
    kinds = vocabulary()
    found = {
        DUTY_LOST: (table.duty_lost, *OF_DUTY_LOST),
        "cleaning_interval": (
            table.interval.interval if table.interval is not None else NAN,
            "cleaning interval",
            "cleaning interval of the least mean over a cycle",
        ),
    }
    return {
        name: Result(name, value, kinds[kind], title)
        for name, (value, kind, title) in found.items()
        if math.isfinite(value)
    }


class _Course:
    """The chain with times put in: as the file states it, and at its inlets with open outlets for the heat."""

    def __init__(self, solved: Solved):
        self.solved = solved
        self.chain = solved.chain
        self.heat_chain, self.heat, self.heat_basis = _heat_of(solved)
        self.until = self.figure("until")

    def figure(self, name: str) -> float:
        """A figure of the time in service or the cleaning; NaN where it is not stated."""
        found = self.chain.in_service.get(name)
        return self.solved.base.solutions[SERVICE].number(found) if found else NAN

    def at(self, chain: Chain, times: Array, keep: tuple[str, ...] | None = None) -> Solution:
        """The chain in service at times since the cleaning of every growing term."""
        figures = {item.time: times for item in chain.growing}
        one, given = with_figures(chain, chain.case_inputs(""), figures)
        solution = solve(one, given, SERVICE, keep=keep)
        if keep is None:
            evaluate_pressure_drops(one, solution)
        return solution

    def verdicts_at(self, times: Array) -> Samples:
        """Every verdict of the chain at times."""
        figures = {item.time: times for item in self.chain.growing}
        one, given = with_figures(self.chain, self.chain.case_inputs(""), figures)
        return evaluate_samples(one, given)

    def one(self, chain: Chain, name: str, times: Array) -> Array:
        """One figure at times; NaN where the chain has no answer."""
        return _row(self.at(chain, times, (name,)), name, times)

    def heat_at(self, times: Array) -> Array:
        """The heat at times; NaN where the calculation gives none."""
        return self.one(self.heat_chain, self.heat, times) if self.heat else times * NAN

    def margin_at(self, times: Array) -> Array:
        return self.one(self.chain, self.chain.results["area margin"], times)


def _row(solution: Solution, name: str, times: Array) -> Array:
    value = np.broadcast_to(np.asarray(solution.values.get(name, NAN), dtype=float), times.shape)
    return np.where(solution.converged, value, NAN)


def _heat_of(solved: Solved) -> tuple[Chain, str, str]:
    """The chain that gives the heat, the id of the heat (empty where there is none), and how it is found."""
    chain = solved.chain
    duty = chain.calculation.duty
    if duty is None:
        return chain, chain.results.get("heat flow", ""), "at the stated bulk temperatures"
    if not duty.has_ends:
        return chain, chain.results["heat reached"], "between both saturation temperatures"
    if "duty" in chain.results:
        opened = open_chain(solved.chain, solved.base, "hot", "cold")
        if opened is not None and "heat reached" in opened.results:
            chain = opened
        elif "heat reached" in chain.results:
            return (
                chain,
                chain.results["heat reached"],
                "by effectiveness, with properties at the stated means",
            )
        else:
            return chain, "", "no heat: a flow of the duty is not stated"
    return (
        chain,
        chain.results["heat reached"],
        "at the inlets of the duty, its outlets found by effectiveness",
    )


# --- the table ------------------------------------------------------------------------------------------


def _table(course: _Course) -> OverTime:
    stated = course.chain.calculation.time_in_service
    assert stated is not None
    times = np.linspace(0.0, course.until, stated.steps)
    heats = course.at(course.heat_chain, times) if course.heat else None
    heat = _row(heats, course.heat, times) if heats is not None else times * NAN
    lost, words = _duty_lost(course)
    cleaning = None
    if course.chain.calculation.cleaning is not None:
        cleaning = _Cleaning(course, float(heat[0]), lost)
    losses, means = cleaning.over(times, heat) if cleaning is not None else (times * NAN, times * NAN)
    columns = {"heat": heat, "loss": losses, "mean": means}
    rows = _rows(course, times, columns, _outlets(course, heats, times))
    return OverTime(
        rows,
        turns(course.verdicts_at, times),
        _unit(course),
        lost,
        words,
        course.heat_basis,
        sum(not math.isfinite(row.overall) for row in rows),
        cleaning.interval() if cleaning is not None else None,
    )


def _rows(
    course: _Course, times: Array, columns: dict[str, Array], outlets: Mapping[str, Array]
) -> tuple[TimeRow, ...]:
    chain, table = course.chain, course.chain.results
    stated = course.at(chain, times)

    def every(name: str) -> Array:
        return _row(stated, name, times)

    columns["overall"] = every(table["U"])
    columns["margin"] = every(table["area margin"]) if "area margin" in table else times * NAN
    resistances = {item.name: every(item.fouling) for item in chain.growing}
    dropped = {branch.stream: every(drop.total.coefficient) for _, branch, drop in drops(chain)}
    return tuple(
        TimeRow(
            time=float(time),
            resistances={name: float(values[place]) for name, values in resistances.items()},
            outlets={name: float(values[place]) for name, values in outlets.items()},
            pressure_drops={name: float(values[place]) for name, values in dropped.items()},
            **{name: float(values[place]) for name, values in columns.items()},
        )
        for place, time in enumerate(times)
    )


def _outlets(course: _Course, heats: Solution | None, times: Array) -> dict[str, Array]:
    """The outlets that follow from the heat, by side; none where they are stated."""
    ends = course.heat_chain.results
    if heats is None or not course.heat_chain.open_figures:
        return {}
    return {
        name: _row(heats, ends[f"T {name} outlet"], times)
        for name in ("hot", "cold")
        if f"T {name} mean" in ends
    }


def _unit(course: _Course) -> str:
    """The unit of time that the end of the table is written in."""
    stated = course.chain.calculation.time_in_service
    assert stated is not None
    given = course.chain.calculation.givens.get(stated.until.symbol)
    quantity = (given.value if given is not None else stated.until).quantity
    return quantity.unit_text if quantity is not None else "s"


def _duty_lost(course: _Course) -> tuple[float, str]:
    """When the margin of area over the duty falls to nothing, or the words for it."""
    if "area margin" not in course.chain.results:
        return NAN, "no duty is stated that could be lost" if course.heat else "no duty is stated"
    margins = course.margin_at(np.array([0.0, course.until]))
    if not margins[0] > 0.0:
        return NAN, "the cleaned unit does not carry the duty"
    found = crossing(course.margin_at, 0.0, course.until)
    if math.isnan(found):
        return NAN, CARRIED
    return found, ""


# --- the interval ---------------------------------------------------------------------------------------


class _Cleaning:
    """The cleaning interval on the chain's own loss curve.

    ``first_heat`` is that of the cleaned unit, ``lost`` the time at which the duty is lost, NaN where it is not.
    """

    def __init__(self, course: _Course, first_heat: float, lost: float):
        self.course = course
        cleaning = course.chain.calculation.cleaning
        assert cleaning is not None
        self.counts_money = cleaning.cost is not None
        self.against = loss_against(course.chain.calculation)
        self.loss_relation = LOSS[self.counts_money, self.against]
        self.mean_relation = MEAN[self.counts_money]
        stated = course.solved.base.solutions[SERVICE]
        self.figures: dict[str, float] = {
            "Q_0": stated.number(course.chain.results["duty"]) if self.against == DUTY else first_heat,
            "t_c": course.figure("duration"),
            "p_Q": course.figure("price"),
            "C_c": course.figure("cost"),
        }
        bends = [
            lost,
            *(stated.number(item.needs["t_ind"]) for item in course.chain.growing if "t_ind" in item.needs),
        ]
        inside = {time for time in bends if 0.0 < time < course.until}
        self.summed = Summed(
            self._loss_at, np.array([0.0, *sorted(inside), course.until]), ROUNDING * self._whole_heat()
        )

    def _whole_heat(self) -> float:
        """The loss of all the heat: the loss is a difference, and is known as well as what it is taken from."""
        return abs(float(self.loss(np.asarray(0.0))))

    def loss(self, heat: Array) -> Array:
        return evaluate(self.loss_relation, {**self.figures, "Q": heat})

    def _loss_at(self, times: Array) -> Array:
        return self.loss(self.course.heat_at(times))

    def mean(self, times: Array) -> Array:
        return evaluate(self.mean_relation, {**self.figures, "t": times, "S": self.summed.sum(times)})

    def over(self, times: Array, heat: Array) -> tuple[Array, Array]:
        """The loss at the times of the table, and the mean over a cycle that ends there (none at its start)."""
        return self.loss(heat), np.concatenate([[NAN], self.mean(times[1:])])

    def interval(self) -> Interval:
        """Where the mean is least: the loss, rising, comes to it from below."""
        if not self.counts_money and self.figures["t_c"] == 0.0:
            return self._none("a cleaning that takes neither time nor money is done at once")
        times = np.linspace(0.0, self.course.until, POINTS_OF_SEARCH)[1:]
        excess = self._excess(times)
        if not self.course.heat:
            return self._none(self.course.heat_basis)
        if not np.isfinite(excess).all():
            return self._none("the circuit has no answer at every time of the table")
        above = np.flatnonzero(excess > 0.0)
        if not len(above):
            return self._none("the mean still falls at the end of the table: no cleaning pays within it")
        low = float(times[above[0] - 1]) if above[0] else 1e-9 * float(times[0])
        found = root(self._excess, low, float(times[above[0]]))
        there = np.array([found])
        least = float(self.mean(there)[0])
        values = {
            **{name: value for name, value in self.figures.items() if math.isfinite(value)},
            "t": found,
            "S": float(self.summed.sum(there)[0]),
            "Q": float(self.course.heat_at(there)[0]),
        }
        return Interval(
            found,
            "",
            self.loss_relation,
            self.mean_relation,
            values,
            least,
            self.counts_money,
            self.against,
            self._flat(found, least),
            FLAT_PART,
            self._closed_form(found, least),
        )

    def _excess(self, times: Array) -> Array:
        return np.asarray(self.summed.value(times) - self.mean(times))

    def _none(self, words: str) -> Interval:
        return Interval(
            NAN,
            words,
            self.loss_relation,
            self.mean_relation,
            {},
            NAN,
            self.counts_money,
            self.against,
            (NAN, NAN),
            FLAT_PART,
            None,
        )

    def _flat(self, found: float, least: float) -> tuple[float, float]:
        """The times at which the mean stands a little above the least; NaN for one beyond the table."""

        def above(times: Array) -> Array:
            return np.asarray(self.mean(times) - least * (1.0 + FLAT_PART))

        # Shortly after the cleaning the mean is that of the cleaning alone, which is far above the least.
        start, end = 1e-3 * found, self.course.until
        starts_above, ends_above = above(np.array([start, end])) > 0.0
        return (
            root(above, start, found) if starts_above else NAN,
            root(above, found, end) if ends_above else NAN,
        )

    # -- closed forms -------------------------------------------------------------------------------

    def _closed_form(self, found: float, least: float) -> ClosedForm | None:
        """A card of the library for this growth and this aim, on figures of the chain; None where none applies."""
        growing = self.course.chain.growing
        if len(growing) != 1 or self.against != CLEANED_UNIT or "t_ind" in growing[0].needs:
            return None
        model = growing[0].model
        if self.counts_money and model == "fouling-linear":
            slope = float(self._loss_at(np.array([found]))[0]) / found
            return self._by_card(
                "cleaning-interval-linear",
                {"a": slope},
                "the loss rising evenly to that of the chain at the interval",
            )
        if self.counts_money and model == "kern-seaton-1959":
            tau = self.course.solved.base.solutions[SERVICE].number(growing[0].needs["tau"])
            final = float(self._loss_at(np.array([TIME_CONSTANTS_TO_REST * tau]))[0])
            return self._by_card(
                "cleaning-interval-asymptotic",
                {"L_inf": final, "tau": tau},
                "the loss coming to rest as the resistance does, at the final loss of the chain",
            )
        if not self.counts_money and model == "fouling-linear":
            overall = self.course.chain.results["U"]
            clean, then = self.course.one(self.course.chain, overall, np.array([0.0, found]))
            return self._by_card(
                "cleaning-interval-heat-linear",
                {"U_c": clean, "b": (1.0 / then - 1.0 / clean) / found},
                "the resistance rising evenly, at one temperature difference",
            )
        return None

    def _by_card(self, card: str, given: Mapping[str, float], because: str) -> ClosedForm | None:
        method = self.course.chain.library.method(card)
        known = {"C_c": self.figures["C_c"], "t_c": self.figures["t_c"], **given}
        asked = {need.symbol: known[need.symbol] for need in method.needs}
        interval = evaluate_method(method, asked, self.course.chain.library)["t_opt"]
        return ClosedForm(card, interval, because) if math.isfinite(interval) else None
