"""`scatterloom estimate`: what will this campaign take?"""

from __future__ import annotations

import argparse
import json
import sys
from dataclasses import asdict

from scatterloom.commands import COMMANDS

NAME = "estimate"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--json", action="store_true", help="write the result as JSON")


def execute(args: argparse.Namespace) -> int:
    """Predict and print; nothing is solved or written."""
    from scatterloom.campaign import load
    from scatterloom.campaign.expand import expand
    from scatterloom.campaign.outlook import outlook
    from scatterloom.campaign.plan import plan

    campaign = load(args.config)
    for warning in campaign.warnings:
        print(f"warning: {warning}", file=sys.stderr)
    grid = expand(campaign)
    jobs = plan(grid)
    forecast = outlook(grid, jobs)
    if args.json:
        print(json.dumps({"campaign": campaign.name, **asdict(forecast)}, indent=2))
        return 0
    rows = {
        "cells of the table": f"{forecast.cells}",
        "cases to solve": f"{forecast.cases}",
        "of these anchors": f"{forecast.anchors}",
        "jobs": f"{forecast.jobs}",
        "largest size parameter": f"{forecast.largest_size_parameter:.4g}",
        "finest lattice": f"{forecast.finest_cells_across} cells across",
        "predicted time": f"{forecast.core_hours:.3g} core hours",
        "memory of the largest job": f"{forecast.largest_job_bytes / 2**20:.0f} MiB",
    }
    print(f"campaign {campaign.name}")
    for label, value in rows.items():
        print(f"  {label:<26} {value}")
    return 0
