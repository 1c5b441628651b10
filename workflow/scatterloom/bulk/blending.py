"""Linear interpolation between scattered points of the plane, with errors by leaving out."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import Delaunay, QhullError

FloatArray = NDArray[np.float64]

_SAME = 1e-9


def blend(points: FloatArray, target: FloatArray) -> FloatArray | None:
    """Weights of the points around a target.

    Parameters
    ----------
    points : float64 (n_point, 2)
    target : float64 (2,)

    Returns
    -------
    float64 (n_point,) or None
        At most three are not zero; they sum to 1. None outside the points.
    """
    weights = np.zeros(len(points))
    apart = np.linalg.norm(points - target, axis=1)
    nearest = int(np.argmin(apart))
    if apart[nearest] <= _SAME:
        weights[nearest] = 1.0
        return weights
    if len(points) < 2:
        return None
    span = points - points.mean(axis=0)
    direction = np.linalg.svd(span, full_matrices=False)[2][0]
    if np.abs(span - np.outer(span @ direction, direction)).max() <= _SAME:
        return _on_line(points, target, direction)
    try:
        # The plane of n and k is stretched to a square: both may differ by orders.
        scale = np.ptp(points, axis=0)
        mesh = Delaunay(points / scale)
    except QhullError:
        return None
    triangle = int(mesh.find_simplex(target / scale))
    if triangle < 0:
        return None
    base = mesh.transform[triangle]
    two = base[:2] @ (target / scale - base[2])
    weights[mesh.simplices[triangle]] = [*two, 1.0 - two.sum()]
    weights[np.abs(weights) < _SAME] = 0.0
    return weights


def _on_line(points: FloatArray, target: FloatArray, direction: FloatArray) -> FloatArray | None:
    origin = points[0]
    if np.abs(target - origin - (target - origin) @ direction * direction).max() > _SAME:
        return None
    t, at = (points - origin) @ direction, float((target - origin) @ direction)
    order = np.argsort(t)
    right = int(np.searchsorted(t[order], at))
    if not 0 < right < t.size:
        return None
    low, high = order[right - 1], order[right]
    weights = np.zeros(len(points))
    weights[high] = (at - t[low]) / (t[high] - t[low])
    weights[low] = 1.0 - weights[high]
    return weights


def left_out_error(
    points: FloatArray, weights: FloatArray, values: Mapping[int, FloatArray]
) -> FloatArray:
    """Error of a linear interpolation, estimated by leaving out the points it used.

    Parameters
    ----------
    points : float64 (n_point, 2)
    weights : float64 (n_point,)
        As `blend` returned them.
    values : mapping of int to float64 (...)
        At the points, all of them if more than one has a weight.

    Returns
    -------
    float64 (...)
        The largest miss at a point that is predicted, linearly, from the nearest others; half
        of the spread of the points used where the others say nothing about a direction;
        zero if only one point is used.
    """
    used = np.flatnonzero(weights)
    if used.size == 1:
        return np.zeros_like(np.asarray(values[int(used[0])]))
    near = np.stack([values[int(j)] for j in used])
    half_spread = 0.5 * (near.max(axis=0) - near.min(axis=0))
    span = np.where(np.ptp(points, axis=0) > _SAME, np.ptp(points, axis=0), 1.0)
    scaled = points / span
    missed = []
    for j in used:
        order = np.argsort(np.linalg.norm(scaled - scaled[j], axis=1), kind="stable")[1:]
        predicting = _predictor(scaled, int(j), order, dimensions=used.size - 1)
        if predicting is None:
            return half_spread
        predicted = sum(a * values[o] for o, a in predicting.items())
        missed.append(np.abs(values[int(j)] - predicted))
    return np.asarray(np.max(missed, axis=0))


def _predictor(
    points: FloatArray, j: int, order: NDArray[np.intp], dimensions: int
) -> dict[int, float] | None:
    """Weights of the nearest points whose plane (or line) reaches point j."""
    for count in range(dimensions + 1, order.size + 1):
        chosen = order[:count]
        affine = np.vstack([points[chosen].T, np.ones(count)])
        target = np.append(points[j], 1.0)
        solution, *_ = np.linalg.lstsq(affine, target, rcond=None)
        if np.abs(affine @ solution - target).max() < 1e-6:
            return {int(o): float(a) for o, a in zip(chosen, solution, strict=True)}
    return None
