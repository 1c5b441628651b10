"""Averages in threads and on a real dask cluster: the same bits, and within its memory."""

from __future__ import annotations

import os
import warnings
from pathlib import Path

import numpy as np
import pytest
import zarr
from distributed import LocalCluster

from oracles.tables import mie_table, publish_table
from scatterloom.bulk import spread as spreading
from scatterloom.bulk.build import AVERAGE_BYTES, build
from scatterloom.bulk.bulkfile import open_bulk
from scatterloom.bulk.population import Population
from scatterloom.bulk.spread import in_threads, on_cluster, threads_for
from scatterloom.campaign.distribution import Gamma, Lognormal
from scatterloom.cli import main
from scatterloom.errors import BadInput, EnvironmentProblem
from scatterloom.limits import peak_bytes
from scatterloom.scattering.record import FLAGS, SOLVED
from scatterloom.store import schema
from scatterloom.store.chunks import regions
from scatterloom.store.commit import publish, staging
from scatterloom.store.table import open_table
from scatterloom.store.writer import ShardedArray

MIXED = Population("mixed", {"clear": 3.0, "dark": 1.0}, Lognormal(0.12, 0.2))
DARK = Population("dark", {"dark": 1.0}, Gamma(0.2, 0.03))

WORKERS = 2
WORKER_BYTES = 400 * 2**20


@pytest.fixture(scope="module")
def cluster():
    """A dask cluster of processes, whose workers are killed beyond their memory."""
    with LocalCluster(
        n_workers=WORKERS,
        threads_per_worker=1,
        processes=True,
        memory_limit=WORKER_BYTES,
        dashboard_address=None,
        worker_dashboard_address=None,
    ) as cluster:
        yield cluster


@pytest.fixture(scope="module")
def table(tmp_path_factory):
    """A table of spheres on disk, read when it is asked for."""
    path = tmp_path_factory.mktemp("tables") / "table.zarr"
    publish_table(path, mie_table(radius_um=np.geomspace(0.03, 0.6, 40)))
    return open_table(path, chunks=None)


@pytest.fixture(scope="module")
def alone(table):
    return build(table, [MIXED, DARK])


def assert_same_bits(left: dict[str, np.ndarray], right: dict[str, np.ndarray]) -> None:
    assert left.keys() == right.keys()
    for name, one in left.items():
        two = right[name]
        assert one.dtype == two.dtype
        if one.dtype.kind in "fi":
            assert one.tobytes() == two.tobytes(), name
        else:
            assert (one == two).all(), name


def test_threads_give_the_same_bits(table, alone):
    assert (alone["status"] == SOLVED).all()
    assert_same_bits(build(table, [MIXED, DARK], in_threads(3)), alone)


def test_a_dask_cluster_gives_the_same_bits(cluster, table, alone):
    found = build(table, [MIXED, DARK], on_cluster(cluster.scheduler_address))
    assert_same_bits(found, alone)


def test_the_command_takes_the_address_of_a_scheduler(cluster, tmp_path, capsys, monkeypatch):
    config = tmp_path / "saltmere.yaml"
    config.write_text(
        "campaign: saltmere\ntitle: Spheres\nwavelengths_um: [0.55, 1.1]\n"
        "materials: {clear: {n: 1.4, k: 0.0}, dark: {n: 1.55, k: 0.05}}\n"
        "particles:\n"
        "  - {name: clear, material: clear, shape: {kind: sphere}}\n"
        "  - {name: dark, material: dark, shape: {kind: sphere}}\n"
        "sizes: {radius_um: {from: 0.05, to: 0.5, count: 24}}\n"
        "angles_deg: {from: 0, to: 180, step: 3}\n"
        "populations:\n"
        "  - name: haze\n    particles: {clear: 0.7, dark: 0.3}\n"
        "    size: {kind: lognormal, radius_um: 0.12, geometric_sd: 1.2}\n"
    )
    folder = tmp_path / "results" / "saltmere"
    folder.mkdir(parents=True)
    publish_table(folder / "table.zarr", mie_table())
    words = ["bulk", str(config), "--results", str(tmp_path / "results")]
    digests = []
    for more in ([], ["--threads", "2"], ["--dask-scheduler", cluster.scheduler_address]):
        assert main([*words, *more]) in (0, 1)
        digests.append(open_bulk(folder / "bulk.zarr").attrs["content_digest"])
    assert len(set(digests)) == 1
    said = capsys.readouterr()
    assert said.out.count("haze") >= 3
    monkeypatch.setattr(spreading, "ANSWER_S", 1.0)
    assert main([*words, "--dask-scheduler", "tcp://127.0.0.1:9"]) == 3
    assert main([*words, "--threads", "0"]) == 2
    assert "Traceback" not in capsys.readouterr().err


@pytest.mark.parametrize("address", ["nowhere", "tcp://", "ftp://host:1", "tcp://127.0.0.1:x"])
def test_what_is_no_address_is_bad_input(address):
    with pytest.raises(BadInput, match="not the address of a dask scheduler"):
        on_cluster(address)


def test_workers_of_another_version_are_refused(cluster, table, monkeypatch):
    monkeypatch.setattr("scatterloom.__version__", "0.0.1")
    with pytest.raises(EnvironmentProblem, match=r"this is 0\.0\.1"):
        build(table, [DARK], on_cluster(cluster.scheduler_address))


def test_no_more_averages_at_once_than_fit_into_half_of_the_memory():
    assert threads_for(8, 1e12) == 8
    assert threads_for(8, 6 * AVERAGE_BYTES) == 3
    assert threads_for(8, AVERAGE_BYTES) == 1


# Per degree, at every 0.1 degrees; the pattern is the same for all sizes.
ANGLES = np.linspace(0.0, 180.0, 1801)
SIZES, WAVELENGTHS = 40, 36


def pattern() -> np.ndarray:
    """Return a scattering matrix, (n_angle, 4, 4), as of nothing in particular."""
    matrix = np.zeros((ANGLES.size, 4, 4))
    cosine = np.cos(np.deg2rad(ANGLES))
    matrix[:, 0, 0] = 1.0 + 0.5 * cosine
    matrix[:, 1, 1] = matrix[:, 0, 0] * 0.9
    matrix[:, 0, 1] = matrix[:, 1, 0] = -0.4 * (1.0 - cosine**2)
    matrix[:, 2, 2] = matrix[:, 3, 3] = 0.7 * cosine
    matrix[:, 2, 3] = 0.1 * cosine * (1.0 - cosine**2)
    matrix[:, 3, 2] = -matrix[:, 2, 3]
    return matrix


def write_large(path: Path) -> int:
    """Write a table of one pattern at all sizes; return its size when loaded [bytes]."""
    extent = {
        "particle": 2,
        "wavelength": WAVELENGTHS,
        "size": SIZES,
        "angle": ANGLES.size,
        "row": 4,
        "col": 4,
    }
    known = {
        "particle": np.array(["clear", "dark"], dtype=np.dtypes.StringDType()),
        "wavelength": np.linspace(0.5, 1.0, WAVELENGTHS),
        "angle": ANGLES,
        "radius_um": np.tile(np.geomspace(0.05, 0.4, SIZES), (WAVELENGTHS, 1)),
        "scattering_matrix": pattern(),
        "extinction_efficiency": 2.0,
        "scattering_efficiency": 1.5,
        "absorption_efficiency": 0.5,
        "asymmetry_parameter": 1.0 / 6.0,
        "status": SOLVED,
    }
    total = 0
    with staging(path) as folder:
        group = zarr.open_group(folder, mode="w", zarr_format=3)
        for variable in schema.variables(FLAGS):
            shape = tuple(extent[d] for d in variable.dims)
            value = known.get(variable.name, 0.01 if variable.name.endswith("_error") else 1)
            array = ShardedArray(group, variable, shape)
            for region in regions(shape, array.unit):
                lengths = tuple(part.stop - part.start for part in region)
                piece = value[region] if np.shape(value) == shape else value
                dtype = variable.dtype if variable.dtype != "string" else known["particle"].dtype
                array.write(region, np.broadcast_to(np.asarray(piece, dtype), lengths).copy())
            total += (
                0
                if variable.dtype == "string"
                else int(np.prod(shape) * np.dtype(variable.dtype).itemsize)
            )
        with warnings.catch_warnings():
            warnings.filterwarnings("ignore", message="Consolidated metadata", module="zarr")
            zarr.consolidate_metadata(group.store)
        publish(folder, path, "table", "0" * 64, "2000-01-01T00:00:00Z")
    return total


def test_a_table_three_times_as_large_as_a_worker_is_averaged_within_its_memory(cluster, tmp_path):
    path = tmp_path / "large.zarr"
    loaded = write_large(path)
    assert loaded > 3 * WORKER_BYTES
    assert loaded > 1.5 * WORKERS * WORKER_BYTES
    with cluster.get_client() as client:
        before = client.run(os.getpid)
        found = build(
            open_table(path, digests=False, chunks=None),
            [MIXED],
            on_cluster(cluster.scheduler_address),
        )
        # A worker that grows too large is killed and replaced: none was.
        assert client.run(os.getpid) == before
        assert max(client.run(peak_bytes).values()) < WORKER_BYTES
    assert (found["status"] == SOLVED).all()
    # Averages of what is the same for all sizes: rounding of sums over 40 sizes.
    averaged = found["scattering_matrix"][0]
    np.testing.assert_allclose(averaged, np.broadcast_to(pattern(), averaged.shape), atol=1e-12)
    np.testing.assert_allclose(found["asymmetry_parameter"], 1.0 / 6.0, rtol=1e-12)
    np.testing.assert_allclose(found["single_scattering_albedo"], 0.75, rtol=1e-12)
