"""Chunks nest in shards, shards tile the array, and only whole shards are written."""

from __future__ import annotations

import math

import numpy as np
import pytest
import zarr
from hypothesis import given, settings
from hypothesis import strategies as st

from scatterloom.store import schema
from scatterloom.store.chunks import is_aligned, layout, regions
from scatterloom.store.writer import ShardedArray

shapes = st.lists(st.integers(1, 12), min_size=1, max_size=4)


@settings(deadline=None)
@given(shapes, st.integers(64, 4000), st.integers(1, 20))
def test_shards_tile_the_array_and_hold_whole_chunks(shape, chunk_bytes, times):
    chunk, shard = layout(shape, 8, chunk_bytes, times * chunk_bytes)
    assert 8 * math.prod(chunk) <= chunk_bytes
    unit = shard or chunk
    if shard is None:
        assert chunk == tuple(shape)
    assert all(u % c == 0 for u, c in zip(unit, chunk, strict=True))
    # Equal parts may round a shard up by less than one chunk on the axis that is cut.
    assert 8 * math.prod(unit) <= 2 * times * chunk_bytes
    covered = np.zeros(shape, int)
    for region in regions(shape, unit):
        assert is_aligned(region, shape, unit)
        covered[region] += 1
    assert (covered == 1).all()


@pytest.mark.parametrize(
    ("shape", "chunk", "shard"),
    [
        # Two particles, two wavelengths, 150 sizes at 181 angles: half a row is a chunk.
        ((2, 2, 150, 181, 4, 4), (1, 1, 75, 181, 4, 4), (2, 2, 150, 181, 4, 4)),
        # A million cases: 500 files of up to 64 MB.
        ((10, 100, 1000, 181, 4, 4), (1, 1, 84, 181, 4, 4), (1, 2, 1008, 181, 4, 4)),
        ((5,), (5,), None),
    ],
)
def test_layouts_of_real_tables(shape, chunk, shard):
    assert layout(shape, 8) == (chunk, shard)


def small_array(tmp_path) -> ShardedArray:
    variable = schema.Variable("v", ("size",), "f8", "a variable")
    array = ShardedArray(zarr.open_group(tmp_path / "g", mode="w"), variable, (10,))
    array.unit = (4,)
    return array


@pytest.mark.parametrize("bad", [slice(0, 3), slice(2, 6), slice(0, 8), slice(0, 4, 2)])
def test_a_write_of_anything_but_one_whole_shard_is_refused(tmp_path, bad):
    array = small_array(tmp_path)
    with pytest.raises(AssertionError, match="not one whole shard"):
        array.write((bad,), np.zeros(len(range(10)[bad])))


def test_a_second_writer_of_a_shard_is_refused(tmp_path):
    array = small_array(tmp_path)
    array.write((slice(8, 10),), np.zeros(2))
    with pytest.raises(AssertionError, match="written twice"):
        array.write((slice(8, 10),), np.zeros(2))
