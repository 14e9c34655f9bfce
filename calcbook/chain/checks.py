"""Limits evaluated at a solution: figure, limit, state; and the engineer's acceptances applied."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from calcbook.calcfile.calculation import Acceptance
from calcbook.chain.outcome import CheckResult
from calcbook.chain.solve import Solution
from calcbook.chain.types import Chain, ChainCheck
from calcbook.faults import Collector, nearest_names, shown
from calcbook.formulas import (
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
from calcbook.formulas.nodes import CONSTANTS
from calcbook.quantities import DIMENSIONLESS, QuantityFault, read_any, si_unit, unit_display

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
    )


def state_of_check(check: ChainCheck, solution: Solution) -> str:
    """How a limit stands in one condition of a single record: within, outside, not evaluable, not counting."""
    values = solution.values
    if not all(_counts(one.relation, one.inputs, values) for one in check.counts_when):
        return "not counting"
    arguments = {symbol: values[bound] for symbol, bound in check.inputs.items()}
    for value in arguments.values():
        if isinstance(value, np.ndarray) and not np.isfinite(np.asarray(value, dtype=float)).all():
            return "not evaluable"
    return "within" if bool(evaluate(check.limit.that, arguments)) else "outside"


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


def _counts(relation: Relation, inputs: Mapping[str, str], values: Mapping[str, np.ndarray]) -> bool:
    return bool(evaluate(relation, {symbol: values[bound] for symbol, bound in inputs.items()}))


def _figure_and_limit(
    tree: Node, arguments: Mapping[str, np.ndarray], dims: Mapping[str, tuple], unknown: bool
) -> tuple[str, str, float, str]:
    """The checked figure and its limit as text, from the comparison itself."""
    if not isinstance(tree, Compare):
        return write(tree), "", math.nan, ""
    operands = [tree.first, *(operand for _, operand in tree.rest)]
    place = 1 if len(operands) == 3 else (0 if not _is_fixed(operands[0]) or len(operands) == 1 else 1)
    checked = operands[place]
    unit = unit_display(si_unit(dimension(checked, dims)))
    name = write(checked)
    if unknown:
        return f"{name} is not known", _limit_text(tree, operands, place, arguments, dims, ()), math.nan, unit
    numbers = [float(np.asarray(evaluate(operand, arguments)).ravel()[0]) for operand in operands]
    others = tuple(number for index, number in enumerate(numbers) if index != place)
    figure = f"{name} = {apart(numbers[place], others)}{_unit(unit)}"
    return figure, _limit_text(tree, operands, place, arguments, dims, tuple(numbers)), numbers[place], unit


def _limit_text(
    tree: Compare,
    operands: list[Node],
    place: int,
    arguments: Mapping[str, np.ndarray],
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

    Codes: accept-unknown for an id that matches no check, unit-dimension for a bound of another quantity.
    """
    known = dict.fromkeys(result.id for result in results)
    cases = {result.case for result in results}
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
        if acceptance.within not in ("all", "clean", "service", *cases):
            collector.add(
                "accept-unknown",
                acceptance.place,
                f"`in: {shown(acceptance.within)}` is no condition or case",
                expected=", ".join(("all", "clean", "service", *(case for case in cases if case))),
            )
    return tuple(_accepted(chain, result, collector) for result in results)


def _accepted(chain: Chain, result: CheckResult, collector: Collector) -> CheckResult:
    for acceptance in chain.calculation.accept:
        if acceptance.check != result.id or acceptance.within not in ("all", result.condition, result.case):
            continue
        bound = _bound(acceptance, result, collector)
        if bound is None:
            return result
        words = (
            f"{acceptance.because} ({acceptance.direction} {acceptance.bound.text if acceptance.bound else ''};"
            f" {acceptance.by}, {acceptance.date})"
        )
        if result.state == "within":
            return replace(result, accepted=f"accepted though within: {words}")
        if result.level == "stop" or result.state not in ("outside", "not evaluable"):
            return result
        inside = math.isnan(result.value) or (
            result.value >= bound if acceptance.direction == "down to" else result.value <= bound
        )
        if inside:
            return replace(result, state="accepted", accepted=words)
        return replace(result, accepted=f"beyond the accepted bound: {words}")
    return result


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
    if unit_display(si_unit(quantity.dimension)) != result.unit:
        collector.add(
            "unit-dimension",
            value.place,
            "the bound has another dimension than the checked figure",
            found=value.text,
            expected=result.unit,
        )
        return None
    return quantity.value
