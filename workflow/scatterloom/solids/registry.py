"""Solids by the kind of shape that a campaign names."""

from __future__ import annotations

import json
from collections.abc import Callable, Mapping
from functools import lru_cache
from importlib import import_module
from typing import Any

from scatterloom.solids.mesh import Solid

Generator = Callable[[Mapping[str, Any]], Solid]


def _later(module: str, name: str) -> Generator:
    """A generator whose module, and the libraries that it needs, are loaded when it is used."""

    def make(spec: Mapping[str, Any]) -> Solid:
        found: Generator = getattr(import_module(f"scatterloom.solids.{module}"), name)
        return found(spec)

    return make


def _filled(spec: Mapping[str, Any]) -> Solid:
    from scatterloom.solids.filling import filled, one_surface, unit_mesh

    return filled(unit_mesh(one_surface(_host(spec), "inclusions")), spec["spheres"])


def _layered(spec: Mapping[str, Any]) -> Solid:
    from scatterloom.solids.filling import coated_evenly, layered, one_surface, unit_mesh

    host = _host(spec)
    mesh = unit_mesh(one_surface(host, "layers"))
    if "thicknesses" in spec:
        made = coated_evenly(mesh, spec["thicknesses"])
    else:
        made = layered(mesh, spec["scales"])
    # Layers keep the symmetry of the body.
    return Solid(made.interfaces, host.symmetry)


def _host(spec: Mapping[str, Any]) -> Solid:
    host = dict(spec["host"])
    return _build(json.dumps(host, sort_keys=True))


GENERATORS: dict[str, Generator] = {
    "rounded_cuboid": _later("kinds", "cuboid"),
    "polyhedron": _later("kinds", "polyhedron"),
    "shaped_prism": _later("kinds", "prism"),
    "cylinder": _later("kinds", "cylinder"),
    "capsule": _later("kinds", "capsule"),
    "frustum": _later("kinds", "frustum"),
    "superellipsoid": _later("kinds", "superellipsoid"),
    "gaussian_sphere": _later("kinds", "gaussian_sphere"),
    "point_hull": _later("kinds", "point_hull"),
    "voronoi_fragment": _later("kinds", "voronoi_fragment"),
    "rough_sphere": _later("kinds", "rough_sphere"),
    "fractal_cluster": _later("kinds", "fractal_cluster"),
    "ballistic_cluster": _later("kinds", "ballistic_cluster"),
    "packed_cluster": _later("kinds", "packed_cluster"),
    "sphere_chain": _later("kinds", "sphere_chain"),
    "filled": _filled,
    "layered": _layered,
    "mesh": _later("imported", "mesh_solid"),
    "voxels": _later("imported", "voxel_solid"),
}
"""For every kind of shape that is made of triangles, what makes them.

A generator gets the canonical shape of a case, ``kind`` included and `core_radius_fraction` left
out, and returns a solid of any size and place: it is scaled afterwards. The same shape must
always give the same triangles. Shapes that cannot be made raise ValueError with the reason.
"""

HOSTS: dict[str, Generator] = {
    "sphere": _later("kinds", "sphere"),
    "spheroid": _later("kinds", "spheroid"),
    "ellipsoid": _later("kinds", "ellipsoid"),
    "cuboid": _later("kinds", "cuboid"),
    "prism": _later("kinds", "prism"),
}
"""Kinds with cells of their own, made of triangles only to be filled, layered or drawn."""


def build(spec: Mapping[str, Any]) -> Solid:
    """The solid of a shape, as its generator made it; the last ones made are kept.

    Raises
    ------
    ValueError
        If no generator knows the kind, or the body cannot be made.
    """
    if spec.get("kind") not in {**HOSTS, **GENERATORS}:
        raise ValueError(f"no generator for the shape kind {spec.get('kind')!r}")
    own = {key: value for key, value in spec.items() if key != "core_radius_fraction"}
    return _build(json.dumps(own, sort_keys=True))


@lru_cache(maxsize=64)
def _build(text: str) -> Solid:
    spec = json.loads(text)
    return {**HOSTS, **GENERATORS}[spec["kind"]](spec)
