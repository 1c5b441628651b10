"""`scatterloom orient`: average solved cases over the orientations a campaign names."""

from __future__ import annotations

import argparse
import json

from scatterloom.commands import COMMANDS

NAME = "orient"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")


def execute(args: argparse.Namespace) -> int:
    """Write a table for each distribution; nothing is solved."""
    from scatterloom.bulk.oriented_table import Ensemble, build, write_oriented
    from scatterloom.bulk.population import populations_of
    from scatterloom.errors import BadInput
    from scatterloom.graph import Graph
    from scatterloom.store.assemble import Cases
    from scatterloom.store.atomic import write_if_changed
    from scatterloom.store.table import open_table

    graph = Graph.open(args.config, args.results)
    campaign, layout = graph.campaign, graph.layout
    if not campaign.model.orientations:
        raise BadInput(
            f"{args.config}: no orientations to average over\n  hint: add a section 'orientations'"
        )
    table = open_table(layout.table)
    cases = Cases(graph.case_files())
    populations = populations_of(campaign.model)
    index = {}
    for orientation in campaign.model.orientations:
        ensemble = Ensemble(orientation, graph.grid, cases, layout, populations)
        columns = build(ensemble)
        attributes = {
            "Conventions": "CF-1.11, ACDD-1.3",
            "title": f"{campaign.model.title}: {orientation.name}",
            "summary": "Phase and extinction matrices of oriented particles",
            "orientation": json.dumps(orientation.model_dump(mode="json"), sort_keys=True),
            "campaign_config": campaign.merged_yaml(),
        }
        path = layout.oriented / f"{orientation.name}.zarr"
        source = str(table.attrs["content_digest"])
        write_oriented(path, columns, attributes, source)
        cells = int((columns["status"] > 0).sum())
        index[orientation.name] = {"path": path.name, "cells": cells}
        print(f"{path}: {cells} cells, {len(ensemble.averaged)} populations")
    text = json.dumps({"table": str(table.attrs["content_digest"]), "tables": index}, indent=1)
    write_if_changed(layout.oriented / "oriented.json", text.encode())
    return 0
