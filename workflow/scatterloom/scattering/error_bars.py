"""Half widths (95 %) from the disagreement of variants of the same case.

Each variant redoes the result with one choice changed: another fit over the lattices, the
amplitudes without their last correction, a wave basis one degree shorter. Deviations that
are rival measures of one cause count by the largest; different causes are taken as
independent and add in squares.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from scatterloom.scattering.expansion import synthesize

BEST = "best"
CURVATURE = "curvature"
LINEAR = "linear part"
REMAINDER = "remainder"
SOLVER = "solver"
TRUNCATION = "truncation"

SCALE = {CURVATURE: 1.5, LINEAR: 0.1, REMAINDER: 0.12, SOLVER: 2.0, TRUNCATION: 0.5}
"""Factor on the deviation of the variants of each cause.

Curvature: other fits in even and cubic powers of the spacing. Linear part: a fit that allows
for an error linear in the spacing. Remainder: the finest lattice alone, that is, the part of
the extrapolation step that its law may get wrong. These three were set by comparison with
exact spheres and spheroids (validation page). Solver: near a resonance the estimate of a
filled-in size can be half of the error (measured). Truncation: leaving out the last degree
changes more than all the degrees never included, by a factor of two or more.
"""

CELL_MODEL = 0.04
"""Relative error of efficiencies in units of |(m^2-1)/(m^2+2)| / n, n cells across.

What the shift of the boundary cells leaves of the error linear in the spacing, which fits in
even powers cannot see; measured on spheres and spheroids against exact efficiencies.
"""

CELL_MODEL_MATRIX = 0.25
"""The same for normalized matrix elements, whose errors are smaller, as a share of it."""

GRID_DEG = np.arange(0.0, 180.5, 1.0)
"""Angles on which deviations are compared [deg]."""


def cell_model_error(indices: complex | Sequence[complex], cells_across: float) -> float:
    """Relative half width of efficiencies from the linear part of the boundary error.

    Of nested materials, given from outside inwards, the interface of the strongest contrast
    counts.
    """
    nested = indices if isinstance(indices, Sequence) else [indices]
    ratios = [(inner / outer) ** 2 for outer, inner in pairwise((1.0, *nested))]
    contrast = max(abs((eps - 1.0) / (eps + 2.0)) for eps in ratios)
    return CELL_MODEL * contrast / cells_across


def combined(deviation: NDArray[np.float64], causes: Sequence[str]) -> NDArray[np.float64]:
    """Half width from the deviations of the variants.

    Parameters
    ----------
    deviation : float64 (n_variant, ...)
        Absolute deviation of each variant from the best estimate.
    causes : sequence of str
        Cause of each variant; those called `BEST` do not count.

    Returns
    -------
    float64 (...)
    """
    squares = np.zeros(deviation.shape[1:])
    for cause, factor in SCALE.items():
        rivals = [d for d, c in zip(deviation, causes, strict=True) if c == cause]
        if rivals:
            squares = squares + (factor * np.max(rivals, axis=0)) ** 2
    return np.sqrt(squares)


def _envelope(deviation: NDArray[np.float64], reach: int) -> NDArray[np.float64]:
    """Running maximum over angle (axis 1): a deviation crossing zero is not small by merit."""
    padding = [(0, 0), (reach, reach), (0, 0), (0, 0)]
    padded = np.pad(deviation, padding, mode="edge")
    windows = np.lib.stride_tricks.sliding_window_view(padded, 2 * reach + 1, axis=1)
    return windows.max(axis=-1)


def _at(angles_deg: NDArray[np.float64], on_grid: NDArray[np.float64]) -> NDArray[np.float64]:
    flat = on_grid.reshape(GRID_DEG.size, 16)
    columns = [np.interp(angles_deg, GRID_DEG, column) for column in flat.T]
    return np.stack(columns, axis=-1).reshape(len(angles_deg), 4, 4)


def matrix_half_widths(
    expansion: NDArray[np.float64],
    causes: Sequence[str],
    model_error: float,
    angles_deg: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Half widths of all elements, and of all elements over F11.

    The ratio has a bar of its own: deviations of an element and of F11 go together, and a
    bar put together from those of both would be too wide.

    Parameters
    ----------
    expansion : float64 (n_variant, l_max + 1, 4, 4)
        Best estimate first.
    causes : sequence of str
        Cause of each variant.
    model_error : float
        Relative error of efficiencies from the cell model.
    angles_deg : float64 (n_angle,) [deg]

    Returns
    -------
    element, ratio : float64 (n_angle, 4, 4)
        The ratio of F11 to itself has the relative half width of F11 in its place.
    """
    matrices = synthesize(expansion, GRID_DEG)
    f11 = matrices[..., :1, :1]
    ratios = matrices / f11
    ratios[..., 0, 0] = matrices[..., 0, 0] / matrices[0, :, 0, 0]
    # The finest structure of degree l_max is 180/l_max degrees wide.
    degree = max(1, expansion.shape[1] - 1)
    reach = max(1, round(90.0 / degree))
    floor = CELL_MODEL_MATRIX * model_error
    out = []
    for values, scale in ((matrices, f11[0]), (ratios, np.ones_like(f11[0]))):
        deviation = _envelope(np.abs(values - values[:1]), reach)
        # Elements that symmetry makes zero are exactly zero in every variant.
        present = np.any(values != 0.0, axis=(0, 1))
        width = np.hypot(combined(deviation, causes), floor * scale * present)
        out.append(_at(angles_deg, width))
    return out[0], out[1]
