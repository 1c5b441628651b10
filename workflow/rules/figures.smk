# What a reader looks at: physical checks, figures, the report.

BULK = ["bulk.zarr/commit.json"] if GRAPH.has_populations else []
ORIENTED = ["oriented/oriented.json"] if GRAPH.has_orientations else []


rule audit:
    input:
        "table.json",
    output:
        "audit.json",
    log:
        "state/logs/audit.log",
    # Code 1 says that some checks are flagged, which is a finding and no failure.
    shell:
        "{SCATTERLOOM} audit {CAMPAIGN} > {log} 2>&1 || [ $? -eq 1 ]"


rule make_figures:
    input:
        "table.json",
        BULK,
        ORIENTED,
    output:
        "figures/figures.json",
    log:
        "state/logs/figures.log",
    shell:
        "exec {SCATTERLOOM} figures {CAMPAIGN} > {log} 2>&1"


rule make_report:
    input:
        "table.json",
        "audit.json",
        "figures/figures.json",
        BULK,
    output:
        "report.html",
    log:
        "state/logs/report.log",
    shell:
        "exec {SCATTERLOOM} report {CAMPAIGN} > {log} 2>&1"
