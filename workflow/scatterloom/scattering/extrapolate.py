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

from scatterloom.scattering.error_bars import BEST, CURVATURE, LINEAR, REMAINDER
from scatterloom.transition.matrix import TransitionMatrix


@dataclass(frozen=True)
class Fit:
    """Weights of the levels, coarse to fine, whose sum is the value at zero spacing.

    `cause` says what source of error the deviation of a rival fit measures.
    """

    name: str
    cause: str
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
        Best: d^2 through the two finest levels. Rivals: the finest level alone; with three
        levels or more d^2 by least squares over the last three, d^2 + d^3 and d + d^2
        through them. With one level only that level, and no rival.

    Raises
    ------
    ValueError
        If the levels do not ascend.
    """
    cells = np.asarray(cells_across, dtype=np.float64)
    if cells.size == 0 or np.any(np.diff(cells) <= 0):
        raise ValueError(f"cells across must ascend, found {list(cells_across)}")
    count = len(cells)

    def fit(name: str, cause: str, levels: int, *powers: int) -> Fit:
        weights = _weights(cells[-levels:], powers)
        return Fit(name, cause, np.concatenate([np.zeros(count - levels), weights]))

    if count == 1:
        return [fit("single level", BEST, 1)]
    out = [fit("d2 through the two finest", BEST, 2, 2), fit("finest level", REMAINDER, 1)]
    if count > 2:
        out += [
            fit("d2 over three", CURVATURE, 3, 2),
            fit("d2 and d3 through three", CURVATURE, 3, 2, 3),
            fit("d and d2 through three", LINEAR, 3, 1, 2),
        ]
    return out


def combine(transitions: Sequence[TransitionMatrix], fit: Fit) -> TransitionMatrix:
    """Transition matrix of a fit; all levels must have the same truncation."""
    matrix = sum(w * t.matrix for w, t in zip(fit.weights, transitions, strict=True))
    return TransitionMatrix(np.asarray(matrix), transitions[0].labels)
