# Solver jobs. A job's name holds the digest of its specification, so its files
# never go stale: `ancient` keeps copied or touched fields from solving anything again.

ONE_POOL = " ".join(
    f"{name}_NUM_THREADS={{threads}}" for name in ("OMP", "OPENBLAS", "MKL", "NUMBA")
)


def fields_needed(wildcards):
    return ancient([f"fields/{name}.npz" for name in GRAPH.jobs[wildcards.job].needs])


rule solve_anchors:
    output:
        cases="cases/{job}.cases",
        fields=temp("fields/{job}.npz"),
    log:
        "state/logs/jobs/{job}.log",
    wildcard_constraints:
        job=r"anchors-[^/]+",
    threads: 1
    params:
        digest=lambda wildcards: GRAPH.job_digest(wildcards.job),
    # exec: the solver is then the engine's own child and can end with it.
    shell:
        "exec env " + ONE_POOL + " {SCATTERLOOM} solve-job jobs/{wildcards.job}.json"
        " --threads {threads} --parent $PPID > {log} 2>&1"


rule solve_span:
    input:
        fields_needed,
    output:
        cases="cases/{job}.cases",
    log:
        "state/logs/jobs/{job}.log",
    wildcard_constraints:
        job=r"span-[^/]+",
    threads: 1
    params:
        digest=lambda wildcards: GRAPH.job_digest(wildcards.job),
    shell:
        "exec env " + ONE_POOL + " {SCATTERLOOM} solve-job jobs/{wildcards.job}.json"
        " --threads {threads} --parent $PPID > {log} 2>&1"
