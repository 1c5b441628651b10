"""Folders that are published whole: staged, listed with digests, renamed, committed.

A published folder holds `manifest.json`, the length and SHA-256 of every other
file, and `commit.json`, written last, which names the digest of the manifest.
Whatever was interrupted, altered, deleted or swapped is told from these two.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
import os
import shutil
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from scatterloom.errors import IntegrityError
from scatterloom.store.atomic import atomic_write, sync_folder, temporary_beside

MANIFEST = "manifest.json"
COMMIT = "commit.json"
FORMAT_VERSION = 1

_BLOCK = 1 << 20


@dataclass(frozen=True)
class Listed:
    """One file of a published folder: its length in bytes and its SHA-256 (hex)."""

    bytes: int
    sha256: str


def file_digest(path: Path) -> str:
    """Return the SHA-256 of a file's content as 64 hex digits."""
    whole = hashlib.sha256()
    with open(path, "rb") as stream:
        while block := stream.read(_BLOCK):
            whole.update(block)
    return whole.hexdigest()


def _files(folder: Path) -> dict[str, Path]:
    return {
        path.relative_to(folder).as_posix(): path
        for path in sorted(folder.rglob("*"))
        if path.is_file() and path.relative_to(folder).as_posix() not in (MANIFEST, COMMIT)
    }


def list_files(folder: Path) -> dict[str, Listed]:
    """Measure every file below `folder`, by its path relative to it."""
    return {
        name: Listed(path.stat().st_size, file_digest(path))
        for name, path in _files(folder).items()
    }


@contextlib.contextmanager
def staging(final: Path) -> Iterator[Path]:
    """Make a temporary folder beside `final`; remove it if it was not published."""
    final.parent.mkdir(parents=True, exist_ok=True)
    temporary = temporary_beside(final)
    temporary.mkdir()
    try:
        yield temporary
    finally:
        shutil.rmtree(temporary, ignore_errors=True)


def publish(staged: Path, final: Path, kind: str, content_digest: str, committed: str) -> None:
    """Turn a staged folder into the published folder `final`.

    Every file is made durable, the manifest is written, the folder takes its
    final name (what stood there is put aside first and removed last), and only
    then is the commit record written. A crash at any point leaves either the old
    folder, or one that readers refuse because it has no commit record.

    Parameters
    ----------
    staged, final : Path
        In the same file system, as `staging` makes them.
    kind : str
        What the folder is, for example "table".
    content_digest : str
        Digest of what matters in the content (not of dates or timings).
    committed : str
        ISO 8601 date of the publication.
    """
    for path in _files(staged).values():
        _sync_file(path)
    listed = list_files(staged)
    manifest = {
        "format_version": FORMAT_VERSION,
        "files": {name: {"bytes": f.bytes, "sha256": f.sha256} for name, f in listed.items()},
    }
    text = json.dumps(manifest, indent=1, sort_keys=True).encode()
    (staged / MANIFEST).write_bytes(text)
    _sync_file(staged / MANIFEST)
    for folder in sorted(p for p in staged.rglob("*") if p.is_dir()):
        sync_folder(folder)
    sync_folder(staged)

    aside = temporary_beside(final)
    if final.exists():
        os.rename(final, aside)
    os.rename(staged, final)
    sync_folder(final.parent)
    record = {
        "format_version": FORMAT_VERSION,
        "kind": kind,
        "manifest_sha256": hashlib.sha256(text).hexdigest(),
        "files": len(listed),
        "bytes": sum(f.bytes for f in listed.values()),
        "content_digest": content_digest,
        "committed": committed,
    }
    with atomic_write(final / COMMIT) as stream:
        stream.write(json.dumps(record, indent=1, sort_keys=True).encode())
    shutil.rmtree(aside, ignore_errors=True)


def _sync_file(path: Path) -> None:
    with open(path, "rb") as stream:
        os.fsync(stream.fileno())


def commit_record(path: Path) -> dict[str, Any]:
    """Return the commit record of a published folder.

    Raises
    ------
    IntegrityError
        If `path` is missing or was never committed, or its record is unreadable.
    """
    if not path.is_dir():
        raise IntegrityError(f"{path}: no such table")
    try:
        record = json.loads((path / COMMIT).read_bytes())
    except FileNotFoundError:
        raise IntegrityError(
            f"{path}: not committed ({COMMIT} is missing), so its writing was never finished"
        ) from None
    except (ValueError, RecursionError) as error:
        raise IntegrityError(f"{path / COMMIT}: unreadable commit record ({error})") from None
    if not isinstance(record, dict) or record.get("format_version") != FORMAT_VERSION:
        raise IntegrityError(f"{path / COMMIT}: commit record of a foreign format version")
    return record


def manifest(path: Path) -> dict[str, Listed]:
    """Return what a published folder must hold, once its commit record is checked.

    Raises
    ------
    IntegrityError
        If the folder is not committed or the manifest is not the committed one.
    """
    record = commit_record(path)
    try:
        text = (path / MANIFEST).read_bytes()
    except FileNotFoundError:
        raise IntegrityError(f"{path}: its manifest ({MANIFEST}) is missing") from None
    if hashlib.sha256(text).hexdigest() != record.get("manifest_sha256"):
        raise IntegrityError(f"{path / MANIFEST}: the manifest is not the one committed")
    try:
        listed = json.loads(text)["files"].items()
        return {name: Listed(int(f["bytes"]), str(f["sha256"])) for name, f in listed}
    except (ValueError, KeyError, TypeError, AttributeError, ArithmeticError, RecursionError):
        # As committed, so the writer was another program.
        raise IntegrityError(f"{path / MANIFEST}: the manifest lists no files") from None


def problems(path: Path, *, digests: bool = True) -> list[str]:
    """Compare a published folder with its manifest.

    Parameters
    ----------
    path : Path
        The folder.
    digests : bool
        Whether to read and digest every file, or only compare names and lengths.

    Returns
    -------
    list of str
        One line per file that is missing, foreign, of the wrong length or altered.

    Raises
    ------
    IntegrityError
        If there is no valid commit record and manifest to compare with.
    """
    expected = manifest(path)
    found = _files(path)
    lines = [f"{path / name}: missing" for name in sorted(expected.keys() - found.keys())]
    lines += [
        f"{path / name}: foreign file, not in the manifest"
        for name in sorted(found.keys() - expected.keys())
    ]
    for name in sorted(expected.keys() & found.keys()):
        length = found[name].stat().st_size
        if length != expected[name].bytes:
            lines.append(f"{found[name]}: {length} bytes long instead of {expected[name].bytes}")
        elif digests and file_digest(found[name]) != expected[name].sha256:
            lines.append(f"{found[name]}: altered (its SHA-256 digest does not match)")
    return lines


def verify_folder(path: Path, *, digests: bool = True) -> None:
    """Raise IntegrityError, naming every wrong file, unless the folder is as committed."""
    lines = problems(path, digests=digests)
    if lines:
        shown = lines[:20] + ([f"... and {len(lines) - 20} more"] if len(lines) > 20 else [])
        raise IntegrityError("\n".join(shown))
