"""`scatterloom figures`: draw the figures of a campaign."""

from __future__ import annotations

import argparse
import sys

from scatterloom.commands import COMMANDS

NAME = "figures"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")


def execute(args: argparse.Namespace) -> int:
    """Draw everything that can be drawn; what was left out is said on standard error."""
    from scatterloom.bulk.bulkfile import bulk_of
    from scatterloom.bulk.oriented_table import oriented_of
    from scatterloom.bulk.population import populations_of
    from scatterloom.campaign import load
    from scatterloom.figures.make import make_figures
    from scatterloom.store.layout import Layout, results_root
    from scatterloom.store.table import open_table

    campaign = load(args.config)
    layout = Layout(results_root(args.results) / campaign.name)
    table = open_table(layout.table)
    populations = populations_of(campaign.model)
    bulk = bulk_of(layout.bulk, table, populations) if populations else None
    oriented = {
        entry.name: oriented_of(layout.oriented / f"{entry.name}.zarr", table)
        for entry in campaign.model.orientations
    }
    entries, notes = make_figures(table, layout.figures, bulk, populations, oriented)
    for note in notes:
        print(f"scatterloom: {note}", file=sys.stderr)
    print(f"{layout.figures}: {len(entries)} figures")
    return 0
