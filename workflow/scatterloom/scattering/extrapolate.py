"""Extrapolation of a case over its lattice levels, and rival fits to judge it by.

With tensor cells the error of amplitudes falls as d^2 (lattice spacing d) with a small
d^3 part, so amplitudes - not the bilinear matrices made of them - are extrapolated:
value(d) = value(0) + sum_p c_p d^p. What rival fits of the same levels disagree about is
the raw material of the error bar.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.transition.matrix import TransitionMatrix


@dataclass(frozen=True)
class Fit:
    """Weights of the levels, coarse to fine, whose sum is the value at zero spacing."""

    name: str
    weights: NDArray[np.float64]


def _weights(cells: NDArray[np.float64], powers: tuple[int, ...]) -> NDArray[np.float64]:
    spacing = cells.min() / cells
    design = np.stack([spacing**p for p in (0, *powers)], axis=1)
    return np.linalg.pinv(design)[0]


def fits(cells_across: Sequence[int]) -> list[Fit]:
    """The fits of a case, the best estimate first.

    Parameters
    ----------
    cells_across : sequence of int
        Cells across the particle on each level, ascending.

    Returns
    -------
    list of Fit
        Best: d^2 through the two finest levels. Rivals with three levels or more: d^2 by
        least squares over the last three, and d^2 + d^3 through them. With one level only
        that level, with two the finest level as the rival.

    Raises
    ------
    ValueError
        If the levels do not ascend.
    """
    cells = np.asarray(cells_across, dtype=np.float64)
    if cells.size == 0 or np.any(np.diff(cells) <= 0):
        raise ValueError(f"cells across must ascend, found {list(cells_across)}")
    count = len(cells)

    def padded(name: str, part: NDArray[np.float64]) -> Fit:
        return Fit(name, np.concatenate([np.zeros(count - len(part)), part]))

    if count == 1:
        return [padded("single", np.ones(1))]
    best = padded("d2 through the two finest", _weights(cells[-2:], (2,)))
    if count == 2:
        return [best, padded("finest", np.ones(1))]
    last = cells[-3:]
    return [
        best,
        padded("d2 over three", _weights(last, (2,))),
        padded("d2 and d3 through three", _weights(last, (2, 3))),
    ]


def combine(transitions: Sequence[TransitionMatrix], fit: Fit) -> TransitionMatrix:
    """Transition matrix of a fit; all levels must have the same truncation."""
    matrix = sum(w * t.matrix for w, t in zip(fit.weights, transitions, strict=True))
    return TransitionMatrix(np.asarray(matrix), transitions[0].labels)
