"""Checks between sections: names that must exist, and grids that must go together.

Checks of names work on the raw file and skip whatever is malformed, so that they can be
reported together with the faults of single sections.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from scatterloom.campaign.complaints import nearest
from scatterloom.campaign.document import Document, KeyPath
from scatterloom.campaign.grids import decimal, grid_values
from scatterloom.campaign.model import CampaignModel, Sizes
from scatterloom.campaign.populations import Population
from scatterloom.errors import Problem

MOST_CELLS = 1_000_000
"""Largest number of (particle, wavelength, size) cells in one campaign."""

LONGEST_USUAL_UM = 100.0
"""Wavelength [um] from which a warning asks whether nanometres are meant."""

WANTED_COVERAGE = 0.99
"""Part of a population's cross section below which a warning is given."""


def check_names(document: Document) -> list[Problem]:
    """Check that names are unique and that whatever is referred to exists."""
    tree = document.tree
    sections = ("particles", "populations", "orientations", "single_solves")
    problems = [problem for section in sections for problem in _repeated(document, section)]
    materials = tree.get("materials")
    particles = [name for _, name in _texts(document, "particles", "name")]
    if isinstance(materials, dict):
        for path, name in _materials(document):
            if name not in materials:
                message = f"material '{name}' is not defined under materials"
                hint = nearest(name, materials)
                problems.append(document.problem(path, message, document.show(path), hint))
    if particles:
        for position, entry in enumerate(_entries(document, "populations")):
            parts = entry.get("particles")
            for name in parts if isinstance(parts, dict) else ():
                if name not in particles:
                    path = ("populations", position, "particles", name)
                    message = f"particle '{name}' is not defined under particles"
                    hint = nearest(name, particles)
                    found = f"{name}: {document.show(path)}"
                    problems.append(document.problem(path, message, found, hint, at_key=True))
        for path, name in _texts(document, "single_solves", "particle"):
            if name not in particles:
                message = f"particle '{name}' is not defined under particles"
                hint = nearest(name, particles)
                problems.append(document.problem(path, message, document.show(path), hint))
        for position, entry in enumerate(_entries(document, "orientations")):
            given = entry.get("particles")
            for place, name in enumerate(given if isinstance(given, list) else ()):
                if isinstance(name, str) and name not in particles:
                    path = ("orientations", position, "particles", place)
                    message = f"particle '{name}' is not defined under particles"
                    hint = nearest(name, particles)
                    problems.append(document.problem(path, message, document.show(path), hint))
    return problems


def check_single_wavelengths(document: Document, model: CampaignModel) -> list[Problem]:
    """Check that single solves are at wavelengths of the campaign, where indices are known."""
    known = ", ".join(f"{w:g}" for w in model.wavelengths_um[:8])
    return [
        document.problem(
            ("single_solves", position, "wavelength_um"),
            f"single solve '{entry.name}' is at a wavelength that the campaign does not have",
            f"{entry.wavelength_um:g} um",
            f"give one of wavelengths_um: {known}",
        )
        for position, entry in enumerate(model.single_solves)
        if entry.wavelength_um not in model.wavelengths_um
    ]


def unused_materials(document: Document) -> list[Problem]:
    """Warn of materials that nothing is made of."""
    used = {name for _, name in _materials(document)}
    return [
        document.problem(
            ("materials", name),
            f"material '{name}' is not used by any particle",
            hint="remove it, or make a particle of it",
            at_key=True,
        )
        for name in document.tree["materials"]
        if name not in used
    ]


def doubtful_wavelengths(document: Document, wavelengths_um: Sequence[float]) -> list[Problem]:
    """Warn of wavelengths that look like nanometres."""
    return [
        document.problem(
            ("wavelengths_um", position),
            f"wavelength {wavelength:g} um is longer than infrared optics use",
            document.show(("wavelengths_um", position)),
            f"if these are nanometres, give {wavelength / 1000:g}",
        )
        for position, wavelength in enumerate(wavelengths_um)
        if wavelength >= LONGEST_USUAL_UM
    ]


def check_extent(
    document: Document, particles: int, wavelengths: int, sizes: Sizes
) -> list[Problem]:
    """Check that the table is not too large for one campaign."""
    key, grid = ("radius_um", sizes.radius_um)
    if grid is None:
        key, grid = ("size_parameter", sizes.size_parameter)
    assert grid is not None
    number = len(grid) if isinstance(grid, list) else grid.length()
    cells = particles * wavelengths * number
    if cells <= MOST_CELLS:
        return []
    message = f"the table has {cells} cells, more than {MOST_CELLS}"
    found = f"{particles} particles x {wavelengths} wavelengths x {number} sizes"
    hint = "split it into several campaigns, or take wider steps"
    return [document.problem(("sizes", key), message, found, hint)]


def check_coverage(
    document: Document,
    populations: Sequence[Population],
    sizes: Sizes,
    wavelengths_um: Sequence[float],
    medium_index: Sequence[float],
) -> list[Problem]:
    """Warn of populations that reach beyond the sizes of the table.

    Coverage is the part of the population's total cross section between the smallest and
    the largest radius, at the wavelength where it is least.
    """
    warnings = []
    for position, population in enumerate(populations):
        parts = [
            (population.area_fraction(low, high), wavelength, low, high)
            for wavelength, low, high in _radius_ranges(sizes, wavelengths_um, medium_index)
        ]
        fraction, wavelength, low, high = min(parts)
        if fraction < WANTED_COVERAGE:
            at = "" if sizes.size_parameter is None else f" at {wavelength:g} um"
            warnings.append(
                document.problem(
                    ("populations", position, "size"),
                    f"population '{population.name}' reaches beyond the sizes of the table{at}",
                    f"radii from {low:.4g} to {high:.4g} um hold {100 * fraction:.3g} % of its "
                    "cross section",
                    f"widen the sizes until they hold {100 * WANTED_COVERAGE:g} % of it",
                )
            )
    return warnings


def check_densities(document: Document, model: CampaignModel) -> list[Problem]:
    """Check that shares by mass have the density of every particle they name."""
    problems = []
    density = model.densities()
    for position, population in enumerate(model.populations):
        if population.shares_by != "mass":
            continue
        for name in population.particles:
            if density.get(name, 1.0) is None:
                path = ("populations", position, "particles", name)
                message = f"shares by mass need the density of particle '{name}'"
                hint = "give 'density_g_cm3' to the particle or to its material"
                problems.append(document.problem(path, message, hint=hint, at_key=True))
    return problems


def _radius_ranges(
    sizes: Sizes, wavelengths_um: Sequence[float], medium_index: Sequence[float]
) -> Iterator[tuple[float, float, float]]:
    if sizes.radius_um is not None:
        values = grid_values(sizes.radius_um)
        yield wavelengths_um[0], float(values[0]), float(values[-1])
        return
    assert sizes.size_parameter is not None
    values = grid_values(sizes.size_parameter)
    for wavelength, index in zip(wavelengths_um, medium_index, strict=True):
        scale = decimal(wavelength) / decimal(6.283185307179586 * index)
        yield wavelength, float(values[0] * scale), float(values[-1] * scale)


def _entries(document: Document, section: str) -> list[dict]:
    """Return the entries of a list of mappings; a malformed entry becomes an empty one."""
    entries = document.tree.get(section)
    if not isinstance(entries, list):
        return []
    return [entry if isinstance(entry, dict) else {} for entry in entries]


def _texts(document: Document, section: str, key: str) -> list[tuple[KeyPath, str]]:
    return [
        ((section, position, key), entry[key])
        for position, entry in enumerate(_entries(document, section))
        if isinstance(entry.get(key), str)
    ]


def _materials(document: Document) -> list[tuple[KeyPath, str]]:
    """Return every place that names a material: particles, coatings, the medium, mixtures."""
    found = _texts(document, "particles", "material")
    for position, entry in enumerate(_entries(document, "particles")):
        coating = entry.get("coating")
        name = coating.get("material") if isinstance(coating, dict) else None
        if isinstance(name, str):
            found.append((("particles", position, "coating", "material"), name))
    medium = document.tree.get("medium")
    if isinstance(medium, dict) and isinstance(medium.get("material"), str):
        found.append((("medium", "material"), medium["material"]))
    return found + _parts_of_mixtures(document)


def _parts_of_mixtures(document: Document) -> list[tuple[KeyPath, str]]:
    found: list[tuple[KeyPath, str]] = []
    materials = document.tree.get("materials")
    for owner, entry in materials.items() if isinstance(materials, dict) else ():
        mix = entry.get("mix") if isinstance(entry, dict) else None
        if not isinstance(mix, dict):
            continue
        if isinstance(mix.get("host"), str):
            found.append((("materials", owner, "mix", "host"), mix["host"]))
        inclusions = mix.get("inclusions")
        for name in inclusions if isinstance(inclusions, dict) else ():
            found.append((("materials", owner, "mix", "inclusions", name), name))
    return found


def _repeated(document: Document, section: str) -> list[Problem]:
    problems = []
    first: dict[str, int] = {}
    for path, name in _texts(document, section, "name"):
        # Case matters not: names become file names, also where "Ball" and "ball" are one file.
        if (folded := name.casefold()) in first:
            line = first[folded]
            message = f"{section} name '{name}' is given twice"
            hint = f"give every entry a name of its own; the first stands in line {line}"
            problems.append(document.problem(path, message, document.show(path), hint))
        else:
            first[folded] = document.marks[path].line
    return problems
