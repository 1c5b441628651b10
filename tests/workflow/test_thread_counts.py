"""The same table from any number of jobs at once, and from any number of threads in a job."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
import xarray
from campaign_runs import config

import scatterloom
from scatterloom.store.layout import checkout

SHARE_OF_BAR = 0.01
"""Sums over another number of threads are rounded otherwise, in single precision (6e-8) within
solves that stop at a tolerance of 1e-4: that is far below the half widths, which hold the
solver's error. Measured on the campaign here: 1e-7 relative."""


def table_of(folder: Path, jobs: int, threads: int) -> xarray.Dataset:
    """Solve the campaign with so many cores, and threads a job, up to its table."""
    folder.mkdir()
    top = checkout()
    assert top is not None
    path = config(folder, count=8)
    path.write_text(path.read_text().replace("levels: [8, 12]", "levels: [16, 24]"))
    done = subprocess.run(
        [
            *(sys.executable, "-m", "snakemake", "--snakefile", str(top / "Snakefile")),
            *("--cores", str(jobs * threads), "--config", f"campaign={path}"),
            *(f"results={folder / 'results'}", f"threads={threads}", "--", "table.json"),
        ],
        cwd=folder,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert f"threads: {threads}\n" in done.stderr or threads == 1
    return scatterloom.open_table(folder / "results/tiny/table.zarr").load()


@pytest.fixture(scope="module")
def single(tmp_path_factory):
    return table_of(tmp_path_factory.mktemp("one") / "run", 1, 1)


def test_jobs_side_by_side_change_no_bit(single, tmp_path):
    both = table_of(tmp_path / "run", 2, 1)
    for name in single.variables:
        one, two = single[name].values, both[name].values
        if name == "wall_seconds":
            continue
        if one.dtype.kind == "f":
            assert np.ascontiguousarray(one).tobytes() == np.ascontiguousarray(two).tobytes(), name
        else:
            assert (one == two).all(), name


def test_threads_of_a_job_change_values_far_less_than_their_error_bars(single, tmp_path):
    both = table_of(tmp_path / "run", 1, 2)
    compared = 0
    for name in single.data_vars:
        if f"{name}_error" not in single:
            continue
        bar = single[f"{name}_error"] + both[f"{name}_error"]
        # Elements that vanish by symmetry have no bar; the smallest float32 stands for it.
        excess = abs(single[name] - both[name]) - SHARE_OF_BAR * bar
        assert float(excess.max()) <= np.finfo(np.float32).tiny, name
        compared += 1
    assert compared == 6
    # The effort may differ by a product where a solve stops close to its tolerance.
    assert (single.status == both.status).all()
