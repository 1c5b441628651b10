"""`scatterloom check`: is this campaign file right?"""

from __future__ import annotations

import argparse
import json
import sys

from scatterloom.commands import COMMANDS

NAME = "check"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--json", action="store_true", help="write the result as JSON")


def execute(args: argparse.Namespace) -> int:
    """Check the file; problems are raised as `BadInput`, warnings go to standard error."""
    from scatterloom.campaign import load
    from scatterloom.campaign.expand import expand
    from scatterloom.campaign.plan import plan

    campaign = load(args.config)
    grid = expand(campaign)
    jobs = plan(grid)
    for warning in campaign.warnings:
        print(f"warning: {warning}", file=sys.stderr)
    particles, wavelengths, sizes = grid.where.shape
    result = {
        "campaign": campaign.name,
        "particles": particles,
        "wavelengths": wavelengths,
        "sizes": sizes,
        "angles": len(campaign.angles_deg),
        "cases": len(grid.cases),
        "jobs": len(jobs),
        "warnings": [str(warning) for warning in campaign.warnings],
    }
    if args.json:
        print(json.dumps(result, indent=2))
    else:
        print(
            f"{args.config}: ok, {particles} particles x {wavelengths} wavelengths x "
            f"{sizes} sizes, {len(grid.cases)} cases in {len(jobs)} jobs"
        )
    return 0
