"""Independent cases side by side."""

from __future__ import annotations

import multiprocessing
import sys
from collections.abc import Callable, Sequence
from concurrent.futures import ProcessPoolExecutor
from typing import TypeVar

from threadpoolctl import threadpool_limits

Item = TypeVar("Item")
Found = TypeVar("Found")


def _one_thread() -> None:
    threadpool_limits(1)


def each(function: Callable[[Item], Found], items: Sequence[Item], workers: int) -> list[Found]:
    """Results in the order of the items, from processes of one thread each.

    Parameters
    ----------
    function : callable
        Known by name at the top of a module, so that processes can find it.
    items : sequence
    workers : int
        Processes.
    """
    found = []
    # A fresh interpreter: a forked one would inherit the state of running threads.
    context = multiprocessing.get_context("spawn")
    with ProcessPoolExecutor(workers, context, _one_thread) as pool:
        for result in pool.map(function, items):
            found.append(result)
            if sys.stderr.isatty():
                print(f"\r{len(found)} of {len(items)}", end="", file=sys.stderr)
    return found
