# Populations: their averages over sizes and particles, and what others take from them.


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


rule orient_particles:
    input:
        "table.json",
    output:
        "oriented/oriented.json",
    log:
        "state/logs/orient.log",
    shell:
        "exec {SCATTERLOOM} orient {CAMPAIGN} > {log} 2>&1"


rule make_exchange:
    input:
        "table.json",
        "bulk.zarr/commit.json",
    output:
        "exchange/exchange.json",
    log:
        "state/logs/exchange.log",
    # Code 1 says that some averages are missing or flagged, which is a finding and no failure.
    shell:
        "{SCATTERLOOM} exchange {CAMPAIGN} > {log} 2>&1 || [ $? -eq 1 ]"
