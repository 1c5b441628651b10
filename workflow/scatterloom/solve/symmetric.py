"""Conjugate orthogonal conjugate residuals: one product a step, four vectors kept.

For the complex symmetric lattice matrix this short recurrence (Sogabe & Zhang 2007, J. Comput.
Appl. Math. 199, 297, algorithm 2; from memory) takes the place of minimal residuals over all
steps where their directions would not fit into memory.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numba import njit, prange
from numpy.typing import NDArray


@njit(cache=True, parallel=True)
def _symmetric(left, right):  # type: ignore[no-untyped-def]
    """Sum of left * right without conjugation, in double precision."""
    a, b = left.ravel(), right.ravel()
    real, imaginary = 0.0, 0.0
    for i in prange(a.size):
        product = np.complex128(a[i]) * np.complex128(b[i])
        real += product.real
        imaginary += product.imag
    return complex(real, imaginary)


@njit(cache=True, parallel=True)
def _square(left):  # type: ignore[no-untyped-def]
    a = left.ravel()
    total = 0.0
    for i in prange(a.size):
        total += np.float64(a[i].real) ** 2 + np.float64(a[i].imag) ** 2
    return total


@njit(cache=True, parallel=True)
def _add(target, factor, source):  # type: ignore[no-untyped-def]
    """target += factor * source, in place."""
    a, b = target.ravel(), source.ravel()
    for i in prange(a.size):
        a[i] += factor * b[i]


@njit(cache=True, parallel=True)
def _add_to_multiple(target, factor, source):  # type: ignore[no-untyped-def]
    """target = source + factor * target, in place."""
    a, b = target.ravel(), source.ravel()
    for i in prange(a.size):
        a[i] = b[i] + factor * a[i]


VECTORS = 6
"""Vectors held while solving: right side, iterate, residual, its image, direction, its image."""


@dataclass
class Iterate:
    """State of a solve, all that is needed to go on with it.

    Attributes
    ----------
    fields : complex (n_class, 3, n_cell)
    residual : float
        Relative residual norm, updated with the iterate.
    products : int
        Products used so far, the one for the start included.
    start_residual : float
        Relative residual of the start.
    converged : bool
    """

    fields: NDArray
    residual: float
    products: int
    start_residual: float
    converged: bool


def solve_symmetric(
    multiply: Callable[[NDArray], NDArray],
    incident: NDArray,
    tolerance: float,
    start: NDArray | None = None,
    max_products: int = 2000,
    progress: Callable[[Iterate], None] | None = None,
) -> Iterate:
    """Solve ``A x = b`` for a complex symmetric A.

    Parameters
    ----------
    multiply : callable
        A times a vector of the shape of `incident`, a new array.
    incident : complex (n_class, 3, n_cell)
        The right side b; left untouched.
    tolerance : float
        Relative residual norm asked for.
    start : like `incident`, optional
        A first x; overwritten. None is the zero start.
    max_products : int
    progress : callable(iterate), optional
        Called after every step; the iterate's arrays go on changing.

    Returns
    -------
    Iterate
        `converged` is False if `max_products` were used up, or the recurrence broke down.

    Raises
    ------
    ValueError
        If the tolerance is not positive, or the right side vanishes.
    """
    if not tolerance > 0.0:
        raise ValueError(f"tolerance is {tolerance}, must be positive")
    total = float(np.sqrt(_square(incident)))
    if not total > 0.0:
        raise ValueError("the incident field vanishes on the particle")
    products = 0
    if start is None:
        fields, residual = np.zeros_like(incident), incident.copy()
    else:
        fields, residual = start, incident.copy()
        _add(residual, residual.dtype.type(-1.0), multiply(fields))
        products = 1
    first = float(np.sqrt(_square(residual))) / total
    state = Iterate(fields, first, products, first, first <= tolerance)
    if state.converged:
        return state
    image = multiply(residual)
    state.products += 1
    direction, step = residual.copy(), image.copy()
    rho = _symmetric(residual, image)
    kind = incident.dtype.type
    while state.products < max_products:
        size = _symmetric(step, step)
        if size == 0.0 or rho == 0.0:
            break
        alpha = rho / size
        _add(fields, kind(alpha), direction)
        _add(residual, kind(-alpha), step)
        state.residual = float(np.sqrt(_square(residual))) / total
        if progress is not None:
            progress(state)
        if not np.isfinite(state.residual) or state.residual <= tolerance:
            break
        image = multiply(residual)
        state.products += 1
        following = _symmetric(residual, image)
        beta = following / rho
        rho = following
        _add_to_multiple(direction, kind(beta), residual)
        _add_to_multiple(step, kind(beta), image)
    state.converged = bool(state.residual <= tolerance)
    return state
