"""What the rule graph knows of a campaign: its jobs, their files and their digests.

The Snakefile and the commands read the campaign through this module, so that both
see the same plan.
"""

from __future__ import annotations

import hashlib
import json
import shutil
from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property
from pathlib import Path
from typing import Any

from scatterloom import campaign as campaigns
from scatterloom.campaign.effort import NUMERICS_REVISION
from scatterloom.campaign.expand import Grid, expand
from scatterloom.campaign.plan import Job, plan
from scatterloom.errors import IntegrityError
from scatterloom.outline import exchange_possible, outline_of, table_digest
from scatterloom.store.atomic import sweep_abandoned, write_if_changed
from scatterloom.store.commit import commit_record, verify_folder
from scatterloom.store.layout import Layout, results_root


def canonical_digest(value: Any) -> str:
    """Return 20 hex digits of the SHA-256 of a JSON-able value, the same on every machine."""
    text = json.dumps(value, sort_keys=True, separators=(",", ":"), allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()[:20]


@dataclass(frozen=True)
class Graph:
    """A campaign with its plan.

    Attributes
    ----------
    campaign : Campaign
    layout : Layout
        Paths in the campaign's folder.
    grid : Grid
    jobs : dict of str to Job
        By name, in the order of the plan.
    """

    campaign: campaigns.Campaign
    layout: Layout
    grid: Grid
    jobs: Mapping[str, Job] = field(repr=False)

    @classmethod
    def open(cls, config: Path | str, results: Path | str | None = None) -> Graph:
        """Read, expand and plan the campaign file `config`.

        Raises
        ------
        BadInput
            With every problem of the file.
        EnvironmentProblem
            If there is no folder for the results.
        """
        return cls.plan(campaigns.load(Path(config)), results)

    @classmethod
    def plan(cls, campaign: campaigns.Campaign, results: Path | str | None = None) -> Graph:
        """Expand and plan a campaign that is read already."""
        grid = expand(campaign)
        layout = Layout(results_root(results) / campaign.name)
        return cls(campaign, layout, grid, {job.name: job for job in plan(grid)})

    @cached_property
    def specs(self) -> dict[str, dict[str, Any]]:
        """Specification of every job, by name."""
        return {name: job.spec() for name, job in self.jobs.items()}

    def job_digest(self, name: str) -> str:
        """Digest of everything that the result of a job depends on."""
        return canonical_digest([self.specs[name], NUMERICS_REVISION])

    @cached_property
    def table_digest(self) -> str:
        """Digest of everything, besides the cases, that the table depends on."""
        return table_digest(self.campaign)

    @property
    def has_populations(self) -> bool:
        """Whether there is a bulk table to make."""
        return bool(self.campaign.model.populations)

    @property
    def has_exchange(self) -> bool:
        """Whether populations can be expanded: scattering angles over the whole sphere."""
        return exchange_possible(self.campaign)

    @property
    def cases_of(self) -> dict[str, int]:
        """Number of cases of every job."""
        return {name: len(job.cases) for name, job in self.jobs.items()}

    def case_files(self) -> dict[Path, list[str]]:
        """Every case file with the digests of the cases it holds."""
        return {
            self.layout.case_file(name): [digest for digest, _ in job.cases]
            for name, job in self.jobs.items()
        }

    def prepare(self) -> None:
        """Write the merged configuration and the job specifications where they changed.

        Specifications of an earlier plan are removed. A receipt that does not belong
        to the table beside it is removed as well, so that the table is gathered again.
        """
        layout = self.layout
        write_if_changed(layout.config, self.campaign.merged_yaml().encode())
        for name, spec in self.specs.items():
            text = json.dumps(spec, sort_keys=True).encode()
            # Made again from the campaign if lost: ten thousand syncs would take a minute.
            write_if_changed(layout.job_file(name), text, durable=False)
        for path in layout.jobs.glob("*.json"):
            if path.stem not in self.jobs:
                path.unlink(missing_ok=True)
        outline_of(self).write()
        if self.grid.keep_transitions:
            self._forget_without_transitions()
        if not receipt_holds(layout):
            layout.receipt.unlink(missing_ok=True)

    def _forget_without_transitions(self) -> None:
        """Remove case files of jobs whose transition matrices were deleted: solved again."""
        for name, job in self.jobs.items():
            path = self.layout.case_file(name)
            if not path.exists():
                continue
            wanted = [self.layout.solved_transitions(digest) for digest, _ in job.cases]
            failed = {note.stem for note in self.layout.failed.glob("*.json")}
            if any(not p.exists() and p.stem not in failed for p in wanted):
                path.unlink()

    def drop_fields(self) -> None:
        """Remove the fields that a finished campaign has no more use for.

        The engine drops them as it goes, but forgets those of a run that was killed.
        """
        shutil.rmtree(self.layout.fields, ignore_errors=True)
        for path in self.layout.solved.glob("*/*.npz"):
            path.unlink(missing_ok=True)

    def sweep(self) -> None:
        """Remove what killed writers left behind."""
        layout = self.layout
        folders = [layout.folder, layout.jobs, layout.cases, layout.fields, layout.progress]
        folders += sorted(p for p in layout.state.glob("*/*") if p.is_dir())
        for folder in (*folders, layout.table, layout.figures):
            sweep_abandoned(folder)


def receipt_holds(layout: Layout) -> bool:
    """Tell whether the receipt names the table that is committed now, with all its files.

    Names and lengths are compared; digests are left to `verify` and to every reader.
    """
    try:
        receipt = json.loads(layout.receipt.read_bytes())
        verify_folder(layout.table, digests=False)
        committed = commit_record(layout.table)["manifest_sha256"]
        return bool(receipt["manifest_sha256"] == committed)
    except (OSError, ValueError, KeyError, TypeError, IntegrityError):
        return False
