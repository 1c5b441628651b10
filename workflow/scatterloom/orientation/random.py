"""Scattering matrices of randomly oriented particles from transition matrices."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.linalg.blas import zherk

from scatterloom.orientation.rules import Rule, reach, rule
from scatterloom.transition.matrix import TransitionMatrix
from scatterloom.waves.angular import axial_plane_wave, polar_functions, wigner_d
from scatterloom.waves.basis import WaveLabels

_MOST_SAMPLES = 4_000_000
"""Complex amplitudes held at a time (64 MB, and a few copies)."""

HANDS = (1, -1)
"""Handedness s of the incident wave (x + i s y)/sqrt 2, and order of its waves along the beam."""


@lru_cache(maxsize=8)
def turn_functions(n_max: int, beta: bytes) -> list[NDArray[np.float64]]:
    """Rotation functions d^n_{m'm}(beta) of every degree (degree 0 is empty)."""
    angles = np.frombuffer(beta)
    return [np.empty(0), *(wigner_d(n, angles) for n in range(1, n_max + 1))]


@lru_cache(maxsize=32)
def outgoing_functions(n_max: int, cosine: bytes) -> NDArray[np.float64]:
    """Angular functions tau + o pi for helicity o = +1, -1: (order, helicity, angle, degree).

    A wave of one degree and order sends (tau + o pi) (electric + o magnetic) into circular
    polarization o, up to (-i)^n.
    """
    pi, tau = polar_functions(n_max, np.frombuffer(cosine))
    both = np.stack([tau + pi, tau - pi])  # (helicity, degree, order, angle)
    return np.ascontiguousarray(both.transpose(2, 0, 3, 1))


def sorted_rows(labels: WaveLabels) -> NDArray[np.int64]:
    """Waves in order of degree, order, kind."""
    return np.lexsort((labels.kind, labels.order, labels.degree))


def incident_waves(labels: WaveLabels, turns: list[NDArray]) -> NDArray[np.complex128]:
    """Coefficients for circular incidence at azimuth zero: (n_wave, hand, n_beta)."""
    n_beta = len(turns[1])
    axial = axial_plane_wave(labels.n_max)
    out = np.empty((len(labels.kind), 2, n_beta), dtype=np.complex128)
    for n in range(1, labels.n_max + 1):
        chosen = np.flatnonzero(labels.degree == n)
        kind, order = labels.kind[chosen], labels.order[chosen]
        factor = np.stack(axial)[kind, :, n]  # (wave, hand)
        for hand, s in enumerate(HANDS):
            out[chosen, hand] = factor[:, hand, None] * turns[n][:, order + n, n + s].T
    return out


def _scattered(
    matrices: NDArray[np.complex128], labels: WaveLabels, at: Rule, turns: list[NDArray]
) -> NDArray[np.complex128]:
    """Scattered coefficients by turn q in the particle frame: (n_beta, n_wave, q, hand, matrix).

    Waves are in the order of `sorted_rows`. Element q is the part that varies with the azimuth
    of incidence as exp(i q phi), put together from incident waves of order m - q.
    """
    rows = sorted_rows(labels)
    order = labels.order[rows]
    place = np.full(4 * labels.n_max + 1, -1)
    place[at.turn + 2 * labels.n_max] = np.arange(at.turn.size)
    incident = incident_waves(labels, turns)
    n_matrix, n_beta = len(matrices), at.beta.size
    shape = (n_beta, rows.size, at.turn.size, 2, n_matrix)
    out = np.zeros(shape, dtype=np.complex128)
    for m in range(-labels.n_max, labels.n_max + 1):
        columns = np.flatnonzero(labels.order == m)
        turn = place[order - m + 2 * labels.n_max]
        kept = np.flatnonzero(turn >= 0)
        block = matrices[:, rows[kept][:, None], columns].reshape(-1, columns.size)
        part = block @ incident[columns].reshape(columns.size, -1)
        part = part.reshape(n_matrix, kept.size, 2, n_beta)
        out[:, kept, turn[kept]] = part.transpose(3, 1, 2, 0)
    return out


def _in_beam_frame(
    scattered: NDArray[np.complex128], n_max: int, turns: list[NDArray]
) -> NDArray[np.complex128]:
    """Waves of the beam frame that make helicity o: (order, helicity, degree, sample).

    A sample is (n_beta, q, hand, matrix).
    """
    n_beta, _, n_turn, _, n_matrix = scattered.shape
    shape = (2 * n_max + 1, 2, n_max + 1, n_beta, n_turn, 2, n_matrix)
    out = np.zeros(shape, dtype=np.complex128)
    first = 0
    for n in range(1, n_max + 1):
        count = 2 * n + 1
        part = scattered[:, first : first + 2 * count]
        first += 2 * count
        # A real rotation acts on real and imaginary parts alike.
        flat = part.reshape(n_beta, count, -1).view(np.float64)
        back = turns[n].transpose(0, 2, 1) @ flat
        waves = back.view(np.complex128).reshape(n_beta, count, 2, n_turn, 2, n_matrix)
        waves = waves.transpose(2, 1, 0, 3, 4, 5) * (-1j) ** n
        here = slice(n_max - n, n_max + n + 1)
        out[here, 0, n] = waves[1] + waves[0]
        out[here, 1, n] = waves[1] - waves[0]
    return out.reshape(2 * n_max + 1, 2, n_max + 1, -1)


def _products(
    matrices: NDArray[np.complex128],
    labels: WaveLabels,
    at: Rule,
    cosine: NDArray[np.float64],
) -> NDArray[np.complex128]:
    """Averages of products of amplitudes of all pairs of matrices.

    complex128 (n_angle, 4 n_matrix, 4 n_matrix), each index (helicity, hand, matrix).
    """
    n_max, n_matrix, n_angle = labels.n_max, len(matrices), cosine.size
    turns = turn_functions(n_max, at.beta.tobytes())
    scattered = _scattered(matrices, labels, at, turns)
    scattered *= np.sqrt(np.outer(at.weight, at.turn_weight))[:, None, :, None, None]
    waves = _in_beam_frame(scattered, n_max, turns)
    outgoing = outgoing_functions(n_max, cosine.tobytes())
    flat = (outgoing @ waves.view(np.float64)).view(np.complex128)
    # The amplitude at azimuth phi of the scattering plane varies as exp(i mu phi),
    # mu = m - s for handedness s; the average over phi is a sum over mu (Parseval).
    seen = flat.reshape(2 * n_max + 1, 2, n_angle, -1, 2, n_matrix)
    shape = (n_angle, 2 * n_max + 3, seen.shape[3], 2, 2, n_matrix)
    sample = np.zeros(shape, dtype=np.complex128)
    for hand, s in enumerate(HANDS):
        sample[:, 1 - s : 2 * n_max + 2 - s, :, :, hand] = seen[..., hand, :].transpose(
            2, 0, 3, 1, 4
        )
    # Only the upper triangle is computed.
    half = np.stack([zherk(1.0, s.reshape(-1, 4 * n_matrix).T) for s in sample])
    return half + np.triu(half, 1).conj().transpose(0, 2, 1)


_FROM_HELICITY = np.array([[0.5, 0.5], [-0.5j, 0.5j]])
"""Parallel and perpendicular scattered component from the parts of helicity +1 and -1."""

_FROM_HANDS = np.array([[1.0, 1.0], [1j, -1j]]) / np.sqrt(2.0)
"""Parallel and perpendicular incidence from the two circular ones: V_s = S_par - i s S_perp."""


TO_LINEAR = np.einsum("po,qh->pqoh", _FROM_HELICITY, _FROM_HANDS).reshape(4, 4)
"""Amplitudes by (parallel or perpendicular scattered, incident) from those by (helicity, hand).

In the convention of Bohren & Huffman 1983, eq. 3.12, up to a common phase.
"""


def linear_products(products: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Products (..., 4, 4) of amplitudes by helicity and hand as those of linear components.

    Returns
    -------
    complex128 (..., 2, 2, 2, 2)
    """
    changed = TO_LINEAR @ products @ TO_LINEAR.conj().T
    return changed.reshape(*products.shape[:-2], 2, 2, 2, 2)


def mueller_from_products(product: NDArray[np.complex128]) -> NDArray[np.float64]:
    """Mueller matrix from averaged products of amplitudes.

    Bohren & Huffman 1983, eq. 3.16, with S2 = par-par, S3 = par from perp,
    S4 = perp from par, S1 = perp-perp.

    Parameters
    ----------
    product : complex128 (n_angle, 2, 2, 2, 2)
        ``<S[p, q] conj(S[p', q'])>``, p scattered and q incident component.

    Returns
    -------
    float64 (n_angle, 4, 4)
    """
    index = {1: (1, 1), 2: (0, 0), 3: (0, 1), 4: (1, 0)}

    def mean(a: int, b: int) -> NDArray:
        return product[(slice(None), *index[a], *index[b])]

    s11, s22, s33, s44 = (mean(a, a).real for a in (1, 2, 3, 4))
    f = np.empty((len(product), 4, 4))
    f[:, 0, 0] = (s11 + s22 + s33 + s44) / 2
    f[:, 0, 1] = (s22 - s11 + s44 - s33) / 2
    f[:, 0, 2] = (mean(2, 3) + mean(1, 4)).real
    f[:, 0, 3] = (mean(2, 3) - mean(1, 4)).imag
    f[:, 1, 0] = (s22 - s11 - s44 + s33) / 2
    f[:, 1, 1] = (s22 + s11 - s44 - s33) / 2
    f[:, 1, 2] = (mean(2, 3) - mean(1, 4)).real
    f[:, 1, 3] = (mean(2, 3) + mean(1, 4)).imag
    f[:, 2, 0] = (mean(2, 4) + mean(1, 3)).real
    f[:, 2, 1] = (mean(2, 4) - mean(1, 3)).real
    f[:, 2, 2] = (mean(1, 2) + mean(3, 4)).real
    f[:, 2, 3] = (mean(2, 1) + mean(4, 3)).imag
    f[:, 3, 0] = (mean(4, 2) + mean(1, 3)).imag
    f[:, 3, 1] = (mean(4, 2) - mean(1, 3)).imag
    f[:, 3, 2] = (mean(1, 2) - mean(3, 4)).imag
    f[:, 3, 3] = (mean(1, 2) - mean(3, 4)).real
    return f


def random_orientation(
    transition: TransitionMatrix, symmetry: str, cosine: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Mueller matrix averaged over random orientation, not normalized.

    Parameters
    ----------
    transition : TransitionMatrix
        With the symmetry stated (see `scatterloom.transition.matrix.project`).
    symmetry : {"sphere", "axial", "mirrors", "none"}
    cosine : float64 (n_angle,)
        Cosine of the scattering angle.

    Returns
    -------
    float64 (n_angle, 4, 4)
        Differential scattering cross section times k^2 in the 11 element. The
        average is exact for the truncation of the transition matrix.
    """
    exact = rule(symmetry, reach(transition.matrix[None], transition.labels))
    at = np.asarray(cosine, dtype=np.float64)
    return averages(transition.matrix[None], transition.labels, np.ones((1, 1)), exact, at)[0]


def averages(
    matrices: NDArray[np.complex128],
    labels: WaveLabels,
    weights: NDArray[np.float64],
    at: Rule,
    cosine: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Averaged Mueller matrices of linear combinations of transition matrices.

    Amplitudes are linear in the transition matrix, so those of a few matrices serve any
    number of combinations.

    Parameters
    ----------
    matrices : complex128 (n_matrix, n_wave, n_wave)
    labels : WaveLabels
    weights : float64 (n_combination, n_matrix)
    at : Rule
        For the symmetry and the reach of all of them.
    cosine : float64 (n_angle,)
        Cosine of the scattering angle.

    Returns
    -------
    float64 (n_combination, n_angle, 4, 4)
        As `random_orientation` returns them.
    """
    n_matrix = len(matrices)
    samples = (2 * labels.n_max + 3) * cosine.size * 4 * n_matrix * at.turn.size
    parts = at.batches(-(-samples * at.beta.size // _MOST_SAMPLES))
    total = sum(_products(matrices, labels, part, cosine) for part in parts)
    pairs = np.asarray(total).reshape(cosine.size, 4, n_matrix, 4, n_matrix)
    combined = np.einsum("vb,txbyc,vc->vtxy", weights, pairs, weights, optimize=True)
    out = np.stack([mueller_from_products(linear_products(products)) for products in combined])
    if at.mirrored:
        out[..., :2, 2:] = 0.0
        out[..., 2:, :2] = 0.0
    return out
