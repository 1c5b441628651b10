"""Solids by the kind of shape that a campaign names."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from functools import lru_cache
from typing import Any

from scatterloom.solids.imported import mesh_solid, voxel_solid
from scatterloom.solids.mesh import Solid

Generator = Callable[[Mapping[str, Any]], Solid]

GENERATORS: dict[str, Generator] = {"mesh": mesh_solid, "voxels": voxel_solid}
"""For every kind of shape that is made of triangles, what makes them.

A generator gets the canonical shape of a case, ``kind`` included and `core_radius_fraction` left
out, and returns a solid of any size and place: it is scaled afterwards. The same shape must
always give the same triangles. Shapes that cannot be made raise ValueError with the reason.
"""


def build(spec: Mapping[str, Any]) -> Solid:
    """The solid of a shape, as its generator made it; the last ones made are kept.

    Raises
    ------
    ValueError
        If no generator knows the kind, or the body cannot be made.
    """
    if spec.get("kind") not in GENERATORS:
        raise ValueError(f"no generator for the shape kind {spec.get('kind')!r}")
    own = {key: value for key, value in spec.items() if key != "core_radius_fraction"}
    return _build(json.dumps(own, sort_keys=True))


@lru_cache(maxsize=64)
def _build(text: str) -> Solid:
    spec = json.loads(text)
    return GENERATORS[spec["kind"]](spec)
