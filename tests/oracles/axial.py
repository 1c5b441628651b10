"""Scattering by a particle of rotational symmetry from its transition matrix.

Conventions of `oracles.spheroid`. A plane wave E0 exp(i k.r) along the unit vector k has
a_nm = 4 pi i^n C_nm*(k).E0 and b_nm = 4 pi i^(n-1) B_nm*(k).E0; the scattered far field is
exp(ikr)/(kr) sum p (-i)^(n+1) C_nm + q (-i)^n B_nm. Polarizations refer to
`oracles.mueller.scattering_plane`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from oracles.mueller import gauss_angles, mueller, scattering_plane
from oracles.spheroid import AxialTransition, angular_functions


@dataclass(frozen=True)
class RandomOrientation:
    """Average over all orientations with equal weight; efficiencies to pi r_ev^2.

    `nodes` holds the Mueller matrix (mean F11 = 1) at `node_deg`, the Gauss-Legendre
    nodes that determine it at every angle.
    """

    extinction_efficiency: float
    scattering_efficiency: float
    asymmetry_parameter: float
    node_deg: NDArray[np.float64]
    nodes: NDArray[np.float64]

    @property
    def absorption_efficiency(self) -> float:
        return self.extinction_efficiency - self.scattering_efficiency

    @property
    def single_scattering_albedo(self) -> float:
        return self.scattering_efficiency / self.extinction_efficiency

    def scattering_matrix(self, angles_deg) -> NDArray[np.float64]:
        """Mueller matrix (n_angle, 4, 4) by exact polynomial interpolation.

        With mu the cosine, F11, F44, (F22 + F33)/(1 + mu)^2, (F22 - F33)/(1 - mu)^2,
        F12/(1 - mu^2) and F34/(1 - mu^2) are polynomials of at most the nodes' degree.
        """
        mu, node = (np.cos(np.radians(np.asarray(a, float))) for a in (angles_deg, self.node_deg))

        def interpolated(values, plus=0, minus=0):
            def factor(cosine):
                return (1 + cosine) ** plus * (1 - cosine) ** minus

            return _polynomial(node, values / factor(node), mu) * factor(mu)

        f = self.nodes
        total = interpolated(f[:, 1, 1] + f[:, 2, 2], plus=2)
        difference = interpolated(f[:, 1, 1] - f[:, 2, 2], minus=2)
        matrix = np.zeros((*mu.shape, 4, 4))
        matrix[..., 0, 0] = interpolated(f[:, 0, 0])
        matrix[..., 3, 3] = interpolated(f[:, 3, 3])
        matrix[..., 1, 1] = (total + difference) / 2
        matrix[..., 2, 2] = (total - difference) / 2
        matrix[..., 0, 1] = matrix[..., 1, 0] = interpolated(f[:, 0, 1], plus=1, minus=1)
        matrix[..., 2, 3] = interpolated(f[:, 2, 3], plus=1, minus=1)
        matrix[..., 3, 2] = -matrix[..., 2, 3]
        return matrix


def random_orientation(transition: AxialTransition) -> RandomOrientation:
    """Efficiencies in closed form from the matrix, Mueller matrix by quadrature.

    The rules integrate products of two amplitudes exactly: they hold rotation
    functions of degree 4 n_max at most. Degrees whose coefficients are all below
    1e-10 are left out of the Mueller matrix.
    """
    blocks, x = transition.blocks.values(), transition.size_parameter
    # Mishchenko 1990 (Astrophys. Space Sci. 164): orientation-averaged cross sections
    extinction = -2 / x**2 * sum(np.trace(block) for block in blocks).real
    scattering = 2 / x**2 * sum(np.sum(np.abs(block) ** 2) for block in blocks)
    trimmed = _trimmed(transition, 1e-10)
    n_max = trimmed.n_max
    node_deg, weight = gauss_angles(2 * n_max + 2)
    theta = np.radians(node_deg)
    # Mirror planes: incidence on one hemisphere, half of the azimuths.
    cosine, tilt_weight = np.polynomial.legendre.leggauss(2 * n_max + 4)
    tilt, tilt_weight = np.arccos(cosine[cosine > 0]), tilt_weight[cosine > 0]
    half_turn = 2 * n_max + 2
    azimuth = (np.arange(half_turn) + 0.5) * np.pi / half_turn
    zero = np.zeros_like(tilt)
    incident = np.stack([np.sin(tilt), zero, np.cos(tilt)], -1)
    first = np.stack([np.cos(tilt), zero, -np.sin(tilt)], -1)
    ring = np.cos(azimuth)[:, None] * first[:, None, :] + np.sin(azimuth)[:, None] * np.array(
        [0.0, 1.0, 0.0]
    )
    scattered = (
        np.cos(theta)[:, None, None] * incident[:, None, None, :]
        + np.sin(theta)[:, None, None] * ring[:, None, :, :]
    )
    amplitudes = amplitude_matrix(trimmed, incident, scattered.reshape(len(tilt), -1, 3))
    matrices = mueller(*amplitudes).reshape(len(tilt), len(theta), half_turn, 4, 4).mean(axis=2)
    mean = np.tensordot(tilt_weight, matrices, 1)
    # The other azimuths differ in the sign of these blocks alone.
    mean[:, :2, 2:] = mean[:, 2:, :2] = 0.0
    mean *= 4 / (x**2 * scattering)
    asymmetry = 0.5 * weight @ (mean[:, 0, 0] * np.cos(theta))
    return RandomOrientation(float(extinction), float(scattering), float(asymmetry), node_deg, mean)


def _trimmed(transition: AxialTransition, threshold: float) -> AxialTransition:
    n_max = 1
    for m, block in transition.blocks.items():
        count = len(block) // 2
        size = np.maximum(np.abs(block).max(axis=0), np.abs(block).max(axis=1))
        large = np.flatnonzero(np.maximum(size[:count], size[count:]) > threshold)
        if len(large):
            n_max = max(n_max, max(1, abs(m)) + int(large[-1]))
    blocks = {}
    for m in range(-n_max, n_max + 1):
        count = len(transition.blocks[m]) // 2
        kept = np.arange(n_max + 1 - max(1, abs(m)))
        keep = np.concatenate([kept, kept + count])
        blocks[m] = transition.blocks[m][np.ix_(keep, keep)]
    return AxialTransition(n_max, transition.size_parameter, blocks)


def amplitude_matrix(transition: AxialTransition, incident, scattered) -> NDArray[np.complex128]:
    """S1, S2, S3, S4 (4, i, s) for `incident` (i, 3) and `scattered` (i, s, 3) unit vectors.

    Bohren & Huffman 1983, eq. 3.12; particle axis along z.

    Raises
    ------
    ValueError
        If a direction lies on the axis, where the azimuth is not defined.
    """
    incident, scattered = np.asarray(incident, float), np.asarray(scattered, float)
    perp, par_i, par_s = scattering_plane(incident[:, None, :], scattered)
    theta_i, phi_i = _unit_vectors(incident)
    theta_s, phi_s = _unit_vectors(scattered)
    far = _far_field(transition, incident, scattered)
    # far[..., out, in] in the (theta, phi) vectors of each direction
    into = {
        name: np.stack([np.sum(e * u[:, None, :], -1) for u in (theta_i, phi_i)], -1)
        for name, e in (("par", par_i), ("perp", perp))
    }
    out = {
        name: np.stack([np.sum(e * u, -1) for u in (theta_s, phi_s)], -1)
        for name, e in (("par", par_s), ("perp", perp))
    }
    return np.array(
        [
            -1j * np.einsum("iso,isoe,ise->is", out[left], far, into[right])
            for left, right in (
                ("perp", "perp"),
                ("par", "par"),
                ("par", "perp"),
                ("perp", "par"),
            )
        ]
    )


def _far_field(transition, incident, scattered):
    """F (i, s, 2, 2), E_sca = F E0 exp(ikr)/(kr), in (theta, phi) of each direction."""
    n_max = transition.n_max
    phase_in = np.arctan2(incident[..., 1], incident[..., 0])
    phase_out = np.arctan2(scattered[..., 1], scattered[..., 0])
    far = np.zeros((*scattered.shape[:2], 2, 2), complex)
    for m in range(n_max + 1):
        n = np.arange(max(1, m), n_max + 1)
        norm = np.sqrt((2 * n + 1) / (4 * np.pi * n * (n + 1)))
        power = 1j ** (n % 4)
        _, pi_in, tau_in = angular_functions(n_max, m, incident[..., 2])
        # d_{0,-m} = (-1)^m d_{0m}; the signs (-1)^m of the two directions cancel
        # and leave that of pi.
        orders = (m, -m) if m else (0,)
        answers = []
        for order in orders:
            sign = -1 if order < 0 else 1
            # conjugate angular parts of C and B along theta and phi: (2, n, i)
            c_in = np.stack([-1j * sign * pi_in, -tau_in])
            b_in = np.stack([tau_in.astype(complex), -1j * sign * pi_in])
            a = (4 * np.pi * norm * power)[:, None] * c_in
            b = (4 * np.pi * norm * power / 1j)[:, None] * b_in
            source = np.concatenate([a, b], axis=1) * np.exp(-1j * order * phase_in)
            answer = np.einsum("nk,eki->ine", transition.blocks[order], source)
            p = answer[:, : len(n)] * (norm * np.conj(power) / 1j)[:, None]
            q = answer[:, len(n) :] * (norm * np.conj(power))[:, None]
            answers.append(np.concatenate([p, q], axis=2))
        # (i, n, order of +-m, kind, polarization) as pairs of real numbers
        stacked = np.ascontiguousarray(np.stack(answers, axis=2)).view(float)
        for one in range(len(incident)):  # one at a time stays in the cache
            _, pi, tau = angular_functions(n_max, m, scattered[one, :, 2])
            columns = stacked[one].reshape(len(n), -1)
            by_pi, by_tau = (
                (np.ascontiguousarray(part.T) @ columns)
                .view(complex)
                .reshape(len(phase_out[one]), len(orders), 2, 2)
                for part in (pi, tau)
            )
            for which, order in enumerate(orders):
                turn = np.exp(1j * order * phase_out[one])[:, None]
                ipi = 1j * by_pi[:, which] * (-1 if order < 0 else 1)
                far[one, :, 0] += turn * (ipi[:, 0] + by_tau[:, which, 1])
                far[one, :, 1] += turn * (ipi[:, 1] - by_tau[:, which, 0])
    return far


def _unit_vectors(direction):
    sine = np.hypot(direction[..., 0], direction[..., 1])
    if np.any(sine < 1e-6):
        raise ValueError("a direction lies on the particle's axis")
    phi = np.stack([-direction[..., 1] / sine, direction[..., 0] / sine, np.zeros_like(sine)], -1)
    return np.cross(phi, direction), phi


def _polynomial(node, values, mu):
    """Barycentric interpolation from Gauss-Legendre nodes in [-1, 1]."""
    _, weight = np.polynomial.legendre.leggauss(len(node))
    # Weights of the formula: Wang & Xiang 2012, Math. Comp. 81, 861.
    factor = (-1.0) ** np.arange(len(node)) * np.sqrt((1 - node**2) * weight)
    distance = mu[..., None] - node
    hit = np.abs(distance) < 1e-15
    distance[hit] = 1.0
    terms = np.where(np.any(hit, -1)[..., None], hit, factor / distance)
    return (terms @ values) / terms.sum(-1)
