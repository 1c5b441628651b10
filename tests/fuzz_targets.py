"""What is fuzzed: every reader of files, with good files to start from.

A target takes any bytes and must return, or raise one of the program's own errors, which are
shown as messages. It may write nothing outside the folder it is given. Files that carry a
checksum come twice: as they are, and with the checksum made right, which gets past it.
"""

from __future__ import annotations

import hashlib
import io
import json
import struct
import zipfile
import zlib
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import numpy as np

from scatterloom.campaign import load
from scatterloom.campaign.expand import expand
from scatterloom.campaign.spectra import read_spectrum
from scatterloom.commands.status import failed_cases
from scatterloom.errors import ScatterloomError
from scatterloom.job_file import read_spec
from scatterloom.store import casefile, commit
from scatterloom.store.failures import read_failures
from scatterloom.store.layout import Layout
from scatterloom.store.progress import Meter
from scatterloom.store.transitions import read_transitions
from scatterloom.unpacking import unpack

CONFIG = """\
campaign: tiny
title: A campaign
wavelengths_um: [0.5, 1.0]
materials: {silt: {n: 1.5, k: 0.01}}
particles:
  - {name: plate, material: silt, shape: {kind: spheroid, equatorial_to_polar: 2.0}}
sizes: {size_parameter: {from: 0.4, to: 1.6, count: 4}}
angles_deg: {from: 0, to: 180, step: 10}
accuracy: {f11_relative: 0.001, ratio_absolute: 0.001, efficiency_relative: 0.0005}
populations:
  - {name: haze, particles: {plate: 1.0}, size: SIZE}
"""
LOGNORMAL = "{kind: lognormal, radius_um: 0.1, geometric_sd: 1.5}"


@dataclass(frozen=True)
class Target:
    """One reader: `seeds` are good or nearly good files, `read` is given a fresh folder."""

    seeds: Callable[[], list[bytes]]
    read: Callable[[bytes, Path], object]


def attempt(target: Target, content: bytes, folder: Path) -> str:
    """Give a target some bytes; return "read" or "refused".

    Parameters
    ----------
    folder : Path
        Empty; a folder in it is what the target may write to.

    Raises
    ------
    Exception
        Whatever is no message of the program.
    AssertionError
        If the message would reach a terminal raw or is empty, or something was written outside.
    """
    inside = folder / "inside"
    inside.mkdir()
    try:
        target.read(content, inside)
        outcome = "read"
    except ScatterloomError as error:
        assert str(error)
        outcome = "refused"
    written = [path.name for path in folder.iterdir()]
    assert written == ["inside"], f"written outside: {written}"
    return outcome


def _config(content: bytes, folder: Path) -> None:
    path = folder / "c.yaml"
    path.write_bytes(content)
    campaign = load(path)
    assert (folder / campaign.name).resolve().parent == folder.resolve()
    if campaign.model.wavelengths_um is None or len(campaign.model.wavelengths_um) < 9:
        expand(campaign)


def _names(content: bytes, folder: Path) -> None:
    """Names of campaign, particle, population and file, each from a part of the bytes."""
    text = json.dumps(content.decode("utf-8", "replace"))
    for plain in ("campaign: tiny", "name: plate", "name: haze"):
        key = plain.split(":")[0]
        changed = _written(LOGNORMAL).replace(plain, f"{key}: {text}")
        path = folder / "c.yaml"
        path.write_text(changed, encoding="utf-8")
        try:
            campaign = load(path)
        except ScatterloomError:
            continue
        for name in (campaign.name, *(p.name for p in campaign.model.particles)):
            assert (folder / name).resolve().parent == folder.resolve(), name
    try:
        _with_files(content, folder)
    except ScatterloomError:
        return


def _with_files(content: bytes, folder: Path) -> None:
    text = json.dumps(content.decode("utf-8", "replace"))
    path = folder / "d.yaml"
    path.write_text(_written("{kind: tabulated, table: " + text + "}"), encoding="utf-8")
    load(path)


def _written(size: str) -> str:
    return CONFIG.replace("SIZE", size)


def _spectrum(content: bytes, folder: Path) -> None:
    path = folder / "a.csv"
    path.write_bytes(content)
    read_spectrum(path, "a.csv")


def _size_table(content: bytes, folder: Path) -> None:
    (folder / "sizes.csv").write_bytes(content)
    path = folder / "c.yaml"
    path.write_text(_written("{kind: tabulated, table: sizes.csv}"))
    load(path)


def _measurement(suffix: str) -> Callable[[bytes, Path], None]:
    def read(content: bytes, folder: Path) -> None:
        from scatterloom.bulk.measurement import read_measurement

        path = folder / f"m{suffix}"
        path.write_bytes(content)
        measured = read_measurement(path)
        for wavelength in measured.wavelengths:
            part = measured.at(wavelength)
            assert np.isfinite(part.angle_deg).all()
            assert all((np.isnan(e) | (e > 0)).all() for e in part.errors.values())

    return read


def _netcdf_seeds() -> list[bytes]:
    import xarray

    angle = np.linspace(5.0, 175.0, 4)
    dataset = xarray.Dataset(
        {
            "F11": ("angle_deg", 1.0 / angle),
            "F11_error": ("angle_deg", 0.1 / angle),
            "F22_F11": ("angle_deg", np.full(4, 0.9)),
            "F22_F11_error": ("angle_deg", np.full(4, 0.01)),
        },
        {"angle_deg": angle, "wavelength_um": 0.5},
    )
    return [bytes(dataset.to_netcdf(engine="scipy"))]


def _case_file(content: bytes, folder: Path) -> None:
    path = folder / "a.case"
    path.write_bytes(content)
    casefile.read_records(path)


def _case_payload(content: bytes, folder: Path) -> None:
    payload = zlib.compress(content, 1)
    digest = hashlib.sha256(struct.pack("<IQ", casefile.FORMAT_VERSION, len(payload)) + payload)
    head = struct.pack("<IQ32s", casefile.FORMAT_VERSION, len(payload), digest.digest())
    _case_file(casefile.SIGNATURE + head + payload, folder)


@cache
def _case_seed() -> bytes:
    import tempfile

    from store.rayleigh_cases import record

    with tempfile.TemporaryDirectory() as name:
        path = Path(name) / "a.case"
        casefile.write_records(path, [record("plate", 0.01)])
        return path.read_bytes()


def _case_payload_seeds() -> list[bytes]:
    return [zlib.decompress(_case_seed()[len(casefile.SIGNATURE) + 44 :])]


def _npz(reader: Callable[[Path], object]) -> Callable[[bytes, Path], None]:
    """The header of an archive of arrays is fuzzed; its checksums are right."""

    def read(content: bytes, folder: Path) -> None:
        arrays = {"present": np.arange(4, dtype=np.uint32), "values": np.ones((3, 4), "c8")}
        arrays |= {f"0/{j}/0": np.ones((2, 4), np.uint16) for j in range(2)}
        path = folder / "a.npz"
        try:
            text = np.array(content.decode("utf-8").rstrip("\0"))
        except UnicodeDecodeError:
            return
        np.savez(path, header=text, **arrays)
        reader(path)

    return read


def _raw(name: str, reader: Callable[[Path], object]) -> Callable[[bytes, Path], None]:
    def read(content: bytes, folder: Path) -> None:
        (folder / name).write_bytes(content)
        reader(folder / name)

    return read


def _fields(path: Path) -> None:
    from scatterloom.store.checkpoint import Checkpoint
    from scatterloom.store.fields import read_fields

    Checkpoint(path, 1.0).read()
    read_fields(path)


def _fields_seeds() -> list[bytes]:
    anchor = {"digest": "8/3", "size_parameter": 1.0, "products": 2.0, "levels": [1, 1]}
    return [json.dumps({"version": version, "anchors": [anchor]}).encode() for version in (1, 2)]


def _transitions_seeds() -> list[bytes]:
    header = {"version": 1, "digest": "ab", "symmetry": "axial", "cells": [8, 12], "n_max": 2}
    return [json.dumps(header).encode()]


def _commit(content: bytes, folder: Path) -> None:
    (folder / commit.COMMIT).write_bytes(content)
    commit.commit_record(folder)
    commit.verify_folder(folder)


def _manifest(content: bytes, folder: Path) -> None:
    (folder / commit.MANIFEST).write_bytes(content)
    record = {
        "format_version": commit.FORMAT_VERSION,
        "manifest_sha256": hashlib.sha256(content).hexdigest(),
    }
    (folder / commit.COMMIT).write_text(json.dumps(record))
    commit.verify_folder(folder)


def _table_metadata(content: bytes, folder: Path) -> None:
    """Metadata of the table, listed as they are."""
    from scatterloom.store.table import open_table

    (folder / "zarr.json").write_bytes(content)
    listed = {"bytes": len(content), "sha256": hashlib.sha256(content).hexdigest()}
    _manifest(json.dumps({"files": {"zarr.json": listed}}).encode(), folder)
    open_table(folder)


def _table_seeds() -> list[bytes]:
    array = {
        "shape": [2], "data_type": "float64", "fill_value": "NaN", "node_type": "array",
        "chunk_grid": {"name": "regular", "configuration": {"chunk_shape": [2]}},
        "chunk_key_encoding": {"name": "default", "configuration": {"separator": "/"}},
        "codecs": [{"name": "bytes", "configuration": {"endian": "little"}}],
        "dimension_names": ["angle"], "attributes": {}, "zarr_format": 3,
    }  # fmt: skip
    inner = {"kind": "inline", "must_understand": False, "metadata": {"angle": array}}
    group = {"zarr_format": 3, "node_type": "group", "attributes": {"title": "a"}}
    return [json.dumps(group | {"consolidated_metadata": inner}).encode()]


def _heartbeat(content: bytes, folder: Path) -> None:
    from scatterloom.commands._display import line

    layout = Layout(folder)
    layout.progress.mkdir(parents=True)
    (layout.progress / "a.json").write_bytes(content)
    meter = Meter(layout, {"a": 4})
    meter.forget_failures()
    progress = meter.measure()
    json.dumps(progress.as_dict())
    line(progress, "solving", None)
    assert 0.0 <= meter.share_done({"a": 1.0}) <= 1.0


def _heartbeat_seeds() -> list[bytes]:
    beat = {
        "job": "a", "kind": "span", "state": "running", "cases_done": 1, "cases_total": 4,
        "size_parameter": 1.5, "residual": 1e-3, "products": 2.0, "updated": 1.8e9, "pid": 1,
        "host": "", "exit_code": None, "message": "", "solved": 1, "seconds": 0.1,
    }  # fmt: skip
    return [json.dumps(beat | {"state": state}).encode() for state in ("running", "failed")]


def _failure(content: bytes, folder: Path) -> None:
    (folder / "a.json").write_bytes(content)
    (folder / "b.json").write_bytes(_failure_seeds()[0])
    failed_cases([vars(failure) for failure in read_failures(folder)])


def _failure_seeds() -> list[bytes]:
    note = {
        "digest": "ab", "job": "a", "shape": "{}", "size_parameter": 1.0, "number": 2,
        "flag": "no_memory", "meaning": "m", "advice": "a",
    }  # fmt: skip
    return [json.dumps(note).encode()]


def _job(content: bytes, folder: Path) -> None:
    """A job file is judged before anything is solved or reported."""
    path = folder / "jobs" / "a.json"
    path.parent.mkdir()
    path.write_bytes(content)
    spec = read_spec(path)
    name = str(spec["name"])
    assert Layout(folder).case_file(name).resolve().parent == Layout(folder).cases.resolve()


def _job_seeds() -> list[bytes]:
    from job_kit import job

    shape = {"kind": "spheroid", "equatorial_to_polar": 2.0}
    return [json.dumps(job("a", shape, 1.5 + 0.01j, [1.0, 2.0], (8, 12)).spec()).encode()]


_GOOD = {"merged.yaml": b"a: 1\n", "ro-crate-metadata.json": b"{}"}
_GOOD_LISTED = {
    name: {"bytes": len(content), "sha256": hashlib.sha256(content).hexdigest()}
    for name, content in _GOOD.items()
}


def _crate(content: bytes, folder: Path) -> None:
    (folder / "x.zip").write_bytes(content)
    unpack(folder / "x.zip", folder / "out")


def _archive(names: dict[str, bytes], manifest: bytes) -> bytes:
    stream = io.BytesIO()
    with zipfile.ZipFile(stream, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in names.items():
            archive.writestr(name, content)
        archive.writestr("manifest.json", manifest)
    return stream.getvalue()


def _crate_seeds() -> list[bytes]:
    return [_archive(_GOOD, json.dumps({"format_version": 1, "files": _GOOD_LISTED}).encode())]


def _crate_manifest(content: bytes, folder: Path) -> None:
    _crate(_archive(_GOOD, content), folder)


def _crate_name(content: bytes, folder: Path) -> None:
    name = content.decode("utf-8", "replace").split("\0")[0] or "x"
    listed = {name: {"bytes": 1, "sha256": hashlib.sha256(b"1").hexdigest()}}
    manifest = json.dumps({"format_version": 1, "files": listed | _GOOD_LISTED}).encode()
    _crate(_archive(_GOOD | {name: b"1"}, manifest), folder)


_MEASURED = b"angle_deg,wavelength_um,F11,F11_error,-F12/F11,-F12/F11_error\n5,0.5,3,0.1,0.2,0.01\n"

TARGETS: dict[str, Target] = {
    "config": Target(lambda: [_written(LOGNORMAL).encode()], _config),
    "names": Target(lambda: [b"a", b"../a", b"/etc/passwd", b"a/b", b"nul", b"..", b"-a"], _names),
    "constants": Target(lambda: [b"wavelength_um,n,k\n0.4,1.5,0.01\n2.0,1.5,0\n"], _spectrum),
    "size_table": Target(lambda: [b"radius_um,density\n0.1,1\n0.2,2\n"], _size_table),
    "measurement_csv": Target(lambda: [_MEASURED], _measurement(".csv")),
    "measurement_netcdf": Target(_netcdf_seeds, _measurement(".nc")),
    "case_file": Target(lambda: [_case_seed()], _case_file),
    "case_payload": Target(_case_payload_seeds, _case_payload),
    "fields": Target(_fields_seeds, _npz(_fields)),
    "fields_raw": Target(lambda: [b"PK\3\4", b"\x93NUMPY\1\0"], _raw("a.npz", _fields)),
    "transitions": Target(_transitions_seeds, _npz(read_transitions)),
    "transitions_raw": Target(lambda: [b"PK\3\4"], _raw("a.npz", read_transitions)),
    "commit_record": Target(lambda: [b'{"format_version": 1, "manifest_sha256": "a"}'], _commit),
    "manifest": Target(lambda: [b'{"files": {"a": {"bytes": 1, "sha256": "a"}}}'], _manifest),
    "table_metadata": Target(_table_seeds, _table_metadata),
    "heartbeat": Target(_heartbeat_seeds, _heartbeat),
    "failure_note": Target(_failure_seeds, _failure),
    "job_file": Target(_job_seeds, _job),
    "crate": Target(_crate_seeds, _crate),
    "crate_manifest": Target(
        lambda: [json.dumps({"format_version": 1, "files": _GOOD_LISTED}).encode()],
        _crate_manifest,
    ),
    "crate_name": Target(lambda: [b"a", b"../a", b"/a", b"a\\b"], _crate_name),
}
