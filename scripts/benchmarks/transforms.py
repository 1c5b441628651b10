"""Fourier transforms: which library, which order of axes.

Boxes are those of the lattice product, three vector components on the doubled grid of
32, 48 and 64 cells. All rivals compute the same thing; that they do is checked first.
"""

from __future__ import annotations

import os
from collections.abc import Callable

import ducc0
import numpy as np
import scipy.fft

from benchmarks.output import Result
from benchmarks.timing import in_turns, median_ratio

CELLS = (32, 48, 64)
AXES = (1, 2, 3)


def _rivals(field: np.ndarray, threads: int) -> dict[str, Callable[[], np.ndarray]]:
    # Output arrays are kept, as a solver would keep them: allocation is no part of the contest.
    out = np.empty_like(field)
    work = field.copy()

    def in_place() -> np.ndarray:
        np.copyto(work, field)
        return ducc0.fft.c2c(work, AXES, True, 0, work, threads)

    return {
        "scipy": lambda: scipy.fft.fftn(field, axes=AXES, workers=threads),
        "ducc0": lambda: ducc0.fft.c2c(field, AXES, True, 0, out, threads),
        "ducc0, axes reversed": lambda: ducc0.fft.c2c(field, AXES[::-1], True, 0, out, threads),
        "ducc0, in place": in_place,
    }


def _agree(results: list[np.ndarray], tolerance: float) -> None:
    scale = float(np.linalg.norm(results[0]))
    for other in results[1:]:
        error = float(np.linalg.norm(other - results[0])) / scale
        if not error <= tolerance:
            raise AssertionError(f"transforms differ by {error:.1e}, allowed are {tolerance:.0e}")


def run(threads: int) -> Result:
    """Time full transforms on one thread, two (if there are as many cores) and `threads`."""
    rows = []
    counts = sorted({1, min(2, os.cpu_count() or 1), threads})
    random = np.random.default_rng(1)
    for dtype, tolerance in ((np.complex64, 3e-6), (np.complex128, 1e-14)):
        for cells in CELLS:
            shape = (3, *(2 * cells,) * 3)
            field = (random.standard_normal(shape) + 1j * random.standard_normal(shape)).astype(
                dtype
            )
            for workers in counts:
                rivals = _rivals(field, workers)
                # Copied, since two rivals share an output array.
                _agree([rival().copy() for rival in rivals.values()], tolerance)
                seconds = in_turns(rivals, rounds=3 if cells == 64 else 5, warm_up=0)
                rows.append(
                    {
                        "precision": np.dtype(dtype).name,
                        "cells": cells,
                        "threads": workers,
                        "scipy_ms": 1e3 * float(np.median(seconds["scipy"])),
                    }
                    | {
                        f"scipy / {name}": median_ratio(seconds["scipy"], seconds[name])
                        for name in rivals
                        if name != "scipy"
                    }
                )
    return Result(
        rows,
        [
            "Full three-dimensional transforms of three components on the doubled box.",
            "Ratios are medians over rounds in which the rivals take turns: above 1, ducc0 is "
            "faster.",
            "'in place' includes the copy of the input that makes every repeat start alike.",
        ],
    )
