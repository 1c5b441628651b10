"""The configuration as a pydantic model, one class a section.

Descriptions, units and bounds stand here and nowhere else: messages, the JSON schema and
the reference page are made from them.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Annotated, Literal

from pydantic import field_validator, model_validator

from scatterloom.campaign.bodies import advice, body, shares
from scatterloom.campaign.fillings import Coating, Inclusions, Layer, check_layers
from scatterloom.campaign.geometry import extents
from scatterloom.campaign.grids import AngleGrid, SizeGrid, ascending
from scatterloom.campaign.materials import DENSITY_ADVICE, Material, Medium, density
from scatterloom.campaign.orientations import Orientation
from scatterloom.campaign.populations import Population
from scatterloom.campaign.sections import NAME_FORM, Name, Section, check_names, setting, wrong
from scatterloom.campaign.shapes import Shape
from scatterloom.campaign.singles import SingleSolve

Wavelength = Annotated[float, setting("One wavelength.", unit="um", ge=1e-3, le=1e6)]


class Particle(Section):
    """A shape made of a material, perhaps coated with another one."""

    name: Name = setting("Name of the particle, a coordinate of the table.", form=NAME_FORM)
    material: str = setting(
        "One of the keys under `materials`; of a coated particle that of the core.",
        form="the name of a material under 'materials'",
    )
    shape: Shape = setting("Shape of the particle; a core has the same shape.")
    coating: Coating | None = setting(
        "Coating around the core; sizes are those of the whole particle, coating included.", None
    )
    layers: list[Layer] = setting(
        "Layers around the core, from outside inwards, instead of one coating.", [], max_length=10
    )
    inclusions: list[Inclusions] = setting(
        "Spheres of other materials or pores within the particle. Its size is the volume of what "
        "is left without pores.",
        [],
        max_length=10,
    )

    density_g_cm3: float | None = setting(
        "Density of the particle, for results per mass; from those of its materials if missing.",
        None,
        unit="g cm-3",
        ge=0.001,
        le=30.0,
        advice=DENSITY_ADVICE,
    )

    @model_validator(mode="after")
    def _check(self) -> Particle:
        if self.coating is not None and self.coating.material == self.material:
            raise wrong(
                f"core and coating are both of '{self.material}'",
                "give the coating another material, or leave it out",
                *("coating", "material"),
            )
        check_layers(self.layers)
        given = [name for name in ("coating", "layers", "inclusions") if getattr(self, name)]
        if len(given) > 1:
            raise wrong(
                f"both {given[0]} and {given[1]} are given",
                "give one of 'coating', 'layers' and 'inclusions'; a particle cannot have several",
                given[1],
            )
        if not hasattr(self.shape, "content"):  # files are read later
            self._check_body()
        return self

    def _check_body(self) -> None:
        spec, _ = body(self)
        try:
            extents(spec)
        except ValueError as error:
            culprit = {"filled": "inclusions", "layered": "layers" if self.layers else "coating"}
            raise wrong(str(error), advice(spec), culprit.get(spec["kind"], "shape")) from error

    @property
    def materials(self) -> tuple[str, ...]:
        """Names of the materials from outside inwards; others as they are listed."""
        if self.coating is not None:
            return self.coating.material, self.material
        layers = tuple(layer.material for layer in self.layers)
        held = [group.material for group in self.inclusions if group.material is not None]
        others = tuple(name for name in dict.fromkeys(held) if name != self.material)
        return (*layers, self.material, *others, *self.more_materials)

    @property
    def more_materials(self) -> tuple[str, ...]:
        """Names of materials that the shape brings beside that of the particle."""
        return tuple(getattr(self.shape, "more_materials", ()))


class Sizes(Section):
    """Sizes of the sphere of equal volume: exactly one of the two keys."""

    radius_um: SizeGrid | None = setting(
        "Radii in um, a list or a rule: the same radii at every wavelength.", None
    )
    size_parameter: SizeGrid | None = setting(
        "Size parameters 2 pi r n / wavelength, with the index n of the medium, a list or a "
        "rule: the same at every wavelength.",
        None,
    )

    @field_validator("radius_um", "size_parameter")
    @classmethod
    def _check_list(cls, value: SizeGrid | None) -> SizeGrid | None:
        if isinstance(value, list):
            ascending("sizes", value)
        return value

    @model_validator(mode="after")
    def _check(self) -> Sizes:
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


class AccuracyGoal(Section):
    """What the user asks; lattices, tolerances and directions are chosen to meet it."""

    f11_relative: float = setting(
        "Half width (95 %) of F11 allowed, relative, as root mean square over scattering angle.",
        0.02,
        unit="1",
        ge=1e-3,
        le=0.5,
    )
    ratio_absolute: float = setting(
        "Half width (95 %) of each ratio Fij/F11 allowed, absolute, as root mean square over "
        "scattering angle.",
        0.01,
        unit="1",
        ge=1e-3,
        le=0.2,
    )
    efficiency_relative: float = setting(
        "Half width (95 %) of extinction and scattering efficiency allowed, relative.",
        0.005,
        unit="1",
        ge=5e-4,
        le=0.2,
    )


class Solver(Section):
    """Expert overrides; leave them out unless you know why."""

    levels: list[Annotated[int, setting("Cells across.", unit="1", ge=8, le=256)]] | None = setting(
        "Cells across the longest axis on each lattice level, coarse to fine, even numbers; "
        "chosen from the accuracy if missing.",
        None,
        min_length=2,
        max_length=3,
    )
    anchor_spacing: float | None = setting(
        "Largest gap in size parameter between sizes that are solved from nothing.",
        None,
        unit="1",
        ge=1e-3,
        le=10.0,
    )
    tolerance: float | None = setting(
        "Relative error of the transition matrix at which a solve stops.",
        None,
        unit="1",
        ge=1e-8,
        le=1e-2,
    )
    job_seconds: float = setting(
        "Predicted time of one job; smaller cases are put together up to it, in small "
        "campaigns to less. Never alters a result.",
        1200.0,
        unit="s",
        ge=1.0,
        le=86_400.0,
    )
    case_reuse: bool = setting(
        "Whether cases solved by other campaigns in the same folder of results are taken from "
        "the case library instead of being solved again. The environment variable "
        "SCATTERLOOM_CASE_REUSE (on or off) goes first.",
        True,
    )
    keep_transitions: bool = setting(
        "Whether the transition matrices of all cases are kept, so that distributions of "
        "orientation can be added later without solving again; kept anyway where `orientations` "
        "names some.",
        False,
    )
    memory_gib: float | None = setting(
        "Memory allowed to one job. Of a case that needs more, search directions go to the disk; "
        "one that needs more even so is recorded as failed before it starts. Nine tenths of the "
        "machine's memory if missing.",
        None,
        unit="GiB",
        ge=0.1,
        le=1e5,
    )
    fields_gib: float | None = setting(
        "Disk space for the solved fields that jobs pass to each other; beyond it sizes start "
        "from nothing. No limit if missing. Alters no result beyond the solver's tolerance.",
        None,
        unit="GiB",
        ge=0.0,
        le=1e6,
    )
    case_minutes: float | None = setting(
        "Time allowed to one case. A case that takes longer is recorded as failed; no limit "
        "if missing.",
        None,
        unit="min",
        ge=0.01,
        le=1e6,
    )
    checkpoint_minutes: float = setting(
        "Time between savings of the best iterate of a case that takes long: what a kill can "
        "lose at most.",
        5.0,
        unit="min",
        ge=0.0,
        le=1440.0,
    )

    @field_validator("levels")
    @classmethod
    def _check_levels(cls, value: list[int] | None) -> list[int] | None:
        for position, cells in enumerate(value or []):
            if cells % 2:
                raise wrong(f"{cells} is odd", "give even numbers of cells", position)
        ascending("levels", value or [])
        return value


class Exchange(Section):
    """What the files for radiative transfer hold."""

    streams: int = setting(
        "Number of streams, an even number: the delta-M scaled series has as many terms.",
        16,
        unit="1",
        ge=2,
        le=1000,
    )

    @field_validator("streams")
    @classmethod
    def _check_streams(cls, value: int) -> int:
        if value % 2:
            raise wrong(f"{value} is odd", "give an even number of streams")
        return value


class Provenance(Section):
    """Who made the table and how it may be used; copied into its attributes (ACDD 1.3)."""

    creator: str | None = setting("Person or group that made the table.", None, min_length=1)
    institution: str | None = setting("Institution of the creator.", None, min_length=1)
    license: str | None = setting("Licence of the table, best an SPDX name.", None, min_length=1)
    summary: str | None = setting("A paragraph on what the table is for.", None, min_length=1)
    keywords: list[Annotated[str, setting("A keyword.", min_length=1)]] | None = setting(
        "Keywords.", None, min_length=1
    )
    references: str | None = setting("Papers or data to cite.", None, min_length=1)
    acknowledgement: str | None = setting("Whom to thank.", None, min_length=1)


class CampaignModel(Section):
    """A campaign: the table to be filled."""

    campaign: str = setting(
        "Name of the campaign; its results go into a folder of this name.",
        pattern=r"^[a-z0-9][a-z0-9_-]{0,62}$",
        form="a name of at most 63 lower-case letters, digits, '-' and '_'",
    )
    title: str = setting("One line for figures and reports.", min_length=1, max_length=200)
    wavelengths_um: list[Wavelength] = setting(
        "Wavelengths in vacuum, ascending.", min_length=1, max_length=10_000
    )
    medium: Medium = setting("The host medium; vacuum if missing.", Medium())
    materials: dict[str, Material] = setting("Optical constants by name.", min_length=1)
    particles: list[Particle] = setting("Particles of the table.", min_length=1, max_length=10_000)
    sizes: Sizes = setting("Sizes of the sphere of equal volume.")
    angles_deg: AngleGrid = setting(
        "Scattering angles, a list or a rule; editing them never solves anything again."
    )
    orientation: Literal["random"] = setting(
        "Orientation of the particles in the main table.", "random"
    )
    accuracy: AccuracyGoal = setting("Accuracy asked; the defaults suit most uses.", AccuracyGoal())
    orientations: list[Orientation] = setting(
        "Distributions of orientation beside the random one; each makes a table of its own.",
        [],
        max_length=100,
    )
    populations: list[Population] = setting("Mixtures for the bulk table.", [], max_length=1000)
    single_solves: list[SingleSolve] = setting(
        "Large particles lit from few directions, each solved by itself.", [], max_length=1000
    )
    solver: Solver = setting("Expert overrides.", Solver())
    exchange: Exchange = setting("Files for radiative transfer.", Exchange())
    provenance: Provenance = setting("Origin and licence of the table.", Provenance())

    def densities(self) -> dict[str, float | None]:
        """Return the density [g cm-3] of every particle by name, None where not stated."""
        stated = {name: density(name, self.materials) for name in self.materials}

        def of_particle(particle: Particle) -> float | None:
            found = [stated.get(name) for name in particle.materials]
            if particle.density_g_cm3 is not None or len(found) == 1:
                return particle.density_g_cm3 or found[0]
            known = [value for value in found if value is not None]
            if len(known) < len(found):
                return None
            coating = particle.coating
            if coating is not None and coating.thickness_fraction is None:
                core = coating.core_scale**3
                return core * known[1] + (1.0 - core) * known[0]
            parts = shares(body(particle)[0])
            return math.fsum(p * value for p, value in zip(parts, known, strict=True))

        return {particle.name: of_particle(particle) for particle in self.particles}

    @field_validator("wavelengths_um")
    @classmethod
    def _check_wavelengths(cls, value: list[float]) -> list[float]:
        ascending("wavelengths_um", value)
        return value

    @field_validator("angles_deg")
    @classmethod
    def _check_angles(cls, value: AngleGrid) -> AngleGrid:
        if isinstance(value, list):
            ascending("angles_deg", value)
        return value

    @field_validator("materials")
    @classmethod
    def _check_materials(cls, value: dict[str, Material]) -> dict[str, Material]:
        check_names(list(value))
        return value


def with_contents(model: CampaignModel, contents: Mapping[int, str]) -> CampaignModel:
    """Write what the files of shapes hold into the model, by the particle's place in the list."""
    particles = list(model.particles)
    for position, digest in contents.items():
        particle = particles[position]
        shape = particle.shape.model_copy(update={"content": digest})
        particles[position] = particle.model_copy(update={"shape": shape})
    return model.model_copy(update={"particles": particles})
