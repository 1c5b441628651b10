"""From a transition matrix to the numbers of the table, at random orientation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.orientation.random import random_orientation
from scatterloom.scattering.expansion import asymmetry_parameter, expand
from scatterloom.transition.matrix import TransitionMatrix, efficiencies


@dataclass(frozen=True)
class Observables:
    """Averages over random orientation.

    Attributes
    ----------
    extinction_efficiency : float
        Optical theorem.
    scattering_efficiency : float
        Sum over the transition matrix.
    integrated_scattering_efficiency : float
        Integral of F11 over all angles, an independent path to the same number.
    asymmetry_parameter : float
    expansion : float64 (l_max + 1, 4, 4)
        Generalized spherical function coefficients of the normalized matrix.
    """

    extinction_efficiency: float
    scattering_efficiency: float
    integrated_scattering_efficiency: float
    asymmetry_parameter: float
    expansion: NDArray[np.float64]


def observe(transition: TransitionMatrix, symmetry: str, size_parameter: float) -> Observables:
    """All orientation averages of one transition matrix.

    F is a polynomial of degree 2 n_max in the cosine of the scattering angle (times fixed
    powers of the sine), so Gauss-Legendre nodes carry it exactly.
    """
    node, weight = np.polynomial.legendre.leggauss(2 * transition.n_max + 2)
    matrix = random_orientation(transition, symmetry, node)
    integral = 2.0 * np.pi * float(weight @ matrix[:, 0, 0])
    expansion = expand(matrix * (4.0 * np.pi / integral), node, weight, l_max=2 * transition.n_max)
    extinction, scattering = efficiencies(transition, size_parameter)
    return Observables(
        extinction_efficiency=extinction,
        scattering_efficiency=scattering,
        integrated_scattering_efficiency=integral / (np.pi * size_parameter**2),
        asymmetry_parameter=float(asymmetry_parameter(expansion)),
        expansion=expansion,
    )
