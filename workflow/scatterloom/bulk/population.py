"""Populations as the averages need them: shares by number, distributions, densities."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from scatterloom.campaign.distribution import Distribution

_SPHERE = 4.0 * math.pi / 3.0
_POWERS = {"number": 0, "area": 2, "volume": 3, "mass": 3}


@dataclass(frozen=True)
class Population:
    """A named mixture of particles.

    Attributes
    ----------
    name : str
    numbers : mapping of str to float
        Number of particles by name, on any scale.
    distribution : Distribution
        By number, of the radius of the sphere of equal volume.
    own : mapping of str to Distribution
        Of particles that have another distribution than the others.
    densities : mapping of str to float
        Density of particles [g cm-3], where known.
    """

    name: str
    numbers: Mapping[str, float]
    distribution: Distribution
    own: Mapping[str, Distribution] = field(default_factory=dict)
    densities: Mapping[str, float] = field(default_factory=dict)

    def distribution_of(self, particle: str) -> Distribution:
        """Return the distribution of one of the particles."""
        return self.own.get(particle, self.distribution)

    def number_fractions(self) -> dict[str, float]:
        """Return the share of every particle by number; they sum to 1."""
        total = math.fsum(self.numbers.values())
        return {name: number / total for name, number in self.numbers.items()}

    def moment(self, order: float) -> float:
        """Return the mean of radius to the power `order` over all particles [um^order]."""
        return math.fsum(
            share * self.distribution_of(name).moment(order)
            for name, share in self.number_fractions().items()
        )

    @property
    def effective_radius_um(self) -> float:
        """Ratio of the third to the second moment of radius [um]."""
        return self.moment(3) / self.moment(2)

    @property
    def effective_variance(self) -> float:
        """Variance of radius about the effective radius, weighted by r^2, over r_eff^2."""
        return self.moment(4) * self.moment(2) / self.moment(3) ** 2 - 1.0

    @property
    def area_um2(self) -> float:
        """Mean cross section of the spheres of equal volume [um2]."""
        return math.pi * self.moment(2)

    @property
    def volume_um3(self) -> float:
        """Mean volume [um3]."""
        return _SPHERE * self.moment(3)

    @property
    def density_g_cm3(self) -> float:
        """Mass over volume of all particles [g cm-3]; NaN unless every density is known."""
        mass = math.fsum(
            share * self.distribution_of(name).moment(3) * self.densities.get(name, math.nan)
            for name, share in self.number_fractions().items()
        )
        return mass / self.moment(3)


def populations_of(model: Any) -> tuple[Population, ...]:
    """Populations of a campaign model, in its order (`CampaignModel.populations`)."""
    densities = {name: d for name, d in model.densities().items() if d is not None}
    out = []
    for p in model.populations or ():
        own = {name: p.size_of(name) for name in p.sizes or ()}
        base, order = p.size.distribution(), _POWERS[p.shares_by]
        numbers = {}
        for name, share in p.particles.items():
            per_particle = own.get(name, base).moment(order)
            if p.shares_by == "mass":
                per_particle *= densities[name]
            numbers[name] = share / per_particle
        known = {name: densities[name] for name in p.particles if name in densities}
        out.append(Population(p.name, numbers, base, own, known))
    return tuple(out)
