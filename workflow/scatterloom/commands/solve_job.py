"""`scatterloom solve-job`: solve the cases of one job (the rule graph calls this)."""

from __future__ import annotations

import argparse
import json
import os
import sys
from pathlib import Path

from scatterloom.commands import COMMANDS

NAME = "solve-job"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument("spec", metavar="JOB.json", help="job file in the campaign's jobs/ folder")
    parser.add_argument("--threads", type=int, default=1, metavar="N", help="threads to use")
    parser.add_argument("--parent", type=int, metavar="PID", help="end when this process ends")


def execute(args: argparse.Namespace) -> int:
    """Solve; what goes wrong is written to the heartbeat as well, for the progress display."""
    from scatterloom.commands._parent import end_with_parent

    if args.parent is not None:
        end_with_parent(args.parent)
    for library in ("OMP", "OPENBLAS", "MKL", "NUMBA"):
        # Before the numerical libraries are loaded, which read these once.
        os.environ.setdefault(f"{library}_NUM_THREADS", str(args.threads))

    from scatterloom.errors import BadInput

    path = Path(args.spec).absolute()
    folder = path.parent.parent
    try:
        spec = json.loads(path.read_bytes())
        cases = len(spec["cases"])
    except (OSError, ValueError, KeyError, TypeError) as error:
        raise BadInput(f"{args.spec}: not a job file ({error})") from None
    try:
        from scatterloom import jobs

        jobs.solve(spec, folder, args.threads)
    except Exception as error:
        _report(folder, spec, cases, error)
        raise
    print(f"{spec['name']}: {cases} cases done", file=sys.stderr)
    return 0


def _report(folder: Path, spec: dict[str, object], cases: int, error: Exception) -> None:
    from scatterloom.cli import ENVIRONMENT, INTERNAL
    from scatterloom.store.progress import fail_heartbeat

    machine = isinstance(error, (OSError, MemoryError))
    code = getattr(error, "exit_code", ENVIRONMENT if machine else INTERNAL)
    message = "out of memory" if isinstance(error, MemoryError) else str(error)
    fail_heartbeat(
        folder, str(spec["name"]), str(spec["kind"]), cases, code, message or type(error).__name__
    )
