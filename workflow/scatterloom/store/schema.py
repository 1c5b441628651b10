"""The variables of a table: the one place that says their names, dimensions and attributes."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

from scatterloom.scattering.error_bars import BUDGET
from scatterloom.scattering.record import (
    FAILED,
    MISSING,
    SOLVED,
    SOLVED_WITH_WARNING,
    STATUS_MEANINGS,
)

GRID = ("particle", "wavelength", "size")
MATRIX = (*GRID, "angle", "row", "col")
DIMENSIONS = MATRIX

COVERAGE_PERCENT = 95
COVERAGE = (
    f"half width of the interval expected to hold the exact value in {COVERAGE_PERCENT} % of "
    "cases; it covers lattice, solver and truncation errors"
)
MATRIX_COMMENT = (
    "Stokes parameters (I, Q, U, V); signs of elements 12 and 34 as in Bohren & Huffman (1983), "
    "so a small sphere has a negative element 12 at 90 degrees; orientation average; normalized "
    "so that the mean of element 11 over the sphere is 1"
)
HALF_WIDTH = {"coverage_percent": COVERAGE_PERCENT, "kind": "half_width"}
EFFICIENCY_COMMENT = "cross section divided by that of the sphere of equal volume"


@dataclass(frozen=True)
class Variable:
    """One variable of the table.

    Attributes
    ----------
    name, dims, dtype : str, tuple of str, str
        `dtype` is a numpy code, or "string".
    long_name, units : str
        Units in UDUNITS notation, "1" for pure numbers, "" for text.
    standard_name : str or None
        Only where the CF table has a name with exactly this meaning.
    comment : str or None
        What a reader must know to use the numbers.
    error : bool
        Whether a companion `NAME_error` holds its half width.
    companions : tuple of str
        Further variables that say how good the values are.
    content : str
        Kind of content in the words of ACDD 1.3: "modelResult", "coordinate" or
        "qualityInformation"; found from the name and dimensions if "".
    extra : dict
        Further attributes.
    """

    name: str
    dims: tuple[str, ...]
    dtype: str
    long_name: str
    units: str = "1"
    standard_name: str | None = None
    comment: str | None = None
    error: bool = False
    companions: tuple[str, ...] = ()
    content: str = ""
    extra: dict[str, Any] = field(default_factory=dict)

    @property
    def fill_value(self) -> float | int | str:
        """What an untouched cell reads as; integers count on `status` to be understood."""
        if self.dtype == "string":
            return ""
        return float("nan") if self.dtype.startswith("f") else 0

    def attributes(self) -> dict[str, Any]:
        """Attributes as CF 1.11 wants them."""
        attributes: dict[str, Any] = {
            "long_name": self.long_name,
            "coverage_content_type": self.content or self._usual_content(),
        }
        if self.units:
            attributes["units"] = self.units
        if self.standard_name:
            attributes["standard_name"] = self.standard_name
        if self.comment:
            attributes["comment"] = self.comment
        if self.error:
            linked = (f"{self.name}_error", *self.companions, "status")
            attributes["ancillary_variables"] = " ".join(linked)
        if self.dims[:3] == GRID:
            attributes["coordinates"] = " ".join(AUXILIARY)
        return attributes | self.extra

    def _usual_content(self) -> str:
        if self.dims == (self.name,) or self.name in AUXILIARY:
            return "coordinate"
        if self.name.endswith("_error") or self.name in QUALITY:
            return "qualityInformation"
        return "modelResult"


QUALITY = (
    "status",
    "warning_flags",
    "residual",
    *(f"f11_error_{part}" for part in BUDGET),
    "extrapolation_disagreement",
)
AUXILIARY = ("size_parameter", "radius_um")
"""Coordinates that are no dimension: they depend on wavelength and size."""

COORDINATES = (
    Variable("particle", ("particle",), "string", "name of the particle", units=""),
    Variable(
        "wavelength",
        ("wavelength",),
        "f8",
        "wavelength in vacuum",
        "um",
        standard_name="radiation_wavelength",
    ),
    Variable("size", ("size",), "i4", "position in the list of sizes, from 0"),
    Variable(
        "angle",
        ("angle",),
        "f8",
        "scattering angle",
        "degree",
        standard_name="scattering_angle",
        extra={"valid_min": 0.0, "valid_max": 180.0},
    ),
    Variable("row", ("row",), "i4", "row of the scattering matrix, from 1"),
    Variable("col", ("col",), "i4", "column of the scattering matrix, from 1"),
    Variable(
        "size_parameter",
        GRID[1:],
        "f8",
        "size parameter of the sphere of equal volume",
        comment="2 pi radius n_medium / wavelength",
    ),
    Variable("radius_um", GRID[1:], "f8", "radius of the sphere of equal volume", "um"),
)

SCALARS = (
    Variable(
        "extinction_efficiency",
        GRID,
        "f8",
        "extinction efficiency",
        comment=EFFICIENCY_COMMENT,
        error=True,
    ),
    Variable(
        "scattering_efficiency",
        GRID,
        "f8",
        "scattering efficiency",
        comment=EFFICIENCY_COMMENT,
        error=True,
    ),
    Variable(
        "absorption_efficiency",
        GRID,
        "f8",
        "absorption efficiency",
        comment=EFFICIENCY_COMMENT,
        error=True,
    ),
    Variable(
        "asymmetry_parameter",
        GRID,
        "f8",
        "mean cosine of the scattering angle",
        error=True,
        extra={"valid_min": -1.0, "valid_max": 1.0},
    ),
    Variable(
        "single_scattering_albedo",
        GRID,
        "f8",
        "scattering efficiency divided by extinction efficiency",
        error=True,
    ),
)

SCATTERING_MATRIX = Variable(
    "scattering_matrix",
    MATRIX,
    "f8",
    "scattering (Mueller) matrix, orientation average",
    comment=MATRIX_COMMENT,
    error=True,
    companions=("scattering_matrix_ratio_error",),
)

RATIO_ERROR = Variable(
    "scattering_matrix_ratio_error",
    MATRIX,
    "f4",
    f"{COVERAGE_PERCENT} % half width of scattering_matrix divided by its element 11",
    comment="The values Fij/F11 are not stored: divide scattering_matrix by its element 11. Errors "
    "of an element and of element 11 go together, so these half widths are smaller than what "
    "scattering_matrix_error suggests. Element 11 over itself is exactly 1; in its place stands "
    f"the relative half width of element 11. A half width is the {COVERAGE}",
    extra=HALF_WIDTH,
)

INDICES = (
    Variable(
        "refractive_index_n",
        GRID[:2],
        "f8",
        "real part of the refractive index relative to the medium",
        comment="of a coated particle that of the coating",
    ),
    Variable(
        "refractive_index_k",
        GRID[:2],
        "f8",
        "imaginary part of the refractive index relative to the medium",
        comment="positive for absorption, with the time factor exp(-i w t); of a coated "
        "particle that of the coating",
    ),
    Variable(
        "core_refractive_index_n",
        GRID[:2],
        "f8",
        "real part of the refractive index of the core relative to the medium",
        comment="of several materials beside the first that which absorbs most; missing "
        "where there is one material",
    ),
    Variable(
        "core_refractive_index_k",
        GRID[:2],
        "f8",
        "imaginary part of the refractive index of the core relative to the medium",
        comment="of several materials beside the first that which absorbs most; missing "
        "where there is one material",
    ),
)

DIAGNOSTICS = (
    Variable(
        "status",
        GRID,
        "i4",
        "state of the case",
        units="",
        extra={
            "standard_name": "status_flag",
            "flag_values": [MISSING, SOLVED, SOLVED_WITH_WARNING, FAILED],
            "flag_meanings": " ".join(STATUS_MEANINGS),
        },
    ),
    Variable("warning_flags", GRID, "i4", "warnings raised for the case", units=""),
    Variable("lattice_cells", GRID, "i4", "occupied cells of the finest lattice"),
    Variable("wave_count", GRID, "i4", "incident waves solved for"),
    Variable(
        "products",
        GRID,
        "f8",
        "matrix products for each incident wave, mean over the lattices",
        comment="one product of the interaction matrix with a block counts once for each wave",
    ),
    Variable(
        "cold_products_estimate",
        GRID,
        "f8",
        "products for each incident wave that a solve from zero would take",
    ),
    Variable("residual", GRID, "f8", "largest relative residual of the accepted solution"),
    *(
        Variable(
            f"f11_error_{part}",
            GRID,
            "f8",
            f"part of the relative half width of F11 that is due to {part}",
            comment="root mean square over scattering angle; the parts add in squares",
        )
        for part in BUDGET
    ),
    Variable(
        "extrapolation_disagreement",
        GRID,
        "f8",
        "difference of rival extrapolations of F11 relative to the extrapolation step",
        comment="well below one where the error follows its law in the lattice spacing",
    ),
    Variable("wall_seconds", GRID, "f8", "time spent on the case", "s"),
)

VOLATILE = frozenset({"wall_seconds"})
"""Variables that differ between two runs of the same computation."""


def error_variable(variable: Variable) -> Variable:
    """Return the companion that holds the half widths of `variable`.

    The half widths of matrices are single precision: they are known to a digit or two.
    """
    return Variable(
        f"{variable.name}_error",
        variable.dims,
        "f4" if variable.dims == MATRIX else "f8",
        f"{COVERAGE_PERCENT} % half width of {variable.long_name}",
        variable.units,
        comment=COVERAGE,
        extra=HALF_WIDTH,
    )


def matrices() -> tuple[Variable, ...]:
    """Scattering matrix and its half widths, in the order of `CaseRecord.scattering_matrix`."""
    return SCATTERING_MATRIX, error_variable(SCATTERING_MATRIX), RATIO_ERROR


def variables(
    warning_flags: Mapping[str, tuple[int, str]] | None = None,
) -> tuple[Variable, ...]:
    """Every variable of a table, coordinates first.

    Parameters
    ----------
    warning_flags : mapping of str to (int, str)
        Bit and meaning of the warnings by name, written as CF flags.
    """
    listed: list[Variable] = [*COORDINATES]
    listed += matrices()
    for variable in SCALARS:
        listed += [variable, error_variable(variable)]
    listed += [*INDICES, *DIAGNOSTICS]
    if warning_flags:
        attributes = {
            "flag_masks": [bit for bit, _ in warning_flags.values()],
            "flag_meanings": " ".join(warning_flags),
        }
        comment = "; ".join(f"{name}: {meaning}" for name, (_, meaning) in warning_flags.items())
        listed = [
            replace(v, comment=comment, extra=attributes) if v.name == "warning_flags" else v
            for v in listed
        ]
    return tuple(listed)
