"""Irregular shapes with a seed, as the configuration states them."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import model_validator

from scatterloom.campaign.sections import Section, setting, wrong
from scatterloom.campaign.solid_shapes import EdgeRadius, NeckRadius

Seed = Annotated[
    int,
    setting(
        "Number of the member of the family: the same seed makes the same body on every machine.",
        unit="1",
        ge=0,
        le=2**32 - 1,
    ),
]
Monomers = Annotated[int, setting("Number of spheres.", unit="1", ge=2, le=200)]


class GaussianSphere(Section):
    """A sphere with log-normal radii that are correlated over angles (Muinonen et al. 1996)."""

    kind: Literal["gaussian_sphere"] = setting(
        "A sphere with log-normal radii that are correlated over angles (Muinonen et al. 1996)."
    )
    radius_deviation: float = setting(
        "Standard deviation of the radius over its mean.", unit="1", ge=0.01, le=0.5
    )
    correlation_angle_deg: float | None = setting(
        "Angle g at which the correlation of the logarithm of the radius, "
        "exp(-2 sin^2(angle/2) / l^2) with l = 2 sin(g/2), has fallen to exp(-1/2).",
        None,
        unit="deg",
        ge=15.0,
        le=120.0,
    )
    power_law_exponent: float | None = setting(
        "Instead: the variance in Legendre degree l goes as l to minus this, from degree 2 on.",
        None,
        unit="1",
        ge=0.0,
        le=10.0,
    )
    highest_degree: int = setting("Highest degree of the power law.", 12, unit="1", ge=2, le=24)
    seed: Seed

    @model_validator(mode="after")
    def _check(self) -> GaussianSphere:
        both = self.correlation_angle_deg is not None and self.power_law_exponent is not None
        if both or (self.correlation_angle_deg is None and self.power_law_exponent is None):
            raise wrong(
                "both correlation_angle_deg and power_law_exponent are given"
                if both
                else "neither correlation_angle_deg nor power_law_exponent is given",
                "give exactly one of 'correlation_angle_deg' and 'power_law_exponent'",
                *(["power_law_exponent"] if both else []),
            )
        return self


class PointHull(Section):
    """Convex hull of random points in a ball."""

    kind: Literal["point_hull"] = setting("Convex hull of random points in a ball.")
    points: int = setting("Number of points.", unit="1", ge=4, le=300)
    edge_radius_fraction: EdgeRadius = None
    seed: Seed


class VoronoiFragment(Section):
    """Cell of a random point process: a fragment of a shattered block."""

    kind: Literal["voronoi_fragment"] = setting(
        "Cell of a random point process: a fragment of a shattered block."
    )
    edge_radius_fraction: EdgeRadius = None
    seed: Seed


class RoughSphere(Section):
    """A sphere of triangular facets with a rough surface."""

    kind: Literal["rough_sphere"] = setting("A sphere of triangular facets with a rough surface.")
    edge_parts: int = setting(
        "Parts of an edge of the icosahedron the facets come from: there are 20 times the square "
        "of this.",
        unit="1",
        ge=1,
        le=12,
    )
    roughness: float = setting(
        "Root mean square of the radii of the corners about their mean, over the mean.",
        unit="1",
        ge=0.0,
        le=0.2,
    )
    seed: Seed


class FractalCluster(Section):
    """Touching spheres, grown to N = k_f (R_g / a)^D_f by joining clusters."""

    kind: Literal["fractal_cluster"] = setting(
        "Touching spheres, grown to N = k_f (R_g / a)^D_f by joining clusters."
    )
    monomers: Monomers
    fractal_dimension: float = setting("The exponent D_f.", unit="1", ge=1.2, le=2.9)
    fractal_prefactor: float = setting(
        "The prefactor k_f; R_g is that of the centres of the spheres.",
        1.3,
        unit="1",
        ge=0.3,
        le=4.0,
    )
    neck_radius_fraction: NeckRadius = None
    seed: Seed


class BallisticCluster(Section):
    """Touching spheres that came one by one on random straight lines."""

    kind: Literal["ballistic_cluster"] = setting(
        "Touching spheres that came one by one on random straight lines."
    )
    monomers: Monomers
    neck_radius_fraction: NeckRadius = None
    seed: Seed


class PackedCluster(Section):
    """Spheres packed closely about a centre, each rolled into one of the nearest pockets."""

    kind: Literal["packed_cluster"] = setting(
        "Spheres packed closely about a centre, each rolled into one of the nearest pockets."
    )
    monomers: Monomers
    neck_radius_fraction: NeckRadius = None
    seed: Seed
