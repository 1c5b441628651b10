"""Cases solved as a campaign solves them, without its files."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from scatterloom.attempts import Task
from scatterloom.attempts import solve_case as solve_attempts
from scatterloom.campaign import effort
from scatterloom.campaign.geometry import extents
from scatterloom.particle.lattice import Lattice, lattice
from scatterloom.particle.shapes import Shape, from_spec
from scatterloom.scattering.case import Asked, combine_levels
from scatterloom.scattering.record import CaseRecord
from scatterloom.solve.start import StoredFields, interpolated_start
from scatterloom.transition.level import LevelResult, solve_level

ASKED = Asked(f11_relative=0.02, ratio_absolute=0.01, efficiency_relative=0.005)
"""The defaults of a campaign."""


def solve_case(
    shape: Shape,
    lattices: Sequence[Lattice],
    index: complex | Sequence[complex],
    x: float,
    anchors: Sequence[Sequence[LevelResult]] = (),
    threads: int = 1,
) -> list[LevelResult]:
    """All levels of one case, cold or from the fields of solved neighbours."""
    results = []
    for level, grid in enumerate(lattices):
        neighbours: list[StoredFields] = [anchor[level].fields for anchor in anchors]
        results.append(
            solve_level(
                grid,
                index,
                x,
                effort.n_max((*shape.half_extents, shape.circumscribed_radius), x),
                effort.operator_tolerance(ASKED.ratio_absolute),
                start=interpolated_start(neighbours, x) if neighbours else None,
                threads=threads,
            )
        )
    return results


def record_of(
    shape: Shape,
    cells: Sequence[int],
    lattices: Sequence[Lattice],
    index: complex | Sequence[complex],
    x: float,
    levels: Sequence[LevelResult],
) -> CaseRecord:
    """The record of a case from its solved levels."""
    return combine_levels(
        levels,
        cells,
        shape.symmetry,
        index,
        x,
        lattices[-1].spacing,
        ASKED,
        digest="",
        shape="",
        start="cold",
        products=float(np.mean([level.solution.products for level in levels])),
        cold_products_estimate=0.0,
        wall_seconds=0.0,
    )


def first_levels(
    spec: Mapping[str, Any], indices: Sequence[complex], x: float, f11_relative: float
) -> tuple[int, ...]:
    """The lattices a campaign begins such a case with."""
    return effort.levels(extents(spec).lengths, max(indices, key=abs), x, f11_relative)


def predicted_seconds(
    spec: Mapping[str, Any], indices: Sequence[complex], x: float, f11_relative: float
) -> float:
    """Seconds on one core for the first lattices of a case."""
    reach = extents(spec)
    index = max(indices, key=abs)
    default = effort.levels(reach.lengths, index, x)
    asked = first_levels(spec, indices, x, f11_relative)
    more = sum(n**3 for n in asked) / sum(n**3 for n in default)
    return more * effort.cost(reach.half, index, x, True, reach.mirror_planes)


def cold_record(
    spec: Mapping[str, Any],
    indices: Sequence[complex],
    x: float,
    threads: int = 1,
    asked: Asked = ASKED,
) -> CaseRecord:
    """The record of a case solved from nothing, refined as a job does it.

    Parameters
    ----------
    spec : mapping
        Shape, as a campaign describes it.
    indices : sequence of complex
        From outside inwards.
    x : float
        Size parameter.
    threads : int
    asked : Asked
        Accuracy.
    """
    index, *inner = indices
    task = Task(
        name="benchmark",
        kind="anchors",
        shape=from_spec(spec),
        shape_json=json.dumps(spec),
        index=index,
        inner_indices=tuple(inner),
        cells=first_levels(spec, indices, x, asked.f11_relative),
        refinements=effort.MOST_REFINEMENTS,
        tolerance=effort.operator_tolerance(asked.ratio_absolute),
        asked=asked,
        threads=threads,
    )
    record, _ = solve_attempts(task, "", x, (), lambda size, residual: None)
    return record


def turned_record(
    spec: Mapping[str, Any],
    indices: Sequence[complex],
    x: float,
    rotation: NDArray[np.float64],
    threads: int = 1,
) -> CaseRecord:
    """The record of a case on the first lattices, turned against the particle; not refined."""
    shape = from_spec(spec)
    cells = first_levels(spec, indices, x, ASKED.f11_relative)
    lattices = [lattice(shape, n, rotation) for n in cells]
    levels = solve_case(shape, lattices, indices, x, threads=threads)
    return record_of(shape, cells, lattices, indices, x, levels)
