"""Size distributions: the sections of the configuration and what they stand for."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Annotated, Literal

from pydantic import Field, field_validator, model_validator

from scatterloom.campaign.grids import ascending
from scatterloom.campaign.sections import Section, setting, wrong

if TYPE_CHECKING:
    from scatterloom.campaign.distribution import Distribution

By = Literal["number", "area", "volume"]
_POWER = {"number": 0, "area": 2, "volume": 3}


class SizeSection(Section):
    """What all kinds have in common; numerics are imported late, the reader starts quickly."""

    def distribution(self) -> Distribution:
        """Return the distribution by number."""
        raise NotImplementedError

    def area_fraction(self, smallest_um: float, largest_um: float) -> float:
        """Return the part of the total cross section between two radii [um]."""
        d = self.distribution()
        return 1.0 - d.share_below(smallest_um, 2) - d.share_above(largest_um, 2)


class Lognormal(SizeSection):
    """Lognormal distribution, by its median and width or by its effective parameters."""

    kind: Literal["lognormal"] = setting("Lognormal distribution.")
    radius_um: float | None = setting(
        "Geometric mean (median) radius of the distribution of what `by` says.",
        None,
        unit="um",
        gt=0.0,
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
    by: By | None = setting(
        "What the median divides in halves: `number` (if missing), `area` or `volume`; "
        "effective parameters need none.",
        None,
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
        if given == effective and self.by is not None:
            raise wrong(
                "'by' says nothing about effective radius and variance",
                "remove it: they are the same however the distribution is weighted",
                "by",
            )
        return self

    def median_and_width(self) -> tuple[float, float]:
        """Return the median radius by number [um] and s, the standard deviation of ln r.

        r_eff = r_g exp(2.5 s^2), v_eff = exp(s^2) - 1 (Hansen & Travis 1974,
        Space Sci. Rev. 16, 527); the median of r^p-weighted particles is
        r_g exp(p s^2) (Hatch & Choate 1929, J. Franklin Inst. 207, 369).
        """
        if self.radius_um is not None and self.geometric_sd is not None:
            s = math.log(self.geometric_sd)
            return self.radius_um * math.exp(-_POWER[self.by or "number"] * s * s), s
        assert self.effective_radius_um is not None and self.effective_variance is not None
        square = math.log1p(self.effective_variance)
        return self.effective_radius_um * math.exp(-2.5 * square), math.sqrt(square)

    def distribution(self) -> Distribution:
        from scatterloom.campaign import distribution

        return distribution.Lognormal(*self.median_and_width())


class Gamma(SizeSection):
    """Gamma number distribution of Hansen & Travis, n(r) ~ r^((1-3b)/b) exp(-r/(ab))."""

    kind: Literal["gamma"] = setting("Gamma number distribution (Hansen & Travis 1974).")
    effective_radius_um: float = setting("Effective radius a.", unit="um", gt=0.0)
    effective_variance: float = setting("Effective variance b.", unit="1", gt=0.0, lt=0.5)

    def distribution(self) -> Distribution:
        from scatterloom.campaign import distribution

        return distribution.Gamma(self.effective_radius_um, self.effective_variance)


class ModifiedGamma(SizeSection):
    """Modified gamma distribution, n(r) ~ r^alpha exp(-(alpha/gamma) (r/r_c)^gamma)."""

    kind: Literal["modified_gamma"] = setting("Modified gamma distribution (Deirmendjian 1969).")
    mode_radius_um: float = setting("Mode radius r_c of n(r).", unit="um", gt=0.0)
    alpha: float = setting("Exponent of the rise.", unit="1", gt=0.0, le=1000.0)
    gamma: float = setting("Exponent within the exponential.", unit="1", ge=0.01, le=100.0)
    by: By = setting("What n(r) counts: `number`, `area` or `volume`.", "number")

    @model_validator(mode="after")
    def _check(self) -> ModifiedGamma:
        if self.alpha + 1.0 <= _POWER[self.by]:
            raise wrong(
                f"a distribution by {self.by} with alpha {self.alpha:g} has infinitely many "
                "particles",
                f"give an alpha above {_POWER[self.by] - 1}, or a distribution by number",
                "alpha",
            )
        return self

    def distribution(self) -> Distribution:
        from scatterloom.campaign import composed, distribution

        form = distribution.ModifiedGamma(self.mode_radius_um, self.alpha, self.gamma)
        return composed.by(form, self.by)


class PowerLaw(SizeSection):
    """Power law between two cut-offs, n(r) ~ r^-exponent."""

    kind: Literal["power_law"] = setting("Power law with cut-offs.")
    exponent: float = setting(
        "Exponent of n(r), particles per unit of radius.", unit="1", ge=-20.0, le=20.0
    )
    smallest_um: float = setting("Radius below which there are no particles.", unit="um", gt=0.0)
    largest_um: float = setting("Radius above which there are no particles.", unit="um", gt=0.0)
    by: By = setting("What n(r) counts: `number`, `area` or `volume`.", "number")

    @model_validator(mode="after")
    def _check(self) -> PowerLaw:
        if self.smallest_um >= self.largest_um:
            raise wrong(
                f"the power law runs from {self.smallest_um:g} to {self.largest_um:g} um",
                "give a 'largest_um' above 'smallest_um'",
                "largest_um",
            )
        return self

    def distribution(self) -> Distribution:
        from scatterloom.campaign import composed, distribution

        form = distribution.PowerLaw(self.exponent, self.smallest_um, self.largest_um)
        return composed.by(form, self.by)


class SizePoint(Section):
    """One row of a tabulated distribution."""

    radius_um: float = setting("Radius.", unit="um", ge=1e-6, le=1e6)
    density: float = setting("Density at this radius, on any scale.", unit="1", ge=0.0, le=1e300)


class Tabulated(SizeSection):
    """Distribution from a table, linear in ln r between its rows and zero outside."""

    kind: Literal["tabulated"] = setting("Tabulated distribution.")
    table: str | None = setting(
        "CSV file with the columns radius_um, density, named relative to this file.",
        None,
        min_length=1,
    )
    points: list[SizePoint] | None = setting(
        "The same as `table`, written out here.", None, min_length=2
    )
    per: Literal["log_radius", "radius"] = setting(
        "Whether densities are per unit of the logarithm of radius (any base) or of radius.",
        "log_radius",
    )
    by: By = setting("What the densities count: `number`, `area` or `volume`.", "number")

    @model_validator(mode="after")
    def _check(self) -> Tabulated:
        if (self.table is None) == (self.points is None):
            raise wrong(
                "both table and points are given"
                if self.table is not None
                else "neither table nor points is given",
                "give exactly one of 'table' and 'points'",
            )
        return self

    @field_validator("points")
    @classmethod
    def _check_points(cls, value: list[SizePoint] | None) -> list[SizePoint] | None:
        if value is not None:
            ascending("points", [point.radius_um for point in value])
            if not any(point.density > 0.0 for point in value):
                raise wrong("all densities are zero", "give a density above zero")
        return value

    def distribution(self) -> Distribution:
        import numpy as np

        from scatterloom.campaign import composed

        assert self.points is not None, "a table is read when the campaign is loaded"
        radius = np.array([point.radius_um for point in self.points])
        value = np.array([point.density for point in self.points])
        # Per unit of ln r, a density per unit of r has a factor r more.
        form = composed.Tabulated(radius, value * radius if self.per == "radius" else value)
        return composed.by(form, self.by)


Simple = Annotated[Lognormal | Gamma | ModifiedGamma | PowerLaw, Field(discriminator="kind")]


class Mode(Section):
    """One mode of a sum."""

    share: float = setting("Share of the mode, on any scale.", unit="1", gt=0.0, le=1e30)
    size: Simple = setting("Distribution of the mode.")


class Sum(SizeSection):
    """Sum of modes, such as a fine and a coarse one."""

    kind: Literal["sum"] = setting("Sum of modes.")
    modes: list[Mode] = setting("The modes.", min_length=1, max_length=20)
    by: By = setting("What the shares count: `number`, `area` or `volume`.", "number")

    def distribution(self) -> Distribution:
        from scatterloom.campaign import composed

        modes = [mode.size.distribution() for mode in self.modes]
        shares = [mode.share for mode in self.modes]
        return composed.Sum.of(modes, shares, _POWER[self.by])


Size = Annotated[
    Lognormal | Gamma | ModifiedGamma | PowerLaw | Tabulated | Sum, Field(discriminator="kind")
]
"""Any kind of size distribution."""
