# One job writes the table. The table itself is no declared output: the engine would
# delete it before each gathering, while the command replaces it only by a whole one.


rule gather_table:
    input:
        [f"cases/{name}.cases" for name in GRAPH.jobs],
    output:
        "table.json",
    log:
        "state/logs/gather.log",
    params:
        digest=GRAPH.table_digest,
    shell:
        "exec {SCATTERLOOM} gather {CAMPAIGN} > {log} 2>&1"
