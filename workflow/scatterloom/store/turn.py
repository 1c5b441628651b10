"""Whose turn it is: every run leaves a token, and the jobs of earlier runs stop at the sight.

The kernel ends the local jobs of a killed run, but nobody ends those that a batch system
has taken over. They carry the token of their run, look at the file before they write, and
leave the campaign to its newer run if the token is another one.
"""

from __future__ import annotations

import json
import re
import secrets
import socket
from dataclasses import asdict, dataclass, replace
from pathlib import Path

from scatterloom.errors import CampaignHeld, IntegrityError
from scatterloom.store.atomic import atomic_write
from scatterloom.store.provenance import now

_TOKEN = re.compile(r"[0-9a-f]{12}")


@dataclass(frozen=True)
class Turn:
    """The record of the run that works on a campaign, or was the last to do so.

    Attributes
    ----------
    token : str
        Identifies the run; part of the names of its jobs in a batch system.
    submitted : tuple of str
        Tokens of all runs that may have jobs left in Slurm, this one included.
    host, since : str
        Where and when the run began.
    """

    token: str
    submitted: tuple[str, ...]
    host: str
    since: str

    @property
    def job_names(self) -> tuple[str, ...]:
        """What the names of jobs that may be left in Slurm begin with."""
        return tuple(job_name(token) for token in self.submitted)


def job_name(token: str) -> str:
    """What the names of a run's jobs in Slurm begin with."""
    return f"scatterloom-{token}"


def read_turn(path: Path) -> Turn | None:
    """Return the record of the last run, or None if there was none.

    Raises
    ------
    IntegrityError
        If the file is not one: jobs of earlier runs can then not be told from others.
    """
    try:
        content = json.loads(path.read_bytes())
        turn = Turn(**(content | {"submitted": tuple(content["submitted"])}))
        if all(_TOKEN.fullmatch(token) for token in (turn.token, *turn.submitted)):
            return turn
    except FileNotFoundError:
        return None
    except (ValueError, TypeError, KeyError):
        pass
    raise IntegrityError(
        f"{path}: not the record of a run\n  hint: make sure that no job of this campaign is "
        "at work on a cluster, then remove the file"
    )


def take_turn(path: Path, *, submits: bool) -> Turn:
    """Begin the turn of a new run; from here on, jobs of earlier ones write no more.

    Parameters
    ----------
    path : Path
        The record.
    submits : bool
        Whether the run hands jobs to Slurm.
    """
    before = read_turn(path)
    token = secrets.token_hex(6)
    earlier = before.submitted if before else ()
    own = (token,) if submits else ()
    turn = Turn(token, (*earlier, *own), socket.gethostname(), now())
    _write(path, turn)
    return turn


def settle(path: Path, turn: Turn, left: tuple[str, ...]) -> Turn:
    """Note that only runs with the tokens `left` may have jobs in Slurm still."""
    settled = replace(turn, submitted=left)
    _write(path, settled)
    return settled


def _write(path: Path, turn: Turn) -> None:
    with atomic_write(path) as stream:
        stream.write(json.dumps(asdict(turn)).encode())


def check_turn(path: Path, token: str) -> None:
    """Let a job of the run `token` go on only while no newer run has begun.

    Raises
    ------
    CampaignHeld
        If one has, or if the record is gone.
    """
    try:
        turn = read_turn(path)
    except IntegrityError:
        turn = None
    if turn is None or turn.token != token:
        who = f"run {turn.token} on {turn.host} since {turn.since}" if turn else "nobody knows whom"
        raise CampaignHeld(f"this job belongs to run {token}, but the campaign to {who}")
