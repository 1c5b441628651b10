"""Block minimal residuals with rank-reduced residuals, for one sector.

Vectors are rows and carry their physical norm. For the incident block B (n_wave rows)
a sector holds the iterate X, its residual ``R = B - A X``, directions V and orthonormal
images ``Y = A M V`` with small matrices M. Two invariants hold throughout, to rounding:
``R = B - A X``, and R is orthogonal to every Y kept.

The next block of directions is not the whole residual but its significant part: a
direction of the residual of norm s changes the amplitudes by about s^2, so all
directions with s^2 below the error allowed are left out. A zero start begins with the
significant directions of B itself, a start from neighbouring sizes with its own rows.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_INDEPENDENT = 1e-3
"""Least share of a row, squared, not in the span of the others, for a Cholesky factor to do."""


def gram(block: NDArray) -> NDArray[np.complex128]:
    """Hermitian Gram matrix of the rows of a block."""
    return (block @ block.conj().T).astype(np.complex128)


def both_products(
    block: NDArray,
) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
    """Products of the rows of a block with each other, with and without conjugation.

    Both follow from one real symmetric product of the real and imaginary parts, at the price
    of one of them.

    Returns
    -------
    hermitian, symmetric : complex128 (n, n)
        ``block @ block^H`` and ``block @ block^T``.
    """
    n = len(block)
    parts = np.concatenate([block.real, block.imag])
    square = (parts @ parts.T).astype(np.float64)
    real, imaginary, mixed = square[:n, :n], square[n:, n:], square[n:, :n]
    hermitian = (real + imaginary) + 1j * (mixed - mixed.T)
    return hermitian, (real - imaginary) + 1j * (mixed + mixed.T)


def significant_rows(gram_matrix: NDArray, threshold: float) -> NDArray[np.complex128]:
    """Combinations P (k, n) such that ``P @ block`` has orthonormal rows.

    Only directions whose squared norm exceeds `threshold` are kept.
    """
    value, vector = np.linalg.eigh(gram_matrix)
    keep = value > max(threshold, 0.0)
    return (vector[:, keep] / np.sqrt(value[keep])).conj().T


def _orthonormal(gram_matrix: NDArray) -> NDArray[np.complex128]:
    """Combinations that make all rows orthonormal; rows that depend on others are left out."""
    largest = float(np.trace(gram_matrix).real)
    try:
        factor = np.linalg.cholesky(gram_matrix)
    except np.linalg.LinAlgError:
        pass
    else:
        if np.diagonal(factor).real.min() ** 2 > _INDEPENDENT * largest:
            return np.linalg.inv(factor).astype(np.complex128)
    # Images that depend on the others to single precision add nothing but noise.
    return significant_rows(gram_matrix, 1e-9 * largest)


class ClassIterate:
    """Iterate of one sector: X, R and the search directions so far.

    Parameters
    ----------
    incident : complex (n_wave, n_row)
        Right-hand sides B; left untouched.
    """

    def __init__(self, incident: NDArray) -> None:
        self.incident = incident
        self.residual = incident.copy()
        self._fields = np.zeros_like(incident)
        self._directions: list[NDArray] = []
        self._images: list[NDArray] = []
        # Searched directions V' = M V are never formed: only their combinations are kept.
        self._combinations: list[list[NDArray]] = []
        self._coefficients: list[NDArray | None] = []
        self._products: tuple[NDArray, NDArray] | None = None

    @property
    def fields(self) -> NDArray:
        """X, complex (n_wave, n_row)."""
        for j, direction in enumerate(self._directions):
            coefficient = self._coefficients[j]
            if coefficient is not None:
                self._fields += coefficient.astype(direction.dtype) @ direction
                self._coefficients[j] = None
        return self._fields

    @fields.setter
    def fields(self, value: NDArray) -> None:
        self._fields = value
        self._coefficients = [None] * len(self._directions)
        self._products = None

    def residual_products(self) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
        """``R R^H``, whose trace is the squared norm, and ``R R^T``, the error to come."""
        if self._products is None:
            self._products = both_products(self.residual)
        return self._products

    def propose(self, threshold: float) -> NDArray:
        """Significant directions of the residual, orthonormal rows, (k, n_row), k >= 0."""
        combine = significant_rows(self.residual_products()[0], threshold)
        return combine.astype(self.residual.dtype) @ self.residual

    def propose_start(self, start: NDArray, threshold: float) -> NDArray:
        """Rows of a start combined as the significant directions of B are (before any step)."""
        combine = significant_rows(self.residual_products()[0], threshold)
        return combine.astype(start.dtype) @ start

    def shortfall(self, wanted: NDArray, images: NDArray) -> tuple[float, float]:
        """Norm of B, in the span of the rows `wanted`, that the rows `images` miss, and of all.

        Each direction counts with the strength it has in B: one that hardly occurs there may
        be wrong altogether without harm.
        """
        strength = np.linalg.norm(self.incident @ wanted.conj().T, axis=0)
        missed = np.linalg.norm(wanted - images, axis=1)
        return float(np.linalg.norm(strength * missed)), float(np.linalg.norm(strength))

    def take(self, directions: NDArray, images: NDArray) -> None:
        """Minimize the residual over the new directions as well.

        Parameters
        ----------
        directions, images : complex (k, n_row)
            V and A V.
        """
        if not len(directions):
            return
        y = images
        # Combinations of the directions of every step that have y as their images.
        combined = [np.zeros((len(y), len(v)), dtype=np.complex128) for v in self._directions]
        for old_y, old in zip(self._images, self._combinations, strict=True):
            overlap = y @ old_y.conj().T
            y = y - overlap @ old_y
            for j, part in enumerate(old):
                combined[j] -= overlap @ part
        combine = _orthonormal(gram(y))
        y = combine.astype(y.dtype) @ y
        combined = [combine @ part for part in combined] + [combine]
        coefficients = self.residual @ y.conj().T
        self.residual -= coefficients @ y
        self._directions.append(directions)
        self._images.append(y)
        self._combinations.append(combined)
        self._coefficients.append(None)
        for j, part in enumerate(combined):
            kept = self._coefficients[j]
            added = coefficients @ part
            self._coefficients[j] = added if kept is None else kept + added
        self._products = None

    def amplitudes(self) -> tuple[NDArray, NDArray]:
        """Stationary amplitudes and the leading term of their error.

        ``S = B^T X + X^T B - X^T A X`` (here written with R) has the error
        ``R^T A^-1 R``, whose leading term ``R^T R`` is returned beside it: added to S it
        makes the error smaller still, and its size is an estimate of the error of S.

        Returns
        -------
        stationary, remainder : complex128 (n_wave, n_wave), both symmetric
        """
        mixed = (self.incident @ self.fields.T + self.fields @ self.residual.T).astype(
            np.complex128
        )
        return 0.5 * (mixed + mixed.T), self.residual_products()[1]

    def relative_residual(self) -> float:
        """Norm of the residual block over the norm of the incident block."""
        total = float(np.linalg.norm(self.incident))
        return float(np.linalg.norm(self.residual)) / total if total else 0.0

    def release(self) -> None:
        """Forget the search directions; X and R stay."""
        self._fields = self.fields
        self._directions.clear()
        self._images.clear()
        self._combinations.clear()
        self._coefficients.clear()
