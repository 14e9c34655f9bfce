"""What tests of running and watching a book share."""

import signal
from collections.abc import Iterator

import pytest


@pytest.fixture(scope="session", autouse=True)
def _interrupts_arrive() -> Iterator[None]:
    """A shell that starts the tests in the background may hand on that interrupts are ignored; these send some."""
    before = signal.signal(signal.SIGINT, signal.default_int_handler)
    yield
    signal.signal(signal.SIGINT, before)
