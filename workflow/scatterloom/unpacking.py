"""Unpack an archive from somebody else: nothing outside its folder, nothing executed.

Before a byte is written the directory of the archive is judged: names that leave the folder
or that two systems read differently, links, archives within the archive, entries that are
encrypted, too many, too large or compressed beyond reason are refused. Every file must be
listed in the manifest with its length and SHA-256, and the folder appears whole or not at
all.
"""

from __future__ import annotations

import hashlib
import json
import os
import re
import shutil
import stat
import zipfile
import zlib
from pathlib import Path, PurePosixPath
from typing import Any

from scatterloom.crate import FORMAT_VERSION, MANIFEST, MERGED, METADATA
from scatterloom.errors import BadInput, IntegrityError
from scatterloom.store.atomic import sync_folder, temporary_beside

MOST_FILES = 200_000
MOST_RATIO = 200.0
"""Largest compression taken for honest; text of ours packs about tenfold."""
DEFAULT_MOST_GIB = 64.0

_MANIFEST_BYTES = 1 << 27
_BLOCK = 1 << 20
_PART = re.compile(r"^[A-Za-z0-9_][A-Za-z0-9._+-]*$")
_NESTED = (".zip", ".tar", ".gz", ".tgz", ".bz2", ".xz", ".zst", ".7z", ".rar")
_RESERVED = re.compile(r"^(con|prn|aux|nul|com\d|lpt\d)(\.|$)", re.IGNORECASE)
# A damaged archive may also seem encrypted (RuntimeError) or of unknown compression.
_NO_ARCHIVE = (zipfile.BadZipFile, zlib.error, EOFError, RuntimeError, ValueError, OSError)


def unpack(path: Path, target: Path, most_gib: float = DEFAULT_MOST_GIB) -> int:
    """Unpack the archive `path` into the folder `target`, which must not exist.

    Returns
    -------
    int
        Number of files.

    Raises
    ------
    BadInput
        If the archive is missing, is none, or holds what is refused; or `target` exists.
    IntegrityError
        If a file is not as its manifest says.
    OSError
        From the file system; nothing is left behind.
    """
    if target.exists() or target.is_symlink():
        raise BadInput(f"{target}: is there already\n  hint: name a folder that does not exist")
    try:
        archive = zipfile.ZipFile(path)
    except FileNotFoundError:
        raise BadInput(f"{path}: there is no such file") from None
    except IsADirectoryError:
        raise BadInput(f"{path}: is a folder, not a packed campaign") from None
    except _NO_ARCHIVE as error:
        raise BadInput(f"{path}: not a packed campaign ({error})") from None
    with archive:
        entries = _judged(path, archive, most_gib)
        listed = _manifest(path, archive, entries)
        target.parent.mkdir(parents=True, exist_ok=True)
        staged = temporary_beside(target)
        staged.mkdir()
        try:
            for name, entry in entries.items():
                _extract(path, archive, entry, staged / PurePosixPath(name), listed.get(name))
            for folder in sorted(p for p in staged.rglob("*") if p.is_dir()):
                sync_folder(folder)
            sync_folder(staged)
            os.rename(staged, target)
        except BaseException:
            shutil.rmtree(staged, ignore_errors=True)
            raise
        sync_folder(target.parent)
    return len(entries)


def _judged(path: Path, archive: zipfile.ZipFile, most_gib: float) -> dict[str, zipfile.ZipInfo]:
    """Return the entries by name if every one is harmless."""
    infos = archive.infolist()
    if len(infos) > MOST_FILES:
        raise BadInput(f"{path}: {len(infos)} files, more than {MOST_FILES}")
    whole = sum(info.file_size for info in infos)
    if whole > most_gib * 2**30:
        raise BadInput(
            f"{path}: {whole / 2**30:.1f} GiB when unpacked, more than the {most_gib:g} GiB "
            "allowed\n  hint: allow more with --most-gib"
        )
    entries: dict[str, zipfile.ZipInfo] = {}
    folded: set[str] = set()
    for info in infos:
        name = info.orig_filename
        if fault := _fault(info):
            raise BadInput(f"{path}: entry {name!r} {fault}; nothing was unpacked")
        if name.casefold() in folded:
            raise BadInput(f"{path}: entry {name!r} comes twice; nothing was unpacked")
        folded.add(name.casefold())
        entries[name] = info
    for name in entries:
        for parent in PurePosixPath(name).parents:
            if str(parent) in entries:
                raise BadInput(f"{path}: entry {str(parent)!r} is both a file and a folder")
    return entries


def _fault(info: zipfile.ZipInfo) -> str | None:
    """Say what is wrong with an entry, or None."""
    name = info.orig_filename
    parts = name.split("/")
    if len(name) > 512 or len(parts) > 16:
        return "has too long a name"
    if name.endswith("/"):
        return "is a folder, which a packed campaign does not list"
    if not all(_PART.match(part) for part in parts) or any(map(_RESERVED.match, parts)):
        return "has a name that leaves the folder, or that not every system reads alike"
    mode = info.external_attr >> 16
    if stat.S_IFMT(mode) not in (0, stat.S_IFREG):
        return "is a link or a device"
    if name.lower().endswith(_NESTED):
        return "is an archive within the archive"
    if info.flag_bits & 0x1:
        return "is encrypted"
    if info.compress_type not in (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED):
        return "is compressed in a way that packing does not use"
    if info.file_size > MOST_RATIO * max(info.compress_size, 1) + 4096:
        return f"is compressed more than {MOST_RATIO:.0f} times"
    return None


def _manifest(
    path: Path, archive: zipfile.ZipFile, entries: dict[str, zipfile.ZipInfo]
) -> dict[str, dict[str, Any]]:
    """Return what the manifest lists; it must list just what is there."""
    for name in (MANIFEST, METADATA, MERGED):
        if name not in entries:
            raise BadInput(f"{path}: not a packed campaign ({name} is missing)")
    if entries[MANIFEST].file_size > _MANIFEST_BYTES:
        raise BadInput(f"{path}: its manifest is too large")
    try:
        content = json.loads(archive.read(MANIFEST))
        listed = {
            str(name): {"bytes": int(entry["bytes"]), "sha256": str(entry["sha256"])}
            for name, entry in content["files"].items()
        }
        version = content["format_version"]
    except (*_NO_ARCHIVE, RecursionError, KeyError, TypeError, AttributeError) as error:
        raise IntegrityError(f"{path}: the manifest is unreadable ({error})") from None
    if version != FORMAT_VERSION:
        raise IntegrityError(
            f"{path}: packed in format version {version}, this program reads {FORMAT_VERSION}"
        )
    wrong = sorted((entries.keys() - {MANIFEST}) ^ listed.keys())
    if wrong:
        raise IntegrityError(f"{path}: {wrong[0]!r} is in the manifest or the archive, not both")
    return listed


def _extract(
    path: Path,
    archive: zipfile.ZipFile,
    entry: zipfile.ZipInfo,
    target: Path,
    expected: dict[str, Any] | None,
) -> None:
    target.parent.mkdir(parents=True, exist_ok=True)
    whole, length = hashlib.sha256(), 0
    with open(target, "xb") as out:
        try:
            stream = archive.open(entry)
        except _NO_ARCHIVE as error:
            raise IntegrityError(f"{path}: {entry.filename}: {error}") from None
        with stream:
            while True:
                try:
                    block = stream.read(_BLOCK)
                except _NO_ARCHIVE as error:
                    raise IntegrityError(f"{path}: {entry.filename}: {error}") from None
                if not block:
                    break
                length += len(block)
                if length > entry.file_size:
                    raise IntegrityError(f"{path}: {entry.filename}: longer than it says")
                whole.update(block)
                out.write(block)
        out.flush()
        os.fsync(out.fileno())
    found = {"bytes": length, "sha256": whole.hexdigest()}
    if expected is not None and found != expected:
        raise IntegrityError(f"{path}: {entry.filename}: not as the manifest says (altered)")
