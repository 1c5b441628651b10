"""The transition matrix of a turned particle."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from scatterloom.transition.matrix import TransitionMatrix
from scatterloom.waves.angular import wigner_d


def euler_angles(rotation: NDArray[np.float64]) -> tuple[float, float, float]:
    """Angles alpha, beta, gamma [rad] of R = Rz(alpha) Ry(beta) Rz(gamma), beta in [0, pi].

    Parameters
    ----------
    rotation : float64 (3, 3)
    """
    r = rotation
    beta = float(np.arctan2(np.hypot(r[2, 0], r[2, 1]), r[2, 2]))
    if np.hypot(r[2, 0], r[2, 1]) < 1e-12:
        # Only the sum (or difference) of the other two counts.
        alpha = float(np.arctan2(-r[0, 1], r[1, 1]))
        return alpha, beta, 0.0
    alpha = float(np.arctan2(r[1, 2], r[0, 2]))
    return alpha, beta, float(np.arctan2(r[2, 1], -r[2, 0]))


def turned(transition: TransitionMatrix, rotation: NDArray[np.float64]) -> TransitionMatrix:
    """Transition matrix of the same particle after a rotation.

    T' = D T D^H with D = exp(-i m' alpha) d^n_{m'm}(beta) exp(-i m gamma) for each kind and
    degree (Mishchenko et al. 2002, Scattering, Absorption, and Emission of Light by Small
    Particles, eq. 5.29).

    Parameters
    ----------
    transition : TransitionMatrix
    rotation : float64 (3, 3)
        Carries a point of the particle from its old place to its new one.

    Returns
    -------
    TransitionMatrix
    """
    alpha, beta, gamma = euler_angles(rotation)
    labels = transition.labels
    turn = np.zeros_like(transition.matrix)
    for n in range(1, labels.n_max + 1):
        reduced = wigner_d(n, np.array([beta]))[0]
        for kind in (0, 1):
            rows = np.flatnonzero((labels.kind == kind) & (labels.degree == n))
            m = labels.order[rows]
            block = np.exp(-1j * m * alpha)[:, None] * reduced[np.ix_(m + n, m + n)]
            turn[np.ix_(rows, rows)] = block * np.exp(-1j * m * gamma)
    return TransitionMatrix(turn @ transition.matrix @ turn.conj().T, labels)
