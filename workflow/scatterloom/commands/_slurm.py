"""Questions and orders to Slurm: which jobs of a run are left, end them, how to ask for more."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import time
from collections.abc import Iterable, Sequence

from scatterloom.errors import EnvironmentProblem

ANSWER_S = 60.0
"""Time allowed to one question [s]; a busy controller can take tens of seconds."""
END_S = 300.0
"""Time allowed to cancelled jobs to end [s]; sites grant a grace of 30 s and more."""

FORGOTTEN_S = 200
"""A poll of the engine may come 180 s after the last one. Where Slurm forgets finished jobs
sooner than this, their end would be missed, and only the accounting database tells."""

_OVER = (
    ("no_memory", re.compile(r"exceeded (?:job )?memory limit|oom[-_ ]kill|out of memory", re.I)),
    ("no_time", re.compile(r"DUE TO TIME LIMIT")),
)


def jobs_left(names: Sequence[str]) -> list[str]:
    """Return the numbers of the jobs, waiting or at work, whose names begin with one of `names`.

    Raises
    ------
    EnvironmentProblem
        If Slurm does not answer.
    """
    if not names:
        return []
    # Only the caller's own: nobody else can have submitted them, and the list stays short.
    lines = _ask(["squeue", "--me", "--noheader", "--format=%A %j"]).splitlines()
    pairs = [line.split(maxsplit=1) for line in lines]
    left = {pair[0] for pair in pairs if len(pair) == 2 and pair[1].startswith(tuple(names))}
    return sorted(left, key=int)


def cancel(names: Sequence[str], patience: float = END_S) -> int:
    """Cancel the jobs whose names begin with one of `names` and wait until all have ended.

    Returns
    -------
    int
        How many there were.

    Raises
    ------
    EnvironmentProblem
        If Slurm does not answer, or jobs do not end in time.
    """
    deadline = time.monotonic() + patience
    seen: set[str] = set()
    pause = 0.2
    while left := jobs_left(names):
        # What a dying submission adds in the meantime is cancelled as well.
        new = sorted(set(left) - seen, key=int)
        for some in (new[i : i + 500] for i in range(0, len(new), 500)):
            _ask(["scancel", *some])
        seen |= set(left)
        if time.monotonic() > deadline:
            raise EnvironmentProblem(
                f"{len(left)} Slurm jobs of an earlier run do not end: {' '.join(left[:5])}\n"
                "  hint: see 'squeue --me'; the same command goes on when they are gone"
            )
        time.sleep(pause)
        pause = min(2.0 * pause, 5.0)
    return len(seen)


def status_command() -> str:
    """Return the program that tells the engine how jobs fare: "squeue" or "sacct".

    Raises
    ------
    EnvironmentProblem
        If Slurm does not answer, or forgets jobs too soon and keeps no accounts.
    """
    text = _ask(["scontrol", "show", "config"])
    kept = re.search(r"^AccountingStorageType\s*=\s*(\S+)", text, re.MULTILINE)
    if kept and not kept[1].endswith("/none") and kept[1] != "(null)" and shutil.which("sacct"):
        return "sacct"
    age = re.search(r"^MinJobAge\s*=\s*(\d+)", text, re.MULTILINE)
    if age and int(age[1]) < FORGOTTEN_S:
        raise EnvironmentProblem(
            f"this Slurm keeps no accounts and forgets jobs {age[1]} s after their end, too soon "
            f"to see how they ended\n  hint: ask its operators for MinJobAge of {FORGOTTEN_S} or "
            "more; or run the whole campaign inside one job with --profile laptop"
        )
    return "squeue"


def site_resources() -> list[str]:
    """Return what Slurm's own variables ask for and the engine would overrule."""
    wanted = {"slurm_account": "SBATCH_ACCOUNT", "slurm_partition": "SBATCH_PARTITION"}
    return [f"{key}={os.environ[name]!r}" for key, name in wanted.items() if os.environ.get(name)]


def own_words(log: str) -> list[str]:
    """Return the lines of a job's log that Slurm wrote, not the job."""
    return [line for line in log.splitlines() if re.match(r"(?:slurmstepd|srun)\b.*: ", line)]


def limit_exceeded(words: Iterable[str]) -> str | None:
    """Return "no_memory" or "no_time" if Slurm's own words say that a job went over a limit."""
    text = "\n".join(words)
    return next((reason for reason, pattern in _OVER if pattern.search(text)), None)


def _ask(command: list[str]) -> str:
    try:
        done = subprocess.run(
            command, capture_output=True, text=True, errors="replace", timeout=ANSWER_S, check=False
        )
    except FileNotFoundError:
        raise EnvironmentProblem(
            f"jobs of this campaign may be left in Slurm, but there is no program {command[0]} "
            "here\n  hint: run the command where they were submitted; if they are gone for "
            "sure, remove state/turn.json in the folder of the campaign"
        ) from None
    except subprocess.TimeoutExpired:
        raise EnvironmentProblem(
            f"Slurm does not answer {command[0]} within {ANSWER_S:g} s"
        ) from None
    # A job that ended in between is none to cancel.
    if done.returncode != 0 and command[0] != "scancel":
        words = done.stderr.strip().splitlines() or ["no reason given"]
        raise EnvironmentProblem(f"Slurm does not answer {command[0]}: {words[-1]}")
    return done.stdout
