"""Half widths (95 %) from the disagreement of variants of the same case.

Each variant redoes the result with one choice changed: another fit over the lattices,
the amplitudes without their last correction, a wave basis one degree shorter. Deviations
of fits are rivals for the same error, so the largest counts; different causes are
independent and add in squares.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from scatterloom.scattering.expansion import synthesize

FIT, SOLVER, TRUNCATION = "fit", "solver", "truncation"

SCALE = {FIT: 1.5, SOLVER: 2.0, TRUNCATION: 0.5}
"""Factor on the deviation of a variant of each kind.

Fits: scored against exact spheres and spheroids (see the validation page). Solver: in-fill
near a resonance underestimates its error up to twofold (measured). Truncation: leaving out
the last degree changes more than the degrees never included by a factor of two or more.
"""

CELL_MODEL = 0.15
"""Relative error of efficiencies in units of |(m^2-1)/(m^2+2)| / n, n cells across.

The boundary cells leave a small part of the error linear in the lattice spacing, which fits
in d^2 cannot see; measured on small spheres and spheroids against exact efficiencies.
"""

_GRID_STEP_DEG = 1.0


def cell_model_error(index: complex, cells_across: float) -> float:
    """Relative half width of efficiencies from the linear part of the boundary error."""
    eps = complex(index) ** 2
    return CELL_MODEL * abs((eps - 1.0) / (eps + 2.0)) / cells_across


def combine_half_widths(deviations: dict[str, NDArray[np.float64]]) -> NDArray[np.float64]:
    """Root of the sum of squares over independent causes."""
    total = sum(np.square(part) for part in deviations.values())
    return np.sqrt(np.asarray(total, dtype=np.float64))


def _envelope(deviation: NDArray[np.float64], reach: int) -> NDArray[np.float64]:
    """Running maximum over angle: a deviation that crosses zero is not small there by merit."""
    count = deviation.shape[0]
    padded = np.pad(deviation, ((reach, reach), (0, 0), (0, 0)), mode="edge")
    windows = np.lib.stride_tricks.sliding_window_view(padded, 2 * reach + 1, axis=0)
    return windows.max(axis=-1)[:count]


def matrix_half_width(
    expansion: NDArray[np.float64], scale: NDArray[np.float64], angles_deg: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Half widths of all elements at the given angles.

    Parameters
    ----------
    expansion : float64 (n_variant, l_max + 1, 4, 4)
        Best estimate first.
    scale : float64 (n_variant,)
        Factor on each variant's deviation. Equal factors mark rivals of one cause.
    angles_deg : float64 (n_angle,) [deg]

    Returns
    -------
    float64 (n_angle, 4, 4)
    """
    grid = np.arange(0.0, 180.0 + 0.5 * _GRID_STEP_DEG, _GRID_STEP_DEG)
    deviation = np.abs(synthesize(expansion[1:] - expansion[:1], grid))
    # The finest structure of degree l_max is 180/l_max degrees wide.
    degree = max(1, expansion.shape[1] - 1)
    reach = max(1, round(90.0 / degree / _GRID_STEP_DEG))
    squares = np.zeros((grid.size, 4, 4))
    for factor in np.unique(scale[1:]):
        rivals = deviation[scale[1:] == factor]
        squares += _envelope(factor * rivals.max(axis=0), reach) ** 2
    half_width = np.sqrt(squares)
    out = np.empty((len(angles_deg), 4, 4))
    for i in range(4):
        for j in range(4):
            out[:, i, j] = np.interp(angles_deg, grid, half_width[:, i, j])
    return out
