"""Files that appear whole or not at all: a unique temporary name, fsync, rename.

A reader never sees a half-written file. What a killed writer leaves behind is a
temporary file whose name tells the host and process that wrote it, so that a
later run can sweep it without touching the files of a writer still alive.
"""

from __future__ import annotations

import contextlib
import os
import re
import secrets
import shutil
import socket
import time
from collections.abc import Iterator
from pathlib import Path
from typing import BinaryIO

SUFFIX = ".partial"
FOREIGN_AGE_S = 86400.0
"""Age beyond which a temporary file of another host counts as abandoned [s]."""

_NAME = re.compile(r"^\..+\.(?P<host>[^.]+)-(?P<pid>\d+)-[0-9a-f]{8}\.partial$")


def _host() -> str:
    return re.sub(r"[^A-Za-z0-9_]", "_", socket.gethostname()) or "localhost"


def temporary_beside(path: Path) -> Path:
    """Return a unique, unused temporary path in the folder of `path`."""
    return path.with_name(f".{path.name}.{_host()}-{os.getpid()}-{secrets.token_hex(4)}{SUFFIX}")


def sync_folder(folder: Path) -> None:
    """Make the names in `folder` durable (a rename is only safe once this is done)."""
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


@contextlib.contextmanager
def atomic_write(path: Path | str, *, durable: bool = True) -> Iterator[BinaryIO]:
    """Open a file that takes the name `path` only when the block ends without error.

    Parameters
    ----------
    path : path
        The final name. Its folder is made if missing. An existing file is replaced.
    durable : bool
        Whether the file must survive a power cut; False spares the disk where a
        lost file costs nothing.

    Yields
    ------
    binary stream
        Opened for writing and seeking on a temporary file in the same folder.

    Raises
    ------
    OSError
        From the file system (disk full, no permission); the temporary file is
        removed and whatever stood at `path` before is untouched.
    """
    path = Path(path)
    path.parent.mkdir(parents=True, exist_ok=True)
    temporary = temporary_beside(path)
    try:
        with open(temporary, "xb") as stream:
            yield stream
            stream.flush()
            if durable:
                os.fsync(stream.fileno())
        os.replace(temporary, path)
    except BaseException:
        with contextlib.suppress(FileNotFoundError):
            temporary.unlink()
        raise
    if durable:
        sync_folder(path.parent)


def write_if_changed(path: Path, content: bytes, *, durable: bool = True) -> bool:
    """Write `content` atomically unless `path` holds it already; return whether it wrote.

    Leaving an equal file alone keeps its modification time, which the rule graph reads.
    """
    try:
        if path.read_bytes() == content:
            return False
    except FileNotFoundError:
        pass
    with atomic_write(path, durable=durable) as stream:
        stream.write(content)
    return True


def is_abandoned(path: Path) -> bool:
    """Tell whether `path` is a temporary file or folder whose writer is gone."""
    match = _NAME.match(path.name)
    if match is None:
        return False
    if match["host"] != _host():
        with contextlib.suppress(FileNotFoundError):
            return time.time() - path.stat().st_mtime > FOREIGN_AGE_S
        return False
    return not is_alive(int(match["pid"]))


def is_alive(pid: int) -> bool:
    """Tell whether a process of this host is at work (an unburied dead one is not)."""
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        pass
    try:
        # The state follows the name, which stands in parentheses and may hold anything.
        state = Path(f"/proc/{pid}/stat").read_bytes().rpartition(b")")[2].split()[0]
    except (OSError, IndexError):
        return True  # no such file system here; what kill said holds
    return state not in (b"Z", b"X")


def sweep_abandoned(folder: Path) -> list[Path]:
    """Remove the abandoned temporary files and folders directly inside `folder`."""
    swept: list[Path] = []
    if not folder.is_dir():
        return swept
    for path in sorted(folder.glob(f".*{SUFFIX}")):
        if not is_abandoned(path):
            continue
        if path.is_dir() and not path.is_symlink():
            shutil.rmtree(path, ignore_errors=True)
        else:
            path.unlink(missing_ok=True)
        swept.append(path)
    return swept
