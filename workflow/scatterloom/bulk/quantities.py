"""What lidar, polarimeter and radiative transfer need of an average, with half widths.

Half widths are bounds to first order: errors of the factors of a product or quotient add
linearly, whatever their correlation. Between two wavelengths they add linearly too, since
the errors of both come from the same lattices at different size parameters: nothing is
assumed to cancel.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np

from scatterloom.bulk.average import Average
from scatterloom.bulk.population import Population
from scatterloom.scattering.elements import circular_depolarization, linear_depolarization

Values = dict[str, tuple[Any, Any]]
"""Value and half width by name of the variable."""


def quantities(average: Average, population: Population, angles_deg: np.ndarray) -> Values:
    """Everything at one wavelength.

    Per volume, 1 um-1 is 1 Mm-1 per um3 cm-3; per mass, it is 1 m2 g-1 at 1 g cm-3. Area,
    volume and mass are those of the whole population, outside the table's sizes too.

    Parameters
    ----------
    average : Average
    population : Population
        The same, for its area, volume and mass.
    angles_deg : float64 (n_angle,)
        Backscattering is left out unless they end at 180.
    """
    a = average
    values: Values = {
        "scattering_matrix": (a.matrix, a.matrix_error),
        "single_scattering_albedo": (a.albedo, a.albedo_error),
        "asymmetry_parameter": (a.asymmetry, a.asymmetry_error),
        "scattering_matrix_ratio": (a.ratio, a.ratio_error),
        "degree_of_linear_polarization": (-a.ratio[:, 0, 1], a.ratio_error[:, 0, 1]),
    }
    sections = {
        "extinction": (a.extinction_um2, a.extinction_um2_error),
        "scattering": (a.scattering_um2, a.scattering_um2_error),
        "absorption": (a.absorption_um2, a.absorption_um2_error),
    }
    if angles_deg[-1] == 180.0:
        f11, f11_error = float(a.matrix[-1, 0, 0]), float(a.matrix_error[-1, 0, 0])
        r, r_error = a.ratio[-1], a.ratio_error[-1]
        lidar_ratio = 4.0 * math.pi / (a.albedo * f11)
        relative = a.albedo_error / a.albedo + f11_error / f11
        values["lidar_ratio"] = (lidar_ratio, lidar_ratio * relative)
        values["linear_depolarization_ratio"] = linear_depolarization(r[1, 1], r_error[1, 1])
        values["circular_depolarization_ratio"] = circular_depolarization(r[3, 3], r_error[3, 3])
        back = a.scattering_um2 * f11 / (4.0 * math.pi)
        relative = a.scattering_um2_error / a.scattering_um2 + f11_error / f11
        sections["backscatter"] = (back, back * relative)
    volume, density = population.volume_um3, population.density_g_cm3
    for name, (value, half_width) in sections.items():
        values[f"{name}_cross_section"] = (value, half_width)
        values[f"{name}_per_volume"] = (value / volume, half_width / volume)
        mass = volume * density
        values[f"{name}_per_mass"] = (value / mass, half_width / mass)
        if name != "backscatter":
            area = population.area_um2
            values[f"{name}_efficiency"] = (value / area, half_width / area)
    return values


def spectral(columns: Mapping[str, Any], population: int, first: int, second: int) -> Values:
    """What compares two wavelengths.

    Parameters
    ----------
    columns : mapping of str to array
        Variables of a bulk table (or an opened one).
    population, first, second : int
        Positions; any two different wavelengths.

    Returns
    -------
    dict of str to (float, float)
        Angstrom exponents ``-ln(C2/C1)/ln(w2/w1)`` of extinction and backscattering, and
        the ratios second to first of backscattering (colour ratio) and of linear
        depolarization; NaN where a value is not known or vanishes
        within its half width.
    """
    wavelength = np.asarray(columns["wavelength"], dtype=np.float64)
    step = math.log(wavelength[second] / wavelength[first])

    def ratio(name: str) -> tuple[float, float]:
        """Second over first, and the sum of both relative half widths."""
        pair = [
            (float(columns[name][population, w]), float(columns[f"{name}_error"][population, w]))
            for w in (first, second)
        ]
        # A value that vanishes within its half width has no ratio; not-a-number fails too.
        if not all(abs(value) > half_width for value, half_width in pair):
            return math.nan, math.nan
        return pair[1][0] / pair[0][0], sum(error / abs(value) for value, error in pair)

    def exponent(name: str) -> tuple[float, float]:
        quotient, relative = ratio(name)
        return -math.log(quotient) / step, relative / abs(step)

    def plain(name: str) -> tuple[float, float]:
        quotient, relative = ratio(name)
        return quotient, abs(quotient) * relative

    return {
        "extinction_angstrom_exponent": exponent("extinction_cross_section"),
        "backscatter_angstrom_exponent": exponent("backscatter_cross_section"),
        "colour_ratio": plain("backscatter_cross_section"),
        "depolarization_spectral_ratio": plain("linear_depolarization_ratio"),
    }
