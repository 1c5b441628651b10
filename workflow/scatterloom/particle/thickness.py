"""How thick the parts of a particle are on its lattice."""

from __future__ import annotations

import math

import numpy as np

from scatterloom.particle.lattice import Lattice
from scatterloom.particle.shapes import Shape
from scatterloom.solids.mesh import MEDIUM

THIN_LAYER, THIN = 2.0, 1.0
"""Cells below which layers around something, and parts of any kind, count as too thin.

The two faces of a thinner layer meet in the same cells, which know mean values only. Of a part
of any kind the mean thickness says less: that of a ball is a third of its diameter.
"""

_LAYER = 3.0
"""Cubed area over squared volume, in units of a ball's, beyond which a part that surrounds
another is a layer: a shell around a core of half its radius has 2.6."""


def has_thin_part(shape: Shape, lattice: Lattice) -> bool:
    """Whether a layer is thinner than two cells, or any part on average than one."""
    sizes = zip(mean_thickness(lattice), _volumes_and_areas(lattice), strict=True)
    for material, (thickness, (volume, area)) in enumerate(sizes):
        flat = area**3 > _LAYER * 36.0 * math.pi * volume**2
        layer = material in shape.layers and flat
        if thickness < (THIN_LAYER if layer else THIN):
            return True
    return False


def mean_thickness(lattice: Lattice) -> tuple[float, ...]:
    """Mean thickness of each material [cells]: twice its volume over the area around it.

    That of a film is its thickness, that of a ball a third of its diameter.
    """
    return tuple(
        2.0 * volume / area if area > 0.0 else math.inf
        for volume, area in _volumes_and_areas(lattice)
    )


def _volumes_and_areas(lattice: Lattice) -> list[tuple[float, float]]:
    """Volume of each material and area of the surfaces around it, in cells."""
    if lattice.composition is None:
        return [(float(lattice.fill.sum()), float(lattice.area.sum()))]
    around = [0.0] * len(lattice.fraction)
    for surface in lattice.composition.surfaces:
        area = float(np.linalg.norm(surface.vector, axis=1).sum())
        for material in {surface.inside, surface.outside} - {MEDIUM}:
            around[material] += area
    volumes = [float(volume) for volume in lattice.fraction.sum(axis=1)]
    return list(zip(volumes, around, strict=True))
