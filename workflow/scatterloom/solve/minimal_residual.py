"""Block minimal residuals with rank-reduced residuals, for one sector.

Vectors are rows and carry their physical norm. For the incident block B (n_wave rows)
a sector holds the iterate X, its residual ``R = B - A X``, directions V and orthonormal
images ``Y = A M V`` with small matrices M. Two invariants hold throughout, to rounding:
``R = B - A X``, and R is orthogonal to every Y kept.

A direction of the residual of norm s changes the amplitudes by about s^2, so all
directions with s^2 below the error allowed are left out. First, of B itself: the waves are
turned (a unitary frame F) so that the rows of ``F B`` are orthogonal; only the strong ones
are iterated on, the others keep X = 0 and enter the amplitudes to first order. Then, in
every step, the next block of directions is the significant part of the residual. A zero
start begins with the strong rows of F B themselves, a start from neighbouring sizes with its
own rows, turned likewise.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.linalg.blas import get_blas_funcs

from scatterloom.solve.spill import add_rows, overlap

_INDEPENDENT = 1e-3
"""Least share of a row, squared, not in the span of the others, for a Cholesky factor to do."""


def gram(block: NDArray) -> NDArray[np.complex128]:
    """Hermitian Gram matrix of the rows of a block."""
    (rank_update,) = get_blas_funcs(("herk",), (block,))
    # Rows are columns in the order of the library, which fills one triangle alone.
    lower = rank_update(1.0, block.T, trans=2).T.astype(np.complex128)
    return lower + np.tril(lower, -1).conj().T


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
    keep : callable(block) -> block, optional
        Where directions and images are kept; in memory if missing (see `Spill`).
    """

    def __init__(self, incident: NDArray, keep: Callable[[NDArray], NDArray] | None = None) -> None:
        self.incident = incident
        self._keep = keep or (lambda block: block)
        hermitian, symmetric = both_products(incident)
        value, vector = np.linalg.eigh(hermitian)
        # Strongest first.
        self._strength = np.maximum(value[::-1], 0.0)
        self._frame = vector[:, ::-1].conj().T
        self._symmetric = self._frame @ symmetric @ self._frame.T
        self._turned = incident[:0].copy()
        self._rest = incident[:0].copy()
        self._fields = incident[:0].copy()
        self._directions: list[NDArray] = []
        self._images: list[NDArray] = []
        # Searched directions V' = M V are never formed: only their combinations are kept.
        self._combinations: list[list[NDArray]] = []
        self._coefficients: list[NDArray | None] = []
        self._products: tuple[NDArray, NDArray] | None = None

    @property
    def strong(self) -> int:
        """Rows of F B that are iterated on."""
        return len(self._rest)

    def _solved(self) -> NDArray:
        """X of the strong rows, complex (n_strong, n_row)."""
        for j, direction in enumerate(self._directions):
            coefficient = self._coefficients[j]
            if coefficient is not None:
                add_rows(self._fields, coefficient.astype(direction.dtype), direction)
                self._coefficients[j] = None
        return self._fields

    @property
    def fields(self) -> NDArray:
        """X, complex (n_wave, n_row)."""
        return self._unturned(self._solved())

    @property
    def residual(self) -> NDArray:
        """R, complex (n_wave, n_row)."""
        return self.incident + self._unturned(self._rest - self._turned)

    def corrected_fields(self) -> NDArray:
        """X + R, complex (n_wave, n_row)."""
        return self.incident + self._unturned(self._solved() + self._rest - self._turned)

    def _unturned(self, rows: NDArray) -> NDArray:
        frame = self._frame[: len(rows)].conj().T
        return np.ascontiguousarray(frame).astype(rows.dtype) @ rows

    def admit(self, threshold: float) -> None:
        """Iterate on all rows of F B whose squared norm exceeds `threshold`."""
        first, last = self.strong, int(np.sum(self._strength > max(threshold, 0.0)))
        if last <= first:
            return
        turned = self._frame[first:last].astype(self._rest.dtype) @ self.incident
        rest = turned.copy()
        solved = self._solved()
        shares = [np.zeros((last, len(v)), dtype=np.complex128) for v in self._directions]
        for y, combined in zip(self._images, self._combinations, strict=True):
            share = overlap(rest, y)
            add_rows(rest, -share, y)
            for kept, part in zip(shares, combined, strict=False):
                kept[first:] += share @ part
        self._coefficients = list(shares)
        self._fields = np.concatenate([solved, np.zeros_like(turned)])
        self._turned = np.concatenate([self._turned, turned])
        self._rest = np.concatenate([self._rest, rest])
        self._products = None
        if not self._images:
            diagonal = np.diag(self._strength[:last]).astype(np.complex128)
            self._products = diagonal, self._symmetric[:last, :last]

    def residual_products(self) -> tuple[NDArray[np.complex128], NDArray[np.complex128]]:
        """``R R^H`` and ``R R^T`` of the strong rows."""
        if self._products is None:
            self._products = both_products(self._rest)
        return self._products

    def squared_residual(self) -> float:
        """Squared norm of the residual block."""
        strong = float(np.trace(self.residual_products()[0]).real)
        return max(strong, 0.0) + float(self._strength[self.strong :].sum())

    def remainder_norm(self, across: float = 0.0) -> float:
        """Frobenius norm of ``R R^T``, the error of the amplitudes to come.

        The part between strong and weak rows, the only one that takes time, is given as
        `across`.
        """
        weak = self._symmetric[self.strong :, self.strong :]
        strong = self.residual_products()[1]
        parts = np.array([np.linalg.norm(strong), np.linalg.norm(weak), across])
        return float(np.linalg.norm(parts))

    def across_bound(self) -> float:
        """At most the norm of ``R R^T`` between strong and weak rows, by Cauchy & Schwarz."""
        strong = np.linalg.norm(self.residual_products()[0])
        return float(np.sqrt(2.0 * strong * np.linalg.norm(self._strength[self.strong :])))

    def across_norm(self) -> float:
        """Norm of ``R R^T`` between strong and weak rows, in both triangles."""
        across = self._frame[self.strong :] @ (self.incident @ self._rest.T)
        return float(np.sqrt(2.0) * np.linalg.norm(across))

    def propose(self, threshold: float) -> NDArray:
        """Significant directions of the residual, orthonormal rows, (k, n_row), k >= 0."""
        self.admit(threshold)
        combine = significant_rows(self.residual_products()[0], threshold)
        return combine.astype(self._rest.dtype) @ self._rest

    def propose_start(self, start: NDArray, threshold: float) -> NDArray:
        """Rows of a start combined as the significant directions of B are (before any step)."""
        self.admit(threshold)
        combine = significant_rows(self.residual_products()[0], threshold)
        return (combine @ self._frame[: self.strong]).astype(start.dtype) @ start

    def shortfall(self, wanted: NDArray, images: NDArray) -> tuple[float, float]:
        """Norm of B, in the span of the rows `wanted`, that the rows `images` miss, and of all.

        Each direction counts with the strength it has in B: one that hardly occurs there may
        be wrong altogether without harm.
        """
        strength = np.linalg.norm(self._turned @ wanted.conj().T, axis=0)
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
        y = images.copy() if self._images else images
        # Combinations of the directions of every step that have y as their images.
        combined = [np.zeros((len(y), len(v)), dtype=np.complex128) for v in self._directions]
        for old_y, old in zip(self._images, self._combinations, strict=True):
            shared = overlap(y, old_y)
            add_rows(y, -shared, old_y)
            for j, part in enumerate(old):
                combined[j] -= shared @ part
        combine = _orthonormal(gram(y))
        y = combine.astype(y.dtype) @ y
        combined = [combine @ part for part in combined] + [combine]
        coefficients = self._rest @ y.conj().T
        self._rest -= coefficients @ y
        self._directions.append(self._keep(directions))
        self._images.append(self._keep(y))
        self._combinations.append(combined)
        self._coefficients.append(None)
        for j, part in enumerate(combined):
            kept = self._coefficients[j]
            added = coefficients @ part
            self._coefficients[j] = added if kept is None else kept + added
        self._products = None

    def leading(self, count: int) -> NDArray:
        """Orthonormal directions, at most `count`, of which most of ``R R^T`` is made."""
        remainder = self.residual_products()[1]
        combine = np.linalg.svd(remainder)[0][:, :count].conj().T
        chosen = combine.astype(self._rest.dtype) @ self._rest
        square = gram(chosen)
        kept = significant_rows(square, 1e-6 * float(np.trace(square).real))
        return kept.astype(chosen.dtype) @ chosen

    def strong_amplitudes(self) -> NDArray[np.complex128]:
        """Corrected amplitudes between strong rows, which hold nearly all of their norm."""
        return self._stationary() + self.residual_products()[1]

    def _stationary(self) -> NDArray[np.complex128]:
        mixed = (self._solved() @ (self._turned + self._rest).T).astype(np.complex128)
        return 0.5 * (mixed + mixed.T)

    def amplitudes(self) -> tuple[NDArray, NDArray]:
        """Stationary amplitudes and the leading term of their error.

        ``S = B^T X + X^T B - X^T A X`` (here written with R) has the error
        ``R^T A^-1 R``, whose leading term ``R^T R`` is returned beside it: added to S it
        makes the error smaller still, and its size is an estimate of the error of S. Between
        strong and weak rows it is a small part and already added.

        Returns
        -------
        stationary, remainder : complex128 (n_wave, n_wave), both symmetric
        """
        weak = self._symmetric[self.strong :, self.strong :]
        corrected = self._solved() + self._rest
        across = self._frame[self.strong :] @ (self.incident @ corrected.T)
        return (
            self._in_waves(self._stationary(), across, np.zeros_like(weak)),
            self._in_waves(self.residual_products()[1], np.zeros_like(across), weak),
        )

    def _in_waves(self, strong: NDArray, across: NDArray, weak: NDArray) -> NDArray[np.complex128]:
        """A symmetric matrix between strong and weak rows as one between the waves."""
        turned = np.block([[strong, across.T], [across, weak]])
        out = self._frame.conj().T @ turned @ self._frame.conj()
        return 0.5 * (out + out.T)

    def relative_residual(self) -> float:
        """Norm of the residual block over the norm of the incident block."""
        total = float(self._strength.sum())
        return float(np.sqrt(self.squared_residual() / total)) if total else 0.0

    def release(self) -> None:
        """Forget the search directions; X and R stay."""
        self._fields = self._solved()
        self._directions.clear()
        self._images.clear()
        self._combinations.clear()
        self._coefficients.clear()
