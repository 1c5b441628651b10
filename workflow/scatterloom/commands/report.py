"""`scatterloom report`: write the report of a campaign as one HTML page."""

from __future__ import annotations

import argparse

from scatterloom.commands import COMMANDS

NAME = "report"
HELP = COMMANDS[NAME]


def configure(parser: argparse.ArgumentParser) -> None:
    """Add the arguments of the command."""
    parser.add_argument("config", metavar="CONFIG", help="campaign file (YAML)")
    parser.add_argument("--results", metavar="DIR", help="folder of all results")


def execute(args: argparse.Namespace) -> int:
    """Write report.html from the table, the audit and the figures."""
    from scatterloom.bulk.bulkfile import bulk_of
    from scatterloom.bulk.population import populations_of
    from scatterloom.campaign import load
    from scatterloom.figures.picture import read_index
    from scatterloom.figures.report import report
    from scatterloom.scattering.audit_table import read_audit
    from scatterloom.store.atomic import atomic_write
    from scatterloom.store.layout import Layout, results_root
    from scatterloom.store.table import open_table

    campaign = load(args.config)
    layout = Layout(results_root(args.results) / campaign.name)
    table = open_table(layout.table)
    populations = populations_of(campaign.model)
    bulk = bulk_of(layout.bulk, table, populations) if populations else None
    digest = str(table.attrs["content_digest"])
    page = report(
        table,
        read_audit(layout.audit, digest),
        layout.figures,
        read_index(layout.figures, digest),
        bulk,
    )
    with atomic_write(layout.report) as stream:
        stream.write(page.encode())
    print(layout.report)
    return 0
