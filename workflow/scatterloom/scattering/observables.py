"""From a transition matrix to the numbers of the table, at random orientation."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from scatterloom.orientation.random import averages
from scatterloom.orientation.rules import gauss_nodes, reach, rule
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


NEGLIGIBLE = 1e-9
"""Products of amplitudes that averages leave out, relative to all of them.

Far below the error of the amplitudes (1e-5 and more), and a millionth of F11 even where it
is a thousandth of its mean.
"""


def observe(transition: TransitionMatrix, symmetry: str, size_parameter: float) -> Observables:
    """All orientation averages of one transition matrix."""
    return observe_combinations([transition], np.ones((1, 1)), symmetry, size_parameter)[0]


def observe_combinations(
    transitions: Sequence[TransitionMatrix],
    weights: NDArray[np.float64],
    symmetry: str,
    size_parameter: float,
) -> list[Observables]:
    """All orientation averages of linear combinations of transition matrices.

    F is a polynomial of degree 2 n_max in the cosine of the scattering angle (times fixed
    powers of the sine), so Gauss-Legendre nodes carry it exactly.

    Parameters
    ----------
    transitions : sequence of TransitionMatrix
        All with the same waves.
    weights : float64 (n_combination, n_transition)
    symmetry : {"sphere", "axial", "mirrors", "none"}
    size_parameter : float
        Of the sphere of equal volume.
    """
    labels = transitions[0].labels
    matrices = np.stack([transition.matrix for transition in transitions])
    limits = reach(matrices, labels, NEGLIGIBLE)
    node, weight = gauss_nodes(2 * labels.n_max + 2)
    found = averages(matrices, labels, weights, rule(symmetry, limits), node)
    integral = 2.0 * np.pi * (found[..., 0, 0] @ weight)
    normalized = found * (4.0 * np.pi / integral)[:, None, None, None]
    expansion = expand(normalized, node, weight, l_max=2 * labels.n_max)
    asymmetry = asymmetry_parameter(expansion)
    out = []
    for v, factors in enumerate(weights):
        combined = TransitionMatrix(np.tensordot(factors, matrices, 1), labels)
        extinction, scattering = efficiencies(combined, size_parameter)
        out.append(
            Observables(
                extinction_efficiency=extinction,
                scattering_efficiency=scattering,
                integrated_scattering_efficiency=integral[v] / (np.pi * size_parameter**2),
                asymmetry_parameter=float(asymmetry[v]),
                expansion=expansion[v],
            )
        )
    return out
