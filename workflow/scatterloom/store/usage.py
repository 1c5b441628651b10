"""How much of the disk a campaign takes, and for what."""

from __future__ import annotations

import contextlib
import os
from pathlib import Path

from scatterloom.store.layout import Layout


def disk_use(layout: Layout) -> dict[str, int]:
    """Return the bytes that files of a campaign take on disk, by what they are.

    Parameters
    ----------
    layout : Layout

    Returns
    -------
    dict of str to int
        state (records of single cases, checkpoints, logs, heartbeats), fields (of anchors,
        dropped when no more used), cases (published records), table, other (figures,
        averages, reports), and library, which the campaigns of one folder of results share.
        A record that is in the library and in a campaign is one file with two names; its
        blocks count for both.
    """
    parts = {
        "state": layout.state,
        "fields": layout.fields,
        "cases": layout.cases,
        "table": layout.table,
    }
    found = {name: _blocks(folder, "") for name, folder in parts.items()}
    # Fields of anchors whose job has not finished lie among the records.
    apart = _blocks(layout.solved, ".npz")
    found["state"] -= apart
    found["fields"] += apart
    known = sum(found.values())
    found["other"] = max(0, _blocks(layout.folder, "") - known)
    found["library"] = _blocks(layout.library, "")
    return found


def _blocks(folder: Path, suffix: str) -> int:
    """Bytes of all files below a folder whose names end so; files may vanish meanwhile."""
    whole = 0
    waiting = [os.fspath(folder)]
    while waiting:
        with contextlib.suppress(OSError), os.scandir(waiting.pop()) as entries:
            for entry in entries:
                with contextlib.suppress(OSError):
                    if entry.is_dir(follow_symlinks=False):
                        waiting.append(entry.path)
                    elif entry.name.endswith(suffix):
                        # Blocks, not lengths: small files take a whole block.
                        whole += 512 * entry.stat(follow_symlinks=False).st_blocks
    return whole
