"""Files appear whole or not at all, and the leavings of dead writers are swept."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time

import pytest

from scatterloom.store.atomic import (
    atomic_write,
    is_alive,
    sweep_abandoned,
    temporary_beside,
    write_if_changed,
)


def test_a_failed_write_leaves_the_old_file_and_nothing_else(tmp_path):
    path = tmp_path / "a"
    path.write_bytes(b"old")
    with pytest.raises(RuntimeError, match="on purpose"), atomic_write(path) as stream:
        stream.write(b"half of the new")
        raise RuntimeError("on purpose")
    assert path.read_bytes() == b"old"
    assert list(tmp_path.iterdir()) == [path]


def test_nothing_takes_the_name_before_the_end(tmp_path):
    path = tmp_path / "folder" / "a"
    with atomic_write(path) as stream:
        stream.write(b"new")
        assert not path.exists()
    assert path.read_bytes() == b"new"


def test_equal_content_is_not_written_again(tmp_path):
    path = tmp_path / "a"
    assert write_if_changed(path, b"one")
    before = path.stat()
    assert not write_if_changed(path, b"one")
    assert (path.stat().st_ino, path.stat().st_mtime_ns) == (before.st_ino, before.st_mtime_ns)
    assert write_if_changed(path, b"two")
    assert path.read_bytes() == b"two"


WRITER = """
import sys, time
from scatterloom.store.atomic import atomic_write
with atomic_write(sys.argv[1]) as stream:
    stream.write(b"half")
    stream.flush()
    print("writing", flush=True)
    time.sleep(60)
"""


def test_a_killed_writer_leaves_a_file_that_is_swept_and_a_living_one_is_left_alone(tmp_path):
    path = tmp_path / "a"
    with subprocess.Popen(
        [sys.executable, "-c", WRITER, str(path)], stdout=subprocess.PIPE, text=True
    ) as writer:
        assert writer.stdout.readline() == "writing\n"
        assert sweep_abandoned(tmp_path) == []
        (temporary,) = tmp_path.iterdir()
        writer.send_signal(signal.SIGKILL)
        writer.wait()
    assert not path.exists()
    assert sweep_abandoned(tmp_path) == [temporary]
    assert list(tmp_path.iterdir()) == []


def test_the_sweep_spares_other_hosts_for_a_day_and_foreign_names_for_ever(tmp_path):
    mine = temporary_beside(tmp_path / "a").name
    host = mine.split(".")[-2].rsplit("-", 2)[0]
    recent = tmp_path / mine.replace(host, "elsewhere")
    ancient = tmp_path / recent.name.replace(".a.", ".b.")
    stranger = tmp_path / ".notes.partial"
    for path in (recent, ancient, stranger):
        path.touch()
    two_days_ago = time.time() - 2 * 86400
    os.utime(ancient, (two_days_ago, two_days_ago))
    os.utime(stranger, (two_days_ago, two_days_ago))
    assert sweep_abandoned(tmp_path) == [ancient]
    assert recent.exists()
    assert stranger.exists()


@pytest.mark.skipif(not sys.platform.startswith("linux"), reason="needs /proc")
def test_an_unburied_dead_process_is_not_alive():
    child = subprocess.Popen([sys.executable, "-c", "pass"])
    # WNOWAIT leaves it a zombie, which a signal can still reach.
    os.waitid(os.P_PID, child.pid, os.WEXITED | os.WNOWAIT)
    os.kill(child.pid, 0)
    assert not is_alive(child.pid)
    child.wait()
    assert is_alive(os.getpid())
