"""Load a campaign file: read, check everything at once, merge the defaults."""

from __future__ import annotations

import io
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydantic import TypeAdapter, ValidationError
from ruamel.yaml import YAML

from scatterloom.campaign import crosscheck, database, optics
from scatterloom.campaign.complaints import complaints
from scatterloom.campaign.document import Document, read
from scatterloom.campaign.file_shapes import named_files
from scatterloom.campaign.grids import grid_values
from scatterloom.campaign.model import CampaignModel, with_contents
from scatterloom.campaign.size_tables import read_size_tables, with_points
from scatterloom.campaign.spectra import Spectrum
from scatterloom.errors import BadInput, Problem
from scatterloom.solids import kept

KEPT_SOLIDS = "solids"
"""Folder beside a kept campaign with the files of its shapes."""


@dataclass(frozen=True)
class Campaign:
    """A checked campaign.

    Attributes
    ----------
    path : Path
        The campaign file.
    model : CampaignModel
        Its content with all defaults filled in.
    indices : mapping of str to tuple of complex
        Index n + ik of each material in use, one value a wavelength (not relative).
    medium_index : tuple of float
        Index of the host medium, one value a wavelength.
    warnings : tuple of Problem
        What is allowed but probably not meant.
    """

    path: Path
    model: CampaignModel
    indices: Mapping[str, tuple[complex, ...]]
    medium_index: tuple[float, ...]
    warnings: tuple[Problem, ...]
    spectra: Mapping[str, Spectrum] = field(repr=False)

    @property
    def name(self) -> str:
        """Name of the campaign and of its folder of results."""
        return self.model.campaign

    @property
    def contents(self) -> tuple[str, ...]:
        """Digests of the files that shapes were read from, in order of first appearance."""
        found = (getattr(particle.shape, "content", None) for particle in self.model.particles)
        return tuple(dict.fromkeys(digest for digest in found if digest is not None))

    @property
    def angles_deg(self) -> NDArray[np.float64]:
        """Scattering angles [deg], ascending, shape (n_angle,)."""
        return np.array([float(angle) for angle in grid_values(self.model.angles_deg)])

    def merged_yaml(self) -> str:
        """Return the campaign as a YAML file that stands alone.

        Defaults are written out and tables of optical constants are copied into it, so it
        can be run anywhere and gives the same cases. Files of shapes are named as they are
        kept in a folder beside it.
        """
        content: dict[str, Any] = self.model.model_dump(by_alias=True, exclude_none=True)
        lines = [f"# Campaign {self.name} with all defaults, as it was run."]
        for name, spectrum in self.spectra.items():
            material = content["materials"][name]
            if "table" in material:
                origin = repr(Path(material.pop("table")).name)
            else:
                origin = database.described(material.pop("database"))
                material.pop("k", None)
            lines.append(f"# The spectrum of '{name}' was read from {origin}.")
            content["materials"][name]["spectrum"] = [
                {"wavelength_um": wavelength, "n": n, "k": k}
                for wavelength, n, k in zip(
                    spectrum.wavelength_um, spectrum.n, spectrum.k, strict=True
                )
            ]
        for particle in content["particles"]:
            digest = particle["shape"].get("content")
            if digest is not None:
                origin, own = Path(particle["shape"]["file"]).name, kept.file_name(digest)
                if origin != own:
                    lines.append(f"# The shape of '{particle['name']}' was read from {origin!r}.")
                particle["shape"]["file"] = f"{KEPT_SOLIDS}/{own}"
        yaml = YAML(typ="safe", pure=True)
        yaml.default_flow_style = None
        yaml.sort_base_mapping_type_on_output = False  # type: ignore[assignment]
        yaml.allow_unicode = True
        yaml.width = 100
        stream = io.StringIO()
        yaml.dump(content, stream)
        return "\n".join(lines) + "\n" + stream.getvalue()


def load(path: str | Path) -> Campaign:
    """Load and check a campaign file.

    Raises
    ------
    BadInput
        With all problems of the file and of the tables it names, in order of position.
    """
    document = read(Path(path), str(path))
    problems: list[Problem] = []
    broken: set[str | int] = set()
    model: CampaignModel | None = None
    try:
        model = CampaignModel.model_validate(document.tree)
    except ValidationError as error:
        problems += complaints(error, document)
        broken = {detail["loc"][0] for detail in error.errors() if detail["loc"]}
    sections = _sections(model, document, broken)
    problems += crosscheck.check_names(document)
    spectra, faults = optics.read_tables(document, Path(path).parent)
    problems += faults
    size_tables, faults = read_size_tables(document, Path(path).parent)
    problems += faults
    contents, faults, doubts = _shape_files(document, Path(path).parent)
    problems += faults
    constants = _constants(document, sections, spectra)
    problems += constants.problems
    if {"particles", "wavelengths_um", "sizes"} <= sections.keys():
        problems += crosscheck.check_extent(
            document,
            len(sections["particles"]),
            len(sections["wavelengths_um"]),
            sections["sizes"],
        )
    if model is not None and not problems:
        model = with_contents(model, contents)
        problems += crosscheck.check_bodies(document, model)
        problems += crosscheck.check_densities(document, model)
        problems += crosscheck.check_single_wavelengths(document, model)
    if problems or model is None:
        raise BadInput(_in_order(problems, document))
    model = with_points(model, size_tables)
    assert constants.medium is not None  # else there were problems
    warnings = [
        *doubts,
        *constants.warnings,
        *optics.mixing_warnings(document, model.materials),
        *crosscheck.unused_materials(document),
        *crosscheck.doubtful_wavelengths(document, model.wavelengths_um),
        *crosscheck.check_coverage(
            document, model.populations, model.sizes, model.wavelengths_um, constants.medium
        ),
    ]
    spectra = {**spectra, **constants.looked_up}
    told = tuple(_in_order(warnings, document))
    return Campaign(Path(path), model, constants.indices, constants.medium, told, spectra)


def _shape_files(
    document: Document, folder: Path
) -> tuple[dict[int, str], list[Problem], list[Problem]]:
    if not any(named_files(document)):
        return {}, [], []
    # Here, since it loads the geometry libraries.
    from scatterloom.campaign.shape_files import read_shape_files

    return read_shape_files(document, folder)


def _sections(
    model: CampaignModel | None, document: Document, broken: set[str | int]
) -> dict[str, Any]:
    """Return the sections that are sound, so that checks between them can go on."""
    if model is not None:
        return {name: getattr(model, name) for name in CampaignModel.model_fields}
    sections = {}
    for name, info in CampaignModel.model_fields.items():
        if name in broken:
            continue
        if name not in document.tree:
            sections[name] = info.get_default(call_default_factory=True)
        elif name in ("wavelengths_um", "medium", "materials", "particles", "sizes"):
            kind: Any = info.annotation
            sections[name] = TypeAdapter(kind).validate_python(document.tree[name])
    return sections


def _constants(
    document: Document, sections: dict[str, Any], spectra: Mapping[str, Spectrum]
) -> optics.Constants:
    if not {"materials", "wavelengths_um"} <= sections.keys():
        return optics.Constants({}, None, {}, [], [])
    materials = sections["materials"]
    used = list(materials)
    if "particles" in sections:
        wanted = {name for particle in sections["particles"] for name in particle.materials}
        used = [name for name in materials if name in wanted]
    return optics.resolve(
        document, materials, used, spectra, sections["wavelengths_um"], sections.get("medium")
    )


def _in_order(problems: list[Problem], document: Document) -> list[Problem]:
    def order(problem: Problem) -> tuple[bool, str, int, int]:
        elsewhere = problem.file != document.file
        return elsewhere, problem.file, problem.line or 0, problem.column or 0

    return sorted(problems, key=order)
