"""`scatterloom exchange`: write the files for radiative transfer."""

from __future__ import annotations

import argparse

from scatterloom.commands import COMMANDS

NAME = "exchange"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")


def execute(args: argparse.Namespace) -> int:
    """Write NetCDF and text; 1 if an average is missing or the angles are too coarse."""
    from scatterloom.bulk.bulkfile import bulk_of
    from scatterloom.bulk.exchange import exchange_dataset
    from scatterloom.bulk.exchange_files import write_exchange
    from scatterloom.bulk.population import populations_of
    from scatterloom.campaign import load
    from scatterloom.errors import BadInput
    from scatterloom.store.layout import Layout, results_root
    from scatterloom.store.table import open_table

    campaign = load(args.config)
    populations = populations_of(campaign.model)
    if not populations:
        raise BadInput(
            f"{args.config}: no populations to expand\n  hint: add a section 'populations'"
        )
    layout = Layout(results_root(args.results) / campaign.name)
    bulk = bulk_of(layout.bulk, open_table(layout.table), populations)
    dataset = exchange_dataset(bulk, campaign.model.exchange.streams)
    files = write_exchange(layout.exchange, dataset, bulk)
    print(f"{layout.exchange}: {len(files)} files")
    for i, name in enumerate(dataset["population"].values):
        for w, wavelength in enumerate(dataset["wavelength"].values):
            degree = int(dataset["last_degree"][i, w])
            error = float(dataset["truncation_error"][i, w])
            coarse = "" if dataset["resolved"][i, w] else ", FLAGGED: missing or angles too coarse"
            print(f"{name} at {wavelength:g} um: degree {degree}, truncation {error:.1e}{coarse}")
    return 0 if bool(dataset["resolved"].all()) else 1
