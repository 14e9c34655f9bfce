"""Solved calculations for the tests of the record, each solved once."""

from __future__ import annotations

import functools
from pathlib import Path

import pytest

from calcbook import interface
from calcbook.chain.outcome import Solved
from calcbook.library import Library
from calcbook.record import record_text

HERE = Path(__file__).parent
NAMES = ("water_cooler", "oven_wall", "air_heater", "round_vessel", "rough_tube")


@functools.cache
def solved_of(name: str) -> Solved:
    return interface.solve(interface.read(HERE / f"{name}.yaml"), Library(HERE / "cards"))


@functools.cache
def text_of(name: str) -> str:
    return record_text(solved_of(name))


@pytest.fixture(params=NAMES)
def solved(request: pytest.FixtureRequest) -> Solved:
    """Each of the calculations in turn."""
    return solved_of(request.param)


@pytest.fixture(params=NAMES)
def text(request: pytest.FixtureRequest) -> str:
    """The record of each of the calculations in turn."""
    return text_of(request.param)


@pytest.fixture
def water_cooler() -> Solved:
    return solved_of("water_cooler")


@pytest.fixture
def oven_wall() -> Solved:
    return solved_of("oven_wall")


@pytest.fixture
def water_cooler_text() -> str:
    return text_of("water_cooler")


@pytest.fixture
def oven_wall_text() -> str:
    return text_of("oven_wall")


@pytest.fixture
def air_heater_text() -> str:
    return text_of("air_heater")


@pytest.fixture
def round_vessel_text() -> str:
    return text_of("round_vessel")


@pytest.fixture
def rough_tube_text() -> str:
    return text_of("rough_tube")
