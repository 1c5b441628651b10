"""The refractive index of every material at every wavelength, checked."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path

from scatterloom.campaign.document import Document
from scatterloom.campaign.model import Material
from scatterloom.campaign.spectra import Spectrum, read_spectrum
from scatterloom.errors import BadInput, Problem


def read_tables(document: Document, folder: Path) -> tuple[dict[str, Spectrum], list[Problem]]:
    """Read the table of every material that names one; `folder` is that of the campaign file.

    Works on the raw file, so that faults of tables are shown together with all others.
    """
    materials = document.tree.get("materials")
    spectra: dict[str, Spectrum] = {}
    problems: list[Problem] = []
    for name, entry in materials.items() if isinstance(materials, dict) else ():
        table = entry.get("table") if isinstance(entry, dict) else None
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


def spectrum_of(material: Material) -> Spectrum | None:
    """Return the spectrum written out in the configuration, if that is how it is given."""
    if material.spectrum is None:
        return None
    rows = [(point.wavelength_um, point.n, point.k) for point in material.spectrum]
    wavelength, n, k = zip(*rows, strict=True)
    return Spectrum(wavelength, n, k)


def resolve(
    document: Document,
    materials: Mapping[str, Material],
    used: Iterable[str],
    spectra: Mapping[str, Spectrum],
    wavelengths_um: Sequence[float],
    medium_index: float | None,
) -> tuple[dict[str, tuple[complex, ...]], list[Problem]]:
    """Return the index n + ik of each used material at each wavelength, and what is wrong.

    A material whose table could not be read is left out: its faults are reported already.
    """
    indices: dict[str, tuple[complex, ...]] = {}
    problems: list[Problem] = []
    for name in used:
        material = materials[name]
        if material.n is not None and material.k is not None:
            values = [complex(material.n, material.k)] * len(wavelengths_um)
        else:
            spectrum = spectra.get(name) or spectrum_of(material)
            if spectrum is None:
                continue
            outside = [w for w in wavelengths_um if not spectrum.covers(w)]
            if outside:
                problems.append(_uncovered(document, name, material, spectrum, outside))
                continue
            values = [complex(*spectrum.at(w)) for w in wavelengths_um]
        indices[name] = tuple(values)
        problems += _unsuitable(document, name, values, wavelengths_um, medium_index)
    return indices, problems


def _uncovered(
    document: Document, name: str, material: Material, spectrum: Spectrum, outside: list[float]
) -> Problem:
    key = "table" if material.table is not None else "spectrum"
    rows = spectrum.wavelength_um
    return document.problem(
        ("materials", name, key),
        f"materials.{name}.{key} does not cover {_listed(outside)}",
        f"rows from {rows[0]:g} to {rows[-1]:g} um",
        "add rows or drop these wavelengths: optical constants are never extrapolated",
    )


def _unsuitable(
    document: Document,
    name: str,
    values: list[complex],
    wavelengths_um: Sequence[float],
    medium_index: float | None,
) -> list[Problem]:
    problems = []
    path = ("materials", name)
    pairs = list(zip(wavelengths_um, values, strict=True))
    # A permittivity of zero is refused too: the harmonic mean in cut cells divides by it.
    metallic = [(w, m) for w, m in pairs if (m * m).real <= 0.0]
    if metallic:
        wavelength, index = metallic[0]
        message = (
            f"materials.{name} is metallic at {_listed([w for w, _ in metallic])}: "
            "the real part of its permittivity, n^2 - k^2, is not positive"
        )
        found = f"n = {index.real:g}, k = {index.imag:g} at {wavelength:g} um"
        hint = (
            "give a material with n above k: the averaging of permittivity in the cells "
            "that a boundary cuts is not reliable for metals"
        )
        problems.append(document.problem(path, message, found, hint, at_key=True))
    invisible = [w for w, m in pairs if m == medium_index]
    if invisible:
        message = f"materials.{name} has the index of the medium at {_listed(invisible)}"
        found = f"n = {medium_index:g}, k = 0"
        hint = "give another index: a particle like this scatters nothing"
        problems.append(document.problem(path, message, found, hint, at_key=True))
    return problems


def _listed(wavelengths: Sequence[float]) -> str:
    text = ", ".join(f"{w:g}" for w in wavelengths[:4])
    return text + (f" and {len(wavelengths) - 4} more" if len(wavelengths) > 4 else "") + " um"
