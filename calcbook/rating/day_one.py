"""Day one: the clean unit at the inlets of the duty, as it runs and turned down until it gives the duty.

The outlets are then open, so the calculation is built anew without them and without stated means.
"""

from __future__ import annotations

import numpy as np

from calcbook.chain.completing import completed
from calcbook.chain.findings import lacking_property, phases_not_checked
from calcbook.chain.outcome import CaseOutcome
from calcbook.chain.rating_outcome import OF_DAY_ONE, WITH_ALLOWANCES, DayOne, state_in
from calcbook.chain.solve import solve
from calcbook.chain.types import CLEAN, SERVICE, Chain
from calcbook.rating.opened import open_chain
from calcbook.rating.turning_down import TurnedDown, turned_down
from calcbook.rating.unit_states import judged, limits_of_duty, unit_state

# Why there is none.
NO_FLOW = "a flow is not stated from which an outlet would follow"


def day_one(before: Chain, case: CaseOutcome) -> DayOne | str | None:
    """The clean unit at the duty's inlets in a case, or in words why it has no answer there.

    None where nothing fouls or a flow is missing that it takes, unless a criterion asks for it.
    """
    fouls = any(row.kind == "fouling" for row in case.terms[SERVICE])
    is_asked = any(item.result in OF_DAY_ONE for item in before.calculation.acceptance)
    if not (fouls or is_asked):
        return None
    chain = open_chain(before, case, "hot", "cold")
    if chain is None:
        return NO_FLOW if is_asked else None
    inputs = chain.case_inputs(case.name)
    clean_chain = open_chain(before, case, "hot", "cold", condition=CLEAN)
    assert clean_chain is not None, "the same calculation found its figures in service"
    states = {SERVICE: (chain, SERVICE), CLEAN: (clean_chain, CLEAN)}
    solutions = {name: solve(one, inputs, condition) for name, (one, condition) in states.items()}
    for name, solution in solutions.items():
        if not bool(np.all(solution.converged)):
            which = "the clean unit" if name == CLEAN else "the unit with its allowances"
            why = lacking_property(states[name][0], solution)
            return f"the circuit of {which} does not close at the inlets of the duty" + (
                f": {why}" if why else ""
            )
    clean, in_service = solutions[CLEAN], solutions[SERVICE]
    turned = turned_down(before, case)
    with_allowances = tuple(
        check._replace(condition=state_in(WITH_ALLOWANCES, case.name))
        for check in limits_of_duty(chain, in_service)
    )
    as_it_runs = judged(clean_chain, completed(clean_chain, inputs), clean, state_in("clean", case.name))
    service_state = unit_state(chain, in_service)
    clean_state = unit_state(clean_chain, clean)
    return DayOne(
        service_state,
        clean_state,
        turned.state,
        turned.reason,
        turned.throttle,
        _is_slower(before, case, turned),
        with_allowances + as_it_runs.checks + turned.left.checks,
        as_it_runs.criteria + turned.left.criteria,
        phases_not_checked(clean_chain, clean),
    )


def _is_slower(chain: Chain, case: CaseOutcome, turned: TurnedDown) -> bool:
    """Whether the throttled stream runs below its usual speed, and does not in service."""
    duty = chain.calculation.duty
    assert duty is not None
    stream = duty.sides[turned.throttle.side].stream
    films = {branch.name for branch in chain.branches if branch.stream == stream}
    slow = {check.id for check in turned.left.checks if check.unit == "m/s" and check.side == "below"}
    slow -= {check.id for check in case.checks if check.condition == SERVICE and check.state == "outside"}
    return any(name.startswith(f"{film} / band / ") for name in slow for film in films)
