"""Files of shapes: read with the campaign, checked, remembered by content.

Loaded only where a campaign names such files: it needs the geometry libraries.
"""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from scatterloom.campaign.document import Document, KeyPath
from scatterloom.campaign.file_shapes import named_files
from scatterloom.errors import Problem
from scatterloom.solids import kept, labels, mesh_file
from scatterloom.solids.imported import check_mesh, label_arrays, mesh_arrays
from scatterloom.solids.mesh_file import LARGEST_FILE

LARGEST_ASPECT = 10.0
"""Largest ratio of the extents along x, y and z."""


Contents = dict[int, str]
"""Digest of what the file of a particle holds, by the particle's place in the list."""


def read_shape_files(
    document: Document, folder: Path
) -> tuple[Contents, list[Problem], list[Problem]]:
    """Read the file of every shape that names one; `folder` is that of the campaign file.

    Works on the raw file, so that faults of files are shown together with all others.

    Returns
    -------
    contents : dict of int to str
        What is read is remembered by `scatterloom.solids.kept` under these digests.
    problems, warnings : list of Problem
    """
    contents: Contents = {}
    problems: list[Problem] = []
    warnings: list[Problem] = []
    known: dict[tuple[Any, ...], tuple[str, int]] = {}
    for position, shape in named_files(document):
        path: KeyPath = ("particles", position, "shape", "file")
        name = shape["file"]
        try:
            key = (name, shape["kind"], shape.get("variable"), len(_more(shape)))
            if key not in known:
                known[key] = _read(folder / name, shape)
            digest, parts = known[key]
            _compare(digest, shape.get("content"))
        except (OSError, ValueError) as error:
            message, hint = _told(error, name, folder, shape["kind"])
            problems.append(document.problem(path, message, document.show(path), hint))
            continue
        contents[position] = digest
        if parts > 1:
            message = f"the body in '{name}' is {parts} separate parts"
            hint = "they scatter as one particle that keeps them in place; fine if that is meant"
            warnings.append(document.problem(path, message, document.show(path), hint))
    return contents, problems, warnings


_WANTED = {"mesh": "a closed mesh", "voxels": "whole numbers from 0"}
_KINDS = {"mesh": mesh_file.FORMATS, "voxels": labels.FORMATS}


def _more(shape: Mapping[str, Any]) -> list[Any]:
    given = shape.get("more_materials")
    return given if isinstance(given, list) else []


def _read(place: Path, shape: Mapping[str, Any]) -> tuple[str, int]:
    """Digest and number of separate parts of what a file holds."""
    folder = place.suffix.lower() == ".zarr" and shape["kind"] == "voxels"
    if place.is_dir() and not folder:
        raise IsADirectoryError
    if not place.exists():
        raise FileNotFoundError
    if place.is_file() and place.stat().st_size > LARGEST_FILE:
        raise ValueError(f"the file is larger than {LARGEST_FILE // 2**20} MiB")
    if shape["kind"] == "mesh":
        arrays = mesh_arrays(place.read_bytes(), place.name)
        parts = check_mesh(arrays)
        extent = np.ptp(arrays["corners"], axis=0)
    else:
        variable = shape.get("variable")
        arrays = label_arrays(place, variable if isinstance(variable, str) else None)
        parts = _check_labels(arrays["labels"], 1 + len(_more(shape)))
        extent = np.array(arrays["labels"].shape, dtype=float)
    if extent.max() > LARGEST_ASPECT * extent.min():
        raise ValueError(
            f"the body is {extent.max() / extent.min():.3g} times as long as it is thick; "
            f"give one of at most {LARGEST_ASPECT:g}: a lattice fine enough would be too large"
        )
    return kept.remember(arrays), parts


def _check_labels(volume: labels.Labels, materials: int) -> int:
    if int(volume.max()) != materials:
        raise ValueError(
            f"labels run up to {volume.max()}, but {materials} materials are named; give "
            "`material` for label 1 and one of `more_materials` for each other label"
        )
    labels.label_solid(volume)
    return labels.separate_parts(volume)


def _compare(digest: str, stated: Any) -> None:
    if isinstance(stated, str) and stated != digest:
        raise ValueError(
            f"the file does not hold what `content` states, but {digest}; if the change is meant, "
            "leave `content` out"
        )


def _told(error: OSError | ValueError, name: str, folder: Path, kind: str) -> tuple[str, str]:
    """Message and hint."""
    if isinstance(error, FileNotFoundError):
        return f"the shape's file '{name}' is no file", f"the name is relative to {folder}"
    if isinstance(error, IsADirectoryError):
        return f"the shape's file '{name}' is a folder", "name the file inside it"
    if isinstance(error, OSError):
        return f"the shape's file '{name}' cannot be read: {error.strerror}", "see to the file"
    reason, _, hint = str(error).partition("; ")
    return (
        f"'{name}': {reason}",
        hint or f"give {_WANTED[kind]} in one of {', '.join(_KINDS[kind])}",
    )
