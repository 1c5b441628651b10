"""Scattering matrix of randomly oriented particles from the transition matrix."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from scatterloom.orientation.nodes import IncidenceNodes, incidence_nodes
from scatterloom.transition.matrix import TransitionMatrix
from scatterloom.waves.angular import axial_plane_wave, polar_functions, wigner_d

_MOST_SAMPLES = 4_000_000
"""Complex amplitudes held at a time (64 MB, and a few copies)."""


def _groups(matrix: NDArray[np.complex128]) -> list[NDArray[np.int64]]:
    """Waves that the matrix connects; symmetries leave most of its entries exactly zero."""
    count, group = connected_components(csr_array(matrix != 0.0), directed=False)
    order = np.argsort(group, kind="stable")
    return np.split(order, np.cumsum(np.bincount(group, minlength=count))[:-1])


def _scattered_in_beam_frame(
    transition: TransitionMatrix, nodes: IncidenceNodes
) -> tuple[NDArray, NDArray]:
    """Scattered coefficients for circular incidence along +z of the beam frame.

    Returns
    -------
    magnetic, electric : complex128 (n_max + 1, 2 n_max + 1, n_node, 2)
        Degree, order + n_max, node, handedness (+1, -1).
    """
    labels, n_max = transition.labels, transition.n_max
    n_node = len(nodes.beta)
    axial = axial_plane_wave(n_max)
    rows = [
        [np.flatnonzero((labels.kind == k) & (labels.degree == n)) for n in range(n_max + 1)]
        for k in (0, 1)
    ]
    rotations: list[NDArray] = [np.empty(0)]
    incident = np.zeros((len(labels.kind), n_node, 2), dtype=np.complex128)
    for n in range(1, n_max + 1):
        turn = np.exp(-1j * np.arange(-n, n + 1)[:, None] * nodes.phi)  # (m', node)
        rotation = turn.T[:, :, None] * wigner_d(n, nodes.beta)  # (node, m', m)
        rotations.append(rotation)
        for kind in (0, 1):
            for hand, m in enumerate((1, -1)):
                # Rows of one kind and degree are sorted by order.
                incident[rows[kind][n], :, hand] = axial[kind][hand, n] * rotation[:, :, n + m].T
    scattered = np.empty_like(incident)
    for group in _groups(transition.matrix):
        part = incident[group].reshape(len(group), 2 * n_node)
        block = transition.matrix[np.ix_(group, group)]
        scattered[group] = (block @ part).reshape(len(group), n_node, 2)
    out = np.zeros((2, n_max + 1, 2 * n_max + 1, n_node, 2), dtype=np.complex128)
    for n in range(1, n_max + 1):
        for kind in (0, 1):
            part = scattered[rows[kind][n]]  # (m', node, hand)
            out[kind, n, n_max - n : n_max + n + 1] = np.einsum(
                "jab,ajh->bjh", rotations[n].conj(), part
            )
    return out[0], out[1]


def _coherency(
    transition: TransitionMatrix, nodes: IncidenceNodes, cosine: NDArray[np.float64]
) -> NDArray[np.complex128]:
    """Averages <S_a S_b*> over orientation: complex128 (n_angle, 2, 2, 2, 2).

    Indices: scattered component, incident component (parallel, perpendicular) of the
    first amplitude, then of the conjugate one, in the convention of Bohren & Huffman
    1983, eq. 3.12, up to a common phase.
    """
    n_max = transition.n_max
    magnetic, electric = _scattered_in_beam_frame(transition, nodes)
    pi, tau = polar_functions(n_max, cosine)
    degree = np.arange(n_max + 1)
    outgoing_m = (-1j) ** (degree + 1)
    outgoing_e = (-1j) ** degree
    n_angle, n_node = len(cosine), len(nodes.beta)
    # Amplitude in the scattering plane at azimuth phi varies as exp(i mu phi),
    # mu = m - s for handedness s; the average over phi is a sum over mu (Parseval).
    wave = np.zeros((2 * n_max + 3, n_angle, 2, n_node, 2), dtype=np.complex128)
    for m in range(-n_max, n_max + 1):
        n = degree[max(1, abs(m)) :]
        p, t = pi[n, n_max + m].T, tau[n, n_max + m].T  # (angle, degree)
        mag = outgoing_m[n, None, None] * magnetic[n, n_max + m]
        ele = outgoing_e[n, None, None] * electric[n, n_max + m]
        flat = (len(n), n_node * 2)
        mag, ele = mag.reshape(flat), ele.reshape(flat)
        theta = 1j * (p @ mag) + t @ ele
        azimuth = -(t @ mag) + 1j * (p @ ele)
        shape = (n_angle, n_node, 2)
        for hand, s in enumerate((1, -1)):
            mu = m - s + n_max + 1
            wave[mu, :, 0, :, hand] = theta.reshape(shape)[..., hand]
            wave[mu, :, 1, :, hand] = -azimuth.reshape(shape)[..., hand]
    # Circular to linear incidence: V_s = S_par - i s S_perp (both times sqrt 2).
    plus, minus = wave[..., 0], wave[..., 1]
    linear = np.stack([plus + minus, 1j * (plus - minus)], axis=-1) / np.sqrt(2.0)
    # (mu, angle, scattered, node, incident) -> per angle a tall matrix of samples
    sample = np.moveaxis(linear, 1, 0) * np.sqrt(nodes.weight)[:, None]
    sample = np.ascontiguousarray(np.moveaxis(sample, 2, 3))
    sample = sample.reshape(n_angle, (2 * n_max + 3) * n_node, 4)
    product = sample.transpose(0, 2, 1) @ sample.conj()
    return product.reshape(n_angle, 2, 2, 2, 2)


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
    nodes = incidence_nodes(symmetry, transition.n_max)
    at = np.asarray(cosine, dtype=np.float64)
    samples = (2 * transition.n_max + 3) * at.size * 4
    batches = -(-samples * nodes.weight.size // _MOST_SAMPLES)
    product = sum(_coherency(transition, part, at) for part in nodes.batches(batches))
    matrix = mueller_from_products(np.asarray(product))
    if nodes.mirrored:
        matrix[:, :2, 2:] = 0.0
        matrix[:, 2:, :2] = 0.0
    return matrix
