"""Limits evaluated at a solution: figure, limit, state; and the engineer's acceptances applied."""

from __future__ import annotations

import itertools
import math
from collections.abc import Mapping

import numpy as np

from calcbook.calcfile.calculation import Acceptance
from calcbook.chain.outcome import CheckResult
from calcbook.chain.solve import Solution
from calcbook.chain.types import Chain, ChainCheck
from calcbook.faults import Collector, nearest_names, shown
from calcbook.formulas import (
    Binary,
    Compare,
    Node,
    Number,
    Relation,
    Symbol,
    dimension,
    evaluate,
    number_text,
    parse_number,
    write,
)
from calcbook.formulas.nodes import CONSTANTS, walk
from calcbook.quantities import DIMENSIONLESS, QuantityFault, read_any, si_unit, unit_display

Array = np.ndarray
# What a limit can be at a sample; arrays of states hold the place in this list.
STATES = ("within", "outside", "not evaluable", "not counting")
WITHIN, OUTSIDE, NOT_EVALUABLE, NOT_COUNTING = range(len(STATES))
# The side on which a bound of an acceptance stops nothing.
OPEN_SIDE = {"down to": "above", "up to": "below"}
OPERATORS = {">=": "≥", "<=": "≤", ">": ">", "<": "<", "==": "=", "!=": "≠"}


def evaluate_check(
    check: ChainCheck, solution: Solution, case: str, dimensions: Mapping[str, tuple]
) -> CheckResult:
    """One limit in one condition of a single record."""
    state = state_of_check(check, solution)
    arguments = {symbol: solution.values[bound] for symbol, bound in check.inputs.items()}
    local = {symbol: dimensions.get(bound, DIMENSIONLESS) for symbol, bound in check.inputs.items()}
    figure, limit, value, unit = _figure_and_limit(
        check.limit.that.tree, arguments, local, state == "not evaluable"
    )
    figure, limit = _in_words(check, figure, limit, value)
    return CheckResult(
        check.id,
        check.owner,
        check.card,
        solution.condition,
        case,
        write(check.limit.that),
        figure,
        limit,
        value,
        unit,
        check.limit.level,
        state,
        check.limit.because,
        check.limit.source,
        check.limit.standing,
        _side(check, arguments) if state == "outside" else "",
    )


def _side(check: ChainCheck, arguments: Mapping[str, Array]) -> str:
    """On which side of its limit a figure outside is: below, above, or neither for a limit on a choice."""
    tree = check.limit.that.tree
    if not isinstance(tree, Compare):
        return ""
    operands, place = _checked_place(tree)
    numbers = [float(np.asarray(evaluate(operand, arguments)).ravel()[0]) for operand in operands]
    for left, (operator, _) in enumerate(tree.rest):
        if place not in (left, left + 1) or operator in ("==", "!="):
            continue
        low, high = (numbers[left], numbers[left + 1])[:: 1 if operator in ("<", "<=") else -1]
        if not (low <= high if "=" in operator else low < high):
            # The greater of both should be the smaller one.
            is_first = (left == place) == (operator in ("<", "<="))
            return "above" if is_first else "below"
    return ""


def state_of_check(check: ChainCheck, solution: Solution) -> str:
    """How a limit stands in one condition of a single record: within, outside, not evaluable, not counting."""
    return STATES[int(check_states(check, solution.values).ravel()[0])]


def check_states(check: ChainCheck, values: Mapping[str, Array]) -> Array:
    """The state of one limit at every sample, as its place in ``STATES``; 0-d where nothing varies."""
    arguments = {symbol: values[bound] for symbol, bound in check.inputs.items()}
    unknown: Array = np.asarray(False)
    for value in arguments.values():
        if isinstance(value, np.ndarray):
            unknown = unknown | ~np.isfinite(np.asarray(value, dtype=float))
    held = np.where(evaluate(check.limit.that, arguments), WITHIN, OUTSIDE)
    states = np.where(unknown, NOT_EVALUABLE, held)
    for one in check.counts_when:
        counts = evaluate(one.relation, {symbol: values[bound] for symbol, bound in one.inputs.items()})
        states = np.where(counts, states, NOT_COUNTING)
    return states


def check_margins(check: ChainCheck, values: Mapping[str, Array]) -> list[Array]:
    """The differences that pass zero where a limit changes its state: both sides of each comparison in it."""
    found = relation_margins(check.limit.that, check.inputs, values)
    for one in check.counts_when:
        found += relation_margins(one.relation, one.inputs, values)
    return found


def relation_margins(
    relation: Relation, inputs: Mapping[str, str], values: Mapping[str, Array]
) -> list[Array]:
    """Left side less right side of every comparison in a relation, at every sample."""
    arguments = {symbol: values[bound] for symbol, bound in inputs.items()}
    return [evaluate(difference, arguments) for difference in _differences(relation.tree)]


def _differences(tree: Node) -> tuple[Node, ...]:
    """The differences of a tree's comparisons; kept with the tree, so that each is compiled once."""
    found = tree.memory.get(_differences)
    if found is None:
        pairs = []
        for node in walk(tree):
            if isinstance(node, Compare):
                sides = [node.first, *(side for _, side in node.rest)]
                pairs += [Binary("-", left, right) for left, right in itertools.pairwise(sides)]
        found = tree.memory[_differences] = tuple(pairs)
    return found


def checked_figure(check: ChainCheck, values: Mapping[str, Array]) -> Array | None:
    """The figure that a limit checks, at every sample; None where the limit compares nothing."""
    tree = check.limit.that.tree
    if not isinstance(tree, Compare):
        return None
    operands, place = _checked_place(tree)
    return evaluate(operands[place], {symbol: values[bound] for symbol, bound in check.inputs.items()})


def _checked_place(tree: Compare) -> tuple[list[Node], int]:
    """The operands of a comparison, and which of them is the figure that is checked."""
    operands = [tree.first, *(operand for _, operand in tree.rest)]
    if len(operands) == 3:
        return operands, 1
    return operands, 0 if not _is_fixed(operands[0]) or len(operands) == 1 else 1


def _in_words(check: ChainCheck, figure: str, limit: str, value: float) -> tuple[str, str]:
    """The texts of a limit on a choice: the words chosen and wanted instead of their places in the choice."""
    tree = check.limit.that.tree
    if not isinstance(tree, Compare) or len(tree.rest) != 1 or not math.isfinite(value):
        return figure, limit
    operator, wanted = tree.rest[0]
    mark = f"word {wanted.name} of " if isinstance(wanted, Symbol) else ""
    bound = check.inputs.get(wanted.name, "") if isinstance(wanted, Symbol) else ""
    if not mark or mark not in bound:
        return figure, limit
    words = bound.partition(mark)[2].split(",")
    return f"{write(tree.first)} = {words[int(value)]}", f"{OPERATORS[operator]} {write(wanted)}"


def _figure_and_limit(
    tree: Node, arguments: Mapping[str, np.ndarray], dims: Mapping[str, tuple], unknown: bool
) -> tuple[str, str, float, str]:
    """The checked figure and its limit as text, from the comparison itself."""
    if not isinstance(tree, Compare):
        return write(tree), "", math.nan, ""
    operands, place = _checked_place(tree)
    checked = operands[place]
    unit = unit_display(si_unit(dimension(checked, dims)))
    name = write(checked)
    if unknown:
        return f"{name} is not known", _limit_text(tree, operands, place, dims, ()), math.nan, unit
    numbers = [float(np.asarray(evaluate(operand, arguments)).ravel()[0]) for operand in operands]
    others = tuple(number for index, number in enumerate(numbers) if index != place)
    figure = f"{name} = {apart(numbers[place], others)}{_unit(unit)}"
    return figure, _limit_text(tree, operands, place, dims, tuple(numbers)), numbers[place], unit


def _limit_text(
    tree: Compare,
    operands: list[Node],
    place: int,
    dims: Mapping[str, tuple],
    numbers: tuple[float, ...],
) -> str:
    def text(index: int) -> str:
        operand = operands[index]
        if isinstance(operand, Number):
            return plain_number(operand.value)
        if not numbers:
            return write(operand)
        unit = unit_display(si_unit(dimension(operand, dims)))
        return apart(numbers[index], (numbers[place],)) + _unit(unit)

    if len(operands) == 3:
        return f"{text(0)} to {text(2)}"
    operator = OPERATORS[tree.rest[0][0]]
    if place == 1:
        operator = {"≥": "≤", "≤": "≥", ">": "<", "<": ">"}.get(operator, operator)
    return f"{operator} {text(1 - place)}"


def plain_number(value: float) -> str:
    """A figure of a card as it is, in groups of three where it is long: 5000000.0 as 5 000 000."""
    return (
        number_text(value, 15)
        if value != int(value)
        else number_text(value, max(1, len(str(abs(int(value))))))
    )


def _unit(unit: str) -> str:
    return "" if unit in ("1", "") else f" {unit}"


def _is_fixed(node: Node) -> bool:
    if isinstance(node, Symbol):
        return node.name in CONSTANTS
    return isinstance(node, Number)


def apart(value: float, others: tuple[float, ...], digits: int = 5) -> str:
    """A figure with enough digits that it differs in print from the figures it is compared with."""
    if not math.isfinite(value):
        return "not known"
    for more in range(digits, 18):
        text = number_text(value, more)
        printed = parse_number(text)
        if all(value == other or parse_number(number_text(other, more)) != printed for other in others):
            return text
    return repr(value)


# --- acceptance by the engineer ---------------------------------------------------------------------


def apply_acceptances(
    chain: Chain, results: tuple[CheckResult, ...], collector: Collector
) -> tuple[CheckResult, ...]:
    """Outside or not evaluable range checks that the file accepts, with its bound and reason.

    Codes: accept-unknown for an id that matches no check, unit-dimension for a bound of another quantity,
    accept-direction for one on the side where the figure is within.
    """
    known = dict.fromkeys(result.id for result in results)
    for acceptance in chain.calculation.accept:
        if acceptance.check not in known:
            collector.add(
                "accept-unknown",
                acceptance.place,
                f"no check is called `{shown(acceptance.check)}`",
                found=shown(acceptance.check),
                expected="the id of a check in the record's validity table",
                nearest=nearest_names(acceptance.check, known),
            )
    return tuple(_accepted(chain, result, collector) for result in results)


def _accepted(chain: Chain, result: CheckResult, collector: Collector) -> CheckResult:
    for acceptance in chain.calculation.accept:
        if acceptance.check != result.id or not acceptance.acts_in(result.condition, result.case):
            continue
        bound = _bound(acceptance, result, collector)
        if bound is None:
            return result
        words = (
            f"{acceptance.because} ({acceptance.direction} {acceptance.bound.text if acceptance.bound else ''};"
            f" {acceptance.by}, {acceptance.date})"
        )
        if result.state == "within":
            return result._replace(accepted=f"accepted though within: {words}")
        if result.level == "stop" or result.state not in ("outside", "not evaluable"):
            return result
        if result.side and OPEN_SIDE[acceptance.direction] == result.side:
            collector.add(
                "accept-direction",
                acceptance.bound.place if acceptance.bound else acceptance.place,
                f"the figure is {result.side} its limit, and the bound lets it go there without end"
                f" ({result.figure}, limit {result.limit}{_where(result)})",
                found=acceptance.direction,
                expected=f"{'down to' if result.side == 'below' else 'up to'}: …",
            )
            return result
        if bool(within_bound(acceptance.direction, bound, np.asarray(result.value))):
            return result._replace(state="accepted", accepted=words)
        return result._replace(accepted=f"beyond the accepted bound: {words}")
    return result


def _where(result: CheckResult) -> str:
    return f", case {result.case}, {result.condition}" if result.case else f", {result.condition}"


def within_bound(direction: str, bound: float, figures: Array) -> Array:
    """Whether checked figures stay within the bound of an acceptance; one that is not known does."""
    return np.isnan(figures) | (figures >= bound if direction == "down to" else figures <= bound)


def _bound(acceptance: Acceptance, result: CheckResult, collector: Collector) -> float | None:
    value = acceptance.bound
    if value is None:
        return None
    try:
        quantity = value.quantity or read_any(value.text)
    except QuantityFault:
        collector.add(
            "number-unreadable",
            value.place,
            "the bound is no figure",
            found=shown(value.text),
            expected=f"a figure in {result.unit or '1'}",
        )
        return None
    if unit_display(si_unit(quantity.dimension)) != result.unit or quantity.reading == "gauge":
        collector.add(
            "unit-dimension",
            value.place,
            "the bound has another dimension than the checked figure, or counts from the site pressure",
            found=value.text,
            expected=f"{result.unit}, absolute" if result.unit == "Pa" else result.unit,
        )
        return None
    return quantity.value
