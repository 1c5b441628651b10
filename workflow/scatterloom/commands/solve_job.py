"""`scatterloom solve-job`: solve the cases of one job (the rule graph calls this)."""

from __future__ import annotations

import argparse
import os
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING

from scatterloom.commands import COMMANDS

if TYPE_CHECKING:
    from scatterloom.limits import Limits

NAME = "solve-job"
HELP = COMMANDS[NAME]

ATTEMPTS = 3
"""How often a cluster tries a job, each time with more memory and time."""
BESIDE_BYTES = 400 * 2**20
"""What the workflow engine needs beside the solver in the memory granted to a job: two of
its processes, measured at 115 MiB each, and the batch system's own."""
MARGIN_MINUTES = 3.0
CLUSTER_HEARTBEAT_S = 5.0
"""Hundreds of jobs share a file system there."""


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument("spec", metavar="JOB.json", help="job file in the campaign's jobs/ folder")
    parser.add_argument("--threads", type=int, default=1, metavar="N", help="threads to use")
    parser.add_argument("--library", metavar="DIR", help="case library to reuse cases from")
    parser.add_argument("--memory-gib", type=float, metavar="X", help="memory allowed")
    parser.add_argument("--fields-gib", type=float, metavar="X", help="disk for fields")
    parser.add_argument("--case-minutes", type=float, metavar="X", help="time allowed to a case")
    parser.add_argument(
        "--checkpoint-minutes", type=float, default=5.0, metavar="X", help="time between savings"
    )
    parser.add_argument("--turn", metavar="TOKEN", help="the run that the job belongs to")
    cluster = parser.add_argument_group("on a cluster")
    cluster.add_argument("--cluster", action="store_true", help="heed what follows")
    cluster.add_argument("--granted-mib", type=float, metavar="X", help="memory granted")
    cluster.add_argument("--granted-minutes", type=float, metavar="X", help="time granted")
    cluster.add_argument("--attempt", type=int, default=1, metavar="N", help="counted from one")
    parser.add_argument("--parent", type=int, metavar="PID", help="end when this process ends")


def execute(args: argparse.Namespace) -> int:
    """Solve; what goes wrong is written to the heartbeat as well, for the progress display."""
    from scatterloom.commands._parent import end_with_parent

    began = time.monotonic()
    if args.parent is not None:
        end_with_parent(args.parent)
    for library in ("OMP", "OPENBLAS", "MKL", "NUMBA"):
        # Before the numerical libraries are loaded, which read these once.
        os.environ.setdefault(f"{library}_NUM_THREADS", str(args.threads))

    from scatterloom import jobs
    from scatterloom.errors import CampaignHeld
    from scatterloom.job_file import read_spec
    from scatterloom.store.library import CaseLibrary

    path = Path(args.spec).absolute()
    folder = path.parent.parent
    spec = read_spec(path)
    cases = len(spec["cases"])
    check = _check(folder, args.turn)
    check()
    try:
        shared = CaseLibrary(Path(args.library)) if args.library else None
        jobs.solve(
            spec,
            folder,
            args.threads,
            _limits(args, began),
            shared,
            every_s=CLUSTER_HEARTBEAT_S if args.cluster else jobs.HEARTBEAT_S,
            check=check,
            last_attempt=args.cluster and args.attempt >= ATTEMPTS,
        )
    except CampaignHeld:
        raise  # The heartbeat is that of the other run.
    except Exception as error:
        _report(folder, spec, cases, error)
        raise
    print(f"{spec['name']}: {cases} cases done", file=sys.stderr)
    return 0


def _check(folder: Path, token: str | None) -> Callable[[], None]:
    from scatterloom.store.layout import Layout
    from scatterloom.store.turn import check_turn

    if token is None:
        return lambda: None
    path = Layout(folder).turn
    return lambda: check_turn(path, token)


def _limits(args: argparse.Namespace, began: float) -> Limits:
    from scatterloom.limits import SHARE_OF_MEMORY, Limits, machine_bytes

    most = SHARE_OF_MEMORY * machine_bytes()
    granted = until = float("inf")
    if args.cluster and args.granted_mib:
        granted = args.granted_mib * 2**20 - BESIDE_BYTES
        most = min(most, granted)
    if args.cluster and args.granted_minutes:
        minutes = args.granted_minutes
        until = began + 60.0 * max(minutes - MARGIN_MINUTES, 0.8 * minutes)
    return Limits(
        most if args.memory_gib is None else min(args.memory_gib * 2**30, granted),
        float("inf") if args.case_minutes is None else args.case_minutes * 60.0,
        args.checkpoint_minutes * 60.0,
        granted,
        until,
        fields_bytes=float("inf") if args.fields_gib is None else args.fields_gib * 2**30,
    )


def _report(folder: Path, spec: dict[str, object], cases: int, error: Exception) -> None:
    from scatterloom.cli import ENVIRONMENT, INTERNAL
    from scatterloom.store.progress import fail_heartbeat

    machine = isinstance(error, (OSError, MemoryError))
    code = getattr(error, "exit_code", ENVIRONMENT if machine else INTERNAL)
    message = "out of memory" if isinstance(error, MemoryError) else str(error)
    fail_heartbeat(
        folder, str(spec["name"]), str(spec["kind"]), cases, code, message or type(error).__name__
    )
