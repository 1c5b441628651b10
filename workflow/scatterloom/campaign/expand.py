"""Expand a campaign to the cells of its table and the unique cases behind them."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal, localcontext
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.campaign.case import Accuracy, Case, Overrides, canonical_json
from scatterloom.campaign.geometry import canonical
from scatterloom.campaign.grids import DIGITS, decimal, grid_values
from scatterloom.campaign.loader import Campaign
from scatterloom.campaign.model import Particle

TWO_PI = 2 * Decimal("3.14159265358979323846264338327950288419716939937510")


@dataclass(frozen=True)
class Grid:
    """The table to be filled.

    Attributes
    ----------
    campaign : str
        Name of the campaign.
    cases : list of Case
        Unique cases in order of first appearance.
    where : int64 (n_particle, n_wavelength, n_size)
        Index into `cases` for every cell.
    particle_names : tuple of str (n_particle,)
    wavelength_um : float64 (n_wavelength,)
        Wavelength in vacuum [um].
    size_parameter : float64 (n_wavelength, n_size)
        Size parameter of the equal-volume sphere in the medium; the same for all particles.
    radius_um : float64 (n_wavelength, n_size)
        Radius of the equal-volume sphere [um]; the same for all particles.
    refractive_index_n, refractive_index_k : float64 (n_particle, n_wavelength)
        Refractive index relative to the medium; of a coated particle that of the coating.
    core_refractive_index : complex128 (n_particle, n_wavelength)
        That of the core of a coated particle; NaN in both parts where there is no coating.
    job_seconds : float
        Predicted time at which cases are batched to jobs.
    anchor_spacing : float or None
        Override of the largest gap in size parameter between anchors.
    keep_transitions : bool
        Whether transition matrices are kept for averages over other orientations.
    """

    campaign: str
    cases: list[Case]
    where: NDArray[np.int64]
    particle_names: tuple[str, ...]
    wavelength_um: NDArray[np.float64]
    size_parameter: NDArray[np.float64]
    radius_um: NDArray[np.float64]
    refractive_index_n: NDArray[np.float64]
    refractive_index_k: NDArray[np.float64]
    core_refractive_index: NDArray[np.complex128]
    job_seconds: float
    anchor_spacing: float | None
    keep_transitions: bool = False


def expand(campaign: Campaign) -> Grid:
    """Expand a campaign; equal cases are made once, across wavelengths and particles.

    Size parameters are computed in decimal arithmetic from the digits of the file and
    rounded to twelve significant digits, so radii and wavelengths in the same ratio merge.
    """
    model = campaign.model
    size_parameter, radius_um = _sizes(campaign)
    n_wavelength, n_size = size_parameter.shape
    accuracy = Accuracy(**model.accuracy.model_dump())
    levels = model.solver.levels
    overrides = Overrides(tuple(levels) if levels else None, model.solver.tolerance)
    outer = np.empty((len(model.particles), n_wavelength), dtype=np.complex128)
    core = np.full_like(outer, complex(np.nan, np.nan))
    cases: list[Case] = []
    known: dict[tuple[str, tuple[complex, ...], float], int] = {}
    where = np.empty((len(model.particles), n_wavelength, n_size), dtype=np.int64)
    values = size_parameter.tolist()
    for p, particle in enumerate(model.particles):
        materials = particle.materials
        for w in range(n_wavelength):
            indices = tuple(
                relative_index(campaign.indices[name][w], campaign.medium_index[w])
                for name in materials
            )
            shape, indices = body_of(particle, indices)
            outer[p, w] = indices[0]
            if len(indices) > 1:
                core[p, w] = indices[1]
            shape_key = canonical_json(shape)
            for s, x in enumerate(values[w]):
                position = known.setdefault((shape_key, indices, x), len(cases))
                if position == len(cases):
                    cases.append(Case(shape, indices[0], x, accuracy, overrides, indices[1:]))
                where[p, w, s] = position
    return Grid(
        campaign=campaign.name,
        cases=cases,
        where=where,
        particle_names=tuple(particle.name for particle in model.particles),
        wavelength_um=np.array(model.wavelengths_um, dtype=float),
        size_parameter=size_parameter,
        radius_um=radius_um,
        refractive_index_n=np.ascontiguousarray(outer.real),
        refractive_index_k=np.ascontiguousarray(outer.imag),
        core_refractive_index=core,
        job_seconds=model.solver.job_seconds,
        anchor_spacing=model.solver.anchor_spacing,
        keep_transitions=model.solver.keep_transitions or bool(model.orientations),
    )


def body_of(
    particle: Particle, indices: tuple[complex, ...]
) -> tuple[dict[str, Any], tuple[complex, ...]]:
    """Return shape and indices; a coating of the same index as the core is no coating."""
    spec = particle.shape.model_dump()
    if particle.coating is None or indices[0] == indices[1]:
        return canonical(spec), indices[:1]
    spec["core_radius_fraction"] = particle.coating.core_scale
    return canonical(spec), indices


def _sizes(campaign: Campaign) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return size parameters and radii [um], each (n_wavelength, n_size)."""
    model = campaign.model
    with localcontext(prec=DIGITS):
        wavelengths = [decimal(w) for w in model.wavelengths_um]
        scales = [TWO_PI * decimal(index) for index in campaign.medium_index]
        if model.sizes.radius_um is not None:
            radii = [grid_values(model.sizes.radius_um)] * len(wavelengths)
            # The ratio r / wavelength comes first: it is the same decimal for equal sizes.
            sizes = [
                [scale * (r / wavelength) for r in row]
                for scale, wavelength, row in zip(scales, wavelengths, radii, strict=True)
            ]
        else:
            assert model.sizes.size_parameter is not None
            sizes = [grid_values(model.sizes.size_parameter)] * len(wavelengths)
            radii = [
                [x * wavelength / scale for x in row]
                for scale, wavelength, row in zip(scales, wavelengths, sizes, strict=True)
            ]
        return _rounded(sizes), _rounded(radii)


def _rounded(rows: list[list[Decimal]]) -> NDArray[np.float64]:
    return np.array([[float(f"{value:.11e}") for value in row] for row in rows])


def relative_index(index: complex, medium_index: float) -> complex:
    """Return index / medium_index, both parts to twelve significant digits."""
    medium = decimal(medium_index)
    parts = [float(f"{decimal(part) / medium:.11e}") for part in (index.real, index.imag)]
    return complex(*parts)
