"""`scatterloom status`: what of a campaign is done, running, failed and left."""

from __future__ import annotations

import argparse
import json

from scatterloom.commands import COMMANDS

NAME = "status"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument("--json", action="store_true", help="write the state as JSON")


def execute(args: argparse.Namespace) -> int:
    """Look and print; nothing is changed, and a run at work is not disturbed."""
    from scatterloom.commands._display import spoken
    from scatterloom.graph import Graph, receipt_holds
    from scatterloom.store.held import holder
    from scatterloom.store.progress import Meter

    graph = Graph.open(args.config, args.results)
    layout = graph.layout
    meter = Meter(layout, graph.cases_of)
    progress = meter.measure()
    seconds = {name: job.seconds for name, job in graph.jobs.items()}
    left = sum(seconds.values()) * (1.0 - meter.share_done(seconds))
    run = holder(layout.lock)
    table = receipt_holds(layout)
    if args.json:
        state = {
            "campaign": graph.campaign.name,
            "folder": str(layout.folder),
            "held_by": run,
            "table_gathered": table,
            "core_seconds_left": left,
            **progress.as_dict(),
        }
        print(json.dumps(state, indent=2))
        return 0
    print(f"campaign {graph.campaign.name} in {layout.folder}")
    at_work = f"process {run['pid']} on {run['host']} since {run['since']}" if run else "none"
    rows = {
        "run at work": at_work,
        "cases done": f"{progress.cases_done} of {progress.cases}",
        "cases left": f"{progress.cases - progress.cases_done}, about {spoken(left)} of core time",
        "jobs done": f"{progress.jobs_done} of {progress.jobs}",
        "jobs running": f"{len(progress.running)}",
        "jobs failed": f"{len(progress.failed)}",
        "table": f"{layout.table}" if table else "not gathered yet",
    }
    for label, value in rows.items():
        print(f"  {label:<14} {value}")
    for job in progress.running:
        size = "" if job.size_parameter is None else f", size parameter {job.size_parameter:.4g}"
        print(f"  running: {job.job}, {job.cases_done} of {job.cases_total} cases{size}")
    for job in progress.failed:
        print(f"  failed: {job.job}: {job.message}\n    log: {layout.logs}/jobs/{job.job}.log")
    return 0
