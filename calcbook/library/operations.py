"""The four ways in which a card makes a figure from others: relation, table, root, sum.

Every operation takes SI arrays by local symbol and gives an array; ``slopes`` gives the derivative
with respect to the symbols asked for. Both come from the one text of the card.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from calcbook.formulas import (
    Binary,
    Compare,
    Node,
    Relation,
    evaluate,
    evaluate_quietly,
    evaluate_with_slopes,
    partial,
)
from calcbook.library.cards import Solve, Sum, Table

Array = np.ndarray
_ROOT_PASSES = 200


class Operation(Protocol):
    """What makes one figure. ``symbols`` are the local names of what it takes."""

    @property
    def symbols(self) -> tuple[str, ...]: ...

    def value(self, arguments: Mapping[str, Array]) -> Array: ...

    def slopes(
        self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]
    ) -> dict[str, Array]: ...


@dataclass(frozen=True, slots=True)
class RelationOperation:
    """A plain relation."""

    relation: Relation

    @property
    def symbols(self) -> tuple[str, ...]:
        return self.relation.symbols

    def value(self, arguments: Mapping[str, Array]) -> Array:
        return evaluate(self.relation, arguments)

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        return {symbol: evaluate(partial(self.relation, symbol), arguments) for symbol in wanted}


@dataclass(frozen=True, slots=True)
class LookupOperation:
    """One column of a table, found by the symbols that the table names. Outside: NaN, or the nearest row."""

    table: Table
    column: str

    @property
    def symbols(self) -> tuple[str, ...]:
        return tuple(self.table.by)

    def value(self, arguments: Mapping[str, Array]) -> Array:
        return self._find(arguments)[0]

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        found = self._find(arguments)[1]
        zero = np.zeros_like(value)
        return {
            symbol: found if self.table.by[symbol] in ("linear", "log-log") else zero for symbol in wanted
        }

    def _find(self, arguments: Mapping[str, Array]) -> tuple[Array, Array]:
        shape = np.broadcast_shapes(*(np.shape(arguments[symbol]) for symbol in self.table.by))
        flat = {
            symbol: np.broadcast_to(arguments[symbol], shape).ravel().astype(float)
            for symbol in self.table.by
        }
        rows = np.ones((len(self.table.cells), int(np.prod(shape, dtype=int))), dtype=bool)
        interpolated = ""
        for symbol, way in self.table.by.items():
            if way == "exact":
                rows &= self._cells(symbol)[:, None] == flat[symbol][None, :]
            elif way == "step":
                rows &= self._step(flat[symbol])
            else:
                interpolated = symbol
        values, slopes = self._pick(rows, flat, interpolated)
        return values.reshape(shape), slopes.reshape(shape)

    def _cells(self, column: str) -> Array:
        return self.table.cells[:, self.table.columns.index(column)]

    def _step(self, figures: Array) -> Array:
        low, high = self._cells("from"), self._cells("to")
        is_first, is_last = self._ends(low, high)
        at_end = (figures[None, :] == high[:, None]) & is_last[:, None]
        inside = (low[:, None] <= figures[None, :]) & (figures[None, :] < high[:, None]) | at_end
        if self.table.outside != "stop":
            inside |= (figures[None, :] < low[:, None]) & is_first[:, None]
            inside |= (figures[None, :] > high[:, None]) & is_last[:, None]
        return inside

    def _ends(self, low: Array, high: Array) -> tuple[Array, Array]:
        """The rows that stand first and last among those of the same exact cells (the same layout, say)."""
        exact = [self._cells(symbol) for symbol, way in self.table.by.items() if way == "exact"]
        alike = np.ones((len(low), len(low)), dtype=bool)
        for cells in exact:
            alike &= cells[:, None] == cells[None, :]
        return (
            low == np.where(alike, low[None, :], np.inf).min(axis=1),
            high == np.where(alike, high[None, :], -np.inf).max(axis=1),
        )

    def _pick(self, rows: Array, flat: Mapping[str, Array], interpolated: str) -> tuple[Array, Array]:
        column = self._cells(self.column)
        values = np.full(rows.shape[1], np.nan)
        slopes = np.zeros(rows.shape[1])
        if not interpolated:
            found = rows.any(axis=0)
            values[found] = column[rows[:, found].argmax(axis=0)]
            return values, slopes
        same = bool((rows == rows[:, :1]).all())
        for pattern in (rows[:, :1] if same else np.unique(rows, axis=1)).T:
            samples = (rows == pattern[:, None]).all(axis=0)
            if pattern.any():
                values[samples], slopes[samples] = self._between(
                    self._cells(interpolated)[pattern],
                    column[pattern],
                    flat[interpolated][samples],
                    interpolated,
                )
        return values, slopes

    def _between(self, at: Array, figures: Array, where: Array, symbol: str) -> tuple[Array, Array]:
        logarithmic = self.table.by[symbol] == "log-log"
        x, y, place = (np.log(at), np.log(figures), np.log(where)) if logarithmic else (at, figures, where)
        if len(x) == 1:
            x, y = np.array([x[0], np.nextafter(x[0], np.inf)]), np.array([y[0], y[0]])
        upper = np.clip(np.searchsorted(x, place, side="right"), 1, len(x) - 1)
        gradient = (y[upper] - y[upper - 1]) / (x[upper] - x[upper - 1])
        held = np.clip(place, x[0], x[-1])
        value = y[upper - 1] + gradient * (held - x[upper - 1])
        gradient = np.where(held == place, gradient, 0.0)
        if self.table.outside == "stop":
            value = np.where(held == place, value, np.nan)
        return (np.exp(value), gradient * np.exp(value) / where) if logarithmic else (value, gradient)


@dataclass(frozen=True, slots=True)
class SumOperation:
    """A sum over 0, 1, … terms − 1."""

    line: Sum

    @property
    def symbols(self) -> tuple[str, ...]:
        return tuple(symbol for symbol in self.line.of.symbols if symbol != self.line.over)

    def value(self, arguments: Mapping[str, Array]) -> Array:
        return self._added(self.line.of.tree, arguments)

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        return {name: self.slope(arguments, name) for name in wanted}

    def slope(self, arguments: Mapping[str, Array], name: str) -> Array:
        """The derivative of the sum by one symbol."""
        return self._added(partial(self.line.of, name), arguments)

    def _added(self, term: Node, arguments: Mapping[str, Array]) -> Array:
        total: Array = np.zeros(())
        for index in range(self.line.terms):
            total = total + evaluate(term, {**arguments, self.line.over: np.asarray(float(index))})
        return np.asarray(total)


@dataclass(frozen=True, slots=True)
class SolveOperation:
    """The root of an equation between two bounds, by Newton's method kept inside a shrinking bracket."""

    line: Solve

    @property
    def symbols(self) -> tuple[str, ...]:
        names = dict.fromkeys(self.line.equation.symbols)
        inside = {self.line.symbol}
        if self.line.sum is not None:
            names |= dict.fromkeys(self.line.sum.of.symbols)
            inside |= {self.line.sum.symbol, self.line.sum.over}
        return tuple(name for name in names if name not in inside)

    @property
    def residual(self) -> Node:
        """Left side less right side; kept with the equation, so that it is compiled once."""
        equation = self.line.equation.tree
        assert isinstance(equation, Compare)
        found = equation.memory.get(SolveOperation)
        if found is None:
            found = equation.memory[SolveOperation] = Binary("-", equation.first, equation.rest[0][1])
        return found

    def completed(self, known: Mapping[str, Array]) -> Mapping[str, Array]:
        """Figures for every symbol of the equation: those known, and the sum taken from them."""
        if self.line.sum is None:
            return known
        return {**known, self.line.sum.symbol: SumOperation(self.line.sum).value(known)}

    def _slope(self, known: Mapping[str, Array], name: str) -> Array:
        """The derivative of the residual by one symbol, through the sum too."""
        slope = evaluate(partial(self.residual, name), known)
        if self.line.sum is None:
            return slope
        through = evaluate(partial(self.residual, self.line.sum.symbol), known)
        return np.asarray(slope + through * SumOperation(self.line.sum).slope(known, name))

    def value(self, arguments: Mapping[str, Array]) -> Array:
        shape = np.broadcast_shapes(*(np.shape(arguments[symbol]) for symbol in self.symbols))
        known = {name: np.broadcast_to(arguments[name], shape).ravel() for name in self.symbols}
        size = int(np.prod(shape, dtype=int))
        return self._root(known, size).reshape(shape)

    def _off(self, known: Mapping[str, Array], root: Array) -> tuple[Array, Mapping[str, Array]]:
        """The residual at a value of the root, and the figures it was taken from."""
        here = self.completed({**known, self.line.symbol: root})
        return evaluate(self.residual, here), here

    def _root(self, known: dict[str, Array], size: int) -> Array:
        low, high = (np.full(size, bound) for bound in self.line.between)
        at_low, at_high = self._off(known, low)[0], self._off(known, high)[0]
        root = np.full(size, self.line.start)
        root[~(at_low * at_high <= 0.0)] = np.nan
        active = np.isfinite(root)
        for _ in range(_ROOT_PASSES):
            if not active.any():
                break
            off, here = self._off({name: figures[active] for name, figures in known.items()}, root[active])
            below = np.sign(off) == np.sign(at_low[active])
            low[active] = np.where(below, root[active], low[active])
            high[active] = np.where(below, high[active], root[active])
            with np.errstate(divide="ignore", invalid="ignore"):
                step = root[active] - off / self._slope(here, self.line.symbol)
            outside = ~((step > low[active]) & (step < high[active]))
            step = np.where(outside, 0.5 * (low[active] + high[active]), step)
            step = np.where(off == 0.0, root[active], step)
            done = np.abs(step - root[active]) <= 4.0e-16 * np.abs(step)
            root[active] = step
            active[np.flatnonzero(active)[done]] = False
        return root

    def slopes(self, arguments: Mapping[str, Array], value: Array, wanted: Iterable[str]) -> dict[str, Array]:
        known = self.completed({name: arguments[name] for name in self.symbols} | {self.line.symbol: value})
        along = self._slope(known, self.line.symbol)
        return {name: -self._slope(known, name) / along for name in wanted}


class Step(Protocol):
    """A named operation with its arguments bound to other names."""

    @property
    def name(self) -> str: ...

    @property
    def operation(self) -> Operation: ...

    @property
    def inputs(self) -> Mapping[str, str]: ...


Slopes = dict[str, dict[str, Array]]


class Together:
    """Steps of the same inputs that are worked out in one go, as the class that inherits knows how."""

    def run(self, values: dict[str, Array], slopes: Slopes | None) -> None:
        """Put the figure of every step into ``values`` and, with ``slopes``, its derivatives there."""
        raise NotImplementedError


def run(steps: Sequence[Step | Together], values: dict[str, Array], slopes: Slopes | None = None) -> None:
    """Evaluate steps in order into ``values``; with ``slopes``, carry derivatives along the chain.

    ``slopes[name][seed]`` is the derivative of a value with respect to a seed; only names that depend
    on a seed have an entry, so that what does not depend costs nothing.
    """
    with np.errstate(all="ignore"):
        for step in steps:
            if isinstance(step, Together):
                step.run(values, slopes)
                continue
            operation = step.operation
            moving = moving_symbols(step.inputs, slopes)
            if not isinstance(operation, RelationOperation):
                arguments = {local: values[name] for local, name in step.inputs.items()}
                value = operation.value(arguments)
                local_slopes = operation.slopes(arguments, value, moving) if moving else {}
            elif moving:
                value, found = evaluate_with_slopes(operation.relation, moving, values, step.inputs)
                local_slopes = dict(zip(moving, found, strict=True))
            else:
                value = evaluate_quietly(operation.relation, values, step.inputs)
            values[step.name] = value
            if moving and slopes is not None:
                carried = chained(step.inputs, local_slopes, slopes)
                if carried:
                    slopes[step.name] = carried


def moving_symbols(inputs: Mapping[str, str], slopes: Slopes | None) -> tuple[str, ...]:
    """The local symbols of some inputs that depend on a seed."""
    if slopes is None:
        return ()
    return tuple(local for local, name in inputs.items() if name in slopes)


def chained(inputs: Mapping[str, str], local_slopes: Mapping[str, Array], slopes: Slopes) -> dict[str, Array]:
    """The derivative with respect to every seed, from those with respect to local symbols."""
    total: dict[str, Array] = {}
    for local, own in local_slopes.items():
        for seed, slope in slopes[inputs[local]].items():
            part = _product(own, slope)
            total[seed] = total[seed] + part if seed in total else part
    return total


def _product(outer: Array, inner: Array) -> Array:
    """A product in which a zero outer slope stays zero, also where the inner one is infinite."""
    if inner.ndim == 0 and inner == 1.0:
        return outer
    product = outer * inner
    if np.isfinite(product).all():
        return product
    return np.where((outer == 0.0) | (inner == 0.0), 0.0, product)
