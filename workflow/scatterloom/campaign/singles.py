"""Single solves: one particle at one size, lit from few directions, however large."""

from __future__ import annotations

import hashlib
import math
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Annotated, Any

from pydantic import field_validator, model_validator

from scatterloom.campaign.grids import ascending
from scatterloom.campaign.sections import NAME_FORM, Name, Section, setting, wrong

if TYPE_CHECKING:
    from scatterloom.campaign.loader import Campaign

_AZIMUTH: dict[str, Any] = {"unit": "deg", "ge": 0.0, "lt": 360.0}


class Incidence(Section):
    """A direction in which light travels, in the frame of the particle."""

    zenith_deg: float = setting(
        "Angle between the direction of propagation and the particle's z axis.",
        unit="deg",
        ge=0.0,
        le=180.0,
    )
    azimuth_deg: float = setting("Its azimuth about z, from x.", 0.0, **_AZIMUTH)


class SingleSolve(Section):
    """A particle solved at one orientation, without a complete set of waves."""

    name: Name = setting("Name of the solve and of its file.", form=NAME_FORM)
    particle: str = setting("One of the particles.", form="the name of a particle")
    wavelength_um: float = setting("One of the wavelengths.", unit="um", ge=1e-3, le=1e6)
    radius_um: float | None = setting(
        "Radius of the sphere of equal volume.", None, unit="um", gt=0.0, le=1e6
    )
    size_parameter: float | None = setting(
        "Size parameter of the sphere of equal volume, instead of `radius_um`.",
        None,
        unit="1",
        gt=0.0,
        le=1e4,
    )
    incidence: list[Incidence] = setting(
        "Directions of incidence; both polarizations are solved for each.",
        [Incidence(zenith_deg=0.0)],
        min_length=1,
        max_length=100,
    )
    scattering_planes_deg: list[Annotated[float, setting("One azimuth.", **_AZIMUTH)]] = setting(
        "Azimuths of the scattering planes about the direction of incidence, from the plane that "
        "holds the particle's z axis (for incidence along z: from x).",
        [0.0, 90.0],
        min_length=1,
        max_length=360,
    )
    cells_per_wavelength: float = setting(
        "Cells of the finest lattice per wavelength inside the particle; a second lattice has "
        "three quarters of them.",
        8.0,
        unit="1",
        ge=4.0,
        le=64.0,
    )
    residual: float = setting(
        "Relative residual of the fields at which to stop.", 1e-4, unit="1", ge=1e-6, le=1e-2
    )

    @field_validator("scattering_planes_deg")
    @classmethod
    def _check_planes(cls, value: list[float]) -> list[float]:
        ascending("angles", value)
        return value

    @model_validator(mode="after")
    def _check(self) -> SingleSolve:
        both = self.radius_um is not None and self.size_parameter is not None
        if both or (self.radius_um is None and self.size_parameter is None):
            raise wrong(
                "both radius_um and size_parameter are given"
                if both
                else "neither radius_um nor size_parameter is given",
                "give exactly one of 'radius_um' and 'size_parameter'",
                *(["size_parameter"] if both else []),
            )
        return self


@dataclass(frozen=True)
class Single:
    """A single solve with everything it depends on.

    Attributes
    ----------
    name, particle : str
    shape : dict
        Canonical specification.
    indices : tuple of complex
        Relative to the medium, from outside inwards.
    wavelength_um, radius_um, size_parameter : float
    incidence_deg : tuple of (zenith, azimuth)
    planes_deg : tuple of float
    angles_deg : tuple of float
        Scattering angles of the campaign.
    cells : tuple of int
        Cells across, coarse and fine.
    residual : float
    """

    name: str
    particle: str
    shape: dict[str, Any]
    indices: tuple[complex, ...]
    wavelength_um: float
    radius_um: float
    size_parameter: float
    incidence_deg: tuple[tuple[float, float], ...]
    planes_deg: tuple[float, ...]
    angles_deg: tuple[float, ...]
    cells: tuple[int, int]
    residual: float

    @property
    def digest(self) -> str:
        """Twenty hexadecimal digits of all that the result depends on."""
        from scatterloom.campaign.case import canonical_json
        from scatterloom.campaign.effort import NUMERICS_REVISION

        content = asdict(self) | {"numerics_revision": NUMERICS_REVISION}
        content["indices"] = [[m.real, m.imag] for m in self.indices]
        for label in ("name", "particle"):
            del content[label]
        return hashlib.sha256(canonical_json(content).encode()).hexdigest()[:20]


def singles_of(campaign: Campaign) -> list[Single]:
    """Return the single solves of a campaign."""
    return [_single(campaign, entry) for entry in campaign.model.single_solves]


def _single(campaign: Campaign, entry: SingleSolve) -> Single:
    from scatterloom.campaign.expand import body_of, relative_index
    from scatterloom.campaign.geometry import extents

    model = campaign.model
    w = model.wavelengths_um.index(entry.wavelength_um)
    medium = campaign.medium_index[w]
    particle = next(p for p in model.particles if p.name == entry.particle)
    indices = tuple(
        relative_index(campaign.indices[name][w], medium) for name in particle.materials
    )
    shape, indices = body_of(particle, indices)
    scale = 2.0 * math.pi * medium / entry.wavelength_um
    if entry.size_parameter is not None:
        x, radius = entry.size_parameter, entry.size_parameter / scale
    else:
        assert entry.radius_um is not None
        x, radius = entry.radius_um * scale, entry.radius_um
    longest = 2.0 * max(extents(shape).half) * x * max(abs(m) for m in indices) / (2.0 * math.pi)
    fine = 2 * math.ceil(0.5 * max(8.0, longest * entry.cells_per_wavelength) - 1e-9)
    return Single(
        name=entry.name,
        particle=entry.particle,
        shape=shape,
        indices=indices,
        wavelength_um=entry.wavelength_um,
        radius_um=float(f"{radius:.11e}"),
        size_parameter=float(f"{x:.11e}"),
        incidence_deg=tuple((i.zenith_deg, i.azimuth_deg) for i in entry.incidence),
        planes_deg=tuple(entry.scattering_planes_deg),
        angles_deg=tuple(float(a) for a in campaign.angles_deg),
        cells=(2 * round(0.375 * fine), fine),
        residual=entry.residual,
    )
