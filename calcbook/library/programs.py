"""A method card with the cards it uses, laid out as one ordered list of steps.

Names inside a program: a symbol of the card itself stands as it is; a symbol of a used card carries
the use before a colon (``f:x``). Needs of all cards are joined where quantity and place agree.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from typing import NamedTuple

import numpy as np

from calcbook.faults import Collector, Faults, nearest_names
from calcbook.formulas import Dimension, Relation, RelationFault, dimension, parse_expression
from calcbook.library.cards import Assignment, Limit, Line, Method, Need, Solve, Table, Use
from calcbook.library.operations import (
    LookupOperation,
    Operation,
    RelationOperation,
    SolveOperation,
    SumOperation,
    run,
)
from calcbook.library.reading import choice_number, vocabulary
from calcbook.quantities import DIMENSIONLESS

Find = Callable[[str], Method]
Keys = Mapping[tuple[str, str], str]


class ProgramStep(NamedTuple):
    """One step: its name, the symbol and card it is shown under, and its operation with bound inputs."""

    name: str
    symbol: str
    card: str
    path: str
    operation: Operation
    inputs: Mapping[str, str]


class ProgramNeed(NamedTuple):
    """One figure that the program takes from outside."""

    name: str
    need: Need


class Counting(NamedTuple):
    """A condition under which a used card's limits count, with bound inputs."""

    relation: Relation
    inputs: Mapping[str, str]


@dataclass(frozen=True, slots=True)
class ProgramLimit:
    """A limit of the card or of a used card, with bound inputs."""

    card: str
    path: str
    limit: Limit
    inputs: Mapping[str, str]
    counts_when: tuple[Counting, ...]


@dataclass(frozen=True)
class Program:
    """A method ready to run: needs, fixed figures, steps in order, limits, and the name of the result."""

    method: Method
    cards: tuple[Method, ...]
    needs: tuple[ProgramNeed, ...]
    constants: Mapping[str, float]
    constant_dimensions: Mapping[str, tuple]
    steps: tuple[ProgramStep, ...]
    limits: tuple[ProgramLimit, ...]
    result: str
    scope: Mapping[str, str]

    def uses_flag(self, name: str) -> bool:
        """Whether the program asks for a flag such as `fluid heated`."""
        return any(need.need.quantity.name == name for need in self.needs)


@dataclass
class _Build:
    find: Find
    needs: dict[str, ProgramNeed] = field(default_factory=dict)
    by_key: dict[tuple[str, str], str] = field(default_factory=dict)
    constants: dict[str, float] = field(default_factory=dict)
    constant_dimensions: dict[str, tuple] = field(default_factory=dict)
    steps: list[ProgramStep] = field(default_factory=list)
    limits: list[ProgramLimit] = field(default_factory=list)
    cards: list[Method] = field(default_factory=list)
    collector: Collector = field(default_factory=Collector)


def build_program(method: Method, find: Find, given: tuple[str, ...] = ()) -> Program:
    """Lay out a method. ``find`` gives a used card by id; ``given`` are use symbols supplied from outside.

    Raises ``Faults``: symbol-unknown, symbol-twice, use-circular.
    """
    build = _Build(find)
    outside = {}
    for symbol in given:
        need = Need(symbol, vocabulary()["number"], "", method.where)
        build.needs[symbol] = ProgramNeed(symbol, need)
        outside[symbol] = symbol
    scope = _lay_out(build, method, "", outside, (), {})
    build.collector.stop_if_any()
    return Program(
        method,
        tuple(build.cards),
        tuple(build.needs.values()),
        build.constants,
        build.constant_dimensions,
        tuple(build.steps),
        tuple(build.limits),
        scope[method.gives],
        scope,
    )


def _lay_out(
    build: _Build, method: Method, prefix: str, bound: Mapping[str, str], above: tuple[str, ...], keys: Keys
) -> dict[str, str]:
    """Lay out one card under a prefix; returns its local symbols with their names in the program.

    ``keys`` are the figures of the enclosing cards by quantity and place: a used card takes what the card
    that uses it was given.
    """
    if method.id in above:
        build.collector.add(
            "use-circular", method.where, f"the card uses itself: {' uses '.join((*above, method.id))}"
        )
        raise Faults(build.collector)
    build.cards.append(method)
    scope: dict[str, str] = dict(bound)
    for need in method.needs:
        _bind_need(build, need, prefix, scope, keys)
    keys = {**keys, **{need.key: scope[need.symbol] for need in method.needs}}
    for symbol, (value, _, dim) in method.constants.items():
        scope[symbol] = _constant(build, prefix + symbol, value, dim)
    waiting = [use for use in method.uses if use.symbol not in scope]
    inner: list[tuple[Use, str]] = []
    waiting = _lay_out_uses(build, method, waiting, prefix, scope, (*above, method.id), inner, keys)
    for line in method.lines:
        _lay_out_line(build, method, line, prefix, scope)
        waiting = _lay_out_uses(build, method, waiting, prefix, scope, (*above, method.id), inner, keys)
    for use in waiting:
        build.collector.add(
            "symbol-unknown",
            use.where,
            f"`{use.symbol}` is used with a symbol that nothing assigns",
            expected=", ".join(sorted(scope)),
        )
    build.collector.stop_if_any()
    _lay_out_limits(build, method, prefix, scope)
    for use, path in inner:
        if use.counts_when is not None:
            counting = Counting(use.counts_when, _inputs(build, use.counts_when, scope, use))
            build.limits[:] = [
                replace(limit, counts_when=(counting, *limit.counts_when))
                if limit.path.startswith(path)
                else limit
                for limit in build.limits
            ]
    return scope


def _bind_need(build: _Build, need: Need, prefix: str, scope: dict[str, str], keys: Keys) -> None:
    for word in need.one_of:
        try:
            float(word)
        except ValueError:
            scope.setdefault(
                word,
                _constant(
                    build,
                    f"word {word} of {','.join(need.one_of)}",
                    float(need.one_of.index(word)),
                    DIMENSIONLESS,
                ),
            )
    if need.symbol in scope:
        return
    name = keys.get(need.key) or build.by_key.get(need.key)
    if name is None:
        name = prefix + need.symbol
        build.by_key[need.key] = name
        build.needs[name] = ProgramNeed(name, need)
    scope[need.symbol] = name


def _constant(build: _Build, name: str, value: float, dim: tuple) -> str:
    build.constants[name] = value
    build.constant_dimensions[name] = dim
    return name


def _lay_out_uses(
    build: _Build,
    method: Method,
    waiting: list[Use],
    prefix: str,
    scope: dict[str, str],
    above: tuple[str, ...],
    inner: list[tuple[Use, str]],
    keys: Keys,
) -> list[Use]:
    """Lay out the used cards whose overrides are known by now; returns those that still wait."""
    still = []
    for use in waiting:
        card = build.find(use.method)
        words = {name: _word(card, name, relation) for name, relation in use.overrides.items()}
        needed = [
            symbol
            for name, relation in use.overrides.items()
            if words[name] is None
            for symbol in relation.symbols
        ]
        if any(symbol not in scope for symbol in needed):
            still.append(use)
            continue
        path = f"{prefix}{use.symbol}:"
        bound = {}
        for name, relation in use.overrides.items():
            word = words[name]
            if word is not None:
                bound[name] = _constant(build, path + name, word, DIMENSIONLESS)
            elif relation.text.strip() in scope:
                bound[name] = scope[relation.text.strip()]
            else:
                inputs = {symbol: scope[symbol] for symbol in relation.symbols}
                build.steps.append(
                    ProgramStep(path + name, name, card.id, path, RelationOperation(relation), inputs)
                )
                bound[name] = path + name
        used = _lay_out(build, card, path, bound, above, keys)
        scope[use.symbol] = used[card.gives]
        inner.append((use, path))
    return still


def _word(card: Method, name: str, relation: Relation) -> float | None:
    """The number of a choice word, when an override names one."""
    need = card.need(name)
    if need is None or not need.one_of:
        return None
    try:
        return choice_number(relation.text.strip(), need.one_of)
    except ValueError:
        return None


def _lay_out_line(build: _Build, method: Method, line: Line, prefix: str, scope: dict[str, str]) -> None:
    if line.symbol in scope:
        build.collector.add("symbol-twice", line.where, f"`{line.symbol}` is assigned twice or hides a need")
        return
    operation: Operation
    if isinstance(line, Assignment):
        operation = RelationOperation(line.relation)
        for symbol in line.relation.symbols:
            _lay_out_lookup(build, method, symbol, line, prefix, scope)
    elif isinstance(line, Solve):
        operation = SolveOperation(line)
    else:
        operation = SumOperation(line)
    missing = [symbol for symbol in operation.symbols if symbol not in scope]
    for symbol in missing:
        build.collector.add(
            "symbol-unknown",
            line.where,
            f"`{symbol}` is not a need, constant, use or earlier line",
            found=symbol,
            expected=", ".join(sorted(scope)),
            nearest=nearest_names(symbol, scope),
        )
    if not missing:
        name = prefix + line.symbol
        inputs = {symbol: scope[symbol] for symbol in operation.symbols}
        build.steps.append(ProgramStep(name, line.symbol, method.id, prefix, operation, inputs))
        scope[line.symbol] = name


def _lay_out_lookup(
    build: _Build, method: Method, symbol: str, line: Line, prefix: str, scope: dict[str, str]
) -> None:
    table_name, dot, column = symbol.partition(".")
    if not dot or symbol in scope:
        return
    table = method.tables.get(table_name)
    if table is None or column not in table.columns:
        known = [f"{table.name}.{name}" for table in method.tables.values() for name in table.columns]
        build.collector.add(
            "symbol-unknown",
            line.where,
            f"there is no table column `{symbol}`",
            found=symbol,
            expected=", ".join(known),
            nearest=nearest_names(symbol, known),
        )
        return
    operation = LookupOperation(table, column)
    if all(name in scope for name in operation.symbols):
        name = prefix + symbol
        inputs = {local: scope[local] for local in operation.symbols}
        build.steps.append(ProgramStep(name, symbol, method.id, prefix, operation, inputs))
        scope[symbol] = name


def _lay_out_limits(build: _Build, method: Method, prefix: str, scope: dict[str, str]) -> None:
    for limit in (
        *method.limits,
        *(item for table in method.tables.values() for item in table_limits(table, method)),
    ):
        inputs = _inputs(build, limit.that, scope, limit)
        if inputs is not None:
            build.limits.append(ProgramLimit(method.id, prefix, limit, inputs, ()))


def _inputs(
    build: _Build, relation: Relation, scope: Mapping[str, str], owner: Limit | Use
) -> dict[str, str]:
    for symbol in relation.symbols:
        if symbol not in scope:
            build.collector.add(
                "symbol-unknown",
                owner.where,
                f"`{symbol}` is not a symbol of this card",
                found=symbol,
                expected=", ".join(sorted(scope)),
                nearest=nearest_names(symbol, scope),
            )
    return {symbol: scope[symbol] for symbol in relation.symbols if symbol in scope}


def table_limits(table: Table, method: Method) -> list[Limit]:
    """The limits that follow from where a table ends."""
    result = []
    level = {"stop": "stop", "open item": "range", "hold last": "caution"}[table.outside]
    standing = method.sources[0].standing if method.sources else "from memory"
    for symbol, way in table.by.items():
        if way == "exact":
            continue
        low, high = ("from", "to") if way == "step" else (symbol, symbol)
        first = table.cells[:, table.columns.index(low)].min()
        last = table.cells[:, table.columns.index(high)].max()
        that = parse_expression(f"{float(first)!r} <= {symbol} <= {float(last)!r}")
        cite = method.sources[0].cite if method.sources else ""
        result.append(
            Limit(f"table {table.name}", that, level, "end of the table", cite, standing, table.where)
        )
    return result


def check_dimensions(program: Program) -> None:
    """Push dimensions through a program. Raises ``Faults``: dimension-slip, with the card's line."""
    collector = Collector()
    dims: dict[str, tuple] = dict(program.constant_dimensions)
    dims |= {need.name: need.need.quantity.dimension for need in program.needs}
    lines = {line.symbol: line.where for line in program.method.lines}
    for step in program.steps:
        dims[step.name] = DIMENSIONLESS
        where = lines.get(step.symbol, program.method.where) if not step.path else program.method.where
        relation = _relation_of(step.operation)
        if relation is None:
            continue
        local = {symbol: dims[name] for symbol, name in step.inputs.items()}
        try:
            if isinstance(step.operation, SolveOperation):
                dimension(relation, local | _solved_dimensions(step.operation, local))
            elif isinstance(step.operation, SumOperation):
                dims[step.name] = dimension(relation, local | {step.operation.line.over: DIMENSIONLESS})
            else:
                dims[step.name] = dimension(relation, local)
        except RelationFault as error:
            collector.add("dimension-slip", where, f"{step.card}, {step.symbol}: {error.message}")
    for item in program.limits:
        try:
            dimension(item.limit.that, {symbol: dims[name] for symbol, name in item.inputs.items()})
        except RelationFault as error:
            collector.add("dimension-slip", item.limit.where, f"limit `{item.limit.id}`: {error.message}")
    expected = result_dimension(program.method.gives)
    if expected is not None and dims[program.result] != expected:
        collector.add(
            "dimension-slip",
            lines.get(program.method.gives, program.method.where),
            "the result has another dimension than its symbol",
        )
    collector.stop_if_any()


def _solved_dimensions(operation: SolveOperation, local: Mapping[str, Dimension]) -> dict[str, Dimension]:
    """Dimensions of what a solved line names itself: its root, and the sum of its equation."""
    line = operation.line
    found: dict[str, Dimension] = {line.symbol: DIMENSIONLESS}
    if line.sum is not None:
        found[line.sum.symbol] = dimension(line.sum.of, {**local, **found, line.sum.over: DIMENSIONLESS})
    return found


def _relation_of(operation: Operation) -> Relation | None:
    if isinstance(operation, RelationOperation):
        return operation.relation
    if isinstance(operation, SolveOperation):
        return operation.line.equation
    if isinstance(operation, SumOperation):
        return operation.line.of
    return None


def result_dimension(symbol: str) -> tuple | None:
    """The dimension of the vocabulary quantity with this symbol, if there is one."""
    for kind in vocabulary().values():
        if kind.symbol == symbol:
            return kind.dimension
    return None


def need_value(need: Need, text: str) -> np.ndarray:
    """The array that stands for a need's text in a check point or a `with:` choice."""
    if need.quantity.flag:
        return np.asarray(text in ("yes", "true", "True", "1"))
    return np.asarray(choice_number(text, need.one_of))


def evaluate_program(program: Program, given: Mapping[str, np.ndarray]) -> dict[str, np.ndarray]:
    """Run a program on values for its needs (by name); needs with an ``absent`` value may be left out."""
    values: dict[str, np.ndarray] = {name: np.asarray(value) for name, value in program.constants.items()}
    for need in program.needs:
        if need.name in given:
            values[need.name] = given[need.name]
        elif need.need.absent is not None:
            values[need.name] = need_value(need.need, need.need.absent)
        else:
            values[need.name] = np.asarray(False if need.need.quantity.flag else np.nan)
    run(program.steps, values)
    return values
