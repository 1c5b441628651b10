"""`scatterloom preview`: look at the particles before anything is solved."""

from __future__ import annotations

import argparse
from pathlib import Path

from scatterloom.commands import COMMANDS

NAME = "preview"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument(
        "--output", metavar="DIR", help="folder of the pictures (default: preview/ of the campaign)"
    )


def execute(args: argparse.Namespace) -> int:
    """Draw all particles, six to a sheet, and say where the sheets are."""
    from scatterloom.figures.bodies import sheets
    from scatterloom.figures.picture import save, style
    from scatterloom.graph import Graph
    from scatterloom.preview import bodies_of

    graph = Graph.open(args.config, args.results)
    folder = Path(args.output) if args.output else graph.layout.preview
    folder.mkdir(parents=True, exist_ok=True)
    with style():
        for draw in sheets(bodies_of(graph)):
            print(folder / save(draw(), folder)["png"])
    return 0
