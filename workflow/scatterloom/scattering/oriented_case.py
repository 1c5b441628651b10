"""Phase and extinction matrices of one case under a distribution of orientation, with bars."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.orientation.distribution import Directions, Tilts
from scatterloom.orientation.oriented import NEGLIGIBLE, Views, oriented
from scatterloom.orientation.rules import reach
from scatterloom.scattering.error_bars import combined, matrix_model_share
from scatterloom.scattering.variants import Variants

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class OrientedCase:
    """Averages of one case over orientation, with 95 % half widths.

    Attributes
    ----------
    phase, phase_error : float64 (n_incidence, n_zenith, n_azimuth, 4, 4) [sr^-1]
        Differential scattering cross section over that of the sphere of equal volume.
    extinction, extinction_error : float64 (n_incidence, 4, 4)
        Extinction matrix over the cross section of the sphere of equal volume.
    """

    phase: Floats
    phase_error: Floats
    extinction: Floats
    extinction_error: Floats


def oriented_case(
    variants: Variants,
    symmetry: str,
    size_parameter: float,
    model_error: float,
    distribution: Callable[[int], Tilts | Directions],
    views: Views,
) -> OrientedCase:
    """Average one case over a distribution of orientation.

    Parameters
    ----------
    variants : Variants
        Its transition matrices.
    symmetry : str
        Of the particle.
    size_parameter : float
        Of the sphere of equal volume.
    model_error : float
        Relative error of efficiencies from the cell model (`CaseRecord.model_error`).
    distribution : callable(degree) -> Tilts or Directions
        Makes a rule good for products of amplitudes of that degree.
    views : Views
    """
    labels = variants.sources[0].labels
    matrices = np.stack([source.matrix for source in variants.sources])
    rule = distribution(reach(matrices, labels, NEGLIGIBLE).incidence)
    found = oriented(matrices, labels, variants.weights, symmetry, rule, views)
    area = math.pi * size_parameter**2
    phase, extinction = found.phase / area, found.extinction / area
    share = model_error * math.hypot(1.0, matrix_model_share(size_parameter))
    return OrientedCase(
        phase[0],
        _half_width(phase, variants.causes, share),
        extinction[0],
        _half_width(extinction, variants.causes, model_error),
    )


def _half_width(values: Floats, causes: tuple[str, ...], model: float) -> Floats:
    """Half widths from the disagreement of variants, (n_variant, ..., 4, 4) to (..., 4, 4).

    The error of the cell model is relative to the first element, in elements that can differ.
    """
    deviation = np.abs(values - values[:1])
    scale = np.abs(values[0, ..., :1, :1])
    free = np.any(deviation > 1e-10 * scale, axis=0)
    return np.hypot(combined(deviation, causes), model * scale * free)
