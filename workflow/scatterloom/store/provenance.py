"""Global attributes of a table: who, when, with what, under which conventions."""

from __future__ import annotations

import os
import platform
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from importlib.metadata import version
from typing import Any

from scatterloom.campaign.effort import NUMERICS_REVISION

PACKAGES = ("numpy", "scipy", "numba", "ducc0", "snakemake", "zarr", "xarray", "scatterloom")
DATED = frozenset({"date_created", "history", "content_digest", "computer"})
"""Attributes that may differ between two runs of the same computation."""
NOT_STATED = "not stated"
MOST_NAMED = 10
KEYWORDS = ("light scattering", "polarization", "Mueller matrix", "nonspherical particles")


@dataclass(frozen=True)
class About:
    """What the campaign says about itself.

    Attributes
    ----------
    campaign, title : str
        Name and title.
    config : str
        The merged configuration, YAML text.
    provenance : mapping
        What the section of that name states: creator, institution, license, summary,
        keywords (list), references, acknowledgement; None or absent if not stated.
    """

    campaign: str
    title: str
    config: str
    provenance: Mapping[str, Any] = field(default_factory=dict)


def now() -> str:
    """Return the date as ISO 8601, UTC; SOURCE_DATE_EPOCH is honoured for repeatable builds."""
    epoch = os.environ.get("SOURCE_DATE_EPOCH")
    moment = datetime.fromtimestamp(int(epoch), UTC) if epoch else datetime.now(UTC)
    return moment.strftime("%Y-%m-%dT%H:%M:%SZ")


def global_attributes(
    about: About, particles: Sequence[str], wavelength_um: Sequence[float]
) -> dict[str, Any]:
    """CF 1.11 and ACDD 1.3 attributes of a table, all but its content digest."""
    date = now()
    versions = {f"version_{name}": version(name) for name in PACKAGES}
    stated = {name: value for name, value in about.provenance.items() if value}
    optional = ("institution", "references", "acknowledgement")
    return {
        "Conventions": "CF-1.11, ACDD-1.3",
        "title": about.title or about.campaign,
        "summary": stated.get("summary") or _summary(particles, wavelength_um),
        "keywords": ", ".join(stated.get("keywords") or KEYWORDS),
        "id": about.campaign,
        "campaign": about.campaign,
        "project": about.campaign,
        "standard_name_vocabulary": "CF Standard Name Table",
        "source": (
            "coupled-dipole solution on filtered lattices with tensor cells, stationary transition "
            "matrix, extrapolation over lattice spacings"
        ),
        "history": f"{date} scatterloom {version('scatterloom')} gathered the solved cases",
        "date_created": date,
        "creator_name": stated.get("creator", NOT_STATED),
        "license": stated.get("license", NOT_STATED),
        **{name: stated[name] for name in optional if name in stated},
        "product_version": f"numerics revision {NUMERICS_REVISION}",
        "numerics_revision": NUMERICS_REVISION,
        "version_python": platform.python_version(),
        **versions,
        "computer": platform.platform(),
        "time_factor": "exp(-i w t), so a positive imaginary index absorbs",
        "sign_convention": (
            "elements 12 and 34 of the scattering matrix as in Bohren & Huffman (1983), "
            "Absorption and Scattering of Light by Small Particles, Wiley"
        ),
        "normalization": (
            "half the integral of element 11 times sin(angle) over 0 to 180 degrees is 1"
        ),
        "efficiency_reference": "cross section of the sphere of equal volume",
        "error_statement": "every NAME_error is the half width of a 95 % interval of NAME",
        "config": about.config,
    }


def _summary(particles: Sequence[str], wavelength_um: Sequence[float]) -> str:
    wavelengths = ", ".join(f"{w:g}" for w in wavelength_um[:MOST_NAMED])
    if len(wavelength_um) > MOST_NAMED:
        wavelengths = f"{min(wavelength_um):g} to {max(wavelength_um):g}"
    more = f" and {len(particles) - MOST_NAMED} more" if len(particles) > MOST_NAMED else ""
    return (
        "Single-scattering properties of randomly oriented nonspherical particles: scattering "
        "matrices and efficiencies with error bars, for the particles "
        f"{', '.join(particles[:MOST_NAMED])}{more}, wavelengths of {wavelengths} um and "
        "a range of sizes."
    )
