"""`scatterloom gather`: put the solved cases together to the table."""

from __future__ import annotations

import argparse
import json

from scatterloom.commands import COMMANDS

NAME = "gather"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument(
        "--partial",
        action="store_true",
        help="write what is solved so far; cells without a result have status 0 (missing)",
    )


def execute(args: argparse.Namespace) -> int:
    """Gather; 0 if every case was solved without a warning, else 1 with --partial."""
    from scatterloom.graph import Graph
    from scatterloom.scattering.record import FLAGS
    from scatterloom.store.assemble import Cases
    from scatterloom.store.atomic import write_if_changed
    from scatterloom.store.commit import commit_record
    from scatterloom.store.provenance import About
    from scatterloom.store.table import gather
    from scatterloom.store.writer import Axes

    graph = Graph.open(args.config, args.results)
    campaign, layout = graph.campaign, graph.layout
    about = About(
        campaign.name,
        campaign.model.title,
        campaign.merged_yaml(),
        campaign.model.provenance.model_dump(exclude_none=True),
    )
    axes = Axes.of(graph.grid, campaign.angles_deg)
    cases = Cases(graph.case_files(), partial=args.partial)
    gathered = gather(layout.table, axes, cases, about, FLAGS)
    if not args.partial:
        receipt = {
            "content_digest": gathered.content_digest,
            "manifest_sha256": commit_record(layout.table)["manifest_sha256"],
            "cells": gathered.cells,
        }
        write_if_changed(layout.receipt, json.dumps(receipt, indent=1).encode())
    counts = ", ".join(f"{count} {name}" for name, count in gathered.cells.items() if count)
    print(f"{layout.table}: {counts}" + ("" if gathered.replaced else " (unchanged)"))
    incomplete = sum(gathered.cells.values()) != gathered.cells["solved"]
    return 1 if args.partial and incomplete else 0
