"""Starts from the solved fields of neighbouring sizes.

On one lattice the fields of neighbouring sizes live on the same cells, and in the
vector-wave basis they vary slowly with size, so they are interpolated cell by cell by a
polynomial in the size parameter. The solver recombines the rows of the start by minimal
residuals, so the start need only span the solution, not hit it.
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
    rows : list of complex (n_wave_of_class, 3 n_cell)
        For each parity class; waves in the order of the basis.
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


def interpolated_start(
    neighbours: Sequence[StoredFields], size_parameter: float
) -> Callable[[list[NDArray[np.float64]]], list[NDArray] | None]:
    """A start for `size_parameter` from fields solved at other sizes on the same lattice.

    Neighbours may be truncated at different degrees; a wave is interpolated
    between those that have it and starts from zero if none has (the basis lists waves by
    ascending degree, so shared waves come first).

    Returns
    -------
    callable(norms) -> list of complex (n_wave_of_class, 3 n_cell)

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
                weights = lagrange_weights([n.size_parameter for n in having], size_parameter)
                for weight, neighbour in zip(weights, having, strict=True):
                    part = neighbour.rows[c][first:last]
                    rows[first:last] += rows.real.dtype.type(weight) * part
                first = last
            rows *= norm[:, None].astype(rows.real.dtype)
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
