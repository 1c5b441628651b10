"""Predict what a campaign will take, from its jobs, before anything is solved."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from scatterloom.campaign import effort
from scatterloom.campaign.expand import Grid
from scatterloom.campaign.geometry import extents, mirror_planes
from scatterloom.campaign.plan import Job

_COMPLEX64_BYTES = 8


@dataclass(frozen=True)
class Outlook:
    """Size and predicted cost of a campaign.

    `largest_job_bytes` is what the largest job holds at once; `core_hours` counts every
    case as new.
    """

    cells: int
    cases: int
    jobs: int
    anchors: int
    core_hours: float
    largest_size_parameter: float
    finest_cells_across: int
    largest_job_bytes: int


def outlook(grid: Grid, jobs: Sequence[Job]) -> Outlook:
    """Return the outlook of a grid and its jobs."""
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
    )


def job_bytes(job: Job) -> int:
    """Return the predicted memory of a job [bytes], beside that of the program itself.

    Counted are, on the finest lattice and in single precision: the incident block, the
    fields and residuals, search directions and their images (about two of each for every
    wave), one octant of cells standing for all (more with fewer mirror planes); the kernel
    and the padded grids of one product; and for a span the fields of the anchors on all
    lattices.
    """
    reach = extents(job.shape)
    axes = reach.half
    order = effort.n_max(reach.radii, max(x for _, x in job.cases), job.accuracy.f11_relative)
    waves = 2 * order * (order + 2)
    finest = max(job.levels)
    spacing = 2.0 * max(axes) / finest
    filled = 4.0 * math.pi / 3.0 / spacing**3
    fields = 3.0 * filled / 2 ** mirror_planes(job.shape) * waves
    box = math.prod(2.0 * axis / spacing + 1.0 for axis in axes)
    blocks = 7.0
    if job.kind == "span":
        blocks += len(job.anchors) * sum((n / finest) ** 3 for n in job.levels)
    return round((blocks * fields + 6.0 * box + 8 * 3 * 2.0 * box) * _COMPLEX64_BYTES)
