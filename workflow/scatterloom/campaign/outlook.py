"""Predict what a campaign will take, from its jobs, before anything is solved."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from scatterloom.campaign import effort
from scatterloom.campaign.expand import Grid
from scatterloom.campaign.geometry import circumscribed_radius
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
    """Return the predicted memory of a job [bytes].

    Counted are the block of fields of the largest case on its finest lattice and the block
    of products with it, three components in every filled cell for every wave, and for a
    span the fields of the anchors around it, all in single precision.
    """
    radius = circumscribed_radius(job.shape)
    reach = radius * max(x for _, x in job.cases)
    order = effort.n_max(reach)
    waves = 2 * order * (order + 2)
    spacing = 2.0 * radius / max(job.levels)
    filled = 4.0 * math.pi / 3.0 / spacing**3
    blocks = 2 + (len(job.anchors) if job.kind == "span" else 0)
    return round(blocks * 3.0 * filled * waves * _COMPLEX64_BYTES)
