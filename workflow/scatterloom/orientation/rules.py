"""How many directions of incidence an average over random orientation takes."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from scatterloom.waves.basis import WaveLabels

SYMMETRIES = ("sphere", "axial", "mirrors", "none")


@dataclass(frozen=True)
class Reach:
    """Degree and order up to which the average has anything to add up.

    Attributes
    ----------
    incidence : int
        Degree of the products of two amplitudes in the direction of incidence.
    turn : int
        Largest difference of the orders of scattered and incident waves.
    """

    incidence: int
    turn: int


def reach(matrices: NDArray[np.complex128], labels: WaveLabels, negligible: float = 0.0) -> Reach:
    """Reach of the average of transition matrices.

    A product of two amplitudes is a spherical polynomial of degree 2 n_max in the
    direction of incidence and another one in that of scattering; averaged over rotation
    about the beam, both depend on the direction of incidence alone, so the scattering
    matrix has degree 4 n_max there. What waves of high degree add is the product of two
    small elements, and may be left out.

    Parameters
    ----------
    matrices : complex128 (n_matrix, n_wave, n_wave)
    labels : WaveLabels
    negligible : float
        Sum of the products of elements that may be left out, relative to that of all: zero
        for an exact average.
    """
    n_max = labels.n_max
    size = np.abs(matrices).max(axis=0)
    degrees = labels.degree[:, None] + labels.degree[None, :]
    turns = np.abs(labels.order[:, None] - labels.order[None, :])
    both = _norms(size, degrees, 2 * n_max)
    turned = _norms(size, turns, 2 * n_max) ** 2
    allowed = negligible * float(np.sum(size**2))
    beyond = np.append(np.cumsum(turned[::-1])[::-1], 0.0)
    return Reach(
        incidence=_degree(both, allowed),
        turn=max(0, int(np.flatnonzero(beyond <= allowed)[0]) - 1),
    )


def _norms(size: NDArray, label: NDArray, largest: int) -> NDArray[np.float64]:
    """Frobenius norm of the elements with each label from 0 on."""
    return np.sqrt(np.bincount(label.ravel(), (size**2).ravel(), minlength=largest + 1))


def _degree(norms: NDArray[np.float64], allowed: float) -> int:
    """Least sum of two labels beyond which products of the norms add up to what is allowed."""
    products = np.convolve(norms, norms)
    beyond = np.append(np.cumsum(products[::-1])[::-1], 0.0)
    return max(2, int(np.flatnonzero(beyond <= allowed)[0]) - 1)


@lru_cache(maxsize=64)
def gauss_nodes(count: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Nodes and weights of the Gauss-Legendre rule on [-1, 1], each float64 (count,)."""
    node, weight = np.polynomial.legendre.leggauss(count)
    node.flags.writeable = weight.flags.writeable = False
    return node, weight


@dataclass(frozen=True)
class Rule:
    """Polar angles of incidence and harmonics of its azimuth, in the particle frame.

    Attributes
    ----------
    beta : float64 (n_beta,) [rad]
    weight : float64 (n_beta,)
        Add up to one.
    turn : int64 (n_turn,)
        Differences q of the orders of scattered and incident wave: amplitudes vary with the
        azimuth of incidence as exp(i q phi), so the mean of a product is a sum over q.
    turn_weight : float64 (n_turn,)
        How many differences each stands for.
    mirrored : bool
        True if the rule stands for mirror images as well: the averaged matrix then has the
        eight elements off the two diagonal blocks equal to zero.
    """

    beta: NDArray[np.float64]
    weight: NDArray[np.float64]
    turn: NDArray[np.int64]
    turn_weight: NDArray[np.float64]
    mirrored: bool

    def batches(self, count: int) -> list[Rule]:
        """The same rule in `count` parts, or one polar angle each if there are fewer."""
        parts = np.array_split(np.arange(self.beta.size), min(count, self.beta.size))
        return [replace(self, beta=self.beta[p], weight=self.weight[p]) for p in parts]


def rule(symmetry: str, limits: Reach) -> Rule:
    """Rule that is exact for what the reach says, restricted by the symmetry of the particle.

    One direction serves for spheres; half a meridian for an axis of rotation and an
    equatorial mirror plane, and for three mirror planes, where q is even and its sign does
    not matter; a whole meridian and all q for none.

    Raises
    ------
    ValueError
        If the symmetry is unknown.
    """
    if symmetry not in SYMMETRIES:
        raise ValueError(f"unknown symmetry {symmetry!r}; known: {', '.join(SYMMETRIES)}")
    one, only = np.ones(1), np.zeros(1, dtype=np.int64)
    if symmetry == "sphere":
        return Rule(0.3 * one, one, only, one, True)
    # An even number of nodes, so that none lies on the equator.
    count = 2 * (limits.incidence // 4 + 1)
    cosine, whole = gauss_nodes(count)
    weight = 0.5 * whole
    if symmetry == "none":
        turn = np.arange(-limits.turn, limits.turn + 1)
        return Rule(np.arccos(cosine), weight, turn, np.ones(turn.size), False)
    upper = cosine > 0.0
    beta, weight = np.arccos(cosine[upper]), 2.0 * weight[upper]
    if symmetry == "axial":
        return Rule(beta, weight, only, one, True)
    turn = np.arange(0, limits.turn + 1, 2)
    return Rule(beta, weight, turn, np.where(turn > 0, 2.0, 1.0), True)
