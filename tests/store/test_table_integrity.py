"""A table that is incomplete or altered in any way is refused, and the wrong file is named."""

from __future__ import annotations

import errno
import json
import os
import shutil
import signal
import subprocess
import sys
from pathlib import Path

import pytest
import zarr.storage
from rayleigh_cases import ABOUT, FLAGS, axes, case_files, records

import scatterloom
from scatterloom.errors import IntegrityError
from scatterloom.store.atomic import sweep_abandoned
from scatterloom.store.table import gather


@pytest.fixture(scope="module")
def published(tmp_path_factory):
    folder = tmp_path_factory.mktemp("campaign")
    return gather(folder / "table.zarr", axes(), case_files(folder, records()), ABOUT, FLAGS).path


@pytest.fixture
def path(published, tmp_path):
    return Path(shutil.copytree(published, tmp_path / "table.zarr"))


def chunks_of(path: Path, variable: str) -> list[Path]:
    return sorted(p for p in (path / variable / "c").rglob("*") if p.is_file())


def refused(path: Path, message: str) -> None:
    """Both readers refuse the table for the same reason."""
    for reader in (scatterloom.verify, scatterloom.open_table):
        with pytest.raises(IntegrityError, match=message):
            reader(path)


def test_an_intact_copy_is_accepted(path):
    scatterloom.verify(path)
    assert scatterloom.open_table(path).sizes["size"] == 3


def test_a_flipped_bit_in_any_file_is_named(path):
    files = sorted(p for p in path.rglob("*") if p.is_file())
    assert len(files) > 50
    for file in files:
        content = file.read_bytes()
        damaged = bytearray(content)
        damaged[len(content) // 2] ^= 0x10
        file.write_bytes(damaged)
        with pytest.raises(IntegrityError) as refusal:
            scatterloom.verify(path)
        # The commit record and the manifest prove each other, so either may be blamed.
        names = ("commit.json", "manifest.json") if file.parent == path else ()
        blamed = [str(file), *(str(path / n) for n in names if file.name in names), str(path)]
        assert any(name in str(refusal.value) for name in blamed[: None if names else 1])
        file.write_bytes(content)
    scatterloom.verify(path)


def test_a_cut_chunk_is_named(path):
    (chunk,) = chunks_of(path, "scattering_matrix")
    chunk.write_bytes(chunk.read_bytes()[:-1])
    refused(path, f"{chunk.relative_to(path)}: [0-9]+ bytes long instead of")


def test_a_deleted_chunk_is_named(path):
    (chunk,) = chunks_of(path, "status")
    chunk.unlink()
    refused(path, f"{chunk.relative_to(path)}: missing")


def test_two_swapped_chunks_are_named(path):
    (one,), (two,) = chunks_of(path, "size_parameter"), chunks_of(path, "radius_um")
    content = one.read_bytes()
    one.write_bytes(two.read_bytes())
    two.write_bytes(content)
    with pytest.raises(IntegrityError) as refusal:
        scatterloom.verify(path)
    assert str(one) in str(refusal.value)
    assert str(two) in str(refusal.value)


def test_a_foreign_file_is_named(path):
    (path / "status" / "c" / "extra").write_bytes(b"?")
    refused(path, r"status/c/extra: foreign file")


def test_no_commit_record_no_table(path):
    (path / "commit.json").unlink()
    refused(path, "not committed")


def test_a_manifest_that_was_edited_to_match_is_refused(path):
    (chunk,) = chunks_of(path, "status")
    manifest = json.loads((path / "manifest.json").read_bytes())
    del manifest["files"][str(chunk.relative_to(path))]
    chunk.unlink()
    (path / "manifest.json").write_text(json.dumps(manifest))
    refused(path, "the manifest is not the one committed")


def test_a_commit_record_of_another_version_or_none_at_all_is_refused(path):
    record = json.loads((path / "commit.json").read_bytes())
    (path / "commit.json").write_text(json.dumps(record | {"format_version": 99}))
    refused(path, "foreign format version")
    (path / "commit.json").write_text("[]")
    refused(path, "foreign format version")
    (path / "commit.json").write_text("{")
    refused(path, "unreadable commit record")


def test_another_kind_of_folder_is_refused(path):
    record = json.loads((path / "commit.json").read_bytes())
    (path / "commit.json").write_text(json.dumps(record | {"kind": "bulk"}))
    refused(path, "a committed bulk, not a table")


def test_no_such_table(tmp_path):
    refused(tmp_path / "table.zarr", "no such table")


def test_the_quick_look_checks_names_and_lengths_and_reading_tests_checksums(path):
    (chunk,) = chunks_of(path, "scattering_matrix")
    content = bytearray(chunk.read_bytes())
    content[len(content) // 2] ^= 1
    chunk.write_bytes(content)
    table = scatterloom.open_table(path, digests=False)
    # The checksum of the compressed chunk: the exception is the codec's own.
    with pytest.raises(Exception, match=r"(?i)checksum|corrupt|decompress"):
        table.scattering_matrix.load()
    chunk.write_bytes(content[:-2])
    with pytest.raises(IntegrityError, match="bytes long instead of"):
        scatterloom.open_table(path, digests=False)


def test_a_full_disk_at_any_write_leaves_the_old_table(path, tmp_path, monkeypatch):
    before = json.loads((path / "commit.json").read_bytes())
    written = records()
    written[0].scalars["extinction_efficiency"] = (0.125, 0.001)
    cases = case_files(tmp_path, written)
    original = zarr.storage.LocalStore.set
    count = 0

    def failing(limit):
        async def set_(self, key, value, *rest, **more):
            nonlocal count
            count += 1
            if count > limit:
                raise OSError(errno.ENOSPC, "No space left on device")
            return await original(self, key, value, *rest, **more)

        return set_

    with monkeypatch.context() as patch:
        patch.setattr(zarr.storage.LocalStore, "set", failing(10**9))
        gather(tmp_path / "scratch.zarr", axes(), cases, ABOUT, FLAGS)
    shutil.rmtree(tmp_path / "scratch.zarr")
    total = count
    assert total > 60
    for limit in [*range(0, total, 9), total - 1]:
        count = 0
        with monkeypatch.context() as patch:
            patch.setattr(zarr.storage.LocalStore, "set", failing(limit))
            with pytest.raises(OSError, match="No space left"):
                gather(path, axes(), cases, ABOUT, FLAGS)
        assert json.loads((path / "commit.json").read_bytes()) == before
        assert sorted(p.name for p in tmp_path.iterdir()) == ["cases", "table.zarr"]
    scatterloom.verify(path)


# Replaces the system calls that order the publication by ones that kill the process
# before the N-th of them, as a power cut or kill -9 would.
KILLED = """
import os, signal, sys
from pathlib import Path
from rayleigh_cases import ABOUT, FLAGS, axes, case_files, records
from scatterloom.store.table import gather
folder, limit = Path(sys.argv[1]), int(sys.argv[2])
written = records()
written[0].scalars["extinction_efficiency"] = (0.125, 0.001)
cases = case_files(folder, written)
count = 0
def counted(call):
    def inner(*args, **kwargs):
        global count
        count += 1
        if count == limit:
            os.kill(os.getpid(), signal.SIGKILL)
        return call(*args, **kwargs)
    return inner
for name in ("fsync", "rename", "replace", "mkdir"):
    setattr(os, name, counted(getattr(os, name)))
gather(folder / "table.zarr", axes(), cases, ABOUT, FLAGS)
print(count)
"""


def run_killed(folder: Path, limit: int) -> subprocess.CompletedProcess[str]:
    here = Path(__file__).parent
    return subprocess.run(
        [sys.executable, "-c", KILLED, str(folder), str(limit)],
        env=os.environ
        | {
            "PYTHONPATH": os.pathsep.join(
                [str(here), str(here.parent), *filter(None, [os.environ.get("PYTHONPATH")])]
            )
        },
        capture_output=True,
        text=True,
        check=False,
    )


def test_a_kill_at_any_step_never_leaves_a_wrong_table(published, tmp_path):
    done = run_killed(tmp_path, 10**9)
    assert done.returncode == 0, done.stderr
    new = json.loads((tmp_path / "table.zarr" / "commit.json").read_bytes())["content_digest"]
    old = json.loads((published / "commit.json").read_bytes())["content_digest"]
    assert new != old
    total = int(done.stdout)
    seen = set()
    # Early steps differ little; the last ones rename and commit.
    for limit in (1, total // 2, *range(total - 7, total + 1)):
        folder = tmp_path / f"killed-{limit}"
        shutil.copytree(published, folder / "table.zarr")
        assert run_killed(folder, limit).returncode == -signal.SIGKILL
        try:
            scatterloom.open_table(folder / "table.zarr")
        except IntegrityError:
            seen.add("refused")
        else:
            record = json.loads((folder / "table.zarr" / "commit.json").read_bytes())
            assert record["content_digest"] in (old, new)
            seen.add("old" if record["content_digest"] == old else "new")
        # What the kill left is swept by the next gathering, which ends with the new table.
        written = records()
        written[0].scalars["extinction_efficiency"] = (0.125, 0.001)
        again = gather(folder / "table.zarr", axes(), case_files(folder, written), ABOUT, FLAGS)
        assert again.content_digest == new
        scatterloom.verify(folder / "table.zarr")
        assert sweep_abandoned(folder) == []
        assert sorted(p.name for p in folder.iterdir()) == ["cases", "table.zarr"]
    assert {"old", "refused"} <= seen
