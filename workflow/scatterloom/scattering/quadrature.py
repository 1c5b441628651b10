"""Integrals over the scattering angle from values on a table's angle grid."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]


def angle_weights(angles_deg: ArrayLike) -> FloatArray:
    """Weights of ``int f(theta) sin(theta) dtheta`` on a grid from 0 to 180 degrees.

    An evenly spaced grid gets the rule of Clenshaw & Curtis 1960 (its nodes are
    evenly spaced in angle), exact for series up to the degree n_angle - 1. Any other
    grid gets the integral of sin(theta) times the piecewise-linear interpolant.

    Parameters
    ----------
    angles_deg : float64 (n_angle,)
        Increasing angles [deg], the first 0 and the last 180.

    Returns
    -------
    float64 (n_angle,)
        Weights; they sum to 2.

    Raises
    ------
    ValueError
        If the grid does not run from 0 to 180 degrees in increasing order.
    """
    angles = np.asarray(angles_deg, dtype=np.float64)
    if angles.size < 2 or angles[0] != 0.0 or angles[-1] != 180.0 or np.any(np.diff(angles) <= 0):
        raise ValueError("the angle grid must increase from 0 to 180 degrees")
    t = np.deg2rad(angles)
    if np.allclose(np.diff(angles), 180.0 / (angles.size - 1), rtol=1e-9):
        return _clenshaw_curtis(angles.size)
    # int sin(t) (t - t0) dt over a step, and its mirror image, give the two hat functions.
    step = np.diff(t)
    rise = (np.sin(t[1:]) - np.sin(t[:-1])) / step - np.cos(t[1:])
    fall = np.cos(t[:-1]) - (np.sin(t[1:]) - np.sin(t[:-1])) / step
    weight = np.zeros(angles.size)
    weight[1:] += rise
    weight[:-1] += fall
    return weight


def _clenshaw_curtis(count: int) -> FloatArray:
    last = count - 1
    k = np.arange(count)
    degree = np.arange(0, last + 1, 2)
    moment = 2.0 / (1.0 - degree.astype(float) ** 2)  # int T_n(x) dx for even n
    half = np.where((degree == 0) | (degree == last), 0.5, 1.0)
    weight = 2.0 / last * (np.cos(np.pi * np.outer(k, degree) / last) @ (half * moment))
    weight[[0, -1]] *= 0.5
    return weight


def angle_integral(values: ArrayLike, angles_deg: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Integral ``int f(theta) sin(theta) dtheta`` over the sphere's angles and its error.

    Parameters
    ----------
    values : float64 (..., n_angle)
        Integrand on the grid.
    angles_deg : float64 (n_angle,)
        Increasing angles [deg] from 0 to 180.

    Returns
    -------
    integral, error : float64 (...)
        The error is the change against every other angle; where the count of angles
        is even, the last step of that coarser grid is a single one.
    """
    f = np.asarray(values, dtype=np.float64)
    angles = np.asarray(angles_deg, dtype=np.float64)
    keep = np.unique(np.append(np.arange(0, angles.size, 2), angles.size - 1))
    fine = f @ angle_weights(angles)
    coarse = f[..., keep] @ angle_weights(angles[keep])
    return fine, np.abs(fine - coarse)
