"""What makes a campaign expensive, and what would halve its cost."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

from scatterloom.campaign.expand import Grid
from scatterloom.campaign.plan import Job


@dataclass(frozen=True)
class Shares:
    """Where the predicted time goes.

    Attributes
    ----------
    dominant : str
        The particle whose cases take most.
    dominant_share : float
        Its share of all time, 0 to 1 (cases that several particles share count for each).
    largest_fifth_share : float
        Share of the largest fifth of the cases.
    anchors_share : float
        Share of the sizes that are solved from nothing.
    halving_size_parameter : float
        All cases up to this size take half of the time: with the sizes beyond left out, the
        campaign costs half.
    """

    dominant: str
    dominant_share: float
    largest_fifth_share: float
    anchors_share: float
    halving_size_parameter: float


def shares(grid: Grid, jobs: Sequence[Job]) -> Shares:
    """Return where the predicted time of a campaign goes."""
    cost: dict[str, float] = {}
    sizes: list[tuple[float, float]] = []
    cold = 0.0
    for job in jobs:
        if job.kind == "anchors":
            cold += job.seconds
        # Within a job, time goes with the second power of the size: its waves.
        weight = [x**2 for _, x in job.cases]
        scale = job.seconds / math.fsum(weight)
        for (digest, x), part in zip(job.cases, weight, strict=True):
            cost[digest] = part * scale
            sizes.append((x, part * scale))
    whole = math.fsum(cost.values())
    digests = [case.digest for case in grid.cases]
    of_particle = {
        name: math.fsum(cost[digests[i]] for i in {int(i) for i in cells.ravel()})
        for name, cells in zip(grid.particle_names, grid.where, strict=True)
    }
    dominant = max(of_particle, key=lambda name: of_particle[name])
    sizes.sort()
    fifth = sizes[len(sizes) - max(1, len(sizes) // 5) :]
    spent, halving = 0.0, sizes[0][0]
    for x, part in sizes:
        spent += part
        if spent > 0.5 * whole:
            break
        halving = x
    return Shares(
        dominant=dominant,
        dominant_share=of_particle[dominant] / whole,
        largest_fifth_share=math.fsum(part for _, part in fifth) / whole,
        anchors_share=cold / whole,
        halving_size_parameter=halving,
    )
