"""Clusters of equal spheres with a seed, radius 1: to a fractal law, ballistic, or packed."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from scatterloom.solids.seeds import generator, random_direction, random_rotation

Floats = NDArray[np.float64]

_SLACK = 1e-9
"""How much nearer than touching centres may be: rounding."""

_TRIES = 400
_BEGINNINGS = 25
_BY_ONE = 6
"""Clusters up to this many spheres grow one by one."""


def radius_of_gyration(centres: Floats) -> float:
    """Root mean square distance of the centres from their mean, in radii of a sphere."""
    return math.sqrt(float(np.mean(np.sum((centres - centres.mean(axis=0)) ** 2, axis=1))))


def fractal_cluster(count: int, dimension: float, prefactor: float, seed: int) -> Floats:
    """Centres of touching spheres with N = k_f (R_g / a)^D_f, float64 (count, 3).

    Clusters are put together two by two, each union at the distance of the centres of mass that
    gives the law for its own number (a tunable cluster-cluster scheme after Filippov, Zurita &
    Rosner 2000, J. Colloid Interface Sci. 229, 261, from memory). R_g is that of the centres.
    The law holds for every union of three spheres and more; two that touch have no choice.

    Raises
    ------
    ValueError
        If no cluster that keeps the law can be put together.
    """
    rng = generator(seed)

    def law(number: int) -> float:
        return (number / prefactor) ** (1.0 / dimension)

    for number in range(3, count + 1):
        # from the closest three to a straight chain
        least = 2.0 / math.sqrt(3.0)
        most = math.sqrt((number**2 - 1) / 3.0)
        if not least <= law(number) <= most:
            raise ValueError(
                f"D_f = {dimension:g} and k_f = {prefactor:g} ask {number} touching spheres for a "
                f"radius of gyration of {law(number):.4g} radii, possible are {least:.4g} to "
                f"{most:.4g}"
            )
    for _ in range(_BEGINNINGS):
        grown = _grow(count, law, rng)
        if grown is not None:
            return grown - grown.mean(axis=0)
    raise ValueError(
        f"no cluster of {count} touching spheres with D_f = {dimension:g} and "
        f"k_f = {prefactor:g} could be put together"
    )


def _grow(count, law, rng) -> Floats | None:  # type: ignore[no-untyped-def]
    if count == 1:
        return np.zeros((1, 3))
    first = count - 1 if count <= _BY_ONE else (count + 1) // 2
    one, other = _grow(first, law, rng), _grow(count - first, law, rng)
    if one is None or other is None:
        return None
    if count == 2:
        return np.array([[0.0, 0.0, -1.0], [0.0, 0.0, 1.0]])
    n, m = len(one), len(other)
    square = count * law(count) ** 2
    square -= n * radius_of_gyration(one) ** 2 + m * radius_of_gyration(other) ** 2
    square *= count / (n * m)
    if square <= 0.0:
        return None
    for _ in range(_TRIES):
        joined = _touching(one, other @ random_rotation(rng).T, math.sqrt(square), rng)
        if joined is not None:
            return joined - joined.mean(axis=0)
    return None


def _touching(one: Floats, other: Floats, apart: float, rng: np.random.Generator) -> Floats | None:
    """Two clusters so far apart, the second led around the first until they touch."""
    along, turn = random_direction(rng), random_direction(rng)
    across = np.cross(along, turn)
    across /= np.linalg.norm(across)
    # |w + s|^2 = 4 with w between two spheres and s = apart (cos t along + sin t across)
    w = (other[None, :] - one[:, None]).reshape(-1, 3)
    a, b = 2.0 * apart * (w @ along), 2.0 * apart * (w @ across)
    c = 4.0 - np.sum(w**2, axis=1) - apart**2
    size = np.hypot(a, b)
    real = np.abs(c) < size
    middle = np.arctan2(b[real], a[real])
    half = np.arccos(c[real] / size[real])
    angles = np.sort(np.concatenate([middle - half, middle + half]) % (2.0 * math.pi))
    for angle in angles:
        shift = apart * (math.cos(angle) * along + math.sin(angle) * across)
        if np.sum((w + shift) ** 2, axis=1).min() > (2.0 - _SLACK) ** 2:
            return np.concatenate([one, other + shift])
    return None


def ballistic_cluster(count: int, seed: int) -> Floats:
    """Spheres that arrive one by one on random straight lines and stick where they touch.

    Ballistic particle-cluster aggregation; all directions and all lines that can hit alike.

    Returns
    -------
    float64 (count, 3)
    """
    rng = generator(seed)
    centres = np.zeros((1, 3))
    while len(centres) < count:
        frame = random_rotation(rng)
        reach = np.linalg.norm(centres, axis=1).max() + 2.0
        radius, angle = reach * math.sqrt(rng.uniform()), rng.uniform(0.0, 2.0 * math.pi)
        start = frame @ np.array([radius * math.cos(angle), radius * math.sin(angle), 0.0])
        line = frame[:, 2]
        away = centres - start
        depth = away @ line
        square = 4.0 - (np.sum(away**2, axis=1) - depth**2)
        if square.max() <= 0.0:
            continue
        # coming from +line: the highest place where it touches
        hit = square > 0.0
        height = (depth[hit] + np.sqrt(square[hit])).max()
        centres = np.concatenate([centres, [start + height * line]])
        centres -= centres.mean(axis=0)
    return centres


def packed_cluster(count: int, seed: int) -> Floats:
    """Spheres packed about a centre: each rolls into one of the pockets nearest to it.

    Serial deposition under a central force (Bennett 1972, J. Appl. Phys. 43, 2727, from memory):
    three spheres touch, and every further one touches three that lie already. Of the
    four nearest pockets one is chosen at random, so that every seed makes another body.

    Returns
    -------
    float64 (count, 3)
    """
    rng = generator(seed)
    angle = 2.0 * math.pi * np.arange(3) / 3.0
    ring = np.stack([np.cos(angle), np.sin(angle), 0.0 * angle], axis=1) * 2.0 / math.sqrt(3.0)
    centres = ring[:count] if count > 1 else np.zeros((1, 3))
    pockets = _pockets(centres, 2) if count > 3 else np.zeros((0, 3))
    while len(centres) < count:
        order = np.argsort(np.round(np.linalg.norm(pockets, axis=1), 9), kind="stable")
        chosen = pockets[order[int(rng.integers(min(4, len(order))))]]
        centres = np.concatenate([centres, [chosen]])
        pockets = np.concatenate([pockets, _pockets(centres, len(centres) - 1)])
        near = np.linalg.norm(pockets[:, None] - centres, axis=2).min(axis=1)
        pockets = pockets[near > 2.0 - _SLACK]
    return centres - centres.mean(axis=0)


def _pockets(centres: Floats, newest: int) -> Floats:
    """Free places that touch the newest sphere and two others, float64 (n, 3)."""
    p = centres[newest]
    near = np.flatnonzero(np.linalg.norm(centres - p, axis=1) < 4.0)
    near = near[near != newest]
    found = []
    for a in range(len(near)):
        for b in range(a):
            u, v = centres[near[a]] - p, centres[near[b]] - p
            normal = np.cross(u, v)
            square = float(normal @ normal)
            if square < 1e-12:
                continue
            # centre of the circle through the three centres
            middle = (np.cross(normal, u) * (v @ v) - np.cross(normal, v) * (u @ u)) / (2 * square)
            height = 4.0 - float(middle @ middle)
            if height > 0.0:
                rise = math.sqrt(height / square) * normal
                found += [p + middle + rise, p + middle - rise]
    return np.array(found).reshape(-1, 3)
