"""Ends a process when its parent ends, so that a killed run leaves no solver at work."""

from __future__ import annotations

import ctypes
import os
import signal
import sys
import threading
import time

PR_SET_PDEATHSIG = 1
LOOK_EVERY_S = 2.0


def ask_kernel(signal_number: int = signal.SIGKILL) -> bool:
    """Ask Linux to signal this process when its parent dies; False on other systems."""
    if not sys.platform.startswith("linux"):
        return False
    return bool(ctypes.CDLL(None).prctl(PR_SET_PDEATHSIG, int(signal_number), 0, 0, 0) == 0)


def end_with_parent(parent: int) -> None:
    """End this process when the process `parent`, which started it, ends.

    Where the kernel can't do it, a thread looks every few seconds.
    """
    if not ask_kernel():
        threading.Thread(target=_watch, args=(parent,), daemon=True).start()
    if os.getppid() != parent:
        # It ended before the kernel knew.
        sys.exit(130)


def _watch(parent: int) -> None:
    while os.getppid() == parent:
        time.sleep(LOOK_EVERY_S)
    os._exit(130)
