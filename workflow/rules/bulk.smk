# Populations: their averages over sizes and particles.


rule make_bulk:
    input:
        "table.json",
    output:
        "bulk.zarr/commit.json",
    log:
        "state/logs/bulk.log",
    # Code 1 says that some averages are flagged, which is a finding and no failure.
    shell:
        "{SCATTERLOOM} bulk {CAMPAIGN} > {log} 2>&1 || [ $? -eq 1 ]"
