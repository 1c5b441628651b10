"""Half widths (95 %) from the disagreement of variants of the same case.

Each variant redoes the result with one choice changed: another fit over the lattices, the
amplitudes without their last correction, a wave basis one degree shorter. Deviations that
are rival measures of one cause count by the largest; different causes are taken as
independent and add in squares.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from scatterloom.scattering.expansion import synthesize

BEST = "best"
CURVATURE = "curvature"
LINEAR = "linear part"
REMAINDER = "remainder"
SOLVER = "solver"
TRUNCATION = "truncation"

SCALE = {CURVATURE: 1.9, LINEAR: 0.1, REMAINDER: 0.2, SOLVER: 2.0, TRUNCATION: 0.1}
"""Factor on the deviation of the variants of each cause.

Curvature: other fits in even and cubic powers of the spacing. Linear part: a fit that allows
for an error linear in the spacing. Remainder: the finest lattice alone, that is, the part of
the extrapolation step that its law may get wrong. Truncation: one degree more than needed
was kept, so that leaving it out changes ten times more than all the degrees never included.
These four and `CELL_MODEL` were set on the calibration half of random cases against exact
solutions (spheres, coated spheres, spheroids along the lattice and turned, cubes and prisms;
validation page), so that bars hold 95 to 97 % of its values and at least 90 % at every range of
sizes, and are as narrow as that allows. Solver: near a resonance the estimate of a filled-in
size can be half of the error (measured); those cases are solved from nothing and say nothing
about it.
"""

CELL_MODEL = 0.0025
"""Relative error of efficiencies in units of |(m^2-1)/(m^2+2)| / n, n cells across.

What the shift of the boundary cells leaves of the error linear in the spacing, which fits in
even powers cannot see. Set together with `SCALE`: most of that error is seen by the others.
"""


def matrix_model_share(size_parameter: float) -> float:
    """Relative error of normalized matrix elements in units of the cell model's error.

    They do not depend on the polarizability of a particle much smaller than the wavelength
    (its matrix is that of a dipole, whatever its strength), and beyond the first resonances
    as much as any number does; in between the errors of exact spheres and spheroids grow
    about as x^2.
    """
    return min(3.0, 0.4 * size_parameter**2)


_ROUNDING = 1e-10
_ONLY_F11 = np.pad(np.ones((1, 1)), (0, 3))

GRID_DEG = np.arange(0.0, 180.5, 1.0)
"""Angles on which deviations are compared [deg]."""


def cell_model_error(
    indices: complex | Sequence[complex],
    cells_across: float,
    contacts: Sequence[tuple[int, int]] | None = None,
) -> float:
    """Relative half width of efficiencies from the linear part of the boundary error.

    The interface of the strongest contrast counts.

    Parameters
    ----------
    indices : complex or sequence of complex
        Of each material relative to the medium.
    cells_across : float
    contacts : sequence of (int, int), optional
        Numbers of the materials that touch, -1 for the medium; those of materials nested in their
        order if missing.
    """
    held = indices if isinstance(indices, Sequence) else [indices]
    if contacts is None:
        contacts = [(number, number - 1) for number in range(len(held))]
    ratios = [(held[i] / (held[o] if o >= 0 else 1.0)) ** 2 for i, o in contacts]
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
    count, width = deviation.shape[1], 2 * reach + 1
    out = deviation[:, np.clip(np.arange(-reach, count + reach), 0, count - 1)]
    reached = 1
    while reached < width:
        # Two windows side by side, or overlapping, make one.
        step = min(reached, width - reached)
        out = np.maximum(out[:, :-step], out[:, step:])
        reached += step
    return out


def _at(angles_deg: NDArray[np.float64], on_grid: NDArray[np.float64]) -> NDArray[np.float64]:
    """Linear interpolation of all columns of (n_grid, n_column) from `GRID_DEG` at once."""
    place = np.interp(angles_deg, GRID_DEG, np.arange(float(GRID_DEG.size)))
    low = np.minimum(place.astype(np.intp), GRID_DEG.size - 2)
    share = (place - low)[:, None]
    return np.asarray((1.0 - share) * on_grid[low] + share * on_grid[low + 1])


def over_angle(
    ratio_half_width: NDArray[np.float64], angles_deg: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Half widths of matrices in two numbers, as accuracy is asked for.

    Root mean squares over scattering angle, every degree between the ends counting alike:
    a half width relative to a value that nearly vanishes at one angle says little.

    Parameters
    ----------
    ratio_half_width : float64 (..., n_angle, 4, 4)
        As `matrix_half_widths` returns it.
    angles_deg : float64 (n_angle,) [deg]
        Increasing.

    Returns
    -------
    f11_relative, ratio_absolute : float64 (...)
        Of F11, and the largest of all other elements over F11.
    """
    weight = np.ones(1)
    if len(angles_deg) > 1:
        step = np.pad(np.diff(angles_deg), 1)
        weight = step[1:] + step[:-1]
    squares = np.tensordot(ratio_half_width**2, weight / weight.sum(), axes=([-3], [0]))
    spread = np.sqrt(squares).reshape(*squares.shape[:-2], 16)
    return spread[..., 0], spread[..., 1:].max(axis=-1)


def matrix_half_widths(
    expansion: NDArray[np.float64],
    causes: Sequence[str],
    floor: float,
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
    floor : float
        Error from the cell model, relative to F11.
    angles_deg : float64 (n_angle,) [deg]

    Returns
    -------
    element, ratio : float64 (n_angle, 4, 4)
        The ratio of F11 to itself has the relative half width of F11 in its place.
    """
    shape = (expansion.shape[0], GRID_DEG.size, 16)
    matrices = synthesize(expansion, GRID_DEG).reshape(shape)
    # Elements that symmetry makes zero are exactly zero in every variant.
    present = np.flatnonzero(np.any(matrices != 0.0, axis=(0, 1)))
    f11, elements = matrices[..., :1], matrices[..., present]
    ratios = elements / f11
    ratios[..., present == 0] = f11 / f11[0]
    # The finest structure of degree l_max is 180/l_max degrees wide; an eighth of it to either
    # side keeps bars from closing where a deviation passes through zero (wider windows cost
    # width without more coverage, measured).
    degree = max(1, expansion.shape[1] - 1)
    reach = max(1, round(22.5 / degree))
    values = np.concatenate([elements, ratios], axis=-1)
    deviation = np.abs(values - values[:1])
    spread = combined(_envelope(deviation, reach), causes)
    scale = np.repeat(np.stack([f11[0, :, 0], np.ones(GRID_DEG.size)], axis=1), present.size, 1)
    # What symmetry fixes (F22/F11 of spheres) is the same in all variants and has no error.
    free = (deviation.max(axis=(0, 1)) > _ROUNDING) | (len(causes) == 1)
    width = np.hypot(spread, floor * scale * free)
    out = np.zeros((len(angles_deg), 2, 16))
    out[..., present] = _at(angles_deg, width).reshape(-1, 2, present.size)
    element, ratio = out.reshape(-1, 2, 4, 4).swapaxes(0, 1)
    return element, ratio


BUDGET = {
    "discretization": (CURVATURE, LINEAR, REMAINDER),
    "solver": (SOLVER,),
    "truncation": (TRUNCATION,),
}
"""Causes that make up each part of the error budget."""


def f11_budget(
    expansion: NDArray[np.float64], causes: Sequence[str], floor: float
) -> dict[str, float]:
    """Parts of the relative half width of F11, root mean square over scattering angle.

    Parameters
    ----------
    expansion, causes, floor
        As in `matrix_half_widths`; the floor belongs to the discretization.

    Returns
    -------
    dict of str to float
        The names of `BUDGET`, and ``extrapolation_disagreement``: how far rival fits over the
        lattices differ, relative to the step from the finest lattice to zero spacing. Well
        below one where the error follows its law.
    """
    f11 = synthesize(expansion[..., :1, :1] * _ONLY_F11, GRID_DEG)[..., 0, 0]
    deviation = np.abs(f11 / f11[0] - 1.0)
    sizes: dict[str, float] = {}
    for cause in set(causes):
        rivals = [d for d, c in zip(deviation, causes, strict=True) if c == cause]
        sizes[cause] = float(np.sqrt(np.mean(np.max(rivals, axis=0) ** 2)))
    out = {}
    for part, members in BUDGET.items():
        squares = [(SCALE[c] * sizes[c]) ** 2 for c in members if c in sizes]
        out[part] = math.sqrt(math.fsum(squares))
    out["discretization"] = math.hypot(out["discretization"], floor)
    step = sizes.get(REMAINDER, 0.0)
    out["extrapolation_disagreement"] = sizes.get(CURVATURE, 0.0) / step if step > 0.0 else 0.0
    return out
