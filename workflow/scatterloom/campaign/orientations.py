"""Distributions of orientation beside the random one, as the configuration states them."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from scatterloom.campaign.grids import AngleGrid, ascending
from scatterloom.campaign.sections import NAME_FORM, Name, Section, setting, wrong

_EVERY_10_DEG = [10.0 * step for step in range(19)]
_EVERY_30_DEG = [30.0 * step for step in range(12)]


class Uniform(Section):
    """Axes spread evenly over a cap of directions."""

    kind: Literal["uniform"] = setting("Axes spread evenly over a cap around the vertical.")
    largest_deg: float = setting(
        "Largest tilt of the particle's z axis from the vertical; 180 for random orientation.",
        unit="deg",
        gt=0.0,
        le=180.0,
    )


class Normal(Section):
    """Tilts normally distributed about the vertical."""

    kind: Literal["normal"] = setting("Tilts normally distributed about the vertical.")
    sd_deg: float = setting(
        "Standard deviation s of a density exp(-tilt^2/2s^2) per solid angle.",
        unit="deg",
        ge=0.1,
        le=180.0,
    )


class Fisher(Section):
    """Axes of a Fisher distribution about the vertical."""

    kind: Literal["fisher"] = setting("A Fisher distribution of axes about the vertical.")
    concentration: float = setting(
        "Concentration kappa of a density exp(kappa cos(tilt)) per solid angle.",
        unit="1",
        ge=0.0,
        le=1e5,
    )


_Angles = Annotated[
    list[Annotated[float, setting("One Euler angle.", unit="deg", ge=-360.0, le=360.0)]],
    setting("Three Euler angles.", min_length=3, max_length=3),
]


class Listed(Section):
    """Single orientations."""

    kind: Literal["list"] = setting("Single orientations with weights.")
    euler_deg: list[_Angles] = setting(
        "Euler angles [alpha, beta, gamma] of each: the particle is turned by gamma about the "
        "vertical, then by beta about the y axis, then by alpha about the vertical.",
        min_length=1,
        max_length=10_000,
    )
    weights: list[Annotated[float, setting("One weight.", unit="1", gt=0.0)]] | None = setting(
        "Weight of each on any scale; all alike if missing.", None, min_length=1
    )

    @model_validator(mode="after")
    def _check(self) -> Listed:
        if self.weights is not None and len(self.weights) != len(self.euler_deg):
            raise wrong(
                f"{len(self.weights)} weights for {len(self.euler_deg)} orientations",
                "give as many weights as orientations, or none",
                "weights",
            )
        return self


OrientationDistribution = Annotated[Uniform | Normal | Fisher | Listed, Field(discriminator="kind")]


class Orientation(Section):
    """A distribution of orientation, averaged from the transition matrices of solved cases."""

    name: Name = setting("Name of the distribution, and of its table.", form=NAME_FORM)
    particles: list[str] | None = setting(
        "Particles to average; all if missing.", None, min_length=1
    )
    distribution: OrientationDistribution = setting(
        "How the particles lie. Other than in a list, azimuths of the axis and turns about it "
        "are random. The axis is that of revolution, or of a prism; z of other shapes."
    )
    incidence_zenith_deg: list[
        Annotated[float, setting("One angle.", unit="deg", ge=0.0, le=180.0)]
    ] = setting(
        "Zenith angles of the direction in which the incident light travels, ascending: 180 "
        "for light from overhead. Its azimuth is 0.",
        min_length=1,
        max_length=1000,
    )
    zenith_deg: AngleGrid = setting(
        "Zenith angles of the directions of scattering, a list or a rule.", _EVERY_10_DEG
    )
    azimuth_deg: list[Annotated[float, setting("One angle.", unit="deg", ge=0.0, lt=360.0)]] = (
        setting(
            "Azimuths of the directions of scattering relative to that of incidence, ascending.",
            _EVERY_30_DEG,
            min_length=1,
            max_length=1000,
        )
    )

    @field_validator("incidence_zenith_deg", "azimuth_deg")
    @classmethod
    def _check_ascending(cls, value: list[float]) -> list[float]:
        ascending("angles", value)
        return value
