"""The body of a particle: its shape and what fills it, as cases know it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from scatterloom.campaign.geometry import canonical
from scatterloom.solids.mesh import MEDIUM

if TYPE_CHECKING:
    from scatterloom.campaign.model import Particle

CLUSTERS = ("fractal_cluster", "ballistic_cluster", "packed_cluster", "sphere_chain")


def body(
    particle: Particle, indices: Sequence[complex] | None = None
) -> tuple[dict[str, Any], list[int]]:
    """Canonical shape, and which of the particle's materials it has, from outside inwards.

    Parameters
    ----------
    particle : Particle
    indices : sequence of complex, optional
        Those of its materials: a coating of the same index as the core is no coating.
    """
    spec = particle.shape.model_dump()
    everything = list(range(len(particle.materials)))
    if particle.coating is not None:
        if indices is not None and indices[0] == indices[1]:
            return canonical(spec), [0]
        thickness = particle.coating.thickness_fraction
        if thickness is None:
            return canonical({**spec, "core_radius_fraction": particle.coating.core_scale}), [0, 1]
        if spec["kind"] in CLUSTERS:
            return canonical({**spec, "coating_thickness": thickness}), everything
        return _layered(spec, {"thicknesses": [thickness]}), everything
    if particle.layers:
        scales = [layer.inner_radius_fraction for layer in particle.layers]
        if scales[0] is not None:
            return _layered(spec, {"scales": scales}), everything
        depths = [layer.thickness_fraction for layer in particle.layers]
        return _layered(spec, {"thicknesses": depths}), everything
    if particle.inclusions:
        number = {name: place for place, name in enumerate(particle.materials)}
        spheres: list[dict[str, Any]] = []
        for group in particle.inclusions:
            material = MEDIUM if group.material is None else number[group.material]
            if group.centre is not None:
                place = {"centre": group.centre, "radius": group.radius_fraction}
            else:
                place = {
                    "count": group.count,
                    "volume_fraction": group.volume_fraction,
                    "seed": group.seed,
                }
            spheres.append({"material": material, **place})
        return canonical(
            {"kind": "filled", "host": canonical(spec), "spheres": spheres}
        ), everything
    return canonical(spec), everything


def _layered(spec: Mapping[str, Any], layers: Mapping[str, Any]) -> dict[str, Any]:
    return canonical({"kind": "layered", "host": canonical(spec), **layers})


def shares(spec: Mapping[str, Any]) -> list[float]:
    """Part of the volume that each material has, from outside inwards.

    Parameters
    ----------
    spec : mapping
        Canonical shape that is made of triangles.
    """
    from scatterloom.solids import placing

    solid = placing.placed(spec)
    held = [0.0] * solid.materials
    for face in solid.interfaces:
        if face.inside != MEDIUM:
            held[face.inside] += face.mesh.volume
        if face.outside != MEDIUM:
            held[face.outside] -= face.mesh.volume
    return [part / sum(held) for part in held]


_ADVICE = {
    "shaped_prism": "tilt the ends less, or give a larger height_to_width",
    "gaussian_sphere": "give a larger correlation angle",
    "voronoi_fragment": "give another seed",
    "rough_sphere": "give a smaller roughness, or another seed",
    "fractal_cluster": "give a fractal_prefactor nearer to 1.3, a fractal_dimension nearer to 2, "
    "or another seed",
    "filled": "give a smaller volume_fraction, fewer or smaller spheres, or another place",
    "layered": "give thinner layers, or a shape that is convex",
}


def advice(spec: Mapping[str, Any]) -> str:
    """What to change in a shape that cannot be made."""
    return _ADVICE.get(spec["kind"], "give a shape of other proportions")
