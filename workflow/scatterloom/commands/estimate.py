"""`scatterloom estimate`: what will this campaign take?"""

from __future__ import annotations

import argparse
import json
import os
import sys
from dataclasses import asdict
from typing import TYPE_CHECKING

from scatterloom.commands import COMMANDS

if TYPE_CHECKING:
    from scatterloom.campaign.outlook import Outlook
    from scatterloom.campaign.shares import Shares
    from scatterloom.graph import Graph
    from scatterloom.pace import Pace

NAME = "estimate"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument("--cores", type=int, metavar="N", help="cores to run on (default: all)")
    parser.add_argument(
        "--no-calibration",
        action="store_true",
        help="do not measure the speed of this machine (30 s, once)",
    )
    parser.add_argument("--json", action="store_true", help="write the result as JSON")


def execute(args: argparse.Namespace) -> int:
    """Predict and print; nothing of the campaign is solved or written."""
    from scatterloom.campaign.outlook import outlook
    from scatterloom.campaign.shares import shares
    from scatterloom.campaign.singles import singles_of
    from scatterloom.graph import Graph
    from scatterloom.singles import needed_bytes

    graph = Graph.open(args.config, args.results)
    for warning in graph.campaign.warnings:
        print(f"warning: {warning}", file=sys.stderr)
    jobs = list(graph.jobs.values())
    forecast = outlook(graph.grid, jobs, len(graph.campaign.angles_deg))
    pace = _pace(graph, args.no_calibration)
    core_hours = forecast.core_hours * pace.ratio
    longest = max(job.seconds for job in jobs) * pace.ratio / 3600.0
    cores = max(1, args.cores or os.cpu_count() or 1)
    hours = max(core_hours / cores, longest)
    where = shares(graph.grid, jobs)
    singles = singles_of(graph.campaign)
    if args.json:
        result = {
            "campaign": graph.campaign.name,
            **asdict(forecast),
            "core_hours": core_hours,
            "relative_error": pace.relative_error,
            "measured_on": pace.source,
            "cores": cores,
            "hours": hours,
            "shares": asdict(where),
            "single_solves": {
                single.name: {"cells_across": max(single.cells), "bytes": needed_bytes(single)}
                for single in singles
            },
        }
        print(json.dumps(result, indent=2))
        return 0
    print(f"campaign {graph.campaign.name}")
    for label, value in _rows(forecast, pace, core_hours, cores, hours, where).items():
        print(f"  {label:<26} {value}")
    for single in singles:
        size = f"{max(single.cells)} cells across, {needed_bytes(single) / 2**30:.3g} GiB"
        print(f"  {'single solve ' + single.name:<26} {size}")
    return 0


def _rows(
    forecast: Outlook, pace: Pace, core_hours: float, cores: int, hours: float, where: Shares
) -> dict[str, str]:
    from scatterloom.commands._display import spoken

    error = f"{100 * pace.relative_error:.0f} %"
    return {
        "cells of the table": f"{forecast.cells}",
        "cases to solve": f"{forecast.cases}",
        "of these anchors": f"{forecast.anchors}",
        "jobs": f"{forecast.jobs}",
        "largest size parameter": f"{forecast.largest_size_parameter:.4g}",
        "finest lattice": f"{forecast.finest_cells_across} cells across",
        "predicted time": f"{core_hours:.3g} core hours (within {error})",
        f"on {cores} core{'s' if cores > 1 else ''}": spoken(3600.0 * hours),
        "speed taken from": pace.source,
        "memory of the largest job": f"{forecast.largest_job_bytes / 2**20:.0f} MiB",
        "disk for the table": f"{forecast.table_bytes / 2**20:.0f} MiB",
        "disk for case files": f"{forecast.case_bytes / 2**20:.0f} MiB",
        "most expensive particle": f"{where.dominant}, {100 * where.dominant_share:.0f} %",
        "largest fifth of the cases": f"{100 * where.largest_fifth_share:.0f} % of the time",
        "half the time if sizes end": f"at size parameter {where.halving_size_parameter:.3g}",
    }


def _pace(graph: Graph, no_calibration: bool) -> Pace:
    """The best measurement of this machine's speed there is."""
    from scatterloom.outline import outline_of
    from scatterloom.pace import CALIBRATION_S, UNKNOWN, calibrate, calibrated, pace_of_jobs
    from scatterloom.store.progress import read_heartbeat

    beats = (read_heartbeat(path) for path in graph.layout.progress.glob("*.json"))
    reported = [beat for beat in beats if beat is not None]
    if reported and (found := pace_of_jobs(outline_of(graph).jobs, reported)) is not None:
        return found[0]
    if (known := calibrated()) is not None:
        return known
    if no_calibration:
        return UNKNOWN
    print(
        f"measuring the speed of this machine, once, about {CALIBRATION_S:.0f} s ...",
        file=sys.stderr,
    )
    return calibrate()
