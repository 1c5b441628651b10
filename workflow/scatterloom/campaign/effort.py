"""How much effort a case needs: lattice levels, truncation, tolerance, anchor spacing.

Every function here is a pure function of the physics and the accuracy asked, so
that the same case is always solved in the same way, whatever campaign asks for it.
"""

from __future__ import annotations

import math

NUMERICS_REVISION = 1
"""Raised by hand whenever a change of the numerics alters published values."""


_REFERENCE_RADIUS = 1.26
"""Circumscribed radius (of a 2:1 oblate spheroid) up to which no extra cells are needed."""


def levels(
    circumscribed_radius: float, index: complex, size_parameter: float, f11_relative: float = 0.02
) -> tuple[int, ...]:
    """Cells across the longest axis on each lattice level, coarse to fine.

    The finest lattice keeps the phase shift over a cell small (cells across proportional
    to x |m|, with a floor for small particles), gains cells with the elongation of the
    particle, so that its short axis is resolved too, and with the accuracy asked, whose
    error falls as d^4 after the d^2 part is extrapolated away.

    Parameters
    ----------
    circumscribed_radius : float
        In units of the equal-volume-sphere radius.
    index : complex
    size_parameter : float
        Of the sphere of equal volume.
    f11_relative : float
        Accuracy asked of F11.
    """
    phase = size_parameter * abs(index)
    finest = 24.0
    for limit, cells in ((5.0, 24), (8.0, 32), (11.0, 40), (14.0, 48)):
        finest = float(cells)
        if phase <= limit:
            break
    else:
        finest = 48.0 * phase / 14.0
    finest *= max(1.0, circumscribed_radius / _REFERENCE_RADIUS)
    finest *= (0.02 / min(f11_relative, 0.02)) ** 0.25
    return tuple(2 * math.ceil(finest * part / 2 - 1e-9) for part in (0.5, 0.75, 1.0))


def n_max(reach: float) -> int:
    """Truncation order of the wave basis for a particle of circumscribed size parameter `reach`."""
    return math.ceil(reach + 2.0 * reach ** (1 / 3) + 3.0)


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


def cost(circumscribed_radius: float, index: complex, size_parameter: float, cold: bool) -> float:
    """Predicted seconds on one core for one case, all levels."""
    reach = size_parameter * circumscribed_radius
    waves = 2 * n_max(reach) * (n_max(reach) + 2)
    cells = sum(n**3 for n in levels(circumscribed_radius, index, size_parameter))
    return 2e-8 * waves * cells * (4.0 if cold else 1.5)
