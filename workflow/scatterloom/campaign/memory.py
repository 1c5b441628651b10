"""Predict the memory of a case before it is solved."""

from __future__ import annotations

import math
from collections.abc import Sequence

from scatterloom.campaign import effort

PROGRAM_BYTES = 251 * 2**20
"""The program itself, with its libraries loaded and its kernels compiled."""

_COMPLEX64_BYTES = 8

_COLD_BLOCKS = 9.0
_SPILLED_BLOCKS = 6.0
_NEIGHBOUR_BLOCKS = 0.05
_GRIDS = 0.2
"""Fitted to the peak of every job of the demo (243 to 445 MiB), which they meet within 15 %;
a job that compiles kernels first needs some 50 MiB more that once.

Blocks hold all waves on the finest lattice: incident block, fields, residuals, search
directions and images, waves evaluated in double precision, coarser lattices. A start from
neighbours holds their fields, but fewer search directions than a cold solve. Where search
directions and images are kept on disk, 5.3 blocks were measured (9.5 without). Grids are the
kernel and a padded batch of eight waves.
"""


def case_bytes(
    half_extents: Sequence[float],
    radii: Sequence[float],
    mirror_planes: int,
    size_parameter: float,
    levels: Sequence[int],
    f11_relative: float,
    neighbours: int = 0,
    spilled: bool = False,
) -> int:
    """Return the predicted peak memory of a job while it solves one case [bytes].

    Parameters
    ----------
    half_extents : sequence of 3 float
        In units of the equal-volume-sphere radius.
    radii : sequence of float
        Half extents and circumscribed radius: what sets the truncation.
    mirror_planes : int
        Planes of symmetry; each halves the cells that are stored.
    size_parameter : float
    levels : sequence of int
        Cells across on each lattice.
    f11_relative : float
        Accuracy asked.
    neighbours : int
        Anchors whose fields are held to start from.
    spilled : bool
        Whether search directions and their images are kept on disk.
    """
    order = effort.n_max(radii, size_parameter, f11_relative)
    waves = 2 * order * (order + 2)
    finest = max(levels)
    spacing = 2.0 * max(half_extents) / finest
    block = 3.0 * (4.0 * math.pi / 3.0 / spacing**3) / 2**mirror_planes * waves
    box = math.prod(2.0 * axis / spacing + 1.0 for axis in half_extents)
    held = _SPILLED_BLOCKS if spilled else _COLD_BLOCKS
    blocks = held + _NEIGHBOUR_BLOCKS * neighbours * sum((n / finest) ** 3 for n in levels)
    # The kernel on an octant of the doubled grid, and the padded grids of a batch of waves.
    grids = _GRIDS * (6.0 + 8 * 3 * 2.0) * box
    return round(PROGRAM_BYTES + (blocks * block + grids) * _COMPLEX64_BYTES)


_FLOAT, _COMPLEX64 = 8, 8
_LANES = 8
"""Numbers that lie side by side at every point of the box, for up to two waves."""


def single_bytes(half_extents: Sequence[float], mirror_planes: int, cells_across: int) -> int:
    """Return the predicted peak memory of a single solve on one lattice [bytes].

    Counted from the arrays that are held at once; nothing is fitted.

    Parameters
    ----------
    half_extents : sequence of 3 float
        In units of the equal-volume-sphere radius.
    mirror_planes : int
        Planes of symmetry; each halves the cells whose fields are stored.
    cells_across : int
        Along the longest extent.
    """
    spacing = 2.0 * max(half_extents) / cells_across
    box = [math.ceil(2.0 * half / spacing - 1e-9) for half in half_extents]
    points = math.prod(box)
    cells = 4.0 * math.pi / 3.0 / spacing**3
    own = cells / 2**mirror_planes
    # Indices, fill, normal, area of every cell; tensors, loss, targets and places of own ones.
    held = cells * (12 + 5 * _FLOAT) + own * (
        2 * 6 * _COMPLEX64 + 6 * _FLOAT + 2**mirror_planes * 8 + 3 * _FLOAT + 8
    )
    kernel = 6 * _COMPLEX64 * math.prod(n + 1 for n in box)
    grid = 2 * _LANES * _COMPLEX64 * points
    vector = 3 * _COMPLEX64 * own
    # Two vectors span all classes (incident field, work), two more are in a product; a quarter
    # of the classes is lit by a wave along an axis, and all by one aslant.
    classes = 2**mirror_planes
    vectors = (4 * classes + 7 * max(1, classes // 4)) * vector
    return round(PROGRAM_BYTES + held + kernel + grid + vectors)
