"""Case records of small spheroids in closed form (Bohren & Huffman 1983, ch. 5)."""

from __future__ import annotations

import hashlib
import json
from pathlib import Path

import numpy as np

from oracles import rayleigh
from scatterloom.scattering.expansion import expand
from scatterloom.scattering.record import CaseRecord
from scatterloom.store.assemble import Cases
from scatterloom.store.casefile import write_records
from scatterloom.store.provenance import About
from scatterloom.store.writer import Axes

ANGLES_DEG = np.linspace(0.0, 180.0, 19)
INDEX = 1.5 + 0.01j
HALF_AXES = {"ball": (1.0, 1.0, 1.0), "plate": (2 ** (1 / 3), 2 ** (1 / 3), 2 ** (-2 / 3))}
FLAGS = {"first_warning": (1, "one thing"), "second_warning": (2, "another")}
ABOUT = About("small", "Small particles", "campaign: small\n", {"license": "CC0-1.0"})


def record(particle: str, size_parameter: float, status: int = 1, **changes) -> CaseRecord:
    """Exact record of one small particle; its error variant is 1 % off."""
    node, weight = np.polynomial.legendre.leggauss(8)
    axes = HALF_AXES[particle]
    exact = rayleigh.scattering_matrix(axes, INDEX, np.degrees(np.arccos(node)))
    coefficients = expand(exact, node, weight)
    values = rayleigh.efficiencies(axes, INDEX, size_parameter)
    values["single_scattering_albedo"] = (
        values["scattering_efficiency"] / values["extinction_efficiency"]
    )
    content = {
        "digest": digest(particle, size_parameter),
        "size_parameter": size_parameter,
        "index": INDEX,
        "shape": json.dumps({"kind": particle}),
        "levels": (8, 10),
        "lattice_cells": 500,
        "wave_count": 30,
        "n_max": 3,
        "status": status,
        "warning_flags": 0,
        "products": 4.0,
        "cold_products_estimate": 9.0,
        "residual": 1e-5,
        "operator_error": 1e-6,
        "wall_seconds": 0.25,
        "memory_bytes": 1e6,
        "start": "cold",
        "scalars": {name: (value, 1e-3 * abs(value)) for name, value in values.items()},
        "checks": {
            "discretization": 0.003,
            "solver": 0.0002,
            "truncation": 0.0001,
            "extrapolation_disagreement": 0.1,
        },
        "expansion": np.stack([coefficients, 1.01 * coefficients]),
        "variants": ("best", "one percent off"),
        "causes": ("best", "remainder"),
        "model_error": 0.0,
    }
    return CaseRecord(**(content | changes))


def digest(particle: str, size_parameter: float) -> str:
    return hashlib.sha256(f"{particle} {size_parameter!r}".encode()).hexdigest()[:20]


def records(sizes=(0.01, 0.02, 0.03)) -> list[CaseRecord]:
    return [record(name, x) for name in HALF_AXES for x in sizes]


def axes(sizes=(0.01, 0.02, 0.03), wavelength_um=(0.5, 1.0)) -> Axes:
    """Two particles, the same size parameters at every wavelength: cases are shared."""
    count, wavelengths = len(sizes), np.array(wavelength_um)
    where = np.arange(2 * count).reshape(2, 1, count).repeat(len(wavelengths), axis=1)
    x = np.tile(sizes, (len(wavelengths), 1))
    return Axes(
        particles=tuple(HALF_AXES),
        wavelength_um=wavelengths,
        angles_deg=ANGLES_DEG,
        size_parameter=x,
        radius_um=x * wavelengths[:, None] / (2 * np.pi),
        refractive_index=np.full((2, len(wavelengths)), INDEX),
        core_refractive_index=np.full((2, len(wavelengths)), complex(np.nan, np.nan)),
        where=where,
        digests=tuple(digest(name, s) for name in HALF_AXES for s in sizes),
    )


def case_files(folder: Path, written: list[CaseRecord]) -> Cases:
    """One case file per particle, as the solver jobs publish them."""
    files = {}
    for name in HALF_AXES:
        path = folder / "cases" / f"{name}.cases"
        part = [r for r in written if json.loads(r.shape)["kind"] == name]
        write_records(path, part)
        files[path] = [r.digest for r in part]
    return Cases(files)
