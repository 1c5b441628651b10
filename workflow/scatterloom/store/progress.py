"""Heartbeats of the solver jobs, and how far a campaign has come."""

from __future__ import annotations

import json
import math
import os
import socket
import time
from collections.abc import Iterable, Mapping
from dataclasses import asdict, dataclass, fields, replace
from pathlib import Path
from typing import Any

from scatterloom.store.atomic import atomic_write, is_alive
from scatterloom.store.layout import Layout

RUNNING, DONE, FAILED, WAITING = "running", "done", "failed", "waiting"
SILENT_S = 600.0
"""A job of another host that has not reported for so long counts as gone [s]."""
_LARGEST = 2**53


@dataclass(frozen=True)
class Heartbeat:
    """The last report of a solver job.

    Attributes
    ----------
    job, kind : str
    state : str
        "running", "done", "failed", or "waiting" for another try.
    cases_done, cases_total : int
    size_parameter, residual : float or None
        Of the case being solved.
    products : float
        Matrix products per wave so far, summed over the finished cases.
    updated : float
        Seconds since 1970.
    pid, host : int, str
    exit_code, message : int or None, str
        Of a failed job.
    solved, seconds : int, float
        Cases that this job solved, and the time they took [s].
    reused : int
        Cases taken from the case library.
    cases_failed : int
        Cases without a result.
    peak_bytes : int
        Largest memory in use while a case was solved [bytes].
    case : str
        Digest of the case being solved, where the reports are rare.
    """

    job: str
    kind: str
    state: str
    cases_done: int
    cases_total: int
    size_parameter: float | None = None
    residual: float | None = None
    products: float = 0.0
    updated: float = 0.0
    pid: int = 0
    host: str = ""
    exit_code: int | None = None
    message: str = ""
    solved: int = 0
    seconds: float = 0.0
    reused: int = 0
    cases_failed: int = 0
    peak_bytes: int = 0
    case: str = ""

    @property
    def alive(self) -> bool:
        """Whether the job is at work now."""
        if self.state != RUNNING:
            return False
        if self.host in ("", socket.gethostname()):
            return is_alive(self.pid)
        return time.time() - self.updated < SILENT_S


def write_heartbeat(folder: Path, heartbeat: Heartbeat) -> None:
    """Publish a heartbeat in the folder of the campaign, stamped with time, process and host."""
    stamped = asdict(heartbeat) | {
        "updated": time.time(),
        "pid": os.getpid(),
        "host": socket.gethostname(),
    }
    path = Layout(folder).progress / f"{heartbeat.job}.json"
    with atomic_write(path, durable=False) as stream:
        stream.write(json.dumps(stamped).encode())


def read_heartbeat(path: Path) -> Heartbeat | None:
    """Read a heartbeat; None if there is none or it is not readable (it is no result)."""
    try:
        text = json.loads(path.read_bytes())
        known = {field.name for field in fields(Heartbeat)}
        beat = Heartbeat(**{name: value for name, value in text.items() if name in known})
        return beat if _plausible(beat) else None
    except (OSError, ValueError, TypeError, AttributeError, RecursionError):
        return None


def _plausible(beat: Heartbeat) -> bool:
    """Whether all values are of their kind, so that whoever shows them meets no surprise."""
    texts = [beat.job, beat.kind, beat.state, beat.host, beat.message]
    counts = [beat.cases_done, beat.cases_total, beat.solved, beat.reused, beat.cases_failed]
    counts += [beat.pid, beat.peak_bytes, beat.exit_code or 0]
    numbers = [beat.products, beat.updated, beat.seconds]
    numbers += [value for value in (beat.size_parameter, beat.residual) if value is not None]
    return (
        all(type(text) is str and _plain(text) for text in texts)
        and all(type(count) is int and 0 <= count < _LARGEST for count in counts)
        and all(type(n) in (int, float) and math.isfinite(n) for n in numbers)
    )


def _plain(text: str) -> bool:
    """Whether a text can be shown and written."""
    return text.replace("\n", "").isprintable()


def fail_heartbeat(
    folder: Path, job: str, kind: str, cases_total: int, exit_code: int, message: str
) -> None:
    """Report that a job failed, keeping what its last heartbeat said of the cases done."""
    last = read_heartbeat(Layout(folder).progress / f"{job}.json")
    if last is None:
        last = Heartbeat(job, kind, FAILED, 0, cases_total)
    write_heartbeat(folder, replace(last, state=FAILED, exit_code=exit_code, message=message))


@dataclass(frozen=True)
class Progress:
    """How far a campaign has come.

    Attributes
    ----------
    cases, cases_done : int
        Unique cases to solve, and solved.
    jobs, jobs_done : int
    running, failed : tuple of Heartbeat
        Jobs at work; jobs that ended with an error and were not done since.
    products : float
        Matrix products per wave, summed over the finished cases of jobs that report them.
    """

    cases: int
    cases_done: int
    jobs: int
    jobs_done: int
    running: tuple[Heartbeat, ...]
    failed: tuple[Heartbeat, ...]
    products: float

    def as_dict(self) -> dict[str, Any]:
        """Plain values for JSON."""
        return asdict(self) | {"cases_left": self.cases - self.cases_done}


class Meter:
    """Measures the progress of a campaign, again and again at little cost.

    Parameters
    ----------
    layout : Layout
    cases_of : mapping of str to int
        Number of cases of every planned job.
    """

    def __init__(self, layout: Layout, cases_of: Mapping[str, int]) -> None:
        self._layout = layout
        self._cases_of = dict(cases_of)
        # A finished job reports no more: its heartbeat is read once.
        self._finished: dict[str, float] = {}
        self.beats: dict[str, Heartbeat] = {}
        """The last report of every job that has reported, at the last look."""
        self._cases_done: dict[str, int] = {}

    def measure(self) -> Progress:
        """Read the state of every job that was not finished at the last look."""
        published = _names(self._layout.cases, ".cases")
        reported = _names(self._layout.progress, ".json")
        done = 0
        products = 0.0
        running, failed = [], []
        for job, count in self._cases_of.items():
            if job in published and job in self._finished:
                done += count
                continue
            path = self._layout.progress / f"{job}.json"
            heartbeat = read_heartbeat(path) if job in reported else None
            if heartbeat is not None:
                self.beats[job] = heartbeat
            if job in published:
                self._finished[job] = heartbeat.products if heartbeat else 0.0
                self._cases_done[job] = count
                done += count
                continue
            self._finished.pop(job, None)
            self._cases_done[job] = min(heartbeat.cases_done, count) if heartbeat else 0
            if heartbeat is None:
                continue
            products += heartbeat.products
            done += self._cases_done[job]
            if heartbeat.alive:
                running.append(heartbeat)
            elif heartbeat.state == FAILED:
                failed.append(heartbeat)
        return Progress(
            cases=sum(self._cases_of.values()),
            cases_done=done,
            jobs=len(self._cases_of),
            jobs_done=len(self._finished),
            running=tuple(running),
            failed=tuple(failed),
            products=products + sum(self._finished.values()),
        )

    def cases_done_of(self, job: str) -> int:
        """Cases of a job that were done at the last look."""
        return self._cases_done.get(job, 0)

    def share_done(self, seconds: Mapping[str, float]) -> float:
        """Return the share, 0 to 1, of the predicted work that was done at the last look.

        Parameters
        ----------
        seconds : mapping of str to float
            Predicted time of every job.
        """
        whole = sum(seconds.values())
        if whole <= 0.0:
            return 1.0
        done = sum(
            seconds[job] * self._cases_done.get(job, 0) / max(count, 1)
            for job, count in self._cases_of.items()
        )
        return done / whole

    def forget_failures(self) -> None:
        """Mark the failures of an earlier run as waiting, before they are tried again."""
        for path in sorted(self._layout.progress.glob("*.json")):
            heartbeat = read_heartbeat(path)
            if heartbeat is not None and heartbeat.state == FAILED:
                write_heartbeat(self._layout.folder, replace(heartbeat, state=WAITING, message=""))


def _names(folder: Path, suffix: str) -> set[str]:
    try:
        found: Iterable[str] = os.listdir(folder)
    except FileNotFoundError:
        return set()
    return {name.removesuffix(suffix) for name in found if name.endswith(suffix)}
