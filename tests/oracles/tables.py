"""Tables of spheres from the Mie series, for whatever reads a table."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np
import xarray
import zarr

from oracles.mie import sphere
from scatterloom.scattering.record import FLAGS, SOLVED
from scatterloom.store import schema
from scatterloom.store.commit import publish, staging
from scatterloom.store.writer import ShardedArray

CONFIG = """campaign: saltmere
title: Spheres from a closed form
wavelengths_um: [0.55, 1.1]
"""


def mie_table(
    radius_um: np.ndarray | None = None,
    wavelength_um: tuple[float, ...] = (0.55, 1.1),
    angles_deg: np.ndarray | None = None,
    indices: dict[str, complex] | None = None,
    relative_error: float = 0.01,
) -> xarray.Dataset:
    """Table of spheres in vacuum that obeys the schema, exact but for its stated errors.

    Values are those of the Mie series; half widths are `relative_error` times the
    value, for matrix elements with 1e-4 of F11 on top. The solver's diagnostics are made
    up: anchors at every fourth size cost 20 products, the others 4 against an estimate of 20.
    """
    radius = np.geomspace(0.05, 0.5, 24) if radius_um is None else np.asarray(radius_um)
    angles = np.arange(0.0, 181.0, 3.0) if angles_deg is None else np.asarray(angles_deg)
    indices = indices or {"clear": 1.4 + 0.0j, "dark": 1.55 + 0.05j}
    wavelength = np.asarray(wavelength_um, dtype=float)
    shape = (len(indices), wavelength.size, radius.size)
    extent = {
        "particle": shape[0],
        "wavelength": shape[1],
        "size": shape[2],
        "angle": angles.size,
        "row": 4,
        "col": 4,
    }
    listed = schema.variables(FLAGS)
    data = {}
    for v in listed:
        dtype = np.dtypes.StringDType() if v.dtype == "string" else v.dtype
        data[v.name] = np.full([extent[d] for d in v.dims], v.fill_value, dtype)
    data["particle"][:] = list(indices)
    data["wavelength"][:], data["angle"][:] = wavelength, angles
    data["size"][:] = np.arange(radius.size)
    data["row"][:] = data["col"][:] = np.arange(1, 5)
    data["radius_um"][:] = radius
    data["size_parameter"][:] = 2 * np.pi * radius / wavelength[:, None]
    for p, index in enumerate(indices.values()):
        data["refractive_index_n"][p], data["refractive_index_k"][p] = index.real, index.imag
        for w in range(wavelength.size):
            for s in range(radius.size):
                ball = sphere(index, data["size_parameter"][w, s])
                for variable in schema.SCALARS:
                    value = getattr(ball, variable.name)
                    if index.imag == 0 and variable.name == "absorption_efficiency":
                        value = 0.0
                    data[variable.name][p, w, s] = value
                    data[f"{variable.name}_error"][p, w, s] = relative_error * abs(value)
                matrix = ball.scattering_matrix(angles)
                data["scattering_matrix"][p, w, s] = matrix
                f11 = matrix[:, :1, :1]
                half_width = relative_error * np.abs(matrix) + 1e-4 * f11
                data["scattering_matrix_error"][p, w, s] = half_width
                data["scattering_matrix_ratio_error"][p, w, s] = half_width / f11
    anchor = np.arange(radius.size) % 4 == 0
    data["products"][:] = np.where(anchor, 20.0, 4.0)
    data["cold_products_estimate"][:] = 20.0
    data["status"][:] = SOLVED
    data["lattice_cells"][:] = 7000
    data["wave_count"][:] = 160
    data["residual"][:] = 1e-5
    data["wall_seconds"][:] = 0.5
    coordinates = {v.name for v in schema.COORDINATES}
    as_objects = {
        v.name: (v.dims, data[v.name].astype(object) if v.dtype == "string" else data[v.name])
        for v in listed
    }
    dataset = xarray.Dataset(
        {name: value for name, value in as_objects.items() if name not in coordinates},
        {name: value for name, value in as_objects.items() if name in coordinates},
        {
            "title": "Spheres from a closed form",
            "campaign": "saltmere",
            "config": CONFIG,
            "content_digest": "0" * 64,
            "numerics_revision": 1,
            "version_scatterloom": "0.1.0",
        },
    )
    for v in listed:
        dataset[v.name].attrs.update(v.attributes())
    return dataset


def publish_table(path: Path, dataset: xarray.Dataset) -> None:
    """Write such a dataset as a committed table."""
    with staging(path) as folder:
        group = zarr.open_group(folder, mode="w", zarr_format=3)
        for v in schema.variables(FLAGS):
            content = dataset[v.name].values
            if v.dtype == "string":
                content = content.astype(np.dtypes.StringDType())
            ShardedArray(group, v, content.shape).write_all(content)
        group.attrs.update(dataset.attrs)
        with warnings.catch_warnings():
            warnings.filterwarnings("ignore", message="Consolidated metadata", module="zarr")
            zarr.consolidate_metadata(group.store)
        publish(folder, path, "table", dataset.attrs["content_digest"], "2000-01-01T00:00:00Z")
