"""Random numbers of a seed, the same on every machine."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def generator(seed: int) -> np.random.Generator:
    """Random numbers by the algorithm PCG64, whatever the library's default is."""
    return np.random.Generator(np.random.PCG64(seed))


def random_direction(rng: np.random.Generator) -> Floats:
    """Unit vector, all directions alike, float64 (3,)."""
    z, angle = rng.uniform(-1.0, 1.0), rng.uniform(0.0, 2.0 * math.pi)
    flat = math.sqrt(1.0 - z * z)
    return np.array([flat * math.cos(angle), flat * math.sin(angle), z])


def random_rotation(rng: np.random.Generator) -> Floats:
    """Rotation, all alike, float64 (3, 3): a unit quaternion (Shoemake 1992, from memory)."""
    u, v, w = rng.uniform(size=3)
    a, b = math.sqrt(1.0 - u), math.sqrt(u)
    q = np.array([a * math.sin(2 * math.pi * v), a * math.cos(2 * math.pi * v),
                  b * math.sin(2 * math.pi * w), b * math.cos(2 * math.pi * w)])  # fmt: skip
    x, y, z, s = q
    return np.array([
        [1 - 2 * (y * y + z * z), 2 * (x * y - s * z), 2 * (x * z + s * y)],
        [2 * (x * y + s * z), 1 - 2 * (x * x + z * z), 2 * (y * z - s * x)],
        [2 * (x * z - s * y), 2 * (y * z + s * x), 1 - 2 * (x * x + y * y)],
    ])  # fmt: skip


def random_in_ball(rng: np.random.Generator) -> Floats:
    """Point of the unit ball, all alike, float64 (3,)."""
    return random_direction(rng) * math.cbrt(rng.uniform())
