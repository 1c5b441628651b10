"""How much effort a case needs: lattice levels, truncation, tolerance, anchor spacing.

Every function here is a pure function of the physics and the accuracy asked, so
that the same case is always solved in the same way, whatever campaign asks for it.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from functools import lru_cache

NUMERICS_REVISION = 3
"""Raised by hand whenever a change of the numerics alters published values."""


_REFERENCE_RADIUS = 1.26
"""Longest half axis (of a 2:1 oblate spheroid) up to which no extra cells are needed."""

_FINEST = ((5.0, 24.0), (8.0, 32.0), (11.0, 40.0), (14.0, 48.0))
"""Cells across the finest lattice up to each phase parameter x |m|."""


def levels(
    half_axes: Sequence[float], index: complex, size_parameter: float, f11_relative: float = 0.02
) -> tuple[int, ...]:
    """Cells across the longest axis on each lattice level, coarse to fine.

    The finest lattice keeps the phase shift over a cell small (cells across proportional
    to x |m|, with a floor for small particles), gains cells with the elongation of the
    particle, so that its short axis is resolved too, and with the accuracy asked, whose
    error falls as d^4 after the d^2 part is extrapolated away.

    Parameters
    ----------
    half_axes : sequence of 3 float
        In units of the equal-volume-sphere radius.
    index : complex
    size_parameter : float
        Of the sphere of equal volume.
    f11_relative : float
        Accuracy asked of F11.
    """
    phase = size_parameter * abs(index)
    finest = next((cells for limit, cells in _FINEST if phase <= limit), 48.0 * phase / 14.0)
    longest = max(half_axes)
    finest *= max(1.0, longest / _REFERENCE_RADIUS)
    finest *= (0.02 / min(f11_relative, 0.02)) ** 0.25
    return aligned_levels(math.ceil(finest - 1e-9), tuple(a / longest for a in half_axes))


MOST_REFINEMENTS = 2
"""How often a case may go on to finer lattices when its accuracy is not met."""


def finer_levels(half_axes: Sequence[float], levels: Sequence[int]) -> tuple[int, ...]:
    """Lattices with three tenths more cells across, for a case that missed its accuracy."""
    longest = max(half_axes)
    finest = math.ceil(1.3 * levels[-1])
    return aligned_levels(finest, tuple(a / longest for a in half_axes))


@lru_cache(maxsize=4096)
def aligned_levels(finest: int, proportions: tuple[float, ...]) -> tuple[int, int, int]:
    """Three lattices, the finest of at least `finest` cells, on which the shape lies alike.

    The coefficient of the d^2 error depends, by a tenth or so, on where within a cell the
    ends of the axes lie (measured on spheroids), which spoils the extrapolation unless they
    lie alike on every level: half axes should differ by whole cells from one lattice to the
    next. Among lattices of about half and three quarters of the finest one this looks for
    those that come nearest to it.

    Parameters
    ----------
    finest : int
    proportions : tuple of float
        Half axes over the longest one.
    """
    distinct = set(proportions)

    def misfit(cells: int, top: int) -> float:
        steps = [(top - cells) / 2.0 * part for part in distinct]
        return sum((step - round(step)) ** 2 for step in steps) / len(distinct)

    def price(low: int, middle: int, top: int) -> float:
        uneven = 0.3 * (middle / top - 0.75) ** 2 + 0.1 * (low / top - 0.55) ** 2
        return misfit(middle, top) + 0.5 * misfit(low, top) + 0.05 * (top / finest - 1.0) + uneven

    choices = (
        (low, middle, top)
        for top in range(finest, finest + 4)
        for middle in range(math.ceil(0.66 * top), math.floor(0.84 * top) + 1)
        for low in range(math.ceil(0.44 * top), math.floor(0.66 * top) + 1)
        if middle - low >= 0.15 * top
    )
    return min(choices, key=lambda choice: price(*choice))


def n_max(half_axes: Sequence[float], size_parameter: float, f11_relative: float = 0.02) -> int:
    """Truncation order of the wave basis.

    Chosen so that the waves left out make up 1e-5 of the transition matrix (Frobenius) at
    the default accuracy, which exact matrices of spheres and of spheroids up to 3:1 showed
    to need two orders more for particles that do not fill their circumscribed sphere;
    every decade of accuracy costs about one order more. The solver job confirms it.

    Parameters
    ----------
    half_axes : sequence of 3 float
        In units of the equal-volume-sphere radius.
    size_parameter : float
    f11_relative : float
        Accuracy asked of F11.
    """
    reach = size_parameter * max(half_axes)
    decades = math.log10(0.02 / min(f11_relative, 0.02))
    if min(half_axes) > 0.999 * max(half_axes):
        return math.ceil(reach + 1.5 * reach ** (1 / 3) + 1.0 + decades)
    return math.ceil(reach + 2.0 * reach ** (1 / 3) + 2.0 + decades)


def operator_tolerance(ratio_absolute: float) -> float:
    """Relative error of the transition matrix at which a solve stops."""
    return 1e-4 * ratio_absolute / 0.01


def anchor_step(index: complex, size_parameter: float) -> float:
    """Largest gap in size parameter between neighbouring anchors.

    What limits interpolation in size are resonances, which crowd as |m - 1| grows; in
    size parameter (not its ratio) the gap that keeps in-filled sizes at one or two products
    hardly depends on size (measured at x = 1.5 to 5, |m| = 1.33 to 2).
    """
    return min(1.0, 0.45 * (0.5 / abs(index - 1.0)) ** 0.6)


_BY_MIRROR_PLANES = (14.0, 4.6, 1.9, 1.0)
"""Time of a case with 0 to 3 mirror planes, each of which packs twice as many waves together.

Measured on one ellipsoid that declares only some of its planes, x = 1.5 and 3, 16 and 24 cells
across: 9 to 17, 3.4 to 5.4 and 1.5 to 2.1 times that with three planes.
"""


def cost(
    half_axes: Sequence[float],
    index: complex,
    size_parameter: float,
    cold: bool,
    mirror_planes: int = 3,
) -> float:
    """Predicted seconds on one core for one case, all levels.

    Fitted to the demo on one core of the developers' machine: a constant part, and a part
    proportional to waves times cells, more of it where mirror planes are missing.
    """
    order = n_max(half_axes, size_parameter)
    waves = 2 * order * (order + 2)
    box = math.prod(a / max(half_axes) for a in half_axes)
    cells = box * sum(n**3 for n in levels(half_axes, index, size_parameter))
    work = 6e-8 * waves * cells * _BY_MIRROR_PLANES[mirror_planes]
    return 0.03 + work * (1.0 if cold else 0.4)
