"""What a particle holds beside its main material: coatings, layers, inclusions, pores."""

from __future__ import annotations

from typing import Annotated

from pydantic import model_validator

from scatterloom.campaign.sections import Section, setting, wrong

THINNEST = 0.02
"""Smallest radius of a core, and smallest thickness of a coating, over the particle's radius."""

_MATERIAL = "the name of a material under 'materials'"


class Coating(Section):
    """A shell of another material around a core, of the particle's shape or evenly thick."""

    material: str = setting(
        "Material of the coating, one of the keys under `materials`.", form=_MATERIAL
    )
    core_radius_fraction: float | None = setting(
        "Radius of the core divided by that of the whole particle (for other shapes than "
        "spheres the ratio of their axes or edges, the same along all of them).",
        None,
        unit="1",
        ge=THINNEST,
        le=1 - THINNEST,
    )
    core_volume_fraction: float | None = setting(
        "Volume of the core divided by that of the whole particle, instead of "
        "`core_radius_fraction`.",
        None,
        unit="1",
        ge=1e-5,
        le=0.97,
    )
    thickness_fraction: float | None = setting(
        "Thickness of a coating that is equally thick everywhere, instead: over the equal-volume "
        "radius of the whole convex particle, or over the radius of the spheres of a cluster.",
        None,
        unit="1",
        ge=THINNEST,
        le=2.0,
    )

    @model_validator(mode="after")
    def _check(self) -> Coating:
        names = ("core_radius_fraction", "core_volume_fraction", "thickness_fraction")
        given = [name for name in names if getattr(self, name) is not None]
        if len(given) != 1:
            one_of = "exactly one of 'core_radius_fraction', 'core_volume_fraction' and "
            raise wrong(
                f"both {given[0]} and {given[1]} are given"
                if given
                else "no core_radius_fraction, core_volume_fraction or thickness_fraction is given",
                f"give {one_of}'thickness_fraction'",
                *given[1:2],
            )
        return self

    @property
    def core_scale(self) -> float:
        """Radius of the core over that of the particle, if it has the particle's shape."""
        if self.core_radius_fraction is not None:
            return self.core_radius_fraction
        assert self.core_volume_fraction is not None
        return self.core_volume_fraction ** (1.0 / 3.0)


class Layer(Section):
    """One layer of a particle."""

    material: str = setting(
        "Material of the layer, one of the keys under `materials`.", form=_MATERIAL
    )
    inner_radius_fraction: float | None = setting(
        "Size of what is inside the layer over that of the whole particle, for layers of the "
        "particle's own shape.",
        None,
        unit="1",
        ge=THINNEST,
        le=1 - THINNEST,
    )
    thickness_fraction: float | None = setting(
        "Thickness of the layer over the equal-volume radius of the whole particle, for layers "
        "that are equally thick everywhere.",
        None,
        unit="1",
        ge=THINNEST,
        le=1.0,
    )


class Inclusions(Section):
    """Spheres within the particle: at random places, or one at a stated place."""

    material: str | None = setting(
        "Material of the spheres, one of the keys under `materials`; pores, filled with the "
        "host medium, if missing.",
        None,
        form=_MATERIAL,
    )
    count: int | None = setting("Number of equal spheres at random.", None, unit="1", ge=1, le=500)
    volume_fraction: float | None = setting(
        "Volume of all of them over that of the body they are in.", None, unit="1", ge=1e-4, le=0.4
    )
    seed: int | None = setting(
        "Seed of their places: the same seed makes the same body on every machine.",
        None,
        unit="1",
        ge=0,
        le=2**32 - 1,
    )
    radius_fraction: float | None = setting(
        "Radius of one sphere, over the equal-volume radius of the body it is in.",
        None,
        unit="1",
        ge=THINNEST,
        le=1 - THINNEST,
    )
    centre: list[Annotated[float, setting("One coordinate.", unit="1", ge=-10, le=10)]] | None = (
        setting(
            "Place of that sphere, from the centre of mass of the body, in its equal-volume radii.",
            None,
            min_length=3,
            max_length=3,
        )
    )

    @model_validator(mode="after")
    def _check(self) -> Inclusions:
        many = ("count", "volume_fraction", "seed")
        one = ("radius_fraction", "centre")
        given = {name for name in (*many, *one) if getattr(self, name) is not None}
        if given not in ({*many}, {*one}):
            raise wrong(
                "found "
                + (", ".join(name for name in (*many, *one) if name in given) or "nothing"),
                "give either 'count', 'volume_fraction' and 'seed' for spheres at random places, "
                "or 'radius_fraction' and 'centre' for one",
            )
        return self


def check_layers(layers: list[Layer]) -> None:
    """Check that all layers are stated alike and follow one another inwards."""
    for number, layer in enumerate(layers):
        both = layer.inner_radius_fraction is not None and layer.thickness_fraction is not None
        if both or (layer.inner_radius_fraction is None and layer.thickness_fraction is None):
            raise wrong(
                f"layer {number + 1} states " + ("both" if both else "neither"),
                "give exactly one of 'inner_radius_fraction' and 'thickness_fraction'",
                *("layers", number),
            )
    alike = {layer.thickness_fraction is None for layer in layers}
    if len(alike) > 1:
        raise wrong(
            "some layers have an inner_radius_fraction and others a thickness_fraction",
            "give all layers of a particle the same of the two keys",
            "layers",
        )
    scales = [layer.inner_radius_fraction for layer in layers]
    for number in range(1, len(scales)):
        outer, inner = scales[number - 1], scales[number]
        if outer is not None and inner is not None and inner >= outer:
            raise wrong(
                f"{inner:g} is not below {outer:g}, that of the layer around it",
                "give layers from outside inwards, with falling inner_radius_fraction",
                *("layers", number, "inner_radius_fraction"),
            )
