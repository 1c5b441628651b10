"""Particle shapes, in units of the radius of the sphere of equal volume.

All shapes are ellipsoids with their axes along x, y and z; a spheroid has its
axis of rotation along z.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

Symmetry = Literal["sphere", "axial", "mirrors"]


@dataclass(frozen=True)
class Shape:
    """An ellipsoid of unit equal-volume-sphere radius, centred on the origin.

    Attributes
    ----------
    kind : str
        Kind named in the campaign: ``sphere``, ``spheroid`` or ``ellipsoid``.
    axes : tuple of 3 float
        Half axes along x, y, z in units of the equal-volume-sphere radius;
        their product is 1.
    """

    kind: str
    axes: tuple[float, float, float]

    @property
    def half_axes(self) -> NDArray[np.float64]:
        """Half axes, float64 (3,), in units of the equal-volume-sphere radius."""
        return np.array(self.axes)

    @property
    def circumscribed_radius(self) -> float:
        """Radius of the smallest sphere about the centre that holds the particle."""
        return max(self.axes)

    @property
    def volume(self) -> float:
        """Volume in units of the cubed equal-volume-sphere radius: 4 pi / 3."""
        return 4.0 * math.pi / 3.0

    @property
    def symmetry(self) -> Symmetry:
        """``sphere``, ``axial`` (rotation about z and mirrors) or ``mirrors`` (three planes)."""
        a, b, c = self.axes
        if a != b:
            return "mirrors"
        return "sphere" if b == c else "axial"


def from_spec(spec: Mapping[str, Any]) -> Shape:
    """Shape described by its entry in a campaign.

    Parameters
    ----------
    spec : mapping
        ``{"kind": "sphere"}``, ``{"kind": "spheroid", "equatorial_to_polar": ratio}`` or
        ``{"kind": "ellipsoid", "axes": [a, b, c]}``; only the ratios of the axes count.

    Returns
    -------
    Shape

    Raises
    ------
    ValueError
        If the kind is unknown, a key is missing or left over, or an axis is not
        positive and finite.

    Examples
    --------
    >>> from_spec({"kind": "spheroid", "equatorial_to_polar": 8.0}).axes
    (2.0, 2.0, 0.25)
    """
    kind = spec.get("kind")
    builders = {
        "sphere": ((), lambda: (1.0, 1.0, 1.0)),
        "spheroid": (("equatorial_to_polar",), lambda: _spheroid(spec["equatorial_to_polar"])),
        "ellipsoid": (("axes",), lambda: _ellipsoid(spec["axes"])),
    }
    if kind not in builders:
        raise ValueError(f"unknown shape kind {kind!r}: known kinds are {', '.join(builders)}")
    keys, build = builders[kind]
    found = {key for key in spec if key != "kind"}
    if found != set(keys):
        expected = ", ".join(keys) or "no further key"
        raise ValueError(f"shape {kind!r} takes {expected}, found {sorted(found) or 'none'}")
    return Shape(kind, build())


def _positive(name: str, value: Any) -> float:
    number = float(value)
    if not (math.isfinite(number) and number > 0.0):
        raise ValueError(f"{name} must be positive and finite, found {value!r}")
    return number


def _spheroid(equatorial_to_polar: Any) -> tuple[float, float, float]:
    ratio = _positive("equatorial_to_polar", equatorial_to_polar)
    equatorial = math.cbrt(ratio)
    return equatorial, equatorial, 1.0 / equatorial**2


def _ellipsoid(axes: Sequence[Any]) -> tuple[float, float, float]:
    if len(axes) != 3:
        raise ValueError(f"axes must hold three lengths, found {len(axes)}")
    a, b, c = (_positive("axes", value) for value in axes)
    mean = math.cbrt(a) * math.cbrt(b) * math.cbrt(c)
    return a / mean, b / mean, c / mean
