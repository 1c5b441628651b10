"""How much effort a case needs: lattice levels, truncation, tolerance, anchor spacing.

Every function here is a pure function of the physics and the accuracy asked, so
that the same case is always solved in the same way, whatever campaign asks for it.
"""

from __future__ import annotations

import math

NUMERICS_REVISION = 1
"""Raised by hand whenever a change of the numerics alters published values."""


def levels(
    circumscribed_radius: float, index: complex, size_parameter: float, f11_relative: float = 0.02
) -> tuple[int, ...]:
    """Cells across the longest axis on each lattice level, coarse to fine."""
    reach = size_parameter * circumscribed_radius
    if reach * abs(index) > 6.0:
        return (16, 24, 32)
    return (12, 16, 24)


def n_max(reach: float) -> int:
    """Truncation order of the wave basis for a particle of circumscribed size parameter `reach`."""
    return math.ceil(reach + 2.0 * reach ** (1 / 3) + 3.0)


def operator_tolerance(ratio_absolute: float) -> float:
    """Relative error of the transition matrix at which a solve stops."""
    return 1e-4 * ratio_absolute / 0.01


def anchor_step(index: complex, size_parameter: float) -> float:
    """Largest gap in size parameter between neighbouring anchors."""
    return 0.3 / max(1.0, abs(index) / 1.5)


def cost(circumscribed_radius: float, index: complex, size_parameter: float, cold: bool) -> float:
    """Predicted seconds on one core for one case, all levels."""
    reach = size_parameter * circumscribed_radius
    waves = 2 * n_max(reach) * (n_max(reach) + 2)
    cells = sum(n**3 for n in levels(circumscribed_radius, index, size_parameter))
    return 2e-8 * waves * cells * (4.0 if cold else 1.5)
