"""What a figure depends on besides the code: processor, libraries, threads, other load."""

from __future__ import annotations

import os
import platform
from datetime import UTC, datetime
from importlib.metadata import version
from pathlib import Path
from typing import Any

from threadpoolctl import threadpool_info

PACKAGES = ("numpy", "scipy", "ducc0", "numba", "scatterloom")


def describe(threads: int) -> dict[str, Any]:
    """Describe the machine and the settings in force.

    `environment` lists variables that choose kernels or threads of the linear algebra;
    some of them (OPENBLAS_CORETYPE, for example) make it slower than the processor allows.
    `load_average` counts the processes at work in the last minute: above zero before the
    start, the times are those of a shared machine.
    """
    return {
        "date": datetime.now(UTC).strftime("%Y-%m-%d"),
        "processor": _processor(),
        "cores": len(os.sched_getaffinity(0))
        if hasattr(os, "sched_getaffinity")
        else os.cpu_count(),
        "threads": threads,
        "load_average": round(os.getloadavg()[0], 1),
        "environment": {
            name: value
            for name, value in sorted(os.environ.items())
            if name.startswith(("OPENBLAS_", "OMP_", "MKL_", "NUMBA_"))
        },
        "linear_algebra": [
            {
                key: pool[key]
                for key in ("internal_api", "version", "architecture", "num_threads")
                if key in pool
            }
            for pool in threadpool_info()
        ],
        "versions": {"python": platform.python_version()}
        | {name: version(name) for name in PACKAGES},
    }


def _processor() -> str:
    cpuinfo = Path("/proc/cpuinfo")
    if cpuinfo.exists():
        for line in cpuinfo.read_text().splitlines():
            if line.startswith("model name"):
                return line.split(":", 1)[1].strip()
    return platform.processor() or platform.machine()
