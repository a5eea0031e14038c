"""Threads: the same work for several chains at once, stopped cleanly by Ctrl-C."""

from __future__ import annotations

import os
import threading
from collections.abc import Callable, Sequence
from concurrent.futures import FIRST_EXCEPTION, Future, ThreadPoolExecutor, wait
from typing import TypeVar

Item = TypeVar("Item")
Result = TypeVar("Result")

LOOK_EVERY = 0.1
"""Seconds between two looks at the progress (and at Ctrl-C) while chains run."""


def default_threads() -> int:
    """Return how many processors this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def on_threads(
    work: Callable[[Item], Result],
    items: Sequence[Item],
    *,
    threads: int,
    stop: threading.Event,
    look: Callable[[], None] | None = None,
) -> list[Result]:
    """Do the work for every item; results come in the order of the items.

    Parameters
    ----------
    work : callable
        Must look at ``stop`` now and then and raise when it is set.
    items : sequence
    threads : int
    stop : threading.Event
        Set when anything goes wrong, so that nothing is left running.
    look : callable, optional
        Called from the calling thread about ten times a second.

    Raises
    ------
    BaseException
        The first error of the work, or KeyboardInterrupt; all threads have ended by then.
    """
    with ThreadPoolExecutor(max_workers=max(1, threads)) as pool:
        futures: list[Future[Result]] = [pool.submit(work, item) for item in items]
        waiting = set(futures)
        try:
            while waiting:
                done, waiting = wait(waiting, timeout=LOOK_EVERY, return_when=FIRST_EXCEPTION)
                for future in done:
                    future.result()
                if look is not None:
                    look()
        except BaseException:
            stop.set()
            for future in futures:
                future.cancel()
            raise
    return [future.result() for future in futures]
