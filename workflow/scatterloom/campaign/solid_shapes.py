"""Shapes with a formula whose surface is made of triangles, as the configuration states them."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import model_validator

from scatterloom.campaign.sections import Section, setting, wrong

LARGEST_ASPECT = 10.0
"""Largest ratio of the longest to the shortest axis of a particle."""

ROUND = {"unit": "1", "ge": 0.02, "le": 0.98}

EdgeRadius = Annotated[
    float | None,
    setting(
        "Radius of rounded edges and corners over that of the largest sphere inside the "
        "polyhedron; sharp if missing.",
        None,
        **ROUND,
    ),
]

NeckRadius = Annotated[
    float | None,
    setting(
        "Radius of the necks at contacts over that of the spheres: what a ball rolled around the "
        "contact cannot enter. Spheres touch in points if missing.",
        None,
        unit="1",
        ge=0.1,
        le=0.8,
    ),
]


def check_aspect(one: str, key: str, lengths: list[float]) -> None:
    """Refuse lengths that differ too much."""
    aspect = max(lengths) / min(lengths)
    if aspect > LARGEST_ASPECT * (1.0 + 1e-12):
        raise wrong(
            f"the longest {one} is {aspect:.4g} times the shortest",
            f"give {key} whose ratio is at most {LARGEST_ASPECT:g}",
            key,
        )


class RegularPolyhedron(Section):
    """A regular polyhedron; for a cube see `cuboid`."""

    kind: Literal["tetrahedron", "octahedron", "dodecahedron", "icosahedron"] = setting(
        "A regular polyhedron; for a cube see `cuboid`."
    )
    edge_radius_fraction: EdgeRadius = None


class Cylinder(Section):
    """A circular cylinder with flat ends."""

    kind: Literal["cylinder"] = setting("A circular cylinder with flat ends.")
    length_to_diameter: float = setting(
        "Length over diameter: above 1 a rod, below 1 a disk.",
        unit="1",
        ge=1 / LARGEST_ASPECT,
        le=LARGEST_ASPECT,
    )


class Capsule(Section):
    """A circular cylinder with half a sphere on either end."""

    kind: Literal["capsule"] = setting("A circular cylinder with half a sphere on either end.")
    length_to_diameter: float = setting(
        "Whole length over diameter.", unit="1", ge=1.0, le=LARGEST_ASPECT
    )


class Cone(Section):
    """A circular cone."""

    kind: Literal["cone"] = setting("A circular cone.")
    height_to_diameter: float = setting(
        "Height over the diameter of the base.",
        unit="1",
        ge=1 / LARGEST_ASPECT,
        le=LARGEST_ASPECT,
    )


class Frustum(Section):
    """A circular cone without its tip."""

    kind: Literal["frustum"] = setting("A circular cone without its tip.")
    height_to_diameter: float = setting(
        "Height over the diameter of the lower end.",
        unit="1",
        ge=1 / LARGEST_ASPECT,
        le=LARGEST_ASPECT,
    )
    upper_to_lower: float = setting(
        "Diameter of the upper end over that of the lower one.", unit="1", ge=0.02, le=1.0
    )


class Superellipsoid(Section):
    """The body (|x/a|^(2/e) + |y/b|^(2/e))^(e/n) + |z/c|^(2/n) <= 1."""

    kind: Literal["superellipsoid"] = setting(
        "The body (|x/a|^(2/e) + |y/b|^(2/e))^(e/n) + |z/c|^(2/n) <= 1."
    )
    axes: list[Annotated[float, setting("One axis.", unit="1", gt=0.0, le=1e6)]] = setting(
        "Ratio of the three axes a, b, c.", min_length=3, max_length=3
    )
    exponents: list[Annotated[float, setting("One exponent.", unit="1", ge=0.3, le=1.8)]] = setting(
        "The exponents [n, e] of vertical and horizontal sections: 1 for ellipses, towards 0 "
        "rectangles, towards 2 rhombs.",
        min_length=2,
        max_length=2,
    )

    @model_validator(mode="after")
    def _check(self) -> Superellipsoid:
        check_aspect("axis", "axes", self.axes)
        return self


class SphereChain(Section):
    """Equal touching spheres in a row."""

    kind: Literal["sphere_chain"] = setting("Equal touching spheres in a row along z.")
    monomers: int = setting("Number of spheres.", unit="1", ge=2, le=10)
    neck_radius_fraction: NeckRadius = None
