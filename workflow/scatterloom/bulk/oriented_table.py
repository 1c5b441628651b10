"""Tables of oriented particles: one published Zarr folder for each distribution."""

from __future__ import annotations

import hashlib
import json
import math
import warnings
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import zarr

from scatterloom.bulk.population import Population
from scatterloom.bulk.weights import coarse_nodes, size_weights
from scatterloom.campaign.expand import Grid
from scatterloom.campaign.grids import grid_values
from scatterloom.campaign.orientations import Fisher, Listed, Normal, Orientation, Uniform
from scatterloom.errors import IntegrityError
from scatterloom.orientation.distribution import (
    Directions,
    Tilts,
    fisher_tilt,
    listed,
    normal_tilt,
    uniform_tilt,
)
from scatterloom.orientation.oriented import Views
from scatterloom.scattering.oriented_case import OrientedCase, oriented_case
from scatterloom.scattering.record import FAILED, has_result
from scatterloom.store.assemble import Cases
from scatterloom.store.atomic import sweep_abandoned
from scatterloom.store.commit import commit_record, publish, staging, verify_folder
from scatterloom.store.layout import Layout
from scatterloom.store.provenance import now
from scatterloom.store.schema import COVERAGE, Variable
from scatterloom.store.transitions import read_transitions
from scatterloom.store.writer import ShardedArray

if TYPE_CHECKING:
    import xarray

KIND = "oriented"
FEWEST_SIZES = 4
"""Sizes below which no population is averaged: the weights are those of cubics."""

_CELL = ("particle", "wavelength", "size")
_VIEW = ("incidence", "zenith", "azimuth", "row", "col")
_FORWARD = ("incidence", "row", "col")
_SIGNS = (
    "Stokes parameters (I, Q, U, V) in the meridional plane of each direction, Q positive along "
    "theta; signs as in Bohren & Huffman (1983) with the perpendicular component against phi"
)


def rule_of(orientation: Orientation) -> Callable[[int], Tilts | Directions]:
    """Return what makes the rule of a distribution for products of a degree."""
    match orientation.distribution:
        case Uniform(largest_deg=largest):
            return lambda degree: uniform_tilt(largest, degree)
        case Normal(sd_deg=sd):
            return lambda degree: normal_tilt(sd, degree)
        case Fisher(concentration=kappa):
            return lambda degree: fisher_tilt(kappa, degree)
        case Listed(euler_deg=angles, weights=weights):
            directions = listed(angles, weights or [1.0] * len(angles))
            return lambda degree: directions
    raise TypeError(f"no rule for {type(orientation.distribution).__name__}")


def views_of(orientation: Orientation) -> Views:
    """Return the directions in which an ensemble is lit and seen."""
    zenith = [float(angle) for angle in grid_values(orientation.zenith_deg)]
    return Views(
        np.radians(orientation.incidence_zenith_deg),
        np.radians(zenith),
        np.radians(orientation.azimuth_deg),
    )


def variables() -> list[Variable]:
    """Return the variables of a table of oriented particles."""
    matrix = "over the cross section of the sphere of equal volume"
    out = [
        Variable("particle", ("particle",), "string", "name of the particle", ""),
        Variable("population", ("population",), "string", "name of the population", ""),
        Variable("wavelength", ("wavelength",), "f8", "wavelength in vacuum", "um"),
        Variable("size", ("size",), "i4", "position in the list of sizes"),
        Variable("incidence", ("incidence",), "f8", "zenith angle of incidence", "degree"),
        Variable("zenith", ("zenith",), "f8", "zenith angle of scattering", "degree"),
        Variable("azimuth", ("azimuth",), "f8", "azimuth of scattering", "degree"),
        Variable("row", ("row",), "i4", "row of the matrix"),
        Variable("col", ("col",), "i4", "column of the matrix"),
        Variable("size_parameter", ("wavelength", "size"), "f8", "of the equal-volume sphere"),
        Variable("radius_um", ("wavelength", "size"), "f8", "of the equal-volume sphere", "um"),
        Variable("status", _CELL, "i4", "as in the table; 0 for particles left out"),
        Variable(
            "population_extinction_share_outside",
            ("population", "wavelength"),
            "f8",
            "largest share of the particles' cross section outside the sizes of the table",
        ),
    ]
    both = (
        ("phase_matrix", (*_CELL, *_VIEW), f"phase matrix {matrix}", "sr-1"),
        ("extinction_matrix", (*_CELL, *_FORWARD), f"extinction matrix {matrix}", "1"),
        (
            "population_phase_matrix",
            ("population", "wavelength", *_VIEW),
            "mean phase matrix of a particle of the population",
            "um2 sr-1",
        ),
        (
            "population_extinction_matrix",
            ("population", "wavelength", *_FORWARD),
            "mean extinction matrix of a particle of the population",
            "um2",
        ),
    )
    for name, dims, words, unit in both:
        out.append(Variable(name, dims, "f8", words, unit, comment=_SIGNS))
        out.append(Variable(f"{name}_error", dims, "f8", f"half width: {words}", unit))
    return out


@dataclass(frozen=True, eq=False)
class Ensemble:
    """What a table of oriented particles is made from.

    Attributes
    ----------
    orientation : Orientation
    grid : Grid
    cases : Cases
        Records of the solved cases.
    layout : Layout
        Where their transition matrices lie.
    populations : sequence of Population
        Those averaged: all of whose particles are in the table.
    """

    orientation: Orientation
    grid: Grid
    cases: Cases
    layout: Layout
    populations: Sequence[Population]

    @property
    def particles(self) -> tuple[str, ...]:
        """Names of the particles that are averaged."""
        wanted = self.orientation.particles or self.grid.particle_names
        return tuple(name for name in self.grid.particle_names if name in wanted)

    @property
    def averaged(self) -> list[Population]:
        """Populations of which every particle is averaged."""
        known = set(self.particles)
        return [p for p in self.populations if set(p.numbers) <= known]


def build(
    ensemble: Ensemble, progress: Callable[[int, int], None] | None = None
) -> dict[str, np.ndarray]:
    """Evaluate every cell of a table of oriented particles.

    Raises
    ------
    IntegrityError
        If a case or its transition matrices are missing or damaged.
    """
    orientation, grid = ensemble.orientation, ensemble.grid
    views = views_of(orientation)
    extent = {
        "particle": len(ensemble.particles),
        "population": len(ensemble.averaged),
        "wavelength": grid.wavelength_um.size,
        "size": grid.radius_um.shape[1],
        "incidence": views.incidence.size,
        "zenith": views.zenith.size,
        "azimuth": views.azimuth.size,
        "row": 4,
        "col": 4,
    }
    out = {v.name: _empty(v, tuple(extent[d] for d in v.dims)) for v in variables()}
    names = np.dtypes.StringDType()
    out["particle"] = np.array(ensemble.particles, dtype=names)
    out["population"] = np.array([p.name for p in ensemble.averaged], dtype=names)
    out["wavelength"] = grid.wavelength_um
    out["size"] = np.arange(extent["size"], dtype=np.int32)
    for name in ("incidence", "zenith", "azimuth"):
        out[name] = np.degrees(getattr(views, name))
    out["row"] = out["col"] = np.arange(1, 5, dtype=np.int32)
    out["size_parameter"], out["radius_um"] = grid.size_parameter, grid.radius_um
    total = int(out["status"].size)
    for done, (cell, (status, case)) in enumerate(_cells(ensemble, views), start=1):
        out["status"][cell] = status
        if case is not None:
            out["phase_matrix"][cell] = case.phase
            out["phase_matrix_error"][cell] = case.phase_error
            out["extinction_matrix"][cell] = case.extinction
            out["extinction_matrix_error"][cell] = case.extinction_error
        if progress is not None:
            progress(done, total)
    _average(out, ensemble)
    return out


def _cells(
    ensemble: Ensemble, views: Views
) -> Iterator[tuple[tuple[int, int, int], tuple[int, OrientedCase | None]]]:
    grid, rule = ensemble.grid, rule_of(ensemble.orientation)
    known: dict[int, tuple[int, OrientedCase | None]] = {}
    for p, name in enumerate(ensemble.particles):
        where = grid.where[grid.particle_names.index(name)]
        for w, s in np.ndindex(where.shape):
            number = int(where[w, s])
            if number not in known:
                known[number] = _evaluate(ensemble, grid.cases[number].digest, rule, views)
            yield (p, w, s), known[number]


def _evaluate(
    ensemble: Ensemble, digest: str, rule: Callable[[int], Tilts | Directions], views: Views
) -> tuple[int, OrientedCase | None]:
    record = ensemble.cases.get(digest)
    if record is None:
        raise IntegrityError(f"case {digest} is not solved")
    if record.status == FAILED:
        return record.status, None
    stored = read_transitions(ensemble.layout.solved_transitions(digest))
    if stored.digest != digest:
        raise IntegrityError(f"transition matrices of {digest} are those of {stored.digest}")
    case = oriented_case(
        stored.variants, stored.symmetry, record.size_parameter, record.model_error, rule, views
    )
    return record.status, case


def _average(out: dict[str, np.ndarray], ensemble: Ensemble) -> None:
    """Means over populations; errors of all sizes are taken to go together.

    The change when every other size is left out is added, as an error of the quadrature.
    """
    for i, population in enumerate(ensemble.averaged):
        for w in range(out["wavelength"].size):
            parts = [_part(out, ensemble, population, name, w) for name in population.numbers]
            if any(part is None for part in parts):
                continue
            found = [part for part in parts if part is not None]
            for what in ("phase", "extinction"):
                mean = sum(part.mean[what] for part in found)
                error = sum(part.error[what] for part in found)
                out[f"population_{what}_matrix"][i, w] = mean
                out[f"population_{what}_matrix_error"][i, w] = error
            largest = max(part.outside for part in found)
            out["population_extinction_share_outside"][i, w] = largest


@dataclass(frozen=True, eq=False)
class _Part:
    """What one particle adds to a population: sums over its sizes, and their half widths."""

    mean: dict[str, np.ndarray]
    error: dict[str, np.ndarray]
    outside: float


def _part(
    out: Mapping[str, np.ndarray],
    ensemble: Ensemble,
    population: Population,
    name: str,
    wavelength: int,
) -> _Part | None:
    """Integrate over the solved sizes of a particle; None if there are too few."""
    cell = ensemble.particles.index(name), wavelength
    solved = np.flatnonzero(has_result(out["status"][cell]))
    if solved.size < FEWEST_SIZES:
        return None
    spread = population.distribution_of(name)
    scale = math.pi * population.number_fractions()[name]
    radius = out["radius_um"][wavelength, solved]

    def weights(nodes: np.ndarray) -> np.ndarray:
        return scale * size_weights(nodes, spread.density, spread.log_width, 2, spread.breaks_um)

    mean, error = {}, {}
    for what in ("phase", "extinction"):
        values = out[f"{what}_matrix"][cell][solved]
        widths = out[f"{what}_matrix_error"][cell][solved]
        mean[what] = np.tensordot(weights(radius), values, 1)
        halves = [coarse_nodes(radius.size, half) for half in range(2)]
        rough = [np.tensordot(weights(radius[keep]), values[keep], 1) for keep in halves]
        change = np.abs(np.stack(rough) - mean[what]).max(axis=0)
        error[what] = np.tensordot(np.abs(weights(radius)), widths, 1) + change
    low, high = float(radius[0]), float(radius[-1])
    outside = spread.share_below(low, 2) + spread.share_above(high, 2)
    return _Part(mean, error, outside)


def _empty(variable: Variable, shape: tuple[int, ...]) -> np.ndarray:
    dtype: Any = np.dtypes.StringDType() if variable.dtype == "string" else variable.dtype
    return np.full(shape, variable.fill_value, dtype)


def write_oriented(
    path: Path, columns: Mapping[str, np.ndarray], attributes: Mapping[str, Any], source: str
) -> None:
    """Publish a table of oriented particles at `path`.

    Parameters
    ----------
    path : Path
        A `NAME.zarr` folder.
    columns : mapping of str to array
        As `build` makes them.
    attributes : mapping
        Global attributes.
    source : str
        Content digest of the campaign's table.
    """
    sweep_abandoned(path.parent)
    with staging(path) as folder:
        group = zarr.open_group(folder, mode="w", zarr_format=3)
        whole = hashlib.sha256(json.dumps([dict(attributes), source], sort_keys=True).encode())
        for variable in variables():
            content = columns[variable.name]
            if content.size:
                ShardedArray(group, variable, content.shape).write_all(content)
            text = variable.dtype == "string"
            raw = "\n".join(content).encode() if text else np.ascontiguousarray(content).tobytes()
            whole.update(f"{variable.name} {content.shape}".encode() + raw)
        date = now()
        group.attrs.update(
            {
                **attributes,
                "table_content_digest": source,
                "error_statement": COVERAGE,
                "date_created": date,
                "content_digest": whole.hexdigest(),
            }
        )
        with warnings.catch_warnings():
            # Consolidated metadata is not in the Zarr 3 specification; readers that do not
            # know it ignore it.
            warnings.filterwarnings("ignore", message="Consolidated metadata", module="zarr")
            zarr.consolidate_metadata(group.store)
        publish(folder, path, KIND, whole.hexdigest(), date)


def open_oriented(path: Path | str) -> xarray.Dataset:
    """Open a table of oriented particles that is complete and as it was committed.

    Raises
    ------
    IntegrityError
        Naming each file that is wrong, or saying that it was never committed.
    """
    import xarray

    path = Path(path)
    kind = commit_record(path).get("kind")
    if kind != KIND:
        raise IntegrityError(f"{path}: a committed {kind}, not a table of oriented particles")
    verify_folder(path)
    return xarray.open_zarr(path)


def oriented_of(path: Path, table: xarray.Dataset) -> xarray.Dataset:
    """Open the table of oriented particles that belongs to a campaign's table.

    Raises
    ------
    IntegrityError
        If it is missing, altered, or made from another table.
    """
    hint = "\n  hint: run 'scatterloom orient' again"
    if not path.exists():
        raise IntegrityError(f"{path}: not written yet{hint}")
    found = open_oriented(path)
    if found.attrs.get("table_content_digest") != table.attrs.get("content_digest"):
        raise IntegrityError(f"{path}: made from another table than the one beside it{hint}")
    return found
