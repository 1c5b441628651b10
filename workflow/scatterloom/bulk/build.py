"""From a table of particles to the bulk properties of a campaign's populations.

The table is opened lazily; matrices are loaded for one block of angles at a time, so that
memory does not grow with the table. Every (population, wavelength) is averaged by itself, here
one after the other or wherever `bulk.spread` sends them.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from scatterloom.bulk import schema
from scatterloom.bulk.average import FEWEST_SIZES, Average, Optics, population_average
from scatterloom.bulk.population import Population
from scatterloom.bulk.quantities import quantities, spectral
from scatterloom.errors import BadInput
from scatterloom.scattering.record import FAILED, SOLVED, SOLVED_WITH_WARNING, has_result
from scatterloom.store.schema import Variable

if TYPE_CHECKING:
    import xarray

BLOCK_BYTES = 32 * 2**20
"""Matrices and half widths of the table held in memory at a time by each average at work. The
same everywhere: sums over another number of columns may differ in the last bit."""

AVERAGE_BYTES = 400 * 2**20
"""What an average at work takes; 330 MiB were measured on a table of 1.5 GB."""

Values = dict[str, Any]
"""What a population gives at a wavelength, by the names of the variables."""

Spread = Callable[["xarray.Dataset", Sequence[tuple[Population, int]]], Iterable[Values]]
"""Applies `average_cell` to a table and every (population, position of the wavelength)."""


def one_by_one(table: xarray.Dataset, cells: Sequence[tuple[Population, int]]) -> Iterable[Values]:
    """Average in this thread, one cell after the other."""
    return (average_cell(table, population, wavelength) for population, wavelength in cells)


def build(
    table: xarray.Dataset, populations: Sequence[Population], spread: Spread = one_by_one
) -> dict[str, np.ndarray]:
    """Average a table over every population at every wavelength.

    Parameters
    ----------
    table : xarray.Dataset
        An opened table.
    populations : sequence of Population
    spread : callable
        Where the averages are computed.

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
        shares = population.number_fractions()
        for j, name in enumerate(particles):
            out["number_fraction"][i, j] = shares.get(name, 0.0)
        out["effective_radius"][i] = population.effective_radius_um
        out["effective_variance"][i] = population.effective_variance
        out["mean_area"][i] = population.area_um2
        out["mean_volume"][i] = population.volume_um3
        out["mass_density"][i] = population.density_g_cm3

    positions = list(np.ndindex(len(populations), extent["wavelength"]))
    results = spread(table, [(populations[i], w) for i, w in positions])
    for position, values in zip(positions, results, strict=True):
        for name, value in values.items():
            out[name][position] = value
    for i, w in np.ndindex(len(populations), extent["wavelength"] - 1):
        for name, (value, half_width) in spectral(out, i, w, w + 1).items():
            out[name][i, w] = value
            out[f"{name}_error"][i, w] = half_width
    return out


def _empty(variable: Variable, shape: tuple[int, ...]) -> np.ndarray:
    dtype: Any = np.dtypes.StringDType() if variable.dtype == "string" else variable.dtype
    return np.full(shape, variable.fill_value, dtype)


@dataclass(frozen=True)
class _Solved:
    """The solved sizes of a particle at a wavelength, and how the others fared.

    Matrices stay in the table until a block of angles is asked for.
    """

    scalars: Mapping[str, np.ndarray]
    part: xarray.Dataset
    missing: int
    warned: int

    @property
    def count(self) -> int:
        return len(self.scalars["radius_um"])

    def optics(self, angles: slice) -> Optics:
        """Load the matrices at some of the angles."""
        block = self.part[list(_MATRICES.values())].isel(angle=angles).load()
        matrices = {
            field: np.asarray(block[name].values, dtype=np.float64)
            for field, name in _MATRICES.items()
        }
        return Optics(**self.scalars, **matrices)


_MATRICES = {
    "matrix": "scattering_matrix",
    "matrix_error": "scattering_matrix_error",
    "ratio_error": "scattering_matrix_ratio_error",
}
_SCALARS = {
    "radius_um": "radius_um",
    "extinction": "extinction_efficiency",
    "extinction_error": "extinction_efficiency_error",
    "scattering": "scattering_efficiency",
    "scattering_error": "scattering_efficiency_error",
    "absorption": "absorption_efficiency",
    "absorption_error": "absorption_efficiency_error",
    "asymmetry": "asymmetry_parameter",
    "asymmetry_error": "asymmetry_parameter_error",
}


def _solved(table: xarray.Dataset, particle: int, wavelength: int) -> _Solved:
    part = table.isel(particle=particle, wavelength=wavelength)
    status = part["status"].values
    solved = has_result(status)
    part = part.isel(size=np.flatnonzero(solved))
    scalars = {
        field: np.asarray(part[name].values, dtype=np.float64) for field, name in _SCALARS.items()
    }
    return _Solved(scalars, part, int((~solved).sum()), int((status == SOLVED_WITH_WARNING).sum()))


def angle_blocks(sizes: int, angles: int, particles: int) -> list[slice]:
    """Cut the angles so that the matrices of all particles at a block fit `BLOCK_BYTES`."""
    per_angle = 3 * 16 * 8 * max(1, sizes) * max(1, particles)
    step = max(1, min(angles, BLOCK_BYTES // per_angle))
    return [slice(start, min(start + step, angles)) for start in range(0, angles, step)]


def _average(population: Population, solved: Mapping[str, _Solved], angles: int) -> Average:
    """Average block by block of angles; only one block of the table is in memory."""
    names = list(population.numbers)
    largest = max(solved[name].count for name in names)
    distributions = [population.distribution_of(name) for name in names]
    averages = [
        population_average(
            [(population.numbers[name], solved[name].optics(block)) for name in names],
            distributions,
        )
        for block in angle_blocks(largest, angles, len(names))
    ]
    joined: dict[str, Any] = {
        name: np.concatenate([getattr(average, name) for average in averages])
        for name in ("matrix", "matrix_error", "ratio", "ratio_error")
    }
    return replace(averages[0], **joined)


def average_cell(table: xarray.Dataset, population: Population, wavelength: int) -> Values:
    """Average a table over a population at one wavelength, given by its position.

    Returns
    -------
    dict
        What is missing from it could not be averaged.
    """
    particles = [str(name) for name in table["particle"].values]
    used = {name: _solved(table, particles.index(name), wavelength) for name in population.numbers}
    angle = np.asarray(table["angle"].values)
    count = min(part.count for part in used.values())
    flags = 0
    if any(part.missing for part in used.values()):
        flags |= schema.FLAGS["missing_sizes"]
    if any(part.warned for part in used.values()):
        flags |= schema.FLAGS["cases_with_warning"]
    if count < FEWEST_SIZES:
        flags |= schema.FLAGS["too_few_sizes"]
        return {"size_count": count, "warning_flags": flags, "status": FAILED}
    average = _average(population, used, angle.size)
    outside = average.share_below + average.share_above
    values: Values = {
        "size_count": count,
        "extinction_share_below": average.share_below,
        "extinction_share_above": average.share_above,
        "quadrature_error": average.quadrature_error,
    }
    if outside > schema.TRUNCATION_WARNING:
        flags |= schema.FLAGS["truncated_by_table"]
    if average.quadrature_error > schema.QUADRATURE_WARNING:
        flags |= schema.FLAGS["coarse_size_grid"]
    # A share that is not a number must not pass either.
    if not outside <= schema.TRUNCATION_REFUSED:
        flags |= schema.FLAGS["not_covered"]
        return values | {"warning_flags": flags, "status": FAILED}
    for name, (value, half_width) in quantities(average, population, angle).items():
        values[name], values[f"{name}_error"] = value, half_width
    return values | {
        "warning_flags": flags,
        "status": SOLVED_WITH_WARNING if flags else SOLVED,
    }
