# Solver jobs. A job's name holds the digest of its specification, so its files
# never go stale: `ancient` keeps copied or touched fields from solving anything again.

ONE_POOL = " ".join(
    f"{name}_NUM_THREADS={{threads}}" for name in ("OMP", "OPENBLAS", "MKL", "NUMBA")
)

# No parameters: what a job may take or reuse must not decide what is rerun.
OPTIONS = " ".join(map(shlex.quote, GRAPH.solver_options()))


def memory_needed(wildcards):
    """Return MiB: the engine starts no more jobs at once than memory has room for."""
    most = int(config.get("memory_mb", 1 << 40))
    return min(GRAPH.jobs[wildcards.job].memory_mb, most)


def fields_needed(wildcards):
    return ancient([f"fields/{name}.npz" for name in GRAPH.jobs[wildcards.job].needs])


def single_memory(name):
    """Return MiB that a single solve needs."""
    most = int(config.get("memory_mb", 1 << 40))
    return min(needed_bytes(SINGLES[name]) // 2**20 + 1, most)


rule solve_anchors:
    output:
        cases="cases/{job}.cases",
        fields=temp("fields/{job}.npz"),
    log:
        "state/logs/jobs/{job}.log",
    wildcard_constraints:
        job=r"anchors-[^/]+",
    threads: 1
    resources:
        mem_mb=memory_needed,
    params:
        digest=lambda wildcards: GRAPH.job_digest(wildcards.job),
    # exec: the solver is then the engine's own child and can end with it.
    shell:
        "exec env " + ONE_POOL + " {SCATTERLOOM} solve-job jobs/{wildcards.job}.json"
        " {OPTIONS} --threads {threads} --parent $PPID > {log} 2>&1"


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
    resources:
        mem_mb=memory_needed,
    params:
        digest=lambda wildcards: GRAPH.job_digest(wildcards.job),
    shell:
        "exec env " + ONE_POOL + " {SCATTERLOOM} solve-job jobs/{wildcards.job}.json"
        " {OPTIONS} --threads {threads} --parent $PPID > {log} 2>&1"


# Each takes all cores: its memory leaves no room for others.
rule solve_single:
    output:
        "single/{name}.nc",
    log:
        "state/logs/single-{name}.log",
    wildcard_constraints:
        name=r"[A-Za-z][A-Za-z0-9_]*",
    threads: workflow.cores
    resources:
        mem_mb=lambda wildcards: single_memory(wildcards.name),
    params:
        digest=lambda wildcards: SINGLES[wildcards.name].digest,
    shell:
        "exec env "
        + ONE_POOL
        + " {SCATTERLOOM} solve-single {CAMPAIGN_FILE} {wildcards.name}"
        " {RESULTS} --threads {threads} --parent $PPID > {log} 2>&1"
