"""Sizes of chunks and shards.

A chunk is what a reader decompresses, a shard is a file and the unit of writing.
Both grow from the last dimension backwards, so that angles and matrix elements of
a case stay together and a small variable is a single chunk.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence

CHUNK_BYTES = 2 << 20
SHARD_BYTES = 64 << 20

Region = tuple[slice, ...]


def _grow(shape: Sequence[int], unit: Sequence[int], item_bytes: int, target: int) -> list[int]:
    """Grow a box by multiples of `unit`, last dimension first, up to `target` bytes."""
    box = list(unit)
    for axis in reversed(range(len(shape))):
        room = target // (item_bytes * math.prod(box))
        whole = -(-shape[axis] // unit[axis])
        if room >= whole:
            box[axis] = unit[axis] * whole
            continue
        parts = -(-whole // max(1, room))
        # Equal parts: a last one much smaller than the others would waste a file.
        box[axis] = unit[axis] * -(-whole // parts)
        break
    return box


def layout(
    shape: Sequence[int],
    item_bytes: int,
    chunk_bytes: int = CHUNK_BYTES,
    shard_bytes: int = SHARD_BYTES,
) -> tuple[tuple[int, ...], tuple[int, ...] | None]:
    """Choose chunk and shard shapes of an array.

    Parameters
    ----------
    shape : sequence of int
        All positive.
    item_bytes : int
        Bytes of one element.
    chunk_bytes, shard_bytes : int
        Uncompressed sizes not to be exceeded (unless one element alone exceeds them).

    Returns
    -------
    chunk : tuple of int
    shard : tuple of int or None
        A multiple of `chunk` on every axis; None if one chunk holds the whole array.
    """
    chunk = _grow(shape, [1] * len(shape), item_bytes, chunk_bytes)
    if all(c >= s for c, s in zip(chunk, shape, strict=True)):
        return tuple(chunk), None
    shard = _grow(shape, chunk, item_bytes, shard_bytes)
    return tuple(chunk), tuple(shard)


def regions(shape: Sequence[int], unit: Sequence[int]) -> Iterator[Region]:
    """Yield the box of every shard, in storage order, cut at the edge of the array."""
    counts = [-(-s // u) for s, u in zip(shape, unit, strict=True)]
    for flat in range(math.prod(counts)):
        corner = []
        for count in reversed(counts):
            flat, position = divmod(flat, count)
            corner.append(position)
        yield tuple(
            slice(p * u, min((p + 1) * u, s))
            for p, u, s in zip(reversed(corner), unit, shape, strict=True)
        )


def is_aligned(region: Region, shape: Sequence[int], unit: Sequence[int]) -> bool:
    """Tell whether `region` covers exactly one whole shard."""
    return all(
        r.step in (None, 1) and r.start % u == 0 and r.stop == min(r.start + u, s)
        for r, s, u in zip(region, shape, unit, strict=True)
    )
