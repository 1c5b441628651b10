"""Shows the progress of a run: a live panel on a terminal, plain lines elsewhere."""

from __future__ import annotations

import os
import sys
import time
from types import TracebackType
from typing import TYPE_CHECKING, TextIO

from scatterloom.store.progress import Heartbeat, Progress

if TYPE_CHECKING:
    from rich.live import Live
    from rich.table import Table

PLAIN_EVERY_S = 5.0
PHASES = {
    "solve_anchors": "solving anchors",
    "solve_span": "filling in between anchors",
    "solve_single": "solving single particles",
    "gather_table": "gathering the table",
    "make_bulk": "averaging over populations",
    "orient_particles": "averaging over orientations",
    "make_exchange": "expanding for radiative transfer",
    "audit": "checking against the laws of physics",
    "make_figures": "drawing figures",
    "make_report": "writing the report",
    "all": "finishing",
}


class TimeLeft:
    """Estimates the time left from the share of the predicted work done since the start."""

    def __init__(self) -> None:
        self._start: tuple[float, float] | None = None

    def update(self, work_done: float, now: float) -> float | None:
        """Return seconds left, or None while too little is done to tell.

        Parameters
        ----------
        work_done : float
            Share of all predicted work, 0 to 1.
        now : float
            A clock in seconds.
        """
        if self._start is None:
            self._start = (work_done, now)
            return None
        first, began = self._start
        if work_done <= first or now <= began:
            return None
        return (1.0 - work_done) * (now - began) / (work_done - first)


def spoken(seconds: float | None) -> str:
    """Write a duration in the two units that matter."""
    if seconds is None:
        return "not known yet"
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60:02d} s"
    return f"{whole // 3600} h {whole % 3600 // 60:02d} min"


def line(progress: Progress, phase: str, left: float | None) -> str:
    """Write the state of a run in one line."""
    parts = [phase, f"{progress.cases_done} of {progress.cases} cases"]
    leading = leading_job(progress)
    if leading is not None:
        if leading.size_parameter is not None:
            parts.append(f"size parameter {leading.size_parameter:.4g}")
        if leading.residual is not None:
            parts.append(f"residual {leading.residual:.1e}")
    if progress.products:
        parts.append(f"{progress.products:.0f} products per wave in all")
    if progress.cases_done < progress.cases:
        parts.append(f"time left {spoken(left)}")
    if progress.failed:
        parts.append(f"{len(progress.failed)} jobs failed")
    return ", ".join(parts)


def leading_job(progress: Progress) -> Heartbeat | None:
    """Return the job that reported last."""
    return max(progress.running, key=lambda job: job.updated, default=None)


class Display:
    """Shows one run; a context manager.

    Parameters
    ----------
    title : str
    stream : text stream
        Where to show it; standard error by default.
    live : bool, optional
        Whether `stream` is a terminal that can redraw; found out if missing.
    """

    def __init__(self, title: str, stream: TextIO | None = None, live: bool | None = None) -> None:
        self._title = title
        self._stream = sys.stderr if stream is None else stream
        if live is None:
            live = self._stream.isatty() and os.environ.get("TERM") != "dumb"
        self._wants_live = live
        self._live: Live | None = None
        self._said = ""
        self._said_at = float("-inf")

    def __enter__(self) -> Display:
        if self._wants_live:
            from rich.console import Console
            from rich.live import Live

            # rich itself honours NO_COLOR.
            console = Console(file=self._stream, force_terminal=True)
            self._live = Live(console=console, transient=True, refresh_per_second=4)
            self._live.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if self._live is not None:
            self._live.stop()
            self._live = None

    def show(self, progress: Progress, phase: str, left: float | None) -> None:
        """Show the state of the run; on plain streams only if it changed, every few seconds."""
        if self._live is not None:
            self._live.update(self._table(progress, phase, left), refresh=True)
            return
        text = line(progress, phase, left)
        now = time.monotonic()
        if text == self._said or now - self._said_at < PLAIN_EVERY_S:
            return
        self._said, self._said_at = text, now
        print(f"{self._title}: {text}", file=self._stream, flush=True)

    def _table(self, progress: Progress, phase: str, left: float | None) -> Table:
        from rich.progress_bar import ProgressBar
        from rich.table import Table

        table = Table(title=self._title, title_justify="left", show_header=False, box=None)
        table.add_row("now", phase)
        table.add_row("cases", f"{progress.cases_done} of {progress.cases}")
        table.add_row("", ProgressBar(max(progress.cases, 1), progress.cases_done, width=40))
        table.add_row("jobs", f"{progress.jobs_done} of {progress.jobs}")
        for job in progress.running[:8]:
            size = "" if job.size_parameter is None else f"size parameter {job.size_parameter:.4g}"
            residual = "" if job.residual is None else f", residual {job.residual:.1e}"
            table.add_row(
                "", f"{job.kind} {job.cases_done} of {job.cases_total} cases, {size}{residual}"
            )
        if progress.products:
            table.add_row("products", f"{progress.products:.0f} per wave in all")
        if progress.failed:
            table.add_row("failed", f"{len(progress.failed)} jobs")
        table.add_row("time left", spoken(left))
        return table
