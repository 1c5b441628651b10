"""Shapes that are read from files: their sections."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Any, Literal

from scatterloom.campaign.document import Document
from scatterloom.campaign.sections import Section, setting


def _content() -> Any:
    return setting(
        "SHA-256 of what the file holds; if given, another content is refused. Filled in when a "
        "campaign is kept with its results.",
        None,
        pattern="^[0-9a-f]{64}$",
        form="64 hexadecimal digits",
    )


class MeshFile(Section):
    """A closed surface of triangles from a file."""

    kind: Literal["mesh"] = setting("A closed surface of triangles from a file.")
    file: str = setting(
        "STL, OBJ or PLY file, named relative to this file. Only its proportions count: units and "
        "place are of no account, the size is set under `sizes`.",
        min_length=1,
    )
    edge_angle_deg: float = setting(
        "Triangles that meet at a larger angle between their normals meet at an edge, others "
        "belong to one smooth piece of surface.",
        30.0,
        unit="deg",
        ge=1.0,
        le=90.0,
    )
    content: str | None = _content()


class VoxelFile(Section):
    """A volume of labels from a file, each voxel a cube."""

    kind: Literal["voxels"] = setting("A volume of labels from a file, each voxel a cube.")
    file: str = setting(
        "NumPy (.npy), NetCDF (.nc) or Zarr (.zarr) array of whole numbers along x, y, z, named "
        "relative to this file: 0 for the medium, 1 for `material`, 2 and up for "
        "`more_materials`. Only its proportions count, the size is set under `sizes`.",
        min_length=1,
    )
    variable: str | None = setting(
        "Name of the array in the file; the only one of three dimensions if missing.",
        None,
        min_length=1,
    )
    more_materials: list[Annotated[str, setting("One material.")]] = setting(
        "Materials of the labels 2 and up, keys under `materials`.", [], max_length=15
    )
    content: str | None = _content()


KINDS = ("mesh", "voxels")
"""Kinds of shape that are read from files."""


def named_files(document: Document) -> Iterator[tuple[int, Mapping[str, Any]]]:
    """Places in the list of particles, and raw shapes, of those that name a file."""
    particles = document.tree.get("particles")
    for position, entry in enumerate(particles if isinstance(particles, list) else ()):
        shape = entry.get("shape") if isinstance(entry, dict) else None
        if not isinstance(shape, dict) or shape.get("kind") not in KINDS:
            continue
        if isinstance(shape.get("file"), str) and shape["file"]:
            yield position, shape
