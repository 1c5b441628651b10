"""Where everything lies: the checkout, the results, the folder of one campaign."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from scatterloom.errors import EnvironmentProblem


def checkout() -> Path | None:
    """Return the top of the checkout that this package runs from, or None if installed alone."""
    top = Path(__file__).resolve().parents[3]
    return top if (top / "Snakefile").is_file() and (top / "workflow").is_dir() else None


def results_root(given: str | Path | None) -> Path:
    """Return the folder that holds one folder per campaign, as an absolute path.

    Parameters
    ----------
    given : path or None
        What the user asked for; None for `results/` of the checkout.

    Raises
    ------
    EnvironmentProblem
        If nothing is given and there is no checkout.
    """
    if given is not None:
        return Path(given).absolute()
    top = checkout()
    if top is None:
        raise EnvironmentProblem(
            "scatterloom does not run from a checkout, so there is no default for the results; "
            "name a folder with --results"
        )
    return top / "results"


@dataclass(frozen=True)
class Layout:
    """Paths inside the folder of a campaign (none of them need exist)."""

    folder: Path

    @property
    def config(self) -> Path:
        """The merged configuration."""
        return self.folder / "config.yaml"

    @property
    def solids(self) -> Path:
        """Content of the files that shapes were read from, by digest."""
        return self.folder / "solids"

    @property
    def lock(self) -> Path:
        """Held by the run that works on the campaign."""
        return self.folder / ".campaign.lock"

    @property
    def jobs(self) -> Path:
        """Specifications of the solver jobs."""
        return self.folder / "jobs"

    @property
    def cases(self) -> Path:
        """Published case files, one a job."""
        return self.folder / "cases"

    @property
    def fields(self) -> Path:
        """Published fields of the anchors, one file a job."""
        return self.folder / "fields"

    @property
    def state(self) -> Path:
        """What survives a failed or killed job; unknown to the rule graph."""
        return self.folder / "state"

    @property
    def outline(self) -> Path:
        """The plan in short, for those who need not expand the campaign."""
        return self.state / "plan.json"

    @property
    def turn(self) -> Path:
        """Which run the campaign belongs to."""
        return self.state / "turn.json"

    @property
    def failed(self) -> Path:
        """One note for every case that gave no result, by digest."""
        return self.state / "failed"

    @property
    def checkpoints(self) -> Path:
        """Best iterates of cases that take long."""
        return self.state / "checkpoints"

    @property
    def library(self) -> Path:
        """Solved cases of all campaigns in the same folder of results."""
        return self.folder.parent / ".case_library"

    @property
    def progress(self) -> Path:
        """Heartbeats of the solver jobs."""
        return self.state / "progress"

    @property
    def solved(self) -> Path:
        """Single solved cases, by digest."""
        return self.state / "cases"

    @property
    def transitions(self) -> Path:
        """Transition matrices of solved cases, by digest, where they are kept."""
        return self.state / "transitions"

    @property
    def logs(self) -> Path:
        """Logs of the workflow engine and of every job."""
        return self.state / "logs"

    @property
    def table(self) -> Path:
        """The table."""
        return self.folder / "table.zarr"

    @property
    def receipt(self) -> Path:
        """Names the content of the table last gathered; the rule graph follows this file."""
        return self.folder / "table.json"

    @property
    def bulk(self) -> Path:
        """Quantities of the populations."""
        return self.folder / "bulk.zarr"

    @property
    def oriented(self) -> Path:
        """Tables of oriented particles, one for each distribution, and their index."""
        return self.folder / "oriented"

    def single(self, name: str) -> Path:
        """Result of a single solve."""
        return self.folder / "single" / f"{name}.nc"

    @property
    def exchange(self) -> Path:
        """Files for radiative transfer and their index."""
        return self.folder / "exchange"

    @property
    def comparisons(self) -> Path:
        """Comparisons with measurements, one folder each."""
        return self.folder / "compare"

    @property
    def preview(self) -> Path:
        """Pictures of the particles, drawn before anything is solved."""
        return self.folder / "preview"

    @property
    def figures(self) -> Path:
        """Figures and their index."""
        return self.folder / "figures"

    @property
    def audit(self) -> Path:
        """Results of the physical checks."""
        return self.folder / "audit.json"

    @property
    def report(self) -> Path:
        """The report."""
        return self.folder / "report.html"

    def case_file(self, job: str) -> Path:
        """Case file of a job."""
        return self.cases / f"{job}.cases"

    def job_file(self, job: str) -> Path:
        """Specification of a job."""
        return self.jobs / f"{job}.json"

    def field_file(self, job: str) -> Path:
        """Fields of an anchors job."""
        return self.fields / f"{job}.npz"

    def solved_case(self, digest: str) -> Path:
        """Record of a single solved case."""
        return self.solved / digest[:2] / f"{digest}.case"

    def solved_transitions(self, digest: str) -> Path:
        """Transition matrices of a solved case."""
        return self.transitions / digest[:2] / f"{digest}.npz"

    def solved_fields(self, digest: str) -> Path:
        """Fields of an anchor whose job has not finished."""
        return self.solved / digest[:2] / f"{digest}.npz"
