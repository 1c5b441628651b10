"""A real Slurm for the tests, and what it says of the jobs in it."""

from __future__ import annotations

import os
import shutil
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
SCRIPT = ROOT / "scripts" / "slurm-local"
PROGRAMS = ("sbatch", "slurmctld", "slurmd", "munged")


def need_slurm() -> None:
    """Skip without Slurm; fail without it where everything is to be tested."""
    path = f"{os.environ['PATH']}:/usr/sbin"
    missing = [program for program in PROGRAMS if shutil.which(program, path=path) is None]
    reason = f"no {', '.join(missing)} (scripts/system-packages installs them)" if missing else ""
    if not reason and os.geteuid() != 0:
        reason = "a local Slurm is started by root"
    if not reason:
        return
    if os.environ.get("CI"):
        pytest.fail(reason)
    pytest.skip(reason)


def slurm(action: str, folder: Path) -> subprocess.CompletedProcess[str]:
    """Call `scripts/slurm-local` on a folder."""
    return subprocess.run(
        ["timeout", "-k", "10", "120", str(SCRIPT), action, str(folder)],
        capture_output=True,
        text=True,
        check=False,
    )


def jobs(*states: str) -> list[dict[str, str]]:
    """Jobs that Slurm knows, in some states, or those not ended if none are given."""
    keys = ("id", "name", "state", "comment", "memory", "cpus", "minutes")
    done = subprocess.run(
        ["squeue", "--noheader", "--format=%A|%j|%T|%k|%m|%C|%l"]
        + ([f"--states={','.join(states)}"] if states else []),
        capture_output=True,
        text=True,
        check=True,
        timeout=30,
    )
    return [dict(zip(keys, line.split("|"), strict=True)) for line in done.stdout.splitlines()]
