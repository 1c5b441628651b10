"""Predict what a campaign will take, from its jobs, before anything is solved."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from scatterloom.campaign.expand import Grid
from scatterloom.campaign.geometry import half_axes
from scatterloom.campaign.memory import case_bytes
from scatterloom.campaign.plan import Job


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
    """Return the predicted peak memory of a job, that of its largest case [bytes]."""
    return case_bytes(
        half_axes(job.shape),
        max(x for _, x in job.cases),
        job.levels,
        job.accuracy.f11_relative,
        len(job.anchors),
    )
