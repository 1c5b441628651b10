"""Cases solved as a campaign solves them, without its files."""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from scatterloom.attempts import Task
from scatterloom.attempts import solve_case as solve_attempts
from scatterloom.campaign import effort
from scatterloom.particle.lattice import Lattice
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
    index: complex,
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
                effort.n_max(tuple(shape.half_axes), x),
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
    index: complex,
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


def cold_record(spec: Mapping[str, Any], index: complex, x: float, threads: int = 1) -> CaseRecord:
    """The record of a case solved from nothing at the default accuracy, as a job does it."""
    shape = from_spec(spec)
    task = Task(
        name="benchmark",
        kind="anchors",
        shape=shape,
        shape_json=json.dumps(spec),
        index=index,
        cells=effort.levels(shape.axes, index, x, ASKED.f11_relative),
        refinements=effort.MOST_REFINEMENTS,
        tolerance=effort.operator_tolerance(ASKED.ratio_absolute),
        asked=ASKED,
        threads=threads,
    )
    record, _ = solve_attempts(task, "", x, (), lambda size, residual: None)
    return record
