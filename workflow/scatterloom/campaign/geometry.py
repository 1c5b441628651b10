"""Half axes of shape specifications, for predictions that need no lattice."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any


def half_axes(spec: Mapping[str, Any]) -> tuple[float, float, float]:
    """Return the half axes along x, y and z in units of the equal-volume radius.

    Parameters
    ----------
    spec : mapping
        A shape such as {"kind": "spheroid", "equatorial_to_polar": 2.0}; z is the axis of
        revolution.

    Raises
    ------
    ValueError
        If the kind is unknown.
    """
    match spec["kind"]:
        case "sphere":
            return (1.0, 1.0, 1.0)
        case "spheroid":
            ratio = float(spec["equatorial_to_polar"])
            equatorial = ratio ** (1.0 / 3.0)
            return (equatorial, equatorial, equatorial / ratio)
        case "ellipsoid":
            a, b, c = (float(axis) for axis in spec["axes"])
            scale = (a * b * c) ** (1.0 / 3.0)
            return (a / scale, b / scale, c / scale)
    raise ValueError(f"unknown shape kind {spec['kind']!r}")


def circumscribed_radius(spec: Mapping[str, Any]) -> float:
    """Return the radius of the circumscribed sphere in units of the equal-volume radius."""
    return max(half_axes(spec))


def canonical(spec: Mapping[str, Any]) -> dict[str, Any]:
    """Return the simplest specification of the same body, so that equal bodies merge.

    Ratios keep twelve significant digits. The order of an ellipsoid's axes is kept: it fixes
    the frame in which a transition matrix is stored.
    """
    match spec["kind"]:
        case "spheroid":
            ratio = float(f"{spec['equatorial_to_polar']:.11e}")
            if ratio == 1.0:
                return {"kind": "sphere"}
            return {"kind": "spheroid", "equatorial_to_polar": ratio}
        case "ellipsoid":
            last = spec["axes"][2]
            axes = [float(f"{axis / last:.11e}") for axis in spec["axes"]]
            if axes[0] == axes[1]:
                return canonical({"kind": "spheroid", "equatorial_to_polar": axes[0]})
            return {"kind": "ellipsoid", "axes": axes}
    return dict(spec)
