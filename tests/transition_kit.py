"""Exact transition matrices in the package's form, and rotated ones."""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from oracles import mie, spheroid
from oracles.spheroid import AxialTransition
from scatterloom.transition.matrix import TransitionMatrix
from scatterloom.waves.angular import wigner_d
from scatterloom.waves.basis import WaveLabels, complex_from_real


def exact_sphere(index: complex, size_parameter: float, n_max: int) -> TransitionMatrix:
    """Diagonal: -b_n for M and -a_n for N waves (Bohren & Huffman 1983, ch. 4)."""
    ball = mie.sphere(index, size_parameter, n_max=n_max)
    _, labels = complex_from_real(n_max)
    n = labels.degree - 1
    return TransitionMatrix(np.diag(np.where(labels.kind == 0, -ball.b[n], -ball.a[n])), labels)


@lru_cache(maxsize=16)
def exact_axial(ratio: float, index: complex, size_parameter: float) -> AxialTransition:
    """Spheroid by the extended boundary condition method."""
    return spheroid.spheroid(ratio, index, size_parameter)


def in_our_form(axial: AxialTransition, n_max: int | None = None) -> TransitionMatrix:
    """The oracle's matrix as the package holds it, perhaps truncated."""
    kind, degree, order = axial.labels()
    keep = degree <= (n_max or axial.n_max)
    labels = WaveLabels(n_max or axial.n_max, kind[keep], degree[keep], order[keep])
    return TransitionMatrix(axial.full()[np.ix_(keep, keep)], labels)


def exact_spheroid(ratio: float, index: complex, size_parameter: float, n_max: int | None = None):
    """Exact transition matrix of a spheroid in the package's form."""
    return in_our_form(exact_axial(ratio, index, size_parameter), n_max)


def rotated(transition: TransitionMatrix, alpha: float, beta: float, gamma: float):
    """The same particle turned by Euler angles: D T D^H, D = exp(-i m' alpha) d exp(-i m gamma)."""
    labels = transition.labels
    turn = np.zeros_like(transition.matrix)
    for kind in (0, 1):
        for n in range(1, labels.n_max + 1):
            rows = np.flatnonzero((labels.kind == kind) & (labels.degree == n))
            m = labels.order[rows]
            d = wigner_d(n, np.array([beta]))[0][np.ix_(m + n, m + n)]
            left, right = np.exp(-1j * m * alpha), np.exp(-1j * m * gamma)
            turn[np.ix_(rows, rows)] = left[:, None] * d * right
    return TransitionMatrix(turn @ transition.matrix @ turn.conj().T, labels)


def distance(found: TransitionMatrix, exact: TransitionMatrix) -> float:
    """Relative Frobenius distance."""
    return float(np.linalg.norm(found.matrix - exact.matrix) / np.linalg.norm(exact.matrix))
