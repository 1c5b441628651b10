"""`scatterloom pack`: put a campaign into one file for somebody else."""

from __future__ import annotations

import argparse
from pathlib import Path

from scatterloom.commands import COMMANDS

NAME = "pack"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument("--output", metavar="FILE", help="default: NAME.crate.zip here")
    parser.add_argument("--without-table", action="store_true", help="leave the table out")


def execute(args: argparse.Namespace) -> int:
    """Pack; the archive appears whole or not at all."""
    from scatterloom.campaign import load
    from scatterloom.crate import pack
    from scatterloom.store.layout import Layout, results_root

    campaign = load(args.config)
    layout = Layout(results_root(args.results) / campaign.name)
    target = Path(args.output or f"{campaign.name}.crate.zip")
    packed = pack(campaign, layout, target, with_table=not args.without_table)
    print(f"{packed.path}: {packed.files} files, {packed.bytes} bytes before compression")
    return 0
