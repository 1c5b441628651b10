"""Time rivals in one process, in turns, so that other load hits them alike."""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping

import numpy as np


def in_turns(
    rivals: Mapping[str, Callable[[], object]], rounds: int = 5, warm_up: int = 1
) -> dict[str, list[float]]:
    """Seconds of every rival in every round.

    Parameters
    ----------
    rivals : mapping of str to callable
        The order of the turns is reversed in every second round.
    rounds : int
    warm_up : int
        Rounds that are not counted (compilation, plans, first touch of memory).

    Returns
    -------
    dict of str to list of float, `rounds` entries each [s]
    """
    seconds: dict[str, list[float]] = {name: [] for name in rivals}
    for number in range(warm_up + rounds):
        for name in list(rivals) if number % 2 else reversed(list(rivals)):
            begun = time.perf_counter()
            rivals[name]()
            spent = time.perf_counter() - begun
            if number >= warm_up:
                seconds[name].append(spent)
    return seconds


def median_ratio(slow: list[float], fast: list[float]) -> float:
    """Median over rounds of the ratio of two rivals: both turns of a round share its load."""
    return float(np.median(np.array(slow) / np.array(fast)))
