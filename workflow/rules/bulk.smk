# Populations: their averages over sizes and particles.


rule make_bulk:
    input:
        "table.json",
    output:
        "bulk.zarr/commit.json",
    log:
        "state/logs/bulk.log",
    shell:
        "exec {SCATTERLOOM} bulk {CAMPAIGN} > {log} 2>&1"
