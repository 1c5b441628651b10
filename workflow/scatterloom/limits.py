"""What one case may take, and what this machine has."""

from __future__ import annotations

import os
import resource
import sys
import time
from dataclasses import dataclass
from pathlib import Path

from scatterloom.errors import EnvironmentProblem

SHARE_OF_MEMORY = 0.9
_NO_LIMIT = 1 << 60


@dataclass(frozen=True)
class Limits:
    """Bounds on a single case.

    Attributes
    ----------
    memory_bytes : float
        A case predicted to need more is not started.
    seconds : float
        A case that takes longer is given up.
    checkpoint_seconds : float
        Time between savings of the best iterate.
    granted_bytes : float
        Memory that a cluster granted to the job; a case found to use more is given up before
        the job is killed for it.
    granted_until : float
        Time on the clock of `time.monotonic` at which a cluster will end the job.
    fields_bytes : float
        Disk space for the fields that jobs pass to each other. Fields beyond it are not
        passed on, and the sizes that would have started from them start from nothing.
    """

    memory_bytes: float = float("inf")
    seconds: float = float("inf")
    checkpoint_seconds: float = 300.0
    granted_bytes: float = float("inf")
    granted_until: float = float("inf")
    fields_bytes: float = float("inf")

    def check(self, seconds: float) -> None:
        """Look whether a case that has taken so many seconds may go on.

        Raises
        ------
        OutOfTime, MemoryError
            If the case has exceeded its own limit.
        TimeGrantedIsUp
            If the job is about to.
        """
        if seconds > self.seconds:
            raise OutOfTime
        if self.granted_bytes < float("inf") and peak_bytes() > self.granted_bytes:
            raise MemoryError
        if time.monotonic() > self.granted_until:
            raise TimeGrantedIsUp(
                "stopped before the cluster's time limit; the next attempt goes on from here"
            )


class OutOfTime(Exception):
    """The case takes longer than allowed."""


class TimeGrantedIsUp(EnvironmentProblem):
    """The cluster is about to end the job; what is finished is kept, the rest is to be resumed."""


def machine_bytes() -> int:
    """Memory of this machine [bytes], or of the control group that bounds this process."""
    whole = os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    for name in ("memory.max", "memory/memory.limit_in_bytes"):
        try:
            text = (Path("/sys/fs/cgroup") / name).read_text().strip()
        except OSError:
            continue
        if text.isdigit() and int(text) < _NO_LIMIT:
            whole = min(whole, int(text))
    return whole


def all_cores() -> int:
    """Cores that this process may use."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def forget_peak() -> None:
    """Start the measurement of this process's peak memory anew, where the system can."""
    try:
        Path("/proc/self/clear_refs").write_text("5")
    except OSError:
        return


def peak_bytes() -> int:
    """Peak memory of this process [bytes] since `forget_peak`, or since it began."""
    try:
        for line in Path("/proc/self/status").read_text().splitlines():
            if line.startswith("VmHWM:"):
                return int(line.split()[1]) * 1024
    except OSError:
        pass
    unit = 1 if sys.platform == "darwin" else 1024
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * unit
