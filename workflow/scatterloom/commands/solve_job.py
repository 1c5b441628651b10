"""`scatterloom solve-job`: solve the cases of one job (the rule graph calls this)."""

from __future__ import annotations

import argparse
import os
import sys
from pathlib import Path
from typing import TYPE_CHECKING

from scatterloom.commands import COMMANDS

if TYPE_CHECKING:
    from scatterloom.limits import Limits

NAME = "solve-job"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument("spec", metavar="JOB.json", help="job file in the campaign's jobs/ folder")
    parser.add_argument("--threads", type=int, default=1, metavar="N", help="threads to use")
    parser.add_argument("--library", metavar="DIR", help="case library to reuse cases from")
    parser.add_argument("--memory-gib", type=float, metavar="X", help="memory allowed")
    parser.add_argument("--case-minutes", type=float, metavar="X", help="time allowed to a case")
    parser.add_argument(
        "--checkpoint-minutes", type=float, default=5.0, metavar="X", help="time between savings"
    )
    parser.add_argument("--parent", type=int, metavar="PID", help="end when this process ends")


def execute(args: argparse.Namespace) -> int:
    """Solve; what goes wrong is written to the heartbeat as well, for the progress display."""
    from scatterloom.commands._parent import end_with_parent

    if args.parent is not None:
        end_with_parent(args.parent)
    for library in ("OMP", "OPENBLAS", "MKL", "NUMBA"):
        # Before the numerical libraries are loaded, which read these once.
        os.environ.setdefault(f"{library}_NUM_THREADS", str(args.threads))

    from scatterloom import jobs
    from scatterloom.job_file import read_spec
    from scatterloom.store.library import CaseLibrary

    path = Path(args.spec).absolute()
    folder = path.parent.parent
    spec = read_spec(path)
    cases = len(spec["cases"])
    try:
        shared = CaseLibrary(Path(args.library)) if args.library else None
        jobs.solve(spec, folder, args.threads, _limits(args), shared)
    except Exception as error:
        _report(folder, spec, cases, error)
        raise
    print(f"{spec['name']}: {cases} cases done", file=sys.stderr)
    return 0


def _limits(args: argparse.Namespace) -> Limits:
    from scatterloom.limits import SHARE_OF_MEMORY, Limits, machine_bytes

    return Limits(
        SHARE_OF_MEMORY * machine_bytes() if args.memory_gib is None else args.memory_gib * 2**30,
        float("inf") if args.case_minutes is None else args.case_minutes * 60.0,
        args.checkpoint_minutes * 60.0,
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
