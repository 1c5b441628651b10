"""Materials and the host medium as the configuration states them."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any, Literal

from pydantic import field_validator, model_validator

from scatterloom.campaign.grids import ascending
from scatterloom.campaign.sections import Section, setting, wrong

_N: dict[str, Any] = {"unit": "1", "ge": 0.01, "le": 10.0}
_K: dict[str, Any] = {"unit": "1", "ge": 0.0, "le": 10.0}
_ABSORBS = "absorption is a positive k: the index is n + ik"
DENSITY_ADVICE = "1 g/cm3 is 1000 kg/m3"

_SOURCES = (["n", "k"], ["table"], ["spectrum"], ["database"], ["k", "database"], ["mix"])


class Medium(Section):
    """The host medium around the particles: `index`, or `material`."""

    index: float | None = setting(
        "Refractive index of the medium at every wavelength; real, since it must not absorb.",
        None,
        unit="1",
        ge=1.0,
        le=5.0,
        advice="the medium must not absorb, so its index is real",
    )
    material: str | None = setting(
        "A material whose real part n, which may change with wavelength, is that of the medium, "
        "instead of `index`; its k must not exceed 1e-5 and is left out.",
        None,
        form="the name of a material under 'materials'",
    )

    @model_validator(mode="before")
    @classmethod
    def _vacuum(cls, value: Any) -> Any:
        # Written out, so that a merged campaign states it.
        return {"index": 1.0} if value == {} else value

    @model_validator(mode="after")
    def _check(self) -> Medium:
        if self.index is not None and self.material is not None:
            raise wrong("both index and material are given", "give one of them", "material")
        if self.index is None and self.material is None:
            raise wrong("neither index nor material is given", "give 'index' or 'material'")
        return self


class SpectrumPoint(Section):
    """Optical constants at one wavelength."""

    wavelength_um: float = setting("Wavelength in vacuum.", unit="um", ge=1e-3, le=1e6)
    n: float = setting("Real part of the refractive index.", **_N)
    k: float = setting("Imaginary part of the refractive index.", **_K, advice=_ABSORBS)


class Mix(Section):
    """An effective medium for a material mixed on a scale far below the wavelength."""

    rule: Literal["maxwell_garnett", "bruggeman", "volume_average"] = setting(
        "`maxwell_garnett` for separate inclusions in a host, `bruggeman` for grains of equal "
        "rank, `volume_average` for the mean of the permittivities."
    )
    host: str = setting(
        "Material that fills what the inclusions leave.",
        form="the name of a material under 'materials'",
    )
    inclusions: dict[
        str, Annotated[float, setting("Share of the volume.", unit="1", gt=0.0, lt=1.0)]
    ] = setting("Shares of the volume of other materials, less than 1 together.", min_length=1)

    @model_validator(mode="after")
    def _check(self) -> Mix:
        if self.host in self.inclusions:
            hint = "name the host once, under 'host'"
            raise wrong(f"'{self.host}' is host and inclusion", hint, "inclusions", self.host)
        total = sum(self.inclusions.values())
        if total >= 1.0:
            hint = "give shares of the volume that leave something for the host"
            raise wrong(f"the inclusions take {total:g} of the volume", hint, "inclusions")
        return self


class Material(Section):
    """Optical constants: `n` and `k`, `table`, `spectrum`, `database` or `mix`."""

    n: float | None = setting("Real part of the refractive index.", None, **_N)
    k: float | None = setting(
        "Imaginary part of the refractive index.", None, **_K, advice=_ABSORBS
    )
    table: str | None = setting(
        "CSV file with the columns wavelength_um, n, k, named relative to this file; n and k "
        "are interpolated linearly in the logarithm of wavelength and never extrapolated.",
        None,
        min_length=1,
    )
    spectrum: list[SpectrumPoint] | None = setting(
        "The same as `table`, written out here.", None, min_length=1
    )
    database: str | None = setting(
        "Entry of the open database of optical constants that is installed along, as "
        "shelf/book/page, such as main/H2O/Warren-2008 for ice. Tabulated entries are "
        "interpolated like a `table`; `k` is to be given beside it where the entry has none.",
        None,
        min_length=1,
        max_length=200,
        form="shelf/book/page, such as main/H2O/Warren-2008",
    )
    mix: Mix | None = setting("A mixture of other materials.", None)
    density_g_cm3: float | None = setting(
        "Density, for results per mass; of a mixture from its parts if missing.",
        None,
        unit="g cm-3",
        ge=0.001,
        le=30.0,
        advice=DENSITY_ADVICE,
    )

    @model_validator(mode="after")
    def _check(self) -> Material:
        names = ("n", "k", "table", "spectrum", "database", "mix")
        given = [name for name in names if getattr(self, name) is not None]
        if given not in _SOURCES:
            raise wrong(
                f"a material cannot be made from {' and '.join(given) or 'nothing'}",
                "give 'n' and 'k' (k: 0 if it does not absorb), or one of 'table', 'spectrum', "
                "'database' and 'mix'",
            )
        return self

    @field_validator("spectrum")
    @classmethod
    def _check_spectrum(cls, value: list[SpectrumPoint] | None) -> list[SpectrumPoint] | None:
        if value is not None:
            ascending("spectrum", [point.wavelength_um for point in value])
        return value


def density(name: str, materials: Mapping[str, Material]) -> float | None:
    """Return the density [g cm-3] of a material, of a mixture from its parts; None if unknown."""
    material = materials.get(name)
    if material is None or material.density_g_cm3 is not None or material.mix is None:
        return None if material is None else material.density_g_cm3
    shares = material.mix.inclusions
    parts = {**shares, material.mix.host: 1.0 - sum(shares.values())}
    total = 0.0
    for part, share in parts.items():
        own = density(part, materials)
        if own is None:
            return None
        total += share * own
    return total
