"""Directions of incidence that average exactly over random orientation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.integrate import lebedev_rule

_NEGATIVE_WEIGHTS = {13, 25, 27}
_LEBEDEV_DEGREES = (
    *range(3, 32, 2), 35, 41, 47, 53, 59, 65, 71, 77, 83, 89, 95, 101, 107, 113, 119, 125, 131
)  # fmt: skip


@dataclass(frozen=True)
class IncidenceNodes:
    """Directions of incidence in the particle frame, weights adding up to one.

    Attributes
    ----------
    beta, phi : float64 (n_node,) [rad]
    weight : float64 (n_node,)
    mirrored : bool
        True if the nodes stand for their mirror images as well: the averaged matrix
        then has the eight elements off the two diagonal blocks equal to zero.
    """

    beta: NDArray[np.float64]
    phi: NDArray[np.float64]
    weight: NDArray[np.float64]
    mirrored: bool


def incidence_nodes(symmetry: str, n_max: int) -> IncidenceNodes:
    """Nodes exact for a transition matrix truncated at degree `n_max`.

    Averaged over rotation about the beam, the scattering matrix is a spherical
    polynomial of degree 2 n_max in the direction of incidence. Symmetry of the
    transition matrix restricts the nodes: one for spheres, Gauss-Legendre nodes on a
    half meridian for axial symmetry with an equatorial mirror plane, one octant of a
    Lebedev rule (Lebedev & Laikov 1999) for three mirror planes.

    Raises
    ------
    ValueError
        If the symmetry is unknown or no Lebedev rule is high enough.
    """
    if symmetry == "sphere":
        one = np.ones(1)
        return IncidenceNodes(0.3 * one, 0.0 * one, one, True)
    if symmetry == "axial":
        node, weight = np.polynomial.legendre.leggauss(2 * ((n_max + 2) // 2))
        half = node > 0.0
        return IncidenceNodes(np.arccos(node[half]), np.zeros(half.sum()), weight[half], True)
    if symmetry not in ("mirrors", "none"):
        raise ValueError(f"unknown symmetry {symmetry!r}; known: sphere, axial, mirrors, none")
    high_enough = [d for d in _LEBEDEV_DEGREES if d >= 2 * n_max and d not in _NEGATIVE_WEIGHTS]
    if not high_enough:
        raise ValueError(f"no Lebedev rule for truncation n_max = {n_max}, largest is 65")
    point, weight = lebedev_rule(high_enough[0])
    x, y, z = point
    weight = weight / weight.sum()
    if symmetry == "mirrors":
        tiny = 1e-12
        keep = (x > -tiny) & (y > -tiny) & (z > -tiny)
        images = 2 ** ((x > tiny).astype(int) + (y > tiny) + (z > tiny))
        x, y, z, weight = x[keep], y[keep], z[keep], (weight * images)[keep]
    beta = np.arctan2(np.hypot(x, y), z)
    return IncidenceNodes(beta, np.arctan2(y, x), weight, symmetry == "mirrors")
