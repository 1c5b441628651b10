"""Starts from the solved fields of neighbouring sizes.

On one lattice the fields of neighbouring sizes live on the same cells, and in the
vector-wave basis they vary slowly with size but for resonances, poles at complex sizes that
all cells share. They are interpolated cell by cell by a rational function of the size
parameter, one denominator for every wave. The solver recombines the rows of the start by
minimal residuals, so the start need only span the solution, not hit it.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol, TypeVar

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class StoredFields:
    """Solved fields of one size on one lattice, per unit norm of the incident waves.

    Attributes
    ----------
    size_parameter : float
    rows : list of complex (n_wave_of_sector, n_row_of_sector)
        For each sector of the lattice; waves in the order of the basis.
    """

    size_parameter: float
    rows: list[NDArray]


def lagrange_weights(nodes: Sequence[float], x: float) -> NDArray[np.float64]:
    """Weights of the interpolating polynomial through `nodes`, evaluated at `x`."""
    at = np.asarray(nodes, dtype=np.float64)
    weights = np.ones_like(at)
    for i in range(len(at)):
        others = np.delete(at, i)
        weights[i] = np.prod((x - others) / (at[i] - others))
    return weights


_FAITH = 1e-3
"""Relative error that the solved fields may have: smaller departures from a polynomial are noise.

Measured with 0 to 0.01 the starts are the same; without it, anchors closer than their errors
tell would leave the denominator open.
"""

_LARGEST_WEIGHT = 30.0
"""A denominator with a root so near that weights become larger than this is not believed."""


def rational_weights(
    nodes: Sequence[float], x: float, products: NDArray[np.complex128]
) -> NDArray[np.complex128]:
    """Weights at `x` of the rational interpolant of every row, its denominator from the data.

    In barycentric form, sum of v_j X_j/(x - x_j) over sum of v_j/(x - x_j), any v
    interpolates. Minimal rational interpolation (Pradovera 2020, SIAM J. Numer. Anal. 58,
    2265) takes the v that makes the sum of v_j X_j smallest, which finds the poles that all
    entries of X share; here among the v close to those of the polynomial.

    Parameters
    ----------
    nodes : n_node sizes, all different
    x : float
    products : complex128 (n_row, n_node, n_node)
        Products of the values at the nodes, ``sum X_i conj(X_j)``.

    Returns
    -------
    complex128 (n_row, n_node)
    """
    at = np.asarray(nodes, dtype=np.float64)
    polynomial = lagrange_weights(nodes, x)
    count = len(at)
    if count == 1 or np.any(at == x):
        return np.broadcast_to(polynomial.astype(np.complex128), (len(products), count))
    flat = polynomial * (x - at)
    flat = flat / np.linalg.norm(flat)
    # Departures from it: orthogonal to it, and of no use unless they lessen the sum.
    others = np.linalg.svd(flat[None, :])[2][1:]
    squares = products.conj()
    noise = _FAITH**2 * np.trace(products, axis1=1, axis2=2).real / count
    noise = np.where(noise > 0.0, noise, 1.0)
    system = others @ squares @ others.T + noise[:, None, None] * np.eye(count - 1)
    departure = np.linalg.solve(system, -(others @ (squares @ flat)[..., None]))[..., 0]
    shares = (flat + departure @ others) / (x - at)
    weights = shares / shares.sum(axis=1, keepdims=True)
    near = ~(np.abs(weights).max(axis=1) < _LARGEST_WEIGHT)
    weights[near] = polynomial
    return weights


def interpolated_start(
    neighbours: Sequence[StoredFields], size_parameter: float
) -> Callable[[list[NDArray[np.float64]]], list[NDArray] | None]:
    """A start for `size_parameter` from fields solved at other sizes on the same lattice.

    Neighbours may be truncated at different degrees; a wave is interpolated
    between those that have it and starts from zero if none has (the basis lists waves by
    ascending degree, so shared waves come first).

    Returns
    -------
    callable(norms) -> list of complex (n_wave_of_sector, n_row_of_sector)

    Raises
    ------
    ValueError
        If there is no neighbour.
    """
    if not neighbours:
        raise ValueError("a start needs at least one solved neighbour")

    def start(norms: list[NDArray[np.float64]]) -> list[NDArray]:
        out = []
        for c, norm in enumerate(norms):
            kept = neighbours[0].rows[c]
            rows = np.zeros((len(norm), kept.shape[1]), kept.dtype)
            first = 0
            for last in sorted({min(len(norm), len(n.rows[c])) for n in neighbours}):
                having = [n for n in neighbours if len(n.rows[c]) >= last]
                solved = np.stack([n.rows[c][first:last] for n in having], axis=1)
                products = (solved @ solved.conj().transpose(0, 2, 1)).astype(np.complex128)
                nodes = [n.size_parameter for n in having]
                weights = rational_weights(nodes, size_parameter, products)
                weights = weights * norm[first:last, None]
                rows[first:last] = (weights[:, None, :].astype(kept.dtype) @ solved)[:, 0]
                first = last
            out.append(rows)
        return out

    return start


class _Sized(Protocol):
    @property
    def size_parameter(self) -> float: ...


Solved = TypeVar("Solved", bound=_Sized)


def nearest(solved: Sequence[Solved], size_parameter: float, each_side: int = 2) -> list[Solved]:
    """The nodes to interpolate from: up to `each_side` on either side, ascending in size.

    Where one side has fewer, the other one makes up for it.
    """
    ordered = sorted(solved, key=lambda entry: entry.size_parameter)
    below = sum(entry.size_parameter < size_parameter for entry in ordered)
    first = max(0, min(below - each_side, len(ordered) - 2 * each_side))
    return ordered[first : first + 2 * each_side]
