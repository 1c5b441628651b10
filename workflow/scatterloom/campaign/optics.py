"""The refractive index of every material at every wavelength, checked."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from scatterloom.campaign.document import Document
from scatterloom.campaign.index_maker import IndexMaker, listed
from scatterloom.campaign.materials import Material, Medium
from scatterloom.campaign.spectra import Spectrum, read_spectrum
from scatterloom.errors import BadInput, Problem


def read_tables(document: Document, folder: Path) -> tuple[dict[str, Spectrum], list[Problem]]:
    """Read the table of every material that names one; `folder` is that of the campaign file.

    Works on the raw file, so that faults of tables are shown together with all others.
    """
    materials = document.tree.get("materials")
    spectra: dict[str, Spectrum] = {}
    problems: list[Problem] = []
    for name, given in materials.items() if isinstance(materials, dict) else ():
        table = given.get("table") if isinstance(given, dict) else None
        if not isinstance(table, str) or not table:
            continue
        try:
            place = folder / table
            if not place.is_file():
                path = ("materials", name, "table")
                message = f"materials.{name}.table names no file"
                hint = f"the name is relative to {folder}"
                problems.append(document.problem(path, message, document.show(path), hint))
                continue
            spectra[name] = read_spectrum(place, str(place))
        except BadInput as error:
            problems += error.problems
        except (OSError, ValueError) as error:  # a name no file system accepts
            path = ("materials", name, "table")
            message = f"materials.{name}.table cannot name a file: {error}"
            problems.append(document.problem(path, message, document.show(path)))
    return spectra, problems


MOST_MEDIUM_K = 1e-5
"""Largest k of a host medium that is left out: it weakens light by 1 % over 80 wavelengths."""


@dataclass(frozen=True)
class Constants:
    """Optical constants of a campaign.

    Attributes
    ----------
    indices : mapping of str to tuple of complex
        Index n + ik of each material in use, one value a wavelength (not relative).
    medium : tuple of float or None
        Index of the host medium, one value a wavelength; None if it is not known.
    looked_up : mapping of str to Spectrum
        What was taken from the database, at the wavelengths of the campaign.
    problems, warnings : list of Problem
    """

    indices: dict[str, tuple[complex, ...]]
    medium: tuple[float, ...] | None
    looked_up: dict[str, Spectrum]
    problems: list[Problem]
    warnings: list[Problem]


def resolve(
    document: Document,
    materials: Mapping[str, Material],
    used: Iterable[str],
    spectra: Mapping[str, Spectrum],
    wavelengths_um: Sequence[float],
    medium: Medium | None,
) -> Constants:
    """Return the index n + ik of each used material at each wavelength, and what is wrong.

    A material whose table could not be read, or that is mixed from such, is left out: the
    faults are reported already.
    """
    maker = IndexMaker(document, materials, spectra, wavelengths_um)
    host, warnings = _medium(maker, medium)
    indices: dict[str, tuple[complex, ...]] = {}
    for name in used:
        values = maker.index(name)
        if values is not None:
            indices[name] = values
            maker.problems += _unsuitable(document, name, values, wavelengths_um, host)
    return Constants(indices, host, maker.looked_up, maker.problems, warnings)


def _medium(
    maker: IndexMaker, medium: Medium | None
) -> tuple[tuple[float, ...] | None, list[Problem]]:
    """Index of the medium at every wavelength, and warnings."""
    if medium is None:
        return None, []
    if medium.material is None:
        return (medium.index or 1.0,) * len(maker.wavelengths_um), []
    values = maker.index(medium.material)
    if values is None:
        return None, []
    pairs = list(zip(maker.wavelengths_um, values, strict=True))
    absorbing = [(w, m) for w, m in pairs if m.imag > MOST_MEDIUM_K]
    below = [(w, m) for w, m in pairs if m.real < 1.0]
    for faulty, what in ((absorbing, "absorbs"), (below, "has an index below 1")):
        if faulty:
            wavelength, index = faulty[0]
            maker.complain(
                ("medium", "material"),
                f"the medium {medium.material} {what} at {listed([w for w, _ in faulty])}",
                f"n = {index.real:g}, k = {index.imag:g} at {wavelength:g} um",
                f"light must reach the particles: leave out wavelengths where k is above "
                f"{MOST_MEDIUM_K:g}, or give a constant 'index'",
            )
            return None, []
    weak = max((m.imag, w) for w, m in pairs)
    warnings = []
    if weak[0] > 0.0:
        warnings.append(
            maker.document.problem(
                ("medium", "material"),
                f"the absorption of the medium {medium.material} is left out",
                f"k = {weak[0]:.3g} at {weak[1]:g} um at most",
                "results are those of particles in a clear medium of the same n",
            )
        )
    return tuple(m.real for m in values), warnings


def mixing_warnings(document: Document, materials: Mapping[str, Material]) -> list[Problem]:
    """Warn of a Maxwell Garnett mixture whose inclusions are too many to stay apart."""
    warnings = []
    for name, material in materials.items():
        mix = material.mix
        if mix is None or mix.rule != "maxwell_garnett":
            continue
        total = sum(mix.inclusions.values())
        if total > MOST_SEPARATE:
            warnings.append(
                document.problem(
                    ("materials", name, "mix", "inclusions"),
                    f"the inclusions of '{name}' take {100 * total:.3g} % of the volume",
                    hint=f"maxwell_garnett is meant for up to about {100 * MOST_SEPARATE:g} %: "
                    "above, 'bruggeman' may suit better",
                )
            )
    return warnings


MOST_SEPARATE = 0.3
"""Share of the volume up to which inclusions count as separate: common practice, no source."""


def _unsuitable(
    document: Document,
    name: str,
    values: Sequence[complex],
    wavelengths_um: Sequence[float],
    medium: tuple[float, ...] | None,
) -> list[Problem]:
    problems = []
    path = ("materials", name)
    pairs = list(zip(wavelengths_um, values, strict=True))
    # A permittivity of zero is refused too: the harmonic mean in cut cells divides by it.
    metallic = [(w, m) for w, m in pairs if (m * m).real <= 0.0]
    if metallic:
        wavelength, index = metallic[0]
        message = (
            f"materials.{name} is metallic at {listed([w for w, _ in metallic])}: "
            "the real part of its permittivity, n^2 - k^2, is not positive"
        )
        found = f"n = {index.real:g}, k = {index.imag:g} at {wavelength:g} um"
        hint = (
            "give a material with n above k: the averaging of permittivity in the cells "
            "that a boundary cuts is not reliable for metals"
        )
        problems.append(document.problem(path, message, found, hint, at_key=True))
    hosts = zip(pairs, medium or (), strict=medium is not None)
    invisible = [(w, m) for (w, m), host in hosts if m == host]
    if invisible:
        message = (
            f"materials.{name} has the index of the medium at {listed([w for w, _ in invisible])}"
        )
        found = f"n = {invisible[0][1].real:g}, k = 0"
        hint = "give another index: a particle like this scatters nothing"
        problems.append(document.problem(path, message, found, hint, at_key=True))
    return problems
