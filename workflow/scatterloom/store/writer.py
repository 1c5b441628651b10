"""Writes the Zarr hierarchy of a table into a folder that is not published yet."""

from __future__ import annotations

import hashlib
import json
import warnings
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import zarr
from numpy.typing import NDArray
from zarr.codecs import ZstdCodec

from scatterloom.campaign.expand import Grid
from scatterloom.store import schema
from scatterloom.store.assemble import Cases, empty_block, matrix_block, put_scalars
from scatterloom.store.chunks import Region, is_aligned, layout, regions
from scatterloom.store.commit import list_files
from scatterloom.store.provenance import DATED

FloatArray = NDArray[np.float64]

COMPRESSION_LEVEL = 5
ITEM_BYTES = 8


@dataclass(frozen=True)
class Axes:
    """The grid of a table.

    Attributes
    ----------
    particles : tuple of str
    wavelength_um : float64 (n_wavelength,)
    angles_deg : float64 (n_angle,)
    size_parameter, radius_um : float64 (n_wavelength, n_size)
    refractive_index : complex128 (n_particle, n_wavelength)
        Relative to the medium; of a coated particle that of the coating.
    core_refractive_index : complex128 (n_particle, n_wavelength)
        NaN where there is no coating.
    where : int (n_particle, n_wavelength, n_size)
        Position in `digests` of the case in each cell.
    digests : tuple of str
        The unique cases.
    """

    particles: tuple[str, ...]
    wavelength_um: FloatArray
    angles_deg: FloatArray
    size_parameter: FloatArray
    radius_um: FloatArray
    refractive_index: NDArray[np.complex128]
    core_refractive_index: NDArray[np.complex128]
    where: NDArray[np.integer[Any]]
    digests: tuple[str, ...]

    @classmethod
    def of(cls, grid: Grid, angles_deg: FloatArray) -> Axes:
        """Return the axes of an expanded campaign."""
        return cls(
            particles=grid.particle_names,
            wavelength_um=grid.wavelength_um,
            angles_deg=angles_deg,
            size_parameter=grid.size_parameter,
            radius_um=grid.radius_um,
            refractive_index=grid.refractive_index_n + 1j * grid.refractive_index_k,
            core_refractive_index=grid.core_refractive_index,
            where=grid.where,
            digests=tuple(case.digest for case in grid.cases),
        )

    def extent(self) -> dict[str, int]:
        """Length of every dimension."""
        particles, wavelengths, sizes = self.where.shape
        lengths = (particles, wavelengths, sizes, len(self.angles_deg), 4, 4)
        return dict(zip(schema.DIMENSIONS, lengths, strict=True))


class ShardedArray:
    """A Zarr array that is written one whole shard at a time, each exactly once.

    Two writers within a shard would lose each other's cells without a word, so
    a region that is no whole shard, or comes twice, is an error of the program.
    """

    def __init__(self, group: zarr.Group, variable: schema.Variable, shape: tuple[int, ...]):
        # Values and their half widths share one layout, whatever their precision.
        chunk, shard = layout(shape, ITEM_BYTES)
        self.shape = shape
        self.unit = shard or chunk
        self._written: set[tuple[int, ...]] = set()
        dtype: Any = np.dtypes.StringDType() if variable.dtype == "string" else variable.dtype
        self._array = group.create_array(
            variable.name,
            shape=shape,
            dtype=dtype,
            chunks=chunk,
            shards=shard,
            compressors=ZstdCodec(level=COMPRESSION_LEVEL, checksum=True),
            fill_value=variable.fill_value,
            dimension_names=variable.dims,
            attributes=variable.attributes(),
            # A chunk of fill values that is left out could not be told from a lost one.
            config={"write_empty_chunks": True},
        )

    def write(self, region: Region, block: NDArray[Any]) -> None:
        """Write one whole shard."""
        corner = tuple(part.start for part in region)
        if not is_aligned(region, self.shape, self.unit):
            raise AssertionError(f"{self._array.name}: {region} is not one whole shard")
        if corner in self._written:
            raise AssertionError(f"{self._array.name}: the shard at {corner} is written twice")
        self._written.add(corner)
        self._array[region] = block

    def write_all(self, content: NDArray[Any]) -> None:
        """Write every shard of an array that is held in memory."""
        for region in regions(self.shape, self.unit):
            self.write(region, content[region])


def write_hierarchy(
    folder: Path,
    axes: Axes,
    cases: Cases,
    attributes: Mapping[str, Any],
    warning_flags: Mapping[str, tuple[int, str]],
) -> tuple[str, NDArray[np.int32]]:
    """Write a whole table into `folder`.

    Returns
    -------
    content_digest : str
        SHA-256 over the arrays and attributes, without dates and timings.
    status : int32 (n_particle, n_wavelength, n_size)

    Raises
    ------
    IntegrityError
        If a case file is damaged or lacks a case.
    OSError
        From the file system.
    """
    listed = {v.name: v for v in schema.variables(warning_flags)}
    extent = axes.extent()
    group = zarr.open_group(folder, mode="w", zarr_format=3)
    arrays = {
        name: ShardedArray(group, variable, tuple(extent[d] for d in variable.dims))
        for name, variable in listed.items()
    }
    columns = _known_columns(axes)
    shape = axes.where.shape
    for name, variable in listed.items():
        if variable.dims == schema.GRID and name not in columns:
            columns[name] = empty_block(variable, shape)

    matrix = arrays["scattering_matrix"]
    for region in regions(matrix.shape, matrix.unit):
        grid = region[:3]
        cells = []
        for offset in np.ndindex(*axes.where[grid].shape):
            cell = tuple(part.start + o for part, o in zip(grid, offset, strict=True))
            record = cases.get(axes.digests[axes.where[cell]])
            if record is not None:
                put_scalars(columns, cell, record)
            cells.append((offset, record))
        blocks = matrix_block(cells, axes.where[grid].shape, axes.angles_deg)
        angles, rows, cols = region[3:]
        for name, block in blocks.items():
            arrays[name].write(region, block[:, :, :, angles, rows, cols])

    for name, content in columns.items():
        arrays[name].write_all(content)
    digest = _content_digest(folder, attributes)
    group.attrs.update({**attributes, "content_digest": digest})
    with warnings.catch_warnings():
        # Zarr warns that consolidated metadata is not in the Zarr 3 specification; readers
        # that do not know it ignore it.
        warnings.filterwarnings("ignore", message="Consolidated metadata", module="zarr")
        zarr.consolidate_metadata(group.store)
    return digest, columns["status"]


def _known_columns(axes: Axes) -> dict[str, NDArray[Any]]:
    """Return the variables that follow from the grid alone."""
    return {
        "particle": np.array(axes.particles, dtype=np.dtypes.StringDType()),
        "wavelength": axes.wavelength_um,
        "size": np.arange(axes.where.shape[2], dtype=np.int32),
        "angle": axes.angles_deg,
        "row": np.arange(1, 5, dtype=np.int32),
        "col": np.arange(1, 5, dtype=np.int32),
        "size_parameter": axes.size_parameter,
        "radius_um": axes.radius_um,
        "refractive_index_n": axes.refractive_index.real,
        "refractive_index_k": axes.refractive_index.imag,
        "core_refractive_index_n": axes.core_refractive_index.real,
        "core_refractive_index_k": axes.core_refractive_index.imag,
    }


def _content_digest(folder: Path, attributes: Mapping[str, Any]) -> str:
    files = {
        name: listed.sha256
        for name, listed in list_files(folder).items()
        if "/" in name and name.split("/")[0] not in schema.VOLATILE
    }
    kept = {name: value for name, value in attributes.items() if name not in DATED}
    text = json.dumps({"files": files, "attributes": kept}, sort_keys=True)
    return hashlib.sha256(text.encode()).hexdigest()
