# A campaign as a graph of jobs: snakemake --cores 2 --config campaign=config/demo.yaml
# `scatterloom run` starts this with the right profile, a lock and a progress display.

from snakemake.utils import min_version

min_version("9.27")


include: "workflow/rules/expand.smk"


# Every path in the rules is relative to the campaign's folder.
workdir: str(GRAPH.layout.folder)


include: "workflow/rules/solve.smk"
include: "workflow/rules/gather.smk"
include: "workflow/rules/bulk.smk"
include: "workflow/rules/figures.smk"


# On a cluster these run where the command was given.
localrules:
    gather_table,
    make_bulk,
    make_exchange,
    orient_particles,
    audit,
    make_figures,
    make_report,


rule all:
    default_target: True
    input:
        PRODUCTS,
