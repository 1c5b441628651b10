"""Bodies as label volumes: arrays that name the material of every voxel, each a cube."""

from __future__ import annotations

import io
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
import zarr
from numpy.typing import NDArray
from scipy.ndimage import label

from scatterloom.solids.mesh import MEDIUM, Interface, Mesh, Solid

FORMATS = (".npy", ".nc", ".zarr")
MOST_VOXELS = 256**3
MOST_FACES = 500_000
MOST_MATERIALS = 16

Labels = NDArray[np.uint8]


def read_labels(place: Path, variable: str | None) -> Labels:
    """Read a volume of labels: 0 for the medium, 1 and up for the materials.

    Parameters
    ----------
    place : Path
        .npy file, NetCDF file, or Zarr folder (an array, or a group of arrays).
    variable : str or None
        Name of the array in a NetCDF file or a group; the only one of three dimensions if
        missing.

    Returns
    -------
    uint8 (nx, ny, nz)
        Without layers of medium around.

    Raises
    ------
    ValueError
        If there is no such array, or it holds something else than few whole numbers.
    """
    try:
        array = _read(place, variable)
    except (ValueError, OSError):
        raise
    except Exception as error:  # whatever the readers trip over
        reason = f"{type(error).__name__}: {error}"[:200]
        raise ValueError(f"the volume cannot be read ({reason})") from None
    return trimmed(array)


def _read(place: Path, variable: str | None) -> NDArray:
    match place.suffix.lower():
        case ".npy":
            try:
                return np.load(io.BytesIO(place.read_bytes()), allow_pickle=False)
            except (ValueError, EOFError) as error:
                raise ValueError(f"the file cannot be read as .npy ({error})") from None
        case ".nc":
            with netCDF4.Dataset(place, "r") as file:
                file.set_auto_maskandscale(False)
                name = _only(file.variables, variable)
                _check_size(file.variables[name])
                return np.asarray(file.variables[name][...])
        case ".zarr":
            found: Any = zarr.open(place, mode="r")
            if isinstance(found, zarr.Group):
                arrays = dict(found.arrays())
                found = arrays[_only(arrays, variable)]
            _check_size(found)
            return np.asarray(found[...])
        case ending:
            raise ValueError(f"the ending {ending!r} is none of {', '.join(FORMATS)}")


def _only(arrays: Any, variable: str | None) -> str:
    solid = [name for name, array in arrays.items() if len(array.shape) == 3]
    if variable is not None:
        if variable not in arrays:
            raise ValueError(f"there is no array '{variable}'; arrays of three dimensions are: "
                             f"{', '.join(solid) or 'none'}")  # fmt: skip
        return variable
    if len(solid) != 1:
        raise ValueError(f"{len(solid)} arrays have three dimensions; name one of them with "
                         f"`variable`: {', '.join(solid) or 'none'}")  # fmt: skip
    return solid[0]


def _check_size(array: Any) -> None:
    voxels = int(np.prod(array.shape))
    if voxels > MOST_VOXELS:
        raise ValueError(f"{voxels} voxels, more than {MOST_VOXELS}; coarsen the volume: no "
                         "lattice could show such detail")  # fmt: skip


def trimmed(array: NDArray) -> Labels:
    """Check labels and cut away what surrounds the body."""
    if array.ndim != 3:
        raise ValueError(f"the array has {array.ndim} dimensions; it must have x, y and z")
    _check_size(array)
    if array.dtype.kind not in "iub":
        raise ValueError(f"the array holds {array.dtype}; labels must be whole numbers")
    if array.size == 0 or not array.any():
        raise ValueError("all voxels are medium; label those of the body with 1 and up")
    if array.min() < 0 or array.max() > MOST_MATERIALS:
        raise ValueError(
            f"labels run from {array.min()} to {array.max()}; they must run from 0, the medium, to "
            f"the number of materials, at most {MOST_MATERIALS}"
        )
    filled = [np.flatnonzero(array.any(axis=tuple({0, 1, 2} - {axis}))) for axis in range(3)]
    inner = array[tuple(slice(places[0], places[-1] + 1) for places in filled)]
    return np.ascontiguousarray(inner, dtype=np.uint8)


def label_solid(labels: Labels) -> Solid:
    """A solid of cubes, one grain of touching and separate cubes for each material.

    Material 0 of the solid is label 1. Faces between two voxels of one material are no surface.

    Raises
    ------
    ValueError
        If there are too many faces, or a label between the materials is missing.
    """
    missing = sorted(set(range(1, int(labels.max()) + 1)) - set(np.unique(labels).tolist()))
    if missing:
        raise ValueError(f"no voxel has the label {missing[0]}; number the materials from 1")
    padded = np.pad(labels.astype(np.int64), 1) - 1  # the medium is -1
    return Solid(tuple(_grain(padded, m) for m in range(int(labels.max()))))


def _grain(padded: NDArray[np.int64], material: int) -> Interface:
    """All voxels of a material; surfaces with one direction and neighbour are one piece."""
    quads, kinds = [], []
    for axis in range(3):
        u, v = (axis + 1) % 3, (axis + 2) % 3
        for side in (0, 1):
            beyond = np.roll(padded, 1 - 2 * side, axis)
            voxel = np.argwhere((padded == material) & (beyond != material))
            corner = np.repeat(voxel[:, None, :], 4, axis=1)
            corner[:, :, axis] += side
            for number, (du, dv) in enumerate(((0, 0), (1, 0), (1, 1), (0, 1))):
                # Counterclockwise seen from outside: the other way round on the lower side.
                corner[:, number if side else 3 - number, u] += du
                corner[:, number if side else 3 - number, v] += dv
            quads.append(corner)
            neighbour = beyond[tuple(voxel.T)]
            kinds.append(np.stack([np.full(len(voxel), 2 * axis + side), neighbour], axis=1))
    corner = np.concatenate(quads)
    if len(corner) > MOST_FACES:
        raise ValueError(f"the voxels have {len(corner)} faces, more than {MOST_FACES}; coarsen "
                         "the volume: no lattice could show such detail")  # fmt: skip
    found, piece = np.unique(np.concatenate(kinds), axis=0, return_inverse=True)
    places, where = np.unique(corner.reshape(-1, 3), axis=0, return_inverse=True)
    ring = where.reshape(-1, 4)
    triangles = np.concatenate([ring[:, [0, 1, 2]], ring[:, [0, 2, 3]]], axis=1).reshape(-1, 3)
    mesh = Mesh(
        places.astype(np.float64),
        triangles.astype(np.int32),
        np.repeat(piece.ravel(), 2).astype(np.int32),
    )
    return Interface(mesh, material, MEDIUM, tuple(int(kind) for kind in found[:, 1]))


def separate_parts(labels: Labels) -> int:
    """How many parts of the body have no face in common with each other."""
    return int(label(labels > 0)[1])
