"""Work on many calculations over several processes: in order, whatever becomes of one of them.

Workers do not hear an interrupt: the process that started them does, and lets them end with what they have
in hand.
"""

from __future__ import annotations

import contextlib
import signal
import threading
from collections import deque
from collections.abc import Callable, Iterator, Sequence
from typing import TYPE_CHECKING, TypeVar

if TYPE_CHECKING:
    from concurrent.futures import ProcessPoolExecutor

Item = TypeVar("Item")
Product = TypeVar("Product")


def pool_map(
    work: Callable[[Item], Product], items: Sequence[Item], jobs: int, lost: Callable[[Item], Product]
) -> Iterator[Product]:
    """The products of items in order, over ``jobs`` processes; in this one where one is enough.

    ``lost`` makes the product of an item whose process ended without an answer (killed, out of memory). An
    error of ``work`` itself is raised here.
    """
    jobs = min(jobs, len(items))
    if jobs <= 1:
        yield from map(work, items)
        return
    from concurrent.futures.process import BrokenProcessPool

    with _pool(jobs) as pool:
        with deaf_to_interrupts():
            futures = deque(pool.submit(work, item) for item in items)
        for item in items:
            try:
                product = futures.popleft().result()
            except BrokenProcessPool:
                # One process that dies takes the answers of all with it: what is still wanted is asked alone.
                product = _alone(work, item, lost)
            yield product


@contextlib.contextmanager
def _pool(jobs: int) -> Iterator[ProcessPoolExecutor]:
    """A pool of fresh processes; what has not begun when it is left does not begin."""
    import multiprocessing
    from concurrent.futures import ProcessPoolExecutor

    pool = ProcessPoolExecutor(jobs, multiprocessing.get_context("spawn"))
    try:
        yield pool
    finally:
        pool.shutdown(wait=True, cancel_futures=True)


def _alone(work: Callable[[Item], Product], item: Item, lost: Callable[[Item], Product]) -> Product:
    """The product of one item from a process of its own."""
    from concurrent.futures.process import BrokenProcessPool

    with _pool(1) as pool:
        with deaf_to_interrupts():
            future = pool.submit(work, item)
        try:
            return future.result()
        except BrokenProcessPool:
            return lost(item)


@contextlib.contextmanager
def deaf_to_interrupts() -> Iterator[None]:
    """Processes started here ignore an interrupt from the keyboard, from their first moment on."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    before = signal.signal(signal.SIGINT, signal.SIG_IGN)
    try:
        yield
    finally:
        signal.signal(signal.SIGINT, before)
