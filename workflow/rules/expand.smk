# Reads and expands the campaign when the graph is built, with the program's own
# reader; the workflow engine never parses the campaign file.

import shlex
import sys
from pathlib import Path

from snakemake.exceptions import WorkflowError

from scatterloom.errors import ScatterloomError
from scatterloom.outline import Outline


def find_config():
    """Return the campaign file; a job on another folder finds it from the checkout."""
    given = config.get("campaign")
    if not given:
        raise WorkflowError(
            "name the campaign file: snakemake --config campaign=config/demo.yaml"
        )
    here = Path(str(given)).absolute()
    beside = Path(workflow.basedir) / str(given)
    return beside if beside.exists() and not here.exists() else here


def open_graph():
    try:
        # `scatterloom run` has prepared the campaign; the engine alone does it here.
        if workflow.is_main_process and not config.get("prepared"):
            from scatterloom.graph import Graph

            Graph.open(find_config(), config.get("results")).prepare()
        return Outline.open(find_config(), config.get("results"))
    except ScatterloomError as error:
        raise WorkflowError(str(error)) from None


GRAPH = open_graph()
PRODUCTS = ["table.json", "audit.json", "figures/figures.json", "report.html"]
if GRAPH.has_populations:
    PRODUCTS.append("bulk.zarr/commit.json")
SINGLES = GRAPH.singles
PRODUCTS += [f"single/{name}.nc" for name in SINGLES]
if GRAPH.has_orientations:
    PRODUCTS.append("oriented/oriented.json")
if GRAPH.has_exchange:
    PRODUCTS.append("exchange/exchange.json")

# Global names, not parameters: where the checkout lies must not decide what is rerun.
SCATTERLOOM = f"{shlex.quote(sys.executable)} -m scatterloom"
CAMPAIGN_FILE = shlex.quote(str(find_config()))
RESULTS = f"--results {shlex.quote(str(GRAPH.layout.folder.parent))}"
CAMPAIGN = f"{CAMPAIGN_FILE} {RESULTS}"

# What `scatterloom run` decides; none of it alters a result.
THREADS = int(config.get("threads", 1))
CLUSTER = bool(config.get("cluster"))
