"""Size populations: the sections of the configuration and their closed forms."""

from __future__ import annotations

import math
from typing import Annotated, Literal

from pydantic import Field, field_validator, model_validator

from scatterloom.campaign.sections import NAME_FORM, Name, Section, check_names, setting, wrong


class Lognormal(Section):
    """Lognormal number distribution, by its median and width or by its effective parameters."""

    kind: Literal["lognormal"] = setting("Lognormal number distribution.")
    radius_um: float | None = setting(
        "Geometric mean (median) radius of the number distribution.", None, unit="um", gt=0.0
    )
    geometric_sd: float | None = setting(
        "Geometric standard deviation.", None, unit="1", ge=1.001, le=10.0
    )
    effective_radius_um: float | None = setting(
        "Effective radius, instead of `radius_um`.", None, unit="um", gt=0.0
    )
    effective_variance: float | None = setting(
        "Effective variance, instead of `geometric_sd`.", None, unit="1", gt=0.0, le=100.0
    )

    @model_validator(mode="after")
    def _check(self) -> Lognormal:
        direct = ["radius_um", "geometric_sd"]
        effective = ["effective_radius_um", "effective_variance"]
        given = [name for name in direct + effective if getattr(self, name) is not None]
        if given not in (direct, effective):
            raise wrong(
                f"a lognormal distribution cannot be made from {' and '.join(given) or 'nothing'}",
                "give 'radius_um' and 'geometric_sd', or 'effective_radius_um' and "
                "'effective_variance'",
            )
        return self

    def median_and_width(self) -> tuple[float, float]:
        """Return the median radius [um] and s, the standard deviation of ln r.

        r_eff = r_g exp(2.5 s^2), v_eff = exp(s^2) - 1 (Hansen & Travis 1974,
        Space Sci. Rev. 16, 527).
        """
        if self.radius_um is not None and self.geometric_sd is not None:
            return self.radius_um, math.log(self.geometric_sd)
        assert self.effective_radius_um is not None and self.effective_variance is not None
        square = math.log1p(self.effective_variance)
        return self.effective_radius_um * math.exp(-2.5 * square), math.sqrt(square)

    def area_fraction(self, smallest_um: float, largest_um: float) -> float:
        """Return the part of the total cross section between two radii [um].

        The area-weighted lognormal is a lognormal with median r_g exp(2 s^2).
        """
        median, s = self.median_and_width()
        middle = math.log(median) + 2.0 * s * s

        def below(radius: float) -> float:
            return 0.5 * math.erfc(-(math.log(radius) - middle) / (s * math.sqrt(2.0)))

        return below(largest_um) - below(smallest_um)


class Gamma(Section):
    """Gamma number distribution of Hansen & Travis, n(r) ~ r^((1-3b)/b) exp(-r/(ab))."""

    kind: Literal["gamma"] = setting("Gamma number distribution (Hansen & Travis 1974).")
    effective_radius_um: float = setting("Effective radius a.", unit="um", gt=0.0)
    effective_variance: float = setting("Effective variance b.", unit="1", gt=0.0, lt=0.5)

    def area_fraction(self, smallest_um: float, largest_um: float) -> float:
        """Return the part of the total cross section between two radii [um].

        r^2 n(r) is a gamma distribution of shape 1/b and scale ab.
        """
        from scipy.special import gammainc  # only here: the reader must start quickly

        b = self.effective_variance
        scale = self.effective_radius_um * b
        below, above = smallest_um / scale, largest_um / scale
        return float(gammainc(1.0 / b, above) - gammainc(1.0 / b, below))


class Population(Section):
    """A mixture of particles with one distribution of sizes."""

    name: Name = setting("Name of the population, a coordinate of the bulk table.", form=NAME_FORM)
    particles: dict[str, Annotated[float, setting("Share of a particle.", unit="1", gt=0.0)]] = (
        setting(
            "Share of each particle by number, as `particle: weight`; weights are normalized.",
            min_length=1,
        )
    )
    size: Annotated[Lognormal | Gamma, Field(discriminator="kind")] = setting(
        "Number distribution of the radius of the sphere of equal volume."
    )

    @field_validator("particles")
    @classmethod
    def _check_particles(cls, value: dict[str, float]) -> dict[str, float]:
        check_names(list(value))
        return value
