"""Weights that integrate tabulated size-dependent quantities over a size distribution.

``int n(ln r) r^p f(r) dln r`` is taken over the sizes of the table with f interpolated
in ln r by the cubic through the four nearest sizes, while density and power are exact
(product integration): a distribution narrower than the table's steps is no problem,
and f need be no steeper than an efficiency.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]

_GAUSS = np.polynomial.legendre.leggauss(8)
_PANELS_PER_WIDTH = 2.0


def size_weights(
    radius_um: ArrayLike,
    density: Callable[[FloatArray], FloatArray],
    log_width: float,
    power: float = 0.0,
    breaks_um: Sequence[float] = (),
) -> FloatArray:
    """Weights of the nodes of a size grid.

    Parameters
    ----------
    radius_um : float64 (n_size,)
        Increasing radii [um].
    density : callable
        Number per unit of ln r at given radii [um].
    log_width : float
        Scale on which the density changes with ln r.
    power : float
        The power p of radius in the integral.
    breaks_um : sequence of float
        Radii at which the density jumps or has a kink [um].

    Returns
    -------
    float64 (n_size,)
        ``weights @ f`` approximates the integral from the smallest to the largest
        radius, exactly so where f is a cubic of ln r. Weights may be negative.

    Raises
    ------
    ValueError
        If there are fewer than two radii or they do not increase.
    """
    u = np.log(np.asarray(radius_um, dtype=np.float64))
    if u.ndim != 1 or u.size < 2 or np.any(np.diff(u) <= 0):
        raise ValueError("radii must be two or more and increase")
    stops = np.log(np.asarray(breaks_um, dtype=np.float64))
    points = min(4, u.size)
    weights = np.zeros(u.size)
    node, weight = _GAUSS
    for interval in range(u.size - 1):
        left, right = u[interval], u[interval + 1]
        panels = max(1, math.ceil(_PANELS_PER_WIDTH * (right - left) / log_width))
        inner = stops[(stops > left) & (stops < right)]
        edges = np.unique(np.concatenate([np.linspace(left, right, panels + 1), inner]))
        half = 0.5 * np.diff(edges)[:, None]
        at = (edges[:-1, None] + half * (1.0 + node)).ravel()
        mass = (half * weight).ravel() * density(np.exp(at)) * np.exp(power * at)
        first = min(max(interval - (points - 2) // 2, 0), u.size - points)
        near = u[first : first + points]
        for i in range(points):
            others = np.delete(near, i)
            basis = np.prod((at[:, None] - others) / (near[i] - others), axis=1)
            weights[first + i] += mass @ basis
    return weights


def coarse_nodes(count: int, half: int = 0) -> NDArray[np.intp]:
    """The even (half 0) or odd (half 1) nodes of a grid, both ends kept."""
    return np.unique(np.concatenate([[0], np.arange(half, count, 2), [count - 1]]))
