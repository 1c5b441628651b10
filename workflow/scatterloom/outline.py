"""What is left of a plan once it is made: the jobs' names, needs, digests and costs.

Expanding a campaign of a million cases takes half a minute, which the workflow engine, a
look at the progress and every job on a cluster would spend again. The run that prepares a
campaign therefore leaves an outline in its state folder; it serves as long as the merged
campaign and the code that plans are the same, and is made anew otherwise.
"""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING

import scatterloom
from scatterloom import campaign as campaigns
from scatterloom.campaign.case import canonical_json
from scatterloom.campaign.effort import NUMERICS_REVISION
from scatterloom.campaign.outlook import job_bytes
from scatterloom.campaign.populations import FEWEST_ANGLES
from scatterloom.campaign.singles import Single, singles_of
from scatterloom.store.atomic import write_if_changed
from scatterloom.store.layout import Layout, results_root
from scatterloom.store.reuse import reuse_wanted

_BESIDE_MB = 512
"""What the workflow engine and the batch system need beside the solver [MiB]."""
_MEMORY_MARGIN = 1.25
"""Predicted memory was met within 15 %."""
_TIME_MARGIN = 4.0
"""A node may be half as fast as the developers' machine, and a case may need finer lattices."""
_LEAST_MINUTES = 15

if TYPE_CHECKING:
    from scatterloom.campaign.case import Case
    from scatterloom.campaign.plan import Job
    from scatterloom.graph import Graph


@dataclass(frozen=True)
class Planned:
    """One job of the outline.

    Attributes
    ----------
    kind : str
        "anchors" or "span".
    needs : tuple of str
        Jobs whose fields are read.
    cases : int
    seconds : float
        Predicted time on one core of the developers' machine.
    digest : str
        Of everything that the result depends on.
    particles : tuple of str
        The particles of the campaign whose cells the job fills.
    memory_mb : int
        Predicted peak memory [MiB].
    """

    kind: str
    needs: tuple[str, ...]
    cases: int
    seconds: float
    digest: str
    particles: tuple[str, ...]
    memory_mb: int

    def request_mb(self, attempt: int) -> int:
        """Memory to ask a cluster for [MiB]: with a margin, and more at every attempt."""
        return _BESIDE_MB + math.ceil(_MEMORY_MARGIN * attempt * self.memory_mb)

    def request_minutes(self, attempt: int) -> int:
        """Time to ask a cluster for [min]: with a margin, and more at every attempt."""
        return _LEAST_MINUTES + math.ceil(_TIME_MARGIN * attempt * self.seconds / 60.0)


@dataclass(frozen=True)
class Outline:
    """A campaign with the outline of its plan."""

    campaign: campaigns.Campaign
    layout: Layout
    jobs: Mapping[str, Planned]

    @classmethod
    def open(cls, config: Path | str, results: Path | str | None = None) -> Outline:
        """Read the campaign file and the outline left by the run that prepared it.

        Without one that fits, the campaign is expanded and planned; nothing is written.

        Raises
        ------
        BadInput
            With every problem of the file.
        EnvironmentProblem
            If there is no folder for the results.
        """
        campaign = campaigns.load(Path(config))
        layout = Layout(results_root(results) / campaign.name)
        jobs = _read(layout, plan_digest(campaign))
        if jobs is not None:
            return cls(campaign, layout, jobs)
        from scatterloom.graph import Graph

        return outline_of(Graph.plan(campaign, results))

    def job_digest(self, name: str) -> str:
        """Digest of everything that the result of a job depends on."""
        return self.jobs[name].digest

    @property
    def table_digest(self) -> str:
        """Digest of everything, besides the cases, that the table depends on."""
        return table_digest(self.campaign)

    @property
    def has_populations(self) -> bool:
        """Whether there is a bulk table to make."""
        return bool(self.campaign.model.populations)

    @property
    def has_orientations(self) -> bool:
        """Whether there are tables of oriented particles to make."""
        return bool(self.campaign.model.orientations)

    @property
    def singles(self) -> dict[str, Single]:
        """Single solves by name."""
        return {single.name: single for single in singles_of(self.campaign)}

    @property
    def has_exchange(self) -> bool:
        """Whether populations can be expanded: scattering angles over the whole sphere."""
        return exchange_possible(self.campaign)

    @property
    def cases_of(self) -> dict[str, int]:
        """Number of cases of every job."""
        return {name: job.cases for name, job in self.jobs.items()}

    def solver_options(self) -> list[str]:
        """Arguments of solve-job that alter no result, only what it may take or reuse."""
        solver = self.campaign.model.solver
        options = ["--checkpoint-minutes", repr(solver.checkpoint_minutes)]
        if solver.memory_gib is not None:
            options += ["--memory-gib", repr(solver.memory_gib)]
        if solver.fields_gib is not None:
            options += ["--fields-gib", repr(solver.fields_gib)]
        if solver.case_minutes is not None:
            options += ["--case-minutes", repr(solver.case_minutes)]
        if reuse_wanted(solver.case_reuse):
            options += ["--library", str(self.layout.library)]
        return options

    def write(self) -> None:
        """Leave the outline in the campaign's state folder."""
        content = {
            "plan": plan_digest(self.campaign),
            "jobs": {name: asdict(job) for name, job in self.jobs.items()},
        }
        text = canonical_json(content | {"check": _check(content)})
        write_if_changed(self.layout.outline, text.encode(), durable=False)


def outline_of(graph: Graph) -> Outline:
    """Return the outline of a planned campaign."""
    grid = graph.grid
    ladders: dict[tuple[str, tuple[complex, ...]], set[str]] = {}
    for name, row in zip(grid.particle_names, grid.where, strict=True):
        for column in row:
            # All sizes of a particle at one wavelength share shape and index.
            case = grid.cases[int(column[0])]
            ladders.setdefault(_ladder(case), set()).add(name)
    jobs = {
        name: Planned(
            kind=job.kind,
            needs=job.needs,
            cases=len(job.cases),
            seconds=job.seconds,
            digest=graph.job_digest(name),
            particles=tuple(sorted(ladders.get(_ladder(job), ()))),
            memory_mb=job_bytes(job) // 2**20 + 1,
        )
        for name, job in graph.jobs.items()
    }
    return Outline(graph.campaign, graph.layout, jobs)


def _ladder(owner: Case | Job) -> tuple[str, tuple[complex, ...]]:
    return canonical_json(dict(owner.shape)), (owner.index, *owner.inner_indices)


def exchange_possible(campaign: campaigns.Campaign) -> bool:
    """Whether a campaign has populations, and scattering angles over the whole sphere."""
    angles = campaign.angles_deg
    whole = len(angles) >= FEWEST_ANGLES and angles[0] == 0.0 and angles[-1] == 180.0
    return bool(campaign.model.populations) and bool(whole)


def table_digest(campaign: campaigns.Campaign) -> str:
    """Digest of everything, besides the cases, that the table of a campaign depends on."""
    return _digest([campaign.merged_yaml(), scatterloom.__version__, NUMERICS_REVISION])


def plan_digest(campaign: campaigns.Campaign) -> str:
    """Digest of everything that the plan of a campaign depends on, its code included."""
    return _digest([table_digest(campaign), _planning_code()])


def _digest(value: object) -> str:
    return hashlib.sha256(canonical_json(value).encode()).hexdigest()[:20]


def _check(content: Mapping[str, object]) -> str:
    return hashlib.sha256(canonical_json(content).encode()).hexdigest()


@cache
def _planning_code() -> str:
    whole = hashlib.sha256(Path(__file__).read_bytes())
    package = Path(__file__).parent
    for room in ("solids", "campaign"):
        for path in sorted((package / room).glob("*.py")):
            whole.update(path.read_bytes())
    return whole.hexdigest()


def _read(layout: Layout, digest: str) -> dict[str, Planned] | None:
    """Return the jobs of a whole outline of this very plan, or None."""
    try:
        content = json.loads(layout.outline.read_bytes())
        check = content.pop("check")
        if content["plan"] != digest or check != _check(content):
            return None
        return {
            name: Planned(
                **(job | {"needs": tuple(job["needs"]), "particles": tuple(job["particles"])})
            )
            for name, job in content["jobs"].items()
        }
    except (OSError, ValueError, KeyError, TypeError, AttributeError):
        return None
