"""`scatterloom status`: what of a campaign is done, running, failed and left."""

from __future__ import annotations

import argparse
import json
import sys
import time
from typing import TYPE_CHECKING, Any

from scatterloom.commands import COMMANDS

if TYPE_CHECKING:
    from scatterloom.outline import Outline
    from scatterloom.store.progress import Meter

NAME = "status"
HELP = COMMANDS[NAME]

WATCH_EVERY_S = 2.0
DISK_SHARE = 20.0
"""Looking at the sizes of a million files takes seconds: a twentieth of the time is enough."""
FAILURES_SHOWN = 10


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument("--json", action="store_true", help="write the state as JSON")
    parser.add_argument(
        "--watch", action="store_true", help="look again every 2 s until nothing is left"
    )


def execute(args: argparse.Namespace) -> int:
    """Look and print; nothing is changed, and a run at work is not disturbed."""
    from scatterloom.outline import Outline
    from scatterloom.store.progress import Meter
    from scatterloom.store.usage import disk_use

    outline = Outline.open(args.config, args.results)
    meter = Meter(outline.layout, outline.cases_of)
    disk: dict[str, int] = {}
    measured, took = 0.0, 0.0
    while True:
        began = time.monotonic()
        if not disk or began - measured > DISK_SHARE * took:
            disk = disk_use(outline.layout)
            measured, took = began, time.monotonic() - began
        state = _state(outline, meter) | {"disk_bytes": disk}
        lines = [json.dumps(state, indent=2)] if args.json else _lines(outline, state)
        if args.watch and not args.json and sys.stdout.isatty():
            # Home and clear to the end: the screen is overwritten, not scrolled.
            print("\033[H\033[2J", end="")
        print("\n".join(lines), flush=True)
        if not args.watch or not state["cases_left"]:
            return 0
        time.sleep(WATCH_EVERY_S)


def _state(outline: Outline, meter: Meter) -> dict[str, Any]:
    from scatterloom.graph import receipt_holds
    from scatterloom.pace import UNKNOWN, calibrated, pace_of_jobs
    from scatterloom.store.failures import read_failures
    from scatterloom.store.held import holder

    progress = meter.measure()
    layout = outline.layout
    seconds = {name: job.seconds for name, job in outline.jobs.items()}
    found = pace_of_jobs(outline.jobs, meter.beats.values())
    pace = found[0] if found else calibrated() or UNKNOWN
    left = sum(seconds.values()) * (1.0 - meter.share_done(seconds)) * pace.ratio
    failures = read_failures(layout.failed)
    at_work = len(progress.running)
    solving = [beat for beat in meter.beats.values() if beat.solved]
    spent = sum(beat.seconds for beat in solving)
    solved = sum(beat.solved for beat in solving)
    return {
        "campaign": outline.campaign.name,
        "folder": str(layout.folder),
        "held_by": holder(layout.lock),
        "table_gathered": receipt_holds(layout),
        "core_seconds_left": left,
        "core_seconds_left_error": left * pace.relative_error,
        "seconds_left": left / at_work if at_work else None,
        "seconds_left_error": left / at_work * pace.relative_error if at_work else None,
        "cases_a_core_hour": 3600.0 * solved / spent if spent else None,
        "cases_reused": sum(beat.reused for beat in meter.beats.values()),
        "cases_failed": [vars(failure) for failure in failures],
        "particles": _particles(outline, meter),
        "peak_bytes": max((beat.peak_bytes for beat in meter.beats.values()), default=0),
        "disk_free_bytes": _disk_free(outline),
        **progress.as_dict(),
    }


def _particles(outline: Outline, meter: Meter) -> dict[str, dict[str, int]]:
    """Cases of every particle; one that several particles share counts for each."""
    counts: dict[str, dict[str, int]] = {}
    for name, job in outline.jobs.items():
        beat = meter.beats.get(name)
        for particle in job.particles:
            row = counts.setdefault(
                particle, {"cases": 0, "done": 0, "running": 0, "failed": 0, "left": 0}
            )
            done = meter.cases_done_of(name)
            row["cases"] += job.cases
            row["done"] += done
            row["left"] += job.cases - done
            if beat is not None:
                row["failed"] += beat.cases_failed
                row["running"] += beat.alive
    return counts


def _disk_free(outline: Outline) -> int | None:
    import shutil

    try:
        return shutil.disk_usage(outline.layout.folder).free
    except OSError:
        return None


def _mib(size: int) -> str:
    return f"{size / 2**20:.3g} MiB" if size < 2**30 else f"{size / 2**30:.3g} GiB"


def _lines(outline: Outline, state: dict[str, Any]) -> list[str]:
    from scatterloom.commands._display import spoken

    layout, run = outline.layout, state["held_by"]
    at_work = f"process {run['pid']} on {run['host']} since {run['since']}" if run else "none"
    error = state["core_seconds_left_error"]
    left = f"{state['cases_left']}"
    if state["cases_left"]:
        left += f", about {spoken(state['core_seconds_left'])} of core time"
        left += f" (give or take {spoken(error)})"
    rows = {
        "run at work": at_work,
        "cases done": f"{state['cases_done']} of {state['cases']}",
        "cases left": left,
        "cases reused": f"{state['cases_reused']}",
        "cases failed": f"{len(state['cases_failed'])}",
        "jobs done": f"{state['jobs_done']} of {state['jobs']}",
        "jobs running": f"{len(state['running'])}",
        "jobs failed": f"{len(state['failed'])}",
        "table": f"{layout.table}" if state["table_gathered"] else "not gathered yet",
    }
    if state["cases_a_core_hour"]:
        rows["throughput"] = f"{state['cases_a_core_hour']:.3g} cases a core hour"
    if state["seconds_left"] and state["cases_left"]:
        rows["time left"] = (
            f"{spoken(state['seconds_left'])} with the jobs now at work "
            f"(give or take {spoken(state['seconds_left_error'])})"
        )
    if state["peak_bytes"]:
        rows["memory of a job"] = f"{state['peak_bytes'] / 2**20:.0f} MiB at most so far"
    parts = {name: size for name, size in state["disk_bytes"].items() if size}
    if parts:
        listed = ", ".join(f"{name} {_mib(size)}" for name, size in parts.items())
        rows["disk used"] = listed
    if state["disk_free_bytes"] is not None:
        rows["disk free"] = f"{state['disk_free_bytes'] / 2**30:.1f} GiB"
    lines = [f"campaign {outline.campaign.name} in {layout.folder}"]
    lines += [f"  {label:<15} {value}" for label, value in rows.items()]
    lines += [
        f"  particle {name}: {row['done']} of {row['cases']} cases done, {row['running']} jobs "
        f"running, {row['failed']} failed, {row['left']} left"
        for name, row in state["particles"].items()
    ]
    for job in state["running"]:
        done = f"{job['cases_done']} of {job['cases_total']} cases"
        x, residual = job["size_parameter"], job["residual"]
        size = "" if x is None else f", size parameter {x:.4g}"
        rest = "" if residual is None else f", residual {residual:.1e}"
        lines.append(f"  running: {job['job']}, {done}{size}{rest}")
    for job in state["failed"]:
        lines.append(f"  failed: {job['job']}: {job['message']}")
        lines.append(f"    log: {layout.logs}/jobs/{job['job']}.log")
    return lines + failed_cases(state["cases_failed"])


def failed_cases(failures: list[dict[str, Any]]) -> list[str]:
    """Lines on the cases without a result, by reason, with what to change."""
    lines = []
    for number in sorted({failure["number"] for failure in failures}):
        of_it = [failure for failure in failures if failure["number"] == number]
        first = of_it[0]
        cases = "1 case" if len(of_it) == 1 else f"{len(of_it)} cases"
        lines.append(f"  {cases} failed by reason {number} ({first['flag']}): {first['meaning']}")
        lines += [
            f"    {failure['shape']} at size parameter {failure['size_parameter']:.6g}"
            for failure in of_it[:FAILURES_SHOWN]
        ]
        if len(of_it) > FAILURES_SHOWN:
            lines.append(f"    ... and {len(of_it) - FAILURES_SHOWN} more")
        lines.append(f"    to change: {first['advice']}; then run --retry-failed")
    return lines
