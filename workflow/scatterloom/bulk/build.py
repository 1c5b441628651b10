"""From a table of particles to the bulk properties of a campaign's populations."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from scatterloom.bulk import schema
from scatterloom.bulk.average import FEWEST_SIZES, Average, Optics, population_average
from scatterloom.campaign.distribution import Distribution, from_spec
from scatterloom.errors import BadInput
from scatterloom.scattering.elements import circular_depolarization, linear_depolarization
from scatterloom.scattering.record import FAILED, SOLVED, SOLVED_WITH_WARNING, has_result
from scatterloom.store.schema import Variable

if TYPE_CHECKING:
    import xarray


@dataclass(frozen=True)
class Population:
    """A named mixture of particles that share one size distribution.

    Attributes
    ----------
    name : str
    numbers : mapping of str to float
        Number of particles by name, on any scale.
    distribution : Distribution
        By number, of the radius of the sphere of equal volume.
    """

    name: str
    numbers: Mapping[str, float]
    distribution: Distribution


def populations_of(model: Any) -> tuple[Population, ...]:
    """Populations of a campaign model, in its order (`CampaignModel.populations`)."""
    return tuple(
        Population(p.name, dict(p.particles), from_spec(p.size.model_dump()))
        for p in model.populations or ()
    )


def build(table: xarray.Dataset, populations: Sequence[Population]) -> dict[str, np.ndarray]:
    """Average a table over every population at every wavelength.

    Parameters
    ----------
    table : xarray.Dataset
        An opened table.
    populations : sequence of Population

    Returns
    -------
    dict of str to array
        Every variable of `bulk.schema`; NaN where an average failed.

    Raises
    ------
    BadInput
        If a population names a particle that the table lacks.
    """
    particles = [str(name) for name in table["particle"].values]
    for population in populations:
        unknown = sorted(set(population.numbers) - set(particles))
        if unknown:
            raise BadInput(
                f"population {population.name}: the table has no particle {', '.join(unknown)} "
                f"(it has {', '.join(particles)}); run the campaign again"
            )
    extent = {
        "population": len(populations),
        "particle": len(particles),
        "wavelength": table.sizes["wavelength"],
        "angle": table.sizes["angle"],
        "row": 4,
        "col": 4,
    }
    out = {v.name: _empty(v, tuple(extent[d] for d in v.dims)) for v in schema.variables()}
    out["population"] = np.array([p.name for p in populations], dtype=np.dtypes.StringDType())
    out["particle"] = np.array(particles, dtype=np.dtypes.StringDType())
    for name in ("wavelength", "angle", "row", "col"):
        out[name] = np.asarray(table[name].values)
    for i, population in enumerate(populations):
        total = math.fsum(population.numbers.values())
        for j, name in enumerate(particles):
            out["number_fraction"][i, j] = population.numbers.get(name, 0.0) / total
        out["effective_radius"][i] = population.distribution.effective_radius_um
        out["effective_variance"][i] = population.distribution.effective_variance

    for w in range(extent["wavelength"]):
        needed = {name for population in populations for name in population.numbers}
        optics = {n: _optics(table, particles.index(n), w) for n in sorted(needed)}
        for i, population in enumerate(populations):
            _fill(out, (i, w), population, optics)
    return out


def _empty(variable: Variable, shape: tuple[int, ...]) -> np.ndarray:
    dtype: Any = np.dtypes.StringDType() if variable.dtype == "string" else variable.dtype
    return np.full(shape, variable.fill_value, dtype)


@dataclass(frozen=True)
class _Solved:
    """The solved sizes of a particle at a wavelength, and how the others fared."""

    optics: Optics
    missing: int
    warned: int


def _optics(table: xarray.Dataset, particle: int, wavelength: int) -> _Solved:
    part = table.isel(particle=particle, wavelength=wavelength)
    status = part["status"].values
    solved = has_result(status)
    part = part.isel(size=np.flatnonzero(solved)).load()

    def column(name: str) -> np.ndarray:
        return np.asarray(part[name].values, dtype=np.float64)

    fields = {
        field: column(name + suffix)
        for field, name, suffix in (
            ("extinction", "extinction_efficiency", ""),
            ("extinction_error", "extinction_efficiency", "_error"),
            ("scattering", "scattering_efficiency", ""),
            ("scattering_error", "scattering_efficiency", "_error"),
            ("absorption", "absorption_efficiency", ""),
            ("absorption_error", "absorption_efficiency", "_error"),
            ("asymmetry", "asymmetry_parameter", ""),
            ("asymmetry_error", "asymmetry_parameter", "_error"),
            ("matrix", "scattering_matrix", ""),
            ("matrix_error", "scattering_matrix", "_error"),
            ("ratio_error", "scattering_matrix", "_ratio_error"),
        )
    }
    return _Solved(
        Optics(radius_um=column("radius_um"), **fields),
        int((~solved).sum()),
        int((status == SOLVED_WITH_WARNING).sum()),
    )


def _fill(
    out: dict[str, np.ndarray],
    cell: tuple[int, int],
    population: Population,
    optics: Mapping[str, _Solved],
) -> None:
    parts = [(number, optics[name]) for name, number in population.numbers.items()]
    count = min(part.optics.radius_um.size for _, part in parts)
    out["size_count"][cell] = count
    flags = 0
    if any(part.missing for _, part in parts):
        flags |= schema.FLAGS["missing_sizes"]
    if any(part.warned for _, part in parts):
        flags |= schema.FLAGS["cases_with_warning"]
    if count < FEWEST_SIZES:
        out["warning_flags"][cell] = flags | schema.FLAGS["too_few_sizes"]
        out["status"][cell] = FAILED
        return
    average = population_average(
        [(number, part.optics) for number, part in parts], population.distribution
    )
    if average.share_below + average.share_above > schema.TRUNCATION_WARNING:
        flags |= schema.FLAGS["truncated_by_table"]
    if average.quadrature_error > schema.QUADRATURE_WARNING:
        flags |= schema.FLAGS["coarse_size_grid"]
    out["warning_flags"][cell] = flags
    out["status"][cell] = SOLVED_WITH_WARNING if flags else SOLVED
    values = _quantities(average, out["angle"])
    for name, (value, half_width) in values.items():
        out[name][cell] = value
        out[f"{name}_error"][cell] = half_width
    out["extinction_share_below"][cell] = average.share_below
    out["extinction_share_above"][cell] = average.share_above
    out["quadrature_error"][cell] = average.quadrature_error


def _quantities(average: Average, angles_deg: np.ndarray) -> dict[str, tuple[Any, Any]]:
    a = average
    values: dict[str, tuple[Any, Any]] = {
        "scattering_matrix": (a.matrix, a.matrix_error),
        "extinction_cross_section": (a.extinction_um2, a.extinction_um2_error),
        "scattering_cross_section": (a.scattering_um2, a.scattering_um2_error),
        "absorption_cross_section": (a.absorption_um2, a.absorption_um2_error),
        "single_scattering_albedo": (a.albedo, a.albedo_error),
        "asymmetry_parameter": (a.asymmetry, a.asymmetry_error),
        "scattering_matrix_ratio": (a.ratio, a.ratio_error),
        "degree_of_linear_polarization": (-a.ratio[:, 0, 1], a.ratio_error[:, 0, 1]),
    }
    if angles_deg[-1] == 180.0:
        f11, f11_error = a.matrix[-1, 0, 0], a.matrix_error[-1, 0, 0]
        r, r_error = a.ratio[-1], a.ratio_error[-1]
        lidar_ratio = 4.0 * math.pi / (a.albedo * f11)
        relative = a.albedo_error / a.albedo + f11_error / f11
        values["lidar_ratio"] = (lidar_ratio, lidar_ratio * relative)
        values["linear_depolarization_ratio"] = linear_depolarization(r[1, 1], r_error[1, 1])
        values["circular_depolarization_ratio"] = circular_depolarization(r[3, 3], r_error[3, 3])
    return values
