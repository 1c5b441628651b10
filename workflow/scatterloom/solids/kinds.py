"""Makers of bodies by the keys of a campaign; modules are loaded when they are used."""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from scatterloom.solids.mesh import Interface, Mesh, Solid, Symmetry

if TYPE_CHECKING:
    from scatterloom.solids.random_sphere import Floats

Spec = Mapping[str, Any]


def _one(mesh: Mesh, symmetry: Symmetry | None = None) -> Solid:
    return Solid((Interface(mesh),), symmetry)


def sphere(spec: Spec) -> Solid:
    """A sphere, as part of other bodies."""
    import numpy as np

    from scatterloom.solids.globe import sphere_mesh

    return _one(sphere_mesh(np.zeros(3), 1.0), "sphere")


def spheroid(spec: Spec) -> Solid:
    """An ellipsoid of revolution, as part of other bodies."""
    ratio = spec["equatorial_to_polar"]
    return ellipsoid({"axes": [ratio, ratio, 1.0]})


def ellipsoid(spec: Spec) -> Solid:
    """An ellipsoid, as part of other bodies."""
    import numpy as np

    ball = sphere({}).interfaces[0].mesh
    a, b, c = spec["axes"]
    mesh = Mesh(ball.corners * np.array([a, b, c]), ball.triangles, ball.piece)
    return _one(mesh, "axial" if a == b else "mirrors")


def cuboid(spec: Spec) -> Solid:
    """A block, perhaps with rounded edges."""
    import numpy as np

    from scatterloom.solids.facets import hull_faces
    from scatterloom.solids.polyhedra import regular_corners

    corners = regular_corners(6) * np.array(spec["edges"])
    return _convex(*hull_faces(corners), spec, "mirrors")


def polyhedron(spec: Spec) -> Solid:
    """A regular polyhedron, perhaps with rounded edges."""
    from scatterloom.solids.facets import hull_faces
    from scatterloom.solids.polyhedra import regular_corners

    faces = int(spec["faces"])
    return _convex(*hull_faces(regular_corners(faces)), spec, None if faces == 4 else "mirrors")


def prism(spec: Spec) -> Solid:
    """A prism whose ends may be tilted or indented, or whose edges may be rounded."""
    from scatterloom.solids.polyhedra import indented_prism, tilted_prism

    sides, ratio = int(spec["sides"]), float(spec["height_to_width"])
    if spec.get("indentation"):
        return _one(indented_prism(sides, ratio, spec["indentation"]))
    tilts = spec.get("end_tilts_deg", (0.0, 0.0))
    return _convex(*tilted_prism(sides, ratio, *tilts), spec, None)


def _convex(
    corners: Floats, faces: list[list[int]], spec: Spec, symmetry: Symmetry | None
) -> Solid:
    from scatterloom.solids.facets import faceted_mesh
    from scatterloom.solids.rounding import Rounded

    if spec.get("edge_radius_fraction"):
        return _one(Rounded(corners, faces, spec["edge_radius_fraction"]).mesh(), symmetry)
    return _one(faceted_mesh(corners, faces), symmetry)


def cylinder(spec: Spec) -> Solid:
    """A cylinder."""
    from scatterloom.solids.revolution import frustum

    return _one(frustum(0.5, 0.5, spec["length_to_diameter"]), "axial")


def capsule(spec: Spec) -> Solid:
    """A cylinder with hemispherical ends."""
    from scatterloom.solids.revolution import capsule as mesh

    return _one(mesh(0.5, spec["length_to_diameter"]), "axial")


def frustum(spec: Spec) -> Solid:
    """A frustum or a cone."""
    from scatterloom.solids.revolution import frustum as mesh

    return _one(mesh(0.5, 0.5 * spec.get("upper_to_lower", 0.0), spec["height_to_diameter"]))


def superellipsoid(spec: Spec) -> Solid:
    """A superellipsoid."""
    from scatterloom.solids.superellipsoid import superellipsoid as mesh

    vertical, horizontal = spec["exponents"]
    axial = spec["axes"][0] == spec["axes"][1] and horizontal == 1.0
    return _one(mesh(spec["axes"], vertical, horizontal), "axial" if axial else "mirrors")


def gaussian_sphere(spec: Spec) -> Solid:
    """A Gaussian random sphere."""
    from scatterloom.solids import random_sphere

    if spec.get("correlation_angle_deg") is not None:
        share = random_sphere.correlation_angle(spec["correlation_angle_deg"])
    else:
        share = random_sphere.power_law(spec["power_law_exponent"], spec["highest_degree"])
    return _one(random_sphere.gaussian_sphere(spec["radius_deviation"], share, spec["seed"]))


def point_hull(spec: Spec) -> Solid:
    """Convex hull of random points."""
    from scatterloom.solids.fragments import random_hull

    return _convex(*random_hull(spec["points"], spec["seed"]), spec, None)


def voronoi_fragment(spec: Spec) -> Solid:
    """Cell of a random point process."""
    from scatterloom.solids.fragments import voronoi_cell

    return _convex(*voronoi_cell(spec["seed"]), spec, None)


def rough_sphere(spec: Spec) -> Solid:
    """A faceted sphere with a rough surface."""
    from scatterloom.solids.fragments import rough_facets

    return _one(rough_facets(spec["edge_parts"], spec["roughness"], spec["seed"]))


def fractal_cluster(spec: Spec) -> Solid:
    """A cluster that keeps a fractal law."""
    from scatterloom.solids.growth import fractal_cluster as centres

    made = centres(
        spec["monomers"], spec["fractal_dimension"], spec["fractal_prefactor"], spec["seed"]
    )
    return _cluster(made, spec)


def ballistic_cluster(spec: Spec) -> Solid:
    """A cluster of spheres that came on straight lines."""
    from scatterloom.solids.growth import ballistic_cluster as centres

    return _cluster(centres(spec["monomers"], spec["seed"]), spec)


def packed_cluster(spec: Spec) -> Solid:
    """Spheres packed about a centre."""
    from scatterloom.solids.growth import packed_cluster as centres

    return _cluster(centres(spec["monomers"], spec["seed"]), spec)


def sphere_chain(spec: Spec) -> Solid:
    """Touching spheres in a row along z."""
    import numpy as np

    count = int(spec["monomers"])
    heights = 2.0 * np.arange(count) - (count - 1.0)
    return _cluster(np.column_stack([0.0 * heights, 0.0 * heights, heights]), spec)


def _cluster(centres: Floats, spec: Spec) -> Solid:
    from scatterloom.solids.spheres import cluster_solid

    return cluster_solid(
        centres, spec.get("neck_radius_fraction") or 0.0, spec.get("coating_thickness") or 0.0
    )
