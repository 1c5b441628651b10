"""Shapes as the configuration states them. A new shape is one more section in `Shape`."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

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
        aspect = max(self.axes) / min(self.axes)
        if aspect > LARGEST_ASPECT * (1.0 + 1e-12):
            raise wrong(
                f"the longest axis is {aspect:.4g} times the shortest",
                f"give axes whose ratio is at most {LARGEST_ASPECT:g}",
                "axes",
            )
        return self


Shape = Annotated[Sphere | Spheroid | Ellipsoid, Field(discriminator="kind")]
