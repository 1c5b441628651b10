"""Shapes as the configuration states them. A new shape is one more section in `Shape`."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from scatterloom.campaign.file_shapes import MeshFile, VoxelFile
from scatterloom.campaign.sections import Section, setting, wrong

LARGEST_ASPECT = 10.0
"""Largest ratio of the longest to the shortest axis of a particle."""


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
        _check_aspect("axis", "axes", self.axes)
        return self


class Cuboid(Section):
    """A rectangular block; a cube has three equal edges."""

    kind: Literal["cuboid"] = setting("A rectangular block.")
    edges: list[Annotated[float, setting("One edge.", unit="1", gt=0.0, le=1e6)]] = setting(
        "Ratio of the three edges, such as [1, 1, 1] for a cube; the size is set under `sizes`.",
        min_length=3,
        max_length=3,
    )

    @model_validator(mode="after")
    def _check(self) -> Cuboid:
        _check_aspect("edge", "edges", self.edges)
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


def _check_aspect(one: str, key: str, lengths: list[float]) -> None:
    aspect = max(lengths) / min(lengths)
    if aspect > LARGEST_ASPECT * (1.0 + 1e-12):
        raise wrong(
            f"the longest {one} is {aspect:.4g} times the shortest",
            f"give {key} whose ratio is at most {LARGEST_ASPECT:g}",
            key,
        )


Shape = Annotated[
    Sphere | Spheroid | Ellipsoid | Cuboid | Prism | MeshFile | VoxelFile,
    Field(discriminator="kind"),
]
