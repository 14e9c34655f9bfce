"""Pressure drop beside a film: the friction law of its situation, chosen and added up. It never moves U.

Its steps are kept apart from those of the film and are evaluated on the finished solution, so that nothing
that the circuit closes on can depend on them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from calcbook.chain.checks import state_of_check
from calcbook.chain.films import FilmScope
from calcbook.chain.solve import Solution, numbers_in
from calcbook.chain.types import (
    CLEAN,
    SERVICE,
    Branch,
    Candidate,
    Chain,
    ChainCheck,
    ChainStep,
    ChoiceRow,
    Counting,
    Group,
    OpenItem,
    PressureDrop,
)
from calcbook.faults import Fault
from calcbook.formulas import evaluate, parse_expression
from calcbook.library.cards import Choice, Friction, Method, practice_limit
from calcbook.library.operations import run
from calcbook.quantities import DIMENSIONLESS

Array = np.ndarray
# What keeps a pressure drop from being given without being a mistake of the file: nobody asked for it.
LACKING = frozenset(("need-missing", "property-missing", "flow-missing"))
FACTOR = "friction factor"
DROP, SHARE = "pressure drop", "share of the pressure"
EXPANDS = (
    "beyond a tenth of its pressure a gas expands on its way, and the law takes one density and one speed"
)


def asked_symbols(film: FilmScope) -> set[str]:
    """Symbols and quantity names that a film's pressure drop may take from the term's `with:`."""
    assert film.situation is not None
    friction = film.situation.friction
    if friction is None:
        return set()
    needs = list(friction.needs)
    for method in (*(choice.use for choice in friction.choose), friction.dp):
        needs += [item.need for item in film.library.program(method).needs]
    return {
        name for need in needs if need.quantity.name != FACTOR for name in (need.symbol, need.quantity.name)
    }


def lay_out_pressure_drop(film: FilmScope) -> tuple[PressureDrop | None, str]:
    """The pressure drop of a film's stream; None with the reason where a figure for it is not stated.

    What is stated wrongly is a fault as anywhere else. A layout that fails leaves nothing behind.
    """
    assert film.situation is not None
    friction = film.situation.friction
    if friction is None:
        return None, ""
    drop = None
    with film.scope.trial() as trial:
        drop = _Layout(film, friction).laid_out()
        trial.keeps = drop is not None
    if drop is not None and not trial.faults:
        return drop, ""
    film.scope.collector.take([fault for fault in trial.faults if fault.code not in LACKING])
    return None, "; ".join(_reason(fault) for fault in trial.faults)


def _reason(fault: Fault) -> str:
    return fault.message.replace("`", "")


@dataclass
class _Layout:
    """The steps of one pressure drop: friction laws with the choice between them, then the sum."""

    film: FilmScope
    friction: Friction

    def __post_init__(self) -> None:
        film, situation = self.film, self.film.situation
        assert situation is not None
        self.factor = f"{film.owner}/{FACTOR}"
        film.scope.dimensions[self.factor] = DIMENSIONLESS
        dimensions = (
            {**film.dimensions, FACTOR: self.factor} if self.friction.choose else dict(film.dimensions)
        )
        wider = replace(
            situation,
            needs=(*situation.needs, *self.friction.needs),
            groups=(*situation.groups, *self.friction.groups),
        )
        self.wide = replace(
            film, situation=wider, dimensions=dimensions, missing=set(), candidates=frozenset()
        )

    def laid_out(self) -> PressureDrop | None:
        laws: list[Candidate] = []
        rows: list[ChoiceRow] = []
        for choice in self.friction.choose:
            law = self._card(choice.use, choice.because)
            inputs = self.wide.bind(choice.when, "bulk") if choice.when is not None else {}
            if law is None or inputs is None:
                return None
            rows.append(self._row(choice, inputs, laws, law))
        total = self._card(self.friction.dp, "pressure drop of the situation")
        if total is None:
            return None
        steps = self.wide.ancestors([bound for row in rows for bound in row.inputs.values()])
        return PressureDrop(
            self.factor if laws else "", tuple(laws), tuple(rows), steps, self._with_expansion(total)
        )

    def _with_expansion(self, total: Candidate) -> Candidate:
        """The sum with a caution where a gas loses so much of its pressure that one density does not hold."""
        film, stream, situation = self.wide, self.film.stream, self.film.situation
        assert situation is not None
        if stream is None or not stream.pressure or stream.phase == "liquid" or situation.changes_phase:
            return total
        liquid = film.flag("fluid liquid")
        limit = practice_limit(SHARE, "dp <= p/10", "caution", EXPANDS, film.term.place)
        check = ChainCheck(
            f"{film.owner} / {DROP} / {SHARE}",
            film.owner,
            DROP,
            limit,
            {"dp": total.coefficient, "p": stream.pressure},
            (Counting(parse_expression("not liquid"), {"liquid": liquid}),),
        )
        steps = film.ancestors([*(step.id for step in total.steps), liquid])
        return replace(total, steps=steps, checks=(*total.checks, check))

    @staticmethod
    def _row(choice: Choice, inputs: dict[str, str], laws: list[Candidate], law: Candidate) -> ChoiceRow:
        """A row of the choice; a law that stands in two rows is laid out once."""
        found = next((place for place, other in enumerate(laws) if other.method is law.method), len(laws))
        if found == len(laws):
            laws.append(law)
        return ChoiceRow(choice.when, inputs, found, choice.because)

    def _card(self, method: str, because: str) -> Candidate | None:
        film = self.wide
        program = film.library.program(method)
        names = film.bind_needs(program)
        if names is None:
            return None
        film.lay_out(program, names)
        result = names[program.result]
        checks = tuple(self._check(check) for check in film.checks(program, names))
        steps = film.ancestors([result, *(bound for check in checks for bound in check.inputs.values())])
        return Candidate(program.method, steps, result, checks, because, False, program.cards)

    def _check(self, check: ChainCheck) -> ChainCheck:
        """A limit under a name of its own: the film may stand on the same card with its own answer."""
        return replace(check, id=f"{check.owner} / {check.card} for pressure drop / {check.limit.id}")


# --- evaluated on a solution ------------------------------------------------------------------------


def evaluate_pressure_drops(chain: Chain, solution: Solution) -> None:
    """Add the steps of every pressure drop to the values of a solution, in the samples' shape.

    A pressure drop whose figures the solution does not know (a surface temperature without temperatures)
    stays out.
    """
    known = {step.id for step in chain.steps}
    for group in (chain.inner, chain.outer):
        for branch in group.branches:
            if branch.pressure_drop is not None and is_known(chain, group, branch.pressure_drop):
                with np.errstate(all="ignore"):
                    found = _evaluated(
                        branch.pressure_drop, solution, known | _known_everywhere(branch, solution)
                    )
                solution.values.update(
                    {name: value for name, value in found.items() if name not in solution.values}
                )


def _known_everywhere(branch: Branch, solution: Solution) -> frozenset[str]:
    """Ids of the steps that every method that a film used takes: their figures stand in all samples."""
    if branch.name not in solution.chosen:
        return frozenset()
    used = [branch.candidates[number] for number in numbers_in(solution.chosen[branch.name])]
    return frozenset.intersection(*(frozenset(step.id for step in candidate.steps) for candidate in used))


def is_known(chain: Chain, group: Group, drop: PressureDrop) -> bool:
    """Whether the solution holds what the pressure drop is made from."""
    bound = {
        name for part in (*drop.laws, drop.total) for step in part.steps for name in step.inputs.values()
    }
    return chain.has_temperatures or not bound & {group.surface_temperature, group.flux}


def law_of(drop: PressureDrop, solution: Solution) -> Candidate | None:
    """The friction law that a single record uses; None where the card of the sum has its own."""
    if not drop.laws:
        return None
    return drop.laws[int(law_choice(drop, solution.values).ravel()[0])]


def pressure_notes(chain: Chain, group: Group, solutions: Mapping[str, Solution]) -> list[str]:
    """Which friction law acts beside each film of a group and why, or why none does."""
    notes = []
    for branch in group.branches:
        drop = branch.pressure_drop
        if drop is None:
            if branch.no_pressure_drop:
                notes.append(f"{branch.name}: no pressure drop is given: {branch.no_pressure_drop}.")
        elif not is_known(chain, group, drop):
            notes.append(
                f"{branch.name}: no pressure drop is given: the temperature of its surface is not known."
            )
        else:
            sentences = {condition: _law_words(drop, solutions[condition]) for condition in (SERVICE, CLEAN)}
            same = sentences[SERVICE] == sentences[CLEAN]
            notes += [
                f"{branch.name}, pressure drop{'' if same else f', {condition}'}: {words}."
                for condition, words in sentences.items()
                if not same or condition == SERVICE
            ]
    return notes


def _law_words(drop: PressureDrop, solution: Solution) -> str:
    total = drop.total.method
    law = law_of(drop, solution)
    if law is None:
        return f"{total.title} ({total.id})"
    because = next(
        (
            row.because
            for row in drop.choice
            if row.relation is None or bool(np.all(_holds(row, solution.values)))
        ),
        "",
    )
    return f"{total.title} ({total.id}) with {law.method.title} ({law.method.id}), {because}"


def _holds(row: ChoiceRow, values: Mapping[str, Array]) -> Array:
    assert row.relation is not None
    return np.asarray(evaluate(row.relation, {symbol: values[bound] for symbol, bound in row.inputs.items()}))


def law_choice(drop: PressureDrop, values: Mapping[str, Array]) -> Array:
    """The number of the law of each sample: the first row that holds."""
    choice = np.asarray(drop.choice[-1].candidate)
    for row in reversed(drop.choice):
        if row.relation is not None:
            choice = np.where(_holds(row, values), row.candidate, choice)
    return choice


def _evaluated(drop: PressureDrop, solution: Solution, known: set[str]) -> dict[str, Array]:
    """Every figure of a pressure drop; those of the film that are not ``known`` in all samples again."""
    values = dict(solution.values)
    made = set(known)

    def make(steps: tuple[ChainStep, ...]) -> None:
        run([step for step in steps if step.id not in made], values)
        made.update(step.id for step in steps)

    make(drop.choice_steps)
    if drop.laws:
        choice = law_choice(drop, values)
        used = numbers_in(choice)
        for number in used:
            make(drop.laws[number].steps)
        chosen = values[drop.laws[used[0]].coefficient]
        for number in used[1:]:
            chosen = np.where(choice == number, values[drop.laws[number].coefficient], chosen)
        values[drop.factor] = chosen
    make(drop.total.steps)
    return values


def pressure_drop_checks(chain: Chain, solution: Solution) -> list[ChainCheck]:
    """The limits of the laws that a single record uses, and of the cards that add them up."""
    checks: list[ChainCheck] = []
    for _, _, drop in drops(chain):
        law = law_of(drop, solution)
        checks += law.checks if law is not None else ()
        checks += [check for check in drop.total.checks if not _is_idle(check, solution)]
    return checks


def _is_idle(check: ChainCheck, solution: Solution) -> bool:
    """Whether a limit is for gases and the stream a liquid: it is not shown then."""
    return check.card == DROP and state_of_check(check, solution) == "not counting"


def pressure_items(chain: Chain, case: str, solutions: Mapping[str, Solution]) -> list[OpenItem]:
    """An open item for each stream that would lose more pressure than it has."""
    found: dict[str, OpenItem] = {}
    for _, branch, drop in drops(chain):
        state = chain.streams.get(branch.stream)
        for condition, solution in solutions.items():
            lost = solution.values.get(drop.total.coefficient)
            if state is None or not state.pressure or lost is None:
                continue
            has, loses = solution.number(state.pressure), solution.number(drop.total.coefficient)
            if loses >= has:
                name = f"{branch.name}/pressure lost" + (f"/{case}" if case else "")
                where = f"Case {case}: stream" if case else "Stream"
                text = (
                    f"{where} {state.name} would lose {loses / 1e5:.4g} bar of its {has / 1e5:.4g} bar (absolute),"
                    f" {condition}."
                )
                found[name] = OpenItem(name, "state", text)
    return list(found.values())


def acting_methods(drop: PressureDrop, solution: Solution) -> tuple[Method, ...]:
    """The cards that gave a pressure drop of a single record: the drop itself, and its law of friction."""
    law = law_of(drop, solution)
    return (drop.total.method, law.method) if law is not None else (drop.total.method,)


def drops(chain: Chain) -> list[tuple[Group, Branch, PressureDrop]]:
    """Every pressure drop that this chain can give, with its film."""
    return [
        (group, branch, branch.pressure_drop)
        for group in (chain.inner, chain.outer)
        for branch in group.branches
        if branch.pressure_drop is not None and is_known(chain, group, branch.pressure_drop)
    ]
