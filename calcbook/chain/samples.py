"""Verdicts at many samples: criteria, limits, methods, the controlling term; and the samples without an answer.

The relations, limits and findings are those of a single record, asked of arrays. Plausible bands are left out:
they look for slips of the pen, and are no limits of a method.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from calcbook.calcfile.calculation import Acceptance
from calcbook.chain.allowance import LARGEST_ALLOWANCE
from calcbook.chain.analysis import criterion_figures
from calcbook.chain.checks import (
    check_margins,
    check_states,
    checked_figure,
    relation_margins,
    within_bound,
)
from calcbook.chain.completing import completed
from calcbook.chain.ends import OPEN_END, EndState, end_states, id_at
from calcbook.chain.figures import ResultFigures, allowance_figures, result_figures, surfaces_at_ends
from calcbook.chain.findings import (
    WallLimit,
    along_pressures,
    ending_properties,
    ends_of,
    film_steps,
    impossible_derived,
    impossible_factors,
    known_or_none,
    stream_phases,
    stream_states,
    wall_limits,
)
from calcbook.chain.flips_outcome import CONTROLLING, CRITERION, LIMIT, METHOD
from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.possible import impossible_steps
from calcbook.chain.pressure import drops, evaluate_pressure_drops, law_choice
from calcbook.chain.rating_outcome import OF_DAY_ONE
from calcbook.chain.solve import Solution, conditions_of, halves_of, numbers_in, solve_both
from calcbook.chain.term_rows import CONTROLLING_SHARE
from calcbook.chain.types import (
    CONDITIONS,
    SERVICE,
    Chain,
    ChainCheck,
    ChoiceRow,
    Group,
    Layer,
    StreamState,
    branches_of,
)
from calcbook.library.operations import run
from calcbook.properties import PropertyFault
from calcbook.quantities import read_any

Array = np.ndarray
Key = tuple[str, str, str]
Margins = Callable[[], list[Array]]
# Finds, from inputs that leave nothing open, solutions by condition and the place of each sample among the cases, what
# is found from a solved calculation.
Later = Callable[[Mapping[str, Array], Mapping[str, Solution], Array], Mapping[str, ResultFigures]]
# A sample at which there is no verdict: the limit is not there, cannot be evaluated, or the result is not known.
NO_VERDICT = -1
MET_WORDS = ("met", "not met")
LIMIT_WORDS = ("within", "outside", "accepted", "not counting", "not evaluable")
HELD, BROKEN, ACCEPTED, IDLE, OPEN = range(len(LIMIT_WORDS))
# From the places of the states of a single limit.
_CODE_OF_STATE = np.array([HELD, BROKEN, NO_VERDICT, IDLE])
NO_CONTROLLING = "no controlling term"
OPEN_CIRCUIT = "the circuit does not close"
TURNED = "the heat flow turns round"


@dataclass(frozen=True, eq=False)
class Verdicts:
    """One verdict at every sample: ``codes`` are places in ``words``, or ``NO_VERDICT``.

    ``margins`` gives figures that pass zero where the verdict changes, as far as there are any.
    """

    kind: str
    id: str
    condition: str
    words: tuple[str, ...]
    codes: Array
    margins: Margins
    level: str = ""

    @property
    def key(self) -> Key:
        return self.kind, self.id, self.condition


@dataclass(eq=False)
class Samples:
    """Solved samples with their verdicts. ``missing`` is 0 for an answer, else the place of a reason.

    Samples that cannot have an answer were not solved: ``solved`` are the others, and verdicts stand for them.
    ``unknowns`` are those of all samples, rows by condition: what the circuit of each was closed with.
    """

    missing: Array
    solved: Array = field(default_factory=lambda: np.empty(0, dtype=int))
    results: Mapping[str, ResultFigures] = field(default_factory=dict)
    verdicts: Mapping[Key, Verdicts] = field(default_factory=dict)
    reasons: list[str] = field(default_factory=lambda: [""])
    unknowns: Array | None = None

    def mark(self, mask: Array, reason: str, places: Array | None = None) -> None:
        """Say of samples (all, or those at ``places``) that have an answer so far why they have none."""
        wrong = np.zeros(self.missing.shape, dtype=bool)
        wrong[slice(None) if places is None else places] = mask
        wrong &= self.missing == 0
        if wrong.any():
            if reason not in self.reasons:
                self.reasons.append(reason)
            self.missing[wrong] = self.reasons.index(reason)

    def whole(self, figures: Array, absent: float) -> Array:
        """Figures of the solved samples among all."""
        figures = np.asarray(figures)
        found = np.full(self.missing.shape, absent, dtype=figures.dtype)
        found[self.solved] = figures
        return found

    def codes(self, key: Key) -> Array:
        """The codes of a verdict at every sample."""
        return self.whole(self.verdicts[key].codes, NO_VERDICT)

    def margins(self, key: Key) -> Array:
        """The margins of a verdict at every sample, a row each; NaN where there are none."""
        with np.errstate(all="ignore"):
            margins = self.verdicts[key].margins() if key in self.verdicts else []
        rows = [self.whole(np.asarray(margin, dtype=float), np.nan) for margin in margins]
        return np.stack(rows) if rows else np.empty((0, len(self.missing)))


def phases_of(chain: Chain, cases: Sequence[CaseOutcome]) -> dict[str, tuple[str, ...]]:
    """The phase of every stream in each solved case, where the file does not state it."""
    found = {}
    for state in chain.streams.values():
        if not state.phase and state.temperature in cases[0].solutions[SERVICE].values:
            known = [case.solutions[SERVICE].values for case in cases]
            found[state.name] = tuple(stream_phases(state, values)[0][0][0] for values in known)
    return found


def evaluate_samples(
    chain: Chain,
    inputs: Mapping[str, Array],
    cases: Sequence[str] = ("",),
    case_of: Array | None = None,
    phases: Mapping[str, Sequence[str]] | None = None,
    directions: Sequence[float] = (),
    start: Array | None = None,
    ends_close: bool = False,
    later: Later | None = None,
) -> Samples:
    """Solve samples (inputs by id, one row or one figure for all) clean and in service, with every verdict.

    ``case_of`` is the place in ``cases`` that each sample belongs to: acceptances may hold for one case only.
    ``phases`` are the phases of streams by case, ``directions`` the signs of the heat flow: a sample in which one
    is another gets no answer. ``start`` are unknowns of like samples to begin from. The calculation's own cases must
    have solved without a fault. Where their circuits close at both ends of a duty (``ends_close``), a sample whose
    circuit does not has no answer. ``later`` adds results that are found from a solved calculation.
    """
    size = max(np.size(value) for value in inputs.values())
    belongs = case_of if case_of is not None else np.zeros(size, dtype=int)
    samples = Samples(np.zeros(size, dtype=int))
    inputs = completed(chain, inputs, thorough=False)
    with np.errstate(all="ignore"):
        values = bulk_values(chain, inputs)
        _mark_states(chain, values, samples, belongs, phases or {})
        if directions and follows_difference(chain):
            difference = np.asarray(values[chain.inner.bulk]) - np.asarray(values[chain.outer.bulk])
            samples.mark(np.sign(difference) != np.array(directions)[belongs], TURNED)
        samples.solved = np.flatnonzero(samples.missing == 0)
        if not len(samples.solved):
            return samples
        if len(samples.solved) < size:
            inputs = {
                name: value[samples.solved] if np.ndim(value) else value for name, value in inputs.items()
            }
        service = _solve(chain, inputs, cases, belongs[samples.solved], samples, start, ends_close, later)
    if directions and "heat flow" in chain.results:
        flow = np.sign(service.figure(chain.results["heat flow"]))
        samples.mark(flow != np.array(directions)[belongs[samples.solved]], TURNED, samples.solved)
    return samples


def follows_difference(chain: Chain) -> bool:
    """Whether the heat flows from the hotter bulk to the colder: no film refers to a third temperature."""
    return chain.has_temperatures and all(
        branch.reference == group.bulk for group in (chain.inner, chain.outer) for branch in group.branches
    )


def _solve(
    chain: Chain,
    inputs: Mapping[str, Array],
    cases: Sequence[str],
    case_of: Array,
    samples: Samples,
    start: Array | None,
    ends_close: bool,
    later: Later | None,
) -> Solution:
    """Solve samples that can have an answer, put results and verdicts into ``samples``; the solution in service."""
    if start is not None:
        start = np.concatenate(list(start[:, :, samples.solved]), axis=1)
    both = solve_both(chain, inputs, thorough=False, start=start)
    evaluate_pressure_drops(chain, both)
    solutions = conditions_of(both)
    if both.unknowns is not None:
        samples.unknowns = np.full((2, len(both.unknowns), len(samples.missing)), np.nan)
        for place, condition in enumerate(CONDITIONS):
            samples.unknowns[place][:, samples.solved] = solutions[condition].unknowns
    ends = end_states(chain, inputs, solutions, thorough=False)
    samples.results = result_figures(chain, solutions) | surfaces_at_ends(ends)
    if any(name.startswith(LARGEST_ALLOWANCE) for name in results_asked(chain)):
        samples.results |= allowance_figures(chain, inputs, solutions[SERVICE], thorough=False)
    if later is not None:
        samples.results |= later(inputs, solutions, case_of)
    verdicts = [
        *_criteria(chain, solutions, samples.results),
        *_Limits(chain, both, cases, case_of, ends).verdicts(),
        *_methods(chain, solutions),
        _controlling(chain, solutions[SERVICE]),
    ]
    samples.verdicts = {item.key: item for item in verdicts}
    for verdict in verdicts:
        if verdict.kind == LIMIT and verdict.level == "stop":
            reason = f"no number is given outside {verdict.id}"
            samples.mark(verdict.codes == BROKEN, reason, samples.solved)
    size = len(samples.solved)
    for step, wrong in impossible_steps(chain, both):
        everywhere = np.broadcast_to(wrong, (2 * size,))
        samples.mark(
            everywhere[:size] | everywhere[size:], f"{step.title} of {step.owner} cannot be", samples.solved
        )
    for solution in solutions.values():
        open_circuit = ~solution.converged | ~np.isfinite(solution.figure(chain.results["U"]))
        if not open_circuit.any():
            continue
        for branch, _, name, missing in ending_properties(chain, solution):
            why = f"{OPEN_CIRCUIT}: {branch.stream} has no {name} at the other side's temperature"
            samples.mark(open_circuit & missing, why, samples.solved)
        samples.mark(open_circuit, OPEN_CIRCUIT, samples.solved)
    for state in ends if ends_close else ():
        why = f"{OPEN_CIRCUIT} {state.place}, {state.solution.condition}"
        samples.mark(~state.solution.converged, why, samples.solved)
    return solutions[SERVICE]


def results_asked(chain: Chain) -> Iterator[str]:
    """The results that the criteria and the sweep of the file name."""
    yield from (criterion.result for criterion in chain.calculation.acceptance)
    sweep = chain.calculation.sweep
    yield from (name for name, _ in sweep.of) if sweep is not None else ()


# --- criteria ---------------------------------------------------------------------------------------


def _criteria(
    chain: Chain, solutions: Mapping[str, Solution], results: Mapping[str, ResultFigures]
) -> Iterator[Verdicts]:
    for item in criterion_figures(chain, solutions, results):
        codes = np.where(item.met, 0, 1)
        # A state of day one that is not there does not meet what is asked of it.
        absent = 1 if item.criterion.result in OF_DAY_ONE else NO_VERDICT
        # A margin that has no end is one all the same: of a duty that is carried to the end, or never.
        codes = np.where(np.isnan(item.margin), absent, codes)
        yield Verdicts(
            CRITERION, f"criterion {item.number}", "", MET_WORDS, codes, _fixed_margins(item.margin)
        )


def _fixed_margins(*margins: Array) -> Margins:
    return lambda: list(margins)


# --- limits -----------------------------------------------------------------------------------------


@dataclass(eq=False)
class _Limit:
    """One id of a limit under construction: a sample takes it from whichever part of the chain acts there."""

    level: str
    codes: Array
    figure: Array | None
    margins: list[Margins]

    def part(self, samples: slice) -> _Limit:
        """The same for some of the samples."""
        figure = _cut(self.figure, samples) if self.figure is not None else None
        return _Limit(self.level, _cut(self.codes, samples), figure, [_joined(self.margins, samples)])


_Found = dict[str, _Limit]


class _Limits:
    """The limits of a solution of both conditions, clean samples first, and of both ends of the unit."""

    def __init__(
        self, chain: Chain, both: Solution, cases: Sequence[str], case_of: Array, ends: Sequence[EndState]
    ):
        self.chain = chain
        self.both = both
        self.ends = ends
        self.cases = cases
        self.case_of = case_of

    def verdicts(self) -> Iterator[Verdicts]:
        found: _Found = {}
        self._cards(found)
        for item in wall_limits(self.chain, self.both):
            _put_wall(found, item.id, item, item.acts)
        for condition, half in reversed(halves_of(len(self.case_of)).items()):
            limits = {name: limit.part(half) for name, limit in found.items()}
            for state in self.ends:
                if state.solution.condition == condition:
                    for item in wall_limits(state.chain, state.solution):
                        acts = item.acts & state.solution.converged
                        _put_wall(limits, id_at(item.id, state), item, acts)
                    limits[id_at(OPEN_END, state)] = self._circuit(state)
            for name, limit in limits.items():
                if (limit.codes != NO_VERDICT).any():
                    codes = self._with_acceptances(name, limit, condition)
                    margins = _joined(limit.margins)
                    yield Verdicts(LIMIT, name, condition, LIMIT_WORDS, codes, margins, limit.level)

    def _circuit(self, state: EndState) -> _Limit:
        """That the circuit closes at an end: what it does at the walls there is not known otherwise."""
        closes = np.broadcast_to(state.solution.converged, self.case_of.shape)
        return _Limit("range", np.where(closes, HELD, OPEN), np.full(closes.shape, np.nan), [])

    def _cards(self, found: _Found) -> None:
        """As in a record: the shared limits, those of each element, those of what each sample chose."""
        both = self.both
        self._checks(found, self.chain.checks)
        for element in self.chain.elements:
            if isinstance(element, Layer):
                self._checks(found, element.checks)
            for branch in branches_of(element):
                choice = both.chosen.get(branch.name, np.zeros((), dtype=int))
                for number in numbers_in(choice):
                    self._checks(found, branch.candidates[number].checks, choice == number)
        for _, _, drop in drops(self.chain):
            if drop.laws:
                choice = law_choice(drop, both.values)
                for number in numbers_in(choice):
                    self._checks(found, drop.laws[number].checks, choice == number)
            self._checks(found, drop.total.checks)

    def _checks(self, found: _Found, checks: Sequence[ChainCheck], acts: Array | None = None) -> None:
        values = self.both.values
        for check in checks:
            codes = _CODE_OF_STATE[check_states(check, values)]
            if acts is not None:
                codes = np.where(acts, codes, NO_VERDICT)
            figure = checked_figure(check, values) if self._acceptances(check.id) else None
            _put(found, check.id, check.limit.level, codes, figure, _margins_of(check, values))

    def _acceptances(self, name: str) -> list[Acceptance]:
        return [item for item in self.chain.calculation.accept if item.check == name]

    def _with_acceptances(self, name: str, limit: _Limit, condition: str) -> Array:
        """The codes with the engineer's acceptances; one at most acts on a sample."""
        codes = limit.codes
        if limit.level == "stop" or limit.figure is None:
            return codes
        for item in self._acceptances(name):
            applies = np.array([item.acts_in(condition, case) for case in self.cases])[self.case_of]
            if item.bound is not None:
                bound = (item.bound.quantity or read_any(item.bound.text)).value
                held = within_bound(item.direction, bound, limit.figure)
                codes = np.where(applies & held & np.isin(codes, (BROKEN, OPEN)), ACCEPTED, codes)
                limit.margins.append(_fixed_margins(limit.figure - bound))
        return codes


def _put_wall(found: _Found, name: str, item: WallLimit, acts: Array) -> None:
    codes = np.where(acts, _CODE_OF_STATE[item.states], NO_VERDICT)
    _put(found, name, "range", codes, item.surface, _fixed_margins(item.margin))


def _put(found: _Found, name: str, level: str, codes: Array, figure: Array | None, margins: Margins) -> None:
    known = found.get(name)
    if known is None:
        found[name] = _Limit(level, codes, figure, [margins])
        return
    takes = (known.codes == NO_VERDICT) | (codes == BROKEN)
    known.codes = np.where(takes, codes, known.codes)
    if figure is not None:
        known.figure = figure if known.figure is None else np.where(takes, figure, known.figure)
    known.margins.append(margins)


def _cut(figures: Array, samples: slice) -> Array:
    """Some of a row of figures; one figure for all stays one."""
    return figures[samples] if figures.ndim else figures


def _margins_of(check: ChainCheck, values: Mapping[str, Array]) -> Margins:
    return lambda: check_margins(check, values)


def _joined(margins: Sequence[Margins], samples: slice = slice(None)) -> Margins:
    return lambda: [_cut(np.asarray(figure), samples) for part in margins for figure in part()]


# --- methods and the controlling term ---------------------------------------------------------------


def _methods(chain: Chain, solutions: Mapping[str, Solution]) -> Iterator[Verdicts]:
    """The method of every film that has a choice, and the friction law beside it."""
    for condition in reversed(CONDITIONS):
        solution = solutions[condition]
        for branch in chain.branches:
            choice = solution.chosen.get(branch.name)
            if choice is not None and len(branch.candidates) > 1:
                names = [candidate.method.id for candidate in branch.candidates]
                yield _choice(branch.name, condition, names, choice, branch.choice, solution)
        for _, branch, drop in drops(chain):
            if len(drop.laws) > 1:
                names = [law.method.id for law in drop.laws]
                name = f"{branch.name} / pressure drop"
                yield _choice(
                    name, condition, names, law_choice(drop, solution.values), drop.choice, solution
                )


def _choice(
    name: str,
    condition: str,
    names: list[str],
    choice: Array,
    rows: Sequence[ChoiceRow],
    solution: Solution,
) -> Verdicts:
    first = np.array([names.index(method) for method in names])

    def margins() -> list[Array]:
        return [
            figure
            for row in rows
            if row.relation is not None
            for figure in relation_margins(row.relation, row.inputs, solution.values)
        ]

    return Verdicts(METHOD, name, condition, tuple(names), first[choice], margins)


def _controlling(chain: Chain, solution: Solution) -> Verdicts:
    """The term with half of the total resistance or more, or none."""
    total = solution.figure(chain.results["R total"])
    shares = [solution.figure(chain.results[f"R {element.name}"]) / total for element in chain.elements]
    table = np.stack(np.broadcast_arrays(*shares))
    largest = np.argmax(table, axis=0)
    codes = np.where(table.max(axis=0) >= CONTROLLING_SHARE, largest, len(shares))
    words = (*(element.name for element in chain.elements), NO_CONTROLLING)
    margins = _fixed_margins(*(share - CONTROLLING_SHARE for share in shares))
    return Verdicts(CONTROLLING, CONTROLLING, SERVICE, words, codes, margins)


# --- samples without an answer ----------------------------------------------------------------------


def bulk_values(chain: Chain, inputs: Mapping[str, Array]) -> dict[str, Array]:
    """What is known of samples before the circuit is closed: geometry, streams and derived quantities."""
    values: dict[str, Array] = dict(chain.constants)  # type: ignore[arg-type]
    values.update(inputs)
    run(chain.steps, values)
    for state in chain.streams.values():
        wanted = {state.temperature, state.pressure, state.fraction} - {"", *values}
        run([step for step in film_steps(chain) if step.id in wanted], values)
    return values


def _mark_states(
    chain: Chain,
    values: Mapping[str, Array],
    samples: Samples,
    case_of: Array,
    phases: Mapping[str, Sequence[str]],
) -> None:
    """Samples whose record would have a fault of state, and those in which a stream has another phase."""
    mark_walls(chain, values, samples)
    mark_derived(chain, values, samples)
    for state in chain.streams.values():
        if state.temperature not in values:
            continue
        _mark_faults(state, state.name, state.phase, values, samples)
        wanted = np.full(case_of.shape, state.phase)
        if state.name in phases:
            known, which = stream_phases(state, values)
            wanted = np.array(phases[state.name])[case_of]
            other = np.array([phase for phase, *_ in known])[which] != wanted
            samples.mark(other, f"{state.name} has another phase")
        # A stream keeps the phase of its mean from end to end.
        for place, temperature in ends_of(chain, state.name):
            at_end = replace(state, temperature=temperature)
            for phase in dict.fromkeys(wanted.tolist()):
                _mark_faults(at_end, f"{state.name}{place}", phase, values, samples, wanted == phase)
    for here, opposite in ((chain.inner, chain.outer), (chain.outer, chain.inner)):
        mark_directions(here, opposite, values, samples)


def mark_walls(chain: Chain, values: Mapping[str, Array], samples: Samples) -> None:
    """Samples in which a surface does not lie outside the one before it."""
    for before, after in zip(chain.surfaces, chain.surfaces[1:], strict=False):
        if after.diameter:
            inner, outer = np.asarray(values[before.diameter]), np.asarray(values[after.diameter])
            samples.mark(~((outer > inner) & (inner > 0.0)), "the wall is turned inside out")


def mark_derived(chain: Chain, values: Mapping[str, Array], samples: Samples) -> None:
    """Samples in which a derived quantity, or the factor of a stated coefficient, is what it cannot be."""
    for symbol, cannot_be in impossible_derived(chain, values):
        samples.mark(cannot_be, f"the derived {symbol} cannot be")
    for term, _, cannot_be in impossible_factors(chain, values):
        samples.mark(cannot_be, f"the factor that {term.name} scales with cannot be")


def mark_directions(here: Group, opposite: Group, values: Mapping[str, Array], samples: Samples) -> None:
    """A film that condenses has the colder side opposite, a film that boils the hotter one."""
    for branch in here.branches:
        change = branch.situation.changes_phase if branch.situation is not None else ""
        if change and branch.reference in values and opposite.bulk in values:
            own, other = np.asarray(values[branch.reference]), np.asarray(values[opposite.bulk])
            wrong = ~(own > other) if change == "condensing" else ~(own < other)
            samples.mark(
                wrong & ~np.isnan(own) & ~np.isnan(other),
                f"{branch.name}: the other side is not {'colder' if change == 'condensing' else 'hotter'}",
            )


def _mark_faults(
    state: StreamState,
    name: str,
    phase: str,
    values: Mapping[str, Array],
    samples: Samples,
    acts: Array | None = None,
) -> None:
    """Mark the samples whose state is a fault in a phase (empty: as it is found); ``acts`` are those looked at."""
    states, place = stream_states(state, values)
    words = _state_faults(state, states, phase)
    for reason in dict.fromkeys(word for word in words if word):
        wrong = np.array([word == reason for word in words])[place]
        samples.mark(wrong if acts is None else wrong & acts, f"{name}: {reason}")


def _state_faults(state: StreamState, states: Sequence[tuple[float, float, float]], phase: str) -> list[str]:
    """The words of the fault of every state, empty for a good one.

    Along one pressure the good temperatures are one stretch: it is looked for from both ends.
    """
    words = [""] * len(states)
    for numbers in along_pressures(states):
        for order in (numbers, numbers[::-1]):
            for number in order:
                words[number] = words[number] or _state_fault(state, *states[number], phase)
                if not words[number] and not math.isnan(states[number][0]):
                    break
    return words


def _state_fault(state: StreamState, temperature: float, pressure: float, fraction: float, phase: str) -> str:
    """The words of a fault of a bulk state, empty for a good one."""
    try:
        fluid = state.fluid.state(known_or_none(pressure), known_or_none(fraction), state.phase)
    except PropertyFault as error:
        return error.code.replace("-", " ")
    if math.isnan(temperature):
        return "no saturation temperature" if state.saturation else ""
    for finding in fluid.check_state(temperature, phase or None):
        if finding.level == "fault":
            return finding.code.replace("-", " ")
    return ""
