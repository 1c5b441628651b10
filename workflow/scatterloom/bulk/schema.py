"""The variables of a bulk table: names, dimensions and attributes."""

from __future__ import annotations

from scatterloom.store.schema import MATRIX_COMMENT, Variable, error_variable

GRID = ("population", "wavelength")
ANGLED = (*GRID, "angle")
MATRIX = (*ANGLED, "row", "col")
MIXTURE = ("population", "particle")

FLAGS = {
    "too_few_sizes": 1,
    "missing_sizes": 2,
    "cases_with_warning": 4,
    "truncated_by_table": 8,
    "coarse_size_grid": 16,
    "not_covered": 32,
}
"""Bits of `warning_flags`: what was wrong with the sizes that an average had to use."""

TRUNCATION_WARNING = 0.01
"""Share of extinction outside the table's sizes above which an average is flagged."""

TRUNCATION_REFUSED = 0.25
"""Share of extinction outside the table's sizes above which no average is given."""

QUADRATURE_WARNING = 0.01
"""Relative change of extinction on every other size above which an average is flagged."""

ERROR_MODEL = (
    "Half widths are sums of bounds: errors of the table taken as fully correlated over sizes, "
    "particles and matrix elements (they add linearly and do not average out), the larger change "
    "of the result when every other size is left out, and the estimated effect of the particles "
    "outside the table's sizes, which the values themselves leave out. Products, quotients and "
    "comparisons of two wavelengths add relative half widths linearly."
)


def _sections(kind: str) -> tuple[Variable, ...]:
    return (
        Variable(
            f"{kind}_cross_section",
            GRID,
            "f8",
            f"mean {kind} cross section of a particle",
            "um2",
            error=True,
        ),
        Variable(
            f"{kind}_efficiency",
            GRID,
            "f8",
            f"{kind} cross section of the population over its geometric cross section",
            comment="geometric cross section of the spheres of equal volume, all sizes",
            error=True,
        ),
        Variable(
            f"{kind}_per_volume",
            GRID,
            "f8",
            f"{kind} coefficient per volume concentration of particles",
            "um-1",
            comment="times a concentration in um3 cm-3 it gives a coefficient in Mm-1",
            error=True,
        ),
        Variable(
            f"{kind}_per_mass",
            GRID,
            "f8",
            f"{kind} coefficient per mass concentration of particles",
            "m2 g-1",
            comment="missing unless the density of every particle is stated",
            error=True,
        ),
    )


def _backscatter() -> tuple[Variable, ...]:
    return (
        Variable(
            "backscatter_cross_section",
            GRID,
            "f8",
            "mean differential scattering cross section of a particle at 180 degrees",
            "um2 sr-1",
            comment="scattering cross section times element 11 at 180 degrees, over 4 pi",
            error=True,
        ),
        Variable(
            "backscatter_per_volume",
            GRID,
            "f8",
            "backscatter coefficient per volume concentration of particles",
            "um-1 sr-1",
            comment="times a concentration in um3 cm-3 it gives a coefficient in Mm-1 sr-1",
            error=True,
        ),
        Variable(
            "backscatter_per_mass",
            GRID,
            "f8",
            "backscatter coefficient per mass concentration of particles",
            "m2 g-1 sr-1",
            comment="missing unless the density of every particle is stated",
            error=True,
        ),
    )


_VALUES = (
    Variable(
        "scattering_matrix",
        MATRIX,
        "f8",
        "scattering (Mueller) matrix of the population",
        comment=MATRIX_COMMENT,
        error=True,
    ),
    Variable(
        "scattering_matrix_ratio",
        MATRIX,
        "f8",
        "scattering matrix divided by its element 11",
        comment="its half widths are smaller than those of the elements suggest, since what "
        "scales all elements alike does not change it",
        error=True,
    ),
    *(v for kind in ("extinction", "scattering", "absorption") for v in _sections(kind)),
    *_backscatter(),
    Variable(
        "single_scattering_albedo",
        GRID,
        "f8",
        "scattering divided by extinction cross section",
        error=True,
    ),
    Variable("asymmetry_parameter", GRID, "f8", "mean cosine of the scattering angle", error=True),
    Variable(
        "lidar_ratio",
        GRID,
        "f8",
        "ratio of extinction to backscattering",
        "sr",
        comment="4 pi / (single-scattering albedo * element 11 at 180 degrees)",
        error=True,
    ),
    Variable(
        "linear_depolarization_ratio",
        GRID,
        "f8",
        "linear depolarization ratio at 180 degrees",
        comment="(F11 - F22)/(F11 + F22)",
        error=True,
    ),
    Variable(
        "circular_depolarization_ratio",
        GRID,
        "f8",
        "circular depolarization ratio at 180 degrees",
        comment="(F11 + F44)/(F11 - F44)",
        error=True,
    ),
    Variable(
        "degree_of_linear_polarization",
        ANGLED,
        "f8",
        "degree of linear polarization of scattered unpolarized light",
        comment="-F12/F11, positive across the scattering plane",
        error=True,
    ),
    Variable(
        "extinction_angstrom_exponent",
        GRID,
        "f8",
        "Angstrom exponent of extinction between this and the next wavelength",
        comment="-ln(C2/C1)/ln(w2/w1); missing at the last wavelength",
        error=True,
    ),
    Variable(
        "backscatter_angstrom_exponent",
        GRID,
        "f8",
        "Angstrom exponent of backscattering between this and the next wavelength",
        comment="-ln(C2/C1)/ln(w2/w1); missing at the last wavelength",
        error=True,
    ),
    Variable(
        "colour_ratio",
        GRID,
        "f8",
        "backscattering at the next wavelength over that at this one",
        comment="longer over shorter wavelength; missing at the last wavelength",
        error=True,
    ),
    Variable(
        "depolarization_spectral_ratio",
        GRID,
        "f8",
        "linear depolarization ratio at the next wavelength over that at this one",
        comment="longer over shorter wavelength; missing at the last wavelength and where "
        "depolarization vanishes within its half width",
        error=True,
    ),
)

_COORDINATES = (
    Variable("population", ("population",), "string", "name of the population", units=""),
    Variable("particle", ("particle",), "string", "name of the particle", units=""),
    Variable(
        "wavelength",
        ("wavelength",),
        "f8",
        "wavelength in vacuum",
        "um",
        standard_name="radiation_wavelength",
    ),
    Variable(
        "angle", ("angle",), "f8", "scattering angle", "degree", standard_name="scattering_angle"
    ),
    Variable("row", ("row",), "i4", "row of the scattering matrix, from 1"),
    Variable("col", ("col",), "i4", "column of the scattering matrix, from 1"),
)

_OTHERS = (
    Variable("number_fraction", MIXTURE, "f8", "share of a particle in the population by number"),
    Variable(
        "effective_radius",
        ("population",),
        "f8",
        "effective radius of the whole size distribution",
        "um",
        comment="third over second moment of the radius of the sphere of equal volume",
    ),
    Variable(
        "effective_variance",
        ("population",),
        "f8",
        "effective variance of the whole size distribution",
    ),
    Variable(
        "mean_area",
        ("population",),
        "f8",
        "mean geometric cross section of a particle",
        "um2",
        comment="of the sphere of equal volume, whole size distribution",
    ),
    Variable("mean_volume", ("population",), "f8", "mean volume of a particle", "um3"),
    Variable(
        "mass_density",
        ("population",),
        "f8",
        "mass over volume of all particles",
        "g cm-3",
        comment="missing unless the density of every particle is stated",
    ),
    Variable(
        "extinction_share_below",
        GRID,
        "f8",
        "estimated share of extinction by particles below the table's sizes",
    ),
    Variable(
        "extinction_share_above",
        GRID,
        "f8",
        "estimated share of extinction by particles above the table's sizes",
    ),
    Variable(
        "quadrature_error",
        GRID,
        "f8",
        "relative change of extinction when every other size is left out",
    ),
    Variable("size_count", GRID, "i4", "fewest solved sizes of any particle in the population"),
    Variable(
        "status",
        GRID,
        "i4",
        "state of the average",
        units="",
        extra={
            "standard_name": "status_flag",
            "flag_values": [1, 2, 3],
            "flag_meanings": "solved solved_with_warning failed",
        },
    ),
    Variable(
        "warning_flags",
        GRID,
        "i4",
        "warnings raised for the average",
        units="",
        extra={"flag_masks": list(FLAGS.values()), "flag_meanings": " ".join(FLAGS)},
    ),
)


def variables() -> tuple[Variable, ...]:
    """Every variable of a bulk table, coordinates first, half widths after their values."""
    listed: list[Variable] = [*_COORDINATES]
    for value in _VALUES:
        listed += [value, error_variable(value)]
    return (*listed, *_OTHERS)


VALUE_NAMES = tuple(value.name for value in _VALUES)
"""Variables that have a companion `NAME_error`."""
