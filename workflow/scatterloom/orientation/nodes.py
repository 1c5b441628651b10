"""Directions of incidence that average exactly over random orientation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


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

    def batches(self, count: int) -> list[IncidenceNodes]:
        """The same nodes in `count` parts, or one node each if there are fewer."""
        size = self.weight.size
        return [
            IncidenceNodes(self.beta[part], self.phi[part], self.weight[part], self.mirrored)
            for part in np.array_split(np.arange(size), min(count, size))
        ]


def incidence_nodes(symmetry: str, n_max: int) -> IncidenceNodes:
    """Nodes exact for a transition matrix truncated at degree `n_max`.

    A product of two amplitudes is a spherical polynomial of degree 2 n_max in the
    direction of incidence and another one in that of scattering; averaged over rotation
    about the beam, both depend on the direction of incidence alone, so the scattering
    matrix has degree 4 n_max there. Gauss-Legendre nodes in the polar angle and evenly
    spaced azimuths integrate it exactly, restricted by the symmetry of the transition
    matrix: one node for spheres, half a meridian for axial symmetry with an equatorial
    mirror plane, one octant for three mirror planes, the whole sphere for none.

    Raises
    ------
    ValueError
        If the symmetry is unknown.
    """
    if symmetry == "sphere":
        one = np.ones(1)
        return IncidenceNodes(0.3 * one, 0.0 * one, one, True)
    if symmetry not in ("axial", "mirrors", "none"):
        raise ValueError(f"unknown symmetry {symmetry!r}; known: sphere, axial, mirrors, none")
    cosine, weight = np.polynomial.legendre.leggauss(2 * n_max + 2)
    mirrored = symmetry != "none"
    if mirrored:
        upper = cosine > 0.0
        cosine, weight = cosine[upper], 2.0 * weight[upper]
    # Harmonics up to 4 n_max, with two mirror planes through the axis only even ones.
    count, span = {
        "axial": (1, 0.0),
        "mirrors": (n_max + 1, 0.5 * np.pi),
        "none": (4 * n_max + 2, 2.0 * np.pi),
    }[symmetry]
    azimuth = (np.arange(count) + 0.5) * span / count
    beta, phi = np.meshgrid(np.arccos(cosine), azimuth, indexing="ij")
    weights = np.repeat(weight / (2.0 * count), count)
    return IncidenceNodes(beta.ravel(), phi.ravel(), weights, mirrored)
