"""A campaign runs through the workflow engine; killed anywhere, the same command resumes."""

from __future__ import annotations

import json
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
import xarray
from campaign_runs import (
    COUNT,
    call,
    config,
    finish,
    processes_on,
    solved_cases,
    start,
    wait_until,
)

import scatterloom
from scatterloom.campaign import load
from scatterloom.campaign.expand import expand
from scatterloom.errors import IntegrityError
from scatterloom.store.held import hold
from scatterloom.store.layout import checkout

linux = pytest.mark.skipif(not sys.platform.startswith("linux"), reason="looks into /proc")


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory):
    """A finished run: its folder and what it said."""
    folder = tmp_path_factory.mktemp("undisturbed")
    done = call("run", config(folder), "--results", folder / "results", "--cores", 2)
    # The lattices are far too coarse for the accuracy asked, which must be said: code 1.
    assert done.returncode == 1, done.stderr
    return folder, done


def campaign_of(folder: Path) -> Path:
    return folder / "results" / "tiny"


def assert_same_numbers(left: xarray.Dataset, right: xarray.Dataset) -> None:
    """Equal to the bit in everything but the time it took."""
    assert set(left.variables) == set(right.variables)
    for name in left.variables:
        if name == "wall_seconds":
            continue
        one, two = left[name].values, right[name].values
        if one.dtype.kind == "f":
            one, two = np.ascontiguousarray(one), np.ascontiguousarray(two)
            assert one.tobytes() == two.tobytes(), name
        else:
            assert (one == two).all(), name


def test_the_products_are_there_and_named(undisturbed):
    folder, done = undisturbed
    campaign = campaign_of(folder)
    lines = dict(line.split(maxsplit=1) for line in done.stdout.splitlines())
    assert lines == {
        "table": str(campaign / "table.zarr"),
        "figures": str(campaign / "figures"),
        "report": str(campaign / "report.html"),
    }
    assert all(Path(path).exists() for path in lines.values())
    assert f"of {2 * COUNT} cells" in done.stderr
    assert "Traceback" not in done.stderr
    # Wavelengths share their cases: the size parameters are the same.
    assert len(solved_cases(campaign)) == COUNT


def test_the_table_is_whole_and_has_no_missing_cell(undisturbed):
    table = scatterloom.open_table(campaign_of(undisturbed[0]) / "table.zarr").load()
    assert (table.status > 0).all()
    assert table.sizes["size"] == COUNT
    # Mean F11 over the sphere is 1: trapezoidal rule on 10 degrees, good to 1 %.
    angle = np.deg2rad(table.angle)
    f11 = table.scattering_matrix.sel(row=1, col=1)
    mean = 0.5 * (f11 * np.sin(angle)).assign_coords(angle=angle).integrate("angle")
    np.testing.assert_allclose(mean, 1.0, atol=0.01)


def test_the_merged_configuration_gives_the_same_cases(undisturbed):
    folder, _ = undisturbed
    merged = expand(load(campaign_of(folder) / "config.yaml"))
    given = expand(load(folder / "tiny.yaml"))
    assert [c.digest for c in merged.cases] == [c.digest for c in given.cases]


def test_a_second_run_does_nothing(undisturbed):
    folder, first = undisturbed
    campaign = campaign_of(folder)
    cases, table = solved_cases(campaign), (campaign / "table.zarr").stat()
    report = (campaign / "report.html").stat().st_mtime_ns
    again = call("run", folder / "tiny.yaml", "--results", folder / "results")
    assert again.returncode == first.returncode
    assert again.stdout == first.stdout
    assert solved_cases(campaign) == cases
    assert (campaign / "table.zarr").stat().st_ino == table.st_ino
    assert (campaign / "report.html").stat().st_mtime_ns == report


def test_the_engine_alone_finds_nothing_left_to_do(undisturbed):
    folder, _ = undisturbed
    top = checkout()
    assert top is not None
    engine = [sys.executable, "-m", "snakemake", "--snakefile", str(top / "Snakefile")]
    done = subprocess.run(
        [*engine, "--cores=1", "--dry-run", "--config", "campaign=tiny.yaml", "results=results"],
        cwd=folder,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    assert "Nothing to be done" in done.stdout + done.stderr


def test_the_temporary_fields_are_gone(undisturbed):
    campaign = campaign_of(undisturbed[0])
    assert list(campaign.glob("fields/*")) == []
    assert list(campaign.rglob("*.partial")) == []


@linux
def test_killed_mid_way_the_same_command_resumes_to_the_same_bits(undisturbed, tmp_path):
    command = ("run", config(tmp_path), "--results", tmp_path / "results", "--cores", 2)
    campaign = campaign_of(tmp_path)
    run = start(*command)
    wait_until(lambda: len(solved_cases(campaign)) >= 3, run)
    os.killpg(run.pid, signal.SIGKILL)
    assert finish(run).returncode == -signal.SIGKILL
    # The kernel ends the engine and its solvers with their parent.
    wait_for_silence(tmp_path)
    kept = solved_cases(campaign)
    assert 3 <= len(kept) < COUNT
    with pytest.raises(IntegrityError):
        scatterloom.open_table(campaign / "table.zarr")

    state = json.loads(call("status", *command[1:4], "--json").stdout)
    assert state["held_by"] is None
    assert state["running"] == []
    assert 0 < state["cases_done"] <= len(kept)

    # A second kill, later, with the table possibly begun.
    run = start(*command)
    wait_until(lambda: len(solved_cases(campaign)) >= COUNT // 2, run)
    os.killpg(run.pid, signal.SIGKILL)
    finish(run)
    wait_for_silence(tmp_path)

    resumed = finish(start(*command))
    assert resumed.returncode == 1, resumed.stderr
    after = solved_cases(campaign)
    assert len(after) == COUNT
    solved_twice = [digest for digest in kept if after[digest] != kept[digest]]
    assert solved_twice == []
    assert list(campaign.rglob("*.partial")) == []
    assert not (campaign / "fields").exists()
    assert_same_numbers(
        scatterloom.open_table(campaign / "table.zarr"),
        scatterloom.open_table(campaign_of(undisturbed[0]) / "table.zarr"),
    )


def wait_for_silence(folder: Path) -> None:
    deadline = time.monotonic() + 30
    while alive := processes_on(folder):
        assert time.monotonic() < deadline, alive
        time.sleep(0.05)


@linux
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_an_interrupt_ends_everything_with_130(tmp_path, number):
    campaign = campaign_of(tmp_path)
    run = start("run", config(tmp_path), "--results", tmp_path / "results", "--cores", 1)
    wait_until(lambda: len(solved_cases(campaign)) >= 1, run)
    run.send_signal(number)
    done = finish(run)
    assert done.returncode == 130
    assert "the same command resumes" in done.stderr
    assert "Traceback" not in done.stderr
    assert processes_on(tmp_path) == []
    assert not (campaign / "table.zarr").exists()


def test_a_held_campaign_is_refused_and_its_holder_named(tmp_path):
    campaign = campaign_of(tmp_path)
    with hold(campaign / ".campaign.lock"):
        refused = call("run", config(tmp_path), "--results", tmp_path / "results")
    assert refused.returncode == 75
    assert f"held by process {os.getpid()}" in refused.stderr
    assert [p.name for p in campaign.iterdir()] == [".campaign.lock"]


def test_more_sizes_keep_the_finished_cases(undisturbed, tmp_path):
    shutil.copytree(undisturbed[0] / "results", tmp_path / "results", symlinks=True)
    campaign = campaign_of(tmp_path)
    before = solved_cases(campaign)
    # Every size of the coarser rule is one of the finer: 0.4 to 1.6 in equal ratios.
    more = call("run", config(tmp_path, 2 * COUNT - 1), "--results", tmp_path / "results")
    assert more.returncode == 1, more.stderr
    after = solved_cases(campaign)
    assert len(after) == 2 * COUNT - 1
    assert {digest: after[digest] for digest in before} == before
    table = scatterloom.open_table(campaign / "table.zarr").load()
    old = scatterloom.open_table(campaign_of(undisturbed[0]) / "table.zarr").load()
    assert (table.scattering_matrix.values[:, :, ::2] == old.scattering_matrix.values).all()
