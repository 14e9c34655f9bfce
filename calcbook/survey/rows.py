"""The texts of a history as SI arrays: what cannot be read becomes NaN, and no row is lost."""

from __future__ import annotations

import datetime
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from calcbook.calcfile.survey import Survey

Array = np.ndarray
NUMBER = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]{1,3})?")
NUMBER_CHARACTERS = frozenset("0123456789+-.eE\n")
DATE_TIME = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}([ T][0-9]{2}:[0-9]{2}(:[0-9]{2})?)?")
EPOCH = datetime.datetime(1970, 1, 1)
# The years that a history can be of.
FIRST_MOMENT, LAST_MOMENT = ((datetime.datetime(year, 1, 1) - EPOCH).total_seconds() for year in (1900, 2200))


@dataclass(frozen=True)
class Rows:
    """The rows in the order of time: times in s, SI figures by symbol of the given.

    ``numbers`` are the places of the rows in the file (1 is the first row after the heads). Rows without a
    readable time stand last. ``out_of_order`` counts rows whose time lies before that of the row above.
    """

    times: Array
    columns: Mapping[str, Array]
    numbers: Array
    out_of_order: int

    def __len__(self) -> int:
        return len(self.times)


def read_rows(survey: Survey) -> Rows:
    """The rows of a survey's history, sorted by time; rows of one time keep the order of the file."""
    history = survey.history
    if not history.rows:
        return Rows(np.zeros(0), {symbol: np.zeros(0) for symbol in survey.columns}, np.zeros(0, int), 0)
    stamps = history.columns[survey.time_head]
    times = survey.time_factor * read_numbers(stamps) if survey.time_unit else read_moments(stamps)
    readable = times[np.isfinite(times)]
    order = np.argsort(times, kind="stable")
    columns = {}
    for symbol, column in survey.columns.items():
        figures = read_numbers(history.columns[column.head])
        columns[symbol] = (figures * column.factor + column.offset)[order]
    return Rows(times[order], columns, order + 1, int(np.count_nonzero(np.diff(readable) < 0.0)))


def read_numbers(text: str) -> Array:
    """Plain decimal numbers, one a line; NaN for anything else, such as an empty cell, a word or a decimal comma."""
    cells = text.split("\n")
    if set(text) <= NUMBER_CHARACTERS:
        try:
            figures = np.array(list(map(float, cells)))
        except ValueError:
            pass
        else:
            return np.where(np.isfinite(figures), figures, math.nan)
    return np.array([_number(cell) for cell in cells])


def _number(cell: str) -> float:
    figure = float(cell) if NUMBER.fullmatch(cell) else math.nan
    return figure if math.isfinite(figure) else math.nan


def read_moments(text: str) -> Array:
    """Dates and times without a zone, one a line, in s since 1970-01-01; NaN for anything else, and for a date that no
    plant has logged."""
    moments = _moments(text.split("\n"))
    return np.where((moments >= FIRST_MOMENT) & (moments < LAST_MOMENT), moments, math.nan)


def _moments(cells: list[str]) -> Array:
    if all(map(DATE_TIME.fullmatch, cells)):
        try:
            return np.array(cells, dtype="datetime64[s]").astype(float)
        except ValueError:
            pass
    return np.array([_moment(cell) for cell in cells])


def _moment(cell: str) -> float:
    try:
        if DATE_TIME.fullmatch(cell):
            return (datetime.datetime.fromisoformat(cell) - EPOCH).total_seconds()
    except (ValueError, OverflowError):
        pass
    return math.nan


def moment_text(seconds: float, survey: Survey) -> str:
    """A moment in the way of the time column: a date and time, or a number with its unit."""
    if survey.time_unit:
        return f"{float(f'{seconds / survey.time_factor:.10g}'):g} {survey.time_unit}"
    moment = EPOCH + datetime.timedelta(seconds=seconds)
    return moment.isoformat(" ", "minutes") if (moment.hour or moment.minute) else moment.date().isoformat()
