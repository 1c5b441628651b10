"""Writes that fail: a full disk, an unreadable medium, a torn write. Nothing wrong is left."""

import builtins
import errno
import io
import os
import subprocess
from pathlib import Path

import pytest

from job_kit import job, records_of, spec_of
from lattice_kit import SPHERE
from scatterloom import jobs
from scatterloom.errors import IntegrityError
from scatterloom.scattering import record
from scatterloom.store import atomic
from scatterloom.store.casefile import read_records
from scatterloom.store.layout import Layout
from scatterloom.store.library import CaseLibrary

INDEX = 1.5 + 0.01j
LEVELS = (6, 8)
SIZES = (0.4, 0.5, 0.6)
TINY_TMPFS = 1 << 20


def anchors():
    return job("anchors-one", SPHERE, INDEX, SIZES, LEVELS)


def solved_files(folder):
    return {p: p.stat().st_ino for p in Layout(folder).solved.rglob("*.case")}


def check_what_is_there(folder):
    """Every file that has its final name is whole; return how many there are."""
    files = list(Layout(folder).solved.rglob("*.case")) + list(Layout(folder).cases.glob("*.cases"))
    for path in files:
        assert read_records(path)
    assert not list(folder.rglob("*.partial"))
    return len(files)


class FailingWrites:
    """Makes the k-th write of temporary files fail, or only half of it arrive."""

    def __init__(self, monkeypatch, limit, number=None):
        self.count, self.limit, self.number = 0, limit, number
        original = builtins.open
        outer = self

        class Torn(io.FileIO):
            def write(self, data):
                outer.count += 1
                if outer.count == outer.limit:
                    if outer.number is not None:
                        raise OSError(outer.number, os.strerror(outer.number), self.name)
                    # A torn write: half of it reaches the disk, and the machine dies.
                    super().write(bytes(data)[: len(data) // 2])
                    raise PowerCut
                return super().write(data)

        def opened(path, mode="r", *rest, **more):
            if mode == "xb" and str(path).endswith(".partial"):
                return Torn(path, "x")
            return original(path, mode, *rest, **more)

        monkeypatch.setattr(atomic, "open", opened, raising=False)


class PowerCut(BaseException):
    pass


@pytest.fixture(scope="module")
def whole(tmp_path_factory):
    folder = tmp_path_factory.mktemp("whole")
    jobs.solve(spec_of(anchors()), folder)
    return [case.expansion.tobytes() for case in records_of(folder, anchors())]


def writes_of_a_whole_job(tmp_path, monkeypatch):
    with monkeypatch.context() as patch:
        counting = FailingWrites(patch, limit=10**9)
        jobs.solve(spec_of(anchors()), tmp_path / "counting")
    return counting.count


@pytest.mark.parametrize("number", [errno.ENOSPC, errno.EIO])
def test_every_write_may_fail_and_the_next_try_ends_the_same(tmp_path, monkeypatch, whole, number):
    total = writes_of_a_whole_job(tmp_path, monkeypatch)
    assert total > 20
    # The case, its fields, the files of the job and the heartbeats all come by in these.
    for limit in {1, total, *range(2, total, total // 8)}:
        folder = tmp_path / f"failing-{limit}"
        with monkeypatch.context() as patch:
            FailingWrites(patch, limit, number)
            with pytest.raises(OSError, match=os.strerror(number)):
                jobs.solve(spec_of(anchors()), folder)
        check_what_is_there(folder)
        before = solved_files(folder)
        jobs.solve(spec_of(anchors()), folder)
        after = solved_files(folder)
        assert {path: after[path] for path in before} == before  # none is solved twice
        assert [case.expansion.tobytes() for case in records_of(folder, anchors())] == whole


def test_every_write_may_be_torn_by_a_power_cut(tmp_path, monkeypatch, whole):
    total = writes_of_a_whole_job(tmp_path, monkeypatch)
    for limit in range(2, total + 1, total // 8):
        folder = tmp_path / f"torn-{limit}"
        with monkeypatch.context() as patch:
            FailingWrites(patch, limit)
            # The remains stay, as they would without power.
            patch.setattr(Path, "unlink", lambda *_, **__: None)
            with pytest.raises(PowerCut):
                jobs.solve(spec_of(anchors()), folder)
        for path in Layout(folder).solved.rglob("*.case"):
            assert read_records(path)
        jobs.solve(spec_of(anchors()), folder)
        assert [case.expansion.tobytes() for case in records_of(folder, anchors())] == whole


def test_a_library_on_a_full_disk_stops_nothing(tmp_path, monkeypatch, whole, capsys):
    def full(*_):
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(os, "link", full)
    jobs.solve(spec_of(anchors()), tmp_path, library=CaseLibrary(tmp_path / "library"))
    assert [case.expansion.tobytes() for case in records_of(tmp_path, anchors())] == whole
    assert "No space left on device; not added" in capsys.readouterr().err


@pytest.fixture
def tiny_disk(tmp_path):
    """A file system of 1 MiB, where this user may mount one."""
    place = tmp_path / "disk"
    place.mkdir()
    command = ["mount", "-t", "tmpfs", "-o", f"size={TINY_TMPFS}", "tmpfs", str(place)]
    try:
        done = subprocess.run(command, capture_output=True, text=True, check=False)
    except OSError as error:
        pytest.skip(f"cannot mount a file system here: {error}")
    if done.returncode != 0:
        pytest.skip(f"cannot mount a file system here: {done.stderr.strip()}")
    yield place
    subprocess.run(["umount", str(place)], check=True)


def test_a_disk_that_is_really_full(tiny_disk, whole):
    ballast = tiny_disk / "ballast"
    filled = 0
    # Every amount of free space from none to enough.
    for free in range(0, 200_000, 24 * 1024):
        room = os.statvfs(tiny_disk).f_bavail * os.statvfs(tiny_disk).f_frsize
        ballast.write_bytes(bytes(max(0, room - free)))
        try:
            jobs.solve(spec_of(anchors()), tiny_disk / "campaign")
        except OSError as error:
            assert error.errno == errno.ENOSPC
            filled += 1
        ballast.write_bytes(b"")
        if (tiny_disk / "campaign").exists():
            check_what_is_there(tiny_disk / "campaign")
    assert filled >= 2
    ballast.unlink()
    jobs.solve(spec_of(anchors()), tiny_disk / "campaign")
    found = records_of(tiny_disk / "campaign", anchors())
    assert [case.expansion.tobytes() for case in found] == whole


def test_a_case_file_on_a_failing_medium_is_named(tmp_path, monkeypatch):
    jobs.solve(spec_of(anchors()), tmp_path)
    path = Layout(tmp_path).solved_case(anchors().cases[0][0])
    original = Path.read_bytes

    def failing(self):
        if self == path:
            raise OSError(errno.EIO, os.strerror(errno.EIO), str(self))
        return original(self)

    monkeypatch.setattr(Path, "read_bytes", failing)
    with pytest.raises(IntegrityError, match=f"{path.name}.*Input/output error"):
        read_records(path)
    # The job says so and solves that one case again.
    Layout(tmp_path).case_file(anchors().name).unlink()
    before = solved_files(tmp_path)
    jobs.solve(spec_of(anchors()), tmp_path)
    after = solved_files(tmp_path)
    assert [p for p in before if after[p] != before[p]] == [path]
    assert all(case.status != record.FAILED for case in records_of(tmp_path, anchors()))
