"""The lock that keeps two runs off one campaign.

The lock is the kernel's (flock), so it ends with the processes that hold the file
open, however they die. The text in the file only tells a person who holds it.
"""

from __future__ import annotations

import contextlib
import fcntl
import json
import os
import socket
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from scatterloom.errors import CampaignHeld
from scatterloom.store.atomic import is_alive
from scatterloom.store.provenance import now


@contextlib.contextmanager
def hold(path: Path) -> Iterator[int]:
    """Hold the campaign whose lock file is `path` until the block ends.

    Yields
    ------
    int
        The descriptor. A child that inherits it keeps the campaign held while it lives.

    Raises
    ------
    CampaignHeld
        Saying which process on which host holds it, and since when.
    """
    path.parent.mkdir(parents=True, exist_ok=True)
    descriptor = os.open(path, os.O_RDWR | os.O_CREAT, 0o644)
    try:
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            raise CampaignHeld(_refusal(path)) from None
        text = json.dumps({"pid": os.getpid(), "host": socket.gethostname(), "since": now()})
        os.ftruncate(descriptor, 0)
        os.pwrite(descriptor, text.encode(), 0)
        try:
            yield descriptor
        finally:
            os.ftruncate(descriptor, 0)
    finally:
        os.close(descriptor)


def holder(path: Path) -> dict[str, Any] | None:
    """Return {pid, host, since} of the run that holds the campaign, or None.

    This reads the text only and takes no lock, so that looking never gets in the way.
    """
    try:
        text = json.loads(path.read_bytes())
    except (FileNotFoundError, ValueError):
        return None
    if not isinstance(text, dict) or not {"pid", "host", "since"} <= text.keys():
        return None
    if text["host"] == socket.gethostname() and not is_alive(text["pid"]):
        return None
    return text


def _refusal(path: Path) -> str:
    text = holder(path)
    who = (
        f"process {text['pid']} on {text['host']} since {text['since']}"
        if text
        else "another process"
    )
    return f"campaign {path.parent.name} is held by {who}; wait for it, or stop it first"
