"""Populations: mixtures of particles with their distributions of sizes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Literal

from pydantic import field_validator, model_validator

from scatterloom.campaign.sections import NAME_FORM, Name, Section, check_names, setting, wrong
from scatterloom.campaign.size_sections import Size

if TYPE_CHECKING:
    from scatterloom.campaign.distribution import Distribution

FEWEST_ANGLES = 8
"""Scattering angles without which the matrix of a population is not expanded."""

SharesBy = Literal["number", "area", "volume", "mass"]


class Population(Section):
    """A mixture of particles with one distribution of sizes, or one for each particle."""

    name: Name = setting("Name of the population, a coordinate of the bulk table.", form=NAME_FORM)
    particles: dict[str, Annotated[float, setting("Share of a particle.", unit="1", gt=0.0)]] = (
        setting(
            "Share of each particle, as `particle: weight`; weights are normalized.",
            min_length=1,
        )
    )
    shares_by: SharesBy = setting(
        "What the shares count: `number`, `area`, `volume` or `mass` (which needs the density "
        "of every particle).",
        "number",
    )
    size: Size = setting("Distribution of the radius of the sphere of equal volume.")
    sizes: dict[str, Size] | None = setting(
        "Distributions of single particles that replace `size`, as `particle: distribution`.",
        None,
        min_length=1,
    )

    @field_validator("particles")
    @classmethod
    def _check_particles(cls, value: dict[str, float]) -> dict[str, float]:
        check_names(list(value))
        return value

    @model_validator(mode="after")
    def _check_sizes(self) -> Population:
        for name in self.sizes or {}:
            if name not in self.particles:
                raise wrong(
                    f"'{name}' has a distribution of sizes but no share",
                    "name it under 'particles' of the population too",
                    "sizes",
                    name,
                )
        return self

    def size_of(self, particle: str) -> Distribution:
        """Return the distribution by number of one of the particles."""
        return (self.sizes or {}).get(particle, self.size).distribution()

    def area_fraction(self, smallest_um: float, largest_um: float) -> float:
        """Return the least part of any particle's cross section between two radii [um]."""
        used = {name: (self.sizes or {}).get(name, self.size) for name in self.particles}
        return min(size.area_fraction(smallest_um, largest_um) for size in used.values())
