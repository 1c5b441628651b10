"""The transition matrix of one case: scattered-wave from incident-wave coefficients."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from scatterloom.waves.basis import WaveLabels, complex_from_real, wave_basis


@dataclass(frozen=True)
class TransitionMatrix:
    """Transition matrix in complex vector spherical waves.

    Scattered field = sum over rows of ``T a`` times outgoing waves, a being the
    coefficients of the regular waves (Waterman 1971, Phys. Rev. D 3, 825). For a
    sphere T is diagonal: -b_n for RgM and -a_n for RgN waves (Mie coefficients).

    Attributes
    ----------
    matrix : complex128 (n_wave, n_wave)
    labels : WaveLabels
        Kind, degree and order of rows and columns.
    """

    matrix: NDArray[np.complex128]
    labels: WaveLabels

    @property
    def n_max(self) -> int:
        return self.labels.n_max

    def cut(self, n_max: int) -> TransitionMatrix:
        """The same waves with all elements above degree `n_max` set to zero."""
        kept = self.labels.degree <= n_max
        return TransitionMatrix(np.where(kept[:, None] & kept, self.matrix, 0.0), self.labels)


def from_amplitudes(
    n_max: int, members: Sequence[NDArray[np.int64]], amplitudes: Sequence[NDArray]
) -> TransitionMatrix:
    """Transition matrix ``T = 4 pi i k^3 S`` from the amplitudes of all parity classes.

    In real waves the amplitude into an outgoing wave is the product with that wave
    itself, so S symmetric is reciprocity (Mackowski 2002, J. Opt. Soc. Am. A 19, 881).

    Parameters
    ----------
    n_max : int
    members : list of int64
        Indices into ``wave_basis(n_max)`` of the waves of each class.
    amplitudes : list of complex128 [k^-3]
        Stationary amplitudes of each class.
    """
    size = len(wave_basis(n_max))
    real = np.zeros((size, size), dtype=np.complex128)
    for member, block in zip(members, amplitudes, strict=True):
        real[np.ix_(member, member)] = 4j * np.pi * block
    return TransitionMatrix(_in_complex_waves(real, n_max), complex_from_real(n_max)[1])


@lru_cache(maxsize=16)
def _two_entries(n_max: int) -> tuple[NDArray[np.int64], NDArray[np.complex128]]:
    """Columns and values of the two entries in each row of `complex_from_real`, (2, n_wave)."""
    change = complex_from_real(n_max)[0]
    found = np.abs(change) > 0.0
    first = found.argmax(axis=1)
    last = found.shape[1] - 1 - found[:, ::-1].argmax(axis=1)
    row = np.arange(len(change))
    # Waves of order zero have one entry only.
    second = np.where(first == last, 0.0, change[row, last])
    return np.stack([first, last]), np.stack([change[row, first], second])


def _in_complex_waves(real: NDArray, n_max: int) -> NDArray[np.complex128]:
    """``W real W^H`` with W of `complex_from_real`, whose rows have two entries at most."""
    (first, last), (one, other) = _two_entries(n_max)
    half = one[:, None] * real[first] + other[:, None] * real[last]
    half = np.ascontiguousarray(half.T)
    out = one.conj()[:, None] * half[first] + other.conj()[:, None] * half[last]
    return np.ascontiguousarray(out.T)


def project(transition: TransitionMatrix, symmetry: str) -> TransitionMatrix:
    """Nearest matrix with the symmetry of the shape itself.

    The lattice has only part of the particle's symmetry. Projecting onto the
    matrices that commute with the full group is orthogonal (Frobenius) and leaves the
    exact matrix where it is, so it can only bring T closer to it.

    Parameters
    ----------
    transition : TransitionMatrix
    symmetry : {"sphere", "axial", "mirrors", "none"}

    Raises
    ------
    ValueError
        For any other symmetry.
    """
    labels, t = transition.labels, transition.matrix
    if symmetry in ("mirrors", "none"):
        return transition
    if symmetry == "axial":
        same = labels.order[:, None] == labels.order[None, :]
        return TransitionMatrix(np.where(same, t, 0.0), labels)
    if symmetry == "sphere":
        diagonal = np.diag(t)
        out = np.zeros_like(diagonal)
        for kind in (0, 1):
            for n in range(1, labels.n_max + 1):
                chosen = (labels.kind == kind) & (labels.degree == n)
                out[chosen] = diagonal[chosen].mean()
        return TransitionMatrix(np.diag(out), labels)
    raise ValueError(f"unknown symmetry {symmetry!r}; known: sphere, axial, mirrors, none")


def efficiencies(transition: TransitionMatrix, size_parameter: float) -> tuple[float, float]:
    """Extinction and scattering efficiency, exact average over random orientation.

    ``C_ext = -(2 pi/k^2) Re Tr T``, ``C_sca = (2 pi/k^2) sum |T|^2`` (Mishchenko et al.
    2002, Scattering, Absorption, and Emission of Light by Small Particles, eqs. 5.107,
    5.140), over pi r_ev^2.
    """
    unit = 2.0 / size_parameter**2
    t = transition.matrix
    return -unit * float(np.trace(t).real), unit * float(np.sum(np.abs(t) ** 2))
