"""Predict what a campaign will take, from its jobs, before anything is solved."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from scatterloom.campaign import effort
from scatterloom.campaign.expand import Grid
from scatterloom.campaign.geometry import extents
from scatterloom.campaign.memory import case_bytes
from scatterloom.campaign.plan import Job


@dataclass(frozen=True)
class Outlook:
    """Size and predicted cost of a campaign.

    `largest_job_bytes` is what the largest job holds at once; `core_hours` counts every
    case as new and is for the machine that the cost model was fitted to. `table_bytes` and
    `case_bytes` are compressed sizes on disk, of the table and of all case files.
    """

    cells: int
    cases: int
    jobs: int
    anchors: int
    core_hours: float
    largest_size_parameter: float
    finest_cells_across: int
    largest_job_bytes: int
    table_bytes: int
    case_bytes: int


_MATRIX_BYTES_A_CELL_AND_ANGLE = 110.0
"""Sixteen elements with two half widths each, compressed."""

_CASE_BYTES_A_DEGREE = 420.0
_CASE_BYTES = 1500.0
"""A record is a header and, per degree of its expansion, compressed coefficients of all
variants."""


def outlook(grid: Grid, jobs: Sequence[Job], angles: int = 181) -> Outlook:
    """Return the outlook of a grid and its jobs for a table of so many angles."""
    anchors = [job for job in jobs if job.kind == "anchors"]
    return Outlook(
        cells=int(grid.where.size),
        cases=len(grid.cases),
        jobs=len(jobs),
        anchors=sum(len(job.cases) for job in anchors),
        core_hours=math.fsum(job.seconds for job in jobs) / 3600.0,
        largest_size_parameter=float(grid.size_parameter.max()),
        finest_cells_across=max(max(job.levels) for job in jobs),
        largest_job_bytes=max(job_bytes(job) for job in jobs),
        table_bytes=round(_MATRIX_BYTES_A_CELL_AND_ANGLE * angles * grid.where.size),
        # Each record lies twice: by itself, and in the file of its job.
        case_bytes=2 * sum(_record_bytes(job) for job in jobs),
    )


def _record_bytes(job: Job) -> int:
    """Disk space of the records of a job [bytes]."""
    radii = extents(job.shape).radii
    middle = job.cases[len(job.cases) // 2][1]
    degrees = 2 * effort.n_max(radii, middle, job.accuracy.f11_relative) + 1
    return round(len(job.cases) * (_CASE_BYTES + _CASE_BYTES_A_DEGREE * degrees))


def job_bytes(job: Job) -> int:
    """Return the predicted peak memory of a job, that of its largest case [bytes]."""
    reach = extents(job.shape)
    return case_bytes(
        reach.half,
        reach.radii,
        reach.mirror_planes,
        max(x for _, x in job.cases),
        job.levels,
        job.accuracy.f11_relative,
        len(job.anchors),
    )
