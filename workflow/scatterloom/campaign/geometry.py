"""Extents of shape specifications, for predictions that need no lattice."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np

from scatterloom.solids.registry import GENERATORS


@dataclass(frozen=True)
class Extents:
    """How far a particle reaches, in units of the equal-volume radius.

    Attributes
    ----------
    half : tuple of 3 float
        Largest distance from the centre along x, y and z.
    circumscribed_radius : float
        Radius of the smallest sphere about the centre that holds the particle.
    core_radius_fraction : float or None
        Size of the core relative to the particle, as a ratio of lengths.
    mirror_planes : int
        How many of the planes x = 0, y = 0, z = 0 are mirror planes.
    """

    half: tuple[float, float, float]
    circumscribed_radius: float
    core_radius_fraction: float | None = None
    mirror_planes: int = 3

    @property
    def lengths(self) -> tuple[float, ...]:
        """Half extents of the particle and of its core: what should lie alike on all lattices."""
        if self.core_radius_fraction is None:
            return self.half
        return (*self.half, *(length * self.core_radius_fraction for length in self.half))

    @property
    def radii(self) -> tuple[float, ...]:
        """Half extents and the circumscribed radius: what sets the truncation."""
        return (*self.half, self.circumscribed_radius)


def extents(spec: Mapping[str, Any]) -> Extents:
    """Return the extents of a shape.

    Parameters
    ----------
    spec : mapping
        A shape such as {"kind": "spheroid", "equatorial_to_polar": 2.0}, perhaps with a
        "core_radius_fraction"; z is the axis of revolution, or of a prism.

    Raises
    ------
    ValueError
        If the kind is unknown or the body cannot be made.
    """
    core = spec.get("core_radius_fraction")
    if spec["kind"] in GENERATORS:
        return _of_solid(json.dumps(dict(spec), sort_keys=True))
    match spec["kind"]:
        case "sphere":
            return Extents((1.0, 1.0, 1.0), 1.0, core)
        case "spheroid":
            ratio = float(spec["equatorial_to_polar"])
            equatorial = ratio ** (1.0 / 3.0)
            half = (equatorial, equatorial, equatorial / ratio)
            return Extents(half, max(half), core)
        case "ellipsoid":
            a, b, c = (float(axis) for axis in spec["axes"])
            scale = (a * b * c) ** (1.0 / 3.0)
            half = (a / scale, b / scale, c / scale)
            return Extents(half, max(half), core)
        case "cuboid":
            a, b, c = (float(edge) for edge in spec["edges"])
            # half edges of a cuboid of volume 4 pi / 3
            scale = (a * b * c * 6.0 / math.pi) ** (1.0 / 3.0)
            half = (a / scale, b / scale, c / scale)
            return Extents(half, math.hypot(*half), core)
        case "prism":
            sides, ratio = int(spec["sides"]), float(spec["height_to_width"])
            # volume: sides R^2 sin(2 pi / sides) / 2 times the height 2 R ratio
            base = sides * math.sin(2.0 * math.pi / sides)
            radius = (4.0 * math.pi / 3.0 / (base * ratio)) ** (1.0 / 3.0)
            lateral = max(math.sin(2.0 * math.pi * i / sides) for i in range(sides))
            half = (radius, radius * lateral, radius * ratio)
            planes = 2 if sides % 2 else 3
            return Extents(half, math.hypot(radius, radius * ratio), core, planes)
    raise ValueError(f"unknown shape kind {spec['kind']!r}")


@lru_cache(maxsize=256)
def _of_solid(text: str) -> Extents:
    spec = json.loads(text)
    from scatterloom.solids import placing  # loads the geometry libraries

    solid = placing.placed(spec)
    a, b, c = (float(length) for length in placing.half_extents(solid))
    return Extents(
        (a, b, c),
        placing.circumscribed_radius(solid),
        spec.get("core_radius_fraction"),
        sum(placing.is_mirrored(solid, axis) for axis in np.eye(3)),
    )


def canonical(spec: Mapping[str, Any]) -> dict[str, Any]:
    """Return the simplest specification of the same body, so that equal bodies merge.

    Ratios keep twelve significant digits. The order of axes and edges is kept: it fixes
    the frame in which a transition matrix is stored.
    """
    plain = _plain(spec)
    if spec.get("core_radius_fraction") is not None:
        plain["core_radius_fraction"] = _rounded(spec["core_radius_fraction"])
    return plain


_NO_GEOMETRY = {"core_radius_fraction", "file", "variable", "more_materials"}


def _plain(spec: Mapping[str, Any]) -> dict[str, Any]:
    if spec["kind"] in GENERATORS:
        # What a file holds counts, not where it lies; materials are known by their indices.
        own = {key: value for key, value in spec.items() if key not in _NO_GEOMETRY}
        return _simplest({key: _digits(part) for key, part in own.items() if part is not None})
    match spec["kind"]:
        case "spheroid":
            ratio = _rounded(spec["equatorial_to_polar"])
            if ratio == 1.0:
                return {"kind": "sphere"}
            return {"kind": "spheroid", "equatorial_to_polar": ratio}
        case "ellipsoid":
            last = spec["axes"][2]
            axes = [_rounded(axis / last) for axis in spec["axes"]]
            if axes[0] == axes[1]:
                return _plain({"kind": "spheroid", "equatorial_to_polar": axes[0]})
            return {"kind": "ellipsoid", "axes": axes}
        case "cuboid":
            last = spec["edges"][2]
            edges = {"edges": [_rounded(edge / last) for edge in spec["edges"]]}
            return _edged("cuboid", "rounded_cuboid", edges, spec)
        case "prism":
            own = {"sides": spec["sides"], "height_to_width": _rounded(spec["height_to_width"])}
            return _edged("prism", "shaped_prism", own, spec)
        case "cone":
            return _plain({**spec, "kind": "frustum", "upper_to_lower": 0.0})
    if spec["kind"] in FACES:
        own = {"faces": FACES[spec["kind"]]}
        return _edged("polyhedron", "polyhedron", own, spec)
    return {"kind": spec["kind"]}


FACES = {"tetrahedron": 4, "octahedron": 8, "dodecahedron": 12, "icosahedron": 20}


def _simplest(spec: dict[str, Any]) -> dict[str, Any]:
    """Bodies of triangles that are other ones at the ends of their range; else the same."""
    match spec["kind"]:
        case "frustum" if spec["upper_to_lower"] == 1.0:
            return {"kind": "cylinder", "length_to_diameter": spec["height_to_diameter"]}
        case "capsule" if spec["length_to_diameter"] == 1.0:
            return {"kind": "sphere"}
        case "superellipsoid":
            axes = [_rounded(axis / spec["axes"][2]) for axis in spec["axes"]]
            if spec["exponents"] == [1.0, 1.0]:
                return _plain({"kind": "ellipsoid", "axes": axes})
            return {**spec, "axes": axes}
        case "gaussian_sphere" if "correlation_angle_deg" in spec:
            return {key: value for key, value in spec.items() if key != "highest_degree"}
    return spec


def _edged(
    sharp: str, other: str, own: Mapping[str, Any], spec: Mapping[str, Any]
) -> dict[str, Any]:
    """A polyhedron, of one kind as it is and of another one with rounded edges or changed ends."""
    keys = ("edge_radius_fraction", "end_tilts_deg", "indentation")
    changed = {key: _digits(spec[key]) for key in keys if spec.get(key) is not None}
    if changed.get("end_tilts_deg") == [0.0, 0.0]:
        del changed["end_tilts_deg"]
    return {"kind": other if changed else sharp, **own, **changed}


def _digits(value: Any) -> Any:
    """A value of a specification with every float in it to twelve significant digits."""
    if isinstance(value, float):
        return _rounded(value)
    if isinstance(value, Mapping):
        return {key: _digits(part) for key, part in value.items() if part is not None}
    return [_digits(part) for part in value] if isinstance(value, list | tuple) else value


def _rounded(value: float) -> float:
    return float(f"{value:.11e}")
