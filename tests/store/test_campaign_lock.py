"""Only one run works on a campaign; the lock ends with its holder, however that ends."""

from __future__ import annotations

import os
import signal
import subprocess
import sys

import pytest

from scatterloom.errors import CampaignHeld
from scatterloom.store.held import hold, holder

HOLDER = """
import sys, time
from pathlib import Path
from scatterloom.store.held import hold
with hold(Path(sys.argv[1])):
    print("held", flush=True)
    time.sleep(60)
"""


def test_a_second_holder_is_refused_and_told_who_the_first_is(tmp_path):
    path = tmp_path / "tiny" / ".campaign.lock"
    with hold(path):
        assert holder(path)["pid"] == os.getpid()
        with pytest.raises(CampaignHeld, match=f"tiny is held by process {os.getpid()} on "):
            hold(path).__enter__()
    assert holder(path) is None
    with hold(path):
        pass


def test_a_killed_holder_holds_no_more(tmp_path):
    path = tmp_path / "lock"
    with subprocess.Popen(
        [sys.executable, "-c", HOLDER, str(path)], stdout=subprocess.PIPE, text=True
    ) as other:
        assert other.stdout.readline() == "held\n"
        assert holder(path)["pid"] == other.pid
        with pytest.raises(CampaignHeld, match=f"process {other.pid}"):
            hold(path).__enter__()
        other.send_signal(signal.SIGKILL)
        other.wait()
    assert holder(path) is None
    with hold(path):
        assert holder(path)["pid"] == os.getpid()


def test_a_child_that_inherits_the_lock_keeps_it(tmp_path):
    path = tmp_path / "lock"
    with hold(path) as descriptor:
        child = subprocess.Popen(
            [sys.executable, "-c", "import sys; sys.stdin.read()"],
            stdin=subprocess.PIPE,
            pass_fds=(descriptor,),
        )
    with pytest.raises(CampaignHeld, match="held by another process"):
        hold(path).__enter__()
    child.communicate()
    with hold(path):
        pass


def test_a_torn_text_in_the_lock_file_names_nobody(tmp_path):
    path = tmp_path / "lock"
    for text in ("", "{", "[]", '{"pid": 1}'):
        path.write_text(text)
        assert holder(path) is None
