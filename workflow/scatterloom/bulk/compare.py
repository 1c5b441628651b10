"""A measured scattering matrix against a modelled one: residuals and chi-square.

Half widths of the model (95 %) count as 1.96 standard deviations and add in squares to
those of the measurement. They go together over angles, so a chi-square that they dominate
is no strict test; the share of the model in the variance is reported beside it.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import CubicSpline
from scipy.stats import chi2

from scatterloom.bulk.measurement import BRIGHTNESS, RATIOS, Measurement
from scatterloom.errors import BadInput

FloatArray = NDArray[np.float64]

SIGMAS = 1.959964  # of a normal distribution in a 95 % half width
USUAL_ANGLE_DEG = 30.0


@dataclass(frozen=True)
class Model:
    """A matrix on the angles of a table.

    Attributes
    ----------
    angle_deg : float64 (n_angle,)
    matrix, half_width, ratio_half_width : float64 (n_angle, 4, 4)
        Half widths of elements, and of elements over F11.
    """

    angle_deg: FloatArray
    matrix: FloatArray
    half_width: FloatArray
    ratio_half_width: FloatArray

    def at(self, angles_deg: FloatArray) -> Model:
        """Interpolate: elements by cubic splines, half widths linearly."""
        return Model(
            angles_deg,
            CubicSpline(self.angle_deg, self.matrix)(angles_deg),
            linear(self.angle_deg, self.half_width, angles_deg),
            linear(self.angle_deg, self.ratio_half_width, angles_deg),
        )


def linear(x: FloatArray, values: FloatArray, at: FloatArray) -> FloatArray:
    """Linear interpolation along the first axis."""
    place = np.interp(at, x, np.arange(float(x.size)))
    low = np.minimum(place.astype(np.intp), max(0, x.size - 2))
    share = (place - low).reshape(-1, *[1] * (values.ndim - 1))
    high = np.minimum(low + 1, x.size - 1)
    return np.asarray((1.0 - share) * values[low] + share * values[high])


@dataclass(frozen=True)
class Residuals:
    """One element at one wavelength, in the order of angle.

    Attributes
    ----------
    element : str
    wavelength_um : float
    angle_deg, measured, measured_sd, model, model_sd : float64 (n_point,)
        F11 of the measurement is on the scale of the model.
    """

    element: str
    wavelength_um: float
    angle_deg: FloatArray
    measured: FloatArray
    measured_sd: FloatArray
    model: FloatArray
    model_sd: FloatArray

    @property
    def pull(self) -> FloatArray:
        """Measured less model, in standard deviations of both."""
        return (self.measured - self.model) / np.hypot(self.measured_sd, self.model_sd)

    @property
    def chi_square(self) -> float:
        """Sum of squared pulls."""
        return float(np.sum(self.pull**2))

    @property
    def probability(self) -> float:
        """Chance of a larger chi-square if the model were true and errors independent."""
        return float(chi2.sf(self.chi_square, self.angle_deg.size))

    @property
    def model_share(self) -> float:
        """Share of the variance that is the model's, mean over points."""
        return float(np.mean(self.model_sd**2 / (self.measured_sd**2 + self.model_sd**2)))


def match_wavelength(measured_um: float, table_um: FloatArray, file: str) -> int:
    """Position of the table's wavelength that was measured at, to a part in a thousand.

    Raises
    ------
    BadInput
        If there is none.
    """
    nearest = int(np.argmin(np.abs(table_um - measured_um)))
    if abs(table_um[nearest] / measured_um - 1.0) > 1e-3:
        known = ", ".join(f"{w:g}" for w in table_um)
        raise BadInput(
            f"{file}: measured at {measured_um:g} um, which the table does not have ({known})\n"
            "  hint: add the wavelength to the campaign; only the new cases are solved"
        )
    return nearest


def check_angles(measurement: Measurement, table_deg: FloatArray) -> None:
    """Raise BadInput unless the table's angles enclose those measured."""
    low, high = measurement.angle_deg.min(), measurement.angle_deg.max()
    if low < table_deg[0] - 1e-9 or high > table_deg[-1] + 1e-9 or table_deg.size < 4:
        raise BadInput(
            f"{measurement.file}: angles from {low:g} to {high:g} degrees, but the table has "
            f"{table_deg.size} from {table_deg[0]:g} to {table_deg[-1]:g}\n"
            "  hint: change angles_deg of the campaign; nothing is solved again"
        )


def normalization_angle(part: Measurement, wanted_deg: float | None) -> float:
    """The measured angle of F11 nearest to the one wanted, 30 degrees if none is.

    Raises
    ------
    BadInput
        If the angle wanted lies outside those at which F11 was measured.
    """
    angles = part.angle_deg[np.isfinite(part.values[BRIGHTNESS])]
    if wanted_deg is not None and not angles.min() <= wanted_deg <= angles.max():
        raise BadInput(
            f"{part.file}: F11 cannot be normalized at {wanted_deg:g} degrees; it was measured "
            f"from {angles.min():g} to {angles.max():g}"
        )
    wanted = USUAL_ANGLE_DEG if wanted_deg is None else wanted_deg
    return float(angles[np.argmin(np.abs(angles - wanted))])


def compare(
    measurement: Measurement,
    model: Callable[[float], Model],
    normalize_at_deg: float | None = None,
) -> list[Residuals]:
    """Residuals of every element at every wavelength.

    Parameters
    ----------
    measurement : Measurement
    model : callable
        Model at a measured wavelength [um].
    normalize_at_deg : float, optional
        F11 is set equal to the model's at the measured angle nearest to this. The error of
        F11 there is common to all other angles and added to theirs.

    Raises
    ------
    BadInput
        As `normalization_angle` and `check_angles` do.
    """
    out = []
    for wavelength in measurement.wavelengths:
        part = measurement.at(wavelength)
        full = model(wavelength)
        check_angles(part, full.angle_deg)
        at = full.at(part.angle_deg)
        f11 = at.matrix[:, 0, 0]
        for element, value in part.values.items():
            error = part.errors[element]
            rows = np.isfinite(value)
            if not rows.any():
                continue
            if element == BRIGHTNESS:
                pivot = normalization_angle(part, normalize_at_deg)
                zero = int(np.flatnonzero((part.angle_deg == pivot) & rows)[0])
                scale = f11[zero] / value[zero]
                # At the pivot nothing is tested: both agree there by construction.
                rows = rows & (part.angle_deg != pivot)
                relative = np.hypot(error / value, error[zero] / value[zero])
                measured, sd = scale * value, scale * value * relative
                own = at.half_width[:, 0, 0] / SIGMAS
                found = f11
            else:
                i, j = RATIOS[element]
                measured, sd = value, error
                found = at.matrix[:, i, j] / f11
                own = at.ratio_half_width[:, i, j] / SIGMAS
            out.append(
                Residuals(
                    element,
                    wavelength,
                    part.angle_deg[rows],
                    measured[rows],
                    sd[rows],
                    found[rows],
                    own[rows],
                )
            )
    return out


def total(residuals: list[Residuals]) -> tuple[float, int, float]:
    """Chi-square, number of points and probability of all elements together."""
    value = math.fsum(r.chi_square for r in residuals)
    count = sum(r.angle_deg.size for r in residuals)
    return value, count, float(chi2.sf(value, count)) if count else math.nan
