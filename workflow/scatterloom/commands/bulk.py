"""`scatterloom bulk`: average the table over the populations of a campaign."""

from __future__ import annotations

import argparse
import os

from scatterloom.commands import COMMANDS
from scatterloom.commands._arguments import positive

NAME = "bulk"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")
    parser.add_argument(
        "--threads",
        type=positive,
        metavar="N",
        help="averages at work at once (default: as many as cores and memory allow)",
    )
    parser.add_argument(
        "--dask-scheduler",
        metavar="ADDRESS",
        default=os.environ.get("SCATTERLOOM_DASK_SCHEDULER"),
        help="average on the dask cluster whose scheduler is at this address, such as "
        "tcp://host:8786 (default: the variable SCATTERLOOM_DASK_SCHEDULER)",
    )


def execute(args: argparse.Namespace) -> int:
    """Write bulk.zarr and print its main values; 1 if an average failed or is flagged."""
    from scatterloom.bulk.build import build
    from scatterloom.bulk.bulkfile import COMMIT_FILE, write_bulk
    from scatterloom.bulk.listing import listing
    from scatterloom.bulk.population import populations_of
    from scatterloom.bulk.spread import in_threads, on_cluster, threads_for
    from scatterloom.campaign import load
    from scatterloom.errors import BadInput
    from scatterloom.limits import all_cores, machine_bytes
    from scatterloom.store.layout import Layout, results_root
    from scatterloom.store.table import open_table

    campaign = load(args.config)
    populations = populations_of(campaign.model)
    if not populations:
        raise BadInput(
            f"{args.config}: no populations to average over\n  hint: add a section 'populations'"
        )
    layout = Layout(results_root(args.results) / campaign.name)
    # Workers read the files themselves: what they get is to name them, not to hold a graph.
    table = open_table(layout.table, chunks=None)
    if args.dask_scheduler:
        spread = on_cluster(args.dask_scheduler)
    else:
        spread = in_threads(args.threads or threads_for(all_cores(), machine_bytes()))
    columns = build(table, populations, spread)
    if not write_bulk(layout.bulk, columns, table.attrs):
        # The rule graph compares times: an equal, older file is as good as a new one.
        os.utime(layout.bulk / COMMIT_FILE)
    print("\n".join(listing(columns)))
    return 0 if (columns["status"] == 1).all() else 1
