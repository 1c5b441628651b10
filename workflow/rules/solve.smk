# Solver jobs. A job's name holds the digest of its specification, so its files
# never go stale: `ancient` keeps copied or touched fields from solving anything again.

ONE_POOL = " ".join(
    f"{name}_NUM_THREADS={{threads}}" for name in ("OMP", "OPENBLAS", "MKL", "NUMBA")
)

# No parameters: what a job may take or reuse must not decide what is rerun.
OPTIONS = " ".join(map(shlex.quote, GRAPH.solver_options()))
if config.get("turn"):
    # A letter in front keeps the engine from reading a number.
    OPTIONS += f" --turn {shlex.quote(str(config['turn'])[1:])}"
if CLUSTER:
    OPTIONS += " --cluster"


def memory_needed(wildcards, attempt):
    """Return MiB: the engine starts no more jobs at once than memory has room for."""
    job = GRAPH.jobs[wildcards.job]
    if CLUSTER:
        return job.request_mb(attempt)
    return min(job.memory_mb, int(config.get("memory_mb", 1 << 40)))


def minutes_needed(wildcards, attempt):
    """Return the minutes to ask a cluster for."""
    return GRAPH.jobs[wildcards.job].request_minutes(attempt)


def attempt_number(wildcards, attempt):
    return attempt


def fields_needed(wildcards):
    return ancient([f"fields/{name}.npz" for name in GRAPH.jobs[wildcards.job].needs])


# Its time is not predicted; a checkpoint is taken up again by the next attempt.
SINGLE_MINUTES = 1440


def single_memory(name):
    """Return MiB that a single solve needs."""
    # Here, so that the engine on every node of a cluster loads no numerical libraries.
    from scatterloom.singles import needed_bytes

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
    threads: THREADS
    resources:
        mem_mb=memory_needed,
        runtime=minutes_needed,
        attempt=attempt_number,
    params:
        digest=lambda wildcards: GRAPH.job_digest(wildcards.job),
    # exec: the solver is then the engine's own child and can end with it.
    shell:
        "exec env " + ONE_POOL + " {SCATTERLOOM} solve-job jobs/{wildcards.job}.json"
        " {OPTIONS} --threads {threads} --granted-mib {resources.mem_mb}"
        " --granted-minutes {resources.runtime} --attempt {resources.attempt}"
        " --parent $PPID > {log} 2>&1"


rule solve_span:
    input:
        fields_needed,
    output:
        cases="cases/{job}.cases",
    log:
        "state/logs/jobs/{job}.log",
    wildcard_constraints:
        job=r"span-[^/]+",
    threads: THREADS
    resources:
        mem_mb=memory_needed,
        runtime=minutes_needed,
        attempt=attempt_number,
    params:
        digest=lambda wildcards: GRAPH.job_digest(wildcards.job),
    shell:
        "exec env " + ONE_POOL + " {SCATTERLOOM} solve-job jobs/{wildcards.job}.json"
        " {OPTIONS} --threads {threads} --granted-mib {resources.mem_mb}"
        " --granted-minutes {resources.runtime} --attempt {resources.attempt}"
        " --parent $PPID > {log} 2>&1"


# Each takes all cores: its memory leaves no room for others.
rule solve_single:
    output:
        "single/{name}.nc",
    log:
        "state/logs/single-{name}.log",
    wildcard_constraints:
        name=r"[A-Za-z][A-Za-z0-9_]*",
    threads: THREADS if CLUSTER else workflow.cores
    resources:
        mem_mb=lambda wildcards: single_memory(wildcards.name),
        runtime=SINGLE_MINUTES,
    params:
        digest=lambda wildcards: SINGLES[wildcards.name].digest,
    shell:
        "exec env "
        + ONE_POOL
        + " {SCATTERLOOM} solve-single {CAMPAIGN_FILE} {wildcards.name}"
        " {RESULTS} --threads {threads} --parent $PPID > {log} 2>&1"
