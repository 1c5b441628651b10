"""The complete basis of incident waves: regular vector spherical waves in real form.

With cosine and sine azimuth functions in place of exp(+-im phi) every wave is a real
field and has definite parity under each coordinate mirror plane, so that the waves sort
into the parity classes of the lattice, and the transition matrix in this basis is
complex symmetric exactly when reciprocity holds.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

MAGNETIC, ELECTRIC = 0, 1
"""Kinds of wave: RgM (no radial electric field) and RgN."""


@dataclass(frozen=True)
class WaveBasis:
    """Labels of the waves up to degree n_max, 2 n_max (n_max + 2) of them.

    Attributes
    ----------
    n_max : int
    kind : int64 (n_wave,)
        0 for RgM, 1 for RgN.
    degree, order : int64 (n_wave,)
        n = 1..n_max and m = 0..n.
    sine : int64 (n_wave,)
        0 for cos(m phi), 1 for sin(m phi).
    """

    n_max: int
    kind: NDArray[np.int64]
    degree: NDArray[np.int64]
    order: NDArray[np.int64]
    sine: NDArray[np.int64]

    def __len__(self) -> int:
        return len(self.kind)

    def parity(self) -> NDArray[np.int64]:
        """1 where a wave is odd under the x, y, z mirror plane: int64 (3, n_wave).

        Odd means E(-x) = +(Ex, -Ey, -Ez)(x), and so on for y and z. RgN carries the
        parity of its scalar harmonic, RgM (a curl of it) the opposite one.
        """
        scalar = np.stack([(self.order + self.sine) % 2, self.sine, (self.degree + self.order) % 2])
        return np.where(self.kind == ELECTRIC, scalar, 1 - scalar)

    def class_of(self, mirrors: tuple[bool, bool, bool]) -> NDArray[np.int64]:
        """Parity class of each wave for a lattice with the given mirror planes: int64 (n_wave,)."""
        parity = self.parity()
        out = np.zeros(len(self), dtype=np.int64)
        for bit, axis in enumerate(a for a in range(3) if mirrors[a]):
            out |= parity[axis] << bit
        return out

    def exchanged(self) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
        """The wave that each becomes under the exchange of x and y, and its sign.

        The exchange, E(x, y, z) to (Ey, Ex, Ez)(y, x, z), takes phi to pi/2 - phi: cosine and
        sine functions of even order stay, those of odd order change places. RgM, a curl,
        has the opposite sign.
        """
        odd = self.order % 2 == 1
        # Waves of one kind, degree and order stand next to each other, cosine first.
        step = np.where(self.sine == 0, 1, -1)
        image = np.arange(len(self)) + np.where(odd, step, 0)
        turns = np.where(self.order // 2 % 2 == 1, -1.0, 1.0)
        sign = np.where(~odd & (self.sine == 1), -turns, turns)
        return image, np.where(self.kind == MAGNETIC, -sign, sign)


@lru_cache(maxsize=64)
def wave_basis(n_max: int) -> WaveBasis:
    """All waves up to degree `n_max`, sorted by degree, then order, then kind.

    Raises
    ------
    ValueError
        If `n_max` is below one.
    """
    if n_max < 1:
        raise ValueError(f"n_max is {n_max}, must be at least 1")
    rows = [
        (kind, n, m, sine)
        for n in range(1, n_max + 1)
        for m in range(n + 1)
        for kind in (MAGNETIC, ELECTRIC)
        for sine in ((0, 1) if m else (0,))
    ]
    kind, degree, order, sine = np.array(rows, dtype=np.int64).T
    return WaveBasis(n_max, kind, degree, order, sine)


@lru_cache(maxsize=16)
def complex_from_real(n_max: int) -> tuple[NDArray[np.complex128], WaveLabels]:
    """Unitary matrix W that turns real-wave into complex-wave coefficients, and its row labels.

    Coefficients transform as ``p_complex = W p_real`` and a transition matrix as
    ``T_complex = W T_real W^H``. Row (kind, n, m) is the wave with azimuth function
    exp(i m phi) and polar function d^n_{0m}.
    """
    basis = wave_basis(n_max)
    position = {
        key: i
        for i, key in enumerate(
            zip(
                basis.kind.tolist(),
                basis.degree.tolist(),
                basis.order.tolist(),
                basis.sine.tolist(),
                strict=True,
            )
        )
    }
    rows = [
        (kind, n, m)
        for m in range(-n_max, n_max + 1)
        for kind in (MAGNETIC, ELECTRIC)
        for n in range(max(1, abs(m)), n_max + 1)
    ]
    matrix = np.zeros((len(rows), len(basis)), dtype=np.complex128)
    half = np.sqrt(0.5)
    for i, (kind, n, m) in enumerate(rows):
        # Y_m = (Y_cos + i Y_sin)/sqrt 2 and Y_-m = (-1)^m (Y_cos - i Y_sin)/sqrt 2;
        # a field sum_w p_w E_w is unchanged, so coefficients take the conjugate.
        if m == 0:
            matrix[i, position[kind, n, 0, 0]] = 1.0
        elif m > 0:
            matrix[i, position[kind, n, m, 0]] = half
            matrix[i, position[kind, n, m, 1]] = -1j * half
        else:
            sign = -half if m % 2 else half
            matrix[i, position[kind, n, -m, 0]] = sign
            matrix[i, position[kind, n, -m, 1]] = 1j * sign
    labels = np.array(rows, dtype=np.int64).T
    return matrix, WaveLabels(n_max, labels[0], labels[1], labels[2])


@dataclass(frozen=True)
class WaveLabels:
    """Labels of the complex waves: kind, degree n and signed order m, sorted by m, kind, n."""

    n_max: int
    kind: NDArray[np.int64]
    degree: NDArray[np.int64]
    order: NDArray[np.int64]
