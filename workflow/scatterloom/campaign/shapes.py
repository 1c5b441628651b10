"""Shapes as the configuration states them. A new shape is one more section in `Shape`."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from scatterloom.campaign.file_shapes import MeshFile, VoxelFile
from scatterloom.campaign.random_shapes import (
    BallisticCluster,
    FractalCluster,
    GaussianSphere,
    PackedCluster,
    PointHull,
    RoughSphere,
    VoronoiFragment,
)
from scatterloom.campaign.sections import Section, setting, wrong
from scatterloom.campaign.solid_shapes import (
    LARGEST_ASPECT,
    Capsule,
    Cone,
    Cylinder,
    EdgeRadius,
    Frustum,
    RegularPolyhedron,
    SphereChain,
    Superellipsoid,
    check_aspect,
)


class Sphere(Section):
    """A sphere."""

    kind: Literal["sphere"] = setting("A sphere.")


class Spheroid(Section):
    """An ellipsoid of revolution."""

    kind: Literal["spheroid"] = setting("An ellipsoid of revolution.")
    equatorial_to_polar: float = setting(
        "Equatorial axis divided by the axis of revolution: above 1 oblate (a plate), "
        "below 1 prolate (a needle).",
        unit="1",
        ge=1 / LARGEST_ASPECT,
        le=LARGEST_ASPECT,
    )


class Ellipsoid(Section):
    """An ellipsoid with three axes of its own."""

    kind: Literal["ellipsoid"] = setting("An ellipsoid with three different axes.")
    axes: list[Annotated[float, setting("One axis.", unit="1", gt=0.0, le=1e6)]] = setting(
        "Ratio of the three axes, such as [3, 2, 1]; the size is set under `sizes`.",
        min_length=3,
        max_length=3,
    )

    @model_validator(mode="after")
    def _check(self) -> Ellipsoid:
        check_aspect("axis", "axes", self.axes)
        return self


class Cuboid(Section):
    """A rectangular block; a cube has three equal edges."""

    kind: Literal["cuboid"] = setting("A rectangular block.")
    edges: list[Annotated[float, setting("One edge.", unit="1", gt=0.0, le=1e6)]] = setting(
        "Ratio of the three edges, such as [1, 1, 1] for a cube; the size is set under `sizes`.",
        min_length=3,
        max_length=3,
    )
    edge_radius_fraction: EdgeRadius = None

    @model_validator(mode="after")
    def _check(self) -> Cuboid:
        check_aspect("edge", "edges", self.edges)
        return self


class Prism(Section):
    """A right prism on a regular polygon, such as a hexagonal column or plate of ice."""

    kind: Literal["prism"] = setting("A right prism on a regular polygon.")
    sides: int = setting(
        "Number of sides of the base; 6 for a hexagonal column or plate.", unit="1", ge=3, le=24
    )
    height_to_width: float = setting(
        "Height divided by the width of the base, which is the diameter of the circle through "
        "its corners (2a for a hexagon of side a): above 1 a column, below 1 a plate.",
        unit="1",
        ge=1 / LARGEST_ASPECT,
        le=LARGEST_ASPECT,
    )
    edge_radius_fraction: EdgeRadius = None
    end_tilts_deg: (
        list[Annotated[float, setting("Tilt of one end.", unit="deg", ge=-80.0, le=80.0)]] | None
    ) = setting(
        "Angles of the upper and the lower end with the base, both rising towards the corner on "
        "x. The height is that along the axis.",
        None,
        min_length=2,
        max_length=2,
    )
    indentation: float | None = setting(
        "Depth of a hollow pyramid in either end over half the height.",
        None,
        unit="1",
        gt=0.0,
        le=0.95,
    )

    @model_validator(mode="after")
    def _check(self) -> Prism:
        given = [
            name
            for name in ("indentation", "end_tilts_deg", "edge_radius_fraction")
            if getattr(self, name) is not None
        ]
        if self.indentation is not None and len(given) > 1:
            raise wrong(
                f"both indentation and {given[1]} are given",
                "an indented prism has straight ends and sharp edges: leave one of them out",
                given[1],
            )
        return self


Shape = Annotated[
    Sphere
    | Spheroid
    | Ellipsoid
    | Superellipsoid
    | Cuboid
    | Prism
    | RegularPolyhedron
    | Cylinder
    | Capsule
    | Cone
    | Frustum
    | GaussianSphere
    | PointHull
    | VoronoiFragment
    | RoughSphere
    | SphereChain
    | FractalCluster
    | BallisticCluster
    | PackedCluster
    | MeshFile
    | VoxelFile,
    Field(discriminator="kind"),
]
