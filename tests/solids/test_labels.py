"""Label volumes: cubes counted by hand, and the same bodies as boxes with faces in common."""

import math

import netCDF4
import numpy as np
import pytest
import zarr

from scatterloom.dipole.mixture import particle_tensors
from scatterloom.particle.lattice import lattice
from scatterloom.particle.shapes import from_spec
from scatterloom.solids import kept
from scatterloom.solids.imported import label_arrays
from scatterloom.solids.labels import label_solid, read_labels, separate_parts
from scatterloom.solids.mesh import MEDIUM
from solid_kit import shape_of

TWO = np.zeros((5, 4, 4), dtype=np.int16)
TWO[1:3, 1:3, 1:3] = 1
TWO[3, 1:3, 1:3] = 2


def test_all_formats_hold_the_same_labels(tmp_path):
    np.save(tmp_path / "a.npy", TWO)
    with netCDF4.Dataset(tmp_path / "a.nc", "w") as file:
        for name, count in zip("xyz", TWO.shape, strict=True):
            file.createDimension(name, count)
        file.createVariable("x", "f8", ("x",))[:] = np.arange(5.0)
        file.createVariable("label", "i2", ("x", "y", "z"))[:] = TWO
    zarr.save_array(tmp_path / "a.zarr", TWO)
    group = zarr.open_group(tmp_path / "b.zarr", mode="w")
    for name in ("one", "two"):
        group.create_array(name, data=TWO)
    expected = np.array(TWO[1:4, 1:3, 1:3], dtype=np.uint8)
    for name, variable in (("a.npy", None), ("a.nc", None), ("a.nc", "label"), ("a.zarr", None),
                           ("b.zarr", "two")):  # fmt: skip
        np.testing.assert_array_equal(read_labels(tmp_path / name, variable), expected)
    for variable, reason in ((None, "2 arrays have three dimensions"), ("no", "no array 'no'")):
        with pytest.raises(ValueError, match=reason):
            read_labels(tmp_path / "b.zarr", variable)
    arrays = label_arrays(tmp_path / "a.npy", None)
    (tmp_path / "kept.npz").write_bytes(kept.packed(arrays))
    again = label_arrays(tmp_path / "kept.npz", None)
    assert kept.digest_of(again) == kept.digest_of(arrays)


@pytest.mark.parametrize(
    ("array", "reason"),
    [
        (np.zeros((3, 3, 3), int), "all voxels are medium"),
        (np.ones((3, 3), int), "2 dimensions"),
        (np.ones((3, 3, 3)), "labels must be whole numbers"),
        (-np.ones((3, 3, 3), int), "labels run from -1 to -1"),
        (np.full((2, 2, 2), 300), "at most 16"),
        (np.array([[[{}]]], dtype=object), "cannot be read as .npy"),
    ],
)
def test_what_is_no_volume_of_labels_is_refused(array, reason, tmp_path):
    np.save(tmp_path / "a.npy", array, allow_pickle=True)
    with pytest.raises(ValueError, match=reason):
        read_labels(tmp_path / "a.npy", None)


def test_missing_labels_and_separate_parts():
    with pytest.raises(ValueError, match="no voxel has the label 1"):
        label_solid(np.full((2, 2, 2), 2, dtype=np.uint8))
    apart = np.array([[[1, 0], [0, 2]]], dtype=np.uint8)
    assert separate_parts(apart) == 2  # an edge in common is no face
    assert separate_parts(np.array([[[1, 2]]], dtype=np.uint8)) == 1


def test_surfaces_of_two_grains():
    solid = label_solid(np.array(TWO[1:4, 1:3, 1:3], dtype=np.uint8))
    first, second = (face.mesh for face in solid.interfaces)
    assert (first.volume, second.volume, solid.volume) == (8.0, 4.0, 12.0)
    assert (first.area, second.area) == (24.0, 16.0)
    assert solid.materials == 2 and solid.interfaces[0].beyond.count(1) == 1
    for mesh in (first, second):
        np.testing.assert_allclose(mesh.area_vectors.sum(axis=0), 0.0)


@pytest.mark.parametrize("turn", [None, np.array([[0, -1, 0], [1, 0, 0], [0, 0, 1.0]])])
@pytest.mark.parametrize("cells", [6, 7])
def test_a_box_of_voxels_is_the_cuboid(cells, turn):
    box = from_spec({"kind": "cuboid", "edges": [3, 2, 2]})
    voxels = shape_of(label_solid(np.ones((3, 2, 2), dtype=np.uint8)))
    assert voxels.symmetry == "mirrors"
    here, there = lattice(box, cells, turn), lattice(voxels, cells, turn)
    np.testing.assert_array_equal(here.cell, there.cell)
    np.testing.assert_allclose(here.fill, there.fill, atol=1e-10)
    one, other = (particle_tensors(grid, [1.5 + 0.1j], 0.2) for grid in (here, there))
    scale = np.abs(one.root).max()
    np.testing.assert_allclose(other.root, one.root, rtol=0, atol=1e-8 * scale)


def test_grains_in_touch_share_one_surface():
    shape = shape_of(label_solid(np.array(TWO[1:4, 1:3, 1:3], dtype=np.uint8)))
    grid = lattice(shape, 6)
    assert np.all(grid.fill == 1.0) and grid.cell.shape == (6 * 4 * 4, 3)
    np.testing.assert_allclose(grid.fraction.sum(axis=1), [64.0, 32.0], rtol=1e-12)
    areas = {pair: 0.0 for pair in set(grid.interfaces)}
    for pair, table in zip(grid.interfaces, grid.area_vector, strict=True):
        areas[pair] += np.linalg.norm(table, axis=1).sum()
    # 2 voxels in 4 cells: faces of 4 voxels are 16 cells
    assert areas == pytest.approx({(0, MEDIUM): 80.0, (1, MEDIUM): 48.0, (1, 0): 16.0})
    assert grid.fill.sum() * grid.spacing**3 == pytest.approx(4 * math.pi / 3)
    # of one material the face in common leaves no trace, on any lattice
    both = lattice(shape, 7)
    alone = lattice(shape_of(label_solid(np.ones((3, 2, 2), dtype=np.uint8))), 7)
    one = particle_tensors(alone, [1.6 + 0.1j], 0.2)
    other = particle_tensors(both, [1.6 + 0.1j] * 2, 0.2)
    scale = np.abs(one.root).max()
    np.testing.assert_allclose(other.root, one.root, rtol=0, atol=1e-8 * scale)
