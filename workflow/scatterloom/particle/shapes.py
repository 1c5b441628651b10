"""Particle shapes, in units of the radius of the sphere of equal volume.

A spheroid has its axis of rotation along z, and so has a prism its axis; the edges of a
cuboid and the axes of an ellipsoid run along x, y and z. A particle may hold a core of
another material: the same shape, smaller, about the same centre.
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.particle.polyhedron import Polyhedron, cuboid, prism
from scatterloom.solids import placing
from scatterloom.solids.mesh import MEDIUM, Solid, Symmetry
from scatterloom.solids.registry import GENERATORS


@dataclass(frozen=True)
class Shape(ABC):
    """A body of unit equal-volume-sphere radius, centred on the origin.

    Attributes
    ----------
    kind : str
        Kind named in the campaign.
    core_radius_fraction : float or None
        Size of the core relative to the whole particle, as a ratio of lengths; None for a
        particle of one material.
    """

    kind: str
    core_radius_fraction: float | None = field(default=None, kw_only=True)

    @property
    @abstractmethod
    def half_extents(self) -> NDArray[np.float64]:
        """Largest distance from the centre along x, y, z, float64 (3,)."""

    @property
    @abstractmethod
    def circumscribed_radius(self) -> float:
        """Radius of the smallest sphere about the centre that holds the particle."""

    @property
    @abstractmethod
    def symmetry(self) -> Symmetry:
        """``sphere``, ``axial`` (rotation about z, mirrors), ``mirrors`` (x, y, z) or ``none``."""

    @abstractmethod
    def bounds(self, rotation: NDArray[np.float64]) -> NDArray[np.float64]:
        """Box around the turned particle: lowest and highest x, y, z, float64 (2, 3)."""

    @abstractmethod
    def is_mirrored(self, normal: NDArray[np.float64]) -> bool:
        """Whether the plane through the centre with this unit normal is a mirror plane."""

    @property
    def volume(self) -> float:
        """Volume in units of the cubed equal-volume-sphere radius: 4 pi / 3."""
        return 4.0 * math.pi / 3.0

    @property
    def layers(self) -> frozenset[int]:
        """Materials that surround something: another material or a hollow."""
        return frozenset(range(len(self.scales) - 1))

    @property
    def scales(self) -> tuple[float, ...]:
        """Sizes of the nested bodies, from the whole particle inwards."""
        core = self.core_radius_fraction
        return (1.0,) if core is None else (1.0, core)


@dataclass(frozen=True)
class Ellipsoid(Shape):
    """A sphere, spheroid or ellipsoid.

    Attributes
    ----------
    axes : tuple of 3 float
        Half axes along x, y, z in units of the equal-volume-sphere radius;
        their product is 1.
    """

    axes: tuple[float, float, float]

    @property
    def half_axes(self) -> NDArray[np.float64]:
        """Half axes, float64 (3,), in units of the equal-volume-sphere radius."""
        return np.array(self.axes)

    @property
    def half_extents(self) -> NDArray[np.float64]:
        return self.half_axes

    @property
    def circumscribed_radius(self) -> float:
        return max(self.axes)

    @property
    def symmetry(self) -> Symmetry:
        a, b, c = self.axes
        if a != b:
            return "mirrors"
        return "sphere" if b == c else "axial"

    def bounds(self, rotation: NDArray[np.float64]) -> NDArray[np.float64]:
        reach = np.linalg.norm(rotation * self.half_axes, axis=1)
        return np.stack([-reach, reach])

    def is_mirrored(self, normal: NDArray[np.float64]) -> bool:
        # The normal of a mirror plane is an eigenvector of the quadric.
        image = normal / self.half_axes**2
        across = image - (image @ normal) * normal
        return bool(np.linalg.norm(across) < 1e-12 * np.linalg.norm(image))


@dataclass(frozen=True)
class Faceted(Shape):
    """A convex polyhedron.

    Attributes
    ----------
    body : Polyhedron
        Its corners and faces; the volume is 4 pi / 3.
    """

    body: Polyhedron = field(compare=False)
    identity: tuple[float, ...]

    @property
    def half_extents(self) -> NDArray[np.float64]:
        return np.abs(self.body.corners).max(axis=0)

    @property
    def circumscribed_radius(self) -> float:
        return float(np.linalg.norm(self.body.corners, axis=1).max())

    @property
    def symmetry(self) -> Symmetry:
        return "mirrors" if all(self.is_mirrored(axis) for axis in np.eye(3)) else "none"

    def bounds(self, rotation: NDArray[np.float64]) -> NDArray[np.float64]:
        turned = self.body.corners @ rotation.T
        return np.stack([turned.min(axis=0), turned.max(axis=0)])

    def is_mirrored(self, normal: NDArray[np.float64]) -> bool:
        corners = self.body.corners
        image = corners - 2.0 * np.outer(corners @ normal, normal)
        apart = np.linalg.norm(image[:, None] - corners[None, :], axis=2).min(axis=1)
        return bool(apart.max() < 1e-12 * self.circumscribed_radius)


@dataclass(frozen=True)
class SolidShape(Shape):
    """Any body made of triangles.

    Attributes
    ----------
    solid : Solid
        Its surfaces, the core's included, about the centre; the volume is 4 pi / 3.
    """

    solid: Solid

    @cached_property
    def _corners(self) -> NDArray[np.float64]:
        return placing.outer_corners(self.solid)

    @cached_property
    def half_extents(self) -> NDArray[np.float64]:
        return placing.half_extents(self.solid)

    @cached_property
    def circumscribed_radius(self) -> float:
        return placing.circumscribed_radius(self.solid)

    @cached_property
    def symmetry(self) -> Symmetry:
        return placing.symmetry(self.solid)

    @property
    def layers(self) -> frozenset[int]:
        return frozenset(f.outside for f in self.solid.interfaces if f.outside != MEDIUM)

    def bounds(self, rotation: NDArray[np.float64]) -> NDArray[np.float64]:
        turned = self._corners @ rotation.T
        return np.stack([turned.min(axis=0), turned.max(axis=0)])

    def is_mirrored(self, normal: NDArray[np.float64]) -> bool:
        return placing.is_mirrored(self.solid, normal)


def from_spec(spec: Mapping[str, Any]) -> Shape:
    """Shape described by its entry in a campaign.

    Parameters
    ----------
    spec : mapping
        ``{"kind": "sphere"}``, ``{"kind": "spheroid", "equatorial_to_polar": ratio}``,
        ``{"kind": "ellipsoid", "axes": [a, b, c]}``, ``{"kind": "cuboid", "edges": [a, b, c]}``
        or ``{"kind": "prism", "sides": n, "height_to_width": ratio}``; only the ratios of
        lengths count. The width of a prism is the diameter of the circle through the
        corners of its base. ``"core_radius_fraction"`` may be added to any of them. Other kinds
        are those of `scatterloom.solids.registry`.

    Returns
    -------
    Shape

    Raises
    ------
    ValueError
        If the kind is unknown, a key is missing or left over, or a length is not
        positive and finite.

    Examples
    --------
    >>> from_spec({"kind": "spheroid", "equatorial_to_polar": 8.0}).axes
    (2.0, 2.0, 0.25)
    """
    kind = spec.get("kind")
    if kind in GENERATORS:
        core = spec.get("core_radius_fraction")
        return SolidShape(str(kind), placing.placed(spec), core_radius_fraction=core)
    keys: dict[str, tuple[str, ...]] = {
        "sphere": (),
        "spheroid": ("equatorial_to_polar",),
        "ellipsoid": ("axes",),
        "cuboid": ("edges",),
        "prism": ("sides", "height_to_width"),
    }
    if kind not in keys:
        known = ", ".join((*keys, *GENERATORS))
        raise ValueError(f"unknown shape kind {kind!r}: known kinds are {known}")
    found = spec.keys() - {"kind", "core_radius_fraction"}
    if found != set(keys[kind]):
        expected = ", ".join(keys[kind]) or "no further key"
        raise ValueError(f"shape {kind!r} takes {expected}, found {sorted(found) or 'none'}")
    core = spec.get("core_radius_fraction")
    if core is not None:
        core = _positive("core_radius_fraction", core)
        if core >= 1.0:
            raise ValueError(f"core_radius_fraction must be below 1, found {core!r}")
    match kind:
        case "sphere":
            return Ellipsoid(kind, (1.0, 1.0, 1.0), core_radius_fraction=core)
        case "spheroid":
            axes = _spheroid(spec["equatorial_to_polar"])
            return Ellipsoid(kind, axes, core_radius_fraction=core)
        case "ellipsoid":
            axes = _unit_product("axes", spec["axes"])
            return Ellipsoid(kind, axes, core_radius_fraction=core)
        case "cuboid":
            edges = _unit_product("edges", spec["edges"])
            return Faceted(kind, cuboid(edges), edges, core_radius_fraction=core)
    sides = spec["sides"]
    if sides != int(sides) or not 3 <= sides <= MOST_SIDES:
        raise ValueError(f"sides must be a whole number from 3 to {MOST_SIDES}, found {sides!r}")
    ratio = _positive("height_to_width", spec["height_to_width"])
    return Faceted(
        "prism", prism(int(sides), ratio), (float(sides), ratio), core_radius_fraction=core
    )


MOST_SIDES = 24
"""Largest number of sides of a prism."""


def _positive(name: str, value: Any) -> float:
    number = float(value)
    if not (math.isfinite(number) and number > 0.0):
        raise ValueError(f"{name} must be positive and finite, found {value!r}")
    return number


def _spheroid(equatorial_to_polar: Any) -> tuple[float, float, float]:
    ratio = _positive("equatorial_to_polar", equatorial_to_polar)
    equatorial = math.cbrt(ratio)
    return equatorial, equatorial, 1.0 / equatorial**2


def _unit_product(name: str, lengths: Sequence[Any]) -> tuple[float, float, float]:
    if len(lengths) != 3:
        raise ValueError(f"{name} must hold three lengths, found {len(lengths)}")
    a, b, c = (_positive(name, value) for value in lengths)
    mean = math.cbrt(a) * math.cbrt(b) * math.cbrt(c)
    return a / mean, b / mean, c / mean
