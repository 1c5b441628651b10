"""Superellipsoids: from rounded boxes and cylinders to rounded octahedra."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from scipy.special import beta

from scatterloom.solids.globe import FINE, star_mesh
from scatterloom.solids.mesh import Mesh

Floats = NDArray[np.float64]


def superellipsoid(axes: Sequence[float], vertical: float, horizontal: float) -> Mesh:
    """The body (|x/a|^(2/e) + |y/b|^(2/e))^(e/n) + |z/c|^(2/n) <= 1.

    Barr (1981), IEEE Computer Graphics and Applications 1(1), 11 (from memory).

    Parameters
    ----------
    axes : sequence of 3 float
        Half axes a, b, c.
    vertical, horizontal : float
        The exponents n and e: 1 for an ellipsoid, towards 0 a box, 2 an octahedron.
    """
    a, b, c = axes

    def radius(unit: Floats) -> Floats:
        x, y, z = np.abs(unit / np.array([a, b, c])).T
        # The largest is taken out: high powers of small numbers would vanish.
        flat = np.maximum(x, y)
        scale = np.where(flat > 0.0, flat, 1.0)
        flat = flat * ((x / scale) ** (2 / horizontal) + (y / scale) ** (2 / horizontal)) ** (
            horizontal / 2
        )
        top = np.maximum(flat, z)
        out = (flat / top) ** (2 / vertical) + (z / top) ** (2 / vertical)
        return 1.0 / (top * out ** (vertical / 2))

    # Tighter bends need smaller triangles.
    sharp = max(
        1.0, *(1.0 / e for e in (vertical, horizontal)), *(e for e in (vertical, horizontal))
    )
    return star_mesh(radius, min(96, 8 * round(FINE * math.sqrt(sharp) / 8)))


def superellipsoid_volume(axes: Sequence[float], vertical: float, horizontal: float) -> float:
    """Volume by Beta functions (Jaklic, Leonardis & Solina 2000, eq. 2.60, from memory)."""
    n, e = vertical, horizontal
    return float(2.0 * math.prod(axes) * n * e * beta(n / 2 + 1, n) * beta(e / 2, e / 2))
